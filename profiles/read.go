package profiles

import (
	"bytes"
	"errors"
	"io/fs"
	"math"

	"yearflow/sim/tables"
)

// maxFaults is how many faults of a file are told; the rest are counted.
const maxFaults = 20

// noTime stands for a stamp that could not be read.
const noTime = math.MinInt64

// blockRows is the number of rows that are read before they are sorted into
// columns, so that writing many columns does not fight over the cache.
const blockRows = 128

// reader reads one file.
type reader struct {
	name   string
	block  Block
	lines  *lines
	faults tables.Faults
	untold int // faults beyond maxFaults

	sep      byte
	marks    marks
	headings []heading
	places   []tables.Pos // of the headings
	clock    *clock
	later    bool // the first stamp, in a repeated hour, is its second occurrence

	count        int       // of rows
	first        []rowTime // the first rows, until the step is known
	step         int64     // 0: not yet known
	before, last rowTime   // the last two rows
	checked      rowTime   // the row that was checked last
	unclear      bool      // the first stamp lies in a repeated hour

	rows    []float64 // a block of rows, to be sorted into columns
	row     int       // rows in it
	columns [][]float64
}

// readFile reads a file into series, in the order of its columns, a [kvar]
// companion not among them.
func readFile(fsys fs.FS, name string, b Block) ([]*Series, tables.Faults) {
	r := readOnce(fsys, name, b, false)
	if len(r.faults) > 0 && r.unclear {
		// The file may begin in the second of two equal hours.
		if second := readOnce(fsys, name, b, true); len(second.faults) == 0 {
			r = second
		}
	}
	if len(r.faults) > 0 {
		return nil, r.faults
	}
	return r.series(), nil
}

func readOnce(fsys fs.FS, name string, b Block, later bool) *reader {
	r := &reader{name: name, block: b, clock: newClock(b.Zone), later: later}
	at := tables.Pos{File: name}
	f, err := fsys.Open(name)
	if err != nil {
		r.faults.Add(at, "cannot be read: %v", reason(err))
		return r
	}
	defer f.Close()
	size := int64(0)
	if st, err := f.Stat(); err == nil {
		if st.IsDir() {
			r.faults.Add(at, "is a folder; want a file")
			return r
		}
		size = st.Size()
	}
	r.lines = newLines(f)
	r.read(size)
	switch {
	case r.lines.err != nil:
		r.faults.Add(at, "cannot be read: %v", reason(r.lines.err))
	case r.lines.tooLong:
		at.Line = r.lines.number
		r.faults.Add(at, "the line is longer than %d bytes: this is not a table of profiles", maxLine)
	}
	return r
}

func reason(err error) error {
	var pe *fs.PathError
	if errors.As(err, &pe) {
		return pe.Err
	}
	return err
}

// read reads the whole stream of about size bytes.
func (r *reader) read(size int64) {
	start := r.lines.peek(4)
	if what := disguise(start); what != "" {
		r.faults.Add(tables.Pos{File: r.name}, "%s", what)
		return
	}
	if bytes.HasPrefix(start, []byte("\xef\xbb\xbf")) {
		r.lines.start += 3
	}
	header, ok := r.nextRow()
	if !ok {
		if r.lines.err == nil && !r.lines.tooLong {
			r.faults.Add(tables.Pos{File: r.name}, "is empty; want a header such as time,name [pu] and rows of values")
		}
		return
	}
	if !r.readHeader(header) {
		return
	}
	r.columns = make([][]float64, len(r.headings))
	r.rows = make([]float64, blockRows*len(r.headings))
	for {
		line, ok := r.nextRow()
		if !ok {
			break
		}
		if r.count == 0 {
			r.reserve(size, len(line))
		}
		r.readRow(line)
	}
	r.flush()
	if r.lines.err == nil && !r.lines.tooLong {
		r.endTimes()
	}
	if r.untold > 0 {
		r.faults.Add(tables.Pos{File: r.name, Line: r.lines.number}, "and %d more faults in this file", r.untold)
	}
}

// disguise tells by its first bytes what a file is that is no text.
func disguise(b []byte) string {
	for _, d := range [...]struct{ magic, what string }{
		{"\xff\xfe", "is UTF-16; save it as CSV in UTF-8"},
		{"\xfe\xff", "is UTF-16; save it as CSV in UTF-8"},
		{"\x89PNG", "is a PNG image, not a table"},
		{"PK\x03\x04", "is a spreadsheet or an archive; save it as CSV in UTF-8"},
		{"\xd0\xcf\x11\xe0", "is an old spreadsheet; save it as CSV in UTF-8"},
		{"\x1f\x8b", "is a compressed file; unpack it first"},
		{"%PDF", "is a PDF, not a table"},
	} {
		if bytes.HasPrefix(b, []byte(d.magic)) {
			return d.what
		}
	}
	return ""
}

// nextRow returns the next line that is neither a comment nor blank nor only
// separators.
func (r *reader) nextRow() ([]byte, bool) {
	for {
		line, ok := r.lines.next()
		if !ok {
			return nil, false
		}
		for _, c := range line {
			if c == '#' {
				break
			}
			if c > ' ' && c != ',' && c != ';' || c == 0 {
				return line, true
			}
		}
	}
}

// reserve makes room for the rows that a file of that size has.
func (r *reader) reserve(size int64, line int) {
	const most = 1 << 24 // a file may lie about its size
	n := int(min(size/int64(line+1)+size/int64(16*(line+1))+16, most))
	for i := range r.columns {
		if !r.headings[i].note {
			r.columns[i] = make([]float64, 0, n)
		}
	}
}

// fault reports one fault, up to maxFaults of them. column counts from 1.
func (r *reader) fault(column int, format string, args ...any) {
	r.faultAt(r.lines.number, column, format, args...)
}

func (r *reader) faultAt(line, column int, format string, args ...any) {
	if len(r.faults) >= maxFaults {
		r.untold++
		return
	}
	r.faults.Add(tables.Pos{File: r.name, Line: line, Column: column}, format, args...)
}

// readRow reads one row of values.
func (r *reader) readRow(line []byte) {
	if r.row == blockRows {
		r.flush()
	}
	values := r.rows[r.row*len(r.headings):][:len(r.headings)]
	r.row++
	i := bytes.IndexByte(line, r.sep)
	if i < 0 || bytes.IndexByte(line, '"') >= 0 {
		r.readSlowly(line, values)
		return
	}
	r.readTime(bytes.TrimSpace(line[:i]))
	for k := range values {
		if i >= len(line) {
			r.short(k + 1)
			return
		}
		i++ // the separator
		if !r.headings[k].note {
			if v, next, ok := shortDecimal(line, i, r.sep, r.marks.mark); ok {
				values[k], i = v, next
				continue
			}
		}
		end := bytes.IndexByte(line[i:], r.sep)
		if end < 0 {
			end = len(line) - i
		}
		r.readCell(k, line[i:i+end], values)
		i += end
	}
	if i < len(line) {
		r.long(line[i+1:], len(values)+2)
	}
}

// readSlowly reads a row that has quotation marks or only one cell.
func (r *reader) readSlowly(line []byte, values []float64) {
	cells, problem := splitCells(line, r.sep)
	if problem != "" {
		r.fault(len(cells)+1, "%s", problem)
		r.addTime(noTime)
		return
	}
	r.readTime(cells[0])
	for k := range values {
		if k+1 >= len(cells) {
			r.short(k + 1)
			return
		}
		r.readCell(k, cells[k+1], values)
	}
	for k := len(values) + 1; k < len(cells); k++ {
		r.long(cells[k], k+1)
	}
}

func (r *reader) readCell(k int, cell []byte, values []float64) {
	if r.headings[k].note {
		return
	}
	v, problem := r.marks.number(cell, r.lines.number)
	if problem != "" {
		r.fault(k+2, "profile %q: %s", r.headings[k].name, problem)
	}
	values[k] = v
}

func (r *reader) short(cells int) {
	r.fault(0, "the row has %d cells, the header has %d; every row needs a value in every column", cells, len(r.headings)+1)
}

// long reports what stands behind the last column, unless it is blank.
func (r *reader) long(rest []byte, column int) {
	for _, c := range rest {
		if c > ' ' && c != r.sep {
			r.fault(column, "the row is longer than the header, which has %d cells", len(r.headings)+1)
			return
		}
	}
}

// flush sorts the rows into the columns, in base units.
func (r *reader) flush() {
	width := len(r.headings)
	for k := range r.columns {
		if r.headings[k].note {
			continue
		}
		u, column := r.headings[k].unit, r.columns[k]
		plain := u.plain()
		for i := k; i < r.row*width; i += width {
			v := r.rows[i]
			if !plain {
				v = u.apply(v)
			}
			column = append(column, v)
		}
		r.columns[k] = column
	}
	r.row = 0
}

// series makes the series of a file without faults.
func (r *reader) series() []*Series {
	g := r.grid()
	var list []*Series
	reactive := make(map[string]*Series)
	for k, h := range r.headings {
		if h.note {
			continue
		}
		s := newSeries(h.name, h.unit, r.places[k], g, r.columns[k])
		if h.unit.base == "kvar" {
			reactive[h.name] = s
			continue
		}
		list = append(list, s)
	}
	for _, s := range list {
		s.Kvar = reactive[s.Name]
	}
	return list
}

func (r *reader) grid() grid {
	g := grid{
		start: r.first[0].t,
		stamp: r.first[0].t,
		step:  r.step,
		n:     r.count,
		lines: r.block.Interpolate,
		zone:  r.clock.zone,
	}
	if r.block.Stamped == "end" {
		g.start -= g.step
	}
	switch r.block.Repeat {
	case "day":
		g.again = byDay
	case "week":
		g.again = byWeek
	case "year":
		g.again = byYear
	}
	return g
}
