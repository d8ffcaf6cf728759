package plots

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// limitFigure shows how far criteria with an upper limit use it up, in per cent of it: the
// base and the case. Left out is what has a lower limit or one of zero.
func (c *impactDocument) limitFigure(st *style) (*page, Figure) {
	type bar struct {
		name       string
		base, with float64 // %
	}
	var bars []bar
	over, most, mostAt := 0, 0.0, ""
	for i := range c.impact.Rows {
		limit := numberIn(c.impact.Cell(i, "limit"))
		if !(limit > 0) || c.impact.Cell(i, "unit") == "pu" || strings.HasPrefix(c.impact.Cell(i, "criterion"), "operations of ") {
			continue
		}
		b := bar{c.impact.Cell(i, "criterion"), 100 * numberIn(c.impact.Cell(i, "base")) / limit, 100 * numberIn(c.impact.Cell(i, "with DER")) / limit}
		if math.IsNaN(b.with) {
			continue
		}
		bars = append(bars, b)
		if b.with > 100 {
			over++
		}
		if b.with > most {
			most, mostAt = b.with, b.name
		}
	}
	if len(bars) == 0 {
		return nil, Figure{}
	}
	f := Figure{Name: "limits.png", Title: "How far limits are used up, base and with the units"}
	f.Finding = fmt.Sprintf("%d of %s go beyond their limit with the units; the most used is that of the %s, %s.", over, count(len(bars), "criterion", "criteria"), mostAt, percent(most))
	f.Alt = "Bars of each criterion in per cent of its limit, for the base and with the units. " + f.Finding
	const row = vg.Length(16.5) // low enough for the first printed page
	p := st.newPage(vg.Length(len(bars))*row+56, f.Title, f.Finding, c.foot())
	label, small := st.text(smallSize, black), st.text(smallSize, inkGrey)
	room := vg.Length(0)
	for _, b := range bars {
		room = max(room, label.Width(b.name))
	}
	room = min(room+8, 250)
	top := 100.0
	for _, b := range bars {
		top = math.Max(top, math.Max(b.with, b.base))
	}
	top = math.Min(top, 400)
	_, hi := roundRange(0, top*1.02, 4)
	n := p.panel(vg.Rectangle{Min: vg.Point{X: p.body.Min.X + room, Y: p.body.Min.Y + 44}, Max: vg.Point{X: p.body.Max.X - 50, Y: p.body.Max.Y - 6}}, 0, hi, 0, float64(len(bars)))
	ticks := linear(0, hi, 4)
	for i := range ticks {
		n.c.StrokeLine2(gridLine, n.x(ticks[i].at), n.rect.Min.Y, n.x(ticks[i].at), n.rect.Max.Y)
		ticks[i].label += " %"
	}
	n.xAxis(ticks, "")
	for i, b := range bars {
		y := n.rect.Max.Y - vg.Length(i)*row - row/2
		n.label(label, n.rect.Min.X-6, y, text.XRight, text.YCenter, fit(label, b.name, room-8))
		tone := blue
		if b.with > 100 {
			tone = vermilion
		}
		n.bar(n.x(0), y+0.5, n.x(math.Min(math.Max(b.base, 0), hi)), y+6.5, axisGrey)
		n.bar(n.x(0), y-6.5, n.x(math.Min(b.with, hi)), y-0.5, tone)
	}
	n.c.StrokeLine2(draw.LineStyle{Color: black, Width: vg.Points(1.4), Dashes: []vg.Length{4, 2}}, n.x(100), n.rect.Min.Y, n.x(100), n.rect.Max.Y)
	for i, b := range bars {
		y := n.rect.Max.Y - vg.Length(i)*row - row/2
		n.haloed(small, besideLimit(n.x(math.Min(math.Max(b.with, b.base), hi))+5, small.Width(percent(b.with)), n.x(100)), y-1, text.XLeft, text.YCenter, percent(b.with))
	}
	n.keys([]key{{fill: axisGrey, text: "base"}, {fill: blue, text: "with the units"}, {fill: vermilion, text: "with the units, beyond the limit"}, {line: draw.LineStyle{Color: black, Width: vg.Points(1.4), Dashes: []vg.Length{4, 2}}, text: "limit"}}, n.rect.Min.X-room, n.rect.Min.Y-31)
	return p, f
}

// besideLimit moves words that would lie on the line of the limit behind it.
func besideLimit(x, wide, limit vg.Length) vg.Length {
	const clear = vg.Length(4)
	if x < limit+clear && x+wide > limit-clear {
		return limit + clear
	}
	return x
}

// remedyFigure compares the remedies in what they are chosen by.
func (c *impactDocument) remedyFigure(st *style) (*page, Figure) {
	names := c.tried()
	if len(names) == 0 {
		return nil, Figure{}
	}
	var panels []barPanel
	for _, q := range []string{"customer-hours above A", "customer-hours below A", "sudden loss of units of the case, above 600 V", "operations", "losses energy", "generation energy"} {
		b := barPanel{title: strings.Replace(q, "sudden loss of units of the case, above 600 V", "sudden loss, above 600 V", 1)}
		for _, name := range append([]string{""}, names...) {
			v, shown := nan, "–"
			for k, r := range c.mitigations.Rows {
				if r[1] != q || name != "" && r[0] != name {
					continue
				}
				column := "mitigated"
				if name == "" {
					column = "with DER"
				}
				v, shown = numberIn(c.mitigations.Cell(k, column)), unitCell(c.mitigations, k, column).Show
				if u := shownUnit(r[2]); u != "" && !strings.HasSuffix(b.title, "]") {
					b.title += " [" + u + "]"
				}
				break
			}
			b.values, b.shown = append(b.values, v), append(b.shown, shown)
		}
		if !slices.ContainsFunc(b.values, func(v float64) bool { return !math.IsNaN(v) }) {
			continue
		}
		panels = append(panels, b)
	}
	if len(panels) == 0 {
		return nil, Figure{}
	}
	f := Figure{Name: "remedies.png", Title: "What the remedies change", Finding: c.remedyFinding(names)}
	f.Alt = "Bars of " + fmt.Sprint(len(panels)) + " quantities for the case and each remedy. " + f.Finding
	return st.barPage(f, c.foot(), append([]string{c.name}, names...), panels), f
}

// remedyFinding names the remedy with which the fewest criteria fail.
func (c *impactDocument) remedyFinding(names []string) string {
	best, fewest := "", math.Inf(1)
	for _, n := range names {
		if x := numberIn(c.list.Cell(c.list.Row(n), "criteria failed")); x < fewest {
			best, fewest = n, x
		}
	}
	var equal []string
	for _, n := range names {
		if numberIn(c.list.Cell(c.list.Row(n), "criteria failed")) == fewest && n != best {
			equal = append(equal, n)
		}
	}
	text := fmt.Sprintf("The fewest criteria fail with %s: %s", best, number(fewest, 0))
	if len(equal) > 0 {
		text += fmt.Sprintf(" (as many with %s)", strings.Join(equal, ", "))
	}
	return text + "."
}
