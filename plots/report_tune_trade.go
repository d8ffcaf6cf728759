package plots

import (
	"fmt"
	"math"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
)

// shownMatter is how many settings the figure of what matters has at most.
const shownMatter = 20

// matterFigure draws the range of the score by setting as bars.
func (t *tuneDocument) matterFigure(st *style) (*page, Figure) {
	var rows []int
	for i := range t.sensitivity.Rows {
		if t.sensitivity.Cell(i, "range of score") != "" && len(rows) < shownMatter {
			rows = append(rows, i)
		}
	}
	if len(rows) == 0 {
		return nil, Figure{}
	}
	f := Figure{Name: "tune-matters.png", Title: "How much the score depends on each setting", Finding: t.matterFinding()}
	f.Alt = "Bars of the range of the score over each setting, all others at the best. " + f.Finding
	const bar, gap = vg.Length(13), vg.Length(6)
	p := st.newPage(vg.Length(len(rows))*(bar+gap)+34, f.Title, f.Finding, t.foot())
	label, small := st.text(labelSize, black), st.text(smallSize, inkGrey)
	room, top := vg.Length(0), 1e-12
	for _, i := range rows {
		room = max(room, label.Width(settingName(t.sensitivity, i)))
		top = math.Max(top, numberIn(t.sensitivity.Cell(i, "range of score")))
	}
	room = min(room+8, 190)
	x0, x1 := p.body.Min.X+room, p.body.Max.X-86
	at := func(v float64) vg.Length { return x0 + (x1-x0)*vg.Length(v/top) }
	good := t.flatRise()
	for k, i := range rows {
		v := numberIn(t.sensitivity.Cell(i, "range of score"))
		y := p.body.Max.Y - 6 - vg.Length(k)*(bar+gap) - bar/2
		p.label(label, x0-6, y, text.XRight, text.YCenter, fit(label, settingName(t.sensitivity, i), room-8))
		p.bar(x0, y-bar/2, at(v), y+bar/2, blue)
		x := at(v) + 4
		if good < top && x < at(good)+4 && x+small.Width(score(v)) > at(good)-2 {
			x = at(good) + 4 // beside the line that marks what is as good
		}
		p.label(small, x, y, text.XLeft, text.YCenter, score(v))
	}
	if good < top {
		low := p.body.Max.Y - 6 - vg.Length(len(rows))*(bar+gap)
		p.c.StrokeLine2(baseLine, at(good), p.body.Max.Y, at(good), low)
		words := "as good as the best: up to " + score(good)
		x := min(at(good)+2, p.body.Max.X-small.Width(words))
		p.label(small, x, low-3, text.XLeft, text.YTop, words)
	}
	return p, f
}

// matterFinding names the setting that the score depends on most, and those on which it
// does not.
func (t *tuneDocument) matterFinding() string {
	known, unknown, idle := 0, 0, 0
	first, sum := nan, 0.0
	good := t.flatRise()
	for i := range t.sensitivity.Rows {
		v := numberIn(t.sensitivity.Cell(i, "range of score"))
		if math.IsNaN(v) {
			unknown++
			continue
		}
		if known++; known == 1 {
			first = v
		}
		sum += v
		if v <= good {
			idle++
		}
	}
	out := "No setting alone changes the score."
	if sum > 0 {
		out = fmt.Sprintf("The score depends most on %s, by %s over the values tried", settingName(t.sensitivity, 0), score(first))
		switch {
		case known == 1:
		case idle > 0:
			out += fmt.Sprintf("; %s alone can take it away from the best", count(known-idle, "of "+fmt.Sprint(known)+" settings", "of "+fmt.Sprint(known)+" settings"))
		default:
			out += fmt.Sprintf(", and least on %s, by %s", settingName(t.sensitivity, known-1), score(numberIn(t.sensitivity.Cell(known-1, "range of score"))))
		}
		out += "."
	}
	if unknown > 0 {
		out += fmt.Sprintf(" Of %s nothing is known: the budget was spent.", count(unknown, "setting", "settings"))
	}
	return out
}

// mainAims are the two aims, in the order of weights.csv, with most to trade: between the
// candidates of the undominated that are best in either, the lesser of what each costs in
// the other, as parts of the score, is highest. Of equals those that decide most among the
// undominated, and then among all.
func (t *tuneDocument) mainAims() (a, b int) {
	stake := func(i, k int) float64 {
		ends := [2]int{t.bestIn(i), t.bestIn(k)}
		cost := func(aim, from, to int) float64 {
			c := t.aimColumn(aim)
			return numberIn(t.weights.Cell(aim, "weight")) * (numberIn(t.front.Cell(to, c)) - numberIn(t.front.Cell(from, c)))
		}
		return math.Min(cost(i, ends[0], ends[1]), cost(k, ends[1], ends[0]))
	}
	span := func(i, k int, column string) float64 {
		return numberIn(t.weights.Cell(i, column)) + numberIn(t.weights.Cell(k, column))
	}
	a, b = 0, 1
	for k := 1; k < t.aims; k++ {
		for i := range k {
			better := 0.0
			for _, d := range [3]float64{stake(i, k) - stake(a, b), span(i, k, "range among the undominated") - span(a, b, "range among the undominated"),
				span(i, k, "range of its part of the score") - span(a, b, "range of its part of the score")} {
				if better == 0 {
					better = d
				}
			}
			if better > 0 {
				a, b = i, k
			}
		}
	}
	return a, b
}

// bestIn is the row of undominated.csv that is best in an aim; of equals the first, which
// has the lowest score.
func (t *tuneDocument) bestIn(aim int) int {
	c, weight := t.aimColumn(aim), numberIn(t.weights.Cell(aim, "weight"))
	at := 0
	for i := range t.front.Rows {
		if (numberIn(t.front.Cell(i, c))-numberIn(t.front.Cell(at, c)))*weight < 0 {
			at = i
		}
	}
	return at
}

// aimColumn is the column of an aim in candidates.csv and undominated.csv, and its title.
func (t *tuneDocument) aimColumn(row int) string {
	name := t.weights.Cell(row, "quantity")
	if u := t.weights.Cell(row, "unit"); u != "1" {
		name += " [" + u + "]"
	}
	return name
}

// aimTitle is a column of an aim as people read it.
func aimTitle(column string) string {
	if u := shownUnit(unitOf(column)); u != "" {
		return headOf(column) + " [" + u + "]"
	}
	return headOf(column)
}

// tradeFigure draws all candidates that keep the limits over two aims, the undominated of
// them joined to the eye by their marks.
func (t *tuneDocument) tradeFigure(st *style) (*page, Figure) {
	ai, bi := t.mainAims()
	ca, cb := t.aimColumn(ai), t.aimColumn(bi)
	f := Figure{Name: "tune-trade.png", Title: "What one aim costs in another", Finding: t.tradeFinding(ai, bi)}
	f.Alt = "Candidates as dots over two aims, with the undominated ones, the base and the best marked. " + f.Finding
	type dot struct{ x, y float64 }
	at := func(l *Ledger, i int) dot { return dot{numberIn(l.Cell(i, ca)), numberIn(l.Cell(i, cb))} }
	base := dot{numberIn(t.tune.Cell(t.tune.Row(t.weights.Cell(ai, "quantity")), "base")), numberIn(t.tune.Cell(t.tune.Row(t.weights.Cell(bi, "quantity")), "base"))}
	best := dot{numberIn(t.tune.Cell(t.tune.Row(t.weights.Cell(ai, "quantity")), "best")), numberIn(t.tune.Cell(t.tune.Row(t.weights.Cell(bi, "quantity")), "best"))}
	x0, x1, y0, y1 := base.x, base.x, base.y, base.y
	widen := func(d dot) {
		x0, x1, y0, y1 = math.Min(x0, d.x), math.Max(x1, d.x), math.Min(y0, d.y), math.Max(y1, d.y)
	}
	if t.has() {
		widen(best)
	}
	for i := range t.front.Rows {
		widen(at(t.front, i))
	}
	x0, x1 = roomy(x0, x1)
	y0, y1 = roomy(y0, y1)
	p := st.newPage(290, f.Title, f.Finding, t.foot())
	a := p.panel(vg.Rectangle{Min: vg.Point{X: p.body.Min.X + 58, Y: p.body.Min.Y + 62}, Max: vg.Point{X: p.body.Max.X - 16, Y: p.body.Max.Y - 24}}, x0, x1, y0, y1)
	a.yAxis(linear(y0, y1, 5), upper(aimTitle(cb)))
	ticks := linear(x0, x1, 5)
	for _, k := range ticks {
		a.c.StrokeLine2(gridLine, a.x(k.at), a.rect.Min.Y, a.x(k.at), a.rect.Max.Y)
	}
	a.xAxis(ticks, upper(aimTitle(ca)))
	outside := 0
	for _, i := range t.evaluated() {
		d := at(t.candidates, i)
		if t.candidates.Cell(i, "limits kept") != "yes" {
			continue
		}
		if d.x < x0 || d.x > x1 || d.y < y0 || d.y > y1 {
			outside++
			continue
		}
		a.dot(a.x(d.x), a.y(d.y), 2.2, missing)
	}
	for i := range t.front.Rows {
		d := at(t.front, i)
		a.dot(a.x(d.x), a.y(d.y), 3.2, blue)
	}
	if t.has() {
		a.dot(a.x(best.x), a.y(best.y), 5, vermilion)
	}
	rim := baseLine
	rim.Dashes = nil
	a.polygon(a.x(base.x), a.y(base.y), 6, 4, 0, white, rim)
	label := p.text(labelSize, black)
	x, y := p.body.Min.X, p.body.Min.Y+4
	for k, name := range [4]string{"base", "best", "undominated", "other that keeps the limits"} {
		switch k {
		case 0:
			p.polygon(x+10, y, 5.5, 4, 0, white, rim)
		case 1:
			p.dot(x+10, y, 4.5, vermilion)
		case 2:
			p.dot(x+10, y, 3.2, blue)
		case 3:
			p.dot(x+10, y, 2.4, missing)
		}
		if k == 3 && outside > 0 {
			name += fmt.Sprintf(" (%d more outside)", outside)
		}
		p.label(label, x+22, y, text.XLeft, text.YCenter, name)
		x += 22 + label.Width(name) + keyGap
	}
	return p, f
}

// roomy widens a range to whole steps with some room for marks at its ends, and not below
// zero where nothing lies there.
func roomy(lo, hi float64) (float64, float64) {
	room := (hi - lo) * 0.04
	a, b := roundRange(lo-room, hi+room, 5)
	if lo >= 0 && a < 0 {
		a = 0
	}
	return a, b
}

// tradeFinding says what the two ends of the undominated set give and cost in two aims.
func (t *tuneDocument) tradeFinding(ai, bi int) string {
	n := len(t.front.Rows)
	if n == 1 {
		return "One candidate is the best in every aim: there is nothing to be traded."
	}
	ca, cb := t.aimColumn(ai), t.aimColumn(bi)
	bestA, bestB := t.bestIn(ai), t.bestIn(bi)
	value := func(i int, column string) string {
		v := Number(t.front.Cell(i, column), unitOf(column), "")
		if v.Unit != "" {
			return v.Show + " " + v.Unit
		}
		return v.Show
	}
	if bestA == bestB {
		return fmt.Sprintf("One candidate is the best in both: %s %s and %s %s.", headOf(ca), value(bestA, ca), headOf(cb), value(bestA, cb))
	}
	return fmt.Sprintf("Between the ends of the undominated, %s goes from %s to %s and %s from %s to %s.", headOf(ca), value(bestA, ca), value(bestB, ca), headOf(cb), value(bestA, cb), value(bestB, cb))
}
