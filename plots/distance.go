package plots

import (
	"fmt"
	"math"
	"sort"
	"strings"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"yearflow/sim/results"
)

// profile is the voltage along the feeder at one instant (or, without a log of
// voltages, the worst of each place).
type profile struct {
	heading string
	voltage map[string]float64 // by node.phase
	worst   string             // node.phase
}

// drawDistance draws voltage against distance at the two worst instants.
func drawDistance(s *survey, st *style) (*page, Figure) {
	fig := Figure{Title: "Voltage along the feeder at its two worst instants"}
	low := profile{voltage: s.atLow}
	high := profile{voltage: s.atHigh}
	switch {
	case s.low < 0:
		fig.Finding = "No step was solved, so there is no voltage to show."
	case s.atLow == nil:
		fig.Title = "Lowest and highest voltage along the feeder"
		low.heading, high.heading = "Lowest of each place", "Highest of each place"
		low.voltage, high.voltage = make(map[string]float64), make(map[string]float64)
		for _, n := range s.Nodes {
			low.voltage[n.Node+"."+n.Phase] = n.Min
			high.voltage[n.Node+"."+n.Phase] = n.Max
		}
		low.worst, high.worst = s.lowAt, s.highAt
		fig.Finding = fmt.Sprintf("The lowest voltage is %s at %s, the highest %s at %s. (The run kept no voltages of single instants: each place shows its own worst.)",
			pu(s.lowest[s.low]), low.worst, pu(s.highest[s.high]), high.worst)
	default:
		low.heading = "Lowest, " + s.span.on(s.At(s.low))
		high.heading = "Highest, " + s.span.on(s.At(s.high))
		low.worst, high.worst = s.lowAt, s.highAt
		fig.Finding = fmt.Sprintf("On %s the voltage falls to %s at %s%s; on %s it rises to %s at %s%s.",
			s.span.on(s.At(s.low)), pu(s.lowest[s.low]), low.worst, s.howFar(low.worst),
			s.span.on(s.At(s.high)), pu(s.highest[s.high]), high.worst, s.howFar(high.worst))
	}
	fig.Alt = "Two panels of voltage against distance from the source, one line per phase: at the instant of the lowest and at that of the highest voltage. " + fig.Finding

	far := 0.0
	for _, pl := range s.Places {
		if !math.IsNaN(pl.DistanceKM) {
			far = math.Max(far, pl.DistanceKM)
		}
	}
	if far == 0 {
		far = 1
	}
	var lo, hi []float64
	for _, v := range low.voltage {
		lo = append(lo, v)
	}
	for _, v := range high.voltage {
		hi = append(hi, v)
	}
	vlo, vhi := s.voltageRange(lo, hi)
	phases := map[string]bool{}
	for _, v := range []map[string]float64{low.voltage, high.voltage} {
		for name := range v {
			if node, ph := splitPlace(name); !math.IsNaN(s.places[node].DistanceKM) {
				phases[ph] = true
			}
		}
	}
	items := append(phaseKeys(sortedPhases(phases), phaseStyle), s.limitKeys(vlo, vhi)...)
	more := keyLine * vg.Length(len(st.keyRows(items, 47))-1)
	p := st.newPage(275+more, fig.Title, fig.Finding, s.foot())
	gap := vg.Length(28)
	full := vg.Rectangle{
		Min: vg.Point{X: p.body.Min.X + 38, Y: p.body.Min.Y + 58 + more},
		Max: vg.Point{X: p.body.Max.X - 34, Y: p.body.Max.Y - 40},
	}
	w := (full.Max.X - full.Min.X - gap) / 2
	for i, pr := range []profile{low, high} {
		r := full
		r.Min.X += vg.Length(i) * (w + gap)
		r.Max.X = r.Min.X + w
		n := p.panel(r, 0, far*1.03, vlo, vhi)
		n.shadeLimits(s.limits)
		ticks := linear(vlo, vhi, 6)
		if i == 0 {
			n.yAxis(ticks, "Voltage [p.u.]")
		} else {
			for _, k := range ticks {
				n.c.StrokeLine2(gridLine, n.rect.Min.X, n.y(k.at), n.rect.Max.X, n.y(k.at))
			}
			right := stepped(120*vlo, 120*vhi, math.Max(roundStep(20*(vhi-vlo)), 1))
			for j := range right {
				right[j].at /= 120
			}
			n.rightAxis(right, "[V, 120 V base]")
		}
		n.xAxis(linear(0, far*1.03, 5), "Distance from the source [km]")
		n.label(n.bold(labelSize, black), n.rect.Min.X, n.rect.Max.Y+24, text.XLeft, text.YBottom, pr.heading)
		s.profileLines(n, pr)
	}
	p.panel(full, 0, 1, vlo, vhi).keys(items, full.Min.X, full.Min.Y-46)
	return p, fig
}

func sortedPhases(set map[string]bool) []string {
	var names []string
	for ph := range set {
		names = append(names, ph)
	}
	sort.Slice(names, func(i, j int) bool {
		if len(names[i]) != len(names[j]) {
			return len(names[i]) < len(names[j])
		}
		return names[i] < names[j]
	})
	return names
}

func (s *survey) howFar(place string) string {
	node, _ := splitPlace(place)
	if p, ok := s.places[node]; ok && !math.IsNaN(p.DistanceKM) {
		return fmt.Sprintf(", %s km out", number(p.DistanceKM, 1))
	}
	return ""
}

// profileLines joins the ends of each element, phase by phase. Transformers to
// another voltage are drawn thin: the drop inside them is not one of the line.
func (s *survey) profileLines(n *panel, pr profile) {
	type segment struct {
		ph             string
		x0, y0, x1, y1 float64
		thin           bool
	}
	var segments []segment
	var lone []segment
	joined := map[string]bool{}
	for _, b := range s.Branches {
		if b.To == "" || b.Open() {
			continue
		}
		from, to := s.places[b.From], s.places[b.To]
		for _, ph := range [...]string{"A", "B", "C", "AB", "BC", "CA", "1", "2", "12"} {
			v0, ok0 := pr.voltage[b.From+"."+ph]
			v1, ok1 := pr.voltage[b.To+"."+ph]
			if !ok0 || !ok1 || math.IsNaN(v0+v1) || math.IsNaN(from.DistanceKM+to.DistanceKM) {
				continue
			}
			joined[b.From+"."+ph], joined[b.To+"."+ph] = true, true
			segments = append(segments, segment{ph, from.DistanceKM, v0, to.DistanceKM, v1, b.Kind == "transformer"})
		}
		// A centre-tapped transformer leads from a phase to the legs 1 and 2.
		v0, ok0 := pr.voltage[b.From+"."+b.Phases]
		for _, leg := range [...]string{"1", "2"} {
			v1, ok1 := pr.voltage[b.To+"."+leg]
			if b.Kind == "transformer" && ok0 && ok1 && !math.IsNaN(v0+v1+from.DistanceKM+to.DistanceKM) {
				segments = append(segments, segment{b.Phases, from.DistanceKM, v0, to.DistanceKM, v1, true})
			}
		}
	}
	var names []string
	for name := range pr.voltage {
		names = append(names, name)
	}
	sort.Strings(names)
	for _, name := range names {
		node, ph := splitPlace(name)
		if d := s.places[node].DistanceKM; !joined[name] && !math.IsNaN(d+pr.voltage[name]) {
			lone = append(lone, segment{ph: ph, x0: d, y0: pr.voltage[name]})
		}
	}
	// Row order must not decide what covers what.
	sort.SliceStable(segments, func(i, j int) bool {
		a, b := segments[i], segments[j]
		switch {
		case a.thin != b.thin:
			return a.thin
		case a.ph != b.ph:
			return a.ph < b.ph // dashes over the solid line show both
		case a.x0 != b.x0:
			return a.x0 < b.x0
		case a.y0 != b.y0:
			return a.y0 < b.y0
		case a.x1 != b.x1:
			return a.x1 < b.x1
		}
		return a.y1 < b.y1
	})
	width := vg.Points(dataWidth)
	if len(segments) > 3000 {
		width = vg.Points(1)
	}
	for _, g := range segments {
		st := phaseStyle(g.ph)
		st.Width = width
		if g.thin {
			st.Width, st.Dashes = vg.Points(0.6), nil
		}
		n.add(line{[]float64{g.x0, g.x1}, []float64{g.y0, g.y1}, st})
	}
	for _, g := range lone {
		n.dot(n.x(g.x0), n.yIn(g.y0), 1.6, phaseStyle(g.ph).Color)
	}
	if v, ok := pr.voltage[pr.worst]; ok && !math.IsNaN(v) {
		node, _ := splitPlace(pr.worst)
		x, y := n.x(s.places[node].DistanceKM), n.yIn(v)
		n.ring(x, y, 4)
		var crowd []vg.Point
		for _, g := range segments {
			x0, y0, x1, y1 := n.x(g.x0), n.y(g.y0), n.x(g.x1), n.y(g.y1)
			k := int(math.Hypot(float64(x1-x0), float64(y1-y0))/4) + 1
			for i := 0; i <= k; i++ {
				f := vg.Length(i) / vg.Length(k)
				crowd = append(crowd, vg.Point{X: x0 + f*(x1-x0), Y: y0 + f*(y1-y0)})
			}
		}
		t := n.bold(smallSize, black)
		name := fit(t, pr.worst, n.width()/2)
		box, side, _ := labelBox(vg.Point{X: x, Y: y}, t.Width(name), nil, crowd, n.rect)
		lx := box.Min.X
		if side == text.XRight {
			lx = box.Max.X
		}
		n.haloed(t, lx, (box.Min.Y+box.Max.Y)/2, side, text.YCenter, name)
	}
}

// ring marks a place.
func (p *page) ring(x, y vg.Length, r float64) {
	const n = 24
	pts := make([]vg.Point, n+1)
	for i := range pts {
		a := 2 * math.Pi * float64(i) / n
		pts[i] = vg.Point{X: x + vg.Points(r*math.Cos(a)), Y: y + vg.Points(r*math.Sin(a))}
	}
	p.c.StrokeLines(draw.LineStyle{Color: black, Width: vg.Points(1.2)}, pts)
}

// branchOrder sorts elements so that the order of rows in network.csv has no say.
func branchOrder(rows []results.BranchRow) []results.BranchRow {
	rows = append([]results.BranchRow(nil), rows...)
	sort.SliceStable(rows, func(i, j int) bool {
		if rows[i].Kind != rows[j].Kind {
			return rows[i].Kind < rows[j].Kind
		}
		return rows[i].Element < rows[j].Element
	})
	return rows
}

// phaseKeys is a legend of phases; a pair shares the line of its first phase, and so
// its entry. The legs of services come last.
func phaseKeys(phases []string, style func(string) draw.LineStyle) []key {
	var keys []key
	entry := map[byte]int{}
	legs := false
	for _, ph := range phases {
		if isLeg(ph) {
			legs = true
			continue
		}
		if i, ok := entry[ph[0]]; ok {
			keys[i].text += ", " + ph
			continue
		}
		entry[ph[0]] = len(keys)
		keys = append(keys, key{line: style(ph), text: "phase " + ph})
	}
	if legs {
		keys = append(keys, key{line: style("1"), text: "services"})
	}
	return keys
}

// isLeg tells whether a phase is a leg of a centre-tapped secondary, or both.
func isLeg(phase string) bool { return strings.HasPrefix(phase, "1") || strings.HasPrefix(phase, "2") }
