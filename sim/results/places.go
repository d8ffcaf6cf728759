package results

import (
	"math"
	"strconv"

	"yearflow/sim/feeder"
)

// branch is an element between two nodes.
type branch struct {
	element, kind string
	from, to      int // to is −1 for what stands at one node
	phases        []feeder.Phase
	length        float64 // km; NaN where there is none
	open          bool
}

// branches lists the elements of a model in the order of the tables: what joins two
// nodes, then what stands at one.
func branches(m *feeder.Model) []branch {
	var out []branch
	none := math.NaN()
	for i := range m.Sections {
		s := &m.Sections[i]
		out = append(out, branch{s.Name, "section", s.From, s.To, s.Phases, s.LengthKM, false})
	}
	for i := range m.Switches {
		s := &m.Switches[i]
		kind := "switch"
		if !s.Closed {
			kind = "open switch"
		}
		out = append(out, branch{s.Name, kind, s.From, s.To, s.Phases, none, !s.Closed})
	}
	for i := range m.Transformers {
		t := &m.Transformers[i]
		out = append(out, branch{t.Name, "transformer", t.From, t.To, t.Phases, none, false})
	}
	for i := range m.Regulators {
		r := &m.Regulators[i]
		out = append(out, branch{r.Name, "regulator", r.From, r.To, r.Phases, none, false})
	}
	for i := range m.Sources {
		s := &m.Sources[i]
		out = append(out, branch{m.Nodes[s.Node].Name, "source", s.Node, -1, m.Nodes[s.Node].Phases, none, false})
	}
	for i := range m.Capacitors {
		c := &m.Capacitors[i]
		out = append(out, branch{c.Name, "capacitor", c.Node, -1, standsOn(c.Phases, c.Pairs), none, false})
	}
	for i := range m.Generators {
		g := &m.Generators[i]
		out = append(out, branch{g.Name, "generator", g.Node, -1, standsOn(g.Phases, g.Pairs), none, false})
	}
	return out
}

// standsOn returns the phases, or those of the pairs.
func standsOn(phases []feeder.Phase, pairs []feeder.Pair) []feeder.Phase {
	if len(phases) > 0 {
		return phases
	}
	var on [feeder.PhaseCount]bool
	for _, p := range pairs {
		on[p[0]], on[p[1]] = true, true
	}
	var out []feeder.Phase
	for p, is := range on {
		if is {
			out = append(out, feeder.Phase(p))
		}
	}
	return out
}

// distances returns how far each node lies from the nearest source along the
// feeder, km: lengths of sections add up, everything else that is closed adds
// nothing. A node that no source reaches is infinitely far.
func distances(m *feeder.Model, bs []branch) []float64 {
	type arc struct {
		to     int
		length float64
	}
	arcs := make([][]arc, len(m.Nodes))
	for _, b := range bs {
		if b.to < 0 || b.open {
			continue
		}
		length := b.length
		if math.IsNaN(length) {
			length = 0
		}
		arcs[b.from] = append(arcs[b.from], arc{b.to, length})
		arcs[b.to] = append(arcs[b.to], arc{b.from, length})
	}
	far := make([]float64, len(m.Nodes))
	for i := range far {
		far[i] = math.Inf(1)
	}
	// Label correction: on a feeder, which is nearly a tree, a node is seldom put in
	// the queue twice.
	var queue []int
	for i := range m.Sources {
		far[m.Sources[i].Node] = 0
		queue = append(queue, m.Sources[i].Node)
	}
	for len(queue) > 0 {
		at := queue[0]
		queue = queue[1:]
		for _, a := range arcs[at] {
			if d := far[at] + a.length; d < far[a.to] {
				far[a.to] = d
				queue = append(queue, a.to)
			}
		}
	}
	return far
}

// writePlaces writes where the nodes stand, and on which phases (or pairs) they are
// judged.
func (w *Writer) writePlaces(f *outFile) error {
	if err := f.header("node", "x", "y", "longlat", "distance [km]", "nominal [kV]", "phases", "judged"); err != nil {
		return err
	}
	m := w.plan.Model
	far := distances(m, branches(m))
	judged := make([]string, len(m.Nodes))
	for i := range w.meter.Points {
		if p := &w.meter.Points[i]; w.stats.judge.judged[i] {
			if judged[p.Node] != "" {
				judged[p.Node] += " "
			}
			judged[p.Node] += p.Phase
		}
	}
	for i := range m.Nodes {
		n := &m.Nodes[i]
		f.text(n.Name)
		f.coordinate(n.X)
		f.coordinate(n.Y)
		if n.LonLat {
			f.next("yes")
		} else {
			f.next("no")
		}
		if math.IsInf(far[i], 1) {
			f.comma()
		} else {
			f.figure(far[i])
		}
		f.comma()
		f.row = appendTrimmed(f.row, n.Nominal)
		f.next(letters(n.Phases))
		f.next(judged[i])
		if err := f.end(); err != nil {
			return err
		}
	}
	return nil
}

func (f *outFile) coordinate(x float64) {
	f.comma()
	if !math.IsNaN(x) {
		f.row = strconv.AppendFloat(f.row, x, 'f', -1, 64)
	}
}

// letters writes phases in the order A, B, C.
func letters(phases []feeder.Phase) string {
	var on [feeder.PhaseCount]bool
	for _, p := range phases {
		on[p] = true
	}
	text := ""
	for p, is := range on {
		if is {
			text += feeder.Phase(p).String()
		}
	}
	return text
}

// writeNetwork writes what joins the nodes and what stands at them.
func (w *Writer) writeNetwork(f *outFile) error {
	if err := f.header("element", "kind", "from", "to", "phases", "length [km]"); err != nil {
		return err
	}
	m := w.plan.Model
	for _, b := range branches(m) {
		f.text(b.element)
		f.next(b.kind)
		f.next(m.Nodes[b.from].Name)
		f.comma()
		if b.to >= 0 {
			f.text(m.Nodes[b.to].Name)
		}
		f.next(letters(b.phases))
		f.figure(b.length)
		if err := f.end(); err != nil {
			return err
		}
	}
	return nil
}
