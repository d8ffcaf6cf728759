package feeder

import (
	"math"
	"sort"
	"strings"

	"yearflow/sim/tables"
)

func (r *settingsReader) limits() Limits {
	d := r.d.Limits
	l := Limits{All: r.word("limits.judge", d.Judge, "customers", "all") == "all"}
	switch v := d.Range.(type) {
	case nil:
	case string:
		if !strings.EqualFold(strings.TrimSpace(v), "ANSI C84.1") {
			r.fault("limits.range", "%q is not known; want \"ANSI C84.1\" or { low = , high = , \"outer low\" = , \"outer high\" = } in p.u.", v)
		}
	case map[string]any:
		l.Own = true
		r.ownRange(v, &l)
	default:
		r.fault("limits.range", "want \"ANSI C84.1\" or { low = , high = , \"outer low\" = , \"outer high\" = }, got %v", shown(v))
	}
	l.Allowance = r.allowance(d.Allowance)
	return l
}

// ownRange reads limits given as numbers. The outer ones may be left out: they are
// the inner ones then.
func (r *settingsReader) ownRange(v map[string]any, l *Limits) {
	const key = "limits.range"
	fields := map[string]*float64{"low": &l.Low, "high": &l.High, "outer low": &l.OuterLow, "outer high": &l.OuterHigh}
	names := []string{"low", "high", "outer low", "outer high"}
	given := map[string]bool{}
	var keys []string
	for k := range v {
		keys = append(keys, k)
	}
	sort.Strings(keys)
	for _, k := range keys {
		name := strings.NewReplacer("_", " ", "-", " ").Replace(k)
		f, ok := fields[name]
		if !ok {
			r.fault(key, "unknown key %q%s", k, tables.Hint(k, names))
			return
		}
		given[name] = true
		*f = r.number(key+"."+k, v[k], math.NaN())
	}
	for _, n := range names[:2] {
		if !given[n] {
			r.fault(key, "%s is missing", n)
			return
		}
	}
	if !given["outer low"] {
		l.OuterLow = l.Low
	}
	if !given["outer high"] {
		l.OuterHigh = l.High
	}
	if !(0 < l.OuterLow && l.OuterLow <= l.Low && l.Low < l.High && l.High <= l.OuterHigh) {
		r.fault(key, "want outer low ≤ low < high ≤ outer high, got %v, %v, %v, %v", l.OuterLow, l.Low, l.High, l.OuterHigh)
	} else if l.High > 2 {
		r.fault(key, "the limits are in p.u., got high = %v; 126 V on the 120 V base is 1.05", l.High)
	}
}

// allowance reads a text such as "2.5 V".
func (r *settingsReader) allowance(v any) float64 {
	const key = "limits.allowance"
	s, ok := r.text(key, v)
	if !ok {
		return 0
	}
	t := strings.TrimSpace(s)
	x, err := tables.ParseNumber(strings.TrimSpace(strings.TrimSuffix(t, "V")))
	if err != nil || !strings.HasSuffix(t, "V") {
		r.fault(key, "want volts on the 120 V base such as \"2.5 V\", got %q", s)
		return 0
	}
	if x < 0 || x > 30 {
		r.fault(key, "want 0 V to 30 V, got %q", s)
	}
	return x
}

func (r *settingsReader) prices() Prices {
	d := r.d.Prices
	p := Prices{Currency: "USD", Energy: math.NaN(), Demand: math.NaN(), Operation: math.NaN(), Rate: math.NaN(), Years: 20}
	if s, ok := r.text("prices.currency", d.Currency); ok {
		p.Currency = s
	}
	if s, ok := d.Energy.(string); ok {
		p.EnergyProfile = s
	} else {
		p.Energy = r.number("prices.energy", d.Energy, math.NaN())
	}
	p.Demand = r.price("prices.demand", d.Demand)
	p.Operation = r.price("prices.operation", d.Operation)
	p.Peak, _ = r.text("prices.peak", d.Peak)
	p.Rate = r.price("prices.rate", d.Rate)
	if p.Rate > 1 {
		r.fault("prices.rate", "want a share a year such as 0.07, got %v", p.Rate)
	}
	p.Years = r.number("prices.years", d.Years, 20)
	if !(p.Years > 0) {
		r.fault("prices.years", "must be above 0, got %v", p.Years)
	}
	return p
}

func (r *settingsReader) price(key string, v any) float64 {
	x := r.number(key, v, math.NaN())
	if x < 0 {
		r.fault(key, "must not be negative, got %v", x)
	}
	return x
}
