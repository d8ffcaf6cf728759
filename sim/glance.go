package sim

import (
	"math"
	"math/cmplx"

	"yearflow/sim/network"
	"yearflow/sim/powerflow/vector"
	"yearflow/sim/results"
)

// glance looks at all lanes of a block with most devices at once: the tap changers
// without limits and capacitors on voltage, whose readings leave them at rest as long as
// a voltage is well inside a range. One that is not, or does not rest, looks for itself.
type glance struct {
	e     *Engine
	taps  []glanced
	caps  []glanced
	slow  []int // devices that always look for themselves
	state int   // device state that coefficients are of

	// Values: of each tap changer the relay's voltage, V secondary, the regulated voltage, V,
	// and the current leaving, A, turned as its relay turns it; then of each capacitor its
	// voltage on the 120 V base.
	phasors         []float64
	fromV, fromI    vector.Rows
	lengths         vector.Lengths
	size            []float64 // by device of lengths and lane
	power           vector.Dots
	watts           []float64 // by tap changer and lane
	resting         []bool    // by tap changer, then by capacitor
	rests           bool      // one of them does
	reverse         []uint8   // by tap changer: lanes in which power flows back
	number          int       // of the block
	leastOf, mostOf [vector.Lanes]float64
	total           [vector.Lanes]float64
}

// glanced is a device that glance looks at.
type glanced struct {
	device int
	tap    *tapControl
	cap    *capacitorControl
}

// newGlance sorts the devices.
func newGlance(e *Engine) *glance {
	g := &glance{e: e, state: -1, number: -1}
	for i, d := range e.devices {
		switch c := d.Controller.(type) {
		case *tapControl:
			if _, _, ok := c.sheet.CalmRange(); ok && d.tap.forward {
				g.taps = append(g.taps, glanced{device: i, tap: c})
				continue
			}
		case *capacitorControl:
			if _, _, ok := c.sheet.CalmRange(); ok {
				g.caps = append(g.caps, glanced{device: i, cap: c})
				continue
			}
		}
		g.slow = append(g.slow, i)
	}
	slot := func(u int32) int { return e.ahead.lanes.Slot(u) }
	put := func(z ...float64) {
		for _, x := range z {
			g.fromV.Coef = append(g.fromV.Coef, x, 0)
		}
	}
	across := func(target int, from, to int32, scale float64) {
		if to == network.Ground {
			g.fromV.Row(target, slot(from))
			put(scale)
			return
		}
		g.fromV.Row(target, slot(from), slot(to))
		put(scale, -scale)
	}
	bound := func(low, high float64) {
		row := &g.lengths.Rows[len(g.lengths.Rows)-1]
		row.Low, row.High, row.From, row.To = low, high, math.Inf(-1), math.Inf(1)
	}
	for j, x := range g.taps {
		d := e.devices[x.device]
		across(3*j, d.tap.from, d.tap.to, 1/x.tap.sheet.PT)
		across(3*j+1, d.tap.from, d.tap.to, 1)
		g.fromV.Row(3*j + 2)
		var src []int
		for _, p := range d.tap.leaving {
			src = append(src, p.coupling)
		}
		g.fromI.Row(3*j+2, src...)
		g.fromI.Row(3*j, src...)
		g.lengths.Row(3*j, -1, 1)
		low, high, _ := x.tap.sheet.CalmRange()
		bound(low, high)
		g.power.Row([2]int{3*j + 1, 3*j + 2})
		g.power.Rows[j].High = math.Inf(1)
	}
	for j, x := range g.caps {
		d := e.devices[x.device]
		at := 3*len(g.taps) + j
		across(at, d.cap.from, d.cap.to, 1/d.cap.base)
		g.lengths.Row(at, -1, 1)
		low, high, _ := x.cap.sheet.CalmRange()
		bound(low, high)
	}
	n := len(g.taps) + len(g.caps)
	g.phasors, g.size = vector.Make(3*len(g.taps)+len(g.caps)), make([]float64, n*vector.Lanes)
	g.resting = make([]bool, n)
	g.watts, g.reverse = make([]float64, len(g.taps)*vector.Lanes), make([]uint8, len(g.taps))
	return g
}

// refresh takes over the positions of the devices.
func (g *glance) refresh() {
	e := g.e
	if g.state == e.ahead.state {
		return
	}
	g.state = e.ahead.state
	g.fromI.Coef = g.fromI.Coef[:0]
	for _, x := range g.taps {
		sheet := &x.tap.sheet
		turn := cmplx.Rect(1, sheet.Rotation)
		drop := -complex(sheet.R, sheet.X) * turn / complex(sheet.CT, 0)
		for _, z := range [...]complex128{turn, drop} {
			for _, p := range e.devices[x.device].tap.leaving {
				c := &e.net.Couplings[p.coupling]
				z := z * complex(-(c.Base[p.terminal]+c.Inverse[p.terminal]/e.ratio[p.coupling]), 0)
				g.fromI.Coef = append(g.fromI.Coef, real(z), imag(z))
			}
		}
	}
}

// rest takes over which devices rest. That does not change while quiet steps are found, but
// may in the midst of a block, by a step of the event loop.
func (g *glance) rest() {
	g.rests = false
	for j, x := range g.taps {
		g.resting[j] = x.tap.state.Rests()
		g.rests = g.rests || g.resting[j]
	}
	for j, x := range g.caps {
		r := x.cap.sheet.Rests(x.cap.state)
		g.resting[len(g.taps)+j] = r
		g.rests = g.rests || r
	}
}

// inside tells whether the device of a row rests and has its voltage well inside in a lane.
func (g *glance) inside(row, k int) bool { return g.resting[row] && g.lengths.Flags[row]>>k&1 == 0 }

// look looks at the block at hand, once.
func (g *glance) look(coupling []float64) {
	a := g.e.ahead
	if g.number == a.number {
		return
	}
	g.number = a.number
	g.refresh()
	v, _ := a.lanes.Voltages()
	g.fromV.Set(g.phasors, v)
	g.fromI.Add(g.phasors, coupling)
	g.lengths.Watch(g.size, g.phasors, a.arrived, &g.leastOf, &g.mostOf)
	g.power.Watch(g.watts, g.phasors, g.phasors, a.arrived, &g.total)
	for j, x := range g.taps {
		g.reverse[j] = 0
		for k, w := range g.watts[j*vector.Lanes : (j+1)*vector.Lanes] {
			if w < 0 && x.tap.sheet.Backward(vector.At(g.phasors, 3*j+1, k), vector.At(g.phasors, 3*j+2, k)) {
				g.reverse[j] |= 1 << k
			}
		}
	}
}

// calm tells whether lane k leaves its devices as they are and as states says; the first
// lane says what that is. It sets what coarse watches. alone looks with one device.
func (g *glance) calm(k int, first bool, now int64, states []results.DeviceState, coarse []float64, alone func(device int) bool) bool {
	for j, x := range g.taps {
		if !g.inside(j, k) {
			if !alone(x.device) {
				return false
			}
			continue
		}
		back := g.reverse[j]>>k&1 == 1
		c := x.tap
		if first {
			states[x.device] = results.DeviceState{AtStop: c.sheet.AtStop(c.state), Reverse: back, Hunting: g.e.devices[x.device].hunting.Hunts(now)}
		} else if s := &states[x.device]; s.Reverse != back || s.OutOfBand { // the first lane may have been looked at by itself
			return false
		}
		coarse[x.device*vector.Lanes+k] = g.size[j*vector.Lanes+k] / c.sheet.Ratio(c.state.Position)
	}
	for j, x := range g.caps {
		if !g.inside(len(g.taps)+j, k) {
			if !alone(x.device) {
				return false
			}
			continue
		}
		if first {
			states[x.device] = results.DeviceState{Hunting: g.e.devices[x.device].hunting.Hunts(now)}
		}
		coarse[x.device*vector.Lanes+k] = math.NaN()
	}
	return true
}
