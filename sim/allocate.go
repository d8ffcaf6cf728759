package sim

import (
	"math"

	"yearflow/devices"
	"yearflow/sim/feeder"
	"yearflow/sim/network"
	"yearflow/sim/powerflow"
	"yearflow/sim/results"
	"yearflow/sim/tables"
)

// The shares of a measured total are found inside the step: the power flow is solved,
// the measured figures are compared with the solved ones, the factors of the loads are
// corrected by Newton's method on the few measured figures, and again. Losses,
// capacitors, generation and metered loads are so in the comparison without being
// named. The factors hold while the controls act, so that a control sees what its own
// action does; once they are at rest, or a battery is full, the factors are corrected again.
const (
	// allocationClose is how near a measured figure is met, in shares of its peak;
	// allocationMet is when a step counts as met (0.1 %).
	allocationClose = 1e-4
	allocationMet   = 1e-3
	// allocationSolutions bounds the solutions of one correction, allocationAgain the
	// corrections of one step after what moved in it.
	allocationSolutions = 12
	allocationAgain     = 8
	// coupled is the share of the largest below which a phase takes no part in a load
	// (coupling of lines, not of windings).
	coupled = 0.02
)

// allocation shares a measured total over loads.
type allocation struct {
	*allocated
	members  []member
	unknowns []equation     // factors, each beside the equation of its place
	head     []int32        // unknown of the network by phase of the place; −1
	meters   []watchedPhase // empty: at the source
	nominal  float64        // V line to neutral at the place

	peak    []float64 // by equation: W, var or A
	target  []float64
	solved  []float64
	off     []float64 // target − solved
	slope   []float64 // equations × unknowns
	factors []float64
	active  []bool
	change  []float64
	matrix  []float64 // work space of the small system
	rest    []float64

	base  *Engine   // whose factors hold; nil: the engine's own
	kept  []float64 // factors by step from first on: the base's, or kept for cases
	first int
	keep  bool
	met   bool // when it was found last
	last  results.AllocationStep
}

// member is an injection that takes a share.
type member struct {
	injection int
	base      complex128    // VA before the factors, of the step
	mix       [3]float64    // by phase of the place: how its factor is made of theirs
	turn      [3]complex128 // voltage of the branch per volt of each phase of the place
}

// prepareAllocation finds how each load is seen at the place that was measured.
func (e *Engine) prepareAllocation(o Options) error {
	in := e.in
	if in.shared.spec == nil {
		return nil
	}
	var faults tables.Faults
	spec := in.shared.spec
	m := e.net.Model
	a := &allocation{allocated: &in.shared, head: []int32{network.Ground, network.Ground, network.Ground}}
	e.allocation = a
	node := m.Sources[0].Node
	if spec.Watched != nil {
		a.meters = e.watch(spec.Watched, nil)
		for _, w := range a.meters {
			u := &e.net.Unknowns[w.unknown]
			node = u.Node
			if u.Phase <= feeder.C {
				a.head[u.Phase] = w.unknown
			}
		}
	} else {
		copy(a.head, e.net.At[node][:3])
	}
	a.nominal = m.Nodes[node].Nominal * 1000 / sqrt3
	if len(in.shared.injections) == 0 {
		faults.Add(spec.At, "allocation: no load behind %q takes a share: none stands there, or all are metered by a profile in [kW]", spec.Place)
	}
	a.look(e)
	for i := range a.equations {
		eq := &a.equations[i]
		a.unknowns = append(a.unknowns, *eq)
		peak := 0.0
		if eq.series >= 0 && eq.quantity != reactivePower {
			if peak = in.sampler.Max(eq.series); peak <= 0 {
				faults.Add(spec.At, "allocation: the measured %s (phase %s) is never above 0: it counts into the feeder", eq.quantity, a.phaseName(eq))
			}
		}
		if eq.quantity == realPower {
			peak *= 1000
		}
		a.peak = append(a.peak, peak)
	}
	for i := range a.equations {
		if a.equations[i].quantity == reactivePower {
			a.peak[i] = a.apparent(a.equations[i].phase)
		}
	}
	n := len(a.equations)
	for _, s := range []*[]float64{&a.target, &a.solved, &a.off, &a.factors, &a.change, &a.rest} {
		*s = make([]float64, n)
	}
	a.slope, a.matrix, a.active = make([]float64, n*n), make([]float64, n*n), make([]bool, n)
	if len(faults) > 0 {
		return faults.Err()
	}
	if !spec.Own && e.Study.Case != feeder.Base && e.Study.Case != "" {
		return a.takeBase(e, o.Base)
	}
	e.Plan.Allocation = true
	return nil
}

// phases is the number of phases of the place.
func (a *allocation) phases() (n float64) {
	for _, u := range a.head {
		if u != network.Ground {
			n++
		}
	}
	return n
}

// apparent is the peak, VA, beside which kvar are judged: that of the kW or A of the
// same phase.
func (a *allocation) apparent(phase int) float64 {
	total, n := 0.0, 0.0
	for i := range a.equations {
		eq := &a.equations[i]
		va := a.peak[i]
		switch {
		case eq.quantity == reactivePower:
			continue
		case eq.quantity == current && eq.phase < 0:
			va *= a.nominal * a.phases()
		case eq.quantity == current:
			va *= a.nominal
		}
		if eq.phase == phase {
			return va
		}
		total += va
		n++
	}
	if phase < 0 {
		return total // of the phases
	}
	return total / a.phases() // of the total
}

func (a *allocation) phaseName(eq *equation) string {
	if eq.phase < 0 {
		return "total"
	}
	return feeder.Phase(eq.phase).String()
}

// takeInputs sets the solver's input to that of a step, and the targets of the
// allocation with it.
func (e *Engine) takeInputs(step int) {
	e.step = step
	e.inputOf(step, &e.input)
}

// inputOf is a step's input, where loads are shared out as far as that goes without a
// solution: without losses.
func (e *Engine) inputOf(step int, out *powerflow.Input) {
	e.in.at(step, out)
	if e.allocation != nil {
		e.allocation.begin(e.in, step, out)
	}
}

// begin takes a step's weights and measured figures, and a first guess of the factors.
func (a *allocation) begin(in *inputs, step int, input *powerflow.Input) {
	for i := range a.members {
		a.members[i].base = input.Power[a.members[i].injection]
	}
	a.met = false
	if a.base != nil && a.kept != nil {
		copy(a.factors, a.kept[(step-a.first)*len(a.factors):])
		a.apply(input)
		return
	}
	want, weights, fixed := 0.0, 0.0, 0.0
	for i := range a.equations {
		eq := &a.equations[i]
		switch {
		case eq.quantity == realPower:
			a.target[i] = 1000 * in.values[eq.series]
			want += a.target[i]
		case eq.quantity == current:
			a.target[i] = in.values[eq.series]
			va := a.target[i] * a.nominal * 0.95
			if eq.phase < 0 {
				va *= a.phases()
			}
			want += va
		case eq.series >= 0:
			a.target[i] = 1000 * in.values[eq.series]
		}
	}
	for i := range a.members {
		weights += real(a.members[i].base)
	}
	for k, s := range input.Power {
		if l := in.loadOf[k]; in.generator[k] >= 0 || l >= 0 && (a.spec.Behind[l]) {
			fixed += real(s)
		}
	}
	fixed -= weights
	guess := 0.0
	if weights > 0 {
		guess = math.Max(0, (want-fixed)/weights)
	}
	for i := range a.factors {
		a.factors[i] = guess
	}
	a.apply(input)
}

// factor is what a load's power is multiplied by.
func (a *allocation) factor(mb *member, reactive bool) (sum float64) {
	for u := range a.unknowns {
		sum += a.share(mb, u, reactive) * a.factors[u]
	}
	return sum
}

// share is how much of a factor goes into that of a load.
func (a *allocation) share(mb *member, u int, reactive bool) float64 {
	x := &a.unknowns[u]
	switch {
	case (x.quantity == reactivePower) != reactive:
		return 0
	case x.phase < 0:
		return 1
	}
	return mb.mix[x.phase]
}

// ownReactive tells that a load's kvar take a factor of their own: where kvar were
// measured, and the load's are lagging. Others keep the power factor.
func (a *allocation) ownReactive(mb *member) bool {
	return imag(mb.base) > 0 && a.sharesReactive()
}

// apply puts the shares into the solver's input.
func (a *allocation) apply(input *powerflow.Input) {
	for i := range a.members {
		mb := &a.members[i]
		p := a.factor(mb, false)
		q := p
		if a.ownReactive(mb) {
			q = a.factor(mb, true)
		}
		input.Power[mb.injection] = complex(real(mb.base)*p, imag(mb.base)*q)
	}
}

// allocate solves an instant with the loads shared out, so that the solution meets what
// was measured.
func (e *Engine) allocate(now devices.Time) (bool, error) {
	a := e.allocation
	if a == nil || a.base != nil {
		return e.solveExact(now)
	}
	for solution := 1; ; solution++ {
		a.apply(&e.input)
		ok, err := e.solveExact(now)
		if !ok || err != nil {
			return ok, err
		}
		if a.measure(e) || solution == allocationSolutions || !a.correct(e) {
			a.measure(e)
			a.met = a.within(allocationMet)
			return true, nil
		}
	}
}

// solveWith solves an instant, with new factors or with those at hand.
func (e *Engine) solveWith(allocate bool, now devices.Time) (bool, error) {
	if allocate {
		return e.allocate(now)
	}
	return e.solveExact(now)
}

// within tells whether every measured figure is met to a share of its peak.
func (a *allocation) within(share float64) bool {
	for i, off := range a.off {
		if !(math.Abs(off) <= share*a.peak[i]) {
			return false
		}
	}
	return true
}

// stale tells whether what was measured is no longer met, after actions.
func (e *Engine) stale() bool {
	a := e.allocation
	return a != nil && a.base == nil && !a.measure(e)
}
