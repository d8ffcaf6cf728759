package plots

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// score prints a score, or a change of one, with the figures that matter.
func score(x float64) string {
	if a := math.Abs(x); a != 0 && a < 100 {
		return number(x, min(6, 2-int(math.Floor(math.Log10(a)))))
	}
	return number(x, 0)
}

// bestFigure draws the score and the aims of the base and the best as bars.
func (t *tuneDocument) bestFigure(st *style) (*page, Figure) {
	if !t.has() {
		return nil, Figure{}
	}
	var panels []barPanel
	add := func(i int, title string) {
		b := barPanel{title: title}
		for _, c := range [2]string{"base", "best"} {
			b.values = append(b.values, numberIn(t.tune.Cell(i, c)))
			b.shown = append(b.shown, unitCell(t.tune, i, c).Show+changeWords(b.values))
		}
		panels = append(panels, b)
	}
	add(0, "score")
	for i := range t.weights.Rows {
		q, u := t.weights.Cell(i, "quantity"), shownUnit(t.weights.Cell(i, "unit"))
		if u != "" {
			u = " [" + u + "]"
		}
		add(t.tune.Row(q), q+u)
	}
	f := Figure{Name: "tune-best.png", Title: "What the best changes", Finding: bestFinding(panels)}
	f.Alt = "Bars of the score and of each aim for the base and the best. " + f.Finding
	return st.barPage(f, t.foot(), []string{"base", "best"}, panels), f
}

// bestFinding says how score and aims change; panels are the score, then the aims.
func bestFinding(panels []barPanel) string {
	words := func(b barPanel) string {
		base, best := b.values[0], b.values[1]
		switch {
		case math.IsNaN(base + best):
			return "not known"
		case base == best:
			return "no change"
		case base == 0:
			return "from 0 to " + score(best)
		}
		return signedPercent(100 * (best - base) / math.Abs(base))
	}
	var parts []string
	for _, b := range panels {
		name, _, _ := strings.Cut(b.title, " [")
		parts = append(parts, name+" "+words(b))
	}
	return "The best against the base: " + strings.Join(parts, ", ") + "."
}

// evaluated are the candidates that were run, in their order: the first is the base.
func (t *tuneDocument) evaluated() (rows []int) {
	for i := range t.candidates.Rows {
		if t.candidates.Cell(i, "violation") != "" {
			rows = append(rows, i)
		}
	}
	return rows
}

// progressFigure draws the score of every candidate against candidate-years, and the
// best so far.
func (t *tuneDocument) progressFigure(st *style) (*page, Figure) {
	rows := t.evaluated()
	f := Figure{Name: "tune-progress.png", Title: "How the search went", Finding: t.progressFinding(len(rows))}
	f.Alt = "Dots of the score of every candidate in the order of evaluation, and a line of the best so far. " + f.Finding
	base := numberIn(t.tune.Cell(0, "base"))
	low, far := base, base
	var all []float64
	for _, i := range rows {
		if x := numberIn(t.candidates.Cell(i, "score")); !math.IsNaN(x) {
			all = append(all, x)
			low = math.Min(low, x)
		}
	}
	slices.Sort(all)
	if len(all) > 0 {
		// Some candidates are far worse than the base; the better half shows the search.
		far = math.Max(base+(base-low)/4, all[len(all)/2])
	}
	lo, hi := roundRange(low, far, 5)
	p := st.newPage(262, f.Title, f.Finding, t.foot())
	n := float64(max(len(rows), 2))
	a := p.panel(vg.Rectangle{Min: vg.Point{X: p.body.Min.X + 54, Y: p.body.Min.Y + 60}, Max: vg.Point{X: p.body.Max.X - 14, Y: p.body.Max.Y - 24}}, 0, n+1, lo, hi)
	a.yAxis(linear(lo, hi, 5), "Score, less is better")
	a.xAxis(countTicks(n), "Candidate-years evaluated")
	a.c.StrokeLine2(baseLine, a.rect.Min.X, a.y(base), a.rect.Max.X, a.y(base))
	kinds := [3]bool{}
	for k, i := range rows {
		x, y := a.x(float64(k+1)), numberIn(t.candidates.Cell(i, "score"))
		switch {
		case math.IsNaN(y):
		case y > hi:
			kinds[2] = true
			a.c.StrokeLine2(draw.LineStyle{Color: axisGrey, Width: vg.Points(1)}, x, a.rect.Max.Y, x, a.rect.Max.Y-6)
		case t.candidates.Cell(i, "limits kept") == "no":
			kinds[1] = true
			a.cross(x, a.y(y))
		default:
			kinds[0] = true
			a.dot(x, a.y(y), 2.2, sky)
		}
	}
	items := t.progressLine(a, n)
	a.keys(items, p.body.Min.X, p.body.Min.Y+18)
	t.markKeys(a, kinds, p.body.Min.Y+4)
	return p, f
}

// progressLine draws the best so far up to n candidate-years, in grey while it breaks a
// limit, and returns the legend of the lines.
func (t *tuneDocument) progressLine(a *panel, n float64) []key {
	kept := draw.LineStyle{Color: blue, Width: vg.Points(dataWidth + 0.5)}
	broken := draw.LineStyle{Color: axisGrey, Width: vg.Points(dataWidth + 0.5)}
	var edges, values, before []float64 // before: of those that break a limit
	for i := range t.progress.Rows {
		edges = append(edges, numberIn(t.progress.Cell(i, "candidate-years")))
		y, late := numberIn(t.progress.Cell(i, "score")), nan
		if t.progress.Cell(i, "limits kept") == "no" {
			y, late = nan, y
		}
		values, before = append(values, y), append(before, late)
	}
	edges = append(edges, n)
	var items []key
	for _, l := range []struct {
		values []float64
		style  draw.LineStyle
		name   string
	}{{before, broken, "best so far, breaks a limit"}, {values, kept, "best so far"}} {
		if !slices.ContainsFunc(l.values, func(v float64) bool { return !math.IsNaN(v) }) {
			continue
		}
		x, y := steps(edges, l.values)
		a.add(line{x, y, l.style})
		items = append(items, key{line: l.style, text: l.name})
	}
	return append(items, key{line: baseLine, text: "base"})
}

// countTicks are whole numbers from 0 to n.
func countTicks(n float64) []tick {
	step := math.Max(roundStep(n/8), 1)
	if step == 2.5 {
		step = 5
	}
	return stepped(0, n, step)
}

// baseLine marks the base, told from data by its dashes.
var baseLine = draw.LineStyle{Color: black, Width: vg.Points(1), Dashes: []vg.Length{vg.Points(4), vg.Points(3)}}

// markKeys says what dots, crosses and strokes at the edge of a figure are.
func (t *tuneDocument) markKeys(a *panel, kinds [3]bool, y vg.Length) {
	x := a.body.Min.X
	label := a.text(labelSize, black)
	for k, name := range [3]string{"candidate that keeps the limits", "one that does not", "one far above"} {
		if !kinds[k] {
			continue
		}
		switch k {
		case 0:
			a.dot(x+10, y, 2.6, sky)
		case 1:
			a.cross(x+10, y)
		case 2:
			a.c.StrokeLine2(draw.LineStyle{Color: axisGrey, Width: vg.Points(1)}, x+10, y+3, x+10, y-3)
		}
		a.label(label, x+24, y, text.XLeft, text.YCenter, name)
		x += 24 + label.Width(name) + keyGap
	}
}

// progressFinding says by how much the score fell and when the best was found.
func (t *tuneDocument) progressFinding(evaluated int) string {
	last := len(t.progress.Rows) - 1
	base := numberIn(t.tune.Cell(0, "base"))
	best, at := numberIn(t.progress.Cell(last, "score")), t.progress.Cell(last, "candidate-years")
	switch {
	case last == 0:
		return fmt.Sprintf("No candidate of %s is better than the base, whose score is %s.", count(evaluated, "candidate-year", "candidate-years"), score(base))
	case t.progress.Cell(0, "limits kept") == "no" && t.progress.Cell(last, "limits kept") == "yes":
		first := 0
		for t.progress.Cell(first, "limits kept") == "no" {
			first++
		}
		return fmt.Sprintf("The base breaks a limit; all limits were first kept after %s of %s, and the best was found after %s.", t.progress.Cell(first, "candidate-years"), count(evaluated, "candidate-year", "candidate-years"), at)
	case best > base:
		return fmt.Sprintf("The base breaks limits by more than the best, which was found after %s of %s and has %s more of score.", at, count(evaluated, "candidate-year", "candidate-years"), score(best-base))
	case best == base:
		return fmt.Sprintf("The best was found after %s of %s; its score is that of the base.", at, count(evaluated, "candidate-year", "candidate-years"))
	}
	text := fmt.Sprintf("The best was found after %s of %s", at, count(evaluated, "candidate-year", "candidate-years"))
	for i := range last {
		if x := numberIn(t.progress.Cell(i, "score")); t.progress.Cell(i, "limits kept") == t.progress.Cell(last, "limits kept") && base-x >= 0.9*(base-best) {
			return text + fmt.Sprintf("; nine tenths of its gain of %s were there after %s.", score(base-best), t.progress.Cell(i, "candidate-years"))
		}
	}
	return text + fmt.Sprintf("; its gain is %s.", score(base-best))
}

// cross is a small x: a mark that is told from a dot in grey too.
func (p *page) cross(x, y vg.Length) {
	l := draw.LineStyle{Color: axisGrey, Width: vg.Points(1)}
	p.c.StrokeLine2(l, x-2.6, y-2.6, x+2.6, y+2.6)
	p.c.StrokeLine2(l, x-2.6, y+2.6, x+2.6, y-2.6)
}

// settingNumber is the value of a setting on an axis; a time of day in hours.
func settingNumber(cell string) float64 {
	if h, m, ok := strings.Cut(cell, ":"); ok {
		hours, err1 := strconv.Atoi(h)
		minutes, err2 := strconv.Atoi(m)
		if err1 != nil || err2 != nil {
			return nan
		}
		return float64(hours) + float64(minutes)/60
	}
	return numberIn(cell)
}

// settingProfile is the score against one setting, all others at the best.
type settingProfile struct {
	name, unit   string
	value, score []float64 // score less that of the best
	kept         []bool
	low, high    float64 // bounds of the search
	best, base   float64 // base NaN: units differ
	flatLow      float64
	flatHigh     float64
	rise         float64 // NaN: not known
	flatWords    string
}

// profiles are those of which more than the best is known, the one that matters most first.
func (t *tuneDocument) profiles() (out []settingProfile) {
	for i := range t.sensitivity.Rows {
		key := t.sensitivity.Rows[i][1:4]
		x := settingProfile{name: settingName(t.sensitivity, i), unit: t.sensitivity.Cell(i, "unit"), best: settingNumber(t.sensitivity.Cell(i, "best")),
			flatLow: settingNumber(t.sensitivity.Cell(i, "flat from")), flatHigh: settingNumber(t.sensitivity.Cell(i, "flat to")), rise: numberIn(t.sensitivity.Cell(i, "range of score"))}
		row := t.settings.Row(key...)
		x.low, x.high, x.base = settingNumber(t.settings.Cell(row, "low")), settingNumber(t.settings.Cell(row, "high")), settingNumber(t.settings.Cell(row, "base"))
		x.flatWords = t.sensitivity.Cell(i, "flat from") + " to " + t.sensitivity.Cell(i, "flat to")
		if x.flatLow == x.flatHigh {
			x.flatWords = t.sensitivity.Cell(i, "flat to")
		}
		if x.unit != "" && x.unit != "h" {
			x.flatWords += " " + x.unit
		}
		if x.flatLow == x.flatHigh {
			x.flatWords += " only"
		}
		for k, r := range t.profile.Rows {
			if slices.Equal(r[:3], key) {
				x.value, x.score = append(x.value, settingNumber(r[4])), append(x.score, numberIn(t.profile.Cell(k, "score less that of the best")))
				x.kept = append(x.kept, t.profile.Cell(k, "limits kept") == "yes")
			}
		}
		if len(x.value) > 1 {
			out = append(out, x)
		}
	}
	return out
}

// shownProfiles is how many profiles are drawn, three in a row.
const shownProfiles = 9

// flatRise is how much more than the best's a score may be that is as good.
func (t *tuneDocument) flatRise() float64 {
	return numberIn(t.search.Cell(t.search.Row("highest score as good as the best"), "value")) - numberIn(t.tune.Cell(0, "best"))
}

// profileFigure draws the score against each setting, all others at the best.
func (t *tuneDocument) profileFigure(st *style) (*page, Figure) {
	all := t.profiles()
	if len(all) == 0 {
		return nil, Figure{}
	}
	f := Figure{Name: "tune-flat.png", Title: "How flat the optimum is, setting by setting", Finding: flatFinding(all)}
	f.Alt = "A panel for each setting with the score above that of the best against the setting's value; the values as good as the best are shaded. " + f.Finding
	shown := all[:min(len(all), shownProfiles)]
	if len(shown) < len(all) {
		f.Title += fmt.Sprintf(": the %d that matter most", len(shown))
	}
	good := t.flatRise()
	top := 2 * good
	for _, x := range shown {
		for _, y := range x.score {
			top = math.Max(top, math.Min(y, 12*good))
		}
	}
	low := 0.0 // where no candidate keeps the limits a worse one may score less
	for _, x := range shown {
		for _, y := range x.score {
			low = math.Min(low, math.Max(y, -top))
		}
	}
	lo, hi := roundRange(low, top, 4)
	across := min(3, len(shown))
	down := (len(shown) + across - 1) / across
	const high = vg.Length(178)
	p := st.newPage(vg.Length(down)*high+38, f.Title, f.Finding, t.foot())
	const left = vg.Length(50)
	cell := (p.body.Max.X - p.body.Min.X - left) / vg.Length(across)
	for k, x := range shown {
		x0 := p.body.Min.X + left + vg.Length(k%across)*cell
		y1 := p.body.Max.Y - 34 - vg.Length(k/across)*high
		a := p.panel(vg.Rectangle{Min: vg.Point{X: x0 + 4, Y: y1 - high + 68}, Max: vg.Point{X: x0 + cell - 14, Y: y1}}, x.low, math.Max(x.high, x.low+1e-9), lo, hi)
		a.profilePanel(x, good, k%across == 0)
	}
	p.label(p.text(labelSize, black), p.body.Min.X, p.body.Max.Y-12, text.XLeft, text.YBottom, "Score above that of the best")
	a := p.panel(p.body, 0, 1, 0, 1)
	a.keys([]key{{fill: flatGreen, text: "as good as the best"}, {line: baseLine, text: "value in the base"}}, p.body.Min.X, p.body.Min.Y+18)
	label := p.text(labelSize, black)
	at, y := p.body.Min.X, p.body.Min.Y+4
	for k, name := range [3]string{"the best", "evaluated", "breaks a limit, or far above"} {
		switch k {
		case 0:
			p.dot(at+10, y, 4, vermilion)
		case 1:
			p.dot(at+10, y, 2.6, blue)
		case 2:
			p.cross(at+10, y)
		}
		p.label(label, at+24, y, text.XLeft, text.YCenter, name)
		at += 24 + label.Width(name) + keyGap
	}
	return p, f
}

// flatGreen shades what is as good as the best.
var flatGreen = mix(white, green, 0.3)

// profilePanel draws one profile.
func (n *panel) profilePanel(x settingProfile, good float64, named bool) {
	lo, hi := n.plot.Y.Min, n.plot.Y.Max
	ticks := linear(lo, hi, 4)
	if !named {
		for i := range ticks {
			ticks[i].label = ""
		}
	}
	half := (n.plot.X.Max - n.plot.X.Min) / 60
	n.bar(max(n.x(x.flatLow-half), n.rect.Min.X-4), n.rect.Min.Y, min(n.x(x.flatHigh+half), n.rect.Max.X+4), min(n.y(good), n.rect.Max.Y), flatGreen)
	n.yAxis(ticks, "")
	axis := linear(x.low, x.high, 3)
	for i := range axis {
		if x.unit == "h" {
			axis[i].label = fmt.Sprintf("%02d:%02d", int(axis[i].at), int(math.Round(math.Mod(axis[i].at, 1)*60)))
		}
	}
	unit := ""
	if x.unit != "" && x.unit != "h" {
		unit = " [" + x.unit + "]"
	}
	bold := n.bold(labelSize, black)
	n.label(bold, n.rect.Min.X, n.rect.Max.Y+5, text.XLeft, text.YBottom, fit(bold, x.name+unit, n.width()+10))
	n.xAxis(axis, "")
	if x.base >= x.low && x.base <= x.high {
		n.c.StrokeLine2(baseLine, n.x(x.base), n.rect.Min.Y, n.x(x.base), n.rect.Max.Y)
	}
	n.add(line{x.value, x.score, draw.LineStyle{Color: blue, Width: vg.Points(dataWidth)}})
	for i, v := range x.value {
		y := n.yIn(x.score[i])
		switch {
		case v == x.best:
			n.dot(n.x(v), y, 4, vermilion)
		case !x.kept[i] || x.score[i] > hi:
			n.cross(n.x(v), y)
		default:
			n.dot(n.x(v), y, 2.6, blue)
		}
	}
	small := n.text(smallSize, inkGrey)
	n.label(small, n.rect.Min.X, n.rect.Min.Y-19, text.XLeft, text.YTop, fit(small, "flat: "+x.flatWords, n.width()+10))
}

// flatFinding names the settings that must be met closest and those that may be anything.
func flatFinding(all []settingProfile) string {
	share := func(x settingProfile) float64 {
		if x.high == x.low {
			return 1
		}
		return (x.flatHigh - x.flatLow) / (x.high - x.low)
	}
	sharp, flat, whole := 0, 0, 0
	for i, x := range all {
		if share(x) < share(all[sharp]) {
			sharp = i
		}
		if share(x) > share(all[flat]) {
			flat = i
		}
		if share(x) == 1 {
			whole++
		}
	}
	switch {
	case whole == len(all):
		return "No setting matters alone: over its whole range, all others held, every value that was evaluated is as good as the best."
	case len(all) == 1 || share(all[sharp]) == share(all[flat]):
		return fmt.Sprintf("Of the values tried of %s, as good as the best are %s.", all[sharp].name, all[sharp].flatWords)
	}
	return fmt.Sprintf("Of the values tried, the sharpest setting is %s, as good as the best at %s; the flattest is %s, at %s.", all[sharp].name, all[sharp].flatWords, all[flat].name, all[flat].flatWords)
}
