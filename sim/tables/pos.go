package tables

import (
	"fmt"
	"sort"
	"strings"
)

// Pos is a place in an input file. Line and Column count from 1; zero means that
// the whole file, or the whole line, is meant.
type Pos struct {
	File   string
	Line   int
	Column int
}

// String returns file:line:column, leaving out what is zero.
func (p Pos) String() string {
	switch {
	case p.File == "":
		return "(no file)"
	case p.Line == 0:
		return p.File
	case p.Column == 0:
		return fmt.Sprintf("%s:%d", p.File, p.Line)
	}
	return fmt.Sprintf("%s:%d:%d", p.File, p.Line, p.Column)
}

// Fault is one thing wrong (or, in a list of warnings, odd) at one place of the
// input. Text says what is wrong and what would do instead.
type Fault struct {
	Pos  Pos
	Text string
}

// Error returns the place and the text on one line.
func (f Fault) Error() string { return f.Pos.String() + ": " + f.Text }

// Faults is everything wrong with a study; a nil or empty list is no error.
type Faults []Fault

// Add appends a fault at p.
func (fs *Faults) Add(p Pos, format string, args ...any) {
	*fs = append(*fs, Fault{Pos: p, Text: fmt.Sprintf(format, args...)})
}

// Err returns the list as an error, sorted by place, or nil where it is empty.
func (fs Faults) Err() error {
	if len(fs) == 0 {
		return nil
	}
	fs.Sort()
	return fs
}

// Sort orders the faults by file, line and column; equal places keep their order.
func (fs Faults) Sort() {
	sort.SliceStable(fs, func(i, j int) bool {
		a, b := fs[i].Pos, fs[j].Pos
		if a.File != b.File {
			return a.File < b.File
		}
		if a.Line != b.Line {
			return a.Line < b.Line
		}
		return a.Column < b.Column
	})
}

// Error joins the faults, one a line.
func (fs Faults) Error() string {
	lines := make([]string, len(fs))
	for i, f := range fs {
		lines[i] = f.Error()
	}
	return strings.Join(lines, "\n")
}
