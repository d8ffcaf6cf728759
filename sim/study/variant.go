package study

import (
	"math"
	"slices"

	"yearflow/sim/feeder"
)

// variant is a study with a changed model, made in memory: what change does to the
// copied lists touches no other study. Case is name, so that a study with an
// [allocation] takes the loads of its base.
func variant(st *feeder.Study, name string, change func(*feeder.Model)) *feeder.Study {
	c, m := *st, *st.Model
	m.Generators = slices.Clone(m.Generators)
	for i := range m.Generators {
		if s := m.Generators[i].Solar; s != nil {
			own := *s
			m.Generators[i].Solar = &own
		}
	}
	m.Functions = slices.Clone(m.Functions)
	m.Batteries = slices.Clone(m.Batteries)
	m.Regulators = slices.Clone(m.Regulators)
	for i := range m.Regulators {
		r := &m.Regulators[i]
		r.Units = slices.Clone(r.Units)
		for u := range r.Units {
			if s := r.Units[u].Settings; s != nil {
				own := *s
				r.Units[u].Settings = &own
			}
		}
	}
	m.Capacitors = slices.Clone(m.Capacitors)
	for i := range m.Capacitors {
		if s := m.Capacitors[i].Control; s != nil {
			own := *s
			m.Capacitors[i].Control = &own
		}
	}
	c.Model, c.Case = &m, name
	c.Settings.Run.Voltages = "none"
	if change != nil {
		change(&m)
	}
	return &c
}

// units is a set of generators and batteries, by name.
type units struct{ generators, batteries map[string]bool }

func newUnits() units { return units{map[string]bool{}, map[string]bool{}} }

func (u units) empty() bool { return len(u.generators)+len(u.batteries) == 0 }

// without is a change that takes units away.
func (u units) without(m *feeder.Model) {
	m.Generators = slices.DeleteFunc(m.Generators, func(g feeder.Generator) bool { return u.generators[g.Name] })
	m.Batteries = slices.DeleteFunc(m.Batteries, func(b feeder.Battery) bool { return u.batteries[b.Name] })
}

// allUnits are all of a model.
func allUnits(m *feeder.Model) units {
	u := newUnits()
	for i := range m.Generators {
		u.generators[m.Generators[i].Name] = true
	}
	for i := range m.Batteries {
		u.batteries[m.Batteries[i].Name] = true
	}
	return u
}

// mostOf is the apparent power in kVA that a generator can have: its rating, or less where
// its real power is constant and no function moves its reactive power.
func mostOf(g *feeder.Generator) float64 {
	if feeder.Unknown(g.KW) || g.Function >= 0 || g.PF == 0 {
		return g.KVA
	}
	return math.Min(g.KVA, math.Abs(g.KW/g.PF))
}

// largestUnit is the one that can have the highest apparent power; of equal ones the first.
// A unit whose rating stands in the table but whose power is nothing is not it: its loss
// would hide that of the one that matters.
func largestUnit(m *feeder.Model) (u units, name string) {
	u = newUnits()
	most, battery := math.Inf(-1), false
	for i := range m.Generators {
		if g := &m.Generators[i]; mostOf(g) > most {
			most, name = mostOf(g), g.Name
		}
	}
	for i := range m.Batteries {
		if b := &m.Batteries[i]; b.KVA > most {
			most, name, battery = b.KVA, b.Name, true
		}
	}
	switch {
	case name == "":
	case battery:
		u.batteries[name] = true
	default:
		u.generators[name] = true
	}
	return u, name
}

// newUnitsOf are the generators and batteries of a case that its base does not have, or
// has otherwise. Where the case scales generation, all of its generators are.
func newUnitsOf(base, c *feeder.Study) units {
	u := newUnits()
	for _, g := range c.Model.Generators {
		k := slices.IndexFunc(base.Model.Generators, func(b feeder.Generator) bool { return b.Name == g.Name })
		if k < 0 || c.Settings.ScaleGeneration != base.Settings.ScaleGeneration || !sameGenerator(base, c, base.Model.Generators[k], g) {
			u.generators[g.Name] = true
		}
	}
	for _, b := range c.Model.Batteries {
		k := slices.IndexFunc(base.Model.Batteries, func(x feeder.Battery) bool { return x.Name == b.Name })
		if k < 0 || differs(base, c, "batteries", b.Name) {
			u.batteries[b.Name] = true
		}
	}
	return u
}

// sameGenerator tells whether two rows and the functions that they name are the same.
func sameGenerator(base, c *feeder.Study, a, b feeder.Generator) bool {
	if differs(base, c, "generators", b.Name) {
		return false
	}
	return a.Function < 0 && b.Function < 0 || !differs(base, c, "inverter-functions", functionName(c.Model, b.Function))
}

func functionName(m *feeder.Model, i int) string {
	if i < 0 {
		return ""
	}
	return m.Functions[i].Name
}

// differs tells whether a row of a table is not the same in both.
func differs(base, c *feeder.Study, table, key string) bool {
	for _, d := range feeder.Differences(base, c) {
		if d.Table == table && d.Key == key {
			return true
		}
	}
	return false
}
