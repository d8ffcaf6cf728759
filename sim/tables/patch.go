package tables

import "strings"

// Record lets a Split look at the cells of a row.
type Record struct {
	At      Pos
	columns []column
	cells   []Cell
}

// Text returns the text of the row's cell in a column; blank where there is none.
func (r Record) Text(column string) string {
	for i := range r.columns {
		if r.columns[i].name == column {
			return r.cells[i].Text
		}
	}
	return ""
}

// Split replaces rows: where into returns more than nothing, the row stands once for
// each of the texts, with that text in the column.
func (s *Sheet[T]) Split(column string, into func(Record) []string) {
	k := -1
	for i := range s.columns {
		if s.columns[i].name == column {
			k = i
		}
	}
	if k < 0 {
		panic("tables: no column " + column)
	}
	var out []row
	for _, r := range s.rows {
		texts := into(Record{r.at, s.columns, r.cells})
		if len(texts) == 0 {
			out = append(out, r)
			continue
		}
		for _, t := range texts {
			n := r
			n.cells = append([]Cell(nil), r.cells...)
			n.cells[k].Text = t
			out = append(out, n)
		}
	}
	s.rows = out
}

// Records returns the rows as they are before decoding.
func (s *Sheet[T]) Records() []Record {
	out := make([]Record, len(s.rows))
	for i, r := range s.rows {
		out[i] = Record{r.at, s.columns, r.cells}
	}
	return out
}

func (s *Sheet[T]) keyOf(r row) (key string, at Pos, whole bool) {
	whole = true
	parts := []string{}
	for i := range s.columns {
		if !s.columns[i].key {
			continue
		}
		if at.File == "" {
			at = r.cells[i].At
		}
		parts = append(parts, r.cells[i].Text)
		whole = whole && r.cells[i].Text != ""
	}
	return strings.Join(parts, ", "), at, whole
}

func (s *Sheet[T]) keyNames() string {
	var parts []string
	for i := range s.columns {
		if s.columns[i].key {
			parts = append(parts, s.columns[i].name)
		}
	}
	return strings.Join(parts, ", ")
}

// Keys reports keys that are blank or stand twice, and takes such rows out.
func (s *Sheet[T]) Keys(faults *Faults) {
	first := map[string]int{}
	var out []row
	for _, r := range s.rows {
		key, at, whole := s.keyOf(r)
		if !whole {
			s.Dropped = true
			for i := range s.columns {
				if s.columns[i].key && r.cells[i].Text == "" && s.named[i] > 0 && !r.cells[i].bad {
					faults.Add(r.cells[i].At, "column %s: the cell is blank; it is needed to name the row", s.columns[i].name)
				}
			}
			continue
		}
		if line, twice := first[key]; twice {
			faults.Add(at, "%s %q stands in line %d already", s.keyNames(), clip(key), line)
			continue
		}
		first[key] = r.at.Line
		out = append(out, r)
	}
	s.rows = out
}

// lacks lists the columns that a new row needs and that the case's table does not have.
func (s *Sheet[T]) lacks(r row) []string {
	var out []string
	for i := range s.columns {
		if c := &s.columns[i]; c.required && r.cells[i].Text == "" && s.named[i] == 0 {
			out = append(out, c.title())
		}
	}
	return out
}

// Patch lays a case's sheet over this one: a row with a known key replaces the cells
// that it fills in, "-" empties a cell, a new key adds a row, remove takes it away.
func (s *Sheet[T]) Patch(p *Sheet[T], faults *Faults) {
	if !p.Found {
		return
	}
	at := map[string]int{}
	var names []string
	for i, r := range s.rows {
		key, _, _ := s.keyOf(r)
		at[key] = i
		names = append(names, key)
	}
	gone := make([]bool, len(s.rows))
	var added []row
	for _, r := range p.rows {
		key, pos, _ := p.keyOf(r)
		i, known := at[key]
		switch {
		case r.remove && !known:
			faults.Add(pos, "%s %q cannot be removed: it is not there%s", p.keyNames(), clip(key), Hint(key, names))
		case r.remove:
			gone[i] = true
			s.Removed = append(s.Removed, key)
		case known:
			for k, c := range r.cells {
				if c.Text == "" && !c.bad || s.columns[k].key {
					continue
				}
				if c.Text == "-" {
					c.Text = ""
				}
				s.rows[i].cells[k] = c
			}
		default:
			for k := range r.cells {
				if r.cells[k].Text == "-" {
					r.cells[k].Text = ""
				}
			}
			if lacks := p.lacks(r); len(lacks) > 0 {
				faults.Add(pos, "%s %q is not in the table, and a new row needs %s too%s", p.keyNames(), clip(key), strings.Join(lacks, ", "), near(key, names))
				s.Dropped = true
				continue
			}
			added = append(added, r)
		}
	}
	kept := s.rows[:0:0]
	for i, r := range s.rows {
		if !gone[i] {
			kept = append(kept, r)
		}
	}
	s.rows = append(kept, added...)
	if !s.Found {
		s.File, s.Found, s.named = p.File, true, p.named
	}
}
