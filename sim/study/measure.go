package study

import (
	"fmt"
	"math"
	"slices"
	"strings"
	"time"

	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// Verdict says how a criterion is met.
type Verdict uint8

// A criterion passes or fails its limit; or there is no limit, or no value.
const (
	NoLimit Verdict = iota
	Passes
	Fails
	NoValue
)

// String returns the word of the tables.
func (v Verdict) String() string { return [...]string{"no limit", "pass", "fail", "no value"}[v] }

// measure is one criterion of one run.
type measure struct {
	group, name, unit string
	value             float64
	limit             float64 // NaN: none
	atLeast           bool    // the limit is a lower one
	source            string  // of the limit
	where, when       string
}

func (m measure) margin() float64 {
	if m.atLeast {
		return m.value - m.limit
	}
	return m.limit - m.value
}

// slack is added to a limit before a value is held against it: on the limit is inside.
const slack = 1e-9

func (m measure) verdict() Verdict {
	switch {
	case math.IsNaN(m.limit):
		return NoLimit
	case math.IsNaN(m.value):
		return NoValue
	case m.margin() < -slack*math.Max(1, math.Abs(m.limit)):
		return Fails
	}
	return Passes
}

// figure writes a number of a measure.
func figure(x float64, unit string) string {
	if unit == "pu" {
		return results.PUText(x)
	}
	return results.FigureText(x)
}

// difference is b − a. A difference below a millionth of the values is one of rounding
// and of the solver's tolerance, and is 0.
func difference(a, b float64) float64 {
	d := b - a
	if math.Abs(d) <= 1e-6*math.Max(math.Abs(a), math.Abs(b)) {
		return 0
	}
	return d
}

// clock writes instants of one zone.
type clock struct{ zone *time.Location }

func (c clock) text(ns int64) string {
	zone := c.zone
	if zone == nil {
		zone = time.UTC
	}
	return time.Unix(0, ns).In(zone).Format(time.RFC3339)
}

// Limits of field practice that no table gives.
const (
	unbalanceLimit  = 3.0 // %
	unbalanceSource = "ANSI C84.1 and NEMA MG 1: deviation of the line-to-line voltages from their mean, 3 % (recalled from memory)"
	sequenceLimit   = 2.0 // %
	sequenceSource  = "EN 50160: |V2|/|V1|, 2 % for 95 % of the 10-min means of a week (recalled from memory); held at every instant here"
	riseLimitMV     = 3.0 // %
	riseLimitLV     = 5.0 // %
	riseSource      = "common practice: rise by the units alone, 3 % at medium and 5 % at low voltage"
	dutyRise        = 1.25
	dutySource      = "common practice: a rise of operations by more than 25 % is looked into"
	lifeYears       = 20.0
	wearSource      = "common practice: expected operations over a life of 20 years; "
	ratingSource    = "ratings of the tables"
	outerSource     = "ANSI C84.1, 2.4.2: what is outside range B is corrected promptly (recalled from memory)"
	followSource    = "common practice: a control that regulates away from the power's source runs to a limit where units feed back and the source stays where it was"
)

// class is a set of judged points with the same limits.
type class struct {
	name   string
	limits results.PointLimits
	points []int
}

// classes groups the judged points of a run by their limits, up to 600 V first.
func (t *trial) classes() (out []class) {
	for i := range t.points {
		p := &t.points[i]
		if !p.Limits.Judged {
			continue
		}
		name := " above 600 V"
		if p.NomKV <= lowVoltageHighKV {
			name = " up to 600 V"
		}
		k := slices.IndexFunc(out, func(c class) bool { return c.name == name && c.limits == p.Limits })
		if k < 0 {
			k = len(out)
			out = append(out, class{name: name, limits: p.Limits})
		}
		out[k].points = append(out[k].points, i)
	}
	slices.SortStableFunc(out, func(a, b class) int { return -strings.Compare(a.name, b.name) })
	return out
}

// measures lists what a run comes to, without what needs a second solution.
func (t *trial) measures(life Life) (out []measure) {
	c := clock{t.engine.Study.Settings.Period.Zone}
	add := func(m measure) { out = append(out, m) }
	free := func(group, name string) {
		r := t.summary[name]
		add(measure{group: group, name: name, unit: r.Unit, value: parse(r.Value), limit: nan})
	}
	for _, k := range t.classes() {
		hi, lo := k.points[0], k.points[0]
		for _, i := range k.points {
			if t.points[i].Max > t.points[hi].Max {
				hi = i
			}
			if t.points[i].Min < t.points[lo].Min {
				lo = i
			}
		}
		h, l := &t.points[hi], &t.points[lo]
		add(measure{"voltage", "highest voltage at customers" + k.name, "pu", h.Max, k.limits.High, false, k.limits.Source, h.Name, c.text(h.MaxTime)})
		add(measure{"voltage", "lowest voltage at customers" + k.name, "pu", l.Min, k.limits.Low, true, k.limits.Source, l.Name, c.text(l.MinTime)})
	}
	for _, q := range []string{"hours with a place above A", "hours with a place below A"} {
		free("voltage", q)
	}
	for _, q := range []string{"hours with a place above B", "hours with a place below B"} {
		add(measure{group: "voltage", name: q, unit: "h", value: t.number(q), limit: 0, source: outerSource})
	}
	for _, q := range []string{"customer-hours above A", "customer-hours below A", "customers ever outside A"} {
		free("voltage", q)
	}
	add(measure{"unbalance", "highest unbalance", "%", t.number("highest unbalance"), unbalanceLimit, false, unbalanceSource, t.text("highest unbalance place"), t.text("highest unbalance time")})
	add(measure{"unbalance", "highest negative sequence", "%", t.number("highest negative sequence"), sequenceLimit, false, sequenceSource, "", t.text("highest negative sequence time")})
	out = append(out, t.reverseMeasures()...)
	add(measure{"loading", "highest loading", "%", t.number("highest loading"), 100, false, ratingSource, t.text("highest loading place"), t.text("highest loading time")})
	add(measure{group: "loading", name: "element phases above rating", unit: "1", value: t.number("element phases above rating"), limit: 0, source: ratingSource})
	for _, q := range []string{"source energy", "generation energy", "losses energy", "losses share of energy supplied", "peak demand", "lowest demand"} {
		free("energy and losses", q)
	}
	out = append(out, t.dutyMeasures(life)...)
	curtailed, given := 0.0, 0.0
	for _, p := range t.outcome.Plants {
		curtailed += p.Curtailed
		given += p.Delivered
	}
	add(measure{group: "curtailment", name: "energy curtailed", unit: "kWh", value: curtailed, limit: nan})
	share := 0.0
	if curtailed > 0 {
		share = 100 * curtailed / (curtailed + given)
	}
	add(measure{group: "curtailment", name: "share of the available energy curtailed", unit: "%", value: share, limit: nan})
	add(measure{group: "steps", name: "low or unsolved steps", unit: "1", value: t.number("low steps") + t.number("unsolved steps"), limit: 0, source: "a step without a solution, or with a load below 0.7 p.u., is not served as asked"})
	return out
}

// reverseMeasures lists the hours of reverse power. A limit has a regulator whose control
// regulates away from where the power comes from.
func (t *trial) reverseMeasures() (out []measure) {
	c := clock{t.engine.Study.Settings.Period.Zone}
	for i, r := range t.reverse {
		m := measure{group: "reverse power", name: "hours of reverse power at " + r.place, unit: "h", value: r.hours, limit: nan}
		if i > 0 && reverseMode(&t.engine.Study.Model.Regulators[i-1]) == feeder.ReverseFollow {
			m.limit, m.source = 0, followSource
		}
		k := measure{group: "reverse power", name: "highest reverse power at " + r.place, unit: "kW", value: r.most, limit: nan}
		if r.hours > 0 {
			m.when = c.text(r.at)
			k.when = m.when
		}
		out = append(out, m, k)
	}
	return out
}

// reverseMode is the mode of a bank's first control.
func reverseMode(r *feeder.Regulator) feeder.ReverseMode {
	for _, u := range r.Units {
		if u.Settings != nil {
			return u.Settings.Reverse
		}
	}
	return feeder.ReverseNone
}

// dutyMeasures lists the operations of every device against its life.
func (t *trial) dutyMeasures(life Life) (out []measure) {
	years := periodYears(t.engine.Study.Settings.Period)
	of := &Comparison{Life: life}
	out = append(out, measure{group: "operations", name: "operations", unit: "1", value: t.number("operations"), limit: nan})
	for i := range t.engine.Plan.Devices {
		d := &t.engine.Plan.Devices[i]
		name := d.Name
		if d.Phase != "" {
			name += "." + d.Phase
		}
		n := of.lifeOf(t.engine.Study.Model, d.Name)
		out = append(out, measure{group: "operations", name: "operations of " + name, unit: "1", value: float64(t.acted[i]),
			limit: math.Floor(n * years / lifeYears), source: wearSource + fmt.Sprintf("%g for this kind", n)})
	}
	return out
}
