package sim_test

import (
	"context"
	"fmt"
	"io/fs"
	"math"
	"math/cmplx"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"

	"yearflow/sim"
	"yearflow/sim/demo"
	"yearflow/sim/powerflow/vector"
	"yearflow/sim/results"
	"yearflow/sim/synthetic"
)

// trail keeps what a run does to devices, and the voltages at the end of every step.
type trail struct {
	actions []results.Action
	spans   []int64
	status  []results.Status
	v       [][]complex128
}

func (r *trail) Action(a *results.Action) error {
	r.actions = append(r.actions, *a)
	return nil
}

func (r *trail) Interval(iv *results.Interval) error {
	r.spans = append(r.spans, iv.Start, iv.End)
	return nil
}

func (r *trail) Step(s *results.Step) error {
	r.status = append(r.status, s.Status)
	var v []complex128
	if s.Last != nil {
		v = append(v, s.Last.V...)
	}
	r.v = append(r.v, v)
	return nil
}

// quietTrail takes quiet steps as they were solved, but every seventh step whole.
type quietTrail struct {
	trail
	steps, quiet int
	energy       [2]float64 // of loads and generators, W·ns of quiet steps
}

func (r *quietTrail) Step(s *results.Step) error {
	r.steps++
	return r.trail.Step(s)
}

func (r *quietTrail) Whole(start, end int64) bool { return start/(end-start)%7 == 0 }

func (r *quietTrail) Quiet(q *results.Quiet) error {
	for i := range q.Count {
		k := (q.First + i) % vector.Lanes
		start := q.Start + int64(i)*q.Step
		r.spans = append(r.spans, start, start+q.Step)
		r.status = append(r.status, results.OK)
		v := make([]complex128, len(q.State.Slot))
		for u, at := range q.State.Slot {
			v[u] = vector.At(q.State.V, int(at), k)
		}
		r.v = append(r.v, v)
		r.quiet++
		r.energy[0] += q.State.Load[k] * float64(q.Step)
		r.energy[1] += q.State.Generation[k] * float64(q.Step)
	}
	return nil
}

// sameRun runs a study step by step and as fast as it goes: all operations equal, to the
// nanosecond, and all voltages within 1e-7 p.u.
func sameRun(t *testing.T, study fs.FS, caseName string) (slow, fast *results.Outcome) {
	t.Helper()
	want, got := &trail{}, &quietTrail{}
	var outcomes [2]*results.Outcome
	var e *sim.Engine
	for i, r := range []sim.Recorder{want, got} {
		e = prepare(t, study, caseName, sim.Options{Reference: i == 0})
		var err error
		if outcomes[i], err = e.Run(context.Background(), r); err != nil {
			t.Fatal(err)
		}
	}
	if len(want.actions) != len(got.actions) || len(want.spans) != len(got.spans) || len(want.status) != len(got.status) {
		t.Errorf("%d operations, %d ends of intervals and %d steps; step by step %d, %d and %d",
			len(got.actions), len(got.spans), len(got.status), len(want.actions), len(want.spans), len(want.status))
	}
	for k := range min(len(want.actions), len(got.actions)) {
		a, b := want.actions[k], got.actions[k]
		if a.Time != b.Time || a.Device != b.Device || a.From != b.From || a.To != b.To || a.Reason != b.Reason {
			t.Fatalf("operation %d is %+v, step by step %+v", k, b, a)
		}
	}
	for k := range min(len(want.spans), len(got.spans)) {
		if want.spans[k] != got.spans[k] {
			t.Fatalf("end %d of an interval is %d, step by step %d", k, got.spans[k], want.spans[k])
		}
	}
	worst := 0.0
	for k := range min(len(want.status), len(got.status)) {
		if want.status[k] != got.status[k] {
			t.Fatalf("step %d is %v, step by step %v", k, got.status[k], want.status[k])
		}
		for u := range want.v[k] {
			worst = max(worst, cmplx.Abs(want.v[k][u]-got.v[k][u])/e.Plan.Network.Unknowns[u].Nominal)
		}
	}
	if !(worst <= 1e-7) {
		t.Errorf("voltages are %g p.u. apart", worst)
	}
	if diff := cmp.Diff(outcomes[0].CoarseAt, outcomes[1].CoarseAt); diff != "" {
		t.Errorf("too coarse at (-step by step +ahead):\n%s", diff)
	}
	for i, p := range outcomes[0].Plants {
		if q := outcomes[1].Plants[i]; math.Abs(p.Delivered-q.Delivered) > 1e-6*math.Abs(p.Delivered) || math.Abs(p.Curtailed-q.Curtailed) > 1e-6*(1+math.Abs(p.Curtailed)) {
			t.Errorf("plant %+v, step by step %+v", q, p)
		}
	}
	t.Logf("%d steps, %d of them quiet, %d operations, voltages within %.2g p.u.; paths %v", len(got.status), got.quiet, len(got.actions), worst, outcomes[1].Paths)
	return outcomes[0], outcomes[1]
}

// What is solved ahead gives what is solved step by step, on the demonstration study and
// its cases.
func TestSolvingAheadChangesNothingOfTheDemo(t *testing.T) {
	until := "2025-03-01"
	if testing.Short() {
		until = "2025-01-15"
	}
	for _, name := range []string{"", "lower-band", "no-compensation", "slow-first", "smart-inverters", "minute-week"} {
		t.Run("case "+name, func(t *testing.T) {
			study := laid(demo.Study())
			if name != "minute-week" {
				study = shortened(t, study, "2025-01-01", until)
			}
			_, fast := sameRun(t, study, name)
			if name == "" && fast.Paths["fixed point in lanes"] == 0 {
				t.Error("nothing is solved in lanes")
			}
		})
	}
}

// The same on seeded feeders of any connection, for inputs of seconds, minutes and hours.
func TestSolvingAheadChangesNothingOfSyntheticFeeders(t *testing.T) {
	seeds := 6
	if testing.Short() {
		seeds = 1
	}
	for seed := range uint64(seeds) {
		for _, c := range []synthetic.Options{
			{Step: time.Hour, Days: 20, Inputs: synthetic.Hours},
			{Step: time.Minute, Days: 1, Inputs: synthetic.HeldMinutes},
			{Step: 10 * time.Second, Days: 1, Inputs: synthetic.Minutes},
		} {
			c.Buses, c.Seed = 100, seed
			t.Run(fmt.Sprintf("seed %d, %v", seed, c.Step), func(t *testing.T) {
				study, err := synthetic.Study(c)
				if err != nil {
					t.Fatal(err)
				}
				sameRun(t, study, "")
			})
		}
	}
}

// Steps whose inputs and devices have not changed are not solved again.
func TestHeldInputsAreSolvedOnce(t *testing.T) {
	study, err := synthetic.Study(synthetic.Options{Buses: 100, Seed: 2, Step: 15 * time.Second, Days: 1, Inputs: synthetic.Hours})
	if err != nil {
		t.Fatal(err)
	}
	sameRun(t, study, "")
	e := prepare(t, study, "", sim.Options{})
	if _, err := e.Run(context.Background(), &quietTrail{}); err != nil {
		t.Fatal(err)
	}
	if n := e.Timing(); n.Iterations > n.Solutions/5 {
		t.Errorf("%d iterations for %d solutions, most of inputs that stand still", n.Iterations, n.Solutions)
	}
}
