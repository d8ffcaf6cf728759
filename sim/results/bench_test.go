package results

import (
	"fmt"
	"math/rand/v2"
	"path/filepath"
	"testing"
	"time"

	"yearflow/sim/feeder"
	"yearflow/sim/network"
)

// long makes a three-phase line of the given number of nodes behind the tiny feeder's
// n1, so that writing has something to do.
func long(t testing.TB, nodes int, end time.Time, step time.Duration) *tiny {
	start := time.Date(2025, 1, 1, 0, 0, 0, 0, time.UTC)
	x := newTiny(t, start, end, step)
	m := x.plan.Model
	from := 1
	for k := range nodes {
		m.Nodes = append(m.Nodes, feeder.Node{Name: fmt.Sprintf("z%03d", k), Phases: abc, Nominal: 12.47, Grounded: true, Customers: [feeder.PhaseCount]float64{3, 3, 3}, HasLoad: [feeder.PhaseCount]bool{true, true, true}})
		to := len(m.Nodes) - 1
		m.Sections = append(m.Sections, m.Sections[0])
		s := &m.Sections[len(m.Sections)-1]
		s.Name, s.From, s.To, s.LengthKM = fmt.Sprintf("s%03d", k), from, to, 0.1
		m.Loads = append(m.Loads, feeder.Load{Name: fmt.Sprintf("l%03d", k), Node: to, Phases: abc, KW: 10, Customers: 3})
		from = to
	}
	net, err := network.Build(m)
	if err != nil {
		t.Fatal(err)
	}
	x.net, x.plan.Network = net, net
	return x
}

func TestAStepAllocatesNothing(t *testing.T) {
	start := time.Date(2025, 1, 1, 0, 0, 0, 0, time.UTC)
	x := long(t, 20, start.AddDate(1, 0, 0), time.Hour)
	x.plan.Settings.Run.Flows = []string{"line1", "tx"}
	x.plan.Settings.Limits.Allowance = 2
	w, err := create(filepath.Join(t.TempDir(), "base"), x.plan, 0) // without the store of exact percentiles
	if err != nil {
		t.Fatal(err)
	}
	defer w.Abort()
	states := [2]*State{}
	r := rand.New(rand.NewPCG(1, 1))
	for i := range states {
		states[i] = x.state(randomLevels(r), [3]int{i, 0, 0}, true)
	}
	at, k := start.UnixNano(), 0
	iv, st, act := &Interval{Devices: make([]DeviceState, len(x.plan.Devices))}, &Step{Solver: "newton"}, &Action{Reason: "band low", Measured: 118.123456, Set: 119, Waited: 30}
	do := func() {
		iv.Start, iv.End, iv.State, iv.Settled = at, at+hour/4, states[k%2], false
		if err := w.Interval(iv); err != nil {
			t.Fatal(err)
		}
		act.Time, act.From, act.To = iv.End, k%2, 1-k%2
		if err := w.Action(act); err != nil {
			t.Fatal(err)
		}
		iv.Start, iv.End, iv.State, iv.Settled = at+hour/4, at+hour, states[1-k%2], true
		if err := w.Interval(iv); err != nil {
			t.Fatal(err)
		}
		st.Start, st.End, st.Last, st.Actions = at, at+hour, iv.State, 1
		if err := w.Step(st); err != nil {
			t.Fatal(err)
		}
		at += hour
		k++
	}
	for range 100 {
		do() // histograms and buffers find their size
	}
	// A new month costs a row of monthly.csv, now and then.
	if n := testing.AllocsPerRun(400, do); n != 0 {
		t.Errorf("a step allocates %g times, want 0", n)
	}
}

// BenchmarkYear writes 8,760 steps of 283 places with all logs, folder included.
func BenchmarkYear(b *testing.B) {
	start := time.Date(2025, 1, 1, 0, 0, 0, 0, time.UTC)
	x := long(b, 89, start.AddDate(1, 0, 0), time.Hour)
	x.plan.Settings.Run.Flows = []string{"line1", "tx", "reg"}
	r := rand.New(rand.NewPCG(1, 1))
	states := make([]*State, 24)
	for i := range states {
		states[i] = x.state(randomLevels(r), [3]int{i - 12, 0, 3}, true)
	}
	s := constant(x, func(step int) *State { return states[step*7%24] })
	b.ReportAllocs()
	for b.Loop() {
		s.write(b, x)
	}
	b.ReportMetric(float64(len(NewMeter(x.net).Points)), "places")
}

func BenchmarkMeter(b *testing.B) {
	x := long(b, 89, time.Date(2025, 1, 2, 0, 0, 0, 0, time.UTC), time.Hour)
	m := NewMeter(x.net)
	r := m.NewReading()
	s := x.state(nil, [3]int{1, 2, 3}, true)
	b.ReportAllocs()
	for b.Loop() {
		m.Read(s, r)
	}
}
