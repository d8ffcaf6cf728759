package sim

import (
	"io/fs"
	"path"
	"strings"

	"yearflow/profiles"
	"yearflow/sim/feeder"
	"yearflow/sim/tables"
)

// finder returns the profile of that name, which an element at a row names and which
// must be in one of the units; nil where the name is blank or wrong.
type finder func(name string, at tables.Pos, units ...string) *profiles.Series

// naming finds profiles by name and tells at which cell a name is wrong.
type naming struct {
	uses   []feeder.ProfileUse
	told   map[int]bool // positions in uses that have their fault
	set    *profiles.Set
	faults *tables.Faults
}

var _ finder = (*naming)(nil).find

func (n *naming) find(name string, at tables.Pos, units ...string) *profiles.Series {
	if name == "" {
		return nil
	}
	s, ok := n.set.Lookup(name)
	if !ok {
		n.faults.Add(n.cell(name, at), "no profile named %q%s", name, n.hint(name))
		return nil
	}
	for _, u := range units {
		if s.Unit == u {
			return s
		}
	}
	n.faults.Add(n.cell(name, at), "profile %q is in [%s] (%s): here it must be in %s", name, s.Unit, s.Pos, list(units))
	return nil
}

func (n *naming) hint(name string) string {
	names := n.set.Names()
	if len(names) == 0 {
		return ": the study reads no profiles; [[profiles]] with files = [\"profiles/*.csv\"] in study.toml names their files"
	}
	return tables.Hint(name, names)
}

// cell returns the cell in which a row names a profile. A case may have put the name
// into a row of its own, so that a use elsewhere is taken where the row has none.
func (n *naming) cell(name string, at tables.Pos) tables.Pos {
	other := -1
	for i, u := range n.uses {
		if u.Name != name || n.told[i] {
			continue
		}
		if u.Pos.File == at.File && u.Pos.Line == at.Line {
			n.told[i] = true
			return u.Pos
		}
		if other < 0 {
			other = i
		}
	}
	if other < 0 {
		return at
	}
	n.told[other] = true
	return n.uses[other].Pos
}

// prices holds the profiles that [prices] names to their units: an energy price in
// the study's currency, and for the demand anything that has a peak.
func (n *naming) prices(currency string) {
	for i, u := range n.uses {
		toml := strings.HasSuffix(u.Pos.File, ".toml")
		switch {
		case n.told[i] || !toml || u.Want == feeder.WantMeasured:
		case u.Want != feeder.WantPrice:
			n.find(u.Name, u.Pos, "kW", "pu")
		case currency == "":
			if s, ok := n.set.Lookup(u.Name); !ok || !strings.HasSuffix(s.Unit, "/kWh") {
				n.find(u.Name, u.Pos, "USD/kWh")
			}
		default:
			n.find(u.Name, u.Pos, currency+"/kWh")
		}
	}
}

// unmatched lists the patterns of the profile blocks that no file matches.
func unmatched(fsys fs.FS, blocks []profiles.Block) (odd tables.Faults) {
	for _, b := range blocks {
		for _, pattern := range b.Files {
			if files, err := fs.Glob(fsys, path.Clean(pattern)); err == nil && len(files) == 0 {
				odd.Add(b.Pos, "files %q: no file matches, so nothing is read", pattern)
			}
		}
	}
	return odd
}

// list joins units as they stand in a header.
func list(units []string) string { return "[" + strings.Join(units, "] or [") + "]" }
