package plots

import (
	"fmt"
	"image/color"
	"math"
	"sort"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"yearflow/sim/results"
)

// sides is a scale of colours from low (blue) to high (red) around nominal. In grey
// both ends are dark; triangles tell them apart there.
type sides struct{ l results.VoltageLimits }

var (
	tooLow  = color.NRGBA{0x00, 0x2b, 0x4f, 0xff}
	middle  = color.NRGBA{0xc9, 0xc9, 0xc9, 0xff}
	tooHigh = color.NRGBA{0x6b, 0x1d, 0x00, 0xff}
)

func (k sides) color(v float64) color.NRGBA {
	mid := (k.l.Low + k.l.High) / 2
	switch {
	case math.IsNaN(v):
		return missing
	case v < k.l.Low:
		return mix(blue, tooLow, (k.l.Low-v)/(k.l.Low-k.l.OuterLow+0.01))
	case v <= mid:
		return mix(middle, blue, (mid-v)/(mid-k.l.Low))
	case v <= k.l.High:
		return mix(middle, vermilion, (v-mid)/(k.l.High-mid))
	}
	return mix(vermilion, tooHigh, (v-k.l.High)/(k.l.OuterHigh-k.l.High+0.01))
}

func drawMap(s *survey, st *style) (*page, Figure) {
	fig := Figure{Title: "Feeder map, coloured by the worst voltage of each place"}
	l := s.place()
	worst := s.worstByNode()
	fig.Finding = s.mapFinding(worst)
	if l.tree {
		fig.Title = "Feeder tree, coloured by the worst voltage of each place"
		fig.Finding += " The study gives no coordinates: branches are spread evenly, from the source to the right."
	}
	fig.Alt = "Map of the feeder: lines coloured from blue (low) to red (high) by their worst voltage, triangles where range A is left, devices marked. " + fig.Finding
	p := st.newPage(l.bodyHeight(), fig.Title, fig.Finding, s.foot())
	n := mapPanel(p, l)
	s.mapLines(n, l, worst)
	s.mapNodes(n, l, worst)
	kinds, marks := s.mapDevices(n, l)
	s.mapOutside(n, l, worst, marks)
	s.mapLegend(n, l, worst, kinds)
	return p, fig
}

func (s *survey) mapFinding(worst map[string]worstVoltage) string {
	low, high := 0, 0
	var lowest, highest string
	for _, name := range sortedKeys(worst) {
		w := worst[name]
		if !w.judged || w.margin >= -1e-9 {
			continue
		}
		if w.low {
			low++
			if lowest == "" || w.margin < worst[lowest].margin {
				lowest = name
			}
		} else {
			high++
			if highest == "" || w.margin < worst[highest].margin {
				highest = name
			}
		}
	}
	who := " with customers"
	if s.Run.Limits.All {
		who = ""
	}
	if low+high == 0 {
		if s.low < 0 {
			return "No step was solved, so there are no voltages to show."
		}
		return "No place" + who + " leaves its range."
	}
	txt := ""
	if low > 0 {
		txt = fmt.Sprintf("At %s%s the voltage falls below range, lowest at %s (%s)", count(low, "place", "places"), who, lowest, pu(worst[lowest].pu))
	}
	if high > 0 {
		if txt == "" {
			txt = fmt.Sprintf("At %s%s the voltage", count(high, "place", "places"), who)
		} else {
			txt += fmt.Sprintf("; at %d it", high)
		}
		txt += fmt.Sprintf(" rises above range, highest at %s (%s)", highest, pu(worst[highest].pu))
	}
	return txt + "."
}

func sortedKeys[V any](m map[string]V) []string {
	names := make([]string, 0, len(m))
	for n := range m {
		names = append(names, n)
	}
	sort.Strings(names)
	return names
}

// mapPanel fits the layout into the page with a margin for labels; a map keeps its
// proportions, a tree fills the room.
func mapPanel(p *page, l layout) *panel {
	r := vg.Rectangle{Min: vg.Point{X: p.body.Min.X + 10, Y: p.body.Min.Y + 26}, Max: vg.Point{X: p.body.Max.X - 128, Y: p.body.Max.Y - 10}}
	x0, x1, y0, y1 := l.bounds()
	w, h := float64(r.Max.X-r.Min.X), float64(r.Max.Y-r.Min.Y)
	dx, dy := math.Max(x1-x0, 1e-6), math.Max(y1-y0, 1e-6)
	if l.tree {
		return p.panel(r, x0-0.07*dx, x1+0.04*dx, y0-0.03*dy, y1+0.03*dy)
	}
	scale := math.Min(w*0.94/dx, h*0.94/dy) // points per km
	cx, cy := (x0+x1)/2, (y0+y1)/2
	return p.panel(r, cx-w/scale/2, cx+w/scale/2, cy-h/scale/2, cy+h/scale/2)
}

// mapLines draws the elements, the wider the more phases, coloured by the worst
// voltage at their ends.
func (s *survey) mapLines(n *panel, l layout, worst map[string]worstVoltage) {
	k := sides{s.limits}
	rows := branchOrder(s.Branches)
	// Narrow ones first, so that the trunk lies on top.
	sort.SliceStable(rows, func(i, j int) bool { return phaseCount(rows[i].Phases) < phaseCount(rows[j].Phases) })
	slim := 1.0
	if len(rows) > 2000 {
		slim = 0.5
	}
	for _, b := range rows {
		a, ok1 := l.at[b.From]
		z, ok2 := l.at[b.To]
		if !ok1 || !ok2 {
			continue
		}
		w := slim * [...]float64{1.0, 1.1, 1.9, 2.9}[phaseCount(b.Phases)]
		c := k.color(between(worst, b.From, b.To))
		pts := []vg.Point{{X: n.x(a[0]), Y: n.y(a[1])}, {X: n.x(z[0]), Y: n.y(z[1])}}
		if l.tree { // along, then across: branches leave at right angles
			pts = []vg.Point{pts[0], {X: pts[0].X, Y: pts[1].Y}, pts[1]}
		}
		n.c.StrokeLines(draw.LineStyle{Color: c, Width: vg.Points(w)}, pts)
	}
}

func phaseCount(phases string) int {
	c := 0
	for _, ph := range "ABC" {
		for _, q := range phases {
			if q == ph {
				c++
				break
			}
		}
	}
	return c
}

// between is the worst voltage of an element: the worse of its ends.
func between(worst map[string]worstVoltage, a, b string) float64 {
	wa, ok1 := worst[a]
	wb, ok2 := worst[b]
	switch {
	case !ok1 && !ok2:
		return math.NaN()
	case !ok1, ok2 && wb.margin < wa.margin:
		return wb.pu
	}
	return wa.pu
}

// mapNodes draws a dot for each place.
func (s *survey) mapNodes(n *panel, l layout, worst map[string]worstVoltage) {
	names := sortedKeys(l.at)
	if len(names) > 500 {
		return
	}
	k := sides{s.limits}
	for _, name := range names {
		c := missing
		if w, ok := worst[name]; ok {
			c = k.color(w.pu)
		}
		n.dot(n.x(l.at[name][0]), n.y(l.at[name][1]), 1.7, c)
	}
}

// mapOutside marks the places outside range A, beside the mark of a device that
// would hide or be hidden.
func (s *survey) mapOutside(n *panel, l layout, worst map[string]worstVoltage, marks []vg.Point) {
	names := sortedKeys(l.at)
	size := 4.4
	if len(names) > 1500 {
		size = 2.4
	}
	k := sides{s.limits}
	for _, name := range names {
		w, ok := worst[name]
		if !ok || !w.judged || w.margin >= -1e-9 {
			continue
		}
		x, y := n.x(l.at[name][0]), n.y(l.at[name][1])
		for _, m := range marks {
			if math.Hypot(float64(x-m.X), float64(y-m.Y)) < 7 {
				x, y = m.X-10, m.Y
			}
		}
		n.triangle(x, y, size, w.low, k.color(w.pu))
	}
}

// triangle points down for too low, up for too high.
func (p *page) triangle(x, y vg.Length, r float64, down bool, c color.Color) {
	d := vg.Points(r)
	if down {
		d = -d
	}
	w := vg.Points(r)
	pts := []vg.Point{{X: x, Y: y + d}, {X: x - w*0.87, Y: y - d/2}, {X: x + w*0.87, Y: y - d/2}}
	p.c.FillPolygon(c, pts)
	p.c.StrokeLines(draw.LineStyle{Color: black, Width: vg.Points(0.6)}, append(pts, pts[0]))
}

// mapLegend stands to the right: the colour scale, what the marks mean, and under the
// map a scale bar.
func (s *survey) mapLegend(n *panel, l layout, worst map[string]worstVoltage, kinds []string) {
	lim := s.limits
	x := n.body.Max.X - 112
	top := n.body.Max.Y - 14
	n.label(n.text(labelSize, black), x, top+2, text.XLeft, text.YBottom, "Worst voltage [p.u.]")
	r := vg.Rectangle{Min: vg.Point{X: x, Y: top - 118}, Max: vg.Point{X: x + 12, Y: top - 6}}
	lo, hi := lim.OuterLow-0.012, lim.OuterHigh+0.012
	bar := n.page.panel(r, 0, 1, lo, hi)
	k := sides{lim}
	bar.image(func(_, fy float64) color.NRGBA { return k.color(lo + fy*(hi-lo)) })
	bar.outline(bar.rect, axisLine)
	a, b := "range A", "range B"
	if s.Run.Limits.Own {
		a, b = "limit", "outer"
	}
	last := vg.Length(-1000)
	for _, m := range [...]struct {
		v    float64
		name string
	}{{lim.OuterLow, " " + b}, {lim.Low, " " + a}, {(lim.Low + lim.High) / 2, ""}, {lim.High, " " + a}, {lim.OuterHigh, " " + b}} {
		y := bar.y(m.v)
		n.c.StrokeLine2(axisLine, bar.rect.Max.X, y, bar.rect.Max.X+3, y)
		ly := max(y, last+10.5)
		last = ly
		n.label(n.text(smallSize, inkGrey), bar.rect.Max.X+6, ly, text.XLeft, text.YCenter, number(m.v, 3)+m.name)
	}
	y := bar.rect.Min.Y - 16
	row := func(mark func(x, y vg.Length), txt string) {
		mark(x+6, y)
		n.label(n.text(labelSize, black), x+18, y, text.XLeft, text.YCenter, txt)
		y -= 15.5
	}
	anyLow, anyHigh := false, false
	for _, w := range worst {
		if w.judged && w.margin < -1e-9 {
			anyLow, anyHigh = anyLow || w.low, anyHigh || !w.low
		}
	}
	if anyLow {
		row(func(x, y vg.Length) { n.triangle(x, y, 4.4, true, k.color(lim.Low-0.005)) }, "below "+a)
	}
	if anyHigh {
		row(func(x, y vg.Length) { n.triangle(x, y, 4.4, false, k.color(lim.High+0.005)) }, "above "+a)
	}
	words := map[string]string{"source": "source", "transformer": "transformer", "regulator": "regulator", "capacitor": "capacitor", "generator": "generator"}
	for _, kind := range kinds {
		row(func(x, y vg.Length) { n.deviceMark(kind, x, y) }, words[kind])
	}
	for i, txt := range [...]string{"three phases", "two phases", "one phase"} {
		w := [...]float64{2.9, 1.9, 1.1}[i]
		row(func(x, y vg.Length) {
			n.c.StrokeLine2(draw.LineStyle{Color: axisGrey, Width: vg.Points(w)}, x-6, y, x+7, y)
		}, txt)
	}
	if !l.km {
		return
	}
	span := (n.plot.X.Max - n.plot.X.Min) / 4
	km := roundStep(span)
	if km > span*1.3 {
		km = roundStep(span / 2.1)
	}
	w := n.x(n.plot.X.Min+km) - n.rect.Min.X
	y = n.body.Min.Y + 8
	x = n.rect.Min.X
	bold := draw.LineStyle{Color: black, Width: vg.Points(1.4)}
	n.c.StrokeLine2(bold, x, y, x+w, y)
	n.c.StrokeLine2(bold, x, y-3, x, y+3)
	n.c.StrokeLine2(bold, x+w, y-3, x+w, y+3)
	unit := number(km, decimals(km)) + " km"
	if km < 1 {
		unit = number(km*1000, decimals(km*1000)) + " m"
	}
	if l.tree {
		unit += " along the feeder"
	}
	n.label(n.text(labelSize, black), x+w+6, y, text.XLeft, text.YCenter, unit)
}

// bodyHeight gives the map the height that its shape wants, within what the legend
// needs and a page bears.
func (l layout) bodyHeight() vg.Length {
	const least, most = vg.Length(310), vg.Length(430)
	if l.tree {
		return least + 40
	}
	x0, x1, y0, y1 := l.bounds()
	wide := float64(pageWidth) - 160
	return max(least, min(most, vg.Length(wide*(y1-y0)/math.Max(x1-x0, 1e-9))+50))
}

// bounds of all places, km; the unit square where there are none.
func (l layout) bounds() (x0, x1, y0, y1 float64) {
	x0, x1, y0, y1 = math.Inf(1), math.Inf(-1), math.Inf(1), math.Inf(-1)
	for _, xy := range l.at {
		x0, x1 = math.Min(x0, xy[0]), math.Max(x1, xy[0])
		y0, y1 = math.Min(y0, xy[1]), math.Max(y1, xy[1])
	}
	if math.IsInf(x0, 0) {
		return 0, 1, 0, 1
	}
	return x0, x1, y0, y1
}
