package feeder

import (
	"io/fs"
	"path"
	"sort"
	"strings"

	"yearflow/sim/tables"
)

// feederTables are the tables as they are written, with a case laid over them.
type feederTables struct {
	sources           []sourceRow
	nodes             []nodeRow
	sections          []sectionRow
	switches          []switchRow
	constructions     []constructionRow
	impedances        []impedanceRow
	spacings          []spacingRow
	conductors        []conductorRow
	cables            []cableRow
	transformers      []transformerRow
	regulators        []regulatorRow
	regulatorSettings []regulatorSettingsRow
	capacitors        []capacitorRow
	capacitorSettings []capacitorSettingsRow
	loads             []loadRow
	energies          []energyRow
	zips              []zipRow
	generators        []generatorRow
	functions         []functionRow
	batteries         []batteryRow
	meters            []meterRow
	chargers          []chargerRow
	measurements      []measurementRow

	folder  string
	assumed []Assumption
	removed map[string]map[string]bool // by table: keys that the case took away
	dropped map[string]bool            // tables that lost rows to faults
}

// tableNames are the tables that may stand in the folder of a feeder.
func tableNames() []string {
	return []string{"source", "nodes", "sections", "switches", "constructions", "impedances", "spacings", "conductors", "cables",
		"transformers", "regulators", "regulator-settings", "capacitors", "capacitor-settings", "loads", "energies", "zip", "generators",
		"inverter-functions", "batteries", "meters", "chargers", "measurements"}
}

// tableReader reads the tables of one study and its case.
type tableReader struct {
	study  *Study
	folder string
	cases  string // folder of the case; blank for the base
	faults *tables.Faults
	out    *feederTables
}

func (s *Study) readTables(folder string, faults *tables.Faults) *feederTables {
	t := &feederTables{folder: folder, removed: map[string]map[string]bool{}, dropped: map[string]bool{}}
	r := &tableReader{study: s, folder: folder, faults: faults, out: t}
	if s.Case != Base {
		r.cases = path.Join("cases", s.Case)
	}
	r.strangers(folder)
	if r.cases != "" {
		r.strangers(r.cases)
	}
	t.sources = readTable[sourceRow](r, "source", nil)
	t.nodes = readTable[nodeRow](r, "nodes", nil)
	t.sections = readTable[sectionRow](r, "sections", nil)
	t.switches = readTable[switchRow](r, "switches", nil)
	t.constructions = readTable[constructionRow](r, "constructions", nil)
	t.impedances = readTable[impedanceRow](r, "impedances", nil)
	t.spacings = readTable[spacingRow](r, "spacings", nil)
	t.conductors = readTable[conductorRow](r, "conductors", nil)
	t.cables = readTable[cableRow](r, "cables", nil)
	t.transformers = readTable[transformerRow](r, "transformers", nil)
	t.regulators = readTable[regulatorRow](r, "regulators", nil)
	t.regulatorSettings = readTable[regulatorSettingsRow](r, "regulator-settings", t.expandAll())
	t.capacitors = readTable[capacitorRow](r, "capacitors", nil)
	t.capacitorSettings = readTable[capacitorSettingsRow](r, "capacitor-settings", nil)
	t.loads = readTable[loadRow](r, "loads", nil)
	t.energies = readTable[energyRow](r, "energies", nil)
	t.zips = readTable[zipRow](r, "zip", nil)
	t.generators = readTable[generatorRow](r, "generators", nil)
	t.functions = readTable[functionRow](r, "inverter-functions", nil)
	t.batteries = readTable[batteryRow](r, "batteries", nil)
	t.meters = readTable[meterRow](r, "meters", nil)
	t.chargers = readTable[chargerRow](r, "chargers", nil)
	t.measurements = readTable[measurementRow](r, "measurements", blankPhases)
	for _, need := range []string{"source"} {
		if _, err := fs.Stat(s.FS, path.Join(folder, need+".csv")); err != nil && len(t.sources) == 0 {
			faults.Add(tables.Pos{File: path.Join(folder, need+".csv")}, "is missing; a feeder needs a source")
		}
	}
	return t
}

// strangers reports tables that have no known name: a misspelt one would be left out
// without a word.
func (r *tableReader) strangers(folder string) {
	entries, err := fs.ReadDir(r.study.FS, folder)
	if err != nil {
		return
	}
	names := tableNames()
	known := map[string]bool{}
	for _, n := range names {
		known[n+".csv"] = true
	}
	for _, e := range entries {
		n := e.Name()
		if known[n] || !strings.EqualFold(path.Ext(n), ".csv") || strings.HasPrefix(n, ".") || strings.HasPrefix(n, "~") {
			continue
		}
		stem := strings.TrimSuffix(n, path.Ext(n))
		hint := "; the tables of a feeder are: " + strings.Join(names, ", ")
		if near, ok := tables.Nearest(stem, names); ok {
			hint = "; did you mean " + near + ".csv?"
		}
		r.faults.Add(tables.Pos{File: path.Join(folder, n)}, "this table is not known%s", hint)
	}
}

// splitter expands rows before a case is laid over them: base are the rows of the
// table below, which a case's rows are laid over.
type splitter func(row tables.Record, base []tables.Record) []string

// readTable reads a table and the case's changes to it.
func readTable[T any](r *tableReader, name string, split splitter) []T {
	file := path.Join(r.folder, name+".csv")
	s := tables.Read[T](r.study.FS, file, r.faults)
	if s.Found {
		r.study.Files = append(r.study.Files, file)
	}
	if split != nil {
		s.Split("phase", func(row tables.Record) []string { return split(row, nil) })
	}
	s.Keys(r.faults)
	if r.cases != "" {
		file := path.Join(r.cases, name+".csv")
		p := tables.ReadPatch[T](r.study.FS, file, r.faults)
		if p.Found {
			r.study.Files = append(r.study.Files, file)
		}
		if split != nil {
			base := s.Records()
			p.Split("phase", func(row tables.Record) []string { return split(row, base) })
		}
		p.Keys(r.faults)
		s.Patch(p, r.faults)
		s.Dropped = s.Dropped || p.Dropped
		for _, key := range s.Removed {
			if r.out.removed[name] == nil {
				r.out.removed[name] = map[string]bool{}
			}
			r.out.removed[name][key] = true
		}
	}
	r.out.dropped[name] = s.Dropped
	for _, d := range s.Defaults() {
		r.out.assumed = append(r.out.assumed, Assumption{Pos: d.At,
			What: name + ": " + d.Column + " (blank in " + itoa(d.Count) + plural(d.Count, " row", " rows") + ")", Value: d.Value})
	}
	return s.Rows(r.faults)
}

// expandAll turns a row of regulator-settings for all phases into one for each unit
// of its bank. A ganged bank has one watched unit: the one that has a row below a
// case, else the first.
func (t *feederTables) expandAll() splitter {
	return func(row tables.Record, base []tables.Record) []string {
		if !strings.EqualFold(row.Text("phase"), "all") {
			return nil
		}
		name := row.Text("regulator")
		for i := range t.regulators {
			g := &t.regulators[i]
			if g.Name.Value != name {
				continue
			}
			units := unitNames(g)
			if len(units) == 0 {
				return nil
			}
			if !g.Ganged.Value {
				return units
			}
			for _, b := range base {
				if b.Text("regulator") == name {
					return []string{b.Text("phase")}
				}
			}
			return units[:1]
		}
		return nil
	}
}

// unitNames are the phases or pairs of a bank's units, as a settings sheet has them.
func unitNames(g *regulatorRow) []string {
	c, pairs := regulatorPairs(g.Connection.Value)
	var out []string
	if c != RegulatorWye {
		for _, p := range pairs {
			out = append(out, p.String())
		}
		return out
	}
	ps, err := parsePhases(g.Phases.Value)
	if err != nil {
		return nil
	}
	for _, p := range ordered(ps) {
		out = append(out, p.String())
	}
	sort.Strings(out)
	return out
}
