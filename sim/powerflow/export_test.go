package powerflow

// Refactor assembles the matrix for the devices at hand and factors it.
func (s *Solver) Refactor() error { return s.refactor() }

// Factor factors the matrix that was assembled last.
func (s *Solver) Factor() bool {
	copy(s.f, s.y)
	return s.pat.factor(s.f) < 0
}

// Substitute solves once with the factor at hand.
func (s *Solver) Substitute() {
	copy(s.x, s.pull)
	s.pat.solve(s.f, s.x)
}

// Size is the number of independent voltages and of entries of the factor.
func (s *Solver) Size() (unknowns, entries int) { return s.red.free, s.pat.slots() }
