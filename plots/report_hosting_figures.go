package plots

import (
	"fmt"
	"image/color"
	"math"
	"sort"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// criterionColor is the colour of a criterion that binds, by its kind.
func criterionColor(name string) color.NRGBA {
	switch name {
	case "":
		return green
	case "hours above A", "hours above A at the connection", "hours outside B", "hours below A", "voltage above A", "voltage below A":
		return vermilion
	case "rapid voltage change above 600 V", "rapid voltage change up to 600 V", "rapid voltage change":
		return blue
	case "loading":
		return orange
	}
	return purple
}

// criterionKind is the kind in words.
func criterionKind(name string) string {
	switch criterionColor(name) {
	case green:
		return "nothing up to the largest size"
	case vermilion:
		return "voltage"
	case blue:
		return "rapid voltage change"
	case orange:
		return "loading"
	}
	return "unbalance, operations, other"
}

// bindingWord is the kind in few words, for the end of a bar.
func bindingWord(name string) string {
	switch criterionColor(name) {
	case blue:
		return "rapid change"
	case purple:
		return name
	}
	return criterionKind(name)
}

// bindingKeys is the legend of what binds.
func (h *hostingDocument) bindingKeys() (items []key) {
	seen := map[string]bool{}
	for i := range h.places.Rows {
		c := h.places.Cell(i, "criterion")
		if k := criterionKind(c); !seen[k] {
			seen[k] = true
			items = append(items, key{fill: criterionColor(c), text: k})
		}
	}
	sort.SliceStable(items, func(a, b int) bool { return items[a].text < items[b].text })
	return items
}

// placesFigure draws what each place keeps as bars in the colour of what binds, with a mark
// at the size that breaks.
func (h *hostingDocument) placesFigure(st *style) (*page, Figure, error) {
	n := len(h.places.Rows)
	if n == 0 {
		return nil, Figure{}, nil
	}
	counts := map[string]int{}
	top := 0.0
	for i := range n {
		counts[criterionKind(h.places.Cell(i, "criterion"))]++
		top = math.Max(top, math.Max(numberIn(h.places.Cell(i, "keeps")), zeroIfNaN(numberIn(h.places.Cell(i, "breaks at")))))
	}
	most := ""
	for _, k := range sortedKeys(counts) {
		if most == "" || counts[k] > counts[most] {
			most = k
		}
	}
	f := Figure{Name: "hosting-places.png", Title: "What each place takes", Finding: fmt.Sprintf("What binds most often is %s, at %d of %s.", most, counts[most], count(n, "bar", "bars"))}
	if most == criterionKind("") {
		f.Finding = fmt.Sprintf("At %d of %s nothing breaks up to the largest size.", counts[most], count(n, "bar", "bars"))
	}
	f.Alt = "Bars of the largest size that keeps every criterion, by place in the order of distance, coloured by the criterion that the next size breaks. " + f.Finding
	const row = vg.Length(19)
	items := append([]key{{line: draw.LineStyle{Color: black, Width: vg.Points(1.8)}, text: "breaks"}}, h.bindingKeys()...)
	more := keyLine * vg.Length(len(st.keyRows(items, pageMargin))-1)
	p := st.newPage(vg.Length(n)*row+70+more, f.Title, f.Finding, h.foot())
	label, small := st.text(labelSize, black), st.text(smallSize, inkGrey)
	name := func(i int) string {
		if km := h.places.Cell(i, "distance"); km != "" {
			return fmt.Sprintf("%s, %s km", h.places.Cell(i, "place"), number(numberIn(km), 1))
		}
		return h.places.Cell(i, "place") + ", shared"
	}
	room := vg.Length(0)
	for i := range n {
		room = max(room, label.Width(name(i)))
	}
	room = min(room+8, 180)
	_, hi := roundRange(0, math.Max(top, 1), 5)
	a := p.panel(vg.Rectangle{Min: vg.Point{X: p.body.Min.X + room, Y: p.body.Min.Y + 58 + more}, Max: vg.Point{X: p.body.Max.X - 40, Y: p.body.Max.Y - 4}}, 0, hi, 0, float64(n))
	ticks := linear(0, hi, 5)
	for _, k := range ticks {
		a.c.StrokeLine2(gridLine, a.x(k.at), a.rect.Min.Y, a.x(k.at), a.rect.Max.Y)
	}
	a.xAxis(ticks, "New units [kW]")
	for i := range n {
		y := a.rect.Max.Y - vg.Length(i)*row - row/2
		keeps, breaks := numberIn(h.places.Cell(i, "keeps")), numberIn(h.places.Cell(i, "breaks at"))
		tone := criterionColor(h.places.Cell(i, "criterion"))
		a.label(label, a.rect.Min.X-6, y, text.XRight, text.YCenter, fit(label, name(i), room-8))
		a.bar(a.x(0), y-6, a.x(keeps), y+6, tone)
		end := a.x(keeps)
		if !math.IsNaN(breaks) {
			end = a.x(breaks)
			a.c.StrokeLine2(draw.LineStyle{Color: tone, Width: vg.Points(1)}, a.x(keeps), y, end, y)
			a.c.StrokeLine2(draw.LineStyle{Color: black, Width: vg.Points(1.8)}, end, y-6, end, y+6)
		}
		// What binds in words too, for those who read in grey.
		words := number(keeps, 0)
		if c := h.places.Cell(i, "criterion"); c != "" && end+4+small.Width(words+", "+bindingWord(c)) < p.body.Max.X {
			words += ", " + bindingWord(c)
		}
		a.haloed(small, end+4, y, text.XLeft, text.YCenter, words)
	}
	a.keys(items, p.body.Min.X, a.rect.Min.Y-46)
	return p, f, nil
}

func zeroIfNaN(x float64) float64 {
	if math.IsNaN(x) {
		return 0
	}
	return x
}

// rolloutFigure draws the share of violating runs against installed power.
func (h *hostingDocument) rolloutFigure(st *style) (*page, Figure) {
	var x, y []float64
	for i := range h.rollout.Rows {
		x, y = append(x, numberIn(h.rollout.Cell(i, "mean installed"))), append(y, numberIn(h.rollout.Cell(i, "share")))
	}
	f := Figure{Name: "hosting-rollout.png", Title: "Share of the runs that violate a limit"}
	least, all := h.said("least"), h.said("all")
	switch {
	case least == "":
		f.Finding = fmt.Sprintf("No run violates a limit up to %s kW.", number(x[len(x)-1], 0))
	case all == "":
		f.Finding = fmt.Sprintf("The first runs violate a limit at %s kW; at %s kW %s of them do.", number(numberIn(least), 0), number(x[len(x)-1], 0), percent(y[len(y)-1]))
	default:
		f.Finding = fmt.Sprintf("The first runs violate a limit at %s kW, all of them from %s kW on.", number(numberIn(least), 0), number(numberIn(all), 0))
	}
	f.Alt = "Line of the share of random orders of adoption that violate a limit against installed power. " + f.Finding
	p := st.newPage(230, f.Title, f.Finding, h.foot())
	_, hi := roundRange(0, x[len(x)-1], 5)
	a := p.panel(vg.Rectangle{Min: vg.Point{X: p.body.Min.X + 50, Y: p.body.Min.Y + 42}, Max: vg.Point{X: p.body.Max.X - 14, Y: p.body.Max.Y - 24}}, 0, hi, 0, 100)
	a.yAxis(percentTicksGrid(), "Runs that violate")
	a.xAxis(linear(0, hi, 5), "Installed by customers [kW]")
	a.add(line{append([]float64{0}, x...), append([]float64{0}, y...), draw.LineStyle{Color: blue, Width: vg.Points(dataWidth)}})
	for i := range x {
		a.dot(a.x(x[i]), a.y(y[i]), 3, blue)
	}
	return p, f
}

func percentTicksGrid() []tick {
	ticks := percentTicks()
	for i := range ticks {
		ticks[i].grid = true
	}
	return ticks
}

// drawHostingMap draws the feeder in grey and the places as discs, the larger the more
// they keep.
func (h *hostingDocument) drawHostingMap(s *survey, st *style) (*page, Figure, error) {
	l := s.place()
	f := Figure{Name: "hosting-map.png", Title: "What each place takes, on the map"}
	top, least, leastAt := 0.0, math.Inf(1), ""
	for i := range h.places.Rows {
		name := h.places.Cell(i, "place")
		if _, ok := l.at[name]; !ok {
			continue
		}
		keeps := numberIn(h.places.Cell(i, "keeps"))
		top = math.Max(top, keeps)
		if keeps < least {
			least, leastAt = keeps, name
		}
	}
	if leastAt == "" {
		return nil, Figure{}, nil
	}
	f.Finding = fmt.Sprintf("The place that takes least is %s, %s kW; the largest disc is %s kW.", leastAt, number(least, 0), number(top, 0))
	f.Alt = "Map of the feeder with a disc at each place, larger where more is hosted, coloured by what binds. " + f.Finding
	p := st.newPage(l.bodyHeight(), f.Title, f.Finding, h.foot())
	n := mapPanel(p, l)
	for _, b := range branchOrder(s.Branches) {
		a, ok1 := l.at[b.From]
		z, ok2 := l.at[b.To]
		if !ok1 || !ok2 {
			continue
		}
		w := [...]float64{0.8, 0.9, 1.4, 2.2}[phaseCount(b.Phases)]
		pts := []vg.Point{{X: n.x(a[0]), Y: n.y(a[1])}, {X: n.x(z[0]), Y: n.y(z[1])}}
		if l.tree {
			pts = []vg.Point{pts[0], {X: pts[0].X, Y: pts[1].Y}, pts[1]}
		}
		n.c.StrokeLines(draw.LineStyle{Color: missing, Width: vg.Points(w)}, pts)
	}
	for i := range h.places.Rows {
		xy, ok := l.at[h.places.Cell(i, "place")]
		if !ok {
			continue
		}
		keeps := numberIn(h.places.Cell(i, "keeps"))
		r := 3.5 + 8.5*math.Sqrt(keeps/math.Max(top, 1))
		x, y := n.x(xy[0]), n.y(xy[1])
		n.dot(x, y, r+0.8, white)
		n.dot(x, y, r, criterionColor(h.places.Cell(i, "criterion")))
	}
	h.mapWords(n, l, s, top)
	small := n.text(smallSize, black)
	y := n.body.Max.Y - 14
	n.label(n.text(labelSize, black), n.body.Max.X-112, y, text.XLeft, text.YBottom, "What binds")
	for _, k := range h.bindingKeys() {
		y -= 17
		n.bar(n.body.Max.X-112, y-4, n.body.Max.X-102, y+6, k.fill)
		for j, part := range wrap(small, k.text, 96, 2) {
			n.label(small, n.body.Max.X-97, y-vg.Length(j)*11, text.XLeft, text.YCenter, part)
			if j > 0 {
				y -= 11
			}
		}
	}
	return p, f, nil
}

// mapWords names the places beside their discs, clear of lines, of other discs and of the
// legend where there is room.
func (h *hostingDocument) mapWords(n *panel, l layout, s *survey, top float64) {
	var lines [][2]vg.Point
	for _, b := range s.Branches {
		a, ok1 := l.at[b.From]
		z, ok2 := l.at[b.To]
		if ok1 && ok2 {
			lines = append(lines, [2]vg.Point{{X: n.x(a[0]), Y: n.y(a[1])}, {X: n.x(z[0]), Y: n.y(z[1])}})
		}
	}
	radius := func(i int) vg.Length {
		return vg.Length(3.5 + 8.5*math.Sqrt(numberIn(h.places.Cell(i, "keeps"))/math.Max(top, 1)))
	}
	for i := range h.places.Rows { // a disc weighs more than a line
		if xy, ok := l.at[h.places.Cell(i, "place")]; ok {
			x, y, r := n.x(xy[0]), n.y(xy[1]), radius(i)
			for _, d := range []vg.Length{-0.6, 0, 0.6} {
				lines = append(lines, [2]vg.Point{{X: x - r, Y: y + d*r}, {X: x + r, Y: y + d*r}})
			}
		}
	}
	small := n.text(smallSize, black)
	for i := range h.places.Rows {
		xy, ok := l.at[h.places.Cell(i, "place")]
		if !ok {
			continue
		}
		words := h.places.Cell(i, "place") + " " + number(numberIn(h.places.Cell(i, "keeps")), 0)
		at := vg.Point{X: n.x(xy[0]), Y: n.y(xy[1])}
		// At the height of the legend there is less room.
		room := n.body
		if at.Y > n.body.Max.Y-24-30*vg.Length(len(h.bindingKeys())) {
			room.Max.X -= 118
		}
		x, y := roomForWords(at, radius(i)+3, small.Width(words), room, lines)
		n.haloed(small, x, y, text.XLeft, text.YCenter, words)
		for _, d := range []vg.Length{-4, 0, 4} { // the next words keep clear of these
			lines = append(lines, [2]vg.Point{{X: x, Y: y + d}, {X: x + small.Width(words), Y: y + d}})
		}
	}
}
