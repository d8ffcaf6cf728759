package study

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"strings"

	"yearflow/sim/feeder"
)

// TuneSettings of Tune. The zero value searches as [tune] of study.toml says, on all
// cores.
type TuneSettings struct {
	// Log is the file of evaluated candidates; it must be given.
	Log string
	// Again forgets what stands in the log.
	Again bool
	// Workers is how many candidates run at once; 0 means GOMAXPROCS. No result depends
	// on it.
	Workers int
	// Budget and Seed replace those of [tune] where they are not 0.
	Budget int
	Seed   uint64
	// Watch is told after every batch how far the search is; nil for none.
	Watch func(evaluated, budget int, base, best *Point)
}

// Tuning is what a search found.
type Tuning struct {
	Title         string
	Spec          *TuneSpec
	Base          *Point
	Best          *Point   // nil where no candidate within the bounds was evaluated
	Points        []*Point // in the order in which they were first asked for
	Stopped       string   // why the search ended
	Evaluated     int      // candidate-years, those of the log among them
	Sensitivities []Sensitivity
	CaseName      string     // blank where there is nothing to write
	CaseFiles     []CaseFile // of the best
	Sheet         *Sheet     // of the case
	Cautions      []Caution

	study  *feeder.Study
	inputs map[string]string
	all    []tuneQuantity
}

// Tune searches the settings of a study. A tables.Faults says what is wrong with
// the study or with its [tune].
func Tune(ctx context.Context, p Place, set TuneSettings) (t *Tuning, err error) {
	engine, err := prepareCandidate(p)
	if err != nil {
		return nil, err
	}
	st := engine.Study
	all := tuneQuantities(engine.Plan.Devices, &st.Settings)
	spec, err := readSpec(st, all)
	if err != nil {
		return nil, err
	}
	if set.Budget > 0 {
		spec.Budget = set.Budget
	}
	if set.Seed > 0 {
		spec.Seed = set.Seed
	}
	t = &Tuning{Title: st.Title, Spec: spec, study: st, all: all}
	if t.inputs, err = Inputs(p.FS, engine); err != nil {
		return nil, err
	}
	hash, err := inputsHash(p.FS, t.inputs, p.Version)
	if err != nil {
		return nil, err
	}
	log, err := openLog(set.Log, hash, len(engine.Plan.Devices), set.Again || !spec.Resume)
	if err != nil {
		return nil, err
	}
	defer func() {
		if bad := log.close(); err == nil {
			err = bad
		}
	}()
	s := &search{spec: spec, all: all, ev: newEvaluator(p, st, spec.Knobs, log, set.Workers), index: map[string]*Point{},
		rng: rand.New(rand.NewPCG(spec.Seed, 0))}
	if set.Watch != nil {
		s.tell = func(s *search) { set.Watch(s.spent, spec.Budget, s.seen[0], s.best) }
	}
	if t.Stopped, err = s.run(ctx); err != nil {
		return nil, err
	}
	t.Base, t.Best, t.Points, t.Evaluated = s.base, s.best, s.seen, s.spent
	t.sensitivities()
	if err := t.makeCase(ctx, p, s); err != nil {
		return nil, err
	}
	t.cautions()
	return t, nil
}

// Improves tells whether there is a best that is to be preferred to the base.
func (t *Tuning) Improves() bool { return t.Best != nil && t.Best.better(t.Base) }

// A candidate is as good as the best within a tenth of what the best gains on the base,
// or, where it gains nothing, within 1 % of its score: of most scores the greater part
// stays whatever the settings, so that a share of the score itself would tell little.
const (
	flatOfGain  = 0.1
	flatOfScore = 0.01
)

// flat is the highest score that is as good as the best.
func (t *Tuning) flat() float64 {
	if gain := t.Base.Score - t.Best.Score; gain > 0 {
		return t.Best.Score + flatOfGain*gain
	}
	return t.Best.Score + flatOfScore*math.Abs(t.Best.Score)
}

// FlatText says what "as good as the best" means.
func (t *Tuning) FlatText() string {
	if t.Best != nil && t.Base.Score > t.Best.Score {
		return "within a tenth of what the best gains on the base"
	}
	return "within 1 % of its score"
}

// good tells whether a candidate is as good as the best.
func (t *Tuning) good(p *Point) bool {
	return p.Invalid == "" && p.Score <= t.flat() && (p.Feasible() || !t.Best.Feasible() && p.Violation <= t.Best.Violation)
}

// Sensitivity says how much one setting matters around the best, all others held there.
type Sensitivity struct {
	Knob    *Knob
	Index   int // into Spec.Knobs
	Rank    int // 1 matters most; by Range; 0 where that is not known
	Profile []*Point
	// Range is the highest score of the profile less the lowest, NaN where no value but
	// the best's was evaluated; Down and Up are what one step down or up costs, NaN where
	// that is out of bounds or was not evaluated.
	Range, Down, Up float64
	// FlatLow to FlatHigh are the values around the best over which every profile point
	// is as good as the best.
	FlatLow, FlatHigh float64
	// Edge says that the best lies on a bound: low, high or both; blank where it does not.
	Edge string
}

// sensitivities reads the profiles from all that was evaluated.
func (t *Tuning) sensitivities() {
	if t.Best == nil {
		return
	}
	for i := range t.Spec.Knobs {
		k := &t.Spec.Knobs[i]
		x := Sensitivity{Knob: k, Index: i, Down: math.NaN(), Up: math.NaN()}
		for _, p := range t.Points {
			if p.Levels != nil && p.Invalid == "" && !math.IsNaN(p.Score) && onLine(p.Levels, t.Best.Levels, i) {
				x.Profile = append(x.Profile, p)
			}
		}
		slices.SortFunc(x.Profile, func(a, b *Point) int { return a.Levels[i] - b.Levels[i] })
		low, high := math.Inf(1), math.Inf(-1)
		at := 0
		for n, p := range x.Profile {
			low, high = min(low, p.Score), max(high, p.Score)
			switch p.Levels[i] - t.Best.Levels[i] {
			case -1:
				x.Down = p.Score - t.Best.Score
			case 0:
				at = n
			case 1:
				x.Up = p.Score - t.Best.Score
			}
		}
		x.Range = high - low
		if len(x.Profile) < 2 && k.Levels() > 1 {
			x.Range = math.NaN() // the budget was spent before: nothing is known
		}
		first, last := at, at
		for first > 0 && t.good(x.Profile[first-1]) {
			first--
		}
		for last < len(x.Profile)-1 && t.good(x.Profile[last+1]) {
			last++
		}
		x.FlatLow, x.FlatHigh = k.value(x.Profile[first].Levels[i]), k.value(x.Profile[last].Levels[i])
		switch l := t.Best.Levels[i]; {
		case k.Levels() == 1:
			x.Edge = "both"
		case l == 0:
			x.Edge = "low"
		case l == k.Levels()-1:
			x.Edge = "high"
		}
		t.Sensitivities = append(t.Sensitivities, x)
	}
	slices.SortStableFunc(t.Sensitivities, func(a, b Sensitivity) int {
		switch {
		case a.Range > b.Range:
			return -1
		case a.Range < b.Range:
			return 1
		case math.IsNaN(a.Range) != math.IsNaN(b.Range):
			if math.IsNaN(a.Range) {
				return 1
			}
			return -1
		}
		return 0
	})
	for i := range t.Sensitivities {
		s := &t.Sensitivities[i]
		if math.IsNaN(s.Range) {
			continue
		}
		s.Rank = i + 1
		if i > 0 && t.Sensitivities[i-1].Range == s.Range {
			s.Rank = t.Sensitivities[i-1].Rank
		}
	}
}

// onLine tells whether two candidates differ in one setting at most.
func onLine(a, b []int, i int) bool {
	for k := range a {
		if k != i && a[k] != b[k] {
			return false
		}
	}
	return true
}

// cautions gathers what a reader must know before trusting the best.
func (t *Tuning) cautions() {
	add := func(format string, args ...any) {
		t.Cautions = append(t.Cautions, Caution{"", fmt.Sprintf(format, args...)})
	}
	add("Results support a licensed engineer's judgment and are not a sealed study. Settings go through the utility's own change control; write as-left values on the sheet.")
	add("The best of %d candidate-years on a grid of settings, by these aims: what has no weight and no limit was not looked at. Hold it against the base with compare before it is used.", t.Evaluated)
	if t.Spec.BuiltIn {
		add("study.toml names no [tune] settings: searched were the set voltages of all regulators, %g V either way of the base in steps of %g V, the units of a bank alike.", float64(builtInSpan), float64(builtInStep))
	}
	for _, w := range t.Spec.Aims {
		add("Weight of %s: %s per %s, %s.", w.Quantity, trimmed(w.Weight), w.Unit, w.Source)
	}
	if t.Best == nil {
		add("No candidate within the bounds was evaluated: raise budget or look at the bounds.")
		return
	}
	switch {
	case t.Best.Violation > 0:
		add("No candidate keeps all limits. The best shown breaks them least; it breaks: %s.", strings.Join(t.Best.Broken, ", "))
	case !t.Improves():
		add("No candidate within the bounds is better than the base: nothing is to be changed.")
	}
	if t.Base.Violation > 0 {
		add("The base itself breaks: %s.", strings.Join(t.Base.Broken, ", "))
	}
	if t.Base.Levels == nil {
		add("The base is not one of the candidates: it lies outside the bounds or between the steps.")
	}
	if t.Best.Sums.Pattern != t.Base.Sums.Pattern {
		add("Other steps than in the base are low or unsolved (%d and %d, in the base %d and %d): nothing of them is in any sum, so that sums are of another time.",
			t.Best.Sums.Low, t.Best.Sums.Unsolved, t.Base.Sums.Low, t.Base.Sums.Unsolved)
	}
	if s := t.Best.Sums.SettlingShare; s > 10 {
		add("%s %% of the time is settling: this step is too coarse for operations and durations.", tenths(s))
	}
	for _, s := range t.Sensitivities {
		if s.Edge != "" && s.Edge != "both" && s.Range != 0 { // NaN: not known
			add("%s of the best lies on its %s bound, %s: a better one may lie beyond.", s.Knob.Name(), s.Edge, s.Knob.cellOf(s.Knob.value(t.Best.Levels[s.Index])))
		}
	}
}
