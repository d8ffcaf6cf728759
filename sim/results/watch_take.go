package results

import (
	"math"
	"slices"

	"yearflow/sim/network"
	"yearflow/sim/powerflow/vector"
)

// gatherEvery is the number of Quiets after which sums leave the lists: sums of sums lose
// less to rounding.
const gatherEvery = 4096

// quiet takes a Quiet whose steps lie in one month.
func (s *statistics) quiet(q *Quiet, month *bucket) {
	w := s.watching(q.State, q.Step, q.State.Taps)
	if q.Settling {
		s.settling(q, month)
		return
	}
	w.read(q)
	w.spans = w.spans[:0]
	for k := range q.Count {
		x := q.lane(k)
		w.spans = append(w.spans, span{x, q.Start + int64(k)*q.Step, q.Step})
		w.positions[x] = q.State.Taps
	}
	w.long.even = q.Step
	w.distribute(q)
	if w.seen != 0 {
		w.voltages()
	}
	out := w.settleOutside(&w.long)
	energies := w.energies(q)
	for _, b := range [...]*bucket{&s.total, month} {
		b.steps += q.Count
		b.settled += int64(q.Count) * q.Step
		b.outsideTimes.add(&out)
		b.energies.merge(&energies)
		for _, t := range w.spans {
			w.extremes(t, b)
			b.peakDemand.take(w.source[t.lane], t.at)
		}
	}
	w.powers()
	w.lossPeaks()
	w.loadings(q.State)
	w.unbalances(q.State)
}

// span is a settled interval: its lane, when it began and how long it is, ns.
type span struct {
	lane   int
	at, ns int64
}

// watching has the watch ready for lanes, of steps of a length or (0) of intervals whose
// sums do not come from the lists.
func (s *statistics) watching(l *Lanes, step int64, taps []int) *watch {
	if s.watch == nil {
		s.watch = newWatch(s)
	}
	w := s.watch
	if !w.fits(l) {
		w.place(l)
	}
	if w.step != step || w.calls >= gatherEvery {
		w.gather()
		w.step = step
	}
	w.calls++
	if w.stale || step > 0 && !slices.Equal(w.taps, taps) {
		w.taps = append(w.taps[:0], taps...)
		w.bound()
	}
	return w
}

// settling takes steps of settling intervals: their energies, and how far and how long
// places are outside meanwhile.
func (s *statistics) settling(q *Quiet, month *bucket) {
	w := s.watch
	w.read(q)
	energies := w.energies(q)
	for _, b := range [...]*bucket{&s.total, month} {
		b.steps += q.Count
		b.settling += int64(q.Count) * q.Step
		b.energies.merge(&energies)
	}
	for i := range s.points {
		p := &s.points[i]
		v := (*[vector.Lanes]float64)(w.pu[i*vector.Lanes:])
		outside := int64(0)
		for k := range q.Count {
			x := v[q.lane(k)]
			p.lowestSettling, p.highestSettling = min(p.lowestSettling, x), max(p.highestSettling, x)
			if s.judge.outsideA(i, x, x) {
				outside += q.Step
			}
		}
		if outside == 0 {
			continue
		}
		p.settlingOutside += outside
		if s.judge.judged[i] {
			s.total.settlingOutside += outside
			month.settlingOutside += outside
		}
	}
}

// distribute enters the voltages into the percentiles.
func (w *watch) distribute(q *Quiet) {
	d := w.s.dist
	if d.bins == nil {
		for k := range q.Count {
			d.addLane(w.pu, q.lane(k), q.Step)
		}
		return
	}
	if w.moving {
		w.move(q)
		return
	}
	if !w.binned { // nothing stands in a bin yet
		w.binned = true
		for i := range w.points.Left {
			w.points.Left[i], w.since[i] = w.mask, w.clock
		}
		w.left = w.mask
	}
	then := w.clock
	w.clock += int64(q.Count) * q.Step
	if w.left == 0 {
		return
	}
	few := 0
	for _, left := range w.points.Left {
		if left != 0 {
			few++
		}
	}
	all := few > len(w.bin)/4
	if all && len(w.bin) > d.near {
		w.clock = then
		for i := range d.bins {
			w.release(i)
		}
		w.moving = true
		w.move(q)
		return
	}
	if all {
		vector.Bins(w.bins, w.pu, binWidth, lastBin)
	}
	last := q.lane(q.Count - 1)
	for i, left := range w.points.Left {
		if left == 0 {
			continue
		}
		at := i * vector.Lanes
		if !all {
			vector.Bins(w.bins[at:at+vector.Lanes], w.pu[at:at+vector.Lanes], binWidth, lastBin)
		}
		h, b := &d.bins[i], (*[vector.Lanes]int32)(w.bins[at:])
		if ns := then - w.since[i]; ns > 0 {
			h.enter(int(w.bin[i]), ns)
		}
		w.since[i] = w.clock
		h.enterLanes(b, w.mask, q.Step)
		if w.bin[i] != b[last] || math.IsInf(w.points.Rows[i].To, 1) {
			w.stay(i, b[last])
		}
	}
}

// move keeps the bins of all points until others have come: where most of them leave theirs
// nothing is gained by looking which. Then every point stands where it is, to begin with.
func (w *watch) move(q *Quiet) {
	d := w.s.dist
	vector.Bins(w.bins, w.pu, binWidth, lastBin)
	w.waiting.hold(w.bins, w.spans, d)
	if !w.waiting.full(vector.Lanes) {
		return
	}
	w.waiting.enter(d)
	w.moving = false
	last := q.lane(q.Count - 1)
	for i := range d.bins {
		w.since[i] = w.clock
		w.stay(i, w.bins[i*vector.Lanes+last])
	}
}

// stay draws the range of a point's bin, less than rounding makes of its edges.
func (w *watch) stay(i int, bin int32) {
	w.bin[i] = bin
	r := &w.points.Rows[i]
	r.From, r.To = float64(bin)*binWidth*(1+1e-14), float64(bin+1)*binWidth*(1-1e-14)
}

// voltages looks closer at what is flagged.
func (w *watch) voltages() {
	s := w.s
	for i, flag := range w.points.Flags {
		if flag == 0 {
			continue
		}
		p := &s.points[i]
		x := (*[vector.Lanes]float64)(w.pu[i*vector.Lanes:])
		for _, t := range w.spans {
			v, at := x[t.lane], t.at
			if v < p.min {
				p.min, p.minTime = v, at
				if w.judge.judged[i] {
					s.lowJudged.lower(v, i, at)
				}
			}
			if v > p.max {
				p.max, p.maxTime = v, at
				if w.judge.judged[i] {
					s.highJudged.higher(v, i, at)
				}
			}
		}
		if out := w.look(i); out != 0 {
			below, above, belowB, aboveB := w.long.times(out)
			p.belowA += below
			p.aboveA += above
			p.belowB += belowB
			p.aboveB += aboveB
		}
		w.boundPoint(i)
	}
}

// lower is low for values that come point by point: of equal ones the first in time
// counts, and of those of one instant the first to come.
func (e *extreme) lower(v float64, point int, at int64) {
	if !e.known || v < e.value || v == e.value && at < e.time {
		*e = extreme{v, point, at, true}
	}
}

func (e *extreme) higher(v float64, point int, at int64) {
	if !e.known || v > e.value || v == e.value && at < e.time {
		*e = extreme{v, point, at, true}
	}
}

// extremes enters the lowest and the highest voltage of an interval.
func (w *watch) extremes(t span, b *bucket) {
	if len(w.meter.Points) == 0 {
		return
	}
	if v := w.least[t.lane]; !b.lowestPU.known || v < b.lowestPU.value {
		b.lowestPU.low(v, w.find(v, t.lane), t.at)
	}
	if v := w.most[t.lane]; !b.highestP.known || v > b.highestP.value {
		b.highestP.high(v, w.find(v, t.lane), t.at)
	}
}

// find returns the first point with a voltage.
func (w *watch) find(v float64, lane int) int {
	for i := range w.meter.Points {
		if w.pu[i*vector.Lanes+lane] == v {
			return i
		}
	}
	return 0
}

// powers enters the power of the sources and all losses.
func (w *watch) powers() {
	s := w.s
	for _, t := range w.spans {
		x, at := t.lane, t.at
		s.lossesPeak.take(w.losses[x], at)
		s.leastDemand.take(-w.source[x], at)
		if w.source[x] < 0 {
			s.reverse += t.ns
		}
	}
}

func (w *watch) lossPeaks() {
	s := w.s
	for kind := range w.parts {
		if w.flagged[kind] == 0 {
			continue
		}
		d := &w.parts[kind]
		for i, flag := range d.Flags {
			row := w.rowOf[kind][i]
			if flag == 0 || row < 0 {
				continue
			}
			p := &s.lossPeak[row]
			for _, t := range w.spans {
				p.take(w.power[kind][i*vector.Lanes+t.lane], t.at)
			}
			d.Rows[i].High = p.least()
		}
	}
	for i := range w.shared {
		r := &w.shared[i]
		p, power := &s.lossPeak[r.row], w.power[r.kind]
		for _, t := range w.spans {
			sum := 0.0
			for _, part := range r.parts {
				sum += power[part*vector.Lanes+t.lane]
			}
			p.take(sum, t.at)
		}
	}
	if w.bareAt {
		return
	}
	w.bareAt = true
	for _, row := range w.bare {
		s.lossPeak[row].take(0, w.spans[0].at)
	}
}

func (w *watch) loadings(l *Lanes) {
	if w.over != 0 {
		for part, flag := range w.parts[LineLoss].Over {
			if flag == 0 {
				continue
			}
			for _, i := range w.ofPart[part] {
				w.loading(l, w.sections[i].row)
				w.boundSection(i)
			}
		}
	}
	if w.couplings.Watch(l.Coupling, w.mask) != 0 {
		for i, flag := range w.couplings.Flags {
			if flag != 0 {
				w.loading(l, w.coupleRow[i])
				w.boundCoupling(i)
			}
		}
	}
	if len(w.bankRow) == 0 {
		return
	}
	w.bankFlow.Set(w.bankAmps, l.Flow)
	if w.banks.Watch(l.V, w.bankAmps, w.mask) != 0 {
		for i, flag := range w.banks.Flags {
			if flag != 0 {
				w.loading(l, w.bankRow[i])
				w.boundBank(i)
			}
		}
	}
}

// loading looks at a row of loading.csv.
func (w *watch) loading(l *Lanes, i int) {
	s, row := w.s, &w.meter.loading[i]
	for _, t := range w.spans {
		x := t.lane
		var a float64
		switch row.kind {
		case network.Section:
			a = max(magnitude(vector.At(l.Flow, row.from, x)), magnitude(vector.At(l.Flow, row.to, x)))
		case network.Transformer:
			a = magnitude(row.flows.powerAt(l, x)) / 1000
		default:
			a = magnitude(vector.At(l.Coupling, row.coupling, x))
			if row.ratioOf >= 0 {
				a = max(a, a/ratioOf(row.reg, w.positions[x][row.ratioOf]))
			}
		}
		s.loadPeak[i].take(a, t.at)
		if a > row.rating {
			s.aboveRating[i] += t.ns
		}
		if a > row.emergency {
			s.aboveEmergency[i] += t.ns
		}
	}
}

// powerAt is power in a lane, of an element without couplings.
func (e *endFlow) powerAt(l *Lanes, lane int) (sum complex128) {
	for k := range e.phases {
		var i complex128
		for _, f := range e.phases[k].flows {
			i += vector.At(l.Flow, f, lane)
		}
		sum += apparent(vector.At(l.V, int(l.Slot[e.phases[k].unknown]), lane), i)
	}
	return sum
}

// The unbalance of a node lies between what the distances of squares say: with δ the
// largest distance of a side's square from the mean of the squares, over that mean, it is
// δ/2 but for terms of second order, at most δ²/16, and smaller ones.
func unbalanceBetween(far float64) (low, high float64) {
	if !(far < 0.2) {
		return 0, math.Inf(1)
	}
	spread := unbalanceSpread(far)
	return far/2 - spread, far/2 + spread
}

func unbalanceSpread(far float64) float64 { return 0.07*far*far + far*far*far + 1e-14 }

// unbalances looks closer at lanes that may have a new largest unbalance or negative
// sequence, or that may be on either side of 3 %.
func (w *watch) unbalances(l *Lanes) {
	if len(w.meter.three) == 0 {
		return
	}
	s := w.s
	w.triples.Watch(w.triple, l.V, &w.far, &w.ratioSq)
	for _, t := range w.spans {
		x, at := t.lane, t.at
		if w.far[x] >= 0 {
			low, high := unbalanceBetween(w.far[x])
			switch {
			case 100*high > s.unbalance.least() || 100*low <= 3 && 100*high > 3:
				u, node := w.unbalance(l, x)
				if node < 0 {
					break
				}
				if !s.unbalance.known || u > s.unbalance.value {
					s.unbalanceAt = node
				}
				s.unbalance.take(u, at)
				if u > 3 {
					s.unbalanceAbove3 += t.ns
				}
			case 100*low > 3:
				s.unbalanceAbove3 += t.ns
			}
		}
		if w.ratioSq[x] >= 0 {
			if r := math.Sqrt(w.ratioSq[x]); 100*(r+ratioSlack) > s.negative.least() {
				if n := w.negative(l, x, r); n >= 0 {
					s.negative.take(n, at)
				}
			}
		}
	}
}

// ratioSlack is more than rounding makes of |V2|/|V1|.
const ratioSlack = 1e-13

// unbalance returns the largest unbalance of a lane, %, and its node.
func (w *watch) unbalance(l *Lanes, lane int) (float64, int) {
	// Nodes below this have less than the one that is furthest out at least has.
	least := math.Inf(-1)
	if far := w.far[lane]; far < 0.2 {
		least = far - 5*unbalanceSpread(far)
	}
	worst, at := -1.0, -1
	for k, u := range w.meter.three {
		if w.triple[k*vector.Width+lane] < least {
			continue
		}
		if d, ok := unbalance(w.voltage(l, u[0], lane), w.voltage(l, u[1], lane), w.voltage(l, u[2], lane)); ok && d > worst {
			worst, at = d, w.meter.threeAt[k]
		}
	}
	return 100 * worst, at
}

// negative returns the largest |V2|/|V1| of a lane, %; below zero: none.
func (w *watch) negative(l *Lanes, lane int, about float64) float64 {
	least := 0.0
	if !math.IsInf(about, 1) && about > 2*ratioSlack {
		least = (about - 2*ratioSlack) * (about - 2*ratioSlack)
	}
	ratio := -1.0
	for k, u := range w.meter.three {
		if w.triple[k*vector.Width+vector.Lanes+lane] < least {
			continue
		}
		if r, ok := sequences(w.voltage(l, u[0], lane), w.voltage(l, u[1], lane), w.voltage(l, u[2], lane)); ok {
			ratio = max(ratio, r)
		}
	}
	return 100 * ratio
}

func (w *watch) voltage(l *Lanes, u int32, lane int) complex128 {
	return vector.At(l.V, int(l.Slot[u]), lane)
}
