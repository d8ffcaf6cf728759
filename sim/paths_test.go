package sim_test

import (
	"context"
	"encoding/csv"
	"math"
	"os"
	"path/filepath"
	"runtime"
	"strconv"
	"strings"
	"testing"
	"time"

	"io/fs"

	"yearflow/sim"
	"yearflow/sim/demo"
	"yearflow/sim/results"
	"yearflow/sim/synthetic"
)

// folderOf runs a study and returns its folder.
func folderOf(t *testing.T, study fs.FS, o sim.Options) string {
	t.Helper()
	return folderOfCase(t, study, "", o)
}

// folderOfCase runs a case and returns its folder.
func folderOfCase(t *testing.T, study fs.FS, caseName string, o sim.Options) string {
	t.Helper()
	dir := filepath.Join(t.TempDir(), "r")
	e := prepare(t, study, caseName, o)
	w, err := results.Create(dir, e.Plan)
	if err != nil {
		t.Fatal(err)
	}
	out, err := e.Run(context.Background(), w)
	if err != nil {
		t.Fatal(err)
	}
	out.Paths, out.Speed = nil, results.Speed{} // ways, not results
	if err := w.Finish(out, results.RunInfo{}); err != nil {
		t.Fatal(err)
	}
	return dir
}

// cellsOf reads a file.
func cellsOf(t *testing.T, file string) [][]string {
	t.Helper()
	f, err := os.Open(file)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	return rows
}

// Every number of every file is the same for both paths, within what 1e-7 p.u. of a
// voltage makes of it; operations and times are equal.
func TestBothPathsWriteTheSameResults(t *testing.T) {
	minutes, err := synthetic.Study(synthetic.Options{Buses: 100, Seed: 3, Step: time.Minute, Days: 2, Inputs: synthetic.HeldMinutes})
	if err != nil {
		t.Fatal(err)
	}
	seconds, err := synthetic.Study(synthetic.Options{Buses: 100, Seed: 4, Step: 5 * time.Second, Days: 1, Inputs: synthetic.Minutes})
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		name  string
		study fs.FS
	}{{"demo", shortened(t, laid(demo.Study()), "2025-06-25", "2025-07-05")}, {"minutes", minutes}, {"seconds", seconds}} {
		t.Run(c.name, func(t *testing.T) {
			want, got := folderOf(t, c.study, sim.Options{Reference: true}), folderOf(t, c.study, sim.Options{})
			sameFiles(t, want, got, false)
		})
	}
}

// sameFiles holds every number of two folders against each other, that step by step first.
// With ties the time and the place of an extreme are left out: where inputs are held, equal
// values stand at many, and the last digits of voltages choose.
func sameFiles(t *testing.T, want, got string, ties bool) {
	t.Helper()
	files, err := filepath.Glob(filepath.Join(want, "*.csv"))
	if err != nil || len(files) < 8 {
		t.Fatalf("%d files, %v", len(files), err)
	}
	for _, file := range files {
		name := filepath.Base(file)
		a, b := cellsOf(t, file), cellsOf(t, filepath.Join(got, name))
		if len(a) != len(b) {
			t.Errorf("%s has %d rows, step by step %d", name, len(b), len(a))
			continue
		}
		wrong := 0
		for r := range a {
			for k := range a[r] {
				// The peak of a loss of some watts is decided by the last digits of voltages.
				if name == "losses.csv" && a[0][k] == "peak time" && figureOf(a[r][k-1]) < 0.01 {
					continue
				}
				if ties && (strings.HasSuffix(a[0][k], " time") || strings.HasSuffix(a[0][k], " at") || name == "summary.csv" && strings.HasSuffix(a[r][0], " time") || strings.HasSuffix(a[r][0], " at") || name == "summary.csv" && strings.HasSuffix(a[r][0], " place")) {
					continue
				}
				if !alike(a[r][k], b[r][k]) {
					if wrong++; wrong <= 5 {
						t.Errorf("%s, row %d (%s), %s: %s, step by step %s", name, r+1, a[r][0], a[0][k], b[r][k], a[r][k])
					}
				}
			}
		}
	}
}

// alike tells whether two cells are the same words, or numbers 2e-6 of each other apart
// or one of the last digit.
func alike(a, b string) bool {
	if a == b {
		return true
	}
	x, y := figureOf(a), figureOf(b)
	return math.Abs(x-y) <= 2e-6*math.Max(math.Abs(x), math.Abs(y))+1.01e-4
}

func figureOf(s string) float64 {
	x, err := strconv.ParseFloat(s, 64)
	if err != nil {
		return math.NaN()
	}
	return x
}

// The bytes of all files are the same whatever the number of cores.
func TestOneCoreWritesTheSameBytes(t *testing.T) {
	study, err := synthetic.Study(synthetic.Options{Buses: 100, Seed: 5, Step: 20 * time.Second, Days: 1, Inputs: synthetic.Minutes})
	if err != nil {
		t.Fatal(err)
	}
	many := folderOf(t, study, sim.Options{})
	defer runtime.GOMAXPROCS(runtime.GOMAXPROCS(1))
	one := folderOf(t, study, sim.Options{})
	sameBytes(t, one, many)
}

// sameBytes holds the bytes of two folders against each other, that of one core first.
func sameBytes(t *testing.T, one, many string) {
	t.Helper()
	names, err := filepath.Glob(filepath.Join(one, "*.csv"))
	if err != nil || len(names) < 8 {
		t.Fatalf("%d files, %v", len(names), err)
	}
	series, err := filepath.Glob(filepath.Join(one, "*.parquet"))
	if err != nil {
		t.Fatal(err)
	}
	names = append(names, series...)
	for _, name := range append(names, filepath.Join(one, "run.json")) {
		a, err := os.ReadFile(name)
		if err != nil {
			t.Fatal(err)
		}
		b, err := os.ReadFile(filepath.Join(many, filepath.Base(name)))
		if err != nil {
			t.Fatal(err)
		}
		if string(a) != string(b) {
			t.Errorf("%s differs between one core and several", filepath.Base(name))
		}
	}
}
