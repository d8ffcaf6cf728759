package main

import (
	"bytes"
	"encoding/csv"
	"encoding/json"
	"fmt"
	"io"
	"math"
	"os"
	"slices"
	"strconv"
	"strings"
	"unicode/utf8"
)

// sheet is a small table for people: the first row is the header.
type sheet struct {
	rows [][]string
	left int // so many columns are aligned to the left
}

func (s *sheet) add(cells ...string) { s.rows = append(s.rows, cells) }

// write prints the sheet with two blanks between columns and numbers to the right.
func (s *sheet) write(w io.Writer) {
	var width []int
	for _, r := range s.rows {
		for i, c := range r {
			if i == len(width) {
				width = append(width, 0)
			}
			width[i] = max(width[i], utf8.RuneCountInString(c))
		}
	}
	for _, r := range s.rows {
		var b strings.Builder
		for i, c := range r {
			pad := strings.Repeat(" ", width[i]-utf8.RuneCountInString(c))
			if i > 0 {
				b.WriteString("  ")
			}
			if i < s.left {
				b.WriteString(c + pad)
			} else {
				b.WriteString(pad + c)
			}
		}
		fmt.Fprintln(w, strings.TrimRight(b.String(), " "))
	}
}

// save writes rows to a file, or to standard output for "-". The file appears whole.
func (c *console) save(name string, write func(io.Writer) error) error {
	if name == "-" {
		if err := write(c.out); err != nil {
			return machineError{fmt.Errorf("write to standard output: %w", err)}
		}
		return nil
	}
	f, err := os.CreateTemp(dirOf(name), ".yearflow-*")
	if err != nil {
		return machineError{fmt.Errorf("write %s: %w", name, err)}
	}
	defer os.Remove(f.Name())
	err = write(f)
	if err == nil {
		err = f.Chmod(0o644)
	}
	if cerr := f.Close(); err == nil {
		err = cerr
	}
	if err == nil {
		err = os.Rename(f.Name(), name)
	}
	if err != nil {
		return machineError{fmt.Errorf("write %s: %w", name, err)}
	}
	return nil
}

func dirOf(name string) string {
	if i := strings.LastIndexByte(name, os.PathSeparator); i >= 0 {
		return name[:i+1]
	}
	return "."
}

func (c *console) saveCSV(name string, rows [][]string) error {
	return c.save(name, func(w io.Writer) error {
		cw := csv.NewWriter(w)
		if err := cw.WriteAll(rows); err != nil {
			return err
		}
		return cw.Error()
	})
}

func (c *console) saveJSON(name string, v any) error {
	return c.save(name, func(w io.Writer) error {
		e := json.NewEncoder(w)
		e.SetIndent("", "  ")
		return e.Encode(v)
	})
}

// quiet tells whether standard output is taken by a file format, so that the words
// for people go elsewhere.
func (c *console) quiet(files ...string) io.Writer {
	for _, f := range files {
		if f == "-" {
			return io.Discard
		}
	}
	return c.out
}

// record is a row as a JSON object: the columns in their order, numbers as numbers.
type record struct {
	header, cells []string
	kinds         []columnKind
	unit          int // the column that holds the unit of the row; −1 for none
}

var _ json.Marshaler = record{}

// columnKind says how the cells of a column stand in JSON.
type columnKind uint8

// Words stay strings; a number is null where it is blank; a column by unit holds a number
// where the unit of its row is that of a quantity, and else a place, a phase or a time.
const (
	wordColumn columnKind = iota
	numberColumn
	unitColumn
)

// kindsOf tells the columns of a table apart by their heads, never by their cells: a node
// may be called 1204.
func kindsOf(header []string) (kinds []columnKind, unit int) {
	kinds, unit = make([]columnKind, len(header)), slices.Index(header, "unit")
	// compare.csv has a column for each case behind its unit, and a case any name.
	cases := len(header) > 3 && header[0] == "group" && header[1] == "quantity" && unit == 2
	for i, h := range header {
		switch {
		case cases && i > unit:
			kinds[i] = unitColumn
		case strings.HasSuffix(h, "]"):
			kinds[i] = numberColumn
		}
		if cases {
			continue
		}
		switch h {
		case "line", "column", "row", "tap", "weight", "part of score of the base", "part of score of the best":
			kinds[i] = numberColumn
		case "value", "base", "best", "with DER", "change", "difference", "limit", "margin":
			if unit >= 0 {
				kinds[i] = unitColumn
			}
		}
	}
	return kinds, unit
}

// MarshalJSON writes numbers as they stand in the CSV file, digit for digit.
func (r record) MarshalJSON() ([]byte, error) {
	var b bytes.Buffer
	b.WriteByte('{')
	for i, h := range r.header {
		if i > 0 {
			b.WriteByte(',')
		}
		key, err := json.Marshal(h)
		if err != nil {
			return nil, err
		}
		value, err := json.Marshal(r.value(i))
		if err != nil {
			return nil, err
		}
		b.Write(key)
		b.WriteByte(':')
		b.Write(value)
	}
	b.WriteByte('}')
	return b.Bytes(), nil
}

func (r record) value(i int) any {
	cell := r.cells[i]
	switch {
	case r.kinds[i] == wordColumn:
		return cell
	case cell == "":
		return nil
	case r.kinds[i] == unitColumn && !quantityUnit(r.cells[r.unit]):
		return cell
	}
	if v, err := strconv.ParseFloat(cell, 64); err == nil {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return nil
		}
		return json.Number(strings.TrimPrefix(cell, "+"))
	}
	return cell // such as "at least 12.5"
}

// quantityUnit tells the units of numbers from the kinds of words that stand in their place.
func quantityUnit(unit string) bool {
	switch unit {
	case "", "time", "node", "element", "node.phase", "device.phase", "element.phase":
		return false
	}
	return true
}

// records turns rows under a header into objects.
func records(rows [][]string) []record {
	out := make([]record, 0, len(rows))
	kinds, unit := kindsOf(rows[0])
	for _, r := range rows[1:] {
		out = append(out, record{rows[0], r, kinds, unit})
	}
	return out
}

// cell copies a figure with a fixed number of decimals; nothing for one not known.
func cell(v float64, decimals int) string {
	if v != v {
		return ""
	}
	s := fmt.Sprintf("%.*f", decimals, v)
	if strings.Trim(s, "-0.") == "" {
		s = strings.TrimPrefix(s, "-")
	}
	return s
}
