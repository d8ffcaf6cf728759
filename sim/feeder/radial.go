package feeder

import "math"

// edge names an element that joins two nodes.
type edge struct {
	kind  string // section, switch, transformer, regulator
	index int
}

// standing is what stands behind an element, by phase at its from side.
type standing struct {
	power   [PhaseCount]complex128 // kVA
	largest float64                // kVA of the largest load
	name    string                 // of that load
}

// kVA is the apparent power of all phases together.
func (s standing) kVA() float64 {
	sum := total(s.power)
	return math.Hypot(real(sum), imag(sum))
}

func total(power [PhaseCount]complex128) (sum complex128) {
	for _, s := range power {
		sum += s
	}
	return sum
}

// radial is a feeder seen from its sources: the shortest way to each node, in
// elements. Where the feeder has loops, it is one of several trees and a first guess.
type radial struct {
	up     []edge    // of each node: the element towards the source; kind blank at a source
	parent []int     // of each node: the node there
	order  []int     // nodes, from the sources outwards
	x      []float64 // of each node: positive-sequence reactance to the source, ohm at its nominal
	behind map[edge]standing
}

func newRadial(m *Model, scale float64) *radial {
	r := &radial{up: make([]edge, len(m.Nodes)), parent: make([]int, len(m.Nodes)), x: make([]float64, len(m.Nodes)), behind: map[edge]standing{}}
	type way struct {
		e    edge
		node int
	}
	ways := make([][]way, len(m.Nodes))
	join := func(kind string, i, from, to int) {
		ways[from] = append(ways[from], way{edge{kind, i}, to})
		ways[to] = append(ways[to], way{edge{kind, i}, from})
	}
	for i := range m.Sections {
		join("section", i, m.Sections[i].From, m.Sections[i].To)
	}
	for i := range m.Switches {
		if m.Switches[i].Closed {
			join("switch", i, m.Switches[i].From, m.Switches[i].To)
		}
	}
	for i := range m.Transformers {
		join("transformer", i, m.Transformers[i].From, m.Transformers[i].To)
	}
	for i := range m.Regulators {
		join("regulator", i, m.Regulators[i].From, m.Regulators[i].To)
	}
	seen := make([]bool, len(m.Nodes))
	for _, s := range m.Sources {
		if !seen[s.Node] {
			seen[s.Node], r.parent[s.Node], r.x[s.Node] = true, -1, imag(s.Z1)
			r.order = append(r.order, s.Node)
		}
	}
	for k := 0; k < len(r.order); k++ {
		node := r.order[k]
		for _, w := range ways[node] {
			if !seen[w.node] {
				seen[w.node], r.parent[w.node], r.up[w.node] = true, node, w.e
				r.x[w.node] = r.reactance(m, node, w.e)
				r.order = append(r.order, w.node)
			}
		}
	}
	r.loads(m, scale)
	return r
}

// reactance adds that of an element to what leads up to a node.
func (r *radial) reactance(m *Model, node int, e edge) float64 {
	switch e.kind {
	case "section":
		s := &m.Sections[e.index]
		return r.x[node] + imag(positive(&m.Constructions[s.Construction]))*s.LengthKM
	case "transformer":
		t := &m.Transformers[e.index]
		near, far := t.sideNominal(false, &m.Nodes[t.From]), t.sideNominal(true, &m.Nodes[t.To])
		kVA := t.KVA
		if t.Connection == "1ph" {
			kVA *= 3 // what a bank of three such units would have
		}
		if node == t.To {
			near, far = far, near
		}
		return r.x[node]*(far/near)*(far/near) + t.X*far*far*1000/kVA
	}
	return r.x[node]
}

// loads adds the loads up from the ends of the feeder.
func (r *radial) loads(m *Model, scale float64) {
	at := make([]standing, len(m.Nodes))
	for i := range m.Loads {
		l := &m.Loads[i]
		if Unknown(l.KW) {
			continue
		}
		s := complex(l.KW*scale, l.KVAR*scale)
		n := &at[l.Node]
		for _, p := range l.Phases {
			n.power[p] += s / complex(float64(len(l.Phases)), 0)
		}
		for _, p := range l.Pairs {
			n.power[p[0]] += s / complex(float64(2*len(l.Pairs)), 0)
			n.power[p[1]] += s / complex(float64(2*len(l.Pairs)), 0)
		}
		n.add(standing{largest: math.Hypot(real(s), imag(s)), name: l.Name})
	}
	for k := len(r.order) - 1; k >= 0; k-- {
		node := r.order[k]
		if r.parent[node] < 0 {
			continue
		}
		e, s := r.up[node], at[node]
		if e.kind == "transformer" {
			s.power = throughBank(&m.Transformers[e.index], s.power)
		}
		b := r.behind[e]
		b.add(s)
		r.behind[e] = b
		at[r.parent[node]].add(s)
	}
}

func (s *standing) add(o standing) {
	for p := range s.power {
		s.power[p] += o.power[p]
	}
	if o.largest > s.largest {
		s.largest, s.name = o.largest, o.name
	}
}

// throughBank shares what a bank carries among the phases of its other side: that of
// a three-phase bank equally, which is a first guess; that of the legs of a centre tap is the
// one phase's.
func throughBank(t *Transformer, low [PhaseCount]complex128) [PhaseCount]complex128 {
	if t.Connection == "YNyn0" {
		return low
	}
	sum := total(low)
	var out [PhaseCount]complex128
	for _, p := range t.Phases {
		out[p] = sum / complex(float64(len(t.Phases)), 0)
	}
	return out
}

// above tells whether node a stands on the way from node b to the source, or is b.
func (r *radial) above(a, b int) bool {
	for ; b >= 0; b = r.parent[b] {
		if a == b {
			return true
		}
	}
	return false
}
