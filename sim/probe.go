package sim

import (
	"fmt"

	"yearflow/devices"
	"yearflow/sim/results"
)

// SettleFrom solves the inputs of one step with devices that stand at p.Taps and
// p.Closed and then act until they rest, as at the start of a run: what the controls make
// of something that has just changed. p.Given is not used. Its State belongs to the
// engine and holds until the next call.
func (e *Engine) SettleFrom(step int, p Positions) (*Instant, error) {
	if step < 0 || step >= e.Steps() {
		return nil, fmt.Errorf("step %d is outside the period, which has %d steps", step, e.Steps())
	}
	if err := e.baseAt(step); err != nil {
		return nil, err
	}
	e.Reset()
	start, end := e.in.axis.Bounds(step)
	e.plants.reset(end - 1)
	e.steady = true
	for i := range p.Storage {
		b := e.plants.batteries[i]
		b.asked, b.prescribed = p.Storage[i], true
	}
	e.stand(p)
	out := &Instant{Start: start}
	var err error
	if out.StillMoving, out.Actions, err = e.settle(step); err != nil {
		return nil, err
	}
	e.anchored = false
	e.takeInputs(step)
	ok, err := e.allocate(end - 1)
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

// Held solves the inputs of one step with the devices at p.Taps and p.Closed, as Solve
// does, from the voltages of a solution close by, start: one of the same feeder with other
// units. Its State belongs to the engine and holds until the next call.
func (e *Engine) Held(step int, p Positions, start []complex128) (*Instant, error) {
	if len(start) != len(e.anchor) || e.allocation != nil || p.Taps == nil {
		return e.Solve(step, p)
	}
	begin, end := e.in.axis.Bounds(step)
	now := end - 1
	e.plants.reset(now)
	e.steady = true
	for i := range p.Storage {
		b := e.plants.batteries[i]
		b.asked, b.prescribed = p.Storage[i], true
	}
	copy(e.state.Taps, p.Taps)
	copy(e.state.Closed, p.Closed)
	copy(e.anchor, start)
	e.anchored = true
	e.takeInputs(step)
	ok, err := e.allocate(now)
	if err != nil {
		return nil, err
	}
	if !ok { // a start may mislead; what counts is what the no-load voltages lead to
		return e.Solve(step, p)
	}
	out := &Instant{Start: begin, State: &e.state, Path: e.solution.Path, Iterations: e.solution.Iterations, Change: e.solution.Change}
	if out.Where = e.low(); out.Where != "" {
		out.Status = results.Low
	}
	return out, nil
}

// stand puts the controls of settings sheets and the state to the given positions.
func (e *Engine) stand(p Positions) {
	copy(e.state.Taps, p.Taps)
	copy(e.state.Closed, p.Closed)
	for _, d := range e.devices {
		switch c := d.Controller.(type) {
		case *tapControl:
			c.state = devices.TapState{Position: e.state.Taps[e.unitAt[d.Index]+d.Unit]}
		case *reverseControl:
			c.state = devices.ReverseState{TapState: devices.TapState{Position: e.state.Taps[e.unitAt[d.Index]+d.Unit]}}
		case *capacitorControl:
			c.state = devices.CapacitorState{Closed: e.state.Closed[d.Index]}
		}
	}
}

// Sizer changes the size of generators of an engine between runs and instants, so that
// many deployments are solved without reading the study again.
type Sizer struct {
	e    *Engine
	full []complex128 // by injection: the share at factor 1
}

// NewSizer prepares the sizing of an engine's generators, all at factor 1 to begin with.
func (e *Engine) NewSizer() *Sizer {
	return &Sizer{e, append([]complex128(nil), e.in.share...)}
}

// least keeps the rating of an inverter that is switched off above zero: its functions
// are shares of it.
const least = 1e-9

// Set makes a generator, by its position in Model.Generators, factor times what its row
// says, its rating too. factor must not be negative.
func (s *Sizer) Set(generator int, factor float64) {
	e := s.e
	e.held, e.foresight = nil, nil // their lanes know the powers as they were
	for k, g := range e.in.generator {
		if g == generator {
			e.in.share[k] = s.full[k] * complex(factor, 0)
		}
	}
	for _, v := range e.plants.inverters {
		if v.generator == generator {
			g := &e.net.Model.Generators[generator]
			v.law.sheet = InverterSheet(&e.net.Model.Functions[g.Function], g.KVA*max(factor, least))
		}
	}
}
