package results

import (
	"errors"
	"math"
	"math/cmplx"
	"math/rand/v2"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"
	"time"
)

func TestRowsOfAnHourGatherTheirSteps(t *testing.T) {
	start := time.Date(2025, 1, 1, 0, 0, 0, 0, time.UTC)
	x := newTiny(t, start, start.Add(5*time.Hour+20*time.Minute), 20*time.Minute)
	x.plan.Settings.Run.Log = int64(time.Hour)
	rnd := rand.New(rand.NewPCG(9, 1))
	s := constant(x, func(int) *State { return x.state(randomLevels(rnd), [3]int{}, true) })
	spoil := func(step int, status Status) {
		s.steps[step].Status = status
		if status == Unsolved {
			s.steps[step].Last = nil
		}
	}
	for i := range s.steps {
		s.steps[i].Actions = i
	}
	spoil(4, Low)      // row 1: low in the middle
	spoil(6, Unsolved) // row 2: unsolved at its start
	spoil(7, Low)
	spoil(11, Unsolved) // row 3: unsolved at its end
	for i := 12; i < 15; i++ {
		spoil(i, Unsolved) // row 4: nothing but unsolved
	}
	rows := sheetRows(t, s.write(t, x), "steps.csv")
	if len(rows) != 6 {
		t.Fatalf("%d rows, want 6 (the last of 20 min)", len(rows))
	}
	o := oracle{x, s}
	wantStatus := []string{"ok", "low", "unsolved", "unsolved", "unsolved", "ok"}
	for k, row := range rows {
		steps := s.steps[3*k : min(3*k+3, len(s.steps))]
		if row["time"] != iso(steps[0].Start, time.UTC) || row["status"] != wantStatus[k] {
			t.Errorf("row %d reads %s %s, want status %s", k, row["time"], row["status"], wantStatus[k])
		}
		actions, energy, low := 0, 0.0, math.Inf(1)
		for i := range steps {
			actions += steps[i].Actions
			energy += o.sourceKW(steps[i].intervals[0].State) / 3
			for _, u := range o.volts(steps[i].intervals[0].State) {
				low = min(low, u)
			}
		}
		cell(t, row, "actions", float64(actions))
		last := steps[len(steps)-1].Last
		switch k {
		case 4:
			energy, low = math.NaN(), math.NaN()
		}
		cell(t, row, "source energy [kWh]", energy)
		cell(t, row, "lowest in step [pu]", low)
		want := math.NaN()
		if last != nil {
			want = o.sourceKW(last)
		}
		cell(t, row, "source real [kW]", want)
	}
}

func TestNothingOfAStepThatIsNotOKEntersAStatistic(t *testing.T) {
	x := aDay(t)
	good, bad := x.state(nil, [3]int{}, true), x.state(map[string]float64{"low": 0.5, "n3": 1.4}, [3]int{}, true)
	s := constant(x, func(step int) *State {
		if step == 3 || step == 5 {
			return bad
		}
		return good
	})
	s.steps[3].Status, s.steps[3].Actions = Low, 1
	s.steps[3].actions = []*Action{{Time: s.steps[3].Start + 7, Device: 1, From: 0, To: 1, Reason: "band low"}}
	s.steps[3].Where = "low.B"
	s.steps[5].Status, s.steps[5].Last = Unsolved, nil
	// The tap stays where the low step left it.
	for i := 4; i < 24; i++ {
		if i != 5 {
			st := *s.steps[i].Last
			st.Taps = []int{0, 1, 0}
			s.steps[i].Last = &st
		}
	}
	dir := s.write(t, x)
	for _, row := range sheetRows(t, dir, "nodes.csv") {
		cell(t, row, "min [pu]", 1)
		cell(t, row, "max [pu]", 1)
		cell(t, row, "hours below A [h]", 0)
	}
	steps := sheetRows(t, dir, "steps.csv")
	cell(t, steps[3], "lowest [pu]", 0.5)
	if steps[5]["lowest [pu]"] != "" {
		t.Error("an unsolved step has a figure")
	}
	for i, row := range sheetRows(t, dir, "devices.csv") {
		want := "0"
		if i > 3 {
			want = "1"
		}
		if i != 3 && row["reg.B"] != want {
			t.Errorf("step %d: reg.B at %q, want %s", i, row["reg.B"], want)
		}
	}
	if row := sheetRows(t, dir, "duty.csv")[1]; row["operations"] != "1" {
		t.Errorf("an operation of a low step is not counted: %v", row)
	}
	if row := sheetRows(t, dir, "operations.csv")[0]; row["time"] != "2025-01-01T03:00:00.000000007+00:00" || row["phase"] != "B" || row["to"] != "1" {
		t.Errorf("operation logged as %v", row)
	}
	record, err := os.ReadFile(filepath.Join(dir, "run.json"))
	if err != nil || !regexp.MustCompile(`"time": "2025-01-01T03:00:00\+00:00",\s*"status": "low",\s*"where": "low.B"`).Match(record) {
		t.Errorf("run.json does not name the low step and its place (%v)", err)
	}
	sum := sheetRows(t, dir, "summary.csv")
	cell(t, find(t, sum, "quantity", "settled hours"), "value", 22)
	cell(t, find(t, sum, "quantity", "low steps"), "value", 1)
	cell(t, find(t, sum, "quantity", "unsolved steps"), "value", 1)
}

func TestSettlingHoursStandApart(t *testing.T) {
	x := aDay(t)
	x.plan.Devices = x.plan.Devices[:1]
	good, dip := x.state(nil, [3]int{}, true), x.state(map[string]float64{"n3": 0.93}, [3]int{}, true)
	s := &script{}
	p := x.plan.Settings.Period
	// Every hour n3 dips for 6 minutes while a regulator waits; from 20:00 to 24:00 it
	// stays low for good: 20 × 0.1 h settling, 4 h settled (pencil).
	for k := range 24 {
		start := p.Start + int64(k)*p.Step
		st := scriptStep{Step: Step{Start: start, End: start + p.Step, Last: good}}
		if k < 20 {
			st.intervals = []*Interval{
				{Start: start, End: start + 6*60*second, State: dip, Devices: []DeviceState{{OutOfBand: true, Hunting: true}}},
				{Start: start + 6*60*second, End: start + p.Step, State: good, Settled: true, Devices: []DeviceState{{Hunting: true}}},
			}
		} else {
			st.Last = dip
			st.intervals = []*Interval{{Start: start, End: start + p.Step, State: dip, Settled: true, Devices: []DeviceState{{OutOfBand: true, AtStop: true}}}}
		}
		s.steps = append(s.steps, st)
	}
	dir := s.write(t, x)
	n3 := find(t, sheetRows(t, dir, "nodes.csv"), "node", "n3")
	for c, want := range map[string]float64{"hours below A [h]": 4, "hours below B [h]": 4, "customer-hours below A [h]": 28, "settling hours outside A [h]": 2,
		"lowest settling [pu]": 0.93, "highest settling [pu]": 0.93, "max [pu]": 1, "p50 [pu]": 1, "p1 [pu]": 0.93} {
		cell(t, n3, c, want)
	}
	sum := sheetRows(t, dir, "summary.csv")
	cell(t, find(t, sum, "quantity", "settling share"), "value", 100*2.0/24)
	cell(t, find(t, sum, "quantity", "settling place-hours outside A"), "value", 2)
	reg := sheetRows(t, dir, "duty.csv")[0]
	cell(t, reg, "hours out of band [h]", 4)
	cell(t, reg, "hours at a stop [h]", 4)
	cell(t, reg, "hunting [h]", 20)
}

func TestMonthsHaveTheirHours(t *testing.T) {
	zone := denver(t)
	start := time.Date(2025, 1, 1, 0, 0, 0, 0, zone)
	x := newTiny(t, start, start.AddDate(1, 0, 0), time.Hour)
	x.plan.Settings.Run.Voltages = "none"
	state := x.state(nil, [3]int{}, true)
	dir := constant(x, func(int) *State { return state }).write(t, x)
	kw := oracle{x, nil}.sourceKW(state)
	rows := sheetRows(t, dir, "monthly.csv")
	if len(rows) != 12 {
		t.Fatalf("%d months", len(rows))
	}
	// Clocks go forward on 9 March and back on 2 November 2025 in Denver: 743 and 721 h.
	for i, hours := range []float64{744, 672, 743, 720, 744, 720, 744, 744, 720, 744, 721, 744} {
		want := time.Date(2025, time.Month(i+1), 1, 0, 0, 0, 0, zone)
		if rows[i]["month"] != want.Format("2006-01") {
			t.Fatalf("month %d is %s", i+1, rows[i]["month"])
		}
		cell(t, rows[i], "source energy [kWh]", hours*kw)
	}
	steps := sheetRows(t, dir, "steps.csv")
	if len(steps) != 8760 || steps[0]["time"] != "2025-01-01T00:00:00-07:00" || steps[8759]["time"] != "2025-12-31T23:00:00-07:00" {
		t.Errorf("%d steps from %s to %s", len(steps), steps[0]["time"], steps[len(steps)-1]["time"])
	}
}

// An allowance of 3 V stands between primary and meter at a load's own peak; at half
// of it 1.5 V. n3 at 0.97 p.u. is 116.4 V: its meter sees 113.4 V at the peak, below
// the 114 V of range A, and 114.9 V at half of it (pencil).
func TestAllowance(t *testing.T) {
	x := aDay(t)
	x.plan.Settings.Limits.Allowance = 3
	states := map[float64]*State{}
	for _, part := range []float64{1, 0.5} {
		s := *x.state(map[string]float64{"n3": 0.97, "low": 0.97, "shop": 0.97}, [3]int{}, true)
		s.Load = []complex128{complex(part*100e3, 5), complex(part*20e3, 7), complex(part*30e3, 1)}
		states[part] = &s
	}
	x.plan.LoadPeak = []float64{100, 20, 30}
	dir := constant(x, func(step int) *State {
		if step < 5 {
			return states[1]
		}
		return states[0.5]
	}).write(t, x)
	nodes := sheetRows(t, dir, "nodes.csv")
	n3 := find(t, nodes, "node", "n3")
	cell(t, n3, "hours below A [h]", 5)
	cell(t, n3, "hours below B [h]", 0)
	cell(t, n3, "customer-hours below A [h]", 35)
	cell(t, n3, "min [pu]", 0.97) // of the place itself
	// Behind a modelled transformer the voltage is the meter's: 0.97 is inside.
	cell(t, find(t, nodes, "node", "low"), "hours below A [h]", 0)
	cell(t, find(t, nodes, "node", "shop"), "hours below A [h]", 0)
	cell(t, find(t, sheetRows(t, dir, "summary.csv"), "quantity", "customer-hours below A"), "value", 35)
	data, err := os.ReadFile(filepath.Join(dir, "run.json"))
	if err != nil || !strings.Contains(string(data), `"allowance_volts": 3`) || !strings.Contains(string(data), "at the meter after the allowance") {
		t.Errorf("run.json does not tell of the allowance (%v)", err)
	}
}

// Two loads at one place, one at its peak and one at rest: the place is as low as
// the meter of the first and as high as that of the second.
func TestAllowanceOfTwoLoadsAtOnePlace(t *testing.T) {
	x := aDay(t)
	x.plan.Settings.Limits.Allowance = 3
	x.plan.Model.Loads[0].Node = 3
	x.plan.Model.Loads[0].Phases = x.plan.Model.Loads[1].Phases
	x.plan.LoadPeak = []float64{100, 20, 30}
	points := Points(x.net)
	j := newJudge(x.plan, points)
	pu := make([]float64, len(points))
	low, high, drops := make([]float64, len(points)), make([]float64, len(points)), make([]float64, len(j.services))
	for i := range pu {
		pu[i] = 1
	}
	j.meterVoltages(pu, []complex128{100e3, 0, 0}, drops, low, high)
	for i, p := range points {
		wantLow := 1.0
		if p.Name == "n3.A" {
			wantLow = 1 - 3.0/120
		}
		if math.Abs(low[i]-wantLow) > 1e-12 || math.Abs(high[i]-1) > 1e-12 {
			t.Errorf("%s: meters from %g to %g, want %g to 1", p.Name, low[i], high[i], wantLow)
		}
	}
}

func TestLimits(t *testing.T) {
	x := aDay(t)
	points := Points(x.net)
	class := func(j *judge, name string) limitClass {
		for i, p := range points {
			if p.Name == name {
				return j.classes[j.of[i]]
			}
		}
		t.Fatal("no place", name)
		return limitClass{}
	}
	j := newJudge(x.plan, points)
	// ANSI C84.1 on the 120 V base: service up to 600 V 114 to 126 and 110 to 127,
	// above 117 to 126 and 114 to 127.
	for name, want := range map[string][4]float64{"low.B": {114, 126, 110, 127}, "shop.CA": {114, 126, 110, 127}, "n1.A": {117, 126, 114, 127}} {
		c := class(j, name)
		for k, v := range [...]float64{c.LowA, c.HighA, c.LowB, c.HighB} {
			if math.Abs(v*120-want[k]) > 1e-9 {
				t.Errorf("%s: limits %+v, want %v V", name, c, want)
			}
		}
	}
	judged := ""
	for i, is := range j.judged {
		if is {
			judged += points[i].Name + " "
		}
	}
	if want := "low.A low.B low.C n3.A shop.AB "; judged != want {
		t.Errorf("judged: %swant %s", judged, want)
	}

	x.plan.Settings.Limits.Own = true
	x.plan.Settings.Limits.Low, x.plan.Settings.Limits.High = 0.94, 1.06
	x.plan.Settings.Limits.All = true
	j = newJudge(x.plan, points)
	if c := class(j, "src.C"); c.LowA != 0.94 || c.HighB != 1.06 {
		t.Errorf("own limits without outer ones: %+v", c)
	}
	for i, is := range j.judged {
		if !is {
			t.Errorf("%s is not judged where all are", points[i].Name)
		}
	}
	// A voltage on the limit is inside.
	if j.outsideA(0, 0.94, 1.06) || !j.outsideA(0, 0.94-2e-9, 1) || !j.outsideA(0, 1, 1.06+2e-9) {
		t.Error("the edge of a limit")
	}
}

func TestCustomersOfThreePhasesCountOnce(t *testing.T) {
	x := aDay(t)
	low := x.state(map[string]float64{"low": 0.94}, [3]int{}, true)
	dir := constant(x, func(int) *State { return low }).write(t, x)
	cell(t, find(t, sheetRows(t, dir, "nodes.csv"), "node", "low"), "customer-hours below A [h]", 24*12)
	sum := sheetRows(t, dir, "summary.csv")
	cell(t, find(t, sum, "quantity", "customer-hours below A"), "value", 24*12)
	cell(t, find(t, sum, "quantity", "customers ever outside A"), "value", 12)
	cell(t, find(t, sum, "quantity", "place-hours outside A"), "value", 72)
}

func TestPlacesAndNetwork(t *testing.T) {
	x := aDay(t)
	x.plan.Model.Nodes[5].LonLat = true
	dir := constant(x, func(int) *State { return x.state(nil, [3]int{}, true) }).write(t, x)
	rows := sheetRows(t, dir, "places.csv")
	for name, want := range map[string][3]string{"src": {"0.0000", "ABC", ""}, "n1": {"2.00000", "ABC", ""}, "n2": {"2.00000", "ABC", ""}, "n3": {"2.50000", "A", "A"}, "low": {"2.00000", "ABC", "A B C"}, "shop": {"2.00000", "ABC", "AB"}} {
		row := find(t, rows, "node", name)
		if got := [3]string{row["distance [km]"], row["phases"], row["judged"]}; got != want {
			t.Errorf("%s: %v, want %v", name, got, want)
		}
	}
	if row := find(t, rows, "node", "n1"); row["x"] != "1200" || row["y"] != "-35.5" || row["longlat"] != "no" || row["nominal [kV]"] != "12.47" {
		t.Errorf("n1: %v", row)
	}
	if row := find(t, rows, "node", "src"); row["x"] != "" || row["longlat"] != "yes" {
		t.Errorf("src: %v", row)
	}
	if row := find(t, sheetRows(t, dir, "network.csv"), "element", "line1"); row["kind"] != "section" || row["from"] != "src" || row["to"] != "n1" || row["phases"] != "ABC" || row["length [km]"] != "2.00000" {
		t.Errorf("line1: %v", row)
	}
}

func TestDistanceTakesTheShorterWayRoundALoop(t *testing.T) {
	x := aDay(t)
	m := x.plan.Model
	m.Sections = append(m.Sections, m.Sections[0])
	m.Sections[2].Name, m.Sections[2].From, m.Sections[2].To, m.Sections[2].LengthKM = "tie", 5, 3, 0.25
	far := distances(m, branches(m))
	for i, want := range []float64{0.75, 0.75, 0.75, 0.25, 0.75, 0} { // low, n1, n2, n3, shop, src: all by the tie
		if math.Abs(far[i]-want) > 1e-12 {
			t.Errorf("%s is %g km away, want %g", m.Nodes[i].Name, far[i], want)
		}
	}
	m.Sections[2].From = 3 // cut it
	m.Sections[0].From = 1
	if far := distances(m, branches(m)); !math.IsInf(far[3], 1) {
		t.Errorf("a node without a way to the source is %g km away", far[3])
	}
}

func TestImbalanceShowsInTheRecord(t *testing.T) {
	x := aDay(t)
	s := constant(x, func(step int) *State {
		st := x.state(nil, [3]int{}, true)
		if step == 7 {
			st.Load[0] *= 1.5
		}
		return st
	})
	w, err := Create(filepath.Join(t.TempDir(), "base"), x.plan)
	if err != nil {
		t.Fatal(err)
	}
	s.play(t, w)
	m := NewMeter(x.net)
	p, q, scale := m.Balance(s.steps[7].Last)
	near(t, "worst imbalance", w.balance.worst, max(math.Abs(p), math.Abs(q))/scale, 1e-9)
	if w.balance.at != s.steps[7].Start {
		t.Errorf("worst at %s", iso(w.balance.at, time.UTC))
	}
	if err := w.Abort(); err != nil {
		t.Fatal(err)
	}
}

func TestOfEqualExtremesTheFirstIsNamed(t *testing.T) {
	x := aDay(t)
	low, high := x.state(map[string]float64{"n3": 0.97}, [3]int{}, true), x.state(map[string]float64{"n3": 1.02}, [3]int{}, true)
	dir := constant(x, func(step int) *State {
		if step%2 == 0 {
			return low
		}
		return high
	}).write(t, x)
	n3 := find(t, sheetRows(t, dir, "nodes.csv"), "node", "n3")
	if n3["min time"] != "2025-01-01T00:00:00+00:00" || n3["max time"] != "2025-01-01T01:00:00+00:00" {
		t.Errorf("lowest at %s, highest at %s, want the first two hours", n3["min time"], n3["max time"])
	}
	lat := find(t, sheetRows(t, dir, "loading.csv"), "element", "lat")
	if at := lat["peak time"]; at != "2025-01-01T00:00:00+00:00" && at != "2025-01-01T01:00:00+00:00" {
		t.Errorf("peak of lat at %s, want the first of its hours", at)
	}
}

// Phase B of low is raised or lowered until the line-to-line voltages are 4 % and 2.5 %
// unbalanced; only the hours of the first count as above 3 %.
func TestHoursOfUnbalance(t *testing.T) {
	x := aDay(t)
	m := NewMeter(x.net)
	r := m.NewReading()
	at := func(percent float64) *State {
		low, high := 0.0, 0.3
		for range 60 {
			mid := (low + high) / 2
			m.Read(x.state(map[string]float64{"low.B": -mid}, [3]int{}, true), r)
			if r.Unbalance < percent {
				low = mid
			} else {
				high = mid
			}
		}
		return x.state(map[string]float64{"low.B": -low}, [3]int{}, true)
	}
	much, some := at(4), at(2.5)
	dir := constant(x, func(step int) *State {
		if step >= 6 && step < 13 {
			return much
		}
		return some
	}).write(t, x)
	sum := sheetRows(t, dir, "summary.csv")
	cell(t, find(t, sum, "quantity", "hours with unbalance above 3 %"), "value", 7)
	cell(t, find(t, sum, "quantity", "highest unbalance"), "value", 4)
	if p, at := find(t, sum, "quantity", "highest unbalance place"), find(t, sum, "quantity", "highest unbalance time"); p["value"] != "low" || at["value"] != "2025-01-01T06:00:00+00:00" {
		t.Errorf("highest unbalance at %s, %s", p["value"], at["value"])
	}
}

func TestPairsOfTwoPhasesHaveOnePlace(t *testing.T) {
	x := aDay(t)
	x.plan.Model.Nodes[4].Phases = x.plan.Model.Nodes[4].Phases[:0:0]
	x.plan.Model.Nodes[4].Phases = append(x.plan.Model.Nodes[4].Phases, 0, 2)
	x.net.At[4][1] = -1
	var names []string
	for _, p := range Points(x.net) {
		if p.Node == 4 {
			names = append(names, p.Name)
			s := x.state(nil, [3]int{}, true)
			near(t, p.Name, p.PU(s.V), cmplx.Abs(s.V[x.net.At[4][0]]-s.V[x.net.At[4][2]])/480, 1e-12)
		}
	}
	if strings.Join(names, " ") != "shop.CA" {
		t.Errorf("places %v, want shop.CA alone", names)
	}
}

func TestIntervalsWithoutLengthAreNothing(t *testing.T) {
	x := aDay(t)
	w, err := Create(filepath.Join(t.TempDir(), "base"), x.plan)
	if err != nil {
		t.Fatal(err)
	}
	s := x.state(map[string]float64{"n3": 0.5}, [3]int{}, true)
	at := x.plan.Settings.Period.Start
	if err := w.Interval(&Interval{Start: at, End: at, Settled: true, State: s}); err != nil || w.pend.used != 0 || !math.IsInf(w.pend.lowest, 1) {
		t.Errorf("an interval of no length was taken (%v)", err)
	}
	if err := errors.Join(w.Abort()); err != nil {
		t.Fatal(err)
	}
}
