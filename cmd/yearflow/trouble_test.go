package main

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// What a user gets wrong is told with what would do instead, and exit status 2.
func TestWrongWords(t *testing.T) {
	smallStudy(t)
	write(t, "a-file", "")
	if err := os.Mkdir("empty", 0o755); err != nil {
		t.Fatal(err)
	}
	for _, tt := range []struct {
		args string
		want string
	}{
		{"rnu", `did you mean "run"?`},
		{"help rnu", `"yearflow help" lists them`},
		{"run --cse x", "did you mean --case?"},
		{"solve --att 2025-07-01", "did you mean --at?"},
		{"run --case", "needs an argument"},
		{"run one two", "one study at most"},
		{"run nowhere", `there is no folder "nowhere"`},
		{"run a-file", "is a file: name the folder"},
		{"run empty", "holds no study.toml"},
		{"run --case late", `there is no case "late"`},
		{"run --out a-file", "is a file: name another folder"},
		{"run --out feeder", "holds no results (no run.json)"},
		{"run --out .", "holds no results (no run.json)"},
		{"demo feeder", "not empty: name a new folder"},
		{"trace", "needs --node"},
		{"trace --node lane_s", `did you mean "lane-s"?`},
		{"solve --node mil", `did you mean "mill"?`},
		{"solve --at noon", "want a time such as 2025-01-31"},
		{"solve --at 2026-01-01", "outside the period, 2025-07-01T00:00:00-05:00 to 2025-07-03T00:00:00-05:00"},
		{"solve --positions somewhere", "want settled, given, or a results folder"},
		{"solve --positions feeder", "is no results folder"},
		{"report", "one results folder"},
		{"report nowhere", `there is no results folder "nowhere"`},
		{"report feeder", "feeder/run.json: is missing"},
	} {
		t.Run(tt.args, func(t *testing.T) {
			out, errs := must(t, exitInput, strings.Fields(tt.args)...)
			contains(t, errs, tt.want)
			if out != "" {
				t.Errorf("standard output has %q", out)
			}
		})
	}
	for _, f := range []string{"feeder/loads.csv", "study.toml"} {
		if _, err := os.Stat(f); err != nil {
			t.Error(err)
		}
	}
}

// STUDY left out is the current folder where it holds a study, else the demo, which
// the first line says.
func TestWhichStudy(t *testing.T) {
	smallStudy(t)
	out, errs := must(t, exitDone, "solve")
	contains(t, out, "Mill Lane 101")
	if strings.Contains(errs, "demo") {
		t.Errorf("it speaks of the demo: %s", errs)
	}
	dir, err := os.Getwd()
	if err != nil {
		t.Fatal(err)
	}
	t.Chdir(t.TempDir())
	out, errs = must(t, exitDone, "solve")
	contains(t, out, "Quillwater 1204")
	if !strings.HasPrefix(errs, "study: the demo") {
		t.Errorf("the first line is not about the demo: %s", errs)
	}
	// Results of a named study go into its folder, unless --out says where.
	must(t, exitDone, "run", dir, "--no-figures")
	must(t, exitDone, "run", dir, "--no-figures", "--out", "deep/er")
	for _, f := range []string{filepath.Join(dir, "results", "base", "run.json"), "deep/er/run.json"} {
		if _, err := os.Stat(f); err != nil {
			t.Error(err)
		}
	}
}

// The positions of devices: at rest, as in the tables, or as logged; those of results
// whose inputs have changed are refused.
func TestPositions(t *testing.T) {
	smallStudy(t)
	at := []string{"--at", "2025-07-01T10:00"}
	solve := func(want int, more ...string) (string, string) {
		return must(t, want, append(append([]string{"solve"}, at...), more...)...)
	}
	given, _ := solve(exitDone, "--positions", "given", "--csv", "-")
	settled, _ := solve(exitDone, "--positions", "settled", "--csv", "-")
	if given == settled {
		t.Error("at rest and as in the tables the voltages are the same: the study shows nothing")
	}
	if plain, _ := solve(exitDone, "--csv", "-"); plain != settled {
		t.Error("solve is not settled unless told otherwise")
	}
	must(t, exitDone, "run", "--no-figures")
	logged, _ := solve(exitDone, "--positions", "results/base", "--csv", "-")
	if logged == given {
		t.Error("the logged positions are those of the tables: the study shows nothing")
	}
	compareWithLog(t, logged, "2025-07-01T10:00:00-05:00")
	_, errs := must(t, exitDone, "trace", "--node", "lane-s")
	contains(t, errs, "positions: as logged in results/base")

	edit(t, "profiles/day.csv", "0.90", "0.91")
	_, errs = solve(exitInput, "--positions", "results/base")
	contains(t, errs, "profiles/day.csv has changed since the results in results/base were made: run again")
	_, errs = must(t, exitDone, "trace", "--node", "lane-s")
	contains(t, errs, "positions: settled on this step's inputs (profiles/day.csv has changed")
	edit(t, "profiles/day.csv", "0.91", "0.90")
	solve(exitDone, "--positions", "results/base")
	write(t, "feeder/nodes.csv", "node,x [m],y [m]\nmill,1,2\n")
	_, errs = solve(exitInput, "--positions", "results/base")
	contains(t, errs, "feeder/nodes.csv has changed")
	if err := os.Remove("feeder/nodes.csv"); err != nil {
		t.Fatal(err)
	}
	write(t, "cases/late/case.toml", "title = \"late\"\n")
	_, errs = solve(exitInput, "--positions", "results/base", "--case", "late")
	contains(t, errs, `are those of case "base", not of "late"`)
	if err := os.Remove("results/base/devices.csv"); err != nil {
		t.Fatal(err)
	}
	_, errs = solve(exitInput, "--positions", "results/base")
	contains(t, errs, "devices.csv is missing")
}

// An instant at logged positions holds what batteries delivered and who was charging at
// the end of the row: to the digits that storage.csv has.
func TestPositionsOfPlants(t *testing.T) {
	smallStudy(t)
	write(t, "feeder/batteries.csv", "battery,node,phases,energy [kWh],power [kW],dispatch,watched section,target [kW],recharge [kW]\n"+
		"b,mill,ABC,1500,500,peak shaving,head,900,700\n")
	write(t, "feeder/chargers.csv", "charger,node,phases,power [kW],arrival,departure,energy [kWh]\nc,lane,B,20,9:05,16:00,24\n")
	must(t, exitDone, "run", "--no-figures")
	row := "2025-07-01T10:00:00-05:00"
	logged, _ := must(t, exitDone, "solve", "--at", "2025-07-01T10:00", "--positions", "results/base", "--csv", "-")
	compareWithLog(t, logged, row)
	settled, _ := must(t, exitDone, "solve", "--at", "2025-07-01T10:00", "--csv", "-")
	if settled == logged {
		t.Error("the battery that is half full and the one of the run make no difference: the study shows nothing")
	}
	logged, _ = must(t, exitDone, "trace", "--node", "lane", "--at", "2025-07-01T09:00")
	contains(t, logged, "lane")
	if err := os.Remove("results/base/storage.csv"); err != nil {
		t.Fatal(err)
	}
	_, errs := must(t, exitInput, "solve", "--positions", "results/base")
	contains(t, errs, "storage.csv is missing")
}

// compareWithLog wants the voltages that a run logged at a step from solve's table.
func compareWithLog(t *testing.T, table, time string) {
	t.Helper()
	lines := strings.Split(strings.TrimSpace(read(t, "results/base/voltages.csv")), "\n")
	header := strings.Split(lines[0], ",")
	for _, l := range lines[1:] {
		cells := strings.Split(l, ",")
		if cells[0] != time {
			continue
		}
		for _, row := range strings.Split(strings.TrimSpace(table), "\n")[1:] {
			c := strings.Split(row, ",")
			for i, h := range header {
				if h == c[0]+"."+c[1] && cells[i] != c[3] {
					t.Errorf("%s: solve says %s, the run %s", h, c[3], cells[i])
				}
			}
		}
		return
	}
	t.Errorf("no row %s in voltages.csv", time)
}

// A load far beyond the line: where it is half served the step is low, where there is
// no solution at all it is unsolved; both make the exit status 1.
func TestLowAndUnsolved(t *testing.T) {
	smallStudy(t)
	edit(t, "feeder/loads.csv", "ABC,1800", "ABC,18000")
	at := []string{"--positions", "given", "--at", "2025-07-01T08:00"}
	out, errs := must(t, exitFound, append([]string{"solve", "--csv", "-"}, at...)...)
	contains(t, out, "node,phase,voltage [kV]", "mill,A,")
	contains(t, errs, "low: a load at mill.")
	out, _ = must(t, exitFound, append([]string{"trace", "--node", "mill"}, at...)...)
	contains(t, out, "far")
	_, errs = must(t, exitFound, "run", "--no-figures")
	contains(t, errs, "low", "the first at 2025-07-01T", "mill.")
	contains(t, read(t, "results/base/steps.csv"), ",low,")

	// Generation that no line of this length can carry away leaves no solution.
	write(t, "feeder/generators.csv", "generator,node,phases,kind,rating [kVA],real [kW]\nplant,mill,ABC,other,900000,900000\n")
	out, errs = must(t, exitFound, append([]string{"solve", "--csv", "volts.csv"}, at...)...)
	contains(t, errs, "no solution", "mill")
	if _, err := os.Stat("volts.csv"); !errors.Is(err, fs.ErrNotExist) || out != "" {
		t.Errorf("something is written without a solution: %v %q", err, out)
	}
	out, errs = must(t, exitFound, append([]string{"trace", "--node", "mill"}, at...)...)
	contains(t, errs, "no solution")
	if out != "" {
		t.Errorf("trace prints %q without a solution", out)
	}
	_, errs = must(t, exitFound, "run")
	contains(t, errs, "0 steps low, 48 steps without a solution")
	contains(t, read(t, "results/base/summary.csv"), "unsolved steps,48,1")
}

// --strict makes the exit status 1 where a place is outside the limits.
func TestStrict(t *testing.T) {
	smallStudy(t)
	must(t, exitDone, "run", "--no-figures", "--strict")
	write(t, "study.toml", read(t, "study.toml")+"\n[limits]\nrange = { low = 1.0, high = 1.01 }\n")
	must(t, exitDone, "run", "--no-figures")
	_, errs := must(t, exitFound, "run", "--no-figures", "--strict")
	contains(t, errs, "outside the voltage limits")
}

// report draws from a folder alone, and says what half a folder lacks.
func TestReport(t *testing.T) {
	smallStudy(t)
	must(t, exitDone, "run", "--no-figures")
	if _, err := os.Stat("results/base/figures"); err == nil {
		t.Error("there are figures in spite of --no-figures")
	}
	contains(t, read(t, "results/base/report.html"), "This report has no figures", "never met a measurement")
	if err := os.Rename("results/base", "elsewhere"); err != nil {
		t.Fatal(err)
	}
	out, _ := must(t, exitDone, "report", "elsewhere")
	contains(t, out, "figures/map.png: ")
	first := read(t, "elsewhere/figures/losses.png")
	page, record := read(t, "elsewhere/report.html"), read(t, "elsewhere/run.json")
	contains(t, page, "data:image/png;base64,", "Losses by kind and")
	sum := sha256.Sum256([]byte(page))
	contains(t, record, `"report.html": "`+hex.EncodeToString(sum[:])+`"`, `"figures/losses.png": "`)
	must(t, exitDone, "report", "elsewhere")
	if read(t, "elsewhere/report.html") != page || read(t, "elsewhere/run.json") != record {
		t.Error("a second report is another one")
	}
	must(t, exitDone, "run")
	if read(t, "results/base/report.html") != page || read(t, "results/base/run.json") != record {
		t.Error("the report of run with figures is another than that of report")
	}
	if err := os.RemoveAll("elsewhere/figures"); err != nil {
		t.Fatal(err)
	}
	must(t, exitDone, "report", "elsewhere")
	if read(t, "elsewhere/figures/losses.png") != first {
		t.Error("a second report draws another picture")
	}
	for _, e := range entries(t, "elsewhere") {
		if strings.HasPrefix(e, ".") {
			t.Errorf("%s is left over", e)
		}
	}
	if err := os.Remove("elsewhere/steps.csv"); err != nil {
		t.Fatal(err)
	}
	_, errs := must(t, exitInput, "report", "elsewhere")
	contains(t, errs, "elsewhere/steps.csv")
	if read(t, "elsewhere/figures/losses.png") != first {
		t.Error("the old figures are gone")
	}
}

// Where nothing can be written it is the machine's failure, exit status 3, and the
// results of the last run stay.
func TestNowhereToWrite(t *testing.T) {
	smallStudy(t)
	if _, err := os.Stat("/proc/self"); err == nil {
		_, errs := must(t, exitMachine, "run", "--out", "/proc/yearflow/base")
		contains(t, errs, "/proc/yearflow")
		must(t, exitMachine, "solve", "--csv", "/proc/volts.csv")
		must(t, exitMachine, "demo", "/proc/yearflow")
	}
	must(t, exitMachine, "solve", "--csv", "no-folder/volts.csv")
	full, err := os.OpenFile("/dev/full", os.O_WRONLY, 0)
	if err != nil {
		t.Skip("no /dev/full here")
	}
	defer full.Close()
	for _, args := range [][]string{{"solve"}, {"solve", "--csv", "-"}, {"lines", "--json", "-"}} {
		var errs bytes.Buffer
		if code := run(t.Context(), args, full, &errs); code != exitMachine || !strings.Contains(errs.String(), "standard output") {
			t.Errorf("%v into a full disk: exit status %d, %s", args, code, &errs)
		}
	}
}

// On a full disk a run ends with exit status 3, says so, leaves the results of the
// last run and nothing else.
func TestFullDisk(t *testing.T) {
	smallStudy(t)
	disk, err := filepath.Abs("disk")
	if err != nil {
		t.Fatal(err)
	}
	if err := os.Mkdir(disk, 0o755); err != nil {
		t.Fatal(err)
	}
	unmount, err := mountSmall(disk)
	if err != nil {
		t.Skipf("no small file system can be mounted here: %v", err)
	}
	t.Cleanup(func() {
		if err := unmount(); err != nil {
			t.Error(err)
		}
	})
	must(t, exitDone, "run", "--no-figures", "--out", "disk/base")
	before := fingerprint(t, "disk/base")
	edit(t, "study.toml", "end = 2025-07-03", "end = 2026-07-03")
	_, errs := must(t, exitMachine, "run", "--no-figures", "--out", "disk/base")
	contains(t, errs, "no space left")
	if after := fingerprint(t, "disk/base"); after != before {
		t.Error("the results of the last run are not what they were")
	}
	if es := entries(t, "disk"); len(es) != 1 {
		t.Errorf("left over: %v", es)
	}
}

// fingerprint is the hash of all files of a folder with their names.
func fingerprint(t *testing.T, dir string) string {
	t.Helper()
	h := sha256.New()
	err := filepath.WalkDir(dir, func(path string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		fmt.Fprintf(h, "%s %x\n", path, sha256.Sum256([]byte(read(t, path))))
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	return fmt.Sprintf("%x", h.Sum(nil))
}

// A run that is killed leaves the results of the last one whole, and the next run
// clears away what it left.
func TestKilledRun(t *testing.T) {
	smallStudy(t)
	must(t, exitDone, "run", "--no-figures")
	before := fingerprint(t, "results/base")
	edit(t, "study.toml", "end = 2025-07-03", "end = 2035-07-03") // long enough to be caught
	program, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	cmd := exec.Command(program, "run", "--no-figures")
	cmd.Env = append(os.Environ(), asProgram+"=1")
	var errs bytes.Buffer
	cmd.Stderr = &errs
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	waitForRows(t, "results", 3*time.Minute)
	if err := cmd.Process.Kill(); err != nil {
		t.Fatal(err)
	}
	if err := cmd.Wait(); err == nil {
		t.Fatal("the run ended before it was killed")
	}
	if es := entries(t, "results"); len(es) != 2 {
		t.Errorf("beside the old results there should be half a run: %v\n%s", es, &errs)
	}
	if fingerprint(t, "results/base") != before {
		t.Error("the results of the last run are not what they were")
	}
	edit(t, "study.toml", "end = 2035-07-03", "end = 2025-07-03")
	must(t, exitDone, "run", "--no-figures")
	if es := entries(t, "results"); len(es) != 1 || es[0] != "base" {
		t.Errorf("the next run did not clear up: %v", es)
	}
}

// waitForRows waits until a run has written rows into its hidden folder.
func waitForRows(t *testing.T, dir string, most time.Duration) {
	t.Helper()
	for began := time.Now(); time.Since(began) < most; time.Sleep(5 * time.Millisecond) {
		found, err := filepath.Glob(filepath.Join(dir, ".base.new-*", "steps.csv"))
		if err != nil {
			t.Fatal(err)
		}
		for _, f := range found {
			if st, err := os.Stat(f); err == nil && st.Size() > 10_000 {
				return
			}
		}
	}
	t.Fatal("no run begins to write")
}

// Ctrl-C ends a run between two steps: the old results stay, nothing is left over, and
// the program says so.
func TestStoppedRun(t *testing.T) {
	smallStudy(t)
	must(t, exitDone, "run", "--no-figures")
	before := fingerprint(t, "results/base")
	edit(t, "study.toml", "end = 2025-07-03", "end = 2035-07-03")
	ctx, cancel := context.WithCancel(t.Context())
	var out, errs bytes.Buffer
	done := make(chan int)
	go func() { done <- run(ctx, []string{"run", "--no-figures"}, &out, &errs) }()
	waitForRows(t, "results", 3*time.Minute)
	cancel()
	if code := <-done; code != exitStopped {
		t.Errorf("exit status %d, want %d", code, exitStopped)
	}
	contains(t, errs.String(), "stopped: the results of the last whole run are as they were")
	if fingerprint(t, "results/base") != before {
		t.Error("the results of the last run are not what they were")
	}
	if es := entries(t, "results"); len(es) != 1 {
		t.Errorf("left over: %v", es)
	}
}
