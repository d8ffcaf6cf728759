package conductor

// TriplexLine is a service drop or a low-voltage cable of two insulated conductors
// twisted with a bare neutral, which is grounded at both ends. Positions 1 and 2
// are the legs.
type TriplexLine struct {
	Frequency        float64 // Hz
	EarthResistivity float64 // ohm m
	PhaseConductor   Conductor
	NeutralConductor Conductor
	Insulation       float64 // thickness on the insulated conductors, m
}

// Triplex returns the matrices of a triplex (Kersting, ch. 11): all three touch, so
// that the legs are one diameter and two insulations apart, and each one insulation
// and half of both diameters from the neutral. Its shunt part is left out.
func (l TriplexLine) Triplex() (Matrices, error) {
	var fs faults
	fs.checkEarth(l.Frequency, l.EarthResistivity)
	fs.checkConductor("phase conductor", l.PhaseConductor)
	fs.checkConductor("neutral conductor", l.NeutralConductor)
	if !positive(l.Insulation) {
		fs.add("insulation %g m is not above zero", l.Insulation)
	}
	leg := l.PhaseConductor.Diameter + 2*l.Insulation
	if depth := EarthDepth(l.Frequency, l.EarthResistivity); len(fs) == 0 && leg >= depth {
		fs.add("earth resistivity %g ohm m puts the earth's return nearer than the conductors (%g is usual)",
			l.EarthResistivity, DefaultEarthResistivity)
	}
	if err := fs.err(); err != nil {
		return Matrices{}, err
	}
	p, q := l.PhaseConductor, l.NeutralConductor
	neutral := (p.Diameter+q.Diameter)/2 + l.Insulation
	m := Matrices{N: 2}
	m.setZ(kron(primitive(l.Frequency, l.EarthResistivity,
		[]float64{p.R, p.R, q.R},
		[][]float64{{p.GMR}, {leg, p.GMR}, {neutral, neutral, q.GMR}}), 2))
	return m.sound()
}
