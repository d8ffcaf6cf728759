package profiles

import (
	"bytes"
	"fmt"
	"strings"
	"unicode/utf8"

	"yearflow/sim/tables"
)

// heading is what one header cell says.
type heading struct {
	name string
	unit unit
	note bool // a column of remarks, which is passed over
}

// separatorOf finds what stands between the cells of a header: the first
// separator behind the first cell.
func separatorOf(header []byte) byte {
	quoted := false
	for _, c := range header {
		switch {
		case c == '"':
			quoted = !quoted
		case !quoted && (c == ',' || c == ';' || c == '\t'):
			return c
		}
	}
	return ','
}

// readHeader reads the header line and reports everything wrong with it.
func (r *reader) readHeader(line []byte) bool {
	r.sep = separatorOf(line)
	if r.sep == ',' {
		r.marks.mark = '.'
	}
	at := tables.Pos{File: r.name, Line: r.lines.number}
	before := len(r.faults)
	switch {
	case bytes.IndexByte(line, 0) >= 0:
		r.faults.Add(at, "holds zero bytes: the file is binary or UTF-16; save it as CSV in UTF-8")
		return false
	case !utf8.Valid(line):
		r.faults.Add(at, "holds a byte that is not UTF-8; save the file as CSV in UTF-8")
		return false
	case bytes.IndexByte(line, '\r') >= 0:
		r.faults.Add(at, "lines end with a carriage return alone; save the file with LF or CRLF line ends")
		return false
	}
	cells, problem := splitCells(line, r.sep)
	if problem != "" {
		at.Column = len(cells) + 1
		r.faults.Add(at, "%s", problem)
		return false
	}
	if !strings.EqualFold(string(cells[0]), "time") {
		at.Column = 1
		r.faults.Add(at, "the first column must be `time`, got %q; a header reads: time,name [pu],other [kW]", shorten(string(cells[0])))
		return false
	}
	for len(cells) > 1 && len(cells[len(cells)-1]) == 0 {
		cells = cells[:len(cells)-1]
	}
	if len(cells) == 1 {
		r.faults.Add(at, "there is no column but `time`; a header reads: time,name [pu],other [kW]")
		return false
	}
	for i, cell := range cells[1:] {
		at.Column = i + 2
		h, problem := readHeading(string(cell))
		if problem != "" {
			r.faults.Add(at, "%s", problem)
		}
		r.headings = append(r.headings, h)
		r.places = append(r.places, at)
	}
	r.pair()
	return len(r.faults) == before
}

// readHeading reads `name [unit]`.
func readHeading(cell string) (h heading, problem string) {
	if strings.EqualFold(cell, "note") {
		return heading{note: true}, ""
	}
	open := strings.LastIndexByte(cell, '[')
	if open < 0 || !strings.HasSuffix(cell, "]") {
		if cell == "" {
			return h, "the column has no name; want `name [unit]`"
		}
		return h, fmt.Sprintf("column %q has no unit; want %q with one of %s", shorten(cell), shorten(cell)+" [unit]", wantUnits)
	}
	h.name = strings.Join(strings.Fields(cell[:open]), " ")
	text := strings.TrimSpace(cell[open+1 : len(cell)-1])
	if h.name == "" {
		return h, fmt.Sprintf("the column %q has no name; want `name [unit]`", shorten(cell))
	}
	var ok bool
	if h.unit, ok = unitOf(text); !ok {
		return h, fmt.Sprintf("column %q: the unit %q is not known; want one of %s", shorten(h.name), shorten(text), wantUnits)
	}
	return h, ""
}

// pair reports names that stand twice and [kvar] columns without their [kW].
func (r *reader) pair() {
	type key struct {
		name     string
		reactive bool
	}
	seen := make(map[key]int)
	for i, h := range r.headings {
		if h.name == "" {
			continue
		}
		k := key{h.name, h.unit.base == "kvar"}
		if first, ok := seen[k]; ok {
			r.faults.Add(r.places[i], "the name %q stands twice, first in column %d; give each profile one name (only [kW] and [kvar] share one)", h.name, r.places[first].Column)
			continue
		}
		seen[k] = i
	}
	for i, h := range r.headings {
		if h.name == "" || h.unit.base != "kvar" {
			continue
		}
		if real, ok := seen[key{h.name, false}]; !ok || r.headings[real].unit.base != "kW" {
			r.faults.Add(r.places[i], "%q in [kvar] stands alone; want a column `%s [kW]` beside it", h.name, h.name)
		}
	}
}
