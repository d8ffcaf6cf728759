package conductor

import "math"

// Conductor is a bare conductor, or the core of a cable.
type Conductor struct {
	Name     string
	R        float64 // ohm/km at the operating temperature and the frequency
	GMR      float64 // geometric mean radius, m
	Diameter float64 // outside, m
	Rating   float64 // A; NaN unknown
	Source   string  // where the values come from
}

// Line is an overhead line: phase conductors of one kind and, if wanted, a neutral
// that is grounded along the line.
type Line struct {
	Frequency        float64 // Hz
	EarthResistivity float64 // ohm m
	Phase            []Point // positions 1, 2, 3: m, height above the earth
	PhaseConductor   Conductor
	Neutral          *Point    // nil: none
	NeutralConductor Conductor // read only with Neutral
}

// Overhead returns the line's matrices by position. It fails with everything that
// is impossible in the line, such as positions that coincide or lie in the earth.
func (l Line) Overhead() (Matrices, error) {
	ws := wires(l.Phase, l.PhaseConductor.Diameter/2, l.Neutral, l.NeutralConductor.Diameter/2)
	if err := l.check(ws); err != nil {
		return Matrices{}, err
	}
	n := len(l.Phase)
	r, d := make([]float64, len(ws)), distances(ws)
	for i := range ws {
		c := l.PhaseConductor
		if i >= n {
			c = l.NeutralConductor
		}
		r[i], d[i][i] = c.R, c.GMR
	}
	m := Matrices{N: n}
	m.setZ(kron(primitive(l.Frequency, l.EarthResistivity, r, d), n))
	if err := m.setPotential(l.Frequency, kron(potential(ws), n)); err != nil {
		return Matrices{}, err
	}
	return m.sound()
}

func (l Line) check(ws []wire) error {
	var fs faults
	fs.checkEarth(l.Frequency, l.EarthResistivity)
	fs.checkConductor("phase conductor", l.PhaseConductor)
	if l.Neutral != nil {
		fs.checkConductor("neutral conductor", l.NeutralConductor)
	}
	if len(fs) == 0 { // places are judged by radii that make sense
		fs.checkPlaces(ws, len(l.Phase), true)
	}
	if len(fs) == 0 {
		fs.checkDepth(l.Frequency, l.EarthResistivity, ws)
	}
	return fs.err()
}

// potential returns the potential coefficients times 2π·ε0,
//
//	p_ij = ln(S_ij/D_ij)
//
// S from conductor i to the image of conductor j in the earth, D between the
// conductors, the radius in the diagonal (Kersting, ch. 5).
func potential(ws []wire) [][]float64 {
	p := square[float64](len(ws))
	for i, a := range ws {
		p[i][i] = math.Log(2 * a.at.Y / a.radius)
		for j := range i {
			b := ws[j].at
			p[i][j] = math.Log(math.Hypot(a.at.X-b.X, a.at.Y+b.Y) / a.at.distance(b))
			p[j][i] = p[i][j]
		}
	}
	return p
}

// setZ takes a reduced impedance matrix.
func (m *Matrices) setZ(z [][]complex128) {
	for i := range m.N {
		for j := range m.N {
			m.Z[i][j] = z[i][j]
		}
	}
}

// setPotential sets B = ω·2π·ε0·p⁻¹ from a reduced matrix of potential.
func (m *Matrices) setPotential(f float64, p [][]float64) error {
	var c [3][3]complex128
	for i := range m.N {
		for j := range m.N {
			c[i][j] = complex(p[i][j], 0)
		}
	}
	c, err := inverse(c, m.N)
	if err != nil {
		return err
	}
	k := 2 * math.Pi * f * 2 * math.Pi * eps0 * km
	for i := range m.N {
		for j := 0; j <= i; j++ {
			m.B[i][j] = k * real(c[i][j])
			m.B[j][i] = m.B[i][j]
		}
	}
	return nil
}
