package plots

import (
	"fmt"
	"image/color"
	"math"
	"slices"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// rising is a scale of colours for a quantity that is the worse the higher: from pale to
// dark, so that the order is the same in grey.
type rising struct{ lo, hi float64 }

var risingColors = [...]color.NRGBA{{0xcf, 0xe1, 0xee, 0xff}, {0x8d, 0xbb, 0xdc, 0xff}, {0x2f, 0x88, 0xc0, 0xff}, {0x00, 0x57, 0x8f, 0xff}, tooLow}

func (k rising) color(v float64) color.NRGBA {
	if math.IsNaN(v) {
		return missing
	}
	n := float64(len(risingColors) - 1)
	x := math.Max(0, math.Min(1, (v-k.lo)/math.Max(k.hi-k.lo, 1e-12))) * n
	i := min(int(x), len(risingColors)-2)
	return mix(risingColors[i], risingColors[i+1], x-float64(i))
}

const (
	marginalColumn = "marginal losses [%]"
	valueColumn    = "value of 1 kW saved"
)

// marginalSpots are the places of marginal.csv in the order of the table, with what a
// figure needs of each.
type marginalSpots struct {
	l      *Ledger
	row    map[string]int
	layout layout // at is empty where no place has coordinates
}

func newMarginalSpots(l *Ledger) marginalSpots {
	m := marginalSpots{l: l, row: map[string]int{}, layout: layout{at: map[string][2]float64{}, km: true}}
	x, y, scale := "x", "y", [2]float64{1e-3, 1e-3}
	if l.Column("longitude") >= 0 {
		lat, n := 0.0, 0
		for i := range l.Rows {
			if v := numberIn(l.Cell(i, "latitude")); !math.IsNaN(v) {
				lat, n = lat+v, n+1
			}
		}
		const kmPerDegree = 111.32 // one parallel's scale for all, as on the map of a run
		x, y, scale = "longitude", "latitude", [2]float64{kmPerDegree * math.Cos(lat/float64(max(n, 1))*math.Pi/180), kmPerDegree}
	}
	for i := range l.Rows {
		m.row[l.Cell(i, "node")] = i
		if at := [2]float64{scale[0] * numberIn(l.Cell(i, x)), scale[1] * numberIn(l.Cell(i, y))}; !math.IsNaN(at[0] + at[1]) {
			m.layout.at[l.Cell(i, "node")] = at
		}
	}
	if !spread(m.layout.at) {
		m.layout.at = nil
		return m
	}
	// Who has no place of its own stands where it is fed from.
	for again := true; again; {
		again = false
		for i := range l.Rows {
			name := l.Cell(i, "node")
			if _, ok := m.layout.at[name]; ok {
				continue
			}
			if at, ok := m.layout.at[l.Cell(i, "fed from")]; ok {
				m.layout.at[name], again = at, true
			}
		}
	}
	return m
}

// order is the rows with a value of a column, the lowest first, so that the highest are
// drawn on top.
func (m marginalSpots) order(column string) (rows []int) {
	for i := range m.l.Rows {
		if !math.IsNaN(numberIn(m.l.Cell(i, column))) {
			rows = append(rows, i)
		}
	}
	slices.SortStableFunc(rows, func(a, b int) int {
		switch x, y := numberIn(m.l.Cell(a, column)), numberIn(m.l.Cell(b, column)); {
		case x < y:
			return -1
		case x > y:
			return 1
		}
		return 0
	})
	return rows
}

// marginalFigures draws where marginal losses are high: the map, or where there are no
// coordinates against distance; and, where there are prices, what a kW saved is worth.
func (l *lossesDocument) marginalFigures(st *style) (out []Block, err error) {
	m := newMarginalSpots(l.marginal)
	add := func(p *page, f Figure, caption Text) {
		if p == nil || err != nil {
			return
		}
		var b Block
		if b, err = l.picture(p, f); err != nil {
			return
		}
		pic := b.(Picture)
		pic.Caption = caption
		out = append(out, pic)
	}
	if m.layout.at != nil {
		add(l.marginalMap(st, m))
	} else {
		add(l.marginalDistance(st, m, marginalColumn, "marginal-losses-distance.png", "Marginal losses along the feeder"))
	}
	if l.marginal.Column(valueColumn) >= 0 {
		add(l.marginalDistance(st, m, valueColumn, "value-of-a-kw.png", "What a kW saved all year is worth, along the feeder"))
	}
	return out, err
}

// marginalFinding is what both figures of the marginal losses say.
func (l *lossesDocument) marginalFinding(rows []int) Text {
	low, half, high := rows[0], rows[len(rows)/2], rows[len(rows)-1]
	return Say("A kW more costs most losses on the way to {}, {} of it, and least to {}, {}; at half of the places they are {} or more.",
		l.marginal.Name(high, "node"), l.marginal.Rounded(high, marginalColumn, 1), l.marginal.Name(low, "node"), l.marginal.Rounded(low, marginalColumn, 1), l.marginal.Rounded(half, marginalColumn, 1))
}

// marginalMap draws the feeder coloured by the marginal losses of its places.
func (l *lossesDocument) marginalMap(st *style, m marginalSpots) (*page, Figure, Text) {
	rows := m.order(marginalColumn)
	if len(rows) == 0 {
		return nil, Figure{}, nil
	}
	caption := l.marginalFinding(rows)
	f := Figure{Name: "marginal-losses-map.png", Title: "Marginal losses by place, on the map", Finding: caption.String()}
	f.Alt = "Map of the feeder, the darker the more of a further kW is lost on the way. " + f.Finding
	value := func(i int) float64 { return numberIn(m.l.Cell(i, marginalColumn)) }
	k := rising{value(rows[0]), value(rows[len(rows)-1])}
	// Low enough for the next figure to stand on the same printed page.
	p := st.newPage(min(m.layout.bodyHeight(), 330), f.Title, f.Finding, l.foot())
	n := mapPanel(p, m.layout)
	spot := func(name string) (vg.Point, bool) {
		at, ok := m.layout.at[name]
		return vg.Point{X: n.x(at[0]), Y: n.y(at[1])}, ok
	}
	for _, i := range rows {
		a, ok1 := spot(m.l.Cell(i, "fed from"))
		z, ok2 := spot(m.l.Cell(i, "node"))
		if !ok1 || !ok2 {
			continue
		}
		w := [...]float64{1.2, 1.4, 2.2, 3.2}[phaseCount(m.l.Cell(i, "phases"))]
		n.c.StrokeLines(draw.LineStyle{Color: k.color(value(i)), Width: vg.Points(w)}, []vg.Point{a, z})
	}
	for _, i := range rows {
		if at, ok := spot(m.l.Cell(i, "node")); ok {
			n.dot(at.X, at.Y, 2.4, k.color(value(i)))
		}
		if at, ok := spot(m.l.Cell(i, "node")); ok && m.l.Cell(i, "fed from") == "" {
			n.deviceMark("source", at.X, at.Y)
		}
	}
	var lines [][2]vg.Point
	for _, i := range rows {
		a, ok1 := spot(m.l.Cell(i, "fed from"))
		z, ok2 := spot(m.l.Cell(i, "node"))
		if ok1 && ok2 {
			lines = append(lines, [2]vg.Point{a, z})
		}
	}
	// The ends of the scale by name; a ring shows which of many dots is meant.
	small := n.text(smallSize, black)
	for _, i := range []int{rows[len(rows)-1], rows[0]} {
		at, ok := spot(m.l.Cell(i, "node"))
		if !ok {
			continue
		}
		n.c.DrawGlyphNoClip(draw.GlyphStyle{Color: black, Radius: vg.Points(6), Shape: draw.RingGlyph{}}, at)
		words := m.l.Cell(i, "node") + ", " + l.marginal.Rounded(i, marginalColumn, 1).Show + " %"
		x, y := roomForWords(at, 9, small.Width(words), vg.Rectangle{Min: n.body.Min, Max: vg.Point{X: n.body.Max.X - 122, Y: n.body.Max.Y}}, lines)
		n.haloed(small, x, y, text.XLeft, text.YCenter, words)
	}
	l.marginalScale(n, k)
	return p, f, caption
}

// marginalScale stands to the right of the map.
func (l *lossesDocument) marginalScale(n *panel, k rising) {
	x, top := n.body.Max.X-112, n.body.Max.Y-14
	for j, part := range []string{"Losses of a kW", "more [%]"} {
		n.label(n.text(labelSize, black), x, top+2-vg.Length(j)*13, text.XLeft, text.YBottom, part)
	}
	hi := k.hi
	if hi <= k.lo {
		hi = k.lo + 1
	}
	bar := n.page.panel(vg.Rectangle{Min: vg.Point{X: x, Y: top - 150}, Max: vg.Point{X: x + 12, Y: top - 20}}, 0, 1, k.lo, hi)
	bar.image(func(_, fy float64) color.NRGBA { return k.color(k.lo + fy*(hi-k.lo)) })
	bar.outline(bar.rect, axisLine)
	for _, t := range linear(k.lo, hi, 5) {
		y := bar.y(t.at)
		n.c.StrokeLine2(axisLine, bar.rect.Max.X, y, bar.rect.Max.X+3, y)
		n.label(n.text(smallSize, inkGrey), bar.rect.Max.X+6, y, text.XLeft, text.YCenter, t.label)
	}
	y := bar.rect.Min.Y - 18
	n.deviceMark("source", x+6, y)
	n.label(n.text(labelSize, black), x+18, y, text.XLeft, text.YCenter, "source")
}

// marginalDistance draws a column of marginal.csv against the distance from the source,
// each place joined to the one that feeds it.
func (l *lossesDocument) marginalDistance(st *style, m marginalSpots, column, file, title string) (*page, Figure, Text) {
	rows := m.order(column)
	rows = slices.DeleteFunc(rows, func(i int) bool { return math.IsNaN(numberIn(m.l.Cell(i, "distance"))) })
	if len(rows) == 0 {
		return nil, Figure{}, nil
	}
	value := func(i int) float64 { return numberIn(m.l.Cell(i, column)) }
	low, high := rows[0], rows[len(rows)-1]
	caption := l.marginalFinding(rows)
	head, unit := "Losses of a kW more", "%"
	if column != marginalColumn {
		head, unit = "Worth of a kW saved", unitOf(m.l.Header[m.l.Column(column)])
		caption = Say("A kW saved all year is worth most at {}, {}, and least at {}, {}; the difference is that of the losses on the way.",
			m.l.Name(high, "node"), m.l.Rounded(high, column, 0), m.l.Name(low, "node"), m.l.Rounded(low, column, 0))
	}
	f := Figure{Name: file, Title: title, Finding: caption.String()}
	f.Alt = fmt.Sprintf("Dots of %s against distance from the source, one a place, joined along the feeder. ", column) + f.Finding
	far := 0.0
	for _, i := range rows {
		far = math.Max(far, numberIn(m.l.Cell(i, "distance")))
	}
	if far == 0 {
		far = 1
	}
	lo, hi := roundRange(value(low), value(high), 5)
	if hi <= lo {
		hi = lo + 1
	}
	p := st.newPage(250, f.Title, f.Finding, l.foot())
	ticks := linear(lo, hi, 5)
	wide := vg.Length(0)
	for _, t := range ticks {
		wide = max(wide, st.text(labelSize, inkGrey).Width(t.label))
	}
	a := p.panel(vg.Rectangle{Min: vg.Point{X: p.body.Min.X + wide + 8, Y: p.body.Min.Y + 42}, Max: vg.Point{X: p.body.Max.X - 14, Y: p.body.Max.Y - 24}}, 0, far*1.03, lo, hi)
	a.yAxis(ticks, head+" ["+unit+"]")
	a.xAxis(linear(0, far*1.03, 5), "Distance from the source [km]")
	k := rising{value(low), value(high)}
	spot := func(i int) vg.Point {
		return vg.Point{X: a.x(numberIn(m.l.Cell(i, "distance"))), Y: a.y(value(i))}
	}
	shown := make(map[int]bool, len(rows))
	for _, i := range rows {
		shown[i] = true
	}
	for _, i := range rows {
		if from, ok := m.row[m.l.Cell(i, "fed from")]; ok && shown[from] {
			a.c.StrokeLines(draw.LineStyle{Color: missing, Width: vg.Points(0.9)}, []vg.Point{spot(from), spot(i)})
		}
	}
	for _, i := range rows {
		at := spot(i)
		a.dot(at.X, at.Y, 3.2, white)
		a.dot(at.X, at.Y, 2.6, k.color(value(i)))
	}
	small := a.text(smallSize, black)
	for _, i := range []int{high, low} {
		at, name := spot(i), m.l.Cell(i, "node")
		x, side := at.X+7, text.XLeft
		if x+small.Width(name) > a.rect.Max.X {
			x, side = at.X-7, text.XRight
		}
		a.haloed(small, x, at.Y, side, text.YCenter, name)
	}
	return p, f, caption
}

// roomForWords finds where words of a width stand at a distance beside a point: within room, and over as
// few of the lines as can be. It returns their left end and middle.
func roomForWords(at vg.Point, away, wide vg.Length, room vg.Rectangle, lines [][2]vg.Point) (x, y vg.Length) {
	const high = vg.Length(12)
	fewest := math.MaxInt
	for _, dy := range []vg.Length{0, 11, -11, 18, -18} {
		for _, left := range []vg.Length{at.X + away, at.X - away - wide, at.X - wide/2} {
			if left == at.X-wide/2 && dy > -18 && dy < 18 {
				continue // on top of the point
			}
			box := vg.Rectangle{Min: vg.Point{X: left, Y: at.Y + dy - high/2}, Max: vg.Point{X: left + wide, Y: at.Y + dy + high/2}}
			if box.Min.X < room.Min.X || box.Max.X > room.Max.X || box.Min.Y < room.Min.Y || box.Max.Y > room.Max.Y {
				continue
			}
			over := 0
			for _, l := range lines {
				const parts = 24
				for k := range parts + 1 {
					s := vg.Length(k) / parts
					p := vg.Point{X: l[0].X + s*(l[1].X-l[0].X), Y: l[0].Y + s*(l[1].Y-l[0].Y)}
					if p.X >= box.Min.X && p.X <= box.Max.X && p.Y >= box.Min.Y && p.Y <= box.Max.Y {
						over++
						break
					}
				}
			}
			if over < fewest {
				fewest, x, y = over, left, at.Y+dy
			}
		}
	}
	if fewest == math.MaxInt {
		return at.X + away, at.Y
	}
	return x, y
}
