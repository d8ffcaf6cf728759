package plots

import (
	"fmt"
	"image/color"
	"math"
	"strings"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// bank is a regulator with its units, or a capacitor: what a panel of the taps figure
// shows.
type bank struct {
	name  string
	units []unit
	moves int
}

type unit struct {
	phase  string
	values []float64 // by row of devices.csv
}

// most banks and capacitors that the figure has room for.
const (
	mostBanks      = 6
	mostCapacitors = 8
)

// banks sorts the columns of devices.csv into regulators and capacitors, in order of
// the columns.
func (s *survey) banks() (regulators, capacitors []bank) {
	isCapacitor := map[string]bool{}
	for _, b := range s.Branches {
		if b.Kind == "capacitor" {
			isCapacitor[b.Element] = true
		}
	}
	moves := map[string]int{}
	for _, o := range s.Operations {
		moves[o.Device]++
	}
	for i, column := range s.Devices.Names {
		name, phase := splitPlace(column)
		if isCapacitor[column] || phase == "" {
			capacitors = append(capacitors, bank{column, []unit{{"", s.Devices.Columns[i]}}, moves[column]})
			continue
		}
		u := unit{phase, s.Devices.Columns[i]}
		if k := len(regulators) - 1; k >= 0 && regulators[k].name == name {
			regulators[k].units = append(regulators[k].units, u)
			continue
		}
		regulators = append(regulators, bank{name, []unit{u}, moves[name]})
	}
	return regulators, capacitors
}

// busiest keeps the banks that moved most, in their order.
func busiest(banks []bank, most int) []bank {
	for len(banks) > most {
		least := len(banks) - 1
		for i := range banks {
			if banks[i].moves < banks[least].moves {
				least = i
			}
		}
		banks = append(append([]bank(nil), banks[:least]...), banks[least+1:]...)
	}
	return banks
}

func drawTaps(s *survey, st *style) (*page, Figure) {
	fig := Figure{Title: "Tap positions and capacitor states"}
	regulators, capacitors := s.banks()
	allRegulators, allCapacitors := len(regulators), len(capacitors)
	fig.Finding = s.tapsFinding(regulators, capacitors)
	regulators = busiest(regulators, mostBanks)
	capacitors = busiest(capacitors, mostCapacitors)
	if len(regulators) < allRegulators || len(capacitors) < allCapacitors {
		fig.Finding += fmt.Sprintf(" Shown: the %d of %d devices that move most.", len(regulators)+len(capacitors), allRegulators+allCapacitors)
	}
	fig.Alt = "One panel per regulator with the tap position of each phase over time, and strips that are dark while a capacitor is closed. " + fig.Finding
	const panelHeight, strip = vg.Length(66), vg.Length(14)
	height := vg.Length(46) + vg.Length(len(regulators))*(panelHeight+24)
	if len(capacitors) > 0 {
		height += 24 + strip*vg.Length(len(capacitors))
	}
	if len(regulators)+len(capacitors) == 0 {
		height = 80
	}
	p := st.newPage(height, fig.Title, fig.Finding, s.foot())
	if len(regulators)+len(capacitors) == 0 {
		p.label(p.text(labelSize, inkGrey), p.body.Min.X, (p.body.Min.Y+p.body.Max.Y)/2, text.XLeft, text.YCenter, "The feeder has no regulator, tap changer or capacitor.")
		return p, fig
	}
	left, right := p.body.Min.X+60, p.body.Max.X-8
	y := p.body.Max.Y
	phases := map[string]bool{}
	edges := s.bins(900)
	var last *panel
	for _, b := range regulators {
		y -= 18
		lo, hi := 0.0, 0.0
		var reduced []binned
		for _, u := range b.units {
			r := reduce(s.Devices.Time, u.values, edges)
			a, z := extremes(r.lo, r.hi)
			if !math.IsInf(a, 0) {
				lo, hi = math.Min(lo, a), math.Max(hi, z)
			}
			reduced = append(reduced, r)
		}
		lo, hi = math.Min(lo, hi-4)-0.6, math.Max(hi, lo+4)+0.6
		n := p.panel(vg.Rectangle{Min: vg.Point{X: left, Y: y - panelHeight}, Max: vg.Point{X: right, Y: y}}, s.span.lo(), s.span.hi(), lo, hi)
		n.gaps(edges, reduced[0].mean)
		n.yAxis(stepped(lo, hi, tapStep(hi-lo)), "")
		ticks := s.span.timeTicks(n.text(labelSize, black), n.width())
		n.verticals(ticks)
		band := color.NRGBA{0xd9, 0xd9, 0xd9, 0xff}
		low, high := envelopeOf(reduced)
		if manyRows(s.Devices.Time, edges) {
			n.band(edges, low, high, band)
		}
		for i := range b.units { // dashes over the solid line show both
			x, v := steps(edges, reduced[i].mean)
			line{x, v, tapStyle(b.units[i].phase)}.Plot(n.area, n.plot)
			phases[b.units[i].phase] = true
		}
		n.bare(ticks)
		n.label(n.bold(labelSize, black), p.body.Min.X, n.rect.Max.Y+5, text.XLeft, text.YBottom, b.name+" tap")
		last = n
		y -= panelHeight + 6
	}
	if len(capacitors) > 0 {
		y -= 18
		p.label(p.bold(labelSize, black), p.body.Min.X, y+5, text.XLeft, text.YBottom, "Capacitors closed")
		for i, b := range capacitors {
			r := vg.Rectangle{Min: vg.Point{X: left, Y: y - strip*vg.Length(i+1) + 2}, Max: vg.Point{X: right, Y: y - strip*vg.Length(i)}}
			n := p.panel(r, s.span.lo(), s.span.hi(), 0, 1)
			n.shades(edges, reduce(s.Devices.Time, b.units[0].values, edges).mean)
			n.outline(n.rect, draw.LineStyle{Color: axisGrey, Width: vg.Points(0.5)})
			t := n.text(labelSize, inkGrey)
			n.label(t, left-5, (n.rect.Min.Y+n.rect.Max.Y)/2, text.XRight, text.YCenter, fit(t, b.name, left-5-2))
			last = n
		}
	}
	last.xAxis(s.span.timeTicks(last.text(labelSize, black), last.width()), "")
	items := phaseKeys(sortedPhases(phases), tapStyle)
	if manyRows(s.Devices.Time, edges) && len(regulators) > 0 {
		items[0].text += " (daily mean)"
		if !s.daily() {
			items[0].text = strings.TrimSuffix(items[0].text, "(daily mean)") + "(mean)"
		}
		items = append(items, key{fill: color.NRGBA{0xd9, 0xd9, 0xd9, 0xff}, text: "range of all phases"})
	}
	if len(capacitors) > 0 {
		items = append(items, key{fill: blue, text: "closed all the time"}, key{fill: white, text: "open"})
	}
	last.keys(items, left, last.rect.Min.Y-30)
	return p, fig
}

// tapStyle is a phase's line, thinner: taps jump.
func tapStyle(phase string) draw.LineStyle {
	l := phaseStyle(phase)
	l.Width = vg.Points(1.4)
	return l
}

// tapStep is a whole number of taps for about four labels over a range.
func tapStep(taps float64) float64 {
	for _, s := range [...]float64{1, 2, 4, 5, 8, 10} {
		if taps/s <= 5.2 {
			return s
		}
	}
	return math.Ceil(roundStep(taps / 4))
}

// manyRows tells whether bins hold more than one row.
func manyRows(times []int64, edges []float64) bool { return len(times) > len(edges)-1 }

func envelopeOf(rs []binned) (lo, hi []float64) {
	for i := range rs[0].lo {
		a, b := math.Inf(1), math.Inf(-1)
		for _, r := range rs {
			if !math.IsNaN(r.lo[i]) {
				a, b = math.Min(a, r.lo[i]), math.Max(b, r.hi[i])
			}
		}
		if math.IsInf(a, 0) {
			a, b = math.NaN(), math.NaN()
		}
		lo, hi = append(lo, a), append(hi, b)
	}
	return lo, hi
}

// shades paints a strip: dark where the value is one, white where it is zero.
func (n *panel) shades(edges, values []float64) {
	for i, v := range values {
		c := missing
		if !math.IsNaN(v) {
			c = mix(white, blue, math.Sqrt(v)) // an hour in a day must show
		}
		n.bar(n.x(edges[i]), n.rect.Min.Y, n.x(edges[i+1]), n.rect.Max.Y, c)
	}
}

// verticals draws the grid lines of a time axis, bare its line without labels.
func (n *panel) verticals(ticks []tick) {
	for _, k := range ticks {
		if k.grid {
			n.c.StrokeLine2(gridLine, n.x(k.at), n.rect.Min.Y, n.x(k.at), n.rect.Max.Y)
		}
	}
}

func (n *panel) bare(ticks []tick) {
	n.c.StrokeLine2(axisLine, n.rect.Min.X, n.rect.Min.Y, n.rect.Max.X, n.rect.Min.Y)
}

func (s *survey) tapsFinding(regulators, capacitors []bank) string {
	var parts []string
	most, at := 0, -1
	for i, d := range s.Duty {
		if d.Phase != "" && d.Operations > most {
			most, at = d.Operations, i
		}
	}
	if at >= 0 {
		d := s.Duty[at]
		parts = append(parts, fmt.Sprintf("%s.%s moves most: %s between %s and %s", d.Device, d.Phase,
			count(d.Operations, "operation", "operations"), signed(d.LowestPosition), signed(d.HighestPosition)))
	} else if len(regulators) > 0 {
		parts = append(parts, "No tap moves")
	}
	best, share := -1, -1.0
	for i, b := range capacitors {
		sum, n := 0.0, 0
		for _, v := range b.units[0].values {
			if !math.IsNaN(v) {
				sum += v
				n++
			}
		}
		if n > 0 && (best < 0 || b.moves > capacitors[best].moves) {
			best, share = i, 100*sum/float64(n)
		}
	}
	if best >= 0 {
		if capacitors[best].moves > 0 {
			parts = append(parts, fmt.Sprintf("capacitor %s switches most, %s, and is closed for %s of the time",
				capacitors[best].name, count(capacitors[best].moves, "time", "times"), percent(share)))
		} else {
			words := "no capacitor switches"
			if len(parts) == 0 {
				words = "No capacitor switches"
			}
			parts = append(parts, words)
		}
	}
	if len(parts) == 0 {
		return "There is nothing that moves."
	}
	return strings.Join(parts, "; ") + "."
}

func signed(tap int) string {
	if tap > 0 {
		return "+" + number(float64(tap), 0)
	}
	return number(float64(tap), 0)
}
