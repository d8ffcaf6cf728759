package study

import (
	"fmt"
	"math"

	"yearflow/devices"
	"yearflow/sim"
	"yearflow/sim/feeder"
)

// inverterEntry is what an inverter's lines are read from. Without a function it keeps a
// constant power factor and has neither category nor curve.
type inverterEntry struct {
	sheet    devices.Inverter
	function bool
}

// inverterEntryOf returns the entry of a generator or battery; function is an index into
// the model's functions, −1 for none, factor its constant power factor then.
func inverterEntryOf(m *feeder.Model, function int, rating, factor float64) *inverterEntry {
	if function < 0 {
		return &inverterEntry{sheet: devices.Inverter{Rating: rating, PowerFactor: factor}}
	}
	return &inverterEntry{sheet: sim.InverterSheet(&m.Functions[function], rating), function: true}
}

// adjusted tells whether the entry holds anything that is entered into an inverter: a
// function, or a power factor other than unity.
func (e *inverterEntry) adjusted() bool {
	return e != nil && (e.function || math.Abs(e.sheet.PowerFactor) != 1)
}

// inverterItems is the order of an inverter's sheet: what it is, the reactive function with
// its points, voltage-active power, limits. Names and points are those of IEEE Std
// 1547-2018, 5.3 and 5.4; a blank is a setting of a function that does not act.
func inverterItems() []item[inverterEntry] {
	var items []item[inverterEntry]
	add := func(setting, unit string, acts func(*inverterEntry) bool, of func(*devices.Inverter) string) {
		items = append(items, item[inverterEntry]{setting, unit, func(e *inverterEntry) string {
			if !acts(e) {
				return ""
			}
			return of(&e.sheet)
		}})
	}
	always := func(*inverterEntry) bool { return true }
	set := func(e *inverterEntry) bool { return e.function }
	by := func(f devices.ReactiveFunction) func(*inverterEntry) bool {
		return func(e *inverterEntry) bool { return e.sheet.Function == f }
	}
	ceiling := func(e *inverterEntry) bool { return e.sheet.VoltWattOn }
	n := func(of func(*devices.Inverter) float64) func(*devices.Inverter) string {
		return func(s *devices.Inverter) string { return cell(of(s)) }
	}

	add("nameplate rating: 1 pu of active and of reactive power", "kVA", always, n(func(s *devices.Inverter) float64 { return s.Rating }))
	add("normal operating performance category", "", set, func(s *devices.Inverter) string { return s.Category.String() })
	add("reactive power function", "", always, func(s *devices.Inverter) string { return s.Function.String() })
	add("power factor", "", by(devices.ConstantPowerFactor), n(func(s *devices.Inverter) float64 { return math.Abs(factorOf(s)) }))
	add("excitation", "", by(devices.ConstantPowerFactor), func(s *devices.Inverter) string {
		switch pf := factorOf(s); {
		case pf == 1:
			return "none: unity"
		case pf < 0:
			return "absorbing"
		}
		return "injecting"
	})
	add("constant reactive power (negative: absorbing)", "pu", by(devices.ConstantReactive), n(func(s *devices.Inverter) float64 { return s.Reactive }))
	volts, watts := by(devices.VoltageReactive), by(devices.ActiveReactive)
	add("voltage-reactive power: V_ref", "pu", volts, n(func(s *devices.Inverter) float64 { return referenceOf(&s.VoltVar) }))
	add("voltage-reactive power: V_ref follows the voltage by itself", "", volts, func(*devices.Inverter) string { return "off" }) // it is not modelled
	for k := range 4 {
		add(fmt.Sprintf("voltage-reactive power: V%d", k+1), "pu", volts, n(func(s *devices.Inverter) float64 { return s.VoltVar.V[k] }))
		add(fmt.Sprintf("voltage-reactive power: Q%d", k+1), "pu", volts, n(func(s *devices.Inverter) float64 { return s.VoltVar.Q[k] }))
	}
	for k := range 3 {
		add(fmt.Sprintf("active power-reactive power: P%d", k+1), "pu", watts, n(func(s *devices.Inverter) float64 { return s.WattVar.P[k] }))
		add(fmt.Sprintf("active power-reactive power: Q%d", k+1), "pu", watts, n(func(s *devices.Inverter) float64 { return s.WattVar.Q[k] }))
	}
	add("open loop response time", "s", set, n(func(s *devices.Inverter) float64 { t, _ := s.Responses(); return seconds(t) }))
	add("voltage-active power", "", set, func(s *devices.Inverter) string { return onOff(s.VoltWattOn) })
	add("voltage-active power: V1", "pu", ceiling, n(func(s *devices.Inverter) float64 { return s.VoltWatt.V1 }))
	add("voltage-active power: V2", "pu", ceiling, n(func(s *devices.Inverter) float64 { return s.VoltWatt.V2 }))
	add("voltage-active power: P2", "pu", ceiling, n(func(s *devices.Inverter) float64 { return s.VoltWatt.P2 }))
	add("voltage-active power: open loop response time", "s", ceiling, n(func(s *devices.Inverter) float64 { _, t := s.Responses(); return seconds(t) }))
	add("active power limit", "pu", set, func(s *devices.Inverter) string {
		if s.Limit == 0 {
			return "none"
		}
		return cell(s.Limit)
	})
	add("priority at the rating", "", set, func(s *devices.Inverter) string { return s.Priority.String() + " power" })
	add("reactive power without active power (at night)", "", set, func(s *devices.Inverter) string { return onOff(s.AtNight) })
	return items
}

// factorOf is the signed power factor; a blank one is unity.
func factorOf(s *devices.Inverter) float64 {
	if s.PowerFactor == 0 || s.PowerFactor == -1 {
		return 1
	}
	return s.PowerFactor
}

func referenceOf(c *devices.VoltVar) float64 {
	if c.Reference == 0 {
		return 1
	}
	return c.Reference
}

func seconds(t devices.Time) float64 { return float64(t) / float64(devices.Second) }

func onOff(on bool) string {
	if on {
		return "on"
	}
	return "off"
}

// inverterRows lists the generators and batteries that have a function or a power factor
// to be entered, in the case or in the base.
func inverterRows(base, other *feeder.Model) (out []SheetRow) {
	add := func(name string, before, now *inverterEntry) {
		if before.adjusted() || now.adjusted() {
			out = append(out, lines("inverter", name, "", inverterItems(), before, now)...)
		}
	}
	for i := range other.Generators {
		g := &other.Generators[i]
		var before *inverterEntry
		for k := range base.Generators {
			if w := &base.Generators[k]; w.Name == g.Name {
				before = inverterEntryOf(base, w.Function, w.KVA, w.PF)
			}
		}
		add(g.Name, before, inverterEntryOf(other, g.Function, g.KVA, g.PF))
	}
	for i := range other.Batteries {
		b := &other.Batteries[i]
		var before *inverterEntry
		for k := range base.Batteries {
			if w := &base.Batteries[k]; w.Name == b.Name {
				before = inverterEntryOf(base, w.Function, w.KVA, 1)
			}
		}
		add(b.Name, before, inverterEntryOf(other, b.Function, b.KVA, 1))
	}
	return out
}
