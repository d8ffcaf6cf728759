package results

import (
	"yearflow/sim/powerflow/vector"
)

// totalsBlock is what Totals reads quiet steps with.
type totalsBlock struct {
	block
	low, high float64 // p.u., that the bounds of judged points are drawn for
	drawn     bool
}

// Whole tells whether a step must come as Interval and Step.
func (t *Totals) Whole(start, end int64) bool { return t.stats.judge.drops }

// Quiet takes steps as if each had come as an Interval and a Step.
func (t *Totals) Quiet(q *Quiet) error {
	if err := q.check(); err != nil {
		return err
	}
	t.reading(q.State)
	for rest := *q; rest.Count > 0; {
		part, month := rest.cut(t.clock)
		t.quiet(&part, t.month(month))
	}
	for range q.Count {
		t.ok = append(t.ok, byte(OK))
	}
	ns := int64(q.Count) * q.Step
	for _, d := range q.Devices {
		if d.AtStop && !q.Settling {
			t.sums.StopHours += float64(ns) / float64(hour)
		}
		if d.Hunting {
			t.sums.HuntingHours += float64(ns) / float64(hour)
		}
	}
	return nil
}

// reading has the block ready for lanes.
func (t *Totals) reading(l *Lanes) *totalsBlock {
	if t.block == nil {
		t.block = &totalsBlock{block: newBlock(t.meter, t.stats.judge)}
	}
	b := t.block
	if !b.fits(l) {
		b.place(l)
		b.drawn = false
	}
	b.bound(&t.sums)
	return b
}

// bound draws the bounds: limits, and of judged points the extremes so far.
func (b *totalsBlock) bound(s *Sums) {
	if b.drawn && b.low == s.LowestPU && b.high == s.HighestPU {
		return
	}
	b.drawn, b.low, b.high = true, s.LowestPU, s.HighestPU
	for i := range b.points.Rows {
		r, c := &b.points.Rows[i], &b.judge.classes[b.judge.of[i]]
		r.Low, r.High = c.LowA-limitSlack, c.HighA+limitSlack
		if b.judge.judged[i] {
			r.Low, r.High = max(r.Low, b.low), min(r.High, b.high)
		}
	}
}

func (t *Totals) quiet(q *Quiet, month *peak) {
	b, total := t.block, &t.stats.total
	b.read(q)
	if q.Settling {
		e := b.energies(q)
		total.energies.merge(&e)
		total.steps += q.Count
		total.settling += int64(q.Count) * q.Step
		return
	}
	t.voltages()
	out := b.settleOutside(&durations{even: q.Step})
	total.outsideTimes.add(&out)
	e := b.energies(q)
	total.energies.merge(&e)
	total.steps += q.Count
	total.settled += int64(q.Count) * q.Step
	for k := range q.Count {
		x, at := q.lane(k), q.Start+int64(k)*q.Step
		total.peakDemand.take(b.source[x], at)
		month.take(b.source[x], at)
	}
}

// voltages looks closer at what is flagged.
func (t *Totals) voltages() {
	b := t.block
	if b.seen == 0 {
		return
	}
	for i, flag := range b.points.Flags {
		if flag == 0 {
			continue
		}
		b.look(i)
		if !b.judge.judged[i] {
			continue
		}
		for k, v := range (*[vector.Lanes]float64)(b.pu[i*vector.Lanes:]) {
			if b.mask>>k&1 == 1 {
				t.sums.LowestPU, t.sums.HighestPU = min(t.sums.LowestPU, v), max(t.sums.HighestPU, v)
			}
		}
	}
}

// Gathers tells whether no more of a step is needed than Gathered has.
func (t *Totals) Gathers() bool { return !t.stats.judge.drops }

// Gathered takes steps as if their actions and intervals had come one by one.
func (t *Totals) Gathered(g *Gathered) error {
	if err := g.check(); err != nil {
		return err
	}
	b, total := t.reading(g.State), &t.stats.total
	var long durations
	for k := range g.Count {
		long.each[k] = g.End[k] - g.Start[k]
	}
	b.mask = g.Settled & (1<<g.Count - 1)
	b.readLanes(g.State, b.mask, 0)
	t.voltages()
	out := b.settleOutside(&long)
	total.outsideTimes.add(&out)
	k := 0
	for i := range g.Steps {
		s := &g.Steps[i]
		for m := range s.Moves {
			if err := t.Action(&s.Moves[m]); err != nil {
				return err
			}
		}
		if !s.More {
			total.steps++
			t.ok = append(t.ok, byte(OK))
		}
		month := t.month(t.clock.monthOf(s.Start))
		e := b.energiesOf(g, k, k+s.Intervals-1)
		total.energies.merge(&e)
		for last := k + s.Intervals; k < last; k++ {
			t.take(g, k, month)
		}
	}
	return nil
}

// take takes what no place is asked for of an interval.
func (t *Totals) take(g *Gathered, k int, month *peak) {
	b, total, ns := t.block, &t.stats.total, g.End[k]-g.Start[k]
	settled := b.mask>>k&1 == 1
	if settled {
		total.settled += ns
		total.peakDemand.take(b.source[k], g.Start[k])
		month.take(b.source[k], g.Start[k])
	} else {
		total.settling += ns
	}
	for _, d := range g.Devices[k] {
		if d.AtStop && settled {
			t.sums.StopHours += float64(ns) / float64(hour)
		}
		if d.Hunting {
			t.sums.HuntingHours += float64(ns) / float64(hour)
		}
	}
}
