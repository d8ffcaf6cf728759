package plots

import (
	"fmt"
	"image"
	"image/color"
	"math"
	"time"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"

	"yearflow/sim/results"
)

func drawLowestYear(s *survey, st *style) (*page, Figure) {
	fig := Figure{Title: "Lowest voltage " + s.where + ", by day and hour"}
	below, worst := s.outside(func(n results.NodeRow) float64 { return n.HoursBelowA })
	switch {
	case s.low < 0:
		fig.Finding = "No step was solved, so there is no voltage to show."
	default:
		fig.Finding = fmt.Sprintf("The lowest voltage is %s at %s on %s; ", puVolts(s.lowest[s.low]), s.lowAt, s.span.on(s.At(s.low)))
		if below == 0 {
			fig.Finding += "no judged place falls below " + s.rangeWords + "."
		} else {
			fig.Finding += fmt.Sprintf("%s below %s, the worst, %s, for %s.",
				s.placesThat(below, "falls", "fall"), s.rangeWords, worst.Node+"."+worst.Phase, hours(worst.HoursBelowA))
		}
	}
	return s.heatMap(st, fig, s.lowest, true)
}

func drawHighestYear(s *survey, st *style) (*page, Figure) {
	fig := Figure{Title: "Highest voltage " + s.where + ", by day and hour"}
	above, worst := s.outside(func(n results.NodeRow) float64 { return n.HoursAboveA })
	switch {
	case s.high < 0:
		fig.Finding = "No step was solved, so there is no voltage to show."
	default:
		fig.Finding = fmt.Sprintf("The highest voltage is %s at %s on %s; ", puVolts(s.highest[s.high]), s.highAt, s.span.on(s.At(s.high)))
		if above == 0 {
			fig.Finding += "no judged place rises above " + s.rangeWords + "."
		} else {
			fig.Finding += fmt.Sprintf("%s above %s, the worst, %s, for %s.",
				s.placesThat(above, "rises", "rise"), s.rangeWords, worst.Node+"."+worst.Phase, hours(worst.HoursAboveA))
		}
	}
	return s.heatMap(st, fig, s.highest, false)
}

// outside counts the judged places with hours outside, and finds the worst.
func (s *survey) outside(of func(results.NodeRow) float64) (n int, worst results.NodeRow) {
	most := 0.0
	for _, r := range s.judged {
		if h := of(r); h > 0 {
			n++
			if h > most {
				most, worst = h, r
			}
		}
	}
	return n, worst
}

// placesThat begins a sentence on n of the judged places; a place is a node.phase.
func (s *survey) placesThat(n int, one, many string) string {
	if n == 1 {
		return fmt.Sprintf("1 of %d judged places %s", len(s.judged), one)
	}
	return fmt.Sprintf("%s of %d judged places %s", number(float64(n), 0), len(s.judged), many)
}

// dayGrid is values by local day and time of day; NaN where there is none.
type dayGrid struct {
	days, rows int
	cell       []float64 // day·rows + row
}

// byDay lays a series out by local day and time of day, taking the lowest (or the
// highest) of what falls into a cell: so an hour that comes twice in autumn shows the
// worse of the two. The hour that spring leaves out stays empty.
func (s *survey) byDay(values []float64, lowest bool) dayGrid {
	length := time.Duration(s.Steps.RowLength)
	rows := int(24 * time.Hour / min(max(length, 15*time.Minute), 24*time.Hour))
	first := dayNumber(s.span.start)
	last := dayNumber(s.span.end.Add(-time.Nanosecond))
	g := dayGrid{days: last - first + 1, rows: rows}
	g.cell = make([]float64, g.days*rows)
	for i := range g.cell {
		g.cell[i] = math.NaN()
	}
	put := func(t time.Time, v float64) {
		d := dayNumber(t) - first
		k := (t.Hour()*3600 + t.Minute()*60 + t.Second()) * rows / 86400
		if d < 0 || d >= g.days {
			return
		}
		c := &g.cell[d*rows+k]
		if math.IsNaN(*c) || lowest && v < *c || !lowest && v > *c {
			*c = v
		}
	}
	for i, v := range values {
		if !math.IsNaN(v) {
			put(s.At(i), v)
		}
	}
	// What lies before the run and after it is no missing value.
	clock := func(t time.Time) int { return (t.Hour()*3600 + t.Minute()*60 + t.Second()) * rows / 86400 }
	for r := range clock(s.span.start) {
		g.cell[r] = notInRun
	}
	if end := clock(s.span.end); end > 0 && dayNumber(s.span.end) == last {
		for r := end; r < rows; r++ {
			g.cell[(g.days-1)*rows+r] = notInRun
		}
	}
	return g
}

// notInRun marks the hours of the first and the last day that are not run.
var notInRun = math.Inf(1)

// dayNumber counts local days, whatever their length.
func dayNumber(t time.Time) int {
	return int(time.Date(t.Year(), t.Month(), t.Day(), 0, 0, 0, 0, time.UTC).Unix() / 86400)
}

// shade is a scale of colours for voltages. It grows darker towards the limit and
// beyond it, so that it reads in grey, and changes from blue to red at the limit.
type shade struct {
	calm, limit, outer, end float64 // calm is the light end; limit is range A, outer range B
}

var shadeStops = [...]color.NRGBA{
	{0xf4, 0xf9, 0xfc, 0xff}, // well inside
	{0x5f, 0xa9, 0xd8, 0xff}, // at the limit, from inside
	{0xe0, 0x6a, 0x10, 0xff}, // just outside
	{0x8f, 0x2c, 0x06, 0xff}, // at range B
	{0x3a, 0x0a, 0x12, 0xff}, // far outside
}

func (k shade) color(v float64) color.NRGBA {
	if math.IsNaN(v) {
		return missing
	}
	if v == notInRun {
		return white
	}
	part := func(a, b float64) float64 {
		if a == b {
			return 1
		}
		return (v - a) / (b - a)
	}
	inside := (v-k.limit)*(k.calm-k.limit) >= 0
	switch {
	case inside:
		return mix(shadeStops[0], shadeStops[1], math.Pow(math.Max(0, math.Min(1, part(k.calm, k.limit))), 1.3))
	case (v-k.outer)*(k.limit-k.outer) >= 0:
		return mix(shadeStops[2], shadeStops[3], part(k.limit, k.outer))
	}
	return mix(shadeStops[3], shadeStops[4], part(k.outer, k.end))
}

// heatMap draws a year as days across and hours up.
func (s *survey) heatMap(st *style, fig Figure, values []float64, lowest bool) (*page, Figure) {
	g := s.byDay(values, lowest)
	side := "lowest"
	if !lowest {
		side = "highest"
	}
	fig.Alt = fmt.Sprintf("Heat map of the %s voltage %s, days of %s across, hours of the day upwards, darker towards the limit and red outside it. %s", side, s.where, s.span.spoken(), fig.Finding)
	lo, hi := extremes(values)
	l := s.limits
	k := shade{calm: math.Max(hi, l.Low+0.03), limit: l.Low, outer: l.OuterLow, end: math.Min(lo, l.OuterLow-0.02)}
	if !lowest {
		k = shade{calm: math.Min(lo, l.High-0.03), limit: l.High, outer: l.OuterHigh, end: math.Max(hi, l.OuterHigh+0.02)}
	}
	if math.IsInf(lo, 0) {
		k.calm, k.end = l.High, l.OuterLow-0.02
		lo, hi = l.Low, l.High
	}
	p := st.newPage(238, fig.Title, fig.Finding, s.foot())
	left, right := vg.Length(38), vg.Length(92)
	rect := vg.Rectangle{
		Min: vg.Point{X: p.body.Min.X + left, Y: p.body.Min.Y + 26},
		Max: vg.Point{X: p.body.Max.X - right, Y: p.body.Max.Y - 23},
	}
	days := span{start: midnight(s.span.start), end: midnight(s.span.end.Add(-time.Nanosecond)).AddDate(0, 0, 1)}
	n := p.panel(rect, 0, float64(g.days), 0, 24)
	n.image(func(fx, fy float64) color.NRGBA {
		d := min(int(fx*float64(g.days)), g.days-1)
		r := min(int(fy*float64(g.rows)), g.rows-1)
		return k.color(g.cell[d*g.rows+r])
	})
	n.outline(n.rect, axisLine)
	n.xAxis(days.byDay(days.calendarTicks(n)), "")
	var hourTicks []tick
	for h := 0; h <= 24; h += 6 {
		hourTicks = append(hourTicks, tick{at: float64(h), label: fmt.Sprintf("%02d:00", h)})
	}
	n.yAxis(hourTicks, "Hour of day, local")
	s.colourBar(n, k, lo, hi, lowest)
	return p, fig
}

// calendarTicks are ticks by the day, also where there are only one or two of them.
func (s span) calendarTicks(n *panel) []tick {
	if s.days() > 2.01 {
		return s.timeTicks(n.text(labelSize, black), n.width())
	}
	return s.dayTicks(1)
}

// byDay moves ticks from time to days since the start: every day is equally wide,
// also those of 23 and 25 hours.
func (s span) byDay(ticks []tick) []tick {
	first := dayNumber(s.start)
	day := func(at float64) float64 {
		t := time.Unix(0, int64(math.Round(at))*1e9).In(s.start.Location())
		n := dayNumber(t)
		m := midnight(t)
		return float64(n-first) + float64(t.Sub(m))/float64(m.AddDate(0, 0, 1).Sub(m))
	}
	for i := range ticks {
		ticks[i].at = day(ticks[i].at)
		if ticks[i].mid != 0 {
			ticks[i].mid = day(ticks[i].mid)
		}
	}
	return ticks
}

// image paints every device pixel of the panel by its place in it: fx from the left,
// fy from the bottom, both 0..1.
func (n *panel) image(at func(fx, fy float64) color.NRGBA) {
	r := n.pixels(n.rect)
	img := n.canvas.Image().(*image.RGBA)
	w, h := r.Dx(), r.Dy()
	for y := range h {
		fy := 1 - (float64(y)+0.5)/float64(h)
		for x := range w {
			c := at((float64(x)+0.5)/float64(w), fy)
			img.SetRGBA(r.Min.X+x, r.Min.Y+y, color.RGBA{c.R, c.G, c.B, 0xff})
		}
	}
}

// colourBar stands to the right of a heat map, with the limits marked.
func (s *survey) colourBar(n *panel, k shade, lo, hi float64, lowest bool) {
	l := s.limits
	a, b := lo, hi
	if lowest {
		a = math.Min(lo, l.Low-0.005)
		b = math.Max(hi, l.Low+0.03)
	} else {
		b = math.Max(hi, l.High+0.005)
		a = math.Min(lo, l.High-0.03)
	}
	a, b = math.Floor(a*100+1e-9)/100, math.Ceil(b*100-1e-9)/100
	r := vg.Rectangle{Min: vg.Point{X: n.rect.Max.X + 14, Y: n.rect.Min.Y}, Max: vg.Point{X: n.rect.Max.X + 26, Y: n.rect.Max.Y}}
	bar := n.page.panel(r, 0, 1, a, b)
	bar.image(func(_, fy float64) color.NRGBA { return k.color(a + fy*(b-a)) })
	bar.outline(bar.rect, axisLine)
	t := n.text(labelSize, inkGrey)
	limitText := n.bold(smallSize, black)
	type mark struct {
		at   float64
		text string
	}
	var marks []mark
	name := func(which string) string {
		if s.Run.Limits.Own {
			return map[string]string{"A": "limit", "B": "outer limit"}[which]
		}
		return "range " + which
	}
	if lowest {
		marks = []mark{{l.Low, name("A")}, {l.OuterLow, name("B")}}
	} else {
		marks = []mark{{l.High, name("A")}, {l.OuterHigh, name("B")}}
	}
	var used []vg.Length
	for _, m := range marks {
		if m.at <= a || m.at >= b {
			continue
		}
		y := bar.y(m.at)
		free := true
		for _, u := range used {
			free = free && math.Abs(float64(u-y)) > 10
		}
		n.c.StrokeLine2(phaseStyle(""), bar.rect.Min.X-2, y, bar.rect.Max.X+2, y)
		if free {
			used = append(used, y)
			n.label(limitText, bar.rect.Max.X+5, y, text.XLeft, text.YCenter, number(m.at, 3)+" "+m.text)
		}
	}
	for _, tk := range linear(a, b, 7) {
		y := bar.y(tk.at)
		clear := true
		for _, u := range used {
			clear = clear && math.Abs(float64(u-y)) > 11
		}
		if clear {
			n.label(t, bar.rect.Max.X+5, y, text.XLeft, text.YCenter, tk.label)
		}
	}
	n.label(n.text(labelSize, black), bar.rect.Min.X, bar.rect.Max.Y+9, text.XLeft, text.YBottom, "Voltage [p.u.]")
	for _, v := range s.Steps.Status {
		if v != results.OK {
			y := n.rect.Min.Y - 16
			n.fill(vg.Rectangle{Min: vg.Point{X: bar.rect.Min.X, Y: y - 3}, Max: vg.Point{X: bar.rect.Min.X + 12, Y: y + 5}}, missing)
			n.label(t, bar.rect.Max.X+5, y+1, text.XLeft, text.YCenter, "no value")
			break
		}
	}
}
