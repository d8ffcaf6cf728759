package feeder

import (
	"fmt"
	"math"
	"strconv"

	"yearflow/sim/tables"
)

// sameRating is how far two ratings may stand apart and still be one nominal
// voltage: 7.2 kV to ground and 12.47 kV between phases are 0.01 % apart.
const sameRating = 1e-3

// farOff is how far a meeting voltage may be off a rating before it is told.
const farOff = 0.05

// sideNominal returns the nominal voltage, kV line-to-line, that the rating of a
// side of a bank stands for.
func (t *Transformer) sideNominal(low bool, node *Node) float64 {
	rating := t.HighKV
	if low {
		rating = t.LowKV
	}
	ends := t.HighEnds
	if low {
		ends = t.LowEnds
	}
	switch t.Connection {
	case "1ph":
	case "center-tap", "unit":
		// A winding to neutral is rated line to neutral; of one with a grounded middle
		// the full winding counts.
		if len(ends) == 1 {
			return rating * math.Sqrt(3)
		}
		return rating
	default:
		return rating
	}
	// A single-phase winding to ground is rated line to neutral.
	toGround := len(t.Phases) == 1 || low && !has(node.Phases, t.Phases[1])
	if toGround {
		return rating * math.Sqrt(3)
	}
	return rating
}

// claim is a nominal voltage that something gives a part of the feeder.
type claim struct {
	kV  float64
	who string
	at  tables.Pos
}

// nominals gives each part of the feeder its nominal voltage: the source's, then
// behind each transformer the rating of the side that is met; nodes.csv may give
// another one for a part.
func (b *builder) nominals() {
	m := b.model
	parts := 0
	for i := range m.Nodes {
		parts = max(parts, m.Nodes[i].Part+1)
	}
	known := make([]claim, parts)
	depth := make([]int, parts)
	fixed := make([]bool, parts)
	set := func(part int, c claim) bool {
		if k := known[part]; k.kV != 0 {
			if math.Abs(k.kV-c.kV) > sameRating*k.kV {
				b.faults.Add(c.at, "%s makes its part of the feeder %s kV, %s makes it %s kV (%s); give the part's nominal in nodes.csv", c.who, amount(c.kV), k.who, amount(k.kV), k.at)
			}
			return false
		}
		known[part] = c
		return true
	}
	for i := range b.t.nodes {
		r := &b.t.nodes[i]
		n, ok := b.index[r.Node.Value]
		if !ok || !r.Nominal.Given {
			continue
		}
		set(m.Nodes[n].Part, claim{r.Nominal.Value, "node " + strconv.Quote(r.Node.Value), r.Nominal.At})
		fixed[m.Nodes[n].Part] = true
	}
	for i := range m.Sources {
		s := &m.Sources[i]
		if part := m.Nodes[s.Node].Part; !fixed[part] {
			set(part, claim{s.Nominal, "source " + strconv.Quote(m.Nodes[s.Node].Name), s.At})
		}
	}
	b.spread(known, depth, fixed, set)
	for i := range m.Nodes {
		m.Nodes[i].Nominal = known[m.Nodes[i].Part].kV
	}
	b.offRatings(known)
}

// spread carries nominal voltages over the transformers, one layer after the other,
// so that it does not matter in which order the rows stand.
func (b *builder) spread(known []claim, depth []int, fixed []bool, set func(int, claim) bool) {
	m := b.model
	order := sortedBy(len(m.Transformers), func(i int) string { return m.Transformers[i].Name })
	reached := make([]bool, len(known))
	for _, s := range m.Sources {
		reached[m.Nodes[s.Node].Part] = true
	}
	for layer := 1; ; layer++ {
		var next []int
		for _, i := range order {
			t := &m.Transformers[i]
			from, to := m.Nodes[t.From].Part, m.Nodes[t.To].Part
			for _, low := range []bool{true, false} {
				here, there, node := from, to, t.To
				if !low {
					here, there, node = to, from, t.From
				}
				if !reached[here] || depth[here] >= layer || reached[there] && depth[there] != layer {
					continue
				}
				if !reached[there] {
					next = append(next, there)
				}
				reached[there], depth[there] = true, layer
				if !fixed[there] {
					set(there, claim{t.sideNominal(low, &m.Nodes[node]), fmt.Sprintf("transformer %q", t.Name), t.At})
				}
			}
		}
		if len(next) == 0 {
			return
		}
	}
}

// offRatings warns where a bank meets a voltage that is far off its rating.
func (b *builder) offRatings(known []claim) {
	for i := range b.model.Transformers {
		t := &b.model.Transformers[i]
		for _, low := range []bool{false, true} {
			node, side := t.From, "high"
			if low {
				node, side = t.To, "low"
			}
			n := &b.model.Nodes[node]
			rated := t.sideNominal(low, n)
			if off := n.Nominal/rated - 1; math.Abs(off) > farOff {
				b.warnings.Add(t.At, "transformer %q: its %s side is rated %s kV line-to-line and meets %s kV at node %q (%+.1f %%; usual: within 5 %%)", t.Name, side, amount(rated), amount(n.Nominal), n.Name, 100*off)
			}
		}
	}
}
