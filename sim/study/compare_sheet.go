package study

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"yearflow/sim/feeder"
	"yearflow/sim/tables"
)

// Sheet is the settings sheet of a case, in the order in which a technician enters it.
type Sheet struct {
	Case        string
	Recommended bool // the best-ranked case
	Rows        []SheetRow
}

// SheetRow is one setting of one device. AsLeft is left for the field.
type SheetRow struct {
	Kind                         string // regulator, capacitor, inverter
	Device, Phase, Setting, Unit string
	Present, New                 string // in the base, in the case
}

// Changed tells whether the case wants another value.
func (r SheetRow) Changed() bool { return r.Present != r.New }

// sheets writes a sheet for every undominated case that changes a settings sheet, the
// best-ranked first.
func (c *Comparison) sheets() {
	for _, r := range c.Ranking {
		i := c.index(r.Case)
		if i == 0 || !r.Undominated {
			continue
		}
		s := Sheet{Case: r.Case, Recommended: r.Rank == 1, Rows: sheetRows(c.Cases[0].Study.Model, c.Cases[i].Study.Model)}
		changed := false
		for _, row := range s.Rows {
			changed = changed || row.Changed()
		}
		if changed {
			c.Sheets = append(c.Sheets, s)
		}
	}
}

// file is the name of the sheet's CSV file: a case's name is one of a folder already.
func (s *Sheet) file() string { return "sheet-" + s.Case + ".csv" }

func (s *Sheet) table() NamedTable {
	t := NamedTable{Name: s.file(), Rows: [][]string{{"device", "phase", "setting", "unit", "present", "new", "change", "as left", "by and date"}}}
	for _, r := range s.Rows {
		change := ""
		if r.Changed() {
			change = "CHANGE"
		}
		t.Rows = append(t.Rows, []string{r.Device, r.Phase, r.Setting, r.Unit, r.Present, r.New, change, "", ""})
	}
	return t
}

// item is one line of a sheet and how to read it from the settings of a device.
type item[S any] struct {
	setting, unit string
	of            func(*S) string
}

// tapEntry is what a tap changer's lines are read from.
type tapEntry struct {
	bank *feeder.Regulator
	s    *feeder.TapSettings
}

// tapItems is the order of a tap changer's sheet: set voltage, bandwidth, delay, LDC R
// and X, CT primary, PT ratio, limits, reverse (common practice).
func tapItems() []item[tapEntry] {
	n := func(setting, unit string, of func(*feeder.TapSettings) float64) item[tapEntry] {
		return item[tapEntry]{setting, unit, func(e *tapEntry) string { return cell(of(e.s)) }}
	}
	w := func(setting string, of func(*tapEntry) string) item[tapEntry] {
		return item[tapEntry]{setting, "", of}
	}
	items := []item[tapEntry]{
		n("set voltage", "V", func(s *feeder.TapSettings) float64 { return s.Set }),
		n("bandwidth, total", "V", func(s *feeder.TapSettings) float64 { return s.Bandwidth }),
		n("time delay", "s", func(s *feeder.TapSettings) float64 { return s.Delay }),
		n("time between taps", "s", func(s *feeder.TapSettings) float64 { return s.TapTime }),
		w("timer", func(e *tapEntry) string {
			if e.s.Integrate {
				return "integrate"
			}
			return "restart"
		}),
		n("line-drop compensation R", "V", func(s *feeder.TapSettings) float64 { return s.R }),
		n("line-drop compensation X", "V", func(s *feeder.TapSettings) float64 { return s.X }),
		// r = R·PT/CT: Kersting, Distribution System Modeling and Analysis, ch. 7.
		{"  stands for a line of r", "ohm", func(e *tapEntry) string { return cell(round4(e.s.R * e.bank.PT / e.bank.CT)) }},
		{"  and x", "ohm", func(e *tapEntry) string { return cell(round4(e.s.X * e.bank.PT / e.bank.CT)) }},
		n("compensator rotation (blank: by connection)", "deg", func(s *feeder.TapSettings) float64 { return s.Rotation }),
		{"CT primary", "A", func(e *tapEntry) string { return cell(e.bank.CT) }},
		w("PT ratio", func(e *tapEntry) string { return cell(e.bank.PT) }),
		n("voltage limit high", "V", func(s *feeder.TapSettings) float64 { return s.LimitHigh }),
		n("voltage limit low", "V", func(s *feeder.TapSettings) float64 { return s.LimitLow }),
		n("limit margin", "V", func(s *feeder.TapSettings) float64 { return s.LimitMargin }),
		w("control", func(e *tapEntry) string {
			if e.s.Held {
				return "held"
			}
			return "automatic"
		}),
		w("highest tap", func(e *tapEntry) string { return strconv.Itoa(e.s.HighestTap) }),
		w("lowest tap", func(e *tapEntry) string { return strconv.Itoa(e.s.LowestTap) }),
		w("reverse mode", func(e *tapEntry) string { return e.s.Reverse.String() }),
	}
	reverse := func(setting, unit string, of func(*feeder.TapSettings) float64) {
		items = append(items, item[tapEntry]{setting, unit, func(e *tapEntry) string {
			if e.s.Reverse == feeder.ReverseNone {
				return "" // does not act
			}
			return cell(of(e.s))
		}})
	}
	reverse("reverse threshold", "%", func(s *feeder.TapSettings) float64 { return 100 * s.ReverseThreshold })
	reverse("reverse set voltage", "V", func(s *feeder.TapSettings) float64 { return s.ReverseSet })
	reverse("reverse bandwidth, total", "V", func(s *feeder.TapSettings) float64 { return s.ReverseBandwidth })
	reverse("reverse time delay", "s", func(s *feeder.TapSettings) float64 { return s.ReverseDelay })
	reverse("reverse compensation R", "V", func(s *feeder.TapSettings) float64 { return s.ReverseR })
	reverse("reverse compensation X", "V", func(s *feeder.TapSettings) float64 { return s.ReverseX })
	return items
}

// capacitorItems is the order of a capacitor's sheet.
func capacitorItems() []item[feeder.CapacitorSettings] {
	n := func(setting, unit string, of func(*feeder.CapacitorSettings) float64) item[feeder.CapacitorSettings] {
		return item[feeder.CapacitorSettings]{setting, unit, func(s *feeder.CapacitorSettings) string { return cell(of(s)) }}
	}
	return []item[feeder.CapacitorSettings]{
		{"control", "", func(s *feeder.CapacitorSettings) string { return capacitorWords[s.Control].word }},
		{"measured phase", "", func(s *feeder.CapacitorSettings) string {
			out := ""
			for _, p := range s.Phase {
				out += p.String()
			}
			return out
		}},
		{"closes at", "", func(s *feeder.CapacitorSettings) string { return switchPoint(s, s.On, s.TimeOn) }},
		{"opens at", "", func(s *feeder.CapacitorSettings) string { return switchPoint(s, s.Off, s.TimeOff) }},
		{"days", "", func(s *feeder.CapacitorSettings) string {
			switch {
			case s.Control != feeder.CapacitorTime:
				return ""
			case s.Weekdays:
				return "weekdays"
			}
			return "all"
		}},
		n("voltage override closes below", "V", func(s *feeder.CapacitorSettings) float64 { return s.OverrideOn }),
		n("voltage override opens above", "V", func(s *feeder.CapacitorSettings) float64 { return s.OverrideOff }),
		n("override deadband", "V", func(s *feeder.CapacitorSettings) float64 { return s.OverrideDeadband }),
		n("time delay", "s", func(s *feeder.CapacitorSettings) float64 { return s.Delay }),
		n("lockout before closing again", "s", func(s *feeder.CapacitorSettings) float64 { return s.Lockout }),
		{"daily limit of operations", "", func(s *feeder.CapacitorSettings) string {
			if s.DailyLimit == 0 {
				return "none"
			}
			return strconv.Itoa(s.DailyLimit)
		}},
	}
}

var capacitorWords = [...]struct{ word, unit string }{
	feeder.CapacitorHeld: {"held", ""}, feeder.CapacitorVoltage: {"voltage", "V"}, feeder.CapacitorKVAR: {"kvar", "kvar"},
	feeder.CapacitorCurrent: {"current", "A"}, feeder.CapacitorPowerFactor: {"power factor", ""},
	feeder.CapacitorTemperature: {"temperature", "degC"}, feeder.CapacitorTime: {"time", ""},
}

// switchPoint is where a capacitor switches, with its unit: what it is depends on the
// control.
func switchPoint(s *feeder.CapacitorSettings, value, seconds float64) string {
	switch s.Control {
	case feeder.CapacitorHeld:
		return ""
	case feeder.CapacitorTime:
		return fmt.Sprintf("%02d:%02d", int(seconds)/3600, int(seconds)/60%60)
	}
	return strings.TrimSpace(cell(value) + " " + capacitorWords[s.Control].unit)
}

// sheetRows lists the settings of every control of the feeder: those that stay too, so
// that the sheet can be held against what is found.
func sheetRows(base, other *feeder.Model) (out []SheetRow) {
	for i := range other.Regulators {
		bank := &other.Regulators[i]
		was := bankNamed(base, bank.Name)
		for u := range bank.Units {
			unit := &bank.Units[u]
			if unit.Settings == nil || bank.Ganged && !unit.Watched {
				continue
			}
			var before *tapEntry
			if was != nil && u < len(was.Units) && was.Units[u].Settings != nil {
				before = &tapEntry{was, was.Units[u].Settings}
			}
			phase := unit.Name(bank.Connection)
			if bank.Ganged {
				phase += " (ganged)"
			}
			out = append(out, lines("regulator", bank.Name, phase, tapItems(), before, &tapEntry{bank, unit.Settings})...)
		}
	}
	for i := range other.Capacitors {
		bank := &other.Capacitors[i]
		if bank.Control == nil {
			continue
		}
		var before *feeder.CapacitorSettings
		for k := range base.Capacitors {
			if base.Capacitors[k].Name == bank.Name {
				before = base.Capacitors[k].Control
			}
		}
		out = append(out, lines("capacitor", bank.Name, "", capacitorItems(), before, bank.Control)...)
	}
	return append(out, inverterRows(base, other)...)
}

// lines leaves out what is blank on both sides.
func lines[S any](kind, device, phase string, items []item[S], before, now *S) (out []SheetRow) {
	for _, it := range items {
		r := SheetRow{Kind: kind, Device: device, Phase: phase, Setting: it.setting, Unit: it.unit, New: it.of(now)}
		if before != nil {
			r.Present = it.of(before)
		}
		if r.Present != "" || r.New != "" {
			out = append(out, r)
		}
	}
	return out
}

func bankNamed(m *feeder.Model, name string) *feeder.Regulator {
	for i := range m.Regulators {
		if m.Regulators[i].Name == name {
			return &m.Regulators[i]
		}
	}
	return nil
}

func cell(x float64) string {
	if math.IsNaN(x) {
		return ""
	}
	return strconv.FormatFloat(x, 'g', 10, 64)
}

func round4(x float64) float64 { return math.Round(x*1e4) / 1e4 }

// cautions gathers what a reader must know: what the runs themselves found, and what
// the trade knows of changing settings.
func (c *Comparison) cautions() {
	add := func(name, format string, args ...any) {
		c.Cautions = append(c.Cautions, Caution{name, fmt.Sprintf(format, args...)})
	}
	add("", "Results support a licensed engineer's judgment and are not a sealed study. Settings go through the utility's own change control; write as-left values on the sheet.")
	add("", "A regulator must be at neutral, proved by two means, before it is bypassed: operating a bypass off neutral is a short circuit. With DER behind a line, a de-energised line can be live.")
	add("", "Not studied: protection and coordination, arc flash, fault duty, harmonics and resonance of capacitors, transients, flicker.")
	add("", "Expected life: %s.", lifeSource)
	if len(c.Unpriced) > 0 {
		add("", "No money is told of %s: [prices] of study.toml does not say it.", strings.Join(c.Unpriced, ", "))
	}
	for k, x := range c.Cases {
		if k > 0 && !c.differs(k) {
			add(x.Name, "This case changes nothing: no cell of its tables and no key differs from the base.")
		}
		if t := c.serves(k); t != "" {
			add(x.Name, "The case changes what the feeder serves or how it is built (%s): what it buys and costs is not due to settings alone.", t)
		}
		if k > 0 && c.differs(k) && !slices.ContainsFunc(c.Sheets, func(s Sheet) bool { return s.Case == x.Name }) {
			add(x.Name, "No settings sheet: the case is dominated or not ranked, or changes no control of a regulator, a capacitor or an inverter; all that it changes stands in settings.csv.")
		}
		low, unsolved := x.number("low steps"), x.number("unsolved steps")
		if low+unsolved > 0 {
			add(x.Name, "%g low and %g unsolved steps: nothing of them is in any sum, so that its energies and hours are of a shorter time.", low, unsolved)
		}
		if h := x.number("device-hours hunting"); h > 0 {
			add(x.Name, "Devices hunt for %s h: see operations.csv of its results.", tenths(h))
		}
		if h := x.number("device-hours at a stop"); h > 0 {
			add(x.Name, "Devices stand at a stop for %s h: there the voltage is not regulated.", tenths(h))
		}
		if share := x.number("settling share"); share > 10 {
			add(x.Name, "%s %% of the time is settling: this step is too coarse for operations and durations.", tenths(share))
		}
		for _, w := range c.news(k) {
			add(x.Name, "%s", w.Error())
		}
	}
}

// serves lists the tables that a case changes and that are no settings of controls.
func (c *Comparison) serves(k int) string {
	var out []string
	for _, s := range c.Settings {
		switch s.Table {
		case "regulator-settings", "capacitor-settings", "inverter-functions":
			continue
		case "generators", "batteries":
			if s.Column == "function" || s.Column == "power factor" {
				continue
			}
		}
		name := s.Table
		if name == "study.toml" {
			name = s.Key + " of study.toml"
		}
		if s.Cells[k] != s.Cells[0] && !slices.Contains(out, name) {
			out = append(out, name)
		}
	}
	return strings.Join(out, ", ")
}

// differs tells whether a case differs from the base in any cell.
func (c *Comparison) differs(k int) bool {
	for _, s := range c.Settings {
		if s.Cells[k] != s.Cells[0] {
			return true
		}
	}
	return false
}

// news are the warnings of a case about controls that the base has not.
func (c *Comparison) news(k int) (out []tables.Fault) {
	if k == 0 {
		return nil
	}
	known := map[string]bool{}
	for _, w := range c.Cases[0].Warnings {
		known[w.Text] = true
	}
	for _, w := range c.Cases[k].Warnings {
		if !known[w.Text] {
			out = append(out, w)
		}
	}
	return out
}

func tenths(x float64) string { return strconv.FormatFloat(x, 'f', 1, 64) }
