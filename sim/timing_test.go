package sim_test

import (
	"context"
	"testing"
	"time"

	"yearflow/sim"
	"yearflow/sim/demo"
	"yearflow/sim/results"
)

// timedRun runs two weeks of a case of the demonstration study.
func timedRun(t *testing.T, caseName string, o sim.Options) (timing sim.Timing, outcome *results.Outcome, steps int, wall time.Duration) {
	t.Helper()
	e := prepare(t, shortened(t, laid(demo.Study()), "2025-01-01", "2025-01-15"), caseName, o)
	began := time.Now()
	outcome, err := e.Run(context.Background(), &trail{})
	if err != nil {
		t.Fatal(err)
	}
	return e.Timing(), outcome, e.Steps(), time.Since(began)
}

// Every instant of a run is booked once, and what is counted does not depend on
// whether the time is taken.
func TestTimingBooksTheRun(t *testing.T) {
	timed, outcome, steps, wall := timedRun(t, "", sim.Options{Timing: true})
	for name, d := range map[string]time.Duration{"assembling": timed.Assembling, "solving": timed.Solving, "controls": timed.Controls, "statistics": timed.Statistics} {
		if d <= 0 {
			t.Errorf("%s took %v", name, d)
		}
	}
	if sum := timed.Assembling + timed.Solving + timed.Controls + timed.Statistics; sum > wall {
		t.Errorf("the parts took %v, the run %v", sum, wall)
	}
	total := 0
	for _, n := range outcome.Paths {
		total += n
	}
	if timed.Solutions != total || timed.Solutions < steps || timed.Iterations < steps {
		t.Errorf("%d solutions with %d iterations in %d steps; by path %v", timed.Solutions, timed.Iterations, steps, outcome.Paths)
	}
	if timed.Blocks == 0 || timed.LanesUsed == 0 || timed.LanesUsed > timed.LanesSolved || timed.LanesSolved > 8*timed.Blocks {
		t.Errorf("%d blocks of %d steps, %d taken", timed.Blocks, timed.LanesSolved, timed.LanesUsed)
	}
	if got := timed.LanesLost(); got != timed.LanesSolved-timed.LanesUsed {
		t.Errorf("%d lanes lost", got)
	}
	plain, again, _, _ := timedRun(t, "", sim.Options{})
	if plain.Assembling != 0 || plain.Solving != 0 || plain.Controls != 0 || plain.Statistics != 0 {
		t.Errorf("time was taken that nobody asked for: %+v", plain)
	}
	timed.Assembling, timed.Solving, timed.Controls, timed.Statistics = 0, 0, 0, 0
	if plain != timed {
		t.Errorf("counted %+v, with times %+v", plain, timed)
	}
	if s := again.Speed; s.LanesUsed != plain.LanesUsed || s.LanesSolved != plain.LanesSolved || s.Solutions != plain.Solutions || len(s.StepByStep) != 0 {
		t.Errorf("the record says %+v, counted %+v", s, plain)
	}
}

// Where steps are solved by themselves, the record says why and how many.
func TestStepsByThemselvesHaveAReason(t *testing.T) {
	for _, c := range []struct {
		caseName  string
		reference bool
		reason    string
	}{{"", true, "asked for"}, {"charging", false, "chargers"}} {
		timing, outcome, steps, _ := timedRun(t, c.caseName, sim.Options{Reference: c.reference})
		if s := outcome.Speed; s.StepByStep[c.reason] != steps || len(s.StepByStep) != 1 || s.Blocks != 0 || timing.LanesSolved != 0 {
			t.Errorf("case %q, reference %v: %+v, want %d steps for the reason %q", c.caseName, c.reference, s, steps, c.reason)
		}
	}
}
