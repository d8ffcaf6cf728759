package results

import (
	"fmt"
	"io"
	"math"
	"reflect"

	"github.com/parquet-go/parquet-go"
	"github.com/parquet-go/parquet-go/compress/zstd"
)

// A series in Parquet has the columns of its CSV: time as an instant, ns since 1970 UTC,
// then figures as doubles, those that CSV prints, to the last digit; a blank is null. Row
// groups are bounded, so that memory does not grow with the period, but for the list of
// row groups that stands at the end of the file.
const (
	groupValues = 2 << 20 // of a row group, about
	groupRows   = 512     // of a row group, at least
	batchRows   = 128     // handed on at a time
)

const parquetEnding = ".parquet"

// columnFile writes rows of figures into the columns of a Parquet file.
type columnFile struct {
	w       *parquet.GenericWriter[any]
	columns []*parquet.ColumnWriter
	time    []int64
	figures [][]float64     // by column; one row more for every time
	values  []parquet.Value // of one column
	column  int             // of the next figure
	rows    int             // of the row group
	group   int             // at most
}

// newColumnFile begins a file of the given columns, of which the first is time.
func newColumnFile(out io.Writer, header []string) (*columnFile, error) {
	if len(header) > parquet.MaxColumnIndex {
		return nil, fmt.Errorf("a Parquet file has at most %d columns, this one would have %d: choose fewer places under [run] voltages, or series = \"csv\"", parquet.MaxColumnIndex, len(header))
	}
	seen := make(map[string]bool, len(header))
	for _, name := range header {
		if seen[name] {
			return nil, fmt.Errorf("column %q would be there twice: a name stands twice in [run] voltages or flows", name)
		}
		seen[name] = true
	}
	c := &columnFile{figures: make([][]float64, len(header)-1), time: make([]int64, 0, batchRows), values: make([]parquet.Value, 0, batchRows)}
	for i := range c.figures {
		c.figures[i] = make([]float64, 0, batchRows)
	}
	c.group = max(groupValues/len(header)/batchRows, groupRows/batchRows) * batchRows
	c.w = parquet.NewGenericWriter[any](out, seriesSchema(header), parquet.Compression(&zstd.Codec{Level: zstd.SpeedDefault}),
		parquet.CreatedBy("yearflow", "", ""), parquet.DataPageStatistics(false), parquet.MaxRowsPerRowGroup(math.MaxInt64))
	c.columns = c.w.ColumnWriters()
	return c, nil
}

// begin opens a row.
func (c *columnFile) begin(at int64) {
	c.time = append(c.time, at)
	c.column = 0
}

// figure takes the next figure of the row, NaN where there is none.
func (c *columnFile) figure(x float64) {
	c.figures[c.column] = append(c.figures[c.column], x)
	c.column++
}

// end closes a row.
func (c *columnFile) end() error {
	if len(c.time) < batchRows {
		return nil
	}
	return c.flush()
}

// flush hands the rows at hand on, and closes the row group if it is full.
func (c *columnFile) flush() error {
	c.values = c.values[:0]
	for _, t := range c.time {
		c.values = append(c.values, parquet.Int64Value(t).Level(0, 0, 0))
	}
	if _, err := c.columns[0].WriteRowValues(c.values); err != nil {
		return err
	}
	for i, figures := range c.figures {
		c.values = c.values[:0]
		for _, x := range figures {
			v := parquet.Value{}.Level(0, 0, i+1)
			if x == x {
				v = parquet.DoubleValue(x).Level(0, 1, i+1)
			}
			c.values = append(c.values, v)
		}
		if _, err := c.columns[i+1].WriteRowValues(c.values); err != nil {
			return err
		}
		c.figures[i] = figures[:0]
	}
	c.rows += len(c.time)
	c.time = c.time[:0]
	if c.rows < c.group {
		return nil
	}
	c.rows = 0
	return c.w.Flush()
}

// close writes what remains and the end of the file.
func (c *columnFile) close() error {
	if err := c.flush(); err != nil {
		return err
	}
	return c.w.Close()
}

// seriesSchema makes the columns of a series.
func seriesSchema(header []string) *parquet.Schema {
	root := seriesNode{}
	root.fields = append(root.fields, seriesColumn{parquet.Encoded(parquet.Timestamp(parquet.Nanosecond), &parquet.DeltaBinaryPacked), header[0]})
	for _, name := range header[1:] {
		root.fields = append(root.fields, seriesColumn{parquet.Optional(parquet.Encoded(parquet.Leaf(parquet.DoubleType), &parquet.ByteStreamSplit)), name})
	}
	return parquet.NewSchema("series", root)
}

// seriesNode is a row: the library's own group sorts its columns by name.
type seriesNode struct {
	parquet.Group
	fields []parquet.Field
}

// Fields returns the columns in the order of the CSV.
func (n seriesNode) Fields() []parquet.Field { return n.fields }

// GoType is that of no Go value: rows are written column by column.
func (n seriesNode) GoType() reflect.Type { return reflect.TypeFor[struct{}]() }

// seriesColumn is a column of a row.
type seriesColumn struct {
	parquet.Node
	name string
}

// Name returns the column's name.
func (c seriesColumn) Name() string { return c.name }

// Value returns the column's part of a Go value, of which there is none.
func (c seriesColumn) Value(reflect.Value) reflect.Value { return reflect.Value{} }
