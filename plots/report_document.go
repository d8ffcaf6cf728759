package plots

import (
	"bytes"
	_ "embed"
	"encoding/base64"
	"fmt"
	"html/template"
	"image/png"
	"io"
	"slices"
	"strings"
)

// Document is a report: one self-contained HTML file that reads on a telephone, on a
// desk and, printed, on A4 or Letter paper. It needs no scripts, loads nothing, and is
// the same bytes for the same content; it holds no time of writing.
//
// Numbers in it are Values that carry where they come from; Write puts that into the
// attribute data-source, as file#row/column, and names the files under each block.
type Document struct {
	Kind     string // what this is: "Report of a run", "Settings evaluation"
	Title    string // of the study
	Subtitle string // the period, the step; "" for none
	Case     string
	Demo     bool    // an invented study: the head says so
	Trace    string  // case and inputs, at the foot of every figure and page: Record.Trace
	Lead     []Block // what stands before the list of contents: the first page
	Sections []Section
}

// Section is a part of a document under a heading.
type Section struct {
	Heading string
	Blocks  []Block
}

// Block is a part of a section: Paragraph, Finding, Caution, List, Facts, Table,
// Verdicts, Picture or Heading.
type Block interface{ blockName() string }

// Heading is a heading below that of the section.
type Heading string

// Paragraph is running text.
type Paragraph struct{ Text Text }

// Finding is what a reader must not miss: one sentence computed from the data.
// Bad marks one that is wrong with the feeder, in words as well as in colour.
type Finding struct {
	Text Text
	Bad  bool
}

// Caution says where not to trust the document, or what it does not study.
type Caution struct {
	Title string
	Items []Text
}

// List is a list of sentences.
type List struct{ Items []Text }

// Facts is a list of names and values, such as what a feeder is.
type Facts struct{ Rows []Fact }

// Fact is one row of Facts.
type Fact struct {
	Name string
	Text Text
}

// Table is a table of values; every row has one for each column.
type Table struct {
	Caption string
	Columns []Column
	Rows    [][]Value
	Note    Text // below it: what was left out, what the base of a per cent is
}

// Column is the head of a column. Numbers stand on the right; Words says that the
// column holds text.
type Column struct {
	Head, Unit string
	Words      bool
}

// Verdicts is a table of criteria with their limits and how they were met.
type Verdicts struct {
	Caption string
	Rows    []Verdict
	Note    Text
}

// Verdict is one criterion. Margin is how far Value stays inside Limit, in the same
// unit; it is negative where it fails.
type Verdict struct {
	Criterion            string
	Value, Limit, Margin Value
	Source               string // of the limit: a standard with its clause, a sheet, common practice
	Where                Value  // place and time of the worst value; zero for none
	Result               Result
}

// Result is how a criterion was met.
type Result uint8

// A criterion passes, fails, or was not studied (Margin says why not in Show).
const (
	Pass Result = iota
	Fail
	NotStudied
)

// String returns the word that the report prints.
func (r Result) String() string {
	switch r {
	case Pass:
		return "pass"
	case Fail:
		return "fail"
	case NotStudied:
		return "not studied"
	}
	return fmt.Sprintf("Result(%d)", uint8(r))
}

// Picture is a figure. PNG nil leaves a sentence in its place, so that a report of a
// run without figures still says what they would show.
type Picture struct {
	PNG     []byte
	Title   string // below it; "" for none
	Alt     string // for those who do not see it: what it shows, with the finding
	Caption Text   // what it shows; Figure.Finding as Plain
	File    string // its name below the results folder: "figures/losses.png"
	// Inside says that Caption stands in the picture too: it is then printed below it
	// only where the picture is too narrow to be read.
	Inside bool
}

func (Heading) blockName() string   { return "heading" }
func (Paragraph) blockName() string { return "paragraph" }
func (Finding) blockName() string   { return "finding" }
func (Caution) blockName() string   { return "caution" }
func (List) blockName() string      { return "list" }
func (Facts) blockName() string     { return "facts" }
func (Table) blockName() string     { return "table" }
func (Verdicts) blockName() string  { return "verdicts" }
func (Picture) blockName() string   { return "picture" }

var (
	//go:embed report.html.tmpl
	reportHTML string
	//go:embed report.css
	reportCSS string

	reportTemplate = template.Must(template.New("report").Parse(reportHTML))
)

// Write writes the document as HTML. It fails where a table's rows do not fit its
// columns, a picture is no PNG, or w fails.
func (d *Document) Write(w io.Writer) error {
	v := documentView{Document: d, CSS: template.CSS(reportCSS)} // ours, not the user's
	figure := 0
	var err error
	if v.Lead, err = d.view(d.Lead, &figure); err != nil {
		return fmt.Errorf("%s: %w", d.Kind, err)
	}
	for i, s := range d.Sections {
		blocks, err := d.view(s.Blocks, &figure)
		if err != nil {
			return fmt.Errorf("%s, section %q: %w", d.Kind, s.Heading, err)
		}
		v.Sections = append(v.Sections, sectionView{ID: fmt.Sprintf("s%d", i+1), Number: i + 1, Heading: s.Heading, Blocks: blocks})
	}
	var page bytes.Buffer
	if err := reportTemplate.Execute(&page, v); err != nil {
		return fmt.Errorf("%s: %w", d.Kind, err)
	}
	_, err = w.Write(page.Bytes())
	return err
}

// documentView, sectionView and blockView are what the template sees.
type documentView struct {
	*Document
	CSS      template.CSS
	Lead     []blockView
	Sections []sectionView
}

type sectionView struct {
	ID, Heading string
	Number      int
	Blocks      []blockView
}

type blockView struct {
	Name   string
	Block  Block
	Trace  string
	From   string // the files that its numbers come from
	Figure int    // of a picture: its number
	Image  template.URL
	Width  int // pixels
	Height int
}

// cellView is a value of a table with its column.
type cellView struct {
	Value
	Column
	First bool
}

// Long tells a text that may be broken into lines; a number or a name is not.
func (c cellView) Long() bool { return c.Words && len(c.Show) > 32 }

// Shape is the class of a picture that is nearly as high as wide, or higher: on paper it
// may take more of a page than two to a page leave it, or its words could not be read.
func (b blockView) Shape() string {
	switch {
	case b.Height > b.Width:
		return "tall"
	case 20*b.Height > 17*b.Width:
		return "square"
	}
	return ""
}

// Placed tells whether a criterion of the table says where and when it is worst; a column
// in which none does is left out.
func (b blockView) Placed() bool {
	return slices.ContainsFunc(b.Block.(Verdicts).Rows, func(v Verdict) bool { return v.Where.Show != "" })
}

// Cells joins the values of a row with their columns.
func (b blockView) Cells(row []Value) []cellView {
	t := b.Block.(Table)
	cells := make([]cellView, len(row))
	for i := range row {
		cells[i] = cellView{row[i], t.Columns[i], i == 0}
	}
	return cells
}

func (d *Document) view(blocks []Block, figure *int) ([]blockView, error) {
	var out []blockView
	for _, b := range blocks {
		v := blockView{Name: b.blockName(), Block: b, Trace: d.Trace, From: strings.Join(sourcesOf(b), ", ")}
		switch x := b.(type) {
		case Table:
			if len(x.Rows) == 0 {
				continue // a head without rows says nothing
			}
			for i, r := range x.Rows {
				if len(r) != len(x.Columns) {
					return nil, fmt.Errorf("table %q: row %d has %d values for %d columns", x.Caption, i+1, len(r), len(x.Columns))
				}
			}
		case Picture:
			if err := v.picture(x, figure); err != nil {
				return nil, err
			}
		}
		out = append(out, v)
	}
	return out, nil
}

func (v *blockView) picture(p Picture, figure *int) error {
	*figure++
	v.Figure = *figure
	if p.PNG == nil {
		return nil
	}
	c, err := png.DecodeConfig(bytes.NewReader(p.PNG))
	if err != nil {
		return fmt.Errorf("picture %s is no PNG: %w", p.File, err)
	}
	v.Width, v.Height = c.Width, c.Height
	v.Image = template.URL("data:image/png;base64," + base64.StdEncoding.EncodeToString(p.PNG))
	return nil
}

// Mark is the class of a verdict's word.
func (v Verdict) Mark() string {
	switch v.Result {
	case Pass:
		return "pass"
	case Fail:
		return "fail"
	}
	return "open"
}
