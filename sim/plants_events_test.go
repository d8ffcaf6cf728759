package sim_test

import (
	"bytes"
	"context"
	"fmt"
	"math"
	"runtime"
	"strings"
	"testing"
	"testing/fstest"

	"yearflow/sim"
	"yearflow/sim/results"
)

// nested is a trunk L1 and a branch L2 behind it, with a load at both ends.
func nested(step string, extra map[string]string) fstest.MapFS {
	f := plantStudy(step, 1, map[string]string{
		"feeder/sections.csv": "section,from,to,phases,length [km],construction\nL1,bus,mid,ABC,2,line\nL2,mid,end,ABC,2,line\n",
		"feeder/loads.csv":    "load,node,phases,real [kW],reactive [kvar],profile\nfarm,end,ABC,900,300,day\nshop,mid,ABC,200,50,day\n",
	})
	for name, s := range extra {
		f[name] = text(s)
	}
	return f
}

// probe calls a function with every interval's reading of a run.
type probe struct {
	meter *results.Meter
	see   func(iv *results.Interval, r *results.Reading)
	step  func(s *results.Step)
}

func (p *probe) Interval(iv *results.Interval) error {
	r := p.meter.NewReading()
	p.meter.Read(iv.State, r)
	if p.see != nil {
		p.see(iv, r)
	}
	return nil
}
func (p *probe) Action(*results.Action) error { return nil }
func (p *probe) Step(s *results.Step) error {
	if p.step != nil {
		p.step(s)
	}
	return nil
}

func watchRun(t testing.TB, e *sim.Engine, p *probe) *results.Outcome {
	t.Helper()
	p.meter = e.Meter()
	o, err := e.Run(context.Background(), p)
	if err != nil {
		t.Fatal(err)
	}
	return o
}

// Two batteries that follow one section share its flow, neither answers it twice: the
// flow rests at nothing to 0.1 kW, and the first does all that it can.
func TestTwoBatteriesOnOneSection(t *testing.T) {
	e := ready(t, plantStudy("1h", 1, map[string]string{
		"feeder/batteries.csv": "battery,node,phases,energy [kWh],power [kW],dispatch,watched section\n" +
			"one,end,ABC,90000,250,self-consumption,L1\ntwo,end,ABC,90000,900,self-consumption,L1\n",
	}))
	n := 0
	watchRun(t, e, &probe{see: func(iv *results.Interval, r *results.Reading) {
		n++
		if kw := real(r.Source) / 1000; math.Abs(kw) > 0.1 {
			t.Errorf("interval %d: %.3f kW through the section", n, kw)
		}
		one, two := real(iv.State.Storage[0])/1000, real(iv.State.Storage[1])/1000
		if one < 200 || one < 249.9 && two > 0.1 {
			t.Errorf("interval %d: the first delivers %.3f kW, the second %.3f kW", n, one, two)
		}
	}})
	if n < 24 {
		t.Errorf("%d intervals", n)
	}
}

// A battery at the end keeps its branch at nothing, one at the trunk shaves the head's
// peak: nested, in either order of the table, both to 0.1 kW.
func TestNestedBatteries(t *testing.T) {
	rows := []string{"outer,mid,ABC,50000,600,peak shaving,L1,150,-5000\n", "inner,end,ABC,90000,800,self-consumption,L2,,\n"}
	for _, order := range [][2]int{{0, 1}, {1, 0}} {
		e := ready(t, nested("1h", map[string]string{
			"feeder/batteries.csv": "battery,node,phases,energy [kWh],power [kW],dispatch,watched section,target [kW],recharge [kW]\n" + rows[order[0]] + rows[order[1]],
		}))
		watchRun(t, e, &probe{see: func(iv *results.Interval, r *results.Reading) {
			head := real(r.Source) / 1000
			inner := real(iv.State.Storage[1-order[0]]) / 1000
			load := real(iv.State.Load[0]) / 1000
			if inner < 799 { // not at its power: the branch takes nothing
				flow := sectionFlow(e, iv.State, "L2")
				if math.Abs(flow) > 0.1 {
					t.Errorf("order %v, load %.1f: %.3f kW into the branch with %.3f kW of storage", order, load, flow, inner)
				}
			}
			if head > 150.1 {
				t.Errorf("order %v: %.3f kW at the head, target 150", order, head)
			}
		}})
	}
}

// sectionFlow is the real power that enters a section at its from end, kW.
func sectionFlow(e *sim.Engine, s *results.State, name string) float64 {
	n := e.Plan.Network
	kw := 0.0
	for k, el := range n.Elements {
		if el.Kind.String() == "section" && e.Study.Model.Sections[el.Index].Name == name {
			for t := range el.From {
				v, i := s.V[el.Terminals[t]], s.Flow[n.Offsets[k]+t]
				kw += (real(v)*real(i) + imag(v)*imag(i)) / 1000
			}
		}
	}
	return kw
}

// A watched section that is written from the load's side counts towards the battery
// all the same.
func TestWatchedSectionWrittenBackwards(t *testing.T) {
	f := plantStudy("1h", 1, map[string]string{
		"feeder/sections.csv":  "section,from,to,phases,length [km],construction\nL1,end,bus,ABC,4,line\n",
		"feeder/batteries.csv": "battery,node,phases,energy [kWh],power [kW],dispatch,watched section\nb,end,ABC,90000,1200,self-consumption,L1\n",
	})
	e := ready(t, f)
	watchRun(t, e, &probe{see: func(iv *results.Interval, r *results.Reading) {
		if kw := sectionFlow(e, iv.State, "L1"); math.Abs(kw) > 0.1 || real(iv.State.Storage[0]) < 400e3 {
			t.Errorf("%.3f kW through the section with %.3f kW of storage", kw, real(iv.State.Storage[0])/1000)
		}
	}})
}

// A battery that does not stand behind the section that it follows is told of.
func TestBatteryBesideItsSection(t *testing.T) {
	e := ready(t, nested("1h", map[string]string{
		"feeder/batteries.csv": "battery,node,phases,energy [kWh],power [kW],dispatch,watched section\nb,mid,ABC,100,50,self-consumption,L2\n",
	}))
	said := false
	for _, w := range e.Warnings {
		said = said || strings.Contains(w.Text, "does not stand behind") && strings.HasPrefix(w.Error(), "feeder/batteries.csv:2")
	}
	if !said {
		t.Errorf("warnings: %v", e.Warnings)
	}
}

// A battery whose function takes from its active power gives from its store what it
// delivers, not what was asked of it: 100 kW of 100 kVA with reactive priority and
// 0.44 of reactive power leave √(1 − 0.44²) = 0.89800 of active power (IEEE Std
// 1547-2018, reactive priority).
func TestBatteryWithFunctionKeepsItsBooks(t *testing.T) {
	f := plantStudy("1h", 1, map[string]string{
		"feeder/batteries.csv":          "battery,node,phases,energy [kWh],power [kW],round-trip efficiency [%],initial [%],dispatch,discharge from,discharge to,function\nb,end,ABC,500,100,100,100,schedule,2:00,5:00,q\n",
		"feeder/inverter-functions.csv": "function,category,reactive,reactive power [pu]\nq,B,constant reactive power,0.44\n",
	})
	e := ready(t, f)
	out := 0.0
	o := watchRun(t, e, &probe{see: func(iv *results.Interval, r *results.Reading) {
		out += math.Max(0, real(iv.State.Storage[0])/1000) * float64(iv.End-iv.Start) / 3.6e12
	}})
	p := o.Plants[0]
	want := 300 * math.Sqrt(1-0.44*0.44)
	if math.Abs(out-want) > 1e-6 || math.Abs(p.Delivered-out) > 1e-6 || math.Abs(p.Change+out) > 1e-6 {
		t.Errorf("delivered %.6f kWh at the terminals, booked %.6f, store changed by %.6f; want %.6f", out, p.Delivered, p.Change, want)
	}
}

// What is stored at the end of a row is what the row's own charging has left: 100 kW
// for an hour at √0.81 is 90 kWh more.
func TestStoredAtTheEndOfTheStep(t *testing.T) {
	e := ready(t, plantStudy("1h", 1, map[string]string{
		"feeder/batteries.csv": "battery,node,phases,energy [kWh],power [kW],round-trip efficiency [%],dispatch,initial [%],charge from,charge to\nb,end,ABC,1000,100,81,schedule,0,1:00,4:00\n",
	}))
	var stored []float64
	watchRun(t, e, &probe{step: func(s *results.Step) { stored = append(stored, s.Last.Stored[0]) }})
	for hour, want := range map[int]float64{0: 0, 1: 90, 2: 180, 3: 270, 4: 270, 23: 270} {
		if math.Abs(stored[hour]-want) > 1e-6 {
			t.Errorf("at the end of hour %d: %.6f kWh, want %g", hour, stored[hour], want)
		}
	}
}

// Steps without a solution move no energy: a battery of 100 kW that discharges from
// 00:00 to 04:00 has given 200 kWh where two of the four steps are unsolved, and what
// a generator gives in such a step is in no total.
func TestNoEnergyWithoutASolution(t *testing.T) {
	f := plantStudy("1h", 1, map[string]string{
		"feeder/loads.csv":      "load,node,phases,profile\nfarm,end,ABC,wild\n",
		"profiles/day.csv":      "time,wild [kW]\n2025-03-03T00:00,100\n2025-03-03T01:00,900000\n2025-03-03T02:00,900000\n2025-03-03T03:00,100\n",
		"feeder/batteries.csv":  "battery,node,phases,energy [kWh],power [kW],round-trip efficiency [%],dispatch,initial [%],discharge from,discharge to\nb,end,ABC,1000,100,100,schedule,100,0:00,4:00\n",
		"feeder/generators.csv": "generator,node,phases,kind,rating [kVA],real [kW]\ng,end,ABC,other,100,10\n",
	})
	f["study.toml"] = text(strings.Replace(string(f["study.toml"].Data), "end = 2025-03-04", "end = 2025-03-03T04:00", 1))
	f["study.toml"] = text(strings.Replace(string(f["study.toml"].Data), "repeat = \"day\"\n", "", 1))
	e := ready(t, f)
	bad := 0
	o := watchRun(t, e, &probe{step: func(s *results.Step) {
		if s.Status == results.Unsolved {
			bad++
		}
	}})
	if bad != 2 {
		t.Fatalf("%d steps are unsolved, want 2", bad)
	}
	if g, b := o.Plants[0], o.Plants[1]; math.Abs(g.Delivered-20) > 1e-6 || math.Abs(b.Delivered+b.Change) > 1e-9 || math.Abs(b.Delivered-200) > 1e-6 {
		t.Errorf("generator %+v, battery %+v", g, b)
	}
}

// A run that begins at midnight finds a vehicle charged that came in the evening
// before: nothing is drawn until the next arrival.
func TestChargerBeforeTheRun(t *testing.T) {
	e := ready(t, plantStudy("1h", 1, map[string]string{
		"feeder/chargers.csv": "charger,node,phases,power [kW],arrival,departure,energy [kWh]\nc,end,A,10,18:00,7:00,20\n",
	}))
	o := watchRun(t, e, &probe{see: func(iv *results.Interval, r *results.Reading) {
		if hour := float64(iv.Start-e.Study.Settings.Period.Start) / 3.6e12; hour < 18 && real(iv.State.Charging[0]) != 0 {
			t.Errorf("hour %.2f: draws %.1f kW", hour, real(iv.State.Charging[0])/1000)
		}
	}})
	if math.Abs(o.Plants[0].Drawn-20) > 1e-9 {
		t.Errorf("drew %.6f kWh", o.Plants[0].Drawn)
	}
	// A single instant knows it too: at 21:00 the vehicle is full since 20:00.
	for step, want := range map[int]float64{17: 0, 18: 10, 19: 10, 21: 0} {
		in, err := e.Solve(step, sim.Positions{Given: true})
		if err != nil {
			t.Fatal(err)
		}
		if kw := real(in.State.Charging[0]) / 1000; math.Abs(kw-want) > 1e-6 {
			t.Errorf("at %d:00 an instant draws %.3f kW, want %g", step, kw, want)
		}
	}
}

// Delayed charging: by departure at 07:00 with 20 kWh at 10 kW it begins at 05:00 at
// the latest; in cheap hours from 23:00 it begins then.
func TestDelayedCharging(t *testing.T) {
	for _, tt := range []struct {
		cells       string
		begin, done float64 // hours into the second day
	}{{"delayed,,", 5, 7}, {"delayed,23:00,6:00", -1, 1}, {"unmanaged,,", -6, -4}} {
		e := ready(t, plantStudy("1h", 2, map[string]string{
			"feeder/chargers.csv": "charger,node,phases,power [kW],arrival,departure,energy [kWh],charging,from,to\nc,end,A,10,18:00,7:00,20," + tt.cells + "\n",
		}))
		first, last := math.NaN(), math.NaN()
		watchRun(t, e, &probe{see: func(iv *results.Interval, r *results.Reading) {
			from := float64(iv.Start-e.Study.Settings.Period.Start)/3.6e12 - 24
			if real(iv.State.Charging[0]) > 0 && from >= -6.001 && from < 12 {
				if math.IsNaN(first) {
					first = from
				}
				last = float64(iv.End-e.Study.Settings.Period.Start)/3.6e12 - 24
			}
		}})
		if math.Abs(first-tt.begin) > 1e-9 || math.Abs(last-tt.done) > 1e-9 {
			t.Errorf("%s: from hour %.6f to %.6f, want %g to %g", tt.cells, first, last, tt.begin, tt.done)
		}
	}
}

// The day that has 23 hours and the day that has 25, in Denver: a window from 22:00 to
// 03:00 past midnight lasts 4 hours in the night of March 9 and 6 in that of November
// 2, and everything closes.
func TestScheduleOnOddDays(t *testing.T) {
	for _, tt := range []struct {
		start, end string
		hours      float64
	}{{"2025-03-08T12:00", "2025-03-09T12:00", 4}, {"2025-11-01T12:00", "2025-11-02T12:00", 6}, {"2025-06-01T12:00", "2025-06-02T12:00", 5}} {
		f := plantStudy("1h", 1, map[string]string{
			"feeder/batteries.csv": "battery,node,phases,energy [kWh],power [kW],dispatch,initial [%],charge from,charge to\nb,end,ABC,5000,100,schedule,0,22:00,3:00\n",
			"feeder/loads.csv":     "load,node,phases,real [kW],reactive [kvar]\nfarm,end,ABC,900,300\n",
		})
		f["study.toml"] = text(fmt.Sprintf("title = \"Odd\"\n[period]\nstart = %s:00\nend = %s:00\nstep = \"1h\"\nzone = \"America/Denver\"\n", tt.start, tt.end))
		o := watchRun(t, ready(t, f), &probe{})
		if p := o.Plants[0]; math.Abs(p.Drawn-100*tt.hours) > 1e-6 {
			t.Errorf("night of %s: drew %.6f kWh, want %g", tt.end, p.Drawn, 100*tt.hours)
		}
	}
}

// Charging from solar alone: a self-consumption battery never draws from the source
// and everything closes over the days, in hours and in minutes alike.
func TestChargingFromSolar(t *testing.T) {
	for _, step := range []string{"1h", "1min"} {
		f := plantStudy(step, 1, map[string]string{
			"feeder/generators.csv": "generator,node,phases,kind,rating [kVA],profile\ng,end,ABC,solar,2000,sun\n",
			"feeder/batteries.csv":  "battery,node,phases,energy [kWh],power [kW],round-trip efficiency [%],reserve [%],initial [%],dispatch,watched section\nb,end,ABC,800,400,81,20,20,self-consumption,L1\n",
			"profiles/sun.csv":      "time,sun [pu]\n2025-03-03T00:00,0\n2025-03-03T06:00,0.4\n2025-03-03T12:00,0.8\n2025-03-03T18:00,0\n",
		})
		e := ready(t, f)
		least, most := math.Inf(1), 0.0
		o := watchRun(t, e, &probe{
			see: func(iv *results.Interval, r *results.Reading) {
				kw, stored := real(iv.State.Storage[0])/1000, iv.State.Stored[0]
				if source := real(r.Source) / 1000; kw < -0.1 && source > 0.1 {
					t.Errorf("%s: draws %.3f kW while %.3f kW come from the source", step, -kw, source)
				}
				least, most = min(least, stored), max(most, stored)
			},
		})
		if math.Abs(least-160) > 1e-9 || math.Abs(most-800) > 1e-9 {
			t.Errorf("%s: stored from %.9f to %.9f kWh, want the reserve, 160, and 800", step, least, most)
		}
		b := o.Plants[1]
		if math.Abs(b.Drawn-b.Delivered-b.Losses-b.Change) > 1e-9 || math.Abs(b.Losses) < 50 {
			t.Errorf("%s: %+v", step, b)
		}
	}
}

// The lag is followed as the contract says: in intervals of at most τ/2 while it
// moves, once at the beginning of each by 1 − e^(−Δ/τ) of the way, τ = 90 s/ln 10.
func TestLagByTheLetter(t *testing.T) {
	f := plantStudy("30s", 1, map[string]string{
		"feeder/generators.csv":         "generator,node,phases,kind,rating [kVA],profile,function\ng,end,ABC,solar,3000,jump,q\n",
		"feeder/inverter-functions.csv": "function,category,reactive,v1 [pu],v2 [pu],v3 [pu],v4 [pu],open loop response time [s]\nq,B,voltage-reactive power,0.95,0.98,1.02,1.05,90\n",
		"feeder/source.csv":             "node,nominal [kV],voltage profile\nbus,12.47,level\n",
		"feeder/sections.csv":           "section,from,to,phases,length [km],construction\nL1,bus,end,ABC,0.001,line\n",
		"feeder/loads.csv":              "load,node,phases,real [kW]\nfarm,end,ABC,1\n",
		"profiles/jump.csv":             "time,jump [pu],level [pu]\n2025-03-03T00:00,0.5,1.0\n2025-03-03T00:10,0.5,1.035\n",
	})
	f["study.toml"] = text(strings.Replace(strings.Replace(string(f["study.toml"].Data), "end = 2025-03-04", "end = 2025-03-03T00:20", 1), "repeat = \"day\"\n", "", 1))
	τ := 90 / math.Ln10
	last, lastEnd := 0.0, 0.0
	moves := 0
	watchRun(t, ready(t, f), &probe{see: func(iv *results.Interval, r *results.Reading) {
		from := float64(iv.Start-1740960000e9) / 1e9
		q := imag(iv.State.Generation[0]) / 1000
		if from >= 600 && from < 800 {
			target := -0.22 * 3000.0 // half-way between 1.02 and 1.05
			want := last
			if from > 600 {
				want = last + (target-last)*(1-math.Exp(-(from-lastEnd)/τ))
				moves++
			}
			// The line of a metre moves the voltage by 1e-6.
			if math.Abs(q-want) > 0.5 {
				t.Errorf("at %.3f s: %.4f kvar, want %.4f", from, q, want)
			}
			if Δ := float64(iv.End-iv.Start) / 1e9; math.Abs(q-target) > 1 && Δ > τ/2+1e-6 {
				t.Errorf("at %.3f s: an interval of %.3f s, τ/2 is %.3f s", from, Δ, τ/2)
			}
		}
		last, lastEnd = q, from
	}})
	if moves < 8 {
		t.Errorf("%d moves", moves)
	}
}

// A battery whose function lags follows its dispatch at once: only the reactive power
// lags.
func TestLaggingBatteryFollows(t *testing.T) {
	e := ready(t, plantStudy("10s", 1, map[string]string{
		"study.toml":                    "title = \"Lag\"\n[period]\nstart = 2025-03-03T17:50:00\nend = 2025-03-03T18:10:00\nstep = \"10s\"\nzone = \"UTC\"\n[[profiles]]\nfiles = [\"profiles/*.csv\"]\nrepeat = \"day\"\n",
		"feeder/batteries.csv":          "battery,node,phases,energy [kWh],power [kW],rating [kVA],dispatch,watched section,target [kW],recharge [kW],initial [%],function\nb,end,ABC,2000,400,500,peak shaving,L1,700,-999,100,vv\n",
		"feeder/inverter-functions.csv": "function,category,reactive,open loop response time [s],at night\nvv,B,voltage-reactive power,60,yes\n",
	}))
	n := 0
	watchRun(t, e, &probe{see: func(iv *results.Interval, r *results.Reading) {
		if kw := real(r.Source) / 1000; kw > 700.1 {
			n++
			if n < 5 {
				t.Errorf("%d s: %.3f kW at the head", (iv.Start-e.Study.Settings.Period.Start)/1e9, kw)
			}
		}
	}})
}

// Power balances in every interval, and the same bytes come from one and from two
// processors, with plants of every kind.
func TestPlantsSameBytes(t *testing.T) {
	one, two := manyPlantsRun(t, 1), manyPlantsRun(t, 2)
	if !bytes.Equal(one, two) {
		t.Error("the figures of one and of two processors differ")
	}
}

// manyPlants has a battery of each dispatch, with and without a function, chargers in
// a group, and solar with curtailment.
func manyPlants(days int, step string) fstest.MapFS {
	return plantStudy(step, days, map[string]string{
		"feeder/sections.csv":   "section,from,to,phases,length [km],construction\nL1,bus,mid,ABC,4,line\nL2,mid,end,ABC,4,line\n",
		"feeder/generators.csv": "generator,node,phases,kind,rating [kVA],profile,function\ng,end,ABC,solar,3000,sun,vv\nh,mid,AB,solar,500,sun,pf\n",
		"feeder/batteries.csv": "battery,node,phases,connection,energy [kWh],power [kW],rating [kVA],dispatch,watched section,target [kW],recharge [kW],charge from,charge to,discharge from,discharge to,profile,function\n" +
			"peak,mid,ABC,wye,900,300,,peak shaving,L1,500,100,,,,,,\n" +
			"own,end,ABC,wye,900,200,250,self-consumption,L2,,,,,,,,vv\n" +
			"clock,end,AB,delta,300,50,,schedule,,,,1:00,5:00,18:00,22:00,,\n" +
			"list,mid,C,wye,300,50,,profile,,,,,,,,swing,\n",
		"feeder/chargers.csv":           "charger,node,phases,power [kW],arrival,departure,energy [kWh],charging,group,group limit [kW]\nc1,end,A,10,18:00,7:00,30,unmanaged,lot,15\nc2,end,B,10,19:30,6:00,30,delayed,lot,15\nc3,mid,C,7.2,17:10,6:20,21,unmanaged,,\n",
		"feeder/inverter-functions.csv": "function,category,reactive,power factor,voltage-active power\nvv,B,voltage-reactive power,,yes\npf,B,constant power factor,-0.95,\n",
		"profiles/sun.csv":              "time,sun [pu],swing [kW]\n2025-03-03T00:00,0,-20\n2025-03-03T06:00,0.4,10\n2025-03-03T12:00,0.9,-40\n2025-03-03T18:00,0,45\n",
	})
}

func manyPlantsRun(t *testing.T, processors int) []byte {
	t.Helper()
	defer runtime.GOMAXPROCS(runtime.GOMAXPROCS(processors))
	e := ready(t, manyPlants(2, "15min"))
	var out bytes.Buffer
	m := e.Meter()
	o := watchRun(t, e, &probe{see: func(iv *results.Interval, r *results.Reading) {
		if p, q, scale := m.Balance(iv.State); math.Abs(p)+math.Abs(q) > 2e-6*math.Max(scale, 1000) {
			t.Errorf("imbalance %g W, %g var of %g VA", p, q, scale)
		}
		fmt.Fprintln(&out, iv.Start, iv.End, iv.State.V, iv.State.Storage, iv.State.Stored, iv.State.Charging, iv.State.Generation, iv.State.Curtailed)
	}})
	fmt.Fprintln(&out, o.Plants)
	for _, p := range o.Plants {
		if p.Kind == "battery" && math.Abs(p.Drawn-p.Delivered-p.Losses-p.Change) > 1e-9 {
			t.Errorf("%+v does not close", p)
		}
	}
	return out.Bytes()
}

// What functions take from a generator is what was available less what was delivered.
func TestCurtailedEnergy(t *testing.T) {
	f := plantStudy("1h", 1, map[string]string{
		"feeder/generators.csv":         "generator,node,phases,kind,rating [kVA],real [kW],function\ng,end,ABC,solar,4000,3800,vw\n",
		"feeder/inverter-functions.csv": "function,category,reactive,voltage-active power,active v1 [pu],active v2 [pu]\nvw,B,constant power factor,yes,1.05,1.06\n",
		"feeder/source.csv":             "node,nominal [kV],voltage [pu]\nbus,12.47,1.04\n",
	})
	o := watchRun(t, ready(t, f), &probe{})
	if p := o.Plants[0]; p.Curtailed < 100 || math.Abs(p.Delivered+p.Curtailed-24*3800) > 1e-3 {
		t.Errorf("%+v: delivered and curtailed add up to %.6f, want %d", p, p.Delivered+p.Curtailed, 24*3800)
	}
}

// Steps with plants do not allocate.
func TestPlantStepsDoNotAllocate(t *testing.T) {
	count := func(days int) float64 {
		e := ready(t, manyPlants(days, "15min"))
		return testing.AllocsPerRun(3, func() {
			if _, err := e.Run(context.Background(), &discard{}); err != nil {
				t.Fatal(err)
			}
		})
	}
	if a, b := count(2), count(9); a != b {
		t.Errorf("%v allocations in two days, %v in nine", a, b)
	}
}

// A vehicle that needs more than its stay has room for is told of before the run.
func TestChargerThatCannotBeDone(t *testing.T) {
	e := ready(t, plantStudy("1h", 1, map[string]string{
		"feeder/chargers.csv": "charger,node,phases,power [kW],arrival,departure,energy [kWh]\nc,end,A,10,18:00,7:00,200\n",
	}))
	said := ""
	for _, w := range e.Warnings {
		said += w.Error() + "\n"
	}
	for _, want := range []string{"feeder/chargers.csv:2:7", "200 kWh", "13 h", "130 kWh"} {
		if !strings.Contains(said, want) {
			t.Errorf("warnings lack %q: %s", want, said)
		}
	}
}
