package feeder

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"yearflow/sim/tables"
)

// stand reads where a load, capacitor or generator stands: phases to ground, or
// pairs. It checks that the node has them.
func (b *builder) stand(node, phases, connection tables.Text, what string) (n int, c Connection, ps []Phase, pairs []Pair, ok bool) {
	n, ok = b.node(node, what)
	if phases.Value == "" {
		return n, c, nil, nil, false
	}
	var err error
	if connection.Value == "delta" {
		c = Delta
		pairs, err = parsePairs(phases.Value)
		ps = ofPairs(pairs)
	} else {
		ps, err = parsePhases(phases.Value)
		ps = ordered(ps)
	}
	if err != nil {
		b.faults.Add(phases.At, "%s: %v", what, err)
		return n, c, nil, nil, false
	}
	if c == Wye && len(ps) == 2 && ps[0].Leg() {
		c, pairs = Delta, []Pair{{Leg1, Leg2}} // across both legs
	}
	if !ok || len(b.model.Nodes[n].Phases) == 0 {
		return n, c, nil, nil, false
	}
	for _, p := range ps {
		if !has(b.model.Nodes[n].Phases, p) {
			if b.torn {
				return n, c, nil, nil, false // the row that is missing may bring the phase
			}
			b.faults.Add(phases.At, "%s: node %q has no phase %s; it has %s", what, node.Value, p, word(b.model.Nodes[n].Phases))
			return n, c, nil, nil, false
		}
	}
	if c == Delta {
		ps = nil
	}
	return n, c, ps, pairs, true
}

func (b *builder) capacitors() {
	settings := map[string]*capacitorSettingsRow{}
	var banks []string
	for i := range b.t.capacitors {
		banks = append(banks, b.t.capacitors[i].Name.Value)
	}
	for i := range b.t.capacitorSettings {
		s := &b.t.capacitorSettings[i]
		settings[s.Capacitor.Value] = s
		known := false
		for _, n := range banks {
			known = known || n == s.Capacitor.Value
		}
		if !known && !b.t.removed["capacitors"][s.Capacitor.Value] {
			b.faults.Add(s.Capacitor.At, "unknown capacitor %q%s", s.Capacitor.Value, tables.Hint(s.Capacitor.Value, banks))
		}
	}
	for i := range b.t.capacitors {
		r := &b.t.capacitors[i]
		what := "capacitor " + strconv.Quote(r.Name.Value)
		n, c, ps, pairs, ok := b.stand(r.Node, r.Phases, r.Connection, what)
		if !ok {
			continue
		}
		if len(ofPairs(pairs)) > 0 && ofPairs(pairs)[0].Leg() || len(ps) > 0 && ps[0].Leg() {
			b.faults.Add(r.Phases.At, "%s: a capacitor stands on phases, not on the legs of a secondary", what)
			continue
		}
		k := Capacitor{Name: r.Name.Value, At: r.Row.At, Node: n, Phases: ps, Connection: c, Pairs: pairs, KVAR: r.Size.Value,
			NominalKV: r.Nominal.Value, Closed: r.State.Value == "closed"}
		if c == Delta {
			k.Phases = ofPairs(pairs)
		}
		if !r.Nominal.Given {
			k.NominalKV = b.model.Nodes[n].Nominal
			b.assume(r.Row.At, what+": nominal [kV]", amount(k.NominalKV)+" (its node's)")
		}
		if s := settings[r.Name.Value]; s != nil && !s.Row.Bad {
			k.Control = b.capacitorSettings(s, &k, what)
		}
		b.model.Capacitors = append(b.model.Capacitors, k)
	}
}

// quantity is a pair of columns of a capacitor control.
type quantity struct {
	name    string
	on, off tables.Number
	control CapacitorControl
	watched bool // it is measured in a section
}

func (s *capacitorSettingsRow) quantities() []quantity {
	return []quantity{
		{"voltage", s.VoltageOn, s.VoltageOff, CapacitorVoltage, false},
		{"kvar", s.KvarOn, s.KvarOff, CapacitorKVAR, true},
		{"current", s.CurrentOn, s.CurrentOff, CapacitorCurrent, true},
		{"power factor", s.FactorOn, s.FactorOff, CapacitorPowerFactor, true},
		{"temperature", s.TemperatureOn, s.TemperatureOff, CapacitorTemperature, false},
	}
}

func (b *builder) capacitorSettings(s *capacitorSettingsRow, k *Capacitor, what string) *CapacitorSettings {
	out := &CapacitorSettings{At: s.Row.At, On: math.NaN(), Off: math.NaN(), OverrideOn: math.NaN(), OverrideOff: math.NaN(),
		OverrideDeadband: s.Deadband.Value, Weekdays: s.Days.Value == "weekdays", Delay: s.Delay.Value, Lockout: s.Lockout.Value, DailyLimit: s.Limit.Value}
	what = "control of " + what
	if s.Delay.Given && out.Delay < 1 {
		b.faults.Add(s.Delay.At, "%s: delay is at least 1 s, got %s s", what, amount(out.Delay))
	}
	watched := false
	for _, q := range s.quantities() {
		if q.name != s.Control.Value {
			if q.name != "voltage" && (q.on.Given || q.off.Given) {
				b.warnings.Add(q.on.At, "%s: it follows %s; what stands in %s on and off is not read", what, s.Control.Value, q.name)
			}
			continue
		}
		out.Control, watched = q.control, q.watched
		out.On, out.Off = q.on.Value, q.off.Value
		if !q.on.Given || !q.off.Given {
			b.faults.Add(s.Row.At, "%s: control %s needs %s on and %s off", what, q.name, q.name, q.name)
		} else if q.on.Value == q.off.Value {
			b.faults.Add(q.off.At, "%s: %s on and off are the same, %s; which side closes is said by their order", what, q.name, amount(q.on.Value))
		}
	}
	switch s.Control.Value {
	case "time":
		out.Control = CapacitorTime
		out.TimeOn = b.clock(s.TimeOn, s.Row.At, what, "time on")
		out.TimeOff = b.clock(s.TimeOff, s.Row.At, what, "time off")
		if s.TimeOn.Given && s.TimeOff.Given && out.TimeOn == out.TimeOff {
			b.faults.Add(s.TimeOff.At, "%s: time on and time off are the same", what)
		}
	case "power factor":
		for _, c := range []tables.Number{s.FactorOn, s.FactorOff} {
			if c.Given && (c.Value == 0 || math.Abs(c.Value) > 1) {
				b.faults.Add(c.At, "%s: a power factor is between -1 and 1 and not 0 (leading negative), got %s", what, amount(c.Value))
			}
		}
	case "temperature":
		if !s.Profile.Given {
			b.faults.Add(s.Row.At, "%s: control temperature needs the profile that it follows", what)
		}
	}
	if s.Profile.Given && out.Control == CapacitorTemperature {
		out.Profile = s.Profile.Value
		b.uses = append(b.uses, ProfileUse{s.Profile.Value, s.Profile.At, WantTemperature})
	}
	if out.Control != CapacitorVoltage && out.Control != CapacitorHeld {
		out.OverrideOn, out.OverrideOff = s.VoltageOn.Value, s.VoltageOff.Value
		if out.OverrideOn >= out.OverrideOff {
			b.faults.Add(s.VoltageOn.At, "%s: the override closes below voltage on, %s V, and opens above voltage off, %s V: on must be the lower", what, amount(out.OverrideOn), amount(out.OverrideOff))
		}
	}
	phases := b.model.Nodes[k.Node].Phases
	where := fmt.Sprintf("node %q", b.model.Nodes[k.Node].Name)
	if watched {
		out.Watched = b.watched(s.Watched, s.Row.At, what, "control "+s.Control.Value)
		if out.Watched == nil {
			return out
		}
		phases = b.watchedPhases(out.Watched)
		where = fmt.Sprintf("%s %q", out.Watched.Kind, s.Watched.Value)
	} else if s.Watched.Given {
		b.warnings.Add(s.Watched.At, "%s: control %s watches no section", what, s.Control.Value)
	}
	out.Phase = b.controlPhase(s.Phase, phases, where, what, watched)
	return out
}

// controlPhase reads the phase, or pair, that a control names.
func (b *builder) controlPhase(c tables.Text, phases []Phase, where, what string, watched bool) []Phase {
	if !c.Given {
		return nil
	}
	ps, err := parsePhases(c.Value)
	if err != nil || len(ps) > 2 || watched && len(ps) > 1 {
		b.faults.Add(c.At, "%s: phase %q: want one phase, or for a voltage a pair such as AB; blank means no particular one", what, c.Value)
		return nil
	}
	for _, p := range ps {
		if len(phases) > 0 && !has(phases, p) {
			b.faults.Add(c.At, "%s: %s has no phase %s; it has %s", what, where, p, word(phases))
			return nil
		}
	}
	return ps
}

func (b *builder) clock(c tables.Text, row tables.Pos, what, name string) float64 {
	if !c.Given {
		b.faults.Add(row, "%s: %s is blank: want hh:mm", what, name)
		return math.NaN()
	}
	h, m, ok := strings.Cut(c.Value, ":")
	hours, err1 := strconv.Atoi(h)
	minutes, err2 := strconv.Atoi(m)
	if !ok || err1 != nil || err2 != nil || len(h) > 2 || len(m) != 2 || hours < 0 || hours > 23 || minutes < 0 || minutes > 59 {
		b.faults.Add(c.At, "%s: %s %q: want hh:mm from 00:00 to 23:59", what, name, c.Value)
		return math.NaN()
	}
	return float64(hours*3600 + minutes*60)
}

// watched finds the element that a control measures.
func (b *builder) watched(c tables.Text, row tables.Pos, what, why string) *Watched {
	if !c.Given {
		b.faults.Add(row, "%s: %s needs a watched section (or a switch, transformer or regulator)", what, why)
		return nil
	}
	var found []Watched
	var names []string
	look := func(kind string, n int, name func(int) string) {
		for i := range n {
			names = append(names, name(i))
			if name(i) == c.Value {
				found = append(found, Watched{kind, i})
			}
		}
	}
	m := b.model
	look("section", len(m.Sections), func(i int) string { return m.Sections[i].Name })
	look("switch", len(m.Switches), func(i int) string { return m.Switches[i].Name })
	look("transformer", len(m.Transformers), func(i int) string { return m.Transformers[i].Name })
	look("regulator", len(m.Regulators), func(i int) string { return m.Regulators[i].Name })
	switch len(found) {
	case 0:
		b.faults.Add(c.At, "%s: there is no section, switch, transformer or regulator %q%s", what, c.Value, tables.Hint(c.Value, names))
		return nil
	case 1:
		return &found[0]
	}
	b.faults.Add(c.At, "%s: %q is both a %s and a %s; give one of them another name", what, c.Value, found[0].Kind, found[1].Kind)
	return nil
}

func (b *builder) watchedPhases(w *Watched) []Phase {
	switch w.Kind {
	case "section":
		return ordered(b.model.Sections[w.Index].Phases)
	case "switch":
		return b.model.Switches[w.Index].Phases
	case "transformer":
		return ordered(b.model.Transformers[w.Index].Phases)
	}
	return b.model.Regulators[w.Index].Phases
}
