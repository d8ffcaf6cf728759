package profiles

import (
	"fmt"
	"strings"
)

// shaped ends the rule of a stretch that a class's shape filled.
const shaped = "class shape"

// Shape estimates once more, by the shape of the meter's class, the stretches for which
// the meter had no like days: the shape times the ratio of the meter's energy to the
// shape's over the values that were read, or scaled to what a register counted. It changes
// the meter and the list of what was mended, and returns the stretches; none where
// there was nothing to do. It fails where there is no such meter, where the shape does
// not cover it, and where the shape is nothing wherever the meter was read.
func (s *MeterSet) Shape(meter string, shape *Series) ([]Mended, error) {
	m, ok := s.Lookup(meter)
	if !ok {
		return nil, fmt.Errorf("there is no meter %q", meter)
	}
	read := make([]bool, len(m.values))
	for k := range read {
		read[k] = true
	}
	var todo []int
	for i := range s.Mended {
		one := &s.Mended[i]
		if one.Meter != meter || !estimated(one.Rule) {
			continue
		}
		for k := m.at(one.From); k < m.at(one.To); k++ {
			read[k] = false
		}
		if strings.HasSuffix(one.Rule, methodNames[byMeanDay]) || strings.HasSuffix(one.Rule, methodNames[byMean]) {
			todo = append(todo, i)
		}
	}
	if len(todo) == 0 {
		return nil, nil
	}
	start, end := m.Span()
	sampler, err := NewSampler(Axis{Start: start, End: end, Step: m.step, Zone: m.zone}, []*Series{shape})
	if err != nil {
		return nil, fmt.Errorf("meter %q: %w", meter, err)
	}
	values := make([]float64, len(m.values))
	var own, class wide
	for k := range values {
		sampler.Step(values[k:k+1], k)
		if read[k] {
			own.add(float64(m.values[k]))
			class.add(values[k])
		}
	}
	if !(class.hi > 0) {
		return nil, fmt.Errorf("meter %q: the shape %q is nothing wherever the meter was read", meter, shape.Name)
	}
	var out []Mended
	for _, i := range todo {
		m.reshape(&s.Mended[i], values, own.hi/class.hi)
		out = append(out, s.Mended[i])
	}
	return out, nil
}

// estimated reports whether a rule is one that puts estimates of real power in place.
func estimated(rule string) bool {
	for _, name := range methodNames[1:] {
		if strings.HasSuffix(rule, ", "+name) {
			return !strings.HasPrefix(rule, "kvar ")
		}
	}
	return strings.HasSuffix(rule, ", "+shaped)
}

// at returns the interval that begins at t.
func (m *Meter) at(t int64) int { return int((t - m.start) / m.step) }

// reshape puts factor × values in the place of a stretch.
func (m *Meter) reshape(one *Mended, values []float64, factor float64) {
	h := float64(m.step) / float64(hour)
	from, to := m.at(one.From), m.at(one.To)
	var was, shape, now wide
	for k := from; k < to; k++ {
		was.add(float64(m.values[k]))
		shape.add(values[k])
	}
	// What a register counted stands in the books as read.
	if counted := was.hi*h - one.Energy; strings.HasPrefix(one.Rule, causeNames[missing]+",") && counted > 1e-6*was.hi*h && shape.hi > 0 {
		factor = counted / (shape.hi * h)
	}
	for k := from; k < to; k++ {
		m.values[k] = float32(factor * values[k])
		now.add(float64(m.values[k]))
	}
	added := (now.hi - was.hi) * h
	one.Energy += added
	m.After += added
	one.Rule = one.Rule[:strings.LastIndex(one.Rule, ", ")+2] + shaped
}
