package results

import (
	"fmt"
	"math/rand/v2"
	"path/filepath"
	"slices"
	"strconv"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"

	"yearflow/sim/powerflow/vector"
)

// gatherer is a recorder that takes whole steps side by side.
type gatherer interface {
	quieter
	Gathers() bool
	Gathered(*Gathered) error
}

// playGathered hands over whole steps side by side where it may, now and then in quiet rows
// and now and then one by one, and returns the number of intervals that went in lanes.
func (s *script) playGathered(t testing.TB, w gatherer, rnd *rand.Rand) (gathered int) {
	t.Helper()
	s = &script{steps: slices.Clone(s.steps)} // a step that goes on is cut
	var slot []int32
	for i := 0; i < len(s.steps); {
		if rnd.IntN(6) == 0 {
			n := min(1+rnd.IntN(12), len(s.steps)-i)
			one := script{steps: s.steps[i : i+n]}
			if rnd.IntN(2) == 0 {
				one.playQuiet(t, w, rnd)
			} else {
				one.playTo(t, w)
			}
			i += n
			continue
		}
		g := &Gathered{}
		var states []*State
		for ; i < len(s.steps); i++ {
			st := &s.steps[i]
			if st.Status != OK || len(states) == vector.Lanes || rnd.IntN(30) == 0 {
				break
			}
			n := min(len(st.intervals), vector.Lanes-len(states))
			if n > 1 && rnd.IntN(8) == 0 {
				n-- // the rest may come one by one
			}
			x := GatheredStep{Step: st.Step, Intervals: n, More: n < len(st.intervals)}
			x.Last = nil
			for _, a := range st.actions[:min(n, len(st.actions))] {
				x.Moves = append(x.Moves, *a)
			}
			g.Steps = append(g.Steps, x)
			for _, iv := range st.intervals[:n] {
				k := len(states)
				g.Start[k], g.End[k], g.Devices[k], g.Taps[k], g.Closed[k] = iv.Start, iv.End, iv.Devices, iv.State.Taps, iv.State.Closed
				if iv.Settled {
					g.Settled |= 1 << k
				}
				states = append(states, iv.State)
			}
			if x.More {
				s.steps[i].intervals, s.steps[i].actions = st.intervals[n:], st.actions[len(x.Moves):]
				break
			}
		}
		if len(states) == 0 {
			one := script{steps: s.steps[i : i+1]}
			one.playTo(t, w)
			i++
			continue
		}
		g.Count = len(states)
		g.State = abreast(states)
		if rnd.IntN(20) > 0 && slot != nil {
			g.State.Slot = slot // the same array: the lists are kept
		}
		slot = g.State.Slot
		if err := w.Gathered(g); err != nil {
			t.Fatal(err)
		}
		gathered += g.Count
	}
	return gathered
}

// abreast packs states of any positions; what stands in the lanes beyond must enter nothing.
func abreast(states []*State) *Lanes {
	l := lanesOf(states, 0, complex(-123, 4567))
	l.Taps, l.Closed = nil, nil
	l.Turned = vector.Make(len(l.V) / vector.Width)
	for u := range len(l.V) / vector.Width {
		for k := range vector.Lanes {
			v := vector.At(l.V, u, k)
			vector.Put(l.Turned, u, k, complex(imag(v), -real(v)))
		}
	}
	for k, s := range states {
		for _, va := range s.Load {
			l.LoadVar[k] += imag(va)
		}
		for _, va := range s.Generation {
			l.GenerationVar[k] += imag(va)
		}
	}
	return l
}

// mixed makes a run of which nothing is like the step before: settled and settling
// intervals of any length, operations, low and unsolved steps, and now and then calm ones.
func mixed(x *tiny, rnd *rand.Rand) *script {
	s, quiet := chance(x, rnd), calm(x, rnd)
	for i := range s.steps {
		st := &s.steps[i]
		for _, iv := range st.intervals {
			iv.Settled = rnd.IntN(3) > 0
		}
		if i/20%3 == 0 && quiet.steps[i].Solver == "in lanes" {
			s.steps[i] = quiet.steps[i]
		}
	}
	return s
}

func TestGatheredStepsAreSteps(t *testing.T) {
	for seed := range uint64(36) {
		t.Run(fmt.Sprint(seed), func(t *testing.T) {
			x := quietFeeder(t, seed)
			switch seed % 4 {
			case 1:
				x.plan.Settings.Run.Log = 0 // a row each step
			case 2:
				x.plan.Settings.Run.Log, x.plan.Settings.Run.Voltages = 0, "none"
			}
			rnd := rand.New(rand.NewPCG(seed, 23))
			s := mixed(x, rnd)
			exact := []int{0, exactValues, 60 * 13}[seed%3] // histograms, all voltages, first these and then those
			var folders [2]string
			var writers [2]*Writer
			for i := range folders {
				folders[i] = filepath.Join(t.TempDir(), "base")
				w, err := create(folders[i], x.plan, exact)
				if err != nil {
					t.Fatal(err)
				}
				if seed%3 == 2 {
					w.stats.dist = &distribution{points: len(w.meter.Points), limit: exact}
				}
				writers[i] = w
			}
			if !writers[0].Gathers() {
				t.Fatal("the writer does not gather")
			}
			s.playTo(t, writers[0])
			if n := s.playGathered(t, writers[1], rnd); n < x.plan.Settings.Period.Steps()/2 {
				t.Fatalf("%d intervals of %d steps were gathered", n, x.plan.Settings.Period.Steps())
			}
			for i, w := range writers {
				if err := w.Finish(&Outcome{Taps: []int{0, 0, 0}, Closed: []bool{true}}, RunInfo{Version: "test"}); err != nil {
					t.Fatal(i, err)
				}
			}
			sameStatistics(t, writers[0].stats, writers[1].stats)
			if d := cmp.Diff(writers[0].duty, writers[1].duty, cmp.AllowUnexported(duty{}, deviceTime{})); d != "" {
				t.Error("duty:", d)
			}
			if a, b := writers[0].balance, writers[1].balance; a.checked != b.checked || b.worst > 1e-9 || !(b.worst > 0) {
				t.Errorf("balance %+v, step by step %+v", b, a)
			}
			sameFolders(t, folders[0], folders[1])
		})
	}
}

func TestGatheredStepsAreStepsToTotalsAndTally(t *testing.T) {
	for seed := range uint64(12) {
		x := quietFeeder(t, seed)
		rnd := rand.New(rand.NewPCG(seed, 24))
		s := mixed(x, rnd)
		a, b := NewTotals(x.plan), NewTotals(x.plan)
		for range 2 { // the second run begins with Reset
			a.Reset()
			b.Reset()
			s.playTo(t, a)
			s.playGathered(t, b, rnd)
			p, q := a.Sums(), b.Sums()
			if d := cmp.Diff(p, q, about); d != "" || p.LowestPU != q.LowestPU || p.HighestPU != q.HighestPU || p.PeakKW != q.PeakKW {
				t.Fatalf("seed %d: %s", seed, d)
			}
		}
		one, two := NewTally(x.plan), NewTally(x.plan)
		s.playTo(t, one)
		s.playGathered(t, two, rnd)
		p, err1 := one.Summary()
		q, err2 := two.Summary()
		if err1 != nil || err2 != nil {
			t.Fatal(err1, err2)
		}
		for i := range p {
			u, _ := strconv.ParseFloat(p[i].Value, 64)
			v, _ := strconv.ParseFloat(q[i].Value, 64)
			if p[i] != q[i] && !(u-v <= 1.1e-5*u && v-u <= 1.1e-5*u) {
				t.Errorf("seed %d: %v, step by step %v", seed, q[i], p[i])
			}
		}
		if d := cmp.Diff(one.Loading(), two.Loading(), exactly); d != "" {
			t.Errorf("seed %d: loading: %s", seed, d)
		}
		if d := cmp.Diff(one.Points(), two.Points(), cmp.AllowUnexported(Point{}), about); d != "" {
			t.Errorf("seed %d: %s", seed, d)
		}
		if d := cmp.Diff(one.Operations(), two.Operations()); d != "" {
			t.Errorf("seed %d: operations: %s", seed, d)
		}
	}
}

// A failed log ends the gathering: the writer returns the same error ever after.
func TestGatheredStepsFailWithTheirLog(t *testing.T) {
	x := quietFeeder(t, 1)
	x.plan.Settings.Run.Log = 0
	w, err := Create(filepath.Join(t.TempDir(), "base"), x.plan)
	if err != nil {
		t.Fatal(err)
	}
	w.steps.out.Close()
	rnd := rand.New(rand.NewPCG(1, 25))
	state := x.state(randomLevels(rnd), [3]int{}, true)
	g := &Gathered{State: abreast([]*State{state}), Count: 1, Settled: 1, Steps: []GatheredStep{{Intervals: 1}}}
	g.Taps[0], g.Closed[0] = state.Taps, state.Closed
	step := x.plan.Settings.Period.Step
	for k := int64(0); err == nil && k < 5000; k++ {
		g.Start[0] = x.plan.Settings.Period.Start + k*step
		g.End[0] = g.Start[0] + step
		g.Steps[0].Start, g.Steps[0].End = g.Start[0], g.End[0]
		err = w.Gathered(g)
	}
	if err == nil {
		t.Fatal("the writer does not notice that its log is gone")
	}
	if again := w.Gathered(g); again != err {
		t.Errorf("%v, then %v", err, again)
	}
	if err := w.Abort(); err != nil {
		t.Error(err)
	}
}

func TestWhatCannotBeGathered(t *testing.T) {
	x := quietFeeder(t, 0)
	step := func(n int, s Status) GatheredStep {
		return GatheredStep{Step: Step{Status: s}, Intervals: n}
	}
	lasting := [vector.Lanes]int64{1, 1, 1, 1, 1, 1, 1, 1}
	for i, g := range []*Gathered{
		{Count: 0},
		{Count: 2, End: lasting, Steps: []GatheredStep{step(1, OK)}},
		{Count: 1, End: lasting, Steps: []GatheredStep{step(1, Low)}},
		{Count: 1, Steps: []GatheredStep{step(1, OK)}},
		{Count: 1, End: lasting, Steps: []GatheredStep{step(1, OK), step(0, OK)}},
		{Count: 2, End: lasting, Steps: []GatheredStep{{Intervals: 1, More: true}, step(1, OK)}},
		{Count: 9, End: lasting, Steps: []GatheredStep{step(9, OK)}},
	} {
		if g.check() == nil {
			t.Errorf("%d: %+v can be gathered", i, g)
		}
	}
	x.plan.Settings.Limits.Allowance, x.plan.LoadPeak = 4, []float64{100, 20, 30}
	if NewTotals(x.plan).Gathers() || NewTally(x.plan).Gathers() {
		t.Error("with a drop to the meters each load's power is asked for")
	}
}

func TestGatheredStepsAllocateNothing(t *testing.T) {
	start := time.Date(2025, 1, 1, 0, 0, 0, 0, time.UTC)
	x := long(t, 20, start.AddDate(1, 0, 0), time.Second)
	x.plan.Settings.Run.Voltages = "none"
	w, err := create(filepath.Join(t.TempDir(), "base"), x.plan, 0) // without the store of exact percentiles
	if err != nil {
		t.Fatal(err)
	}
	defer w.Abort()
	rnd := rand.New(rand.NewPCG(1, 1))
	var lanes []*Lanes
	var states []*State
	for range 4 {
		states = states[:0]
		for k := range vector.Lanes {
			states = append(states, x.state(randomLevels(rnd), [3]int{k, 0, 0}, k%2 == 0))
		}
		lanes = append(lanes, abreast(states))
		lanes[len(lanes)-1].Slot = lanes[0].Slot
	}
	totals := NewTotals(x.plan)
	totals.ok = slices.Grow(totals.ok, 1<<16)
	g := &Gathered{Count: vector.Lanes, Settled: 0x94, Steps: make([]GatheredStep, 3)}
	for k := range vector.Lanes {
		g.Devices[k], g.Taps[k], g.Closed[k] = make([]DeviceState, len(x.plan.Devices)), states[k].Taps, states[k].Closed
	}
	for i := range g.Steps {
		g.Steps[i].Intervals = 2 + i%2 + i/2
	}
	at, n := start.UnixNano(), 0
	do := func() {
		g.State = lanes[n%len(lanes)]
		n++
		k := 0
		for i := range g.Steps {
			s := &g.Steps[i]
			s.Start, s.End = at, at+int64(time.Second)
			for p := range s.Intervals {
				g.Start[k], g.End[k] = at+int64(p)*1000, at+int64(p+1)*1000
				k++
			}
			g.End[k-1] = s.End
			at = s.End
		}
		if err := w.Gathered(g); err != nil {
			t.Fatal(err)
		}
		if err := totals.Gathered(g); err != nil {
			t.Fatal(err)
		}
	}
	for range 100 {
		do() // histograms find their size
	}
	if n := testing.AllocsPerRun(400, do); n != 0 {
		t.Errorf("gathered steps allocate %g times, want 0", n)
	}
}
