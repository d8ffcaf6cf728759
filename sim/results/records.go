// Package results writes and reads the files of a results folder.
package results

import (
	"yearflow/sim/feeder"
	"yearflow/sim/network"
)

// Status says how a step ended.
type Status uint8

// A step is OK, or Low (a load with a constant-power or constant-current part
// stands below 0.7 p.u. in its last interval), or Unsolved.
const (
	OK Status = iota
	Low
	Unsolved
)

// String returns the word of steps.csv.
func (s Status) String() string {
	switch s {
	case OK:
		return "ok"
	case Low:
		return "low"
	}
	return "unsolved"
}

// DeviceKind tells tap changers from capacitors.
type DeviceKind uint8

// The kinds of device that act.
const (
	TapDevice DeviceKind = iota
	CapacitorDevice
)

// Device is one thing that acts: a regulator unit, a ganged bank (named by its
// watched phase), or a capacitor bank.
type Device struct {
	Kind    DeviceKind
	Name    string
	Phase   string // phase or pair; blank for capacitors
	Index   int    // into Model.Regulators or Model.Capacitors
	Unit    int    // of a regulator: the unit, of a ganged bank the watched one
	Units   []int  // positions in State.Taps that move together
	Lowest  int    // the lowest and the highest position that the control may take
	Highest int
}

// Plan is what stays the same while a study runs.
type Plan struct {
	Model    *feeder.Model
	Settings *feeder.Settings
	Network  *network.Network
	Case     string   // "base" where there is none
	Devices  []Device // in the order of the tables: regulators, then capacitors
	// TapNames are the columns of devices.csv, one for each entry of State.Taps, in
	// the order of Model.Regulators and their units.
	TapNames []string
	// LoadPeak is each load's own highest real power over the period, kW (for the
	// allowance of [limits]); nil where the allowance is zero.
	LoadPeak []float64
	Demo     bool
	// Allocation tells that steps say how a measured total was shared over loads.
	Allocation bool
	// Mended is what was edited in the meters' data, by meter and rule.
	Mended []MendedRow
}

// MendedRow is what one rule did to one meter. Times are ns; Energy is kWh added.
type MendedRow struct {
	Meter, Rule string
	From, To    int64
	Count       int
	Energy      float64
}

// State is one solved instant. Slices must not be kept or changed.
type State struct {
	V []complex128 // V to ground, by Network.Unknowns
	// Flow is the current, A, that every element takes in at each of its terminals;
	// those of element e start at Network.Offsets[e]. An open capacitor's are zero.
	Flow []complex128
	// Coupling is the own current, A, of each of Network.Couplings: it draws
	// (Base+Inverse/ratio)·Coupling at its terminals.
	Coupling []complex128
	// Source is the current, A, that each source sends into its node, by phase.
	Source [][3]complex128
	// Load and Generation are VA, by Model.Loads and Model.Generators.
	Load, Generation []complex128
	// Storage is what batteries deliver (negative where they charge) and Charging what
	// chargers draw, VA; Stored is what batteries hold, kWh, and Curtailed what
	// generators' functions take from their available power, kW.
	Storage, Charging []complex128
	Stored, Curtailed []float64
	Taps              []int  // by regulator unit
	Closed            []bool // by Model.Capacitors
}

// DeviceState is what duty.csv counts about one of Plan.Devices over an interval.
type DeviceState struct {
	OutOfBand bool
	AtStop    bool
	Reverse   bool
	Hunting   bool
}

// Interval is a time over which nothing changes: between two events, or between
// an event and the end of a step. Times are ns since 1970 UTC.
type Interval struct {
	Start, End int64
	Settled    bool // no request stands
	State      *State
	Devices    []DeviceState // by Plan.Devices
}

// Action is one movement of a device.
type Action struct {
	Time     int64
	Device   int // into Plan.Devices
	From, To int // tap positions, or 0 open and 1 closed
	Reason   string
	Measured float64
	Set      float64 // the threshold crossed
	Waited   float64 // s
}

// Step closes a step. Its intervals have been given before it; those of a step
// that is not OK enter no statistic. Energies of a row are integrated over all its
// solved intervals.
type Step struct {
	Start, End int64
	Status     Status
	Where      string // node.phase of a Low or Unsolved step
	Last       *State // at the end of the step; nil where Unsolved
	Actions    int
	Solver     string // the path of the last solution: fixed point, newton
	// Allocation tells how what was measured is met at the end of the step; nil where no
	// measured total is shared over loads.
	Allocation *AllocationStep
}

// Outcome closes a run.
type Outcome struct {
	// After start-up, by State.Taps and Model.Capacitors.
	Taps   []int
	Closed []bool
	// StillMoving names devices that start-up did not bring to rest.
	StillMoving []string
	// Paths counts solutions per solver path.
	Paths map[string]int
	// Hunting counts the instants at which a device was found hunting.
	Hunting []HuntingEvent
	Speed   Speed
	// Plants is what every generator, battery and charger did.
	Plants []PlantRow
	// CoarseAt names regulators at which the mean change of the measured voltage from
	// step to step exceeds the bandwidth.
	CoarseAt []string
}

// Speed counts the work that a run took: the object speed of run.json. It is the same
// for every run of the same study, however long that takes.
type Speed struct {
	// Blocks of steps were solved at once; of the steps in them LanesUsed were taken, the
	// others were solved for nothing, since a device moved before or they did not arrive.
	Blocks int `json:"blocks"`
	// Scouts are blocks of steps solved roughly, to forecast what devices will do.
	Scouts      int `json:"scouting_blocks"`
	LanesSolved int `json:"lanes_solved"`
	LanesUsed   int `json:"lanes_used"`
	// Iterations and Solutions are those that were taken.
	Iterations int `json:"iterations"`
	Solutions  int `json:"solutions"`
	// Edges are instants solved again for a measurement near an edge of a control.
	Edges      int `json:"instants_near_an_edge"`
	QuietSteps int `json:"quiet_steps"`
	// StepByStep counts the steps that were solved by themselves, by the reason.
	StepByStep map[string]int `json:"steps_by_themselves"`
}

// PlantRow is what a generator, a battery or a charger did over the period, kWh at
// its terminals. Of a battery, drawn = delivered + losses + change of what it stores.
type PlantRow struct {
	Name, Kind                                            string
	Delivered, Drawn, Curtailed, Losses, Change, Unserved float64
}

// HuntingEvent is an instant at which a device began to hunt.
type HuntingEvent struct {
	Time   int64
	Device int
}
