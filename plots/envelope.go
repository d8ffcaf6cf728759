package plots

import (
	"fmt"
	"math"

	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// timeBody is the usual data area of a voltage panel that is as wide as the page.
func (p *page) timeBody(bottom vg.Length) vg.Rectangle {
	return vg.Rectangle{
		Min: vg.Point{X: p.body.Min.X + 38, Y: p.body.Min.Y + bottom},
		Max: vg.Point{X: p.body.Max.X - 34, Y: p.body.Max.Y - 23},
	}
}

func drawEnvelope(s *survey, st *style) (*page, Figure) {
	daily := s.daily()
	fig := Figure{Title: "Voltage envelope " + s.where + ": lowest and highest of each day"}
	if !daily {
		fig.Title = "Voltage envelope " + s.where + ": lowest and highest"
	}
	p0 := s.bins(900)
	low := reduce(s.Steps.Time, s.lowest, p0)
	high := reduce(s.Steps.Time, s.highest, p0)
	fig.Finding = s.envelopeFinding() + s.unsolved()
	fig.Alt = "Band between the lowest and the highest voltage over time, with the limits shaded. " + fig.Finding
	p := st.newPage(250, fig.Title, fig.Finding, s.foot())
	lo, hi := s.voltageRange(low.lo, high.hi)
	n := p.panel(p.timeBody(44), s.span.lo(), s.span.hi(), lo, hi)
	n.shadeLimits(s.limits)
	n.gaps(p0, low.lo)
	n.voltageAxes(6)
	n.verticals(s.span.timeTicks(n.text(labelSize, black), n.width()))
	n.xAxis(s.span.timeTicks(n.text(labelSize, black), n.width()), "")
	n.band(p0, low.lo, high.hi, mix(white, sky, 0.45))
	if daily {
		n.band(p0, low.mean, high.mean, mix(white, sky, 0.9))
	}
	lx, ly := steps(p0, low.lo)
	hx, hy := steps(p0, high.hi)
	n.add(line{lx, ly, draw.LineStyle{Color: blue, Width: vg.Points(1.2)}},
		line{hx, hy, draw.LineStyle{Color: vermilion, Width: vg.Points(1.2)}})
	items := []key{
		{line: draw.LineStyle{Color: vermilion, Width: vg.Points(dataWidth)}, text: "highest"},
		{line: draw.LineStyle{Color: blue, Width: vg.Points(dataWidth)}, text: "lowest"},
	}
	if daily {
		items = append(items, key{fill: mix(white, sky, 0.9), text: "between daily means"})
	}
	items = append(items, s.limitKeys(lo, hi)...)
	n.keys(items, n.rect.Min.X, n.rect.Min.Y-32)
	return p, fig
}

func (s *survey) envelopeFinding() string {
	if s.low < 0 {
		return "No step was solved, so there is no voltage to show."
	}
	g := s.byDay(s.lowest, true)
	h := s.byDay(s.highest, false)
	below, above, days := 0, 0, 0
	widest, widestDay := 0.0, 0
	for d := range g.days {
		lo, _ := extremes(inRun(g.cell[d*g.rows : (d+1)*g.rows]))
		_, hi := extremes(inRun(h.cell[d*h.rows : (d+1)*h.rows]))
		if math.IsInf(lo, 0) {
			continue
		}
		days++
		if lo < s.limits.Low-1e-9 {
			below++
		}
		if hi > s.limits.High+1e-9 {
			above++
		}
		if hi-lo > widest {
			widest, widestDay = hi-lo, d
		}
	}
	day := s.span.day(s.span.start.AddDate(0, 0, widestDay))
	if days == 1 {
		return fmt.Sprintf("The voltage %s stays between %s and %s, %s V apart on 120 V.", s.where, number(s.lowest[s.low], 3), pu(s.highest[s.high]), number(120*widest, 1))
	}
	if below+above == 0 {
		return fmt.Sprintf("The voltage %s stays in %s on all %s days; the widest spread of a day is %s V on 120 V, on %s.", s.where, s.rangeWords, number(float64(days), 0), number(120*widest, 1), day)
	}
	return fmt.Sprintf("The voltage %s falls below %s on %d and rises above it on %d of %s days; the widest spread of a day is %s V on 120 V, on %s.",
		s.where, s.rangeWords, below, above, number(float64(days), 0), number(120*widest, 1), day)
}

// inRun leaves out what is not part of the run.
func inRun(cells []float64) []float64 {
	var v []float64
	for _, c := range cells {
		if c != notInRun {
			v = append(v, c)
		}
	}
	return v
}
