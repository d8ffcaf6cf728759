//go:build klu

package klu

import (
	"fmt"
	"math"
	"math/cmplx"

	"yearflow/sim/powerflow"
	"yearflow/sim/powerflow/vector"
)

// lanesWindow is the number of steps that a start curve is laid through, as in a run.
const lanesWindow = 60

// LaneRun solves the steps in lanes, blocks of vector.Lanes between instants that are
// lanesWindow apart, as a run does where nothing moves.
type LaneRun struct {
	solver       *powerflow.Solver
	source       []complex128
	lanes, scout *powerflow.Lanes
	curve        *powerflow.Curve
	steps        [][]complex128
	start        []complex128
	knot, last   *powerflow.Solution
}

var _ Stepper = (*LaneRun)(nil)

// NewLaneRun makes a contestant of a solver, at the devices set when it runs.
func NewLaneRun(s *powerflow.Solver, in *powerflow.Input) *LaneRun {
	return &LaneRun{solver: s, source: in.Source, knot: s.NewSolution(), last: s.NewSolution()}
}

// Name says what it is.
func (r *LaneRun) Name() string { return "lanes" }

// Prepare takes the steps.
func (r *LaneRun) Prepare(steps [][]complex128, start []complex128) {
	r.steps, r.start = steps, start
	largest := make([]float64, len(steps[0]))
	for _, power := range steps {
		for k, s := range power {
			largest[k] = max(largest[k], cmplx.Abs(s))
		}
	}
	r.lanes, r.scout = powerflow.NewLanes(r.solver, largest), powerflow.NewLanes(r.solver, largest)
	r.curve = r.scout.NewCurve()
}

// Run solves them.
func (r *LaneRun) Run(tolerance float64) (iterations int, err error) {
	tol := powerflow.Tolerance{Change: tolerance, Mismatch: math.Inf(1)}
	start := r.start
	for first := 0; first < len(r.steps); first += lanesWindow {
		end := min(first+lanesWindow, len(r.steps))
		middle := (first + end - 1) / 2
		for k, step := range [...]int{first, middle, end - 1} {
			r.scout.Input(k, &powerflow.Input{Source: r.source, Power: r.steps[step]})
		}
		r.scout.Start(7, start, nil)
		if r.scout.Solve(7, tol) != 7 {
			return 0, fmt.Errorf("lanes: no solution in steps %d to %d", first, end-1)
		}
		iterations += r.scout.Iterations[0]
		r.scout.Take(2, r.knot)
		start = r.knot.V
		r.scout.Fit(r.curve, float64(middle-first)/float64(end-1-first))
		for at := first; at < end; at += vector.Lanes {
			n := min(vector.Lanes, end-at)
			var when [vector.Lanes]float64
			for k := range n {
				r.lanes.Input(k, &powerflow.Input{Source: r.source, Power: r.steps[at+k]})
				when[k] = float64(at+k-first) / float64(end-1-first)
			}
			r.lanes.Predict(r.curve, &when)
			mask := uint8(1<<n - 1)
			if r.lanes.Solve(mask, tol) != mask {
				return 0, fmt.Errorf("lanes: no solution in steps %d to %d", at, at+n-1)
			}
			for k := range n {
				iterations += r.lanes.Iterations[k]
			}
			if at+n == len(r.steps) {
				r.lanes.Take(n-1, r.last)
			}
		}
	}
	return iterations, nil
}

// Voltages returns those of the last step.
func (r *LaneRun) Voltages(dst []complex128) { copy(dst, r.last.V) }
