package plots

import (
	"image/color"
	"math"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"yearflow/sim/results"
)

// panel is a pair of axes on a page. Its rectangle is the data area; ticks and labels
// stand outside of it, in room that the figure has left.
type panel struct {
	*page
	rect vg.Rectangle
	plot *plot.Plot
	area draw.Canvas
}

func (p *page) panel(r vg.Rectangle, xmin, xmax, ymin, ymax float64) *panel {
	pl := plot.New()
	pl.X.Min, pl.X.Max, pl.Y.Min, pl.Y.Max = xmin, xmax, ymin, ymax
	r = p.snap(r)
	return &panel{page: p, rect: r, plot: pl, area: draw.Canvas{Canvas: p.canvas, Rectangle: r}}
}

// x and y return where a value stands on the page.
func (n *panel) x(v float64) vg.Length {
	return n.rect.Min.X + (n.rect.Max.X-n.rect.Min.X)*vg.Length((v-n.plot.X.Min)/(n.plot.X.Max-n.plot.X.Min))
}

func (n *panel) y(v float64) vg.Length {
	return n.rect.Min.Y + (n.rect.Max.Y-n.rect.Min.Y)*vg.Length((v-n.plot.Y.Min)/(n.plot.Y.Max-n.plot.Y.Min))
}

// yIn is y held inside the panel.
func (n *panel) yIn(v float64) vg.Length {
	return min(max(n.y(v), n.rect.Min.Y), n.rect.Max.Y)
}

func (n *panel) width() vg.Length { return n.rect.Max.X - n.rect.Min.X }

// columns is the width of the panel in device pixels.
func (n *panel) columns() int { return n.pixels(n.rect).Dx() }

func (n *panel) add(ms ...plot.Plotter) {
	for _, m := range ms {
		m.Plot(n.area, n.plot)
	}
}

var (
	axisLine = draw.LineStyle{Color: axisGrey, Width: vg.Points(0.8)}
	gridLine = draw.LineStyle{Color: gridGrey, Width: vg.Points(0.6)}
)

// yAxis draws horizontal grid lines and the tick labels to the left, and the name
// with its unit above them.
func (n *panel) yAxis(ticks []tick, name string) {
	t := n.text(labelSize, inkGrey)
	for _, k := range ticks {
		y := n.y(k.at)
		if k.grid {
			n.c.StrokeLine2(gridLine, n.rect.Min.X, y, n.rect.Max.X, y)
		}
		n.label(t, n.rect.Min.X-5, y, text.XRight, text.YCenter, k.label)
	}
	n.label(n.text(labelSize, black), n.rect.Min.X-n.leftRoom(ticks), n.rect.Max.Y+9, text.XLeft, text.YBottom, name)
}

// leftRoom is the width of the tick labels of a y axis with their distance.
func (n *panel) leftRoom(ticks []tick) vg.Length {
	t := n.text(labelSize, inkGrey)
	w := vg.Length(0)
	for _, k := range ticks {
		w = max(w, t.Width(k.label))
	}
	return w + 5
}

// rightAxis labels the same axis in another unit.
func (n *panel) rightAxis(ticks []tick, name string) {
	t := n.text(labelSize, inkGrey)
	for _, k := range ticks {
		n.label(t, n.rect.Max.X+5, n.y(k.at), text.XLeft, text.YCenter, k.label)
	}
	n.label(n.text(labelSize, black), pageWidth-pageMargin, n.rect.Max.Y+9, text.XRight, text.YBottom, name)
}

// xAxis draws the base line, ticks and labels below. A tick's label stands under it,
// or in the middle of the interval that it begins.
func (n *panel) xAxis(ticks []tick, name string) {
	n.c.StrokeLine2(axisLine, n.rect.Min.X, n.rect.Min.Y, n.rect.Max.X, n.rect.Min.Y)
	t := n.text(labelSize, inkGrey)
	for _, k := range ticks {
		x := n.x(k.at)
		if !k.bare {
			n.c.StrokeLine2(axisLine, x, n.rect.Min.Y, x, n.rect.Min.Y-3.5)
		}
		if k.mid != 0 {
			x = n.x(k.mid)
		}
		if k.label != "" {
			// A label at an end of the axis must not leave the page.
			half := t.Width(k.label) / 2
			x = min(max(x, 2+half), pageWidth-2-half)
			n.label(t, x, n.rect.Min.Y-5, text.XCenter, text.YTop, k.label)
		}
	}
	if name != "" {
		n.label(n.text(labelSize, black), (n.rect.Min.X+n.rect.Max.X)/2, n.rect.Min.Y-20, text.XCenter, text.YTop, name)
	}
}

// shadeLimits paints what lies outside the limits, behind the data.
func (n *panel) shadeLimits(l results.VoltageLimits) {
	lo, hi := n.plot.Y.Min, n.plot.Y.Max
	paint := func(a, b float64, c color.Color) {
		a, b = math.Max(a, lo), math.Min(b, hi)
		if b > a {
			n.fill(vg.Rectangle{Min: vg.Point{X: n.rect.Min.X, Y: n.y(a)}, Max: vg.Point{X: n.rect.Max.X, Y: n.y(b)}}, c)
		}
	}
	paint(lo, l.OuterLow, outsideB)
	paint(l.OuterLow, l.Low, outsideA)
	paint(l.High, l.OuterHigh, outsideA)
	paint(l.OuterHigh, hi, outsideB)
}

// line joins points with straight lines; NaN makes a gap, a point alone is a dot.
type line struct {
	x, y  []float64
	style draw.LineStyle
}

// strokePiece is how many points are stroked at once. The raster back end keeps the
// cells of a path in lists, so that time grows with the square of its length.
const strokePiece = 32

// Plot draws the line, clipped to the panel.
func (l line) Plot(c draw.Canvas, p *plot.Plot) {
	tx, ty := p.Transforms(&c)
	var run []vg.Point
	flush := func() {
		switch {
		case len(run) == 1 && c.Contains(run[0]):
			c.DrawGlyph(draw.GlyphStyle{Color: l.style.Color, Radius: l.style.Width * 1.3, Shape: draw.CircleGlyph{}}, run[0])
		case len(run) > 1:
			for _, part := range c.ClipLinesXY(run) {
				strokeLong(c, part, l.style)
			}
		}
		run = run[:0]
	}
	for i := range l.x {
		if math.IsNaN(l.x[i]) || math.IsNaN(l.y[i]) {
			flush()
			continue
		}
		run = append(run, vg.Point{X: tx(l.x[i]), Y: ty(l.y[i])})
	}
	flush()
}

// strokeLong strokes a line in pieces; the dashes go on from piece to piece.
func strokeLong(c draw.Canvas, pts []vg.Point, s draw.LineStyle) {
	for i := 0; i+1 < len(pts); i += strokePiece {
		end := min(i+strokePiece+1, len(pts))
		c.StrokeLines(s, pts[i:end])
		for k := i + 1; k < end; k++ {
			s.DashOffs += vg.Length(math.Hypot(float64(pts[k].X-pts[k-1].X), float64(pts[k].Y-pts[k-1].Y)))
		}
	}
}

// steps turns values over intervals into the corners of a line that holds each value
// over its interval; edges has one entry more than values.
func steps(edges, values []float64) (x, y []float64) {
	for i, v := range values {
		x = append(x, edges[i], edges[i+1])
		y = append(y, v, v)
	}
	return x, y
}

// band paints lo..hi over each interval between edges.
func (n *panel) band(edges, lo, hi []float64, c color.Color) {
	for i := range lo {
		if math.IsNaN(lo[i]) || math.IsNaN(hi[i]) {
			continue
		}
		n.bar(n.x(edges[i]), n.yIn(lo[i]), n.x(edges[i+1]), n.yIn(hi[i]), c)
	}
}

// gaps paints grey where there is no value.
func (n *panel) gaps(edges, values []float64) {
	for i, v := range values {
		if math.IsNaN(v) {
			n.bar(n.x(edges[i]), n.rect.Min.Y, n.x(edges[i+1]), n.rect.Max.Y, missing)
		}
	}
}
