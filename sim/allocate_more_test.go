package sim_test

import (
	"context"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"testing/fstest"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

const byPhases = "[allocation]\nreal = { A = \"head a\", B = \"head b\", C = \"head c\" }\n"

// withControllers is the town with a regulator bank and two capacitors, one that switches by
// kvar at the head, with solar behind them and a battery on a schedule.
func withControllers(loads, allocation string, extra map[string]string) fstest.MapFS {
	f := town(loads, allocation, map[string]string{
		"feeder/sections.csv":           "section,from,to,phases,length [km],construction\nL0,bus,reg,ABC,4,line\nL1,load side,mid,ABC,4,line\nL2,mid,end,ABC,4,line\n",
		"feeder/regulators.csv":         "regulator,from,to,phases,pt ratio,ct primary [A]\nR1,reg,load side,ABC,60,200\n",
		"feeder/regulator-settings.csv": "regulator,phase,set [V],bandwidth [V],delay [s]\nR1,all,122,1,45\n",
		"feeder/capacitors.csv":         "capacitor,node,phases,size [kvar],state\nK1,end,ABC,150,closed\nK2,mid,ABC,200,open\n",
		"feeder/capacitor-settings.csv": "capacitor,control,watched section,kvar on [kvar],kvar off [kvar],delay [s]\nK2,kvar,L0,190,-120,90\n",
		"feeder/generators.csv":         "generator,node,phases,kind,rating [kVA],profile\npv,end,ABC,solar,350,sun\n",
		"feeder/batteries.csv":          "battery,node,phases,energy [kWh],power [kW],dispatch,charge from,charge to,discharge from,discharge to\nbat,mid,ABC,300,60,schedule,11:00,14:00,18:00,20:00\n",
		"profiles/day.csv":              sunnyDay(),
		"feeder/inverter-functions.csv": "function,category,reactive\nvv,B,voltage-reactive power\n",
	})
	for name, s := range extra {
		f[name] = text(s)
	}
	return f
}

// sunnyDay is a day of load and sun.
func sunnyDay() string {
	out := "time,day [pu],sun [pu]\n"
	for h := range 24 {
		out += fmt.Sprintf("2025-03-03T%02d:00,%.4f,%.4f\n", h, 0.55+0.4*math.Sin(float64(h-12)/24*2*math.Pi)*math.Sin(float64(h-12)/24*2*math.Pi),
			math.Max(0, math.Sin(float64(h-6)/12*math.Pi)))
	}
	return out
}

// With controls that act, capacitors that switch, solar that turns the flow around and a
// battery, the source still meets what was measured at every step, kW and kvar and each
// phase, and the loads are found again: these only in the hours after which nothing moved.
func TestAllocationWithControls(t *testing.T) {
	truth := meterRun(t, withControllers(known(), "", nil), "")
	if truth.acts < 4 {
		t.Fatalf("%d actions: the controls are to act", truth.acts)
	}
	total, byPhase := truth.peakOf()
	got := meterRun(t, withControllers(forgotten(), byPhases, map[string]string{"profiles/head.csv": truth.profileOf(truth.ends)}), "")
	if got.acts < 4 {
		t.Errorf("%d actions", got.acts)
	}
	if len(got.alloc) > 0 {
		t.Errorf("not met: %+v", got.alloc)
	}
	for k := range got.ends {
		for p := range 3 {
			d := got.ends[k][p] - truth.ends[k][p]
			if math.Abs(real(d)) > 1e-3*byPhase[p] || math.Abs(imag(d)) > 1e-3*byPhase[p] {
				t.Errorf("hour %d, phase %d: %.3f kW, %.3f kvar off", k, p, real(d)/1000, imag(d)/1000)
			}
		}
	}
	sum, want := 0.0, 0.0
	for i := range got.kWh {
		sum += got.kWh[i]
		want += truth.kWh[i]
	}
	if math.Abs(sum/want-1) > 0.01 {
		t.Errorf("loads take %.1f kWh, took %.1f", sum, want)
	}
	if total <= 0 {
		t.Error("no peak")
	}
}

// A metered load stays as metered; the others take the rest.
func TestAllocationLeavesMeteredLoads(t *testing.T) {
	truth := meterRun(t, town(known(), "", nil), "")
	meter := "time,mill kW [kW]\n"
	for h := range 24 {
		meter += fmt.Sprintf("2025-03-03T%02d:00,%d\n", h, 60+2*h)
	}
	loads := strings.Replace(forgotten(), "mill,end,ABC,wye,,600,0.9,power,day", "mill,end,ABC,wye,,600,0.9,power,mill kW", 1)
	got := meterRun(t, town(loads, byPhases, map[string]string{"profiles/head.csv": truth.profileOf(truth.mean), "profiles/day.csv": dayProfileWith(meter)}), "")
	if len(got.alloc) > 0 {
		t.Errorf("not met: %+v", got.alloc)
	}
	want := 3 * (24*60 + 2*23*24/2.0)
	if math.Abs(got.kWh[0]-want) > 1e-6*want || math.Abs(got.kvarh[0]/got.kWh[0]-math.Tan(math.Acos(0.9))) > 1e-9 {
		t.Errorf("the metered load takes %.3f kWh and %.3f kvarh, its meter says %.3f kWh at 0.9", got.kWh[0], got.kvarh[0], want)
	}
	// Constant-power loads of one phase keep the ratio of what they weigh: shop2 has 90 kVA, mill none.
	if r := got.kWh[6] / got.kWh[5]; math.Abs(r-90.0/60) > 0.5 {
		t.Errorf("shop2 takes %.3f times shop1", r)
	}
}

// dayProfileWith joins a column to the day's.
func dayProfileWith(other string) string {
	a, b := strings.Split(strings.TrimSpace(dayProfile()), "\n"), strings.Split(strings.TrimSpace(other), "\n")
	out := ""
	for i := range a {
		_, v, _ := strings.Cut(b[i], ",")
		out += a[i] + "," + v + "\n"
	}
	return out
}

// Where more is metered and generated than the measurement leaves room for, the loads get
// nothing and the step is listed with what is left, a negative number; where a phase
// has nothing to share over, that is said; and the folder of results counts both.
func TestAllocationListsWhatCannotBeMet(t *testing.T) {
	head := "time,head a [kW],head b [kW],head c [kW]\n"
	for k := range 72 {
		a := 300
		if k == 10 || k == 40 {
			a = 20 // the metered load alone is 50 there
		}
		head += fmt.Sprintf("2025-03-%02dT%02d:00,%d,100,%d\n", 3+k/24, k%24, a, map[bool]int{true: 80, false: 0}[k == 20])
	}
	meter := "time,mill kW [kW]\n"
	for h := range 24 {
		meter += fmt.Sprintf("2025-03-03T%02d:00,150\n", h)
	}
	f := town("load,node,phases,connected [kVA],profile\nmill,end,ABC,,mill kW\na1,mid,A,100,day\nb1,end,B,100,day\n", byPhases,
		map[string]string{"profiles/head.csv": head, "profiles/day.csv": dayProfileWith(meter)})
	for name := range f {
		if strings.HasSuffix(name, "transformers.csv") {
			delete(f, name)
		}
	}
	st, err := feeder.Open(f, "")
	if err != nil {
		t.Fatal(err)
	}
	e, err := sim.Prepare(st, sim.Options{})
	if err != nil {
		t.Fatal(err)
	}
	dir := filepath.Join(t.TempDir(), "base")
	w, err := results.Create(dir, e.Plan)
	if err != nil {
		t.Fatal(err)
	}
	h := &headMeter{e: e}
	o, err := e.Run(context.Background(), w, h)
	if err != nil {
		t.Fatal(err)
	}
	if err := w.Finish(o, results.RunInfo{Version: "test"}); err != nil {
		t.Fatal(err)
	}
	negative, bare := 0, 0
	for _, r := range h.alloc {
		switch {
		case r.Status == results.AllocationNoRemainder && r.Phase == "A":
			negative++
			// Of 150 kW a third is on A, with losses of the line.
			if r.Remainder > -30 || r.Remainder < -32 || r.Factors[0] != 0 || r.Measured != 20 || math.Abs(r.Solved-r.Measured+r.Remainder) > 1e-6 {
				t.Errorf("%+v", r)
			}
		case r.Status == results.AllocationNoLoad && r.Phase == "C":
			bare++
		default:
			t.Errorf("unexpected %+v", r)
		}
	}
	if negative != 2 || bare != 72 {
		t.Errorf("%d steps without a remainder, %d without a load on C; want 2 and 72", negative, bare)
	}
	for k := range h.ends {
		if a := real(h.ends[k][0]) / 1000; k != 10 && k != 40 && math.Abs(a-300) > 0.3 {
			t.Errorf("hour %d: A has %.3f kW, measured 300", k, a)
		}
	}
	data, err := os.ReadFile(filepath.Join(dir, "allocation.csv"))
	if err != nil {
		t.Fatal(err)
	}
	lines := strings.Split(strings.TrimSpace(string(data)), "\n")
	if lines[0] != "time,quantity,phase,measured,solved,remainder,factor A,factor B,factor C,status" || len(lines) != 1+74 {
		t.Errorf("%d lines, the first %q", len(lines), lines[0])
	}
	if want := "2025-03-03T10:00:00+00:00,kW,A,20"; !strings.Contains(string(data), want) {
		t.Errorf("no row %s… in\n%s", want, data)
	}
	folder, err := results.ReadFolder(os.DirFS(dir))
	if err != nil {
		t.Fatal(err)
	}
	said := map[string]string{}
	for _, r := range folder.Summary {
		said[r.Quantity] = r.Value
	}
	for q, v := range map[string]string{"allocation steps met": "0", "allocation steps listed": "72", "allocation steps remainder not positive": "2", "allocation steps no load": "72"} {
		if said[q] != v {
			t.Errorf("%s is %q, want %s", q, said[q], v)
		}
	}
	// The mill's 150 kW are metered, all other load is shared out; loads are of constant power.
	all, err := strconv.ParseFloat(said["load energy"], 64)
	if err != nil {
		t.Fatal(err)
	}
	got, err := strconv.ParseFloat(said["allocated share of load energy"], 64)
	if want := 100 * (1 - 150*72/all); err != nil || math.Abs(got-want) > 0.01 {
		t.Errorf("the allocated share is %g %%, want %g %%", got, want)
	}
}

// Shared by energy, each load keeps its share of the month's kWh: loads of one class and
// phase that is all of them; the measured total says how many kWh there are.
func TestAllocationByEnergyKeepsShares(t *testing.T) {
	head := "time,head [kW]\n"
	for k := range 72 {
		head += fmt.Sprintf("2025-03-%02dT%02d:00,%.3f\n", 3+k/24, k%24, 500+100*math.Sin(float64(k)))
	}
	energies := map[string]float64{"a": 5000, "b": 9000, "c": 1000}
	got := meterRun(t, town("load,node,phases,energy [kWh],power factor,connected [kVA],profile\na,mid,A,5000,0.9,500,day\nb,end,B,9000,0.9,100,day\nc,end,ABC,1000,0.9,100,day\n",
		"[allocation]\nreal = \"head\"\nby = \"energy\"\n", map[string]string{"profiles/head.csv": head}), "")
	if len(got.alloc) > 0 {
		t.Errorf("not met: %+v", got.alloc)
	}
	sum, all := 0.0, 0.0
	for i, name := range []string{"a", "b", "c"} {
		sum += got.kWh[i]
		all += energies[name]
	}
	for i, name := range []string{"a", "b", "c"} {
		if share, want := got.kWh[i]/sum, energies[name]/all; math.Abs(share-want) > 1e-9 {
			t.Errorf("%s takes %.6f of the energy, its bills say %.6f", name, share, want)
		}
	}
	// By kVA of the same table the shares are those of the kVA.
	got = meterRun(t, town("load,node,phases,energy [kWh],power factor,connected [kVA],profile\na,mid,A,5000,0.9,500,day\nb,end,B,9000,0.9,100,day\nc,end,ABC,1000,0.9,100,day\n",
		"[allocation]\nreal = \"head\"\nby = \"connected\"\n", map[string]string{"profiles/head.csv": head}), "")
	if r := got.kWh[0] / got.kWh[1]; math.Abs(r-5) > 1e-9 {
		t.Errorf("500 kVA take %.6f times what 100 kVA take", r)
	}
	// By class each customer takes its class's curve.
	got = meterRun(t, town("load,node,phases,power factor,profile,customers\na,mid,A,0.9,day,12\nb,end,B,0.9,day,3\n",
		"[allocation]\nreal = \"head\"\nby = \"profile\"\n", map[string]string{"profiles/head.csv": head}), "")
	if r := got.kWh[0] / got.kWh[1]; math.Abs(r-4) > 1e-9 {
		t.Errorf("12 customers take %.6f times what 3 take", r)
	}
}

// A mix: a load known by its energy weighs its kW, one known by kVA weighs 0.4 kW per
// kVA, or what utilization says, and both are scaled alike.
func TestAllocationOfAMix(t *testing.T) {
	head := "time,head [kW]\n"
	for k := range 72 {
		head += fmt.Sprintf("2025-03-%02dT%02d:00,500\n", 3+k/24, k%24)
	}
	for u, want := range map[string]float64{"": 40 / 100.0, "utilization = 0.25\n": 25 / 100.0} {
		f := town("load,node,phases,energy [kWh],connected [kVA]\na,mid,ABC,7200,\nb,mid,ABC,,100\n", "[allocation]\nreal = \"head\"\n"+u, map[string]string{"profiles/head.csv": head})
		got := meterRun(t, f, "")
		if r := got.kWh[1] / got.kWh[0]; math.Abs(r-want) > 1e-9 {
			t.Errorf("%q: 100 kVA take %.6f of what 100 kW take, want %.3f", u, r, want)
		}
		told := false
		for _, a := range got.e.Study.Model.Assumed {
			told = told || a.What == "allocation: utilization"
		}
		if told != (u == "") {
			t.Errorf("%q: told as assumed: %v", u, told)
		}
	}
}

// A case keeps the loads that were allocated without it: what it connects shows at the head
// and is not made up for by the loads, and its scale of load counts.
func TestACaseKeepsAllocatedLoads(t *testing.T) {
	truth := meterRun(t, town(known(), "", nil), "")
	f := town(forgotten(), byPhases, map[string]string{
		"profiles/head.csv":                  truth.profileOf(truth.mean),
		"cases/solar/generators.csv":         "generator,node,phases,kind,rating [kVA],real [kW]\npv,mid,ABC,solar,300,240\n",
		"cases/more/case.toml":               "[scale]\nload = 1.25\n",
		"cases/more/source.csv":              "node,voltage [pu]\nbus,1.02\n",
		"cases/solar/inverter-functions.csv": "function,category\npf,B\n",
	})
	base, solar, more := meterRun(t, f, ""), meterRun(t, f, "solar"), meterRun(t, f, "more")
	for i := range base.kWh {
		bound := 1e-9
		if z := townLoads[i].zip; z != "power" {
			bound = 0.03 // moves with voltage
		}
		if r := solar.kWh[i]/base.kWh[i] - 1; math.Abs(r) > bound {
			t.Errorf("%s: %.3f kWh with the case's solar, %.3f without", townLoads[i].name, solar.kWh[i], base.kWh[i])
		}
		if r := more.kWh[i]/base.kWh[i]/1.25 - 1; math.Abs(r) > bound {
			t.Errorf("%s: scaled %.3f kWh, %.3f without", townLoads[i].name, more.kWh[i], base.kWh[i])
		}
	}
	for k := range base.ends {
		b, s := base.ends[k], solar.ends[k]
		if d := real(b[0]+b[1]+b[2]-s[0]-s[1]-s[2]) / 1000; d < 235 || d > 270 {
			t.Errorf("hour %d: the head falls by %.2f kW with 240 kW of solar", k, d)
		}
	}
	if solar.e.Plan.Allocation || len(solar.worst) > 0 {
		t.Error("a case that allocates nothing itself tells of its allocation")
	}
	// One instant as the run has it.
	st, err := feeder.Open(f, "solar")
	if err != nil {
		t.Fatal(err)
	}
	e, err := sim.Prepare(st, sim.Options{Base: base.e})
	if err != nil {
		t.Fatal(err)
	}
	in, err := e.Solve(30, sim.Positions{Given: true})
	if err != nil {
		t.Fatal(err)
	}
	s, _ := solar.phases(in.State)
	for p := range 3 {
		if d := s[p] - solar.ends[30][p]; math.Abs(real(d)) > 50 {
			t.Errorf("phase %d: one instant is %.3f kW off the run", p, real(d)/1000)
		}
	}
}

// A total that the feeder cannot carry leaves a step without a solution, which is listed.
func TestAllocationOfTooMuch(t *testing.T) {
	head := "time,head [kW]\n"
	for k := range 72 {
		head += fmt.Sprintf("2025-03-%02dT%02d:00,%d\n", 3+k/24, k%24, map[bool]int{true: 500000, false: 500}[k == 5])
	}
	got := meterRun(t, town(forgotten(), "[allocation]\nreal = \"head\"\n", map[string]string{"profiles/head.csv": head}), "")
	if len(got.alloc) != 1 || got.alloc[0].Status != results.AllocationUnsolved || got.alloc[0].Measured != 500000 {
		t.Errorf("listed: %+v", got.alloc)
	}
}

// What loads across two phases cannot make up is listed as not met, after the best was
// done: the total is met.
func TestAllocationOfAPairAlone(t *testing.T) {
	head := "time,head a [kW],head b [kW],head c [kW]\n"
	for k := range 72 {
		head += fmt.Sprintf("2025-03-%02dT%02d:00,300,100,5\n", 3+k/24, k%24)
	}
	f := town("load,node,phases,connection,connected [kVA]\npair,end,AB,delta,100\nsmall,mid,C,wye,10\n", byPhases, map[string]string{"profiles/head.csv": head})
	delete(f, "feeder/transformers.csv")
	got := meterRun(t, f, "")
	if len(got.alloc) != 144 {
		t.Fatalf("%d rows listed, want A and B of 72 steps", len(got.alloc))
	}
	for _, r := range got.alloc {
		if r.Status != results.AllocationNotMet {
			t.Fatalf("%+v", r)
		}
	}
	s := got.ends[7]
	if ab, c := real(s[0]+s[1])/1000, real(s[2])/1000; math.Abs(ab-400) > 4 || math.Abs(c-5) > 0.01 {
		t.Errorf("A and B %.3f kW, C %.3f, measured 400 and 5", ab, c)
	}
}

// Measured at a regulator in the middle: the loads before it stay what they are, those
// behind it take what it carries.
func TestAllocationAtARegulator(t *testing.T) {
	head := "time,out [kW],out [kvar]\n"
	for k := range 72 {
		head += fmt.Sprintf("2025-03-%02dT%02d:00,%d,120\n", 3+k/24, k%24, 300+k)
	}
	f := withControllers("load,node,phases,real [kW],connected [kVA],profile\nbefore,reg,ABC,100,,day\na,mid,A,,100,day\nb,end,B,,100,day\nc,end,C,,120,day\n",
		"flows = [\"R1\"]\n[allocation]\nat = \"R1\"\nreal = \"out\"\n", map[string]string{"profiles/head.csv": head})
	for _, name := range []string{"feeder/transformers.csv", "feeder/generators.csv", "feeder/batteries.csv"} {
		delete(f, name)
	}
	st, err := feeder.Open(f, "")
	if err != nil {
		t.Fatal(err)
	}
	e, err := sim.Prepare(st, sim.Options{})
	if err != nil {
		t.Fatal(err)
	}
	for _, step := range []int{0, 30, 71} {
		in, err := e.Solve(step, sim.Positions{})
		if err != nil || in.Status != results.OK {
			t.Fatal(err, in)
		}
		found := false
		for _, r := range e.Flows() {
			if r.Name == "R1" {
				found = true
				if math.Abs(r.KW-float64(300+step)) > 0.05 || math.Abs(r.KVAR-120) > 0.05 {
					t.Errorf("step %d: the regulator carries %.4f kW and %.4f kvar, measured %d and 120", step, r.KW, r.KVAR, 300+step)
				}
			}
		}
		if step == 0 && math.Abs(real(in.State.Load[0])/1000-55) > 1e-6 { // 0.55 of it at midnight
			t.Errorf("the load before it takes %.6f kW", real(in.State.Load[0])/1000)
		}
		if !found {
			t.Fatal("no flow of R1")
		}
		if r := real(in.State.Load[3]) / real(in.State.Load[1]); math.Abs(r-1.2) > 1e-9 {
			t.Errorf("120 kVA take %.9f times what 100 kVA take", r)
		}
	}
}
