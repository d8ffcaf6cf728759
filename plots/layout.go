package plots

import (
	"math"
	"sort"
)

// layout is where the nodes stand in a plane; the unit is km.
type layout struct {
	at   map[string][2]float64
	tree bool // no coordinates: x is the distance along the feeder, y only spreads the branches
	km   bool // lengths in x mean something
}

// place lays the feeder out by its coordinates, or as a tree where there are none.
func (s *survey) place() layout {
	l := layout{at: make(map[string][2]float64, len(s.Places)), km: true}
	var lat float64
	n := 0
	for _, p := range s.Places {
		if p.LongLat && !math.IsNaN(p.X+p.Y) {
			lat += p.Y
			n++
		}
	}
	// Equal-area enough for a feeder: one parallel's scale for all.
	const kmPerDegree = 111.32
	scale := math.Cos(lat / float64(max(n, 1)) * math.Pi / 180)
	for _, p := range s.Places {
		if math.IsNaN(p.X + p.Y) {
			continue
		}
		if p.LongLat {
			l.at[p.Node] = [2]float64{p.X * kmPerDegree * scale, p.Y * kmPerDegree}
		} else {
			l.at[p.Node] = [2]float64{p.X / 1000, p.Y / 1000}
		}
	}
	w := newWalk(s)
	if !spread(l.at) {
		return w.tree(s)
	}
	// Who has no place stands where its neighbour stands.
	for again := true; again; {
		again = false
		for _, i := range w.order {
			if _, ok := l.at[w.names[i]]; ok {
				continue
			}
			for _, k := range w.near[i] {
				if xy, ok := l.at[w.names[k]]; ok {
					l.at[w.names[i]] = xy
					again = true
					break
				}
			}
		}
	}
	return l
}

// spread tells whether coordinates differ at all.
func spread(at map[string][2]float64) bool {
	var first [2]float64
	seen := false
	for _, xy := range at {
		if !seen {
			first, seen = xy, true
		} else if xy != first {
			return true
		}
	}
	return false
}

// walk is the feeder from its sources outwards.
type walk struct {
	names  []string // sorted
	near   [][]int
	order  []int // breadth first
	parent []int // −1: a root
}

func newWalk(s *survey) walk {
	var w walk
	index := make(map[string]int, len(s.Places))
	for _, p := range s.Places {
		w.names = append(w.names, p.Node)
	}
	sort.Strings(w.names)
	for i, n := range w.names {
		index[n] = i
	}
	w.near = make([][]int, len(w.names))
	for _, b := range s.Branches {
		i, ok1 := index[b.From]
		k, ok2 := index[b.To]
		if ok1 && ok2 && i != k && !b.Open() {
			w.near[i] = append(w.near[i], k)
			w.near[k] = append(w.near[k], i)
		}
	}
	for i := range w.near {
		sort.Ints(w.near[i])
	}
	// Roots: the nodes at no distance, nearest first, then whatever was not reached.
	roots := make([]int, len(w.names))
	for i := range roots {
		roots[i] = i
	}
	distance := func(i int) float64 {
		if d := s.places[w.names[i]].DistanceKM; !math.IsNaN(d) {
			return d
		}
		return math.Inf(1)
	}
	source := map[string]bool{}
	for _, b := range s.Branches {
		if b.Kind == "source" {
			source[b.From] = true
		}
	}
	sort.SliceStable(roots, func(i, j int) bool {
		a, b := roots[i], roots[j]
		if sa, sb := source[w.names[a]], source[w.names[b]]; sa != sb {
			return sa
		}
		return distance(a) < distance(b)
	})
	w.parent = make([]int, len(w.names))
	seen := make([]bool, len(w.names))
	for _, r := range roots {
		if seen[r] {
			continue
		}
		seen[r], w.parent[r] = true, -1
		w.order = append(w.order, r)
		for at := len(w.order) - 1; at < len(w.order); at++ {
			i := w.order[at]
			for _, k := range w.near[i] {
				if !seen[k] {
					seen[k], w.parent[k] = true, i
					w.order = append(w.order, k)
				}
			}
		}
	}
	return w
}

// tree spreads the leaves evenly and puts every node in the middle of its own.
func (w walk) tree(s *survey) layout {
	l := layout{at: make(map[string][2]float64, len(w.names)), tree: true}
	leaves := make([]int, len(w.names))
	depth := make([]float64, len(w.names))
	far := 0.0
	for at := len(w.order) - 1; at >= 0; at-- {
		i := w.order[at]
		leaves[i] = max(leaves[i], 1)
		if p := w.parent[i]; p >= 0 {
			leaves[p] += leaves[i]
		}
	}
	for _, p := range s.Places {
		if p.DistanceKM > far {
			far = p.DistanceKM
		}
	}
	l.km = far > 0
	next := make([]int, len(w.names)) // where the next child's leaves begin
	root := 0
	for _, i := range w.order {
		start := root
		if p := w.parent[i]; p >= 0 {
			start = next[p]
			next[p] += leaves[i]
			depth[i] = depth[p] + 1
		} else {
			root += leaves[i]
		}
		next[i] = start
		x := depth[i]
		if l.km {
			x = s.places[w.names[i]].DistanceKM
			if math.IsNaN(x) {
				x = 0
			}
		}
		l.at[w.names[i]] = [2]float64{x, -(float64(start) + float64(leaves[i])/2)}
	}
	return l
}

// worstVoltage is, by node, the voltage that comes closest to a limit or lies
// farthest outside, and on which side.
type worstVoltage struct {
	pu     float64
	low    bool // it is the lowest that is worst
	judged bool
	margin float64
}

func (s *survey) worstByNode() map[string]worstVoltage {
	worst := make(map[string]worstVoltage, len(s.Places))
	judged := make(map[string]bool, len(s.judged))
	for _, n := range s.judged {
		judged[n.Node] = true
	}
	for _, n := range s.Nodes {
		l := s.LimitsOf(n.NominalKV)
		for i, v := range [...]float64{n.Min, n.Max} {
			if math.IsNaN(v) {
				continue
			}
			m := v - l.Low
			if i == 1 {
				m = l.High - v
			}
			if w, ok := worst[n.Node]; !ok || m < w.margin {
				worst[n.Node] = worstVoltage{pu: v, low: i == 0, judged: judged[n.Node], margin: m}
			}
		}
	}
	return worst
}

// device is something marked on the map.
type device struct {
	kind, name string
	x, y       float64
	node       string
}

// devices are what the map marks, in a fixed order: sources, banks between two
// primary voltages, regulators, capacitors, generators.
func (s *survey) devices(l layout) []device {
	var out []device
	rank := map[string]int{"source": 0, "transformer": 1, "regulator": 2, "capacitor": 3, "generator": 4}
	haveSource := false
	rows := branchOrder(s.Branches)
	for _, b := range rows {
		if _, ok := rank[b.Kind]; !ok || b.Kind == "transformer" && !(s.places[b.To].NominalKV > 0.6) {
			continue
		}
		xy, ok := l.at[b.From]
		if to, ok2 := l.at[b.To]; ok2 && ok {
			xy = [2]float64{(xy[0] + to[0]) / 2, (xy[1] + to[1]) / 2}
		}
		if !ok {
			continue
		}
		haveSource = haveSource || b.Kind == "source"
		out = append(out, device{b.Kind, b.Element, xy[0], xy[1], b.From})
	}
	if w := newWalk(s); !haveSource && len(w.order) > 0 {
		name := w.names[w.order[0]]
		if xy, ok := l.at[name]; ok {
			out = append(out, device{"source", name, xy[0], xy[1], name})
		}
	}
	sort.SliceStable(out, func(i, j int) bool { return rank[out[i].kind] < rank[out[j].kind] })
	return out
}
