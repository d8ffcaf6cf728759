package sim

import (
	"math"
	"math/bits"

	"yearflow/profiles"
	"yearflow/sim/powerflow"
	"yearflow/sim/powerflow/vector"
)

// ahead solves the steps to come together with the step at hand, with the devices where
// they stand. The event loop goes through the steps in order as if each were solved by
// itself; what has been solved ahead holds until a device moves.
//
// The lane of a step is its number modulo the number of lanes, so that inputs which are
// in place stay there when a device moves. All lanes start from the voltages that the
// step at hand starts from; none runs past the end of the local day.
type ahead struct {
	lanes               *powerflow.Lanes
	last                []float64 // values in the last step of the block
	held                bool      // no input has changed since the block before
	still               *powerflow.Curve
	values              []float64         // of the series, in one step
	rows                []float64         // ones, then the values of each series, by lane
	month               int               // that the shares of loads known by their energy are of
	loaded              [vector.Lanes]int // step, −1 none
	first               int               // step; of no block: −1
	end                 int
	number              int              // of the block
	near                *powerflow.Curve // voltages at the step nearStep, of the device state nearState
	nearStep, nearState int
	arrived             uint8
	taken               uint8
	window              window
	state               int // device state that the block was solved with
	dayEnd              int // first step of the next day
}

// prepareAhead makes the lanes, where a step's input is a function of the step alone:
// with stored energy, vehicles, lags or loads that a measured total is shared over it
// depends on how the steps before it went.
func (e *Engine) prepareAhead() {
	if e.stepwise = e.whyStepwise(); e.stepwise != "" {
		return
	}
	e.ahead = &ahead{
		lanes:  powerflow.NewLanes(e.flow, e.in.largest()),
		values: make([]float64, len(e.in.values)),
		rows:   make([]float64, (len(e.in.values)+1)*vector.Lanes),
		first:  -1,
	}
	e.ahead.near, e.ahead.still = e.ahead.lanes.NewCurve(), e.ahead.lanes.NewCurve()
	e.ahead.last = make([]float64, len(e.in.values))
	e.in.still(e.ahead.lanes, e.ahead.rows)
	e.prepareWindow()
}

// still sets what no step changes.
func (in *inputs) still(lanes *powerflow.Lanes, rows []float64) {
	for k := range vector.Lanes {
		rows[k] = 1
		for f := range in.fixed {
			lanes.Source(k, f, in.fixed[f].volts)
		}
	}
}

// whyStepwise says in the words of run.json why every step is solved by itself; blank:
// it is not.
func (e *Engine) whyStepwise() string {
	switch {
	case e.reference:
		return "asked for"
	case e.allocation != nil:
		return "allocation"
	case len(e.plants.batteries) > 0:
		return "batteries"
	case len(e.plants.chargers) > 0:
		return "chargers"
	}
	for _, v := range e.plants.inverters {
		if v.lags {
			return "lagging inverters"
		}
	}
	return ""
}

// begin forgets what was solved before a run.
func (a *ahead) begin(in *inputs) {
	a.lanes.Expect(in.largest()) // units may have been given another size
	if a.window.lanes != nil {
		a.window.lanes.Expect(in.largest())
	}
	a.first, a.end, a.dayEnd, a.month = -1, -1, -1, -1
	a.window.first, a.window.end, a.window.behind.first, a.nearStep = -1, -1, -1, -1
	for lane := range a.loaded {
		a.loaded[lane] = -1
	}
}

// solveAhead takes the step at hand from its lane, after solving lanes where it must. It
// reports whether there was a solution to take: without one the step is the solver's.
func (e *Engine) solveAhead() bool {
	if e.foresight != nil {
		return e.solveForeseen()
	}
	a := e.ahead
	if e.step < a.first || e.step >= a.end || a.state != e.flow.DeviceState() {
		e.solveLanes()
	}
	lane := e.step % vector.Lanes
	if a.arrived>>lane&1 == 0 {
		return false
	}
	a.lanes.Take(lane, e.solution)
	e.countLane(lane)
	return true
}

// solveLanes solves the step at hand and those behind it.
func (e *Engine) solveLanes() {
	a := e.ahead
	near := a.nearest(e)
	before := a.solvedLast()
	a.number++
	if e.quiet != nil && e.quiet.lent {
		e.quiet.lent = false
		_ = e.relay.exchange() // a recorder's error comes back with the step
	}
	a.first, a.state = e.step, e.flow.DeviceState()
	a.end = min(a.first+vector.Lanes, e.in.axis.Steps(), e.dayEnd(a.first))
	if month := e.in.monthOf(a.first); month != a.month { // months begin with days, and blocks end with them
		a.month, before.block = month, nil
		a.lanes.Follow(e.in.follow(month))
		a.window.follow(e.in, month)
	}
	for step := a.first; step < a.end; step++ {
		if k := step % vector.Lanes; a.loaded[k] != step {
			a.loaded[k] = step
			a.load(e.in, k, step)
		}
	}
	held := e.anchored && before.block != nil && before.state == a.state && a.unchanged()
	curved := !held && e.anchored && a.window.prepare(e)
	if curved {
		a.end = min(a.end, a.window.end)
	}
	mask := uint8(0)
	for step := a.first; step < a.end; step++ {
		mask |= 1 << (step % vector.Lanes)
	}
	a.lanes.Drive(a.rows)
	switch {
	case held:
		before.block.Keep(a.still, before.lane)
		a.lanes.StartAt(a.still)
	case curved:
		a.window.start(a)
	case near && e.anchored:
		a.lanes.StartAt(a.near)
	case e.anchored:
		a.lanes.StartAll(e.anchor, &e.input)
	default:
		a.lanes.StartAll(nil, &e.input)
	}
	e.lap(&e.timing.Assembling)
	e.timing.Blocks++
	e.timing.LanesSolved += bits.OnesCount8(mask)
	a.taken = 0
	if held {
		a.arrived = a.lanes.Hold(mask)
	} else {
		a.arrived = a.lanes.Solve(mask, powerflow.Contract)
	}
	for i := range a.values {
		a.last[i] = a.rows[(i+1)*vector.Lanes+(a.end-1)%vector.Lanes]
	}
	e.lap(&e.timing.Solving)
}

// load puts the inputs of a step into a lane.
func (a *ahead) load(in *inputs, k, step int) { in.loadLane(a.lanes, a.rows, a.values, k, step) }

// nearest keeps the solution of the last step that is one less than a multiple of the
// number of lanes, and reports whether it holds: it is of the device state and of the day
// at hand.
func (a *ahead) nearest(e *Engine) bool {
	last := e.step - 1
	last -= (last + 1) % vector.Lanes
	if last >= a.first && last < a.end && a.arrived>>(vector.Lanes-1)&1 == 1 {
		a.lanes.Block.Keep(a.near, vector.Lanes-1)
		a.nearStep, a.nearState = last, a.state
	}
	return a.nearStep == last && last >= 0 && a.nearState == e.flow.DeviceState() && e.anchored
}

// solvedLane is where a solution stands.
type solvedLane struct {
	block *powerflow.Block
	lane  int
	state int
}

// solvedLast is the last step of the block at hand; without a block where it did not
// arrive.
func (a *ahead) solvedLast() (s solvedLane) {
	if lane := (a.end - 1) % vector.Lanes; a.first >= 0 && a.arrived>>lane&1 == 1 {
		s = solvedLane{a.lanes.Block, lane, a.state}
	}
	return s
}

// unchanged tells whether the inputs of all steps of the block are those of the last step
// of the block before.
func (a *ahead) unchanged() bool {
	for i, v := range a.last {
		for step := a.first; step < a.end; step++ {
			if a.rows[(i+1)*vector.Lanes+step%vector.Lanes] != v {
				return false
			}
		}
	}
	return true
}

// loadLane puts the inputs of a step into a lane of lanes, its values into rows.
func (in *inputs) loadLane(lanes *powerflow.Lanes, rows, values []float64, k, step int) {
	in.sampleAt(values, step)
	for i, v := range values {
		rows[(i+1)*vector.Lanes+k] = v
	}
	for f := range in.fixed {
		if x := &in.fixed[f]; x.series >= 0 {
			lanes.Source(k, f, x.at(values))
		}
	}
}

// follow says how every injection follows the rows of ahead in a month.
func (in *inputs) follow(month int) (p, q []int, share []complex128) {
	p, q = make([]int, len(in.injections)), make([]int, len(in.injections))
	share = append(share, in.share...)
	for k := range in.injections {
		d := &in.driver[k]
		p[k] = d.real + 1 // no series: the row of ones
		q[k] = p[k]
		if d.real >= 0 && d.reactive >= 0 {
			q[k] = d.reactive + 1
		}
		if d.load >= 0 {
			share[k] *= complex(in.energy[d.load][month], 0)
		}
	}
	return p, q, share
}

// dayEnd returns the first step of the local day after that of a step.
func (e *Engine) dayEnd(step int) int {
	a, axis := e.ahead, &e.in.axis
	if step < a.dayEnd {
		return a.dayEnd
	}
	start, _ := axis.Bounds(step)
	next := profiles.DayStart(profiles.Day(start, axis.Zone)+1, axis.Zone)
	a.dayEnd = int((next - axis.Start + axis.Step - 1) / axis.Step)
	return a.dayEnd
}

// largest returns the most that each injection draws, VA, whatever the step.
func (in *inputs) largest() []float64 {
	series := in.sampler.Largest()
	out := make([]float64, len(in.injections))
	for k := range out {
		d := &in.driver[k]
		p := 1.0
		if d.real >= 0 {
			p = series[d.real]
		}
		q := p
		if d.reactive >= 0 {
			q = series[d.reactive]
		}
		if d.load >= 0 {
			most := 0.0
			for _, kW := range in.energy[d.load] {
				most = max(most, math.Abs(kW))
			}
			p, q = p*most, q*most
		}
		out[k] = math.Hypot(real(in.share[k])*p, imag(in.share[k])*q)
	}
	return out
}
