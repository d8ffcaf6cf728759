package study

import (
	"bytes"
	"math"
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"testing"
)

func TestACaseThatSaysTheSameShowsNoDifference(t *testing.T) {
	c := compared(t, placed(t, smallFeeder()), "same")
	if len(c.Settings) != 0 {
		t.Errorf("settings differ: %v", c.Settings)
	}
	for _, q := range c.Quantities {
		if q.Cells[0] != q.Cells[1] {
			t.Errorf("%s: base %q, case %q", q.Name, q.Cells[0], q.Cells[1])
		}
	}
	for _, r := range c.againstBase().Rows[1:] {
		if r[7] != "same" {
			t.Errorf("against the base: %v", r)
		}
	}
	if len(c.Sheets) != 0 {
		t.Errorf("a sheet for a case that changes nothing: %v", c.Sheets)
	}
	if !said(c.Cautions, "same", "changes nothing") {
		t.Errorf("nobody says that the case changes nothing: %v", c.Cautions)
	}
	for _, r := range c.Ranking {
		if r.Rank != 1 || !r.Undominated {
			t.Errorf("equal cases: %+v", r)
		}
	}
}

func said(list []Caution, name, text string) bool {
	for _, x := range list {
		if x.Case == name && strings.Contains(x.Text, text) {
			return true
		}
	}
	return false
}

func TestSettingsAndSheetNameWhatChanges(t *testing.T) {
	c := compared(t, placed(t, smallFeeder()), "wide")
	var got [][]string
	for _, s := range c.Settings {
		got = append(got, append([]string{s.Table, s.Key, s.Title()}, s.Cells...))
	}
	var want [][]string
	for _, ph := range []string{"A", "B", "C"} {
		want = append(want, []string{"regulator-settings", "R1, " + ph, "bandwidth [V]", "2", "4"},
			[]string{"regulator-settings", "R1, " + ph, "ldc r [V]", "3", "0"}, []string{"regulator-settings", "R1, " + ph, "ldc x [V]", "4", "0"})
	}
	if !reflect.DeepEqual(got, want) {
		t.Errorf("settings\n got %v\nwant %v", got, want)
	}
	for _, r := range c.Ranking {
		sheets := 0
		for _, x := range c.Sheets {
			if x.Case == r.Case {
				sheets++
			}
		}
		if want := r.Case == "wide" && r.Undominated; (sheets == 1) != want {
			t.Errorf("case %s, undominated %v: %d sheets", r.Case, r.Undominated, sheets)
		}
	}
}

// The technician's order, and the line that R and X stand for: field data of Kersting,
// Distribution System Modeling and Analysis, ch. 7: R' = r·CT/PT.
func TestSheetIsInTheTechniciansOrder(t *testing.T) {
	c := compared(t, placed(t, smallFeeder()), "wide")
	rows := sheetRows(c.Cases[0].Study.Model, c.Cases[1].Study.Model)
	var order []string
	for _, r := range rows {
		if r.Device == "R1" && r.Phase == "A" {
			order = append(order, strings.TrimSpace(r.Setting)+"="+r.Present+">"+r.New)
		}
	}
	want := []string{"set voltage=121>121", "bandwidth, total=2>4", "time delay=30>30", "time between taps=5>5", "timer=restart>restart",
		"line-drop compensation R=3>0", "line-drop compensation X=4>0", "stands for a line of r=1.2>0", "and x=1.6>0", "CT primary=150>150", "PT ratio=60>60"}
	if len(order) < len(want) || !reflect.DeepEqual(order[:len(want)], want) {
		t.Errorf("sheet\n got %v\nwant %v first", order, want)
	}
}

func TestACaseThatCannotBeSolvedIsNotRanked(t *testing.T) {
	c := compared(t, placed(t, smallFeeder()), "heavy", "wide")
	low := parse(c.Quantity("low steps").Cells[1]) + parse(c.Quantity("unsolved steps").Cells[1])
	if !(low > 0 && low < 48) {
		t.Fatalf("the heavy case has %g of 48 steps low or unsolved: want some", low)
	}
	last := c.Ranking[len(c.Ranking)-1]
	if last.Case != "heavy" || last.Rank != 0 || last.Undominated || last.Note == "" {
		t.Errorf("the heavy case is ranked: %+v", last)
	}
	if !said(c.Cautions, "heavy", "unsolved steps") {
		t.Error("nobody says that steps are missing")
	}
}

func TestScoreIsTheSumOfItsParts(t *testing.T) {
	fsys := smallFeeder()
	fsys["study.toml"].Data = append(fsys["study.toml"].Data, "[compare]\nweights = { \"operations\" = 2, \"lowest judged voltage\" = -1000.0 }\n"...)
	c := compared(t, placed(t, fsys), "wide")
	rows := c.rankTables()
	for k, name := range []string{"base", "wide"} {
		want := 2*parse(c.Quantity("operations").Cells[k]) - 1000*parse(c.Quantity("lowest judged voltage").Cells[k])
		if got := parse(at(t, rows[0].Rows, "score", name)); math.Abs(got-want) > 1e-3 {
			t.Errorf("%s: score %g, want %g", name, got, want)
		}
		sum := parse(at(t, rows[2].Rows, "part of score", name, "operations")) + parse(at(t, rows[2].Rows, "part of score", name, "lowest judged voltage"))
		if math.Abs(sum-want) > 1e-3 {
			t.Errorf("%s: the parts add up to %g, want %g", name, sum, want)
		}
	}
}

func TestDominated(t *testing.T) {
	c := &Comparison{Weights: []Weight{{Weight: 1}, {Weight: -2}}}
	a, b := &Ranked{Values: []float64{1, 5}}, &Ranked{Values: []float64{2, 5}}
	if !c.dominates(a, b) || c.dominates(b, a) || c.dominates(a, a) {
		t.Error("less of a positive weight, all else equal, dominates")
	}
	if d := (&Ranked{Values: []float64{0, 4}}); c.dominates(d, a) || c.dominates(a, d) {
		t.Error("better in one and worse in another dominates nothing")
	}
}

func TestWrongKeysOfCompare(t *testing.T) {
	for _, x := range []struct{ toml, want string }{
		{"[compare]\nweight = { operations = 1 }\n", "did you mean"},
		{"[compare]\nweights = { operation = 1 }\n", "there is no quantity \"operation\""},
		{"[compare]\nweights = { operations = \"much\" }\n", "want a number"},
		{"[compare]\nweights = 3\n", "want a table of numbers"},
		{"[compare]\nweights = { operations = 0 }\n", "nothing has a weight"},
		{"[compare]\nweights = { \"lowest judged voltage time\" = 1 }\n", "there is no quantity"},
		{"[compare]\nlife = { capacitor = -1 }\n", "above 0"},
		{"[compare]\nlife = { fuse = 1 }\n", "no kind of device"},
	} {
		fsys := smallFeeder()
		fsys["study.toml"].Data = append(fsys["study.toml"].Data, x.toml...)
		cases, left := ran(t, placed(t, fsys), Settings{}, "same")
		_, err := Compare(cases, left)
		if err == nil || !strings.Contains(err.Error(), x.want) || !strings.Contains(err.Error(), "study.toml:") {
			t.Errorf("%q: error %v, want one with %q and its line", x.toml, err, x.want)
		}
	}
}

func TestAllCasesButThoseOfAnotherPeriod(t *testing.T) {
	p := placed(t, smallFeeder())
	studies, left, err := Choose(p, nil)
	if err != nil {
		t.Fatal(err)
	}
	var names []string
	for _, s := range studies {
		names = append(names, s.Case)
	}
	if !reflect.DeepEqual(names, []string{"base", "heavy", "same", "wide"}) || len(left) != 1 || left[0].Case != "short" {
		t.Errorf("took %v, left out %v", names, left)
	}
	if _, _, err := Choose(p, []string{"short"}); err == nil || !strings.Contains(err.Error(), "period") {
		t.Errorf("a named case of another period: %v", err)
	}
	if _, _, err := Choose(p, []string{"nobody"}); err == nil {
		t.Error("a case that is not there")
	}
}

// The same bytes, whatever the number of workers, and again from results that are there.
func TestTheSameBytesFromAnyNumberOfWorkers(t *testing.T) {
	var first map[string][]byte
	for _, workers := range []int{1, 2, 4} {
		p := placed(t, smallFeeder())
		for range 2 {
			cases, left := ran(t, p, Settings{Workers: workers})
			c, err := Compare(cases, left)
			if err != nil {
				t.Fatal(err)
			}
			dir := filepath.Join(p.Results, "compare")
			if err := c.Write(dir, p, nil); err != nil {
				t.Fatal(err)
			}
			got := filesOf(t, dir)
			if first == nil {
				first = got
			}
			if len(got) != len(first) {
				t.Fatalf("%d files, want %d", len(got), len(first))
			}
			for name, data := range first {
				if !bytes.Equal(got[name], data) {
					t.Errorf("%d workers: %s differs", workers, name)
				}
			}
		}
	}
}

func filesOf(t *testing.T, dir string) map[string][]byte {
	t.Helper()
	entries, err := os.ReadDir(dir)
	if err != nil {
		t.Fatal(err)
	}
	out := map[string][]byte{}
	for _, e := range entries {
		data, err := os.ReadFile(filepath.Join(dir, e.Name()))
		if err != nil {
			t.Fatal(err)
		}
		out[e.Name()] = data
	}
	return out
}

func TestResultsAreTakenOnlyWhereNothingChanged(t *testing.T) {
	fsys := smallFeeder()
	p := placed(t, fsys)
	run := func() bool { cases, _ := ran(t, p, Settings{}, "wide"); return cases[1].Reused }
	if run() {
		t.Error("taken where nothing is")
	}
	if !run() {
		t.Error("run again, though nothing changed")
	}
	if cases, _ := ran(t, p, Settings{Again: true}, "wide"); cases[1].Reused {
		t.Error("taken, though it is to run again")
	}
	for name, change := range map[string]func(){
		"another version of the program": func() { p.Version = "next" },
		"a table of the case": func() {
			fsys["cases/wide/regulator-settings.csv"].Data = []byte("regulator,phase,bandwidth [V]\nR1,all,4.5\n")
		},
		"a result file": func() { spoil(t, filepath.Join(p.Results, "wide", "nodes.csv")) },
		"half a folder": func() { os.Remove(filepath.Join(p.Results, "wide", "duty.csv")) },
		"no run.json that reads": func() {
			os.WriteFile(filepath.Join(p.Results, "wide", "run.json"), []byte("{\"format\": 99}"), 0o644)
		},
	} {
		change()
		if run() {
			t.Errorf("%s changed, and the old results are taken", name)
		}
		if !run() {
			t.Errorf("after %s: the new results are not taken", name)
		}
	}
}

func spoil(t *testing.T, file string) {
	t.Helper()
	data, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(file, append(data, '\n'), 0o644); err != nil {
		t.Fatal(err)
	}
}

func TestAFolderOfSomethingElseStays(t *testing.T) {
	p := placed(t, smallFeeder())
	c := compared(t, p, "same")
	dir := filepath.Join(p.Results, "base") // results of a run
	if err := c.Write(dir, p, nil); err == nil || !strings.Contains(err.Error(), "--out") {
		t.Errorf("took the place of results: %v", err)
	}
	if _, err := os.Stat(filepath.Join(dir, "run.json")); err != nil {
		t.Error("the results are gone")
	}
}

// The customer-hours outside B are some of those outside A, and the money is price times
// quantity.
func TestQuantitiesHoldTogether(t *testing.T) {
	c := compared(t, placed(t, smallFeeder()), "wide")
	for k := range c.Cases {
		n := func(q string) float64 { return parse(c.Quantity(q).Cells[k]) }
		if n("customer-hours outside B") > n("customer-hours outside A") {
			t.Error("more outside B than outside A")
		}
		near := func(what string, got, want float64) {
			if math.Abs(got-want) > 0.006 {
				t.Errorf("%s: %g, want %g", what, got, want)
			}
		}
		near("cost of losses", n("cost of losses energy"), 0.1*n("losses energy"))
		near("cost of operations", n("cost of operations"), 0.5*n("operations"))
		near("cost of demand", n("cost of peak demand"), 8*n("peak demand")) // one month
		near("sum of monthly peaks", n("sum of monthly peaks"), n("peak demand"))
		if pf := n("power factor at peak demand"); !(pf > 0.8 && pf <= 1) {
			t.Errorf("power factor %g", pf)
		}
	}
}

func TestNoPricesNoMoney(t *testing.T) {
	fsys := smallFeeder()
	text, _, _ := strings.Cut(string(fsys["study.toml"].Data), "[prices]")
	fsys["study.toml"].Data = []byte(text)
	c := compared(t, placed(t, fsys), "wide")
	for _, q := range c.Quantities {
		if q.Group == "money" {
			t.Errorf("money without prices: %v", q)
		}
	}
	if !said(c.Cautions, "", "No money is told of energy, demand, operation") {
		t.Errorf("nobody says that prices are missing: %v", c.Cautions)
	}
}
