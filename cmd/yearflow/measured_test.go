package main

import (
	"encoding/csv"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// swappedStudy writes a study of two weeks in which the meters on A and B at a feeder's
// end are interchanged: the voltages are those of a run of the same study.
func swappedStudy(t *testing.T) {
	write(t, "study.toml", "title = \"Two weeks\"\n[period]\nstart = 2025-03-03\nend = 2025-03-17\nstep = \"1h\"\nzone = \"UTC\"\n[[profiles]]\nfiles = [\"profiles/*.csv\"]\n[run]\nvoltages = \"all\"\n")
	write(t, "feeder/source.csv", "node,nominal [kV]\nbus,12.47\n")
	write(t, "feeder/constructions.csv", "construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km],b1 [uS/km],b0 [uS/km]\nline,sequence,0.35,0.4,0.6,1.2,0,0\n")
	write(t, "feeder/sections.csv", "section,from,to,phases,length [km],construction\nL1,bus,end,ABC,5,line\n")
	write(t, "feeder/loads.csv", "load,node,phases,power factor,profile\na,end,A,0.9,pa\nb,end,B,0.9,pb\nc,end,C,0.9,pc\n")
	s := "time,pa [kW],pb [kW],pc [kW]\n"
	for h := range 14 * 24 {
		// Loads that move each in its own way: remainders of the hour's square.
		s += fmt.Sprintf("%s,%d,%d,%d\n", stampOf(h), 300+h*h*7%251, 300+h*h*11%241, 300+h*h*13%239)
	}
	write(t, "profiles/loads.csv", s)
	must(t, exitDone, "run", "--no-figures", "--out", "first")
	rows, err := csv.NewReader(strings.NewReader(read(t, "first/voltages.csv"))).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	at := map[string]int{}
	for i, name := range rows[0] {
		at[name] = i
	}
	s = "time,va [pu],vb [pu],vc [pu],spare [pu]\n"
	for h, r := range rows[1:] {
		s += fmt.Sprintf("%s,%s,%s,%s,1\n", stampOf(h), r[at["end.B"]], r[at["end.A"]], r[at["end.C"]])
	}
	write(t, "profiles/scada.csv", s)
	write(t, "feeder/measurements.csv", "quantity,place,phase,profile\nvoltage,end,A,va\nvoltage,end,B,vb\nvoltage,end,C,vc\n")
}

func stampOf(h int) string {
	return time.Date(2025, 3, 3, h, 0, 0, 0, time.UTC).Format("2006-01-02T15:04")
}

// A run says how the model met its measurements and check repeats it with the phases
// that they contradict, as long as the inputs are those of the run.
func TestMeasurementsFromRunToCheck(t *testing.T) {
	t.Chdir(t.TempDir())
	swappedStudy(t)
	out, _ := must(t, exitDone, "check")
	contains(t, out, "Measurements\n  3 measured series, held against the model by a run: run first", `profile "spare" has no user`, "Not known, or not used (1)")
	out, errs := must(t, exitDone, "run")
	contains(t, out, "measured quantities", "Held against 3 measured series (1008 samples), the model is off on average by 0.0")
	contains(t, errs, "warning: the voltage measured at end, phase A, moves with phase B of the model (correlation 1.00)", "measured at end, phase B, moves with phase A")
	for _, f := range []string{"measured.csv", "measured-series.csv", "phase-swaps.csv", "figures/measured.png"} {
		if _, err := os.Stat(filepath.Join("results/base", f)); err != nil {
			t.Error(err)
		}
	}
	contains(t, read(t, "results/base/run.json"), `"measured.csv"`, `"figures/measured.png"`)
	contains(t, read(t, "results/base/measured.csv"), "voltage,end,C,336,0.000000,0.000000,0.000000,")
	out, _ = must(t, exitDone, "check")
	contains(t, out, "Held against 3 measured series", "feeder/measurements.csv:2: the voltage measured at end, phase A, moves with phase B", "feeder/measurements.csv:3:")
	if strings.Contains(out, "phase C, moves") {
		t.Errorf("phase C is in order: %s", out)
	}
	out, _ = must(t, exitDone, "check", "--csv", "-")
	contains(t, out, "measured,feeder/measurements.csv,2,,", "unused,profiles/scada.csv,1,5,")
	// Once an input changed the results say nothing about it any more.
	edit(t, "feeder/sections.csv", "ABC,5,line", "ABC,6,line")
	out, _ = must(t, exitDone, "check")
	contains(t, out, "run again, then check compares phases too", "sections.csv has changed")
	if strings.Contains(out, "moves with") {
		t.Errorf("old advice on a changed study: %s", out)
	}
}

// A study without measurements says so, and check says nothing of them.
func TestRunWithoutMeasurements(t *testing.T) {
	dir := t.TempDir()
	t.Chdir(dir)
	fromReadme(t, dir)
	out, _ := must(t, exitDone, "check")
	if strings.Contains(out, "Measurements") {
		t.Errorf("measurements out of nowhere: %s", out)
	}
	out, _ = must(t, exitDone, "run", "--no-figures")
	contains(t, out, "The model never met a measurement")
	contains(t, read(t, "results/base/summary.csv"), "measured quantities,0,1\n")
	if _, err := os.Stat("results/base/measured.csv"); err == nil {
		t.Error("measured.csv of nothing")
	}
}
