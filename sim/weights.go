package sim

import (
	"fmt"

	"yearflow/profiles"
	"yearflow/sim/feeder"
	"yearflow/sim/tables"
)

// allocated is the part of the inputs that a measured total is shared over: which loads,
// by which weights, and the series of what was measured. Everything here is in the
// order of the tables.
type allocated struct {
	spec       *feeder.Allocation // nil: nothing is shared
	injections []int              // of the loads that take a share
	equations  []equation

	mixed   bool // kVA and kW stand side by side as weights
	shown   [5]int
	metered int
	assumed int // loads whose kvar follow the assumed power factor
}

// equation is one measured figure that the solution must meet.
type equation struct {
	quantity quantity
	phase    int // of the place; −1: the total of its phases
	series   int // −1: kvar by power factor, of the kW that are solved
}

// quantity is what an equation measures.
type quantity uint8

const (
	realPower quantity = iota
	reactivePower
	current
)

func (q quantity) String() string { return [...]string{"kW", "kvar", "A"}[q] }

// tanAssumed is kvar per kW at power factor 0.95: the weight in sharing measured kvar of
// a load that says nothing of its own. It matters only beside loads that do.
const tanAssumed = 0.32868410517886316

// begin finds the profiles of what was measured.
func (a *allocated) begin(st *feeder.Study, find finder, use func(*profiles.Series) int, faults *tables.Faults) {
	spec := st.Settings.Allocation
	if a.spec = spec; spec == nil {
		return
	}
	for i := range st.Model.Loads {
		l := &st.Model.Loads[i]
		if spec.Behind[i] && spec.By == feeder.WeightOwn {
			a.mixed = a.mixed || l.ConnectedKVA > 0 && len(l.EnergyKWh) == 0
		}
	}
	found := map[string]*profiles.Series{} // a name that is wrong is told once
	add := func(q quantity, m feeder.Measured, key, unit string, companion bool) (missing []string, some bool) {
		one := func(name string, phase int) {
			if name == "" {
				return
			}
			s, known := found[name]
			if !known {
				s = find(name, st.Place("allocation."+key), unit)
				found[name] = s
			}
			switch {
			case s == nil:
			case !companion:
				a.equations = append(a.equations, equation{quantity: q, phase: phase, series: use(s)})
			case s.Kvar == nil:
				missing = append(missing, name)
			default:
				some = true
				a.equations = append(a.equations, equation{quantity: q, phase: phase, series: use(s.Kvar)})
			}
		}
		one(m.Total, -1)
		for p, name := range m.Phase {
			one(name, p)
		}
		return missing, some
	}
	if !spec.Current.None() {
		add(current, spec.Current, "current", "A", false)
	} else {
		add(realPower, spec.Real, "real", "kW", false)
	}
	reactive, asked := spec.Real, false
	if !spec.Reactive.None() {
		reactive, asked = spec.Reactive, true
	}
	if feeder.Unknown(spec.Tangent) && spec.Current.None() {
		missing, some := add(reactivePower, reactive, "reactive", "kW", true)
		if len(missing) > 0 && (asked || some) {
			faults.Add(st.Place("allocation.reactive"), "allocation: profile %q has no [kvar] column beside its [kW]: kvar are measured by a column `%s [kvar]` in the same file", missing[0], missing[0])
		}
	}
	if !feeder.Unknown(spec.Tangent) {
		for _, eq := range a.equations {
			a.equations = append(a.equations, equation{quantity: reactivePower, phase: eq.phase, series: -1})
		}
	}
}

// sharesReactive tells that kvar were measured, so that they have factors of their own.
func (a *allocated) sharesReactive() bool {
	if a.spec == nil {
		return false
	}
	if !feeder.Unknown(a.spec.Tangent) {
		return true
	}
	for _, eq := range a.equations {
		if eq.quantity == reactivePower {
			return true
		}
	}
	return false
}

// takes tells whether a load takes a share: it stands behind the place and has no meter.
func (a *allocated) takes(load int, s *profiles.Series) bool {
	if a.spec == nil || !a.spec.Behind[load] {
		return false
	}
	if s != nil && s.Unit == "kW" {
		a.metered++
		return false
	}
	return true
}

// weight is the kW of a load at profile 1 before the factor, and whether its energy
// says how many that are.
func (a *allocated) weight(i int, l *feeder.Load, s *profiles.Series, faults *tables.Faults) (kW float64, byEnergy bool) {
	need := func(what string) {
		faults.Add(l.At, "load %q: the measured total is shared by %s, and it has no %s; give it, a profile in [kW] that meters the load, or another by in [allocation]", l.Name, a.spec.By, what)
	}
	by := a.spec.By
	if by == feeder.WeightOwn {
		switch {
		case len(l.EnergyKWh) > 0:
			by = feeder.WeightEnergy
		case !feeder.Unknown(l.KW):
			by = feeder.WeightReal
		default:
			by = feeder.WeightConnected
		}
	}
	switch by {
	case feeder.WeightEnergy:
		if len(l.EnergyKWh) == 0 {
			need("energy [kWh]")
		}
		kW, byEnergy = 1, true
	case feeder.WeightReal:
		kW = l.KW
	case feeder.WeightConnected:
		switch kW = l.ConnectedKVA; {
		case kW > 0:
		case a.spec.By == feeder.WeightOwn:
			faults.Add(l.At, "load %q: no weight to share the measured total by: give energy [kWh], real [kW] or connected [kVA], a profile in [kW], or by = \"profile\" in [allocation]", l.Name)
		default:
			need("connected [kVA]")
		}
		if a.spec.By == feeder.WeightOwn {
			kW *= a.utilization()
		}
	case feeder.WeightProfile:
		if s == nil && l.Profile == "" {
			need("profile of its class")
		}
		kW = l.Customers
	}
	a.shown[by]++
	return kW, byEnergy
}

func (a *allocated) utilization() float64 {
	if feeder.Unknown(a.spec.Utilization) {
		return feeder.Utilization
	}
	return a.spec.Utilization
}

// tangent is the kvar per kW of a load's weight.
func (a *allocated) tangent(l *feeder.Load) float64 {
	if !l.FactorGiven && a.sharesReactive() {
		a.assumed++
		return tanAssumed
	}
	return l.KVARPerKW
}

// close states what was assumed.
func (a *allocated) close(st *feeder.Study) {
	if a.spec == nil {
		return
	}
	tell := func(what, value string) {
		st.Model.Assumed = append(st.Model.Assumed, feeder.Assumption{Pos: a.spec.At, What: "allocation: " + what, Value: value})
	}
	words := [...]string{feeder.WeightConnected: "connected [kVA]", feeder.WeightEnergy: "energy [kWh]",
		feeder.WeightProfile: "customers and the profile of their class", feeder.WeightReal: "real [kW]"}
	kinds := 0
	for w, n := range a.shown {
		if n > 0 {
			kinds++
			tell(fmt.Sprintf("weight of %d loads", n), words[w])
		}
	}
	if a.metered > 0 {
		tell(fmt.Sprintf("%d metered loads", a.metered), "as their profile in [kW]")
	}
	if a.mixed && kinds > 1 && feeder.Unknown(a.spec.Utilization) {
		tell("utilization", fmt.Sprintf("%g kW per connected kVA, before the factor that all loads share", feeder.Utilization))
	}
	if a.assumed > 0 {
		tell(fmt.Sprintf("kvar of %d loads without a power factor", a.assumed), "shared as at power factor 0.95")
	}
	if !a.sharesReactive() {
		tell("kvar", "not measured: each load keeps its power factor")
	}
	if !a.spec.Current.None() {
		tell("direction of the measured current", "into the feeder")
	}
}
