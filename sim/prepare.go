package sim

import (
	"fmt"
	"math"
	"strings"
	"time"

	"yearflow/devices"
	"yearflow/sim/feeder"
	"yearflow/sim/network"
	"yearflow/sim/powerflow"
	"yearflow/sim/results"
	"yearflow/sim/tables"
)

// Solver finds the voltages of one instant. powerflow.Solver is the reference; a
// faster kernel must give what it gives.
type Solver interface {
	// SetDevices takes the ratio of every coupling and the state of every capacitor.
	// Its error says that the equations are singular there; Solve then finds nothing.
	SetDevices(ratio []float64, closed []bool) error
	// Solve starts from start, or from the no-load voltages where it is nil, and
	// reports whether there is a solution.
	Solve(in *powerflow.Input, start []complex128, tol powerflow.Tolerance, out *powerflow.Solution) bool
}

var _ Solver = (*powerflow.Solver)(nil)

// Options change what an Engine is made of; the zero value runs as the study says.
type Options struct {
	// Controls replaces the controls of devices, by name: "R1.A" for a regulator's
	// unit, "LTC" or "LTC.A" for a ganged bank, "C2" for a capacitor.
	Controls map[string]Controller
	Demo     bool
	// Base is an engine of the study as it stands, of the same period. Several cases of a
	// study with an [allocation] share its walk through the period; where it is nil, a
	// case that needs one makes its own.
	Base *Engine
	// Probes are nodes (into Model.Nodes) at which Marginal asks for marginal losses.
	Probes []int
	// Cache is a folder of the machine where what was read of meters is kept for the
	// next run; blank: none.
	Cache string
	// Reference solves every step by itself: the judge of everything faster.
	Reference bool
	// Timing has Engine.Timing measure where the time goes.
	Timing bool
}

// Engine is a study ready to run. It is not safe for use by several goroutines at
// once.
type Engine struct {
	Study *feeder.Study
	Plan  *results.Plan
	// Warnings are those of the study and of its profiles, sorted by place.
	Warnings []tables.Fault

	net     *network.Network
	flow    *powerflow.Solver
	in      *inputs
	devices []*device
	plants  plants

	allocation *allocation // nil: no measured total is shared over loads

	reference bool   // every step is solved by itself
	ahead     *ahead // nil: a step's input depends on the steps before it
	quiet     *quiet // nil: every step is gone through by itself
	relay     *relay // nil: a recorder looks at the engine itself, and is called by it
	// sense, where it is not nil, reads what controls look at; the relay reads the rest.
	sense     *powerflow.Sense
	stepwise  string       // why there is no ahead
	speculate bool         // a run is going through its steps in order
	step      int          // whose inputs are at hand
	now       devices.Time // of the solution that is asked for
	held      *heldLanes   // of HeldAll; nil: not asked for yet
	foresight *foresight   // nil: the lanes of ahead have one device state

	steady bool  // lags are left out: at start-up, and of a single instant
	unitAt []int // by Model.Regulators: position of its first unit in State.Taps

	// The state of the run, and the places that one instant is worked out in.
	state    results.State
	input    powerflow.Input
	solution *powerflow.Solution
	anchor   []complex128 // start of the next solutions; nil before the first
	anchored bool
	ratio    []float64
	source   []complex128 // by Network.Fixed
	drawn    []complex128 // by injection
	paths    map[powerflow.Path]int
	timing   Timing
	timed    bool
	since    time.Time // the last lap
	exact    bool      // the solution at hand has the reference tolerance
	interval results.Interval
}

// device is one of Plan.Devices with its control and what it measures.
type device struct {
	Controller
	results.Device
	tap     *tapMeter
	cap     *capacitorMeter
	hunting devices.Hunting
	due     devices.Time
	reading Reading
}

// tapMeter says where a tap changer's control measures.
type tapMeter struct {
	from, to int32 // regulated voltage; to may be Ground
	leaving  []part

	sourceFrom, sourceTo int32 // the same voltage at the source side
	source               watchedPhase
	forward              bool // nobody looks at the source side
}

// part is a share of a coupling's own current.
type part struct {
	coupling int
	terminal int
}

// capacitorMeter says where a capacitor's control measures.
type capacitorMeter struct {
	from, to int32
	base     float64 // V that are 120 V
	watched  []watchedPhase
	highest  bool // of several phases the highest current
}

// watchedPhase is the current that enters an element at its from end in one phase.
type watchedPhase struct {
	unknown int32
	flows   []int // places in State.Flow
	parts   []part
}

// Prepare makes an engine of a checked study. The error is a tables.Faults where
// the study is at fault.
func Prepare(st *feeder.Study, o Options) (*Engine, error) {
	m := st.Model
	net, err := network.Build(m)
	if err != nil {
		return nil, err
	}
	in, err := newInputs(st, net, o.Cache)
	if err != nil {
		return nil, err
	}
	in.probes(net, o.Probes)
	if err := in.sampleMeasured(); err != nil {
		return nil, err
	}
	flow, err := powerflow.New(net, in.injections, in.groups...)
	if err != nil {
		var faults tables.Faults
		faults.Add(m.Sources[0].At, "%v", err)
		return nil, faults.Err()
	}
	e := &Engine{Study: st, net: net, flow: flow, in: in, reference: o.Reference, timed: o.Timing, paths: map[powerflow.Path]int{}}
	name := st.Case
	if name == "" {
		name = "base"
	}
	e.Plan = &results.Plan{Model: m, Settings: &st.Settings, Network: net, Case: name, Demo: o.Demo}
	e.Plan.Mended = in.meters.mended()
	e.state = results.State{
		Flow: make([]complex128, net.Offsets[len(net.Elements)]), Coupling: make([]complex128, len(net.Couplings)),
		Source: make([][3]complex128, len(m.Sources)),
		Load:   make([]complex128, len(m.Loads)), Generation: make([]complex128, len(m.Generators)),
		Closed:  make([]bool, len(m.Capacitors)),
		Storage: make([]complex128, len(m.Batteries)), Charging: make([]complex128, len(m.Chargers)),
		Stored: make([]float64, len(m.Batteries)), Curtailed: make([]float64, len(m.Generators)),
	}
	e.solution = flow.NewSolution()
	e.state.V = e.solution.V
	e.anchor = make([]complex128, len(e.solution.V))
	e.input = powerflow.Input{Source: make([]complex128, len(net.Fixed)), Power: make([]complex128, len(in.injections))}
	e.ratio = make([]float64, len(net.Couplings))
	e.source = make([]complex128, len(net.Fixed))
	e.drawn = make([]complex128, len(in.injections))
	if err := e.preparePlants(in); err != nil {
		return nil, err
	}
	e.Warnings = append(append(e.Warnings, st.Warnings...), in.odd...)
	if err := e.prepareAllocation(o); err != nil {
		return nil, err
	}
	e.prepareAhead()
	for i := range m.Regulators {
		e.regulator(i, o)
	}
	for i := range m.Capacitors {
		e.capacitor(i, o)
	}
	for name := range o.Controls {
		if !e.has(name) {
			return nil, fmt.Errorf("no device named %q to control; there are %s", name, e.names())
		}
	}
	if st.Settings.Limits.Allowance != 0 {
		e.Plan.LoadPeak = e.peaks(len(m.Loads))
	}
	e.Reset()
	e.Warnings = append(e.Warnings, e.oddMeasured(e.meterPoints())...)
	tables.Faults(e.Warnings).Sort()
	return e, nil
}

func (e *Engine) has(name string) bool {
	for _, d := range e.devices {
		if d.title() == name || d.Name == name && e.alone(d.Device) {
			return true
		}
	}
	return false
}

// alone tells whether a device is all of its bank, so that the bank's name means it.
func (e *Engine) alone(d results.Device) bool {
	if d.Kind == results.CapacitorDevice {
		return true
	}
	r := &e.net.Model.Regulators[d.Index]
	return r.Ganged || len(r.Units) == 1
}

func (e *Engine) names() string {
	var out []string
	for _, d := range e.devices {
		out = append(out, d.title())
	}
	return strings.Join(out, ", ")
}

func (e *Engine) own(o Options, d results.Device) Controller {
	if c, ok := o.Controls[d.Name+"."+d.Phase]; ok && d.Phase != "" {
		return c
	}
	if e.alone(d) {
		return o.Controls[d.Name]
	}
	return nil
}

// ns converts seconds to the nanoseconds of event time.
func ns(seconds float64) devices.Time { return devices.Time(math.Round(seconds * 1e9)) }

// rotation returns the angle by which the compensator turns the current of a pair:
// the line current of phase A lags V_AB by 30° at unity power factor, that of phase
// C leads V_CB... so that a is +30° for AB, BC, CA and −30° for BA, CB, AC (design
// rule; common practice).
func rotation(c feeder.RegulatorConnection, p feeder.Pair, s *feeder.TapSettings) float64 {
	switch {
	case s != nil && !feeder.Unknown(s.Rotation):
		return s.Rotation * math.Pi / 180
	case c == feeder.RegulatorWye:
		return 0
	case (p[0]+1)%3 == p[1]:
		return math.Pi / 6
	}
	return -math.Pi / 6
}

// initialTap is the position that the tables give a unit: that of its own row of the
// settings sheet, in a ganged bank that of the watched one.
func initialTap(r *feeder.Regulator, unit int) int {
	for u := range r.Units {
		if s := r.Units[u].Settings; s != nil && (u == unit || r.Ganged && r.Units[u].Watched) {
			return s.Tap
		}
	}
	return 0
}

func (e *Engine) regulator(i int, o Options) {
	m := e.net.Model
	r := &m.Regulators[i]
	first := len(e.state.Taps)
	e.unitAt = append(e.unitAt, first)
	var all []int
	for u := range r.Units {
		all = append(all, len(e.state.Taps))
		e.state.Taps = append(e.state.Taps, initialTap(r, u))
		e.Plan.TapNames = append(e.Plan.TapNames, r.Name+"."+r.Units[u].Name(r.Connection))
	}
	for u := range r.Units {
		unit := &r.Units[u]
		if r.Ganged && !unit.Watched {
			continue
		}
		moves := all[u : u+1]
		if r.Ganged {
			moves = all
		}
		sheet := devices.TapChanger{PT: r.PT, CT: r.CT, Range: r.Range, Steps: r.Steps, TypeB: r.TypeB, Highest: r.Steps, Lowest: -r.Steps,
			Held: true, LimitHigh: math.NaN(), LimitLow: math.NaN()}
		var reverse *devices.ReversePower
		if s := unit.Settings; s != nil {
			sheet.Set, sheet.Bandwidth, sheet.Delay, sheet.TapTime, sheet.Integrate = s.Set, s.Bandwidth, ns(s.Delay), ns(s.TapTime), s.Integrate
			sheet.R, sheet.X, sheet.Rotation = s.R, s.X, rotation(r.Connection, unit.Pair, s)
			sheet.LimitHigh, sheet.LimitLow, sheet.LimitMargin = s.LimitHigh, s.LimitLow, s.LimitMargin
			sheet.Held, sheet.Highest, sheet.Lowest = s.Held, s.HighestTap, s.LowestTap
		}
		if s := unit.Settings; s != nil && s.Reverse != feeder.ReverseNone {
			reverse = reversePower(sheet, s)
		}
		d := &device{Device: results.Device{Kind: results.TapDevice, Name: r.Name, Phase: unit.Name(r.Connection), Index: i, Unit: u,
			Units: moves, Lowest: sheet.Lowest, Highest: sheet.Highest}}
		d.tap = e.tapMeter(i, u)
		d.Controller = e.own(o, d.Device)
		position := devices.TapState{Position: e.state.Taps[first+u]}
		switch {
		case d.Controller != nil:
		case reverse != nil:
			d.Controller = &reverseControl{*reverse, devices.ReverseState{TapState: position}}
		default:
			d.Controller = &tapControl{sheet, position}
			d.tap.forward = true
		}
		e.devices = append(e.devices, d)
		e.Plan.Devices = append(e.Plan.Devices, d.Device)
	}
}

// tapMeter finds what a unit's control measures, on either side of the bank.
func (e *Engine) tapMeter(regulator, unit int) *tapMeter {
	r := &e.net.Model.Regulators[regulator]
	u := &r.Units[unit]
	from, to := &e.net.At[r.From], &e.net.At[r.To]
	t := &tapMeter{from: to[u.Phase], to: network.Ground, sourceFrom: from[u.Phase], sourceTo: network.Ground, leaving: e.leaving(regulator, u.Phase)}
	if r.Connection != feeder.RegulatorWye {
		t.to, t.sourceTo = to[u.Pair[1]], from[u.Pair[1]]
	}
	for _, w := range e.watch(&feeder.Watched{Kind: "regulator", Index: regulator}, &u.Phase) {
		t.source = w
	}
	return t
}

// leaving lists the couplings of a bank that feed the load-side line of a phase.
func (e *Engine) leaving(regulator int, p feeder.Phase) []part {
	out := e.net.At[e.net.Model.Regulators[regulator].To][p]
	for _, k := range e.net.ElementsOf(network.RegulatorSeries, regulator) {
		if el := &e.net.Elements[k]; el.Terminals[1] == out {
			out = el.Terminals[0]
			break
		}
	}
	var parts []part
	for k := range e.net.Couplings {
		c := &e.net.Couplings[k]
		if c.Kind != network.Regulator || c.Index != regulator {
			continue
		}
		for t, u := range c.Terminals {
			if u == out {
				parts = append(parts, part{k, t})
			}
		}
	}
	return parts
}

func (e *Engine) capacitor(i int, o Options) {
	m := e.net.Model
	c := &m.Capacitors[i]
	e.state.Closed[i] = c.Closed
	d := &device{Device: results.Device{Kind: results.CapacitorDevice, Name: c.Name, Index: i, Highest: 1}}
	d.cap = e.capacitorMeter(c)
	sheet := devices.CapacitorControl{OverrideOn: math.NaN(), OverrideOff: math.NaN()}
	if s := c.Control; s != nil {
		sheet = devices.CapacitorControl{Kind: capacitorKinds[s.Control], On: s.On, Off: s.Off,
			OverrideOn: s.OverrideOn, OverrideOff: s.OverrideOff, OverrideDeadband: s.OverrideDeadband,
			TimeOn: ns(s.TimeOn), TimeOff: ns(s.TimeOff), Weekdays: s.Weekdays, Zone: e.Study.Settings.Period.Zone,
			Delay: ns(s.Delay), Lockout: ns(s.Lockout), DailyLimit: s.DailyLimit, Rating: e.watchedRating(s.Watched)}
	}
	d.Controller = e.own(o, d.Device)
	if d.Controller == nil {
		d.Controller = &capacitorControl{sheet, devices.CapacitorState{Closed: c.Closed}}
	}
	e.devices = append(e.devices, d)
	e.Plan.Devices = append(e.Plan.Devices, d.Device)
}

var capacitorKinds = [...]devices.CapacitorKind{
	feeder.CapacitorHeld: devices.CapacitorHeld, feeder.CapacitorVoltage: devices.CapacitorVoltage, feeder.CapacitorKVAR: devices.CapacitorKVAR,
	feeder.CapacitorCurrent: devices.CapacitorCurrent, feeder.CapacitorPowerFactor: devices.CapacitorPowerFactor,
	feeder.CapacitorTemperature: devices.CapacitorTemperature, feeder.CapacitorTime: devices.CapacitorTime,
}

// Reset puts every device that is driven by its settings sheet back to the
// positions of the tables.
func (e *Engine) Reset() {
	m := e.net.Model
	for _, d := range e.devices {
		switch c := d.Controller.(type) {
		case *tapControl:
			c.state = devices.TapState{Position: initialTap(&m.Regulators[d.Index], d.Unit)}
		case *reverseControl:
			c.state = devices.ReverseState{TapState: devices.TapState{Position: initialTap(&m.Regulators[d.Index], d.Unit)}}
		case *capacitorControl:
			c.state = devices.CapacitorState{Closed: m.Capacitors[d.Index].Closed}
		}
		d.hunting = devices.Hunting{}
	}
	for i := range m.Regulators {
		for u := range m.Regulators[i].Units {
			e.state.Taps[e.unitAt[i]+u] = initialTap(&m.Regulators[i], u)
		}
	}
	e.takePositions()
	e.anchored = false
}

// takePositions copies where the controls stand into the state.
func (e *Engine) takePositions() { e.standAt(e.state.Taps, e.state.Closed) }

// standAt moves taps and closed to where the controls stand.
func (e *Engine) standAt(taps []int, closed []bool) {
	for _, d := range e.devices {
		if d.Kind == results.CapacitorDevice {
			closed[d.Index] = d.Position() == 1
			continue
		}
		// The units of a ganged bank keep their distance from the watched one.
		move := d.Position() - taps[e.unitAt[d.Index]+d.Unit]
		for _, u := range d.Units {
			taps[u] += move
		}
	}
}
