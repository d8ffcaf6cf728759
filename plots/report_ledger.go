package plots

import (
	"bytes"
	"encoding/csv"
	"fmt"
	"io/fs"
	"slices"
	"strconv"
	"strings"

	"yearflow/sim/tables"
)

// Ledger is a small CSV table of a results folder whose cells become values of a
// report, with their sources. The row of a cell is named by the first Keys cells.
type Ledger struct {
	File   string
	Keys   int
	Header []string
	Rows   [][]string
}

// ReadLedger reads the table file of a folder; keys is how many leading columns tell
// its rows apart. Its error is a tables.Faults. A missing file is fs.ErrNotExist.
func ReadLedger(folder fs.FS, file string, keys int) (*Ledger, error) {
	data, err := fs.ReadFile(folder, file)
	if err != nil {
		return nil, err
	}
	at := tables.Pos{File: file}
	r := csv.NewReader(bytes.NewReader(bytes.TrimPrefix(data, []byte("\ufeff"))))
	r.Comment = '#'
	rows, err := r.ReadAll()
	switch {
	case err != nil:
		return nil, tables.Faults{{Pos: at, Text: fmt.Sprintf("is not a table (%v): the file is broken; run again", err)}}
	case len(rows) == 0 || data[len(data)-1] != '\n':
		return nil, tables.Faults{{Pos: at, Text: "ends too early: the file is cut off; run again"}}
	case len(rows[0]) < keys:
		return nil, tables.Faults{{Pos: at, Text: fmt.Sprintf("has %d columns, want %d or more: the folder is of another version; run again", len(rows[0]), keys)}}
	}
	return &Ledger{File: file, Keys: keys, Header: rows[0], Rows: rows[1:]}, nil
}

// Column returns the position of a column, named with its unit or without; −1 where
// there is none.
func (l *Ledger) Column(name string) int {
	return slices.IndexFunc(l.Header, func(h string) bool { return h == name || headOf(h) == name })
}

// Row returns the row whose first cells are key; −1 where there is none.
func (l *Ledger) Row(key ...string) int {
	return slices.IndexFunc(l.Rows, func(r []string) bool { return len(key) <= len(r) && slices.Equal(r[:len(key)], key) })
}

// Cell returns a cell as it stands; "" where there is none.
func (l *Ledger) Cell(row int, column string) string {
	c := l.Column(column)
	if row < 0 || row >= len(l.Rows) || c < 0 {
		return ""
	}
	return l.Rows[row][c]
}

// Value returns a cell as a report shows it. The unit is that of the column's head, or
// that of the row's column "unit" where the table has one.
func (l *Ledger) Value(row int, column string) Value { return l.Rounded(row, column, -1) }

// Rounded is Value with a given number of decimals; −1 chooses them.
func (l *Ledger) Rounded(row int, column string, decimals int) Value {
	c := l.Column(column)
	if row < 0 || row >= len(l.Rows) || c < 0 {
		return Word("–")
	}
	if c < l.Keys {
		return l.Name(row, column) // a node may be called 1204, which is no number
	}
	name := l.Header[c]
	unit := unitOf(name)
	switch u := l.Column("unit"); {
	case unit == "" && strings.HasSuffix(headOf(name), "time"):
		unit = "time"
	case unit == "" && u >= 0 && headOf(name) == "value":
		unit = l.Rows[row][u]
	}
	return Rounded(l.Rows[row][c], unit, SourceOf(l.File, name, l.Rows[row][:l.Keys]...), decimals)
}

// Name returns a cell that is a name, as it stands, with its source.
func (l *Ledger) Name(row int, column string) Value {
	c := l.Column(column)
	if row < 0 || row >= len(l.Rows) || c < 0 || l.Rows[row][c] == "" {
		return Word("–")
	}
	cell := l.Rows[row][c]
	return Value{Show: cell, Exact: cell, Source: SourceOf(l.File, l.Header[c], l.Rows[row][:l.Keys]...)}
}

// Time returns a cell that is a time, also where it is a key.
func (l *Ledger) Time(row int, column string) Value {
	v := l.Name(row, column)
	if v.Source == "" {
		return v
	}
	return Number(v.Exact, "time", v.Source)
}

// sum adds up a column of numbers; its source names the row "*".
func (l *Ledger) sum(column string) string {
	total := 0.0
	for i := range l.Rows {
		if x, err := strconv.ParseFloat(l.Cell(i, column), 64); err == nil {
			total += x
		}
	}
	return strconv.FormatFloat(total, 'f', -1, 64)
}

// Table makes a table of chosen columns and rows (nil: all of either); words names the
// columns that hold text.
func (l *Ledger) Table(caption string, columns []string, rows []int, words ...string) Table {
	if columns == nil {
		columns = l.Header
	}
	if rows == nil {
		for i := range l.Rows {
			rows = append(rows, i)
		}
	}
	t := Table{Caption: caption}
	for _, c := range columns {
		name := c
		if k := l.Column(c); k >= 0 {
			name = l.Header[k]
		}
		t.Columns = append(t.Columns, Column{Head: headOf(name), Unit: shownUnit(unitOf(name)),
			Words: slices.Contains(words, c) || l.Column(c) >= 0 && l.Column(c) < l.Keys})
	}
	for _, i := range rows {
		var row []Value
		for k, c := range columns {
			if t.Columns[k].Words && !strings.HasSuffix(headOf(c), "time") {
				row = append(row, l.Name(i, c))
			} else {
				row = append(row, l.Value(i, c))
			}
		}
		t.Rows = append(t.Rows, row)
	}
	return t
}

// headOf and unitOf take "name [unit]" apart.
func headOf(column string) string {
	if i := strings.LastIndex(column, " ["); i >= 0 && strings.HasSuffix(column, "]") {
		return column[:i]
	}
	return column
}

func unitOf(column string) string {
	if i := strings.LastIndex(column, " ["); i >= 0 && strings.HasSuffix(column, "]") {
		return column[i+2 : len(column)-1]
	}
	return ""
}
