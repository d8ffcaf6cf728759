package tables

import (
	"bytes"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"strings"
	"unicode/utf8"
)

// Limits on what is taken for a table; a file beyond them is something else.
const (
	maxLine = 1 << 20   // bytes
	maxFile = 256 << 20 // bytes
)

// record is one line of a file, cut into cells without the spaces around them.
type record struct {
	line  int
	cells []string
}

// ReadText returns the text of a file whose lines are at most a megabyte long, or a
// fault that says what the file is instead. It reads no more than it needs to tell.
func ReadText(fsys fs.FS, name string) ([]byte, *Fault) {
	fault := func(line int, format string, args ...any) *Fault {
		return &Fault{Pos{File: name, Line: line}, fmt.Sprintf(format, args...)}
	}
	f, err := fsys.Open(name)
	if err != nil {
		return nil, fault(0, "cannot be read: %v", unwrapPath(err))
	}
	defer f.Close()
	if st, err := f.Stat(); err == nil {
		if st.IsDir() {
			return nil, fault(0, "is a folder; want a file")
		}
		if st.Size() > maxFile {
			return nil, fault(0, "has %d MB; a table has at most %d MB", st.Size()>>20, maxFile>>20)
		}
	}
	var data []byte
	chunk := make([]byte, 64<<10)
	line, length, seen := 1, 0, false
	for {
		n, err := f.Read(chunk)
		part := chunk[:n]
		if !seen && n > 0 {
			seen = true
			if what := disguise(part); what != "" {
				return nil, fault(0, "%s", what)
			}
		}
		for len(part) > 0 {
			i := bytes.IndexByte(part, '\n')
			piece := part
			if i >= 0 {
				piece = part[:i]
			}
			length += len(piece)
			if length > maxLine {
				return nil, fault(line, "the line is longer than %d bytes: this is not a table", maxLine)
			}
			if bytes.IndexByte(piece, 0) >= 0 {
				return nil, fault(line, "holds zero bytes: the file is binary or UTF-16; save it as CSV in UTF-8")
			}
			if i < 0 {
				break
			}
			line, length = line+1, 0
			part = part[i+1:]
		}
		data = append(data, chunk[:n]...)
		if len(data) > maxFile {
			return nil, fault(0, "has more than %d MB", maxFile>>20)
		}
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			return nil, fault(0, "cannot be read: %v", unwrapPath(err))
		}
	}
	data = bytes.TrimPrefix(data, []byte("\xef\xbb\xbf"))
	if !utf8.Valid(data) {
		line := 1
		for rest := data; len(rest) > 0; {
			r, n := utf8.DecodeRune(rest)
			if r == utf8.RuneError && n == 1 {
				break
			}
			if r == '\n' {
				line++
			}
			rest = rest[n:]
		}
		return nil, fault(line, "holds a byte that is not UTF-8; save the file as CSV in UTF-8")
	}
	return data, nil
}

func unwrapPath(err error) error {
	var pe *fs.PathError
	if errors.As(err, &pe) {
		return pe.Err
	}
	return err
}

// disguise tells by its first bytes what a file is that is no text.
func disguise(b []byte) string {
	switch {
	case bytes.HasPrefix(b, []byte{0xff, 0xfe}), bytes.HasPrefix(b, []byte{0xfe, 0xff}):
		return "is UTF-16; save it as CSV in UTF-8"
	case bytes.HasPrefix(b, []byte("\x89PNG")):
		return "is a PNG image, not a table"
	case bytes.HasPrefix(b, []byte("PK\x03\x04")):
		return "is a spreadsheet or an archive; save it as CSV in UTF-8"
	case bytes.HasPrefix(b, []byte("\xd0\xcf\x11\xe0")):
		return "is an old spreadsheet; save it as CSV in UTF-8"
	case bytes.HasPrefix(b, []byte{0x1f, 0x8b}):
		return "is a compressed file; unpack it first"
	case bytes.HasPrefix(b, []byte("%PDF")):
		return "is a PDF, not a table"
	}
	return ""
}

// scan cuts a file into records. Comments and blank lines are left out. It tells
// whether the file is separated by semicolons, and so may have decimal commas.
func scan(fsys fs.FS, name string, faults *Faults) (records []record, semicolons bool) {
	data, fault := ReadText(fsys, name)
	if fault != nil {
		*faults = append(*faults, *fault)
		return nil, false
	}
	header := firstLine(data)
	if header == "" {
		faults.Add(Pos{File: name}, "is empty; want a header with the names of the columns")
		return nil, false
	}
	commas, semis := strings.Count(header, ","), strings.Count(header, ";")
	if commas == 0 && semis == 0 && strings.Contains(header, "\t") {
		faults.Add(Pos{File: name, Line: 1}, "is separated by tabs; separate the cells by commas or semicolons")
		return nil, false
	}
	r := csv.NewReader(bytes.NewReader(data))
	r.FieldsPerRecord = -1
	r.TrimLeadingSpace = true
	r.Comment = '#'
	if semis > commas {
		r.Comma, semicolons = ';', true
	}
	for {
		cells, err := r.Read()
		if errors.Is(err, io.EOF) {
			return records, semicolons
		}
		if err != nil {
			var pe *csv.ParseError
			if errors.As(err, &pe) {
				faults.Add(Pos{File: name, Line: pe.StartLine}, "a quotation mark stands inside a cell or is not closed: quote the whole cell and double the marks inside it")
				if len(*faults) > maxFaults {
					return records, semicolons
				}
				continue
			}
			faults.Add(Pos{File: name}, "cannot be read: %v", err)
			return records, semicolons
		}
		line, _ := r.FieldPos(0)
		blank := true
		for i := range cells {
			cells[i] = strings.TrimSpace(cells[i])
			blank = blank && cells[i] == ""
		}
		if blank || strings.HasPrefix(cells[0], "#") {
			continue
		}
		for i := range cells {
			if strings.Contains(cells[i], mark) {
				faults.Add(Pos{name, line, i + 1}, "holds a control character")
				cells[i] = strings.ReplaceAll(cells[i], mark, "")
			}
		}
		records = append(records, record{line, cells})
	}
}

// firstLine is the first line that is neither blank nor a comment.
func firstLine(data []byte) string {
	for len(data) > 0 {
		line := data
		if i := bytes.IndexByte(data, '\n'); i >= 0 {
			line, data = data[:i], data[i+1:]
		} else {
			data = nil
		}
		s := strings.TrimSpace(string(line))
		if s != "" && !strings.HasPrefix(s, "#") && strings.Trim(s, ",;") != "" {
			return s
		}
	}
	return ""
}
