package feeder

// Behind is the part of a feeder that a regulator feeds: what is reached from its load
// side without passing it.
type Behind struct {
	// Fed tells that a source stands there: one of its own, or a way around the
	// regulator to the one before it.
	Fed bool
	// reached and through are by node: whether it belongs to the part, and the first
	// transformer on the way that mixes phases, −1 where there is none.
	reached []bool
	through []int
	model   *Model
}

// Behind finds the part behind a regulator.
func (m *Model) Behind(regulator int) *Behind {
	b := &Behind{reached: make([]bool, len(m.Nodes)), through: make([]int, len(m.Nodes)), model: m}
	type way struct{ to, bank int }
	ways := make([][]way, len(m.Nodes))
	join := func(from, to, bank int) {
		ways[from] = append(ways[from], way{to, bank})
		ways[to] = append(ways[to], way{from, bank})
	}
	for i := range m.Sections {
		join(m.Sections[i].From, m.Sections[i].To, -1)
	}
	for i := range m.Switches {
		if m.Switches[i].Closed {
			join(m.Switches[i].From, m.Switches[i].To, -1)
		}
	}
	for i := range m.Transformers {
		bank := i
		if m.Transformers[i].Connection == "YNyn0" {
			bank = -1
		}
		join(m.Transformers[i].From, m.Transformers[i].To, bank)
	}
	for i := range m.Regulators {
		if i != regulator {
			join(m.Regulators[i].From, m.Regulators[i].To, -1)
		}
	}
	first := m.Regulators[regulator].To
	b.reached[first], b.through[first] = true, -1
	for queue := []int{first}; len(queue) > 0; queue = queue[1:] {
		at := queue[0]
		for _, w := range ways[at] {
			if b.reached[w.to] {
				continue
			}
			b.reached[w.to], b.through[w.to] = true, b.through[at]
			if b.through[at] < 0 {
				b.through[w.to] = w.bank
			}
			queue = append(queue, w.to)
		}
	}
	for _, s := range m.Sources {
		b.Fed = b.Fed || b.reached[s.Node]
	}
	return b
}

// Share returns which part of the power of a load or a generator the regulator carries
// in one of its phases: that of a pair half in each phase, that behind a bank that
// mixes phases equally in all of the bank's. It is a first guess, without losses.
func (b *Behind) Share(node int, phases []Phase, pairs []Pair, p Phase) float64 {
	if !b.reached[node] {
		return 0
	}
	if t := b.through[node]; t >= 0 {
		return portion(b.model.Transformers[t].Phases, p)
	}
	if len(pairs) == 0 {
		return portion(phases, p)
	}
	n := 0
	for _, q := range pairs {
		if q[0] == p || q[1] == p {
			n++
		}
	}
	return float64(n) / float64(2*len(pairs))
}

func portion(phases []Phase, p Phase) float64 {
	for _, q := range phases {
		if q == p {
			return 1 / float64(len(phases))
		}
	}
	return 0
}
