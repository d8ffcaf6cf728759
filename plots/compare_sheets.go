package plots

import (
	"slices"
	"strings"
)

func (c *compareDocument) sheetSections() []Section {
	var out []Section
	if len(c.names) > 1 && len(c.sheets.Rows) == 0 {
		return []Section{{Heading: "Settings sheets", Blocks: []Block{Paragraph{Plain("No undominated case changes the control of a regulator, a capacitor or an inverter, so there is no sheet to enter.")}}}}
	}
	for i := range c.sheets.Rows {
		name, file := c.sheets.Cell(i, "case"), c.sheets.Cell(i, "file")
		l := c.ledger(file, 3)
		s := Section{Heading: "Settings sheet: case " + name}
		lead := "Undominated case. "
		if c.sheets.Cell(i, "recommended") == "yes" {
			lead = "The best-ranked case by the weights above. "
		}
		s.Blocks = append(s.Blocks, Paragraph{Plain(lead + "Lines marked CHANGE differ from the present sheet; the others are to be found as they stand. File: " + file + ".")})
		var devices []string
		for _, r := range l.Rows {
			if !slices.Contains(devices, r[0]) {
				devices = append(devices, r[0])
			}
		}
		for _, d := range devices {
			s.Blocks = append(s.Blocks, deviceSheet(l, d))
		}
		out = append(out, s)
	}
	return out
}

// deviceSheet is the sheet of one device: its phases side by side, present and new.
func deviceSheet(l *Ledger, device string) Table {
	var phases, settings []string
	for _, r := range l.Rows {
		if r[0] != device {
			continue
		}
		if !slices.Contains(phases, r[1]) {
			phases = append(phases, r[1])
		}
		if !slices.Contains(settings, r[2]) {
			settings = append(settings, r[2])
		}
	}
	t := Table{Caption: device, Columns: []Column{{Head: "Setting", Words: true}, {Head: "Unit", Words: true}}}
	for _, p := range phases {
		t.Columns = append(t.Columns, Column{Head: strings.TrimSpace(p + " present"), Words: true}, Column{Head: strings.TrimSpace(p + " new"), Words: true})
	}
	t.Columns = append(t.Columns, Column{Words: true}, Column{Head: "As left", Words: true})
	for _, name := range settings {
		row, change, unit := []Value{Word(name)}, "", ""
		var cells []Value
		for _, p := range phases {
			k := l.Row(device, p, name)
			cells = append(cells, l.Name(k, "present"), l.Name(k, "new"))
			if l.Cell(k, "change") != "" {
				change = l.Cell(k, "change")
			}
			if k >= 0 {
				unit = l.Cell(k, "unit")
			}
		}
		t.Rows = append(t.Rows, append(append(append(row, Word(shownUnit(unit))), cells...), Word(change), Word("")))
	}
	return t
}
