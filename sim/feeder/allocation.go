package feeder

import (
	"fmt"
	"math"
	"slices"
	"sort"
	"strings"

	"yearflow/sim/tables"
)

// Allocation is [allocation] of study.toml: what was measured at a place is shared over
// the loads behind it that have no meter of their own.
type Allocation struct {
	At      tables.Pos
	Place   string
	Watched *Watched // measured at its from end; nil: at the source
	Phases  []Phase  // of the place
	// Real and Current name profiles in [kW] and [A]; one of them is given. Reactive
	// names profiles in [kW] that have a [kvar] column; where nothing is named the
	// [kvar] columns of Real serve, if there are any.
	Real, Reactive, Current Measured
	// Tangent is kvar per kW by power_factor; NaN: not given.
	Tangent float64
	// By says which weights share: WeightOwn, or one kind for all.
	By          Weight
	Utilization float64 // kW per connected kVA, where kVA and kW are weights side by side
	// Own tells that the case laid over the study has an allocation of its own. Any other
	// case keeps the loads that were allocated without it.
	Own bool
	// Behind tells by Model.Loads which stand behind the place.
	Behind []bool
}

// Measured names the profiles of one quantity: the total, or one for each phase.
type Measured struct {
	Total string
	Phase [3]string
}

// None tells that nothing is named.
func (m Measured) None() bool { return m == Measured{} }

// Weight is what a measured total is shared in proportion to.
type Weight uint8

// The weights. WeightOwn is each load's own: its energy, else its kW, else its kVA.
const (
	WeightOwn Weight = iota
	WeightConnected
	WeightEnergy
	WeightProfile
	WeightReal // only a load's own
)

// String is the word of study.toml.
func (w Weight) String() string {
	return [...]string{"own", "connected", "energy", "profile", "real"}[w]
}

// Utilization is the kW per connected kVA that is assumed where kVA and kW stand side
// by side as weights: service transformers carry 0.3 to 0.6 of their rating at the
// feeder's peak (common practice).
const Utilization = 0.4

// allocation reads [allocation]; nil where there is none.
func (r *settingsReader) allocation(caseName string) *Allocation {
	d := r.d.Allocation
	if _, given := r.at["allocation"]; !given && d == (allocationDocument{}) {
		return nil
	}
	a := &Allocation{At: r.at.of("allocation"), Place: "source", Tangent: math.NaN(), Utilization: math.NaN()}
	for key, at := range r.at {
		if (key == "allocation" || strings.HasPrefix(key, "allocation.")) && caseName != Base && strings.HasPrefix(at.File, "cases/") {
			a.Own = true
		}
	}
	if s, ok := r.text("allocation.at", d.At); ok {
		a.Place = s
	} else if d.At == nil {
		r.assume("allocation.at", "source")
	}
	a.Real = r.measured("allocation.real", d.Real)
	a.Reactive = r.measured("allocation.reactive", d.Reactive)
	a.Current = r.measured("allocation.current", d.Current)
	switch {
	case d.Real == nil && d.Current == nil:
		r.fault("allocation", "what was measured? give real (profiles in [kW]) or current (profiles in [A])")
	case d.Real != nil && d.Current != nil:
		r.fault("allocation.current", "real and current are two measurements of one flow; leave one")
	case d.Current != nil && d.Reactive != nil:
		r.fault("allocation.reactive", "goes with real; with current give power_factor")
	}
	if d.PowerFactor != nil {
		f := r.number("allocation.power_factor", d.PowerFactor, 1)
		if d.Reactive != nil {
			r.fault("allocation.power_factor", "reactive and power_factor are two sources of one value; leave one")
		}
		if f == 0 || math.Abs(f) > 1 {
			r.fault("allocation.power_factor", "a power factor is between -1 and 1 and not 0, got %s", shown(d.PowerFactor))
		} else {
			a.Tangent = math.Copysign(math.Sqrt(1-f*f)/math.Abs(f), f)
		}
	}
	words := []Weight{WeightOwn, WeightConnected, WeightEnergy, WeightProfile}
	word := r.word("allocation.by", d.By, "own", "connected", "energy", "profile")
	for _, w := range words {
		if w.String() == word {
			a.By = w
		}
	}
	if d.By == nil {
		r.assume("allocation.by", "own: each load by its energy, else its kW, else its kVA")
	}
	if d.Utilization != nil {
		a.Utilization = r.number("allocation.utilization", d.Utilization, Utilization)
		switch {
		case a.By != WeightOwn:
			r.fault("allocation.utilization", "is read with by = \"own\" alone: with one kind of weight it cancels out")
		case a.Utilization <= 0 || a.Utilization > 2:
			r.fault("allocation.utilization", "want kW per connected kVA, above 0 and up to 2, got %s", shown(d.Utilization))
		}
	}
	return a
}

// measured reads the name of a profile, or names by phase.
func (r *settingsReader) measured(key string, v any) (m Measured) {
	switch x := v.(type) {
	case nil:
	case string:
		if m.Total = x; strings.TrimSpace(x) == "" {
			r.fault(key, "the name of the profile is blank")
		}
	case map[string]any:
		var keys []string
		for k := range x {
			keys = append(keys, k)
		}
		sort.Strings(keys)
		for _, k := range keys {
			p := slices.Index([]string{"A", "B", "C"}, strings.ToUpper(k))
			name, isText := x[k].(string)
			switch {
			case p < 0:
				r.fault(key, "unknown phase %q; want A, B and C", k)
			case !isText || strings.TrimSpace(name) == "":
				r.fault(key, "phase %s: want the name of a profile in quotation marks, got %v", k, shown(x[k]))
			case m.Phase[p] != "":
				r.fault(key, "phase %s stands twice", strings.ToUpper(k))
			default:
				m.Phase[p] = name
			}
		}
		if len(keys) == 0 {
			r.fault(key, "names no profile")
		}
	default:
		r.fault(key, "want the name of a profile, or { A = , B = , C = }, got %v", shown(v))
	}
	return m
}

// checkAllocation finds the place that was measured and the loads behind it.
func (s *Study) checkAllocation(faults *tables.Faults) {
	a, m := s.Settings.Allocation, s.Model
	if m == nil {
		return
	}
	defer s.checkConnected(faults)
	if a == nil {
		return
	}
	fault := func(key, format string, args ...any) {
		faults.Add(s.at.of("allocation."+key), "allocation.%s: %s", key, fmt.Sprintf(format, args...))
	}
	if a.Own && s.Settings.ScaleLoad != 1 {
		faults.Add(s.at.of("scale.load"), "scale.load: the case has an allocation of its own, which would take the scale back: the loads behind %q add up to what was measured", a.Place)
	}
	first := -1
	if a.Place == "source" {
		if len(m.Sources) != 1 {
			fault("at", "there are %d sources; name the section that was measured", len(m.Sources))
			return
		}
		first = m.Sources[0].Node
		a.Phases = ordered(m.Nodes[first].Phases)
	} else if a.Watched = s.element(a.Place, fault); a.Watched == nil {
		return
	} else {
		b := &builder{model: m}
		a.Phases = ordered(b.watchedPhases(a.Watched))
		_, first = a.Watched.ends(m)
	}
	for _, p := range a.Phases {
		if p > C {
			fault("at", "%q has the legs of a service; a measured place has phases A, B, C", a.Place)
			return
		}
	}
	reached := m.reach(first, a.Watched)
	for i := range m.Sources {
		if a.Watched != nil && reached[m.Sources[i].Node] {
			fault("at", "%q does not feed what is behind it alone: the source at %q reaches it another way", a.Place, m.Nodes[m.Sources[i].Node].Name)
			return
		}
	}
	a.Behind = make([]bool, len(m.Loads))
	for i := range m.Loads {
		a.Behind[i] = reached[m.Loads[i].Node]
	}
	for _, x := range []struct {
		key string
		m   Measured
	}{{"real", a.Real}, {"reactive", a.Reactive}, {"current", a.Current}} {
		if x.m.None() || x.m.Total != "" {
			continue
		}
		for p := A; p <= C; p++ {
			has := slices.Contains(a.Phases, p)
			switch {
			case has && x.m.Phase[p] == "":
				fault(x.key, "phase %s is missing: %s has the phases %s", p, a.Place, letters(a.Phases))
			case !has && x.m.Phase[p] != "":
				fault(x.key, "%s has no phase %s, but the phases %s", a.Place, p, letters(a.Phases))
			}
		}
	}
}

// checkConnected finds loads with a weight alone that nothing is shared over. Whether a
// profile is in kW, and so their meter, is not known here.
func (s *Study) checkConnected(faults *tables.Faults) {
	a := s.Settings.Allocation
	for i := range s.Model.Loads {
		l := &s.Model.Loads[i]
		if a != nil && (a.Behind == nil || a.Behind[i]) || l.ConnectedKVA == 0 || len(l.EnergyKWh) > 0 || l.Profile != "" {
			continue
		}
		faults.Add(l.At, "%s", l.OnlyWeight(a))
	}
}

// OnlyWeight is the fault of a load that is known by connected kVA alone where nothing
// is shared over it.
func (l *Load) OnlyWeight(a *Allocation) string {
	what := fmt.Sprintf("load %q: connected [kVA] is a weight and no amount", l.Name)
	if a == nil {
		return what + ": [allocation] in study.toml names what was measured and is to be shared; or give real [kW] or energy [kWh]"
	}
	return what + fmt.Sprintf(", and the load does not stand behind %q, which was measured: give real [kW], energy [kWh] or a profile in [kW]", a.Place)
}

func letters(ps []Phase) string {
	out := ""
	for _, p := range ps {
		out += p.String()
	}
	return out
}

// element finds what joins two nodes by its name.
func (s *Study) element(name string, fault func(key, format string, args ...any)) *Watched {
	m := s.Model
	var found []Watched
	names := []string{"source"}
	look := func(kind string, n int, of func(int) string) {
		for i := range n {
			names = append(names, of(i))
			if of(i) == name {
				found = append(found, Watched{kind, i})
			}
		}
	}
	look("section", len(m.Sections), func(i int) string { return m.Sections[i].Name })
	look("switch", len(m.Switches), func(i int) string { return m.Switches[i].Name })
	look("transformer", len(m.Transformers), func(i int) string { return m.Transformers[i].Name })
	look("regulator", len(m.Regulators), func(i int) string { return m.Regulators[i].Name })
	switch {
	case len(found) == 0:
		fault("at", "no section, switch, transformer or regulator is called %q, nor \"source\"%s", name, tables.Hint(name, names))
		return nil
	case len(found) > 1:
		fault("at", "%q is both a %s and a %s; give one of them another name", name, found[0].Kind, found[1].Kind)
		return nil
	case found[0].Kind == "switch" && !m.Switches[found[0].Index].Closed:
		fault("at", "the switch %q is open: nothing flows there", name)
		return nil
	}
	return &found[0]
}

// ends are the nodes that an element joins.
func (w *Watched) ends(m *Model) (from, to int) {
	switch w.Kind {
	case "section":
		return m.Sections[w.Index].From, m.Sections[w.Index].To
	case "switch":
		return m.Switches[w.Index].From, m.Switches[w.Index].To
	case "transformer":
		return m.Transformers[w.Index].From, m.Transformers[w.Index].To
	}
	return m.Regulators[w.Index].From, m.Regulators[w.Index].To
}

// reach tells by node what is reached from one without passing an element.
func (m *Model) reach(first int, without *Watched) []bool {
	ways := make([][]int, len(m.Nodes))
	join := func(kind string, n int) {
		for i := range n {
			w := Watched{kind, i}
			if without != nil && w == *without || kind == "switch" && !m.Switches[i].Closed {
				continue
			}
			from, to := w.ends(m)
			ways[from] = append(ways[from], to)
			ways[to] = append(ways[to], from)
		}
	}
	join("section", len(m.Sections))
	join("switch", len(m.Switches))
	join("transformer", len(m.Transformers))
	join("regulator", len(m.Regulators))
	reached := make([]bool, len(m.Nodes))
	reached[first] = true
	for queue := []int{first}; len(queue) > 0; queue = queue[1:] {
		for _, to := range ways[queue[0]] {
			if !reached[to] {
				reached[to] = true
				queue = append(queue, to)
			}
		}
	}
	return reached
}

// allocationUses lists the profiles that [allocation] names.
func (s *Study) allocationUses() (out []ProfileUse) {
	a := s.Settings.Allocation
	if a == nil {
		return nil
	}
	for _, x := range []struct {
		key string
		m   Measured
	}{{"real", a.Real}, {"reactive", a.Reactive}, {"current", a.Current}} {
		for _, name := range append([]string{x.m.Total}, x.m.Phase[:]...) {
			if name != "" {
				out = append(out, ProfileUse{name, s.at.of("allocation." + x.key), WantMeasured})
			}
		}
	}
	return out
}
