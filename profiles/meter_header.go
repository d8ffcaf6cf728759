package profiles

import (
	"bytes"
	"fmt"
	"strings"
	"unicode/utf8"

	"yearflow/sim/tables"
)

// valueKind is what a column of a meter file holds.
type valueKind uint8

const (
	notValue valueKind = iota
	realValue
	reactiveValue
)

// meterUnit is a unit of meter data: value × factor is in kWh, kW, kvarh or kvar.
type meterUnit struct {
	kind   valueKind
	energy bool
	factor float64
}

const wantMeterUnits = "[kWh], [Wh], [MWh], [kW], [W], [MW], [kvarh], [varh], [Mvarh], [kvar], [var], [Mvar]"

func meterUnitOf(text string) (meterUnit, bool) {
	if strings.HasPrefix(text, "m") {
		return meterUnit{}, false // milli, which nobody means
	}
	u := meterUnit{factor: 1}
	base := strings.ToLower(text)
	switch {
	case strings.HasPrefix(base, "k"):
		base = base[1:]
	case strings.HasPrefix(base, "m"):
		base, u.factor = base[1:], 1000
	default:
		u.factor = 1e-3
	}
	switch base {
	case "wh":
		u.kind, u.energy = realValue, true
	case "w":
		u.kind = realValue
	case "varh":
		u.kind, u.energy = reactiveValue, true
	case "var":
		u.kind = reactiveValue
	default:
		return meterUnit{}, false
	}
	return u, true
}

// meterColumn is a column of a meter file.
type meterColumn struct {
	meterUnit
	name  string
	store int // of a wide file
}

// readHeader reads the header line and reports everything wrong with it.
func (r *meterReader) readHeader(line []byte) bool {
	r.sep = separatorOf(line)
	if r.sep == ',' {
		r.marks.mark = '.'
	}
	at := tables.Pos{File: r.name, Line: r.lines.number}
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
	for len(cells) > 1 && len(cells[len(cells)-1]) == 0 {
		cells = cells[:len(cells)-1]
	}
	before := len(r.faults)
	r.timeAt, r.meterAt = -1, -1
	for i, cell := range cells {
		at.Column = i + 1
		r.readColumn(string(cell), i, at)
	}
	at.Column = 0
	wide := r.file.block.Layout == "wide"
	switch {
	case r.timeAt < 0:
		r.faults.Add(at, "there is no column `time`; a header reads: %s", r.wantHeader())
	case !wide && r.meterAt < 0:
		r.faults.Add(at, "there is no column `meter`; a header reads: %s (a file with a column for each meter has layout = \"wide\")", r.wantHeader())
	}
	if len(r.faults) == before {
		r.pairColumns(at, wide)
	}
	return len(r.faults) == before
}

func (r *meterReader) wantHeader() string {
	if r.file.block.Layout == "wide" {
		return "time,first meter [kWh],second meter [kWh]"
	}
	return "time,meter,value [kWh]"
}

// readColumn reads header cell i.
func (r *meterReader) readColumn(cell string, i int, at tables.Pos) {
	c := meterColumn{name: strings.Join(strings.Fields(cell), " ")}
	wide := r.file.block.Layout == "wide"
	twice := func(first int) {
		r.faults.Add(at, "there are two columns `%s`, the first is column %d", strings.ToLower(c.name), first+1)
	}
	switch {
	case strings.EqualFold(c.name, "note"):
	case strings.EqualFold(c.name, "time"):
		if r.timeAt >= 0 {
			twice(r.timeAt)
		}
		r.timeAt = i
	case !wide && strings.EqualFold(c.name, "meter"):
		if r.meterAt >= 0 {
			twice(r.meterAt)
		}
		r.meterAt = i
	default:
		if problem := c.read(cell, r.file.block.Unit); problem != "" {
			r.faults.Add(at, "%s", problem)
		}
	}
	r.columns = append(r.columns, c)
}

// read reads `name [unit]`; fallback is the unit of a name alone.
func (c *meterColumn) read(cell, fallback string) (problem string) {
	open := strings.LastIndexByte(cell, '[')
	unit := fallback
	if open >= 0 && strings.HasSuffix(cell, "]") {
		c.name = strings.Join(strings.Fields(cell[:open]), " ")
		unit = strings.TrimSpace(cell[open+1 : len(cell)-1])
	}
	if c.name == "" {
		return "the column has no name; want `name [unit]`"
	}
	if unit == "" {
		return fmt.Sprintf("column %q has no unit; want %q with one of %s, or unit = \"kWh\" in the block of the file", shorten(c.name), shorten(c.name)+" [unit]", wantMeterUnits)
	}
	var ok bool
	if c.meterUnit, ok = meterUnitOf(unit); !ok {
		return fmt.Sprintf("column %q: the unit %q is not one of meter data; want one of %s", shorten(c.name), shorten(unit), wantMeterUnits)
	}
	return ""
}

// pairColumns makes the meters of a wide file and checks what stands together.
func (r *meterReader) pairColumns(at tables.Pos, wide bool) {
	real, reactive := 0, 0
	seen := make(map[string]int)
	for k := range r.columns {
		c := &r.columns[k]
		at.Column = k + 1
		switch {
		case c.kind == notValue:
			continue
		case !c.energy && r.file.block.Values == "register":
			r.faults.Add(at, "column %q: a register counts energy, want [kWh] or [kvarh]; values = \"interval\" takes power", c.name)
		}
		key := "meter" // of a long file all columns belong to the meter of the row
		if wide {
			key = c.name
		}
		if c.kind == realValue {
			real++
			key += " [kW]"
		} else {
			reactive++
			key += " [kvar]"
		}
		if first, ok := seen[key]; ok {
			r.faults.Add(at, "column %q stands twice, first as column %d; a meter has one column of real and one of reactive values", c.name, first+1)
			continue
		}
		seen[key] = k
		if wide {
			i, ok := r.index[c.name]
			if !ok {
				i = r.newStore(c.name)
			}
			c.store = i
		}
	}
	at.Column = 0
	if real == 0 {
		r.faults.Add(at, "there is no column of values in [kWh] or [kW]; a header reads: %s", r.wantHeader())
		return
	}
	for k := range r.columns {
		if c := &r.columns[k]; wide && c.kind == reactiveValue {
			if _, ok := seen[c.name+" [kW]"]; !ok {
				at.Column = k + 1
				r.faults.Add(at, "meter %q has reactive values alone; want a column `%s [kWh]` beside them", c.name, c.name)
			}
		}
	}
}
