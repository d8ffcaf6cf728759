package results

// Like makes a state with room for another.
func (s *State) Like() State {
	var out State
	out.Copy(s)
	return out
}

// Copy takes over another state; its room is used where it suffices.
func (s *State) Copy(from *State) {
	s.Flow = append(s.Flow[:0], from.Flow...)
	s.CopyBut(from)
}

// CopyBut takes over all but Flow.
func (s *State) CopyBut(from *State) {
	s.V = append(s.V[:0], from.V...)
	s.Coupling = append(s.Coupling[:0], from.Coupling...)
	s.Source = append(s.Source[:0], from.Source...)
	s.Load = append(s.Load[:0], from.Load...)
	s.Generation = append(s.Generation[:0], from.Generation...)
	s.Storage = append(s.Storage[:0], from.Storage...)
	s.Charging = append(s.Charging[:0], from.Charging...)
	s.Stored = append(s.Stored[:0], from.Stored...)
	s.Curtailed = append(s.Curtailed[:0], from.Curtailed...)
	s.Taps = append(s.Taps[:0], from.Taps...)
	s.Closed = append(s.Closed[:0], from.Closed...)
}
