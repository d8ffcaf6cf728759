package study

import (
	"cmp"
	"context"
	"fmt"
	"math"
	"slices"
	"strings"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// LossSettings are those of Losses.
type LossSettings struct {
	Settings
	// Case is a case whose savings are told against the base; blank for none.
	Case string
	// Samples is about how many steps the marginal losses are worked out at; 0 chooses
	// 288, and fewer on a large feeder. −1 leaves marginal losses out.
	Samples int
}

// LossEstimate is the annual loss estimate of a study.
type LossEstimate struct {
	Title, Currency string
	Cases           []*Case // the base, and the case where one is named
	Marginal        *Marginal
	Cautions        []Caution
	Unpriced        []string

	meters []*lossMeter // by Cases
	prices *feeder.Prices
	years  float64 // the period, in years
	scale  float64 // from the period to a year
}

// Losses runs the base (and a case) over the period with a meter of losses by element
// and month, which no results folder holds, and works out marginal losses on the base.
// The results folders are written as by Run.
func Losses(ctx context.Context, p Place, s LossSettings) (*LossEstimate, error) {
	names := []string{feeder.Base}
	if s.Case != "" && s.Case != feeder.Base {
		names = append(names, s.Case)
	}
	studies, _, err := Choose(p, names)
	if err != nil {
		return nil, err
	}
	l := &LossEstimate{Title: studies[0].Title, meters: make([]*lossMeter, len(studies))}
	watch, run := s.Watch, s.Settings
	run.Again = true
	run.Watch = func(c *Case, e *sim.Engine) (out []sim.Recorder) {
		m := newLossMeter(e, &c.Study.Settings.Prices, c.Price, c.Peak)
		l.meters[slices.Index(studies, c.Study)] = m // one place for each goroutine
		if watch != nil {
			out = watch(c, e)
		}
		return append(out, m)
	}
	if l.Cases, err = Run(ctx, p, studies, run); err != nil {
		return nil, err
	}
	set := &studies[0].Settings
	l.prices, l.Currency = &set.Prices, set.Prices.Currency
	l.Unpriced = unpriced(&set.Prices)
	l.years = periodYears(set.Period)
	l.scale = 1 / l.years
	if days := l.years * 365; days > 364.5 && days < 366.5 {
		l.scale = 1 // a calendar year is a year, leap or not
	}
	if s.Samples >= 0 {
		if l.Marginal, err = marginal(ctx, p, l.Cases[0], s); err != nil {
			return nil, err
		}
	}
	l.cautions()
	return l, nil
}

// priced tells whether the energy has a price, demands whether the demand has.
func (l *LossEstimate) priced() bool {
	return !feeder.Unknown(l.prices.Energy) || l.prices.EnergyProfile != ""
}
func (l *LossEstimate) demands() bool { return !feeder.Unknown(l.prices.Demand) }

// amounts of one group of elements in a period or a month.
type amounts struct{ kwh, money, atPeak float64 }

func (a *amounts) add(m *monthLosses, i int) {
	a.kwh += m.energy[i]
	a.money += m.money[i]
	a.atPeak += m.atPeak[i]
}

// byKind sums a meter's months by kind; the last entry is all of them.
func (m *lossMeter) kindsSum() (out [kinds + 1]amounts) {
	for k := range m.months {
		for i := range m.kind {
			out[m.kind[i]].add(&m.months[k], i)
			out[kinds].add(&m.months[k], i)
		}
	}
	return out
}

// columns of money: their heads and what stands in them, left out where there is no price.
func (l *LossEstimate) moneyHeads(prefix string) (heads []string) {
	if l.priced() {
		heads = append(heads, prefix+"energy cost ["+l.Currency+"]")
	}
	if l.demands() {
		heads = append(heads, prefix+"demand cost ["+l.Currency+"]")
	}
	if len(heads) == 2 {
		heads = append(heads, prefix+"cost ["+l.Currency+"]")
	}
	return heads
}

func (l *LossEstimate) moneyCells(a amounts) (cells []string) {
	d := a.atPeak * l.prices.Demand
	if l.priced() {
		cells = append(cells, money(a.money))
	}
	if l.demands() {
		cells = append(cells, money(d))
	}
	if len(cells) == 2 {
		cells = append(cells, money(a.money+d))
	}
	return cells
}

// Tables returns the files of the estimate; the first row of each is its header.
func (l *LossEstimate) Tables() []NamedTable {
	out := []NamedTable{l.byMonth(), l.byKind(), l.byElement(), l.factors(), l.worth()}
	if l.Marginal != nil {
		out = append(out, l.marginalTable())
	}
	if len(l.Cases) > 1 {
		out = append(out, l.saving())
	}
	cautions := NamedTable{Name: "cautions.csv", Rows: [][]string{{"case", "caution"}}}
	for _, x := range l.Cautions {
		cautions.Rows = append(cautions.Rows, []string{x.Case, x.Text})
	}
	return append(out, cautions)
}

func (l *LossEstimate) stamp(ns int64) string {
	if ns == 0 {
		return ""
	}
	return stampOf(l.Cases[0].Study, ns)
}

func (l *LossEstimate) byMonth() NamedTable {
	t := NamedTable{Name: "losses-by-month.csv"}
	head := []string{"month", "energy supplied [kWh]", "losses [kWh]", "share of energy supplied [%]"}
	for _, k := range kindNames {
		head = append(head, k+" [kWh]")
	}
	head = append(head, "peak time", "losses at peak [kW]")
	t.Rows = append(t.Rows, append(head, l.moneyHeads("")...))
	m := l.meters[0]
	var all amounts
	var by [kinds]float64
	supplied := 0.0
	row := func(name string, supplied float64, a amounts, by [kinds]float64, at string) {
		cells := []string{name, results.FigureText(supplied), results.FigureText(a.kwh), results.FigureText(100 * a.kwh / supplied)}
		for _, kwh := range by {
			cells = append(cells, results.FigureText(kwh))
		}
		cells = append(cells, at, results.FigureText(a.atPeak))
		t.Rows = append(t.Rows, append(cells, l.moneyCells(a)...))
	}
	for k := range m.months {
		x := &m.months[k]
		var a amounts
		var b [kinds]float64
		for i, kind := range m.kind {
			a.add(x, i)
			b[kind] += x.energy[i]
			by[kind] += x.energy[i]
		}
		row(x.name, x.source+x.given, a, b, l.stamp(x.peakAt))
		all.kwh, all.money, all.atPeak = all.kwh+a.kwh, all.money+a.money, all.atPeak+a.atPeak
		supplied += x.source + x.given
	}
	row("period", supplied, all, by, "")
	return t
}

func (m *lossMeter) supplied() (kwh float64) {
	for k := range m.months {
		kwh += m.months[k].source + m.months[k].given
	}
	return kwh
}

func (l *LossEstimate) byKind() NamedTable {
	t := NamedTable{Name: "losses-by-kind.csv", Rows: [][]string{append([]string{"kind", "energy [kWh]", "share of losses [%]", "share of energy supplied [%]",
		"peak [kW]", "peak time", "sum at monthly peaks [kW]"}, l.moneyHeads("")...)}}
	m := l.meters[0]
	sums := m.kindsSum()
	for k, a := range sums {
		name, peak := "all", m.all
		if k < kinds {
			name, peak = kindNames[k], m.byKind[k]
		}
		t.Rows = append(t.Rows, append([]string{name, results.FigureText(a.kwh), results.FigureText(100 * a.kwh / sums[kinds].kwh), results.FigureText(100 * a.kwh / m.supplied()),
			results.FigureText(peak.kw), l.stamp(peak.at), results.FigureText(a.atPeak)}, l.moneyCells(a)...))
	}
	return t
}

// elementLoss is an element's losses over the period, all its kinds apart.
type elementLoss struct {
	name string
	kind int
	amounts
}

// elements lists them by energy, the highest first; equal ones stay in the order of the
// tables.
func (m *lossMeter) elements() []elementLoss {
	var out []elementLoss
	for i, e := range m.meter.ElementLosses() {
		x := elementLoss{name: e.Element, kind: m.kind[i]}
		for k := range m.months {
			x.add(&m.months[k], i)
		}
		out = append(out, x)
	}
	slices.SortStableFunc(out, func(a, b elementLoss) int { return cmp.Compare(b.kwh, a.kwh) })
	return out
}

func (l *LossEstimate) byElement() NamedTable {
	t := NamedTable{Name: "losses-by-element.csv", Rows: [][]string{append([]string{"element", "kind", "rank", "energy [kWh]", "share [%]", "share of it and those before [%]"}, l.moneyHeads("")...)}}
	m := l.meters[0]
	total, sofar := m.kindsSum()[kinds].kwh, 0.0
	for i, e := range m.elements() {
		sofar += e.kwh
		t.Rows = append(t.Rows, append([]string{e.name, kindNames[e.kind], fmt.Sprint(i + 1), results.FigureText(e.kwh), results.FigureText(100 * e.kwh / total), results.FigureText(100 * sofar / total)},
			l.moneyCells(e.amounts)...))
	}
	return t
}

// saving is what the case saves against the base, by kind.
func (l *LossEstimate) saving() NamedTable {
	unit := " [" + l.Currency + " a year]"
	head := []string{"kind", "base [kWh]", "case [kWh]", "saved [kWh]", "saved [%]", "saved at monthly peaks [kW]"}
	if l.priced() {
		head = append(head, "energy saved"+unit)
	}
	if l.demands() {
		head = append(head, "demand saved"+unit)
	}
	worth := !feeder.Unknown(l.prices.Rate) && (l.priced() || l.demands())
	if worth {
		head = append(head, "present worth ["+l.Currency+"]")
	}
	t := NamedTable{Name: "saving.csv", Rows: [][]string{head}}
	a, b := l.meters[0].kindsSum(), l.meters[1].kindsSum()
	for k := range a {
		name := "all"
		if k < kinds {
			name = kindNames[k]
		}
		d := amounts{a[k].kwh - b[k].kwh, a[k].money - b[k].money, a[k].atPeak - b[k].atPeak}
		row := []string{name, results.FigureText(a[k].kwh), results.FigureText(b[k].kwh), results.FigureText(d.kwh), "", results.FigureText(d.atPeak)}
		if a[k].kwh != 0 {
			row[4] = results.FigureText(100 * d.kwh / a[k].kwh)
		}
		yearly := 0.0
		if l.priced() {
			row = append(row, money(d.money*l.scale))
			yearly += d.money * l.scale
		}
		if l.demands() {
			row = append(row, money(d.atPeak*l.prices.Demand*l.scale))
			yearly += d.atPeak * l.prices.Demand * l.scale
		}
		if worth {
			row = append(row, money(yearly*PresentWorthFactor(l.prices.Rate, l.prices.Years)))
		}
		t.Rows = append(t.Rows, row)
	}
	return t
}

// Write writes the folder of the estimate: its tables, what draw adds (losses.html,
// figures), and losses.json. draw may be nil.
func (l *LossEstimate) Write(dir string, p Place, draw func(dir string) error) error {
	caseName := ""
	if len(l.Cases) > 1 {
		caseName = l.Cases[1].Name
	}
	said := map[string]any{"currency": l.Currency, "unpriced": strings.Join(l.Unpriced, ", "), "case": caseName}
	if l.Marginal != nil {
		said["marginal"] = l.Marginal.how()
	}
	return writeTables(dir, "losses", l.Tables(), p, l.Cases, said, draw)
}

// cautions gathers what a reader must know of the estimate.
func (l *LossEstimate) cautions() {
	add := func(name, format string, args ...any) {
		l.Cautions = append(l.Cautions, Caution{name, fmt.Sprintf(format, args...)})
	}
	add("", "Losses of meters, of capacitors' dielectric, unmetered and stolen energy are in none of these figures. Loss money depends on tariffs and is not a bill.")
	add("", "Losses follow the data of the transformers most: typical no-load and load losses that were assumed for blank cells are listed in the report of the run.")
	if l.scale != 1 {
		add("", "The period is %s years of 8,760 h. Figures a year are those of the period times %s; the season is not corrected for.", trimmed(round4(l.years)), trimmed(round4(l.scale)))
	}
	if len(l.Unpriced) > 0 {
		add("", "No money is told of %s: [prices] of study.toml does not say it.", strings.Join(l.Unpriced, ", "))
	}
	if feeder.Unknown(l.prices.Rate) {
		add("", "There is no present worth: [prices] rate is not given.")
	}
	if n := l.Cases[0].Study.Settings.Period.Steps(); n == 1 {
		add("", "The period has a single step: factors and peaks are those of no year.")
	} else if n < few {
		add("", "The period has %d steps: factors and peaks of so few are those of no year.", n)
	}
	for k, x := range l.Cases {
		low, unsolved := x.number("low steps"), x.number("unsolved steps")
		if low+unsolved > 0 {
			add(x.Name, "%g low and %g unsolved steps: nothing of them is in any sum.", low, unsolved)
		}
		if k == 0 {
			continue
		}
		if !sameStatus(&l.Cases[0].Results.Steps, &x.Results.Steps) {
			add(x.Name, "Other steps than in the base are low or unsolved: the saving compares different times and is not to be used.")
		}
		d := feeder.Differences(l.Cases[0].Study, x.Study)
		if len(d) == 0 {
			add(x.Name, "This case changes nothing: no cell of its tables and no key differs from the base.")
		}
		for _, y := range d {
			if y.Table == "study.toml" && (strings.HasPrefix(y.Key, "prices.") || strings.HasPrefix(y.Key, "scale.")) {
				add(x.Name, "The case changes %s: what it saves is not due to the network alone.", y.Key)
			}
		}
	}
	if m := l.Cases[0].Study.Model; l.Marginal != nil && len(m.Batteries)+len(m.Chargers) > 0 {
		add("", "Batteries and chargers: marginal losses are those with the store as it is at the first instant of each sampled step taken alone, not as the run had filled it.")
	}
}

// loadFactor is the mean over the peak; NaN where there is no peak.
func loadFactor(kwh, hours, peak float64) float64 {
	if !(hours > 0) || peak == 0 {
		return math.NaN()
	}
	return kwh / hours / peak
}
