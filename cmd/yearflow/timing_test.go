package main

import (
	"encoding/json"
	"maps"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// recordOf reads what a test wants of run.json.
func recordOf(t *testing.T, dir string) (r struct {
	Series  string            `json:"series"`
	Results map[string]string `json:"results_sha256"`
	Counts  struct {
		Steps int `json:"steps"`
	} `json:"counts"`
	SolutionsBy map[string]int `json:"solutions_by_solver"`
	Speed       struct {
		Blocks     int            `json:"blocks"`
		Solutions  int            `json:"solutions"`
		StepByStep map[string]int `json:"steps_by_themselves"`
	} `json:"speed"`
}) {
	t.Helper()
	if err := json.Unmarshal([]byte(read(t, filepath.Join(dir, "run.json"))), &r); err != nil {
		t.Fatal(err)
	}
	return r
}

// run --timing says where the time went and changes nothing else.
func TestTiming(t *testing.T) {
	smallStudy(t)
	plain, _ := must(t, exitDone, "run", "--no-figures", "--out", "plain")
	if strings.Contains(plain, "Where the time went") {
		t.Errorf("nobody asked where the time went:\n%s", plain)
	}
	out, _ := must(t, exitDone, "run", "--no-figures", "--timing", "--out", "timed")
	contains(t, out, "Where the time went", "reading ", "assembling ", "solving ", "controls ", "statistics ", "writing ", "report ", "all ", "100.0",
		"48 steps, ", " iterations each", "of steps solved at once", "lost to cuts")
	for _, name := range entries(t, "plain") {
		if name != "timing.json" && read(t, "plain/"+name) != read(t, "timed/"+name) {
			t.Errorf("%s is another with --timing", name)
		}
	}
	contains(t, read(t, "timed/timing.json"), `"run: solving"`, `"run: statistics"`, `"run: writing"`)
	if strings.Contains(read(t, "plain/timing.json"), "run: solving") {
		t.Error("a part of the run is timed that nobody asked for")
	}
	out, errs := must(t, exitDone, "run", "--no-figures", "--timing", "--csv", "-", "--out", "timed")
	contains(t, errs, "Where the time went")
	if strings.Contains(out, "Where the time went") {
		t.Error("the profile stands in the table on standard output")
	}
}

// run --reference solves every step by itself and finds the same operations.
func TestReference(t *testing.T) {
	smallStudy(t)
	must(t, exitDone, "run", "--no-figures", "--out", "fast")
	out, _ := must(t, exitDone, "run", "--no-figures", "--reference", "--timing", "--out", "slow")
	contains(t, out, "48 steps by themselves (asked for)")
	if read(t, "fast/operations.csv") != read(t, "slow/operations.csv") || read(t, "fast/devices.csv") != read(t, "slow/devices.csv") {
		t.Error("the faster path operates otherwise than the plain one")
	}
	slow, fast := recordOf(t, "slow"), recordOf(t, "fast")
	if slow.Speed.Blocks != 0 || slow.Speed.StepByStep["asked for"] != 48 || slow.SolutionsBy["fixed point in lanes"] != 0 {
		t.Errorf("the plain path says of itself %+v", slow)
	}
	if fast.Speed.Blocks == 0 || len(fast.Speed.StepByStep) != 0 || fast.SolutionsBy["fixed point in lanes"] == 0 || fast.Speed.Solutions != slow.Speed.Solutions {
		t.Errorf("the faster path says of itself %+v", fast)
	}
}

// With series = "parquet" voltages and flows stand in Parquet files; every other table
// and every figure is the same.
func TestParquetSeries(t *testing.T) {
	smallStudy(t)
	must(t, exitDone, "run", "--out", "csv")
	edit(t, "study.toml", "[run]\n", "[run]\nseries = \"parquet\"\n")
	must(t, exitDone, "run", "--out", "parquet")
	a, b := recordOf(t, "csv"), recordOf(t, "parquet")
	if a.Series != "csv" || b.Series != "parquet" {
		t.Errorf("run.json names the series %q and %q", a.Series, b.Series)
	}
	for _, name := range []string{"voltages", "flows"} {
		if a.Results[name+".csv"] == "" || a.Results[name+".parquet"] != "" || b.Results[name+".csv"] != "" || b.Results[name+".parquet"] == "" {
			t.Errorf("%s stands in the wrong files: %v and %v", name, a.Results, b.Results)
		}
	}
	pictures := 0
	for name := range maps.Keys(a.Results) {
		if strings.HasPrefix(name, "voltages.") || strings.HasPrefix(name, "flows.") || name == reportFile {
			continue // the report lists the files
		}
		if a.Results[name] != b.Results[name] {
			t.Errorf("%s is another where the series are Parquet files", name)
		}
		if strings.HasPrefix(name, "figures/") {
			pictures++
		}
	}
	if pictures == 0 {
		t.Error("no figure was compared")
	}
	must(t, exitDone, "report", "parquet")
	if after := recordOf(t, "parquet"); !maps.Equal(after.Results, b.Results) {
		t.Errorf("report draws otherwise: %v, want %v", after.Results, b.Results)
	}
	// Half a file.
	data := read(t, "parquet/voltages.parquet")
	if err := os.WriteFile("parquet/voltages.parquet", []byte(data[:len(data)/2]), 0o644); err != nil {
		t.Fatal(err)
	}
	_, errs := must(t, exitInput, "report", "parquet")
	contains(t, errs, "voltages.parquet: ", "cut off", "run the study again")
}
