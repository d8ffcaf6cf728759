package results

import (
	"yearflow/sim/feeder"
	"yearflow/sim/network"
)

// Point is a voltage that is reported: of a phase to ground, or, on a node that
// nothing grounds, between two phases. A node of a four-wire delta has both: its
// phases, and the pairs that loads in delta stand across.
type Point struct {
	Node   int    // into Model.Nodes
	Name   string // node.phase or node.pair
	Phase  string
	NomKV  float64 // nominal of the node, kV line-to-line
	Base   float64 // V that are 1 p.u.
	U, W   int32   // unknowns; W is network.Ground for a phase to ground
	first  feeder.Phase
	second feeder.Phase
	pair   bool

	midTapped bool // a phase beside which the pairs stand
	HasLoad   bool // a load stands here
	// HighLeg marks the high leg of a four-wire delta, which serves nobody by itself and
	// is never judged.
	HighLeg bool
	// Customers are those whose loads stand here; a customer on three phases
	// counts at each of them.
	Customers float64
}

// PU is the voltage of the point in p.u.
func (p *Point) PU(v []complex128) float64 {
	d := v[p.U]
	if p.W != network.Ground {
		d -= v[p.W]
	}
	return magnitude(d) / p.Base
}

var pairsOfPhases = [3]feeder.Pair{{feeder.A, feeder.B}, {feeder.B, feeder.C}, {feeder.C, feeder.A}}

// Points lists the reported voltages of a network, by node and phase.
func Points(n *network.Network) []Point {
	var points []Point
	for i := range n.Model.Nodes {
		node := &n.Model.Nodes[i]
		if node.Grounded {
			for _, p := range node.Phases {
				u := n.At[i][p]
				points = append(points, Point{Node: i, Phase: p.String(), NomKV: node.Nominal, Base: n.Unknowns[u].Nominal,
					U: u, W: network.Ground, first: p, HasLoad: node.HasLoad[p], Customers: node.Customers[p], HighLeg: node.HighLeg(p)})
			}
		}
		switch {
		case !node.Grounded:
			points = appendPairs(points, n, i)
		case node.MidTap != nil:
			points = appendMidTapped(points, n, i)
		}
	}
	for i := range points {
		points[i].Name = n.Model.Nodes[points[i].Node].Name + "." + points[i].Phase
	}
	return points
}

// appendPairs appends the pairs of a node that nothing grounds, with the loads that
// stand across them.
func appendPairs(points []Point, n *network.Network, i int) []Point {
	node := &n.Model.Nodes[i]
	for _, pair := range pairsOfPhases {
		u, w := n.At[i][pair[0]], n.At[i][pair[1]]
		if u == network.Ground || w == network.Ground {
			continue
		}
		p := Point{Node: i, Phase: pair.String(), NomKV: node.Nominal, Base: node.Nominal * 1000,
			U: u, W: w, first: pair[0], second: pair[1], pair: true}
		for k := range n.Model.Loads {
			if l := &n.Model.Loads[k]; l.Node == i && loadAcross(l, pair) {
				p.HasLoad = true
				p.Customers += l.Customers
			}
		}
		points = append(points, p)
	}
	return points
}

// appendMidTapped appends the pairs of a four-wire delta's node that loads stand
// across: a load in delta is served line-to-line, whatever the voltages to ground are.
// What is left at the phases are the loads to ground.
func appendMidTapped(points []Point, n *network.Network, i int) []Point {
	for k := len(points) - 1; k >= 0 && points[k].Node == i; k-- {
		p := &points[k]
		p.midTapped, p.HasLoad, p.Customers = true, false, 0
		for l := range n.Model.Loads {
			if load := &n.Model.Loads[l]; p.feeds(load) {
				p.HasLoad = true
				p.Customers += load.Customers
			}
		}
	}
	first := len(points)
	points = appendPairs(points, n, i)
	kept := points[:first]
	for _, p := range points[first:] {
		if p.HasLoad {
			kept = append(kept, p)
		}
	}
	return kept
}

// Judged tells whether the point is held against the limits, where all are or only
// those with a load.
func (p *Point) Judged(all bool) bool { return !p.HighLeg && (all || p.HasLoad) }

func loadAcross(l *feeder.Load, pair feeder.Pair) bool {
	for _, q := range l.Pairs {
		if q == pair || (q[0] == pair[1] && q[1] == pair[0]) {
			return true
		}
	}
	return false
}

// feeds tells whether a load at the point's node is judged by this point: a phase
// that it stands on, or the pair that it stands across.
func (p *Point) feeds(l *feeder.Load) bool {
	if l.Node != p.Node {
		return false
	}
	if p.pair {
		return loadAcross(l, feeder.Pair{p.first, p.second})
	}
	for _, q := range l.Phases {
		if q == p.first {
			return true
		}
	}
	for _, q := range l.Pairs {
		if !p.midTapped && (q[0] == p.first || q[1] == p.first) {
			return true
		}
	}
	return false
}
