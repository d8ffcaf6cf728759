package plots

import (
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"time"

	"yearflow/sim/results"
)

// severalRuns is a folder of tables that were made from several runs, and the document
// that is made of it.
type severalRuns struct {
	dir     string
	record  *results.TablesRecord
	ledgers map[string]*Ledger
	err     error
}

func readSeveral(dir, kind string) (*severalRuns, error) {
	r, err := results.ReadTables(os.DirFS(dir), kind)
	if err != nil {
		return nil, err
	}
	return &severalRuns{dir: dir, record: r, ledgers: map[string]*Ledger{}}, nil
}

// ledger reads a table of the folder once; the first error is kept, and an empty table
// stands for one that does not read.
func (s *severalRuns) ledger(file string, keys int) *Ledger {
	if l := s.ledgers[file]; l != nil {
		return l
	}
	l, err := ReadLedger(os.DirFS(s.dir), file, keys)
	if err != nil {
		if s.err == nil {
			s.err = fmt.Errorf("%s: %w", file, err)
		}
		l = &Ledger{File: file}
	}
	s.ledgers[file] = l
	return l
}

// said is a text that the record holds besides the tables.
func (s *severalRuns) said(key string) string {
	text, _ := s.record.Said[key].(string)
	return text
}

// sources says which runs, by hash, the document was made from.
func (s *severalRuns) sources() Section {
	sec := Section{Heading: "Runs, inputs and tables by hash"}
	runs := Table{Caption: "Results folders that the tables were made from", Columns: []Column{{Head: "Case", Words: true}, {Head: "Folder", Words: true}, {Head: "SHA-256 of its run.json", Words: true}},
		Note: Plain("run.json names every input and every result file of its run by hash. Version " + s.record.Version + " of yearflow made the tables; the same inputs and version give the same bytes.")}
	inputs := map[string]string{}
	for _, c := range s.record.Cases {
		runs.Rows = append(runs.Rows, []Value{Word(c.Case), Word(c.Folder), Word(c.Run)})
		for f, h := range c.Inputs {
			inputs[f] = h
		}
	}
	sec.Blocks = append(sec.Blocks, runs, hashes("Inputs, in the study's folder", inputs))
	tables := map[string]string{}
	for f, h := range s.record.Files {
		if strings.HasSuffix(f, ".csv") {
			tables[f] = h
		}
	}
	sec.Blocks = append(sec.Blocks, hashes("Tables of this document", tables))
	return sec
}

// picture draws a page into the figures folder and returns its block.
func (s *severalRuns) picture(p *page, f Figure) (Block, error) {
	dir := filepath.Join(s.dir, "figures")
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return nil, err
	}
	var b strings.Builder
	if err := p.writeTo(&b); err != nil {
		return nil, err
	}
	data := []byte(b.String())
	if err := os.WriteFile(filepath.Join(dir, f.Name), data, 0o644); err != nil {
		return nil, err
	}
	return Picture{PNG: data, Title: f.Title, Alt: f.Alt, Caption: Plain(f.Finding), File: "figures/" + f.Name, Inside: true}, nil
}

// period says in words when and in which steps the runs were.
func (s *severalRuns) period() string {
	start, err1 := time.Parse(time.RFC3339, s.record.Start)
	end, err2 := time.Parse(time.RFC3339, s.record.End)
	zone, err3 := time.LoadLocation(s.record.Zone)
	if err1 != nil || err2 != nil || err3 != nil {
		return s.record.Period
	}
	of := span{start: start.In(zone), end: end.In(zone)}
	return of.spoken() + " · steps of " + stepWords(time.Duration(s.record.Step*float64(time.Second))) + " · " + s.record.Zone
}

func (s *severalRuns) foot() foot {
	f := foot{lines: [2]string{s.record.Title, s.period()}}
	if s.record.Demo {
		f.tag = "invented demonstration study"
	}
	return f
}

// compareDocument is the settings evaluation while it is made.
type compareDocument struct {
	*severalRuns
	compare, settings, ranking, weights, score, against, sheets, cautions, left *Ledger
	names                                                                       []string // of the cases, the base first
}

// CompareDocument makes the settings evaluation of a folder that study.Comparison
// wrote, from its tables alone, and draws its figure into figures below it.
func CompareDocument(dir string) (*Document, error) {
	s, err := readSeveral(dir, "compare")
	if err != nil {
		return nil, err
	}
	c := &compareDocument{severalRuns: s,
		compare: s.ledger("compare.csv", 2), settings: s.ledger("settings.csv", 3), ranking: s.ledger("ranking.csv", 1), weights: s.ledger("weights.csv", 1),
		score: s.ledger("score.csv", 2), against: s.ledger("against-base.csv", 2), sheets: s.ledger("sheets.csv", 2), cautions: s.ledger("cautions.csv", 1), left: s.ledger("left-out.csv", 1)}
	if s.err != nil {
		return nil, s.err
	}
	if len(c.compare.Header) < 4 {
		return nil, fmt.Errorf("compare.csv has no case: the folder is of another version; run compare again")
	}
	c.names = c.compare.Header[3:]
	d := &Document{Kind: "Settings evaluation", Title: s.record.Title, Subtitle: s.period(), Demo: s.record.Demo,
		Case: "base and " + count(len(c.names)-1, "case", "cases")}
	if d.Lead, err = c.lead(); err != nil {
		return nil, err
	}
	d.Sections = append(d.Sections, c.rankingSection(), c.againstSection(), c.settingsSection())
	for _, g := range [...]struct{ group, heading string }{{"voltage", "Voltage"}, {"operations", "Operations"}, {"energy", "Energy, losses and demand"}, {"money", "Money"}, {"run", "Steps and settling"}} {
		d.Sections = append(d.Sections, c.groupSection(g.group, g.heading))
	}
	d.Sections = append(d.Sections, c.sheetSections()...)
	d.Sections = append(d.Sections, c.cautionSection(), s.sources())
	return d, s.err
}

// at is a cell of compare.csv as the document shows it.
func (c *compareDocument) at(quantity, name string) Value {
	for i, r := range c.compare.Rows {
		if r[1] == quantity {
			return c.cell(i, name)
		}
	}
	return Word("–")
}

func (c *compareDocument) cell(row int, name string) Value {
	r := c.compare.Rows[row]
	return Rounded(c.compare.Cell(row, name), r[2], SourceOf(c.compare.File, name, r[0], r[1]), -1)
}

func (c *compareDocument) number(quantity, name string) float64 {
	for i, r := range c.compare.Rows {
		if r[1] == quantity {
			return numberIn(c.compare.Cell(i, name))
		}
	}
	return numberIn("")
}

func (c *compareDocument) lead() ([]Block, error) {
	var out []Block
	if len(c.names) == 1 {
		out = append(out, Finding{Text: Plain("There is no case: only the base was run. A case is a folder below cases with tables that change those of the feeder."), Bad: true})
	}
	for i := range c.ranking.Rows {
		if c.ranking.Cell(i, "rank") != "1" {
			continue
		}
		name := c.ranking.Cell(i, "case")
		text := "Ranked first is {}, with a score of {}: "
		if name == "base" {
			text = "Ranked first is the {} as it stands, with a score of {}: "
		}
		out = append(out, Finding{Text: Say(text+"{} customer-hours outside range A, {} operations, losses of {}.",
			c.ranking.Name(i, "case"), c.ranking.Value(i, "score"), bare(c.at("customer-hours outside A", name)), c.at("operations", name), c.at("losses energy", name))})
	}
	var un []string
	for i := range c.ranking.Rows {
		if c.ranking.Cell(i, "undominated") == "yes" {
			un = append(un, c.ranking.Cell(i, "case"))
		}
	}
	if len(un) > 0 && len(c.names) > 1 {
		out = append(out, Paragraph{Plain("Undominated (no other case is as good in everything that has a weight, and better in something): " + strings.Join(un, ", ") + ". Which of them to take is a matter of the weights, which are the reader's.")})
	}
	for i := range c.ranking.Rows {
		if c.ranking.Cell(i, "rank") == "" {
			out = append(out, Finding{Text: Plain("Case " + c.ranking.Cell(i, "case") + " is " + c.ranking.Cell(i, "note") + "."), Bad: true})
		}
	}
	const outer = "customer-hours outside B"
	for _, name := range c.names {
		if now, base := c.number(outer, name), c.number(outer, "base"); name != "base" && now > base {
			out = append(out, Finding{Text: Say("Case "+name+" puts customers outside range B for {} (the base for {}): it is not for the field as it stands, whatever its score.", c.at(outer, name), c.at(outer, "base")), Bad: true})
		}
	}
	if t := c.said("unpriced"); t != "" {
		out = append(out, Paragraph{Plain("The study gives no price of " + t + " in [prices], so the tables hold no money of it.")})
	}
	p, f := c.bars(newStyle(200))
	if p != nil {
		b, err := c.picture(p, f)
		if err != nil {
			return nil, err
		}
		out = append(out, b)
	}
	for i := range c.left.Rows {
		out = append(out, Paragraph{Plain("Left out: case " + c.left.Cell(i, "case") + ": " + c.left.Cell(i, "why") + ".")})
	}
	return append(out, Disclaimer()), nil
}

// rankingSection shows the ranking, the weights, and what every score is made of.
func (c *compareDocument) rankingSection() Section {
	t := c.ranking.Table("Ranking", []string{"case", "rank", "score", "score less that of the base", "undominated", "note"}, nil, "undominated", "note")
	t.Note = Plain("The score is the sum of weight times quantity over the weights below; less is better.")
	w := c.weights.Table("Weights", nil, nil, "unit", "source")
	parts := Table{Caption: "What the scores are made of", Columns: []Column{{Head: "Quantity", Words: true}}}
	for _, n := range c.names {
		parts.Columns = append(parts.Columns, Column{Head: n})
	}
	for i := range c.weights.Rows {
		q := c.weights.Cell(i, "quantity")
		row := []Value{Word(q)}
		for _, n := range c.names {
			row = append(row, c.score.Value(c.score.Row(n, q), "part of score"))
		}
		parts.Rows = append(parts.Rows, row)
	}
	return Section{Heading: "Ranking", Blocks: []Block{t, w, parts}}
}

func (c *compareDocument) againstSection() Section {
	s := Section{Heading: "What each case buys and costs against the base"}
	for _, n := range c.names[1:] {
		t := Table{Caption: "Case " + n, Columns: []Column{{Head: "Quantity", Words: true}, {Head: "Unit", Words: true}, {Head: "Base"}, {Head: n}, {Head: "Change"}, {Head: "Change", Unit: "%"}, {Head: "", Words: true}}}
		buys, costs := 0, 0
		for i, r := range c.against.Rows {
			if r[0] != n {
				continue
			}
			t.Rows = append(t.Rows, []Value{Word(r[1]), Word(shownUnit(r[2])), c.against.Value(i, "base"), c.against.Value(i, "value"), c.against.Value(i, "change"), c.against.Value(i, "change [%]"), c.against.Name(i, "verdict")})
			switch c.against.Cell(i, "verdict") {
			case "buys":
				buys++
			case "costs":
				costs++
			}
		}
		switch {
		case buys+costs == 0:
			s.Blocks = append(s.Blocks, Paragraph{Plain("Case " + n + " differs from the base in none of these.")})
		default:
			s.Blocks = append(s.Blocks, Paragraph{Plain(fmt.Sprintf("Case %s is better than the base in %s and worse in %s.", n, quantities(buys), quantities(costs)))})
		}
		s.Blocks = append(s.Blocks, t)
	}
	if len(c.names) == 1 {
		s.Blocks = append(s.Blocks, Paragraph{Plain("There is no case.")})
	}
	return s
}

func quantities(n int) string {
	if n == 0 {
		return "no quantity"
	}
	return count(n, "quantity", "quantities")
}

func (c *compareDocument) settingsSection() Section {
	s := Section{Heading: "What differs in the tables"}
	if len(c.settings.Rows) == 0 {
		s.Blocks = []Block{Paragraph{Plain("Nothing: no case changes a cell of a table or a key of study.toml.")}}
		return s
	}
	t := Table{Caption: "Cells in which a case differs from the base, in the units of the program", Columns: []Column{{Head: "Table", Words: true}, {Head: "Row", Words: true}, {Head: "Column", Words: true}}}
	for _, n := range c.names {
		t.Columns = append(t.Columns, Column{Head: n, Words: true})
	}
	added := 0
	for i, r := range c.settings.Rows {
		// The cells of a row that is only there in a case follow its "(row)".
		if i > 0 && r[2] != "(row)" && c.settings.Rows[i-1][1] == r[1] && c.settings.Rows[i-1][0] == r[0] && r[4] == "" && c.newRow(r[0], r[1]) {
			added++
			continue
		}
		column := r[2]
		if r[3] != "" {
			column += " [" + r[3] + "]"
		}
		row := []Value{Word(r[0]), Word(r[1]), Word(column)}
		for k, n := range c.names {
			v := c.settings.Name(i, n)
			if k > 0 && r[4+k] == r[4] {
				v = Word("·")
			}
			row = append(row, v)
		}
		t.Rows = append(t.Rows, row)
	}
	t.Note = Plain("A dot stands for the base's value; (row) for a row that is only there in one of them.")
	if added > 0 {
		t.Note = append(t.Note, Word(" The "+count(added, "cell", "cells")+" of new rows: settings.csv."))
	}
	s.Blocks = []Block{t}
	return s
}

// newRow tells whether a row of a table is in a case alone.
func (c *compareDocument) newRow(table, key string) bool {
	i := c.settings.Row(table, key, "(row)")
	return i >= 0 && c.settings.Rows[i][4] == ""
}

func (c *compareDocument) groupSection(group, heading string) Section {
	s := Section{Heading: heading}
	t := Table{Caption: heading + " over the period, by case", Columns: []Column{{Head: "Quantity", Words: true}, {Head: "Unit", Words: true}}}
	for _, n := range c.names {
		t.Columns = append(t.Columns, Column{Head: n})
	}
	var extremes []string // quantities that have a place or a time of their own
	for i, r := range c.compare.Rows {
		if r[0] != group {
			continue
		}
		if of, is := c.extreme(r[1]); is {
			if !slices.Contains(extremes, of) {
				extremes = append(extremes, of)
			}
			continue
		}
		row := []Value{Word(r[1]), Word(shownUnit(r[2]))}
		for _, n := range c.names {
			row = append(row, c.cell(i, n))
		}
		t.Rows = append(t.Rows, row)
	}
	switch group {
	case "voltage":
		t.Note = Plain("Settled intervals of solved steps; settling hours stand beside them. Limits: " + c.said("limits") + ".")
	case "operations":
		t.Note = Plain("Expected life in years at this pace: " + c.said("life") + ".")
	case "money":
		t.Note = Plain("Money of the period at the prices of the base, in " + c.said("currency") + ". Demand is charged for the highest real power of each month. The sum leaves out the energy that is sold on.")
	case "energy":
		t.Note = Plain("The power factor of the period is that of kWh and kvarh, from the powers at the ends of the rows of steps.csv.")
	}
	if len(t.Rows) == 0 {
		s.Blocks = []Block{Paragraph{Plain("There are no prices in study.toml, so there is no money to tell: [prices] energy, demand and operation.")}}
		return s
	}
	s.Blocks = []Block{t}
	for _, q := range extremes {
		s.Blocks = append(s.Blocks, c.extremes(q))
	}
	return s
}

// extreme tells whether a row of compare.csv is the place or the time of another, and of
// which. Side by side, places and times of many cases are wider than a page.
func (c *compareDocument) extreme(quantity string) (of string, is bool) {
	for _, end := range [...]string{" place", " time"} {
		if of, is := strings.CutSuffix(quantity, end); is && c.at(of, c.names[0]).Source != "" {
			return of, true
		}
	}
	return "", false
}

// extremes is the table of a quantity with its place and time, a case a row.
func (c *compareDocument) extremes(quantity string) Table {
	unit := ""
	for _, r := range c.compare.Rows {
		if r[1] == quantity {
			unit = shownUnit(r[2])
		}
	}
	t := Table{Caption: upper(quantity) + " of each case", Columns: []Column{{Head: "Case", Words: true}, {Head: quantity, Unit: unit}}}
	ends := []string{}
	for _, end := range [...]string{"place", "time"} {
		if c.at(quantity+" "+end, c.names[0]).Source != "" {
			ends = append(ends, end)
			t.Columns = append(t.Columns, Column{Head: end, Words: true})
		}
	}
	for _, n := range c.names {
		row := []Value{Word(n), c.at(quantity, n)}
		for _, end := range ends {
			row = append(row, c.at(quantity+" "+end, n))
		}
		t.Rows = append(t.Rows, row)
	}
	return t
}

func (c *compareDocument) cautionSection() Section {
	s := Section{Heading: "Cautions"}
	for _, n := range append([]string{""}, c.names...) {
		title := "Of all cases"
		if n != "" {
			title = "Case " + n
		}
		var items []Text
		for i, r := range c.cautions.Rows {
			if r[0] == n {
				items = append(items, Plain(c.cautions.Cell(i, "caution")))
			}
		}
		if items != nil {
			s.Blocks = append(s.Blocks, Caution{Title: title, Items: items})
		}
	}
	return s
}

// numberIn reads a cell; NaN where it is none.
func numberIn(cell string) float64 {
	x, err := strconv.ParseFloat(cell, 64)
	if err != nil {
		return nan
	}
	return x
}
