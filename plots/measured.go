package plots

import (
	"fmt"
	"math"
	"sort"
	"time"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"yearflow/sim/results"
)

// mostMeasured is how many measurements the figure has room for.
const mostMeasured = 6

// measuredHeight is that of one measurement's panel with its title.
const measuredHeight = vg.Length(94)

// The two lines: the measurement underneath, broad and grey; the model on top of it.
var (
	measuredLine = draw.LineStyle{Color: mix(inkGrey, white, 0.35), Width: vg.Points(2.6)}
	modelledLine = draw.LineStyle{Color: vermilion, Width: vg.Points(1.2)}
)

func hasMeasured(s *survey) bool { return len(s.measured) > 0 }

// drawMeasured draws model and measurement over the whole period, and beside it over
// the day of the largest error.
func drawMeasured(s *survey, st *style) (*page, Figure) {
	shown := mostlyOff(s.measured, mostMeasured)
	fig := Figure{Title: "Model against measurement"}
	// Each panel has its own averages: what does not fit under the title is those of all.
	fig.Finding = s.farthest(s.measured)
	if len(shown) < len(s.measured) {
		fig.Finding += fmt.Sprintf("Shown: the %d met worst. ", len(shown))
	}
	fig.Finding += s.Met()
	fig.Alt = "Small panels, one for each measured quantity: the measured and the modelled values over the period, and over the day of the largest error. " + fig.Finding
	p := st.newPage(measuredHeight*vg.Length(len(shown))+24, fig.Title, fig.Finding, s.foot())
	var last *panel
	for i := range shown {
		top := p.body.Max.Y - measuredHeight*vg.Length(i)
		last = s.measuredRow(p, &shown[i], top)
	}
	whole := "model"
	if s.daily() {
		whole = "model (left: daily means)"
	}
	last.keys([]key{{line: measuredLine, text: "measured"}, {line: modelledLine, text: whole}}, p.body.Min.X, p.body.Min.Y+6)
	return p, fig
}

// mostlyOff keeps the measurements whose mean error is largest against how far the
// measured values range, in their order.
func mostlyOff(all []results.MeasuredSeries, most int) []results.MeasuredSeries {
	share := func(m *results.MeasuredSeries) float64 {
		lo, hi := extremes(m.Measured)
		if !(hi > lo) || math.IsNaN(m.MeanAbsolute) {
			return 0
		}
		return m.MeanAbsolute / (hi - lo)
	}
	order := make([]int, len(all))
	for i := range order {
		order[i] = i
	}
	sort.SliceStable(order, func(i, j int) bool { return share(&all[order[i]]) > share(&all[order[j]]) })
	order = order[:min(most, len(order))]
	sort.Ints(order)
	out := make([]results.MeasuredSeries, len(order))
	for k, i := range order {
		out[k] = all[i]
	}
	return out
}

// farthest says where and when the model was farthest off, against the range of what
// was measured.
func (s *survey) farthest(all []results.MeasuredSeries) string {
	var worst *results.MeasuredSeries
	most := 0.0
	for i := range all {
		lo, hi := extremes(all[i].Measured)
		if all[i].Samples == 0 || !(hi > lo) {
			continue
		}
		if x := math.Abs(all[i].Worst) / (hi - lo); x > most {
			worst, most = &all[i], x
		}
	}
	if worst == nil {
		return ""
	}
	side := "above"
	if worst.Worst < 0 {
		side = "below"
	}
	return fmt.Sprintf("Farthest off is %s, %s %s the measurement on %s. ", worst.Title(), quantityOf(math.Abs(worst.Worst), worst.Unit()), side, s.span.on(worst.WorstTime))
}

// quantityOf prints an error with its unit.
func quantityOf(x float64, unit string) string {
	switch unit {
	case "pu":
		return number(x, 4) + " p.u."
	case "1":
		return number(x, 1)
	}
	decimals := 1
	if math.Abs(x) < 1 {
		decimals = 3
	}
	return number(x, decimals) + " " + unit
}

// measuredRow draws one measurement: the period on the left, a day on the right.
func (s *survey) measuredRow(p *page, m *results.MeasuredSeries, top vg.Length) *panel {
	lo, hi := extremes(m.Measured, m.Modelled)
	if math.IsInf(lo, 0) {
		lo, hi = 0, 1
	}
	lo, hi = roundRange(lo, hi, 4)
	day := s.worstDay(m)
	twoPanels := s.span.days() > 2.01
	left, right := p.body.Min.X+42, p.body.Max.X-8
	middle := right
	if twoPanels {
		middle = left + (right-left)*0.60
	}
	bottom := top - measuredHeight + 24
	rect := func(a, b vg.Length) vg.Rectangle {
		return vg.Rectangle{Min: vg.Point{X: a, Y: bottom}, Max: vg.Point{X: b, Y: top - 23}}
	}
	name := m.Title()
	if u := m.Unit(); u == "pu" {
		name += " [p.u.]"
	} else if u != "1" {
		name += " [" + u + "]"
	}
	n := p.panel(rect(left, middle), s.span.lo(), s.span.hi(), lo, hi)
	edges := s.bins(n.columns() / 2)
	n.measuredAxes(s.span, lo, hi)
	n.yAxis(linear(lo, hi, 4), "")
	head := n.bold(smallSize, black)
	n.label(head, p.body.Min.X, n.rect.Max.Y+9, text.XLeft, text.YBottom, fit(head, name, (right-p.body.Min.X)*0.55))
	if m.Samples > 0 {
		sum := "bias " + biasOf(m.Bias, m.Unit()) + ", 95 % within " + quantityOf(m.P95, m.Unit())
		n.label(n.text(smallSize, inkGrey), right, n.rect.Max.Y+9, text.XRight, text.YBottom, sum)
	}
	n.pair(edges, reduce(m.Time, m.Measured, edges).mean, reduce(m.Time, m.Modelled, edges).mean)
	if !twoPanels {
		return n
	}
	d := p.panel(rect(middle+22, right), day.lo(), day.hi(), lo, hi)
	d.measuredAxes(day, lo, hi)
	var at []float64
	var measured, modelled []float64
	for i, t := range m.Time {
		if x := float64(t) / 1e9; x >= day.lo()-1 && x < day.hi() {
			at, measured, modelled = append(at, x), append(measured, m.Measured[i]), append(modelled, m.Modelled[i])
		}
	}
	if len(at) > 0 {
		d.pair(append(at, math.Min(at[len(at)-1]+float64(s.Steps.RowLength)/1e9, day.hi())), measured, modelled)
	}
	d.label(d.text(smallSize, inkGrey), d.rect.Min.X+3, d.rect.Max.Y-3, text.XLeft, text.YTop, s.span.day(day.start))
	return n
}

func biasOf(x float64, unit string) string {
	if x >= 0 {
		return "+" + quantityOf(x, unit)
	}
	return quantityOf(x, unit)
}

// worstDay is the local day of the largest error; without one the first.
func (s *survey) worstDay(m *results.MeasuredSeries) span {
	at := s.span.start
	if m.Samples > 0 {
		at = m.WorstTime.In(s.Run.Location)
	}
	d := midnight(at)
	end := d.AddDate(0, 0, 1)
	if end.After(s.span.end) {
		end = s.span.end
	}
	if d.Before(s.span.start) {
		d = s.span.start
	}
	if !end.After(d) {
		end = d.Add(time.Hour)
	}
	return span{d, end}
}

// measuredAxes draws the grid and the time; the values are labelled on the left alone,
// since both panels of a row share them.
func (n *panel) measuredAxes(over span, lo, hi float64) {
	for _, k := range linear(lo, hi, 4) {
		n.c.StrokeLine2(gridLine, n.rect.Min.X, n.y(k.at), n.rect.Max.X, n.y(k.at))
	}
	ticks := over.timeTicks(n.text(labelSize, black), n.width())
	n.verticals(ticks)
	n.xAxis(ticks, "")
}

// pair draws both lines over the intervals between edges.
func (n *panel) pair(edges, measured, modelled []float64) {
	for _, l := range []struct {
		v  []float64
		st draw.LineStyle
	}{{measured, measuredLine}, {modelled, modelledLine}} {
		x, y := steps(edges, l.v)
		n.add(line{x, y, l.st})
	}
}
