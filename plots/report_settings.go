package plots

import (
	"slices"
	"strings"
)

// settingsSection shows the settings sheets in force, beside those of the base, and how
// much of the load was allocated.
func (r *runReport) settingsSection() Section {
	s := Section{Heading: "Settings in force"}
	if r.settings == nil {
		s.Blocks = []Block{Paragraph{Plain("The results folder holds no settings.csv: it was written by an older version. The settings are those of the inputs, by hash below.")}}
		return append1(s, r.allocated())
	}
	sheets := runSettings{l: r.settings, base: r.Run.Case == "base"}
	if len(r.settings.Rows) == 0 {
		s.Blocks = append(s.Blocks, Paragraph{Plain("No regulator, capacitor or inverter of this study has a control with settings.")})
	} else if !sheets.base {
		s.Blocks = append(s.Blocks, Paragraph{Plain(sheets.changes())})
	}
	s.Blocks = append(s.Blocks, sheets.table("Regulators and load tap changers", "regulator", []settingColumn{
		{"set voltage", "set"}, {"bandwidth, total", "bandwidth"}, {"time delay", "delay"}, {"line-drop compensation R", "R"}, {"line-drop compensation X", "X"},
		{"PT ratio", "PT"}, {"CT primary", "CT"}, {"control", "control"}, {"reverse mode", "reverse"}})...)
	s.Blocks = append(s.Blocks, sheets.table("Capacitors", "capacitor", []settingColumn{
		{"control", "control"}, {"closes at", "closes at"}, {"opens at", "opens at"}, {"time delay", "delay"},
		{"voltage override closes below", "override closes below"}, {"voltage override opens above", "opens above"}, {"override deadband", "deadband"},
		{"lockout before closing again", "lockout"}})...)
	s.Blocks = append(s.Blocks, sheets.inverters()...)
	return append1(s, r.allocated())
}

func append1(s Section, blocks []Block) Section {
	s.Blocks = append(s.Blocks, blocks...)
	return s
}

// allocated says how much of the load was shared out from what was measured; nothing where
// none was.
func (r *runReport) allocated() []Block {
	const q = "allocated share of load energy"
	if !r.has(q) {
		return nil
	}
	return []Block{Heading("Load by allocation"), Paragraph{Say("Of the energy of all loads, {} is not known load by load: it was shared out, at every step, so that the flow at the measured place is what was measured ([allocation] in study.toml). The rest is that of loads with a profile of their own in kW. What was measured is met at {} of the steps and not at {}, which allocation.csv lists. A voltage at one place is believed no better than the share of its load.",
		r.sum(q), r.sum("allocation steps met"), r.sum("allocation steps listed"))}}
}

// runSettings are the rows of settings.csv.
type runSettings struct {
	l    *Ledger
	base bool // the run is that of the base
}

// settingColumn is a setting with its short name in the head of a column.
type settingColumn struct{ setting, head string }

// changes says how many settings differ from the base.
func (s *runSettings) changes() string {
	n := 0
	var devices []string
	for i := range s.l.Rows {
		if s.differs(i) {
			n++
			if d := s.l.Cell(i, "device"); !slices.Contains(devices, d) {
				devices = append(devices, d)
			}
		}
	}
	if n == 0 {
		return "No setting differs from the base."
	}
	return count(n, "setting", "settings") + " of " + count(len(devices), "device", "devices") + " " + is(n) + " not what the base has: " + listWords(devices, 12) + "."
}

func is(n int) string {
	if n == 1 {
		return "is"
	}
	return "are"
}

// listWords names the first of a list.
func listWords(names []string, most int) string {
	if len(names) <= most {
		return strings.Join(names, ", ")
	}
	return strings.Join(names[:most], ", ") + " and " + count(len(names)-most, "other", "others")
}

func (s *runSettings) differs(row int) bool {
	return s.l.Cell(row, "value") != s.l.Cell(row, "base")
}

// unitKey is a control: a device, and the phase where it has one for each.
type unitKey struct{ device, phase string }

// units lists the controls of a kind.
func (s *runSettings) units(kind string) (out []unitKey) {
	for i := range s.l.Rows {
		k := unitKey{s.l.Cell(i, "device"), s.l.Cell(i, "phase")}
		if s.l.Cell(i, "kind") == kind && !slices.Contains(out, k) {
			out = append(out, k)
		}
	}
	return out
}

// table has a row for each control, and another for what the base has where that differs.
func (s *runSettings) table(caption, kind string, columns []settingColumn) []Block {
	units := s.units(kind)
	if len(units) == 0 {
		return nil
	}
	t := Table{Caption: caption, Columns: []Column{{Head: "Control", Words: true}}}
	for _, c := range columns {
		unit := ""
		for i := range s.l.Rows {
			if s.l.Cell(i, "kind") == kind && s.l.Cell(i, "setting") == c.setting {
				unit = s.l.Cell(i, "unit")
				break
			}
		}
		t.Columns = append(t.Columns, Column{Head: c.head, Unit: shownUnit(unit), Words: unit == ""})
	}
	for _, u := range units {
		now, before := []Value{Word(placeOf(u.device, u.phase))}, []Value{Word("  in the base")}
		changed, known := false, false
		for _, c := range columns {
			i := s.l.Row(u.device, u.phase, c.setting)
			now = append(now, s.l.Name(i, "value"))
			old := Word("·")
			if i >= 0 && s.differs(i) {
				changed = true
				old = s.l.Name(i, "base")
			}
			known = known || s.l.Cell(i, "base") != ""
			before = append(before, old)
		}
		t.Rows = append(t.Rows, now)
		switch {
		case changed && known:
			t.Rows = append(t.Rows, before)
		case !known:
			now[0] = Word(placeOf(u.device, u.phase) + " (not in the base)")
		}
	}
	t.Note = Plain("A dash: the control has no such setting, or it does not act. Every setting of the sheets, also those that are not shown here, stands in settings.csv.")
	if !s.base {
		t.Note = append(t.Note, Word(" A dot stands for a setting that the base has too."))
	}
	return []Block{t}
}

// inverters shows the functions of generators and batteries: one table for those that are
// set alike.
func (s *runSettings) inverters() []Block {
	const rating = "nameplate rating: 1 pu of active and of reactive power"
	type group struct {
		devices []string
		rows    []int // of the first
	}
	var groups []group
	index := map[string]int{}
	for _, u := range s.units("inverter") {
		var rows []int
		var alike strings.Builder
		for i := range s.l.Rows {
			if s.l.Cell(i, "device") != u.device || s.l.Cell(i, "kind") != "inverter" || s.l.Cell(i, "setting") == rating {
				continue
			}
			rows = append(rows, i)
			alike.WriteString(strings.Join([]string{s.l.Cell(i, "setting"), s.l.Cell(i, "value"), s.l.Cell(i, "base")}, "\x00") + "\x00")
		}
		k, known := index[alike.String()]
		if !known {
			k = len(groups)
			index[alike.String()] = k
			groups = append(groups, group{rows: rows})
		}
		groups[k].devices = append(groups[k].devices, u.device)
	}
	var out []Block
	for _, g := range groups {
		t := Table{Caption: "Inverter functions of " + listWords(g.devices, 12), Columns: []Column{{Head: "Setting", Words: true}, {Head: "Unit", Words: true}, {Head: "In force"}}}
		if !s.base {
			t.Columns = append(t.Columns, Column{Head: "In the base"})
		}
		for _, i := range g.rows {
			row := []Value{Word(s.l.Cell(i, "setting")), Word(shownUnit(s.l.Cell(i, "unit"))), s.l.Name(i, "value")}
			if !s.base {
				old := Word("·")
				if s.differs(i) {
					old = s.l.Name(i, "base")
				}
				row = append(row, old)
			}
			t.Rows = append(t.Rows, row)
		}
		t.Note = Plain("Points of IEEE Std 1547-2018; 1 pu of voltage is the nominal, of power the inverter's rating, which settings.csv gives.")
		out = append(out, t)
	}
	return out
}
