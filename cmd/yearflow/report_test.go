package main

import (
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// documentStudy writes the demo with two days for its period into a new folder, goes there
// and makes every document that report draws.
func documentStudy(t *testing.T) {
	t.Helper()
	t.Chdir(t.TempDir())
	must(t, exitDone, "demo", "study")
	t.Chdir("study")
	edit(t, "study.toml", "end = 2026-01-01", "end = 2025-01-03")
	write(t, "study.toml", read(t, "study.toml")+"\n[hosting]\nplaces = [\"M12\"]\ngrid = [500, 1000]\nruns = 2\nlevels = 2\n")
	must(t, exitDone, "compare", "--case", "lower-band")
	must(t, exitDone, "losses", "--samples", "-1")
	must(t, exitDone, "impact", "--case", "more-solar")
	must(t, exitDone, "hosting")
	must(t, exitDone, "tune", "--budget", "12")
}

// tree reads every file below a folder.
func tree(t *testing.T, dir string) map[string]string {
	t.Helper()
	out := map[string]string{}
	err := filepath.WalkDir(dir, func(path string, e os.DirEntry, err error) error {
		if err == nil && !e.IsDir() {
			out[path] = read(t, path)
		}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return out
}

func sameTree(t *testing.T, what string, got, want map[string]string) {
	t.Helper()
	for name, text := range want {
		if now, there := got[name]; !there {
			t.Errorf("%s: %s is gone", what, name)
		} else if now != text {
			t.Errorf("%s: %s is another file", what, name)
		}
	}
	for name := range got {
		if _, there := want[name]; !there {
			t.Errorf("%s: %s has been added", what, name)
		}
	}
}

// report draws every document again from its folder, and refuses half of one.
func TestReportOfDocuments(t *testing.T) {
	documentStudy(t)
	t.Run("again", reportAgain)
	t.Run("half", reportOfHalf)
	t.Run("half of a run", reportOfHalfRun)
	t.Run("without the runs", reportWithoutRuns)
}

// The same bytes are drawn again, also where page and figures have been lost or touched.
// The record says what is there.
func reportAgain(t *testing.T) {
	for _, k := range []struct{ dir, page string }{
		{"results/compare", "compare.html"}, {"results/losses", "losses.html"}, {"results/impact-more-solar", "impact.html"}, {"results/hosting", "hosting.html"},
		{"results/tune", "tune.html"},
	} {
		t.Run(k.page, func(t *testing.T) {
			page := filepath.Join(k.dir, k.page)
			before := tree(t, k.dir)
			out, _ := must(t, exitDone, "report", k.dir)
			contains(t, out, "figures/", "report: "+page)
			sameTree(t, "drawn again", tree(t, k.dir), before)

			write(t, page, "<p>touched")
			if err := os.RemoveAll(filepath.Join(k.dir, "figures")); err != nil {
				t.Fatal(err)
			}
			must(t, exitDone, "report", k.dir)
			sameTree(t, "after page and figures were lost", tree(t, k.dir), before)

			// A record that was written with another page is put right.
			record := filepath.Join(k.dir, strings.TrimSuffix(k.page, ".html")+".json")
			sum := sha256.Sum256([]byte(before[page]))
			line := `"` + k.page + `": "` + hex.EncodeToString(sum[:]) + `"`
			edit(t, record, line, `"`+k.page+`": "00"`)
			must(t, exitDone, "report", k.dir)
			sameTree(t, "after the record named another page", tree(t, k.dir), before)
		})
	}
}

// Half of a folder, a table that was changed and a folder of another version are told, exit
// status 2, and nothing in the folder changes.
func reportOfHalf(t *testing.T) {
	for _, k := range []struct{ kind, dir, table string }{
		{"compare", "results/compare", "ranking.csv"}, {"losses", "results/losses", "losses-by-kind.csv"},
		{"impact", "results/impact-more-solar", "rvc.csv"}, {"hosting", "results/hosting", "candidates.csv"},
		{"tune", "results/tune", "candidates.csv"},
	} {
		table, record := filepath.Join(k.dir, k.table), filepath.Join(k.dir, k.kind+".json")
		for _, x := range []struct {
			name  string
			spoil func()
			want  []string
		}{
			{"a table is gone", func() { remove(t, table) }, []string{table + ": is missing", "run " + k.kind + " again"}},
			{"a table was changed", func() { write(t, table, read(t, table)+"#\n") }, []string{table + ": has changed", "run " + k.kind + " again"}},
			{"of another version", func() { edit(t, record, `"format": 1`, `"format": 9`) }, []string{record, "format is 9", "this program reads 1", "run " + k.kind + " again"}},
			{"of another kind", func() { edit(t, record, `"kind": "`+k.kind+`"`, `"kind": "poem"`) }, []string{record, `"poem"`}},
			{"the record is cut off", func() { text := read(t, record); write(t, record, text[:len(text)/2]) }, []string{record + ": cannot be read"}},
			{"the record names a file elsewhere", func() { edit(t, record, `"`+k.table+`"`, `"../../study.toml"`) }, []string{"lies outside the folder"}},
		} {
			t.Run(k.kind+" "+x.name, func(t *testing.T) {
				whole := tree(t, k.dir)
				x.spoil()
				before := tree(t, k.dir)
				out, errs := must(t, exitInput, "report", k.dir)
				contains(t, errs, x.want...)
				if out != "" {
					t.Errorf("standard output has %q", out)
				}
				sameTree(t, "the refused folder", tree(t, k.dir), before)
				for name, text := range whole {
					write(t, name, text)
				}
			})
		}
	}
}

// A table of a run that was changed, or is gone, is told, and nothing is drawn.
func reportOfHalfRun(t *testing.T) {
	table := filepath.Join("results", "base", "duty.csv")
	for _, x := range []struct {
		spoil func()
		want  string
	}{
		{func() { write(t, table, strings.Replace(read(t, table), ",0,", ",1,", 1)) }, table + ": has changed"},
		{func() { remove(t, table) }, table + ": is missing"},
	} {
		whole := read(t, table)
		x.spoil()
		before := tree(t, filepath.Join("results", "base"))
		_, errs := must(t, exitInput, "report", filepath.Join("results", "base"))
		contains(t, errs, x.want, "run the study again")
		sameTree(t, "the refused folder", tree(t, filepath.Join("results", "base")), before)
		write(t, table, whole)
	}
}

// A folder without a record of any kind is told, with what is likely meant.
func TestReportOfNoFolder(t *testing.T) {
	t.Chdir(t.TempDir())
	write(t, "results/compare/compare.json", "{}")
	write(t, "empty/notes.txt", "")
	for _, x := range []struct {
		dir  string
		want []string
	}{
		{"nowhere", []string{`there is no results folder "nowhere"`}},
		{"empty/notes.txt", []string{`there is no results folder`}},
		{"empty", []string{"empty/run.json: is missing", "compare.json", "hosting.json", "run the command that writes it again"}},
		{"results", []string{"results/run.json: is missing", "did you mean results/compare?"}},
		{".", []string{"did you mean results/compare?"}},
		{"results/compare", []string{"results/compare/compare.json: format is 0"}},
	} {
		_, errs := must(t, exitInput, "report", x.dir)
		contains(t, errs, x.want...)
	}
}

// The years of single runs come from their results folders. Where these are not there, or
// were run from other inputs since, the document does without and the record says so.
func reportWithoutRuns(t *testing.T) {
	year := "figures/base-power.png"
	page := read(t, "results/impact-more-solar/impact.html")
	contains(t, page, year)
	edit(t, "study.toml", "energy = 0.09", "energy = 0.10")
	must(t, exitDone, "run", "--no-figures")
	_, errs := must(t, exitDone, "report", "results/impact-more-solar")
	contains(t, errs, "results/base comes from other inputs", year+" is no longer part of the document")
	if strings.Contains(read(t, "results/impact-more-solar/impact.html"), year) {
		t.Error("the document shows the year of another run")
	}
	var record struct {
		Files map[string]string `json:"files_sha256"`
	}
	if err := json.Unmarshal([]byte(read(t, "results/impact-more-solar/impact.json")), &record); err != nil {
		t.Fatal(err)
	}
	if _, there := record.Files[year]; there {
		t.Errorf("the record still names %s", year)
	}
	if err := os.Rename("results/hosting", "hosting"); err != nil {
		t.Fatal(err)
	}
	_, errs = must(t, exitDone, "report", "hosting")
	contains(t, errs, "base is no results folder")
	// With the old inputs run again everything is back.
	edit(t, "study.toml", "energy = 0.10", "energy = 0.09")
	must(t, exitDone, "run", "--no-figures")
	must(t, exitDone, "report", "results/impact-more-solar")
	if read(t, "results/impact-more-solar/impact.html") != page {
		t.Error("the document is another one")
	}
}

func remove(t *testing.T, name string) {
	t.Helper()
	if err := os.Remove(name); err != nil {
		t.Fatal(err)
	}
}
