package study

import (
	"fmt"
	"math"
	"time"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// Screen is a row of screens.csv: the units behind a place against the load behind it.
type Screen struct {
	Screen, Section string
	Base, With      float64 // kW of the units behind it
	Reference       float64 // kW
	When            string  // of the reference
	BaseShare       float64 // %
	WithShare       float64 // %
	Limit           float64 // %
	Source          string
	Verdict         Verdict
	Margin          float64 // %
}

// lineSection is a part of the feeder behind an element that can part it.
type lineSection struct {
	name  string
	nodes map[int]bool
}

// lineSections are the whole feeder, and what lies behind every regulator bank and
// closed switch that nothing else feeds. The tables know no reclosers or fuses, which
// bound the line sections of the screens as they are written.
func lineSections(m *feeder.Model) []lineSection {
	type edge struct{ to, id int }
	next := make([][]edge, len(m.Nodes))
	id := 0
	join := func(a, b int) int {
		next[a], next[b] = append(next[a], edge{b, id}), append(next[b], edge{a, id})
		id++
		return id - 1
	}
	for i := range m.Sections {
		join(m.Sections[i].From, m.Sections[i].To)
	}
	for i := range m.Transformers {
		join(m.Transformers[i].From, m.Transformers[i].To)
	}
	type cut struct {
		name           string
		from, to, edge int
	}
	var cuts []cut
	for i := range m.Regulators {
		r := &m.Regulators[i]
		cuts = append(cuts, cut{"behind regulator " + r.Name, r.From, r.To, join(r.From, r.To)})
	}
	for i := range m.Switches {
		if s := &m.Switches[i]; s.Closed {
			cuts = append(cuts, cut{"behind switch " + s.Name, s.From, s.To, join(s.From, s.To)})
		}
	}
	reach := func(start, without int) map[int]bool {
		seen := map[int]bool{start: true}
		for queue := []int{start}; len(queue) > 0; queue = queue[1:] {
			for _, e := range next[queue[0]] {
				if e.id != without && !seen[e.to] {
					seen[e.to] = true
					queue = append(queue, e.to)
				}
			}
		}
		return seen
	}
	all := map[int]bool{}
	for i := range m.Nodes {
		all[i] = true
	}
	out := []lineSection{{"the feeder", all}}
	for _, c := range cuts {
		behind := reach(c.to, c.edge)
		fed := false
		for i := range m.Sources {
			fed = fed || behind[m.Sources[i].Node]
		}
		if fed { // of a switch either end may be the source's
			behind, fed = reach(c.from, c.edge), false
			for i := range m.Sources {
				fed = fed || behind[m.Sources[i].Node]
			}
		}
		if !fed {
			out = append(out, lineSection{c.name, behind})
		}
	}
	return out
}

// The hours of the day in which fixed panels deliver; local time.
const (
	dayFrom = 10
	dayTo   = 16
)

// sectionWatch is a recorder of the load behind every line section at the ends of ok
// steps: its peak, its least, and its least by day.
type sectionWatch struct {
	sections []lineSection
	loads    [][]int // by section, into State.Load
	chargers [][]int
	zone     *time.Location
	peak     []extreme // kW
	least    []extreme
	daytime  []extreme
}

type extreme struct {
	kW float64
	at int64
}

func newSectionWatch(e *sim.Engine) *sectionWatch {
	m := e.Study.Model
	w := &sectionWatch{sections: lineSections(m), zone: e.Study.Settings.Period.Zone}
	if w.zone == nil {
		w.zone = time.UTC
	}
	for _, s := range w.sections {
		var loads, chargers []int
		for i := range m.Loads {
			if s.nodes[m.Loads[i].Node] {
				loads = append(loads, i)
			}
		}
		for i := range m.Chargers {
			if s.nodes[m.Chargers[i].Node] {
				chargers = append(chargers, i)
			}
		}
		w.loads, w.chargers = append(w.loads, loads), append(w.chargers, chargers)
		w.peak = append(w.peak, extreme{math.Inf(-1), 0})
		w.least = append(w.least, extreme{math.Inf(1), 0})
		w.daytime = append(w.daytime, extreme{math.Inf(1), 0})
	}
	return w
}

func (w *sectionWatch) Interval(*results.Interval) error { return nil }
func (w *sectionWatch) Action(*results.Action) error     { return nil }

func (w *sectionWatch) Step(s *results.Step) error {
	if s.Status != results.OK || s.Last == nil {
		return nil
	}
	hour := time.Unix(0, s.Start).In(w.zone).Hour()
	for i := range w.sections {
		kW := 0.0
		for _, k := range w.loads[i] {
			kW += real(s.Last.Load[k]) / 1000
		}
		for _, k := range w.chargers[i] {
			kW += real(s.Last.Charging[k]) / 1000
		}
		if kW > w.peak[i].kW {
			w.peak[i] = extreme{kW, s.Start}
		}
		if kW < w.least[i].kW {
			w.least[i] = extreme{kW, s.Start}
		}
		if hour >= dayFrom && hour < dayTo && kW < w.daytime[i].kW {
			w.daytime[i] = extreme{kW, s.Start}
		}
	}
	return nil
}

// The screens. Source: the fast-track and supplemental review screens of the small
// generator interconnection procedures of the U.S. Federal Energy Regulatory Commission
// (Order 792, 2013): aggregate generation at most 15 % of the line section's annual peak
// load; at most 100 % of its minimum load, in the hours in which the generation delivers
// (solar without tracking: 10:00 to 16:00). Recalled from memory.
const (
	peakScreen       = 15.0
	minimumScreen    = 100.0
	peakScreenText   = "15 % of the peak load"
	daytimeText      = "100 % of the minimum daytime load"
	minimumText      = "100 % of the minimum load"
	peakScreenSource = "FERC small generator interconnection procedures, fast-track screen (recalled from memory)"
	minimumSource    = "FERC small generator interconnection procedures, supplemental review (recalled from memory)"
)

// screens holds the units behind every line section that has one of the case against the
// load of the base there.
func (im *impacting) screens() {
	c := clock{im.base.Settings.Period.Zone}
	solar := true
	for _, u := range im.Units {
		solar = solar && u.Kind == "solar"
	}
	for i, s := range im.loads.sections {
		if !holdsUnit(im.with.Model, im.own, s.nodes) {
			continue
		}
		base, with := aggregate(im.base, s.nodes), aggregate(im.with, s.nodes)
		im.Screens = append(im.Screens, screen(peakScreenText, s.name, base, with, im.loads.peak[i], peakScreen, peakScreenSource, c))
		if solar {
			im.Screens = append(im.Screens, screen(daytimeText, s.name, base, with, im.loads.daytime[i], minimumScreen, minimumSource, c))
		} else {
			im.Screens = append(im.Screens, screen(minimumText, s.name, base, with, im.loads.least[i], minimumScreen, minimumSource, c))
		}
	}
}

func screen(text, section string, base, with float64, ref extreme, limit float64, source string, c clock) Screen {
	s := Screen{Screen: text, Section: section, Base: base, With: with, Reference: ref.kW, Limit: limit, Source: source, BaseShare: nan, WithShare: nan, Margin: nan, Verdict: NoValue}
	if ref.kW > 0 && !math.IsInf(ref.kW, 0) {
		s.When = c.text(ref.at)
		s.BaseShare, s.WithShare = 100*base/ref.kW, 100*with/ref.kW
		s.Margin = limit - s.WithShare
		s.Verdict = Passes
		if s.Margin < -slack {
			s.Verdict = Fails
		}
	} else {
		s.Reference = nan
	}
	return s
}

// aggregate is the rating of all generators and batteries at some nodes, kW.
func aggregate(st *feeder.Study, nodes map[int]bool) (kW float64) {
	for i := range st.Model.Generators {
		if g := &st.Model.Generators[i]; nodes[g.Node] {
			kW += ratedKW(g) * st.Settings.ScaleGeneration
		}
	}
	for i := range st.Model.Batteries {
		if b := &st.Model.Batteries[i]; nodes[b.Node] {
			kW += b.KW
		}
	}
	return kW
}

func holdsUnit(m *feeder.Model, u units, nodes map[int]bool) bool {
	for i := range m.Generators {
		if u.generators[m.Generators[i].Name] && nodes[m.Generators[i].Node] {
			return true
		}
	}
	for i := range m.Batteries {
		if u.batteries[m.Batteries[i].Name] && nodes[m.Batteries[i].Node] {
			return true
		}
	}
	return false
}

// ReverseRow is a row of reverse.csv.
type ReverseRow struct {
	Place, Mode            string
	Base, With, Difference float64 // hours
	BaseMost, WithMost     float64 // kW
	When                   string
	Note                   string
}

func (im *impacting) reverse() {
	c := clock{im.base.Settings.Period.Zone}
	for i, r := range im.w.reverse {
		row := ReverseRow{Place: r.place, With: r.hours, WithMost: r.most, Base: nan, BaseMost: nan}
		for _, b := range im.b.reverse {
			if b.place == r.place {
				row.Base, row.BaseMost = b.hours, b.most
			}
		}
		row.Difference = difference(row.Base, row.With)
		if r.hours > 0 {
			row.When = c.text(r.at)
		}
		row.Note = "the substation's transformer, meters and relays must be fit for it"
		if i > 0 {
			mode := reverseMode(&im.with.Model.Regulators[i-1])
			row.Mode, row.Note = mode.String(), reverseNotes()[mode]
		}
		if r.hours == 0 {
			row.Note = "no reverse power"
		}
		im.Reverse = append(im.Reverse, row)
	}
}

// reverseNotes say what each mode makes of reverse power from units behind the bank;
// common practice.
func reverseNotes() map[feeder.ReverseMode]string {
	return map[feeder.ReverseMode]string{
		feeder.ReverseNone:    "the control ignores direction and goes on regulating the load side; its compensator takes the reversed current as it is",
		feeder.ForwardOnly:    "the control holds while power flows back: nothing regulates then",
		feeder.ReverseOnly:    "the control acts only on reverse flow",
		feeder.ReverseIdle:    "the control holds while power flows back: nothing regulates then",
		feeder.ReverseFollow:  "the control regulates the source's side while units feed back, where the source holds the voltage: it runs to a limit and takes the units' side with it",
		feeder.ReverseNeutral: "the bank runs to neutral while units feed back",
		feeder.ReverseStay:    "the control stays with the load side, by its reverse settings: meant for units behind it",
	}
}

// ChangeRow is a row of rvc.csv: the largest rapid voltage change at one node.phase.
type ChangeRow struct {
	Event, Direction, Node, Phase string
	NominalKV                     float64
	Base, With                    float64 // %, signed
	Difference                    float64
	When                          string // of With
	Limit                         float64
	Verdict                       Verdict
	Margin                        float64
}

func (im *impacting) changes() {
	c := clock{im.base.Settings.Period.Zone}
	for _, ev := range []string{allEvent, largestEvent, caseEvent} {
		for _, d := range []struct {
			word string
			b, w map[string]*jump
		}{{"loss", im.lossB, im.lossW}, {"return", im.backB, im.backW}} {
			w, b := d.w[ev], d.b[ev]
			if w == nil {
				continue
			}
			for i := range w.points {
				p := &w.points[i]
				r := ChangeRow{Event: ev, Direction: d.word, Node: im.with.Model.Nodes[p.Node].Name, Phase: p.Phase, NominalKV: p.NomKV, With: w.worst[i].percent, Limit: changeLimit(p)}
				if b != nil && i < len(b.worst) {
					r.Base = b.worst[i].percent
				}
				if r.With != 0 {
					r.When = c.text(w.worst[i].at)
				}
				r.Difference, r.Margin, r.Verdict = difference(r.Base, r.With), r.Limit-math.Abs(r.With), Passes
				if r.Margin < -slack {
					r.Verdict = Fails
				}
				im.Changes = append(im.Changes, r)
			}
		}
	}
}

// cautions lists what a reader must know before trusting the report.
func (im *impacting) cautions() {
	add := func(format string, args ...any) { im.Cautions = append(im.Cautions, fmt.Sprintf(format, args...)) }
	for _, t := range []*trial{im.b, im.w} {
		if n := t.number("low steps") + t.number("unsolved steps"); n > 0 {
			add("%s: %g steps are low or unsolved; nothing of them is in any number here", t.name, n)
		}
		for _, r := range t.outcome.CoarseAt {
			add("%s: the step is too coarse for operations and durations at %s: the voltage moves by more than its bandwidth from step to step", t.name, r)
		}
	}
	if text := fewSteps(im.base); text != "" {
		add("%s", text)
	}
	if other := im.otherSteps(im.b, im.w); other {
		add("other steps are low or unsolved with the units than in the base: the two and their difference are over different times")
	}
	for i := range im.variants {
		if m := &im.variants[i]; m.run != nil && im.otherSteps(im.w, m.run) {
			add("remedy %s: other steps are low or unsolved than without it: the two are over different times", m.Name)
		}
	}
	skipped := 0
	for _, of := range []map[string]*jump{im.lossB, im.lossW, im.backB, im.backW} {
		for _, ev := range []string{allEvent, largestEvent, caseEvent} {
			if j := of[ev]; j != nil {
				skipped += j.skipped
			}
		}
	}
	if skipped > 0 {
		add("in %d sudden losses or returns no solution was found after the change: they count as neither pass nor fail", skipped)
	}
	if len(im.with.Model.Batteries) > 0 {
		add("batteries follow their dispatch; a sudden loss is that of what they deliver or draw at the end of a step")
	}
	if im.base.Settings.Limits.Allowance != 0 {
		add("hours outside the limits are those at the meters, after the allowance of %g V; highest and lowest voltages are those at the nodes", im.base.Settings.Limits.Allowance)
	}
	add("inside a step the output is constant: changes of output within a step, and their flicker, are not studied")
}

// otherSteps tells whether two runs have another number of low or of unsolved steps.
func (im *impacting) otherSteps(a, b *trial) bool {
	return a.number("low steps") != b.number("low steps") || a.number("unsolved steps") != b.number("unsolved steps")
}

// few is the number of steps below which a period says little of a year.
const few = 24

// fewSteps warns of a short period; blank where it is long enough.
func fewSteps(st *feeder.Study) string {
	n := st.Settings.Period.Steps()
	switch {
	case n == 1:
		return "the period has a single step: hours, operations and extremes are those of no year"
	case n < few:
		return fmt.Sprintf("the period has %d steps: hours, operations and extremes of so few are those of no year", n)
	}
	return ""
}
