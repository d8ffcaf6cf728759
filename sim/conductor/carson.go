package conductor

import "math"

// Constants of the SI. The permeability is the value before 2019, from which the
// measured one differs by less than 1e-9.
const (
	mu0   = 4e-7 * math.Pi      // H/m
	eps0  = 8.8541878128e-12    // F/m, CODATA 2018
	km    = 1000.0              // m
	mile  = 1.609344            // km
	foot  = 0.3048              // m
	inch  = 0.0254              // m
	mil   = inch / 1000         // m
	euler = 0.57721566490153286 // Euler-Mascheroni constant
)

// Values that hold where a table leaves them out.
const (
	// DefaultEarthResistivity is in ohm m: common practice where nothing is measured.
	DefaultEarthResistivity = 100.0
	// DefaultShieldResistivity is that of a copper tape at 50 °C in ohm m; it makes
	// the shield of the published configuration 607 (18.83/(d·t) ohm/mi, d in inch
	// and t in mil; Kersting, Distribution System Modeling and Analysis, ch. 4,
	// recalled from memory).
	DefaultShieldResistivity = 2.3715e-8
	// DefaultPermittivity is that of cross-linked polyethylene, relative to vacuum.
	DefaultPermittivity = 2.3
)

// earthResistance returns the resistance that the earth's return adds to every
// self and mutual impedance,
//
//	R = ω·μ0/8
//
// in ohm/km at f in Hz: the first term of Carson's P (J. R. Carson, Wave
// propagation in overhead wires with ground return, Bell System Technical
// Journal 5, 1926).
func earthResistance(f float64) float64 {
	return 2 * math.Pi * f * mu0 / 8 * km
}

// reactance returns ω·μ0/2π in ohm/km at f in Hz.
func reactance(f float64) float64 { return f * mu0 * km }

// EarthDepth returns the equivalent depth of the earth's return in m,
//
//	De = 2·exp(½ − γ)·√(ρ/(ω·μ0)) = 658.87·√(ρ/f)
//
// with γ the Euler-Mascheroni constant, at f in Hz and ρ in ohm m: the first two
// terms of Carson's Q gathered into the logarithm. The equations here hold for
// distances far below it (850 m at 60 Hz and 100 ohm m).
func EarthDepth(f, resistivity float64) float64 {
	return 2 * math.Exp(0.5-euler) * math.Sqrt(resistivity/(2*math.Pi*f*mu0))
}

// primitive returns the impedances of parallel conductors with common earth
// return in ohm/km,
//
//	z_ij = R + r_i·δ_ij + j·ω·μ0/2π·ln(De/d_ij)
//
// with r in ohm/km, d in m: distances, and the geometric mean radii in the
// diagonal. Only the lower triangle of d is read.
func primitive(f, resistivity float64, r []float64, d [][]float64) [][]complex128 {
	re, x, depth := earthResistance(f), reactance(f), EarthDepth(f, resistivity)
	z := square[complex128](len(r))
	for i := range r {
		for j := 0; j <= i; j++ {
			z[i][j] = complex(re, x*math.Log(depth/d[i][j]))
			z[j][i] = z[i][j]
		}
		z[i][i] += complex(r[i], 0)
	}
	return z
}
