package profiles

import (
	"bytes"
	"fmt"
	"strconv"
)

// Powers of ten that are exact in a float64.
var pow10 = [...]float64{1, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15}

func isSpace(c byte) bool { return c == ' ' || c == '\t' }

// shortDecimal reads an unsigned or negative decimal of at most 15 digits at
// line[i:], up to sep or the end of the line, spaces around it allowed. Its integer
// and its power of ten are exact, so the one division rounds once and the value is
// the nearest float64 (W. D. Clinger, How to read floating point numbers accurately,
// PLDI 1990). next is the place of the separator, or len(line). What is not of
// that form gives ok = false.
func shortDecimal(line []byte, i int, sep, mark byte) (v float64, next int, ok bool) {
	for i < len(line) && line[i] == ' ' {
		i++
	}
	negative := i < len(line) && line[i] == '-'
	if negative {
		i++
	}
	var m uint64
	first := i
	for i < len(line) {
		d := line[i] - '0'
		if d > 9 {
			break
		}
		m = m*10 + uint64(d)
		i++
	}
	n, fraction := i-first, 0
	if i < len(line) && line[i] == mark {
		i++
		first = i
		for i < len(line) {
			d := line[i] - '0'
			if d > 9 {
				break
			}
			m = m*10 + uint64(d)
			i++
		}
		fraction = i - first
		n += fraction
	}
	for i < len(line) && line[i] == ' ' && sep != ' ' {
		i++
	}
	if n == 0 || n > 15 || (i < len(line) && line[i] != sep) {
		return 0, i, false
	}
	v = float64(m)
	if fraction > 0 {
		v /= pow10[fraction]
	}
	if negative {
		v = -v
	}
	return v, i, true
}

// marks is the decimal mark of a file: a point where cells are separated by commas,
// else the one that is met first, at line.
type marks struct {
	mark byte // 0: not yet met
	line int
}

// number reads any cell; problem is what is wrong with it, or blank.
func (m *marks) number(cell []byte, line int) (v float64, problem string) {
	cell = bytes.TrimSpace(cell)
	if len(cell) == 0 {
		return 0, "is empty; every row needs a value in every column"
	}
	i := bytes.IndexAny(cell, ".,")
	if i >= 0 && m.mark == 0 && bytes.Count(cell, []byte(","))+bytes.Count(cell, []byte(".")) == 1 {
		m.mark, m.line = cell[i], line
	}
	text := make([]byte, 0, 32)
	for _, c := range cell {
		switch {
		case c == m.mark && c != 0:
			text = append(text, '.')
		case isDigit(c), c == '-', c == '+', c == 'e', c == 'E':
			text = append(text, c)
		case c == '.' || c == ',':
			return 0, m.wrongMark(cell)
		default:
			return 0, fmt.Sprintf("want a number, got %q", shorten(string(cell)))
		}
	}
	v, err := strconv.ParseFloat(string(text), 64)
	switch {
	case err != nil && v != 0 && v-v != 0:
		return 0, fmt.Sprintf("the number %q is too large", shorten(string(cell)))
	case err != nil:
		return 0, fmt.Sprintf("want a number, got %q", shorten(string(cell)))
	}
	return v, ""
}

func (m *marks) wrongMark(cell []byte) string {
	got := shorten(string(cell))
	switch {
	case m.line > 0 && m.mark == ',':
		return fmt.Sprintf("want a number with a decimal comma as on line %d, without separators of thousands, got %q", m.line, got)
	case m.line > 0:
		return fmt.Sprintf("want a number with a decimal point as on line %d, without separators of thousands, got %q", m.line, got)
	}
	return fmt.Sprintf("want a number with a decimal point, without separators of thousands, got %q (decimal commas need semicolons between the cells)", got)
}

// splitCells cuts a line at sep into cells without the spaces around them. A cell
// may be quoted as a whole, with "" for a quotation mark in it; problem is what is
// wrong with cell number len(cells)+1.
func splitCells(line []byte, sep byte) (cells [][]byte, problem string) {
	for {
		for len(line) > 0 && isSpace(line[0]) && line[0] != sep {
			line = line[1:]
		}
		var cell []byte
		if len(line) > 0 && line[0] == '"' {
			quoted, rest, ok := cutQuoted(line)
			if !ok {
				return cells, "a quotation mark is not closed on its line; write each row on one line"
			}
			for len(rest) > 0 && isSpace(rest[0]) && rest[0] != sep {
				rest = rest[1:]
			}
			if len(rest) > 0 && rest[0] != sep {
				return cells, "text stands behind a closing quotation mark: quote the whole cell and double the marks inside it"
			}
			cell, line = bytes.TrimSpace(quoted), rest
		} else {
			i := bytes.IndexByte(line, sep)
			if i < 0 {
				i = len(line)
			}
			cell, line = bytes.TrimSpace(line[:i]), line[i:]
			if bytes.IndexByte(cell, '"') >= 0 {
				return cells, "a quotation mark stands inside a cell: quote the whole cell and double the marks inside it"
			}
		}
		cells = append(cells, cell)
		if len(line) == 0 {
			return cells, ""
		}
		line = line[1:]
	}
}

// cutQuoted reads the quoted text that line begins with.
func cutQuoted(line []byte) (text, rest []byte, ok bool) {
	line = line[1:]
	for {
		i := bytes.IndexByte(line, '"')
		if i < 0 {
			return nil, nil, false
		}
		text = append(text, line[:i]...)
		line = line[i+1:]
		if len(line) == 0 || line[0] != '"' {
			return text, line, true
		}
		text = append(text, '"')
		line = line[1:]
	}
}
