package powerflow

// Refactor computes the factor of positioned lanes anew.
func (l *Lanes) Refactor() { l.states.program.Run(l.states.x) }

// Program is the length of what computes it, and Own the number of columns that it is of.
func (l *Lanes) Program() (rows, own, all int) {
	for _, is := range l.states.own {
		if is {
			own++
		}
	}
	return l.states.program.Len(), own, len(l.states.own)
}

// NewLanesOfParts prepares lanes, positioned or not, in parts of a size at most.
func NewLanesOfParts(s *Solver, largest []float64, most int, positioned bool) *Lanes {
	if positioned {
		return newPositionedLanes(s, largest, most)
	}
	return newLanes(s, largest, most)
}

// Parts is the number of subtrees.
func (l *Lanes) Parts() int { return len(l.parts) - 1 }
