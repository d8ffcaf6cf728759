package plots

import (
	"image/color"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// key is an entry of a legend: a line or a patch, and its text.
type key struct {
	line draw.LineStyle
	fill color.Color
	text string
}

// keys draws a legend from x on at the height y, in as many rows as it needs.
func (n *panel) keys(items []key, x, y vg.Length) {
	t := n.text(labelSize, black)
	for i, row := range n.keyRows(items, x) {
		at := x
		if row.wide {
			at = pageMargin
		}
		for _, k := range items[row.from:row.to] {
			ky := y - keyLine*vg.Length(i)
			n.keyMark(k, at, ky)
			n.label(t, at+24, ky, text.XLeft, text.YCenter, k.text)
			at += 24 + t.Width(k.text) + keyGap
		}
	}
}

// keyLine is the height of a row of a legend, keyGap what stands between entries.
const keyLine, keyGap = vg.Length(14), vg.Length(13)

// keyRow is a row of a legend: items[from:to], from the page's margin on if wide.
type keyRow struct {
	from, to int
	wide     bool
}

// keyRows breaks a legend that begins at x into rows that fit on the page.
func (s *style) keyRows(items []key, x vg.Length) []keyRow {
	t := s.text(labelSize, black)
	width := func(k key) vg.Length { return 24 + t.Width(k.text) + keyGap }
	total := vg.Length(0)
	for _, k := range items {
		total += width(k)
	}
	limit := pageWidth - pageMargin + 1 + keyGap
	wide := x+total > limit
	if wide {
		x = pageMargin
	}
	rows := []keyRow{{wide: wide}}
	at := x
	for i, k := range items {
		last := &rows[len(rows)-1]
		if at+width(k) > limit && i > last.from {
			rows = append(rows, keyRow{from: i, wide: wide})
			last, at = &rows[len(rows)-1], x
		}
		last.to = i + 1
		at += width(k)
	}
	return rows
}

func (n *panel) keyMark(k key, x, y vg.Length) {
	if k.fill != nil {
		r := vg.Rectangle{Min: vg.Point{X: x, Y: y - 4}, Max: vg.Point{X: x + 19, Y: y + 4}}
		n.fill(r, k.fill)
		n.outline(n.snap(r), draw.LineStyle{Color: gridGrey, Width: vg.Points(0.5)})
	}
	if k.line.Width > 0 {
		n.c.StrokeLine2(k.line, x, y, x+19, y)
	}
}

// limitKeys names the shaded bands that a panel from lo to hi shows.
func (s *survey) limitKeys(lo, hi float64) []key {
	l := s.limits
	keys := []key{{fill: outsideA, text: "outside " + s.rangeWords}}
	if hi > l.OuterHigh || lo < l.OuterLow {
		name := "outside B"
		if s.Run.Limits.Own {
			name = "outside the outer"
		}
		keys = append(keys, key{fill: outsideB, text: name})
	}
	return keys
}
