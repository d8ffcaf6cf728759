package feeder

import (
	"fmt"
	"io/fs"
	"path"
	"sort"
	"strings"

	"yearflow/sim/tables"
)

// Base is the name of the study as it stands, without a case.
const Base = "base"

// Study is a study's folder, read and checked, with a case laid over it.
type Study struct {
	FS       fs.FS
	Title    string
	Case     string // Base where there is none
	Settings Settings
	Model    *Model
	// Warnings are odd, but no errors.
	Warnings []tables.Fault
	// Files are the input files that were read, sorted; profiles are not among them.
	Files []string
	// Cases are the names of the folders below cases, sorted.
	Cases []string
	// Compare, Tune and Hosting are those tables of study.toml as they are written.
	Compare, Tune, Hosting map[string]any

	at     places
	uses   []ProfileUse
	tables *feederTables // as read, for Differences
}

// maxFaults is how many faults of a study are listed; the others are counted.
const maxFaults = 200

// Open reads the study in a folder and lays a case over it; "" and Base mean the
// study as it stands. The error, where there is one, is a tables.Faults with
// everything that is wrong.
func Open(fsys fs.FS, caseName string) (*Study, error) {
	if caseName == "" {
		caseName = Base
	}
	s := &Study{FS: fsys, Case: caseName}
	var faults tables.Faults
	s.Cases = caseNames(fsys, &faults)
	d, at, whole := s.documents(&faults)
	s.at = at
	r := &settingsReader{d: d, caseName: caseName, at: at, faults: &faults}
	if !whole {
		r.faults = &tables.Faults{} // what such a file lacks is no fault of its own
	}
	s.Settings = r.settings()
	s.Title = s.Settings.Title
	s.Compare, s.Tune, s.Hosting = d.Compare, d.Tune, d.Hosting
	folder := "feeder"
	if f, ok := r.text("feeder", d.Feeder); ok {
		folder = path.Clean(f)
	}
	if st, err := fs.Stat(fsys, folder); !fs.ValidPath(folder) || err != nil || !st.IsDir() {
		faults.Add(at.of("feeder"), "there is no folder %q with the tables of the feeder in the study's folder", folder)
	} else {
		t := s.readTables(folder, &faults)
		s.tables = t
		b := newBuilder(t, s.Settings.Frequency, &faults)
		b.model.Assumed = append(b.model.Assumed, r.assumed...)
		s.Model = b.build()
		s.Warnings = b.warnings
		s.uses = b.uses
		s.checkPlaces(&faults)
		s.checkAllocation(&faults)
	}
	sort.Strings(s.Files)
	tables.Faults(s.Warnings).Sort()
	if err := limited(faults); err != nil {
		return nil, err
	}
	return s, nil
}

// limited sorts the faults, leaves out what is told twice and cuts the list to a length that can be read.
func limited(faults tables.Faults) error {
	faults.Sort()
	seen := map[tables.Fault]bool{}
	once := faults[:0:0]
	for _, f := range faults {
		if !seen[f] {
			seen[f] = true
			once = append(once, f)
		}
	}
	faults = once
	if len(faults) > maxFaults {
		more := len(faults) - maxFaults
		faults = faults[:maxFaults:maxFaults]
		faults = append(faults, tables.Fault{Pos: faults[maxFaults-1].Pos, Text: fmt.Sprintf("and %d more faults", more)})
	}
	return faults.Err()
}

// caseNames are the folders below cases. One called Base would never be read and its results would stand in the
// study's own place (Base too, where a file system takes capitals for small letters).
func caseNames(fsys fs.FS, faults *tables.Faults) []string {
	entries, err := fs.ReadDir(fsys, "cases")
	if err != nil {
		return nil
	}
	var out []string
	for _, e := range entries {
		switch {
		case !e.IsDir() || strings.HasPrefix(e.Name(), "."):
		case strings.EqualFold(e.Name(), Base):
			faults.Add(tables.Pos{File: "cases/" + e.Name()}, "no case can be called %q: %q is the study without a case; rename the folder", e.Name(), Base)
		default:
			out = append(out, e.Name())
		}
	}
	sort.Strings(out)
	return out
}

// documents reads study.toml and the case's case.toml.
func (s *Study) documents(faults *tables.Faults) (d document, at places, whole bool) {
	const name = "study.toml"
	d, at, whole = readDocument(s.FS, name, faults)
	at[""] = tables.Pos{File: name}
	s.Files = append(s.Files, name)
	if d.Scale != (scaleDocument{}) {
		faults.Add(at.of("scale"), "scale belongs to a case: put it into cases/<name>/case.toml")
	}
	if s.Case == Base {
		return d, at, whole
	}
	folder := path.Join("cases", s.Case)
	known := false
	for _, c := range s.Cases {
		known = known || c == s.Case
	}
	if !known {
		faults.Add(tables.Pos{File: "cases"}, "there is no case %q%s", s.Case, tables.Hint(s.Case, append([]string{Base}, s.Cases...)))
		return d, at, whole
	}
	file := path.Join(folder, "case.toml")
	if _, err := fs.Stat(s.FS, file); err != nil {
		return d, at, whole
	}
	c, cat, cwhole := readDocument(s.FS, file, faults)
	s.Files = append(s.Files, file)
	if c.Profiles != nil {
		for k := range at {
			if strings.HasPrefix(k, "profiles[") {
				delete(at, k)
			}
		}
	}
	for k, p := range cat {
		at[k] = p
	}
	d.overlay(c)
	return d, at, whole && cwhole
}

// checkPlaces checks the names in [run].
func (s *Study) checkPlaces(faults *tables.Faults) {
	m := s.Model
	if m == nil {
		return
	}
	var places []string
	known := map[string]bool{}
	for _, n := range m.Nodes {
		for _, p := range n.Phases {
			places = append(places, n.Name+"."+p.String())
			known[n.Name+"."+p.String()] = true
		}
		if !n.Grounded {
			for _, p := range []Pair{{A, B}, {B, C}, {C, A}} {
				known[n.Name+"."+p.String()] = true
			}
		}
	}
	for i := range m.Loads { // on a four-wire delta the pairs that loads stand across
		for _, q := range m.Loads[i].Pairs {
			if n := &m.Nodes[m.Loads[i].Node]; n.MidTap != nil {
				for _, p := range []Pair{q, {q[1], q[0]}} {
					if (p[0]+1)%3 == p[1] {
						known[n.Name+"."+p.String()] = true
					}
				}
			}
		}
	}
	for _, p := range s.Settings.Run.Places {
		if !known[p] {
			faults.Add(s.at.of("run.voltages"), "run.voltages: there is no node.phase %q%s", p, tables.Hint(p, places))
		}
	}
	var elements []string
	kinds := map[string][]string{}
	add := func(name, kind string) {
		elements = append(elements, name)
		kinds[name] = append(kinds[name], kind)
	}
	for _, e := range m.Sections {
		add(e.Name, "section")
	}
	for _, e := range m.Transformers {
		add(e.Name, "transformer")
	}
	for _, e := range m.Regulators {
		add(e.Name, "regulator")
	}
	for _, f := range s.Settings.Run.Flows {
		switch k := kinds[f]; len(k) {
		case 0:
			faults.Add(s.at.of("run.flows"), "run.flows: there is no section, transformer or regulator %q%s", f, tables.Hint(f, elements))
		case 1:
		default:
			faults.Add(s.at.of("run.flows"), "run.flows: %q is a %s; rename all but one, so that flows.csv can tell them apart", f, strings.Join(k, " and a "))
		}
	}
	checkColumns(m, faults)
}

// checkColumns looks for two devices that would share a column of devices.csv.
func checkColumns(m *Model, faults *tables.Faults) {
	taps := map[string]string{}
	for i := range m.Regulators {
		r := &m.Regulators[i]
		for _, u := range r.Units {
			taps[r.Name+"."+u.Name(r.Connection)] = r.Name
		}
	}
	for i := range m.Capacitors {
		c := &m.Capacitors[i]
		if r, ok := taps[c.Name]; ok {
			faults.Add(c.At, "capacitor %q is called as the column of devices.csv with the taps of regulator %q; rename one of them", c.Name, r)
		}
	}
}

// Place returns where a key of study.toml, such as "period.step", is written, or the
// place of the table that it belongs to.
func (s *Study) Place(key string) tables.Pos { return s.at.of(key) }

// ProfileUse is one place that names a profile, and what it wants of it.
type ProfileUse struct {
	Name string
	Pos  tables.Pos
	Want string // one of the Want words
}

// What a place wants of a profile that it names.
const (
	WantMultiplier  = "multiplier"          // p.u.; a load that has its own kW
	WantPower       = "power"               // kW, and kvar if wanted; a load without an amount
	WantOutput      = "multiplier or power" // p.u. of rating, or kW; a generator
	WantVoltage     = "voltage"             // p.u., or V line-to-line; a source
	WantTemperature = "temperature"         // degC; a capacitor control
	WantPrice       = "price"               // currency per energy
	WantMeasured    = "measured"            // kW, kvar, A, V or pu, as the quantity is; an allocation or a measurement
)

// ProfileUses lists the profiles that the study names, in the order of the tables.
func (s *Study) ProfileUses() []ProfileUse {
	out := append([]ProfileUse(nil), s.uses...)
	if p := s.Settings.Prices.EnergyProfile; p != "" {
		out = append(out, ProfileUse{p, s.at.of("prices.energy"), WantPrice})
	}
	if p := s.Settings.Prices.Peak; p != "" {
		out = append(out, ProfileUse{p, s.at.of("prices.peak"), WantPower})
	}
	return append(out, s.allocationUses()...)
}
