package profiles

import (
	"bytes"
	"io"
)

// maxLine is the longest line, in bytes, that is still taken for a line of numbers:
// a hundred thousand columns. What is longer is something else and is not read on.
const maxLine = 1 << 20

// lines cuts a stream into lines without their ends (LF or CRLF), within one
// buffer that grows up to maxLine.
type lines struct {
	r          io.Reader
	buf        []byte
	start, end int
	number     int // of the line last returned, from 1
	done       bool
	err        error // of the stream, other than io.EOF
	tooLong    bool
}

func newLines(r io.Reader) *lines { return &lines{r: r, buf: make([]byte, 128<<10)} }

// fill reads once more and reports whether anything came.
func (l *lines) fill() bool {
	if l.done {
		return false
	}
	if l.start > 0 {
		copy(l.buf, l.buf[l.start:l.end])
		l.end -= l.start
		l.start = 0
	}
	if l.end == len(l.buf) {
		l.buf = append(l.buf, make([]byte, len(l.buf))...)
	}
	for range 100 { // a reader may give nothing for a while, not for ever
		n, err := l.r.Read(l.buf[l.end:])
		l.end += n
		if err != nil {
			l.done = true
			if err != io.EOF {
				l.err = err
			}
			return n > 0
		}
		if n > 0 {
			return true
		}
	}
	l.done, l.err = true, io.ErrNoProgress
	return false
}

// peek returns at least n bytes from the present place on, or what there is.
func (l *lines) peek(n int) []byte {
	for l.end-l.start < n && l.fill() {
	}
	return l.buf[l.start:l.end]
}

// next returns the next line, which is valid until the next call, and false at the
// end, after an error, or where a line is too long.
func (l *lines) next() ([]byte, bool) {
	searched := 0
	for {
		if i := bytes.IndexByte(l.buf[l.start+searched:l.end], '\n'); i >= 0 {
			line := l.buf[l.start : l.start+searched+i]
			l.start += searched + i + 1
			l.number++
			return bytes.TrimSuffix(line, []byte{'\r'}), true
		}
		searched = l.end - l.start
		if searched > maxLine {
			l.number++
			l.tooLong = true
			return nil, false
		}
		if !l.fill() {
			break
		}
	}
	if l.err != nil || l.start == l.end {
		return nil, false
	}
	line := l.buf[l.start:l.end]
	l.start = l.end
	l.number++
	return bytes.TrimSuffix(line, []byte{'\r'}), true
}
