package plots

import (
	"fmt"
	"math"
	"strings"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
)

var nan = math.NaN()

// barPanel is a quantity with one bar for each name.
type barPanel struct {
	title  string
	values []float64 // NaN: none
	shown  []string  // the values as they are written at the bars
}

// bars draws the weighted quantities, one panel each, the base in black.
func (c *compareDocument) bars(st *style) (*page, Figure) {
	var panels []barPanel
	for i := range c.weights.Rows {
		q := c.weights.Cell(i, "quantity")
		b := barPanel{title: q}
		if u := shownUnit(c.weights.Cell(i, "unit")); u != "" {
			b.title += " [" + u + "]"
		}
		for _, n := range c.names {
			b.values = append(b.values, c.number(q, n))
			b.shown = append(b.shown, c.at(q, n).Show+changeWords(b.values))
		}
		panels = append(panels, b)
	}
	if len(panels) == 0 || len(c.names) == 1 {
		return nil, Figure{}
	}
	f := Figure{Name: "compare.png", Title: "What the cases change", Finding: c.barsFinding(panels)}
	f.Alt = "Bars of " + fmt.Sprint(len(panels)) + " quantities for the base and each case. " + f.Finding
	return st.barPage(f, c.foot(), c.names, panels), f
}

// changeWords is how the last value differs from the first, ", +1.2 %"; nothing where it
// does not.
func changeWords(v []float64) string {
	base, now := v[0], v[len(v)-1]
	if base == 0 || base == now || math.IsNaN(base+now) {
		return ""
	}
	return ", " + signedPercent(100*(now-base)/math.Abs(base))
}

// signedPercent is a change in per cent with its sign.
func signedPercent(p float64) string {
	if p < 0 {
		return "−" + percent(-p)
	}
	return "+" + percent(p)
}

// barsFinding names the case that changes each quantity most.
func (c *compareDocument) barsFinding(panels []barPanel) string {
	var parts []string
	for _, b := range panels {
		best, most := -1, 0.0
		for i := range b.values[1:] {
			if d := b.values[i+1] - b.values[0]; math.Abs(d) > math.Abs(most) {
				best, most = i+1, d
			}
		}
		if best < 0 || b.values[0] == 0 {
			continue
		}
		name, _, _ := strings.Cut(b.title, " [")
		parts = append(parts, fmt.Sprintf("%s %s (%s)", name, signedPercent(100*most/math.Abs(b.values[0])), c.names[best]))
	}
	if len(parts) == 0 {
		return "No case changes any of these quantities."
	}
	return "The largest changes against the base: " + strings.Join(parts, ", ") + "."
}

// barPage draws panels of horizontal bars, two in a row, with the names at the left.
func (s *style) barPage(f Figure, ft foot, names []string, panels []barPanel) *page {
	const bar, gap, head = vg.Length(13), vg.Length(5), vg.Length(30)
	one := head + vg.Length(len(names))*(bar+gap) + 8
	rows := (len(panels) + 1) / 2
	p := s.newPage(vg.Length(rows)*one, f.Title, f.Finding, ft)
	label := s.text(labelSize, black)
	room := vg.Length(0)
	for _, n := range names {
		room = max(room, label.Width(n))
	}
	room = min(room+6, 120)
	half := (p.body.Max.X - p.body.Min.X - room) / 2
	for k, b := range panels {
		x0 := p.body.Min.X + room + vg.Length(k%2)*half + 4
		x1 := x0 + half - 12
		top := p.body.Max.Y - vg.Length(k/2)*one
		t := s.bold(labelSize, black)
		p.label(t, x0, top-16, text.XLeft, text.YCenter, fit(t, b.title, x1-x0))
		p.barRows(b, names, x0, x1, top-head, bar, gap, k%2 == 0, room)
	}
	return p
}

// barRows draws one panel: every bar from zero, its value behind it.
func (p *page) barRows(b barPanel, names []string, x0, x1, y, bar, gap vg.Length, named bool, room vg.Length) {
	label, small := p.text(labelSize, black), p.text(smallSize, inkGrey)
	lo, hi, wide := 0.0, 0.0, vg.Length(0)
	for i, v := range b.values {
		if !math.IsNaN(v) {
			lo, hi = math.Min(lo, v), math.Max(hi, v)
		}
		wide = max(wide, small.Width(b.shown[i]))
	}
	if hi == lo {
		hi = 1
	}
	width := x1 - x0 - wide - 8
	at := func(v float64) vg.Length { return x0 + width*vg.Length((v-lo)/(hi-lo)) }
	for i, v := range b.values {
		mid := y - vg.Length(i)*(bar+gap) - bar/2
		if named {
			p.label(label, x0-8, mid, text.XRight, text.YCenter, fit(label, names[i], room-6))
		}
		if math.IsNaN(v) {
			p.label(small, x0+3, mid, text.XLeft, text.YCenter, "no value")
			continue
		}
		c := blue
		if i == 0 {
			c = black
		}
		p.bar(at(0), mid-bar/2, at(v), mid+bar/2, c)
		p.label(small, max(at(v), at(0))+4, mid, text.XLeft, text.YCenter, b.shown[i])
	}
	p.bar(at(0), y+2, at(0)+0.5, y-vg.Length(len(names))*(bar+gap)+gap-2, axisGrey)
}
