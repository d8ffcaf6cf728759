package study

import (
	"context"
	"errors"
	"fmt"
	"math"
	"runtime"
	"slices"
	"sync/atomic"

	"golang.org/x/sync/errgroup"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// Hosting is how much more each place and the feeder take before a criterion breaks.
type Hosting struct {
	Title      string
	Base       *Case
	Kind       string
	Profile    string
	Grid       []float64 // kW
	Chosen     bool      // the places were chosen by the program
	Limits     []HostingCriterion
	Places     []HostedPlace // the feeder last: the sizes shared equally over the places
	Candidates []Candidate
	Rollout    *Rollout
	Cautions   []string
}

// HostingCriterion is a criterion with the limit that holds.
type HostingCriterion struct {
	Name, Unit string
	Limit      float64
	Source     string
}

// HostedPlace is what one place takes.
type HostedPlace struct {
	Place      string
	Phases     string
	NominalKV  float64
	DistanceKM float64 // NaN for the feeder
	Keeps      float64 // kW: the largest size below the first that breaks; 0: none
	Breaks     float64 // kW: the smallest size of the grid that breaks a criterion; NaN: none does
	// First is the criterion that is exceeded most there, relative to its limit; All are
	// all that break.
	First        string
	Value, Limit float64
	Unit         string
	Where, When  string
	All          []string
	Tried        int
}

// Candidate is one run over the period: a size at a place.
type Candidate struct {
	Place  string
	KW     float64
	Values []float64 // by Hosting.Limits
	Where  []string
	When   []string
	Broken []bool
}

func (c *Candidate) breaks() bool { return slices.Contains(c.Broken, true) }

// hosting is a Hosting while it is made.
type hosting struct {
	*Hosting
	st       *feeder.Study
	set      *hostingSettings
	demo     bool
	base     *trial
	log      *positionsLog
	volts    *baseVoltages // nil: jumps are all solved
	probes   *probes
	walks    baseWalks
	progress func(done, total int)
	done     atomic.Int64
	total    int64
	workers  int
}

// HostingSettings of MakeHosting. The zero value uses all cores.
type HostingSettings struct {
	// Workers is how many runs are made at once; 0 means GOMAXPROCS. No number depends
	// on it.
	Workers int
	// Progress is told how many of the runs and deployments are done, of how many at most;
	// from several goroutines at once. It may be nil.
	Progress func(done, total int)
}

// MakeHosting looks for what the base of a study hosts; base has been run. An error is a
// tables.Faults where [hosting] is wrong.
//
// At every place the sizes of the grid are run one after the other from the smallest, each
// over every step of the period with the controls acting, until one breaks a criterion: that
// is the smallest that does, whether or not a larger one would do again. Nothing is screened
// out beforehand.
func MakeHosting(ctx context.Context, p Place, base *Case, s HostingSettings) (*Hosting, error) {
	h := &hosting{Hosting: &Hosting{Title: base.Study.Title, Base: base}, st: base.Study, demo: p.Demo, log: &positionsLog{}, progress: s.Progress, workers: s.Workers}
	if h.workers <= 0 {
		h.workers = runtime.GOMAXPROCS(0)
	}
	e, err := sim.Prepare(h.st, sim.Options{Demo: p.Demo})
	if err != nil {
		return nil, err
	}
	// What is wrong in [hosting] is told before anything is run.
	set, err := readHosting(e, 1)
	if err != nil {
		return nil, err
	}
	output, _, err := e.Profile(set.profile)
	if err != nil {
		return nil, err
	}
	h.volts, h.probes = newBaseVoltages(e, h.log, output), newProbes(h.workers)
	watch := newSectionWatch(e)
	load := &loadLog{watch: watch}
	if h.base, err = runTrial(ctx, &h.walks, variant(h.st, h.st.Case, nil), h.demo, func(*sim.Engine) ([]sim.Recorder, error) {
		out := []sim.Recorder{h.log, load}
		if h.volts != nil {
			out = append(out, h.volts)
		}
		return out, nil
	}); err != nil {
		return nil, err
	}
	if h.set, err = readHosting(e, h.base.number("peak demand")); err != nil {
		return nil, err
	}
	h.Kind, h.Profile, h.Grid, h.Chosen = h.set.kind, h.set.profile, h.set.grid, h.set.chosen
	period := h.st.Settings.Period
	for _, l := range hostingLimits(float64(period.End-period.Start) / 3.6e12) {
		limit := h.set.limits[l.name]
		if math.IsNaN(limit) {
			continue
		}
		source := l.source
		if limit != l.limit {
			source = "[hosting] criteria of study.toml"
		}
		h.Limits = append(h.Limits, HostingCriterion{l.name, l.unit, limit, source})
	}
	h.total = int64((len(h.set.places)+1)*len(h.set.grid) + h.set.runs)
	return h.Hosting, h.work(ctx, output, load.kW)
}

// work searches the places and rolls out, all of it on the same workers: the feeder first,
// which usually takes longest, the deployments last, which fill what is left.
func (h *hosting) work(ctx context.Context, output, load []float64) error {
	g, gctx := errgroup.WithContext(ctx)
	g.SetLimit(h.workers)
	n := len(h.set.places) + 1
	found, tried, errs := make([]HostedPlace, n), make([][]Candidate, n), make([]error, n+h.workers)
	km := distances(h.st.Model)
	for k := range n {
		i := (k + n - 1) % n
		g.Go(func() error {
			p, nodes := h.place(i, km)
			found[i], tried[i], errs[i] = h.search(gctx, p, nodes)
			return errs[i]
		})
	}
	deploy := h.rollOut(output, load)
	for w := range h.workers {
		g.Go(func() error {
			errs[n+w] = deploy(gctx)
			return errs[n+w]
		})
	}
	if err := g.Wait(); err != nil {
		return first(err, errs)
	}
	for i := range n {
		h.Places = append(h.Places, found[i])
		h.Candidates = append(h.Candidates, tried[i]...)
	}
	h.Rollout.count()
	h.cautions()
	return nil
}

// cautions lists what a reader must know before trusting the numbers.
func (h *hosting) cautions() {
	add := func(format string, args ...any) { h.Cautions = append(h.Cautions, fmt.Sprintf(format, args...)) }
	if n := h.base.number("low steps") + h.base.number("unsolved steps"); n > 0 {
		add("%g steps of the base are low or unsolved; nothing of them is in any number here", n)
	}
	if text := fewSteps(h.st); text != "" {
		add("%s", text)
	}
	for _, d := range h.base.outcome.CoarseAt {
		add("the step is too coarse for operations and durations at %s: the voltage moves by more than its bandwidth from step to step", d)
	}
	add("every new unit follows the one profile %s: units apart from each other do not deliver alike, and a cloud does not cover all of them at once", h.Profile)
	if h.set.function < 0 {
		add("the new units run at a constant power factor of %g; with an inverter function ([hosting] function) a place may take more", h.set.factor)
	}
	add("each place is filled alone: what several take together is less than the sum; the row feeder shares one size equally")
	add("fault duty, protection and what is upstream of the source are not looked at")
}

// place is the i-th place to search, the feeder the last, and its nodes.
func (h *hosting) place(i int, km []float64) (HostedPlace, []int) {
	p, nodes := HostedPlace{Place: "feeder", DistanceKM: nan, NominalKV: nan}, h.set.places
	if i < len(nodes) {
		node := &h.st.Model.Nodes[nodes[i]]
		p.Place, p.DistanceKM, p.NominalKV = node.Name, km[nodes[i]], node.Nominal
		for _, ph := range node.Phases {
			p.Phases += ph.String()
		}
		nodes = nodes[i : i+1]
	}
	return p, nodes
}

// loadLog keeps the load of the feeder at the end of each step, kW; NaN where it is not ok.
type loadLog struct {
	watch *sectionWatch
	kW    []float64
}

func (l *loadLog) Interval(*results.Interval) error { return nil }
func (l *loadLog) Action(*results.Action) error     { return nil }

func (l *loadLog) Step(s *results.Step) error {
	kW := nan
	if s.Status == results.OK && s.Last != nil {
		kW = 0
		for _, va := range s.Last.Load {
			kW += real(va) / 1000
		}
		for _, va := range s.Last.Charging {
			kW += real(va) / 1000
		}
	}
	l.kW = append(l.kW, kW)
	return nil
}

// tick tells that n parts of the work are done.
func (h *hosting) tick(n int) {
	done := h.done.Add(int64(n))
	if h.progress != nil {
		h.progress(int(done), int(h.total))
	}
}

// search walks up the grid at one place.
func (h *hosting) search(ctx context.Context, p HostedPlace, nodes []int) (HostedPlace, []Candidate, error) {
	var tried []Candidate
	p.Breaks, p.Value, p.Limit = nan, nan, nan
	for k, kW := range h.set.grid {
		c, err := h.candidate(ctx, p.Place, nodes, kW)
		if err != nil {
			return p, nil, err
		}
		tried = append(tried, *c)
		p.Tried++
		if !c.breaks() {
			p.Keeps = kW
			h.tick(1)
			continue
		}
		p.Breaks = kW
		worst := math.Inf(-1)
		for i, l := range h.Limits {
			if !c.Broken[i] {
				continue
			}
			p.All = append(p.All, l.Name)
			// How far beyond the limit, as a share of it; beyond a limit of zero is farthest.
			over := c.Values[i] / l.Limit
			if l.Limit == 0 {
				over = math.Inf(1)
			}
			if over > worst {
				worst = over
				p.First, p.Value, p.Limit, p.Unit, p.Where, p.When = l.Name, c.Values[i], l.Limit, l.Unit, c.Where[i], c.When[i]
			}
		}
		h.tick(len(h.set.grid) - k)
		break
	}
	return p, tried, nil
}

// unit is a new generator of kW at a node.
func (h *hosting) unit(name string, node int, kW float64) feeder.Generator {
	n := &h.st.Model.Nodes[node]
	g := feeder.Generator{Name: name, At: h.st.Place("hosting"), Node: node, Phases: n.Phases, Kind: h.set.kind, KVA: kW, KW: nan, PF: h.set.factor, Profile: h.set.profile, Function: h.set.function}
	if !n.Grounded {
		g.Connection, g.Phases = feeder.Delta, nil
		g.Pairs = []feeder.Pair{{feeder.A, feeder.B}, {feeder.B, feeder.C}, {feeder.C, feeder.A}}[:max(1, 2*len(n.Phases)-3)]
	}
	return g
}

// candidate runs a size at some nodes, equally shared, over the period.
func (h *hosting) candidate(ctx context.Context, place string, nodes []int, kW float64) (*Candidate, error) {
	own := newUnits()
	st := variant(h.st, fmt.Sprintf("hosting %g kW at %s", kW, place), func(m *feeder.Model) {
		for _, n := range nodes {
			g := h.unit("hosted at "+m.Nodes[n].Name, n, kW/float64(len(nodes)))
			own.generators[g.Name] = true
			m.Generators = append(m.Generators, g)
		}
	})
	probe, err := h.probes.take(ctx, h)
	if err != nil {
		return nil, err
	}
	defer h.probes.give(probe)
	var loss *jump
	t, err := runTrial(ctx, &h.walks, st, h.demo, func(e *sim.Engine) (out []sim.Recorder, err error) {
		if loss, err = jumpTo(e, probe, own.delivers(st.Model)); err == nil && h.volts != nil {
			loss.known = h.volts.at
		}
		return []sim.Recorder{loss}, err
	})
	if err != nil {
		return nil, err
	}
	c := &Candidate{Place: place, KW: kW}
	for _, l := range h.Limits {
		v, where, when := h.value(l.Name, t, loss, nodes)
		c.Values, c.Where, c.When = append(c.Values, v), append(c.Where, where), append(c.When, when)
		c.Broken = append(c.Broken, v > l.Limit+slack*math.Max(1, math.Abs(l.Limit)) || math.IsNaN(v))
	}
	return c, nil
}

// value is what a run comes to in a criterion.
func (h *hosting) value(name string, t *trial, loss *jump, nodes []int) (v float64, where, when string) {
	c := clock{h.st.Settings.Period.Zone}
	more := func(q string) float64 { return t.number(q) - h.base.number(q) }
	switch name {
	case "hours above A":
		return more("hours with a place above A"), t.text("highest judged voltage place"), t.text("highest judged voltage time")
	case "hours below A":
		return more("hours with a place below A"), t.text("lowest judged voltage place"), t.text("lowest judged voltage time")
	case "hours outside B":
		return more("hours with a place above B") + more("hours with a place below B"), t.text("highest judged voltage place"), t.text("highest judged voltage time")
	case "hours above A at the connection":
		for i := range t.points {
			if p := &t.points[i]; slices.Contains(nodes, p.Node) {
				if d := p.AboveA - h.base.points[i].AboveA; d > v {
					v, where, when = d, p.Name, c.text(p.MaxTime)
				}
			}
		}
		return v, where, when
	case "rapid voltage change above 600 V", "rapid voltage change up to 600 V":
		for i := range t.points {
			p := &t.points[i]
			if d := math.Abs(loss.worst[i].percent); (p.NomKV > lowVoltageHighKV) == (name == "rapid voltage change above 600 V") && d > v {
				v, where, when = d, p.Name, c.text(loss.worst[i].at)
			}
		}
		return v, where, when
	case "loading":
		for i, r := range t.loading {
			if b := h.base.loading[i]; r.Percent > b.Percent+1 && r.Percent > v {
				v, where, when = r.Percent, r.Element, c.text(r.PeakTime.UnixNano())
				if r.Phase != "" {
					where += "." + r.Phase
				}
			}
		}
		return v, where, when
	case "unbalance":
		v := t.number("highest unbalance")
		if math.IsNaN(v) || v <= h.base.number("highest unbalance") {
			return 0, "", ""
		}
		return v, t.text("highest unbalance place"), t.text("highest unbalance time")
	case "rise of operations":
		a, b := h.base.number("operations"), t.number("operations")
		if b <= a || a == 0 {
			return 0, "", ""
		}
		return 100 * (b - a) / a, t.text("device of most operations"), ""
	case "low or unsolved steps":
		return more("low steps") + more("unsolved steps"), "", ""
	case "hours of reverse power at the source":
		return t.reverse[0].hours, "source", c.text(t.reverse[0].at)
	}
	return nan, "", ""
}

// errNoSites is the roll-out's where no load has customers.
var errNoSites = errors.New("no load has customers")
