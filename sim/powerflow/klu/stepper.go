//go:build klu

package klu

import (
	"fmt"
	"math"

	"yearflow/sim/powerflow"
)

// Stepper is a contestant: a way to solve steps one after another with one state of the
// devices.
type Stepper interface {
	Name() string
	// Prepare takes the steps: what each injection of the solver draws at nominal voltage,
	// VA, and the voltages by Network.Unknowns that the first step starts from. It is
	// not timed; it may keep both, and must not change them.
	Prepare(steps [][]complex128, start []complex128)
	// Run solves the steps that were prepared last, all over again, each until no
	// voltage moves by more than the tolerance, p.u. It returns the iterations, summed
	// over the steps.
	Run(tolerance float64) (iterations int, err error)
	// Voltages sets dst to the voltages of the last step, by Network.Unknowns.
	Voltages(dst []complex128)
}

// Reference is the solver of package powerflow as a contestant.
type Reference struct {
	solver *powerflow.Solver
	in     powerflow.Input
	out    *powerflow.Solution
	steps  [][]complex128
	start  []complex128
	last   []complex128
}

var _ Stepper = (*Reference)(nil)

// NewReference makes a contestant of a solver, at the devices set when it runs.
func NewReference(s *powerflow.Solver, in *powerflow.Input) *Reference {
	return &Reference{solver: s, in: powerflow.Input{Source: in.Source}, out: s.NewSolution(), last: make([]complex128, len(s.Net.Unknowns))}
}

// Name says what it is.
func (r *Reference) Name() string { return "reference" }

// Prepare takes the steps.
func (r *Reference) Prepare(steps [][]complex128, start []complex128) {
	r.steps, r.start = steps, start
}

// Run solves them. The mismatch is let go: the yardstick looks at voltages alone.
func (r *Reference) Run(tolerance float64) (iterations int, err error) {
	copy(r.last, r.start)
	tol := powerflow.Tolerance{Change: tolerance, Mismatch: math.Inf(1)}
	for i, power := range r.steps {
		r.in.Power = power
		if !r.solver.Solve(&r.in, r.last, tol, r.out) {
			return iterations, fmt.Errorf("reference: step %d has no solution", i)
		}
		iterations += r.out.Iterations
		copy(r.last, r.out.V)
	}
	return iterations, nil
}

// Voltages returns those of the last step.
func (r *Reference) Voltages(dst []complex128) { copy(dst, r.last) }
