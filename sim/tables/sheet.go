package tables

import (
	"fmt"
	"io/fs"
	"reflect"
	"strings"

	"github.com/gocarina/gocsv"
)

// maxFaults is how many faults of one table are listed; the others are counted.
const maxFaults = 200

// Cell is the checked text of a cell and where it stands; a blank cell has no text,
// nor has one that is a fault.
type Cell struct {
	Text string
	At   Pos
	bad  bool
}

type row struct {
	at     Pos
	cells  []Cell // by columns
	remove bool
}

// Sheet is a table before it is decoded: cells checked one by one, in the units of
// the row struct T, with their places.
type Sheet[T any] struct {
	File    string
	Found   bool     // the file exists
	Dropped bool     // some rows could not be told apart by their keys, or are not whole
	Removed []string // keys that a case took away
	columns []column
	rows    []row
	named   []int // by columns: position in the header, 0 where it is not there
	header  int   // line
	patch   bool
}

// Read reads a table. Where there is no such file the sheet is empty and Found is
// false. What is wrong with it is added to faults.
func Read[T any](fsys fs.FS, name string, faults *Faults) *Sheet[T] {
	return read[T](fsys, name, false, faults)
}

// ReadPatch reads a case's table, to be laid over another with Patch. Its rows need
// no more than their keys; "-" empties a cell; the column remove takes rows away.
func ReadPatch[T any](fsys fs.FS, name string, faults *Faults) *Sheet[T] {
	return read[T](fsys, name, true, faults)
}

func read[T any](fsys fs.FS, name string, patch bool, faults *Faults) *Sheet[T] {
	s := &Sheet[T]{File: name, columns: columnsOf(reflect.TypeFor[T]()), patch: patch}
	s.named = make([]int, len(s.columns))
	if _, err := fs.Stat(fsys, name); err != nil {
		return s
	}
	s.Found = true
	own := Faults{}
	records, semicolons := scan(fsys, name, &own)
	if len(records) > 0 {
		s.read(records, semicolons, &own)
	}
	if len(own) > maxFaults {
		more := len(own) - maxFaults
		own = own[:maxFaults]
		own.Add(Pos{File: name, Line: own[maxFaults-1].Pos.Line}, "and %d more faults in this table", more)
	}
	*faults = append(*faults, own...)
	return s
}

// place is what a position in the header stands for.
type place struct {
	column int // into columns; −1: note, −2: remove, −3: not known
	bad    int // the column that it names without a unit that would do; −1: none
	conv   conversion
	title  string
}

const (
	noteColumn    = -1
	removeColumn  = -2
	unknownColumn = -3
)

func (s *Sheet[T]) read(records []record, semicolons bool, faults *Faults) {
	places := s.readHeader(records[0], faults)
	for _, r := range records[1:] {
		if len(r.cells) < len(places) {
			faults.Add(Pos{File: s.File, Line: r.line}, "the row has %d cells, the header %d: write blank cells too", len(r.cells), len(places))
			s.Dropped = true
			continue
		}
		for i := len(places); i < len(r.cells); i++ {
			if r.cells[i] != "" {
				faults.Add(Pos{s.File, r.line, i + 1}, "the row has more cells than the header (%d); quote a cell that holds the separator", len(places))
				break
			}
		}
		out := row{at: Pos{File: s.File, Line: r.line}, cells: make([]Cell, len(s.columns))}
		for i, n := range s.named {
			out.cells[i].At = Pos{s.File, r.line, n}
		}
		good := true
		for i, p := range places {
			at := Pos{s.File, r.line, i + 1}
			switch p.column {
			case noteColumn, unknownColumn:
				if p.bad >= 0 {
					out.cells[p.bad].bad = true
				}
			case removeColumn:
				switch strings.ToLower(r.cells[i]) {
				case "yes":
					out.remove = true
				case "", "no":
				default:
					faults.Add(at, "column remove: want yes or no, got %q", clip(r.cells[i]))
				}
			default:
				c := &s.columns[p.column]
				if s.patch && r.cells[i] == "-" {
					out.cells[p.column].Text = "-"
					continue
				}
				v, err := c.cell(r.cells[i], p.conv, semicolons)
				if err != nil {
					faults.Add(at, "column %s: %v", p.title, err)
					good = good && !c.key
				}
				out.cells[p.column].Text, out.cells[p.column].bad = v, err != nil
			}
		}
		if good {
			s.rows = append(s.rows, out)
		} else {
			s.Dropped = true
		}
	}
}

func (s *Sheet[T]) readHeader(r record, faults *Faults) []place {
	s.header = r.line
	cells := r.cells
	for len(cells) > 0 && cells[len(cells)-1] == "" {
		cells = cells[:len(cells)-1]
	}
	names := make([]string, 0, len(s.columns)+1)
	for i := range s.columns {
		names = append(names, s.columns[i].name)
	}
	places := make([]place, len(cells))
	seen := map[string]int{}
	for i, h := range cells {
		at := Pos{s.File, r.line, i + 1}
		places[i] = place{column: unknownColumn, bad: -1, conv: conversion{same: true}, title: h}
		name, u, hasUnit, err := splitHeader(h)
		if err != nil {
			faults.Add(at, "%v", err)
			for j := range s.columns {
				if strings.HasPrefix(strings.ToLower(h), s.columns[j].name+" [") {
					places[i].bad, s.named[j] = j, i+1
				}
			}
			continue
		}
		if first, twice := seen[name]; twice {
			faults.Add(at, "column %q stands here twice, first as column %d", name, first)
			continue
		}
		seen[name] = i + 1
		switch {
		case name == "note":
			places[i].column = noteColumn
			continue
		case name == "remove" && s.patch:
			places[i].column = removeColumn
			continue
		case name == "remove":
			faults.Add(at, "column remove belongs to a case's tables; here, take the row out")
			continue
		}
		k := -1
		for j := range s.columns {
			if s.columns[j].name == name {
				k = j
			}
		}
		if k < 0 {
			hint := Hint(name, names)
			if hint == "" {
				hint = "; there are: " + strings.Join(names, ", ")
			}
			faults.Add(at, "unknown column %q%s", clip(name), hint)
			continue
		}
		s.named[k] = i + 1
		conv, err := s.columns[k].conversion(u, hasUnit)
		if err != nil {
			faults.Add(at, "column %s: %v", name, err)
			places[i].bad = k
			continue
		}
		places[i].column, places[i].conv = k, conv
	}
	for j := range s.columns {
		c := &s.columns[j]
		if s.named[j] == 0 && (c.key || c.required && !s.patch) {
			faults.Add(Pos{File: s.File, Line: r.line}, "column %s is missing", c.title())
		}
	}
	return places
}

// splitHeader cuts "name [unit]".
func splitHeader(h string) (name, unit string, has bool, err error) {
	if h == "" {
		return "", "", false, fmt.Errorf("the column has no name")
	}
	name = h
	if i := strings.IndexByte(h, '['); i >= 0 {
		if !strings.HasSuffix(h, "]") || strings.Count(h, "[") != 1 || strings.Count(h, "]") != 1 {
			return "", "", false, fmt.Errorf("header %q: want name or name [unit]", clip(h))
		}
		name, unit, has = h[:i], strings.TrimSpace(h[i+1:len(h)-1]), true
	}
	return strings.ToLower(strings.Join(strings.Fields(name), " ")), unit, has, nil
}

// conversion finds what turns the header's unit into the tag's.
func (c *column) conversion(name string, has bool) (conversion, error) {
	if c.unit == "" {
		if has && name != "" {
			return conversion{}, fmt.Errorf("takes no unit, got [%s]", clip(name))
		}
		return conversion{same: true}, nil
	}
	d, to, _ := dimensionOf(c.unit)
	if !has || name == "" {
		return conversion{}, fmt.Errorf("its unit is missing; want %s", d.names())
	}
	from, ok := d.find(name)
	if ok {
		return convert(from, to), nil
	}
	if other, _, known := dimensionOf(name); known {
		return conversion{}, fmt.Errorf("[%s] is a unit of %s; want %s (%s)", name, other.name, d.names(), d.name)
	}
	return conversion{}, fmt.Errorf("unknown unit [%s]; want %s", clip(name), d.names())
}

// Rows decodes a sheet. Required cells that are blank are faults; a row with one is
// decoded all the same, so that other checks can go on.
func (s *Sheet[T]) Rows(faults *Faults) []T {
	head := []string{"@"}
	for i := range s.columns {
		head = append(head, s.columns[i].name)
	}
	lines := [][]string{head}
	for _, r := range s.rows {
		good := true
		cells := []string{""}
		for i, c := range r.cells {
			col := &s.columns[i]
			given := c.Text != ""
			good = good && !c.bad && (given || !col.required)
			if c.bad {
				// told already
			} else if !given && col.required && c.At.Column > 0 {
				faults.Add(c.At, "column %s: the cell is blank; it needs a value", col.title())
			}
			text := c.Text
			if !given {
				text = col.fallback
			}
			cells = append(cells, pack(text, given, c.At))
		}
		cells[0] = pack("", good, r.at)
		lines = append(lines, cells)
	}
	var out []T
	if err := gocsv.UnmarshalCSV(&packed{lines}, &out); err != nil {
		faults.Add(Pos{File: s.File}, "cannot be decoded: %v", err)
		return nil
	}
	return out
}

// packed hands the checked cells to the decoder.
type packed struct{ lines [][]string }

var _ gocsv.CSVReader = (*packed)(nil)

// Read returns the next line; the decoder does not call it for whole tables.
func (p *packed) Read() ([]string, error) {
	l := p.lines[0]
	p.lines = p.lines[1:]
	return l, nil
}

// ReadAll returns every line.
func (p *packed) ReadAll() ([][]string, error) { return p.lines, nil }

// Default is a value that blank cells of a column were given.
type Default struct {
	Column string
	Value  string
	Count  int
	At     Pos // the first of them
}

// Defaults lists the columns whose blank cells were given a value, in their order.
func (s *Sheet[T]) Defaults() []Default {
	var out []Default
	for i := range s.columns {
		c := &s.columns[i]
		if c.fallback == "" {
			continue
		}
		d := Default{Column: c.title(), Value: c.fallback}
		for _, r := range s.rows {
			if r.cells[i].Text == "" && !r.cells[i].bad {
				if d.Count == 0 {
					d.At = r.at
				}
				d.Count++
			}
		}
		if d.Count > 0 {
			out = append(out, d)
		}
	}
	return out
}
