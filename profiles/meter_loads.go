package profiles

import (
	"time"

	"yearflow/sim/tables"
)

// MeteredLoad is the sum of a load's meters over a run.
type MeteredLoad struct {
	Load   string
	At     tables.Pos // of its first tie
	Meters []string
	Series *Series // kW, with kvar where all its meters have it; covers the axis
	KWh    float64 // over the axis
	PeakKW float64 // the highest value of the series
	// Outside lists what stands where a meter has no data.
	Outside []Mended
}

// nearEnd is how far beyond its first and last value a meter is taken to go on as it
// does a week further in; beyond that it is taken not to be there.
const nearEnd = 7 * day

const (
	ruleNearEnd = "beyond its first or last value, as a week away"
	ruleAbsent  = "before it begins or after it ends, zero"
)

// Loads adds up the meters of each load over an axis, in the order in which ties first
// name a load. Where a load's meters have several steps the sum has their greatest
// common one. A load whose meters all lie outside the axis is a fault. Ties must have
// passed CheckTies; one without data is passed over.
func (s *MeterSet) Loads(ties []Tie, a Axis) ([]MeteredLoad, error) {
	var faults tables.Faults
	byLoad := make(map[string][]Tie)
	var order []string
	for _, t := range ties {
		if _, ok := s.index[t.Meter]; !ok {
			continue
		}
		if byLoad[t.Load] == nil {
			order = append(order, t.Load)
		}
		byLoad[t.Load] = append(byLoad[t.Load], t)
	}
	if a.Steps() == 0 {
		faults.Add(tables.Pos{}, "the period has no steps")
		return nil, faults.Err()
	}
	loads := make([]MeteredLoad, len(order))
	wrong := make([]tables.Faults, len(order))
	inParallel(len(order), func() func(int) {
		return func(i int) { loads[i] = s.load(order[i], byLoad[order[i]], a, &wrong[i]) }
	})
	for _, one := range wrong {
		faults = append(faults, one...)
	}
	return loads, faults.Err()
}

func (s *MeterSet) load(name string, ties []Tie, a Axis, faults *tables.Faults) MeteredLoad {
	l := MeteredLoad{Load: name, At: ties[0].At}
	meters := make([]*Meter, len(ties))
	inside, reactive := false, true
	for i, t := range ties {
		m := s.meters[s.index[t.Meter]]
		meters[i] = m
		l.Meters = append(l.Meters, m.Name)
		start, end := m.Span()
		inside = inside || start < a.End && end > a.Start
		reactive = reactive && m.kvar != nil
	}
	if !inside {
		start, end := meters[0].Span()
		faults.Add(ties[0].At, "load %q: its meters have no value inside the period %s to %s; meter %q covers %s to %s",
			name, Format(a.Start, a.Zone), Format(a.End, a.Zone), meters[0].Name, Format(start, a.Zone), Format(end, a.Zone))
		return l
	}
	g := commonGrid(meters, a)
	kw, kvar := make([]float64, g.n), []float64(nil)
	if reactive {
		kvar = make([]float64, g.n)
	}
	for i, m := range meters {
		l.add(m, ties[i].Multiplier, g, kw, kvar, a)
	}
	l.Series = newSeries(name, unit{"kW", 0, 1, 1}, ties[0].At, g, kw)
	if reactive {
		l.Series.Kvar = newSeries(name, unit{"kvar", 0, 1, 1}, ties[0].At, g, kvar)
	}
	var sum wide
	for k, v := range kw {
		from, to := l.Series.Interval(k)
		sum.addProduct(float64(min(to, a.End)-max(from, a.Start)), v)
		l.PeakKW = max(l.PeakKW, v)
	}
	l.KWh = sum.over(float64(hour))
	return l
}

// commonGrid returns a grid that covers the axis and on which all meters are constant
// in each step.
func commonGrid(meters []*Meter, a Axis) grid {
	step := meters[0].step
	for _, m := range meters {
		step = divisor(step, m.step)
		step = divisor(step, m.start-meters[0].start)
	}
	start := meters[0].start + floorDiv(a.Start-meters[0].start, step)*step
	zone := a.Zone
	if zone == nil {
		zone = time.UTC
	}
	return grid{start: start, stamp: start, step: step, n: int((a.End-start-1)/step) + 1, zone: zone}
}

// divisor is the greatest common divisor of a > 0 and b.
func divisor(a, b int64) int64 {
	for b != 0 {
		a, b = b, a%b
	}
	return max(a, -a)
}

// add adds a meter to the sums.
func (l *MeteredLoad) add(m *Meter, multiplier float64, g grid, kw, kvar []float64, a Axis) {
	start, end := m.Span()
	h := float64(g.step) / float64(hour)
	var list [2]Mended // near an end, absent
	list[0] = Mended{Meter: m.Name, Rule: ruleNearEnd}
	list[1] = Mended{Meter: m.Name, Rule: ruleAbsent}
	for j := range kw {
		t := g.start + int64(j)*g.step
		u := t
		which := -1
		switch {
		case t < start:
			u, which = t+nearEnd, 0
		case t >= end:
			u, which = t-nearEnd, 0
		}
		if u < start || u >= end {
			which = 1
		}
		v := 0.0
		if which != 1 {
			k := int((u - m.start) / m.step)
			v = float64(m.values[k]) * multiplier
			kw[j] += v
			if kvar != nil {
				kvar[j] += float64(m.kvar[k]) * multiplier
			}
		}
		if which >= 0 {
			one := &list[which]
			if one.Count == 0 {
				one.From = t
			}
			one.To = t + g.step
			one.Count++
			one.Energy += v * h
		}
	}
	for _, one := range list {
		if one.Count > 0 {
			l.Outside = append(l.Outside, one)
		}
	}
}
