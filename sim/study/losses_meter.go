package study

import (
	"math"
	"time"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// The kinds of losses of the loss estimate: those of losses.csv, with the services apart
// from the lines.
const (
	lineKind = iota
	serviceKind
	loadKind
	noLoadKind
	regulatorKind
	kinds
)

var kindNames = [kinds]string{"line", "service", "transformer load", "transformer no-load", "regulator"}

// monthLosses is what a local month lost, by element in the order of losses.csv.
type monthLosses struct {
	name          string
	source, given float64 // kWh of the source, and of generation
	energy        []float64
	money         []float64 // priced step by step
	peak          float64   // kW, of the source, or of the profile whose peak is charged
	peakAt        int64
	atPeak        []float64 // kW of losses then
}

// lossMeter is a recorder that sums the losses of every element by month; only steps
// that are ok count, as in the results.
type lossMeter struct {
	meter   *results.Meter
	reading *results.Reading
	zone    *time.Location
	start   int64
	step    int64
	price   []float64 // per kWh by step; nil: flat
	flat    float64
	charged []float64 // by step: the profile whose peak is charged; nil: the feeder's own
	kind    []int     // by element

	months []monthLosses
	hours  float64 // of solved steps that count

	// Peaks of settled intervals, kW, and when; loadLosses leave the no-load losses out.
	all, load, demand highest
	byKind            [kinds]highest
	loadEnergy        float64 // kWh, of the losses without no-load losses

	pending stepLosses
}

type highest struct {
	kw float64
	at int64
}

func (h *highest) take(kw float64, at int64) {
	if kw > h.kw || h.at == 0 {
		h.kw, h.at = kw, at
	}
}

// stepLosses waits for the end of its step, which says whether it counts.
type stepLosses struct {
	energy           []float64 // W·ns
	source, given    float64
	ns               int64
	all, load, power highest
	byKind           [kinds]highest
	atPower          []float64 // kW of losses at the source's highest power in the step
	settled          bool
}

var _ sim.Recorder = (*lossMeter)(nil)

// newLossMeter prepares it for an engine. Prices are those of the base.
func newLossMeter(e *sim.Engine, p *feeder.Prices, price, charged []float64) *lossMeter {
	m := e.Meter()
	set := e.Study.Settings.Period
	l := &lossMeter{meter: m, reading: m.NewReading(), zone: set.Zone, start: set.Start, step: set.Step, price: price, flat: p.Energy, charged: charged,
		kind: kindsOf(e.Study.Model, m.ElementLosses())}
	n := len(l.kind)
	l.pending.energy, l.pending.atPower = make([]float64, n), make([]float64, n)
	return l
}

// kindsOf tells the kind of each element: sections that are triplex, or carry a leg of a
// centre-tapped secondary, are services.
func kindsOf(m *feeder.Model, elements []results.ElementLoss) []int {
	service := map[string]bool{}
	for i := range m.Sections {
		s := &m.Sections[i]
		is := m.Constructions[s.Construction].Kind == "triplex"
		for _, p := range s.Phases {
			is = is || p.Leg()
		}
		service[s.Name] = is
	}
	out := make([]int, len(elements))
	for i, e := range elements {
		switch e.Kind {
		case results.LineLoss:
			out[i] = lineKind
			if service[e.Element] {
				out[i] = serviceKind
			}
		case results.TransformerLoadLoss:
			out[i] = loadKind
		case results.TransformerNoLoadLoss:
			out[i] = noLoadKind
		default:
			out[i] = regulatorKind
		}
	}
	return out
}

// Interval adds an interval to the step at hand.
func (l *lossMeter) Interval(iv *results.Interval) error {
	ns := float64(iv.End - iv.Start)
	if ns <= 0 {
		return nil
	}
	r, p := l.reading, &l.pending
	l.meter.Read(iv.State, r)
	var byKind [kinds]float64
	load := 0.0
	for i, w := range r.ElementPower() {
		p.energy[i] += w * ns
		byKind[l.kind[i]] += w / 1000
		if l.kind[i] != noLoadKind {
			load += w / 1000
		}
	}
	p.source += real(r.Source) * ns
	p.given += real(r.Generation) * ns
	p.ns += iv.End - iv.Start
	if !iv.Settled {
		return nil
	}
	p.settled = true
	p.all.take(real(r.Losses)/1000, iv.Start)
	p.load.take(load, iv.Start)
	for k, kw := range byKind {
		p.byKind[k].take(kw, iv.Start)
	}
	if kw := real(r.Source) / 1000; kw > p.power.kw || p.power.at == 0 {
		p.power = highest{kw, iv.Start}
		for i, w := range r.ElementPower() {
			p.atPower[i] = w / 1000
		}
	}
	return nil
}

// Action is of no interest.
func (l *lossMeter) Action(*results.Action) error { return nil }

// Step enters the step into its month.
func (l *lossMeter) Step(s *results.Step) error {
	if s.Status == results.OK {
		l.commit(s)
	}
	p := &l.pending
	energy, at := p.energy, p.atPower
	clear(energy)
	*p = stepLosses{energy: energy, atPower: at}
	return nil
}

func (l *lossMeter) commit(s *results.Step) {
	p, m := &l.pending, l.month(s.Start)
	step := int((s.Start - l.start) / l.step)
	price := l.flat
	if l.price != nil {
		price = l.price[step]
	}
	for i, e := range p.energy {
		kwh := kWh(e)
		m.energy[i] += kwh
		m.money[i] += kwh * price
		if l.kind[i] != noLoadKind {
			l.loadEnergy += kwh
		}
	}
	m.source += kWh(p.source)
	m.given += kWh(p.given)
	l.hours += float64(p.ns) / 3.6e12
	if !p.settled {
		return
	}
	l.all.take(p.all.kw, p.all.at)
	l.load.take(p.load.kw, p.load.at)
	l.demand.take(p.power.kw, p.power.at)
	for k := range l.byKind {
		l.byKind[k].take(p.byKind[k].kw, p.byKind[k].at)
	}
	charged := p.power.kw
	if l.charged != nil {
		charged = l.charged[step]
	}
	if m.peakAt == 0 || charged > m.peak {
		m.peak, m.peakAt = charged, p.power.at
		copy(m.atPeak, p.atPower)
	}
}

// month returns the month of an instant; they come in order.
func (l *lossMeter) month(ns int64) *monthLosses {
	name := time.Unix(0, ns).In(l.zone).Format("2006-01")
	if n := len(l.months); n > 0 && l.months[n-1].name == name {
		return &l.months[n-1]
	}
	n := len(l.kind)
	l.months = append(l.months, monthLosses{name: name, energy: make([]float64, n), money: make([]float64, n), atPeak: make([]float64, n), peak: math.NaN()})
	return &l.months[len(l.months)-1]
}

func kWh(wns float64) float64 { return wns / 1000 / 3.6e12 }
