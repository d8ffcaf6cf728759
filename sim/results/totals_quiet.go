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
	if t.block == nil {
		t.block = &totalsBlock{block: newBlock(t.meter, t.stats.judge)}
	}
	b := t.block
	if !b.fits(q.State) {
		b.place(q.State)
		b.drawn = false
	}
	b.bound(&t.sums)
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
	if b.seen != 0 {
		for i, flag := range b.points.Flags {
			if flag == 0 {
				continue
			}
			b.look(i)
			if !b.judge.judged[i] {
				continue
			}
			x := (*[vector.Lanes]float64)(b.pu[i*vector.Lanes:])
			for k := range q.Count {
				v := x[q.lane(k)]
				t.sums.LowestPU, t.sums.HighestPU = min(t.sums.LowestPU, v), max(t.sums.HighestPU, v)
			}
		}
	}
	out := b.settleOutside(q.Step)
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
