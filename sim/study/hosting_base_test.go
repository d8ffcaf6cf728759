package study

import (
	"context"
	"math/cmplx"
	"slices"
	"testing"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// What is kept of the base stands for a solution of the base at the same step and
// positions, to the tolerance of one (1e-8 p.u.); at other positions, and where the unit
// delivers nothing, there is nothing to take.
func TestKeptVoltagesAreSolutions(t *testing.T) {
	p := placed(t, smallFeeder())
	st, err := feeder.Open(p.FS, "")
	if err != nil {
		t.Fatal(err)
	}
	prepare := func() *sim.Engine {
		e, err := sim.Prepare(variant(st, "base", nil), sim.Options{})
		if err != nil {
			t.Fatal(err)
		}
		return e
	}
	e := prepare()
	output := make([]float64, e.Steps())
	for i := range output {
		output[i] = float64(i % 24 / 12) // mornings without, afternoons with
	}
	log := &positionsLog{}
	kept := newBaseVoltages(e, log, output)
	if kept == nil {
		t.Fatal("nothing of this feeder is kept")
	}
	if _, err := e.Run(context.Background(), log, kept); err != nil {
		t.Fatal(err)
	}
	probe, seen := prepare(), 0
	for step := range output {
		s := &results.State{Taps: slices.Clone(log.taps[step]), Closed: slices.Clone(log.closed[step])}
		v := kept.at(step, s)
		if (v != nil) != (output[step] > 0) {
			t.Errorf("step %d: kept %v at an output of %g", step, v != nil, output[step])
		}
		if v == nil {
			continue
		}
		seen++
		in, err := probe.Held(step, sim.Positions{Taps: s.Taps, Closed: s.Closed}, v)
		if err != nil || in.State == nil {
			t.Fatal(in, err)
		}
		for i := range probe.Meter().Points {
			x := &probe.Meter().Points[i]
			if d := cmplx.Abs(complex(x.PU(v)-x.PU(in.State.V), 0)); d > 1e-8 {
				t.Errorf("step %d, %s: %g p.u. off", step, x.Name, d)
			}
		}
		s.Taps[0]++
		if kept.at(step, s) != nil {
			t.Errorf("step %d: voltages at another position", step)
		}
	}
	if seen != 24 {
		t.Errorf("%d of 48 steps are kept, want 24", seen)
	}
}

// A store, a lag or shared loads make what stands in the base depend on more than its
// inputs and positions: nothing is kept.
func TestNothingIsKeptWhereStatesCount(t *testing.T) {
	p := placed(t, smallFeeder())
	st, err := feeder.Open(p.FS, "")
	if err != nil {
		t.Fatal(err)
	}
	with := variant(st, "base", func(m *feeder.Model) {
		m.Functions = append(m.Functions, blankFunction("voltage-reactive power", false))
	})
	e, err := sim.Prepare(with, sim.Options{})
	if err != nil {
		t.Fatal(err)
	}
	if newBaseVoltages(e, &positionsLog{}, make([]float64, e.Steps())) != nil {
		t.Error("voltages are kept of a feeder with an inverter function")
	}
}
