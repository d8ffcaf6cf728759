package sim

import (
	"math"
	"math/cmplx"

	"yearflow/sim/network"
	"yearflow/sim/powerflow"
)

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
			i = into(e, present{e}, &a.meters[k])
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
