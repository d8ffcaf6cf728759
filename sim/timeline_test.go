package sim_test

import (
	"context"
	"fmt"
	"io/fs"
	"math"
	"strconv"
	"strings"
	"testing"
	"testing/fstest"
	"time"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// The studies of the pencil. A stiff source of 7,200 V to neutral stands at S, so that
// with PT 60 a regulator without load sees 120 V × (source, p.u.) × (ratio of its tap),
// one step of type A being 0.00625 of 120 V, 0.75 V:
//
//	S ─ R ─ X            one regulator, phase A
//	S ─ R1 ─ X ─ R2 ─ Y  a cascade
//
// Where a section stands between, it is a resistance and carries currents in phase
// with the voltage, so that drops add up like numbers.

// began is the start of every period here, a Monday, in UTC.
var began = time.Date(2025, 3, 3, 0, 0, 0, 0, time.UTC)

// source is source.csv: 12.4707658... kV line to line are 7.2 kV to neutral.
const source = "node,nominal [kV],voltage profile\nS,12.470765814495916,volts\n"

// inputs are the series of a study by step; one that is shorter holds its last value.
type inputs struct {
	step  time.Duration
	steps int
	volts []float64 // of the source, on the 120 V base
	load  []float64 // "load [pu]"
	more  string    // name of a further series, with its unit
	value []float64
}

func at(x []float64, k int) float64 { return x[min(k, len(x)-1)] }

// folder makes the folder of a study from its series and its tables, as name, text
// pairs below feeder/. A name with a slash is taken as it stands.
func folder(in inputs, pairs ...string) fstest.MapFS {
	var b strings.Builder
	b.WriteString("time,volts [pu]")
	if in.load != nil {
		b.WriteString(",load [pu]")
	}
	if in.value != nil {
		b.WriteString("," + in.more)
	}
	for k := range in.steps + 1 {
		fmt.Fprintf(&b, "\n%s,%.17g", began.Add(time.Duration(k)*in.step).Format("2006-01-02T15:04:05"), at(in.volts, k)/120)
		if in.load != nil {
			fmt.Fprintf(&b, ",%.17g", at(in.load, k))
		}
		if in.value != nil {
			fmt.Fprintf(&b, ",%.17g", at(in.value, k))
		}
	}
	b.WriteByte('\n')
	end := began.Add(time.Duration(in.steps) * in.step)
	out := fstest.MapFS{}
	put := func(name, text string) { out[name] = &fstest.MapFile{Data: []byte(text)} }
	put("feeder/source.csv", source)
	put("profiles/inputs.csv", b.String())
	put("study.toml", fmt.Sprintf(`title = "pencil"
[period]
start = %s
end = %s
step = "%ds"
zone = "UTC"
[[profiles]]
files = ["profiles/*.csv"]
[run]
start = "given"
`, began.Format("2006-01-02T15:04:05"), end.Format("2006-01-02T15:04:05"), int(in.step.Seconds())))
	for i := 0; i < len(pairs); i += 2 {
		name := pairs[i]
		if !strings.Contains(name, "/") && name != "study.toml" {
			name = "feeder/" + name
		}
		put(name, pairs[i+1])
	}
	return out
}

// settled makes a study's run begin settled.
func settled(f fstest.MapFS) fstest.MapFS {
	text := strings.Replace(string(f["study.toml"].Data), `"given"`, `"settled"`, 1)
	f["study.toml"] = &fstest.MapFile{Data: []byte(text)}
	return f
}

// prepare makes an engine of a study.
func prepare(t testing.TB, f fs.FS, caseName string, o sim.Options) *sim.Engine {
	t.Helper()
	st, err := feeder.Open(f, caseName)
	if err != nil {
		t.Fatal(err)
	}
	e, err := sim.Prepare(st, o)
	if err != nil {
		t.Fatal(err)
	}
	return e
}

// span is an interval as a Recorder saw it; times are seconds from the beginning.
type span struct {
	from, to float64
	settled  bool
	hunting  bool // of any device
	taps     []int
	closed   []bool
	devices  []results.DeviceState
}

// witness is the Recorder of these tests: it keeps what it is handed, and holds every
// interval to the balance of power.
type witness struct {
	t       testing.TB
	e       *sim.Engine
	meter   *results.Meter
	actions []string
	times   []int64 // of the actions, ns
	spans   []span
	steps   []results.Step
	end     int64 // of the last interval
	worst   float64
}

func seconds(t int64) float64 { return float64(t-began.UnixNano()) / 1e9 }

func (w *witness) Interval(iv *results.Interval) error {
	// The tolerance of a solution is relative to 1 kVA at least (design section 5), and
	// so is that of the balance.
	p, q, scale := w.meter.Balance(iv.State)
	off := max(math.Abs(p), math.Abs(q)) / max(scale, 1000)
	w.worst = max(w.worst, off)
	if !(off <= 1e-6) {
		w.t.Errorf("%v s: %g W and %g var are left over of %g VA", seconds(iv.Start), p, q, scale)
	}
	if iv.End <= iv.Start || w.end != 0 && iv.Start < w.end {
		w.t.Errorf("an interval from %v s to %v s after one that ended at %v s", seconds(iv.Start), seconds(iv.End), seconds(w.end))
	}
	w.end = iv.End
	s := span{from: seconds(iv.Start), to: seconds(iv.End), settled: iv.Settled, devices: append([]results.DeviceState(nil), iv.Devices...),
		taps: append([]int(nil), iv.State.Taps...), closed: append([]bool(nil), iv.State.Closed...)}
	for _, d := range iv.Devices {
		s.hunting = s.hunting || d.Hunting
	}
	w.spans = append(w.spans, s)
	return nil
}

// Action writes an action as "time device from to reason measured set waited".
func (w *witness) Action(a *results.Action) error {
	d := w.e.Plan.Devices[a.Device]
	name := d.Name
	if d.Phase != "" {
		name += "." + d.Phase
	}
	w.times = append(w.times, a.Time)
	w.actions = append(w.actions, fmt.Sprintf("%.12g %s %d %d %s %.12g %.12g %.12g", seconds(a.Time), name, a.From, a.To, a.Reason, a.Measured, a.Set, a.Waited))
	return nil
}

func (w *witness) Step(s *results.Step) error {
	w.steps = append(w.steps, *s)
	if s.Status != results.Unsolved && w.end != s.End {
		w.t.Errorf("the step that ends at %v s has intervals up to %v s", seconds(s.End), seconds(w.end))
	}
	return nil
}

// walk runs a study.
func walk(t testing.TB, f fs.FS, o sim.Options) (*witness, *results.Outcome) {
	t.Helper()
	return attend(t, prepare(t, f, "", o))
}

func attend(t testing.TB, e *sim.Engine) (*witness, *results.Outcome) {
	t.Helper()
	w := &witness{t: t, e: e, meter: e.Meter()}
	out, err := e.Run(context.Background(), w)
	if err != nil {
		t.Fatal(err)
	}
	return w, out
}

// want compares the actions of a run with those of the pencil, a line each.
func (w *witness) want(lines string) {
	w.t.Helper()
	same(w.t, w.actions, lines)
}

func same(t testing.TB, got []string, lines string) {
	t.Helper()
	var want []string
	for l := range strings.Lines(lines) {
		if l = strings.TrimSpace(l); l != "" {
			want = append(want, l)
		}
	}
	for i := range max(len(want), len(got)) {
		switch {
		case i >= len(got):
			t.Errorf("action %d is missing: want %q", i, want[i])
		case i >= len(want):
			t.Errorf("action %d is too many: %q", i, got[i])
		case !agrees(got[i], want[i]):
			t.Errorf("action %d: got %q, want %q", i, got[i], want[i])
		}
	}
}

// agrees compares two lines word by word. What was measured, the last but two, is to
// agree to the decimals that the pencil wrote and to the 2e-6 V that a solution of
// 1e-8 p.u. leaves open of 120 V; of larger numbers, such as kvar, in proportion.
func agrees(got, want string) bool {
	g, w := strings.Fields(got), strings.Fields(want)
	m := len(w) - 3
	if len(g) != len(w) || m < 4 {
		return false
	}
	for i := range w {
		if i != m && g[i] != w[i] {
			return false
		}
	}
	a, errA := strconv.ParseFloat(g[m], 64)
	b, errB := strconv.ParseFloat(w[m], 64)
	tolerance := 2e-6 * math.Max(1, math.Abs(b)/120)
	if _, decimals, cut := strings.Cut(w[m], "."); cut {
		tolerance += 0.5 * math.Pow10(-len(decimals))
	}
	return errA == nil && errB == nil && math.Abs(a-b) <= tolerance
}

const oneRegulator = "regulator,from,to,phases,pt ratio,ct primary [A]\nR,S,X,A,60,100\n"

// settings is a row of the settings sheet: 120 V ± 1 V, 30 s, 5 s, and what is said.
func settings(columns, cells string) string {
	return "regulator,phase,set [V],bandwidth [V],delay [s],tap time [s]" + columns + "\nR,A,120,2,30,5" + cells + "\n"
}

// Delay and tap time. The source stands at 117 V, the band is 119 to 121 V.
//
//	 0 s  117: asks, due at 30
//	30 s  → 1: 117·1.00625 = 117.73125, the next at 35
//	35 s  → 2: 118.4625, the next at 40
//	40 s  → 3: 119.19375, inside
//
// In the second hour the source is at 121 V: 121·1.01875 = 123.26875.
//
//	3630 s  3 → 2: 121·1.0125 = 122.5125
//	3635 s  2 → 1: 121·1.00625 = 121.75625
//	3640 s  1 → 0: 121, on the edge: inside
func TestDelayAndTapTime(t *testing.T) {
	w, _ := walk(t, folder(inputs{step: time.Hour, steps: 3, volts: []float64{117, 121}}, "regulators.csv", oneRegulator,
		"regulator-settings.csv", settings("", "")), sim.Options{})
	w.want(`
		30 R.A 0 1 band low 117 119 30
		35 R.A 1 2 band low 117.731 119 5
		40 R.A 2 3 band low 118.462 119 5
		3630 R.A 3 2 band high 123.269 121 30
		3635 R.A 2 1 band high 122.513 121 5
		3640 R.A 1 0 band high 121.756 121 5`)
	// Settling until 40 s and from 3600 s to 3640 s; everything else is settled.
	settling := 0.0
	for _, s := range w.spans {
		if !s.settled {
			settling += s.to - s.from
		}
	}
	if settling != 80 {
		t.Errorf("%v s are settling, want 80", settling)
	}
	first := w.spans[:5]
	for i, want := range []span{{from: 0, to: 30, taps: []int{0}}, {from: 30, to: 35, taps: []int{1}}, {from: 35, to: 40, taps: []int{2}},
		{from: 40, to: 3600, taps: []int{3}, settled: true}, {from: 3600, to: 3630, taps: []int{3}}} {
		if g := first[i]; g.from != want.from || g.to != want.to || g.settled != want.settled || g.taps[0] != want.taps[0] {
			t.Errorf("interval %d: got %+v, want %+v", i, g, want)
		}
	}
	if n := []int{w.steps[0].Actions, w.steps[1].Actions, w.steps[2].Actions}; n[0] != 3 || n[1] != 3 || n[2] != 0 {
		t.Errorf("actions by step: %v, want 3, 3 and none", n)
	}
}

// Both timers, delay 100 s, steps of 60 s; 118 V asks, 120 V does not.
//
//	step from   0    60   120   180   240   300
//	volts     118   120   118   120   118   118
//
// restart: the clock starts at 240 s, due at 340 s.
// integrate: 60 s at 60, run down to 0 at 120; 60 at 180, 0 at 240; 100 at 340: the same.
// With 30 s of rest the sums differ: steps of 30 s
//
//	step from   0   30   60   90  120  150  180
//	volts     118  118  120  118  118  120  118 ...
//
// restart: the last request begins at 180, due at 280.
// integrate: 60 at 60, 30 at 90, 90 at 150, 60 at 180, 100 at 220.
// At 220 s: 118·1.00625 = 118.7375; 225 s: 118·1.0125 = 119.475, inside.
func TestBothTimers(t *testing.T) {
	sheet := func(timer string) string {
		return "regulator,phase,set [V],bandwidth [V],delay [s],tap time [s],timer\nR,A,120,2,100,5," + timer + "\n"
	}
	run := func(step time.Duration, timer string, volts ...float64) *witness {
		w, _ := walk(t, folder(inputs{step: step, steps: len(volts) + 10, volts: volts}, "regulators.csv", oneRegulator,
			"regulator-settings.csv", sheet(timer)), sim.Options{})
		return w
	}
	for _, timer := range []string{"restart", "integrate"} {
		run(60*time.Second, timer, 118, 120, 118, 120, 118).want(`
			340 R.A 0 1 band low 118 119 100
			345 R.A 1 2 band low 118.737 119 5`)
	}
	run(30*time.Second, "restart", 118, 118, 120, 118, 118, 120, 118).want(`
		280 R.A 0 1 band low 118 119 100
		285 R.A 1 2 band low 118.737 119 5`)
	run(30*time.Second, "integrate", 118, 118, 120, 118, 118, 120, 118).want(`
		220 R.A 0 1 band low 118 119 100
		225 R.A 1 2 band low 118.737 119 5`)
}

// A change of direction starts an integrating clock from zero: 60 s low, then high
// from 60 s on; due at 160 s, not before.
// 122 V: 122·0.99375 = 121.2375 at 160; 122·0.9875 = 120.475 at 165, inside.
func TestIntegratingTimerTurnsAround(t *testing.T) {
	w, _ := walk(t, folder(inputs{step: time.Minute, steps: 6, volts: []float64{118, 122}}, "regulators.csv", oneRegulator,
		"regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s],tap time [s],timer\nR,A,120,2,100,5,integrate\n"), sim.Options{})
	w.want(`
		160 R.A 0 -1 band high 122 121 100
		165 R.A -1 -2 band high 121.237 121 5`)
}

// Clocks carry over from step to step: a delay of 5,400 s with hourly steps acts in
// the middle of the second step, and one of 7,200 s belongs to the third, whose
// inputs are solved first: there the voltage is good, and nothing is done. 7,199 s
// still belong to the second.
func TestClocksCarryOver(t *testing.T) {
	run := func(delay string) *witness {
		w, _ := walk(t, folder(inputs{step: time.Hour, steps: 4, volts: []float64{118.5, 118.5, 120}}, "regulators.csv", oneRegulator,
			"regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s]\nR,A,120,2,"+delay+"\n"), sim.Options{})
		return w
	}
	run("5400").want("5400 R.A 0 1 band low 118.5 119 5400")
	run("7199").want("7199 R.A 0 1 band low 118.5 119 7199")
	w := run("7200")
	w.want("")
	// The request stood for two hours and is dropped by the third step's inputs.
	for i, s := range w.spans {
		if s.settled != (i >= 2) {
			t.Errorf("interval %d is settled: %v", i, s.settled)
		}
	}
}

// What is due at a step's end is done at the beginning of the next with that step's
// measurements: 118 V in the first hour asks at 3,600 s, where the source is at
// 118.5 V. 118.5·1.00625 = 119.240625, inside.
func TestDueAtTheEndOfAStep(t *testing.T) {
	w, _ := walk(t, folder(inputs{step: time.Hour, steps: 2, volts: []float64{118, 118.5}}, "regulators.csv", oneRegulator,
		"regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s]\nR,A,120,2,3600\n"), sim.Options{})
	w.want("3600 R.A 0 1 band low 118.5 119 3600")
	if w.steps[0].Actions != 0 || w.steps[1].Actions != 1 {
		t.Errorf("the action belongs to the second step, which has %d", w.steps[1].Actions)
	}
}

// The same constant inputs in steps of an hour, a minute and a second give the same
// actions at the same nanoseconds. Delays that no step divides: 47.123456789 s.
func TestStepLengthDoesNotMatter(t *testing.T) {
	run := func(step time.Duration, steps int) *witness {
		w, _ := walk(t, folder(inputs{step: step, steps: steps, volts: []float64{115}}, "regulators.csv", cascade,
			"regulator-settings.csv", `regulator,phase,set [V],bandwidth [V],delay [s],tap time [s],timer
R1,A,119,2,47.123456789,5.5,restart
R2,A,121.3,1.6,61.7,7.7,integrate
`, "sections.csv", cascadeSections, "constructions.csv", resistance, "loads.csv", cascadeLoad), sim.Options{})
		return w
	}
	hour := run(time.Hour, 1)
	minute := run(time.Minute, 60)
	second := run(time.Second, 3600)
	if len(hour.actions) < 8 {
		t.Errorf("only %d actions", len(hour.actions))
	}
	for _, w := range []*witness{minute, second} {
		same(t, w.actions, strings.Join(hour.actions, "\n"))
		for i := range min(len(w.times), len(hour.times)) {
			if w.times[i] != hour.times[i] {
				t.Errorf("action %d at %d ns, by the hour at %d ns", i, w.times[i], hour.times[i])
			}
		}
	}
	if hour.times[0] != began.UnixNano()+47_123_456_789 {
		t.Errorf("the first action stands at %d ns", hour.times[0]-began.UnixNano())
	}
}
