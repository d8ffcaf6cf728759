package feeder

import (
	"fmt"
	"math"
	"sort"
	"strconv"
	"time"

	"yearflow/sim/tables"
)

// zips are the voltage characteristics that loads may name.
func (b *builder) zips() (map[string]ZIP, []string) {
	out := map[string]ZIP{"power": {PP: 1, QP: 1}, "current": {PI: 1, QI: 1}, "impedance": {PZ: 1, QZ: 1}}
	names := []string{"power", "current", "impedance"}
	for i := range b.t.zips {
		r := &b.t.zips[i]
		name := r.ZIP.Value
		if _, twice := out[name]; twice {
			b.faults.Add(r.ZIP.At, "zip %q is built in; give the row another name", name)
			continue
		}
		if r.Row.Bad {
			out[name] = ZIP{PP: 1, QP: 1}
			names = append(names, name)
			continue
		}
		z := ZIP{r.PZ.Value, r.PI.Value, r.PP.Value, r.QZ.Value, r.QI.Value, r.QP.Value}
		z.PP += b.rest(r.PZ.At, name, "pz, pi and pp", z.PZ+z.PI+z.PP)
		z.QP += b.rest(r.QZ.At, name, "qz, qi and qp", z.QZ+z.QI+z.QP)
		out[name] = z
		names = append(names, name)
	}
	return out, names
}

// rest returns what lacks to 1 in rounded coefficients; it goes to constant power.
func (b *builder) rest(at tables.Pos, name, which string, sum float64) float64 {
	// The bound has room for the rounding of the sum itself.
	if math.Abs(sum-1) > 0.02+1e-9 {
		b.faults.Add(at, "zip %q: %s add up to %s; want 1 within 0.02", name, which, amount(sum))
		return 0
	}
	return 1 - sum
}

func (b *builder) loads() {
	zips, zipNames := b.zips()
	energies := map[string][]*energyRow{}
	var names []string
	known := map[string]bool{}
	for i := range b.t.loads {
		names = append(names, b.t.loads[i].Name.Value)
		known[b.t.loads[i].Name.Value] = true
	}
	for i := range b.t.energies {
		e := &b.t.energies[i]
		if b.t.removed["loads"][e.Load.Value] {
			continue
		}
		if !known[e.Load.Value] {
			b.faults.Add(e.Load.At, "unknown load %q%s", e.Load.Value, tables.Hint(e.Load.Value, names))
			continue
		}
		if _, err := time.Parse("2006-01", e.Month.Value); err != nil {
			b.faults.Add(e.Month.At, "load %q: month %q: want one such as 2025-01", e.Load.Value, e.Month.Value)
		}
		energies[e.Load.Value] = append(energies[e.Load.Value], e)
	}
	if len(b.t.loads) == 0 {
		b.warnings.Add(tables.Pos{File: b.t.folder + "/loads.csv"}, "the feeder has no loads")
	}
	for i := range b.t.loads {
		b.load(&b.t.loads[i], energies[b.t.loads[i].Name.Value], zips, zipNames)
	}
}

func (b *builder) load(r *loadRow, energies []*energyRow, zips map[string]ZIP, zipNames []string) {
	what := "load " + strconv.Quote(r.Name.Value)
	n, c, ps, pairs, ok := b.stand(r.Node, r.Phases, r.Connection, what)
	z, knownZIP := zips[r.ZIP.Value]
	if !knownZIP {
		b.faults.Add(r.ZIP.At, "%s: unknown zip %q%s", what, r.ZIP.Value, tables.Hint(r.ZIP.Value, zipNames))
	}
	l := Load{Name: r.Name.Value, At: r.Row.At, Node: n, Connection: c, Phases: ps, Pairs: pairs, ZIP: z, Profile: r.Profile.Value,
		Customers: r.Customers.Value, KW: math.NaN(), KVAR: math.NaN()}
	amountOK := !r.Row.Bad && b.loadAmount(r, &l, energies, what)
	if !ok || !knownZIP || !amountOK {
		return
	}
	b.model.Loads = append(b.model.Loads, l)
	node := &b.model.Nodes[n]
	if c == Delta {
		ps = ofPairs(pairs)
	}
	for _, p := range ps {
		node.HasLoad[p] = true
		node.Customers[p] += l.Customers
	}
}

// loadAmount reads how much a load takes: one of four ways to say it.
func (b *builder) loadAmount(r *loadRow, l *Load, energies []*energyRow, what string) bool {
	given := []string{}
	if r.Real.Given {
		given = append(given, "real [kW]")
	}
	if r.Connected.Given {
		given = append(given, "connected [kVA]")
	}
	if r.Energy.Given {
		given = append(given, "energy [kWh]")
	}
	if len(energies) > 0 {
		given = append(given, "energies.csv")
	}
	if both := r.Connected.Given && !r.Real.Given && (r.Energy.Given != (len(energies) > 0)); len(given) > 1 && !both {
		b.faults.Add(r.Row.At, "%s: %s and %s are two sources of one value; leave one", what, given[0], given[1])
		return false
	}
	if r.Connected.Given {
		l.ConnectedKVA = r.Connected.Value
	}
	tan, hasFactor, ok := b.tangent(r.Factor, what)
	if !ok {
		return false
	}
	if hasFactor && r.Reactive.Given {
		b.faults.Add(r.Factor.At, "%s: reactive [kvar] and power factor are two sources of one value; leave one", what)
		return false
	}
	if !hasFactor && !r.Reactive.Given {
		b.assumeMany(r.Row.At, "loads: power factor", "1")
	}
	l.KVARPerKW, l.FactorGiven = tan, hasFactor || r.Reactive.Given
	want := WantMultiplier
	switch {
	case r.Real.Given:
		l.KW, l.KVAR = r.Real.Value, r.Real.Value*tan
		if r.Reactive.Given {
			l.KVAR = r.Reactive.Value
			if l.KW > 0 {
				l.KVARPerKW = l.KVAR / l.KW
			}
		}
	case len(given) == 0 && !r.Profile.Given && b.metered(l.Name):
		// its meters say
	case len(given) == 0 && !r.Profile.Given:
		b.faults.Add(r.Row.At, "%s: how much is it? give real [kW], energy [kWh], or a profile in kW", what)
		return false
	default:
		if r.Reactive.Given {
			b.faults.Add(r.Reactive.At, "%s: reactive [kvar] goes with real [kW] only; give a power factor", what)
			return false
		}
		if len(given) == 0 {
			want = WantPower
		}
		if r.Energy.Given {
			l.EnergyKWh = []MonthEnergy{{"", r.Energy.Value}}
		}
		for _, e := range energies {
			l.EnergyKWh = append(l.EnergyKWh, MonthEnergy{e.Month.Value, e.Energy.Value})
		}
		sort.SliceStable(l.EnergyKWh, func(i, j int) bool { return l.EnergyKWh[i].Month < l.EnergyKWh[j].Month })
	}
	if r.Profile.Given {
		b.uses = append(b.uses, ProfileUse{r.Profile.Value, r.Profile.At, want})
	}
	return true
}

// tangent returns kvar per kW of a power factor: a leading one, written negative,
// gives kvar.
func (b *builder) tangent(c tables.Number, what string) (tan float64, given, ok bool) {
	if !c.Given {
		return 0, false, true
	}
	f := c.Value
	if f == 0 || math.Abs(f) > 1 {
		hint := ""
		if math.Abs(f) > 1 && math.Abs(f) <= 100 {
			hint = fmt.Sprintf("; %s %% is %s", amount(f), amount(f/100))
		}
		b.faults.Add(c.At, "%s: a power factor is between -1 and 1 and not 0, got %s%s", what, amount(f), hint)
		return 0, true, false
	}
	tan = math.Sqrt(1-f*f) / math.Abs(f)
	if f < 0 {
		tan = -tan
	}
	return tan, true, true
}

func (b *builder) generators() {
	for i := range b.t.generators {
		b.generator(&b.t.generators[i])
	}
}

func (b *builder) generator(r *generatorRow) {
	what := "generator " + strconv.Quote(r.Name.Value)
	n, c, ps, pairs, ok := b.stand(r.Node, r.Phases, r.Connection, what)
	if r.Row.Bad {
		return
	}
	solar, okSolar := b.solar(r, what)
	function, okFunction := b.functionOf(r.Function, what)
	ok = ok && okSolar && okFunction
	if okSolar && !r.Real.Given && !r.Profile.Given && solar == nil {
		b.faults.Add(r.Row.At, "%s: how much does it give? give real [kW], a profile, or for solar dc [kW]", what)
		ok = false
	}
	if function >= 0 && r.Factor.Given {
		b.faults.Add(r.Factor.At, "%s: power factor and function %q are two sources of its reactive power; leave one blank", what, r.Function.Value)
		ok = false
	}
	if f := r.Factor.Value; f == 0 || math.Abs(f) > 1 {
		b.faults.Add(r.Factor.At, "%s: a power factor is between -1 and 1 and not 0, got %s", what, amount(f))
		ok = false
	}
	if r.Profile.Given {
		b.uses = append(b.uses, ProfileUse{r.Profile.Value, r.Profile.At, WantOutput})
	}
	if !ok {
		return
	}
	b.model.Generators = append(b.model.Generators, Generator{Name: r.Name.Value, At: r.Row.At, Node: n, Connection: c, Phases: ps, Pairs: pairs,
		Kind: r.Kind.Value, KVA: r.Rating.Value, KW: r.Real.Value, PF: r.Factor.Value, Profile: r.Profile.Value, Function: function, Solar: solar})
}
