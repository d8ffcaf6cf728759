package study

import (
	"context"
	"errors"
	"fmt"
	"math"
	"runtime"
	"slices"

	"golang.org/x/sync/errgroup"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
	"yearflow/sim/tables"
)

// Impact is the DER impact report of one case: what the generators and batteries that
// it adds to the base, or changes, do to the feeder over the period.
type Impact struct {
	Title, Case string
	Cases       []*Case // the base and the case
	Units       []Unit  // those of the case
	Criteria    []Criterion
	Changes     []ChangeRow
	Reverse     []ReverseRow
	Screens     []Screen
	Mitigations []Mitigation
	Cautions    []string
}

// Unit is a generator or a battery of the case.
type Unit struct {
	Name, Kind, Node string
	KVA, KW          float64
	Changed          bool // the base has it, otherwise
}

// Criterion is a row of impact.csv: the base, the case, the difference, and how the case
// is held against a limit.
type Criterion struct {
	Group, Name, Unit string
	Base, With        float64 // NaN: no value
	Difference        float64
	Limit             float64 // NaN: none
	AtLeast           bool
	Source            string // of the limit
	Verdict           Verdict
	BaseVerdict       Verdict
	Margin            float64
	Where, When       string
}

// ImpactSettings of MakeImpact. The zero value uses all cores.
type ImpactSettings struct {
	// Workers is how many runs are made at once; 0 means GOMAXPROCS. No number depends
	// on it.
	Workers int
	// Begin is told how many steps all runs have together; Watch returns a recorder that
	// sees the steps of one run, on that run's goroutine. Both may be nil.
	Begin func(steps int)
	Watch func() sim.Recorder
}

// NoUnits is the error of a case without a generator or battery of its own.
type NoUnits struct{ Case string }

// Error says what would do instead.
func (n *NoUnits) Error() string {
	return fmt.Sprintf("case %q adds no generator or battery and changes none, so it has no impact to report: put one into cases/%s/generators.csv (or batteries.csv); \"yearflow compare\" holds cases of settings side by side", n.Case, n.Case)
}

// events are what is lost and comes back, in the order of the tables.
const (
	allEvent     = "all units"
	largestEvent = "largest unit"
	caseEvent    = "units of the case"
)

// impacting is an Impact while it is made.
type impacting struct {
	*Impact
	base, with *feeder.Study
	life       Life
	own        units
	set        ImpactSettings
	demo       bool

	loads        *sectionWatch
	b, w         *trial
	lossB, lossW map[string]*jump
	backB, backW map[string]*jump
	walks        baseWalks
	ends         *jump // voltages of the base at the ends of its steps
	variants     []mitigating
}

// MakeImpact makes the report of cases that have been run: the base and the case. An
// error is a tables.Faults or *NoUnits where the input is wrong.
func MakeImpact(ctx context.Context, p Place, cases []*Case, s ImpactSettings) (*Impact, error) {
	base, with := cases[0].Study, cases[1].Study
	im := &impacting{Impact: &Impact{Title: base.Title, Case: with.Case, Cases: cases},
		base: base, with: with, own: newUnitsOf(base, with), set: s, demo: p.Demo,
		lossB: map[string]*jump{}, lossW: map[string]*jump{}, backB: map[string]*jump{}, backW: map[string]*jump{}}
	if im.own.empty() {
		return nil, &NoUnits{with.Case}
	}
	var faults tables.Faults
	life := &Comparison{Life: defaultLife()}
	if life.life(base, &faults); len(faults) > 0 {
		return nil, faults.Err()
	}
	im.life = life.Life
	im.units()
	im.variants = im.mitigations()
	if err := im.run(ctx); err != nil {
		return nil, err
	}
	im.criteria()
	im.changes()
	im.reverse()
	im.screens()
	im.compareMitigations()
	im.cautions()
	return im.Impact, nil
}

func (im *impacting) units() {
	for _, g := range im.with.Model.Generators {
		if im.own.generators[g.Name] {
			im.Units = append(im.Units, Unit{g.Name, g.Kind, im.with.Model.Nodes[g.Node].Name, g.KVA, ratedKW(&g) * im.with.Settings.ScaleGeneration,
				slices.ContainsFunc(im.base.Model.Generators, func(b feeder.Generator) bool { return b.Name == g.Name })})
		}
	}
	for _, b := range im.with.Model.Batteries {
		if im.own.batteries[b.Name] {
			im.Units = append(im.Units, Unit{b.Name, "battery", im.with.Model.Nodes[b.Node].Name, b.KVA, b.KW,
				slices.ContainsFunc(im.base.Model.Batteries, func(x feeder.Battery) bool { return x.Name == b.Name })})
		}
	}
}

// ratedKW is the most that a generator delivers: its constant output where it has one,
// else its rating.
func ratedKW(g *feeder.Generator) float64 {
	if g.Profile == "" && g.Solar == nil && !feeder.Unknown(g.KW) {
		return g.KW
	}
	return g.KVA
}

// returning is a set of units that comes back in a year without them: it jumps to full,
// in the steps in which log has the units do something. set takes the jump.
type returning struct {
	full  *feeder.Study
	log   *activity
	event string
	set   func(*jump)
}

// lonelyYear is a study without some units, and what comes back in it.
type lonelyYear struct {
	study *feeder.Study
	back  []returning
}

// run makes every run: the base and the case; then the remedies, and the years without
// units, which need to know when the units do something.
func (im *impacting) run(ctx context.Context) error {
	logB, logW := &activity{}, &activity{}
	var early, late []lonelyYear
	for _, x := range []struct {
		full *feeder.Study
		log  *activity
		of   map[string]*jump
	}{{im.base, logB, im.backB}, {im.with, logW, im.backW}} {
		for _, ev := range im.events(x.full) {
			if ev.units.empty() {
				continue
			}
			y := lonelyYear{variant(x.full, x.full.Case+" without "+ev.name, ev.units.without),
				[]returning{{x.full, x.log, ev.name, func(j *jump) { x.of[ev.name] = j }}}}
			if x.full == im.with && ev.name == caseEvent {
				late = append(late, y)
			} else {
				early = append(early, y)
			}
		}
	}
	// A remedy that changes the units alone leaves the year without them as it is, so that
	// the units come back with it in the same year; one of settings has its own.
	for i := range im.variants {
		m := &im.variants[i]
		if m.Why != "" {
			continue
		}
		r := returning{m.study, &m.log, caseEvent, func(j *jump) { m.back = j }}
		if m.settings {
			late = append(late, lonelyYear{variant(m.study, m.study.Case+" without "+caseEvent, im.own.without), []returning{r}})
		} else {
			late[0].back = append(late[0].back, r)
		}
	}
	if im.set.Begin != nil {
		im.set.Begin((2 + len(early) + im.tried() + len(late)) * im.base.Settings.Period.Steps())
	}
	if err := im.together(ctx, 2, func(ctx context.Context, i int) (err error) {
		if i == 0 {
			im.b, err = im.full(ctx, im.base, logB, im.lossB)
		} else {
			im.w, err = im.full(ctx, im.with, logW, im.lossW)
		}
		return err
	}); err != nil {
		return err
	}
	jumps := make([][]*jump, len(early)+len(late))
	if err := im.together(ctx, len(early)+len(im.variants), func(ctx context.Context, i int) (err error) {
		if i < len(early) {
			jumps[i], err = im.comeBack(ctx, early[i])
			return err
		}
		return im.mitigate(ctx, &im.variants[i-len(early)])
	}); err != nil {
		return err
	}
	if err := im.together(ctx, len(late), func(ctx context.Context, i int) (err error) {
		jumps[len(early)+i], err = im.comeBack(ctx, late[i])
		return err
	}); err != nil {
		return err
	}
	for i, y := range append(early, late...) {
		for k, r := range y.back {
			r.set(jumps[i][k])
		}
	}
	return nil
}

// together does n things at once, as many as there are workers.
func (im *impacting) together(ctx context.Context, n int, do func(ctx context.Context, i int) error) error {
	g, gctx := errgroup.WithContext(ctx)
	g.SetLimit(im.workers())
	all := make([]error, n)
	for i := range n {
		g.Go(func() error {
			all[i] = do(gctx, i)
			return all[i]
		})
	}
	if err := g.Wait(); err != nil {
		return first(err, all)
	}
	return nil
}

// comeBack runs a year without units and jumps to each study with them.
func (im *impacting) comeBack(ctx context.Context, y lonelyYear) (jumps []*jump, err error) {
	_, err = runTrial(ctx, &im.walks, y.study, im.demo, im.watched(func(e *sim.Engine) (out []sim.Recorder, err error) {
		for _, r := range y.back {
			j, err := newJump(ctx, &im.walks, e, variant(r.full, r.full.Case, nil), im.demo, r.log.active(r.event))
			if err != nil {
				return nil, err
			}
			j.storage = r.log.stored
			jumps, out = append(jumps, j), append(out, j)
		}
		return out, nil
	}))
	return jumps, err
}

// first returns the first error by place that is no consequence of another.
func first(err error, all []error) error {
	for _, e := range all {
		if e != nil && !errors.Is(e, context.Canceled) {
			return e
		}
	}
	return err
}

func (im *impacting) workers() int {
	if im.set.Workers > 0 {
		return im.set.Workers
	}
	return runtime.GOMAXPROCS(0)
}

// watched adds the recorder of the progress.
func (im *impacting) watched(more func(*sim.Engine) ([]sim.Recorder, error)) func(*sim.Engine) ([]sim.Recorder, error) {
	return func(e *sim.Engine) ([]sim.Recorder, error) {
		var out []sim.Recorder
		if more != nil {
			var err error
			if out, err = more(e); err != nil {
				return nil, err
			}
		}
		if im.set.Watch != nil {
			out = append(out, im.set.Watch())
		}
		return out, nil
	}
}

// event is a set of units that is lost and comes back.
type event struct {
	name  string
	units units
}

func (im *impacting) events(st *feeder.Study) []event {
	largest, _ := largestUnit(st.Model)
	out := []event{{allEvent, allUnits(st.Model)}, {largestEvent, largest}}
	if st == im.with {
		out = append(out, event{caseEvent, im.own})
	}
	return out
}

// full runs the base or the case with every loss, and notes when units do something.
func (im *impacting) full(ctx context.Context, st *feeder.Study, log *activity, losses map[string]*jump) (*trial, error) {
	return runTrial(ctx, &im.walks, variant(st, st.Case, nil), im.demo, im.watched(func(e *sim.Engine) ([]sim.Recorder, error) {
		out := []sim.Recorder{log}
		for _, ev := range im.events(st) {
			if ev.units.empty() {
				continue
			}
			does := ev.units.delivers(st.Model)
			j, err := newJump(ctx, &im.walks, e, variant(st, st.Case+" without "+ev.name, ev.units.without), im.demo, does)
			if err != nil {
				return nil, err
			}
			losses[ev.name] = j
			log.add(ev.name, does)
			out = append(out, j)
		}
		if st == im.base {
			im.loads, im.ends = newSectionWatch(e), newEnds(e)
			out = append(out, im.loads, im.ends)
		}
		return out, nil
	}))
}

// activity notes in which steps the units of each event do something, and what every
// battery delivers.
type activity struct {
	positionsLog
	names []string
	does  []func(int, *results.State) bool
	at    [][]bool // by name and step
}

func (a *activity) add(name string, does func(int, *results.State) bool) {
	a.names, a.does, a.at = append(a.names, name), append(a.does, does), append(a.at, nil)
}

func (a *activity) Step(s *results.Step) error {
	for i := range a.names {
		a.at[i] = append(a.at[i], s.Last != nil && a.does[i](0, s.Last))
	}
	return a.positionsLog.Step(s)
}

func (a *activity) active(name string) func(int, *results.State) bool {
	at := a.at[slices.Index(a.names, name)]
	return func(step int, _ *results.State) bool { return at[step] }
}

// stored is what every battery delivers in a step with the units, kW; nil without any.
func (a *activity) stored(step int, _ *results.State) []float64 { return a.storage[step] }

// criteria joins the measures of the base and of the case.
func (im *impacting) criteria() {
	base := im.b.measures(im.life)
	base = append(base, im.jumpMeasures(im.b, im.lossB, im.backB, im.ends)...)
	with := im.w.measures(im.life)
	with = append(with, im.jumpMeasures(im.w, im.lossW, im.backW, im.backW[caseEvent])...)
	for _, m := range with {
		b := measure{value: nan, limit: nan}
		if k := slices.IndexFunc(base, func(x measure) bool { return x.group == m.group && x.name == m.name }); k >= 0 {
			b = base[k]
		}
		im.Criteria = append(im.Criteria, criterion(b, m))
	}
	order := []string{"voltage", "voltage, devices held", "rapid voltage change", "unbalance", "reverse power", "loading", "energy and losses", "operations", "curtailment", "steps"}
	slices.SortStableFunc(im.Criteria, func(a, b Criterion) int { return slices.Index(order, a.Group) - slices.Index(order, b.Group) })
}

// criterion holds a measure of a case against that of the base.
func criterion(b, m measure) Criterion {
	if m.group == "operations" && m.name == "operations" && b.value > 0 {
		m.limit, m.source = dutyRise*b.value, dutySource
		b.limit, b.source = m.limit, m.source
	}
	c := Criterion{Group: m.group, Name: m.name, Unit: m.unit, Base: b.value, With: m.value, Difference: difference(b.value, m.value),
		Limit: m.limit, AtLeast: m.atLeast, Source: m.source, Verdict: m.verdict(), BaseVerdict: b.verdict(), Margin: nan, Where: m.where, When: m.when}
	if c.Verdict == Passes || c.Verdict == Fails {
		c.Margin = m.margin()
	}
	return c
}

// jumpMeasures lists the largest rapid voltage changes of a run by event, direction and
// class of voltage, and the voltages with the devices held.
func (im *impacting) jumpMeasures(t *trial, loss, back map[string]*jump, held *jump) (out []measure) {
	c := clock{t.engine.Study.Settings.Period.Zone}
	for _, ev := range []string{allEvent, largestEvent, caseEvent} {
		for _, d := range []struct {
			word string
			of   map[string]*jump
		}{{"loss", loss}, {"return", back}} {
			for _, high := range []bool{true, false} {
				m := measure{group: "rapid voltage change", unit: "%", limit: changeLimitLV, source: changeSource, name: "sudden " + d.word + " of " + ev + ", up to 600 V"}
				if high {
					m.limit, m.name = changeLimitMV, "sudden "+d.word+" of "+ev+", above 600 V"
				}
				there := false
				for i := range t.points {
					p := &t.points[i].Point
					if (p.NomKV > lowVoltageHighKV) != high {
						continue
					}
					there = true
					if j := d.of[ev]; j != nil && math.Abs(j.worst[i].percent) > m.value {
						m.value, m.where, m.when = math.Abs(j.worst[i].percent), p.Name, c.text(j.worst[i].at)
					}
				}
				if there {
					out = append(out, m)
				}
			}
		}
	}
	return append(out, im.heldMeasures(t, held)...)
}

// heldMeasures lists the extremes of voltage with every device held where the run
// without the units of the case has it: what the units do before any control acts. Of
// the base it is what its own controls give at the ends of the steps.
func (im *impacting) heldMeasures(t *trial, held *jump) (out []measure) {
	c := clock{t.engine.Study.Settings.Period.Zone}
	const group = "voltage, devices held"
	for _, k := range t.classes() {
		hi := measure{group, "highest voltage, devices held, at customers" + k.name, "pu", math.Inf(-1), k.limits.High, false, k.limits.Source, "", ""}
		lo := measure{group, "lowest voltage, devices held, at customers" + k.name, "pu", math.Inf(1), k.limits.Low, true, k.limits.Source, "", ""}
		rise := measure{group, "largest rise, devices held," + k.name, "%", 0, riseLimitMV, false, riseSource, "", ""}
		if k.name == " up to 600 V" {
			rise.limit = riseLimitLV
		}
		for _, i := range k.points {
			if d := held.worst[i]; d.percent > rise.value {
				rise.value, rise.where, rise.when = d.percent, t.points[i].Name, c.text(d.at)
			}
			if high := held.hi[i]; high > hi.value {
				hi.value, hi.where, hi.when = high, t.points[i].Name, c.text(held.hiAt[i])
			}
			if low := held.low[i]; low < lo.value {
				lo.value, lo.where, lo.when = low, t.points[i].Name, c.text(held.lowAt[i])
			}
		}
		out = append(out, hi, lo, rise)
	}
	return out
}
