package results

import (
	"bytes"
	"encoding/csv"
	"encoding/json"
	"errors"
	"io"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"syscall"
	"testing"
	"testing/fstest"
	"time"

	"github.com/parquet-go/parquet-go"
)

// bothWays writes the same run with its series in CSV and in Parquet.
func bothWays(t testing.TB, seed uint64) (inCSV, inParquet string) {
	t.Helper()
	var dirs [2]string
	for i := range dirs {
		x := aDay(t)
		x.plan.Settings.Run.Flows = []string{"lat", "tx"}
		x.plan.Settings.Run.Parquet = i == 1
		dirs[i] = chance(x, rand.New(rand.NewPCG(seed, 5))).write(t, x)
	}
	return dirs[0], dirs[1]
}

// seriesCSV reads a series in CSV: its header, times and figures, NaN where blank.
func seriesCSV(t testing.TB, path string) (header []string, times []int64, figures [][]float64) {
	t.Helper()
	data, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	rows, err := csv.NewReader(bytes.NewReader(data)).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	for _, r := range rows[1:] {
		at, err := time.Parse(time.RFC3339, r[0])
		if err != nil {
			t.Fatal(err)
		}
		times = append(times, at.UnixNano())
		var row []float64
		for _, c := range r[1:] {
			x, err := parseCell([]byte(c))
			if err != nil {
				t.Fatal(err)
			}
			row = append(row, x)
		}
		figures = append(figures, row)
	}
	return rows[0], times, figures
}

func sameFigures(a, b []float64) bool {
	return slices.EqualFunc(a, b, func(x, y float64) bool { return x == y || x != x && y != y })
}

// A Parquet file has the columns, the instants and the figures of its CSV, bit for bit,
// as the library reads them row by row.
func TestParquetHoldsTheFiguresOfTheCSV(t *testing.T) {
	blanks := 0
	for seed := range uint64(4) {
		inCSV, inParquet := bothWays(t, seed)
		for _, name := range []string{"voltages", "flows"} {
			if _, err := os.Stat(filepath.Join(inParquet, name+".csv")); err == nil {
				t.Errorf("%s is there twice", name)
			}
			header, times, figures := seriesCSV(t, filepath.Join(inCSV, name+".csv"))
			file, err := os.Open(filepath.Join(inParquet, name+".parquet"))
			if err != nil {
				t.Fatal(err)
			}
			defer file.Close()
			st, err := file.Stat()
			if err != nil {
				t.Fatal(err)
			}
			p, err := parquet.OpenFile(file, st.Size())
			if err != nil {
				t.Fatal(err)
			}
			for i, column := range p.Root().Columns() {
				want := "DOUBLE"
				if i == 0 {
					want = "TIMESTAMP(isAdjustedToUTC=true,unit=NANOS)"
				}
				if column.Name() != header[i] || column.Type().String() != want {
					t.Errorf("%s: column %d is %s, %s; want %s, %s", name, i, column.Name(), column.Type(), header[i], want)
				}
			}
			if p.NumRows() != int64(len(times)) {
				t.Fatalf("%s: %d rows, want %d", name, p.NumRows(), len(times))
			}
			k := 0
			for _, g := range p.RowGroups() {
				rows := g.Rows()
				buf := make([]parquet.Row, 7)
				for {
					n, err := rows.ReadRows(buf)
					for _, r := range buf[:n] {
						if r[0].Int64() != times[k] {
							t.Fatalf("%s: row %d is at %d, want %d", name, k, r[0].Int64(), times[k])
						}
						got := make([]float64, len(header)-1)
						for i := range got {
							if got[i] = r[i+1].Double(); r[i+1].IsNull() {
								got[i] = math.NaN()
								blanks++
							}
						}
						if !sameFigures(got, figures[k]) {
							t.Fatalf("%s: row %d holds %v, want %v", name, k, got, figures[k])
						}
						k++
					}
					if err == io.EOF {
						break
					}
					if err != nil {
						t.Fatal(err)
					}
				}
				rows.Close()
			}
		}
	}
	if blanks == 0 {
		t.Error("no step was unsolved: nothing is said about blanks")
	}
}

// Readers find the same in both folders.
func TestAFolderReadsTheSameFromBoth(t *testing.T) {
	inCSV, inParquet := bothWays(t, 1)
	a, err := ReadFolder(os.DirFS(inCSV))
	if err != nil {
		t.Fatal(err)
	}
	b, err := ReadFolder(os.DirFS(inParquet))
	if err != nil {
		t.Fatal(err)
	}
	if a.VoltageFile() != "voltages.csv" || b.VoltageFile() != "voltages.parquet" || !slices.Equal(a.VoltageNames, b.VoltageNames) {
		t.Errorf("%s and %s, columns %v and %v", a.VoltageFile(), b.VoltageFile(), a.VoltageNames, b.VoltageNames)
	}
	type row struct {
		at int64
		pu []float64
	}
	var rows [2][]row
	for i, f := range []*Folder{a, b} {
		if err := f.EachVoltage(func(at int64, pu []float64) error {
			rows[i] = append(rows[i], row{at, slices.Clone(pu)})
			return nil
		}); err != nil {
			t.Fatal(err)
		}
	}
	if len(rows[0]) == 0 || !slices.EqualFunc(rows[0], rows[1], func(x, y row) bool { return x.at == y.at && sameFigures(x.pu, y.pu) }) {
		t.Errorf("%d rows of CSV and %d of Parquet differ", len(rows[0]), len(rows[1]))
	}
	stop := errors.New("enough")
	if err := b.EachVoltage(func(int64, []float64) error { return stop }); err != stop {
		t.Errorf("stopped with %v", err)
	}
}

// The same run gives the same bytes, and run.json has their hash.
func TestParquetBytesAreTheSameEveryTime(t *testing.T) {
	_, first := bothWays(t, 2)
	_, second := bothWays(t, 2)
	for _, name := range []string{"voltages.parquet", "flows.parquet", "run.json"} {
		a, err1 := os.ReadFile(filepath.Join(first, name))
		b, err2 := os.ReadFile(filepath.Join(second, name))
		if err := errors.Join(err1, err2); err != nil {
			t.Fatal(err)
		}
		if len(a) == 0 || !bytes.Equal(a, b) {
			t.Errorf("%s differs from run to run", name)
		}
	}
	var record struct {
		Results map[string]string `json:"results_sha256"`
		Series  string            `json:"series"`
	}
	data, err := os.ReadFile(filepath.Join(first, "run.json"))
	if err == nil {
		err = json.Unmarshal(data, &record)
	}
	if err != nil {
		t.Fatal(err)
	}
	for _, name := range []string{"voltages", "flows"} {
		want, err := syncAndHash(first, name+".parquet")
		if err != nil || record.Results[name+".parquet"] != want || record.Results[name+".csv"] != "" || record.Series != "parquet" {
			t.Errorf("%s: run.json has %v, want the hash %s (%v)", name, record, want, err)
		}
	}
}

// columnBytes makes a series of the given number of rows in row groups of 256.
func columnBytes(t testing.TB, rows int) []byte {
	t.Helper()
	var out bytes.Buffer
	c, err := newColumnFile(&out, []string{"time", "src.A", "src.B", "tx [kW]"})
	if err != nil {
		t.Fatal(err)
	}
	c.group = 2 * batchRows
	for k := range rows {
		c.begin(int64(k+1) * second)
		for i := range 3 {
			x := roundPU(1 + 0.01*math.Sin(float64(k*(i+1))))
			if k%50 == 49 {
				x = math.NaN()
			}
			c.figure(x)
		}
		if err := c.end(); err != nil {
			t.Fatal(err)
		}
	}
	if err := c.close(); err != nil {
		t.Fatal(err)
	}
	return out.Bytes()
}

// readBytes reads a series that may be broken.
func readBytes(data []byte) (rows int, sum float64, err error) {
	c, err := openColumns(fstest.MapFS{"flows.parquet": {Data: data}}, "flows.parquet")
	if err != nil {
		return 0, 0, err
	}
	defer c.close()
	err = c.each(func(at int64, figures []float64) error {
		rows++
		for i, x := range figures {
			if x == x {
				sum += float64(at/second) * float64(i+1) * x
			}
		}
		return nil
	})
	return rows, sum, err
}

func TestRowGroupsAreBounded(t *testing.T) {
	for _, n := range []int{0, 1, 127, 128, 256, 1000} {
		data := columnBytes(t, n)
		p, err := parquet.OpenFile(bytes.NewReader(data), int64(len(data)))
		if err != nil {
			t.Fatal(err)
		}
		left := n
		for _, g := range p.RowGroups() {
			if want := min(left, 256); int(g.NumRows()) != want {
				t.Errorf("of %d rows a group has %d, want %d", n, g.NumRows(), want)
			}
			left -= int(g.NumRows())
		}
		if rows, _, err := readBytes(data); err != nil || rows != n || left != 0 {
			t.Errorf("%d rows read as %d (%v); the groups lack %d", n, rows, err, left)
		}
	}
	for columns, want := range map[int]int{2: 1 << 20, 300: 6912, 20_000: 512} {
		header := make([]string, columns)
		for i := range header {
			header[i] = string(appendFixed(nil, float64(i), 0))
		}
		c, err := newColumnFile(io.Discard, header)
		if err != nil || c.group != want {
			t.Errorf("%d columns: groups of %d rows, want %d (%v)", columns, c.group, want, err)
		}
	}
}

// A file that was cut off or changed is an error that names it and says what to do; what
// reads without one are the figures that were written.
func TestBrokenParquetFilesAreErrors(t *testing.T) {
	data := columnBytes(t, 600)
	rows, sum, err := readBytes(data)
	if err != nil || rows != 600 {
		t.Fatalf("%d rows, %v", rows, err)
	}
	wantError := func(what string, at int, err error) {
		if err == nil || !strings.HasPrefix(err.Error(), "flows.parquet: ") || !strings.Contains(err.Error(), "run the study again") {
			t.Fatalf("%s at byte %d: %v", what, at, err)
		}
	}
	for at := 0; at < len(data); at += 1 + at/150 {
		_, _, err := readBytes(data[:at])
		wantError("cut", at, err)
	}
	found := 0
	for at := range data {
		for _, flip := range []byte{1, 0x80} {
			broken := slices.Clone(data)
			broken[at] ^= flip
			n, s, err := readBytes(broken)
			if err != nil {
				wantError("changed", at, err)
				found++
			} else if n != rows || s != sum {
				t.Fatalf("byte %d was changed: %d rows and %g read without an error, want %d and %g", at, n, s, rows, sum)
			}
		}
	}
	if found < len(data) {
		t.Errorf("%d of %d changes were found", found, 2*len(data))
	}
}

// Files of others are refused by what they lack.
func TestOtherParquetFilesAreRefused(t *testing.T) {
	write := func(root parquet.Node, row parquet.Row) []byte {
		var out bytes.Buffer
		w := parquet.NewGenericWriter[any](&out, parquet.NewSchema("x", root), parquet.Compression(&parquet.Zstd))
		if _, err := w.WriteRows([]parquet.Row{row}); err != nil {
			t.Fatal(err)
		}
		if err := w.Close(); err != nil {
			t.Fatal(err)
		}
		return out.Bytes()
	}
	figure := parquet.Optional(parquet.Leaf(parquet.DoubleType))
	at, x := parquet.Int64Value(1).Level(0, 0, 0), parquet.DoubleValue(1).Level(0, 1, 1)
	for name, c := range map[string]struct {
		data []byte
		want string
	}{
		"no time": {write(parquet.Group{"a": figure}, parquet.Row{parquet.DoubleValue(1).Level(0, 1, 0)}), "the first column is not time"},
		"time of another unit": {write(parquet.Group{"time": parquet.Timestamp(parquet.Millisecond), "x": figure}, parquet.Row{at, x}),
			"the first column is not time"},
		"text": {write(parquet.Group{"time": parquet.Timestamp(parquet.Nanosecond), "x": parquet.Optional(parquet.String())},
			parquet.Row{at, parquet.ByteArrayValue([]byte("a")).Level(0, 1, 1)}), `column "x" holds no figures`},
		"no number": {write(parquet.Group{"time": parquet.Timestamp(parquet.Nanosecond), "x": figure},
			parquet.Row{at, parquet.DoubleValue(math.Inf(1)).Level(0, 1, 1)}), "column x: want a number, got +Inf"},
	} {
		if _, _, err := readBytes(c.data); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %v, want %q", name, err, c.want)
		}
	}
	data := columnBytes(t, 3)
	if rows, _, err := readBytes(data); rows != 3 || err != nil {
		t.Errorf("%d rows, %v", rows, err)
	}
}

// A name that stands twice cannot be told apart in a Parquet file.
func TestParquetRefusesAColumnTwice(t *testing.T) {
	x := aDay(t)
	x.plan.Settings.Run.Parquet = true
	x.plan.Settings.Run.Flows = []string{"tx", "lat", "tx"}
	parent := t.TempDir()
	_, err := Create(filepath.Join(parent, "base"), x.plan)
	if err == nil || !strings.Contains(err.Error(), `flows.parquet: column "tx.A [A]" would be there twice`) {
		t.Errorf("error %v", err)
	}
	wantEntries(t, parent)
}

// A full disk is told with the file, whenever it fills.
func TestAFullDiskWhileParquetIsWritten(t *testing.T) {
	start := time.Date(2025, 1, 1, 0, 0, 0, 0, time.UTC)
	for _, room := range []int{0, 2000} {
		x := newTiny(t, start, start.AddDate(0, 2, 0), time.Hour)
		x.plan.Settings.Run.Parquet = true
		parent, dir := oldResults(t)
		w, err := Create(dir, x.plan)
		if err != nil {
			t.Fatal(err)
		}
		w.voltages.out = &full{w.voltages.out, room}
		constant(x, func(int) *State { return x.state(nil, [3]int{}, true) }).play(t, w)
		err = w.Finish(&Outcome{}, RunInfo{})
		if !errors.Is(err, syscall.ENOSPC) || !strings.Contains(err.Error(), "voltages.parquet") {
			t.Errorf("error %v, want no space and voltages.parquet", err)
		}
		wantOld(t, dir)
		wantEntries(t, parent, "base")
	}
}

// A row of a Parquet file costs no memory of its own until a row group is handed on.
func TestRowsOfParquetAllocateNothing(t *testing.T) {
	c, err := newColumnFile(io.Discard, []string{"time", "src.A", "src.B"})
	if err != nil {
		t.Fatal(err)
	}
	at := int64(0)
	row := func() {
		at += second
		c.begin(at)
		c.figure(1)
		c.figure(math.NaN())
		if len(c.time) == batchRows-1 {
			c.time, c.figures[0], c.figures[1] = c.time[:0], c.figures[0][:0], c.figures[1][:0]
		}
		if err := c.end(); err != nil {
			t.Fatal(err)
		}
	}
	if n := testing.AllocsPerRun(1000, row); n != 0 {
		t.Errorf("a row allocates %g times", n)
	}
}

// FuzzSeriesFile reads any bytes as a series: what is none of ours is an error, never a
// panic.
func FuzzSeriesFile(f *testing.F) {
	for _, n := range []int{0, 1, 300} {
		data := columnBytes(f, n)
		f.Add(data)
		f.Add(data[:len(data)-9])
		f.Add(append(slices.Clone(data[:len(data)/2]), data[len(data)/2+1:]...))
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		_, _, err := readBytes(data)
		if err != nil && !strings.HasPrefix(err.Error(), "flows.parquet") {
			t.Errorf("the error does not name the file: %v", err)
		}
	})
}
