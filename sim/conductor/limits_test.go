package conductor

import (
	"math"
	"math/cmplx"
	"testing"
)

// A neutral that hardly conducts is as good as none, for the series part.
func TestNeutralWithoutConductance(t *testing.T) {
	with := kersting41(t)
	with.NeutralConductor.R = 1e9
	without := with
	without.Neutral = nil
	a, b := must(t)(with.Overhead()), must(t)(without.Overhead())
	for i := range 3 {
		for j := range 3 {
			if d := cmplx.Abs(a.Z[i][j] - b.Z[i][j]); d > 1e-8 {
				t.Errorf("z[%d][%d] differs by %g ohm/km", i, j, d)
			}
			// The neutral still shields: more charge to ground.
			if i == j && a.B[i][j] <= b.B[i][j] {
				t.Errorf("b[%d][%d] = %g with a neutral, %g without", i, j, a.B[i][j], b.B[i][j])
			}
		}
	}
}

// Without a neutral the earth enters as ½·ω·μ0/2π·ln ρ in every reactance and not in
// the resistances; z1 is free of it.
func TestEarthResistivity(t *testing.T) {
	l := kersting41(t)
	l.Neutral = nil
	a := must(t)(l.Overhead())
	l.EarthResistivity *= 100
	b := must(t)(l.Overhead())
	for i := range 3 {
		for j := range 3 {
			near(t, "dr", real(b.Z[i][j]-a.Z[i][j]), 0, 1e-15)
			near(t, "dx", imag(b.Z[i][j]-a.Z[i][j]), reactance(60)*math.Log(10), 1e-12)
		}
	}
	if a.B != b.B {
		t.Error("susceptance depends on the earth's resistivity")
	}
}

// Susceptance goes with frequency exactly, for lines and cables.
func TestSusceptanceGoesWithFrequency(t *testing.T) {
	at := func(f float64) (line, cable Matrices) {
		l, c := kersting41(t), buried(t, "1/0 AA TS 15kV", "", 0, -4, 1, -4)
		l.Frequency, c.Frequency = f, f
		return must(t)(l.Overhead()), must(t)(c.TapeShield())
	}
	l50, c50 := at(50)
	l60, c60 := at(60)
	for i := range 3 {
		for j := range 3 {
			near(t, "line", l60.B[i][j]*1e6, 1.2*l50.B[i][j]*1e6, 1e-12)
			near(t, "cable", c60.B[i][j]*1e6, 1.2*c50.B[i][j]*1e6, 1e-10)
		}
	}
}

// carson returns the part of Carson's self impedance that the earth makes, beyond a
// perfectly conducting one, in ohm/km:
//
//	j·ω·μ0/π · ∫ exp(−2·h·λ)/(λ + √(λ² + j·ω·μ0/ρ)) dλ, 0 to ∞
//
// by the trapezoidal rule in ln λ. It is the integral that the equations here replace
// by its first terms.
func carson(f, resistivity, h float64) complex128 {
	w := 2 * math.Pi * f * mu0
	k := math.Sqrt(w / resistivity)
	const step = 1e-3
	var sum complex128
	for t := -40.0; t < math.Log(40/(2*h*k)); t += step {
		u := math.Exp(t) // λ/k
		sum += complex(u*math.Exp(-2*h*k*u)*step, 0) / (complex(u, 0) + cmplx.Sqrt(complex(u*u, 1)))
	}
	return complex(0, w/math.Pi*km) * sum
}

// The first terms are Carson's integral where a line is low against the depth, and
// off by the next term of his series at a real one: k/(3√2) of π/8, 2.3 % of the
// resistance for k = 2·h·√(ω·μ0/ρ) = 0.038.
func TestAgainstCarsonsIntegral(t *testing.T) {
	for _, c := range []struct {
		f, resistivity, height, tolR, tolX float64
	}{
		{60, 100, 0.01, 1e-4, 1e-5},
		{50, 1000, 0.01, 1e-4, 1e-5},
		{60, 100, 8.8, 0.025, 5e-3},
		{50, 100, 8.8, 0.025, 5e-3},
	} {
		earth := carson(c.f, c.resistivity, c.height)
		r := earthResistance(c.f)
		x := reactance(c.f) * math.Log(EarthDepth(c.f, c.resistivity)/(2*c.height))
		near(t, "earth r", r, real(earth), c.tolR*real(earth))
		near(t, "earth x", x, imag(earth), c.tolX*imag(earth))
	}
}

// A concentric neutral without conductance leaves the bare cores' impedances; one
// of very many fine strands is a tube, and its capacitance that of a coaxial line.
func TestConcentricNeutralLimits(t *testing.T) {
	l := buried(t, "250 AA CN 15kV 1/3", "", 0, -4, 0.5, -4)
	l.Strand.R = 1e12
	m := must(t)(l.ConcentricNeutral())
	self := complex(l.Core.R+earthResistance(60), reactance(60)*math.Log(EarthDepth(60, 100)/l.Core.GMR))
	mutual := complex(earthResistance(60), reactance(60)*math.Log(EarthDepth(60, 100)/(0.5*foot)))
	if cmplx.Abs(m.Z[0][0]-self) > 1e-8 || cmplx.Abs(m.Z[1][0]-mutual) > 1e-8 {
		t.Errorf("without neutrals z = %v, %v; want %v, %v", m.Z[0][0], m.Z[1][0], self, mutual)
	}

	l = buried(t, "250 AA CN 15kV 1/3", "", 0, -4)
	const k = 3000
	l.Cable.Strands = k
	l.Strand = Conductor{R: 60, GMR: 0.3894e-5, Diameter: 1e-5}
	fine := must(t)(l.ConcentricNeutral())
	ring := (l.Cable.OutsideDiameter - 1e-5) / 2
	coaxial := 2 * math.Pi * 60 * 2 * math.Pi * eps0 * 2.3 * km / math.Log(2*ring/l.Core.Diameter)
	near(t, "b", fine.B[0][0]*1e6, coaxial*1e6, 0.002*coaxial*1e6)
	// Of a tube that conducts perfectly all current returns in it: x = X·ln(R/GMR).
	l.Strand.R = 1e-9
	tube := must(t)(l.ConcentricNeutral())
	near(t, "x", imag(tube.Z[0][0]), reactance(60)*math.Log(ring/l.Core.GMR), 2e-3*imag(tube.Z[0][0]))
}

// A bare neutral beside the cables takes part of the return current.
func TestBareNeutralBesideCables(t *testing.T) {
	without := must(t)(buried(t, "250 AA CN 15kV 1/3", "", 0, -4, 0.5, -4, 1, -4).ConcentricNeutral())
	with := must(t)(buried(t, "250 AA CN 15kV 1/3", "4/0 Cu", 0, -4, 0.5, -4, 1, -4, 1.25, -4).ConcentricNeutral())
	a, _ := without.Symmetrical()
	b, _ := with.Symmetrical()
	if real(b.Z[0][0]) >= real(a.Z[0][0]) {
		t.Errorf("r0 = %g with a bare neutral, %g without: no less", real(b.Z[0][0]), real(a.Z[0][0]))
	}
	if with.B != without.B {
		t.Error("a neutral outside the shield changes the charge")
	}
}
