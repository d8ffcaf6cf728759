package sim

import (
	"context"
	"math"
	"math/cmplx"

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

// look finds the voltage of each branch by those of the place, without load: the source
// drives one phase after the other, and what a branch has of each is what the windings
// between make of it. The current that the branch draws goes the same way back.
func (a *allocation) look(e *Engine) {
	var heads [3][3]complex128 // by excitation and phase
	volts := make([][]complex128, 3)
	input := powerflow.Input{Source: make([]complex128, len(e.net.Fixed)), Power: make([]complex128, len(e.in.injections))}
	for x := range volts {
		for f := range e.net.Fixed {
			input.Source[f] = 0
			if int(e.net.Fixed[f].Phase) == x {
				input.Source[f] = complex(cmplx.Abs(e.in.fixed[f].volts), 0)
			}
		}
		volts[x] = make([]complex128, len(e.net.Unknowns))
		e.flow.NoLoad(volts[x], &input)
		for p, u := range a.head {
			if u != network.Ground {
				heads[x][p] = volts[x][u]
			}
		}
	}
	for _, k := range a.injections {
		j := &e.in.injections[k]
		var branch [3]complex128
		for x := range volts {
			branch[x] = volts[x][j.From]
			if j.To != network.Ground {
				branch[x] -= volts[x][j.To]
			}
		}
		mb := member{injection: k, turn: leastSquares(heads, branch)}
		most, sum := 0.0, 0.0
		for _, t := range mb.turn {
			most = math.Max(most, cmplx.Abs(t))
		}
		for p, t := range mb.turn {
			if v := cmplx.Abs(t); v > coupled*most {
				mb.mix[p] = v
				sum += v
			}
		}
		for p := range mb.mix {
			if sum > 0 {
				mb.mix[p] /= sum
			}
		}
		a.members = append(a.members, mb)
	}
}

// leastSquares solves m·t = b for t; columns of m that are nothing get nothing.
func leastSquares(m [3][3]complex128, b [3]complex128) (t [3]complex128) {
	var n [3][4]complex128
	size := 0.0
	for p := range 3 {
		for q := range 3 {
			for x := range 3 {
				n[p][q] += cmplx.Conj(m[x][p]) * m[x][q]
			}
		}
		for x := range 3 {
			n[p][3] += cmplx.Conj(m[x][p]) * b[x]
		}
		size = math.Max(size, real(n[p][p]))
	}
	for p := range 3 {
		if real(n[p][p]) <= 1e-9*size {
			n[p] = [4]complex128{}
			for q := range 3 {
				n[q][p] = 0
			}
			n[p][p] = complex(size, 0)
		}
		n[p][p] += complex(1e-12*size, 0)
	}
	if size == 0 {
		return t
	}
	for p := range 3 { // positive definite: no pivoting needed
		for q := range 3 {
			if q != p {
				f := n[q][p] / n[p][p]
				for c := p; c < 4; c++ {
					n[q][c] -= f * n[p][c]
				}
			}
		}
	}
	for p := range 3 {
		t[p] = n[p][3] / n[p][p]
	}
	return t
}

// takeInputs sets the solver's input to that of a step, and the targets of the
// allocation with it.
func (e *Engine) takeInputs(step int) {
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

// at is the power and the current of one phase of the place.
func (a *allocation) at(e *Engine, p int) (s, i complex128) {
	u := a.head[p]
	if u == network.Ground {
		return 0, 0
	}
	if len(a.meters) == 0 {
		i = e.state.Source[0][p]
	}
	for k := range a.meters {
		if a.meters[k].unknown == u {
			i = e.into(&a.meters[k])
		}
	}
	return e.state.V[u] * cmplx.Conj(i), i
}

// measure compares the solution at hand with what was measured.
func (a *allocation) measure(e *Engine) (met bool) {
	met = true
	for i := range a.equations {
		eq := &a.equations[i]
		a.solved[i] = 0
		active := 0.0
		for p := range 3 {
			if eq.phase >= 0 && eq.phase != p {
				continue
			}
			s, amps := a.at(e, p)
			active += real(s)
			switch eq.quantity {
			case realPower:
				a.solved[i] += real(s)
			case reactivePower:
				a.solved[i] += imag(s)
			default:
				a.solved[i] += cmplx.Abs(amps) / a.parts(eq)
			}
		}
		if eq.series < 0 {
			a.target[i] = active * a.spec.Tangent
		}
		a.off[i] = a.target[i] - a.solved[i]
		met = met && math.Abs(a.off[i]) <= allocationClose*a.peak[i]
	}
	return met
}

// parts is what a sum over phases is divided by: amperes of a total are the mean.
func (a *allocation) parts(eq *equation) float64 {
	if eq.phase < 0 && eq.quantity == current {
		return a.phases()
	}
	return 1
}

// slopes finds how each measured figure moves with each factor, at the solution at hand
// and without the losses' own change.
func (a *allocation) slopes(e *Engine) {
	n := len(a.equations)
	clear(a.slope)
	var power, amps [3]complex128
	for p := range 3 {
		power[p], amps[p] = a.at(e, p)
	}
	for k := range a.members {
		mb := &a.members[k]
		j := &e.in.injections[mb.injection]
		v := e.between(j.From, j.To)
		if v == 0 || mb.base == 0 {
			continue
		}
		drawn := j.Power(mb.base, cmplx.Abs(v)/j.Nominal)
		var c [3]complex128
		var sum complex128
		for p, u := range a.head {
			if u != network.Ground {
				c[p] = mb.turn[p] * e.state.V[u] / v
				sum += c[p]
			}
		}
		if cmplx.Abs(sum) < 0.1 {
			continue
		}
		own := a.ownReactive(mb)
		for u := range a.unknowns {
			reactive := a.unknowns[u].quantity == reactivePower
			if reactive && !own {
				continue
			}
			w := a.share(mb, u, reactive)
			if w == 0 {
				continue
			}
			d := drawn
			switch {
			case reactive:
				d = complex(0, imag(drawn))
			case own:
				d = complex(real(drawn), 0)
			}
			for i := range a.equations {
				a.slope[i*n+u] += w * a.effect(e, &a.equations[i], d, &c, sum, &amps)
			}
		}
	}
}

// effect is what a power that a load draws adds to a measured figure.
func (a *allocation) effect(e *Engine, eq *equation, d complex128, c *[3]complex128, sum complex128, amps *[3]complex128) (total float64) {
	for p, u := range a.head {
		if u == network.Ground || eq.phase >= 0 && eq.phase != p {
			continue
		}
		s := d * c[p] / sum
		switch {
		case eq.quantity == realPower:
			total += real(s)
		case eq.series < 0: // kvar less those of the power factor
			total += imag(s) - real(s)*a.spec.Tangent
		case eq.quantity == reactivePower:
			total += imag(s)
		default:
			i := cmplx.Conj(s / e.state.V[u])
			along := e.state.V[u]
			if size := cmplx.Abs(amps[p]); size > 1e-6*a.peakAmps() {
				along = amps[p]
			}
			total += real(i*cmplx.Conj(along)) / cmplx.Abs(along) / a.parts(eq)
		}
	}
	return total
}

func (a *allocation) peakAmps() (most float64) {
	for i := range a.equations {
		if a.equations[i].quantity == current {
			most = math.Max(most, a.peak[i])
		}
	}
	return most
}

// correct moves the factors by one step of Newton's method. A factor that would pass
// below nothing stops there, and its figure is not asked for. It reports whether any
// factor moved.
func (a *allocation) correct(e *Engine) (moved bool) {
	a.slopes(e)
	n := len(a.equations)
	for u := range a.active {
		// A phase that nothing is shared over has no figure to meet.
		a.active[u] = a.slope[u*n+u] > 1e-9*a.peak[u]
	}
	for range n + 1 {
		a.solveSmall()
		again := false
		for u := range a.factors {
			if a.active[u] && a.factors[u]+a.change[u] < 0 {
				a.active[u], again = false, true
				if a.factors[u] > 0 {
					moved = true
				}
				// What the others have to meet is without it.
				for i := range a.off {
					a.off[i] += a.slope[i*n+u] * a.factors[u]
				}
				a.factors[u] = 0
			}
		}
		if !again {
			break
		}
	}
	for u := range a.factors {
		if a.active[u] {
			a.factors[u] += a.change[u]
			moved = moved || math.Abs(a.change[u]) > 1e-7*a.factors[u]
		}
	}
	return moved
}

// solveSmall solves the active equations for the active factors by least squares with
// the smallest change, since loads across phases may leave some of it open.
func (a *allocation) solveSmall() {
	n := len(a.equations)
	clear(a.change)
	trace := 0.0
	for p := range n {
		a.rest[p] = 0
		for q := range n {
			sum := 0.0
			if a.active[p] && a.active[q] {
				for i := range n {
					if a.active[i] {
						sum += a.slope[i*n+p] * a.slope[i*n+q]
					}
				}
			}
			a.matrix[p*n+q] = sum
		}
		for i := range n {
			if a.active[i] && a.active[p] {
				a.rest[p] += a.slope[i*n+p] * a.off[i]
			}
		}
		trace += a.matrix[p*n+p]
	}
	if trace == 0 {
		return
	}
	for p := range n {
		a.matrix[p*n+p] += 1e-10 * trace
	}
	for p := range n {
		for q := range n {
			if q == p {
				continue
			}
			f := a.matrix[q*n+p] / a.matrix[p*n+p]
			for c := p; c < n; c++ {
				a.matrix[q*n+c] -= f * a.matrix[p*n+c]
			}
			a.rest[q] -= f * a.rest[p]
		}
	}
	for p := range n {
		if a.active[p] {
			a.change[p] = a.rest[p] / a.matrix[p*n+p]
		}
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

// allocationAtEnd tells how what was measured is met at the end of a step.
func (e *Engine) allocationAtEnd() *results.AllocationStep {
	a := e.allocation
	if a == nil || a.base != nil {
		return nil
	}
	if a.keep {
		a.kept = append(a.kept, a.factors...)
	}
	a.measure(e)
	out := &a.last
	out.Rows, out.Worst = out.Rows[:0], 0
	n := len(a.equations)
	sloped := false
	for i := range a.equations {
		off := math.Abs(a.off[i]) / a.peak[i]
		out.Worst = math.Max(out.Worst, off)
		floored := a.factors[i] == 0 && a.off[i] < -allocationClose*a.peak[i]
		if off <= allocationMet && !floored {
			continue
		}
		if !sloped {
			a.slopes(e)
			sloped = true
		}
		status := results.AllocationNotMet
		switch {
		case math.Abs(a.slope[i*n+i]) <= 1e-9*a.peak[i]:
			status = results.AllocationNoLoad
		case floored:
			status = results.AllocationNoRemainder
		case a.met:
			status = results.AllocationMoved
		}
		out.Rows = append(out.Rows, a.row(i, status))
	}
	return out
}

// row is a measured figure in kW, kvar or A.
func (a *allocation) row(i int, status results.AllocationStatus) results.AllocationRow {
	eq, n := &a.equations[i], len(a.equations)
	unit := 1000.0
	if eq.quantity == current {
		unit = 1
	}
	rest := a.off[i]
	for u := range a.factors {
		rest += a.slope[i*n+u] * a.factors[u]
	}
	r := results.AllocationRow{Quantity: eq.quantity.String(), Measured: a.target[i] / unit, Solved: a.solved[i] / unit, Remainder: rest / unit,
		Factors: [3]float64{math.NaN(), math.NaN(), math.NaN()}, Status: status}
	if eq.phase >= 0 {
		r.Phase = feeder.Phase(eq.phase).String()
	}
	for u := range a.unknowns {
		x := &a.unknowns[u]
		if x.quantity != eq.quantity {
			continue
		}
		for p, head := range a.head {
			if (x.phase == p || x.phase < 0) && head != network.Ground {
				r.Factors[p] = a.factors[u]
			}
		}
	}
	return r
}

// allocationUnsolved lists what was measured in a step without a solution.
func (e *Engine) allocationUnsolved() *results.AllocationStep {
	a := e.allocation
	if a == nil || a.base != nil {
		return nil
	}
	if a.keep {
		a.kept = append(a.kept, a.factors...)
	}
	out := &a.last
	out.Rows, out.Worst = out.Rows[:0], math.NaN()
	for i := range a.equations {
		r := a.row(i, results.AllocationUnsolved)
		r.Solved, r.Remainder = math.NaN(), math.NaN()
		if a.equations[i].series < 0 {
			r.Measured = math.NaN()
		}
		out.Rows = append(out.Rows, r)
	}
	return out
}

// takeBase gives a case the loads that were allocated without it: what is changed or
// connected in the case must not be made up for by the loads.
func (a *allocation) takeBase(e *Engine, base *Engine) error {
	if base == nil || base.allocation == nil || base.allocation.base != nil || !sameAxis(base, e) {
		st, err := feeder.Open(e.Study.FS, feeder.Base)
		if err != nil {
			return err
		}
		p := st.Settings.Allocation
		st.Settings.Period, st.Settings.Profiles, st.Settings.Run = e.Study.Settings.Period, e.Study.Settings.Profiles, e.Study.Settings.Run
		st.Settings.Weather, st.Settings.Limits.Allowance, st.Settings.Allocation = e.Study.Settings.Weather, 0, p
		if base, err = Prepare(st, Options{}); err != nil {
			return err
		}
	}
	a.base = base
	return nil
}

func sameAxis(x, y *Engine) bool {
	a, b := x.in.axis, y.in.axis
	return a.Start == b.Start && a.End == b.End && a.Step == b.Step
}

// baseOver walks the study without the case through the period and keeps its factors.
func (e *Engine) baseOver(ctx context.Context) error {
	a := e.allocation
	if a == nil || a.base == nil {
		return nil
	}
	b := a.base.allocation
	if want := e.in.axis.Steps() * len(a.factors); len(b.kept) != want {
		b.keep, b.kept = true, make([]float64, 0, want)
		_, err := a.base.Run(ctx)
		if b.keep = false; err != nil {
			b.kept = nil
			return err
		}
	}
	a.kept, a.first = b.kept, 0
	return nil
}

// baseAt solves the study without the case at one step and takes its factors.
func (e *Engine) baseAt(step int) error {
	a := e.allocation
	if a == nil || a.base == nil {
		return nil
	}
	if _, err := a.base.Solve(step, Positions{}); err != nil {
		return err
	}
	a.kept, a.first = append([]float64(nil), a.base.allocation.factors...), step
	return nil
}
