package results

import (
	"math"
	"slices"
)

// pending gathers the intervals of a step until it is known whether they count. Of
// settled intervals, which are few, everything is kept; settling ones, of which a
// hunting device makes thousands, are summed at once.
type pending struct {
	meter *Meter
	pool  []*sample
	used  int // samples of the pool that are settled intervals of this step

	energies
	loss              []float64 // W·ns, by Meter.losses
	settled, settling int64     // ns

	// Of settling intervals, by point.
	outside    []int64 // ns outside range A
	low, high  []float64
	anySettles bool

	devices []deviceTime // by Plan.Devices

	lowest, highest float64 // p.u., over all intervals of the step
	services        int
}

// deviceTime is the time, ns, that duty.csv counts. Hunting counts in any interval,
// since a hunting device hardly ever settles; the others in settled ones.
type deviceTime struct{ stop, out, reverse, hunting int64 }

func newPending(m *Meter, services, devices int) pending {
	p := pending{meter: m, services: services,
		loss: make([]float64, len(m.losses)), outside: make([]int64, len(m.Points)),
		low: make([]float64, len(m.Points)), high: make([]float64, len(m.Points)),
		devices: make([]deviceTime, devices), anySettles: true}
	p.reset()
	return p
}

// reset begins a new step.
func (p *pending) reset() {
	p.used, p.energies, p.settled, p.settling = 0, energies{}, 0, 0
	p.lowest, p.highest = math.Inf(1), math.Inf(-1)
	clear(p.loss)
	clear(p.devices)
	if p.anySettles {
		p.anySettles = false
		clear(p.outside)
		for i := range p.low {
			p.low[i], p.high[i] = math.Inf(1), math.Inf(-1)
		}
	}
}

// sample returns a sample to fill, the next of the pool.
func (p *pending) sample() *sample {
	if p.used == len(p.pool) {
		n := len(p.meter.Points)
		p.pool = append(p.pool, &sample{reading: p.meter.NewReading(), low: make([]float64, n), high: make([]float64, n), drops: make([]float64, p.services)})
	}
	return p.pool[p.used]
}

// take adds an interval whose reading is in x.
func (p *pending) take(x *sample, iv *Interval, j *judge) {
	ns, r := iv.End-iv.Start, x.reading
	p.energies.add(r, float64(ns))
	for i, w := range r.loss {
		p.loss[i] += w * float64(ns)
	}
	if r.Lowest >= 0 {
		p.lowest, p.highest = min(p.lowest, r.PU[r.Lowest]), max(p.highest, r.PU[r.Highest])
	}
	for i, d := range iv.Devices {
		p.devices[i].add(d, ns, iv.Settled)
	}
	j.meterVoltages(r.PU, iv.State.Load, x.drops, x.low, x.high)
	if iv.Settled {
		p.settled += ns
		p.used++ // keeps x
		return
	}
	p.settling += ns
	p.anySettles = true
	for i, v := range r.PU {
		p.low[i], p.high[i] = min(p.low[i], v), max(p.high[i], v)
		if j.outsideA(i, x.low[i], x.high[i]) {
			p.outside[i] += ns
		}
	}
}

func (t *deviceTime) add(d DeviceState, ns int64, settled bool) {
	if d.Hunting {
		t.hunting += ns
	}
	if !settled {
		return
	}
	if d.AtStop {
		t.stop += ns
	}
	if d.OutOfBand {
		t.out += ns
	}
	if d.Reverse {
		t.reverse += ns
	}
}

// commit enters the step into the statistics.
func (p *pending) commit(s *statistics, month *bucket, devices []duty) {
	for _, x := range p.pool[:p.used] {
		s.settled(x, month)
	}
	for _, b := range [...]*bucket{&s.total, month} {
		b.energies.merge(&p.energies)
		b.settling += p.settling
	}
	for i, e := range p.loss {
		s.lossEnergy[i] += e
	}
	for i := range p.devices {
		devices[i].hours.merge(&p.devices[i])
	}
	if !p.anySettles {
		return
	}
	for i := range p.outside {
		t := &s.points[i]
		t.settlingOutside += p.outside[i]
		t.lowestSettling, t.highestSettling = min(t.lowestSettling, p.low[i]), max(t.highestSettling, p.high[i])
		if s.judge.judged[i] {
			s.total.settlingOutside += p.outside[i]
			month.settlingOutside += p.outside[i]
		}
	}
}

func (t *deviceTime) merge(o *deviceTime) {
	t.stop += o.stop
	t.out += o.out
	t.reverse += o.reverse
	t.hunting += o.hunting
}

// row is a row of the logs while its steps come in.
type row struct {
	start           int64
	begun           bool // by a step, which may not have ended
	status          Status
	steps, solved   int
	last            bool // the last step has a solution at its end
	actions         int
	lowest, highest float64
	energies
}

// begin begins a row with a step, unless it has begun.
func (r *row) begin(start int64) {
	if !r.begun {
		*r = row{start: start, begun: true, lowest: math.Inf(1), highest: math.Inf(-1)}
	}
}

func (r *row) add(s *Step, p *pending) {
	r.begin(s.Start)
	r.steps++
	r.status = max(r.status, s.Status)
	r.last = s.Last != nil && s.Status != Unsolved
	if s.Status != Unsolved {
		r.solved++
	}
	r.actions += s.Actions
	r.lowest, r.highest = min(r.lowest, p.lowest), max(r.highest, p.highest)
	r.energies.merge(&p.energies)
}

// duty is what duty.csv says of a device.
type duty struct {
	operations, raises, lowers, reversals int
	direction                             int
	day, busiest                          int64
	today, most                           int
	known                                 bool
	lowest, highest                       int
	hours                                 deviceTime
}

// act books an action on a local day. For a capacitor closing is a raise.
func (d *duty) act(a *Action, day int64) {
	d.operations++
	direction := 1
	if a.To < a.From {
		direction = -1
		d.lowers++
	} else {
		d.raises++
	}
	if d.direction != 0 && d.direction != direction {
		d.reversals++
	}
	d.direction = direction
	if d.today == 0 || day != d.day {
		d.day, d.today = day, 0
	}
	if d.today++; d.today > d.most {
		d.busiest, d.most = d.day, d.today
	}
	d.stood(a.From)
	d.stood(a.To)
}

// stood notes a position.
func (d *duty) stood(position int) {
	if !d.known {
		d.known, d.lowest, d.highest = true, position, position
	}
	d.lowest, d.highest = min(d.lowest, position), max(d.highest, position)
}

// finalPositions adds the positions of the start and of the end, which a device
// that never acts has nothing else to show.
func (w *Writer) finalPositions(o *Outcome) {
	taps, caps := w.taps, w.caps
	if len(o.Taps) == len(taps) {
		taps = o.Taps
	}
	if len(o.Closed) == len(caps) {
		caps = o.Closed
	}
	for i := range w.plan.Devices {
		d := &w.plan.Devices[i]
		switch {
		case d.Kind == CapacitorDevice:
			w.duty[i].stood(closedAs(caps[d.Index]))
			w.duty[i].stood(closedAs(w.caps[d.Index]))
		case len(d.Units) > 0:
			w.duty[i].stood(taps[d.Units[0]])
			w.duty[i].stood(w.taps[d.Units[0]])
		}
	}
}

func closedAs(closed bool) int {
	if closed {
		return 1
	}
	return 0
}

// order returns the indices 0..n−1 sorted by less; equal ones keep their order.
func order(n int, compare func(a, b int) int) []int {
	out := make([]int, n)
	for i := range out {
		out[i] = i
	}
	slices.SortStableFunc(out, compare)
	return out
}
