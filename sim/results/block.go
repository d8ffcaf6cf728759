package results

import (
	"fmt"
	"math"
	"math/bits"

	"yearflow/sim/powerflow/vector"
)

// block reads the lanes of a Quiet: voltages, losses and the power of the sources, in
// the operations of Meter.Read and so to the same bits. What a voltage or a loss is
// compared with stands in the rows of its lists; statistics look at flagged rows alone.
type block struct {
	meter *Meter
	judge *judge
	slot  []int32 // of the Lanes that the lists are made for

	points vector.Lengths // by Meter.Points
	pu     []float64      // by point and lane
	parts  [lossKinds]vector.Dots
	power  [lossKinds][]float64 // W, by part and lane
	caps   vector.Dots
	capW   []float64

	// Of the Quiet at hand. Powers are W.
	mask                 uint8
	seen, left           uint8 // lanes in which some voltage is beyond its bounds, or has left its bin
	over                 uint8 // lanes in which some current of a line is
	flagged              [lossKinds]uint8
	least, most          [vector.Lanes]float64 // p.u.
	byKind               [lossKinds][vector.Lanes]float64
	losses, source       [vector.Lanes]float64
	sourceVar, condenser [vector.Lanes]float64

	// Limits of each point, and the lanes of the mask in which it is outside: below A,
	// above A, below B, above B, a byte each.
	outside []uint32
	touched []int
	some    uint32 // of any judged point
}

const (
	aboveShift      = 8
	belowOuterShift = 16
	aboveOuterShift = 24
)

func newBlock(m *Meter, j *judge) block {
	n := len(m.Points)
	b := block{meter: m, judge: j, pu: make([]float64, n*vector.Lanes), outside: make([]uint32, n), touched: make([]int, 0, n)}
	var count [lossKinds]int
	for i := range m.parts {
		count[m.parts[i].kind]++
	}
	for k := range count {
		b.power[k] = make([]float64, count[k]*vector.Lanes)
	}
	b.capW = make([]float64, len(m.caps)*vector.Lanes)
	return b
}

// fits tells whether the lists are made for the places of the voltages.
func (b *block) fits(l *Lanes) bool {
	return len(b.slot) == len(l.Slot) && (len(b.slot) == 0 || &b.slot[0] == &l.Slot[0])
}

// place makes the lists.
func (b *block) place(l *Lanes) {
	m := b.meter
	b.slot = l.Slot
	b.points, b.caps = vector.Lengths{}, vector.Dots{}
	for i := range m.Points {
		p, to := &m.Points[i], -1
		if p.W >= 0 {
			to = int(l.Slot[p.W])
		}
		b.points.Row(int(l.Slot[p.U]), to, p.Base)
		r := &b.points.Rows[i]
		r.From, r.To = math.Inf(-1), math.Inf(1)
	}
	b.parts = [lossKinds]vector.Dots{}
	for i := range m.parts {
		p := &m.parts[i]
		b.parts[p.kind].Row(p.pairs(l.Slot)...)
	}
	for i := range m.caps {
		b.caps.Row(m.caps[i].pairs(l.Slot)...)
	}
}

// pairs are the voltages and the currents of an element's terminals.
func (p *part) pairs(slot []int32) (pairs [][2]int) {
	for k, t := range p.terminals {
		if t >= 0 {
			pairs = append(pairs, [2]int{int(slot[t]), p.flow + k})
		}
	}
	return pairs
}

// check refuses what has no place in lanes.
func (q *Quiet) check() error {
	if q.Count < 1 || q.Count > vector.Lanes || q.First < 0 || q.First >= vector.Lanes || q.Step <= 0 {
		return fmt.Errorf("results: %d steps of %d ns from lane %d are no row of quiet steps", q.Count, q.Step, q.First)
	}
	return nil
}

// read reads a Quiet.
func (b *block) read(q *Quiet) {
	b.mask = 0
	for k := range q.Count {
		b.mask |= 1 << q.lane(k)
	}
	settled := b.mask // the mean of a voltage is that of settled intervals, energies are of all
	if q.Settling {
		settled = 0
	}
	b.readLanes(q.State, settled, b.mask)
}

// readLanes reads lanes: sums and flags are of a mask for voltages, and of one for losses.
func (b *block) readLanes(l *Lanes, voltages, losses uint8) {
	b.seen, b.left = b.points.Watch(b.pu, l.V, voltages, &b.least, &b.most)
	for k := range b.parts {
		var over uint8
		b.flagged[k], over = b.parts[k].Watch(b.power[k], l.V, l.Flow, losses, &b.byKind[k])
		if LossKind(k) == LineLoss {
			b.over = over
		}
	}
	b.caps.Watch(b.capW, l.V, l.Flow, losses, &b.condenser)
	b.losses, b.source, b.sourceVar = [vector.Lanes]float64{}, [vector.Lanes]float64{}, [vector.Lanes]float64{}
	for k := range b.byKind {
		for x := range vector.Lanes {
			b.losses[x] += b.byKind[k][x]
		}
	}
	for _, s := range b.meter.sources {
		v := (*[vector.Width]float64)(l.V[int(l.Slot[s.unknown])*vector.Width:])
		i := (*[vector.Width]float64)(l.Source[(3*s.source+int(s.phase))*vector.Width:])
		for x := range vector.Lanes {
			va := apparent(complex(v[x], v[vector.Lanes+x]), complex(i[x], i[vector.Lanes+x]))
			b.source[x] += real(va)
			b.sourceVar[x] += imag(va)
		}
	}
}

// energies are those of the Quiet, W·ns.
func (b *block) energies(q *Quiet) (e energies) {
	for k := range q.Count {
		x := q.lane(k)
		e.source += b.source[x]
		e.load += q.State.Load[x]
		e.generation += q.State.Generation[x]
		e.losses += b.losses[x]
		for kind := range b.byKind {
			e.byKind[kind] += b.byKind[kind][x]
		}
	}
	ns := float64(q.Step)
	e.source *= ns
	e.load *= ns
	e.generation *= ns
	e.losses *= ns
	for kind := range e.byKind {
		e.byKind[kind] *= ns
	}
	return e
}

// energiesOf are those of some lanes, W·ns.
func (b *block) energiesOf(g *Gathered, first, last int) (e energies) {
	for k := first; k <= last; k++ {
		ns := float64(g.End[k] - g.Start[k])
		e.source += b.source[k] * ns
		e.load += g.State.Load[k] * ns
		e.generation += g.State.Generation[k] * ns
		e.losses += b.losses[k] * ns
		for kind := range b.byKind {
			e.byKind[kind] += b.byKind[kind][k] * ns
		}
	}
	return e
}

// balance checks the balance of real power, which is all that Lanes tell of loads and
// generators.
func (b *block) balance(q *Quiet, c *balanceCheck) {
	c.checked += 2 * q.Count // the interval and the end of each step
	for k := range q.Count {
		x := q.lane(k)
		load, generation := q.State.Load[x], q.State.Generation[x]
		scale := magnitude(complex(b.source[x], b.sourceVar[x])) + abs(generation) + abs(load) + abs(b.losses[x])
		if !(scale > 0) && scale == scale {
			continue
		}
		off := abs(b.source[x]+generation-b.condenser[x]-load-b.losses[x]) / scale
		if off > c.worst || off != off {
			c.worst, c.at = off, q.Start+int64(k)*q.Step
		}
	}
}

// look finds the lanes in which a point is outside its limits.
func (b *block) look(i int) uint32 {
	c := &b.judge.classes[b.judge.of[i]]
	x := (*[vector.Lanes]float64)(b.pu[i*vector.Lanes:])
	lowA, highA, lowB, highB := c.LowA-limitSlack, c.HighA+limitSlack, c.LowB-limitSlack, c.HighB+limitSlack
	var out uint32
	for lane, v := range x { // outer limits lie outside the inner ones
		bit := uint32(1) << lane
		if v < lowA {
			out |= bit
			if v < lowB {
				out |= bit << belowOuterShift
			}
		} else if v > highA {
			out |= bit << aboveShift
			if v > highB {
				out |= bit << aboveOuterShift
			}
		}
	}
	m := uint32(b.mask)
	if out &= m | m<<aboveShift | m<<belowOuterShift | m<<aboveOuterShift; out != 0 {
		b.outside[i] = out
		b.touched = append(b.touched, i)
		if b.judge.judged[i] {
			b.some |= out
		}
	}
	return out
}

// settleOutside turns the lanes outside into times and customers' times, and forgets
// them.
func (b *block) settleOutside(long *durations) (out outsideTimes) {
	if len(b.touched) > 0 {
		out = b.timesOutside(long, b.mask)
		b.forgetOutside()
	}
	return out
}

func (b *block) forgetOutside() {
	for _, i := range b.touched {
		b.outside[i] = 0
	}
	b.touched, b.some = b.touched[:0], 0
}

// timesOutside are the times and the customers' times outside in the lanes of a mask.
func (b *block) timesOutside(long *durations, mask uint8) (out outsideTimes) {
	m := uint32(mask)
	m |= m<<aboveShift | m<<belowOuterShift | m<<aboveOuterShift
	below, above, belowB, aboveB := long.times(b.some & m)
	out.belowA, out.aboveA, out.belowB, out.aboveB = below, above, belowB, aboveB
	for i := range b.judge.services {
		v := &b.judge.services[i]
		var lanes uint32
		for _, k := range v.points {
			lanes |= b.outside[k]
		}
		if lanes &= m; lanes == 0 {
			continue
		}
		below, above, belowB, aboveB := long.times(lanes)
		out.customersBelow += v.customers * float64(below)
		out.customersAbove += v.customers * float64(above)
		out.customersBelowB += v.customers * float64(belowB)
		out.customersAboveB += v.customers * float64(aboveB)
		v.outside += long.of(uint8(lanes | lanes>>aboveShift))
	}
	return out
}

// durations is how long the interval of each lane is, ns.
type durations struct {
	even int64 // of all; 0: each has its own
	each [vector.Lanes]int64
}

// of sums the lengths of the lanes of a mask.
func (l *durations) of(mask uint8) (ns int64) {
	if l.even > 0 {
		return l.even * int64(bits.OnesCount8(mask))
	}
	for ; mask != 0; mask &= mask - 1 {
		ns += l.each[bits.TrailingZeros8(mask)]
	}
	return ns
}

// times are those of lanes below A, above A, below B and above B.
func (l *durations) times(lanes uint32) (below, above, belowB, aboveB int64) {
	return l.of(uint8(lanes)), l.of(uint8(lanes >> aboveShift)), l.of(uint8(lanes >> belowOuterShift)), l.of(uint8(lanes >> aboveOuterShift))
}
