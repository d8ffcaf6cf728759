package results

import (
	"errors"
	"io/fs"
	"math"
	"os"
	"slices"
	"strings"
	"testing"
	"testing/fstest"
	"time"

	"yearflow/sim/tables"
)

// written is a folder as the writer leaves it: six hours over the change to daylight
// saving time, with a low and an unsolved step.
func written(t testing.TB) fstest.MapFS {
	dir := os.DirFS("testdata/tiny")
	out := fstest.MapFS{}
	entries, err := fs.ReadDir(dir, ".")
	if err != nil {
		t.Fatal(err)
	}
	for _, e := range entries {
		data, err := fs.ReadFile(dir, e.Name())
		if err != nil {
			t.Fatal(err)
		}
		out[e.Name()] = &fstest.MapFile{Data: data}
	}
	return out
}

func TestReadWhatTheWriterWrote(t *testing.T) {
	f, err := ReadFolder(written(t))
	if err != nil {
		t.Fatal(err)
	}
	if len(f.Steps.Time) != 6 || f.Steps.Status[2] != Low || f.Steps.Status[4] != Unsolved || f.Steps.Status[0] != OK {
		t.Errorf("steps: %d rows, statuses %v", len(f.Steps.Time), f.Steps.Status)
	}
	// 22:00 and six hours: the clock skips from 02:00 to 03:00 in between.
	if got := f.At(5).Format("15:04 -07"); got != "04:00 -06" {
		t.Errorf("the last row begins at %s, want 04:00 -06", got)
	}
	if v := f.Steps.Column("source real [kW]"); len(v) != 6 || !math.IsNaN(v[4]) || math.IsNaN(v[0]) {
		t.Errorf("source power %v: want a gap at the unsolved step only", v)
	}
	if len(f.Nodes) == 0 || len(f.Places) == 0 || len(f.Branches) == 0 || len(f.Losses) == 0 || len(f.Loading) == 0 || len(f.Duty) == 0 || len(f.Summary) == 0 || len(f.Monthly.Rows) == 0 {
		t.Errorf("a table came back empty: %d nodes, %d places, %d branches, %d losses, %d loading, %d duty, %d summary, %d monthly",
			len(f.Nodes), len(f.Places), len(f.Branches), len(f.Losses), len(f.Loading), len(f.Duty), len(f.Summary), len(f.Monthly.Rows))
	}
	rows := 0
	err = f.EachVoltage(func(at int64, v []float64) error {
		if at != f.Steps.Time[rows] || len(v) != len(f.VoltageNames) {
			t.Errorf("row %d of voltages.csv is at %d with %d values", rows, at, len(v))
		}
		rows++
		return nil
	})
	if err != nil || rows != 6 {
		t.Errorf("%d rows of voltages, %v", rows, err)
	}
	judged := 0
	for _, n := range f.Nodes {
		if f.Judged(n) {
			judged++
		}
	}
	if judged == 0 || judged == len(f.Nodes) {
		t.Errorf("%d of %d places are judged: the model has loads at some of its nodes", judged, len(f.Nodes))
	}
}

func TestBrokenFoldersSayWhatIsWrong(t *testing.T) {
	replace := func(file, old, new string) func(fstest.MapFS) {
		return func(m fstest.MapFS) {
			data := string(m[file].Data)
			if !strings.Contains(data, old) {
				panic(file + " has no " + old)
			}
			m[file].Data = []byte(strings.Replace(data, old, new, 1))
		}
	}
	cut := func(file string, n int) func(fstest.MapFS) {
		return func(m fstest.MapFS) { m[file].Data = m[file].Data[:len(m[file].Data)-n] }
	}
	lastRow := func(file string) func(fstest.MapFS) {
		return func(m fstest.MapFS) {
			d := strings.TrimSuffix(string(m[file].Data), "\n")
			m[file].Data = []byte(d[:strings.LastIndexByte(d, '\n')+1])
		}
	}
	drop := func(file string) func(fstest.MapFS) { return func(m fstest.MapFS) { delete(m, file) } }
	set := func(file, text string) func(fstest.MapFS) {
		return func(m fstest.MapFS) { m[file] = &fstest.MapFile{Data: []byte(text)} }
	}
	for _, c := range []struct {
		name string
		do   func(fstest.MapFS)
		want string
	}{
		{"not a results folder", func(m fstest.MapFS) { clear(m) }, "run.json: is missing: this is not a results folder"},
		{"no steps", drop("steps.csv"), "steps.csv: is missing"},
		{"no nodes", drop("nodes.csv"), "nodes.csv: is missing"},
		{"no voltages though the run kept them", drop("voltages.csv"), "voltages.csv: is missing"},
		{"other format", replace("run.json", `"format": 1`, `"format": 9`), "run.json: format is 9, this program reads 1"},
		{"no format", replace("run.json", `"format"`, `"formal"`), "run.json: format is none"},
		{"not JSON", set("run.json", "{\n \"format\": 1,\n oops"), "run.json:3:"},
		{"JSON goes on", func(m fstest.MapFS) { m["run.json"].Data = append(m["run.json"].Data, "{}"...) }, "goes on after its end"},
		{"unknown zone", replace("run.json", "America/Denver", "Atlantis/Capital"), `zone "Atlantis/Capital" is not known`},
		{"wrong type", replace("run.json", `"demo": `, `"demo": 7, "was": `), "is not a run's record"},
		{"cut in a line", cut("steps.csv", 5), "steps.csv:7: ends in the middle of a line"},
		{"small table cut in a line", cut("nodes.csv", 5), "nodes.csv: ends in the middle of a line"},
		{"last row missing", lastRow("steps.csv"), "half a folder"},
		{"last device row missing twice", func(m fstest.MapFS) { lastRow("devices.csv")(m); lastRow("devices.csv")(m) }, "devices.csv: ends at"},
		{"empty", set("steps.csv", ""), "steps.csv:1: has no header"},
		{"header only", func(m fstest.MapFS) {
			d := m["steps.csv"].Data
			m["steps.csv"].Data = d[:strings.IndexByte(string(d), '\n')+1]
		}, "steps.csv: has no rows"},
		{"column missing", replace("steps.csv", "losses energy [kWh]", "lost energy [kWh]"), `steps.csv:1: column "losses energy [kWh]" is missing: the folder is of another version`},
		{"node column missing", replace("nodes.csv", "p95 [pu]", "q95 [pu]"), `nodes.csv:1: column "p95 [pu]" is missing`},
		{"column doubled", replace("nodes.csv", "p95 [pu]", "p99 [pu]"), `column "p99 [pu]" is there twice`},
		{"no number", replace("loading.csv", "\nlat,A,", "\nlat,A,many"), "loading.csv:"},
		{"no status", replace("steps.csv", ",unsolved,", ",undecided,"), `steps.csv:6: column status: want ok, low or unsolved, got "undecided"`},
		{"a PNG", set("losses.csv", "\x89PNG\r\n\x1a\n\x00\x00\n"), "losses.csv"},
		{"quote left open", set("duty.csv", "device,phase\n\"x,1\n"), "duty.csv"},
		{"wrong number of cells", set("devices.csv", "time,reg.A\n2025-03-08T22:00:00-07:00,1,2\n"), "devices.csv:2: has 3 cells, the header 2"},
		{"time backwards", set("devices.csv", "time,reg.A\n2025-03-08T22:00:00-07:00,1\n2025-03-08T21:00:00-07:00,1\n"), "devices.csv:3: 2025-03-08T21:00:00-07:00 is not after"},
		{"no offset", set("devices.csv", "time,reg.A\n2025-03-08T22:00:00,1\n"), "want a time with its offset"},
		{"NaN", set("devices.csv", "time,reg.A\n2025-03-08T22:00:00-07:00,NaN\n"), `column reg.A: want a number, got "NaN"`},
		{"other run", replace("run.json", "2025-03-08T22", "2024-03-08T22"), "the files are of two runs"},
	} {
		t.Run(c.name, func(t *testing.T) {
			m := written(t)
			c.do(m)
			_, err := ReadFolder(m)
			if err == nil {
				t.Fatal("no error")
			}
			var faults tables.Faults
			if !errors.As(err, &faults) {
				t.Errorf("%T, want tables.Faults", err)
			}
			if !strings.Contains(err.Error(), c.want) {
				t.Errorf("got\n%v\nwant %q", err, c.want)
			}
		})
	}
}

func TestAllFaultsAreReportedTogether(t *testing.T) {
	m := written(t)
	delete(m, "losses.csv")
	delete(m, "loading.csv")
	m["steps.csv"].Data = []byte("time\n")
	_, err := ReadFolder(m)
	for _, want := range []string{"losses.csv", "loading.csv", "steps.csv"} {
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%v: does not name %s", err, want)
		}
	}
}

func TestLimitsOf(t *testing.T) {
	// ANSI C84.1, service voltage on the 120 V base: up to 600 V 110, 114, 126, 127;
	// above 600 V 114, 117, 126, 127.
	f := &Folder{}
	if got, want := f.LimitsOf(0.24), (VoltageLimits{110. / 120, 114. / 120, 1.05, 127. / 120}); got != want {
		t.Errorf("0.24 kV: %v, want %v", got, want)
	}
	if got, want := f.LimitsOf(12.47), (VoltageLimits{0.95, 0.975, 1.05, 127. / 120}); got != want {
		t.Errorf("12.47 kV: %v, want %v", got, want)
	}
	f.Run.Limits = RunLimits{Own: true, VoltageLimits: VoltageLimits{0.9, 0.94, 1.06, 1.1}}
	if got := f.LimitsOf(12.47); got != f.Run.Limits.VoltageLimits {
		t.Errorf("own limits: %v", got)
	}
}

func TestParseCellIsExact(t *testing.T) {
	for _, s := range []string{"0", "-0", "1.000000", "0.998877", "-12.5", "123456789012345", "1e-7", "4.9406564584124654e-324", "0.1", ".5", "5.", "12345.678901", "179769313486231570000", "0000000000000.1"} {
		got, err := parseCell([]byte(s))
		want, err2 := parseSlow([]byte(s))
		if err != nil || err2 != nil || math.Float64bits(got) != math.Float64bits(want) {
			t.Errorf("%s: %v (%v), strconv has %v (%v)", s, got, err, want, err2)
		}
	}
	for _, s := range []string{"x", "1,5", "--1", "1.2.3", "0x10", "Inf", "nan", "-", ".", "1_0"} {
		if x, err := parseCell([]byte(s)); err == nil {
			t.Errorf("%q was read as %v", s, x)
		}
	}
}

// FuzzReadFolder puts bytes in place of one file of a good folder: whatever they are,
// the reader ends with an error or a folder that can be walked through.
func FuzzReadFolder(f *testing.F) {
	good := written(f)
	var names []string
	for name := range contract {
		if name != "timing.json" {
			names = append(names, name)
		}
	}
	slices.Sort(names)
	for i, name := range names {
		f.Add(byte(i), good[name].Data)
	}
	f.Add(byte(0), []byte("time,\"a,b\"\n2025-01-01T00:00Z,\"1\"\n"))
	f.Fuzz(func(t *testing.T, which byte, data []byte) {
		m := fstest.MapFS{}
		for n, file := range good {
			m[n] = file
		}
		m[names[int(which)%len(names)]] = &fstest.MapFile{Data: data}
		folder, err := ReadFolder(m)
		if (folder == nil) == (err == nil) {
			t.Fatalf("folder %v, error %v", folder, err)
		}
		if folder == nil {
			return
		}
		for i := range folder.Steps.Time {
			_ = folder.At(i).Add(time.Hour)
		}
		for _, c := range folder.Steps.Columns {
			if len(c) != len(folder.Steps.Time) {
				t.Fatalf("a column of %d values for %d rows", len(c), len(folder.Steps.Time))
			}
		}
		_ = folder.EachVoltage(func(int64, []float64) error { return nil })
	})
}
