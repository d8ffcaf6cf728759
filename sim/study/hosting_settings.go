package study

import (
	"fmt"
	"maps"
	"math"
	"slices"
	"sort"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/tables"
)

// hostingSettings is [hosting] of study.toml, checked, with its defaults.
type hostingSettings struct {
	places      []int // nodes
	chosen      bool  // by the program
	kind        string
	profile     string
	factor      float64   // power factor
	function    int       // into Model.Functions; −1 none
	grid        []float64 // kW, rising
	limits      map[string]float64
	seed        uint64
	runs        int
	perCustomer float64 // kW
	levels      int
}

func hostingKeys() []string {
	return []string{"places", "kind", "profile", "power factor", "function", "grid", "criteria", "seed", "runs", "per customer", "levels"}
}

// hostingLimit is a criterion with its default limit; NaN: only where the study gives one.
type hostingLimit struct {
	name, unit string
	limit      float64
	source     string
}

const choice = "default of the program, a plain choice: "

// hostingLimits are the criteria in the order of telling; hours is the period's length.
func hostingLimits(hours float64) []hostingLimit {
	return []hostingLimit{
		{"hours above A", "h", hours / 100, choice + "1 % of the period more than the base has at some judged place (ANSI C84.1 wants excursions outside range A infrequent and gives no number)"},
		{"hours below A", "h", hours / 100, choice + "1 % of the period more than the base has"},
		{"hours above A at the connection", "h", hours / 100, choice + "1 % of the period more than the base has there"},
		{"hours outside B", "h", 0, outerSource + ": none more than the base has"},
		{"rapid voltage change above 600 V", "%", changeLimitMV, changeSource},
		{"rapid voltage change up to 600 V", "%", changeLimitLV, changeSource},
		{"loading", "%", 100, ratingSource + ", of what is loaded by more than 1 % more than in the base"},
		{"unbalance", "%", unbalanceLimit, unbalanceSource + "; where it is more than in the base"},
		{"rise of operations", "%", 50, "common practice: a rise of operations by 25 to 50 % is looked into"},
		{"low or unsolved steps", "1", 0, "none more than the base has"},
		{"hours of reverse power at the source", "h", nan, "[hosting] criteria of study.toml"},
	}
}

// readHosting checks [hosting]. peak is the highest demand of the base, kW; e an engine of
// the base.
func readHosting(e *sim.Engine, peak float64) (*hostingSettings, error) {
	st := e.Study
	h := &hostingSettings{kind: "solar", factor: 1, function: -1, seed: 1, runs: 200, perCustomer: 5, levels: 20, limits: map[string]float64{}}
	var faults tables.Faults
	p := st.Settings.Period
	for _, l := range hostingLimits(float64(p.End-p.Start) / 3.6e12) {
		h.limits[l.name] = l.limit
	}
	r := tomlReader{st: st, faults: &faults}
	for _, key := range slices.Sorted(maps.Keys(st.Hosting)) {
		v := st.Hosting[key]
		switch key {
		case "places":
			h.places = r.nodes(key, v)
		case "kind":
			h.kind = r.word(key, v)
		case "profile":
			h.profile = r.word(key, v)
		case "power factor":
			if h.factor = r.number(key, v); !(math.Abs(h.factor) > 0 && math.Abs(h.factor) <= 1) {
				r.fault(key, "want a number in (0, 1], negative where it absorbs, got %v", v)
			}
		case "function":
			name := r.word(key, v)
			if h.function = slices.IndexFunc(st.Model.Functions, func(f feeder.InverterFunction) bool { return f.Name == name }); h.function < 0 {
				r.fault(key, "there is no function %q in inverter-functions.csv", name)
			}
		case "grid":
			h.grid = r.rising(key, v)
		case "criteria":
			r.criteria(h, v)
		case "seed":
			h.seed = uint64(r.whole(key, v, 0))
		case "runs":
			h.runs = r.whole(key, v, 1)
		case "levels":
			h.levels = r.whole(key, v, 1)
		case "per customer":
			if h.perCustomer = r.number(key, v); !(h.perCustomer > 0) {
				r.fault(key, "want kW above 0, got %v", v)
			}
		default:
			faults.Add(st.Place("hosting."+key), "[hosting] knows no key %q%s", key, tables.Hint(key, hostingKeys()))
		}
	}
	h.useProfile(e, &faults)
	if h.grid == nil {
		h.grid = defaultGrid(peak)
	}
	if h.places == nil {
		h.places, h.chosen = spreadPlaces(st.Model), true
		if len(h.places) == 0 {
			faults.Add(st.Place("hosting"), "the feeder has no three-phase node to choose places from: name them, places = [\"node\"]")
		}
	}
	return h, faults.Err()
}

// useProfile finds the output that every new unit follows.
func (h *hostingSettings) useProfile(e *sim.Engine, faults *tables.Faults) {
	at := e.Study.Place("hosting.profile")
	if h.profile == "" {
		most := 0.0
		for i := range e.Study.Model.Generators {
			g := &e.Study.Model.Generators[i]
			if g.Kind != h.kind || g.Profile == "" || g.KVA <= most {
				continue
			}
			if _, unit, err := e.Profile(g.Profile); err == nil && unit == "pu" {
				most, h.profile = g.KVA, g.Profile
			}
		}
		if h.profile == "" {
			faults.Add(at, "hosting needs the output of the units over time, and no generator of kind %q has a profile in [pu]: add [hosting] profile = \"NAME\", a profile of output per unit of rating", h.kind)
		}
		return
	}
	if _, unit, err := e.Profile(h.profile); err != nil {
		faults.Add(at, "hosting.profile: %v", err)
	} else if unit != "pu" {
		faults.Add(at, "hosting.profile: %q is in [%s]; it must be in [pu], output per unit of rating", h.profile, unit)
	}
}

// defaultGrid is 5 to 100 % of the peak demand, rounded to 10 kW.
func defaultGrid(peak float64) (out []float64) {
	for _, share := range []float64{5, 10, 20, 30, 40, 60, 80, 100} {
		x := math.Max(10, 10*math.Round(peak*share/1000))
		if len(out) == 0 || x > out[len(out)-1] {
			out = append(out, x)
		}
	}
	return out
}

// defaultPlaces is how many places are chosen by distance.
const defaultPlaces = 8

// spreadPlaces chooses three-phase primary nodes evenly in the order of their distance from
// the source, the nearest and the farthest among them, and those with generators.
func spreadPlaces(m *feeder.Model) (out []int) {
	far := distances(m)
	var all []int
	for i := range m.Nodes {
		n := &m.Nodes[i]
		if len(n.Phases) == 3 && n.Phases[0] == feeder.A && n.Grounded && n.Nominal > lowVoltageHighKV && n.Nominal <= 35 && far[i] > 0 {
			all = append(all, i)
		}
	}
	sort.SliceStable(all, func(a, b int) bool { return far[all[a]] < far[all[b]] })
	take := func(i int) {
		if !slices.Contains(out, i) {
			out = append(out, i)
		}
	}
	k := min(defaultPlaces, len(all))
	for i := range k {
		take(all[i*(len(all)-1)/max(1, k-1)])
	}
	for i := range m.Generators {
		if node := m.Generators[i].Node; slices.Contains(all, node) {
			take(node)
		}
	}
	sort.SliceStable(out, func(a, b int) bool { return far[out[a]] < far[out[b]] })
	return out
}

// distances are km along the shortest way from a source.
func distances(m *feeder.Model) []float64 {
	d := make([]float64, len(m.Nodes))
	for i := range d {
		d[i] = math.Inf(1)
	}
	for i := range m.Sources {
		d[m.Sources[i].Node] = 0
	}
	for again := true; again; {
		again = false
		relax := func(a, b int, km float64) {
			if d[a]+km < d[b] {
				d[b], again = d[a]+km, true
			}
			if d[b]+km < d[a] {
				d[a], again = d[b]+km, true
			}
		}
		for i := range m.Sections {
			relax(m.Sections[i].From, m.Sections[i].To, m.Sections[i].LengthKM)
		}
		for i := range m.Transformers {
			relax(m.Transformers[i].From, m.Transformers[i].To, 0)
		}
		for i := range m.Regulators {
			relax(m.Regulators[i].From, m.Regulators[i].To, 0)
		}
		for i := range m.Switches {
			if m.Switches[i].Closed {
				relax(m.Switches[i].From, m.Switches[i].To, 0)
			}
		}
	}
	return d
}

// tomlReader reads the values of [hosting].
type tomlReader struct {
	st     *feeder.Study
	faults *tables.Faults
}

func (r *tomlReader) fault(key, format string, args ...any) {
	r.faults.Add(r.st.Place("hosting."+key), "hosting.%s: %s", key, fmt.Sprintf(format, args...))
}

func (r *tomlReader) word(key string, v any) string {
	s, ok := v.(string)
	if !ok || s == "" {
		r.fault(key, "want a word in quotes, got %v", v)
	}
	return s
}

func (r *tomlReader) number(key string, v any) float64 {
	switch x := v.(type) {
	case float64:
		if x-x == 0 {
			return x
		}
	case int64:
		return float64(x)
	}
	r.fault(key, "want a number, got %v", v)
	return 1
}

func (r *tomlReader) whole(key string, v any, least int64) int {
	x, ok := v.(int64)
	if !ok || x < least || x > 1<<31 {
		r.fault(key, "want a whole number of %d or more, got %v", least, v)
		return int(least)
	}
	return int(x)
}

func (r *tomlReader) nodes(key string, v any) (out []int) {
	list, ok := v.([]any)
	if !ok || len(list) == 0 {
		r.fault(key, "want a list of nodes such as [\"n12\"], got %v", v)
		return []int{}
	}
	out = []int{}
	var names []string
	for i := range r.st.Model.Nodes {
		names = append(names, r.st.Model.Nodes[i].Name)
	}
	for _, x := range list {
		name, _ := x.(string)
		i, known := r.st.Model.NodeIndex(name)
		switch {
		case !known:
			r.fault(key, "there is no node %q%s", name, tables.Hint(name, names))
		case slices.Contains(out, i):
			r.fault(key, "node %q is there twice", name)
		default:
			out = append(out, i)
		}
	}
	return out
}

func (r *tomlReader) rising(key string, v any) (out []float64) {
	list, ok := v.([]any)
	if !ok || len(list) == 0 {
		r.fault(key, "want a list of kW such as [250, 500, 1000], got %v", v)
		return []float64{1}
	}
	for _, x := range list {
		n := r.number(key, x)
		if !(n > 0) || len(out) > 0 && n <= out[len(out)-1] {
			r.fault(key, "want kW above 0 that rise, got %v", v)
			return []float64{1}
		}
		out = append(out, n)
	}
	return out
}

func (r *tomlReader) criteria(h *hostingSettings, v any) {
	entries, ok := v.(map[string]any)
	if !ok {
		r.fault("criteria", "want a table of limits such as { \"loading\" = 100 }, got %v", v)
		return
	}
	for _, name := range slices.Sorted(maps.Keys(entries)) {
		if _, known := h.limits[name]; !known {
			r.fault("criteria", "there is no criterion %q%s", name, tables.Hint(name, slices.Sorted(maps.Keys(h.limits))))
			continue
		}
		if s, off := entries[name].(string); off && s == "off" {
			h.limits[name] = nan
			continue
		}
		h.limits[name] = r.number("criteria", entries[name])
	}
}
