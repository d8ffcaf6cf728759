package plots

import (
	"fmt"
	"slices"
	"strings"
)

// tuneDocument is the report of a search over settings while it is made.
type tuneDocument struct {
	*severalRuns
	tune, settings, weights, limits, search, method, progress, sensitivity, profile, front, candidates, cautions *Ledger
	sheet                                                                                                        *Ledger // nil: none
	aims                                                                                                         int     // columns of front that hold aims
}

// TuneDocument makes the report of a search over settings of a folder that study.Tuning
// wrote, from its tables alone, and draws its figures into figures below it.
func TuneDocument(dir string) (*Document, error) {
	s, err := readSeveral(dir, "tune")
	if err != nil {
		return nil, err
	}
	t := &tuneDocument{severalRuns: s, tune: s.ledger("tune.csv", 1), settings: s.ledger("settings.csv", 3), weights: s.ledger("weights.csv", 1), limits: s.ledger("limits.csv", 1),
		search: s.ledger("search.csv", 1), method: s.ledger("method.csv", 1), progress: s.ledger("progress.csv", 1), sensitivity: s.ledger("sensitivity.csv", 4),
		profile: s.ledger("profile.csv", 5), front: s.ledger("undominated.csv", 1), candidates: s.ledger("candidates.csv", 1), cautions: s.ledger("cautions.csv", 1)}
	if _, there := s.record.Files["sheet.csv"]; there {
		t.sheet = s.ledger("sheet.csv", 3)
	}
	if s.err != nil {
		return nil, fmt.Errorf("%w; run tune again", s.err)
	}
	t.aims = len(t.weights.Rows)
	d := &Document{Kind: "Search over settings", Title: s.record.Title, Subtitle: s.period(), Demo: s.record.Demo, Case: "base"}
	if c := t.said("case"); c != "" {
		d.Case = "base and " + c
	}
	if d.Lead, err = t.lead(); err != nil {
		return nil, err
	}
	d.Sections = append(d.Sections, t.searchedSection())
	for _, make := range []func() (Section, error){t.methodSection, t.bestSection, t.flatSection, t.matterSection, t.tradeSection} {
		sec, err := make()
		if err != nil {
			return nil, err
		}
		d.Sections = append(d.Sections, sec)
	}
	d.Sections = append(d.Sections, t.sheetSection(), t.cautionSection(), t.sourceSection())
	return d, s.err
}

// has tells whether a best was found, and better whether it is to be preferred to the base.
func (t *tuneDocument) has() bool { return t.tune.Cell(0, "best") != "" }

func (t *tuneDocument) better() bool {
	is, _ := t.record.Said["improves"].(bool)
	return is
}

// settingName is a setting in words, of a row of a table with device, phase and setting.
func settingName(l *Ledger, i int) string {
	return joinSetting(l.Cell(i, "device"), l.Cell(i, "phase"), l.Cell(i, "setting"))
}

func joinSetting(device, phase, setting string) string {
	if phase != "" && phase != "all" {
		device += "." + phase
	}
	return device + " " + setting
}

// inSearch is a number of search.csv.
func (t *tuneDocument) inSearch(name string) Value {
	return t.search.Value(t.search.Row(name), "value")
}

// settingValue is the value of a setting as it is entered, with the unit of its row: no
// digit of it is rounded away.
func settingValue(l *Ledger, row int, column string) Value {
	v := l.Name(row, column)
	if v.Source == "" {
		return v
	}
	v.Show = strings.ReplaceAll(v.Show, "-", "\u2212")
	if v.Unit = l.Cell(row, "unit"); v.Unit == "h" {
		v.Unit = "" // a time of day
	}
	return v
}

func (t *tuneDocument) lead() ([]Block, error) {
	out := t.leadFindings()
	p, f := t.bestFigure(newStyle(200))
	if p != nil {
		b, err := t.picture(p, f)
		if err != nil {
			return nil, err
		}
		out = append(out, b)
	}
	return append(out, Disclaimer()), nil
}

func (t *tuneDocument) leadFindings() []Block {
	years := t.inSearch("candidate-years")
	if !t.has() {
		return []Block{Finding{Text: Say("No candidate within the bounds was evaluated ({} candidate-years, that of the base among them): nothing is known but the base. Raise the budget, or look at the bounds.", years), Bad: true}}
	}
	var out []Block
	broken := t.tune.Cell(0, "kept by the best") == "no"
	switch {
	case broken:
		out = append(out, Finding{Text: Say("None of the candidates keeps all limits ({} candidate-years). The one shown breaks them least.", years), Bad: true})
	case !t.better():
		out = append(out, Finding{Text: Say("None of {} candidate-years is better than the base, whose score is {}: nothing is to be changed.", years, t.tune.Value(0, "base"))})
	default:
		out = append(out, Finding{Text: Say("The best of {} candidate-years has a score of {}, the base {}: a change of {}. Less is better.", years, t.tune.Value(0, "best"), t.tune.Value(0, "base"), t.tune.Value(0, "change [%]"))})
	}
	if names := t.brokenBy("base"); len(names) > 0 && !broken {
		out = append(out, Finding{Text: Plain("The base breaks what the best keeps: " + strings.Join(names, "; ") + "."), Bad: true})
	}
	if t.better() {
		out = append(out, Paragraph{t.changes()})
		if names := t.onBound(); len(names) > 0 {
			out = append(out, Finding{Text: Plain("The best lies on a bound of " + joined(names) + ": a better one may lie beyond. Where the bounds are not those of the equipment or of the standard, widen them and search again."), Bad: true})
		}
	}
	return out
}

// onBound names the settings whose best value is the first or the last that was allowed.
func (t *tuneDocument) onBound() (names []string) {
	for i := range t.sensitivity.Rows {
		if t.sensitivity.Cell(i, "at bound") != "" {
			names = append(names, joinSetting(t.sensitivity.Cell(i, "device"), t.sensitivity.Cell(i, "phase"), t.sensitivity.Cell(i, "setting"))+" ("+t.sensitivity.Cell(i, "at bound")+")")
		}
	}
	return names
}

// brokenBy lists the limits that the base or the best breaks.
func (t *tuneDocument) brokenBy(of string) (out []string) {
	for i := range t.limits.Rows {
		if t.limits.Cell(i, "kept by the "+of) == "no" {
			out = append(out, t.limits.Cell(i, "quantity")+", "+t.limits.Cell(i, "sense")+" "+Text{unitCell(t.limits, i, "value")}.String())
		}
	}
	return out
}

// changes says which settings the best moves, from where to where.
func (t *tuneDocument) changes() Text {
	const most = 6
	var moved []int
	for i := range t.settings.Rows {
		if t.settings.Cell(i, "base") != t.settings.Cell(i, "best") {
			moved = append(moved, i)
		}
	}
	text := Text{Word("The best moves ")}
	for n, i := range moved {
		if n == most {
			break
		}
		if n > 0 {
			text = append(text, Word("; "))
		}
		text = append(text, Say(settingName(t.settings, i)+" from {} to {}", bare(settingValue(t.settings, i, "base")), settingValue(t.settings, i, "best"))...)
	}
	if len(moved) > most {
		text = append(text, Word(fmt.Sprintf(" and %d more", len(moved)-most)))
	}
	if rest := len(t.settings.Rows) - len(moved); rest > 0 {
		text = append(text, Word(fmt.Sprintf("; %s as in the base", count(rest, "setting stays", "settings stay"))))
	}
	return append(text, Word("."))
}

// settingTable is a table of settings, each row of which names its own unit: first
// columns of values of the setting, then others.
func settingTable(l *Ledger, caption string, values []string, others ...string) Table {
	t := Table{Caption: caption, Columns: []Column{{Head: "Setting", Words: true}, {Head: "Unit", Words: true}}}
	for _, c := range append(slices.Clone(values), others...) {
		t.Columns = append(t.Columns, Column{Head: c})
	}
	for i := range l.Rows {
		row := []Value{Word(settingName(l, i)), Word(l.Cell(i, "unit"))}
		for _, c := range values {
			row = append(row, settingValue(l, i, c))
		}
		for _, c := range others {
			row = append(row, l.Value(i, c))
		}
		t.Rows = append(t.Rows, row)
	}
	return t
}

func (t *tuneDocument) searchedSection() Section {
	lead := "The settings below, each on a grid of values from its lowest to its highest in equal steps; all others stand as in the base. Every candidate was judged on the whole period with the controls acting."
	if built, _ := t.record.Said["built in"].(bool); built {
		lead += " study.toml names none in [tune] settings, so these are the set voltages of all regulators, the units of a bank alike."
	}
	settings := settingTable(t.settings, "Settings and their bounds", []string{"low", "high", "step", "base", "best"})
	settings.Note = Plain("Of a device with several phases the setting holds for all, unless it names one. A base outside the bounds or between the steps is no candidate.")
	aims := t.weights.Table("Aims: the score is the sum of weight times quantity", []string{"quantity", "unit", "weight", "source"}, nil, "unit", "source")
	aims.Note = Plain("Less is better. The weights are the reader's to choose; another choice may have another best.")
	for i := range aims.Rows {
		aims.Rows[i][1], aims.Rows[i][2] = Word(shownUnit(t.weights.Cell(i, "unit"))), t.weights.Name(i, "weight")
	}
	s := Section{Heading: "What was searched, for what, within which limits", Blocks: []Block{Paragraph{Plain(lead)}, settings, aims}}
	if !t.has() || len(t.brokenBy("base")) > 0 {
		s.Blocks = append(s.Blocks, t.verdicts("base"))
	}
	if t.has() {
		s.Blocks = append(s.Blocks, t.verdicts("best"))
	}
	return s
}

// verdicts says how the base or the best keeps the limits.
func (t *tuneDocument) verdicts(of string) Verdicts {
	v := Verdicts{Caption: "Limits, and how the " + of + " keeps them"}
	for i := range t.limits.Rows {
		r := Verdict{Criterion: t.limits.Cell(i, "quantity") + ", " + t.limits.Cell(i, "sense"), Value: unitCell(t.limits, i, of), Limit: unitCell(t.limits, i, "value"),
			Margin: unitCell(t.limits, i, "margin of the "+of), Source: t.limits.Cell(i, "from")}
		if t.limits.Cell(i, "kept by the "+of) == "no" {
			r.Result = Fail
		}
		v.Rows = append(v.Rows, r)
	}
	v.Note = Plain("A candidate that keeps all limits is preferred to one that does not, whatever their scores.")
	return v
}

func (t *tuneDocument) methodSection() (Section, error) {
	s := Section{Heading: "How it was searched, and how far"}
	s.Blocks = append(s.Blocks, Paragraph{Plain("Method: " + t.said("method") + ".")})
	if i := t.method.Row("evolution"); i >= 0 && t.method.Cell(i, "candidates") == "0" {
		s.Blocks = append(s.Blocks, Finding{Text: Plain("The budget left no room for the evolution: what was found comes from the other parts alone, and a better one may lie farther off."), Bad: true})
	}
	s.Blocks = append(s.Blocks,
		Facts{Rows: []Fact{
			{"Stopped", Plain(t.said("stopped"))},
			{"Seed of the random numbers", Text{t.search.Name(t.search.Row("seed"), "value")}},
			{"Candidate-years evaluated", Say("{} of at most {}", t.inSearch("candidate-years"), t.inSearch("budget"))},
			{"Grid", Say("{} candidates, {} of them evaluated ({})", t.inSearch("candidates of the grid"), t.inSearch("candidates of the grid evaluated"), t.inSearch("share of the grid evaluated"))},
			{"No settings sheet could hold", Say("{} of those asked for, which cost nothing", t.inSearch("candidates that no sheet can hold"))},
			{"All limits kept by", Say("{} of those evaluated", t.inSearch("candidates that keep all limits"))},
			{"Log of all that was evaluated", Plain(t.said("log") + ", beside this folder: a search with a larger budget goes on from it")},
		}})
	p, f := t.progressFigure(newStyle(200))
	b, err := t.picture(p, f)
	if err != nil {
		return s, err
	}
	var parts Facts
	for i := range t.method.Rows {
		text := Say("Candidates: {}. "+upper(t.method.Cell(i, "what")), t.method.Value(i, "candidates"))
		if from := t.method.Cell(i, "source"); from != "" {
			text = append(text, Word(" ("+from+")"))
		}
		parts.Rows = append(parts.Rows, Fact{upper(t.method.Cell(i, "part")), text})
	}
	rules := Paragraph{Plain("Candidates that keep all limits go before those that do not; of two that do not the smaller violation wins (Deb, Computer Methods in Applied Mechanics and Engineering 186, 2000). The same seed, budget and inputs give the same search, on any number of cores and also where it was stopped and taken up again.")}
	steps := t.progress.Table("Each candidate that was the best when it was evaluated", []string{"candidate-years", "candidate", "from", "score", "score less that of the base", "limits kept"}, nil, "from", "limits kept")
	s.Blocks = append(s.Blocks, b, steps, Heading("Parts of the search, and how many candidates each asked for first"), parts, rules)
	return s, nil
}

func (t *tuneDocument) bestSection() (Section, error) {
	s := Section{Heading: "The base against the best"}
	if !t.has() {
		s.Blocks = []Block{Paragraph{Plain("There is no best.")}}
		return s, nil
	}
	x := Table{Caption: "Every quantity that the search counts, over the period", Columns: []Column{{Head: "Quantity", Words: true}, {Head: "Unit", Words: true}, {Head: "Base"}, {Head: "Best"}, {Head: "Change"}, {Head: "Change", Unit: "%"}}}
	parts := Table{Caption: "What the scores are made of", Columns: []Column{{Head: "Quantity", Words: true}, {Head: "Weight"}, {Head: "In the base's score"}, {Head: "In the best's score"}}}
	for i := range t.tune.Rows {
		name := t.tune.Name(i, "quantity")
		x.Rows = append(x.Rows, []Value{name, Word(shownUnit(t.tune.Cell(i, "unit"))), unitCell(t.tune, i, "base"), unitCell(t.tune, i, "best"), unitCell(t.tune, i, "change"), t.tune.Value(i, "change [%]")})
		if t.tune.Cell(i, "part of score of the base") != "" {
			parts.Rows = append(parts.Rows, []Value{name, t.tune.Name(i, "weight"), t.tune.Value(i, "part of score of the base"), t.tune.Value(i, "part of score of the best")})
		}
	}
	if n := len(parts.Rows); n > 1 {
		parts.Rows = append(parts.Rows[1:], parts.Rows[0]) // the sum below its parts
	}
	x.Note = Plain("Settled intervals of solved steps count. Limits of voltage: " + t.said("limits") + ". A quantity without a weight or a limit was not looked at: hold the case against the base with compare before it is used.")
	s.Blocks = []Block{parts, x}
	return s, nil
}

func (t *tuneDocument) flatSection() (Section, error) {
	s := Section{Heading: "How flat the optimum is"}
	if !t.has() {
		s.Blocks = []Block{Paragraph{Plain("There is no best whose surroundings could be shown.")}}
		return s, nil
	}
	s.Blocks = append(s.Blocks, Paragraph{Say("As good as the best is a candidate whose score is "+t.said("as good is")+", at most {}, and that breaks the limits no more than the best does: {} of all evaluated are, the best among them. Within that, comfort, wear or what is set today may decide.",
		t.inSearch("highest score as good as the best"), t.inSearch("candidates as good as the best"))})
	p, f := t.profileFigure(newStyle(200))
	if p != nil {
		b, err := t.picture(p, f)
		if err != nil {
			return s, err
		}
		s.Blocks = append(s.Blocks, b)
	}
	one := settingTable(t.sensitivity, "One setting at a time, all others at the best", []string{"best", "flat from", "flat to"}, "points")
	one.Note = Plain("Flat from and to: the values around the best over which every value that was evaluated is as good as the best. Points: how many values were evaluated; with one nothing is known but the best itself.")
	free := settingTable(t.settings, "All settings free: where the candidates lie that are as good as the best", []string{"lowest as good", "best", "highest as good"})
	free.Note = Plain("Not every combination of values within these is as good.")
	s.Blocks = append(s.Blocks, one, free)
	return s, nil
}

func (t *tuneDocument) matterSection() (Section, error) {
	s := Section{Heading: "Which settings matter"}
	if len(t.sensitivity.Rows) == 0 {
		s.Blocks = []Block{Paragraph{Plain("There is no best whose surroundings could tell.")}}
		return s, nil
	}
	p, f := t.matterFigure(newStyle(200))
	if p != nil {
		b, err := t.picture(p, f)
		if err != nil {
			return s, err
		}
		s.Blocks = append(s.Blocks, b)
	} else {
		s.Blocks = append(s.Blocks, Paragraph{Plain("The budget was spent before any setting was varied alone: nothing is known of which settings matter.")})
	}
	x := settingTable(t.sensitivity, "What one setting does to the score, all others at the best", nil, "rank", "range of score", "one step down", "one step up", "at bound")
	x.Columns = append(x.Columns[:len(x.Columns)-1], Column{Head: "Best at bound", Words: true})
	for i := range x.Rows {
		x.Rows[i][2] = t.sensitivity.Name(i, "rank")
	}
	x.Note = Plain("Range: the highest score less the lowest of all values of the setting that were evaluated. One step down or up: the change of the score with one step of the grid; a dash: out of bounds, or not evaluated.")
	s.Blocks = append(s.Blocks, x)
	return s, nil
}

// shownFront is how many undominated candidates are listed.
const shownFront = 15

func (t *tuneDocument) tradeSection() (Section, error) {
	s := Section{Heading: "What one aim costs in another"}
	n := len(t.front.Rows)
	switch {
	case n == 0:
		s.Blocks = []Block{Paragraph{Plain("No candidate keeps all limits, so none is undominated.")}}
		return s, nil
	case t.aims == 1:
		s.Blocks = []Block{Paragraph{Plain("There is one aim, " + t.weights.Cell(0, "quantity") + ", so there is nothing to be traded for it.")}}
		return s, nil
	}
	s.Blocks = append(s.Blocks, Paragraph{Say("Undominated are {} of the candidates that keep all limits: no other is as good in every aim and better in one. Which of them to take is a matter of the weights.", t.inSearch("undominated candidates"))})
	p, f := t.tradeFigure(newStyle(200))
	b, err := t.picture(p, f)
	if err != nil {
		return s, err
	}
	s.Blocks = append(s.Blocks, b)
	var rows []int
	for i := range n {
		if i < shownFront || t.front.Cell(i, "note") != "" {
			rows = append(rows, i)
		}
	}
	caption := "Undominated candidates, the lowest score first"
	if len(rows) < n {
		caption = fmt.Sprintf("Undominated candidates: %d of %d, the lowest score first", len(rows), n)
	}
	var columns []string
	columns = append(columns, t.front.Header[0])
	score := slices.Index(t.front.Header, "score")
	columns = append(columns, t.front.Header[score:]...)
	aims := t.front.Table(caption, columns, rows, "note")
	aims.Note = Plain("Their settings stand in undominated.csv, all that was evaluated in candidates.csv.")
	if score <= 7 {
		settings := t.front.Table("Settings of these candidates", append([]string{"candidate"}, append(slices.Clone(t.front.Header[1:score]), "note")...), rows, "note")
		for k, i := range rows {
			for c := 1; c < score; c++ { // settings as they are entered
				settings.Rows[k][c] = t.front.Name(i, t.front.Header[c])
			}
		}
		aims.Note = Plain("All that was evaluated: candidates.csv.")
		s.Blocks = append(s.Blocks, aims, settings)
	} else {
		s.Blocks = append(s.Blocks, aims)
	}
	stake := t.weights.Table("What the aims decide about", []string{"quantity", "range of its part of the score", "range among the undominated"}, nil)
	stake.Note = Plain("The range of weight times quantity over all candidates that keep the limits, and over the undominated of them.")
	s.Blocks = append(s.Blocks, stake)
	return s, nil
}

func (t *tuneDocument) sheetSection() Section {
	s := Section{Heading: "Settings sheet"}
	if t.sheet == nil {
		s.Blocks = []Block{Paragraph{Plain("The best is not better than the base, so there is nothing to enter and no case was written.")}}
		return s
	}
	s.Blocks = append(s.Blocks, Paragraph{Plain("The best is written as case " + t.said("case") + " (its tables stand in the folder case too). Lines marked CHANGE differ from the present sheet; the others are to be found as they stand. File: sheet.csv.")})
	var devices []string
	for _, r := range t.sheet.Rows {
		if !slices.Contains(devices, r[0]) {
			devices = append(devices, r[0])
		}
	}
	for _, d := range devices {
		s.Blocks = append(s.Blocks, deviceSheet(t.sheet, d))
	}
	return s
}

func (t *tuneDocument) cautionSection() Section {
	var items []Text
	for i := range t.cautions.Rows {
		items = append(items, Plain(t.cautions.Cell(i, "caution")))
	}
	return Section{Heading: "Cautions", Blocks: []Block{Caution{Title: "Of this search", Items: items}}}
}

// sourceSection names the inputs and the files by hash. A search keeps no results
// folders of its candidates.
func (t *tuneDocument) sourceSection() Section {
	s := Section{Heading: "Inputs and files by hash"}
	s.Blocks = append(s.Blocks, Paragraph{Plain("Version " + t.record.Version + " of yearflow made the tables; the same inputs, seed, budget and version give the same bytes.")})
	inputs, tables := map[string]string{}, map[string]string{}
	for _, c := range t.record.Cases {
		for f, h := range c.Inputs {
			inputs[f] = h
		}
	}
	for f, h := range t.record.Files {
		if strings.HasSuffix(f, ".csv") || strings.HasPrefix(f, "case/") {
			tables[f] = h
		}
	}
	s.Blocks = append(s.Blocks, hashes("Inputs, in the study's folder", inputs), hashes("Tables of this document, and the case", tables))
	return s
}
