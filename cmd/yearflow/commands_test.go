package main

import (
	"encoding/csv"
	"encoding/json"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"github.com/spf13/cobra"

	"yearflow/plots"
)

// What every command prints as its example runs on the demo as it stands.
func TestExamplesAsPrinted(t *testing.T) {
	if testing.Short() {
		t.Skip("runs two whole years")
	}
	t.Chdir(t.TempDir())
	done := map[string]bool{}
	for _, name := range []string{"demo", "check", "lines", "run", "solve", "trace", "report"} {
		help, _ := must(t, exitDone, "help", name)
		contains(t, help, "Usage:\n  yearflow "+name, "Examples:\n")
		again, _ := must(t, exitDone, name, "--help")
		if again != help {
			t.Errorf("help %s and %s --help differ:\n%s", name, name, again)
		}
		_, rest, _ := strings.Cut(help, "Examples:\n")
		lines, _, _ := strings.Cut(rest, "\n\n")
		for line := range strings.Lines(lines) {
			args := strings.Fields(line)
			if len(args) == 0 || args[0] != "yearflow" {
				t.Fatalf("the example of %s is no command: %q", name, line)
			}
			if line = strings.TrimSpace(line); !done[line] {
				done[line] = true
				out, _ := must(t, exitDone, args[1:]...)
				if out == "" {
					t.Errorf("%s prints nothing", line)
				}
			}
		}
	}
	for _, f := range []string{"my-feeder/study.toml", "lines.csv", "results/base/summary.csv", "results/lower-band/run.json"} {
		if _, err := os.Stat(f); err != nil {
			t.Error(err)
		}
	}
	for _, f := range plots.Names() {
		if f == "measured" {
			continue // the demo study measured nothing
		}
		if _, err := os.Stat("results/base/figures/" + f + ".png"); err != nil {
			t.Error(err)
		}
	}
	// The last line of run is a command too.
	lowest := lastCommand(t, read(t, "results/base/summary.csv"))
	out, errs := must(t, exitDone, lowest...)
	contains(t, out, "source", "LTC")
	contains(t, errs, "positions: as logged in results/base")
}

// lastCommand is the trace that run proposes, built from the summary.
func lastCommand(t *testing.T, summary string) []string {
	t.Helper()
	var node, at string
	for line := range strings.Lines(summary) {
		cells := strings.Split(strings.TrimSpace(line), ",")
		switch cells[0] {
		case "lowest judged voltage place":
			node = cells[1][:strings.LastIndexByte(cells[1], '.')]
		case "lowest judged voltage time":
			at = cells[1]
		}
	}
	return []string{"trace", "--node", node, "--at", at}
}

// Every command has a text for people, an example and options that name their value.
func TestEveryCommandExplainsItself(t *testing.T) {
	root := newRoot(&console{})
	root.SetHelpCommand(&cobra.Command{Hidden: true})
	n := 0
	for _, c := range root.Commands() {
		if c.Hidden || c.Name() == "completion" {
			continue
		}
		n++
		if c.Short == "" || c.Example == "" {
			t.Errorf("%s: no text or no example", c.Name())
		}
		if strings.Contains(c.LocalFlags().FlagUsages(), " string ") {
			t.Errorf("%s: an option does not name its value:\n%s", c.Name(), c.LocalFlags().FlagUsages())
		}
	}
	if n != 12 {
		t.Errorf("%d commands, want the 12 of the design", n)
	}
	out, _ := must(t, exitDone)
	contains(t, out, "yearflow run", "yearflow demo my-feeder", "yearflow check my-feeder", "licensed engineer")
	out, _ = must(t, exitDone, "help")
	contains(t, out, "trace", "lines", "licensed engineer", "--version")
	out, _ = must(t, exitDone, "--version")
	contains(t, out, version)
}

// The example of README.md runs as it is printed there, with the words around it.
func TestReadmeExample(t *testing.T) {
	dir := t.TempDir()
	t.Chdir(dir)
	fromReadme(t, dir)
	out, errs := must(t, exitDone, "check")
	contains(t, out, "Mill Lane 101", "Assumed for blank cells (", "no errors", "12 customers")
	if errs != "" {
		t.Errorf("check says %q on the error stream", errs)
	}
	out, _ = must(t, exitDone, "run")
	contains(t, out, "results in results/base", "losses energy", "kWh", "Figures: results/base/figures", "yearflow trace --node lane-s --at 2025-07-0")
	for _, f := range []string{"summary.csv", "steps.csv", "voltages.csv", "flows.csv", "devices.csv", "operations.csv", "duty.csv", "nodes.csv", "losses.csv",
		"loading.csv", "monthly.csv", "network.csv", "places.csv", "run.json", "timing.json", "figures/map.png"} {
		if _, err := os.Stat(filepath.Join("results/base", f)); err != nil {
			t.Error(err)
		}
	}
	contains(t, read(t, "results/base/operations.csv"), "C1,,0,1,time", "R1,A,", "band low")
	out, _ = must(t, exitDone, "trace", "--node", "lane-s", "--at", "2025-07-01T20:00")
	contains(t, out, "R1", "regulator", "T1", "transformer")
	out, _ = must(t, exitDone, "solve", "--node", "bridge", "--at", "2025-07-01T08:00")
	contains(t, out, "sum (must be nothing)")
}

// What --csv - and --json - put on standard output is the table and nothing else, and
// both hold the same numbers.
func TestTablesOnStandardOutput(t *testing.T) {
	smallStudy(t)
	for _, tt := range []struct {
		args   []string
		header string
		number string // a column of numbers
	}{
		{[]string{"check"}, "finding,file,line,column,text", "line"},
		{[]string{"solve", "--at", "2025-07-02T12:00"}, "node,phase,voltage [kV],voltage [pu],V120 [V],angle [deg]", "voltage [pu]"},
		{[]string{"solve", "--node", "mill"}, "phase,part,element,kind,neighbour,at,g [S],b [S],voltage [kV],angle [deg],current [A],current angle [deg],real [kW],reactive [kvar]", "real [kW]"},
		{[]string{"trace", "--node", "lane-s"}, "element,kind,from,to,phase,current [A],angle [deg],V120 [V],change [V],loss [kW],tap", "V120 [V]"},
		{[]string{"lines"}, "construction,kind,basis,row,column,r [ohm/mi],x [ohm/mi],g [S mi],b [S mi],shunt [uS/mi],r [ohm/km],x [ohm/km],g [S km],b [S km],shunt [uS/km]", "r [ohm/mi]"},
		{[]string{"run", "--no-figures"}, "quantity,value,unit", "value"},
	} {
		t.Run(tt.args[0], func(t *testing.T) {
			out, _ := must(t, exitDone, append(tt.args, "--csv", "-")...)
			rows, err := csv.NewReader(strings.NewReader(out)).ReadAll()
			if err != nil {
				t.Fatalf("%v\n%s", err, out)
			}
			if got := strings.Join(rows[0], ","); got != tt.header {
				t.Errorf("header\n%s\nwant\n%s", got, tt.header)
			}
			js, _ := must(t, exitDone, append(tt.args, "--json", "-")...)
			var objects []map[string]any
			if err := json.Unmarshal([]byte(js), &objects); err != nil {
				t.Fatalf("%v\n%s", err, js)
			}
			if len(objects) != len(rows)-1 || len(objects) == 0 {
				t.Fatalf("%d objects and %d rows", len(objects), len(rows)-1)
			}
			numbers := 0
			for i, row := range rows[1:] {
				for k, cell := range row {
					switch v := objects[i][rows[0][k]].(type) {
					case string:
						if v != cell {
							t.Errorf("row %d, %s: %q in CSV, %q in JSON", i, rows[0][k], cell, v)
						}
					case float64:
						if f, err := strconv.ParseFloat(cell, 64); err != nil || math.Abs(f-v) > 0 {
							t.Errorf("row %d, %s: %q in CSV, %v in JSON", i, rows[0][k], cell, v)
						}
						if rows[0][k] == tt.number {
							numbers++
						}
					case nil:
						if cell != "" {
							t.Errorf("row %d, %s: %q in CSV, nothing in JSON", i, rows[0][k], cell)
						}
					}
				}
			}
			if numbers == 0 {
				t.Errorf("no number under %q in\n%s", tt.number, js)
			}
		})
	}
	// Into a file, the words for people stay on standard output.
	out, _ := must(t, exitDone, "solve", "--csv", "volts.csv")
	contains(t, out, "Mill Lane 101", "losses")
	contains(t, read(t, "volts.csv"), "lane-s,B,0.")
}

// check tells errors, oddities and assumptions apart, and wrong cases by their file.
func TestCheck(t *testing.T) {
	smallStudy(t)
	write(t, "cases/late/case.toml", "[scale]\nload = 1.5\n")
	write(t, "cases/wrong/loads.csv", "load,profile\nworks,wroks\n")
	out, errs := must(t, exitInput, "check")
	contains(t, out, "late: no errors", "wrong: 1 error")
	contains(t, errs, `cases/wrong/loads.csv:2:2: no profile named "wroks"; did you mean "works"?`, "1 error\n")
	must(t, exitDone, "check", "--case", "late")
	must(t, exitInput, "check", "--case", "wrong")
	edit(t, "study.toml", `files = ["profiles/*.csv"]`, `files = ["profiles/*.csv", "weather/*.csv"]`)
	out, _ = must(t, exitDone, "check", "--case", "late")
	contains(t, out, "Odd, but possible (2)", `transformer "T1" of 50 kVA feeds load "houses" of 69.588 kVA`, `study.toml:9:3: files "weather/*.csv": no file matches`)
	edit(t, "feeder/loads.csv", "works,mill", "works,mil")
	edit(t, "feeder/sections.csv", "length [ft]", "length")
	out, errs = must(t, exitInput, "check")
	contains(t, errs, "feeder/loads.csv:2:2", `did you mean "mill"?`, "feeder/sections.csv:1:5", "2 errors\n")
	if strings.Contains(out, "no errors") {
		t.Errorf("no errors, it says:\n%s", out)
	}
}
