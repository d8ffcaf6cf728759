package sim_test

import (
	"strings"
	"testing"

	"yearflow/sim"
	"yearflow/sim/demo"
	"yearflow/sim/results"
)

// The demonstration study: power is in balance in every interval of its year and of its
// week by the minute; every step has a solution that serves its loads,
// start-up comes to rest, and nothing hunts.
func TestDemoBalances(t *testing.T) {
	if testing.Short() {
		t.Skip("a year and a week")
	}
	for _, name := range []string{"", "minute-week"} {
		w, out := attend(t, prepare(t, demo.Study(), name, sim.Options{}))
		for _, s := range w.steps {
			if s.Status != results.OK {
				t.Errorf("case %q: the step at %d is %v at %s", name, s.Start, s.Status, s.Where)
			}
		}
		if len(out.StillMoving) > 0 || len(out.Hunting) > 0 {
			t.Errorf("case %q: moving %v, hunting %v", name, out.StillMoving, out.Hunting)
		}
		per := map[string]int{}
		for _, a := range w.actions {
			per[strings.Fields(a)[1]]++
		}
		t.Logf("case %q: %d steps, %d intervals, balance within %.1g, actions %v", name, len(w.steps), len(w.spans), w.worst, per)
	}
}
