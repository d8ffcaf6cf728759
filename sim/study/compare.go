package study

import (
	"fmt"
	"maps"
	"path/filepath"
	"slices"
	"strings"
	"time"

	"yearflow/sim/feeder"
	"yearflow/sim/results"
	"yearflow/sim/tables"
)

// Comparison is the settings evaluation: the base and its cases side by side. The first
// of Cases is the base.
type Comparison struct {
	Title      string
	Currency   string
	Cases      []*Case
	LeftOut    []LeftOut
	Weights    []Weight
	Life       Life
	Quantities []Quantity
	Settings   []Setting
	Ranking    []Ranked
	Sheets     []Sheet
	Cautions   []Caution
	Unpriced   []string // what [prices] does not say, so that no money is told of it
}

// Quantity is a row of compare.csv: one cell for each case, as it is written; blank
// where a case has none.
type Quantity struct {
	Group, Name, Unit string
	Cells             []string
}

// Setting is a cell in which cases differ from the base.
type Setting struct {
	feeder.Difference          // of the first case that differs; Other is not used
	Cells             []string // by case, the base first
}

// Caution is what a reader must know before trusting a case; Case is blank for all.
type Caution struct{ Case, Text string }

// Weight says how much a unit of a quantity counts in the score. A quantity of which
// more is better has a negative weight.
type Weight struct {
	Quantity, Unit string
	Weight         float64
	Source         string // where the number comes from
}

// Life is how many operations a device is expected to make before its contacts (of a
// capacitor: its switch) are renewed.
type Life struct{ TapChanger, LoadTapChanger, Capacitor float64 }

// lifeSource says where the defaults of Life come from.
const lifeSource = "line regulator 200,000 (contact replacement after 100,000 to 400,000, depending on the current), load tap changer 50,000 " +
	"(the type test at rated current of IEC 60214-1, IEEE C57.131), capacitor switch 20,000 (vacuum 20,000 to 50,000; oil about 5,000): " +
	"common practice, recalled from memory; [compare] life = { \"tap changer\" = …, \"load tap changer\" = …, capacitor = … } replaces them"

func defaultLife() Life { return Life{TapChanger: 200_000, LoadTapChanger: 50_000, Capacitor: 20_000} }

// Compare makes the comparison of cases that have been run, the base first. The error
// is a tables.Faults where [compare] of study.toml is wrong.
func Compare(cases []*Case, left []LeftOut) (*Comparison, error) {
	base := cases[0].Study
	set := &base.Settings
	c := &Comparison{Title: base.Title, Currency: set.Prices.Currency, Cases: cases, LeftOut: left, Life: defaultLife()}
	var faults tables.Faults
	c.life(base, &faults)
	c.Unpriced = unpriced(&set.Prices)
	c.quantities()
	c.weights(base, &faults)
	if err := faults.Err(); err != nil {
		return nil, err
	}
	c.settings()
	c.rank()
	c.sheets()
	c.cautions()
	return c, nil
}

// unpriced names what has no price.
func unpriced(p *feeder.Prices) (out []string) {
	if feeder.Unknown(p.Energy) && p.EnergyProfile == "" {
		out = append(out, "energy")
	}
	if feeder.Unknown(p.Demand) {
		out = append(out, "demand")
	}
	if feeder.Unknown(p.Operation) {
		out = append(out, "operation")
	}
	return out
}

// compareKeys are the keys of [compare].
func compareKeys() []string { return []string{"weights", "life"} }

// life reads [compare] life and refuses keys that nobody knows.
func (c *Comparison) life(st *feeder.Study, faults *tables.Faults) {
	for _, key := range slices.Sorted(maps.Keys(st.Compare)) {
		if !slices.Contains(compareKeys(), key) {
			faults.Add(st.Place("compare."+key), "[compare] knows no key %q%s", key, tables.Hint(key, compareKeys()))
		}
	}
	of := map[string]*float64{"tap changer": &c.Life.TapChanger, "load tap changer": &c.Life.LoadTapChanger, "capacitor": &c.Life.Capacitor}
	for _, e := range numbersOf(st, "compare", "life", faults) {
		to, ok := of[e.name]
		switch {
		case !ok:
			faults.Add(e.at, "compare.life knows no kind of device %q%s", e.name, tables.Hint(e.name, slices.Sorted(maps.Keys(of))))
		case !(e.value > 0):
			faults.Add(e.at, "compare.life of a %s: want a number of operations above 0, got %v", e.name, e.value)
		default:
			*to = e.value
		}
	}
}

// named is one entry of a table of numbers in study.toml.
type named struct {
	name  string
	value float64
	at    tables.Pos
}

// numbersOf reads a table of numbers such as weights = { "operations" = 0.5 }, by name.
func numbersOf(st *feeder.Study, table, key string, faults *tables.Faults) (out []named) {
	v, ok := st.Compare[key]
	if !ok {
		return nil
	}
	at := st.Place(table + "." + key)
	entries, ok := v.(map[string]any)
	if !ok {
		faults.Add(at, "%s.%s: want a table of numbers such as { \"operations\" = 0.5 }, got %v", table, key, v)
		return nil
	}
	for _, name := range slices.Sorted(maps.Keys(entries)) {
		n := named{name: name, at: at}
		switch x := entries[name].(type) {
		case float64:
			n.value = x
		case int64:
			n.value = float64(x)
		default:
			faults.Add(at, "%s.%s: want a number for %q, got %v", table, key, name, x)
			continue
		}
		if n.value-n.value != 0 {
			faults.Add(at, "%s.%s: want a finite number for %q, got %v", table, key, name, n.value)
			continue
		}
		out = append(out, n)
	}
	return out
}

// weights reads [compare] weights; left out, the defaults.
func (c *Comparison) weights(st *feeder.Study, faults *tables.Faults) {
	if _, own := st.Compare["weights"]; !own {
		c.Weights = c.defaultWeights(&st.Settings.Prices)
		return
	}
	for _, e := range numbersOf(st, "compare", "weights", faults) {
		q := c.Quantity(e.name)
		if q == nil || !q.numeric() {
			faults.Add(e.at, "compare.weights: there is no quantity %q with a number%s", e.name, tables.Hint(e.name, c.numericNames()))
			continue
		}
		if e.value != 0 {
			c.Weights = append(c.Weights, Weight{q.Name, q.Unit, e.value, "[compare] weights of study.toml"})
		}
	}
	if len(c.Weights) == 0 && len(*faults) == 0 {
		faults.Add(st.Place("compare.weights"), "compare.weights: nothing has a weight other than zero: name a quantity, such as { \"customer-hours outside A\" = 1.0 }")
	}
}

// defaultWeights are a price for each of five quantities: those of [prices] where it has
// them, else plain numbers of our choice that say so.
func (c *Comparison) defaultWeights(p *feeder.Prices) []Weight {
	const choice = "default of the program: a plain choice without a source, to be replaced in [compare] weights"
	priced := func(quantity, unit string, price, instead float64, source string) Weight {
		if feeder.Unknown(price) {
			return Weight{quantity, unit, instead, choice}
		}
		return Weight{quantity, unit, price, source}
	}
	return []Weight{
		{"customer-hours outside A", "h", 1, choice},
		{"customer-hours outside B", "h", 10, choice},
		priced("losses energy", "kWh", p.Energy, 0.1, "[prices] energy of study.toml"),
		priced("operations", "1", p.Operation, 0.5, "[prices] operation of study.toml"),
		priced("sum of monthly peaks", "kW", p.Demand, 8, "[prices] demand of study.toml"),
	}
}

// Quantity returns the row of that name, or nil.
func (c *Comparison) Quantity(name string) *Quantity {
	for i := range c.Quantities {
		if c.Quantities[i].Name == name {
			return &c.Quantities[i]
		}
	}
	return nil
}

func (c *Comparison) numericNames() (out []string) {
	for i := range c.Quantities {
		if c.Quantities[i].numeric() {
			out = append(out, c.Quantities[i].Name)
		}
	}
	return out
}

// numeric tells whether the row holds numbers and no places or times.
func (q *Quantity) numeric() bool {
	switch q.Unit {
	case "time", "node.phase", "device.phase", "element.phase", "node":
		return false
	}
	return true
}

// settings lists the cells in which any case differs from the base, in the order of the
// tables.
func (c *Comparison) settings() {
	index := map[string]int{}
	for k, x := range c.Cases[1:] {
		for _, d := range feeder.Differences(c.Cases[0].Study, x.Study) {
			id := d.Table + "\x00" + d.Key + "\x00" + d.Column
			i, known := index[id]
			if !known {
				i = len(c.Settings)
				index[id] = i
				s := Setting{Difference: d, Cells: make([]string, len(c.Cases))}
				for j := range s.Cells {
					s.Cells[j] = d.Base // a case that does not differ has what the base has
				}
				c.Settings = append(c.Settings, s)
			}
			c.Settings[i].Cells[k+1] = d.Other
		}
	}
	order := tableOrder()
	slices.SortStableFunc(c.Settings, func(a, b Setting) int { return order[a.Table] - order[b.Table] })
}

// tableOrder puts the settings sheets first: they are what is compared.
func tableOrder() map[string]int {
	out := map[string]int{}
	for i, t := range []string{"regulator-settings", "capacitor-settings", "regulators", "capacitors"} {
		out[t] = i - 10
	}
	return out
}

// Tables returns the files of the document by name, in the order of reading; the first
// row of each is its header.
func (c *Comparison) Tables() []NamedTable {
	names := make([]string, len(c.Cases))
	for i, x := range c.Cases {
		names[i] = x.Name
	}
	compare := NamedTable{Name: "compare.csv", Rows: [][]string{append([]string{"group", "quantity", "unit"}, names...)}}
	for _, q := range c.Quantities {
		compare.Rows = append(compare.Rows, append([]string{q.Group, q.Name, q.Unit}, q.Cells...))
	}
	settings := NamedTable{Name: "settings.csv", Rows: [][]string{append([]string{"table", "row", "column", "unit"}, names...)}}
	for _, s := range c.Settings {
		settings.Rows = append(settings.Rows, append([]string{s.Table, s.Key, s.Column, s.Unit}, s.Cells...))
	}
	out := append([]NamedTable{compare, settings}, c.rankTables()...)
	sheets := NamedTable{Name: "sheets.csv", Rows: [][]string{{"case", "file", "recommended"}}}
	for _, s := range c.Sheets {
		recommended := "no"
		if s.Recommended {
			recommended = "yes"
		}
		sheets.Rows = append(sheets.Rows, []string{s.Case, s.file(), recommended})
	}
	out = append(out, sheets)
	for _, s := range c.Sheets {
		out = append(out, s.table())
	}
	cautions := NamedTable{Name: "cautions.csv", Rows: [][]string{{"case", "caution"}}}
	for _, x := range c.Cautions {
		cautions.Rows = append(cautions.Rows, []string{x.Case, x.Text})
	}
	left := NamedTable{Name: "left-out.csv", Rows: [][]string{{"case", "why"}}}
	for _, x := range c.LeftOut {
		left.Rows = append(left.Rows, []string{x.Case, x.Why})
	}
	return append(out, cautions, left)
}

// NamedTable is a CSV file of a document.
type NamedTable struct {
	Name string
	Rows [][]string
}

// Write writes the folder of the comparison: its tables, what draw adds to them
// (compare.html, figures), and compare.json. draw may be nil.
func (c *Comparison) Write(dir string, p Place, draw func(dir string) error) error {
	return writeTables(dir, "compare", c.Tables(), p, c.Cases, map[string]any{
		"currency": c.Currency, "unpriced": strings.Join(c.Unpriced, ", "), "life": lifeSource,
		"limits": limitsText(&c.Cases[0].Study.Settings.Limits),
	}, draw)
}

func limitsText(l *feeder.Limits) string {
	judged := "nodes with a load are judged"
	if l.All {
		judged = "all nodes are judged"
	}
	of := "ANSI C84.1, service voltage: up to 600 V range A 114 to 126 V and range B 110 to 127 V, above 600 V range A 117 to 126 V and range B 114 to 127 V, on the 120 V base"
	if l.Own {
		of = fmt.Sprintf("limits of study.toml: A %g to %g p.u., B %g to %g p.u.", l.Low, l.High, l.OuterLow, l.OuterHigh)
	}
	return fmt.Sprintf("%s; %s; allowance from primary to meter %g V", of, judged, l.Allowance)
}

// tablesRecord says what a document of cases, the base first, was made from.
func tablesRecord(p Place, cases []*Case, said map[string]any) results.TablesRecord {
	st := cases[0].Study
	period := st.Settings.Period
	return results.TablesRecord{Version: p.Version, Title: st.Title, Demo: p.Demo, Zone: period.Zone.String(), Period: period.String(),
		Start: stampOf(st, period.Start), End: stampOf(st, period.End), Step: float64(period.Step) / 1e9, Cases: record(cases), Said: said}
}

// stampOf writes an instant in the study's zone.
func stampOf(st *feeder.Study, ns int64) string {
	return time.Unix(0, ns).In(st.Settings.Period.Zone).Format(time.RFC3339)
}

// writeTables writes a folder of tables whole or not at all.
func writeTables(dir, kind string, files []NamedTable, p Place, cases []*Case, said map[string]any, draw func(dir string) error) error {
	r := tablesRecord(p, cases, said)
	f, err := results.CreateTables(dir, kind)
	if err != nil {
		return err
	}
	defer f.Abort() // does nothing after Finish
	for _, t := range files {
		if err := f.Table(t.Name, t.Rows); err != nil {
			return err
		}
	}
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
