package powerflow

import (
	"yearflow/sim/network"
	"yearflow/sim/powerflow/vector"
)

// LaneCurrents are the currents, A, of everything in the lanes of a solved block: what
// Flows and Couplings give of one solution.
type LaneCurrents struct {
	Flow     []float64 // values: what elements take in at their terminals, by Network.Offsets
	Coupling []float64 // values: own currents, by Network.Couplings
	Source   []float64 // values: what each fixed voltage delivers, by Network.Fixed
	// Drawn is the real power that all injections draw together, W; generators count
	// negative.
	Drawn [vector.Lanes]float64

	version int
	put     []float64 // values, as Lanes.x: currents that injections put in
	rest    []float64 // values: what dependent unknowns, then fixed ones, still have to receive

	elements, capacitors, sum, less, own, source vector.Rows
	switched                                     []int32 // capacitor bank by entry of capacitors
	admittance                                   []complex128
	owns, sources                                []func() float64
}

// NewLaneCurrents prepares the reading of currents. A LaneCurrents belongs to its Lanes.
func (l *Lanes) NewLaneCurrents() *LaneCurrents {
	s, n := l.s, l.s.Net
	c := &LaneCurrents{version: -1,
		Flow: vector.Make(n.Offsets[len(n.Elements)]), Coupling: vector.Make(len(n.Couplings)), put: vector.Make(l.held)}
	at := map[int32][]int{} // flows that leave an unknown
	for e := range n.Elements {
		el := &n.Elements[e]
		w := len(el.Terminals)
		for p, u := range el.Terminals {
			at[u] = append(at[u], n.Offsets[e]+p)
			var src []int
			rows := &c.elements
			if el.Kind == network.Capacitor {
				rows = &c.capacitors
			}
			for q, y := range el.Y[p*w : p*w+w] {
				if y == 0 {
					continue
				}
				src = append(src, int(l.slot[el.Terminals[q]]))
				if el.Kind == network.Capacitor {
					c.switched, c.admittance = append(c.switched, int32(el.Index)), append(c.admittance, y)
				} else {
					rows.Coef = append(rows.Coef, real(y), imag(y))
				}
			}
			rows.Row(n.Offsets[e]+p, src...)
		}
	}
	place := map[int32]int{} // of dependent unknowns in rest
	receive := func(u int32, to int) {
		c.sum.Row(to, at[u]...)
		for range at[u] {
			c.sum.Coef = append(c.sum.Coef, 1, 0)
		}
		c.less.Row(to, int(l.slot[u]))
		c.less.Coef = append(c.less.Coef, -1, 0)
	}
	for k := range s.red.clusters {
		for _, u := range s.red.clusters[k].dep {
			place[u] = len(place)
			receive(u, place[u])
		}
	}
	for k := range s.red.clusters {
		cl := &s.red.clusters[k]
		m := len(cl.dep)
		for i, kk := range cl.couplings {
			var src []int
			for j, d := range cl.dep {
				src = append(src, place[d])
				c.owns = append(c.owns, func() float64 { return -cl.inverse[j*m+i] })
			}
			c.own.Row(int(kk), src...)
		}
	}
	c.rest = vector.Make(len(place) + len(n.Fixed))
	c.Source = c.rest[len(place)*vector.Width:]
	for f, x := range n.Fixed {
		receive(x.Unknown, len(place)+f)
		var src []int
		for kk := range n.Couplings {
			cp := &n.Couplings[kk]
			for t, u := range cp.Terminals {
				if u == x.Unknown {
					src = append(src, kk)
					c.sources = append(c.sources, func() float64 { return cp.Base[t] + cp.Inverse[t]/s.ratio[kk] })
				}
			}
		}
		if len(src) > 0 {
			c.source.Row(f, src...)
		}
	}
	return c
}

// refresh takes over the coefficients of the solver's device state.
func (c *LaneCurrents) refresh(s *Solver) {
	if c.version == s.version {
		return
	}
	c.version = s.version
	c.capacitors.Coef = c.capacitors.Coef[:0]
	for i, y := range c.admittance {
		if !s.closed[c.switched[i]] {
			y = 0
		}
		c.capacitors.Coef = append(c.capacitors.Coef, real(y), imag(y))
	}
	c.own.Coef, c.source.Coef = c.own.Coef[:0], c.source.Coef[:0]
	for _, f := range c.owns {
		c.own.Coef = append(c.own.Coef, f(), 0)
	}
	for _, f := range c.sources {
		c.source.Coef = append(c.source.Coef, f(), 0)
	}
}

// Currents reads the currents of the lanes of a mask, which must have arrived; those of
// others mean nothing.
func (l *Lanes) Currents(c *LaneCurrents, mask uint8) {
	c.refresh(l.s)
	clear(c.put)
	l.draw(c.put, mask)
	c.elements.Set(c.Flow, l.v)
	c.capacitors.Set(c.Flow, l.v)
	c.sum.Set(c.rest, c.Flow)
	c.less.Add(c.rest, c.put)
	c.own.Set(c.Coupling, c.rest)
	c.source.Add(c.Source, c.Coupling)
	c.Drawn = [vector.Lanes]float64{}
	for at := 0; at < l.held; at++ {
		v, j := l.v[at*vector.Width:(at+1)*vector.Width], c.put[at*vector.Width:(at+1)*vector.Width]
		for lane := range vector.Lanes {
			c.Drawn[lane] -= v[lane]*j[lane] + v[vector.Lanes+lane]*j[vector.Lanes+lane]
		}
	}
}

// Voltages are the values of the lanes, and where each unknown's stands among them.
func (l *Lanes) Voltages() (v []float64, slot []int32) { return l.v, l.slot }

// V is the voltage of an unknown in a lane.
func (l *Lanes) V(u int32, lane int) complex128 { return vector.At(l.v, int(l.slot[u]), lane) }

// Power is the real power, W at 1 p.u., that an injection is asked for in a lane: of one
// in a group what the group is given.
func (l *Lanes) Power(injection, lane int) float64 {
	list := l.list[injection]
	if list < 0 {
		return real(l.given[int(l.s.Injections[injection].Group-1)*vector.Lanes+lane])
	}
	return real(vector.At(l.power[list], int(l.member[injection]), lane))
}
