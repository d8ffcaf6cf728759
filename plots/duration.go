package plots

import (
	"fmt"
	"math"
	"sort"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// drawDuration draws, by phase, for which share of the time the lowest and the
// highest voltage exceed a value.
func drawDuration(s *survey, st *style) (*page, Figure) {
	fig := Figure{Title: "Duration curves of lowest and highest voltage " + s.where}
	curves := s.phases
	if len(curves) == 0 {
		curves = []phaseVoltages{{"", s.lowest, s.highest}}
	}
	below, above, rows := 0, 0, 0
	for i := range s.lowest {
		if math.IsNaN(s.lowest[i]) {
			continue
		}
		rows++
		if s.lowest[i] < s.limits.Low-1e-9 {
			below++
		}
		if s.highest[i] > s.limits.High+1e-9 {
			above++
		}
	}
	if rows == 0 {
		fig.Finding = "No step was solved, so there is no voltage to show."
	} else {
		share := func(n int) string {
			if n == 0 {
				return "never"
			}
			return "for " + percent(100*float64(n)/float64(rows)) + " of the time"
		}
		fig.Finding = fmt.Sprintf("The lowest voltage %s is below %s %s, the highest above it %s.", s.where, s.rangeWords, share(below), share(above))
		if below+above == 0 {
			fig.Finding = fmt.Sprintf("The voltage %s never leaves %s.", s.where, s.rangeWords)
		}
	}
	if len(s.phases) == 0 && rows > 0 {
		fig.Finding += " (The run kept no voltages by phase.)"
	}
	fig.Alt = "Duration curves: voltage against the share of time for which it is exceeded, one curve per phase for the lowest and one for the highest voltage. " + fig.Finding

	var all [][]float64
	var items []key
	var names []string
	for _, c := range curves {
		all = append(all, c.min, c.max)
		if c.phase == "" {
			items = append(items, key{line: phaseStyle(""), text: "all phases"})
		} else {
			names = append(names, c.phase)
		}
	}
	lo, hi := s.voltageRange(all...)
	items = append(append(items, phaseKeys(names, phaseStyle)...), s.limitKeys(lo, hi)...)
	more := keyLine * vg.Length(len(st.keyRows(items, 47))-1)
	p := st.newPage(250+more, fig.Title, fig.Finding, s.foot())
	n := p.panel(p.timeBody(58+more), 0, 100, lo, hi)
	n.shadeLimits(s.limits)
	n.voltageAxes(6)
	n.xAxis(percentTicks(), "Share of time for which the voltage is exceeded")
	for _, c := range curves {
		n.duration(c.max, phaseStyle(c.phase))
		n.duration(c.min, phaseStyle(c.phase))
	}
	n.tagCurves(curves)
	n.keys(items, n.rect.Min.X, n.rect.Min.Y-46)
	return p, fig
}

func percentTicks() []tick {
	var ticks []tick
	for v := 0; v <= 100; v += 20 {
		ticks = append(ticks, tick{at: float64(v), label: fmt.Sprintf("%d %%", v)})
	}
	return ticks
}

// duration draws the values in falling order, each over its share of the axis,
// reduced to one point a pixel column.
func (n *panel) duration(values []float64, style draw.LineStyle) {
	v := make([]float64, 0, len(values))
	for _, x := range values {
		if !math.IsNaN(x) {
			v = append(v, x)
		}
	}
	if len(v) == 0 {
		return
	}
	sort.Sort(sort.Reverse(sort.Float64Slice(v)))
	var l line
	l.style = style
	columns := min(n.columns(), len(v))
	for k := range columns {
		i := k * (len(v) - 1) / max(columns-1, 1)
		l.x = append(l.x, 100*(float64(i)+0.5)/float64(len(v)))
		l.y = append(l.y, v[i])
	}
	// The ends reach the axis.
	l.x = append(append([]float64{0}, l.x...), 100)
	l.y = append(append([]float64{v[0]}, l.y...), v[len(v)-1])
	n.add(l)
}

// tagCurves writes which family is which, where the curves leave room.
func (n *panel) tagCurves(curves []phaseVoltages) {
	var lows, highs [][]float64
	for _, c := range curves {
		lows, highs = append(lows, c.min), append(highs, c.max)
	}
	t := n.bold(labelSize, black)
	_, top := extremes(lows...)
	_, high := extremes(highs...)
	if math.IsInf(top, 0) || math.IsInf(high, 0) {
		return
	}
	at := func(series [][]float64) float64 { // the middle of the family
		sum, k := 0.0, 0
		for _, s := range series {
			v := append([]float64(nil), s...)
			sort.Float64s(v) // NaN first
			for len(v) > 0 && math.IsNaN(v[0]) {
				v = v[1:]
			}
			if len(v) > 0 {
				sum += v[len(v)/5] // exceeded for 80 % of the time
				k++
			}
		}
		return sum / float64(max(k, 1))
	}
	x := n.x(80)
	n.haloed(t, x, min(n.yIn(at(highs))+8, n.rect.Max.Y-14), text.XCenter, text.YBottom, "highest")
	n.haloed(t, x, max(n.yIn(at(lows))-19, n.rect.Min.Y+2), text.XCenter, text.YBottom, "lowest")
}
