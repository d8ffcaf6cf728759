package synthetic_test

import (
	"bytes"
	"io/fs"
	"math"
	"strings"
	"testing"
	"time"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
	"yearflow/sim/synthetic"
)

// open returns the circuit of a study of the options.
func open(tb testing.TB, o synthetic.Options) (fs.FS, *synthetic.Circuit) {
	tb.Helper()
	study, err := synthetic.Study(o)
	if err != nil {
		tb.Fatal(err)
	}
	st, err := feeder.Open(study, "")
	if err != nil {
		tb.Fatal(err)
	}
	c, err := synthetic.NewCircuit(st)
	if err != nil {
		tb.Fatal(err)
	}
	return study, c
}

// The sizes are those of the measurements, and the mix has every element that a fast
// path must know.
func TestSizesAndMix(t *testing.T) {
	for _, size := range []struct {
		name              string
		o                 synthetic.Options
		buses, nodePhases int
		depth             int
	}{
		{"S", synthetic.S(), 131, 283, 39},
		{"M", synthetic.M(), 1001, 2203, 109},
		{"L", synthetic.L(), 10001, 22003, 331},
	} {
		t.Run(size.name, func(t *testing.T) {
			if testing.Short() && size.name == "L" {
				t.Skip("a large feeder")
			}
			_, c := open(t, size.o)
			m := c.Net.Model
			phases := 0
			for _, n := range m.Nodes {
				phases += len(n.Phases)
			}
			if len(m.Nodes) != size.buses || math.Abs(float64(phases)/float64(size.nodePhases)-1) > 0.05 {
				t.Errorf("%d buses with %d node.phases, want %d and about %d", len(m.Nodes), phases, size.buses, size.nodePhases)
			}
			if d := depth(m); math.Abs(float64(d)/float64(size.depth)-1) > 0.1 {
				t.Errorf("depth %d, want about %d", d, size.depth)
			}
			kinds := map[string]int{}
			for _, x := range m.Transformers {
				kinds[x.Connection]++
			}
			delta, zip, loaded := 0, 0, 0
			for _, l := range m.Loads {
				loaded += max(len(l.Phases), len(l.Pairs))
				delta += len(l.Pairs)
				if l.ZIP.PZ == 0.4 && l.ZIP.PI == 0.2 && l.ZIP.PP == 0.4 {
					zip++
				}
			}
			for _, want := range []string{"Dyn1", "YNyn0", "center-tap", "1ph"} {
				if kinds[want] == 0 {
					t.Errorf("no service transformer is %s", want)
				}
			}
			if part := float64(loaded) / float64(phases); part < 0.6 || part > 0.8 {
				t.Errorf("%.2f of the node.phases have a load, want 0.7", part)
			}
			if part := float64(zip) / float64(len(m.Loads)); part < 0.2 || part > 0.4 {
				t.Errorf("%.2f of the loads follow the voltage, want 0.3", part)
			}
			if delta < loaded/40 {
				t.Errorf("%d of %d loads stand between phases", delta, loaded)
			}
			charged := 0
			for _, k := range m.Constructions {
				if k.Matrices.B[0][0] > 0 && (k.Kind == "overhead" || k.Kind == "concentric neutral") {
					charged++
				}
			}
			if charged != len(m.Constructions) || charged < 6 {
				t.Errorf("%d of %d constructions have geometry and charging", charged, len(m.Constructions))
			}
			follow := 0
			for _, k := range m.Capacitors {
				if k.Control.Control == feeder.CapacitorVoltage {
					follow++
				}
			}
			if len(m.Regulators) != 3 || len(m.Capacitors) != 4 || follow != 2 {
				t.Errorf("%d regulators, %d capacitors of which %d follow the voltage, want 3, 4, 2", len(m.Regulators), len(m.Capacitors), follow)
			}
			for _, r := range m.Regulators {
				if s := r.Units[0].Settings; len(r.Units) != 3 || r.Ganged || s.Delay < 30 || s.Delay > 60 {
					t.Errorf("regulator %s: %d units, ganged %t, delay %g s", r.Name, len(r.Units), r.Ganged, s.Delay)
				}
			}
			out := c.Solver.NewSolution()
			if !c.Settle(c.Level(0.95), out) {
				t.Fatal("no solution at peak")
			}
			if low := c.Lowest(out.V); low < 0.93 || low > 0.95 {
				t.Errorf("lowest voltage at peak %.4f p.u., want 0.93 to 0.95", low)
			}
			mega := 0.0
			for _, va := range c.Power {
				mega += real(va) / 1e6
			}
			t.Logf("%d buses, %d node.phases, depth %d, %d loads, %.2f MW", len(m.Nodes), phases, depth(m), len(m.Loads), mega)
		})
	}
}

// depth is the number of links of the longest way from the source.
func depth(m *feeder.Model) int {
	next := map[int][]int{}
	for _, s := range m.Sections {
		next[s.From] = append(next[s.From], s.To)
	}
	for _, r := range m.Regulators {
		next[r.From] = append(next[r.From], r.To)
	}
	for _, x := range m.Transformers {
		next[x.From] = append(next[x.From], x.To)
	}
	level, d := []int{m.Sources[0].Node}, 0
	for ; len(level) > 0; d++ {
		var below []int
		for _, n := range level {
			below = append(below, next[n]...)
		}
		level = below
	}
	return d - 1
}

// Other seeds and sizes are feeders too, with nothing to complain about.
func TestEverySeedIsAFeeder(t *testing.T) {
	for seed := range uint64(12) {
		o := synthetic.Options{Buses: 80 + 40*int(seed), Seed: seed + 2}
		_, c := open(t, o)
		out := c.Solver.NewSolution()
		if !c.Settle(c.Level(0.95), out) {
			t.Fatalf("seed %d: no solution at peak", o.Seed)
		}
		if low := c.Lowest(out.V); low < 0.93 || low > 0.95 {
			t.Errorf("seed %d, %d buses: lowest voltage at peak %.4f p.u., want 0.93 to 0.95", o.Seed, o.Buses, low)
		}
	}
}

// A day of the small feeder runs, at peak as the circuit says, and its devices move.
func TestTheEngineRunsIt(t *testing.T) {
	study, c := open(t, synthetic.S())
	st, err := feeder.Open(study, "")
	if err != nil {
		t.Fatal(err)
	}
	for _, w := range st.Warnings {
		t.Log(w)
	}
	e, err := sim.Prepare(st, sim.Options{})
	if err != nil {
		t.Fatal(err)
	}
	if e.Steps() != 1440 {
		t.Errorf("%d steps, want those of a day by the minute", e.Steps())
	}
	lowest, moved := math.Inf(1), map[string]bool{}
	var before string
	for step := 0; step < e.Steps(); step += 60 {
		x, err := e.Solve(step, sim.Positions{})
		if err != nil || x.State == nil || len(x.StillMoving) > 0 {
			t.Fatalf("step %d: %v, %+v", step, err, x)
		}
		for u, v := range x.State.V {
			if n := &c.Net.Unknowns[u]; n.Node >= 0 {
				lowest = min(lowest, math.Hypot(real(v), imag(v))/n.Nominal)
			}
		}
		positions := strings.Join(positionsOf(x.State), " ")
		if before != "" && positions != before {
			moved[positions] = true
		}
		before = positions
	}
	if lowest < 0.9 || lowest > 1 {
		t.Errorf("lowest voltage of the day %.4f p.u.", lowest)
	}
	if len(moved) < 8 {
		t.Errorf("%d different positions in a day: the controls have nothing to do", len(moved))
	}
}

func positionsOf(s *results.State) (out []string) {
	for _, t := range s.Taps {
		out = append(out, string(rune('a'+16+t)))
	}
	for _, c := range s.Closed {
		out = append(out, map[bool]string{true: "|", false: "/"}[c])
	}
	return out
}

// The same options give the same bytes, another seed gives others.
func TestSameSeedSameBytes(t *testing.T) {
	content := func(o synthetic.Options) map[string][]byte {
		study, err := synthetic.Study(o)
		if err != nil {
			t.Fatal(err)
		}
		out := map[string][]byte{}
		err = fs.WalkDir(study, ".", func(path string, d fs.DirEntry, err error) error {
			if err == nil && !d.IsDir() {
				out[path], err = fs.ReadFile(study, path)
			}
			return err
		})
		if err != nil {
			t.Fatal(err)
		}
		return out
	}
	o := synthetic.S()
	one, two := content(o), content(o)
	o.Seed = 2
	other := content(o)
	for name, b := range one {
		if !bytes.Equal(b, two[name]) {
			t.Errorf("%s differs from run to run", name)
		}
	}
	for _, name := range []string{"feeder/sections.csv", "feeder/loads.csv", "profiles/shapes.csv"} {
		if bytes.Equal(one[name], other[name]) {
			t.Errorf("%s is the same with another seed", name)
		}
	}
}

// Every kind of input opens, covers the period by repeating where it is shorter, and
// has the noise it should.
func TestInputsCoverThePeriod(t *testing.T) {
	for _, x := range []struct {
		inputs     synthetic.Inputs
		step       time.Duration
		days, rows int
	}{
		{synthetic.Minutes, time.Second, 14, 7 * 1440},
		{synthetic.HeldMinutes, time.Minute, 3, 3 * 1440},
		{synthetic.Hours, time.Hour, 365, 8760},
		{synthetic.Seconds, time.Second, 2, 86400},
	} {
		o := synthetic.Options{Buses: 80, Seed: 3, Inputs: x.inputs, Step: x.step, Days: x.days}
		rows, err := synthetic.Multipliers(o)
		if err != nil || len(rows) != x.rows {
			t.Fatalf("%v: %d rows and error %v, want %d", x.inputs, len(rows), err, x.rows)
		}
		for _, row := range rows {
			for k, v := range row {
				if !(v > 0.2 && v < 1.6) {
					t.Fatalf("%v: shape %d stands at %g", x.inputs, k, v)
				}
			}
		}
		study, c := open(t, o)
		e, err := sim.Prepare(c.Study, sim.Options{})
		if err != nil {
			t.Fatalf("%v: %v", x.inputs, err)
		}
		if want := x.days * int(24*time.Hour/x.step); e.Steps() != want {
			t.Errorf("%v: %d steps, want %d", x.inputs, e.Steps(), want)
		}
		if text, _ := fs.ReadFile(study, "study.toml"); x.inputs == synthetic.Hours && bytes.Contains(text, []byte("repeat = \"day\"")) {
			t.Errorf("%v: repeats what covers the period", x.inputs)
		}
	}
}

// The noise has the deviation and the decay that the package states.
func TestNoise(t *testing.T) {
	rows, err := synthetic.Multipliers(synthetic.Options{Buses: 80, Seed: 5, Days: 7})
	if err != nil {
		t.Fatal(err)
	}
	// From minute to minute the curve moves little: a difference over one minute is
	// noise. E(Δ²) = 2·σ²·(1 − e^(−1/10))·curve².
	var sum float64
	n := 0
	for i := 1; i < len(rows); i++ {
		for k, v := range rows[i] {
			d := 2 * (v - rows[i-1][k]) / (v + rows[i-1][k])
			sum += d * d
			n++
		}
	}
	got, want := math.Sqrt(sum/float64(n)), 0.06*math.Sqrt(2*(1-math.Exp(-0.1)))
	if math.Abs(got/want-1) > 0.05 {
		t.Errorf("a shape moves by %.4f from minute to minute, want %.4f", got, want)
	}
}

func TestOptionsThatMakeNoFeeder(t *testing.T) {
	for _, o := range []synthetic.Options{
		{}, {Buses: 79}, {Buses: 131, TwoPhase: 60, SinglePhase: 60}, {Buses: 131, Step: 7 * time.Second},
		{Buses: 131, Step: time.Millisecond}, {Buses: 131, Days: -1}, {Buses: 131, Inputs: 9}, {Buses: 131, ProfileDays: 2},
		{Buses: 131, Start: time.Date(2025, 1, 1, 1, 0, 0, 0, time.UTC)},
	} {
		if _, err := synthetic.Study(o); err == nil {
			t.Errorf("%+v: no error", o)
		}
	}
	if _, err := synthetic.Sized("XL"); err == nil {
		t.Error("size XL: no error")
	}
}
