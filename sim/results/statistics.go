package results

import "math"

// pointStats is what nodes.csv says of one point, but for the percentiles.
// Durations are ns, of settled intervals unless the name says otherwise.
type pointStats struct {
	min, max                       float64
	minTime, maxTime               int64
	sum                            float64 // p.u.·ns
	belowA, aboveA, belowB, aboveB int64
	settlingOutside                int64
	lowestSettling                 float64
	highestSettling                float64
}

// peak is the highest value of settled intervals, and when it began.
type peak struct {
	value float64
	time  int64
	known bool
}

func (p *peak) take(v float64, at int64) {
	if !p.known || v > p.value {
		p.value, p.time, p.known = v, at, true
	}
}

// orNaN returns the value, NaN where there is none.
func (p *peak) orNaN() float64 {
	if !p.known {
		return math.NaN()
	}
	return p.value
}

// energies are W·ns over both settled and settling intervals.
type energies struct {
	source, load, generation, losses float64
	byKind                           [lossKinds]float64
}

func (e *energies) add(r *Reading, ns float64) {
	e.source += real(r.Source) * ns
	e.load += real(r.Load) * ns
	e.generation += real(r.Generation) * ns
	e.losses += real(r.Losses) * ns
	for k := range r.ByKind {
		e.byKind[k] += real(r.ByKind[k]) * ns
	}
}

func (e *energies) merge(o *energies) {
	e.source += o.source
	e.load += o.load
	e.generation += o.generation
	e.losses += o.losses
	for k := range o.byKind {
		e.byKind[k] += o.byKind[k]
	}
}

// kWh turns W·ns into kWh.
func kWh(wns float64) float64 { return wns / 1000 / float64(hour) }

// outsideTimes counts the time for which some judged point, and the customer-hours
// for which customers, are outside; all settled.
type outsideTimes struct {
	belowA, aboveA, belowB, aboveB int64   // ns with at least one judged point outside
	customersBelow                 float64 // customer·ns outside range A
	customersAbove                 float64
	customersBelowB                float64 // and outside range B
	customersAboveB                float64
}

// bucket is what is summed for the whole period and for each month.
type bucket struct {
	energies
	outsideTimes
	settled, settling  int64 // ns
	peakDemand         peak
	tapOperations      int
	capOperations      int
	low, unsolved      int // steps
	settlingOutside    int64
	steps              int
	lowestPU, highestP extreme
}

// extreme is a lowest or highest voltage with its place and time.
type extreme struct {
	value float64
	point int
	time  int64
	known bool
}

func (e *extreme) low(v float64, point int, at int64) {
	if !e.known || v < e.value {
		*e = extreme{v, point, at, true}
	}
}

func (e *extreme) high(v float64, point int, at int64) {
	if !e.known || v > e.value {
		*e = extreme{v, point, at, true}
	}
}

// statistics are those of a run: everything that is committed with an OK step.
type statistics struct {
	meter  *Meter
	judge  *judge
	points []pointStats
	dist   *distribution
	total  bucket
	months []monthBucket

	lossEnergy     []float64 // W·ns, by Meter.losses
	lossPeak       []peak    // W
	loadPeak       []peak    // by Meter.loading
	aboveRating    []int64
	aboveEmergency []int64

	lossesPeak            peak // W, of all losses
	leastDemand           peak // W, negated
	reverse               int64
	unbalance, negative   peak
	unbalanceAt           int
	unbalanceAbove3       int64
	lowJudged, highJudged extreme

	watch *watch // of quiet steps; nil before the first
}

type monthBucket struct {
	month int
	bucket
}

func newStatistics(p *Plan, m *Meter, exact int) *statistics {
	s := &statistics{
		meter: m, judge: newJudge(p, m.Points),
		points:     make([]pointStats, len(m.Points)),
		dist:       newDistribution(len(m.Points), p.Settings.Period.Steps(), exact),
		lossEnergy: make([]float64, len(m.losses)), lossPeak: make([]peak, len(m.losses)),
		loadPeak: make([]peak, len(m.loading)), aboveRating: make([]int64, len(m.loading)), aboveEmergency: make([]int64, len(m.loading)),
	}
	for i := range s.points {
		s.points[i] = pointStats{min: math.Inf(1), max: math.Inf(-1), lowestSettling: math.Inf(1), highestSettling: math.Inf(-1)}
	}
	return s
}

// month returns the bucket of a local month; months come in order, an action may
// lead into one before its step does.
func (s *statistics) month(month int) *bucket {
	for i := len(s.months) - 1; i >= 0; i-- {
		if s.months[i].month == month {
			return &s.months[i].bucket
		}
	}
	s.months = append(s.months, monthBucket{month: month})
	return &s.months[len(s.months)-1].bucket
}

// gather completes the sums with those of quiet steps.
func (s *statistics) gather() {
	if s.watch != nil {
		s.watch.gather()
	}
}

// sample is a settled interval that waits for the end of its step.
type sample struct {
	start, end int64
	reading    *Reading
	low, high  []float64 // p.u. at the meters, by point
	drops      []float64 // p.u., by service
}

// settled takes a settled interval of an OK step into account.
func (s *statistics) settled(x *sample, month *bucket) {
	ns, r := x.end-x.start, x.reading
	if s.watch != nil {
		s.watch.stale = true
	}
	s.dist.add(r.PU, ns)
	span := float64(ns)
	var out outsideTimes
	for i, v := range r.PU {
		p := &s.points[i]
		if v < p.min {
			p.min, p.minTime = v, x.start
		}
		if v > p.max {
			p.max, p.maxTime = v, x.start
		}
		p.sum += v * span
		c := &s.judge.classes[s.judge.of[i]]
		below, above := x.low[i] < c.LowA-limitSlack, x.high[i] > c.HighA+limitSlack
		if below || above {
			s.count(i, x, ns, below, above, &out)
		}
		if s.judge.judged[i] {
			s.lowJudged.low(v, i, x.start)
			s.highJudged.high(v, i, x.start)
		}
	}
	s.serve(x, ns, &out)
	for _, b := range [...]*bucket{&s.total, month} {
		b.settled += ns
		b.peakDemand.take(real(r.Source), x.start)
		b.outsideTimes.add(&out)
		if r.Lowest >= 0 {
			b.lowestPU.low(r.PU[r.Lowest], r.Lowest, x.start)
			b.highestP.high(r.PU[r.Highest], r.Highest, x.start)
		}
	}
	s.peaks(x, ns)
}

// count books a point that is outside range A.
func (s *statistics) count(i int, x *sample, ns int64, below, above bool, out *outsideTimes) {
	p, c := &s.points[i], &s.judge.classes[s.judge.of[i]]
	worseBelow, worseAbove := x.low[i] < c.LowB-limitSlack, x.high[i] > c.HighB+limitSlack
	book := func(is bool, to, any *int64) {
		if !is {
			return
		}
		*to += ns
		if s.judge.judged[i] {
			*any = ns
		}
	}
	book(below, &p.belowA, &out.belowA)
	book(above, &p.aboveA, &out.aboveA)
	book(worseBelow, &p.belowB, &out.belowB)
	book(worseAbove, &p.aboveB, &out.aboveB)
}

func (o *outsideTimes) add(x *outsideTimes) {
	o.belowA += x.belowA
	o.aboveA += x.aboveA
	o.belowB += x.belowB
	o.aboveB += x.aboveB
	o.customersBelow += x.customersBelow
	o.customersAbove += x.customersAbove
	o.customersBelowB += x.customersBelowB
	o.customersAboveB += x.customersAboveB
}

// serve books every customer once, at its worst phase.
func (s *statistics) serve(x *sample, ns int64, out *outsideTimes) {
	j := s.judge
	for i := range j.services {
		v := &j.services[i]
		below, above, belowB, aboveB := false, false, false, false
		for _, k := range v.points {
			c := &j.classes[j.of[k]]
			pu := x.reading.PU[k]
			if j.drops {
				pu -= x.drops[i]
			}
			below = below || pu < c.LowA-limitSlack
			above = above || pu > c.HighA+limitSlack
			belowB = belowB || pu < c.LowB-limitSlack
			aboveB = aboveB || pu > c.HighB+limitSlack
		}
		if below {
			out.customersBelow += v.customers * float64(ns)
		}
		if above {
			out.customersAbove += v.customers * float64(ns)
		}
		if belowB {
			out.customersBelowB += v.customers * float64(ns)
		}
		if aboveB {
			out.customersAboveB += v.customers * float64(ns)
		}
		if below || above {
			v.outside += ns
		}
	}
}

func (s *statistics) peaks(x *sample, ns int64) {
	r := x.reading
	for i, w := range r.loss {
		s.lossPeak[i].take(w, x.start)
	}
	for i, a := range r.loading {
		s.loadPeak[i].take(a, x.start)
		row := &s.meter.loading[i]
		if a > row.rating {
			s.aboveRating[i] += ns
		}
		if a > row.emergency {
			s.aboveEmergency[i] += ns
		}
	}
	s.lossesPeak.take(real(r.Losses), x.start)
	s.leastDemand.take(-real(r.Source), x.start)
	if real(r.Source) < 0 {
		s.reverse += ns
	}
	if !math.IsNaN(r.Unbalance) {
		if !s.unbalance.known || r.Unbalance > s.unbalance.value {
			s.unbalanceAt = r.UnbalanceAt
		}
		s.unbalance.take(r.Unbalance, x.start)
		if r.Unbalance > 3 {
			s.unbalanceAbove3 += ns
		}
	}
	if !math.IsNaN(r.NegativeSequence) {
		s.negative.take(r.NegativeSequence, x.start)
	}
}
