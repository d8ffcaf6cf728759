package plots

import (
	"bytes"
	"errors"
	"math"
	"os"
	"regexp"
	"strconv"
	"strings"
	"testing"
	"testing/fstest"
	"time"

	"yearflow/sim/results"
	"yearflow/sim/tables"
)

// The report stands with whatever a run can leave behind.
func TestReportOfEveryShape(t *testing.T) {
	one := small()
	one.end = one.start.Add(one.step)
	none := small()
	none.zeroLoads = true
	bare := small()
	bare.devices, bare.voltages, bare.coordinates, bare.measured = false, false, false, 0
	dark := small()
	dark.unsolvedRows = 1 << 20
	for name, x := range map[string]struct {
		shape invented
		says  []string
	}{
		"usual":    {small(), []string{"Low voltage", "data:image/png;base64,"}},
		"one step": {one, []string{"The feeder at a glance"}},
		"no load":  {none, []string{"Nothing with a rating goes above it"}},
		"bare":     {bare, []string{"The feeder has no device that acts", "never met a measurement"}},
		"unsolved": {dark, []string{"enter no statistic"}},
	} {
		t.Run(name, func(t *testing.T) {
			folder := x.shape.write()
			page := reportFrom(t, folder, true)
			for _, want := range append(x.says, "What is not studied", "licensed engineer", "local codes") {
				if !strings.Contains(page, want) {
					t.Errorf("%q is missing", want)
				}
			}
			if again := reportFrom(t, folder, true); again != page {
				t.Error("other bytes the second time")
			}
			wellFormed(t, page)
		})
	}
}

// wellFormed checks what holds for every page: nothing is loaded or run, pictures have
// their text, headings do not skip a level, marks are unique.
func wellFormed(t *testing.T, page string) {
	t.Helper()
	page = regexp.MustCompile(`base64,[^"]*`).ReplaceAllString(page, "base64,")
	for _, bad := range []string{"<script", "javascript:", `src="http`, `href="http`, "url(", "@import", "NaN", "ZgotmplZ"} {
		if strings.Contains(page, bad) {
			t.Errorf("the page holds %q", bad)
		}
	}
	for _, img := range regexp.MustCompile(`<img[^>]*>`).FindAllString(page, -1) {
		if m := regexp.MustCompile(` alt="([^"]*)"`).FindStringSubmatch(img); m == nil || len(m[1]) < 20 {
			t.Errorf("a picture without a text for those who do not see it: %.80s", img)
		}
	}
	level := 0
	for _, h := range regexp.MustCompile(`<h([1-6])`).FindAllStringSubmatch(page, -1) {
		n, _ := strconv.Atoi(h[1])
		if n > level+1 {
			t.Errorf("a heading of level %d follows one of level %d", n, level)
		}
		level = n
	}
	seen := map[string]bool{}
	for _, m := range regexp.MustCompile(` id="([^"]*)"`).FindAllStringSubmatch(page, -1) {
		if seen[m[1]] {
			t.Errorf("id %q twice", m[1])
		}
		seen[m[1]] = true
	}
	for _, m := range regexp.MustCompile(`href="#([^"]*)"`).FindAllStringSubmatch(page, -1) {
		if !seen[m[1]] {
			t.Errorf("a link leads to %q, which is not there", m[1])
		}
	}
}

// How the model met its measurements stands on the first page, and phases that the
// measurements contradict are told.
func TestReportOfAMeasuredRun(t *testing.T) {
	m := small().write()
	m["measured.csv"] = &fstest.MapFile{Data: []byte("quantity,place,phase,samples,bias,mean absolute error,p95 error,worst error,worst time\n" +
		"voltage,n03,A,720,-0.004211,0.005000,0.011234,-0.020000,2025-01-02T18:00:00-07:00\n" +
		"voltage,n04,B,720,0.001000,0.002000,0.003000,0.004000,2025-01-02T19:00:00-07:00\n" +
		"kW,grid,,720,12.5000,20.0000,55.0000,-80.0000,2025-01-03T18:00:00-07:00\n")}
	m["phase-swaps.csv"] = &fstest.MapFile{Data: []byte("place,phase,likely phase,compared at,compared phase,correlation,correlation with likely phase,changes\n" +
		"n03,A,B,n03,A,0.1,0.98,700\n")}
	page := reportFrom(t, m, false)
	text := regexp.MustCompile(`<[^>]*>`).ReplaceAllString(page, "")
	for _, want := range []string{"held against 3 measurements", "n03.A is met worst: 95 % of its samples within 0.0112 p.u., with a bias of \u22120.0042 p.u.",
		"move with another phase"} {
		if !strings.Contains(text, want) {
			t.Errorf("%q is missing", want)
		}
	}
	if strings.Contains(text, "never met") {
		t.Error("the report says that nothing was measured")
	}
	if wrong, _ := wrongNumbers(page, m); len(wrong) > 0 {
		t.Error(strings.Join(wrong, "\n"))
	}
}

// What was assumed, doubted and mended is told, each in its place.
func TestReportOfAssumptions(t *testing.T) {
	m := small().write()
	run := string(m["run.json"].Data)
	m["run.json"] = &fstest.MapFile{Data: []byte(strings.Replace(run, `{"format":1,`, `{"format":1,"assumed":[{"file":"grid/transformers.csv","line":16,"text":"resistance = 0.93"},{"file":"profiles/sun.csv","text":"weather = typical year"}],`+
		`"warnings":[{"file":"profiles/meters/m1.csv","line":9,"text":"is flat for a week"},{"file":"feeder/loads.csv","line":4,"column":2,"text":"is larger than its transformer"}],"inputs_sha256":{"study.toml":"ab"},`, 1))}
	m["mended.csv"] = &fstest.MapFile{Data: []byte("meter,rule,from,to,values,energy added [kWh]\nm1,gap,2025-01-05T00:00:00-07:00,2025-01-05T03:00:00-07:00,12,3.5000\nm2,gap,2025-01-05T00:00:00-07:00,2025-01-05T03:00:00-07:00,30,1.2500\n")}
	page := reportFrom(t, m, false)
	at := func(text string) int {
		i := strings.Index(page, text)
		if i < 0 {
			t.Fatalf("%q is missing", text)
		}
		return i
	}
	assumed, data, inputs := at("What was assumed</h2>"), at("Mended and odd data</h2>"), at("Inputs and results by hash</h2>")
	for text, in := range map[string][2]int{
		"resistance = 0.93": {assumed, data}, "grid/transformers.csv:16": {assumed, data}, "weather = typical year": {data, inputs},
		"is flat for a week": {data, inputs}, "feeder/loads.csv:4:2": {data, inputs}, ">42</data>": {data, inputs},
	} {
		if i := at(text); i < in[0] || i > in[1] {
			t.Errorf("%q does not stand in its section", text)
		}
	}
	if wrong, _ := wrongNumbers(page, m); len(wrong) > 0 {
		t.Error(strings.Join(wrong, "\n"))
	}
}

// Verdicts fail where hours beyond the limit say so, and show by how much.
func TestVerdictsOfTheDemo(t *testing.T) {
	folder := small().write()
	f, err := results.ReadFolder(folder)
	if err != nil {
		t.Fatal(err)
	}
	d, err := reportOf(folder, f, nil)
	if err != nil {
		t.Fatal(err)
	}
	lowest := math.Inf(1)
	below := false
	for _, n := range f.Nodes {
		if f.Judged(n) {
			lowest = math.Min(lowest, n.Min-f.LimitsOf(n.NominalKV).Low)
			below = below || n.HoursBelowA > 0
		}
	}
	for _, b := range d.Lead {
		v, ok := b.(Verdicts)
		if !ok {
			continue
		}
		first := v.Rows[0]
		if want := number(lowest, 4) + "\u00a0p.u."; first.Margin.Show != want {
			t.Errorf("the margin is %q, want %q", first.Margin.Show, want)
		}
		if (first.Result == Fail) != below {
			t.Errorf("the verdict is %v, and hours below range A are %v", first.Result, below)
		}
		return
	}
	t.Error("no verdicts on the first page")
}

func TestReportOfBrokenRecords(t *testing.T) {
	f, err := results.ReadFolder(small().write())
	if err != nil {
		t.Fatal(err)
	}
	for name, change := range map[string]func(fstest.MapFS){
		"run.json":    func(m fstest.MapFS) { m["run.json"] = &fstest.MapFile{Data: []byte(`{"assumed":3}`)} },
		"duty.csv":    func(m fstest.MapFS) { delete(m, "duty.csv") },
		"summary.csv": func(m fstest.MapFS) { m["summary.csv"] = &fstest.MapFile{Data: []byte("quantity,value\n\"x")} },
		"losses.csv":  func(m fstest.MapFS) { m["losses.csv"] = &fstest.MapFile{Data: []byte("element")} },
	} {
		m := small().write()
		change(m)
		var page bytes.Buffer
		err := WriteReport(&page, m, f, nil)
		var faults tables.Faults
		if err == nil || page.Len() > 0 || !strings.Contains(err.Error(), name) {
			t.Errorf("%s: error %v, %d bytes", name, err, page.Len())
		} else if !errors.As(err, &faults) && !errors.Is(err, os.ErrNotExist) {
			t.Errorf("%s: the error is a %T", name, err)
		}
	}
}

// A title and a case that hold markup stay text in the report of a run.
func TestReportEscapesTheStudy(t *testing.T) {
	m := small().write()
	m["run.json"] = &fstest.MapFile{Data: []byte(strings.NewReplacer("Alder Bend 1203", `</style><script>alert(1)</script>`, `"case":"base"`, `"case":"\"; } body { display: none"`).Replace(string(m["run.json"].Data)))}
	page := reportFrom(t, m, false)
	if strings.Contains(page, "<script") || strings.Count(page, "</style>") != 1 {
		t.Error("markup of the title is in the page")
	}
	style := page[strings.Index(page, "<style>"):strings.Index(page, "</style>")]
	if strings.Contains(style, `"; } body { display`) {
		t.Error("the case's name ends a string of the style sheet")
	}
}

// The report of a year must cost little beside its figures.
func BenchmarkReport(b *testing.B) {
	g := small()
	g.end = g.start.Add(60 * 24 * time.Hour)
	folder := g.write()
	f, err := results.ReadFolder(folder)
	if err != nil {
		b.Fatal(err)
	}
	for b.Loop() {
		if err := WriteReport(shut{&bytes.Buffer{}}, folder, f, nil); err != nil {
			b.Fatal(err)
		}
	}
}
