package plots

import (
	"fmt"
	"image/color"
	"math"
	"time"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
)

// estimateKind is a kind of losses of the estimate, with the colour that it has in the
// figures of a run; services are apart there.
type estimateKind struct {
	column, name string
	color        color.NRGBA
}

var estimateKinds = [...]estimateKind{
	{"line [kWh]", "lines", lossKinds[0].color},
	{"service [kWh]", "services", sky},
	{"transformer load [kWh]", "transformers, load", lossKinds[1].color},
	{"transformer no-load [kWh]", "transformers, no-load", lossKinds[2].color},
	{"regulator [kWh]", "regulators", lossKinds[3].color},
}

// monthFigure stacks the energy lost in each month by kind.
func (l *lossesDocument) monthFigure(st *style) (*page, Figure) {
	n := len(l.month.Rows) - 1 // the last row is the period
	sums, top := make([]float64, n), 0.0
	most := 0
	for i := range n {
		sums[i] = numberIn(l.month.Cell(i, "losses [kWh]"))
		top = math.Max(top, sums[i])
		if sums[i] > sums[most] {
			most = i
		}
	}
	f := Figure{Name: "losses-by-month.png", Title: "Losses by month and kind", Finding: "No month has losses."}
	if top > 0 {
		total := numberIn(l.month.Cell(n, "losses [kWh]"))
		f.Finding = fmt.Sprintf("%s are lost in the period; %s loses most, %s, %s of the energy supplied then.", energy(total), monthWords(l.month.Cell(most, "month"), true), energy(sums[most]),
			percent(numberIn(l.month.Cell(most, "share of energy supplied [%]"))))
	}
	f.Alt = "Stacked bars of the energy lost in each month, by kind of loss. " + f.Finding
	p := st.newPage(250+keyLine, f.Title, f.Finding, l.foot())
	divide, unit := 1.0, "kWh"
	if top >= 5000 {
		divide, unit = 1000, "MWh"
	}
	if top == 0 {
		top = 1
	}
	_, hi := roundRange(0, top/divide, 5)
	a := p.panel(vg.Rectangle{Min: vg.Point{X: p.body.Min.X + 44, Y: p.body.Min.Y + 42 + keyLine}, Max: vg.Point{X: p.body.Max.X - 8, Y: p.body.Max.Y - 23}}, 0, float64(max(1, n)), 0, hi)
	a.yAxis(linear(0, hi, 5), "Energy lost ["+unit+"]")
	w := min(0.72, 60/float64(a.width())*float64(max(1, n)))
	var ticks []tick
	used := map[int]bool{}
	for i := range n {
		base := 0.0
		for k, kind := range estimateKinds {
			v := math.Max(numberIn(l.month.Cell(i, kind.column))/divide, 0)
			if v > 0 {
				used[k] = true
				x0, x1 := a.x(float64(i)+0.5-w/2), a.x(float64(i)+0.5+w/2)
				a.bar(x0, a.y(base), x1, a.y(base+v), kind.color)
				if a.y(base+v)-a.y(base) > 3*a.pixel() && base > 0 {
					a.bar(x0, a.y(base), x1, a.y(base)+a.pixel(), white)
				}
				base += v
			}
		}
		if n <= 14 || i%(1+n/14) == 0 {
			ticks = append(ticks, tick{at: float64(i) + 0.5, label: monthWords(l.month.Cell(i, "month"), false), bare: true})
		}
	}
	a.xAxis(ticks, "")
	var items []key
	for k, kind := range estimateKinds {
		if used[k] {
			items = append(items, key{fill: kind.color, text: kind.name})
		}
	}
	a.keys(items, a.rect.Min.X, a.rect.Min.Y-31)
	return p, f
}

// monthWords is a month such as 2025-01 in words.
func monthWords(name string, long bool) string {
	t, err := time.Parse("2006-01", name)
	switch {
	case err != nil:
		return name
	case long:
		return t.Format("January 2006")
	}
	return t.Format("Jan")
}

// elementFigure draws the elements that lose most as bars in the colour of their kind.
func (l *lossesDocument) elementFigure(st *style, rows []int) (*page, Figure) {
	first := l.element.Cell(0, "element")
	f := Figure{Name: "losses-by-element.png", Title: fmt.Sprintf("The %d elements that lose most", len(rows)),
		Finding: fmt.Sprintf("%s (%s) loses most, %s, %s of all; together they make %s.", first, l.element.Cell(0, "kind"), energy(numberIn(l.element.Cell(0, "energy [kWh]"))),
			percent(numberIn(l.element.Cell(0, "share [%]"))), percent(numberIn(l.element.Cell(len(rows)-1, "share of it and those before [%]"))))}
	f.Alt = "Bars of the energy lost in each of these elements, coloured by kind of loss. " + f.Finding
	const bar, gap = vg.Length(11), vg.Length(3.5)
	p := st.newPage(vg.Length(len(rows))*(bar+gap)+40, f.Title, f.Finding, l.foot())
	label, small := st.text(labelSize, black), st.text(smallSize, inkGrey)
	room := vg.Length(0)
	for _, i := range rows {
		room = max(room, label.Width(l.element.Cell(i, "element")))
	}
	room = min(room+8, 170)
	x0, x1 := p.body.Min.X+room, p.body.Max.X-90
	top := math.Max(numberIn(l.element.Cell(0, "energy [kWh]")), 1e-9)
	used := map[int]bool{}
	for k, i := range rows {
		v := math.Max(0, numberIn(l.element.Cell(i, "energy [kWh]")))
		y := p.body.Max.Y - 10 - vg.Length(k)*(bar+gap) - bar/2
		p.label(label, x0-6, y, text.XRight, text.YCenter, fit(label, l.element.Cell(i, "element"), room-8))
		kind := kindOf(l.element.Cell(i, "kind"))
		used[kind] = true
		x := x0 + (x1-x0)*vg.Length(v/top)
		p.bar(x0, y-bar/2, x, y+bar/2, estimateKinds[kind].color)
		p.label(small, x+4, y, text.XLeft, text.YCenter, energy(v)+", "+percent(numberIn(l.element.Cell(i, "share [%]"))))
	}
	var items []key
	for k, kind := range estimateKinds {
		if used[k] {
			items = append(items, key{fill: kind.color, text: kind.name})
		}
	}
	a := p.panel(vg.Rectangle{Min: vg.Point{X: x0, Y: p.body.Min.Y + 14}, Max: p.body.Max}, 0, 1, 0, 1)
	a.keys(items, p.body.Min.X, p.body.Min.Y+8)
	return p, f
}

// kindOf finds a kind by its word in losses-by-element.csv.
func kindOf(word string) int {
	for k, e := range estimateKinds {
		if headOf(e.column) == word {
			return k
		}
	}
	return 0
}
