package results

import (
	"encoding/json"
	"flag"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"
	"time"

	"yearflow/sim/feeder"
	"yearflow/sim/tables"
)

var regen = flag.Bool("regen", false, "rewrite the golden results; look at the difference before it is committed")

// goldenRun is six hours over the change to daylight saving time, with settling, a
// low and an unsolved step.
func goldenRun(t *testing.T) string {
	start := time.Date(2025, 3, 8, 22, 0, 0, 0, denver(t))
	x := newTiny(t, start, start.Add(6*time.Hour), time.Hour)
	x.plan.Settings.Run.Flows = []string{"lat", "tx", "reg"}
	x.plan.Settings.Limits.Allowance = 2
	x.plan.LoadPeak = []float64{500, 900, 200}
	s := chance(x, rand.New(rand.NewPCG(12, 5)))
	s.steps[2].Status = Low
	s.steps[4].Status, s.steps[4].Last = Unsolved, nil
	return s.write(t, x)
}

func TestGoldenResults(t *testing.T) {
	dir, golden := goldenRun(t), filepath.Join("testdata", "tiny")
	for name := range contract {
		if name == "timing.json" {
			continue
		}
		data, err := os.ReadFile(filepath.Join(dir, name))
		if err != nil {
			t.Fatal(err)
		}
		if name == "run.json" {
			data = withoutNoise(t, data)
		}
		path := filepath.Join(golden, name)
		if *regen {
			if err := os.MkdirAll(golden, 0o755); err != nil {
				t.Fatal(err)
			}
			if err := os.WriteFile(path, data, 0o644); err != nil {
				t.Fatal(err)
			}
			continue
		}
		want, err := os.ReadFile(path)
		if err != nil {
			t.Error(err)
			continue
		}
		sameCells(t, name, string(data), string(want))
	}
}

// withoutNoise drops from run.json what is rounding: the hashes of files whose last
// digits another kind of processor may turn, and how well the balance closed.
func withoutNoise(t *testing.T, data []byte) []byte {
	var r map[string]any
	if err := json.Unmarshal(data, &r); err != nil {
		t.Fatal(err)
	}
	for name := range r["results_sha256"].(map[string]any) {
		r["results_sha256"].(map[string]any)[name] = ""
	}
	delete(r, "balance")
	out, err := json.MarshalIndent(r, "", "  ")
	if err != nil {
		t.Fatal(err)
	}
	return append(out, '\n')
}

// sameCells compares texts; numbers may differ in the last digits, since a processor
// that fuses multiplication and addition rounds otherwise.
func sameCells(t *testing.T, name, got, want string) {
	a, b := strings.Split(got, "\n"), strings.Split(want, "\n")
	if len(a) != len(b) {
		t.Errorf("%s: %d lines, want %d", name, len(a), len(b))
		return
	}
	for i := range a {
		p, q := strings.Split(a[i], ","), strings.Split(b[i], ",")
		if len(p) != len(q) {
			t.Errorf("%s:%d: %q, want %q", name, i+1, a[i], b[i])
			continue
		}
		for k := range p {
			x, err1 := strconv.ParseFloat(p[k], 64)
			y, err2 := strconv.ParseFloat(q[k], 64)
			if p[k] != q[k] && (err1 != nil || err2 != nil || math.Abs(x-y) > 2e-6*max(1, math.Abs(y))) {
				t.Errorf("%s:%d: cell %d is %q, want %q", name, i+1, k+1, p[k], q[k])
			}
		}
	}
}

// What was assumed and what is odd stands in run.json, with its place.
func TestRunRecordsWhatWasAssumedAndOdd(t *testing.T) {
	start := time.Date(2025, 3, 8, 22, 0, 0, 0, denver(t))
	x := newTiny(t, start, start.Add(time.Hour), time.Hour)
	x.plan.Model.Assumed = []feeder.Assumption{{Pos: tables.Pos{File: "feeder/source.csv", Line: 3}, What: "source: voltage at", Value: "behind"}}
	dir := filepath.Join(t.TempDir(), "base")
	w, err := Create(dir, x.plan)
	if err != nil {
		t.Fatal(err)
	}
	odd := []tables.Fault{{Pos: tables.Pos{File: "profiles/loads.csv", Line: 7, Column: 2}, Text: "is flat for a week"}}
	if err := w.Finish(&Outcome{}, RunInfo{Warnings: odd}); err != nil {
		t.Fatal(err)
	}
	data, err := os.ReadFile(filepath.Join(dir, "run.json"))
	if err != nil {
		t.Fatal(err)
	}
	var r struct{ Assumed, Warnings []noteOut }
	if err := json.Unmarshal(data, &r); err != nil {
		t.Fatal(err)
	}
	if want := []noteOut{{"feeder/source.csv", 3, 0, "source: voltage at = behind"}}; !slices.Equal(r.Assumed, want) {
		t.Errorf("assumed is %v, want %v", r.Assumed, want)
	}
	if want := []noteOut{{"profiles/loads.csv", 7, 2, "is flat for a week"}}; !slices.Equal(r.Warnings, want) {
		t.Errorf("warnings is %v, want %v", r.Warnings, want)
	}
}
