package results

// Copy takes over another state; its room is used where it suffices.
func (s *State) Copy(from *State) {
	s.Flow = append(s.Flow[:0], from.Flow...)
	s.Load = append(s.Load[:0], from.Load...)
	s.CopySensed(from)
}

// CopySensed takes over all but Flow and Load.
func (s *State) CopySensed(from *State) {
	s.V = append(s.V[:0], from.V...)
	s.Coupling = append(s.Coupling[:0], from.Coupling...)
	s.Source = append(s.Source[:0], from.Source...)
	s.Generation = append(s.Generation[:0], from.Generation...)
	s.Storage = append(s.Storage[:0], from.Storage...)
	s.Charging = append(s.Charging[:0], from.Charging...)
	s.Stored = append(s.Stored[:0], from.Stored...)
	s.Curtailed = append(s.Curtailed[:0], from.Curtailed...)
	s.Taps = append(s.Taps[:0], from.Taps...)
	s.Closed = append(s.Closed[:0], from.Closed...)
}
