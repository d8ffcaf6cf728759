package conductor

import "math"

// Cable is a single-core cable with a concentric neutral or a tape shield.
type Cable struct {
	Name      string
	Conductor string // name of the core

	// Concentric neutral: diameter over its strands in m, their number and the name
	// of their conductor.
	OutsideDiameter float64
	Strands         int
	Strand          string

	// Tape shield: outside diameter and thickness in m, resistivity in ohm m (more
	// than the metal's own where the tape is lapped and its turns do not conduct).
	ShieldDiameter    float64
	ShieldThickness   float64
	ShieldResistivity float64

	Permittivity float64 // of the insulation, relative to vacuum
	Rating       float64 // A; NaN unknown
	Source       string  // where the values come from
}

// CableLine is a run of equal single-core cables, each with its own neutral or
// shield grounded at both ends, and, if wanted, a bare neutral beside them. Depth
// does not enter: only distances count.
type CableLine struct {
	Frequency        float64 // Hz
	EarthResistivity float64 // ohm m
	Phase            []Point // centres of the cables at positions 1, 2, 3: m
	Cable            Cable
	Core             Conductor // the cable's Conductor
	Strand           Conductor // the cable's Strand; read by ConcentricNeutral only
	Neutral          *Point    // the bare neutral; nil: none
	NeutralConductor Conductor // read only with Neutral
}

// sheath is a neutral or a shield as the equations see it.
type sheath struct {
	r      float64 // ohm/km
	gmr    float64 // m
	reach  float64 // m, distance to the core in the equations
	outer  float64 // m, radius that nothing else may enter
	charge float64 // b = ω·2π·ε0·εr/charge
}

// ConcentricNeutral returns the matrices of cables with concentric neutrals
// (Kersting, ch. 4 and 5): k strands of radius
// RDs stand on a circle of radius R = (outside diameter − strand diameter)/2,
//
//	GMR = (GMR_s·k·R^(k−1))^(1/k),  r = r_s/k,
//	b = ω·2π·ε0·εr/(ln(R/RDc) − ln(k·RDs/R)/k)
//
// with RDc the radius of the core. It fails with everything impossible in the line.
func (l CableLine) ConcentricNeutral() (Matrices, error) {
	var fs faults
	l.check(&fs)
	fs.checkConductor("strand", l.Strand)
	c, k := l.Cable, float64(l.Cable.Strands)
	ring := (c.OutsideDiameter - l.Strand.Diameter) / 2
	switch {
	case c.Strands < 3:
		fs.add("cable %q: %d strands; a concentric neutral has at least 3", c.Name, c.Strands)
	case !positive(c.OutsideDiameter):
		fs.add("cable %q: outside diameter %g m is not above zero", c.Name, c.OutsideDiameter)
	case len(fs) > 0:
	case ring-l.Strand.Diameter/2 < l.Core.Diameter/2:
		fs.add("cable %q: no room for the core of %.4g in inside an outside diameter of %.4g in with strands of %.4g in",
			c.Name, l.Core.Diameter/inch, c.OutsideDiameter/inch, l.Strand.Diameter/inch)
	case 2*ring*math.Sin(math.Pi/k) < l.Strand.Diameter*(1-1e-6):
		fs.add("cable %q: %d strands of %.4g in do not fit around an outside diameter of %.4g in",
			c.Name, c.Strands, l.Strand.Diameter/inch, c.OutsideDiameter/inch)
	}
	if err := fs.err(); err != nil {
		return Matrices{}, err
	}
	return l.matrices(sheath{
		r: l.Strand.R / k,
		// In logarithms: R^(k−1) alone would leave the range of a float for many strands.
		gmr:    math.Exp((math.Log(l.Strand.GMR*k) + (k-1)*math.Log(ring)) / k),
		reach:  ring,
		outer:  c.OutsideDiameter / 2,
		charge: math.Log(2*ring/l.Core.Diameter) - math.Log(k*l.Strand.Diameter/2/ring)/k,
	})
}

// TapeShield returns the matrices of cables with tape shields (Kersting, ch. 4
// and 5): of outside diameter d and thickness t,
//
//	GMR = d/2 − t/2,  r = ρ/(π·d·t),  b = ω·2π·ε0·εr/ln(d/2/RDc)
//
// with RDc the radius of the core; the capacitance reaches to the outside of the
// shield, as the published configuration 607 has it. It fails with everything
// impossible in the line.
func (l CableLine) TapeShield() (Matrices, error) {
	var fs faults
	l.check(&fs)
	c := l.Cable
	ok := true
	for _, v := range []struct {
		name  string
		value float64
		unit  string
	}{{"shield diameter", c.ShieldDiameter, "m"}, {"shield thickness", c.ShieldThickness, "m"}, {"shield resistivity", c.ShieldResistivity, "ohm m"}} {
		if !positive(v.value) {
			fs.add("cable %q: %s %g %s is not above zero", c.Name, v.name, v.value, v.unit)
			ok = false
		}
	}
	if ok && len(fs) == 0 && c.ShieldDiameter/2-c.ShieldThickness < l.Core.Diameter/2 {
		fs.add("cable %q: no room for the core of %.4g in inside a shield of %.4g in and %.4g mil",
			c.Name, l.Core.Diameter/inch, c.ShieldDiameter/inch, c.ShieldThickness/mil)
	}
	if err := fs.err(); err != nil {
		return Matrices{}, err
	}
	gmr := (c.ShieldDiameter - c.ShieldThickness) / 2
	return l.matrices(sheath{
		r:      c.ShieldResistivity / (math.Pi * c.ShieldDiameter * c.ShieldThickness) * km,
		gmr:    gmr,
		reach:  gmr,
		outer:  c.ShieldDiameter / 2,
		charge: math.Log(c.ShieldDiameter / l.Core.Diameter),
	})
}

// check reports what is wrong with either kind of cable.
func (l CableLine) check(fs *faults) {
	fs.checkEarth(l.Frequency, l.EarthResistivity)
	fs.checkConductor("core", l.Core)
	if l.Neutral != nil {
		fs.checkConductor("neutral conductor", l.NeutralConductor)
	}
	if p := l.Cable.Permittivity; !(p >= 1) || !finite(p) {
		fs.add("cable %q: permittivity %g; 1 is vacuum and %g is usual", l.Cable.Name, p, DefaultPermittivity)
	}
}

// matrices puts core, sheath and bare neutral together and reduces all but the
// cores. The order is cores, sheaths, neutral.
func (l CableLine) matrices(s sheath) (Matrices, error) {
	ws := wires(l.Phase, s.outer, l.Neutral, l.NeutralConductor.Diameter/2)
	var fs faults
	fs.checkPlaces(ws, len(l.Phase), false)
	if len(fs) == 0 {
		fs.checkDepth(l.Frequency, l.EarthResistivity, ws)
	}
	if err := fs.err(); err != nil {
		return Matrices{}, err
	}
	n := len(l.Phase)
	all := make([]wire, 0, 2*n+1)
	all = append(append(all, ws[:n]...), ws...)
	r, d := make([]float64, len(all)), distances(all)
	for i := range all {
		switch {
		case i < n:
			r[i], d[i][i] = l.Core.R, l.Core.GMR
		case i < 2*n:
			r[i], d[i][i] = s.r, s.gmr
			d[i][i-n] = s.reach // primitive reads the lower triangle
		default:
			r[i], d[i][i] = l.NeutralConductor.R, l.NeutralConductor.GMR
		}
	}
	m := Matrices{N: n}
	m.setZ(kron(primitive(l.Frequency, l.EarthResistivity, r, d), n))
	b := 2 * math.Pi * l.Frequency * 2 * math.Pi * eps0 * l.Cable.Permittivity * km / s.charge
	for i := range n {
		m.B[i][i] = b // each cable is shielded: nothing between them
	}
	return m.sound()
}
