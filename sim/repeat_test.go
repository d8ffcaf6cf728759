package sim_test

import (
	"bytes"
	"context"
	"io/fs"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"testing"
	"testing/fstest"

	"yearflow/sim"
	"yearflow/sim/demo"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// shortDemo is a copy of the demonstration study with a case that runs a few days, two of
// them in a warm month, so that regulators and capacitors move.
func shortDemo(t testing.TB, from, to string) fstest.MapFS {
	t.Helper()
	out := fstest.MapFS{}
	err := fs.WalkDir(demo.Study(), ".", func(name string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		data, err := fs.ReadFile(demo.Study(), name)
		out[name] = &fstest.MapFile{Data: data}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	out["cases/days/case.toml"] = &fstest.MapFile{Data: []byte("[period]\nstart = " + from + "\nend = " + to + "\n")}
	return out
}

// written runs a study into a results folder, holds it to the balance of power, and
// returns the files, but for wall times.
func written(t *testing.T, f fs.FS, caseName string) map[string][]byte {
	t.Helper()
	st, err := feeder.Open(f, caseName)
	if err != nil {
		t.Fatal(err)
	}
	e, err := sim.Prepare(st, sim.Options{Demo: true})
	if err != nil {
		t.Fatal(err)
	}
	dir := filepath.Join(t.TempDir(), "out")
	w, err := results.Create(dir, e.Plan)
	if err != nil {
		t.Fatal(err)
	}
	watch := &witness{t: t, e: e, meter: e.Meter()}
	out, err := e.Run(context.Background(), w, watch)
	if err != nil {
		t.Fatal(err)
	}
	if err := w.Finish(out, results.RunInfo{Version: "test"}); err != nil {
		t.Fatal(err)
	}
	t.Logf("%d intervals, %d actions, balance within %.1g", len(watch.spans), len(watch.actions), watch.worst)
	files := map[string][]byte{}
	entries, err := os.ReadDir(dir)
	if err != nil {
		t.Fatal(err)
	}
	for _, x := range entries {
		if x.Name() == "timing.json" {
			continue
		}
		if files[x.Name()], err = os.ReadFile(filepath.Join(dir, x.Name())); err != nil {
			t.Fatal(err)
		}
	}
	return files
}

// The same inputs give the same bytes, twice, and for any number of processors; timing.json
// is the only file that may differ.
func TestSameBytes(t *testing.T) {
	study := func() fs.FS { return shortDemo(t, "2025-07-01", "2025-07-06") }
	first := written(t, study(), "days")
	if len(first) < 12 || bytes.Count(first["operations.csv"], []byte("\n")) < 5 {
		t.Errorf("%d files, operations:\n%s", len(first), first["operations.csv"])
	}
	for _, cores := range []int{0, 1, 2} {
		if cores > 0 {
			defer runtime.GOMAXPROCS(runtime.GOMAXPROCS(cores))
		}
		again := written(t, study(), "days")
		for name, want := range first {
			if got, ok := again[name]; !ok || !bytes.Equal(got, want) {
				t.Errorf("GOMAXPROCS %d: %s differs: %s", cores, name, difference(string(got), string(want)))
			}
		}
		if len(again) != len(first) {
			t.Errorf("GOMAXPROCS %d: %d files, want %d", cores, len(again), len(first))
		}
	}
}

// difference shows the first line in which two texts differ.
func difference(got, want string) string {
	g, w := strings.Split(got, "\n"), strings.Split(want, "\n")
	for i := range min(len(g), len(w)) {
		if g[i] != w[i] {
			return "got " + g[i] + ", want " + w[i]
		}
	}
	return "one is longer"
}
