package study_test

import (
	"context"
	"fmt"
	"io/fs"
	"math"
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"testing"
	"testing/fstest"

	"yearflow/sim/demo"
	"yearflow/sim/study"
	"yearflow/sim/tables"
)

// tuneLane is a small feeder: a source, a regulator with loads near and far, and a
// capacitor by voltage. Its best set voltage is a compromise between the ends.
func tuneLane(tune string) fstest.MapFS {
	file := func(s string) *fstest.MapFile { return &fstest.MapFile{Data: []byte(s)} }
	var day strings.Builder
	day.WriteString("time,day [pu]\n")
	for h := range 24 {
		v := 0.35 + 0.65*math.Pow(math.Sin(math.Pi*float64(h)/24), 2)
		fmt.Fprintf(&day, "2025-03-03T%02d:00,%.4f\n", h, v)
	}
	return fstest.MapFS{
		"study.toml": file(`title = "Lane"
[period]
start = 2025-03-03
end = 2025-03-05
step = "1h"
zone = "UTC"
[[profiles]]
files = ["profiles/*.csv"]
repeat = "day"
` + tune),
		"feeder/source.csv":                  file("node,nominal [kV]\nbus,12.47\n"),
		"feeder/constructions.csv":           file("construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km],b1 [uS/km],b0 [uS/km]\nline,sequence,0.35,0.4,0.6,1.2,0,0\n"),
		"feeder/sections.csv":                file("section,from,to,phases,length [km],construction\nL1,bus,mid,ABC,4,line\nL2,reg,end,ABC,9,line\n"),
		"feeder/regulators.csv":              file("regulator,from,to,phases,pt ratio,ct primary [A]\nR1,mid,reg,ABC,60,300\n"),
		"feeder/regulator-settings.csv":      file("regulator,phase,set [V],bandwidth [V],delay [s],ldc r [V],ldc x [V]\nR1,all,121,2,30,0,0\n"),
		"feeder/capacitors.csv":              file("capacitor,node,phases,size [kvar],state\nC1,end,ABC,450,open\n"),
		"feeder/capacitor-settings.csv":      file("capacitor,control,voltage on [V],voltage off [V],delay [s]\nC1,voltage,117,123,90\n"),
		"feeder/loads.csv":                   file("load,node,phases,real [kW],reactive [kvar],profile,customers\nnear,reg,ABC,700,250,day,120\nfar,end,ABC,1500,500,day,80\n"),
		"profiles/day.csv":                   file(day.String()),
		"cases/tuned/regulator-settings.csv": file("regulator,phase,set [V]\nR1,all,119\n"),
	}
}

// grid is a search over two settings of the lane, 25 × 13 candidates.
const grid = `[tune]
settings = [
  { device = "R1", phase = "all", setting = "set", low = 119, high = 125, step = 0.25 },
  { device = "R1", setting = "ldc r", low = 0, high = 6, step = 0.5 },
]
aims = { "customer-hours outside A" = 1, "losses energy" = 0.1, "operations" = 0.5 }
`

func tuneOf(t testing.TB, f fs.FS, s study.TuneSettings) (*study.Tuning, error) {
	t.Helper()
	if s.Log == "" {
		s.Log = filepath.Join(t.TempDir(), "tune-log.csv")
	}
	return study.Tune(context.Background(), study.Place{FS: f, Version: "test"}, s)
}

func mustTune(t testing.TB, f fs.FS, s study.TuneSettings) *study.Tuning {
	t.Helper()
	out, err := tuneOf(t, f, s)
	if err != nil {
		t.Fatal(err)
	}
	return out
}

// The optimum of the whole grid, every candidate of which is evaluated, is found by a
// search that may look at little more than a third of it.
func TestTuneRecoversTheOptimum(t *testing.T) {
	f := tuneLane(grid)
	log := filepath.Join(t.TempDir(), "all-log.csv")
	whole := mustTune(t, f, study.TuneSettings{Log: log, Budget: 400})
	if len(whole.Points) < 325 || whole.Stopped != "every candidate of the grid was evaluated" {
		t.Fatalf("%d candidates, stopped: %s", len(whole.Points), whole.Stopped)
	}
	least := math.Inf(1)
	for _, p := range whole.Points {
		if p.Levels != nil {
			least = math.Min(least, p.Score)
		}
	}
	if whole.Best.Score != least || whole.Best.Score >= whole.Base.Score {
		t.Errorf("the best of the grid has %v, the least score is %v, the base %v", whole.Best.Score, least, whole.Base.Score)
	}
	// Of 40 seeds 38 find it to the bit and all come within 1 % of what it gains; ten are run here.
	const seeds = 10
	exact := 0
	for seed := uint64(1); seed <= seeds; seed++ {
		found := mustTune(t, f, study.TuneSettings{Log: log, Budget: 120, Seed: seed})
		if found.Best.Score == least {
			exact++
		}
		if short := (found.Best.Score - least) / (whole.Base.Score - least); short > 0.01 {
			t.Errorf("seed %d: found %v at %v after %d candidates, the optimum is %v at %v", seed, found.Best.Score, found.Best.Values, found.Evaluated, least, whole.Best.Values)
		}
		if found.Evaluated > 120 {
			t.Errorf("seed %d: %d candidates, the budget is 120", seed, found.Evaluated)
		}
	}
	if exact < seeds*8/10 {
		t.Errorf("%d of %d seeds find the optimum itself", exact, seeds)
	}
}

// Neither the number of workers nor having been stopped changes anything but the log.
func TestTuneIsReproducible(t *testing.T) {
	f := tuneLane(grid)
	want := mustTune(t, f, study.TuneSettings{Budget: 30, Workers: 1})
	same := func(what string, got *study.Tuning) {
		t.Helper()
		if !reflect.DeepEqual(got.Tables(), want.Tables()) {
			t.Errorf("%s: other tables than with one worker", what)
		}
	}
	same("two workers", mustTune(t, f, study.TuneSettings{Budget: 30, Workers: 2}))

	log := filepath.Join(t.TempDir(), "tune-log.csv")
	ctx, stop := context.WithCancel(context.Background())
	_, err := study.Tune(ctx, study.Place{FS: f, Version: "test"}, study.TuneSettings{Log: log, Budget: 30, Workers: 2,
		Watch: func(done, _ int, _, _ *study.Point) {
			if done >= 12 {
				stop()
			}
		}})
	if err == nil {
		t.Fatal("a search that is stopped said nothing")
	}
	data, err := os.ReadFile(log)
	if err != nil {
		t.Fatal(err)
	}
	kept := strings.Count(string(data), "\n") - 1
	if kept < 5 || kept >= want.Evaluated {
		t.Fatalf("the log of the stopped search has %d candidates", kept)
	}
	// Killed in the middle of a row.
	if err := os.WriteFile(log, data[:len(data)-7], 0o644); err != nil {
		t.Fatal(err)
	}
	same("resumed", mustTune(t, f, study.TuneSettings{Log: log, Budget: 30}))
	same("all from the log", mustTune(t, f, study.TuneSettings{Log: log, Budget: 30}))
	// The log of other inputs is of no use, and does no harm.
	other := tuneLane(grid)
	other["feeder/loads.csv"] = &fstest.MapFile{Data: []byte(strings.ReplaceAll(string(other["feeder/loads.csv"].Data), "1500", "1400"))}
	if got := mustTune(t, other, study.TuneSettings{Log: log, Budget: 30}); got.Base.Score == want.Base.Score {
		t.Error("the log of other inputs was used")
	}
	// Other aims use it: [tune] does not change what a candidate gives.
	again := mustTune(t, tuneLane(strings.ReplaceAll(grid, "0.5 }\n", "0.7 }\n")), study.TuneSettings{Log: log, Budget: 1})
	after, _ := os.ReadFile(log)
	if n := strings.Count(string(after), again.Base.Origin); n != 0 || again.Base.Score == want.Base.Score {
		t.Error("the other weight is not in the score")
	}
}

// The best stands as a case that another case of that name does not lose its place to,
// and reads back to the same year (Tune itself refuses to end else).
func TestTuneWritesACase(t *testing.T) {
	dir := t.TempDir()
	if err := os.CopyFS(dir, tuneLane(grid)); err != nil {
		t.Fatal(err)
	}
	f := os.DirFS(dir)
	got := mustTune(t, f, study.TuneSettings{Budget: 12})
	if got.CaseName != "tuned-2" {
		t.Errorf("the case is called %q beside one called tuned", got.CaseName)
	}
	for range 2 { // the second time it is there and the same
		if err := got.WriteCase(dir); err != nil {
			t.Fatal(err)
		}
	}
	hand, err := os.ReadFile(filepath.Join(dir, "cases/tuned/regulator-settings.csv"))
	if err != nil || string(hand) != "regulator,phase,set [V]\nR1,all,119\n" {
		t.Errorf("the hand-made case is now %q, %v", hand, err)
	}
	if again := mustTune(t, f, study.TuneSettings{Budget: 12}); again.CaseName != "tuned-2" {
		t.Errorf("the same case again is called %q", again.CaseName)
	}
	cases, _, err := study.Choose(study.Place{FS: f, Results: filepath.Join(dir, "results")}, []string{"tuned-2"})
	if err != nil {
		t.Fatal(err)
	}
	if set := cases[1].Model.Regulators[0].Units[0].Settings.Set; set != got.Best.Values[0] {
		t.Errorf("the case sets %v V, the best %v V", set, got.Best.Values[0])
	}
	out := filepath.Join(dir, "results", "tune")
	if err := got.Write(out, study.Place{Version: "test"}, nil); err != nil {
		t.Fatal(err)
	}
	for _, name := range []string{"tune.csv", "settings.csv", "candidates.csv", "sensitivity.csv", "profile.csv", "sheet.csv", "cautions.csv", "tune.json", "case/case.toml", "case/regulator-settings.csv"} {
		if _, err := os.Stat(filepath.Join(out, name)); err != nil {
			t.Error(err)
		}
	}
}

func cautioned(t *study.Tuning, text string) bool {
	for _, c := range t.Cautions {
		if strings.Contains(c.Text, text) {
			return true
		}
	}
	return false
}

// One candidate-year is the base's, and nothing is claimed beyond it.
func TestTuneBudgetOfOne(t *testing.T) {
	got := mustTune(t, tuneLane(grid), study.TuneSettings{Budget: 1})
	if got.Evaluated != 1 || got.Base == nil || got.Improves() || got.CaseName != "" {
		t.Errorf("%d evaluated, best %+v, case %q", got.Evaluated, got.Best, got.CaseName)
	}
	if got.Stopped != "the budget of 1 candidate-years is spent" {
		t.Errorf("stopped: %s", got.Stopped)
	}
	got.Tables() // holds for what was not found
}

// Bounds that leave the base out: it is shown, and no candidate.
func TestTuneBoundsWithoutTheBase(t *testing.T) {
	got := mustTune(t, tuneLane(`[tune]
settings = [{ device = "R1", setting = "set", low = 123, high = 125, step = 0.5 }]
`), study.TuneSettings{Budget: 20})
	if got.Base.Levels != nil || !cautioned(got, "The base is not one of the candidates") {
		t.Errorf("base at %v; cautions %v", got.Base.Levels, got.Cautions)
	}
	if v := got.Best.Values[0]; v < 123 || v > 125 {
		t.Errorf("the best is at %v V, outside the bounds", v)
	}
	if one := mustTune(t, tuneLane(`[tune]
settings = [{ device = "R1", setting = "set", low = 123, high = 125, step = 0.5 }]
`), study.TuneSettings{Budget: 1}); one.Best != nil || !cautioned(one, "No candidate within the bounds was evaluated") {
		t.Errorf("best %+v", one.Best)
	}
}

// Limits that nothing keeps: that is said, and the one that breaks them least is shown.
func TestTuneInfeasibleLimits(t *testing.T) {
	got := mustTune(t, tuneLane(grid+"limits = [{ quantity = \"lowest judged voltage\", at_least = 1.2 }]\n"), study.TuneSettings{Budget: 200})
	if got.Best.Feasible() || !cautioned(got, "No candidate keeps all limits") || !cautioned(got, "The base itself breaks") {
		t.Errorf("best %+v, cautions %v", got.Best, got.Cautions)
	}
	for _, p := range got.Points {
		if p.Levels != nil && p.Invalid == "" && p.Sums.LowestPU > got.Best.Sums.LowestPU {
			t.Errorf("%v has %v p.u., the least bad %v", p.Values, p.Sums.LowestPU, got.Best.Sums.LowestPU)
		}
	}
	// A limit at the base's own value is kept by the base, and by the best.
	kept := mustTune(t, tuneLane(grid+"limits = [{ quantity = \"operations\", at_most = \"base\" }]\n"), study.TuneSettings{Budget: 200})
	ops := func(p *study.Point) int { return p.Sums.TapOperations + p.Sums.CapacitorOperations }
	if !kept.Best.Feasible() || !kept.Base.Feasible() || ops(kept.Best) > ops(kept.Base) {
		t.Errorf("best %d operations, base %d", ops(kept.Best), ops(kept.Base))
	}
}

// Set points of capacitors whose order would turn the control around are no candidates.
func TestTuneCapacitor(t *testing.T) {
	got := mustTune(t, tuneLane(`[tune]
settings = [
  { device = "C1", setting = "voltage on", low = 114, high = 124, step = 2 },
  { device = "C1", setting = "voltage off", low = 118, high = 126, step = 2 },
]
aims = { "losses energy" = 1 }
`), study.TuneSettings{Budget: 100})
	invalid := 0
	for _, p := range got.Points {
		if p.Levels == nil {
			continue
		}
		if wrong := p.Values[0] >= p.Values[1]; wrong != (p.Invalid != "") {
			t.Errorf("on %v, off %v: %q", p.Values[0], p.Values[1], p.Invalid)
		}
		if p.Invalid != "" {
			invalid++
		}
	}
	if invalid == 0 || got.Best.Invalid != "" || got.Evaluated != len(got.Points)-invalid {
		t.Errorf("%d invalid of %d, %d evaluated", invalid, len(got.Points), got.Evaluated)
	}
}

// The sensitivities are those of the profile through the best.
func TestTuneSensitivity(t *testing.T) {
	got := mustTune(t, tuneLane(grid), study.TuneSettings{Budget: 400})
	if len(got.Sensitivities) != 2 || got.Sensitivities[0].Range < got.Sensitivities[1].Range {
		t.Fatalf("%+v", got.Sensitivities)
	}
	for _, s := range got.Sensitivities {
		if len(s.Profile) != s.Knob.Levels() {
			t.Errorf("%s: %d of %d points", s.Knob.Name(), len(s.Profile), s.Knob.Levels())
		}
		if s.Down < 0 || s.Up < 0 {
			t.Errorf("%s: a neighbour is better than the best", s.Knob.Name())
		}
		if v := got.Best.Values[s.Index]; s.FlatLow > v || s.FlatHigh < v {
			t.Errorf("%s: flat from %v to %v, the best is at %v", s.Knob.Name(), s.FlatLow, s.FlatHigh, v)
		}
	}
}

// What is wrong in [tune] is told with its line, and what would do instead.
func TestTuneBadSpec(t *testing.T) {
	set := func(s string) string { return "[tune]\nsettings = [" + s + "]\n" }
	for tune, want := range map[string]string{
		"[tune]\nbugdet = 3\n":    `study.toml:11:1: tune knows no key "bugdet"; did you mean "budget"?`,
		"[tune]\nbudget = 0\n":    "study.toml:11:1: tune.budget: want a whole number of at least 1, got 0",
		"[tune]\nseed = \"x\"\n":  "tune.seed: want a whole number",
		"[tune]\nresume = 3\n":    "tune.resume: want true or false",
		"[tune]\nsettings = 3\n":  "tune.settings: want a list of tables",
		"[tune]\nsettings = []\n": "nothing to search",
		set(`{ device = "R2", setting = "set", low = 1, high = 2, step = 1 }`):                                                                                       `no regulator or capacitor "R2"`,
		set(`{ device = "R1", setting = "sett", low = 1, high = 2, step = 1 }`):                                                                                      `did you mean "set"?`,
		set(`{ device = "R1", phase = "D", setting = "set", low = 1, high = 2, step = 1 }`):                                                                          `has no unit "D"; it has A, B, C`,
		set(`{ device = "R1", setting = "set", low = 2, high = 1, step = 1 }`):                                                                                       "low 2 is not at or below high 1",
		set(`{ device = "R1", setting = "set", low = 120, high = 121, step = 0 }`):                                                                                   "want a number above 0",
		set(`{ device = "R1", setting = "delay", low = 0, high = 10, step = 1 }`):                                                                                    "below what the setting can be",
		set(`{ device = "R1", setting = "set", low = 0.1, high = 121, step = 0.0001 }`):                                                                              "make the step larger",
		set(`{ device = "R1", setting = "set", low = 120, high = 121 }`):                                                                                             "step of R1 set: want a number",
		set(`{ device = "R1", setting = "limit high", low = 120, high = 121, step = 1 }`):                                                                            "give it a value there to begin from",
		set(`{ device = "C1", setting = "kvar on", low = 120, high = 121, step = 1 }`):                                                                               "is controlled by voltage and has no setting",
		set(`{ device = "R1", setting = "set", low = 120, high = 121, step = 1, stepp = 2 }`):                                                                        `knows no key "stepp"`,
		set(`{ device = "R1", setting = "set", low = 120, high = 121, step = 1 }, { device = "R1", phase = "B", setting = "set", low = 120, high = 121, step = 1 }`): "R1.B set is there twice",
		"[tune]\naims = { losses = 1 }\n":                                                                                                                            "counts no quantity \"losses\"",
		"[tune]\naims = { \"operations\" = 0 }\n":                                                                                                                    "nothing has a weight",
		"[tune]\nlimits = [{ quantity = \"operations\" }]\n":                                                                                                         "one of at_most and at_least",
		"[tune]\nlimits = [{ quantity = \"operations\", at_most = \"best\" }]\n":                                                                                     "want a number or \"base\"",
	} {
		_, err := tuneOf(t, tuneLane(tune), study.TuneSettings{Budget: 1})
		faults, ok := err.(tables.Faults)
		if !ok || !strings.Contains(err.Error(), want) {
			t.Errorf("%s\ngot  %v\nwant %s", tune, err, want)
			continue
		}
		for _, f := range faults {
			if f.Pos.File != "study.toml" || f.Pos.Line < 10 {
				t.Errorf("%s: the place is %v", tune, f.Pos)
			}
		}
	}
}

// A feeder without a device that could be set says so.
func TestTuneNoDevices(t *testing.T) {
	f := tuneLane("")
	for _, name := range []string{"feeder/regulators.csv", "feeder/regulator-settings.csv", "feeder/capacitors.csv", "feeder/capacitor-settings.csv", "cases/tuned/regulator-settings.csv"} {
		delete(f, name)
	}
	f["feeder/sections.csv"] = &fstest.MapFile{Data: []byte("section,from,to,phases,length [km],construction\nL1,bus,reg,ABC,4,line\nL2,reg,end,ABC,9,line\n")}
	if _, err := tuneOf(t, f, study.TuneSettings{}); err == nil || !strings.Contains(err.Error(), "nothing to search") {
		t.Errorf("got %v", err)
	}
}

func BenchmarkTuneDemo(b *testing.B) {
	years := 0
	for b.Loop() {
		years += mustTune(b, demo.Study(), study.TuneSettings{Budget: 12, Log: filepath.Join(b.TempDir(), "log.csv")}).Evaluated + 1
	}
	b.ReportMetric(float64(years)*60/b.Elapsed().Seconds(), "candidate-years/min")
}
