package results

import (
	"hash/fnv"
	"math"
)

// Totals is a recorder that keeps sums alone, for searches that run a study hundreds of
// times: it writes no file and keeps no voltage. What it counts is what summary.csv and
// monthly.csv of the same run say, by the same code.
type Totals struct {
	plan  *Plan
	meter *Meter
	clock *zoneClock
	stats statistics // its judge alone is used

	sums   Sums
	months []monthPeak

	// The step at hand: its settled intervals wait until it is known whether they count.
	pool      []*sample
	used      int
	energies  energies
	settling  int64
	stop      int64
	hunting   int64
	ok        []byte
	operating []int

	block *totalsBlock // of quiet steps; nil before the first
}

type monthPeak struct {
	month int
	peak
}

// Sums are what Totals counted. Quantities are those of summary.csv; settling share is
// in per cent, voltages in p.u.
type Sums struct {
	CustomersBelowA, CustomersAboveA, CustomersBelowB, CustomersAboveB float64 // customer-hours
	SourceKWh, LoadKWh, GenerationKWh, LossesKWh                       float64
	PeakKW, MonthlyPeaksKW                                             float64 // highest of the source; sum over the months, those below zero as zero
	LowestPU, HighestPU                                                float64 // of judged places
	TapOperations, CapacitorOperations                                 int
	StopHours, HuntingHours                                            float64 // device-hours
	SettlingShare                                                      float64
	Steps, Low, Unsolved                                               int
	// Operations are those of each of Plan.Devices.
	Operations []int
	// Pattern tells runs apart in which other steps are ok.
	Pattern uint64
}

// NewTotals prepares the recorder of a plan. It serves any number of runs, one after
// the other, each begun with Reset.
func NewTotals(p *Plan) *Totals {
	m := NewMeter(p.Network)
	t := &Totals{plan: p, meter: m, clock: newZoneClock(p.Settings.Period.Zone), stats: statistics{meter: m, judge: newJudge(p, m.Points)}}
	t.Reset()
	return t
}

// Reset forgets what has been counted.
func (t *Totals) Reset() {
	t.sums = Sums{PeakKW: math.Inf(-1), LowestPU: math.Inf(1), HighestPU: math.Inf(-1)}
	t.operating = make([]int, len(t.plan.Devices))
	t.months, t.ok = t.months[:0], t.ok[:0]
	for i := range t.stats.judge.services {
		t.stats.judge.services[i].outside = 0
	}
	t.stats.total = bucket{}
	t.begin()
}

// begin begins a step.
func (t *Totals) begin() {
	t.used, t.energies, t.settling, t.stop, t.hunting = 0, energies{}, 0, 0, 0
}

// Action counts a movement; start-up makes none.
func (t *Totals) Action(a *Action) error {
	t.operating[a.Device]++
	if t.plan.Devices[a.Device].Kind == TapDevice {
		t.stats.total.tapOperations++
	} else {
		t.stats.total.capOperations++
	}
	return nil
}

// Interval takes an interval; it belongs to the step that is closed next.
func (t *Totals) Interval(iv *Interval) error {
	ns := iv.End - iv.Start
	if ns <= 0 {
		return nil
	}
	if t.used == len(t.pool) {
		j := t.stats.judge
		t.pool = append(t.pool, &sample{reading: t.meter.NewReading(), drops: make([]float64, len(j.services))})
	}
	x := t.pool[t.used]
	x.start, x.end = iv.Start, iv.End
	t.meter.readPowers(iv.State, x.reading)
	t.energies.add(x.reading, float64(ns))
	for _, d := range iv.Devices {
		if d.Hunting {
			t.hunting += ns
		}
		if d.AtStop && iv.Settled {
			t.stop += ns
		}
	}
	if !iv.Settled {
		t.settling += ns
		return nil
	}
	t.meter.readVoltages(iv.State, x.reading)
	if j := t.stats.judge; j.drops {
		for i := range j.services {
			x.drops[i] = j.dropOf(&j.services[i], iv.State.Load)
		}
	}
	t.used++ // keeps x
	return nil
}

// Step closes a step; what is not ok enters no sum but its own.
func (t *Totals) Step(s *Step) error {
	b := &t.stats.total
	b.steps++
	t.ok = append(t.ok, byte(min(s.Status, 1)))
	switch s.Status {
	case Low:
		b.low++
	case Unsolved:
		b.unsolved++
	default:
		month := t.month(t.clock.monthOf(s.Start))
		for _, x := range t.pool[:t.used] {
			t.settled(x, month)
		}
		b.energies.merge(&t.energies)
		b.settling += t.settling
		t.sums.StopHours += float64(t.stop) / float64(hour)
		t.sums.HuntingHours += float64(t.hunting) / float64(hour)
	}
	t.begin()
	return nil
}

// month returns the place of a local month's peak; months come in order.
func (t *Totals) month(month int) *peak {
	if n := len(t.months); n == 0 || t.months[n-1].month != month {
		t.months = append(t.months, monthPeak{month: month})
	}
	return &t.months[len(t.months)-1].peak
}

func (t *Totals) settled(x *sample, month *peak) {
	b, ns, r := &t.stats.total, x.end-x.start, x.reading
	var out outsideTimes
	t.stats.serve(x, ns, &out)
	b.outsideTimes.add(&out)
	b.settled += ns
	b.peakDemand.take(real(r.Source), x.start)
	month.take(real(r.Source), x.start)
	for i, v := range r.PU {
		if t.stats.judge.judged[i] {
			t.sums.LowestPU, t.sums.HighestPU = min(t.sums.LowestPU, v), max(t.sums.HighestPU, v)
		}
	}
}

// Sums returns what the run came to. A peak or a voltage that is not known is NaN.
func (t *Totals) Sums() Sums {
	b, s := &t.stats.total, t.sums
	hours := func(ns float64) float64 { return ns / float64(hour) }
	s.CustomersBelowA, s.CustomersAboveA = hours(b.customersBelow), hours(b.customersAbove)
	s.CustomersBelowB, s.CustomersAboveB = hours(b.customersBelowB), hours(b.customersAboveB)
	s.SourceKWh, s.LoadKWh, s.GenerationKWh, s.LossesKWh = kWh(b.source), kWh(b.load), kWh(b.generation), kWh(b.losses)
	s.PeakKW = b.peakDemand.orNaN() / 1000
	for i := range t.months {
		if p := t.months[i].orNaN(); p > 0 {
			s.MonthlyPeaksKW += p / 1000
		}
	}
	if !b.peakDemand.known {
		s.LowestPU, s.HighestPU = math.NaN(), math.NaN()
	}
	s.TapOperations, s.CapacitorOperations = b.tapOperations, b.capOperations
	s.SettlingShare = share(float64(b.settling), float64(b.settled+b.settling))
	s.Steps, s.Low, s.Unsolved = b.steps, b.low, b.unsolved
	s.Operations = append([]int(nil), t.operating...)
	h := fnv.New64a()
	h.Write(t.ok) // never fails
	s.Pattern = h.Sum64()
	return s
}
