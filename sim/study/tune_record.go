package study

import (
	"fmt"
	"math"
	"slices"
	"strconv"

	"yearflow/sim/results"
)

// searchTable is search.csv: what the search was given and how far it came.
func (t *Tuning) searchTable() NamedTable {
	out := NamedTable{Name: "search.csv", Rows: [][]string{{"quantity", "value", "unit"}}}
	add := func(name, value, unit string) { out.Rows = append(out.Rows, []string{name, value, unit}) }
	grid := 1.0
	for i := range t.Spec.Knobs {
		grid *= float64(t.Spec.Knobs[i].Levels())
	}
	within, invalid, kept := 0, 0, 0
	for _, p := range t.Points {
		switch {
		case p.Invalid != "":
			invalid++
		case p.Levels != nil:
			within++
			if p.Feasible() {
				kept++
			}
		}
	}
	add("seed", strconv.FormatUint(t.Spec.Seed, 10), "1")
	add("budget", strconv.Itoa(t.Spec.Budget), "1")
	add("candidate-years", strconv.Itoa(t.Evaluated), "1")
	add("candidates of the grid", strconv.FormatFloat(grid, 'f', 0, 64), "1")
	add("candidates of the grid evaluated", strconv.Itoa(within), "1")
	add("share of the grid evaluated", results.FigureText(100*float64(within)/grid), "%")
	add("candidates that no sheet can hold", strconv.Itoa(invalid), "1")
	add("candidates that keep all limits", strconv.Itoa(kept), "1")
	add("candidates as good as the best", strconv.Itoa(t.Good()), "1")
	add("undominated candidates", strconv.Itoa(len(t.undominated())), "1")
	if t.Best != nil {
		add("highest score as good as the best", results.FigureText(t.flat()), "1")
	}
	return out
}

// methodParts are the parts of the search by their word in Point.Origin, in their order,
// with what they do and after whom.
func methodParts() [][3]string {
	return [][3]string{
		{"base", "the settings as they stand", ""},
		{"grid", "every candidate of the grid, because all of it fits into the budget", ""},
		{"start", "the point of the grid nearest to the base, and a Latin hypercube", "McKay, Beckman, Conover, Technometrics 21 (1979)"},
		{"evolution", fmt.Sprintf("differential evolution DE/rand/1/bin on the levels of the grid, F = %g, CR = %g", mutationFactor, crossover), "Storn and Price, Journal of Global Optimization 11 (1997)"},
		{"compass", "compass search from the best: steps either way in every setting, halved down to one step of the grid", "Kolda, Lewis, Torczon, SIAM Review 45 (2003)"},
		{"profile", "one setting at a time over its range, all others at the best", ""},
		{"pairs", "one step in two settings at once", ""},
	}
}

// methodTable is method.csv: the parts of the search and what each had evaluated.
func (t *Tuning) methodTable() NamedTable {
	out := NamedTable{Name: "method.csv", Rows: [][]string{{"part", "candidates", "what", "source"}}}
	whole := slices.ContainsFunc(t.Points, func(p *Point) bool { return p.Origin == "grid" })
	for _, part := range methodParts() {
		n := 0
		for _, p := range t.Points {
			if p.Origin == part[0] {
				n++
			}
		}
		if n == 0 && (whole || part[0] == "grid") {
			continue // the other way of searching
		}
		out.Rows = append(out.Rows, []string{part[0], strconv.Itoa(n), part[1], part[2]})
	}
	return out
}

// progressTable is progress.csv: every candidate that was the best when it was evaluated.
func (t *Tuning) progressTable() NamedTable {
	out := NamedTable{Name: "progress.csv", Rows: [][]string{{"candidate-years", "candidate", "from", "score", "score less that of the base", "limits kept", "violation"}}}
	var best *Point
	years := 0
	for _, p := range t.Points {
		if p.Invalid != "" {
			continue
		}
		years++
		if best != nil && !p.better(best) {
			continue
		}
		best = p
		out.Rows = append(out.Rows, []string{strconv.Itoa(years), strconv.Itoa(p.Number), p.Origin, results.FigureText(p.Score), results.FigureText(p.Score - t.Base.Score),
			yes(p.Feasible()), results.FigureText(p.Violation)})
	}
	return out
}

// weightsTable is weights.csv: the aims, and how much of the score each decides about
// among the candidates that keep the limits, and among the undominated of them.
func (t *Tuning) weightsTable() NamedTable {
	out := NamedTable{Name: "weights.csv", Rows: [][]string{{"quantity", "unit", "weight", "source", "range of its part of the score", "range among the undominated"}}}
	span := func(w Weight, points []*Point) string {
		low, high := math.Inf(1), math.Inf(-1)
		for _, p := range points {
			x := w.Weight * quantityNamed(t.all, w.Quantity).of(&p.Sums)
			low, high = math.Min(low, x), math.Max(high, x)
		}
		if len(points) == 0 {
			return ""
		}
		return results.FigureText(high - low)
	}
	for _, w := range t.Spec.Aims {
		out.Rows = append(out.Rows, []string{w.Quantity, w.Unit, trimmed(w.Weight), w.Source, span(w, t.keeping()), span(w, t.undominated())})
	}
	return out
}

// limitsTable is limits.csv: what a candidate must keep, with how far base and best stay
// inside.
func (t *Tuning) limitsTable() NamedTable {
	out := NamedTable{Name: "limits.csv", Rows: [][]string{{"limit", "quantity", "unit", "sense", "value", "from", "base", "best", "margin of the base", "margin of the best", "kept by the base", "kept by the best"}}}
	add := func(q *tuneQuantity, sense, from string, limit, sign float64) {
		figure := results.FigureText
		switch q.unit {
		case "pu":
			figure = results.PUText
		case "1":
			figure = trimmed
		}
		row := []string{strconv.Itoa(len(out.Rows)), q.name, q.unit, sense, figure(limit), from, q.text(t.Base), q.text(t.Best), "", "", "", ""}
		for i, p := range []*Point{t.Base, t.Best} {
			if p == nil {
				continue
			}
			margin := sign * (limit - q.of(&p.Sums))
			row[8+i] = figure(margin)
			row[10+i] = yes(-margin <= 1e-9*math.Abs(limit)) // as search.judge has it
		}
		out.Rows = append(out.Rows, row)
	}
	for _, l := range t.Spec.Limits {
		q := quantityNamed(t.all, l.Quantity)
		limit, sign := l.value(q.of(&t.Base.Sums))
		sense, from := "at most", "[tune] limits of study.toml"
		if sign < 0 {
			sense = "at least"
		}
		if l.OfBase {
			from += ": as the base"
		}
		add(q, sense, from, limit, sign)
	}
	lost := &tuneQuantity{"low and unsolved steps", "1", func(s *results.Sums) float64 { return float64(s.Low + s.Unsolved) }}
	add(lost, "at most", "always: as the base, for nothing of such steps is in any sum", lost.of(&t.Base.Sums), 1)
	return out
}

// keeping are the base and the candidates that keep all limits.
func (t *Tuning) keeping() (out []*Point) {
	for _, p := range t.Points {
		if p.Feasible() {
			out = append(out, p)
		}
	}
	return out
}

// undominated are those of them to which no other is as good in every aim and better in
// one, the lowest score first; of several that are alike in all aims the one to be
// preferred.
func (t *Tuning) undominated() []*Point {
	all := t.keeping()
	values := make([][]float64, len(all)) // weighted, so that less is better
	for i, p := range all {
		for _, w := range t.Spec.Aims {
			values[i] = append(values[i], w.Weight*quantityNamed(t.all, w.Quantity).of(&p.Sums))
		}
	}
	var out []*Point
	for i, p := range all {
		beaten := false
		for k, o := range all {
			if i == k || beaten {
				continue
			}
			worse, better := false, false
			for j := range values[i] {
				worse, better = worse || values[k][j] > values[i][j], better || values[k][j] < values[i][j]
			}
			beaten = !worse && (better || o.better(p))
		}
		if !beaten {
			out = append(out, p)
		}
	}
	slices.SortStableFunc(out, func(a, b *Point) int {
		switch {
		case a.better(b):
			return -1
		case b.better(a):
			return 1
		}
		return 0
	})
	return out
}

// undominatedTable is undominated.csv.
func (t *Tuning) undominatedTable() NamedTable {
	head := []string{"candidate"}
	for i := range t.Spec.Knobs {
		head = append(head, t.Spec.Knobs[i].Name())
	}
	head = append(head, "score")
	for _, w := range t.Spec.Aims {
		head = append(head, aimHead(w.Quantity, w.Unit))
	}
	out := NamedTable{Name: "undominated.csv", Rows: [][]string{append(head, "note")}}
	for _, p := range t.undominated() {
		row := []string{strconv.Itoa(p.Number)}
		for i := range t.Spec.Knobs {
			row = append(row, t.setting(&t.Spec.Knobs[i], i, p))
		}
		row = append(row, results.FigureText(p.Score))
		for _, w := range t.Spec.Aims {
			row = append(row, quantityNamed(t.all, w.Quantity).text(p))
		}
		note := ""
		switch p {
		case t.Best:
			note = "the best"
		case t.Base:
			note = "the base"
		}
		if p == t.Best && p == t.Base {
			note = "the base, and the best"
		}
		out.Rows = append(out.Rows, append(row, note))
	}
	return out
}

// aimHead is a quantity as the head of a column.
func aimHead(name, unit string) string {
	if unit != "1" {
		name += " [" + unit + "]"
	}
	return name
}
