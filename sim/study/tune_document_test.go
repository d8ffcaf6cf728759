package study_test

import (
	"math"
	"os"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"yearflow/plots"
	"yearflow/sim/study"
)

// searches are small searches of every kind of outcome.
func searches() map[string]struct {
	tune   string
	budget int
	least  int // numbers that the document holds
} {
	type search = struct {
		tune   string
		budget int
		least  int
	}
	return map[string]search{
		"evolution":      {grid, 60, 150},
		"whole grid":     {strings.ReplaceAll(strings.ReplaceAll(grid, "step = 0.25", "step = 2"), "step = 0.5", "step = 3"), 60, 150},
		"the base alone": {grid, 1, 80},
		"without the base, nothing": {`[tune]
settings = [{ device = "R1", setting = "set", low = 123, high = 125, step = 0.5 }]
`, 1, 50},
		"no candidate keeps the limits": {grid + "limits = [{ quantity = \"lowest judged voltage\", at_least = 1.2 }, { quantity = \"operations\", at_most = \"base\" }]\n", 40, 120},
		"one aim, on and off": {`[tune]
settings = [
  { device = "C1", setting = "voltage on", low = 114, high = 124, step = 2 },
  { device = "C1", setting = "voltage off", low = 118, high = 126, step = 2 },
]
aims = { "losses energy" = 1 }
`, 100, 120},
		"more of something is better": {`[tune]
settings = [{ device = "R1", phase = "each", setting = "set", low = 119.5, high = 122, step = 0.5 }]
aims = { "lowest judged voltage" = -100, "operations" = 0.1 }
`, 40, 120},
		"by built-in bounds": {"", 12, 100},
	}
}

// Every number of the document of a search is the number of the table that it names, a
// document drawn again from the folder alone is the same, and nothing in it is no number.
func TestEveryNumberOfATuneDocument(t *testing.T) {
	image := regexp.MustCompile(`data:image/png;base64,[^"]*`)
	for name, x := range searches() {
		t.Run(name, func(t *testing.T) {
			got := mustTune(t, tuneLane(x.tune), study.TuneSettings{Budget: x.budget})
			dir := filepath.Join(t.TempDir(), "tune")
			if err := got.Write(dir, study.Place{Version: "test"}, document(t, "tune.html", plots.TuneDocument)); err != nil {
				t.Fatal(err)
			}
			numbers(t, dir, "tune.html", x.least)
			page, err := os.ReadFile(filepath.Join(dir, "tune.html"))
			if err != nil {
				t.Fatal(err)
			}
			text := image.ReplaceAllString(string(page), "")
			for _, bad := range []string{"NaN", "Inf", "%!", "e+"} {
				if strings.Contains(text, bad) {
					t.Errorf("the document holds %s", bad)
				}
			}
			for _, want := range []string{"licensed engineer", "Seed of the random numbers", "SHA-256", "feeder/regulator-settings.csv"} {
				if !strings.Contains(text, want) {
					t.Errorf("the document does not hold %q", want)
				}
			}
			if err := document(t, "again.html", plots.TuneDocument)(dir); err != nil {
				t.Fatal(err)
			}
			if again, err := os.ReadFile(filepath.Join(dir, "again.html")); err != nil || string(again) != string(page) {
				t.Errorf("drawn again from its folder the document is another: %v", err)
			}
		})
	}
}

// column reads a column of a table by its head; a blank cell is NaN.
func column(t *testing.T, rows [][]string, head string) (out []float64) {
	t.Helper()
	for c, h := range rows[0] {
		if h != head {
			continue
		}
		for _, r := range rows[1:] {
			x, err := strconv.ParseFloat(r[c], 64)
			if err != nil {
				x = math.NaN()
			}
			out = append(out, x)
		}
		return out
	}
	t.Fatalf("no column %q in %v", head, rows[0])
	return nil
}

// The tables that tell of the search hold what candidates.csv implies, worked out anew
// from its cells.
func TestTablesOfASearchAgree(t *testing.T) {
	for name, x := range searches() {
		t.Run(name, func(t *testing.T) {
			got := mustTune(t, tuneLane(x.tune), study.TuneSettings{Budget: x.budget})
			tables := map[string][][]string{}
			for _, n := range got.Tables() {
				tables[n.Name] = n.Rows
			}
			all := tables["candidates.csv"]
			score, violation, number := column(t, all, "score"), column(t, all, "violation"), column(t, all, "candidate")

			// progress: each better than the one before, and none of all better than the last.
			p := tables["progress.csv"]
			ps, pv, py := column(t, p, "score"), column(t, p, "violation"), column(t, p, "candidate-years")
			beats := func(v1, s1, v2, s2 float64) bool { return v1 < v2 || v1 == 0 && v2 == 0 && s1 < s2 }
			for i := 1; i < len(ps); i++ {
				if beats(pv[i-1], ps[i-1], pv[i], ps[i]) || py[i] <= py[i-1] {
					t.Errorf("progress row %d: %v after %v", i+1, p[i+1], p[i])
				}
			}
			last := len(ps) - 1
			years := 0.0
			for i := range score {
				if math.IsNaN(violation[i]) {
					continue // no sheet could hold it: it was not run
				}
				years++
				if beats(violation[i], score[i], pv[last], ps[last]) {
					t.Errorf("candidate %v is better than the last of the progress, %v", number[i], p[last+1])
				}
			}
			if years != float64(got.Evaluated) || py[last] > years {
				t.Errorf("%v candidate-years in candidates.csv, %d evaluated, the last progress after %v", years, got.Evaluated, py[last])
			}

			// undominated: by the definition, from the printed cells.
			var aims [][]float64
			for _, w := range got.Spec.Aims {
				head := w.Quantity
				if w.Unit != "1" {
					head += " [" + w.Unit + "]"
				}
				values := column(t, all, head)
				for i := range values {
					values[i] *= w.Weight
				}
				aims = append(aims, values)
			}
			in := map[float64]bool{}
			for _, n := range column(t, tables["undominated.csv"], "candidate") {
				in[n] = true
			}
			dominates := func(i, k int) bool {
				better := false
				for _, a := range aims {
					if a[i] > a[k] {
						return false
					}
					better = better || a[i] < a[k]
				}
				return better
			}
			same := func(i, k int) bool { return !dominates(i, k) && !dominates(k, i) && aims[0][i] == aims[0][k] }
			for i := range score {
				if violation[i] != 0 {
					if in[number[i]] {
						t.Errorf("candidate %v breaks a limit and is undominated", number[i])
					}
					continue
				}
				beaten, twin := false, false
				for k := range score {
					if violation[k] == 0 && k != i {
						beaten = beaten || dominates(k, i)
						twin = twin || same(k, i) && in[number[k]]
					}
				}
				if in[number[i]] && beaten || !in[number[i]] && !beaten && !twin {
					t.Errorf("candidate %v: undominated %v, beaten %v", number[i], in[number[i]], beaten)
				}
			}

			// method: every candidate has one part. limits: the margin is what is left.
			sum := 0.0
			for _, n := range column(t, tables["method.csv"], "candidates") {
				sum += n
			}
			if sum != float64(len(got.Points)) {
				t.Errorf("the parts of the search have %v candidates, there are %d", sum, len(got.Points))
			}
			limits := tables["limits.csv"]
			value, base, margin := column(t, limits, "value"), column(t, limits, "base"), column(t, limits, "margin of the base")
			for i := range value {
				want := value[i] - base[i]
				if limits[i+1][3] == "at least" {
					want = -want
				}
				if math.Abs(margin[i]-want) > 2e-4 {
					t.Errorf("limit %v: margin of the base %v, want %v", limits[i+1], margin[i], want)
				}
			}
		})
	}
}
