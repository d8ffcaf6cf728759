package plots

import (
	"fmt"
	"math"
	"strconv"

	"yearflow/sim/results"
)

// listed is the number of worst places that a table of the report names.
const listed = 10

// verdicts is the table of criteria on the first page.
func (r *runReport) verdicts() Block {
	v := Verdicts{Caption: "Criteria at a glance", Note: Plain("Margin: how far the worst value stays inside the limit. Voltages are those of settled intervals at judged places; a place whose limits are narrowed by an allowance fails by its hours, not by this margin.")}
	for _, c := range r.voltageCriteria() {
		if row, ok := r.voltageVerdict(c); ok {
			v.Rows = append(v.Rows, row)
		}
	}
	limit := func(name, quantity, unit string, most float64, source, place string) {
		x := r.sumNumber(quantity)
		if math.IsNaN(x) {
			return
		}
		row := Verdict{Criterion: name, Value: r.sum(quantity), Limit: Value{Show: "≤\u00a0" + number(most, 0) + unit}, Source: source,
			Margin: Value{Show: number(most-x, decimalsShown(x)) + unit}}
		if x > most {
			row.Result = Fail
		}
		if place != "" && r.has(place) {
			row.Where = r.sum(place)
		}
		v.Rows = append(v.Rows, row)
	}
	limit("Unbalance", "highest unbalance", "\u00a0%", 3, "ANSI C84.1: 3 % at no load", "highest unbalance place")
	limit("Loading", "highest loading", "\u00a0%", 100, "ratings of the tables", "highest loading place")
	limit("Steps served below 0.7 p.u. (low)", "low steps", "", 0, "none may be", "")
	limit("Steps without a solution", "unsolved steps", "", 0, "none may be", "")
	limit("Hunting of devices", "device-hours hunting", "\u00a0h", 0, "more than 10 changes of direction within 3,600 s", "")
	if r.measured == nil {
		v.Rows = append(v.Rows, Verdict{Criterion: "Model against measurements", Margin: Word("no measurement"), Source: "measurements.csv", Result: NotStudied})
	}
	return v
}

func decimalsShown(x float64) int {
	if x == math.Trunc(x) {
		return 0
	}
	return 2
}

// criterion is one voltage limit.
type criterion struct {
	name, column string
	below        bool
	limit        func(results.VoltageLimits) float64
	hours        func(results.NodeRow) float64
}

func (r *runReport) voltageCriteria() []criterion {
	a, b := "Range A", "Range B"
	if r.Run.Limits.Own {
		a, b = "Own inner range", "Own outer range"
	}
	return []criterion{
		{a + ", lower limit", "min", true, func(l results.VoltageLimits) float64 { return l.Low }, func(n results.NodeRow) float64 { return n.HoursBelowA }},
		{a + ", upper limit", "max", false, func(l results.VoltageLimits) float64 { return l.High }, func(n results.NodeRow) float64 { return n.HoursAboveA }},
		{b + ", lower limit", "min", true, func(l results.VoltageLimits) float64 { return l.OuterLow }, func(n results.NodeRow) float64 { return n.HoursBelowB }},
		{b + ", upper limit", "max", false, func(l results.VoltageLimits) float64 { return l.OuterHigh }, func(n results.NodeRow) float64 { return n.HoursAboveB }},
	}
}

// voltageVerdict finds the judged place with the smallest margin. It fails where any
// judged place has hours beyond the limit.
func (r *runReport) voltageVerdict(c criterion) (Verdict, bool) {
	worst, margin, limit := -1, math.Inf(1), 0.0
	v := Verdict{Criterion: c.name, Source: "ANSI C84.1, service voltage"}
	if r.Run.Limits.Own {
		v.Source = "the study's [limits]"
	}
	for i, n := range r.Nodes {
		if !r.Judged(n) {
			continue
		}
		if c.hours(n) > 0 {
			v.Result = Fail
		}
		l := c.limit(r.LimitsOf(n.NominalKV))
		m := n.Min - l
		if !c.below {
			m = l - n.Max
		}
		if m < margin {
			worst, margin, limit = i, m, l
		}
	}
	if worst < 0 {
		return v, false
	}
	n := r.Nodes[worst]
	v.Value = r.nodes.Value(worst, c.column)
	sign := "≤\u00a0"
	if c.below {
		sign = "≥\u00a0"
	}
	v.Limit = Value{Show: sign + number(limit, 4) + "\u00a0p.u."}
	v.Margin = Value{Show: number(margin, 4) + "\u00a0p.u."}
	at := r.nodes.Value(worst, c.column+" time")
	at.Show = placeOf(n.Node, n.Phase) + ", " + at.Show
	v.Where = at
	return v, true
}

// wrongSection lists the worst places and times, each with the chart that shows it.
func (r *runReport) wrongSection() Section {
	s := Section{Heading: "What is wrong, where and when"}
	add := func(b ...Block) { s.Blocks = append(s.Blocks, b...) }
	add(Heading("Low voltage"))
	add(r.outside("below", "lowest", "min", func(n results.NodeRow) float64 { return n.HoursBelowA })...)
	add(r.picture("voltage-lowest-year")...)
	add(Heading("High voltage"))
	add(r.outside("above", "highest", "max", func(n results.NodeRow) float64 { return n.HoursAboveA })...)
	add(r.picture("voltage-highest-year")...)
	if p := r.picture("voltage-distance"); p != nil {
		add(Heading("Along the feeder at the two worst instants"))
		add(p...)
	}
	add(Heading("Loading"))
	add(r.overloads()...)
	add(r.picture("loading")...)
	add(Heading("Devices"))
	add(r.picture("operations")...)
	add(r.deviceTrouble()...)
	add(r.reversed()...)
	add(Heading("Unbalance"))
	if h := r.sumNumber("hours with unbalance above 3 %"); h > 0 {
		add(Finding{Bad: true, Text: Say("Unbalance stands above 3 % for {}; the highest is {} at {}, {}.", r.sum("hours with unbalance above 3 %"), r.sum("highest unbalance"), r.sum("highest unbalance place"), r.sum("highest unbalance time"))})
	} else if r.has("highest unbalance") {
		add(Paragraph{Say("Never above 3 %; the highest is {} at {}, {}.", r.sum("highest unbalance"), r.sum("highest unbalance place"), r.sum("highest unbalance time"))})
	} else {
		add(Paragraph{Plain("No three-phase node has a value.")})
	}
	add(Heading("Steps that are low or have no solution"))
	add(r.trouble()...)
	return s
}

// outside lists the judged places beyond range A on one side, worst first.
func (r *runReport) outside(word, extreme, column string, hours func(results.NodeRow) float64) []Block {
	all := r.order(r.nodes, func(i int) float64 {
		if !r.Judged(r.Nodes[i]) {
			return 0
		}
		return hours(r.Nodes[i])
	}, len(r.nodes.Rows))
	if len(all) == 0 {
		return []Block{Paragraph{Plain("No judged place stands " + word + " " + r.rangeName() + " in a settled interval.")}}
	}
	t := r.nodes.Table("Places longest "+word+" "+r.rangeName(), existing(r.nodes, "node", "phase", "nominal", "customers", column, column+" time", "hours "+word+" A", "hours "+word+" B", "customer-hours "+word+" A", extreme+" settling"), all[:min(len(all), listed)])
	t.Note = Plain(shown(len(t.Rows), len(all), "nodes.csv") + " To follow one down: yearflow trace --node NODE --at TIME.")
	return []Block{t}
}

// shown says how many of the rows that qualify a table holds.
func shown(rows, of int, file string) string {
	if rows == of {
		return "All such rows of " + file + "."
	}
	return "The first " + number(float64(rows), 0) + " of " + number(float64(of), 0) + " such rows of " + file + "."
}

func (r *runReport) overloads() []Block {
	all := r.order(r.loading, func(i int) float64 {
		if p := r.Loading[i].Percent; p > 100 || r.Loading[i].HoursAboveRating > 0 {
			return p
		}
		return 0
	}, len(r.loading.Rows))
	if len(all) == 0 {
		return []Block{Paragraph{Plain("Nothing with a rating goes above it.")}}
	}
	t := r.loading.Table("Above rating", existing(r.loading, "element", "phase", "peak", "rating", "loading", "peak time", "hours above rating", "hours above emergency"), all[:min(len(all), listed)])
	t.Note = Plain(shown(len(t.Rows), len(all), "loading.csv") + " Transformers, without a phase, in kVA; the rating is the self-cooled one of the tables.")
	return []Block{t}
}

// deviceTrouble lists devices that stand at a stop, or hunt.
func (r *runReport) deviceTrouble() []Block {
	rows := r.order(r.duty, func(i int) float64 { return zeroNaN(r.Duty[i].HoursAtStop) + zeroNaN(r.Duty[i].Hunting) }, listed)
	if len(rows) == 0 {
		if len(r.duty.Rows) == 0 {
			return []Block{Paragraph{Plain("The feeder has no device that acts.")}}
		}
		return []Block{Paragraph{Plain("No device stands at the end of its range while it asks for more, and none hunts.")}}
	}
	return []Block{r.duty.Table("At a stop, or hunting", existing(r.duty, "device", "phase", "hours at a stop", "hunting", "lowest position", "highest position", "operations"), rows)}
}

// reversed says through which regulators power flows back, and what their controls make of
// it: the usual one knows no direction, and turns against the voltage that it should hold
// where the field's has a mode that the sheet does not tell.
func (r *runReport) reversed() []Block {
	rows := r.order(r.duty, func(i int) float64 { return zeroNaN(r.Duty[i].HoursReverse) }, len(r.duty.Rows))
	if len(rows) == 0 {
		return nil
	}
	units := "a regulator unit"
	if len(rows) > 1 {
		units = fmt.Sprintf("%d regulator units", len(rows))
	}
	text := Say("Power flows back through "+units+" at some time, the longest through "+placeOf(r.duty.Cell(rows[0], "device"), r.duty.Cell(rows[0], "phase"))+", for {}.", r.duty.Value(rows[0], "hours reverse"))
	blind := 0
	for _, i := range rows {
		if r.settings != nil && r.settings.Cell(r.settings.Row(r.duty.Cell(i, "device"), r.duty.Cell(i, "phase"), "reverse mode"), "value") == "none" {
			blind++
		}
	}
	switch {
	case blind == len(rows):
		text = append(text, Word(" No control of these looks at the direction (reverse mode none)."))
	case blind > 0:
		text = append(text, Word(fmt.Sprintf(" The controls of %d of these do not look at the direction (reverse mode none).", blind)))
	}
	text = append(text, Word(" Hold the mode of the controls in the field against that of the sheets: a control that takes the side towards the source for the one to regulate runs to the end of its range."))
	return []Block{Finding{Bad: true, Text: text}}
}

func zeroNaN(x float64) float64 {
	if math.IsNaN(x) {
		return 0
	}
	return x
}

// trouble lists the first steps that are not ok.
func (r *runReport) trouble() []Block {
	if !r.troubled() {
		return []Block{Paragraph{Say("None: all {} steps were solved as asked.", r.sum("steps"))}}
	}
	t := Table{Caption: "The first of them", Columns: []Column{{Head: "Time", Words: true}, {Head: "Status", Words: true}, {Head: "Where", Words: true}}}
	for _, x := range r.record.Trouble[:min(len(r.record.Trouble), listed)] {
		t.Rows = append(t.Rows, []Value{Number(x.Time, "time", ""), Word(x.Status), Word(x.Where)})
	}
	if len(t.Rows) == 0 {
		// An older record does not name them; steps.csv does.
		for i, s := range r.Steps.Status {
			if s != results.OK && len(t.Rows) < listed {
				t.Rows = append(t.Rows, []Value{Word(r.at(r.Steps.Time[i])), Word(s.String()), {}})
			}
		}
	}
	t.Note = Say("{} low, {} without a solution, of {} steps; all stand in steps.csv. They enter no statistic.", r.sum("low steps"), r.sum("unsolved steps"), r.sum("steps"))
	return []Block{t}
}

// trustSection says how far the numbers carry.
func (r *runReport) trustSection() Section {
	rec := r.record
	s := Section{Heading: "How far to trust it"}
	facts := Facts{Rows: []Fact{
		{"Steps", Say("{}, of which {} ok, {} low and {} unsolved", r.sum("steps"), r.sum("ok steps"), r.sum("low steps"), r.sum("unsolved steps"))},
		{"Settling", Say("{} of the time controls were still acting ({} against {} settled); hours and extremes are of the settled part", r.sum("settling share"), r.sum("settling hours"), r.sum("settled hours"))},
		{"Outside A while settling", Say("{} of place-hours, against {} settled", rec.Value("coarse_step", "settling_place_hours_outside_a", "h"), rec.Value("coarse_step", "place_hours_outside_a", "h"))},
		{"Balance of power", Say("source, generation, load and losses close to {} of the apparent power in the worst of {} instants checked", rec.Value("balance", "worst_share_of_apparent_power", "1"), rec.Value("balance", "intervals_and_steps_checked", "1"))},
		{"Start", Plain(r.began())},
	}}
	s.Blocks = append(s.Blocks, facts)
	if rec.Coarse.TooCoarse {
		text := "This step is too coarse for operations and durations: more than a tenth of the hours outside are settling ones, which come of inputs that jump from step to step"
		if len(rec.Coarse.Regulators) > 0 {
			text = "This step is too coarse for operations and durations: from step to step the voltage changes by more than the bandwidth at " + joined(rec.Coarse.Regulators)
		}
		s.Blocks = append(s.Blocks, Finding{Bad: true, Text: Plain(text + ". Run with a finer step before these counts are used.")})
	} else {
		s.Blocks = append(s.Blocks, Paragraph{Plain("By the two usual signs (settling hours against the hours outside, and the voltage's change from step to step against each regulator's bandwidth) the step is fine enough for operations and durations.")})
	}
	if len(rec.Hunting) > 0 {
		first := rec.Hunting[0]
		s.Blocks = append(s.Blocks, Finding{Bad: true, Text: Plain(count(len(rec.Hunting), "instant", "instants") + " at which a device was found hunting; the first " + first.Device + ", " + Number(first.Time, "time", "").Show + ".")})
	}
	return s
}

// dataSection adds to what the record says of the inputs what was mended in meters.
func (r *runReport) dataSection() Section {
	if r.mended == nil || len(r.mended.Rows) == 0 {
		return r.record.DataSection()
	}
	most := r.order(r.mended, func(i int) float64 {
		n, err := strconv.ParseFloat(r.mended.Cell(i, "values"), 64)
		if err != nil {
			return 0
		}
		return n
	}, 2*listed)
	t := r.mended.Table("Meters: what the rules of validation and editing did", existing(r.mended, "meter", "rule", "from", "to", "values", "energy added"), most, "from", "to")
	for i, row := range most {
		t.Rows[i][2], t.Rows[i][3] = r.mended.Time(row, "from"), r.mended.Time(row, "to")
	}
	total := SourceOf("mended.csv", "values", "*")
	t.Note = Say(shown(len(most), len(r.mended.Rows), "mended.csv")+" Values edited or doubted in all: {}.", Number(r.mended.sum("values"), "1", total))
	s := r.record.DataSection()
	s.Blocks = append([]Block{t}, s.Blocks...)
	return s
}

func (r *runReport) began() string {
	if r.record.Begins == "given" {
		return "from the positions in the tables, as they are"
	}
	text := "settled: controls acted on the first step's inputs until nothing asked; those actions are not counted"
	if len(r.record.StillMoving) > 0 {
		text += ". After 24 h of event time still moving: " + joined(r.record.StillMoving)
	}
	return text
}

func joined(names []string) string {
	text := ""
	for i, n := range names {
		if i > 0 {
			text += ", "
		}
		text += n
	}
	return text
}
