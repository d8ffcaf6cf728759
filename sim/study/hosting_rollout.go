package study

import (
	"context"
	"math"
	"math/rand/v2"
	"slices"
	"sync/atomic"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// Rollout is a stochastic deployment: customers adopt in random order, and at rising
// installed power it is seen which share of the orders violates a limit.
//
// Method: random deployments of growing penetration, each held against the limits, as in
// Bollen and Hassan, Integration of Distributed Generation in the Power System, Wiley,
// 2011; Navarro-Espinosa and Ochoa, "Probabilistic impact assessment of low carbon
// technologies in LV distribution systems", IEEE Trans. Power Systems 31 (2016); Ding and
// Mather, "On distributed PV hosting capacity estimation, sensitivity study, and
// improvement", IEEE Trans. Sustainable Energy 8 (2017); recalled from memory.
type Rollout struct {
	Why         string // why there is none; blank where there is one
	Seed        uint64
	Runs        int
	Sites       int
	PerCustomer float64 // kW
	Instants    []int64 // the critical instants, ns
	Levels      []RolloutLevel
	Deployments []Deployment
	// Least is the installed power, kW, at which the first run violates, and All that at
	// which every run does; NaN where none or not all do.
	Least, All float64
}

// RolloutLevel is one installed power.
type RolloutLevel struct {
	KW        float64 // asked for
	Mean      float64 // kW, installed: the last customer goes beyond
	Violating int     // runs
	Share     float64 // %
	By        map[string]int
}

// Deployment is one run: at which level it first violates, and what.
type Deployment struct {
	Run       int
	KW        float64 // installed at the first violation; NaN where it never violates
	Criterion string
	Where     string
	At        int64
	broken    []string // by level: what breaks first there, blank
	installed []float64
}

// The kinds of violation of a deployment.
const (
	rolloutHigh    = "voltage above A"
	rolloutLow     = "voltage below A"
	rolloutLoading = "loading"
	rolloutChange  = "rapid voltage change"
	rolloutNone    = "no solution"
)

func rolloutKinds() []string {
	return []string{rolloutHigh, rolloutLow, rolloutLoading, rolloutChange, rolloutNone}
}

// rolloutRule says how a deployment is judged.
const rolloutRule = "every deployment is judged at critical instants, one in each month: the step with the greatest excess of output over load, each relative to its own peak; " +
	"the controls act until they rest, from where the base's year has them; a violation is a judged place outside range A, an element above its rating (and by more than 1 % more than without), " +
	"or a rapid voltage change at the loss of all adopters beyond its limit, that the same instant has not without the adopters. Other instants are not looked at, so that the share is a lower bound of that over the period"

// site is a customer's place.
type site struct {
	load int
	kW   float64
}

// rollOut prepares a roll-out and returns what each worker has to do for it.
func (h *hosting) rollOut(output, load []float64) (work func(context.Context) error) {
	r := &Rollout{Seed: h.set.seed, Runs: h.set.runs, PerCustomer: h.set.perCustomer, Least: nan, All: nan}
	h.Rollout = r
	m := h.st.Model
	var sites []site
	total := 0.0
	for i := range m.Loads {
		if l := &m.Loads[i]; l.Customers > 0 {
			sites = append(sites, site{i, l.Customers * h.set.perCustomer})
			total += l.Customers * h.set.perCustomer
		}
	}
	nothing := func(context.Context) error { return nil }
	r.Sites = len(sites)
	if len(sites) == 0 {
		r.Why = errNoSites.Error() + ", so that nobody adopts: loads.csv has a column customers"
		h.tick(h.set.runs)
		return nothing
	}
	instants := h.critical(output, load)
	if len(instants) == 0 {
		r.Why = "the output is nothing in every ok step"
		h.tick(h.set.runs)
		return nothing
	}
	for _, s := range instants {
		start, _ := h.base.engine.Bounds(s)
		r.Instants = append(r.Instants, start)
	}
	for k := range h.set.levels {
		// With the square: limits break low, and there the share of the runs rises steeply.
		share := float64(k+1) / float64(h.set.levels)
		r.Levels = append(r.Levels, RolloutLevel{KW: total * share * share, By: map[string]int{}})
	}
	r.Deployments = make([]Deployment, h.set.runs)
	var next atomic.Int64
	return func(ctx context.Context) error {
		// Each worker has an engine of its own and takes the next run; a run depends on its
		// number alone.
		var d *deployer
		for {
			run := int(next.Add(1)) - 1
			if run >= h.set.runs {
				return nil
			}
			err := ctx.Err()
			if err == nil && d == nil {
				d, err = h.newDeployer(ctx, sites, instants)
			}
			if err == nil {
				r.Deployments[run], err = d.deploy(run, r.Levels)
			}
			if err != nil {
				return err
			}
			h.tick(1)
		}
	}
}

// count sums up the deployments.
func (r *Rollout) count() {
	for k := range r.Levels {
		l := &r.Levels[k]
		for i := range r.Deployments {
			d := &r.Deployments[i]
			l.Mean += d.installed[k] / float64(len(r.Deployments))
			if d.broken[k] != "" {
				l.Violating++
				l.By[d.broken[k]]++
			}
		}
		l.Share = 100 * float64(l.Violating) / float64(len(r.Deployments))
		if l.Violating > 0 && math.IsNaN(r.Least) {
			r.Least = l.KW
		}
		if l.Violating == len(r.Deployments) && math.IsNaN(r.All) {
			r.All = l.KW
		}
	}
}

// critical chooses in each month the ok step with the greatest p − L/L peak, p the output
// and L the load.
func (h *hosting) critical(output, load []float64) (out []int) {
	peak, most := 0.0, 0.0
	for i, kW := range load {
		if h.log.ok[i] {
			peak, most = math.Max(peak, kW), math.Max(most, output[i])
		}
	}
	if most <= 0 {
		return nil
	}
	zone := clock{h.st.Settings.Period.Zone}
	month, best := "", -1
	excess := func(i int) float64 {
		if peak <= 0 {
			return output[i] / most
		}
		return output[i]/most - load[i]/peak
	}
	for i := range output {
		if !h.log.ok[i] || output[i] <= 0 {
			continue
		}
		start, _ := h.base.engine.Bounds(i)
		if m := zone.text(start)[:7]; m != month {
			if best >= 0 {
				out = append(out, best)
			}
			month, best = m, i
		} else if excess(i) > excess(best) {
			best = i
		}
	}
	return append(out, best)
}

// deployer solves deployments on one engine that has a unit at every site.
type deployer struct {
	h        *hosting
	engine   *sim.Engine
	sizer    *sim.Sizer
	meter    *results.Meter
	reading  *results.Reading
	limits   []results.PointLimits
	sites    []site
	first    int // of the sites' generators in the model
	instants []int
	before   []instantBefore
	percent  []float64
	all      *verdict // of all sites together, the same in every order
}

// verdict is what breaks first with some adopters.
type verdict struct {
	kind, where string
	at          int64
}

// instantBefore is a critical instant without any adopter.
type instantBefore struct {
	pu, percent []float64
	start       int64
}

func (h *hosting) newDeployer(ctx context.Context, sites []site, instants []int) (*deployer, error) {
	d := &deployer{h: h, sites: sites, first: len(h.st.Model.Generators), instants: instants}
	st := variant(h.st, "roll-out", func(m *feeder.Model) {
		for _, s := range sites {
			l := &m.Loads[s.load]
			g := h.unit("at "+l.Name, l.Node, s.kW)
			g.Connection, g.Phases, g.Pairs = l.Connection, l.Phases, l.Pairs
			m.Generators = append(m.Generators, g)
		}
	})
	e, err := h.walks.prepare(ctx, st, h.demo)
	if err != nil {
		return nil, err
	}
	tally := results.NewTally(e.Plan)
	d.engine, d.sizer, d.meter, d.limits = e, e.NewSizer(), tally.Meter(), tally.Limits()
	d.reading = d.meter.NewReading()
	for i := range sites {
		d.sizer.Set(d.first+i, 0)
	}
	for _, step := range instants {
		b := instantBefore{}
		in, err := e.SettleFrom(step, d.positions(step))
		if err != nil {
			return nil, err
		}
		b.start = in.Start
		if in.State != nil {
			d.meter.Read(in.State, d.reading)
			b.pu, b.percent = slices.Clone(d.reading.PU), d.meter.Percent(d.reading, nil)
		}
		d.before = append(d.before, b)
	}
	return d, nil
}

func (d *deployer) positions(step int) sim.Positions {
	p := sim.Positions{Taps: d.h.log.taps[step], Closed: d.h.log.closed[step]}
	if s := d.h.log.storage[step]; len(s) > 0 {
		p.Storage = s
	}
	return p
}

// deploy lets the customers adopt in the order of the run and judges every level.
func (d *deployer) deploy(run int, levels []RolloutLevel) (Deployment, error) {
	out := Deployment{Run: run + 1, KW: nan}
	order := rand.New(rand.NewPCG(d.h.set.seed, uint64(run))).Perm(len(d.sites))
	for i := range d.sites {
		d.sizer.Set(d.first+i, 0)
	}
	next, installed := 0, 0.0
	for _, l := range levels {
		for next < len(order) && installed < l.KW*(1-1e-12) {
			d.sizer.Set(d.first+order[next], 1)
			installed += d.sites[order[next]].kW
			next++
		}
		v, err := d.judgeAll(order[:next])
		if err != nil {
			return out, err
		}
		if v.kind != "" && out.Criterion == "" {
			out.KW, out.Criterion, out.Where, out.At = installed, v.kind, v.where, v.at
		}
		out.broken, out.installed = append(out.broken, v.kind), append(out.installed, installed)
	}
	return out, nil
}

// judgeAll judges the critical instants until one violates.
func (d *deployer) judgeAll(adopters []int) (v verdict, err error) {
	if len(adopters) == len(d.sites) && d.all != nil {
		return *d.all, nil
	}
	for k := range d.instants {
		if v.kind, v.where, err = d.judge(k, adopters); err != nil {
			return v, err
		}
		if v.kind != "" {
			v.at = d.before[k].start
			break
		}
	}
	if len(adopters) == len(d.sites) {
		d.all = &v
	}
	return v, nil
}

// judge solves one critical instant with the adopters and returns what breaks first.
func (d *deployer) judge(k int, adopters []int) (kind, where string, err error) {
	b := &d.before[k]
	if b.pu == nil {
		return "", "", nil // nor is there a solution without them
	}
	step := d.instants[k]
	in, err := d.engine.SettleFrom(step, d.positions(step))
	if err != nil {
		return "", "", err
	}
	if in.State == nil {
		return rolloutNone, in.Where, nil
	}
	d.meter.Read(in.State, d.reading)
	for i := range d.limits {
		l := &d.limits[i]
		if !l.Judged {
			continue
		}
		if v := d.reading.PU[i]; v > l.High+slack && b.pu[i] <= l.High+slack {
			return rolloutHigh, d.meter.Points[i].Name, nil
		} else if v < l.Low-slack && b.pu[i] >= l.Low-slack {
			return rolloutLow, d.meter.Points[i].Name, nil
		}
	}
	d.percent = d.meter.Percent(d.reading, d.percent)
	for i, p := range d.percent {
		if p > 100 && p > b.percent[i]+1 {
			return rolloutLoading, d.meter.LoadingName(i), nil
		}
	}
	return d.lost(step, in.State, adopters)
}

// lost takes all adopters away with the devices held.
func (d *deployer) lost(step int, s *results.State, adopters []int) (kind, where string, err error) {
	before := slices.Clone(d.reading.PU)
	p := sim.Positions{Taps: slices.Clone(s.Taps), Closed: slices.Clone(s.Closed)}
	if n := len(s.Storage); n > 0 {
		p.Storage = make([]float64, n)
		for i, va := range s.Storage {
			p.Storage[i] = real(va) / 1000
		}
	}
	for _, i := range adopters {
		d.sizer.Set(d.first+i, 0)
	}
	in, err := d.engine.Held(step, p, slices.Clone(s.V))
	for _, i := range adopters {
		d.sizer.Set(d.first+i, 1)
	}
	if err != nil {
		return "", "", err
	}
	if in.State == nil {
		return rolloutNone, in.Where, nil
	}
	for i := range d.meter.Points {
		x := &d.meter.Points[i]
		limit := d.h.set.limits["rapid voltage change up to 600 V"]
		if x.NomKV > lowVoltageHighKV {
			limit = d.h.set.limits["rapid voltage change above 600 V"]
		}
		if 100*math.Abs(x.PU(in.State.V)-before[i]) > limit+slack {
			return rolloutChange, x.Name, nil
		}
	}
	return "", "", nil
}
