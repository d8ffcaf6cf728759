package results

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"math"

	"github.com/parquet-go/parquet-go"
	"github.com/parquet-go/parquet-go/format"

	"yearflow/sim/tables"
)

// A row group that the writer makes has fewer rows and values than these.
const (
	mostGroupRows   = 2 * groupValues
	mostGroupValues = 64 * groupValues
)

// columnReader reads a series that columnFile wrote.
type columnReader struct {
	name   string
	names  []string // of the figures
	file   *parquet.File
	closer io.Closer
	values []parquet.Value
}

// guard turns a panic of the library on a broken file into an error.
func guard(err *error) {
	if r := recover(); r != nil {
		*err = fmt.Errorf("the file is broken (%v)", r)
	}
}

// broken makes a fault of an error, with what to do.
func (c *columnReader) broken(err error) error {
	return tables.Faults{{Pos: tables.Pos{File: c.name}, Text: fmt.Sprintf("is no series of ours (%v): the file is broken or cut off; run the study again", err)}}
}

// openColumns opens a series and reads the names of its columns.
func openColumns(files fs.FS, name string) (*columnReader, error) {
	f, err := files.Open(name)
	if err != nil {
		return nil, tables.Faults{missingFile(name, err)}
	}
	c := &columnReader{name: name, closer: f}
	if err := c.open(f); err != nil {
		f.Close()
		return nil, c.broken(err)
	}
	return c, nil
}

func (c *columnReader) open(f fs.File) (err error) {
	defer guard(&err)
	at, size, err := readerAt(f)
	if err != nil {
		return err
	}
	if err := wholeFile(at, size); err != nil {
		return err
	}
	if c.file, err = parquet.OpenFile(at, size, parquet.SkipPageIndex(true), parquet.SkipBloomFilters(true)); err != nil {
		return err
	}
	for i, column := range c.file.Root().Columns() {
		kind := parquet.Double
		if i == 0 {
			kind = parquet.Int64
			if column.Name() != "time" || !isTime(column.Type()) {
				return errors.New("the first column is not time")
			}
		}
		if !column.Leaf() || column.Repeated() || column.Type().Kind() != kind || column.Optional() != (i > 0) {
			return fmt.Errorf("column %q holds no figures", column.Name())
		}
		if i > 0 {
			c.names = append(c.names, column.Name())
		}
	}
	return c.groups(size)
}

// isTime tells whether a type is an instant, ns since 1970 UTC.
func isTime(t parquet.Type) bool {
	logical := t.LogicalType()
	if logical == nil {
		return false
	}
	stamp, ok := logical.Value.(*format.TimestampType)
	if !ok || !stamp.IsAdjustedToUTC {
		return false
	}
	_, ok = stamp.Unit.Value.(*format.NanoSeconds)
	return ok
}

// groups checks the sizes of the row groups and how they are packed before anything is
// made for them: what our writer does not make could ask for any amount of memory.
func (c *columnReader) groups(size int64) error {
	left := c.file.NumRows()
	for _, g := range c.file.Metadata().RowGroups {
		n := g.NumRows
		if n <= 0 || n > left || n > mostGroupRows || n*int64(len(c.names)) > mostGroupValues {
			return fmt.Errorf("a row group of %d rows", n)
		}
		columns := g.Columns
		if len(columns) != len(c.names)+1 {
			return fmt.Errorf("a row group of %d columns", len(columns))
		}
		for i := range columns {
			if m := &columns[i].MetaData; !ours(m, n, size) {
				return fmt.Errorf("a column of %d values in %d bytes, %s", m.NumValues, m.TotalUncompressedSize, m.Codec)
			}
		}
		left -= n
	}
	if left != 0 {
		return fmt.Errorf("%d rows are missing", left)
	}
	return nil
}

// ours tells whether a column of a row group can be of columnFile.
func ours(m *format.ColumnMetaData, rows, size int64) bool {
	for _, e := range m.Encoding {
		if e != format.Plain && e != format.RLE && e != format.DeltaBinaryPacked && e != format.ByteStreamSplit {
			return false
		}
	}
	const perValue = 32 // bytes, before they are packed: at most eight, a level, and heads of pages
	return m.Codec == format.Zstd && m.NumValues == rows && m.DictionaryPageOffset == 0 &&
		m.TotalUncompressedSize <= perValue*rows+1<<12 && m.DataPageOffset >= 4 && m.TotalCompressedSize > 0 && m.DataPageOffset <= size-m.TotalCompressedSize
}

func (c *columnReader) close() { c.closer.Close() } // only read

// each calls do with every row; the slice is used again for the next.
func (c *columnReader) each(do func(at int64, figures []float64) error) error {
	var (
		times  []int64
		row    = make([]float64, len(c.names))
		by     = make([][]float64, len(c.names))
		before = int64(math.MinInt64)
	)
	for _, g := range c.file.RowGroups() {
		var err error
		if times, err = c.times(g, times[:0]); err != nil {
			return c.broken(err)
		}
		for i := range by {
			if by[i], err = c.column(g, i, by[i][:0]); err != nil {
				return c.broken(fmt.Errorf("column %s: %w", c.names[i], err))
			}
		}
		for k, at := range times {
			if at <= before {
				return c.broken(fmt.Errorf("row %d is not after the row before it", k+1))
			}
			before = at
			for i := range by {
				row[i] = by[i][k]
			}
			if err := do(at, row); err != nil {
				return err
			}
		}
	}
	return nil
}

func (c *columnReader) times(g parquet.RowGroup, out []int64) ([]int64, error) {
	err := c.chunk(g, 0, func(v parquet.Value) error {
		out = append(out, v.Int64())
		return nil
	})
	return out, err
}

func (c *columnReader) column(g parquet.RowGroup, i int, out []float64) ([]float64, error) {
	err := c.chunk(g, i+1, func(v parquet.Value) error {
		x := math.NaN()
		if !v.IsNull() {
			if x = v.Double(); math.IsNaN(x) || math.IsInf(x, 0) {
				return fmt.Errorf("want a number, got %g", x)
			}
		}
		out = append(out, x)
		return nil
	})
	return out, err
}

// chunk calls do with every value of a column in a row group, one for each row.
func (c *columnReader) chunk(g parquet.RowGroup, column int, do func(parquet.Value) error) (err error) {
	defer guard(&err)
	if c.values == nil {
		c.values = make([]parquet.Value, 1024)
	}
	pages := g.ColumnChunks()[column].Pages()
	defer pages.Close()
	left := g.NumRows()
	for {
		page, err := pages.ReadPage()
		if err == io.EOF {
			break
		}
		if err != nil {
			return err
		}
		n, err := c.page(page, left, do)
		parquet.Release(page)
		if err != nil {
			return err
		}
		left -= n
	}
	if left != 0 {
		return fmt.Errorf("%d values are missing", left)
	}
	return nil
}

// page calls do with the values of a page, of which there are at most the given number.
func (c *columnReader) page(page parquet.Page, most int64, do func(parquet.Value) error) (done int64, err error) {
	values := page.Values()
	for {
		n, err := values.ReadValues(c.values)
		if done += int64(n); done > most {
			return done, errors.New("more values than rows")
		}
		for _, v := range c.values[:n] {
			if err := do(v); err != nil {
				return done, err
			}
		}
		if err == io.EOF {
			return done, nil
		}
		if err != nil {
			return done, err
		}
		if n == 0 {
			return done, io.ErrNoProgress
		}
	}
}

// readerAt returns a file for reading at any place, and its size.
func readerAt(f fs.File) (io.ReaderAt, int64, error) {
	if at, ok := f.(io.ReaderAt); ok {
		st, err := f.Stat()
		if err != nil {
			return nil, 0, err
		}
		return at, st.Size(), nil
	}
	data, err := io.ReadAll(f)
	return bytes.NewReader(data), int64(len(data)), err
}

// wholeFile checks the marks at both ends of a Parquet file: a file that was cut off has
// none at its end, and a length that is not the file's must not be made room for.
//
// Source: Apache Parquet, file format: "PAR1", data, metadata, its length in four bytes,
// "PAR1".
func wholeFile(at io.ReaderAt, size int64) error {
	const mark = "PAR1"
	var head, tail [8]byte
	if size < 12 {
		return errors.New("it is too short")
	}
	if _, err := at.ReadAt(head[:4], 0); err != nil {
		return err
	}
	if _, err := at.ReadAt(tail[:], size-8); err != nil {
		return err
	}
	if string(head[:4]) != mark || string(tail[4:]) != mark {
		return errors.New("the mark of a Parquet file is missing at its beginning or its end")
	}
	if n := int64(binary.LittleEndian.Uint32(tail[:4])); n > size-12 {
		return errors.New("its end is longer than the file")
	}
	return nil
}
