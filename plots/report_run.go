package plots

import (
	"errors"
	"fmt"
	"io"
	"io/fs"
	"math"
	"strconv"
	"time"

	"yearflow/sim/results"
)

// runReport is what the report of a run is made of.
type runReport struct {
	*results.Folder
	record  *Record
	span    span
	figures []Figure // nil: none were drawn

	summary, nodes, duty, losses, loading, monthly, plants, places, network *Ledger
	measured, swaps                                                         *Ledger // nil: the run had no measurements
	mended                                                                  *Ledger // nil: nothing was mended
	settings                                                                *Ledger // nil: the folder is of an older version
}

// WriteReport writes report.html of a run from its results folder alone: the folder's
// files, the folder as read, and what Draw returned (nil where no figures were drawn).
// Its numbers are those of the folder's tables, each with the cell it comes from.
func WriteReport(w io.Writer, folder fs.FS, f *results.Folder, figures []Figure) error {
	d, err := reportOf(folder, f, figures)
	if err != nil {
		return fmt.Errorf("report: %w", err)
	}
	return d.Write(w)
}

func reportOf(folder fs.FS, f *results.Folder, figures []Figure) (*Document, error) {
	r := &runReport{Folder: f, figures: figures, span: span{start: f.Run.Start.In(f.Run.Location), end: f.Run.End.In(f.Run.Location)}}
	var err error
	if r.record, err = ReadRecord(folder); err != nil {
		return nil, err
	}
	for _, x := range []struct {
		to       **Ledger
		file     string
		keys     int
		optional bool
	}{
		{&r.summary, "summary.csv", 1, false}, {&r.nodes, "nodes.csv", 2, false}, {&r.duty, "duty.csv", 2, false},
		{&r.losses, "losses.csv", 2, false}, {&r.loading, "loading.csv", 2, false}, {&r.monthly, "monthly.csv", 1, false},
		{&r.places, "places.csv", 1, false}, {&r.network, "network.csv", 1, false}, {&r.plants, "plants.csv", 1, true},
		{&r.measured, "measured.csv", 3, true}, {&r.swaps, "phase-swaps.csv", 2, true},
		{&r.mended, "mended.csv", 3, true}, {&r.settings, "settings.csv", 3, true},
	} {
		*x.to, err = ReadLedger(folder, x.file, x.keys)
		if err != nil && !(x.optional && errors.Is(err, fs.ErrNotExist)) {
			return nil, err
		}
	}
	d := &Document{Kind: "Report of a run", Title: f.Run.Title, Case: f.Run.Case, Demo: f.Run.Demo, Trace: r.record.Trace(),
		Subtitle: r.span.spoken() + " · steps of " + stepWords(f.Run.Step) + " · " + f.Run.Zone}
	d.Lead = r.lead()
	d.Sections = []Section{r.metSection(), r.feederSection(), r.settingsSection(), r.yearSection(), r.wrongSection(), r.trustSection(),
		r.record.LimitsSection(), r.record.AssumptionsSection(), r.dataSection(), r.record.InputsSection(), r.cautions()}
	return d, nil
}

// sum is the value of a quantity of summary.csv.
func (r *runReport) sum(quantity string) Value {
	return r.summary.Value(r.summary.Row(quantity), "value")
}

// sumNumber is the same as a number; NaN where it is blank or not there.
func (r *runReport) sumNumber(quantity string) float64 {
	x, err := strconv.ParseFloat(r.summary.Cell(r.summary.Row(quantity), "value"), 64)
	if err != nil {
		return math.NaN()
	}
	return x
}

// has tells whether summary.csv gives a value for the quantity.
func (r *runReport) has(quantity string) bool {
	return r.summary.Cell(r.summary.Row(quantity), "value") != ""
}

// picture returns the block of a figure, or none where it was not drawn.
func (r *runReport) picture(names ...string) []Block {
	var out []Block
	for _, name := range names {
		for _, f := range r.figures {
			if f.Name == name+".png" {
				out = append(out, Picture{PNG: f.PNG, Title: f.Title, Alt: f.Alt, Caption: Plain(f.Finding), File: "figures/" + f.Name, Inside: true})
			}
		}
	}
	return out
}

// lead is the first page: how far the model is to be believed, what the year came to,
// what is wrong, and what was not studied.
func (r *runReport) lead() []Block {
	blocks := []Block{r.metFinding()}
	if r.figures == nil {
		blocks = append(blocks, Paragraph{Plain("This report has no figures: the run was told to draw none. \"yearflow report\" with the results folder draws them and writes the report anew.")})
	}
	blocks = append(blocks, r.voltageFindings()...)
	blocks = append(blocks, r.otherFindings()...)
	return append(blocks, Disclaimer(), r.verdicts())
}

func (r *runReport) rangeName() string {
	if r.Run.Limits.Own {
		return "the study's own range"
	}
	return "range A"
}

func (r *runReport) voltageFindings() []Block {
	var out []Block
	if n := r.sumNumber("places judged"); n == 0 {
		return []Block{Finding{Text: Plain("No place is judged against voltage limits: no node has a load, and [limits] judge is not \"all\"."), Bad: true}}
	}
	for _, side := range [...]struct{ extreme, word string }{{"lowest", "below"}, {"highest", "above"}} {
		q := side.extreme + " judged voltage"
		if !r.has(q) {
			continue
		}
		if hours := r.sumNumber("hours with a place " + side.word + " A"); hours > 0 {
			out = append(out, Finding{Bad: true, Text: Say("Some judged place stands "+side.word+" "+r.rangeName()+" for {}: {} customer-hours. The "+side.extreme+" voltage there is {} at {}, {}.",
				r.sum("hours with a place "+side.word+" A"), bare(r.sum("customer-hours "+side.word+" A")), r.sum(q), r.sum(q+" place"), r.sum(q+" time"))})
		} else {
			out = append(out, Finding{Text: Say("No judged place stands "+side.word+" "+r.rangeName()+" in a settled interval. The "+side.extreme+" voltage is {} at {}, {}.",
				r.sum(q), r.sum(q+" place"), r.sum(q+" time"))})
		}
	}
	return out
}

func (r *runReport) otherFindings() []Block {
	var out []Block
	if r.has("losses share of energy supplied") {
		out = append(out, Finding{Text: Say("The losses are {}, {} of the energy supplied (source and generation). The peak demand is {}, {}.",
			r.sum("losses energy"), r.sum("losses share of energy supplied"), r.sum("peak demand"), r.sum("peak demand time"))})
	}
	if n := r.sumNumber("element phases above rating"); n > 0 {
		out = append(out, Finding{Bad: true, Text: Say("{} of the rated elements' phases go above their rating; the highest loading is {} at {}, {}.",
			r.sum("element phases above rating"), r.sum("highest loading"), r.sum("highest loading place"), r.sum("highest loading time"))})
	} else if r.has("highest loading") {
		out = append(out, Finding{Text: Say("Nothing goes above its rating; the highest loading is {} at {}.", r.sum("highest loading"), r.sum("highest loading place"))})
	}
	if n := r.sumNumber("operations"); n > 0 {
		out = append(out, Finding{Text: Say("Regulators and capacitors operate {} times; most often {}, {} times.",
			r.sum("operations"), r.sum("device of most operations"), r.sum("operations of that device"))})
	}
	if r.troubled() {
		out = append(out, Finding{Bad: true, Text: Say("{} of {} steps are low and {} have no solution: they enter no statistic, so that hours and energies of the period are too small.",
			r.sum("low steps"), r.sum("steps"), r.sum("unsolved steps"))})
	}
	if r.record.Coarse.TooCoarse {
		out = append(out, Finding{Bad: true, Text: Plain("The step is too coarse for operations and durations (see \"How far to trust it\").")})
	}
	return out
}

func (r *runReport) troubled() bool {
	for _, s := range r.Steps.Status {
		if s != results.OK {
			return true
		}
	}
	return false
}

// bare is a value without its unit, which the sentence says.
func bare(v Value) Value {
	v.Unit = ""
	return v
}

func (r *runReport) metFinding() Block {
	if r.measured == nil || len(r.measured.Rows) == 0 {
		return Finding{Bad: true, Text: Plain("This model has never met a measurement: the study holds no measurements.csv. Every number below is what the tables and profiles imply, and nothing more.")}
	}
	worst, at := r.worstMeasured("voltage")
	if worst < 0 {
		return Finding{Text: Plain("The model was held against " + count(len(r.measured.Rows), "measurement", "measurements") + ", none of them a voltage; how it met them is the first section.")}
	}
	row := worst
	return Finding{Text: Say("The model was held against "+count(len(r.measured.Rows), "measurement", "measurements")+". Of the voltages, "+at+" is met worst: 95 % of its samples within {} p.u., with a bias of {} p.u. (model less measurement).",
		bare(r.measured.Rounded(row, "p95 error", 4)), bare(r.measured.Rounded(row, "bias", 4)))}
}

// worstMeasured is the row of measured.csv with the largest p95 error of a quantity,
// and its place; −1 where there is none.
func (r *runReport) worstMeasured(quantity string) (int, string) {
	row, worst := -1, math.Inf(-1)
	for i := range r.measured.Rows {
		x, err := strconv.ParseFloat(r.measured.Cell(i, "p95 error"), 64)
		if r.measured.Cell(i, "quantity") == quantity && err == nil && x > worst {
			row, worst = i, x
		}
	}
	if row < 0 {
		return row, ""
	}
	return row, placeOf(r.measured.Cell(row, "place"), r.measured.Cell(row, "phase"))
}

func placeOf(name, phase string) string {
	if phase == "" {
		return name
	}
	return name + "." + phase
}

// metSection says how the model met its measurements.
func (r *runReport) metSection() Section {
	s := Section{Heading: "How the model met its measurements"}
	if r.measured == nil || len(r.measured.Rows) == 0 {
		s.Blocks = []Block{Paragraph{Plain("It never met any. A table measurements.csv beside the feeder's, with the profiles of what was measured (voltages, currents, kW and kvar at the feeder's head, tap positions, counts of operations), puts the comparison here. Counters of regulators and capacitors are the best check there is (common practice).")}}
		return s
	}
	t := r.measured.Table("Model less measurement", []string{"quantity", "place", "phase", "samples", "bias", "mean absolute error", "p95 error", "worst error", "worst time"}, nil)
	for i := range t.Rows {
		decimals := -1
		if r.measured.Cell(i, "quantity") == "voltage" {
			decimals = 4
		}
		for c, name := range []string{"bias", "mean absolute error", "p95 error", "worst error"} {
			t.Rows[i][4+c] = r.measured.Rounded(i, name, decimals)
		}
	}
	t.Note = Plain("Voltages in p.u., currents in A, powers in kW and kvar, taps and operations as counts. The p95 error is of the sizes; the worst has its sign.")
	s.Blocks = append(s.Blocks, t)
	s.Blocks = append(s.Blocks, r.picture("measured")...)
	if r.swaps != nil && len(r.swaps.Rows) > 0 {
		s.Blocks = append(s.Blocks, Finding{Bad: true, Text: Plain("Some measured voltages move with another phase than the one they are named for: look at the phase of the place, or of its meter.")},
			r.swaps.Table("Phases that the measurements contradict", nil, nil, "likely phase", "compared at", "compared phase"))
	}
	return s
}

// cautions closes the report.
func (r *runReport) cautions() Section {
	return Section{Heading: "Cautions", Blocks: []Block{List{Items: []Text{
		Plain("Whether profiles, loads and settings are those of the field is not known to the program. A settings sheet that differs from the control in the field changes every hour of this report (common practice: check as-found settings first)."),
		Plain("Loads of one profile move together: peaks of single customers are smoother here than in the field, and voltages at the ends of services are less extreme."),
		Plain("A number with four digits is a result of the inputs, not a claim that the feeder is known that well."),
		Plain("Every number on these pages carries the file, row and column it was taken from (attribute data-source, shown by the browser when the pointer rests on it). Margins and counts of table rows are worked out here from those."),
	}}, Disclaimer()}}
}

// at is a time of a row of steps.csv in local words.
func (r *runReport) at(ns int64) string {
	return time.Unix(0, ns).In(r.Run.Location).Format("2 Jan 2006 15:04")
}
