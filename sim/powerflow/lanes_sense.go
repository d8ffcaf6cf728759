package powerflow

import "yearflow/sim/network"

// LaneSense reads, of a lane, the currents that controls look at, as Sense does of a
// solution. It is for positioned lanes without groups.
type LaneSense struct {
	x        *Sense
	red      reduction
	unknowns []int32 // whose voltages it takes
	v, power []complex128
}

// NewLaneSense prepares the reading of flows at some places.
func (s *Solver) NewLaneSense(flows []int) *LaneSense {
	x := s.NewSense(flows)
	r := &LaneSense{x: x, red: s.red.clone(), v: make([]complex128, len(s.Net.Unknowns)), power: make([]complex128, len(s.Injections))}
	seen := make([]bool, len(s.Net.Unknowns))
	need := func(u int32) {
		if u != network.Ground && !seen[u] {
			seen[u] = true
			r.unknowns = append(r.unknowns, u)
		}
	}
	for _, k := range x.injections {
		need(s.Injections[k].From)
		need(s.Injections[k].To)
	}
	for _, e := range x.elements {
		for _, u := range s.Net.Elements[e].Terminals {
			need(u)
		}
	}
	return r
}

// Read sets flow at the places, and at others of the same elements, and own and source as
// Solver.Couplings does, of a lane that arrived, where its devices stand. It reports
// whether they stand where the network's equations are regular.
func (r *LaneSense) Read(flow, own, source []complex128, l *Lanes, lane int) bool {
	t := l.states
	if r.red.update(t.ratio[lane]) >= 0 {
		return false
	}
	for _, u := range r.unknowns {
		r.v[u] = l.V(u, lane)
	}
	for _, k := range r.x.injections {
		r.power[k] = l.asked.complex(int(k), lane)
	}
	r.x.read(flow, own, source, r.power, r.v, &r.red, t.ratio[lane], t.closed[lane])
	return true
}
