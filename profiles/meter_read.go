package profiles

import (
	"bytes"
	"compress/gzip"
	"crypto/sha256"
	"hash"
	"io"
	"io/fs"
	"math"
	"strings"

	"yearflow/sim/tables"
)

// meterContent is what a file holds.
type meterContent struct {
	stores   []*store
	faults   tables.Faults
	warnings tables.Faults
	stat     fileStat
	sum      [sha256.Size]byte
}

// meterReader reads one file. It shares lines, cells, faults and clock with the reader
// of profiles.
type meterReader struct {
	reader
	file   meterFile
	number int32 // of the file

	columns []meterColumn
	timeAt  int // column
	meterAt int // column of the meter's name; −1 in a wide file

	stores  []*store
	index   map[string]int
	hot     []hot // of each store
	current int

	text   []byte // of the last stamp
	when   moment
	before uint32 // the time of the row before, of a wide file
	lost   int    // rows of the hour that spring skips
	cells  [][]byte
}

// hot is what a row needs of its meter, close together for the processor's cache.
type hot struct {
	name     string
	prev     uint32 // the time of its last reading, 0: none
	next     int32  // the meter that came after this one the last time, or −1
	real     chunk  // not yet in the store
	reactive chunk
}

// moment is a stamp that is read: one instant, or two in a repeated hour.
type moment struct {
	first, last uint32
	n           int // 0: the clock skips it, −1: a fault
	civil       int64
}

// counted hands on what is read and hashes it.
type counted struct {
	r   io.Reader
	sum hash.Hash
}

func (c *counted) Read(p []byte) (int, error) {
	n, err := c.r.Read(p)
	c.sum.Write(p[:n])
	return n, err
}

// unpack returns what a stream holds, unpacked where it is a gzip file.
func unpack(r io.Reader) (io.Reader, error) {
	magic := make([]byte, 2)
	n, err := io.ReadFull(r, magic)
	if err != nil && err != io.EOF && err != io.ErrUnexpectedEOF {
		return nil, err
	}
	whole := io.MultiReader(bytes.NewReader(magic[:n]), r)
	if string(magic[:n]) != "\x1f\x8b" {
		return whole, nil
	}
	return gzip.NewReader(whole)
}

func readMeterFile(fsys fs.FS, file meterFile, number int32) (out meterContent) {
	r := &meterReader{reader: reader{name: file.name, clock: newClock(file.block.Zone)}, file: file, number: number,
		index: make(map[string]int), current: -1}
	at := tables.Pos{File: file.name}
	f, err := fsys.Open(file.name)
	if err != nil {
		out.faults.Add(at, "cannot be read: %v", reason(err))
		return out
	}
	defer f.Close()
	if st, err := f.Stat(); err == nil {
		if st.IsDir() {
			out.faults.Add(at, "is a folder; want a file")
			return out
		}
		out.stat = statOf(f, st)
	}
	raw := &counted{f, sha256.New()}
	content, err := unpack(raw)
	if err != nil {
		out.faults.Add(at, "is a gzip file that cannot be unpacked: %v", err)
		return out
	}
	ahead := newAhead(content)
	r.lines = newLines(ahead)
	r.readAll()
	r.close()
	ahead.stop()
	switch {
	case r.lines.err != nil:
		r.faults.Add(at, "cannot be read: %v", reason(r.lines.err))
	case r.lines.tooLong:
		at.Line = r.lines.number
		r.faults.Add(at, "the line is longer than %d bytes: this is not a table of meter data", maxLine)
	}
	if _, err := io.Copy(io.Discard, raw); err != nil && len(r.faults) == 0 {
		r.faults.Add(at, "cannot be read: %v", reason(err))
	}
	copy(out.sum[:], raw.sum.Sum(nil))
	out.stores, out.faults = r.stores, r.faults
	if r.lost > 0 {
		out.warnings.Add(at, "%d rows without a value stand in the hour that spring skips in %s; they are passed over", r.lost, r.clock.zone)
	}
	return out
}

func (r *meterReader) readAll() {
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
			r.faults.Add(tables.Pos{File: r.name}, "is empty; want a header such as time,meter,value [kWh] and rows of values")
		}
		return
	}
	if !r.readHeader(header) {
		return
	}
	for {
		line, ok := r.nextRow()
		if !ok {
			break
		}
		if r.lines.number == math.MaxUint32 {
			r.fault(0, "the file has too many lines; cut it in parts")
			break
		}
		r.count++
		if r.cut(line) {
			r.readCells()
		}
	}
	if r.count == 0 && r.lines.err == nil && !r.lines.tooLong {
		r.fault(0, "there are no rows below the header")
	}
	if r.untold > 0 {
		r.faults.Add(tables.Pos{File: r.name, Line: r.lines.number}, "and %d more faults in this file", r.untold)
	}
}

// cut cuts a line into r.cells, which are as many as columns.
func (r *meterReader) cut(line []byte) bool {
	if bytes.IndexByte(line, '"') >= 0 {
		cells, problem := splitCells(line, r.sep)
		if problem != "" {
			r.fault(len(cells)+1, "%s", problem)
			return false
		}
		r.cells = append(r.cells[:0], cells...)
	} else {
		r.cells = r.cells[:0]
		for {
			i := bytes.IndexByte(line, r.sep)
			if i < 0 {
				break
			}
			r.cells = append(r.cells, line[:i])
			line = line[i+1:]
		}
		r.cells = append(r.cells, line)
	}
	for n := len(r.cells); n > len(r.columns) && len(bytes.TrimSpace(r.cells[n-1])) == 0; n-- {
		r.cells = r.cells[:n-1]
	}
	if len(r.cells) != len(r.columns) {
		r.fault(0, "the row has %d cells, the header has %d", len(r.cells), len(r.columns))
		return false
	}
	return true
}

func (r *meterReader) readCells() {
	when, ok := r.stamp(r.cells[r.timeAt])
	if !ok {
		return
	}
	if r.meterAt < 0 {
		r.readWide(when)
		return
	}
	name := bytes.TrimSpace(r.cells[r.meterAt])
	if len(name) == 0 {
		r.fault(r.meterAt+1, "the meter's name is empty")
		return
	}
	i := r.find(name)
	sec, ok := r.choose(when, r.hot[i].prev)
	if !ok {
		return
	}
	r.hot[i].prev = sec
	for k := range r.columns {
		if c := &r.columns[k]; c.kind != notValue {
			r.readValue(k, i, sec)
		}
	}
}

func (r *meterReader) readWide(when moment) {
	sec, ok := r.choose(when, r.before)
	if !ok {
		return
	}
	r.before = sec
	for k := range r.columns {
		if c := &r.columns[k]; c.kind != notValue {
			r.readValue(k, c.store, sec)
		}
	}
}

// readValue reads cell k, of meter i.
func (r *meterReader) readValue(k, i int, sec uint32) {
	c := &r.columns[k]
	cell := r.cells[k]
	v, _, ok := shortDecimal(cell, 0, r.sep, r.marks.mark)
	if !ok {
		if isMissing(cell) {
			v = math.NaN()
		} else {
			var problem string
			if v, problem = r.marks.number(cell, r.lines.number); problem != "" {
				r.fault(k+1, "meter %q: %s", r.hot[i].name, problem)
				return
			}
		}
	}
	v *= c.factor
	if math.Abs(v) > largestReading {
		r.fault(k+1, "meter %q: %g is no reading of a meter", r.hot[i].name, v)
		return
	}
	h, ch := &r.hot[i].real, &r.stores[i].real
	if c.kind == reactiveValue {
		h, ch = &r.hot[i].reactive, &r.stores[i].reactive
	}
	register := r.file.block.Values == "register"
	if h.full() {
		r.known(ch, k)
		*h = ch.take(*h, register)
	}
	h.put(sec, r.lines.number, v, register)
}

// known notes the unit and the place of a channel's first value.
func (r *meterReader) known(ch *channel, k int) {
	if !ch.seen {
		ch.seen, ch.energy, ch.pos = true, r.columns[k].energy, tables.Pos{File: r.name, Line: r.lines.number, Column: k + 1}
	}
}

// largestReading keeps sums and powers of what is read finite in float32: a million
// gigawatts, which no meter has.
const largestReading = 1e15

func isMissing(cell []byte) bool {
	cell = bytes.TrimSpace(cell)
	switch len(cell) {
	case 0:
		return true
	case 1:
		return cell[0] == '-'
	case 2, 3, 4:
		switch strings.ToLower(string(cell)) {
		case "na", "n/a", "nan", "null":
			return true
		}
	}
	return false
}

// find returns the meter of a name. Files repeat the order of their meters, so the one
// that followed last time is tried first.
func (r *meterReader) find(name []byte) int {
	if r.current >= 0 {
		h := &r.hot[r.current]
		if h.next >= 0 && string(name) == r.hot[h.next].name {
			r.current = int(h.next)
			return r.current
		}
		if string(name) == h.name {
			return r.current
		}
	}
	i, ok := r.index[string(name)]
	if !ok {
		i = r.newStore(string(name))
	}
	if r.current >= 0 {
		r.hot[r.current].next = int32(i)
	}
	r.current = i
	return i
}

func (r *meterReader) newStore(name string) int {
	i := len(r.stores)
	r.index[name] = i
	s := &store{name: name, block: r.file.block}
	s.real.pos = tables.Pos{File: r.name, Line: r.lines.number}
	r.stores = append(r.stores, s)
	r.hot = append(r.hot, hot{name: name, next: -1, real: chunk{file: r.number}, reactive: chunk{file: r.number}})
	return i
}

// close puts what is left to the stores.
func (r *meterReader) close() {
	for i := range r.hot {
		h := &r.hot[i]
		r.stores[i].real.take(h.real, false)
		r.stores[i].reactive.take(h.reactive, false)
		h.real, h.reactive = chunk{}, chunk{}
	}
}
