//go:build klu

package klu

import (
	"fmt"
	"math"
	"math/cmplx"

	"yearflow/sim/powerflow"
	"yearflow/sim/powerflow/vector"
)

// LaneRun solves the steps in lanes as a run does where nothing moves and inputs change
// with every step: blocks of vector.Lanes that start from the last step of the block
// before, powers from the shapes that they follow.
type LaneRun struct {
	solver *powerflow.Solver
	source []complex128
	power  []complex128 // VA at shape 1, by injection
	shape  []int

	lanes    *powerflow.Lanes
	kept     *powerflow.Curve
	steps    int
	multiple [][]float64 // by shape and step
	rows     []float64   // by shape and lane
	start    []complex128
	last     *powerflow.Solution
}

var _ Stepper = (*LaneRun)(nil)

// NewLaneRun makes a contestant of a solver, at the devices set when it runs, whose
// injections draw power, VA, times the shape of the given number.
func NewLaneRun(s *powerflow.Solver, source, power []complex128, shape []int) *LaneRun {
	return &LaneRun{solver: s, source: source, power: power, shape: shape, last: s.NewSolution()}
}

// Name says what it is.
func (r *LaneRun) Name() string { return "lanes" }

// Prepare takes the steps.
func (r *LaneRun) Prepare(steps [][]complex128, start []complex128) {
	r.steps, r.start = len(steps), start
	shapes := 0
	for _, s := range r.shape {
		shapes = max(shapes, s+1)
	}
	r.multiple, r.rows = make([][]float64, shapes), make([]float64, shapes*vector.Lanes)
	for i := range r.multiple {
		r.multiple[i] = make([]float64, len(steps))
	}
	largest := make([]float64, len(r.power))
	for i, power := range steps {
		for k, s := range power {
			largest[k] = max(largest[k], cmplx.Abs(s))
			if x := r.power[k]; x != 0 {
				r.multiple[r.shape[k]][i] = cmplx.Abs(s) / cmplx.Abs(x)
			}
		}
	}
	r.lanes = powerflow.NewLanes(r.solver, largest)
	r.lanes.Follow(r.shape, r.shape, r.power)
	for lane := range vector.Lanes {
		for f, z := range r.source {
			r.lanes.Source(lane, f, z)
		}
	}
	r.kept = r.lanes.NewCurve()
}

// Run solves them.
func (r *LaneRun) Run(tolerance float64) (iterations int, err error) {
	tol := powerflow.Tolerance{Change: tolerance, Mismatch: math.Inf(1)}
	r.lanes.StartAll(r.start, nil)
	for at := 0; at < r.steps; at += vector.Lanes {
		n := min(vector.Lanes, r.steps-at)
		for i, m := range r.multiple {
			copy(r.rows[i*vector.Lanes:i*vector.Lanes+n], m[at:])
		}
		r.lanes.Drive(r.rows)
		mask := uint8(1<<n - 1)
		if r.lanes.Solve(mask, tol) != mask {
			return 0, fmt.Errorf("lanes: no solution in steps %d to %d", at, at+n-1)
		}
		for k := range n {
			iterations += r.lanes.Iterations[k]
		}
		if at+n == r.steps {
			r.lanes.Take(n-1, r.last)
			break
		}
		r.lanes.Block.Keep(r.kept, vector.Lanes-1)
		r.lanes.StartAt(r.kept)
	}
	return iterations, nil
}

// Voltages returns those of the last step.
func (r *LaneRun) Voltages(dst []complex128) { copy(dst, r.last.V) }
