package sim

import (
	"math"

	"yearflow/sim/feeder"
	"yearflow/sim/network"
	"yearflow/sim/results"
)

// allocationAtEnd tells how what was measured is met at the end of a step.
func (e *Engine) allocationAtEnd() *results.AllocationStep {
	a := e.allocation
	if a == nil || a.base != nil {
		return nil
	}
	if a.keep {
		a.kept = append(a.kept, a.factors...)
	}
	a.measure(e)
	out := &a.last
	out.Rows, out.Worst = out.Rows[:0], 0
	out.Shared, out.Loads = a.powers(e)
	n := len(a.equations)
	sloped := false
	for i := range a.equations {
		off := math.Abs(a.off[i]) / a.peak[i]
		out.Worst = math.Max(out.Worst, off)
		floored := a.factors[i] == 0 && a.off[i] < -allocationClose*a.peak[i]
		if off <= allocationMet && !floored {
			continue
		}
		if !sloped {
			a.slopes(e)
			sloped = true
		}
		status := results.AllocationNotMet
		switch {
		case math.Abs(a.slope[i*n+i]) <= 1e-9*a.peak[i]:
			status = results.AllocationNoLoad
		case floored:
			status = results.AllocationNoRemainder
		case a.met:
			status = results.AllocationMoved
		}
		out.Rows = append(out.Rows, a.row(i, status))
	}
	return out
}

// powers returns the real power of the loads that take a share, and of all loads, W at
// nominal voltage.
func (a *allocation) powers(e *Engine) (shared, loads float64) {
	for i := range a.members {
		shared += real(e.input.Power[a.members[i].injection])
	}
	for k, s := range e.input.Power {
		if e.in.loadOf[k] >= 0 {
			loads += real(s)
		}
	}
	return shared, loads
}

// row is a measured figure in kW, kvar or A.
func (a *allocation) row(i int, status results.AllocationStatus) results.AllocationRow {
	eq, n := &a.equations[i], len(a.equations)
	unit := 1000.0
	if eq.quantity == current {
		unit = 1
	}
	rest := a.off[i]
	for u := range a.factors {
		rest += a.slope[i*n+u] * a.factors[u]
	}
	r := results.AllocationRow{Quantity: eq.quantity.String(), Measured: a.target[i] / unit, Solved: a.solved[i] / unit, Remainder: rest / unit,
		Factors: [3]float64{math.NaN(), math.NaN(), math.NaN()}, Status: status}
	if eq.phase >= 0 {
		r.Phase = feeder.Phase(eq.phase).String()
	}
	for u := range a.unknowns {
		x := &a.unknowns[u]
		if x.quantity != eq.quantity {
			continue
		}
		for p, head := range a.head {
			if (x.phase == p || x.phase < 0) && head != network.Ground {
				r.Factors[p] = a.factors[u]
			}
		}
	}
	return r
}

// allocationUnsolved lists what was measured in a step without a solution.
func (e *Engine) allocationUnsolved() *results.AllocationStep {
	a := e.allocation
	if a == nil || a.base != nil {
		return nil
	}
	if a.keep {
		a.kept = append(a.kept, a.factors...)
	}
	out := &a.last
	out.Rows, out.Worst = out.Rows[:0], math.NaN()
	out.Shared, out.Loads = 0, 0
	for i := range a.equations {
		r := a.row(i, results.AllocationUnsolved)
		r.Solved, r.Remainder = math.NaN(), math.NaN()
		if a.equations[i].series < 0 {
			r.Measured = math.NaN()
		}
		out.Rows = append(out.Rows, r)
	}
	return out
}
