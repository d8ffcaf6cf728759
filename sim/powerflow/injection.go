package powerflow

import (
	"math"
	"math/cmplx"

	"yearflow/sim/network"
)

// Corner is the voltage, in p.u. of an injection's nominal, below which constant
// power and constant current turn into constant impedance.
const Corner = 0.7

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
	Generator  bool // feeds power in; its voltage makes no step low
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
	g := cmplx.Conj(j.slope(s, m)) / cv
	h := -cmplx.Conj(j.Power(s, m)) / (cv * cv)
	mr, mi := real(v)/(a*j.Nominal), imag(v)/(a*j.Nominal)
	return [4]float64{
		real(g)*mr + real(h), real(g)*mi + imag(h),
		imag(g)*mr + imag(h), imag(g)*mi - real(h),
	}
}
