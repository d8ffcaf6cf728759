package plots

import (
	"fmt"
	"math"
	"slices"
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

// curveFamily is a group of duration curves that go by one name.
type curveFamily struct {
	name   string
	sorted [][]float64 // values in falling order, no NaN
}

// at returns the lowest and the highest value that the family exceeds for a share of the
// time.
func (f curveFamily) at(share float64) (lo, hi float64) {
	lo, hi = math.Inf(1), math.Inf(-1)
	for _, v := range f.sorted {
		x := v[int(math.Round(min(max(share, 0), 1)*float64(len(v)-1)))]
		lo, hi = min(lo, x), max(hi, x)
	}
	return lo, hi
}

// families groups the curves: lowest and highest voltages, and those from line to line
// apart where there are voltages to ground too. Two groups that run together are one.
func families(curves []phaseVoltages) []curveFamily {
	groups := []curveFamily{{name: "highest"}, {name: "lowest"}, {name: "line to line, highest"}, {name: "line to line, lowest"}}
	for _, c := range curves {
		for k, series := range [][]float64{c.max, c.min} {
			v := slices.DeleteFunc(slices.Clone(series), math.IsNaN)
			if len(v) == 0 {
				continue
			}
			sort.Sort(sort.Reverse(sort.Float64Slice(v)))
			if isPair(c.phase) {
				k += 2
			}
			groups[k].sorted = append(groups[k].sorted, v)
		}
	}
	if len(groups[0].sorted) == 0 { // pairs alone need no name of their own
		groups = groups[2:]
		groups[0].name, groups[1].name = "highest", "lowest"
	}
	if n := len(groups) - 2; n == 2 && len(groups[2].sorted) > 0 && len(groups[3].sorted) > 0 {
		_, hi := groups[2].at(0.5)
		if lo, _ := groups[3].at(0.5); hi-lo < 0.006 {
			groups[2] = curveFamily{"line to line", append(groups[2].sorted, groups[3].sorted...)}
			groups = groups[:3]
		}
	}
	return slices.DeleteFunc(groups, func(f curveFamily) bool { return len(f.sorted) == 0 })
}

// isPair tells a voltage from line to line.
func isPair(phase string) bool { return phase == "AB" || phase == "BC" || phase == "CA" }

// tagCurves writes which family is which: above or below it, where the other curves and
// the frame leave most room.
func (n *panel) tagCurves(curves []phaseVoltages) {
	t := n.bold(labelSize, black)
	groups := families(curves)
	const clear = vg.Length(3)
	for i, f := range groups {
		half := float64(t.Width(f.name)/2+clear) / float64(n.width())
		most, x, y, align := vg.Length(math.Inf(-1)), vg.Length(0), vg.Length(0), text.YBottom
		for share := 0.12; share < 0.9; share += 0.02 {
			if share-half < 0.01 || share+half > 0.99 {
				continue
			}
			left, right := share-half, share+half // the curves fall: their highest is at the left
			_, hi := f.at(left)
			lo, _ := f.at(right)
			above, below := n.rect.Max.Y-n.y(hi), n.y(lo)-n.rect.Min.Y
			for k, g := range groups {
				if k == i {
					continue
				}
				glo, _ := g.at(right)
				_, ghi := g.at(left)
				if _, mid := g.at(share); mid > hi {
					above = min(above, n.y(glo)-n.y(hi))
				} else {
					below = min(below, n.y(lo)-n.y(ghi))
				}
			}
			if above > most {
				most, x, y, align = above, n.x(100*share), n.y(hi)+clear, text.YBottom
			}
			if below > most {
				most, x, y, align = below, n.x(100*share), n.y(lo)-clear, text.YTop
			}
		}
		if most > 0 {
			n.haloed(t, x, y, text.XCenter, align, f.name)
		}
	}
}
