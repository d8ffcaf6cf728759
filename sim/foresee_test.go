package sim_test

import (
	"context"
	"runtime"
	"testing"
	"time"

	"yearflow/sim"
	"yearflow/sim/results"
	"yearflow/sim/synthetic"
)

// deaf takes every step by itself and keeps nothing.
type deaf struct{ actions int }

func (*deaf) Interval(*results.Interval) error { return nil }
func (d *deaf) Action(*results.Action) error   { d.actions++; return nil }
func (*deaf) Step(*results.Step) error         { return nil }

// hours is a synthetic feeder by the hour.
func hours(t testing.TB, days int) *sim.Engine {
	o := synthetic.S()
	o.Step, o.Days, o.Inputs = time.Hour, days, synthetic.Hours
	study, err := synthetic.Study(o)
	if err != nil {
		t.Fatal(err)
	}
	return prepare(t, study, "", sim.Options{})
}

// By the hour nearly every solution comes from a lane that was solved ahead, though devices
// move more than once a step, and what is solved for nothing is little.
func TestForesightFillsTheLanes(t *testing.T) {
	e, d := hours(t, 60), &deaf{}
	if _, err := e.Run(context.Background(), d); err != nil {
		t.Fatal(err)
	}
	x := e.Timing()
	t.Logf("%d actions in %d steps; %d solutions, %d blocks, %d scouts, %d of %d lanes used", d.actions, e.Steps(), x.Solutions, x.Blocks, x.Scouts, x.LanesUsed, x.LanesSolved)
	if d.actions < e.Steps() {
		t.Errorf("only %d actions in %d steps: the test shows nothing", d.actions, e.Steps())
	}
	if x.LanesUsed < x.Solutions-10 {
		t.Errorf("%d of %d solutions come from lanes", x.LanesUsed, x.Solutions)
	}
	if x.LanesUsed < 6*x.Blocks {
		t.Errorf("%d lanes used of %d blocks", x.LanesUsed, x.Blocks)
	}
}

// A run that is twice as long allocates no more.
func TestForesightDoesNotAllocate(t *testing.T) {
	mallocs := func(days int) uint64 {
		e := hours(t, days)
		var m runtime.MemStats
		if _, err := e.Run(context.Background(), &deaf{}); err != nil { // finds its room
			t.Fatal(err)
		}
		runtime.ReadMemStats(&m)
		before := m.Mallocs
		if _, err := e.Run(context.Background(), &deaf{}); err != nil {
			t.Fatal(err)
		}
		runtime.ReadMemStats(&m)
		return m.Mallocs - before
	}
	// January alone: a month brings the shares of its loads.
	if short, long := mallocs(14), mallocs(28); long > short+40 {
		t.Errorf("14 days allocate %d times, 28 days %d times", short, long)
	}
}
