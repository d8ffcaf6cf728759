package main

import (
	"encoding/csv"
	"encoding/json"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"
)

// tunedStudy is the small study with a case and a search over 3 × 2 settings.
func tunedStudy(t *testing.T) {
	t.Helper()
	smallStudy(t)
	write(t, "cases/higher/regulator-settings.csv", "regulator,phase,set [V]\nR1,all,124\n")
	write(t, "study.toml", read(t, "study.toml")+`
[tune]
settings = [
  { device = "R1", setting = "set", low = 121, high = 123, step = 1 },
  { device = "R1", setting = "bandwidth", low = 2, high = 3, step = 1 },
]
aims = { "losses energy" = 0.1, "operations" = 1 }
limits = [{ quantity = "lowest judged voltage", at_least = 0.9 }]
`)
}

// there wants files, each not empty.
func there(t *testing.T, dir string, names ...string) {
	t.Helper()
	for _, n := range names {
		if info, err := os.Stat(filepath.Join(dir, n)); err != nil || info.Size() == 0 {
			t.Errorf("%s in %s: %v", n, dir, err)
		}
	}
}

// What compare, losses and tune leave behind, and what they say.
func TestDocumentsOfASmallStudy(t *testing.T) {
	tunedStudy(t)
	out, errs := must(t, exitDone, "compare")
	contains(t, out, "settings evaluation in results/compare", "higher", "The document: results/compare/compare.html")
	contains(t, errs, "case base: results/base, run", "case higher: results/higher, run")
	there(t, "results/compare", "compare.csv", "settings.csv", "ranking.csv", "weights.csv", "score.csv", "against-base.csv", "sheets.csv", "cautions.csv", "left-out.csv", "compare.json", "compare.html", "figures/compare.png")
	contains(t, read(t, "results/compare/compare.html"), "The study gives no price of", "There are no prices in study.toml")
	_, errs = must(t, exitDone, "compare", "--case", "higher")
	contains(t, errs, "as it is there: its inputs have not changed")

	out, _ = must(t, exitDone, "losses", "--case", "higher", "--samples", "4")
	contains(t, out, "annual loss estimate in results/losses", "What case higher saves", "The document: results/losses/losses.html")
	there(t, "results/losses", "losses-by-kind.csv", "losses-by-month.csv", "losses-by-element.csv", "loss-factor.csv", "worth.csv", "marginal.csv", "saving.csv", "losses.json", "losses.html",
		"figures/losses-by-month.png", "figures/losses-by-element.png")
	contains(t, read(t, "results/losses/losses.html"), "The study gives no price of", "There are no prices in study.toml")

	out, errs = must(t, exitDone, "tune")
	contains(t, out, "every candidate of the grid was evaluated", "Document and tables in results/tune", "The document: results/tune/tune.html")
	contains(t, errs, "of at most 200 candidate-years")
	there(t, "results/tune", "tune.csv", "settings.csv", "weights.csv", "limits.csv", "search.csv", "method.csv", "progress.csv", "sensitivity.csv", "profile.csv", "undominated.csv", "candidates.csv", "cautions.csv",
		"tune.json", "tune.html", "figures/tune-best.png", "figures/tune-progress.png", "figures/tune-flat.png", "figures/tune-matters.png", "figures/tune-trade.png")
	there(t, "results", "tune-log.csv")
	if n := strings.Count(read(t, "results/tune/candidates.csv"), "\n") - 1; n < 6 || n > 7 { // the base may be one of the grid
		t.Errorf("%d candidates, the grid has 6", n)
	}
	// The same again is taken from the log, and gives the same bytes.
	before, log := read(t, "results/tune/tune.html"), read(t, "results/tune-log.csv")
	must(t, exitDone, "tune")
	if read(t, "results/tune/tune.html") != before || read(t, "results/tune-log.csv") != log {
		t.Error("the same search again gives another document or another log")
	}
}

// The best of a search is a case that compare takes.
func TestTunedCaseIsCompared(t *testing.T) {
	tunedStudy(t)
	out, _ := must(t, exitDone, "tune")
	if strings.Contains(out, "no case is written") {
		t.Fatal("no candidate is better than the base: the study shows nothing")
	}
	contains(t, out, "The best as a case: cases/tuned")
	there(t, "results/tune", "sheet.csv", "case/regulator-settings.csv")
	out, _ = must(t, exitDone, "compare", "--case", "tuned", "--csv", "-")
	rows := table(t, out)
	search := table(t, read(t, "results/tune/tune.csv"))
	held := 0
	for _, r := range rows[1:] {
		for _, s := range search[1:] {
			if r[1] == s[0] && s[1] != "1" {
				held++
				if r[3] != s[2] || r[4] != s[3] {
					t.Errorf("%s: %s and %s by compare, %s and %s by tune", r[1], r[3], r[4], s[2], s[3])
				}
			}
		}
	}
	if held < 5 {
		t.Errorf("%d quantities stand in both tables", held)
	}
}

func table(t *testing.T, text string) [][]string {
	t.Helper()
	rows, err := csv.NewReader(strings.NewReader(text)).ReadAll()
	if err != nil {
		t.Fatalf("%v\n%s", err, text)
	}
	return rows
}

// The JSON of the documents holds numbers as numbers, blanks as null and words as words,
// cell by cell as the CSV table.
func TestDocumentsAsJSON(t *testing.T) {
	tunedStudy(t)
	write(t, "cases/where/regulator-settings.csv", "regulator,phase,bandwidth [V]\nR1,all,4\n") // a case may be called like a column
	for _, tt := range []struct {
		args    []string
		numbers []string // columns that hold numbers only, or nothing
		words   []string
	}{
		{[]string{"compare"}, nil, []string{"group", "quantity", "unit"}},
		{[]string{"losses", "--samples", "-1"}, []string{"energy [kWh]", "share of losses [%]", "peak [kW]"}, []string{"kind", "peak time"}},
		{[]string{"tune"}, []string{"base", "best", "change", "change [%]", "weight", "part of score of the base"}, []string{"quantity", "unit", "kept by the base"}},
	} {
		t.Run(tt.args[0], func(t *testing.T) {
			out, _ := must(t, exitDone, append(tt.args, "--csv", "-")...)
			rows := table(t, out)
			js, _ := must(t, exitDone, append(tt.args, "--json", "-")...)
			var objects []map[string]any
			dec := json.NewDecoder(strings.NewReader(js))
			dec.UseNumber()
			if err := dec.Decode(&objects); err != nil {
				t.Fatalf("%v\n%s", err, js)
			}
			if len(objects) != len(rows)-1 {
				t.Fatalf("%d objects, %d rows", len(objects), len(rows)-1)
			}
			kinds := map[string]map[string]int{}
			for i, row := range rows[1:] {
				unit := ""
				for k, head := range rows[0] {
					if head == "unit" {
						unit = row[k]
					}
				}
				for k, cell := range row {
					head := rows[0][k]
					kind := "word"
					switch v := objects[i][head].(type) {
					case json.Number:
						kind = "number"
						a, err1 := strconv.ParseFloat(cell, 64)
						b, err2 := v.Float64()
						if err1 != nil || err2 != nil || math.Abs(a-b) > 0 {
							t.Errorf("row %d, %s: %q in CSV, %v in JSON", i, head, cell, v)
						}
					case string:
						if v != cell {
							t.Errorf("row %d, %s: %q in CSV, %q in JSON", i, head, cell, v)
						}
					case nil:
						kind = "null"
						if cell != "" {
							t.Errorf("row %d, %s: %q in CSV, null in JSON", i, head, cell)
						}
					}
					if kinds[head] == nil {
						kinds[head] = map[string]int{}
					}
					kinds[head][kind]++
					// A quantity of a case in compare is a number by its unit, whatever the case is called.
					if _, err := strconv.ParseFloat(cell, 64); tt.args[0] == "compare" && k > 2 && (kind == "number") != (err == nil && unit != "time" && !strings.HasSuffix(unit, ".phase")) {
						t.Errorf("row %d, %s [%s]: %q is a %s", i, head, unit, cell, kind)
					}
				}
			}
			for _, n := range tt.numbers {
				if kinds[n]["number"] == 0 || kinds[n]["word"] > 0 {
					t.Errorf("%s: %v", n, kinds[n])
				}
			}
			for _, n := range tt.words {
				if kinds[n]["word"] == 0 || kinds[n]["number"]+kinds[n]["null"] > 0 {
					t.Errorf("%s: %v", n, kinds[n])
				}
			}
			if tt.args[0] == "compare" && (kinds["where"]["number"] == 0 || kinds["where"]["word"] == 0) {
				t.Errorf("the case called where: %v", kinds["where"])
			}
		})
	}
}

// What is wrong is told with what would do instead, and leaves no folder behind.
func TestDocumentsOfBadInput(t *testing.T) {
	tunedStudy(t)
	write(t, "results/notes/todo.txt", "mine\n")
	for _, tt := range []struct{ args, want string }{
		{"compare --case nothere", `no case "nothere"`},
		{"losses --case nothere", `no case "nothere"`},
		{"losses --samples -2", "--samples -2: want"},
		{"tune --budget -1", "--budget -1: want a number of candidate-years above 0"},
		{"tune --budget many", "many"},
		{"tune --seed -1", "-1"},
		{"tune one two", "one study at most"},
		{"tune nowhere", `there is no folder "nowhere"`},
		{"compare nowhere", `there is no folder "nowhere"`},
		{"losses nowhere", `there is no folder "nowhere"`},
		{"tune --out results/notes", "is not empty and holds no tune.json"},
		{"compare --out results/notes", "is not empty and holds no compare.json"},
		{"losses --samples -1 --out results/notes", "is not empty and holds no losses.json"},
	} {
		t.Run(tt.args, func(t *testing.T) {
			out, errs := must(t, exitInput, strings.Fields(tt.args)...)
			contains(t, errs, tt.want)
			if out != "" {
				t.Errorf("standard output has %q", out)
			}
			for _, dir := range []string{"compare", "losses", "tune"} {
				if _, err := os.Stat(filepath.Join("results", dir)); err == nil {
					t.Errorf("results/%s is there", dir)
				}
			}
		})
	}
	if read(t, "results/notes/todo.txt") != "mine\n" || len(entries(t, "results/notes")) != 1 {
		t.Error("the folder that was refused is not as it was")
	}
	// A folder of another document is something else too.
	must(t, exitDone, "compare")
	_, errs := must(t, exitInput, "tune", "--out", "results/compare")
	contains(t, errs, "holds no tune.json")
	edit(t, "study.toml", `device = "R1"`, `device = "R7"`)
	_, errs = must(t, exitInput, "tune")
	contains(t, errs, "study.toml:", `no regulator or capacitor "R7"`)
}

// Without a case compare still tells what the base is; one step is a period too.
func TestDocumentsOfLittle(t *testing.T) {
	smallStudy(t)
	edit(t, "study.toml", "end = 2025-07-03", `end = "2025-07-01T01:00"`)
	out, errs := must(t, exitDone, "compare")
	contains(t, errs, "there is no case to compare the base with")
	contains(t, out, "The document: results/compare/compare.html")
	contains(t, read(t, "results/compare/compare.html"), "There is no case: only the base was run.")
	out, _ = must(t, exitDone, "losses")
	contains(t, out, "The document: results/losses/losses.html")
	contains(t, read(t, "results/losses/losses.html"), "The feeder loses")

	// Without [tune] the set voltages of the regulators are searched. One candidate-year
	// is the base's.
	out, _ = must(t, exitDone, "tune", "--budget", "1")
	contains(t, out, "the budget of 1 candidate-years is spent", "The document: results/tune/tune.html")
	page := read(t, "results/tune/tune.html")
	contains(t, page, "nothing is to be changed", "nothing to enter", "licensed engineer", "these are the set voltages of all regulators")
	if _, err := os.Stat("cases"); err == nil {
		t.Error("a case is written of a search that found nothing")
	}
	out, _ = must(t, exitDone, "tune")
	contains(t, out, "every candidate of the grid was evaluated")

	// Bounds that leave out the base, and no budget for anything else.
	write(t, "study.toml", read(t, "study.toml")+"\n[tune]\nsettings = [{ device = \"R1\", setting = \"set\", low = 125.3, high = 126.3, step = 0.5 }]\n")
	out, _ = must(t, exitDone, "tune", "--budget", "1")
	contains(t, out, "No candidate within the bounds was evaluated")
	contains(t, read(t, "results/tune/tune.html"), "No candidate within the bounds was evaluated", "There is no best")

	// A limit that nothing keeps: the document is made, and the exit status tells.
	edit(t, "study.toml", "step = 0.5 }]", "step = 0.5 }]\nlimits = [{ quantity = \"lowest judged voltage\", at_least = 1.2 }]")
	_, errs = must(t, exitFound, "tune")
	contains(t, errs, "no candidate keeps all limits")
	contains(t, read(t, "results/tune/tune.html"), "None of the candidates keeps all limits", "fail")
	text := regexp.MustCompile(`data:image/png;base64,[^"]*`).ReplaceAllString(read(t, "results/tune/tune.html"), "")
	for _, bad := range []string{"NaN", "Inf", "%!"} {
		if strings.Contains(text, bad) {
			t.Errorf("the document holds %s", bad)
		}
	}
}

// The tables of impact and hosting by their heads: a place called 1204 stays a name, a cell
// such as "at least 3" a word.
func TestRecordsByUnit(t *testing.T) {
	for _, tt := range []struct{ header, row, want string }{
		{"group,criterion,unit,base,with DER,difference,limit,source,verdict,margin,base verdict,where,when",
			"voltage,hours above A,h,0.0000,+1.2500,,8,7,pass,at least 3,pass,1204,2025",
			`[{"group":"voltage","criterion":"hours above A","unit":"h","base":0.0000,"with DER":1.2500,"difference":null,"limit":8,"source":"7","verdict":"pass","margin":"at least 3","base verdict":"pass","where":"1204","when":"2025"}]`},
		{"place,phases,nominal [kV],keeps [kW],breaks at [kW],value,limit,unit,where,sizes tried",
			"1204,ABC,12.47,500,,101.5,100,%,7,12",
			`[{"place":"1204","phases":"ABC","nominal [kV]":12.47,"keeps [kW]":500,"breaks at [kW]":null,"value":101.5,"limit":100,"unit":"%","where":"7","sizes tried":"12"}]`},
		{"group,quantity,unit,base,where", "voltage,lowest place,node.phase,12.3,7.1", `[{"group":"voltage","quantity":"lowest place","unit":"node.phase","base":"12.3","where":"7.1"}]`},
		{"group,quantity,unit,base,where", "money,cost,USD,12.30,", `[{"group":"money","quantity":"cost","unit":"USD","base":12.30,"where":null}]`},
		{"quantity,value,unit", "peak,NaN,kW", `[{"quantity":"peak","value":null,"unit":"kW"}]`},
	} {
		got, err := json.Marshal(records([][]string{strings.Split(tt.header, ","), strings.Split(tt.row, ",")}))
		if err != nil || string(got) != tt.want {
			t.Errorf("%v\n got  %s\n want %s", err, got, tt.want)
		}
	}
}
