package study

import (
	"fmt"
	"math"
	"strings"

	"yearflow/sim/results"
)

// Tables returns the files of the study by name; the first row of each is its header.
func (h *Hosting) Tables() []NamedTable {
	f := results.FigureText
	places := NamedTable{Name: "hosting.csv", Rows: [][]string{{"place", "phases", "nominal [kV]", "distance [km]", "keeps [kW]", "breaks at [kW]", "criterion", "value", "limit", "unit", "where", "when", "all that break", "sizes tried"}}}
	for _, p := range h.Places {
		places.Rows = append(places.Rows, []string{p.Place, p.Phases, f(p.NominalKV), f(p.DistanceKM), f(p.Keeps), f(p.Breaks), p.First, f(p.Value), f(p.Limit), p.Unit, p.Where, p.When, strings.Join(p.All, "; "), fmt.Sprint(p.Tried)})
	}
	tried := NamedTable{Name: "candidates.csv", Rows: [][]string{{"place", "size [kW]", "criterion", "unit", "value", "limit", "verdict", "margin", "where", "when"}}}
	for i := range h.Candidates {
		c := &h.Candidates[i]
		for k, l := range h.Limits {
			verdict := Passes
			if c.Broken[k] {
				verdict = Fails
			}
			tried.Rows = append(tried.Rows, []string{c.Place, f(c.KW), l.Name, l.Unit, f(c.Values[k]), f(l.Limit), verdict.String(), f(l.Limit - c.Values[k]), c.Where[k], c.When[k]})
		}
	}
	criteria := NamedTable{Name: "criteria.csv", Rows: [][]string{{"criterion", "unit", "limit", "source"}}}
	for _, l := range h.Limits {
		criteria.Rows = append(criteria.Rows, []string{l.Name, l.Unit, f(l.Limit), l.Source})
	}
	cautions := NamedTable{Name: "cautions.csv", Rows: [][]string{{"number", "caution"}}}
	for i, t := range h.Cautions {
		cautions.Rows = append(cautions.Rows, []string{fmt.Sprint(i + 1), t})
	}
	return append(append([]NamedTable{places, tried, criteria}, h.rolloutTables()...), cautions)
}

func (h *Hosting) rolloutTables() []NamedTable {
	f, r := results.FigureText, h.Rollout
	levels := NamedTable{Name: "rollout.csv", Rows: [][]string{append([]string{"level", "installed at least [kW]", "mean installed [kW]", "runs", "runs that violate", "share [%]"}, rolloutKinds()...)}}
	for k, l := range r.Levels {
		row := []string{fmt.Sprint(k + 1), f(l.KW), f(l.Mean), fmt.Sprint(len(r.Deployments)), fmt.Sprint(l.Violating), f(l.Share)}
		for _, kind := range rolloutKinds() {
			row = append(row, fmt.Sprint(l.By[kind]))
		}
		levels.Rows = append(levels.Rows, row)
	}
	c := clock{h.Base.Study.Settings.Period.Zone}
	runs := NamedTable{Name: "rollout-runs.csv", Rows: [][]string{{"run", "violates from [kW]", "criterion", "where", "when"}}}
	for _, d := range r.Deployments {
		when := ""
		if d.Criterion != "" {
			when = c.text(d.At)
		}
		runs.Rows = append(runs.Rows, []string{fmt.Sprint(d.Run), f(d.KW), d.Criterion, d.Where, when})
	}
	instants := NamedTable{Name: "rollout-instants.csv", Rows: [][]string{{"instant"}}}
	for _, at := range r.Instants {
		instants.Rows = append(instants.Rows, []string{c.text(at)})
	}
	return []NamedTable{levels, runs, instants}
}

// HostingKind is the kind of the folder that Hosting.Write writes.
const HostingKind = "hosting"

// Write writes the folder of the study: its tables, what draw adds to them (hosting.html,
// figures), and hosting.json. draw may be nil.
func (h *Hosting) Write(dir string, p Place, draw func(dir string) error) error {
	chosen := "places named in [hosting] of study.toml"
	if h.Chosen {
		chosen = fmt.Sprintf("places chosen by the program: %d three-phase primary nodes evenly in the order of their distance from the source, and the three-phase nodes with generators; places = [...] in [hosting] names others", defaultPlaces)
	}
	var grid []string
	for _, kW := range h.Grid {
		grid = append(grid, fmt.Sprintf("%g", kW))
	}
	r := h.Rollout
	return writeTables(dir, HostingKind, h.Tables(), p, []*Case{h.Base}, map[string]any{
		"places":  chosen,
		"kind":    h.Kind,
		"profile": h.Profile,
		"grid":    strings.Join(grid, ", ") + " kW",
		"search": "at every place the sizes are run from the smallest up, each over every step of the period with the controls acting, until one breaks a criterion: no step and no size below it is left out, " +
			"and whether a larger size would keep all criteria again is not looked at",
		"limits":       limitsText(&h.Base.Study.Settings.Limits),
		"rule":         rolloutRule,
		"why":          r.Why,
		"seed":         fmt.Sprint(r.Seed),
		"sites":        fmt.Sprint(r.Sites),
		"per customer": fmt.Sprintf("%g kW", r.PerCustomer),
		"least":        kWText(r.Least),
		"all":          kWText(r.All),
	}, draw)
}

func kWText(x float64) string {
	if math.IsNaN(x) {
		return ""
	}
	return results.FigureText(x)
}
