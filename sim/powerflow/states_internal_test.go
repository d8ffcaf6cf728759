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
