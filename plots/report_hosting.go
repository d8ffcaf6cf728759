package plots

import (
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"

	"yearflow/sim/results"
)

// hostingDocument is the report of hosting capacity while it is made.
type hostingDocument struct {
	*severalRuns
	places, tried, criteria, rollout, runs, instants *Ledger
}

// HostingDocument makes the report of a folder that study.Hosting wrote, from its tables
// alone, and draws its figures into figures below it. runs is the folder of the results
// folder of the base, for the map; where that is not there the report does without.
func HostingDocument(dir, runs string) (*Document, error) {
	s, err := readSeveral(dir, "hosting")
	if err != nil {
		return nil, err
	}
	h := &hostingDocument{severalRuns: s, places: s.ledger("hosting.csv", 1), tried: s.ledger("candidates.csv", 3), criteria: s.ledger("criteria.csv", 1),
		rollout: s.ledger("rollout.csv", 1), runs: s.ledger("rollout-runs.csv", 1), instants: s.ledger("rollout-instants.csv", 1)}
	if s.err != nil {
		return nil, s.err
	}
	d := &Document{Kind: "Hosting capacity", Title: s.record.Title, Subtitle: s.period(), Demo: s.record.Demo, Case: "base"}
	st := newStyle(200)
	d.Lead = h.lead()
	bars, err := h.drawn(h.placesFigure(st))
	if err != nil {
		return nil, err
	}
	d.Lead = append(append(d.Lead, bars...), Disclaimer())
	places, err := h.placesSection(st, runs)
	if err != nil {
		return nil, err
	}
	rollout, err := h.rolloutSection(st)
	if err != nil {
		return nil, err
	}
	d.Sections = append(d.Sections, places, rollout, h.triedSection())
	if _, there := s.record.Files["cautions.csv"]; there {
		var items []Text
		for l, i := s.ledger("cautions.csv", 1), 0; i < len(l.Rows); i++ {
			items = append(items, Plain(upper(l.Cell(i, "caution"))+"."))
		}
		d.Sections = append(d.Sections, Section{Heading: "Cautions", Blocks: []Block{Caution{Title: "Of these numbers", Items: items}}})
	}
	d.Sections = append(d.Sections, s.sources())
	return d, s.err
}

func (h *hostingDocument) lead() []Block {
	least, most, leastAt, mostAt, free := math.Inf(1), math.Inf(-1), -1, -1, 0
	for i := range h.places.Rows {
		if h.places.Cell(i, "place") == "feeder" {
			continue
		}
		keeps := numberIn(h.places.Cell(i, "keeps"))
		if keeps < least {
			least, leastAt = keeps, i
		}
		if keeps > most {
			most, mostAt = keeps, i
		}
		if h.places.Cell(i, "breaks at") == "" {
			free++
		}
	}
	out := []Block{Paragraph{Plain("How much more of kind " + h.said("kind") + " (output by profile " + h.said("profile") + ") each place takes beside what the base has. " + upper(h.said("search")) + ".")}}
	if leastAt >= 0 {
		out = append(out, Finding{Text: Say("The least is hosted at {}: {} keep every criterion. The most at {}: {}.", h.places.Name(leastAt, "place"), h.places.Rounded(leastAt, "keeps", 0), h.places.Name(mostAt, "place"), h.places.Rounded(mostAt, "keeps", 0))})
	}
	if free > 0 {
		out = append(out, Finding{Text: Plain(fmt.Sprintf("At %s no size of the grid (%s) breaks a criterion: they take the largest, and how much more is not known.", count(free, "place", "places"), h.said("grid")))})
	}
	if i := h.places.Row("feeder"); i >= 0 {
		if h.places.Cell(i, "breaks at") == "" {
			out = append(out, Finding{Text: Say("Shared equally over these places the feeder keeps every criterion up to {}, the largest size of the grid.", h.places.Rounded(i, "keeps", 0))})
		} else {
			out = append(out, Finding{Text: Say("Shared equally over these places the feeder keeps every criterion up to {} in all; {} break one: "+h.places.Cell(i, "criterion")+".", h.places.Rounded(i, "keeps", 0), h.places.Rounded(i, "breaks at", 0))})
		}
	}
	return out
}

// drawn makes a block of a figure, none where there is nothing to draw.
func (h *hostingDocument) drawn(p *page, f Figure, err error) ([]Block, error) {
	if err != nil || p == nil {
		return nil, err
	}
	b, err := h.picture(p, f)
	return []Block{b}, err
}

func (h *hostingDocument) placesSection(st *style, runs string) (Section, error) {
	s := Section{Heading: "What each place takes"}
	t := h.places.Table("The largest size kept and the smallest that breaks a criterion, by place", []string{"place", "distance", "keeps", "breaks at", "criterion", "value", "limit", "unit", "where"}, nil, "criterion", "unit", "where")
	for i := range t.Rows {
		t.Rows[i][2], t.Rows[i][3] = h.places.Rounded(i, "keeps", 0), h.places.Rounded(i, "breaks at", 0)
	}
	t.Note = Plain(upper(h.said("places")) + ". Sizes tried: " + h.said("grid") + ". Keeps 0: the smallest size breaks a criterion already. No size at which it breaks: none of the grid does. The criterion is the one that is exceeded most, relative to its limit.")
	var c Facts
	for i := range h.criteria.Rows {
		limit := Rounded(h.criteria.Cell(i, "limit"), h.criteria.Cell(i, "unit"), SourceOf(h.criteria.File, "limit", h.criteria.Rows[i][0]), -1)
		c.Rows = append(c.Rows, Fact{h.criteria.Cell(i, "criterion"), Say("at most {}: "+h.criteria.Cell(i, "source"), limit)})
	}
	where, err := h.drawn(h.mapFigure(st, runs))
	if err != nil {
		return s, err
	}
	s.Blocks = append([]Block{t, Heading("Criteria and limits"), c, Paragraph{Plain("Hours are those more than the base has. Voltage limits: " + h.said("limits") + ". Penetration is the rating of the new units alone, in kW.")}}, where...)
	return s, nil
}

func (h *hostingDocument) rolloutSection(st *style) (Section, error) {
	s := Section{Heading: "Roll-out: customers adopt in random order"}
	if why := h.said("why"); why != "" {
		s.Blocks = []Block{Paragraph{Plain("There is none: " + why + ".")}}
		return s, nil
	}
	n := len(h.runs.Rows)
	s.Blocks = append(s.Blocks, Paragraph{Plain(fmt.Sprintf("%s sites with customers adopt %s for each customer, in %d random orders (seed %s). %s.", h.said("sites"), h.said("per customer"), n, h.said("seed"), upper(h.said("rule"))))})
	p, f := h.rolloutFigure(st)
	b, err := h.picture(p, f)
	if err != nil {
		return s, err
	}
	t := h.rollout.Table("Share of the runs that violate, by installed power", []string{"installed at least", "mean installed", "runs", "runs that violate", "share", "voltage above A", "voltage below A", "loading", "rapid voltage change", "no solution"}, nil)
	t.Note = Plain("The last columns count runs by what was found first in them. Installed power rises with the square of the level, so that the low end is seen finely. Method: random deployments of growing penetration, as in Bollen and Hassan (Wiley, 2011), Navarro-Espinosa and Ochoa (IEEE Trans. Power Systems, 2016) and Ding and Mather (IEEE Trans. Sustainable Energy, 2017); recalled from memory.")
	var at []string
	for i := range h.instants.Rows {
		at = append(at, Number(h.instants.Cell(i, "instant"), "time", "").Show)
	}
	s.Blocks = append(s.Blocks, b, t, Paragraph{Plain("Critical instants: " + strings.Join(at, "; ") + ".")})
	return s, nil
}

// triedSection lists the runs that broke something, by criterion.
func (h *hostingDocument) triedSection() Section {
	var rows []int
	for i := range h.tried.Rows {
		if h.tried.Cell(i, "verdict") == "fail" {
			rows = append(rows, i)
		}
	}
	if len(rows) == 0 {
		return Section{Heading: "Runs that break a criterion", Blocks: []Block{Paragraph{Plain("None.")}}}
	}
	t := h.tried.Table("Every criterion that a size breaks", []string{"place", "size", "criterion", "value", "limit", "unit", "margin", "where"}, rows, "unit", "where")
	for k, i := range rows { // a key of the table, but a number to read
		t.Rows[k][1] = plain(Rounded(h.tried.Cell(i, "size [kW]"), "kW", SourceOf(h.tried.File, "size [kW]", h.tried.Rows[i][:h.tried.Keys]...), 0))
	}
	t.Columns[1].Words = false
	t.Note = Plain("All runs with all criteria are in candidates.csv.")
	return Section{Heading: "Runs that break a criterion", Blocks: []Block{t}}
}

// mapFigure shows on the map of the feeder what the places keep.
func (h *hostingDocument) mapFigure(st *style, runs string) (*page, Figure, error) {
	if len(h.record.Cases) == 0 {
		return nil, Figure{}, nil
	}
	folder, err := results.ReadFolder(os.DirFS(filepath.Join(runs, h.record.Cases[0].Folder)))
	if err != nil {
		return nil, Figure{}, nil // the report says where the map would come from by its absence
	}
	s, err := newSurvey(folder)
	if err != nil {
		return nil, Figure{}, err
	}
	return h.drawHostingMap(s, st)
}
