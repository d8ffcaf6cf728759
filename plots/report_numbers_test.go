package plots

import (
	"bytes"
	"context"
	"encoding/csv"
	"encoding/json"
	"fmt"
	"html"
	"io"
	"io/fs"
	"math"
	"net/url"
	"os"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"
	"time"

	"yearflow/sim"
	"yearflow/sim/demo"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
	"yearflow/sim/study"
)

var traced = regexp.MustCompile(`<data value="([^"]*)" data-source="([^"]*)"[^>]*>([^<]*)</data>`)

// wrongNumbers holds every number of a page against the cell that it names, by reading
// the page and the tables anew. It returns what is wrong and how many were held.
func wrongNumbers(page string, folder fs.FS) (wrong []string, held int) {
	for _, m := range traced.FindAllStringSubmatch(page, -1) {
		exact, source, show := html.UnescapeString(m[1]), html.UnescapeString(m[2]), html.UnescapeString(m[3])
		held++
		cell, err := lookUp(folder, source)
		switch {
		case err != nil:
			wrong = append(wrong, fmt.Sprintf("%s: %v", source, err))
		case cell != exact:
			wrong = append(wrong, fmt.Sprintf("%s: the page has %q, the file %q", source, exact, cell))
		case !shows(show, exact):
			wrong = append(wrong, fmt.Sprintf("%s: %q is shown for %q", source, show, exact))
		}
	}
	return wrong, held
}

// lookUp finds the cell file#row/column.
func lookUp(folder fs.FS, source string) (string, error) {
	file, place, _ := strings.Cut(source, "#")
	row, column, ok := strings.Cut(place, "/")
	if !ok {
		return "", fmt.Errorf("names no cell")
	}
	data, err := fs.ReadFile(folder, file)
	if err != nil {
		return "", err
	}
	var keys []string
	for _, k := range strings.Split(row, ";") {
		plain, err := url.PathUnescape(k)
		if err != nil {
			return "", err
		}
		keys = append(keys, plain)
	}
	if column, err = url.PathUnescape(column); err != nil {
		return "", err
	}
	if file == "run.json" {
		return lookUpJSON(data, keys[0], column)
	}
	rows, err := csv.NewReader(bytes.NewReader(data)).ReadAll()
	if err != nil {
		return "", err
	}
	if head, want, ok := strings.Cut(column, "="); ok { // how many rows have a word in a column
		n := 0
		for _, r := range rows[1:] {
			if r[columnOf(rows[0], head)] == want {
				n++
			}
		}
		return strconv.Itoa(n), nil
	}
	c := columnOf(rows[0], column)
	if c < 0 {
		return "", fmt.Errorf("no column %q", column)
	}
	if keys[0] == "*" { // the sum of a column
		sum := 0.0
		for _, r := range rows[1:] {
			if x, err := strconv.ParseFloat(r[c], 64); err == nil {
				sum += x
			}
		}
		if column == "length [km]" {
			return strconv.FormatFloat(sum, 'f', 6, 64), nil
		}
		return strconv.FormatFloat(sum, 'f', -1, 64), nil
	}
	found := -1
	for i, r := range rows[1:] {
		same := true
		for k := range keys {
			same = same && r[k] == keys[k]
		}
		if same {
			if found >= 0 {
				return "", fmt.Errorf("two rows %v", keys)
			}
			found = i + 1
		}
	}
	if found < 0 {
		return "", fmt.Errorf("no row %v", keys)
	}
	return rows[found][c], nil
}

func columnOf(header []string, name string) int {
	for i, h := range header {
		if h == name {
			return i
		}
	}
	return -1
}

func lookUpJSON(data []byte, group, key string) (string, error) {
	dec := json.NewDecoder(bytes.NewReader(data))
	dec.UseNumber()
	var all map[string]any
	if err := dec.Decode(&all); err != nil {
		return "", err
	}
	if group != "" {
		all, _ = all[group].(map[string]any)
	}
	n, ok := all[key].(json.Number)
	if !ok {
		return "", fmt.Errorf("no number %s in %q", key, group)
	}
	return n.String(), nil
}

// shows tells whether what is shown is the value, rounded to the digits it has.
func shows(show, exact string) bool {
	if show == exact || show == "–" && exact == "" {
		return true
	}
	if t, err := time.Parse(time.RFC3339, exact); err == nil {
		// A place may stand before it.
		return strings.HasSuffix(show, t.Format("2 Jan 2006 15:04")) || strings.HasSuffix(show, t.Format("2 Jan 2006 15:04:05"))
	}
	x, err := strconv.ParseFloat(exact, 64)
	if err != nil {
		return false
	}
	plain := strings.NewReplacer(",", "", "\u2212", "-", "×10", "e", "⁻", "-", "⁰", "0", "¹", "1", "²", "2", "³", "3", "⁴", "4", "⁵", "5", "⁶", "6", "⁷", "7", "⁸", "8", "⁹", "9").Replace(show)
	y, err := strconv.ParseFloat(plain, 64)
	if err != nil {
		return false
	}
	mantissa, exponent, _ := strings.Cut(plain, "e")
	digits := 0
	if i := strings.IndexByte(mantissa, '.'); i >= 0 {
		digits = len(mantissa) - i - 1
	}
	scale, _ := strconv.Atoi(exponent)
	return math.Abs(x-y) <= 0.5000001*math.Pow10(scale-digits)
}

// reportFrom makes the report of a folder; figures only where they are wanted.
func reportFrom(t *testing.T, folder fs.FS, withFigures bool) string {
	t.Helper()
	f, err := results.ReadFolder(folder)
	if err != nil {
		t.Fatal(err)
	}
	var figures []Figure
	if withFigures {
		figures, err = DrawFolder(f, func(string) (io.WriteCloser, error) { return shut{io.Discard}, nil }, Options{DPI: 40})
		if err != nil {
			t.Fatal(err)
		}
	}
	var page bytes.Buffer
	if err := WriteReport(&page, folder, f, figures); err != nil {
		t.Fatal(err)
	}
	return page.String()
}

type shut struct{ io.Writer }

func (shut) Close() error { return nil }

// demoDays runs the first days of the demo and returns its results folder.
func demoDays(t *testing.T, days int) fs.FS {
	t.Helper()
	st, err := feeder.Open(demo.Study(), "")
	if err != nil {
		t.Fatal(err)
	}
	st.Settings.Period.End = st.Settings.Period.Start + int64(days)*24*int64(time.Hour)
	e, err := sim.Prepare(st, sim.Options{Demo: true})
	if err != nil {
		t.Fatal(err)
	}
	dir := filepath.Join(t.TempDir(), "base")
	w, err := results.Create(dir, e.Plan)
	if err != nil {
		t.Fatal(err)
	}
	out, err := e.Run(context.Background(), w)
	if err != nil {
		t.Fatal(err)
	}
	if err := w.Finish(out, results.RunInfo{Version: "test", Warnings: e.Warnings, Settings: study.SettingsInForce(st), Inputs: map[string]string{"study.toml": "00"}}); err != nil {
		t.Fatal(err)
	}
	return os.DirFS(dir)
}

// Every number of the report equals the number in the table it names.
func TestEveryNumberEqualsItsTable(t *testing.T) {
	for name, x := range map[string]struct {
		folder fs.FS
		least  int // numbers that the report holds
	}{
		"demo":                   {demoDays(t, 3), 380},
		"low and unsolved steps": {os.DirFS("../sim/results/testdata/tiny"), 200},
		"invented":               {small().write(), 100},
	} {
		t.Run(name, func(t *testing.T) {
			page := reportFrom(t, x.folder, false)
			wrong, held := wrongNumbers(page, x.folder)
			for _, text := range wrong {
				t.Error(text)
			}
			if held < x.least {
				t.Errorf("%d numbers were held against their cells, want %d or more", held, x.least)
			}
			if strings.Contains(page, "NaN") || strings.Contains(page, "Inf") || strings.Contains(page, "%!") {
				t.Error("the page holds what is no number")
			}
		})
	}
}

// The comparison sees a number that is changed in the page, in what it shows and in
// what it names.
func TestTheNumbersTestSees(t *testing.T) {
	folder := os.DirFS("../sim/results/testdata/tiny")
	page := reportFrom(t, folder, false)
	m := regexp.MustCompile(`<data value="([1-9][^"]*)" data-source="(summary[^"]*)"[^>]*>([^<]*)</data>`).FindStringSubmatch(page)
	if m == nil {
		t.Fatal("no number of summary.csv")
	}
	for _, other := range []string{
		strings.Replace(page, m[0], strings.Replace(m[0], `value="`+m[1], `value="7`+m[1], 1), 1),
		strings.Replace(page, m[0], strings.Replace(m[0], ">"+m[3]+"<", ">7"+m[3]+"<", 1), 1),
		strings.Replace(page, m[0], strings.Replace(m[0], `data-source="summary.csv#`, `data-source="summary.csv#x`, 1), 1),
	} {
		if wrong, _ := wrongNumbers(other, folder); len(wrong) != 1 {
			t.Errorf("%d faults are seen, want 1: %v", len(wrong), wrong)
		}
	}
}
