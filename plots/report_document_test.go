package plots

import (
	"bytes"
	"flag"
	"image"
	"image/png"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

var regenReport = flag.Bool("regen-report", false, "write testdata/report-small.html anew")

// smallDocument has one of every block, and a user who writes markup into names.
func smallDocument(t *testing.T) *Document {
	var dot bytes.Buffer
	if err := png.Encode(&dot, image.NewGray(image.Rect(0, 0, 4, 2))); err != nil {
		t.Fatal(err)
	}
	evil := `<script>alert("1")</script>`
	low := Number("0.931708", "pu", SourceOf("summary.csv", "value", "lowest judged voltage"))
	return &Document{
		Kind: "Report of a run", Title: "Quill & Water " + evil, Subtitle: "1 Jan to 31 Dec 2025", Case: `"><img src=x onerror=y>`, Demo: true,
		Lead: []Block{
			Finding{Text: Say("The lowest voltage is {} at {}.", low, Word(evil)), Bad: true},
			Caution{Title: "Not studied", Items: []Text{Plain("Protection.")}},
		},
		Sections: []Section{
			{Heading: "The " + evil, Blocks: []Block{
				Heading("A part"), Paragraph{Plain("Text.")}, List{Items: []Text{Plain("One.")}},
				Facts{Rows: []Fact{{"Length", Text{Number("12.3456", "km", SourceOf("network.csv", "length [km]", "a/b#1"))}}}},
				Table{Caption: "Voltages", Columns: []Column{{Head: "Node", Words: true}, {Head: "lowest", Unit: "p.u."}},
					Rows: [][]Value{{Word(evil), low}}, Note: Plain("One of 9.")},
			}},
			{Heading: "Verdicts", Blocks: []Block{
				Verdicts{Caption: "Criteria", Rows: []Verdict{
					{Criterion: "Range A", Value: low, Limit: Word("0.95"), Margin: Word("−0.018"), Source: "ANSI C84.1", Result: Fail},
					{Criterion: "Fault duty", Result: NotStudied}}},
				Picture{PNG: dot.Bytes(), Alt: `a "dot"`, Caption: Plain("A dot."), File: "figures/dot.png", Inside: true},
				Picture{Alt: "none", Caption: Plain("No picture."), File: "figures/none.png"},
			}},
		},
	}
}

func written(t *testing.T, d *Document) string {
	t.Helper()
	var b bytes.Buffer
	if err := d.Write(&b); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

// The golden file was looked at in a browser when it was written.
func TestSmallDocument(t *testing.T) {
	got := written(t, smallDocument(t))
	if again := written(t, smallDocument(t)); again != got {
		t.Error("the same document gives other bytes the second time")
	}
	name := filepath.Join("testdata", "report-small.html")
	if *regenReport {
		if err := os.WriteFile(name, []byte(got), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	want, err := os.ReadFile(name)
	if err != nil {
		t.Fatal(err)
	}
	if got != string(want) {
		t.Errorf("the document differs from %s; look at it and run with -regen-report", name)
	}
}

func TestUserTextIsEscaped(t *testing.T) {
	page := written(t, smallDocument(t))
	for _, bad := range []string{"<script", "<img src=x", `onerror=y>`} {
		if strings.Contains(strings.ReplaceAll(page, "onerror=y&gt;", ""), bad) {
			t.Errorf("the page holds %q of a user's name", bad)
		}
	}
	if n := strings.Count(page, "&lt;script&gt;"); n < 4 {
		t.Errorf("the name stands %d times in the page, want 4 or more", n)
	}
	if strings.Contains(page, "ZgotmplZ") {
		t.Error("the template refused a value")
	}
}

func TestDocumentFaults(t *testing.T) {
	for name, b := range map[string]Block{
		"short row":  Table{Caption: "x", Columns: []Column{{Head: "a"}, {Head: "b"}}, Rows: [][]Value{{Word("1")}}},
		"not a PNG":  Picture{PNG: []byte("GIF89a"), File: "x.png"},
		"broken PNG": Picture{PNG: []byte("\x89PNG\r\n\x1a\n"), File: "x.png"},
	} {
		d := Document{Kind: "Report", Sections: []Section{{Heading: "h", Blocks: []Block{b}}}}
		var out bytes.Buffer
		if err := d.Write(&out); err == nil || out.Len() > 0 {
			t.Errorf("%s: error %v and %d bytes, want an error and none", name, err, out.Len())
		}
	}
}

func TestValueOfACell(t *testing.T) {
	for _, c := range []struct{ cell, unit, want string }{
		{"28245125.9520", "kWh", "28,245,126"},
		{"63.2819", "h", "63.28"},
		{"2.55221", "%", "2.552"},
		{"0.931708", "pu", "0.9317"},
		{"-0.0182915", "pu", "\u22120.0183"},
		{"0.0000", "h", "0"},
		{"8760", "1", "8,760"},
		{"0.00012345", "kW", "0.000123"},
		{"-1.23456e-05", "kW", "\u22121.235×10⁻⁵"},
		{"98.0000", "1", "98"},
		{"", "kW", "–"},
		{"2025-08-09T18:01:00-06:00", "time", "9 Aug 2025 18:01"},
		{"2025-08-09T18:01:30-06:00", "time", "9 Aug 2025 18:01:30"},
		{"1204", "node.phase", "1204"},
		{"NaN", "kW", "NaN"},
	} {
		if got := Number(c.cell, c.unit, "f#r/c").Show; got != c.want {
			t.Errorf("Number(%q, %q) shows %q, want %q", c.cell, c.unit, got, c.want)
		}
	}
}
