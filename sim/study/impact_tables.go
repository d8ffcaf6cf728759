package study

import (
	"fmt"
	"math"
	"strings"

	"yearflow/sim/results"
)

// Tables returns the files of the report by name; the first row of each is its header.
func (im *Impact) Tables() []NamedTable {
	impact := NamedTable{Name: "impact.csv", Rows: [][]string{{"group", "criterion", "unit", "base", "with DER", "difference", "limit", "source", "verdict", "margin", "base verdict", "where", "when"}}}
	for _, c := range im.Criteria {
		impact.Rows = append(impact.Rows, []string{c.Group, c.Name, c.Unit, figure(c.Base, c.Unit), figure(c.With, c.Unit), figure(c.Difference, c.Unit),
			limitText(c.Limit, c.Unit, c.AtLeast), c.Source, c.Verdict.String(), figure(c.Margin, c.Unit), c.BaseVerdict.String(), c.Where, c.When})
	}
	units := NamedTable{Name: "units.csv", Rows: [][]string{{"unit", "kind", "node", "rating [kVA]", "most [kW]", "in the base"}}}
	for _, u := range im.Units {
		there := "no"
		if u.Changed {
			there = "otherwise"
		}
		units.Rows = append(units.Rows, []string{u.Name, u.Kind, u.Node, results.FigureText(u.KVA), results.FigureText(u.KW), there})
	}
	cautions := NamedTable{Name: "cautions.csv", Rows: [][]string{{"number", "caution"}}}
	for i, t := range im.Cautions {
		cautions.Rows = append(cautions.Rows, []string{fmt.Sprint(i + 1), t})
	}
	return append([]NamedTable{impact, im.changeTable(), im.reverseTable(), im.screenTable(), units}, append(im.mitigationTables(), cautions)...)
}

// limitText writes a limit, with "at least" before a lower one.
func limitText(x float64, unit string, atLeast bool) string {
	if math.IsNaN(x) {
		return ""
	}
	if atLeast {
		return "at least " + figure(x, unit)
	}
	return figure(x, unit)
}

func (im *Impact) changeTable() NamedTable {
	t := NamedTable{Name: "rvc.csv", Rows: [][]string{{"event", "direction", "node", "phase", "nominal [kV]", "base [%]", "with DER [%]", "difference [%]", "when", "limit [%]", "source", "verdict", "margin [%]"}}}
	f := results.FigureText
	for _, r := range im.Changes {
		t.Rows = append(t.Rows, []string{r.Event, r.Direction, r.Node, r.Phase, f(r.NominalKV), f(r.Base), f(r.With), f(r.Difference), r.When, f(r.Limit), changeSource, r.Verdict.String(), f(r.Margin)})
	}
	return t
}

func (im *Impact) reverseTable() NamedTable {
	t := NamedTable{Name: "reverse.csv", Rows: [][]string{{"place", "mode", "base [h]", "with DER [h]", "difference [h]", "base most [kW]", "with DER most [kW]", "when", "note"}}}
	f := results.FigureText
	for _, r := range im.Reverse {
		t.Rows = append(t.Rows, []string{r.Place, r.Mode, f(r.Base), f(r.With), f(r.Difference), f(r.BaseMost), f(r.WithMost), r.When, r.Note})
	}
	return t
}

func (im *Impact) screenTable() NamedTable {
	t := NamedTable{Name: "screens.csv", Rows: [][]string{{"screen", "section", "base [kW]", "with DER [kW]", "difference [kW]", "load [kW]", "when", "base [%]", "with DER [%]", "difference [%]", "limit [%]", "source", "verdict", "margin [%]"}}}
	f := results.FigureText
	for _, s := range im.Screens {
		t.Rows = append(t.Rows, []string{s.Screen, s.Section, f(s.Base), f(s.With), f(difference(s.Base, s.With)), f(s.Reference), s.When, f(s.BaseShare), f(s.WithShare),
			f(difference(s.BaseShare, s.WithShare)), f(s.Limit), s.Source, s.Verdict.String(), f(s.Margin)})
	}
	return t
}

func (im *Impact) mitigationTables() []NamedTable {
	list := NamedTable{Name: "mitigation-list.csv", Rows: [][]string{{"mitigation", "what", "tried", "criteria failed", "mended", "newly failed"}}}
	t := NamedTable{Name: "mitigations.csv", Rows: [][]string{{"mitigation", "criterion", "unit", "with DER", "mitigated", "difference", "limit", "source", "verdict", "margin", "where", "when"}}}
	for _, m := range im.Mitigations {
		if m.Why != "" {
			list.Rows = append(list.Rows, []string{m.Name, m.What, "no: " + m.Why, "", "", ""})
			continue
		}
		list.Rows = append(list.Rows, []string{m.Name, m.What, "yes", fmt.Sprint(m.Failed), fmt.Sprint(m.Mended), fmt.Sprint(m.New)})
		for _, c := range m.Criteria {
			t.Rows = append(t.Rows, []string{m.Name, c.Name, c.Unit, figure(c.Base, c.Unit), figure(c.With, c.Unit), figure(c.Difference, c.Unit),
				limitText(c.Limit, c.Unit, c.AtLeast), c.Source, c.Verdict.String(), figure(c.Margin, c.Unit), c.Where, c.When})
		}
	}
	return []NamedTable{list, t}
}

// ImpactKind is the kind of the folder that Impact.Write writes.
const ImpactKind = "impact"

// Write writes the folder of the report: its tables, what draw adds to them (impact.html,
// figures), and impact.json. draw may be nil.
func (im *Impact) Write(dir string, p Place, draw func(dir string) error) error {
	return writeTables(dir, ImpactKind, im.Tables(), p, im.Cases, map[string]any{
		"case":   im.Case,
		"limits": limitsText(&im.Cases[0].Study.Settings.Limits),
		"zero":   "a difference below a millionth of the values is written as 0: it is one of rounding and of the solver's tolerance",
		"rvc":    rvcRule,
		"held":   "devices held: every tap changer and capacitor stands where the year without the units of the case has it at the end of the same step, so that the units alone act",
	}, draw)
}

// rvcRule says how rapid voltage changes are found.
var rvcRule = strings.Join([]string{
	"at the end of every step in which the units deliver or draw power, and not at a chosen hour: the voltage is solved with the units and without them, every tap changer and capacitor held",
	"at a sudden loss the devices stand where the run with the units has them, at a sudden return where the run without the units has them",
	"the change is that of the magnitude, in % of nominal; inverter functions are in their steady state before and after",
}, "; ")
