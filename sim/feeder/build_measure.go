package feeder

import (
	"fmt"
	"slices"
	"strconv"
	"strings"

	"yearflow/sim/tables"
)

// MeasuredQuantity names what a Measurement measured.
type MeasuredQuantity uint8

// The quantities of measurements.csv. The unit is that in which model and measurement
// are compared.
const (
	MeasuredVoltage    MeasuredQuantity = iota // p.u. of the place's nominal
	MeasuredCurrent                            // A
	MeasuredKW                                 // kW
	MeasuredKVAR                               // kvar
	MeasuredTap                                // position, of a capacitor 1 closed and 0 open
	MeasuredOperations                         // actions in an interval
)

var measuredWords = [...]string{"voltage", "current", "kW", "kvar", "tap", "operations"}

// String returns the word of measurements.csv.
func (q MeasuredQuantity) String() string {
	if int(q) < len(measuredWords) {
		return measuredWords[q]
	}
	return "MeasuredQuantity(" + itoa(int(q)) + ")"
}

// Unit is the unit of measured.csv: pu, A, kW, kvar, or 1.
func (q MeasuredQuantity) Unit() string {
	switch q {
	case MeasuredVoltage:
		return "pu"
	case MeasuredCurrent:
		return "A"
	case MeasuredKW, MeasuredKVAR:
		return q.String()
	}
	return "1"
}

// Measurement is one row of measurements.csv: a series that the model is held against.
//
// A voltage stands at a node: of one phase to ground, or of a pair between two; without
// a phase it is the mean over the node's. Current and power are those into the from end
// of a section, switch, transformer or regulator, or out of a source; without a phase
// the highest current, and the sum of the powers. A tap or operations belong to a unit
// of a regulator or to a capacitor; without a phase operations are those of all units.
type Measurement struct {
	At       tables.Pos
	Quantity MeasuredQuantity
	Place    string // as written
	Phase    string // as written; blank: all
	Profile  string

	Node int // of a voltage; else −1
	// Element is what else is measured: Kind section, switch, transformer, regulator,
	// capacitor, or source (Index into Model.Sources).
	Element Watched
	Phases  []Phase // none: all; one; or of a voltage two: a pair
	Unit    int     // of a regulator, for a tap and operations: its unit; −1: all
}

// measurements reads measurements.csv. A row whose place the case took away is left
// out without a word.
func (b *builder) measurements() {
	for i := range b.t.measurements {
		r := &b.t.measurements[i]
		if r.Row.Bad {
			continue
		}
		m := Measurement{At: r.Row.At, Place: r.Place.Value, Profile: r.Profile.Value, Node: -1, Unit: -1,
			Quantity: MeasuredQuantity(slices.Index(measuredWords[:], r.Quantity.Value))}
		if r.Phase.Value != allPhases {
			m.Phase = r.Phase.Value
		}
		b.uses = append(b.uses, ProfileUse{r.Profile.Value, r.Profile.At, WantMeasured})
		what := "measured " + r.Quantity.Value + " at " + strconv.Quote(r.Place.Value)
		ok := false
		switch m.Quantity {
		case MeasuredVoltage:
			ok = b.measuredVoltage(&m, r, what)
		case MeasuredTap, MeasuredOperations:
			ok = b.measuredDevice(&m, r, what)
		default:
			ok = b.measuredFlow(&m, r, what)
		}
		if ok {
			b.model.Measurements = append(b.model.Measurements, m)
		}
	}
}

func (b *builder) measuredVoltage(m *Measurement, r *measurementRow, what string) bool {
	i, ok := b.index[r.Place.Value]
	if !ok {
		if found, _ := b.places(r.Place.Value); len(found) > 0 {
			b.faults.Add(r.Place.At, "%s: that is a %s; a voltage is measured at a node", what, found[0].Kind)
		} else if !b.tookAway(r.Place.Value) && !b.tookNodes() {
			b.faults.Add(r.Place.At, "%s: unknown node%s", what, tables.Hint(r.Place.Value, b.names))
		}
		return false
	}
	m.Node = i
	node := &b.model.Nodes[i]
	ps, ok := b.measuredPhases(m, r, node.Phases, fmt.Sprintf("node %q", node.Name), what)
	if !ok || len(node.Phases) == 0 {
		return false
	}
	if len(ps) > 2 {
		b.faults.Add(r.Phase.At, "%s: phase %q: want one phase, a pair such as AB for the voltage between two, or blank for the mean of all", what, m.Phase)
		return false
	}
	if (len(ps) == 1 || len(node.Phases) == 1) && !node.Grounded && !b.torn {
		b.faults.Add(r.Phase.At, "%s: nothing grounds this part, so that a phase has no voltage to ground worth the name; give a pair such as AB", what)
		return false
	}
	m.Phases = ps
	return true
}

func (b *builder) measuredFlow(m *Measurement, r *measurementRow, what string) bool {
	found, names := b.places(r.Place.Value)
	found = slices.DeleteFunc(found, func(w Watched) bool { return w.Kind == "capacitor" })
	switch {
	case len(found) > 1:
		b.faults.Add(r.Place.At, "%s: that is both a %s and a %s; give one of them another name", what, found[0].Kind, found[1].Kind)
		return false
	case len(found) == 0 && b.tookAway(r.Place.Value):
		return false
	case len(found) == 0:
		hint := tables.Hint(r.Place.Value, names)
		if _, node := b.index[r.Place.Value]; node {
			hint = ": that is a node without a source; name the section, switch, transformer or regulator that the meter sits in"
		}
		b.faults.Add(r.Place.At, "%s: there is no section, switch, transformer or regulator of that name, and no source at such a node%s", what, hint)
		return false
	}
	m.Element = found[0]
	has, grounded, title := b.flowPhases(m.Element)
	ps, ok := b.measuredPhases(m, r, has, title, what)
	if !ok {
		return false
	}
	if len(ps) > 1 {
		b.faults.Add(r.Phase.At, "%s: phase %q: want one phase, or blank for all", what, m.Phase)
		return false
	}
	if len(ps) == 1 && !grounded && m.Quantity != MeasuredCurrent && !b.torn {
		b.faults.Add(r.Phase.At, "%s: nothing grounds this part, so that one phase has no power of its own; leave the phase blank for all", what)
		return false
	}
	m.Phases = ps
	return true
}

func (b *builder) measuredDevice(m *Measurement, r *measurementRow, what string) bool {
	found, _ := b.places(r.Place.Value)
	found = slices.DeleteFunc(found, func(w Watched) bool { return w.Kind != "regulator" && w.Kind != "capacitor" })
	if len(found) == 0 {
		if b.tookAway(r.Place.Value) {
			return false
		}
		var names []string
		for i := range b.model.Regulators {
			names = append(names, b.model.Regulators[i].Name)
		}
		for i := range b.model.Capacitors {
			names = append(names, b.model.Capacitors[i].Name)
		}
		b.faults.Add(r.Place.At, "%s: there is no regulator or capacitor of that name%s", what, tables.Hint(r.Place.Value, names))
		return false
	}
	if len(found) > 1 {
		b.faults.Add(r.Place.At, "%s: that is both a regulator and a capacitor; give one of them another name", what)
		return false
	}
	m.Element = found[0]
	if m.Element.Kind == "capacitor" {
		if m.Phase != "" {
			b.faults.Add(r.Phase.At, "%s: a capacitor bank switches all its phases together; leave the phase blank", what)
		}
		return m.Phase == ""
	}
	g := &b.model.Regulators[m.Element.Index]
	var units []string
	for u := range g.Units {
		units = append(units, g.Units[u].Name(g.Connection))
		if units[u] == m.Phase {
			m.Unit = u
		}
	}
	switch {
	case m.Unit < 0 && m.Phase != "":
		b.faults.Add(r.Phase.At, "%s: it has no unit %q; there are %s", what, m.Phase, strings.Join(units, ", "))
		return false
	case m.Phase == "" && m.Quantity == MeasuredTap && len(units) > 1 && !g.Ganged:
		b.faults.Add(r.Phase.At, "%s: each unit has a position of its own; name one of %s", what, strings.Join(units, ", "))
		return false
	}
	return true
}

// measuredPhases reads the phases of a row and checks that its place has them.
func (b *builder) measuredPhases(m *Measurement, r *measurementRow, has []Phase, title, what string) ([]Phase, bool) {
	if m.Phase == "" {
		return nil, true
	}
	ps, err := parsePhases(m.Phase)
	if err != nil {
		b.faults.Add(r.Phase.At, "%s: %v", what, err)
		return nil, false
	}
	for _, p := range ps {
		if len(has) > 0 && !slices.Contains(has, p) {
			if !b.torn {
				b.faults.Add(r.Phase.At, "%s: %s has no phase %s; it has %s", what, title, p, word(has))
			}
			return nil, false
		}
	}
	return ps, true
}

// places finds what carries a name, nodes of sources included, and lists all names.
func (b *builder) places(name string) (found []Watched, names []string) {
	m := b.model
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
	look("source", len(m.Sources), func(i int) string { return m.Nodes[m.Sources[i].Node].Name })
	look("capacitor", len(m.Capacitors), func(i int) string { return m.Capacitors[i].Name })
	return found, names
}

// flowPhases returns the phases at the from end of an element, whether something
// grounds them, and its name for messages.
func (b *builder) flowPhases(w Watched) (has []Phase, grounded bool, title string) {
	m := b.model
	var from int
	var name string
	switch w.Kind {
	case "section":
		from, name = m.Sections[w.Index].From, m.Sections[w.Index].Name
	case "switch":
		from, name = m.Switches[w.Index].From, m.Switches[w.Index].Name
	case "transformer":
		from, name = m.Transformers[w.Index].From, m.Transformers[w.Index].Name
	case "regulator":
		from, name = m.Regulators[w.Index].From, m.Regulators[w.Index].Name
	default:
		n := &m.Nodes[m.Sources[w.Index].Node]
		return n.Phases, n.Grounded, fmt.Sprintf("node %q", n.Name)
	}
	return b.watchedPhases(&w), m.Nodes[from].Grounded, fmt.Sprintf("%s %q", w.Kind, name)
}

// tookNodes tells whether the case removed anything that joins nodes, and nodes with it.
func (b *builder) tookNodes() bool {
	for _, t := range []string{"sections", "switches", "transformers", "regulators"} {
		if len(b.t.removed[t]) > 0 {
			return true
		}
	}
	return false
}

// tookAway tells whether the case removed something of that name, or whether a row with
// faults may have held it.
func (b *builder) tookAway(name string) bool {
	for _, t := range []string{"source", "nodes", "sections", "switches", "transformers", "regulators", "capacitors"} {
		if b.t.removed[t][name] || b.t.dropped[t] {
			return true
		}
	}
	return b.torn
}
