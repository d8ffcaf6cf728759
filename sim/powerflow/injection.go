package powerflow

import (
	"math"
	"math/cmplx"

	"yearflow/sim/network"
)

// Corner is the voltage, in p.u. of an injection's nominal, below which constant
// power and constant current turn into constant impedance.
const Corner = 0.7

// Law is a power that depends on voltage in another way than a load's, such as an
// inverter's functions. It must be continuous and must not keep anything.
type Law interface {
	// Draws returns the power that a group draws in all, VA, and its slope by voltage,
	// VA per p.u., where s is given for the instant and v is the mean voltage of the
	// group's branches in p.u., at least Corner.
	Draws(s complex128, v float64) (power, slope complex128)
}

// Group is several injections that act as one by a law: each draws the same share of
// what the law says for their mean voltage. The s of its first member is the law's.
type Group struct {
	Law     Law
	Members []int32 // into the solver's injections
}

// Injection is a branch that draws power between two voltages, as a load does:
//
//	P(v) = P₀·(Z·v² + I·v + C),  v = |V|/Nominal ≥ 0.7
//	P(v) = P(0.7)·(v/0.7)²,      v < 0.7
//
// and Q alike with its own shares. P₀ + jQ₀ is given with each instant; a
// generator has it negative.
type Injection struct {
	From, To int32   // unknowns of the network; To may be network.Ground
	Nominal  float64 // V across the branch
	// Shares of constant impedance, current and power, of P and of Q.
	PZ, PI, PC float64
	QZ, QI, QC float64
	// Group is one more than the position of the injection's group in Groups; zero: it
	// stands alone and follows its shares.
	Group     int32
	Generator bool // feeds power in; its voltage makes no step low
	// Size is the nominal apparent power, VA: the measure of a mismatch.
	Size float64
}

// Bent tells whether the injection has a part that cannot be served as asked below
// the corner.
func (j *Injection) Bent() bool { return j.PI != 0 || j.PC != 0 || j.QI != 0 || j.QC != 0 }

// across returns the voltage over the branch, V.
func (j *Injection) across(v []complex128) complex128 {
	if j.To == network.Ground {
		return v[j.From]
	}
	return v[j.From] - v[j.To]
}

// Power returns the power, VA, that the injection draws at v p.u. where it is to
// draw s at 1 p.u.
func (j *Injection) Power(s complex128, v float64) complex128 {
	if v >= Corner {
		return complex(real(s)*((j.PZ*v+j.PI)*v+j.PC), imag(s)*((j.QZ*v+j.QI)*v+j.QC))
	}
	k := v / Corner
	k *= k
	const c = Corner
	return complex(real(s)*k*((j.PZ*c+j.PI)*c+j.PC), imag(s)*k*((j.QZ*c+j.QI)*c+j.QC))
}

// slope returns dPower/dv.
func (j *Injection) slope(s complex128, v float64) complex128 {
	if v >= Corner {
		return complex(real(s)*(2*j.PZ*v+j.PI), imag(s)*(2*j.QZ*v+j.QI))
	}
	if v == 0 {
		return 0
	}
	return 2 * j.Power(s, v) / complex(v, 0)
}

// current returns the current, A, that flows from From to To.
func (j *Injection) current(s, v complex128) complex128 {
	if s == 0 {
		return 0
	}
	m2 := real(v)*real(v) + imag(v)*imag(v)
	if m2 == 0 {
		return 0
	}
	var p complex128
	if j.PC == 1 && j.QC == 1 && m2 >= Corner*Corner*j.Nominal*j.Nominal {
		p = s
	} else {
		p = j.Power(s, math.Sqrt(m2)/j.Nominal)
	}
	// conj(p/v) = conj(p)·v/|v|²
	return complex(real(p), -imag(p)) * v * complex(1/m2, 0)
}

// derivative returns d(current)/dV as the real 2 × 2 matrix, row by row, that maps
// (Re dV, Im dV) to (Re dI, Im dI).
//
//	I = conj(S(m))/conj(V),  dI = conj(S′)·dm/conj(V) − conj(S)·conj(dV)/conj(V)²
//	dm = Re(conj(V)·dV)/(|V|·Nominal)
func (j *Injection) derivative(s, v complex128) [4]float64 {
	a := cmplx.Abs(v)
	if s == 0 || a == 0 {
		return [4]float64{}
	}
	m := a / j.Nominal
	cv := cmplx.Conj(v)
	return jacobian(cmplx.Conj(j.slope(s, m))/cv, -cmplx.Conj(j.Power(s, m))/(cv*cv), v, j.Nominal)
}

// jacobian returns the real 2 × 2 matrix, row by row, of dI = g·dm + h·conj(dV) with
// m = |V|/nominal.
func jacobian(g, h, v complex128, nominal float64) [4]float64 {
	a := cmplx.Abs(v) * nominal
	mr, mi := real(v)/a, imag(v)/a
	return [4]float64{
		real(g)*mr + real(h), real(g)*mi + imag(h),
		imag(g)*mr + imag(h), imag(g)*mi - real(h),
	}
}

// draws returns the power of a group in all and its slope, at voltages v. Below the
// corner it turns into constant impedance as a load does.
func (g *Group) draws(js []Injection, power, v []complex128) (s, slope complex128, mean float64) {
	for _, k := range g.Members {
		mean += cmplx.Abs(js[k].across(v)) / js[k].Nominal
	}
	mean /= float64(len(g.Members))
	given := power[g.Members[0]]
	if mean >= Corner {
		s, slope = g.Law.Draws(given, mean)
		return s, slope, mean
	}
	s, _ = g.Law.Draws(given, Corner)
	k := mean / Corner
	s *= complex(k*k, 0)
	if mean > 0 {
		slope = s * complex(2/mean, 0)
	}
	return s, slope, mean
}

// derivative returns d(current of member i)/dV of member j as derivative does. Each
// member draws the share S(m̄)/n of the group, m̄ the mean of the members' voltages:
//
//	I = conj(S/n)/conj(V),  dI = conj(S′/n)·dm̄/conj(V) − conj(S/n)·conj(dV)/conj(V)²
func (g *Group) derivative(js []Injection, i, j int32, share, slope complex128, v []complex128) [4]float64 {
	x, y := js[i].across(v), js[j].across(v)
	if x == 0 || y == 0 {
		return [4]float64{}
	}
	n := complex(float64(len(g.Members)), 0)
	cx := cmplx.Conj(x)
	var own complex128
	if i == j {
		own = -cmplx.Conj(share) / (cx * cx)
	}
	return jacobian(cmplx.Conj(slope/n)/cx/n, own, y, js[j].Nominal)
}
