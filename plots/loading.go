package plots

import (
	"fmt"
	"math"
	"sort"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"yearflow/sim/results"
)

// mostElements is how many of the most loaded elements are shown.
const mostElements = 16

func drawLoading(s *survey, st *style) (*page, Figure) {
	fig := Figure{Title: "Loading of the most loaded elements"}
	rows, unrated := s.loadingRows()
	kinds := map[string]string{}
	for _, b := range branchOrder(s.Branches) {
		kinds[b.Element] = b.Kind
	}
	unit := func(r results.LoadingRow) string {
		if kinds[r.Element] == "transformer" {
			return "kVA"
		}
		return "A"
	}
	over := 0
	for _, r := range rows {
		if r.Percent > 100 {
			over++
		}
	}
	switch {
	case len(rows) == 0:
		fig.Finding = "No element has both a rating and a flow, so no loading can be shown."
	default:
		r := rows[0]
		fig.Finding = fmt.Sprintf("%s is loaded most, to %s of its %s %s on %s; ", element(r), percent(r.Percent), rating(r.Rating), unit(r), s.span.on(r.PeakTime))
		switch over {
		case 0:
			fig.Finding += "no element exceeds its rating."
		case 1:
			fig.Finding += fmt.Sprintf("it alone exceeds its rating, for %s.", hours(r.HoursAboveRating))
		default:
			fig.Finding += fmt.Sprintf("%d of %d elements exceed their rating.", over, len(rows))
		}
	}
	if unrated > 0 && len(rows) > 0 {
		fig.Finding += fmt.Sprintf(" %s no rating.", count(unrated, "element has", "elements have"))
	}
	fig.Alt = "Horizontal bars of the peak loading of the most loaded elements in per cent of their rating. " + fig.Finding
	shown := rows[:min(len(rows), mostElements)]
	const rowHeight = vg.Length(17)
	p := st.newPage(58+rowHeight*vg.Length(max(len(shown), 1)), fig.Title, fig.Finding, s.foot())
	if len(shown) == 0 {
		p.label(p.text(labelSize, inkGrey), p.body.Min.X, (p.body.Min.Y+p.body.Max.Y)/2, text.XLeft, text.YCenter, "Nothing to show.")
		return p, fig
	}
	name, value := p.text(labelSize, black), p.text(smallSize, inkGrey)
	var left, right vg.Length
	notes := make([]string, len(shown))
	for i, r := range shown {
		left = max(left, name.Width(element(r)))
		notes[i] = fmt.Sprintf("%s of %s %s", number(r.Peak, 0), rating(r.Rating), unit(r))
		right = max(right, value.Width(notes[i]))
	}
	left = min(left, 130)
	hi := math.Max(110, shown[0].Percent*1.02)
	_, hi = roundRange(0, hi, 6)
	n := p.panel(vg.Rectangle{
		Min: vg.Point{X: p.body.Min.X + left + 8, Y: p.body.Min.Y + 40},
		Max: vg.Point{X: p.body.Max.X - right - 14, Y: p.body.Max.Y - 16},
	}, 0, hi, 0, float64(len(shown)))
	n.fill(vg.Rectangle{Min: vg.Point{X: n.x(100), Y: n.rect.Min.Y}, Max: n.rect.Max}, outsideA)
	ticks := linear(0, hi, 6)
	for i := range ticks {
		ticks[i].grid = true
		ticks[i].label += " %"
	}
	n.verticals(ticks)
	for i, r := range shown {
		y := float64(len(shown)-1-i) + 0.5
		col := blue
		if r.Percent > 100 {
			col = vermilion
		}
		n.bar(n.rect.Min.X, n.y(y-0.36), n.x(r.Percent), n.y(y+0.36), col)
		n.label(name, n.rect.Min.X-6, n.y(y), text.XRight, text.YCenter, fit(name, element(r), left))
		n.label(value, n.rect.Max.X+right+8, n.y(y), text.XRight, text.YCenter, notes[i])
	}
	n.c.StrokeLine2(draw.LineStyle{Color: black, Width: vg.Points(1), Dashes: []vg.Length{vg.Points(3), vg.Points(2)}}, n.x(100), n.rect.Min.Y, n.x(100), n.rect.Max.Y)
	n.xAxis(ticks, "Peak loading, % of rating")
	n.label(n.text(labelSize, black), n.rect.Max.X+right+8, n.rect.Max.Y+4, text.XRight, text.YBottom, "peak and rating")
	return p, fig
}

// element names an element with its phase.
func element(r results.LoadingRow) string {
	if r.Phase == "" {
		return r.Element
	}
	return r.Element + "." + r.Phase
}

// loadingRows returns the worst phase of each element that has a rating, most loaded
// first; names decide between equals, never the order of rows.
func (s *survey) loadingRows() (rows []results.LoadingRow, unrated int) {
	all := append([]results.LoadingRow(nil), s.Loading...)
	sort.SliceStable(all, func(i, j int) bool {
		a, b := all[i], all[j]
		switch {
		case a.Element != b.Element:
			return a.Element < b.Element
		case a.Percent != b.Percent && !math.IsNaN(a.Percent) && !math.IsNaN(b.Percent):
			return a.Percent > b.Percent
		case math.IsNaN(a.Percent) != math.IsNaN(b.Percent):
			return !math.IsNaN(a.Percent)
		}
		return a.Phase < b.Phase
	})
	for i, r := range all {
		if i > 0 && all[i-1].Element == r.Element {
			continue
		}
		if math.IsNaN(r.Percent) {
			unrated++
			continue
		}
		rows = append(rows, r)
	}
	sort.SliceStable(rows, func(i, j int) bool { return rows[i].Percent > rows[j].Percent })
	return rows, unrated
}

// rating keeps the half of a 37.5 or 112.5 kVA unit.
func rating(x float64) string {
	if x == math.Trunc(x) {
		return number(x, 0)
	}
	return number(x, 1)
}
