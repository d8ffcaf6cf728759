package powerflow

// Refactor assembles and factors the whole matrix for the devices at hand.
func (s *Solver) Refactor() error {
	s.update.valid = false
	if err := s.moved(); err != nil {
		return err
	}
	return s.ready()
}

// Factor factors the matrix that was assembled last.
func (s *Solver) Factor() bool {
	s.update.valid = false
	return s.update.factor(s.pat, s.f, s.y, s.version) < 0
}

// SameFactor tells whether the factor is, to the bit, that of all columns computed anew.
func (s *Solver) SameFactor() bool {
	was := append([]complex128(nil), s.f...)
	if !s.Factor() {
		return false
	}
	for i, z := range s.f {
		if z != was[i] {
			return false
		}
	}
	return true
}

// Substitute solves once with the factor at hand.
func (s *Solver) Substitute() {
	copy(s.x, s.pull)
	s.pat.solve(s.f, s.x)
}

// Size is the number of independent voltages and of entries of the factor.
func (s *Solver) Size() (unknowns, entries int) { return s.red.free, s.pat.slots() }
