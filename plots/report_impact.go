package plots

import (
	"bytes"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"yearflow/sim/results"
)

// impactDocument is the DER impact report while it is made.
type impactDocument struct {
	*severalRuns
	impact, rvc, reverse, screens, units, list, mitigations, cautions *Ledger
	name                                                              string // of the case
}

// ImpactDocument makes the DER impact report of a folder that study.Impact wrote, from its
// tables alone, and draws its figures into figures below it. runs is the folder of the
// results folders of the base and the case, for the figures of their years; where they are
// not there the report does without.
func ImpactDocument(dir, runs string) (*Document, error) {
	s, err := readSeveral(dir, "impact")
	if err != nil {
		return nil, err
	}
	c := &impactDocument{severalRuns: s, impact: s.ledger("impact.csv", 2), rvc: s.ledger("rvc.csv", 4), reverse: s.ledger("reverse.csv", 1), screens: s.ledger("screens.csv", 2),
		units: s.ledger("units.csv", 1), list: s.ledger("mitigation-list.csv", 1), mitigations: s.ledger("mitigations.csv", 2), cautions: s.ledger("cautions.csv", 1), name: s.said("case")}
	if s.err != nil {
		return nil, s.err
	}
	d := &Document{Kind: "DER impact report", Title: s.record.Title, Subtitle: s.period(), Demo: s.record.Demo, Case: c.name}
	if d.Lead, err = c.lead(); err != nil {
		return nil, err
	}
	d.Sections = append(d.Sections, c.criteriaSection(), c.changeSection(), c.reverseSection(), c.screenSection())
	mitigations, err := c.mitigationSection()
	if err != nil {
		return nil, err
	}
	years, err := c.yearSection(runs)
	if err != nil {
		return nil, err
	}
	d.Sections = append(d.Sections, mitigations, years, c.cautionSection(), s.sources())
	return d, s.err
}

// cell is a cell of impact.csv in the unit of its row.
func (c *impactDocument) cell(row int, column string) Value {
	return unitCell(c.impact, row, column)
}

// unitCell is a cell of a table whose rows say their unit.
func unitCell(l *Ledger, row int, column string) Value {
	cell, unit, source := l.Cell(row, column), l.Cell(row, "unit"), SourceOf(l.File, column, l.Rows[row][:l.Keys]...)
	v := Rounded(cell, unit, source, -1)
	if least, ok := strings.CutPrefix(cell, "at least "); ok {
		v.Show = "at least " + Rounded(least, unit, source, -1).Show
	}
	return v
}

// resultOf is the result that a word of a table stands for.
func resultOf(word string) Result {
	switch word {
	case "pass":
		return Pass
	case "fail":
		return Fail
	}
	return NotStudied
}

// place is where and when a criterion is worst.
func (c *impactDocument) place(row int) Value {
	where, when := c.impact.Cell(row, "where"), c.impact.Cell(row, "when")
	text := where
	if when != "" {
		if text != "" {
			text += ", "
		}
		text += Number(when, "time", "").Show
	}
	return Word(text)
}

func (c *impactDocument) lead() ([]Block, error) {
	failed, fresh, bare := 0, 0, 0
	var worst []string
	for i := range c.impact.Rows {
		switch c.impact.Cell(i, "verdict") {
		case "fail":
			failed++
			if c.impact.Cell(i, "base verdict") != "fail" {
				fresh++
				worst = append(worst, c.impact.Cell(i, "criterion"))
			}
		case "no limit":
			bare++
		}
	}
	var names []string
	for i := range c.units.Rows {
		names = append(names, fmt.Sprintf("%s (%s, %s kVA at %s)", c.units.Cell(i, "unit"), c.units.Cell(i, "kind"), c.units.Value(i, "rating").Show, c.units.Cell(i, "node")))
	}
	out := []Block{Paragraph{Plain("Studied: " + strings.Join(names, ", ") + ". The base is the feeder without; every number is over the period, with the controls acting unless it says held.")}}
	judged := len(c.impact.Rows) - bare
	switch {
	case failed == 0:
		out = append(out, Finding{Text: Plain(fmt.Sprintf("All %s that have a limit are met with the units; the margins are in the table.", count(judged, "criterion", "criteria")))})
	case fresh == 0:
		out = append(out, Finding{Bad: true, Text: Plain(fmt.Sprintf("%d of %s that have a limit fail with the units; all of these fail in the base too.", failed, count(judged, "criterion", "criteria")))})
	default:
		shown := worst
		if len(shown) > 6 {
			shown = shown[:6]
		}
		more := ""
		if len(worst) > len(shown) {
			more = fmt.Sprintf(" and %d more", len(worst)-len(shown))
		}
		out = append(out, Finding{Bad: true, Text: Plain(fmt.Sprintf("%d of %s that have a limit fail with the units; %d of these pass in the base: %s%s.", failed, count(judged, "criterion", "criteria"), fresh, strings.Join(shown, "; "), more))})
	}
	if names := c.tried(); len(names) > 0 && failed > 0 {
		out = append(out, Finding{Text: Plain("Of " + count(len(names), "remedy", "remedies") + " tried: " + lower(c.remedyFinding(names)) + " They are compared below.")})
	}
	notPassed := 0
	for i := range c.screens.Rows {
		if c.screens.Cell(i, "verdict") == "fail" {
			notPassed++
		}
	}
	for i := range c.screens.Rows {
		if c.screens.Cell(i, "verdict") == "fail" {
			out = append(out, Finding{Bad: true, Text: Say(fmt.Sprintf("%d of %s not passed; the first, ", notPassed, count(len(c.screens.Rows), "screen", "screens"))+c.screens.Cell(i, "section")+": "+c.screens.Cell(i, "screen")+", {} of {} against a limit of {}.",
				c.screens.Value(i, "with DER [%]"), c.screens.Value(i, "load"), c.screens.Value(i, "limit"))})
			break
		}
	}
	st := newStyle(200)
	if p, f := c.limitFigure(st); p != nil {
		b, err := c.picture(p, f)
		if err != nil {
			return nil, err
		}
		out = append(out, b)
	}
	return append(out, Disclaimer()), nil
}

// criteriaSection shows all of impact.csv by group: what has a limit as verdicts, the rest
// as a table.
func (c *impactDocument) criteriaSection() Section {
	s := Section{Heading: "Base, with the units, and the difference"}
	var groups []string
	for _, r := range c.impact.Rows {
		if !slices.Contains(groups, r[0]) {
			groups = append(groups, r[0])
		}
	}
	for _, g := range groups {
		v := Verdicts{Caption: upper(g) + ": held against limits, with the units"}
		t := Table{Caption: upper(g) + ": base, with the units, difference", Columns: []Column{{Head: "Criterion", Words: true}, {Head: "Unit", Words: true}, {Head: "Base"}, {Head: "With the units"}, {Head: "Difference"}, {Head: "Verdict", Words: true}, {Head: "Verdict of the base", Words: true}}}
		for i, r := range c.impact.Rows {
			if r[0] != g {
				continue
			}
			word := c.impact.Cell(i, "verdict")
			if word != "no limit" {
				v.Rows = append(v.Rows, Verdict{Criterion: r[1], Value: c.cell(i, "with DER"), Limit: c.cell(i, "limit"), Margin: c.cell(i, "margin"), Source: c.impact.Cell(i, "source"), Where: c.place(i), Result: resultOf(word)})
			}
			t.Rows = append(t.Rows, []Value{Word(r[1]), Word(shownUnit(r[2])), plain(c.cell(i, "base")), plain(c.cell(i, "with DER")), plain(c.cell(i, "difference")), c.impact.Name(i, "verdict"), c.impact.Name(i, "base verdict")})
		}
		switch g {
		case "voltage":
			v.Note = Plain("Limits: " + c.said("limits") + ".")
		case "voltage, devices held":
			v.Note = Plain(upper(c.said("held")) + ".")
		case "rapid voltage change":
			v.Note = Plain(upper(c.said("rvc")) + ".")
		}
		if g == groups[0] {
			t.Note = Plain(upper(c.said("zero")) + ".")
		}
		if len(v.Rows) > 0 {
			s.Blocks = append(s.Blocks, v)
		}
		s.Blocks = append(s.Blocks, t)
	}
	return s
}

// plain is a value of a table whose unit stands in a column of its own.
func plain(v Value) Value {
	v.Unit = ""
	return v
}

// changeSection lists the places where rapid voltage changes are largest.
func (c *impactDocument) changeSection() Section {
	s := Section{Heading: "Rapid voltage change by place"}
	s.Blocks = append(s.Blocks, Paragraph{Plain("How it is found: " + c.said("rvc") + ".")})
	var pairs [][2]string
	for _, r := range c.rvc.Rows {
		if p := [2]string{r[0], r[1]}; !slices.Contains(pairs, p) {
			pairs = append(pairs, p)
		}
	}
	const most = 6
	for _, p := range pairs {
		var rows []int
		failed := 0
		for i, r := range c.rvc.Rows {
			if r[0] == p[0] && r[1] == p[1] {
				rows = append(rows, i)
				if c.rvc.Cell(i, "verdict") == "fail" {
					failed++
				}
			}
		}
		size := func(i int) float64 { return math.Abs(numberIn(c.rvc.Cell(i, "with DER [%]"))) }
		slices.SortStableFunc(rows, func(a, b int) int {
			switch x, y := size(a), size(b); {
			case x > y:
				return -1
			case x < y:
				return 1
			}
			return 0
		})
		all := len(rows)
		rows = rows[:min(most, len(rows))]
		t := c.rvc.Table(fmt.Sprintf("Sudden %s of %s: the %d places that jump most", p[1], p[0], len(rows)), []string{"node", "phase", "nominal", "base [%]", "with DER [%]", "difference", "when", "limit", "verdict", "margin"}, rows, "node", "phase", "when", "verdict")
		for k := range t.Rows {
			t.Rows[k][6] = Number(c.rvc.Cell(rows[k], "when"), "time", SourceOf(c.rvc.File, "when", c.rvc.Rows[rows[k]][:4]...))
		}
		t.Note = Plain(fmt.Sprintf("%d of %s exceed their limit; the others are in rvc.csv. Limits: %s.", failed, count(all, "node.phase", "node.phases"), c.rvc.Cell(rows[0], "source")))
		s.Blocks = append(s.Blocks, t)
	}
	return s
}

func (c *impactDocument) reverseSection() Section {
	t := c.reverse.Table("Hours of reverse power at the source and at every regulator bank", []string{"place", "mode", "base [h]", "with DER [h]", "difference", "base most [kW]", "with DER most [kW]"}, nil, "place", "mode")
	t.Note = Plain("Settled intervals; the sum of the phases at the source's side of the bank.")
	var notes []Text
	for i := range c.reverse.Rows {
		notes = append(notes, Plain(upper(c.reverse.Cell(i, "place"))+": "+c.reverse.Cell(i, "note")+"."))
	}
	return Section{Heading: "Reverse power", Blocks: []Block{t, List{notes}}}
}

func (c *impactDocument) screenSection() Section {
	s := Section{Heading: "Screens"}
	if len(c.screens.Rows) == 0 {
		s.Blocks = []Block{Paragraph{Plain("No part of the feeder holds a unit of the case.")}}
		return s
	}
	t := c.screens.Table("Ratings of all units behind a place against the load of the base there", []string{"screen", "section", "with DER [kW]", "load", "when", "with DER [%]", "limit", "verdict"}, nil, "screen", "section", "when", "verdict")
	for k := range t.Rows {
		t.Rows[k][4] = Number(c.screens.Cell(k, "when"), "time", SourceOf(c.screens.File, "when", c.screens.Rows[k][:2]...))
	}
	t.Note = Plain("The rating of all units there is held against a share of the load; the minimum daytime load is that of 10:00 to 16:00, in which panels without tracking deliver. A screen that is not passed asks for a study such as this one; it is no verdict on the voltage. The places are the whole feeder, regulator banks and closed switches: the tables know no reclosers, which bound a line section. Sources: " + c.screens.Cell(0, "source") + "; " + c.screens.Cell(len(c.screens.Rows)-1, "source") + ".")
	s.Blocks = []Block{t}
	return s
}

// mitigationSection compares the remedies.
func (c *impactDocument) mitigationSection() (Section, error) {
	s := Section{Heading: "Remedies, each run over the period by itself"}
	t := c.list.Table("Remedies and how many criteria fail with them", []string{"mitigation", "criteria failed", "mended", "newly failed"}, nil, "mitigation")
	var what Facts
	for i := range c.list.Rows {
		text := c.list.Cell(i, "what")
		if tried := c.list.Cell(i, "tried"); tried != "yes" {
			text += "; not tried: " + strings.TrimPrefix(tried, "no: ")
		}
		what.Rows = append(what.Rows, Fact{upper(c.list.Cell(i, "mitigation")), Plain(text)})
	}
	t.Note = Plain("Mended: fails without the remedy and passes with it. Newly failed: the other way round. Counted are the criteria of mitigations.csv, in which the loss and return of other units than the case's are left out.")
	s.Blocks = append(s.Blocks, what, t)
	if p, f := c.remedyFigure(newStyle(200)); p != nil {
		b, err := c.picture(p, f)
		if err != nil {
			return s, err
		}
		s.Blocks = append(s.Blocks, b)
	}
	for _, x := range c.remedyTables() {
		s.Blocks = append(s.Blocks, x)
	}
	return s, nil
}

// remedyColumns is how many remedies stand side by side in a printed table.
const remedyColumns = 5

// tried names the remedies that were run.
func (c *impactDocument) tried() (names []string) {
	for i := range c.list.Rows {
		if c.list.Cell(i, "tried") == "yes" {
			names = append(names, c.list.Cell(i, "mitigation"))
		}
	}
	return names
}

// remedyTables hold the tried remedies side by side: the criteria that one of them changes,
// with the value of each and who fails.
func (c *impactDocument) remedyTables() (out []Table) {
	names := c.tried()
	if len(names) == 0 {
		return nil
	}
	parts := (len(names) + remedyColumns - 1) / remedyColumns
	each := (len(names) + parts - 1) / parts
	for at := 0; at < len(names); at += each {
		out = append(out, c.remedyTable(names[at:min(at+each, len(names))]))
	}
	out[len(out)-1].Note = Plain("0 is the case without a remedy; the last column names by number who fails. Criteria that none of a table's remedies changes are left out, and the operations of single devices that pass with all; they and all margins are in mitigations.csv.")
	return out
}

// remedyTable holds a few remedies in the order of impact.csv.
func (c *impactDocument) remedyTable(names []string) Table {
	t := Table{Caption: "With " + strings.Join(names, ", "), Columns: []Column{{Head: "Criterion", Words: true}, {Head: "Unit", Words: true}, {Head: "Limit"}, {Head: "0: no remedy"}}}
	for i, n := range names {
		t.Columns = append(t.Columns, Column{Head: fmt.Sprintf("%d: %s", i+1, n)})
	}
	t.Columns = append(t.Columns, Column{Head: "Fail", Words: true})
	for i, r := range c.impact.Rows {
		row, fails, changed := make([]Value, 4, len(t.Columns)), []string(nil), false
		if c.impact.Cell(i, "verdict") == "fail" {
			fails = append(fails, "0")
		}
		for j, n := range names {
			k := c.mitigations.Row(n, r[1])
			if k < 0 {
				row = append(row, Word("–"))
				continue
			}
			row[0], row[1], row[2], row[3] = Word(r[1]), Word(shownUnit(r[2])), plain(unitCell(c.mitigations, k, "limit")), plain(unitCell(c.mitigations, k, "with DER"))
			row = append(row, plain(unitCell(c.mitigations, k, "mitigated")))
			if d := numberIn(c.mitigations.Cell(k, "difference")); d != 0 && !math.IsNaN(d) {
				changed = true
			}
			if c.mitigations.Cell(k, "verdict") == "fail" {
				fails = append(fails, fmt.Sprint(j+1))
			}
		}
		if !changed || len(fails) == 0 && strings.HasPrefix(r[1], "operations of ") {
			continue
		}
		if len(fails) == 0 {
			fails = []string{"–"}
		}
		t.Rows = append(t.Rows, append(row, Word(strings.Join(fails, " "))))
	}
	return t
}

// yearSection shows the years of the base and of the case, figure by figure, so that the
// two stand one below the other.
func (c *impactDocument) yearSection(runs string) (Section, error) {
	s := Section{Heading: "The year of the base and of the case"}
	only := []string{"voltage-highest-year", "voltage-distance", "power"}
	pictures := make([][]Block, len(only))
	for _, r := range c.record.Cases {
		f, err := results.ReadFolder(os.DirFS(filepath.Join(runs, r.Folder)))
		if err != nil {
			s.Blocks = append(s.Blocks, Paragraph{Plain("The results folder of case " + r.Case + " is not there, so that the figures of its year are left out; \"yearflow report\" draws them.")})
			continue
		}
		figures, err := DrawFolder(f, func(string) (io.WriteCloser, error) { return noFile{}, nil }, Options{Only: only})
		if err != nil {
			return s, err
		}
		for _, g := range figures {
			name := r.Folder + "-" + g.Name
			if err := os.MkdirAll(filepath.Join(c.dir, "figures"), 0o755); err != nil {
				return s, err
			}
			if err := os.WriteFile(filepath.Join(c.dir, "figures", name), g.PNG, 0o644); err != nil {
				return s, err
			}
			k := slices.IndexFunc(only, func(o string) bool { return o == strings.TrimSuffix(g.Name, ".png") })
			if k < 0 {
				k = len(only) - 1
			}
			pictures[k] = append(pictures[k], Picture{PNG: g.PNG, Title: g.Title + ", case " + r.Case, Alt: g.Alt, Caption: Plain(g.Finding), File: "figures/" + name, Inside: true})
		}
	}
	for _, p := range pictures {
		s.Blocks = append(s.Blocks, p...)
	}
	return s, nil
}

// noFile takes what nobody wants as a file.
type noFile struct{ bytes.Buffer }

func (noFile) Write(p []byte) (int, error) { return len(p), nil }
func (noFile) Close() error                { return nil }

func (c *impactDocument) cautionSection() Section {
	var items []Text
	for i := range c.cautions.Rows {
		items = append(items, Plain(upper(c.cautions.Cell(i, "caution"))+"."))
	}
	return Section{Heading: "Cautions", Blocks: []Block{Caution{Title: "Of this report", Items: items}}}
}

// lower is a sentence that goes on after a colon.
func lower(s string) string {
	if s == "" {
		return s
	}
	return strings.ToLower(s[:1]) + s[1:]
}

// upper begins a sentence with a capital.
func upper(s string) string {
	if s == "" {
		return s
	}
	return strings.ToUpper(s[:1]) + s[1:]
}
