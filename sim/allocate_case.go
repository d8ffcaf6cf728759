package sim

import (
	"context"

	"yearflow/sim/feeder"
)

// takeBase gives a case the loads that were allocated without it: what is changed or
// connected in the case must not be made up for by the loads.
func (a *allocation) takeBase(e *Engine, base *Engine) error {
	if base == nil || base.allocation == nil || base.allocation.base != nil || !sameAxis(base, e) {
		st, err := feeder.Open(e.Study.FS, feeder.Base)
		if err != nil {
			return err
		}
		p := st.Settings.Allocation
		st.Settings.Period, st.Settings.Profiles, st.Settings.Run = e.Study.Settings.Period, e.Study.Settings.Profiles, e.Study.Settings.Run
		st.Settings.Weather, st.Settings.Limits.Allowance, st.Settings.Allocation = e.Study.Settings.Weather, 0, p
		if base, err = Prepare(st, Options{}); err != nil {
			return err
		}
	}
	a.base = base
	return nil
}

func sameAxis(x, y *Engine) bool {
	a, b := x.in.axis, y.in.axis
	return a.Start == b.Start && a.End == b.End && a.Step == b.Step
}

// baseOver walks the study without the case through the period and keeps its factors.
func (e *Engine) baseOver(ctx context.Context) error {
	a := e.allocation
	if a == nil || a.base == nil {
		return nil
	}
	b := a.base.allocation
	if want := e.in.axis.Steps() * len(a.factors); len(b.kept) != want {
		b.keep, b.kept = true, make([]float64, 0, want)
		_, err := a.base.Run(ctx)
		if b.keep = false; err != nil {
			b.kept = nil
			return err
		}
	}
	a.kept, a.first = b.kept, 0
	return nil
}

// baseAt takes the factors of the study without the case at one step: those of its walk
// over the period where it has been made, so that an instant beside a run has the loads of
// the run and several engines may share the walk, else those of the step solved alone.
func (e *Engine) baseAt(step int) error {
	a := e.allocation
	if a == nil || a.base == nil {
		return nil
	}
	if b := a.base.allocation; len(b.kept) > 0 && len(b.kept) == e.in.axis.Steps()*len(a.factors) {
		a.kept, a.first = b.kept, 0
		return nil
	}
	if _, err := a.base.Solve(step, Positions{}); err != nil {
		return err
	}
	a.kept, a.first = append([]float64(nil), a.base.allocation.factors...), step
	return nil
}
