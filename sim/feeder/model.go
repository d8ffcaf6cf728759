package feeder

import (
	"math"

	"yearflow/sim/conductor"
	"yearflow/sim/tables"
)

// Phase is one of the phases of a node: A, B and C are 0, 1 and 2; the legs of a
// centre-tapped secondary come after them.
type Phase uint8

// The phases of a three-phase feeder, and the legs 1 and 2 of a centre-tapped
// secondary, each half of the winding against the grounded tap.
const (
	A Phase = iota
	B
	C
	Leg1
	Leg2

	// PhaseCount is the number of them.
	PhaseCount = 5
)

// String returns the letter of the phase, or the number of the leg.
func (p Phase) String() string {
	if p >= PhaseCount {
		return "?"
	}
	return "ABC12"[p : p+1]
}

// Leg tells whether p is a leg of a centre-tapped secondary.
func (p Phase) Leg() bool { return p == Leg1 || p == Leg2 }

// Pair is two phases, in order: AB is the voltage of A against B.
type Pair [2]Phase

// String returns the letters of the pair, such as "AB".
func (p Pair) String() string { return p[0].String() + p[1].String() }

// Connection tells how loads, capacitors and generators stand between phases.
type Connection uint8

// Wye stands from each phase to neutral, Delta between phases.
const (
	Wye Connection = iota
	Delta
)

// String returns "wye" or "delta".
func (c Connection) String() string {
	if c == Delta {
		return "delta"
	}
	return "wye"
}

// Model is a checked feeder. All quantities are in SI base units of the trade as
// each field says; element lists keep the order of their tables; every name is
// resolved. A number that a table leaves blank and that has no default is NaN.
type Model struct {
	Frequency     float64 // Hz
	Nodes         []Node
	Sources       []Source
	Constructions []Construction // those that sections use, and own ones of the study
	Sections      []Section
	Switches      []Switch
	Transformers  []Transformer
	Regulators    []Regulator
	Capacitors    []Capacitor
	Loads         []Load
	Generators    []Generator
	Functions     []InverterFunction
	Batteries     []Battery
	Meters        []MeterTie
	Chargers      []Charger
	Measurements  []Measurement // measurements.csv
	Assumed       []Assumption

	index map[string]int
}

// Assumption is a value that a table left blank and the program filled in.
type Assumption struct {
	Pos   tables.Pos
	What  string // e.g. "transformer T12: impedance [%]"
	Value string // e.g. "2.0 (typical for 25 kVA)"
}

// NodeIndex returns the position of the named node in Nodes.
func (m *Model) NodeIndex(name string) (int, bool) {
	i, ok := m.index[name]
	return i, ok
}

// Node is a place on the feeder. Nodes are sorted by name, so that nothing
// numerical depends on the order of rows.
type Node struct {
	Name    string
	At      tables.Pos // where it is first named
	Phases  []Phase    // in the order A, B, C
	Nominal float64    // kV, line-to-line
	// Grounded tells whether something in its galvanic part ties it to ground; the
	// voltages of a part that nothing grounds are reported line-to-line.
	Grounded bool
	// MidTap, where not nil, are the two phases of the winding whose grounded middle
	// grounds the part: a four-wire delta. The phase besides them is the high leg.
	MidTap []Phase
	Part   int     // galvanic part: nodes joined by sections, switches and regulators
	X, Y   float64 // plotting coordinates in m, or longitude and latitude in deg; NaN: unknown
	LonLat bool
	Area   string
	// Customers by phase: from loads, those of a three-phase load at all of its phases.
	Customers [PhaseCount]float64
	HasLoad   [PhaseCount]bool // a load stands on this phase (or on a pair with it)
}

// ToGround is the nominal voltage of a phase to ground, kV: that of a leg of a
// centre-tapped secondary, and of the lighting phases of a four-wire delta, is half the
// full winding's; the high leg of one stands at √3/2 of it, 208 of 240 V.
func (n *Node) ToGround(p Phase) float64 {
	switch {
	case p.Leg() || has(n.MidTap, p):
		return n.Nominal / 2
	case n.HighLeg(p):
		return n.Nominal * math.Sqrt(3) / 2
	}
	return n.Nominal / math.Sqrt(3)
}

// HighLeg tells whether a phase is the high leg of a four-wire delta.
func (n *Node) HighLeg(p Phase) bool { return n.MidTap != nil && !has(n.MidTap, p) }

// Source is a stiff or a Thevenin source.
type Source struct {
	At      tables.Pos
	Node    int
	Nominal float64 // kV line-to-line
	Voltage float64 // p.u.
	Angle   float64 // degrees, phase A
	Profile string  // voltage profile, or blank
	AtBus   bool    // the voltage is held at the bus, not behind the impedance
	// Z1 and Z0 in ohm; both zero for a stiff source.
	Z1, Z0 complex128
}

// Stiff tells whether the source has no impedance.
func (s Source) Stiff() bool { return s.Z1 == 0 && s.Z0 == 0 }

// Construction is what sections are built of, with its matrices by position.
type Construction struct {
	Name     string
	Kind     string // overhead, concentric neutral, tape shield, triplex, matrix, sequence
	At       tables.Pos
	Rating   float64 // A, NaN unknown
	Matrices conductor.Matrices
}

// Section is a run of line or cable.
type Section struct {
	Name         string
	At           tables.Pos
	From, To     int
	Phases       []Phase // in the order of the construction's positions
	LengthKM     float64
	Construction int
	Rating       float64 // A; NaN unknown
	Emergency    float64 // A; NaN unknown
	Winter       float64 // A; NaN unknown
}

// Switch is an ideal switch.
type Switch struct {
	Name     string
	At       tables.Pos
	From, To int
	Phases   []Phase
	Closed   bool
	Rating   float64 // A; NaN unknown
}

// Transformer is a bank.
type Transformer struct {
	Name       string
	At         tables.Pos
	From, To   int // high side, low side
	Phases     []Phase
	KVA        float64 // bank total
	HighKV     float64
	LowKV      float64
	TapKV      float64 // high-side voltage of the tap in use
	Connection string  // canonical: "YNyn0", "Dyn1", ..., "1ph", "center-tap", "unit", "open-wye/open-delta", "open-delta/open-delta"
	Pairs      []Pair  // of the open banks: the pairs that have a unit
	// HighEnds and LowEnds are the terminals of a unit or a centre-tapped transformer:
	// one phase against neutral, or two. MidTap: the middle of the low winding is
	// grounded, and LowEnds are its two ends.
	HighEnds, LowEnds []Phase
	MidTap            bool
	R, X              float64 // p.u. on the bank's rating
	NoLoadLoss        float64 // W, bank total
	Exciting          float64 // p.u. of the bank's rating, magnitude, includes the loss part
}

// RegulatorConnection tells how the units of a regulator bank stand.
type RegulatorConnection uint8

// The connections of regulator banks.
const (
	RegulatorWye RegulatorConnection = iota
	RegulatorOpenDelta
	RegulatorClosedDelta
)

// Regulator is a bank of step-voltage regulators, or a load tap changer. Units
// has one entry per single-phase unit: wye units stand phase to ground, delta
// units across a pair.
type Regulator struct {
	Name       string
	At         tables.Pos
	From, To   int
	Phases     []Phase
	Connection RegulatorConnection
	Ganged     bool
	PT         float64 // ratio
	CT         float64 // primary A
	Range      float64 // p.u., 0.10
	Steps      int     // each way
	TypeB      bool
	Rating     float64 // A; NaN unknown
	NoLoadLoss float64 // W per unit
	LoadLoss   float64 // W per unit at rating
	Impedance  float64 // p.u. of nominal voltage over rating [A]
	Units      []RegulatorUnit
}

// RegulatorUnit is one single-phase unit of a bank with the settings sheet of its
// control (of a ganged bank only the watched unit's control acts).
type RegulatorUnit struct {
	Phase    Phase // wye: its phase; delta: the first of the pair
	Pair     Pair  // delta only
	Settings *TapSettings
	// SettingsRows tells on a ganged bank which unit is watched.
	Watched bool
}

// Name returns the phase or the pair of the unit in the words of the results.
func (u RegulatorUnit) Name(c RegulatorConnection) string {
	if c == RegulatorWye {
		return u.Phase.String()
	}
	return u.Pair.String()
}

// TapSettings is one row of the settings sheet of a tap changer.
type TapSettings struct {
	At                    tables.Pos
	Set, Bandwidth        float64 // V; bandwidth is the total
	Delay, TapTime        float64 // s
	Integrate             bool
	R, X                  float64 // V at rated CT primary
	Rotation              float64 // deg; NaN: that of the connection
	LimitHigh, LimitLow   float64 // V; NaN: none
	LimitMargin           float64 // V
	Held                  bool
	Tap                   int
	HighestTap, LowestTap int

	Reverse          ReverseMode
	ReverseAt        tables.Pos // of the mode
	ReverseThreshold float64    // p.u. of the primary rating of the current transformer
	// The reverse settings, in V and s as the forward ones, which fill their blanks.
	ReverseSet, ReverseBandwidth, ReverseDelay, ReverseR, ReverseX float64
}

// Capacitor is a bank with its control.
type Capacitor struct {
	Name       string
	At         tables.Pos
	Node       int
	Phases     []Phase
	Connection Connection
	Pairs      []Pair  // delta only: the pairs that have a unit
	KVAR       float64 // bank total, equal per phase or pair
	NominalKV  float64 // line-to-line
	Closed     bool
	Control    *CapacitorSettings // nil: no control (held)
}

// CapacitorControl names the quantity that a capacitor control follows.
type CapacitorControl uint8

// The kinds of capacitor control.
const (
	CapacitorHeld CapacitorControl = iota
	CapacitorVoltage
	CapacitorKVAR
	CapacitorCurrent
	CapacitorPowerFactor
	CapacitorTemperature
	CapacitorTime
)

// CapacitorSettings is one row of the settings sheet of a capacitor control.
type CapacitorSettings struct {
	At               tables.Pos
	Control          CapacitorControl
	Phase            []Phase  // nothing: unnamed; one: a phase; two: a pair
	Watched          *Watched // section, transformer, regulator or switch; nil where the control needs none
	Profile          string   // temperature
	On, Off          float64  // of the control's own quantity: V, kvar, A, power factor (signed), °C
	OverrideOn       float64  // V; NaN none
	OverrideOff      float64  // V; NaN none
	OverrideDeadband float64  // V
	TimeOn, TimeOff  float64  // seconds after local midnight
	Weekdays         bool
	Delay, Lockout   float64 // s
	DailyLimit       int     // 0: none
}

// Watched is an element whose flow a control reads, at its from end.
type Watched struct {
	Kind  string // "section", "transformer", "regulator", "switch"
	Index int
}

// ZIP is a load's voltage characteristic; each triple sums to 1.
type ZIP struct {
	PZ, PI, PP float64
	QZ, QI, QP float64
}

// Load is a spot load. P and Q are at nominal voltage and profile 1, in total.
type Load struct {
	Name       string
	At         tables.Pos
	Node       int
	Connection Connection
	Phases     []Phase       // wye
	Pairs      []Pair        // delta
	KW, KVAR   float64       // total, before the profile; of a [kW] profile: NaN, and the ratio in KVARPerKW
	KVARPerKW  float64       // tangent of the power-factor angle, for a [kW] profile without [kvar]
	EnergyKWh  []MonthEnergy // where given by energy: month "" is the whole period; KW is NaN then
	ZIP        ZIP
	Profile    string
	Customers  float64
	// ConnectedKVA is a weight in sharing out a measured total; 0: not given.
	ConnectedKVA float64
	// FactorGiven tells that the row says its reactive power or its power factor.
	FactorGiven bool
}

// MonthEnergy is the energy of a load in one month ("2025-01"), or in the period.
type MonthEnergy struct {
	Month string
	KWh   float64
}

// Generator is a constant-power injection that follows a profile.
type Generator struct {
	Name       string
	At         tables.Pos
	Node       int
	Connection Connection
	Phases     []Phase
	Pairs      []Pair
	Kind       string
	KVA        float64
	KW         float64 // constant output where no profile is given; NaN none
	PF         float64 // signed: positive delivers reactive power
	Profile    string
	Function   int    // into Model.Functions; −1: constant power factor PF
	Solar      *Solar // output from weather; nil: from the profile
}

// Unknown tells whether a number of the model was left blank.
func Unknown(x float64) bool { return math.IsNaN(x) }
