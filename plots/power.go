package plots

import (
	"fmt"
	"math"
	"strings"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// drawPower draws the power at the source, with load and generation, over time.
func drawPower(s *survey, st *style) (*page, Figure) {
	fig := Figure{Title: "Power at the source"}
	fig.Finding = s.powerFinding() + s.unsolved()
	fig.Alt = "Two panels over time: real power at the source with the generation on the feeder, and reactive power at the source. " + fig.Finding
	p := st.newPage(300, fig.Title, fig.Finding, s.foot())
	edges := s.bins(900)
	source := reduce(s.Steps.Time, s.okOnly("source real [kW]"), edges)
	reactive := reduce(s.Steps.Time, s.okOnly("source reactive [kvar]"), edges)
	generation := reduce(s.Steps.Time, s.okOnly("generation real [kW]"), edges)
	left, right := p.body.Min.X+44, p.body.Max.X-8
	top := vg.Rectangle{Min: vg.Point{X: left, Y: p.body.Min.Y + 152}, Max: vg.Point{X: right, Y: p.body.Max.Y - 23}}
	low := vg.Rectangle{Min: vg.Point{X: left, Y: p.body.Min.Y + 40}, Max: vg.Point{X: right, Y: p.body.Min.Y + 123}}
	_, gen := extremes(generation.hi)
	many := manyRows(s.Steps.Time, edges)

	n := s.powerPanel(p, top, "Real power [%s]", 5, edges, source, generation)
	if many {
		n.band(edges, n.scaled(source.lo), n.scaled(source.hi), mix(white, sky, 0.6))
	}
	main := draw.LineStyle{Color: blue, Width: vg.Points(dataWidth)}
	if many {
		main.Width = vg.Points(1.2)
	}
	n.curve(edges, source.mean, main)
	items := []key{{line: main, text: "source"}}
	if many {
		items[0].text = "source, mean"
		items = append(items, key{fill: mix(white, sky, 0.6), text: "lowest to highest"})
	}
	if gen > 0 {
		dash := draw.LineStyle{Color: orange, Width: vg.Points(dataWidth), Dashes: []vg.Length{vg.Points(5), vg.Points(2)}}
		name := "generation"
		if many {
			// Dashes are lost on a line that jumps from day to day.
			dash.Dashes, dash.Width = nil, vg.Points(1.1)
			name = "generation, highest"
		}
		n.curve(edges, generation.hi, dash)
		items = append(items, key{line: dash, text: name})
	}
	m := s.powerPanel(p, low, "Reactive power [%s]", 3, edges, reactive)
	if many {
		m.band(edges, m.scaled(reactive.lo), m.scaled(reactive.hi), mix(white, sky, 0.6))
	}
	m.curve(edges, reactive.mean, main)
	m.xAxis(s.span.timeTicks(m.text(labelSize, black), m.width()), "")
	m.keys(items, left, m.rect.Min.Y-30)
	return p, fig
}

// scaledPanel is a panel whose values are divided before they are drawn (kW to MW).
type scaledPanel struct {
	*panel
	divide float64
}

func (n scaledPanel) scaled(v []float64) []float64 {
	w := make([]float64, len(v))
	for i := range v {
		w[i] = v[i] / n.divide
	}
	return w
}

func (n scaledPanel) curve(edges, v []float64, st draw.LineStyle) {
	x, y := steps(edges, n.scaled(v))
	n.add(line{x, y, st})
}

// powerPanel makes a panel that shows zero and the series, in kW or MW.
func (s *survey) powerPanel(p *page, r vg.Rectangle, name string, ticks int, edges []float64, series ...binned) scaledPanel {
	lo, hi := 0.0, 0.0
	for _, b := range series {
		a, z := extremes(b.lo, b.hi)
		if !math.IsInf(a, 0) {
			lo, hi = math.Min(lo, a), math.Max(hi, z)
		}
	}
	divide, k, m := 1.0, "kW", "MW"
	if strings.HasPrefix(name, "Reactive") {
		k, m = "kvar", "Mvar"
	}
	unit := k
	if math.Max(-lo, hi) >= 2000 {
		divide, unit = 1000, m
	}
	if lo == hi {
		hi = 1
	}
	lo, hi = roundRange(lo/divide, hi/divide, ticks)
	n := p.panel(r, s.span.lo(), s.span.hi(), lo, hi)
	n.gaps(edges, series[0].mean)
	n.yAxis(linear(lo, hi, ticks), "")
	n.label(n.text(labelSize, black), p.body.Min.X, n.rect.Max.Y+9, text.XLeft, text.YBottom, fmt.Sprintf(name, unit))
	n.verticals(s.span.timeTicks(n.text(labelSize, black), n.width()))
	n.c.StrokeLine2(axisLine, n.rect.Min.X, n.y(0), n.rect.Max.X, n.y(0))
	return scaledPanel{n, divide}
}

func (s *survey) powerFinding() string {
	v := s.okOnly("source real [kW]")
	peak, at, sum, rows, back, most := 0.0, -1, 0.0, 0, 0, 0.0
	for i, x := range v {
		if math.IsNaN(x) {
			continue
		}
		rows++
		sum += x
		if at < 0 || x > peak {
			peak, at = x, i
		}
		if x < 0 {
			back++
			most = math.Min(most, x)
		}
	}
	if at < 0 {
		return "No step was solved, so there is no power to show."
	}
	factor := sum / float64(rows) / peak
	text := fmt.Sprintf("The feeder peaks at %s on %s", power(peak), s.span.on(s.At(at)))
	if peak > 0 && rows > 1 {
		text += fmt.Sprintf(", with a load factor of %s", number(factor, 2))
	}
	if back == 0 {
		return text + "; power never flows back into the source."
	}
	h := float64(back) * float64(s.Steps.RowLength) / 3.6e12
	return text + fmt.Sprintf("; power flows back into the source for %s, %s at most.", hours(h), power(-most))
}
