package powerflow

import (
	"yearflow/sim/network"
	"yearflow/sim/powerflow/vector"
)

// Abreast are solutions of any steps and any positions of the devices, side by side in
// lanes, and the currents that elements and injections take there.
type Abreast struct {
	*LaneCurrents
	Block  *Block
	Turned []float64             // values: the voltages times −j
	Var    [vector.Lanes]float64 // reactive power that all injections draw together

	closed []float64 // coefficients of capacitors that are all closed
	banks  []bank
}

// bank is where the currents of a capacitor stand.
type bank struct{ index, from, to int }

// NewAbreast prepares the reading of solutions with c, which reads everything.
func (c *LaneCurrents) NewAbreast() *Abreast {
	a := &Abreast{LaneCurrents: c, Block: c.l.NewBlock()}
	a.Turned = vector.Make(len(a.Block.v) / vector.Width)
	for _, y := range c.admittance {
		a.closed = append(a.closed, real(y), imag(y))
	}
	n := c.l.s.Net
	for e := range n.Elements {
		if el := &n.Elements[e]; el.Kind == network.Capacitor {
			a.banks = append(a.banks, bank{el.Index, n.Offsets[e], n.Offsets[e+1]})
		}
	}
	return a
}

// Load takes over the voltages of one solution for each lane, by Network.Unknowns.
func (a *Abreast) Load(v *[vector.Lanes][]complex128) {
	slot := a.LaneCurrents.l.slot
	n := len(slot)
	v0, v1, v2, v3, v4, v5, v6, v7 := v[0][:n], v[1][:n], v[2][:n], v[3][:n], v[4][:n], v[5][:n], v[6][:n], v[7][:n]
	for u, at := range slot {
		x := (*[vector.Width]float64)(a.Block.v[int(at)*vector.Width:])
		y := (*[vector.Width]float64)(a.Turned[int(at)*vector.Width:])
		putTurned(x, y, 0, v0[u])
		putTurned(x, y, 1, v1[u])
		putTurned(x, y, 2, v2[u])
		putTurned(x, y, 3, v3[u])
		putTurned(x, y, 4, v4[u])
		putTurned(x, y, 5, v5[u])
		putTurned(x, y, 6, v6[u])
		putTurned(x, y, 7, v7[u])
	}
}

// putTurned sets a lane of x to z and that of y to −j·z.
func putTurned(x, y *[vector.Width]float64, k int, z complex128) {
	x[k], x[vector.Lanes+k] = real(z), imag(z)
	y[k], y[vector.Lanes+k] = imag(z), -real(z)
}

// Flows reads what elements take in, with the capacitors of each lane as they are. Coupling
// and Source are left alone.
func (a *Abreast) Flows(closed *[vector.Lanes][]bool) {
	c := a.LaneCurrents
	c.elements.Set(c.Flow, a.Block.v)
	c.capacitors.Coef = a.closed // Use comes before the next block
	c.capacitors.Set(c.Flow, a.Block.v)
	for _, b := range a.banks {
		for k := range vector.Lanes {
			if closed[k][b.index] {
				continue
			}
			for at := b.from; at < b.to; at++ {
				vector.Put(c.Flow, at, k, 0)
			}
		}
	}
}

// Draws reads what injections draw together for the powers that Follow and Drive say. It
// returns the lanes in which some injection stands below the corner: those are not read
// right.
func (a *Abreast) Draws() (below uint8) {
	c := a.LaneCurrents
	below = c.l.draw(c.put, a.Block, c.asked, vector.All)
	c.power.Watch(c.drawn, a.Block.v, c.put, vector.All, &c.Drawn)
	c.power.Watch(c.drawn, a.Turned, c.put, vector.All, &a.Var)
	for k := range vector.Lanes {
		c.Drawn[k], a.Var[k] = -c.Drawn[k], -a.Var[k]
	}
	return below
}
