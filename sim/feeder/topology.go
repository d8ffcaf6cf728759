package feeder

import (
	"fmt"
	"math"
	"sort"
	"strings"

	"yearflow/sim/tables"
)

// link is what joins two nodes, whatever its table.
type link struct {
	kind, name string
	at         tables.Pos
	from, to   int
	fromPhases []Phase
	toPhases   []Phase
	// perPhase: each phase goes through by itself; else a side is fed when all the
	// phases of the other side are.
	perPhase bool
	galvanic bool
	open     bool
	// borrow: the to side takes its phases, of toPhases, from what else stands there.
	borrow bool
}

func (l *link) String() string { return fmt.Sprintf("%s %q", l.kind, l.name) }

func (b *builder) join(l link) { b.links = append(b.links, l) }

// phases gives each node the union of the phases of what meets it.
func (b *builder) phases() {
	set := make([]phaseSet, len(b.model.Nodes))
	for _, s := range b.model.Sources {
		set[s.Node] = phaseSet{true, true, true}
	}
	for i := range b.links {
		l := &b.links[i]
		for _, p := range l.fromPhases {
			set[l.from][p] = true
		}
		if l.borrow {
			continue
		}
		for _, p := range l.toPhases {
			set[l.to][p] = true
		}
	}
	for i := range b.links {
		l := &b.links[i]
		if l.borrow {
			b.borrow(l, set)
		}
	}
	for i := range b.model.Nodes {
		b.model.Nodes[i].Phases = listed(set[i])
	}
}

// borrow settles the low side of a single-phase transformer on a pair: across the
// pair where both phases go on from there or something stands across them, else from
// the first phase to ground.
func (b *builder) borrow(l *link, set []phaseSet) {
	wanted := set[l.to]
	name := b.model.Nodes[l.to].Name
	want := func(node tables.Text, phases tables.Text) {
		if node.Value != name {
			return
		}
		ps, err := parsePhases(phases.Value)
		if err != nil {
			return
		}
		for _, p := range ps {
			wanted[p] = true
		}
	}
	for i := range b.t.loads {
		want(b.t.loads[i].Node, b.t.loads[i].Phases)
	}
	for i := range b.t.capacitors {
		want(b.t.capacitors[i].Node, b.t.capacitors[i].Phases)
	}
	for i := range b.t.generators {
		want(b.t.generators[i].Node, b.t.generators[i].Phases)
	}
	for i := range b.t.batteries {
		want(b.t.batteries[i].Node, b.t.batteries[i].Phases)
	}
	for i := range b.t.chargers {
		want(b.t.chargers[i].Node, b.t.chargers[i].Phases)
	}
	p, q := l.toPhases[0], l.toPhases[1]
	if !wanted[q] {
		l.toPhases = []Phase{p}
	} else if !wanted[p] {
		b.faults.Add(l.at, "%s stands on %s%s and its low side on %s alone; write its phases as %s%s: the first is the low side's", l, p, q, q, q, p)
	}
	for _, p := range l.toPhases {
		set[l.to][p] = true
	}
}

// connected checks that a source reaches every node and phase; it reports islands
// and phases that come from nowhere.
func (b *builder) connected() bool {
	n := len(b.model.Nodes)
	// Islands first: nodes that nothing joins with a source.
	group := newGroups(n)
	for i := range b.links {
		if l := &b.links[i]; !l.open {
			group.join(l.from, l.to)
		}
	}
	fed := map[int]bool{}
	for _, s := range b.model.Sources {
		fed[group.of(s.Node)] = true
	}
	members := map[int][]int{}
	var order []int
	for i := range n {
		g := group.of(i)
		if !fed[g] {
			if members[g] == nil {
				order = append(order, g)
			}
			members[g] = append(members[g], i)
		}
	}
	var served []int
	for i := range n {
		if fed[group.of(i)] {
			served = append(served, i)
		}
	}
	for _, g := range order {
		b.island(members[g], served)
	}
	if len(order) > 0 {
		return false
	}
	reached := b.reach()
	return b.strayPhases(reached)
}

// island reports nodes that no source reaches. Where it is most of the feeder, the slip
// is more likely in the few names that are served: they are told too.
func (b *builder) island(nodes, served []int) {
	at := b.model.Nodes[nodes[0]].At
	var names []string
	for _, i := range nodes {
		names = append(names, b.model.Nodes[i].Name)
		if p := b.model.Nodes[i].At; p.File < at.File || p.File == at.File && p.Line < at.Line {
			at = p
		}
	}
	more := ""
	if len(names) > 20 {
		more = fmt.Sprintf(" and %d more", len(names)-20)
		names = names[:20]
	}
	hint := ""
	in := map[int]bool{}
	for _, i := range nodes {
		in[i] = true
	}
	for i := range b.links {
		if l := &b.links[i]; l.open && in[l.from] != in[l.to] {
			hint = fmt.Sprintf("; %s is open", l)
			break
		}
	}
	if len(served) > 0 && len(served) < len(nodes) && len(served) <= 5 {
		var few []string
		for _, i := range served {
			few = append(few, b.model.Nodes[i].Name)
		}
		hint += fmt.Sprintf("; a source (%s) reaches only: %s", b.model.Sources[0].At, strings.Join(few, ", "))
	}
	b.faults.Add(at, "no path leads from a source to: %s%s%s", strings.Join(names, ", "), more, hint)
}

// reach marks the phases of nodes that a source feeds.
func (b *builder) reach() []phaseSet {
	reached := make([]phaseSet, len(b.model.Nodes))
	for _, s := range b.model.Sources {
		reached[s.Node] = phaseSet{true, true, true}
	}
	at := make([][]int, len(b.model.Nodes))
	for i := range b.links {
		if l := &b.links[i]; !l.open {
			at[l.from] = append(at[l.from], i)
			at[l.to] = append(at[l.to], i)
		}
	}
	var queue []int
	for _, s := range b.model.Sources {
		queue = append(queue, s.Node)
	}
	for len(queue) > 0 {
		node := queue[0]
		queue = queue[1:]
		for _, i := range at[node] {
			l := &b.links[i]
			here, there, other := l.fromPhases, l.toPhases, l.to
			if l.to == node {
				here, there, other = l.toPhases, l.fromPhases, l.from
			}
			changed := false
			all := true
			for _, p := range here {
				all = all && reached[node][p]
			}
			for _, p := range there {
				if (l.perPhase && reached[node][p] || !l.perPhase && all) && !reached[other][p] {
					reached[other][p], changed = true, true
				}
			}
			if changed {
				queue = append(queue, other)
			}
		}
	}
	return reached
}

// strayPhases reports phases that appear downstream and not upstream: one fault for
// each stretch, at the element nearest to where the phase is missing.
func (b *builder) strayPhases(reached []phaseSet) bool {
	id := func(node int, p Phase) int { return node*PhaseCount + int(p) }
	group := newGroups(PhaseCount * len(b.model.Nodes))
	for i := range b.links {
		l := &b.links[i]
		if l.open {
			continue
		}
		if l.perPhase {
			for _, p := range l.fromPhases {
				group.join(id(l.from, p), id(l.to, p))
			}
			continue
		}
		first := -1
		for side, ps := range [][]Phase{l.fromPhases, l.toPhases} {
			node := l.from
			if side == 1 {
				node = l.to
			}
			for _, p := range ps {
				if reached[node][p] {
					continue
				}
				if first < 0 {
					first = id(node, p)
				}
				group.join(first, id(node, p))
			}
		}
	}
	told := map[int]bool{}
	report := func(border bool) {
		for i := range b.links {
			l := &b.links[i]
			for side, ps := range [][]Phase{l.fromPhases, l.toPhases} {
				node := l.from
				if side == 1 {
					node = l.to
				}
				for _, p := range ps {
					g := group.of(id(node, p))
					upstream := listed(reached[node])
					if reached[node][p] || told[g] || border && len(upstream) == 0 {
						continue
					}
					told[g] = true
					name := b.model.Nodes[node].Name
					b.faults.Add(l.at, "%s has phase %s at node %q, but no path leads from there to phase %s of a source; a source reaches %s there", l, p, name, p, orNone(upstream))
				}
			}
		}
	}
	report(true)
	report(false)
	return len(told) == 0
}

func orNone(ps []Phase) string {
	if len(ps) == 0 {
		return "no phase"
	}
	return word(ps)
}

// parts numbers the galvanic parts: what sections, closed switches and regulators join.
func (b *builder) parts() {
	group := newGroups(len(b.model.Nodes))
	for i := range b.links {
		if l := &b.links[i]; l.galvanic && !l.open {
			group.join(l.from, l.to)
		}
	}
	number := map[int]int{}
	for i := range b.model.Nodes {
		g := group.of(i)
		if _, ok := number[g]; !ok {
			number[g] = len(number)
		}
		b.model.Nodes[i].Part = number[g]
	}
	grounded := make([]bool, len(number))
	for _, s := range b.model.Sources {
		grounded[b.model.Nodes[s.Node].Part] = true
	}
	for i := range b.model.Transformers {
		t := &b.model.Transformers[i]
		from, to := t.grounds(&b.model.Nodes[t.To])
		if from {
			grounded[b.model.Nodes[t.From].Part] = true
		}
		if to {
			grounded[b.model.Nodes[t.To].Part] = true
		}
	}
	tapped := b.midTaps(len(number))
	for i := range b.model.Nodes {
		b.model.Nodes[i].Grounded = grounded[b.model.Nodes[i].Part]
		b.model.Nodes[i].MidTap = tapped[b.model.Nodes[i].Part]
	}
}

// midTaps finds the phases of the winding with a grounded middle, by part.
func (b *builder) midTaps(parts int) [][]Phase {
	out := make([][]Phase, parts)
	by := make([]string, parts)
	for i := range b.model.Transformers {
		t := &b.model.Transformers[i]
		part := b.model.Nodes[t.To].Part
		if t.Connection != "unit" {
			continue
		}
		low := ordered(t.LowEnds)
		switch {
		case !t.MidTap:
		case out[part] == nil:
			out[part], by[part] = low, t.Name
		case word(out[part]) != word(low):
			b.faults.Add(t.At, "transformer %q grounds the middle of %s and transformer %q that of %s on one part of the feeder: their windings short each other; ground one", t.Name, word(low), by[part], word(out[part]))
		}
	}
	return out
}

// groups joins numbers into sets; the name of a set is its smallest member.
type groups []int

func newGroups(n int) groups {
	g := make(groups, n)
	for i := range g {
		g[i] = i
	}
	return g
}

func (g groups) of(i int) int {
	for g[i] != i {
		g[i] = g[g[i]]
		i = g[i]
	}
	return i
}

func (g groups) join(i, j int) {
	i, j = g.of(i), g.of(j)
	if i > j {
		i, j = j, i
	}
	g[j] = i
}

// floating reports what would stand to ground on a part that nothing grounds.
func (b *builder) floating() {
	m := b.model
	tell := func(at tables.Pos, node int, format string, args ...any) {
		if !m.Nodes[node].Grounded {
			b.faults.Add(at, "%s stands to ground, but nothing grounds the part of the feeder at node %q (no winding, source or neutral does); %s",
				fmt.Sprintf(format, args...), m.Nodes[node].Name, "connect it in delta, or ground a winding")
		}
	}
	for i := range m.Loads {
		l := &m.Loads[i]
		if l.Connection == Wye {
			tell(l.At, l.Node, "load %q", l.Name)
		}
		for _, p := range l.Phases {
			if n := &m.Nodes[l.Node]; n.HighLeg(p) {
				b.warnings.Add(l.At, "load %q stands between the high leg, %s, of a four-wire delta and ground, at %s V: hardly anything is made for that; usual: lighting on %s, power in delta", l.Name, p, amount(math.Round(1000*n.ToGround(p))), word(n.MidTap))
			}
		}
	}
	for i := range m.Capacitors {
		c := &m.Capacitors[i]
		if c.Connection == Wye {
			tell(c.At, c.Node, "capacitor %q", c.Name)
		}
		b.floatingControl(c)
	}
	for i := range m.Generators {
		if m.Generators[i].Connection == Wye {
			tell(m.Generators[i].At, m.Generators[i].Node, "generator %q", m.Generators[i].Name)
		}
	}
	for i := range m.Batteries {
		if m.Batteries[i].Connection == Wye {
			tell(m.Batteries[i].At, m.Batteries[i].Node, "battery %q", m.Batteries[i].Name)
		}
	}
	for i := range m.Chargers {
		if m.Chargers[i].Connection == Wye {
			tell(m.Chargers[i].At, m.Chargers[i].Node, "charger %q", m.Chargers[i].Name)
		}
	}
	for i := range m.Regulators {
		if m.Regulators[i].Connection == RegulatorWye {
			tell(m.Regulators[i].At, m.Regulators[i].From, "regulator %q, connected in wye,", m.Regulators[i].Name)
		}
	}
}

// floatingControl reports a control that would read a voltage to ground on a part
// that nothing grounds.
func (b *builder) floatingControl(c *Capacitor) {
	s, m := c.Control, b.model
	if s == nil {
		return
	}
	grounded := m.Nodes[c.Node].Grounded
	reads := s.Control == CapacitorVoltage || !Unknown(s.OverrideOn) || !Unknown(s.OverrideOff)
	switch {
	case !grounded && reads && len(s.Phase) != 2:
		b.faults.Add(s.At, "the control of capacitor %q reads a voltage, but nothing grounds the part of the feeder at node %q: name a pair such as AB, or leave the override blank", c.Name, m.Nodes[c.Node].Name)
	case len(s.Phase) == 1 && (!grounded || s.Watched != nil && !m.Nodes[b.watchedFrom(s.Watched)].Grounded):
		b.faults.Add(s.At, "the control of capacitor %q names phase %s, but nothing grounds the part of the feeder that it reads; leave the phase blank", c.Name, s.Phase[0])
	}
}

// watchedFrom is the node at which a watched element is measured.
func (b *builder) watchedFrom(w *Watched) int {
	switch w.Kind {
	case "section":
		return b.model.Sections[w.Index].From
	case "switch":
		return b.model.Switches[w.Index].From
	case "transformer":
		return b.model.Transformers[w.Index].From
	}
	return b.model.Regulators[w.Index].From
}

// sortedBy returns the indices 0..n−1 in the order of names.
func sortedBy(n int, name func(int) string) []int {
	out := make([]int, n)
	for i := range out {
		out[i] = i
	}
	sort.SliceStable(out, func(a, b int) bool { return name(out[a]) < name(out[b]) })
	return out
}
