package plots

import (
	"fmt"
	"slices"
	"strings"
)

// lossesDocument is the annual loss estimate while it is made.
type lossesDocument struct {
	*severalRuns
	month, kind, element, factor, worth, cautions *Ledger
	marginal, saving                              *Ledger // nil: none
}

// LossesDocument makes the annual loss estimate of a folder that study.LossEstimate
// wrote, from its tables alone, and draws its figures into figures below it.
func LossesDocument(dir string) (*Document, error) {
	s, err := readSeveral(dir, "losses")
	if err != nil {
		return nil, err
	}
	l := &lossesDocument{severalRuns: s, month: s.ledger("losses-by-month.csv", 1), kind: s.ledger("losses-by-kind.csv", 1), element: s.ledger("losses-by-element.csv", 2),
		factor: s.ledger("loss-factor.csv", 2), worth: s.ledger("worth.csv", 1), cautions: s.ledger("cautions.csv", 1)}
	if _, there := s.record.Files["marginal.csv"]; there {
		l.marginal = s.ledger("marginal.csv", 1)
	}
	if _, there := s.record.Files["saving.csv"]; there {
		l.saving = s.ledger("saving.csv", 1)
	}
	if s.err != nil {
		return nil, s.err
	}
	d := &Document{Kind: "Annual loss estimate", Title: s.record.Title, Subtitle: s.period(), Demo: s.record.Demo, Case: "base"}
	if c := s.said("case"); c != "" {
		d.Case = "base and " + c
	}
	if d.Lead, err = l.lead(); err != nil {
		return nil, err
	}
	d.Sections = append(d.Sections, l.whenAndWhat())
	where, err := l.where()
	if err != nil {
		return nil, err
	}
	d.Sections = append(d.Sections, where, l.factorSection())
	if l.marginal != nil {
		m, err := l.marginalSection()
		if err != nil {
			return nil, err
		}
		d.Sections = append(d.Sections, m)
	}
	d.Sections = append(d.Sections, l.worthSection())
	if l.saving != nil {
		d.Sections = append(d.Sections, l.savingSection())
	}
	items := []Text{}
	for i := range l.cautions.Rows {
		text := l.cautions.Cell(i, "caution")
		if c := l.cautions.Cell(i, "case"); c != "" {
			text = "Case " + c + ": " + text
		}
		items = append(items, Plain(text))
	}
	d.Sections = append(d.Sections, Section{Heading: "Cautions", Blocks: []Block{Caution{Title: "Of this estimate", Items: items}}}, s.sources())
	return d, s.err
}

// money lists the columns of a table that hold money.
func (l *lossesDocument) money(t *Ledger) (out []string) {
	for _, h := range t.Header {
		if strings.Contains(unitOf(h), l.said("currency")) && l.said("currency") != "" {
			out = append(out, h)
		}
	}
	return out
}

func (l *lossesDocument) lead() ([]Block, error) {
	all := l.kind.Row("all")
	out := []Block{Finding{Text: Say("The feeder loses {} in the period, {} of the energy supplied (source and generation).",
		l.kind.Value(all, "energy [kWh]"), l.kind.Value(all, "share of energy supplied [%]"))}}
	if row := l.worth.Row("cost of losses a year"); row >= 0 {
		text, values := "That costs {} a year", []Value{l.worth.Value(row, "value")}
		if pw := l.worth.Row("present worth of the losses"); pw >= 0 {
			text += "; its present worth over {} at {} a year is {}"
			values = append(values, l.worth.Value(l.worth.Row("years"), "value"), l.worth.Value(l.worth.Row("rate a year"), "value"), l.worth.Value(pw, "value"))
		}
		out = append(out, Finding{Text: Say(text+".", values...)})
	}
	if t := l.said("unpriced"); t != "" {
		out = append(out, Paragraph{Plain("The study gives no price of " + t + " in [prices], so the tables hold no money of it.")})
	}
	if l.saving != nil {
		row := l.saving.Row("all")
		out = append(out, Finding{Text: Say("Case "+l.said("case")+" saves {} of them, {}.", l.saving.Value(row, "saved [kWh]"), l.saving.Value(row, "saved [%]"))})
	}
	st := newStyle(200)
	p, f := l.monthFigure(st)
	b, err := l.picture(p, f)
	if err != nil {
		return nil, err
	}
	return append(out, b, Disclaimer()), nil
}

func (l *lossesDocument) whenAndWhat() Section {
	kind := l.kind.Table("Losses of the period by kind", append([]string{"kind", "energy [kWh]", "share of losses [%]", "share of energy supplied [%]", "peak [kW]", "peak time", "sum at monthly peaks [kW]"}, l.money(l.kind)...), nil)
	kind.Note = Plain("Service: sections of triplex, or behind a centre-tapped transformer. Transformer no-load losses move with the square of the voltage. The sum at monthly peaks is that of the losses at the instant of each month's charged peak: times the price of demand it is the cost of demand.")
	month := l.month.Table("Losses by month", append([]string{"month", "energy supplied [kWh]", "losses [kWh]", "share of energy supplied [%]", "line [kWh]", "service [kWh]", "transformer load [kWh]", "transformer no-load [kWh]", "regulator [kWh]", "losses at peak [kW]"}, l.money(l.month)...), nil)
	month.Note = Plain("The base of the share is the energy of the source and of generation in the month.")
	return Section{Heading: "Losses by kind and by month", Blocks: []Block{kind, month}}
}

// shownElements is how many elements are listed.
const shownElements = 20

func (l *lossesDocument) where() (Section, error) {
	n := min(shownElements, len(l.element.Rows))
	rows := make([]int, n)
	for i := range rows {
		rows[i] = i
	}
	s := Section{Heading: "Where the losses are"}
	if n > 0 {
		s.Blocks = append(s.Blocks, Paragraph{Say(fmt.Sprintf("The first %d of %d rows of losses-by-element.csv make {} of all losses.", n, len(l.element.Rows)), l.element.Value(n-1, "share of it and those before [%]"))})
	}
	// The table goes first: its rows fill the page that the figure would leave empty.
	t := l.element.Table(fmt.Sprintf("The %d elements that lose most", n), append([]string{"element", "kind", "rank", "energy [kWh]", "share [%]", "share of it and those before [%]"}, l.money(l.element)...), rows)
	t.Note = Plain("A transformer has a row for its load losses and one for its no-load losses. All elements: losses-by-element.csv.")
	s.Blocks = append(s.Blocks, t)
	if n > 0 {
		p, f := l.elementFigure(newStyle(200), rows)
		b, err := l.picture(p, f)
		if err != nil {
			return s, err
		}
		s.Blocks = append(s.Blocks, b)
	}
	return s, nil
}

func (l *lossesDocument) factorSection() Section {
	t := l.factor.Table("Loss factor and equivalent hours", []string{"losses", "method", "energy [kWh]", "peak [kW]", "load factor", "loss factor", "equivalent hours [h]", "off by [%]"}, nil)
	t.Note = Plain("Load factor: mean over peak of the source's real power. The formulas are for losses that go with the square of the load, so they stand beside the losses without no-load losses; generation on the feeder and taps take from them what they have.")
	s := Section{Heading: "Loss factor, exact and by the usual formulas"}
	best, worst := -1, -1
	off := func(i int) float64 { return abs(numberIn(l.factor.Cell(i, "off by [%]"))) }
	for i := range l.factor.Rows {
		if l.factor.Cell(i, "off by [%]") == "" {
			continue
		}
		if best < 0 || off(i) < off(best) {
			best = i
		}
		if worst < 0 || off(i) > off(worst) {
			worst = i
		}
	}
	if best >= 0 {
		s.Blocks = append(s.Blocks, Paragraph{Say("Of the formulas the nearest, {}, is off by {}, the farthest, {}, by {}.", l.factor.Name(best, "method"), l.factor.Value(best, "off by [%]"),
			l.factor.Name(worst, "method"), l.factor.Value(worst, "off by [%]"))})
	}
	s.Blocks = append(s.Blocks, t)
	var sources []Text
	for i := range l.factor.Rows {
		if l.factor.Cell(i, "off by [%]") != "" || i == 0 {
			sources = append(sources, Plain(l.factor.Cell(i, "method")+": "+l.factor.Cell(i, "source")+"."))
		}
	}
	s.Blocks = append(s.Blocks, List{Items: sources})
	return s
}

func abs(x float64) float64 {
	if x < 0 {
		return -x
	}
	return x
}

func (l *lossesDocument) marginalSection() (Section, error) {
	s := Section{Heading: "Marginal losses and the value of a kW saved"}
	n := len(l.marginal.Rows)
	if n == 0 {
		s.Blocks = []Block{Paragraph{Plain("No sampled step could be solved.")}}
		return s, nil
	}
	s.Blocks = append(s.Blocks, Paragraph{Plain("Marginal losses are what a kW more at a place adds to the losses of the feeder. Losses that go with the square of the load cost at the margin about twice their average share.")},
		Paragraph{Plain("How: " + l.said("marginal") + ". Devices stand still, other loads answer the voltage as their ZIP says; the power is added at unity power factor, shared over the node's phases.")})
	figures, err := l.marginalFigures(newStyle(200))
	if err != nil {
		return s, err
	}
	rows := make([]int, 0, 2*shownElements)
	for i := range n {
		if i < shownElements || i >= n-5 {
			rows = append(rows, i)
		}
	}
	caption := "Marginal losses by place"
	if len(rows) < n {
		caption = fmt.Sprintf("Marginal losses by place: the %d highest and the 5 lowest of %d", shownElements, n)
	}
	money := l.money(l.marginal)
	var losses []string
	for _, h := range l.marginal.Header {
		if !slices.Contains(money, h) && !slices.Contains(mapColumns, headOf(h)) {
			losses = append(losses, h)
		}
	}
	s.Blocks = append(s.Blocks, l.marginal.Table(caption, losses, slices.Clip(rows), "phases"))
	s.Blocks = append(s.Blocks, figures...)
	if len(money) == 0 {
		return s, nil
	}
	t := l.marginal.Table("Value of a kW saved all year at the same places", append([]string{"node"}, money...), slices.Clip(rows))
	t.Note = Plain("The value of a kW saved all year: its energy and the losses that it saves, at the price of the step; its demand and the losses at the charged peak of each month. All places: marginal.csv.")
	s.Blocks = append(s.Blocks, t)
	return s, nil
}

// mapColumns of marginal.csv say where a place stands, and are for the figure.
var mapColumns = []string{"fed from", "x", "y", "longitude", "latitude"}

func (l *lossesDocument) worthSection() Section {
	s := Section{Heading: "Worth"}
	if len(l.worth.Rows) < 2 {
		s.Blocks = []Block{Paragraph{Plain("There are no prices in study.toml, so there is no money to tell: [prices] energy, demand, rate and years.")}}
		return s
	}
	s.Blocks = []Block{l.worth.Table("Prices, cost a year and present worth", []string{"item", "value", "unit", "how"}, nil, "unit", "how")}
	return s
}

func (l *lossesDocument) savingSection() Section {
	t := l.saving.Table("Losses of the base less those of the case, by kind", nil, nil)
	t.Note = Plain("Negative: the case loses more. Present worth: the saving a year times the present worth factor of the table above. What the case costs to build is not in it.")
	return Section{Heading: "What case " + l.said("case") + " saves", Blocks: []Block{t}}
}
