package feeder

import (
	"sort"
	"strings"
)

// idealLoops reports loops, phase by phase, of closed switches and regulators without
// impedance: nothing tells how a current divides between their two ways. Two stiff
// sources that such elements join are a loop too.
func (b *builder) idealLoops() {
	m := b.model
	stiff := len(m.Nodes)
	group := newGroups(PhaseCount * (len(m.Nodes) + 1))
	id := func(node int, p Phase) int { return node*PhaseCount + int(p) }
	held := map[int]bool{}
	for i := range m.Sources {
		s := &m.Sources[i]
		if !s.Stiff() && !s.AtBus {
			continue
		}
		if held[s.Node] {
			b.faults.Add(s.At, "source %q: another stiff source holds the voltage of this node", m.Nodes[s.Node].Name)
			continue
		}
		held[s.Node] = true
		for p := A; p <= C; p++ {
			group.join(id(s.Node, p), id(stiff, p))
		}
	}
	var ideal [PhaseCount][]*link // by phase: those that close no loop
	regulators := map[string]*Regulator{}
	for i := range m.Regulators {
		regulators[m.Regulators[i].Name] = &m.Regulators[i]
	}
	for i := range b.links {
		l := &b.links[i]
		if l.open || l.kind != "switch" && l.kind != "regulator" {
			continue
		}
		if l.kind == "regulator" {
			if r := regulators[l.name]; r.Impedance > 0 || r.LoadLoss > 0 {
				continue
			}
		}
		for _, p := range l.fromPhases {
			from, to := id(l.from, p), id(l.to, p)
			if group.of(from) != group.of(to) {
				group.join(from, to)
				ideal[p] = append(ideal[p], l)
				continue
			}
			names := append(loopOf(ideal[p], l), l.kind+" "+l.name)
			sort.Strings(names)
			b.faults.Add(l.at, "%s: switches and regulators in parallel, in a loop or across stiff sources leave the current between them open: open one, give one of the regulators an impedance [%%], or replace a switch by a short section", strings.Join(names, ", "))
			break
		}
	}
}

// loopOf returns the names of the ideal links between the ends of l; across stiff
// sources, of which there is no such path, none.
func loopOf(ideal []*link, l *link) []string {
	type hop struct {
		node int
		path []string
	}
	seen := map[int]bool{l.from: true}
	for queue := []hop{{l.from, nil}}; len(queue) > 0; queue = queue[1:] {
		h := queue[0]
		if h.node == l.to {
			return h.path
		}
		for _, o := range ideal {
			next := o.to
			if o.to == h.node {
				next = o.from
			} else if o.from != h.node {
				continue
			}
			if !seen[next] {
				seen[next] = true
				queue = append(queue, hop{next, append(append([]string(nil), h.path...), o.kind+" "+o.name)})
			}
		}
	}
	return nil
}

// clock returns by how many hours, of 30°, the low side of a bank lags the high side.
func (t *Transformer) clock(low *Node) int {
	switch t.Connection {
	case "1ph":
		if len(t.Phases) == 2 && !has(low.Phases, t.Phases[1]) {
			if (t.Phases[0]+1)%3 == t.Phases[1] {
				return 11 // AB leads A by 30°
			}
			return 1
		}
		return 0
	case "open-delta/open-delta", "center-tap", "unit":
		return 0
	case "open-wye/open-delta":
		if p := t.Pairs[0]; (p[0]+1)%3 == p[1] {
			return 1 // as YNd1: A–N against a–b
		}
		return 11
	}
	hours := 0
	for _, d := range t.Connection[strings.IndexAny(t.Connection, "0123456789"):] {
		hours = hours*10 + int(d-'0')
	}
	return hours
}

// phaseShifts reports banks in parallel whose phase shifts differ: that is a short
// circuit.
func (b *builder) phaseShifts() {
	m := b.model
	type step struct{ part, hours, bank int }
	at := map[int][]step{}
	for i := range m.Transformers {
		t := &m.Transformers[i]
		if t.Connection == "unit" {
			continue // a bank of units has the shift that its terminals say
		}
		from, to, h := m.Nodes[t.From].Part, m.Nodes[t.To].Part, t.clock(&m.Nodes[t.To])
		at[from] = append(at[from], step{to, h, i})
		at[to] = append(at[to], step{from, 12 - h, i})
	}
	hours := map[int]int{}
	told := map[int]bool{}
	for i := range m.Nodes {
		if _, seen := hours[m.Nodes[i].Part]; seen {
			continue
		}
		hours[m.Nodes[i].Part] = 0
		queue := []int{m.Nodes[i].Part}
		for len(queue) > 0 {
			part := queue[0]
			queue = queue[1:]
			for _, s := range at[part] {
				want := (hours[part] + s.hours) % 12
				got, seen := hours[s.part]
				if !seen {
					hours[s.part] = want
					queue = append(queue, s.part)
				} else if got != want && !told[s.bank] {
					told[s.bank] = true
					t := &m.Transformers[s.bank]
					b.faults.Add(t.At, "transformer %q (%s) is in parallel with a bank of another phase shift: that is a short circuit; give both one clock number", t.Name, t.Connection)
				}
			}
		}
	}
}
