package sim

import (
	"yearflow/sim/powerflow"
	"yearflow/sim/powerflow/vector"
)

// HeldInstant is an instant that HeldAll solves: what Held is given, and what it finds.
type HeldInstant struct {
	Step      int
	Positions Positions
	Start     []complex128 // V, of a solution close by

	V     []complex128 // room for the voltages, by Network.Unknowns
	Found bool         // V is a solution
	Where string       // of one that is low, or of none
}

// heldLanes are lanes for instants with devices held.
type heldLanes struct {
	lanes    *powerflow.Lanes
	block    stepBlock
	ratio    []float64
	solution *powerflow.Solution
	month    int
}

// HeldAll solves instants as Held does, several at once where what is drawn at a step is a
// function of the step alone. An instant's solution does not depend on the others.
func (e *Engine) HeldAll(all []HeldInstant) error {
	if e.ahead == nil {
		return e.heldEach(all)
	}
	if e.held == nil {
		lanes := powerflow.NewPositionedLanes(e.flow, e.in.largest())
		if lanes == nil {
			return e.heldEach(all)
		}
		e.held = &heldLanes{lanes: lanes, block: newStepBlock(e.in, lanes), ratio: make([]float64, len(e.net.Couplings)), solution: e.flow.NewSolution(), month: -1}
	}
	for len(all) > 0 {
		n := 0
		month := e.in.monthOf(all[0].Step)
		for n < min(len(all), vector.Lanes) && e.in.monthOf(all[n].Step) == month && all[n].Positions.Taps != nil && len(all[n].Start) == len(e.anchor) {
			n++
		}
		if n == 0 {
			n = 1
			if err := e.heldEach(all[:1]); err != nil {
				return err
			}
		} else if err := e.heldBlock(all[:n], month); err != nil {
			return err
		}
		all = all[n:]
	}
	return nil
}

// heldBlock solves instants of a month at once; those that do not arrive by themselves.
func (e *Engine) heldBlock(all []HeldInstant, month int) error {
	h := e.held
	if h.month != month {
		h.month = month
		h.lanes.Follow(e.in.follow(month))
	}
	mask := uint8(0)
	for k := range all {
		x := &all[k]
		mask |= 1 << k
		h.block.load(e, k, x.Step)
		e.ratios(x.Positions.Taps, h.ratio)
		h.lanes.Position(k, h.ratio, x.Positions.Closed)
		h.lanes.Start(1<<k, x.Start, nil)
	}
	h.lanes.Drive(h.block.rows)
	arrived := h.lanes.Solve(mask, powerflow.Contract)
	for k := range all {
		if arrived>>k&1 == 0 {
			if err := e.heldEach(all[k : k+1]); err != nil {
				return err
			}
			continue
		}
		h.lanes.Take(k, h.solution)
		copy(all[k].V, h.solution.V)
		all[k].Found, all[k].Where = true, ""
	}
	return nil
}

// heldEach solves instants by themselves.
func (e *Engine) heldEach(all []HeldInstant) error {
	for k := range all {
		x := &all[k]
		in, err := e.Held(x.Step, x.Positions, x.Start)
		if err != nil {
			return err
		}
		x.Where = in.Where
		if x.Found = in.State != nil; x.Found {
			copy(x.V, in.State.V)
		}
	}
	return nil
}
