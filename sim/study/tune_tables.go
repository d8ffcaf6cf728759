package study

import (
	"fmt"
	"math"
	"path/filepath"
	"strconv"
	"strings"

	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// Tables returns the files of the document by name, in the order of reading; the first
// row of each is its header.
func (t *Tuning) Tables() []NamedTable {
	out := []NamedTable{t.mainTable(), t.settingsTable(), t.weightsTable(), t.limitsTable(), t.searchTable(), t.methodTable(), t.progressTable(),
		t.sensitivityTable(), t.profileTable(), t.undominatedTable(), t.candidatesTable()}
	if t.Sheet != nil {
		sheet := t.Sheet.table()
		sheet.Name = "sheet.csv"
		out = append(out, sheet)
	}
	cautions := NamedTable{Name: "cautions.csv", Rows: [][]string{{"caution"}}}
	for _, c := range t.Cautions {
		cautions.Rows = append(cautions.Rows, []string{c.Text})
	}
	return append(out, cautions)
}

// text writes a quantity of a candidate as compare.csv has it.
func (q *tuneQuantity) text(p *Point) string {
	if p == nil {
		return ""
	}
	v := q.of(&p.Sums)
	switch {
	case math.IsNaN(v):
		return ""
	case q.unit == "pu":
		return results.PUText(v)
	case q.unit == "1":
		return whole(v)
	}
	return results.FigureText(v)
}

// mainTable is tune.csv: the score and every quantity of the base and of the best.
func (t *Tuning) mainTable() NamedTable {
	out := NamedTable{Name: "tune.csv", Rows: [][]string{{"quantity", "unit", "base", "best", "change", "change [%]", "weight", "part of score of the base", "part of score of the best", "limit", "kept by the base", "kept by the best"}}}
	change := func(a, b float64) (string, string) {
		share := ""
		if a != 0 {
			share = results.FigureText(100 * (b - a) / math.Abs(a))
		}
		return results.FigureText(b - a), share
	}
	row := []string{"score", "1", results.FigureText(t.Base.Score), "", "", "", "", results.FigureText(t.Base.Score), "", "", yes(t.Base.Feasible()), ""}
	if t.Best != nil {
		row[3], row[8], row[11] = results.FigureText(t.Best.Score), results.FigureText(t.Best.Score), yes(t.Best.Feasible())
		row[4], row[5] = change(t.Base.Score, t.Best.Score)
	}
	out.Rows = append(out.Rows, row)
	for i := range t.all {
		q := &t.all[i]
		a := q.of(&t.Base.Sums)
		row := []string{q.name, q.unit, q.text(t.Base), q.text(t.Best), "", "", "", "", "", "", "", ""}
		if t.Best != nil {
			row[4], row[5] = change(a, q.of(&t.Best.Sums))
		}
		for _, w := range t.Spec.Aims {
			if w.Quantity != q.name {
				continue
			}
			row[6], row[7] = trimmed(w.Weight), results.FigureText(w.Weight*a)
			if t.Best != nil {
				row[8] = results.FigureText(w.Weight * q.of(&t.Best.Sums))
			}
		}
		for _, l := range t.Spec.Limits {
			if l.Quantity != q.name {
				continue
			}
			limit, sign := l.value(a)
			word := "at most "
			if sign < 0 {
				word = "at least "
			}
			if row[9] != "" {
				row[9] += "; "
			}
			row[9] += word + results.FigureText(limit)
			row[10] = yes(!contains(t.Base.Broken, q.name))
			if t.Best != nil {
				row[11] = yes(!contains(t.Best.Broken, q.name))
			}
		}
		out.Rows = append(out.Rows, row)
	}
	return out
}

func yes(is bool) string {
	if is {
		return "yes"
	}
	return "no"
}

func contains(words []string, word string) bool {
	for _, w := range words {
		if w == word {
			return true
		}
	}
	return false
}

// settingsTable is settings.csv: what was searched, and the best.
func (t *Tuning) settingsTable() NamedTable {
	out := NamedTable{Name: "settings.csv", Rows: [][]string{{"device", "phase", "setting", "unit", "low", "high", "step", "base", "best", "change", "lowest as good", "highest as good"}}}
	low, high := t.goodRange()
	for i := range t.Spec.Knobs {
		k := &t.Spec.Knobs[i]
		row := []string{k.Device, k.Phase, k.Setting, k.Unit, k.cellOf(k.Low), k.cellOf(k.value(k.Levels() - 1)), trimmed(k.Step), t.setting(k, i, t.Base), t.setting(k, i, t.Best), "", "", ""}
		if t.Best != nil {
			if b := t.Base.Values[i]; !math.IsNaN(b) {
				row[9] = results.FigureText(t.Best.Values[i] - b)
			}
			row[10], row[11] = k.cellOf(low[i]), k.cellOf(high[i])
		}
		out.Rows = append(out.Rows, row)
	}
	return out
}

// setting writes a knob's value of a candidate; units that differ one after the other.
func (t *Tuning) setting(k *Knob, i int, p *Point) string {
	if p == nil {
		return ""
	}
	if v := p.Values[i]; !math.IsNaN(v) {
		return k.cellOf(v)
	}
	var parts []string
	for n := range k.targets {
		parts = append(parts, k.targets[n].phase+" "+k.cellOf(k.of(t.study.Model, &k.targets[n])))
	}
	return strings.Join(parts, ", ")
}

// goodRange is, by knob, from where to where the candidates lie that are as good as the
// best, all settings free: how flat the optimum is.
func (t *Tuning) goodRange() (low, high []float64) {
	if t.Best == nil {
		return nil, nil
	}
	low, high = append(low, t.Best.Values...), append(high, t.Best.Values...)
	for _, p := range t.Points {
		if p.Levels == nil || !t.good(p) {
			continue
		}
		for i := range t.Spec.Knobs {
			v := t.Spec.Knobs[i].value(p.Levels[i])
			low[i], high[i] = math.Min(low[i], v), math.Max(high[i], v)
		}
	}
	return low, high
}

// Good counts the candidates that are as good as the best, the best among them.
func (t *Tuning) Good() (n int) {
	for _, p := range t.Points {
		if t.Best != nil && p.Levels != nil && t.good(p) {
			n++
		}
	}
	return n
}

// sensitivityTable is sensitivity.csv.
func (t *Tuning) sensitivityTable() NamedTable {
	out := NamedTable{Name: "sensitivity.csv", Rows: [][]string{{"rank", "device", "phase", "setting", "unit", "best", "range of score", "one step down", "one step up", "flat from", "flat to", "points", "at bound"}}}
	for _, s := range t.Sensitivities {
		k, rank := s.Knob, ""
		if s.Rank > 0 {
			rank = strconv.Itoa(s.Rank)
		}
		out.Rows = append(out.Rows, []string{rank, k.Device, k.Phase, k.Setting, k.Unit, t.setting(k, s.Index, t.Best), results.FigureText(s.Range),
			results.FigureText(s.Down), results.FigureText(s.Up), k.cellOf(s.FlatLow), k.cellOf(s.FlatHigh), strconv.Itoa(len(s.Profile)), s.Edge})
	}
	return out
}

// profileTable is profile.csv: the points of each profile.
func (t *Tuning) profileTable() NamedTable {
	out := NamedTable{Name: "profile.csv", Rows: [][]string{append([]string{"device", "phase", "setting", "unit", "value", "candidate", "score", "score less that of the best", "limits kept"}, t.aimNames()...)}}
	for i := range t.Spec.Knobs {
		for _, s := range t.Sensitivities {
			if s.Index != i {
				continue
			}
			k := s.Knob
			for _, p := range s.Profile {
				row := []string{k.Device, k.Phase, k.Setting, k.Unit, k.cellOf(k.value(p.Levels[i])), strconv.Itoa(p.Number), results.FigureText(p.Score), results.FigureText(p.Score - t.Best.Score), yes(p.Feasible())}
				out.Rows = append(out.Rows, append(row, t.aimCells(p)...))
			}
		}
	}
	return out
}

func (t *Tuning) aimNames() (out []string) {
	for _, q := range t.weighed() {
		out = append(out, aimHead(q.name, q.unit))
	}
	return out
}

func (t *Tuning) aimCells(p *Point) (out []string) {
	for _, q := range t.weighed() {
		out = append(out, q.text(p))
	}
	return out
}

// weighed are the quantities with a weight or a limit.
func (t *Tuning) weighed() (out []*tuneQuantity) {
	for i := range t.all {
		q := &t.all[i]
		is := false
		for _, w := range t.Spec.Aims {
			is = is || w.Quantity == q.name
		}
		for _, l := range t.Spec.Limits {
			is = is || l.Quantity == q.name
		}
		if is {
			out = append(out, q)
		}
	}
	return out
}

// candidatesTable is candidates.csv: all that was evaluated, in that order.
func (t *Tuning) candidatesTable() NamedTable {
	head := []string{"candidate", "from"}
	for i := range t.Spec.Knobs {
		head = append(head, t.Spec.Knobs[i].Name())
	}
	head = append(append(head, "score", "limits kept", "violation", "as good as the best"), t.aimNames()...)
	out := NamedTable{Name: "candidates.csv", Rows: [][]string{append(head, "low steps", "unsolved steps", "note")}}
	for _, p := range t.Points {
		row := []string{strconv.Itoa(p.Number), p.Origin}
		for i := range t.Spec.Knobs {
			row = append(row, t.setting(&t.Spec.Knobs[i], i, p))
		}
		if p.Invalid != "" {
			row = append(row, "", "no", "", "no")
			row = append(row, make([]string, len(t.weighed())+2)...)
			out.Rows = append(out.Rows, append(row, p.Invalid))
			continue
		}
		row = append(row, results.FigureText(p.Score), yes(p.Feasible()), results.FigureText(p.Violation), yes(t.Best != nil && t.good(p)))
		row = append(append(row, t.aimCells(p)...), strconv.Itoa(p.Sums.Low), strconv.Itoa(p.Sums.Unsolved))
		note := ""
		if p == t.Best {
			note = "the best"
		}
		if len(p.Broken) > 0 {
			note = strings.TrimPrefix(note+"; breaks: "+strings.Join(p.Broken, ", "), "; ")
		}
		out.Rows = append(out.Rows, append(row, note))
	}
	return out
}

// Write writes the folder of the search: its tables, the case of the best in case, what
// draw adds to them (tune.html, figures), and tune.json. draw may be nil.
func (t *Tuning) Write(dir string, p Place, draw func(dir string) error) error {
	f, err := results.CreateTables(dir, "tune")
	if err != nil {
		return err
	}
	defer f.Abort() // does nothing after Finish
	for _, x := range t.Tables() {
		if err := f.Table(x.Name, x.Rows); err != nil {
			return err
		}
	}
	if t.CaseName != "" {
		if err := writeCase(filepath.Join(f.Path(), "case"), t.CaseFiles); err != nil {
			return err
		}
	}
	period := t.study.Settings.Period
	r := results.TablesRecord{Version: p.Version, Title: t.Title, Demo: p.Demo, Zone: period.Zone.String(), Period: period.String(),
		Start: stampOf(t.study, period.Start), End: stampOf(t.study, period.End), Step: float64(period.Step) / 1e9,
		Cases: []results.TablesCase{{Case: feeder.Base, Inputs: t.inputs}},
		Said: map[string]any{"method": t.Method(), "stopped": t.Stopped, "case": t.CaseName, "as good is": t.FlatText(), "built in": t.Spec.BuiltIn,
			"improves": t.Improves(), "log": filepath.Base(dir) + "-log.csv", "currency": t.study.Settings.Prices.Currency, "limits": limitsText(&t.study.Settings.Limits)}}
	if err := f.Record(r); err != nil {
		return err
	}
	if draw != nil {
		if err := draw(f.Path()); err != nil {
			return fmt.Errorf("draw %s: %w", filepath.Base(dir), err)
		}
		if err := f.Record(r); err != nil {
			return err
		}
	}
	return f.Finish()
}

// Method says how was searched.
func (t *Tuning) Method() string {
	for _, p := range t.Points {
		if p.Origin == "grid" {
			return "every candidate of the grid"
		}
	}
	return fmt.Sprintf("differential evolution DE/rand/1/bin (Storn and Price 1997; F = %g, CR = %g) on the grid of settings, then compass search (Kolda, Lewis, Torczon 2003) and profiles of one setting at a time; limits by the rules of Deb (2000)", mutationFactor, crossover)
}
