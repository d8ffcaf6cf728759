package powerflow

import (
	"math"

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

	l     *Lanes
	asked *powers
	put   []float64   // values, as Lanes.x: currents that injections put in
	draws bool        // put matters
	all   bool        // everything is read
	power vector.Dots // what is put in, in one row
	drawn []float64
	rest  []float64 // values: what dependent unknowns, then fixed ones, still have to receive

	elements, capacitors   vector.Groups
	sum, less, own, source vector.Rows
	switched               []int32 // capacitor bank by entry of capacitors
	admittance             []complex128
	owns, sources          []func() float64
}

// NewLaneCurrents prepares the reading of currents: of all of them, for powers that Follow
// and Drive say; or, where flows is not nil, of couplings, sources and the flows at these
// places, for the powers that the lanes have. Drawn is not read then.
func (l *Lanes) NewLaneCurrents(flows []int) *LaneCurrents {
	s, n := l.s, l.s.Net
	wanted := l.wanted(flows)
	asked := l.asked
	if wanted == nil {
		asked = l.newPowers()
	}
	c := &LaneCurrents{l: l, asked: asked, draws: wanted == nil, all: wanted == nil,
		Flow: vector.Make(n.Offsets[len(n.Elements)]), Coupling: vector.Make(len(n.Couplings)), put: vector.Make(l.held)}
	at := map[int32][]int{} // flows that leave an unknown
	for e := range n.Elements {
		for p, u := range n.Elements[e].Terminals {
			at[u] = append(at[u], n.Offsets[e]+p)
		}
		for p := 0; p < len(n.Elements[e].Terminals); p += vector.GroupRows {
			c.element(e, p, wanted)
		}
	}
	drawing := make([]bool, l.held)
	for k := range s.Injections {
		for _, u := range s.Injections[k].ends() {
			drawing[l.slot[u]] = true
			c.draws = c.draws || int(l.slot[u]) >= l.free
		}
	}
	var pairs [][2]int
	for at, is := range drawing {
		if is {
			pairs = append(pairs, [2]int{at, at})
		}
	}
	c.power.Row(pairs...)
	c.power.Rows[0].High = math.Inf(1)
	c.drawn = make([]float64, vector.Lanes)
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

// element lists the flows of an element from terminal first on, as many as a group holds.
func (c *LaneCurrents) element(e, first int, wanted []bool) {
	n := c.l.s.Net
	el := &n.Elements[e]
	w := len(el.Terminals)
	rows := min(vector.GroupRows, w-first)
	read := wanted == nil
	for p := first; p < first+rows; p++ {
		read = read || wanted[n.Offsets[e]+p]
	}
	if !read {
		return
	}
	var src []int
	for q, u := range el.Terminals {
		src = append(src, int(c.l.slot[u]))
		for p := first; p < first+rows; p++ {
			y := el.Y[p*w+q]
			if el.Kind == network.Capacitor {
				c.switched, c.admittance = append(c.switched, int32(el.Index)), append(c.admittance, y)
			} else {
				c.elements.Coef = append(c.elements.Coef, real(y), imag(y))
			}
		}
	}
	if el.Kind == network.Capacitor {
		c.capacitors.Group(n.Offsets[e]+first, rows, src...)
	} else {
		c.elements.Group(n.Offsets[e]+first, rows, src...)
	}
}

// wanted tells which flows are read: those at the given places, and those that leave
// dependent and fixed unknowns; nil: all.
func (l *Lanes) wanted(flows []int) []bool {
	if flows == nil {
		return nil
	}
	n := l.s.Net
	out := make([]bool, n.Offsets[len(n.Elements)])
	for _, f := range flows {
		out[f] = true
	}
	for e := range n.Elements {
		for p, u := range n.Elements[e].Terminals {
			if int(l.slot[u]) >= l.free {
				out[n.Offsets[e]+p] = true
			}
		}
	}
	return out
}

// LaneDevices is what currents depend on beside voltages and powers: the positions of the
// devices.
type LaneDevices struct {
	version                 int
	capacitors, own, source []float64
}

// Devices reads the positions that the solver has now into room, and reports whether they
// are others than room's.
func (c *LaneCurrents) Devices(room *LaneDevices) bool {
	s := c.l.s
	if room.version == s.version {
		return false
	}
	room.version = s.version
	room.capacitors, room.own, room.source = room.capacitors[:0], room.own[:0], room.source[:0]
	for i, y := range c.admittance {
		if !s.closed[c.switched[i]] {
			y = 0
		}
		room.capacitors = append(room.capacitors, real(y), imag(y))
	}
	for _, f := range c.owns {
		room.own = append(room.own, f(), 0)
	}
	for _, f := range c.sources {
		room.source = append(room.source, f(), 0)
	}
	return true
}

// Use takes over positions, those of the blocks read next. They must not change until
// others are taken.
func (c *LaneCurrents) Use(d *LaneDevices) {
	c.capacitors.Coef, c.own.Coef, c.source.Coef = d.capacitors, d.own, d.source
}

// Follow and Drive say, as those of Lanes do, what the injections were asked for in the
// blocks read next.
func (c *LaneCurrents) Follow(p, q []int, share []complex128) { c.asked.follow(c.l, p, q, share) }
func (c *LaneCurrents) Drive(values []float64)                { c.asked.drive(values) }

// Power is the real power, W at 1 p.u., that an injection is asked for in a lane: of one in
// a group what the group is given.
func (c *LaneCurrents) Power(injection, lane int) float64 { return c.asked.of(injection, lane) }

// Read reads the currents of a block's lanes of a mask, which must have arrived; those of
// others mean nothing.
func (c *LaneCurrents) Read(b *Block, mask uint8) {
	l := c.l
	if c.draws {
		l.draw(c.put, b, c.asked, mask)
	}
	c.elements.Set(c.Flow, b.v)
	c.capacitors.Set(c.Flow, b.v)
	c.sum.Set(c.rest, c.Flow)
	c.less.Add(c.rest, c.put)
	c.own.Set(c.Coupling, c.rest)
	c.source.Add(c.Source, c.Coupling)
	if c.all {
		c.power.Watch(c.drawn, b.v, c.put, mask, &c.Drawn)
		for lane, w := range c.Drawn {
			c.Drawn[lane] = -w
		}
	}
}
