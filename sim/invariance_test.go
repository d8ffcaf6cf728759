package sim_test

import (
	"encoding/csv"
	"fmt"
	"io/fs"
	"math/cmplx"
	"os"
	"regexp"
	"strconv"
	"strings"
	"testing"
	"testing/fstest"

	"yearflow/sim"
	"yearflow/sim/demo"
	"yearflow/sim/results"
)

// changed returns a study with every cell of some columns of its feeder's tables
// rewritten.
func changed(t testing.TB, base fs.FS, cell func(table, column, value string) string) fs.FS {
	t.Helper()
	o := laid(base)
	entries, err := fs.ReadDir(base, "feeder")
	if err != nil {
		t.Fatal(err)
	}
	for _, e := range entries {
		name := "feeder/" + e.Name()
		r := csv.NewReader(strings.NewReader(content(t, base, name)))
		r.Comment = '#'
		all, err := r.ReadAll()
		if err != nil {
			t.Fatal(err)
		}
		var b strings.Builder
		w := csv.NewWriter(&b)
		for i, row := range all {
			for k := range row {
				if i > 0 && row[k] != "" {
					row[k] = cell(strings.TrimSuffix(e.Name(), ".csv"), all[0][k], row[k])
				}
			}
			if err := w.Write(row); err != nil {
				t.Fatal(err)
			}
		}
		w.Flush()
		o.put(name, b.String())
	}
	return o
}

// scaled multiplies a cell.
func scaled(t testing.TB, value string, k float64) string {
	return strconv.FormatFloat(parse(t, value)*k, 'g', 17, 64)
}

// phasors lists the voltages of a solved study by node and phase.
func phasors(e *sim.Engine, in *sim.Instant) map[string]complex128 {
	out := map[string]complex128{}
	n := e.Plan.Network
	for u, v := range in.State.V {
		if x := n.Unknowns[u]; x.Node >= 0 {
			out[n.Model.Nodes[x.Node].Name+"."+x.Phase.String()] = v / complex(x.Nominal, 0)
		}
	}
	return out
}

// demoHours is the demo study with a period of some hours.
func demoHours(t testing.TB, hours int) overlay {
	t.Helper()
	o := laid(demo.Study())
	toml := content(t, o, "study.toml")
	next := regexp.MustCompile(`(?m)^end = .*$`).ReplaceAllString(toml, fmt.Sprintf("end = 2025-01-01T%02d:00:00", hours))
	if next == toml {
		t.Fatal("the demo's study.toml has no end")
	}
	o.put("study.toml", next)
	return o
}

// studies are those that a change of names, order or direction must not move.
func studies(t testing.TB) map[string]fs.FS {
	out := map[string]fs.FS{"thirteen-node": os.DirFS("../testdata/published/thirteen-node"), "thirty-four-node": os.DirFS("../testdata/published/thirty-four-node"), "demo": demoHours(t, 2)}
	for _, bank := range []string{"Dyn1", "YNd11", "YNy0", "Dd0", "open-wye/open-delta AB-BC", "open-delta/open-delta BC-CA"} {
		out[bank] = small{bank: bank, grounded: strings.Contains(bank, "yn")}.study()
	}
	for _, connection := range []string{"open-delta AB-CB", "open-delta BC-AC", "closed-delta"} {
		s := small{bank: "Dyn1", grounded: true}.study()
		s["feeder/sections.csv"].Data = []byte(strings.Replace(string(s["feeder/sections.csv"].Data), "sub,high", "reg,high", 1))
		s["feeder/regulators.csv"] = &fstest.MapFile{Data: []byte("regulator,from,to,phases,connection,pt ratio,ct primary [A]\nR,sub,reg,ABC," + connection + ",60,200\n")}
		sheet := "regulator,phase,set [V],bandwidth [V],delay [s],tap\n"
		for i, pair := range strings.Split(map[string]string{"closed-delta": "AB-BC-CA"}[connection]+strings.TrimPrefix(strings.TrimPrefix(connection, "open-delta "), "closed-delta"), "-") {
			sheet += fmt.Sprintf("R,%s,120,2,30,%d\n", pair, []int{9, -4, 13}[i])
		}
		s["feeder/regulator-settings.csv"] = &fstest.MapFile{Data: []byte(sheet)}
		out[connection] = s
	}
	return out
}

// moved compares two solutions; name says where a place of the first stands in the
// second.
func moved(t *testing.T, before, after map[string]complex128, name func(string) string) {
	t.Helper()
	if len(before) == 0 {
		t.Fatal("nothing was solved")
	}
	for place, v := range before {
		w, ok := after[name(place)]
		if d := cmplx.Abs(v - w); !ok || d > 1e-9 {
			t.Errorf("%s: %.9f∠%.6f° before, %.9f∠%.6f° after", place, cmplx.Abs(v), degrees(v), cmplx.Abs(w), degrees(w))
		}
	}
}

func samePlace(s string) string { return s }

// Phases are names: with A called B, B called C and C called A, and the source turned
// so that its voltages stay where they were, every voltage keeps its value under its
// new name.
func TestPhasesAreNames(t *testing.T) {
	next := strings.NewReplacer("A", "B", "B", "C", "C", "A")
	pairs := regexp.MustCompile(`[ABC]{2}-[ABC]{2}$`)
	for name, study := range studies(t) {
		t.Run(name, func(t *testing.T) {
			e, in := solveFS(t, study)
			before := phasors(e, in)
			turned := false
			turn := changed(t, study, func(table, column, value string) string {
				switch {
				case column == "phases" || column == "phase" && value != "all":
					return next.Replace(value)
				case column == "connection":
					return pairs.ReplaceAllStringFunc(value, next.Replace)
				case column == "angle [deg]":
					turned = true
					return strconv.FormatFloat(parse(t, value)+120, 'g', 17, 64)
				}
				return value
			})
			if !turned {
				t.Fatal("the source gives no angle to turn")
			}
			e, in = solveFS(t, turn)
			moved(t, before, phasors(e, in), func(s string) string {
				return s[:len(s)-1] + next.Replace(s[len(s)-1:])
			})
		})
	}
}

// A section has two ends, and which is called from is a matter of taste.
func TestSectionsHaveNoDirection(t *testing.T) {
	for name, study := range studies(t) {
		t.Run(name, func(t *testing.T) {
			e, in := solveFS(t, study)
			before := phasors(e, in)
			o := laid(study)
			table := content(t, study, "feeder/sections.csv")
			back := strings.Replace(table, "section,from,to,", "section,to,from,", 1)
			if back == table {
				t.Fatal("the header has changed")
			}
			o.put("feeder/sections.csv", back)
			e, in = solveFS(t, o)
			moved(t, before, phasors(e, in), samePlace)
		})
	}
}

// The order of rows is nobody's business: the voltages are the same to the last bit.
func TestRowsHaveNoOrder(t *testing.T) {
	for name, study := range studies(t) {
		t.Run(name, func(t *testing.T) {
			e, in := solveFS(t, study)
			before := phasors(e, in)
			o := laid(study)
			entries, err := fs.ReadDir(study, "feeder")
			if err != nil {
				t.Fatal(err)
			}
			for _, entry := range entries {
				file := "feeder/" + entry.Name()
				var lines []string
				for _, l := range strings.Split(content(t, study, file), "\n") {
					if l != "" && !strings.HasPrefix(l, "#") {
						lines = append(lines, l)
					}
				}
				for i, j := 1, len(lines)-1; i < j; i, j = i+1, j-1 {
					lines[i], lines[j] = lines[j], lines[i]
				}
				o.put(file, strings.Join(lines, "\n")+"\n")
			}
			e, in = solveFS(t, o)
			after := phasors(e, in)
			for place, v := range before {
				if after[place] != v {
					t.Errorf("%s: %v and %v", place, v, after[place])
				}
			}
		})
	}
}

// A line without charging may be cut anywhere: two pieces in line are the whole. With
// charging the two pi circuits are nearer to the line's own equations than the one, so
// that only a bare line is held to equality.
func TestSectionsMayBeCut(t *testing.T) {
	s := small{bank: "Dyn1", grounded: true, bare: true}.study()
	s["feeder/sections.csv"].Data = []byte("section,from,to,phases,length [km],construction\nhigh,sub,high,BCA,3,wire\nlow,low,load,CAB,0.4,wire\n")
	e, in := solveFS(t, s)
	before := phasors(e, in)
	s["feeder/sections.csv"].Data = []byte("section,from,to,phases,length [km],construction\nhigh1,sub,cut1,BCA,1.1,wire\nhigh2,high,cut1,BCA,1.9,wire\nlow1,low,cut2,CAB,0.2,wire\nlow2,cut2,load,CAB,0.2,wire\n")
	e, in = solveFS(t, s)
	after := phasors(e, in)
	if len(after) != len(before)+6 {
		t.Fatal("the cuts are missing")
	}
	moved(t, before, after, samePlace)
}

// Twice the feeder: loads, capacitors, charging, short-circuit power and banks doubled,
// impedances halved. The equations are the same but for a factor, so the voltages stay.
func TestDoubleFeeder(t *testing.T) {
	double := regexp.MustCompile(`^(real|reactive|rating|size|no-load loss|b|short circuit 3ph|short circuit 1ph) \[`)
	half := regexp.MustCompile(`^[rx] \[`)
	for _, zip := range []string{"impedance", "current", "power"} {
		for _, bank := range []string{"Dyn1", "Yd1", "YNyn0", "open-delta/open-delta AB-BC"} {
			base := small{bank: bank, grounded: strings.Contains(bank, "yn")}.study()
			loads := base["feeder/loads.csv"]
			loads.Data = []byte(strings.ReplaceAll(string(loads.Data), "impedance", zip))
			e, in := solveFS(t, base)
			before := phasors(e, in)
			e, in = solveFS(t, changed(t, base, func(table, column, value string) string {
				switch {
				case double.MatchString(column):
					return scaled(t, value, 2)
				case half.MatchString(column):
					return scaled(t, value, 0.5)
				}
				return value
			}))
			if in.Status != results.OK {
				t.Fatal(bank, zip, in)
			}
			moved(t, before, phasors(e, in), samePlace)
		}
	}
}

// A part that nothing grounds is reported between phases, in p.u. of its line-to-line
// nominal, with and without charging; the grounded side stays phase by phase.
func TestUngroundedPartsAreReportedLineToLine(t *testing.T) {
	for _, bare := range []bool{true, false} {
		e, in := solveFS(t, small{bank: "Dd0", bare: bare}.study())
		i, _ := e.Study.Model.NodeIndex("load")
		at := e.Plan.Network.At[i]
		seen := map[string]sim.VoltageRow{}
		for _, v := range e.Voltages() {
			if v.Node == "load" {
				seen[v.Phase] = v
			}
		}
		if len(seen) != 3 {
			t.Fatalf("reported: %v", seen)
		}
		for k, pair := range []string{"AB", "BC", "CA"} {
			v := in.State.V[at[k]] - in.State.V[at[(k+1)%3]]
			row, ok := seen[pair]
			if !ok {
				t.Fatalf("no %s in %v", pair, seen)
			}
			want := cmplx.Abs(v) / 4160
			if d := row.PU - want; d > 1e-12 || d < -1e-12 || turned(row.Angle, degrees(v)) > 1e-9 || row.PU < 0.9 || row.PU > 1.15 {
				t.Errorf("%s: %v, want %.9f p.u. at %.6f°", pair, row, want, degrees(v))
			}
		}
		for _, v := range e.Voltages() {
			if v.Node == "high" && len(v.Phase) != 1 {
				t.Errorf("the grounded side is reported as %s", v.Phase)
			}
		}
	}
}
