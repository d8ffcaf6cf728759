package results

import (
	"bytes"
	"encoding/csv"
	"errors"
	"io"
	"io/fs"
	"math"
	"time"

	"yearflow/sim/tables"
)

// maxFaults ends the reading of a file that is wrong everywhere.
const maxFaults = 20

// reader reads the files of one folder and gathers what is wrong with them.
type reader struct {
	files  fs.FS
	faults *tables.Faults
	zone   *time.Location
}

// Sheet is a small table of a results folder: a header and rows of text.
type Sheet struct {
	File   string
	Header []string
	Rows   [][]string

	lines  []int // of each row
	faults *tables.Faults
	found  int // faults so far
}

// sheet reads a small CSV file whole.
func (rd *reader) sheet(name string) Sheet {
	s := Sheet{File: name, faults: rd.faults}
	data, err := fs.ReadFile(rd.files, name)
	if err != nil {
		*rd.faults = append(*rd.faults, missingFile(name, err))
		return s
	}
	data = bytes.TrimPrefix(data, []byte("\ufeff"))
	if len(data) == 0 || data[len(data)-1] != '\n' {
		rd.faults.Add(tables.Pos{File: name}, "ends in the middle of a line: the file is cut off; run the study again")
		return s
	}
	r := csv.NewReader(bytes.NewReader(data))
	r.Comment = '#'
	r.ReuseRecord = false
	for {
		row, err := r.Read()
		if err == io.EOF {
			break
		}
		var bad *csv.ParseError
		if errors.As(err, &bad) {
			rd.faults.Add(tables.Pos{File: name, Line: bad.Line, Column: bad.Column}, "is not a table (%v): the file is broken; run the study again", bad.Err)
			return s
		}
		if err != nil {
			rd.faults.Add(tables.Pos{File: name}, "cannot be read (%v)", err)
			return s
		}
		line, _ := r.FieldPos(0)
		if s.Header == nil {
			s.Header = row
			s.doubled(line)
			continue
		}
		s.Rows = append(s.Rows, row)
		s.lines = append(s.lines, line)
	}
	if s.Header == nil {
		rd.faults.Add(tables.Pos{File: name}, "has no header: the file is broken; run the study again")
	}
	return s
}

func (s *Sheet) doubled(line int) {
	seen := make(map[string]bool, len(s.Header))
	for _, h := range s.Header {
		if seen[h] {
			s.fault(line, 0, "column %q is there twice", h)
		}
		seen[h] = true
	}
}

func (s *Sheet) fault(line, column int, format string, args ...any) {
	if s.found++; s.found <= maxFaults {
		s.faults.Add(tables.Pos{File: s.File, Line: line, Column: column}, format, args...)
	}
}

// Column returns the position of a column, or -1.
func (s *Sheet) Column(name string) int {
	for i, h := range s.Header {
		if h == name {
			return i
		}
	}
	return -1
}

// Number returns a cell as a number; NaN where it is blank, is no number, or the
// column does not exist.
func (s *Sheet) Number(row int, column string) float64 {
	c := s.Column(column)
	if c < 0 || s.Rows[row][c] == "" {
		return math.NaN()
	}
	x, err := parseSlow([]byte(s.Rows[row][c]))
	if err != nil {
		return math.NaN()
	}
	return x
}

// need returns the positions of columns, with a fault for each that is missing.
func (s *Sheet) need(names ...string) []int {
	at := make([]int, len(names))
	for i, n := range names {
		if at[i] = s.Column(n); at[i] < 0 && s.Header != nil {
			s.fault(1, 0, "column %q is missing: the folder is of another version; run the study again", n)
		}
	}
	return at
}

// cells reads the rows of a sheet by position of the columns that need gave.
type cells struct {
	*Sheet
	at  []int
	row int
}

func (c cells) text(i int) string {
	if c.at[i] < 0 {
		return ""
	}
	return c.Rows[c.row][c.at[i]]
}

func (c cells) number(i int) float64 {
	t := c.text(i)
	if t == "" {
		return math.NaN()
	}
	x, err := parseSlow([]byte(t))
	if err != nil {
		c.fault(c.lines[c.row], c.at[i]+1, "column %s: want a number, got %q", c.Header[c.at[i]], t)
		return math.NaN()
	}
	return x
}

// whole reads an integer; blank is zero.
func (c cells) whole(i int) int {
	x := c.number(i)
	if math.IsNaN(x) {
		return 0
	}
	if x != math.Trunc(x) || math.Abs(x) > 1e9 {
		c.fault(c.lines[c.row], c.at[i]+1, "column %s: want a whole number, got %q", c.Header[c.at[i]], c.text(i))
		return 0
	}
	return int(x)
}

func (c cells) time(i int, zone *time.Location) time.Time {
	t := c.text(i)
	if t == "" {
		return time.Time{}
	}
	x, err := parseTime(t)
	if err != nil {
		c.fault(c.lines[c.row], c.at[i]+1, "column %s: %v", c.Header[c.at[i]], err)
		return time.Time{}
	}
	return x.In(zone)
}

// each reads the named file and calls do with every row; columns are counted in the
// order of names.
func (rd *reader) each(name string, do func(cells), names ...string) {
	s := rd.sheet(name)
	c := cells{Sheet: &s, at: s.need(names...)}
	for c.row = range s.Rows {
		do(c)
	}
}
