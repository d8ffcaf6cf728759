package study

import (
	"fmt"
	"maps"
	"slices"
	"strings"

	"yearflow/sim/feeder"
	"yearflow/sim/results"
	"yearflow/sim/tables"
)

// TuneSpec says what a search may turn, what it is for and what it must not do.
type TuneSpec struct {
	Knobs  []Knob
	Aims   []Weight // score = Σ weight·quantity, less is better
	Limits []TuneLimit
	Budget int // candidate-years, the base among them
	Seed   uint64
	Resume bool
	// BuiltIn tells that study.toml has no [tune] settings.
	BuiltIn bool
}

// TuneLimit is what a candidate must keep. Exactly one of AtMost and AtLeast is one;
// Base stands for the value of the base.
type TuneLimit struct {
	Quantity, Unit  string
	AtMost, AtLeast *float64
	OfBase          bool
}

// Defaults of [tune].
const (
	defaultBudget = 200
	defaultSeed   = 1
	builtInSpan   = 2   // V either way of the base's set voltage
	builtInStep   = 0.5 // V
)

// tuneQuantity is what a search can aim at or be limited by; names and units are those
// of compare.csv.
type tuneQuantity struct {
	name, unit string
	of         func(*results.Sums) float64
}

func tuneQuantities(devices []results.Device, set *feeder.Settings) []tuneQuantity {
	type s = *results.Sums
	out := []tuneQuantity{
		{"customer-hours outside A", "h", func(x s) float64 { return x.CustomersBelowA + x.CustomersAboveA }},
		{"customer-hours below A", "h", func(x s) float64 { return x.CustomersBelowA }},
		{"customer-hours above A", "h", func(x s) float64 { return x.CustomersAboveA }},
		{"customer-hours outside B", "h", func(x s) float64 { return x.CustomersBelowB + x.CustomersAboveB }},
		{"customer-hours below B", "h", func(x s) float64 { return x.CustomersBelowB }},
		{"customer-hours above B", "h", func(x s) float64 { return x.CustomersAboveB }},
		{"lowest judged voltage", "pu", func(x s) float64 { return x.LowestPU }},
		{"highest judged voltage", "pu", func(x s) float64 { return x.HighestPU }},
		{"source energy", "kWh", func(x s) float64 { return x.SourceKWh }},
		{"load energy", "kWh", func(x s) float64 { return x.LoadKWh }},
		{"losses energy", "kWh", func(x s) float64 { return x.LossesKWh }},
		{"peak demand", "kW", func(x s) float64 { return x.PeakKW }},
	}
	if set.Prices.Peak == "" { // else compare means another peak by it
		out = append(out, tuneQuantity{"sum of monthly peaks", "kW", func(x s) float64 { return x.MonthlyPeaksKW }})
	}
	out = append(out, []tuneQuantity{
		{"operations", "1", func(x s) float64 { return float64(x.TapOperations + x.CapacitorOperations) }},
		{"tap operations", "1", func(x s) float64 { return float64(x.TapOperations) }},
		{"capacitor operations", "1", func(x s) float64 { return float64(x.CapacitorOperations) }},
		{"device-hours at a stop", "h", func(x s) float64 { return x.StopHours }},
		{"device-hours hunting", "h", func(x s) float64 { return x.HuntingHours }},
		{"settling share", "%", func(x s) float64 { return x.SettlingShare }},
		{"low steps", "1", func(x s) float64 { return float64(x.Low) }},
		{"unsolved steps", "1", func(x s) float64 { return float64(x.Unsolved) }},
	}...)
	for i, d := range devices {
		name := d.Name
		if d.Phase != "" {
			name += "." + d.Phase
		}
		out = append(out, tuneQuantity{"operations of " + name, "1", func(x s) float64 { return float64(x.Operations[i]) }})
	}
	return out
}

func quantityNamed(all []tuneQuantity, name string) *tuneQuantity {
	for i := range all {
		if all[i].name == name {
			return &all[i]
		}
	}
	return nil
}

// specReader reads [tune] of study.toml.
type specReader struct {
	st     *feeder.Study
	all    []tuneQuantity
	faults tables.Faults
}

func tuneKeys() []string { return []string{"settings", "aims", "limits", "budget", "seed", "resume"} }

// readSpec reads [tune]; the error is a tables.Faults.
func readSpec(st *feeder.Study, all []tuneQuantity) (*TuneSpec, error) {
	r := &specReader{st: st, all: all}
	s := &TuneSpec{Budget: defaultBudget, Seed: defaultSeed, Resume: true}
	r.unknown("tune", st.Tune, tuneKeys())
	for key, to := range map[string]func(int64){"budget": func(n int64) { s.Budget = int(n) }, "seed": func(n int64) { s.Seed = uint64(n) }} {
		if v, ok := st.Tune[key]; ok {
			if n, whole := v.(int64); whole && n >= 1 && n <= 1e9 {
				to(n)
			} else {
				r.faults.Add(st.Place("tune."+key), "tune.%s: want a whole number of at least 1, got %v", key, v)
			}
		}
	}
	if v, ok := st.Tune["resume"]; ok {
		if s.Resume, ok = v.(bool); !ok {
			r.faults.Add(st.Place("tune.resume"), "tune.resume: want true or false, got %v", v)
		}
	}
	r.knobs(s)
	r.aims(s)
	r.limits(s)
	r.faults.Sort()
	if err := r.faults.Err(); err != nil {
		return nil, err
	}
	return s, nil
}

func (r *specReader) unknown(where string, table map[string]any, known []string) {
	for _, key := range slices.Sorted(maps.Keys(table)) {
		if !slices.Contains(known, key) {
			r.faults.Add(r.st.Place(where+"."+key), "%s knows no key %q%s; it knows %s", where, key, tables.Hint(key, known), strings.Join(known, ", "))
		}
	}
}

// rows returns the tables of a list such as settings = [{ … }, { … }].
func (r *specReader) rows(key, example string) (out []map[string]any) {
	v, ok := r.st.Tune[key]
	if !ok {
		return nil
	}
	list, ok := v.([]any)
	if !ok {
		if one, is := v.([]map[string]any); is {
			return one
		}
	}
	for _, x := range list {
		row, is := x.(map[string]any)
		if ok = ok && is; is {
			out = append(out, row)
		}
	}
	if !ok {
		r.faults.Add(r.st.Place("tune."+key), "tune.%s: want a list of tables such as %s, got %v", key, example, v)
		return nil
	}
	return out
}

const knobExample = `[{ device = "R1", phase = "all", setting = "set", low = 120, high = 125, step = 0.5 }]`

// knobs reads settings; left out, the set voltages of all regulators.
func (r *specReader) knobs(s *TuneSpec) {
	m := r.st.Model
	if _, ok := r.st.Tune["settings"]; !ok {
		s.BuiltIn = true
		for i := range m.Regulators {
			s.Knobs = append(s.Knobs, builtIn(m, i)...)
		}
		if len(s.Knobs) == 0 {
			r.faults.Add(r.st.Place("tune"), "nothing to search: the feeder has no regulator with automatic control, and [tune] settings names no other device; name one: settings = %s", knobExample)
		}
		return
	}
	known := []string{"device", "phase", "setting", "low", "high", "step"}
	for i, row := range r.rows("settings", knobExample) {
		where := fmt.Sprintf("tune.settings[%d]", i)
		r.unknown(where, row, known)
		k := Knob{at: r.st.Place(where)}
		before := len(r.faults)
		k.Device, k.Setting = r.word(row, "device", k.at, true), r.word(row, "setting", k.at, true)
		k.Phase = r.word(row, "phase", k.at, false)
		for i, to := range [...]*float64{&k.Low, &k.High, &k.Step} {
			var is bool
			if *to, is = tomlNumber(row[known[3+i]]); !is {
				r.faults.Add(k.at, "tune.settings: %s of %s %s: want a number", known[3+i], k.Device, k.Setting)
			}
		}
		if len(r.faults) > before {
			continue
		}
		for _, one := range k.find(m, &r.faults) {
			if one.check(&r.faults) {
				s.Knobs = append(s.Knobs, one)
			}
		}
	}
	if len(s.Knobs) == 0 && len(r.faults) == 0 {
		r.faults.Add(r.st.Place("tune.settings"), "tune.settings: nothing to search: name a setting, such as %s", knobExample)
	}
	r.twice(s)
}

func (r *specReader) word(row map[string]any, key string, at tables.Pos, required bool) string {
	v, given := row[key]
	text, is := v.(string)
	if given && !is || required && text == "" {
		r.faults.Add(at, "tune.settings: %s: want a word in quotes, such as %s", key, knobExample)
	}
	return text
}

// twice refuses two knobs that turn the same thing.
func (r *specReader) twice(s *TuneSpec) {
	seen := map[string]bool{}
	for i := range s.Knobs {
		for _, t := range s.Knobs[i].targets {
			id := t.name + " " + s.Knobs[i].Setting
			if seen[id] {
				r.faults.Add(s.Knobs[i].at, "tune.settings: %s is there twice", id)
			}
			seen[id] = true
		}
	}
}

// builtIn is the search without [tune] settings: each bank's set voltage, its units
// alike, 2 V either way of the base in half volts.
func builtIn(m *feeder.Model, bank int) []Knob {
	k := Knob{Device: m.Regulators[bank].Name, Phase: "all", Setting: "set", Step: builtInStep}
	var none tables.Faults // a bank that is held or has no sheet is left alone
	found := k.regulator(m, bank, &none)
	for i := range found {
		f := &found[i]
		low, high := f.of(m, &f.targets[0]), f.of(m, &f.targets[0])
		for t := range f.targets {
			low, high = min(low, f.of(m, &f.targets[t])), max(high, f.of(m, &f.targets[t]))
		}
		f.Low, f.High = low-builtInSpan, high+builtInSpan
	}
	return found
}

// aims reads aims; left out, those weights of compare that a search over settings is
// for: customer-hours outside range A, losses, operations.
func (r *specReader) aims(s *TuneSpec) {
	if v, own := r.st.Tune["aims"]; own {
		at := r.st.Place("tune.aims")
		entries, ok := v.(map[string]any)
		if !ok {
			r.faults.Add(at, "tune.aims: want a table of weights such as { \"customer-hours outside A\" = 1.0 }, got %v", v)
			return
		}
		for _, name := range slices.Sorted(maps.Keys(entries)) {
			r.aim(s, name, entries[name], at, "aims", "[tune] aims of study.toml")
		}
	} else if v, ok := r.st.Compare["weights"].(map[string]any); ok {
		for _, name := range slices.Sorted(maps.Keys(v)) {
			r.aim(s, name, v[name], r.st.Place("compare.weights"), "aims, taken from compare.weights", "[compare] weights of study.toml")
		}
	} else {
		for _, w := range (&Comparison{}).defaultWeights(&r.st.Settings.Prices) {
			switch w.Quantity {
			case "customer-hours outside A", "losses energy", "operations":
				s.Aims = append(s.Aims, w)
			}
		}
	}
	if len(s.Aims) == 0 && len(r.faults) == 0 {
		r.faults.Add(r.st.Place("tune.aims"), "tune.aims: nothing has a weight other than zero: name a quantity, such as { \"customer-hours outside A\" = 1.0 }")
	}
}

func (r *specReader) aim(s *TuneSpec, name string, value any, at tables.Pos, where, source string) {
	q := r.quantity(name, at, where)
	w, ok := tomlNumber(value)
	switch {
	case q == nil:
	case !ok:
		r.faults.Add(at, "tune.%s: want a number for %q, got %v", where, name, value)
	case w != 0:
		s.Aims = append(s.Aims, Weight{q.name, q.unit, w, source})
	}
}

func (r *specReader) quantity(name string, at tables.Pos, where string) *tuneQuantity {
	if q := quantityNamed(r.all, name); q != nil {
		return q
	}
	var names []string
	for _, q := range r.all {
		names = append(names, q.name)
	}
	r.faults.Add(at, "tune.%s: a search counts no quantity %q%s; it counts %s", where, name, tables.Hint(name, names), strings.Join(names, ", "))
	return nil
}

const limitExample = `[{ quantity = "customer-hours outside A", at_most = "base" }]`

func (r *specReader) limits(s *TuneSpec) {
	for i, row := range r.rows("limits", limitExample) {
		where := fmt.Sprintf("tune.limits[%d]", i)
		at := r.st.Place(where)
		r.unknown(where, row, []string{"quantity", "at_most", "at_least"})
		name, _ := row["quantity"].(string)
		q := r.quantity(name, at, "limits")
		most, hasMost := row["at_most"]
		least, hasLeast := row["at_least"]
		if hasMost == hasLeast {
			r.faults.Add(at, "tune.limits: give %q one of at_most and at_least, such as %s", name, limitExample)
			continue
		}
		v := most
		if hasLeast {
			v = least
		}
		x, number := tomlNumber(v)
		word, _ := v.(string)
		if !number && word != feeder.Base {
			r.faults.Add(at, "tune.limits: want a number or \"base\" for %q, got %v", name, v)
			continue
		}
		if q == nil {
			continue
		}
		l := TuneLimit{Quantity: q.name, Unit: q.unit, OfBase: !number}
		if hasMost {
			l.AtMost = &x
		} else {
			l.AtLeast = &x
		}
		s.Limits = append(s.Limits, l)
	}
}

// tomlNumber reads a finite number.
func tomlNumber(v any) (float64, bool) {
	switch x := v.(type) {
	case float64:
		return x, x-x == 0
	case int64:
		return float64(x), true
	}
	return 0, false
}
