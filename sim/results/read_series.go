package results

import (
	"bufio"
	"bytes"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"math"
	"slices"
	"strconv"
	"time"

	"yearflow/sim/tables"
)

// maxLine is the longest line of a log that is read, bytes.
const maxLine = 64 << 20

// Series is a log in time: Columns[c][i] belongs to Names[c] and Time[i] (ns since
// 1970 UTC, the start of the row's interval).
type Series struct {
	Time    []int64
	Names   []string
	Columns [][]float64
}

// Column returns the values of a column, or nil.
func (s *Series) Column(name string) []float64 {
	for i, n := range s.Names {
		if n == name {
			return s.Columns[i]
		}
	}
	return nil
}

// Steps is steps.csv: its numbers, and the columns that are words.
type Steps struct {
	Series
	RowLength int64 // ns
	Status    []Status
	// LowestAt and HighestAt are node.phase.
	LowestAt, HighestAt []string
}

// stepsNeeded are the columns of steps.csv that no reader can do without.
var stepsNeeded = [...]string{"source real [kW]", "source reactive [kvar]", "load real [kW]", "generation real [kW]",
	"losses real [kW]", "line losses [kW]", "transformer load losses [kW]", "transformer no-load losses [kW]", "regulator losses [kW]",
	"lowest [pu]", "highest [pu]", "source energy [kWh]", "load energy [kWh]", "generation energy [kWh]", "losses energy [kWh]"}

func (f *Folder) readSteps(rd *reader) {
	const name = "steps.csv"
	s := &f.Steps
	words := map[string]int{"status": -1, "lowest at": -1, "highest at": -1, "unbalance at": -1}
	var numbers []int
	err := rd.scan(name, func(header []string) error {
		for i, h := range header {
			if _, ok := words[h]; ok {
				words[h] = i
			} else if i > 0 {
				numbers = append(numbers, i)
				s.Names = append(s.Names, h)
			}
		}
		s.Columns = make([][]float64, len(s.Names))
		var missing tables.Faults
		for _, n := range stepsNeeded {
			if indexOf(s.Names, n) < 0 {
				missing.Add(tables.Pos{File: name, Line: 1}, "column %q is missing: the folder is of another version; run the study again", n)
			}
		}
		for _, n := range []string{"status", "lowest at", "highest at"} {
			if words[n] < 0 {
				missing.Add(tables.Pos{File: name, Line: 1}, "column %q is missing: the folder is of another version; run the study again", n)
			}
		}
		return missing.Err()
	}, func(line int, at int64, cells [][]byte) error {
		var status Status
		switch string(cells[words["status"]]) {
		case "ok":
		case "low":
			status = Low
		case "unsolved":
			status = Unsolved
		default:
			return fmt.Errorf("column status: want ok, low or unsolved, got %q", clip(cells[words["status"]]))
		}
		s.Time = append(s.Time, at)
		s.Status = append(s.Status, status)
		s.LowestAt = append(s.LowestAt, intern(s.LowestAt, cells[words["lowest at"]]))
		s.HighestAt = append(s.HighestAt, intern(s.HighestAt, cells[words["highest at"]]))
		for k, c := range numbers {
			x, err := parseCell(cells[c])
			if err != nil {
				return fmt.Errorf("column %s: %w", s.Names[k], err)
			}
			s.Columns[k] = append(s.Columns[k], x)
		}
		return nil
	})
	if err != nil {
		*rd.faults = append(*rd.faults, asFaults(err)...)
		return
	}
	s.RowLength = f.Run.Row.Nanoseconds()
}

// intern returns the text of b, shared with the row before where it is the same:
// the place of the lowest voltage rarely moves.
func intern(before []string, b []byte) string {
	if n := len(before); n > 0 && before[n-1] == string(b) {
		return before[n-1]
	}
	return string(b)
}

func indexOf(names []string, name string) int {
	for i, n := range names {
		if n == name {
			return i
		}
	}
	return -1
}

// series reads a log whole.
func (rd *reader) series(name string) Series {
	var s Series
	err := rd.scan(name, func(header []string) error {
		s.Names = append(s.Names, header[1:]...)
		s.Columns = make([][]float64, len(s.Names))
		return nil
	}, func(line int, at int64, cells [][]byte) error {
		for i, c := range cells[1:] {
			x, err := parseCell(c)
			if err != nil {
				return fmt.Errorf("column %s: %w", s.Names[i], err)
			}
			s.Columns[i] = append(s.Columns[i], x)
		}
		s.Time = append(s.Time, at)
		return nil
	})
	if err != nil {
		*rd.faults = append(*rd.faults, asFaults(err)...)
		return Series{}
	}
	return s
}

func (f *Folder) readVoltageHeader(rd *reader) {
	if f.columnar() {
		c, err := openColumns(f.files, f.VoltageFile())
		if err != nil {
			*rd.faults = append(*rd.faults, asFaults(err)...)
			return
		}
		defer c.close()
		f.VoltageNames = append([]string{}, c.names...)
		return
	}
	stop := errors.New("header read")
	err := rd.scan("voltages.csv", func(header []string) error {
		f.VoltageNames = append([]string{}, header[1:]...)
		return stop
	}, nil)
	if err != nil && !errors.Is(err, stop) && !errors.Is(err, fs.ErrNotExist) {
		*rd.faults = append(*rd.faults, asFaults(err)...)
	}
}

// columnar tells whether the run wrote its series as Parquet files.
func (f *Folder) columnar() bool { return slices.Contains(f.Run.Files, "voltages"+parquetEnding) }

// VoltageFile is the name of the file that EachVoltage reads.
func (f *Folder) VoltageFile() string {
	if f.columnar() {
		return "voltages" + parquetEnding
	}
	return "voltages.csv"
}

// EachVoltage calls do with every row of voltages.csv or voltages.parquet: the start of the row in ns
// since 1970 UTC and the voltages in p.u. by VoltageNames, NaN where blank. The slice
// is used again for the next row. It stops at the first error. Where the run kept no
// voltages do is never called.
func (f *Folder) EachVoltage(do func(at int64, pu []float64) error) error {
	if f.VoltageNames == nil {
		return nil
	}
	if f.columnar() {
		c, err := openColumns(f.files, f.VoltageFile())
		if err != nil {
			return err
		}
		defer c.close()
		if !slices.Equal(c.names, f.VoltageNames) {
			return c.broken(errors.New("its columns have changed"))
		}
		return c.each(do)
	}
	var faults tables.Faults
	rd := reader{files: f.files, faults: &faults, zone: f.Run.Location}
	v := make([]float64, len(f.VoltageNames))
	return rd.scan("voltages.csv", func([]string) error { return nil }, func(line int, at int64, cells [][]byte) error {
		for i, c := range cells[1:] {
			x, err := parseCell(c)
			if err != nil {
				return fmt.Errorf("column %s: %w", f.VoltageNames[i], err)
			}
			v[i] = x
		}
		return do(at, v)
	})
}

// scan reads a log line by line. Its first column is time, in rising order.
func (rd *reader) scan(name string, head func([]string) error, row func(line int, at int64, cells [][]byte) error) error {
	file, err := rd.files.Open(name)
	if errors.Is(err, fs.ErrNotExist) && name == "voltages.csv" {
		return err
	}
	if err != nil {
		return tables.Faults{missingFile(name, err)}
	}
	defer file.Close()
	r := bufio.NewReaderSize(file, 1<<16)
	var (
		long   []byte
		cells  [][]byte
		width  int
		before int64
	)
	for line := 1; ; line++ {
		fault := func(format string, args ...any) error {
			return tables.Faults{{Pos: tables.Pos{File: name, Line: line}, Text: fmt.Sprintf(format, args...)}}
		}
		text, err := readLine(r, &long)
		if err == io.EOF && len(text) == 0 {
			if width == 0 {
				return fault("has no header: the file is empty; run the study again")
			}
			return nil
		}
		if err == io.EOF {
			return fault("ends in the middle of a line: the file is cut off; run the study again")
		}
		if err != nil {
			return fault("%v", err)
		}
		if line == 1 {
			text = bytes.TrimPrefix(text, []byte("\ufeff"))
		}
		text = bytes.TrimRight(text, "\r\n")
		if len(text) == 0 || text[0] == '#' {
			continue
		}
		if cells, err = split(cells[:0], text); err != nil {
			return fault("%v", err)
		}
		if width == 0 {
			width = len(cells)
			header := make([]string, width)
			seen := make(map[string]bool, width)
			for i, c := range cells {
				header[i] = string(c)
				if seen[header[i]] {
					return fault("column %q is there twice", header[i])
				}
				seen[header[i]] = true
			}
			if header[0] != "time" {
				return fault("the first column is %q, want time: the folder is of another version; run the study again", clip(cells[0]))
			}
			if err := head(header); err != nil {
				return err
			}
			continue
		}
		if len(cells) != width {
			return fault("has %d cells, the header %d: the file is broken; run the study again", len(cells), width)
		}
		t, err := parseTime(string(cells[0]))
		if err != nil {
			return fault("column time: %v", err)
		}
		at := t.UnixNano()
		if before != 0 && at <= before {
			return fault("%s is not after the row before it: rows were moved or doubled; run the study again", cells[0])
		}
		before = at
		if err := row(line, at, cells); err != nil {
			var fs tables.Faults
			if errors.As(err, &fs) {
				return err
			}
			return fault("%v", err)
		}
	}
}

// readLine returns the next line with its end; it is good until the next call.
func readLine(r *bufio.Reader, long *[]byte) ([]byte, error) {
	b, err := r.ReadSlice('\n')
	if err != bufio.ErrBufferFull {
		return b, err
	}
	*long = append((*long)[:0], b...)
	for err == bufio.ErrBufferFull {
		if len(*long) > maxLine {
			return nil, fmt.Errorf("a line longer than %d MB: this is not a log of ours", maxLine>>20)
		}
		b, err = r.ReadSlice('\n')
		*long = append(*long, b...)
	}
	return *long, err
}

// split cuts a line at its commas. Quoted cells take the slow way.
func split(cells [][]byte, line []byte) ([][]byte, error) {
	if bytes.IndexByte(line, '"') >= 0 {
		row, err := csv.NewReader(bytes.NewReader(line)).Read()
		if err != nil {
			return cells, fmt.Errorf("is not a row of a table (%v)", err)
		}
		for _, c := range row {
			cells = append(cells, []byte(c))
		}
		return cells, nil
	}
	for {
		i := bytes.IndexByte(line, ',')
		if i < 0 {
			return append(cells, line), nil
		}
		cells = append(cells, line[:i])
		line = line[i+1:]
	}
}

// parseCell reads a number; blank is NaN. Up to 15 digits with a point are an exact
// integer over an exact power of ten, so that one division rounds as strconv does.
func parseCell(b []byte) (float64, error) {
	if len(b) == 0 {
		return math.NaN(), nil
	}
	digits := b
	negative := b[0] == '-'
	if negative {
		digits = b[1:]
	}
	if n := len(digits); n > 0 && n <= 16 {
		var mantissa int64
		point, count := -1, 0
		for i, c := range digits {
			switch {
			case c >= '0' && c <= '9':
				mantissa = mantissa*10 + int64(c-'0')
				count++
			case c == '.' && point < 0:
				point = i
			default:
				return parseSlow(b)
			}
		}
		if count > 0 && count <= 15 {
			x := float64(mantissa)
			if point >= 0 {
				x /= powers[n-1-point]
			}
			if negative {
				x = -x
			}
			return x, nil
		}
	}
	return parseSlow(b)
}

// powers are the powers of ten that a float64 holds exactly and a cell may need.
var powers = [...]float64{1, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15}

func parseSlow(b []byte) (float64, error) {
	for _, c := range b {
		// What else strconv takes (hexadecimal, underscores, inf) is not ours.
		if c != '+' && c != '-' && c != '.' && c != 'e' && c != 'E' && (c < '0' || c > '9') {
			return 0, fmt.Errorf("want a number, got %q", clip(b))
		}
	}
	x, err := strconv.ParseFloat(string(b), 64)
	if err != nil || math.IsNaN(x) || math.IsInf(x, 0) {
		return 0, fmt.Errorf("want a number, got %q", clip(b))
	}
	return x, nil
}

// clip shortens what a message quotes.
func clip(b []byte) string {
	if len(b) > 40 {
		return string(b[:40]) + "..."
	}
	return string(b)
}

// At returns the local time of row i.
func (f *Folder) At(i int) time.Time { return time.Unix(0, f.Steps.Time[i]).In(f.Run.Location) }
