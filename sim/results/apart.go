package results

import (
	"math"

	"yearflow/sim/powerflow/vector"
)

// apart is what a watch has beside its lists for intervals that are of different lengths,
// some of them settling: sums that each lane enters with its own length, and reactive
// power.
type apart struct {
	points []apartPoint
	energy [lossKinds][]float64 // W·ns, by part
	ratios []int                // couplings that have a ratio

	losses, caps    vector.Dots // of reactive power: one row
	lossVar, capVar [vector.Lanes]float64
	row             [vector.Lanes]float64

	span              [vector.Lanes]float64 // ns, 0 beyond the last
	settled, settling uint8
	settlingOutside   [vector.Lanes]int64
}

// apartPoint has the sum of a point's settled voltages, p.u.·ns, and the range in which a
// settling one is no news.
type apartPoint struct{ sum, low, high float64 }

func newApart(w *watch) *apart {
	a := &apart{points: make([]apartPoint, len(w.meter.Points))}
	for k := range a.energy {
		a.energy[k] = make([]float64, len(w.rowOf[k]))
	}
	for i, row := range w.coupleRow {
		if w.meter.loading[row].ratioOf >= 0 {
			a.ratios = append(a.ratios, i)
		}
	}
	return a
}

// place makes the lists.
func (a *apart) place(m *Meter, slot []int32) {
	all := func(parts []part) (d vector.Dots) {
		var pairs [][2]int
		for i := range parts {
			pairs = append(pairs, parts[i].pairs(slot)...)
		}
		if len(pairs) > 0 {
			d.Row(pairs...)
		}
		return d
	}
	a.losses, a.caps = all(m.parts), all(m.caps)
}

// gather takes the sums out.
func (a *apart) gather(w *watch) {
	for i := range a.points {
		w.s.points[i].sum += a.points[i].sum
		a.points[i].sum = 0
	}
	for kind := range a.energy {
		for i, e := range a.energy[kind] {
			w.s.lossEnergy[w.rowOfPart(LossKind(kind), i)] += e
			a.energy[kind][i] = 0
		}
	}
}

// boundSettling draws the range of a point anew.
func (w *watch) boundSettling(i int) {
	c, p, r := &w.judge.classes[w.judge.of[i]], &w.s.points[i], &w.apart.points[i]
	r.low, r.high = max(p.lowestSettling, c.LowA-limitSlack), min(p.highestSettling, c.HighA+limitSlack)
}

// gathered reads gathered steps and takes what no month is told of. What is outside waits
// for book, and to be forgotten.
func (s *statistics) gathered(g *Gathered) {
	w := s.watching(g.State, 0, g.Taps[0])
	if w.apart == nil {
		w.apart = newApart(w)
		w.apart.place(s.meter, w.slot)
		w.bound()
	}
	a := w.apart
	w.spans = w.spans[:0]
	w.long.even = 0
	a.span, a.settlingOutside, w.long.each = [vector.Lanes]float64{}, [vector.Lanes]int64{}, [vector.Lanes]int64{}
	all := uint8(1<<g.Count - 1)
	a.settled, a.settling = all&g.Settled, all&^g.Settled
	for k := range g.Count {
		ns := g.End[k] - g.Start[k]
		w.long.each[k], a.span[k] = ns, float64(ns)
		w.positions[k] = g.Taps[k]
		if a.settled>>k&1 == 1 {
			w.spans = append(w.spans, span{k, g.Start[k], ns})
		}
	}
	w.mask = a.settled
	w.readLanes(g.State, a.settled, a.settled)
	a.losses.Watch(a.row[:], g.State.Turned, g.State.Flow, 0, &a.lossVar)
	a.caps.Watch(a.row[:], g.State.Turned, g.State.Flow, 0, &a.capVar)
	w.weigh()
	if len(w.spans) == 0 {
		w.triples.Watch(w.triple, g.State.V, &w.far, &w.ratioSq)
		return
	}
	w.share()
	if w.seen != 0 {
		w.voltages()
	}
	w.powers()
	w.lossPeaks()
	w.loadings(g.State)
	for _, i := range a.ratios {
		row := w.coupleRow[i]
		before := s.loadPeak[row]
		if w.couplings.Flags[i] == 0 {
			w.loading(g.State, row)
		}
		if s.loadPeak[row] != before {
			w.boundCoupling(i)
		}
	}
	w.unbalances(g.State)
}

// weigh enters voltages and losses, each lane with its length, and looks closer at
// settling voltages that may be news.
func (w *watch) weigh() {
	a := w.apart
	t := &a.span
	var settled [vector.Lanes]float64
	for _, x := range w.spans {
		settled[x.lane] = a.span[x.lane]
	}
	for i := range a.points {
		v, p := (*[vector.Lanes]float64)(w.pu[i*vector.Lanes:]), &a.points[i]
		if len(w.spans) > 0 {
			p.sum += weighed(v, &settled)
		}
		if a.settling == 0 {
			continue
		}
		low, high := p.low, p.high
		if v[0] < low || v[1] < low || v[2] < low || v[3] < low || v[4] < low || v[5] < low || v[6] < low || v[7] < low ||
			v[0] > high || v[1] > high || v[2] > high || v[3] > high || v[4] > high || v[5] > high || v[6] > high || v[7] > high {
			w.lookSettling(i, v)
		}
	}
	for kind := range a.energy {
		power := w.power[kind]
		for i := range a.energy[kind] {
			a.energy[kind][i] += weighed((*[vector.Lanes]float64)(power[i*vector.Lanes:]), t)
		}
	}
}

// weighed is Σ x·ns over the lanes.
func weighed(x, ns *[vector.Lanes]float64) float64 {
	return ((x[0]*ns[0] + x[1]*ns[1]) + (x[2]*ns[2] + x[3]*ns[3])) + ((x[4]*ns[4] + x[5]*ns[5]) + (x[6]*ns[6] + x[7]*ns[7]))
}

// lookSettling takes the settling voltages of a point.
func (w *watch) lookSettling(i int, v *[vector.Lanes]float64) {
	a, p := w.apart, &w.s.points[i]
	for k, x := range v {
		if a.settling>>k&1 == 0 {
			continue
		}
		p.lowestSettling, p.highestSettling = min(p.lowestSettling, x), max(p.highestSettling, x)
		if w.judge.outsideA(i, x, x) {
			p.settlingOutside += w.long.each[k]
			if w.judge.judged[i] {
				a.settlingOutside[k] += w.long.each[k]
			}
		}
	}
	w.boundSettling(i)
}

// share enters the settled voltages into the percentiles.
func (w *watch) share() {
	d := w.s.dist
	if d.bins == nil {
		for _, t := range w.spans {
			d.addLane(w.pu, t.lane, t.ns)
		}
		return
	}
	vector.Bins(w.bins, w.pu, binWidth, lastBin)
	w.waiting.hold(w.bins, w.spans, d)
}

// book takes what months are told of: the steps from one on to before another, all of
// which begin in one.
func (s *statistics) book(g *Gathered, from, to int, month *bucket) {
	w := s.watch
	a := w.apart
	first := 0
	for i := range from {
		first += g.Steps[i].Intervals
	}
	var mask uint8
	end := first
	for i := from; i < to; i++ {
		begin := end
		for range g.Steps[i].Intervals {
			mask |= 1 << end
			end++
		}
		e := w.energiesOf(g, begin, end-1)
		s.total.energies.merge(&e)
		month.energies.merge(&e)
	}
	settled, settling := w.long.of(mask&a.settled), w.long.of(mask&a.settling)
	var out outsideTimes
	if len(w.touched) > 0 {
		out = w.timesOutside(&w.long, mask&a.settled)
	}
	for _, b := range [...]*bucket{&s.total, month} {
		b.steps += min(to, g.Ended()) - from
		b.settled += settled
		b.settling += settling
		b.outsideTimes.add(&out)
		for _, t := range w.spans {
			if mask>>t.lane&1 == 1 {
				b.peakDemand.take(w.source[t.lane], t.at)
				w.extremes(t, b)
			}
		}
		for k := first; k < end; k++ {
			b.settlingOutside += a.settlingOutside[k]
		}
	}
}

// powers reads the powers of a lane.
func (a *apart) powers(b *block, l *Lanes, lane int) (r Reading) {
	r.Source = complex(b.source[lane], b.sourceVar[lane])
	r.Load = complex(l.Load[lane], l.LoadVar[lane])
	r.Generation = complex(l.Generation[lane], l.GenerationVar[lane])
	r.Capacitors = complex(-b.condenser[lane], -a.capVar[lane])
	r.Losses = complex(b.losses[lane], a.lossVar[lane])
	return r
}

// instant reads a lane as Meter.Read reads an instant: all voltages, or the lowest and
// the highest alone, but no element by itself.
func (w *watch) instant(l *Lanes, lane int, r *Reading, voltages bool) {
	p := w.apart.powers(&w.block, l, lane)
	r.Source, r.Load, r.Generation, r.Capacitors, r.Losses = p.Source, p.Load, p.Generation, p.Capacitors, p.Losses
	for kind := range w.byKind {
		r.ByKind[kind] = complex(w.byKind[kind][lane], 0) // a row of the logs has no more
	}
	r.SourcePhase, r.SourceCurrent = [3]complex128{}, [3]float64{}
	for _, s := range w.meter.sources {
		i := vector.At(l.Source, 3*s.source+int(s.phase), lane)
		r.SourcePhase[s.phase] += apparent(w.voltage(l, s.unknown, lane), i)
		r.SourceCurrent[s.phase] += magnitude(i)
	}
	r.Lowest, r.Highest = -1, -1
	if len(w.meter.Points) > 0 {
		r.Lowest, r.Highest = w.find(w.least[lane], lane), w.find(w.most[lane], lane)
		r.PU[r.Lowest], r.PU[r.Highest] = w.least[lane], w.most[lane]
	}
	if voltages {
		for i := range r.PU {
			r.PU[i] = w.pu[i*vector.Lanes+lane]
		}
	}
	r.Unbalance, r.UnbalanceAt, r.NegativeSequence = math.NaN(), -1, math.NaN()
	if w.far[lane] >= 0 {
		if u, node := w.unbalance(l, lane); node >= 0 {
			r.Unbalance, r.UnbalanceAt = u, node
		}
	}
	if w.ratioSq[lane] >= 0 {
		if n := w.negative(l, lane, math.Sqrt(w.ratioSq[lane])); n >= 0 {
			r.NegativeSequence = n
		}
	}
}
