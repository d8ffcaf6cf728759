package study

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"yearflow/sim/feeder"
	"yearflow/sim/tables"
)

// Knob is a setting that a search turns: of one device, of one unit of a bank, or of
// all units of a bank alike. Its values are Low, Low + Step, … up to High.
type Knob struct {
	Device, Phase string // Phase is all, or a unit's; blank for a capacitor
	Setting, Unit string // as the column of the settings table has them
	Low, High     float64
	Step          float64

	at      tables.Pos
	targets []target
	kind    *settingKind
}

// target is one device of a run that a knob moves.
type target struct {
	name       string // as Engine.SetTapSheet has it
	device     string // as the settings table has it
	phase      string // of its row there; blank for a capacitor
	bank, unit int
	capacitor  bool
}

// settingKind is a column of a settings table.
type settingKind struct {
	name, unit string
	least      float64 // the lowest value that makes sense
	scale      float64 // of the column's unit in that of the sheet
	tap        func(*feeder.TapSettings) *float64
	cap        func(*feeder.CapacitorSettings) *float64
}

// tapKinds are the settings of a tap changer that can be searched.
func tapKinds() []settingKind {
	return []settingKind{
		{name: "set", unit: "V", least: 1e-9, scale: 1, tap: func(s *feeder.TapSettings) *float64 { return &s.Set }},
		{name: "bandwidth", unit: "V", least: 1e-9, scale: 1, tap: func(s *feeder.TapSettings) *float64 { return &s.Bandwidth }},
		{name: "delay", unit: "s", least: 1, scale: 1, tap: func(s *feeder.TapSettings) *float64 { return &s.Delay }},
		{name: "tap time", unit: "s", least: 1, scale: 1, tap: func(s *feeder.TapSettings) *float64 { return &s.TapTime }},
		{name: "ldc r", unit: "V", least: math.Inf(-1), scale: 1, tap: func(s *feeder.TapSettings) *float64 { return &s.R }},
		{name: "ldc x", unit: "V", least: math.Inf(-1), scale: 1, tap: func(s *feeder.TapSettings) *float64 { return &s.X }},
		{name: "limit high", unit: "V", least: 1e-9, scale: 1, tap: func(s *feeder.TapSettings) *float64 { return &s.LimitHigh }},
		{name: "limit low", unit: "V", least: 1e-9, scale: 1, tap: func(s *feeder.TapSettings) *float64 { return &s.LimitLow }},
	}
}

// capacitorKinds are those of a capacitor with a control: the pair of the quantity that
// it follows, the override, and its times.
func capacitorKinds(control feeder.CapacitorControl) []settingKind {
	pair := func(name, unit string, least, scale float64, on, off func(*feeder.CapacitorSettings) *float64) []settingKind {
		return []settingKind{{name: name + " on", unit: unit, least: least, scale: scale, cap: on}, {name: name + " off", unit: unit, least: least, scale: scale, cap: off}}
	}
	on := func(s *feeder.CapacitorSettings) *float64 { return &s.On }
	off := func(s *feeder.CapacitorSettings) *float64 { return &s.Off }
	var out []settingKind
	override := pair("voltage", "V", 1e-9, 1, func(s *feeder.CapacitorSettings) *float64 { return &s.OverrideOn }, func(s *feeder.CapacitorSettings) *float64 { return &s.OverrideOff })
	switch control {
	case feeder.CapacitorHeld:
		return nil
	case feeder.CapacitorVoltage:
		out = pair("voltage", "V", 1e-9, 1, on, off)
		override = nil
	case feeder.CapacitorTime: // in hours after midnight
		out = pair("time", "h", 0, 3600, func(s *feeder.CapacitorSettings) *float64 { return &s.TimeOn }, func(s *feeder.CapacitorSettings) *float64 { return &s.TimeOff })
	case feeder.CapacitorCurrent:
		out = pair("current", "A", 0, 1, on, off)
	default:
		w := capacitorWords[control]
		out = pair(w.word, w.unit, math.Inf(-1), 1, on, off)
	}
	out = append(out, override...)
	return append(out,
		settingKind{name: "delay", unit: "s", least: 1, scale: 1, cap: func(s *feeder.CapacitorSettings) *float64 { return &s.Delay }},
		settingKind{name: "lockout", unit: "s", least: 0, scale: 1, cap: func(s *feeder.CapacitorSettings) *float64 { return &s.Lockout }},
		settingKind{name: "override deadband", unit: "V", least: 0, scale: 1, cap: func(s *feeder.CapacitorSettings) *float64 { return &s.OverrideDeadband }})
}

func kindNamed(kinds []settingKind, name string) (*settingKind, []string) {
	var names []string
	for i := range kinds {
		if kinds[i].name == name {
			return &kinds[i], nil
		}
		names = append(names, kinds[i].name)
	}
	return nil, names
}

// Levels is how many values the knob has.
func (k *Knob) Levels() int { return int(math.Floor((k.High-k.Low)/k.Step+1e-9)) + 1 }

// value is the knob's value at a level, without the dust of the division.
func (k *Knob) value(level int) float64 {
	return math.Round((k.Low+float64(level)*k.Step)*1e9) / 1e9
}

// nearest is the level nearest to a value.
func (k *Knob) nearest(x float64) int {
	return min(max(int(math.Round((x-k.Low)/k.Step)), 0), k.Levels()-1)
}

// Name is how the knob is called in tables: "R1.all set [V]".
func (k *Knob) Name() string {
	out := k.Device
	if k.Phase != "" {
		out += "." + k.Phase
	}
	out += " " + k.Setting
	if k.Unit != "" {
		out += " [" + k.Unit + "]"
	}
	return out
}

// of returns the value that a target has in a model, in the column's unit.
func (k *Knob) of(m *feeder.Model, t *target) float64 {
	if t.capacitor {
		return *k.kind.cap(m.Capacitors[t.bank].Control) / k.kind.scale
	}
	return *k.kind.tap(m.Regulators[t.bank].Units[t.unit].Settings) / k.kind.scale
}

// base is the value in a model; NaN where units have different ones.
func (k *Knob) base(m *feeder.Model) float64 {
	v := k.of(m, &k.targets[0])
	for i := range k.targets {
		if k.of(m, &k.targets[i]) != v {
			return math.NaN()
		}
	}
	return v
}

// find looks the device up and fills the targets; with phase each it returns a knob for
// every unit.
func (k Knob) find(m *feeder.Model, faults *tables.Faults) []Knob {
	for i := range m.Capacitors {
		if m.Capacitors[i].Name == k.Device {
			return k.capacitor(m, i, faults)
		}
	}
	var names []string
	for i := range m.Regulators {
		if m.Regulators[i].Name == k.Device {
			return k.regulator(m, i, faults)
		}
		names = append(names, m.Regulators[i].Name)
	}
	for i := range m.Capacitors {
		names = append(names, m.Capacitors[i].Name)
	}
	faults.Add(k.at, "tune.settings: there is no regulator or capacitor %q%s", k.Device, tables.Hint(k.Device, names))
	return nil
}

func (k Knob) capacitor(m *feeder.Model, i int, faults *tables.Faults) []Knob {
	c := m.Capacitors[i].Control
	if c == nil || c.Control == feeder.CapacitorHeld {
		faults.Add(k.at, "tune.settings: capacitor %q is held, no setting moves it: give it a control in capacitor-settings.csv", k.Device)
		return nil
	}
	if k.Phase != "" && k.Phase != "all" {
		faults.Add(k.at, "tune.settings: capacitor %q is switched as a whole: leave phase out", k.Device)
		return nil
	}
	k.Phase = ""
	kinds := capacitorKinds(c.Control)
	var names []string
	if k.kind, names = kindNamed(kinds, k.Setting); k.kind == nil {
		faults.Add(k.at, "tune.settings: capacitor %q is controlled by %s and has no setting %q to search; it has %s", k.Device, capacitorWords[c.Control].word, k.Setting, strings.Join(names, ", "))
		return nil
	}
	k.Unit = k.kind.unit
	if v := *k.kind.cap(c); math.IsNaN(v) {
		faults.Add(k.at, "tune.settings: capacitor %q has no %s in capacitor-settings.csv: give it a value there to begin from", k.Device, k.Setting)
		return nil
	}
	k.targets = []target{{name: k.Device, device: k.Device, bank: i, capacitor: true}}
	return []Knob{k}
}

func (k Knob) regulator(m *feeder.Model, i int, faults *tables.Faults) []Knob {
	r := &m.Regulators[i]
	var names []string
	if k.kind, names = kindNamed(tapKinds(), k.Setting); k.kind == nil {
		faults.Add(k.at, "tune.settings: a regulator has no setting %q to search%s; it has %s", k.Setting, tables.Hint(k.Setting, names), strings.Join(names, ", "))
		return nil
	}
	k.Unit = k.kind.unit
	if k.Phase == "" {
		k.Phase = "all"
	}
	var each []Knob
	var units []string
	held := 0
	for u := range r.Units {
		s := r.Units[u].Settings
		name := r.Units[u].Name(r.Connection)
		if s == nil || r.Ganged && !r.Units[u].Watched {
			continue
		}
		units = append(units, name)
		if k.Phase != "all" && k.Phase != "each" && !strings.EqualFold(k.Phase, name) {
			continue
		}
		if s.Held {
			held++
			continue
		}
		if v := *k.kind.tap(s); math.IsNaN(v) {
			faults.Add(k.at, "tune.settings: %s.%s has no %s in regulator-settings.csv: give it a value there to begin from", r.Name, name, k.Setting)
			return nil
		}
		one := k
		one.Phase = name
		one.targets = []target{{name: r.Name + "." + name, device: r.Name, phase: name, bank: i, unit: u}}
		each = append(each, one)
	}
	switch {
	case len(each) == 0 && held > 0:
		faults.Add(k.at, "tune.settings: regulator %q is held, no setting moves it: make it automatic in regulator-settings.csv", k.Device)
	case len(units) == 0:
		faults.Add(k.at, "tune.settings: regulator %q has no settings to search: give it a row in regulator-settings.csv", k.Device)
	case len(each) == 0:
		faults.Add(k.at, "tune.settings: regulator %q has no unit %q; it has %s; all turns them alike, each turns them one by one", k.Device, k.Phase, strings.Join(units, ", "))
	case k.Phase == "all":
		for _, o := range each {
			k.targets = append(k.targets, o.targets...)
		}
		return []Knob{k}
	}
	return each
}

// check refuses bounds that no sheet could hold.
func (k *Knob) check(faults *tables.Faults) bool {
	switch {
	case !(k.Step > 0) || math.IsInf(k.Step, 0):
		faults.Add(k.at, "tune.settings: step of %s: want a number above 0, got %v", k.Name(), k.Step)
	case !(k.Low <= k.High) || math.IsInf(k.High-k.Low, 0):
		faults.Add(k.at, "tune.settings: %s: low %v is not at or below high %v", k.Name(), k.Low, k.High)
	case k.Low < k.kind.least:
		faults.Add(k.at, "tune.settings: %s: low %v is below what the setting can be", k.Name(), k.Low)
	case (k.High-k.Low)/k.Step > 1e4:
		faults.Add(k.at, "tune.settings: %s: more than 10,000 values: make the step larger", k.Name())
	case k.Unit == "h" && (k.High >= 24 || !wholeMinutes(k.Low) || !wholeMinutes(k.Step)):
		faults.Add(k.at, "tune.settings: %s: want hours after midnight below 24 in whole minutes, such as step = 0.25", k.Name())
	default:
		return true
	}
	return false
}

func wholeMinutes(h float64) bool { return math.Abs(h*60-math.Round(h*60)) < 1e-9 }

// inSheet turns a value of the column into that of the sheet; a time of day has whole
// minutes, as its cell has.
func (k *Knob) inSheet(v float64) float64 {
	if k.Unit == "h" {
		return math.Round(v*60) * 60
	}
	return v * k.kind.scale
}

// cellOf writes a value as the settings table has it.
func (k *Knob) cellOf(v float64) string {
	if k.Unit == "h" {
		minutes := int(math.Round(v * 60))
		return fmt.Sprintf("%02d:%02d", minutes/60, minutes%60)
	}
	return strconv.FormatFloat(v, 'g', -1, 64)
}
