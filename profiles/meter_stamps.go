package profiles

import (
	"bytes"
	"math"
)

// stamp reads the time of a row; equal ones in a row are read once.
func (r *meterReader) stamp(cell []byte) (moment, bool) {
	if len(r.text) > 0 && bytes.Equal(cell, r.text) {
		return r.when, r.when.n >= 0
	}
	r.text = append(r.text[:0], cell...)
	r.when = r.readStamp(bytes.TrimSpace(cell))
	if r.when.n < 0 {
		r.text = r.text[:0] // so that each row is told
	}
	return r.when, r.when.n >= 0
}

func (r *meterReader) readStamp(cell []byte) moment {
	s, problem := parseStamp(cell)
	switch {
	case len(cell) == 0:
		r.fault(r.timeAt+1, "the time is empty; %s", wantTime)
		return moment{n: -1}
	case problem != "":
		r.fault(r.timeAt+1, "%s, got %q", problem, shorten(string(cell)))
		return moment{n: -1}
	case s.zoned:
		t, ok := r.seconds(s.civil - s.offset)
		if !ok {
			return moment{n: -1}
		}
		return moment{first: t, last: t, n: 1}
	}
	first, last, n := r.clock.instants(s.civil)
	if n == 0 {
		return moment{civil: s.civil}
	}
	a, ok1 := r.seconds(first)
	if n == 1 {
		if !ok1 {
			return moment{n: -1}
		}
		return moment{first: a, last: a, n: 1}
	}
	b, ok2 := r.seconds(last)
	if !ok1 || !ok2 {
		return moment{n: -1}
	}
	return moment{first: a, last: b, n: 2}
}

// seconds returns whole seconds since 1970.
func (r *meterReader) seconds(t int64) (uint32, bool) {
	switch {
	case t%second != 0:
		r.fault(r.timeAt+1, "the time has a fraction of a second; want whole seconds")
		return 0, false
	case t < day || t/second >= math.MaxUint32:
		r.fault(r.timeAt+1, "want a year from 1970 to 2105")
		return 0, false
	}
	return uint32(t / second), true
}

// choose returns the instant of a row whose meter was last read at prev. In a repeated
// hour it is the nearer to prev of the two that is not prev itself, so that rows in
// order, and rows from the last to the first, come out right: the first 01:45 is
// followed by the second 01:00, fifteen minutes later and not three quarters of an
// hour before.
func (r *meterReader) choose(m moment, prev uint32) (uint32, bool) {
	switch m.n {
	case 0:
		return 0, r.skippedRow(m)
	case 1:
		return m.first, true
	}
	switch prev {
	case 0, m.last:
		return m.first, true
	case m.first:
		return m.last, true
	}
	if apart(m.last, prev) < apart(m.first, prev) {
		return m.last, true
	}
	return m.first, true
}

func apart(a, b uint32) uint32 {
	if a > b {
		return a - b
	}
	return b - a
}

// skippedRow takes a row at a time that the clock skips. Without values it is passed
// over: some exports write 24 hours on each day. It reports false.
func (r *meterReader) skippedRow(m moment) bool {
	for k := range r.columns {
		if r.columns[k].kind == notValue || isMissing(r.cells[k]) {
			continue
		}
		v, problem := r.marks.number(r.cells[k], r.lines.number)
		if problem != "" || v != 0 {
			r.fault(r.timeAt+1, "%s", r.clock.skipped(m.civil))
			return false
		}
	}
	r.lost++
	return false
}
