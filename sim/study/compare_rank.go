package study

import (
	"math"
	"slices"
	"strconv"

	"yearflow/sim/results"
)

// Ranked is a case with its score: Σ weight·quantity, less is better.
type Ranked struct {
	Case        string
	Rank        int // 1 is the best; equal scores share a rank; 0: not ranked
	Score       float64
	Values      []float64 // by Weights
	Undominated bool
	Note        string // why it is not ranked; or what dominates it
}

// rank scores the cases. A case whose steps are not those of the base that are ok, and
// one for which a weighted quantity is not known, is not ranked: its sums are of another
// time.
func (c *Comparison) rank() {
	for i, x := range c.Cases {
		r := Ranked{Case: x.Name}
		for _, w := range c.Weights {
			v := parse(c.Quantity(w.Quantity).Cells[i])
			r.Values = append(r.Values, v)
			r.Score += w.Weight * v
		}
		switch {
		case !sameStatus(&c.Cases[0].Results.Steps, &x.Results.Steps):
			r.Note = "not ranked: other steps than in the base are low or unsolved, so that its sums are of another time"
		case math.IsNaN(r.Score):
			r.Note = "not ranked: a weighted quantity is not known"
		}
		c.Ranking = append(c.Ranking, r)
	}
	for i := range c.Ranking {
		r := &c.Ranking[i]
		if r.Note != "" {
			continue
		}
		r.Rank, r.Undominated = 1, true
		for k := range c.Ranking {
			o := &c.Ranking[k]
			if k == i || o.Note != "" && o.Rank == 0 {
				continue
			}
			if o.Score < r.Score {
				r.Rank++
			}
		}
	}
	for i := range c.Ranking {
		r := &c.Ranking[i]
		for k := range c.Ranking {
			if o := &c.Ranking[k]; r.Rank > 0 && o.Rank > 0 && r.Undominated && c.dominates(o, r) {
				r.Undominated, r.Note = false, "no better than "+o.Case+" in anything that has a weight, and worse in something"
			}
		}
	}
	slices.SortStableFunc(c.Ranking, func(a, b Ranked) int {
		if (a.Rank == 0) != (b.Rank == 0) {
			return b.Rank - a.Rank
		}
		return a.Rank - b.Rank
	})
}

// dominates tells whether a is at least as good as b in every weighted quantity and
// better in one.
func (c *Comparison) dominates(a, b *Ranked) bool {
	better := false
	for k, w := range c.Weights {
		d := w.Weight * (a.Values[k] - b.Values[k])
		if d > 0 {
			return false
		}
		better = better || d < 0
	}
	return better
}

// sameStatus tells whether the same rows are ok.
func sameStatus(a, b *results.Steps) bool {
	if len(a.Status) != len(b.Status) {
		return false
	}
	for i := range a.Status {
		if (a.Status[i] == results.OK) != (b.Status[i] == results.OK) {
			return false
		}
	}
	return true
}

// rankTables are ranking.csv, weights.csv, score.csv and against-base.csv.
func (c *Comparison) rankTables() []NamedTable {
	ranking := NamedTable{Name: "ranking.csv", Rows: [][]string{{"case", "rank", "score", "score less that of the base", "undominated", "note"}}}
	score := NamedTable{Name: "score.csv", Rows: [][]string{{"case", "quantity", "unit", "value", "weight", "part of score"}}}
	weights := NamedTable{Name: "weights.csv", Rows: [][]string{{"quantity", "unit", "weight", "source"}}}
	for _, w := range c.Weights {
		weights.Rows = append(weights.Rows, []string{w.Quantity, w.Unit, trimmed(w.Weight), w.Source})
	}
	for _, r := range c.Ranking {
		row := []string{r.Case, "", "", "", "no", r.Note}
		if r.Rank > 0 {
			row[1], row[2], row[3] = strconv.Itoa(r.Rank), results.FigureText(r.Score), results.FigureText(r.Score-c.baseScore())
		}
		if r.Undominated {
			row[4] = "yes"
		}
		ranking.Rows = append(ranking.Rows, row)
		for k, w := range c.Weights {
			i := c.index(r.Case)
			score.Rows = append(score.Rows, []string{r.Case, w.Quantity, w.Unit, c.Quantity(w.Quantity).Cells[i], trimmed(w.Weight), results.FigureText(w.Weight * r.Values[k])})
		}
	}
	return []NamedTable{ranking, weights, score, c.againstBase()}
}

func (c *Comparison) baseScore() float64 {
	for _, r := range c.Ranking {
		if r.Case == c.Cases[0].Name {
			return r.Score
		}
	}
	return math.NaN()
}

func (c *Comparison) index(name string) int {
	return slices.IndexFunc(c.Cases, func(x *Case) bool { return x.Name == name })
}

// againstBase says for every case what it buys and costs: the weighted quantities and
// the money, with their change. Where less is better is known from the weights; money
// is better spent less.
func (c *Comparison) againstBase() NamedTable {
	t := NamedTable{Name: "against-base.csv", Rows: [][]string{{"case", "quantity", "unit", "base", "value", "change", "change [%]", "verdict"}}}
	type item struct {
		q     *Quantity
		worse float64 // sign of a change that is worse; 0: neither
	}
	var items []item
	for _, w := range c.Weights {
		items = append(items, item{c.Quantity(w.Quantity), math.Copysign(1, w.Weight)})
	}
	for _, name := range []string{"customer-hours outside A", "customer-hours outside B", "source energy", "losses energy", "peak demand", "operations", "settling share"} {
		if !slices.ContainsFunc(items, func(i item) bool { return i.q.Name == name }) {
			worse := 1.0
			if name == "source energy" {
				worse = 0 // less energy taken is a saving of the customers and a revenue lost
			}
			items = append(items, item{c.Quantity(name), worse})
		}
	}
	for i := range c.Quantities {
		if q := &c.Quantities[i]; q.Group == "money" && !slices.ContainsFunc(items, func(i item) bool { return i.q == q }) {
			items = append(items, item{q, 1})
		}
	}
	for k, x := range c.Cases {
		if k == 0 {
			continue
		}
		for _, it := range items {
			a, b := parse(it.q.Cells[0]), parse(it.q.Cells[k])
			verdict := "same"
			switch d := (b - a) * it.worse; {
			case math.IsNaN(d):
				verdict = "not known"
			case d > 0:
				verdict = "costs"
			case d < 0:
				verdict = "buys"
			case b != a:
				verdict = "changes"
			}
			change, share := results.FigureText(b-a), ""
			if it.q.Group == "money" {
				change = money(b - a)
			}
			if a != 0 {
				share = results.FigureText(100 * (b - a) / math.Abs(a))
			}
			t.Rows = append(t.Rows, []string{x.Name, it.q.Name, it.q.Unit, it.q.Cells[0], it.q.Cells[k], change, share, verdict})
		}
	}
	return t
}

func trimmed(x float64) string { return strconv.FormatFloat(x, 'f', -1, 64) }
