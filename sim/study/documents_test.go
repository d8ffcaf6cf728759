package study_test

import (
	"bytes"
	"context"
	"encoding/csv"
	"html"
	"io/fs"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"
	"testing/fstest"

	"yearflow/plots"
	"yearflow/sim/demo"
	"yearflow/sim/study"
)

// traced is a number of a document with where it comes from.
var traced = regexp.MustCompile(`<data value="([^"]*)" data-source="([^"]*)"[^>]*>([^<]*)</data>`)

// The documents of the demo's first days: every number in them is the number of the
// table that it names, and reads as that number to the digits it shows.
func TestEveryNumberOfADocumentStandsInItsTable(t *testing.T) {
	p := study.Place{FS: demoWeek(t), Results: t.TempDir(), Demo: true, Version: "test"}
	studies, left, err := study.Choose(p, []string{"wide-band", "lower-band"})
	if err != nil {
		t.Fatal(err)
	}
	cases, err := study.Run(context.Background(), p, studies, study.Settings{})
	if err != nil {
		t.Fatal(err)
	}
	c, err := study.Compare(cases, left)
	if err != nil {
		t.Fatal(err)
	}
	dir := filepath.Join(p.Results, "compare")
	if err := c.Write(dir, p, document(t, "compare.html", plots.CompareDocument)); err != nil {
		t.Fatal(err)
	}
	numbers(t, dir, "compare.html", 150)
	l, err := study.Losses(context.Background(), p, study.LossSettings{Case: "wide-band", Samples: 6})
	if err != nil {
		t.Fatal(err)
	}
	dir = filepath.Join(p.Results, "losses")
	if err := l.Write(dir, p, document(t, "losses.html", plots.LossesDocument)); err != nil {
		t.Fatal(err)
	}
	numbers(t, dir, "losses.html", 300)
}

// demoWeek is the demo with a week in two months for its period.
func demoWeek(t *testing.T) fs.FS {
	out := fstest.MapFS{}
	err := fs.WalkDir(demo.Study(), ".", func(name string, e fs.DirEntry, err error) error {
		if err != nil || e.IsDir() {
			return err
		}
		data, err := fs.ReadFile(demo.Study(), name)
		if name == "study.toml" {
			data = bytes.Replace(data, []byte("start = 2025-01-01\nend = 2026-01-01"), []byte("start = 2025-06-27\nend = 2025-07-04"), 1)
		}
		out[name] = &fstest.MapFile{Data: data}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return out
}

func document(t *testing.T, name string, make func(string) (*plots.Document, error)) func(string) error {
	return func(dir string) error {
		d, err := make(dir)
		if err != nil {
			return err
		}
		var b bytes.Buffer
		if err := d.Write(&b); err != nil {
			return err
		}
		return os.WriteFile(filepath.Join(dir, name), b.Bytes(), 0o644)
	}
}

// numbers checks every traced number of a document; at least so many are expected.
func numbers(t *testing.T, dir, name string, least int) {
	t.Helper()
	page, err := os.ReadFile(filepath.Join(dir, name))
	if err != nil {
		t.Fatal(err)
	}
	tables := map[string][][]string{}
	found := traced.FindAllStringSubmatch(string(page), -1)
	if len(found) < least {
		t.Errorf("%s has %d numbers with a source, want %d or more", name, len(found), least)
	}
	for _, m := range found {
		value, source, shown := html.UnescapeString(m[1]), html.UnescapeString(m[2]), html.UnescapeString(m[3])
		file, rest, _ := strings.Cut(source, "#")
		if tables[file] == nil {
			data, err := os.ReadFile(filepath.Join(dir, file))
			if err != nil {
				t.Fatalf("%s names %s: %v", name, file, err)
			}
			if tables[file], err = csv.NewReader(bytes.NewReader(data)).ReadAll(); err != nil {
				t.Fatal(err)
			}
		}
		row, column, _ := strings.Cut(rest, "/")
		if got, ok := lookUp(tables[file], row, column); !ok || got != value {
			t.Errorf("%s: %s is %q in the document, %q in the table (%v)", name, source, value, got, ok)
		}
		x, err := strconv.ParseFloat(value, 64)
		if err != nil {
			continue
		}
		plain := strings.NewReplacer(",", "", "−", "-", "×10", "e", "⁻", "-", "⁰", "0", "¹", "1", "²", "2", "³", "3", "⁴", "4", "⁵", "5", "⁶", "6", "⁷", "7", "⁸", "8", "⁹", "9").Replace(shown)
		y, err := strconv.ParseFloat(plain, 64)
		mantissa, exponent, _ := strings.Cut(plain, "e")
		_, decimals, _ := strings.Cut(mantissa, ".")
		scale, _ := strconv.Atoi(exponent)
		if err != nil {
			t.Errorf("%s: %s shows %q for %q", name, source, shown, value)
		} else if math.Abs(x-y) > 0.5001*math.Pow10(scale-len(decimals)) {
			t.Errorf("%s: %s shows %q for %q", name, source, shown, value)
		}
	}
}

func lookUp(rows [][]string, row, column string) (string, bool) {
	plain := strings.NewReplacer("%3B", ";", "%2F", "/", "%23", "#", "%25", "%")
	keys := strings.Split(row, ";")
	for i, h := range rows[0] {
		if h != plain.Replace(column) {
			continue
		}
	next:
		for _, r := range rows[1:] {
			for k, key := range keys {
				if r[k] != plain.Replace(key) {
					continue next
				}
			}
			return r[i], true
		}
	}
	return "", false
}

func TestADocumentOfAnotherVersionOrHalfAFolderIsRefused(t *testing.T) {
	dir := t.TempDir()
	write := func(name, text string) {
		if err := os.WriteFile(filepath.Join(dir, name), []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	if _, err := plots.CompareDocument(dir); err == nil || !strings.Contains(err.Error(), "run compare again") {
		t.Errorf("an empty folder: %v", err)
	}
	write("compare.json", `{"format": 99, "kind": "compare", "version": "9.9"}`)
	if _, err := plots.CompareDocument(dir); err == nil || !strings.Contains(err.Error(), "9.9") {
		t.Errorf("another format: %v", err)
	}
	write("losses.json", `{"format": 1, "kind": "losses", "files_sha256": {"worth.csv": "00"}}`)
	if _, err := plots.LossesDocument(dir); err == nil || !strings.Contains(err.Error(), "half of a folder") {
		t.Errorf("half of a folder: %v", err)
	}
	write("worth.csv", "item\n")
	if _, err := plots.LossesDocument(dir); err == nil || !strings.Contains(err.Error(), "has changed") {
		t.Errorf("a changed table: %v", err)
	}
}
