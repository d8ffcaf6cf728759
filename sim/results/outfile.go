package results

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"hash"
	"io"
	"math"
	"os"
	"path/filepath"
)

// sink is where the bytes of a file go: an *os.File, or in tests one that fails.
type sink interface {
	io.WriteCloser
	Sync() error
}

// flushAt is the length of a buffer above which it is handed on.
const flushAt = 64 << 10

// outFile is one file of a results folder. Rows are appended to row and closed by
// end; what has been written is hashed on the way. Where columns is not nil rows are
// figures of a Parquet file, and row holds what it gave to be written.
type outFile struct {
	name    string
	row     []byte
	out     sink
	sum     hash.Hash
	columns *columnFile
	err     error // of out
}

func createFile(dir, name string) (*outFile, error) {
	f, err := os.OpenFile(filepath.Join(dir, name), os.O_CREATE|os.O_TRUNC|os.O_WRONLY, 0o644)
	if err != nil {
		return nil, fmt.Errorf("create %s: %w", name, err)
	}
	return &outFile{name: name, row: make([]byte, 0, flushAt+16<<10), out: f, sum: sha256.New()}, nil
}

// header writes the first line from names of columns.
func (f *outFile) header(columns ...string) error {
	for i, c := range columns {
		if i > 0 {
			f.comma()
		}
		f.text(c)
	}
	return f.end()
}

// rows writes rows of text.
func (f *outFile) rows(rows [][]string) error {
	for _, r := range rows {
		if err := f.header(r...); err != nil {
			return err
		}
	}
	return nil
}

func (f *outFile) comma()         { f.row = append(f.row, ',') }
func (f *outFile) text(s string)  { f.row = appendText(f.row, s) }
func (f *outFile) count(n int)    { f.row = appendFixed(append(f.row, ','), float64(n), 0) }
func (f *outFile) hours(ns int64) { f.figure(float64(ns) / float64(hour)) }

// begin begins a row of a series.
func (f *outFile) begin(c *zoneClock, ns int64) {
	if f.columns != nil {
		f.columns.begin(ns)
		return
	}
	f.row = c.append(f.row, ns)
}

// pu writes a voltage in p.u.
func (f *outFile) pu(x float64) {
	if f.columns != nil {
		f.columns.figure(roundPU(x))
		return
	}
	f.row = appendPU(append(f.row, ','), x)
}

// figure writes a power, a current, an energy or a share.
func (f *outFile) figure(x float64) {
	if f.columns != nil {
		f.columns.figure(roundFigure(x))
		return
	}
	f.row = appendFigure(append(f.row, ','), x)
}

// empty writes cells without a figure.
func (f *outFile) empty(n int) {
	for range n {
		if f.columns != nil {
			f.columns.figure(math.NaN())
			continue
		}
		f.comma()
	}
}

// next writes a comma and a text.
func (f *outFile) next(s string) {
	f.comma()
	f.text(s)
}

// at writes a comma and an instant; none where there is no figure to go with it.
func (f *outFile) at(c *zoneClock, ns int64, known bool) {
	f.comma()
	if known {
		f.row = c.append(f.row, ns)
	}
}

// end closes the row. An error names the file.
func (f *outFile) end() error {
	if f.columns != nil {
		return f.named(f.columns.end())
	}
	f.row = append(f.row, '\n')
	if len(f.row) < flushAt {
		return nil
	}
	return f.flush()
}

// Write takes what columns give to be written.
func (f *outFile) Write(p []byte) (int, error) {
	f.row = append(f.row, p...)
	if len(f.row) < flushAt {
		return len(p), nil
	}
	if f.err = f.flush(); f.err != nil {
		return 0, f.err
	}
	return len(p), nil
}

// named puts the name of the file to an error of columns.
func (f *outFile) named(err error) error {
	if err == nil || f.err != nil {
		return f.err
	}
	return fmt.Errorf("write %s: %w", f.name, err)
}

func (f *outFile) flush() error {
	if len(f.row) == 0 {
		return nil
	}
	f.sum.Write(f.row) // a hash returns no error
	_, err := f.out.Write(f.row)
	f.row = f.row[:0]
	if err != nil {
		return fmt.Errorf("write %s: %w", f.name, err)
	}
	return nil
}

// finish hands everything to the disk and closes the file.
func (f *outFile) finish() error {
	var err error
	if f.columns != nil {
		err = f.named(f.columns.close())
	}
	if err == nil {
		err = f.flush()
	}
	if err != nil {
		f.out.Close()
		return err
	}
	if err := f.out.Sync(); err != nil {
		f.out.Close()
		return fmt.Errorf("write %s: %w", f.name, err)
	}
	if err := f.out.Close(); err != nil {
		return fmt.Errorf("close %s: %w", f.name, err)
	}
	return nil
}

// hash returns the SHA-256 of what has been written, in hexadecimal digits.
func (f *outFile) hash() string { return hex.EncodeToString(f.sum.Sum(nil)) }
