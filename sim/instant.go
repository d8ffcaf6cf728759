package sim

import (
	"fmt"

	"yearflow/devices"
	"yearflow/sim/powerflow"
	"yearflow/sim/results"
)

// solve finds the voltages for the inputs and the device positions at hand and
// everything that is measured from them. It reports whether there is a solution.
func (e *Engine) solve(tol powerflow.Tolerance) (bool, error) {
	e.lap(&e.timing.Controls)
	e.ratios(e.state.Taps, e.ratio)
	// Positions at which the equations are singular have no solution: Solve says where.
	e.flow.Place(e.ratio, e.state.Closed)
	e.lap(&e.timing.Assembling)
	ok := e.speculate && tol == powerflow.Contract && e.solveAhead()
	if !ok {
		var start []complex128
		if e.anchored {
			start = e.anchor
		}
		ok = e.flow.Solve(&e.input, start, tol, e.solution)
	}
	e.paths[e.solution.Path]++
	e.timing.Solutions++
	e.timing.Iterations += e.solution.Iterations
	e.state.V = e.solution.V
	if !ok {
		e.lap(&e.timing.Solving)
		return false, nil
	}
	if e.sense != nil {
		e.sensed()
		e.lap(&e.timing.Solving)
		return true, nil
	}
	e.flow.Flows(e.state.Flow, e.state.V)
	e.flow.Couplings(e.state.Coupling, e.source, &e.input, e.state.V, e.state.Flow)
	e.flow.Drawn(e.drawn, &e.input, e.state.V)
	clear(e.state.Load)
	clear(e.state.Generation)
	for k, s := range e.drawn {
		if l := e.in.loadOf[k]; l >= 0 {
			e.state.Load[l] += s
		} else if g := e.in.generator[k]; g >= 0 {
			e.state.Generation[g] -= s
		}
	}
	e.plantPowers()
	e.sources()
	e.lap(&e.timing.Solving)
	return true, nil
}

// sensed reads what controls look at and what generators deliver; the rest is read by who
// takes the state in (complete).
func (e *Engine) sensed() {
	e.sense.Read(e.state.Flow, e.state.Coupling, e.source, &e.input, e.state.V)
	e.sources()
	for g, branches := range e.in.branchesOf {
		e.state.Generation[g] = 0
		for _, k := range branches {
			e.state.Generation[g] -= e.flow.DrawnBy(k, e.input.Power[k], e.state.V)
		}
	}
}

// complete reads everything else of a state that sensed has begun, for the powers that
// injections are asked for. It may be called while the engine is at work.
func (e *Engine) complete(s *results.State, power []complex128) {
	e.flow.FlowsWith(s.Flow, s.V, s.Closed)
	clear(s.Load)
	clear(s.Generation)
	for k := range e.in.injections {
		x := e.flow.DrawnBy(k, power[k], s.V)
		if l := e.in.loadOf[k]; l >= 0 {
			s.Load[l] += x
		} else if g := e.in.generator[k]; g >= 0 {
			s.Generation[g] -= x
		}
	}
}

// sources sets what each source sends into its node: the current of the voltage that
// it holds. Behind an impedance that is the current through it, the same at both ends.
func (e *Engine) sources() {
	clear(e.state.Source)
	for f, x := range e.net.Fixed {
		e.state.Source[x.Source][x.Phase] = e.source[f]
	}
}

// ratios sets ratio to that of every coupling at the positions of the regulators' units.
func (e *Engine) ratios(taps []int, ratio []float64) {
	for k := range e.net.Couplings {
		c := &e.net.Couplings[k]
		ratio[k] = 1
		if c.Unit >= 0 {
			ratio[k] = e.tapRatio(c.Index, taps[e.unitAt[c.Index]+c.Unit])
		}
	}
}

func (e *Engine) tapRatio(regulator, tap int) float64 {
	r := &e.net.Model.Regulators[regulator]
	t := devices.TapChanger{Range: r.Range, Steps: r.Steps, TypeB: r.TypeB}
	return t.Ratio(tap)
}

// keep makes the solution at hand the start of those to come, until the next action
// or the next day.
func (e *Engine) keep() {
	e.anchored = true
	if n := len(e.state.V); n > 0 && &e.state.V[0] == &e.solution.V[0] { // else it is kept already
		e.anchor, e.solution.V = e.solution.V, e.anchor // the state stays what it is until the next solution
	}
}

// low returns the place of a load below the corner, or blank.
func (e *Engine) low() string {
	if e.solution.Path == powerflow.InLanes {
		return "" // what falls below is left to the solver
	}
	k := e.flow.LowAt(e.state.V)
	if k < 0 {
		return ""
	}
	return e.net.Unknowns[e.in.injections[k].From].Name
}

// Instant is the solution of one step's inputs.
type Instant struct {
	Start  int64 // of the step, ns
	Status results.Status
	Where  string // of a low or unsolved instant
	State  *results.State
	Path   powerflow.Path
	// Iterations, and the largest change of a voltage in the last one, p.u.
	Iterations int
	Change     float64
	// StillMoving names devices that did not come to rest.
	StillMoving []string
	Actions     int
}

// Positions says where the devices stand for a single instant.
type Positions struct {
	// Given takes the positions of the tables as they are; otherwise the controls bring
	// the devices to rest on the step's inputs, as at the start of a run.
	Given bool
	// Taps (by Plan.TapNames) and Closed (by Model.Capacitors), where not nil, are
	// positions to hold, such as those of a results folder.
	Taps   []int
	Closed []bool
	// Storage (by Model.Batteries), where not nil, is what batteries deliver, kW, whatever
	// their dispatch says.
	Storage []float64
}

// Solve solves the inputs of one step. Its State belongs to the engine and holds
// until the next call.
func (e *Engine) Solve(step int, p Positions) (*Instant, error) {
	if step < 0 || step >= e.Steps() {
		return nil, fmt.Errorf("step %d is outside the period, which has %d steps", step, e.Steps())
	}
	if err := e.baseAt(step); err != nil {
		return nil, err
	}
	e.Reset()
	start, end := e.in.axis.Bounds(step)
	out := &Instant{Start: start}
	now := start
	if p.Taps != nil {
		now = end - 1 // positions are logged at the end of a step: who has come by then is there
	}
	e.plants.reset(now)
	e.steady = true
	for i := range p.Storage {
		b := e.plants.batteries[i]
		b.asked, b.prescribed = p.Storage[i], true
	}
	switch {
	case p.Taps != nil:
		copy(e.state.Taps, p.Taps)
		copy(e.state.Closed, p.Closed)
	case !p.Given:
		var err error
		if out.StillMoving, out.Actions, err = e.settle(step); err != nil {
			return nil, err
		}
	}
	e.anchored = false
	e.takeInputs(step)
	ok, err := e.allocate(now)
	if err != nil {
		return nil, err
	}
	out.Path, out.Iterations, out.Change = e.solution.Path, e.solution.Iterations, e.solution.Change
	if !ok {
		out.Status, out.Where = results.Unsolved, e.net.Unknowns[e.solution.Worst].Name
		return out, nil
	}
	if out.Where = e.low(); out.Where != "" {
		out.Status = results.Low
	}
	out.State = &e.state
	return out, nil
}

// OutOfBand tells whether the device at a position of Plan.Devices stood outside its
// band at the instant solved last.
func (e *Engine) OutOfBand(device int) bool {
	d := e.devices[device]
	e.measure(d, 0)
	s, _ := d.State(d.reading)
	return s.OutOfBand
}
