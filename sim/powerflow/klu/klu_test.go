//go:build klu

package klu_test

import (
	"math/cmplx"
	"testing"

	"yearflow/sim/feeder"
	"yearflow/sim/powerflow"
	"yearflow/sim/powerflow/klu"
	"yearflow/sim/synthetic"
)

// circuit returns a synthetic feeder with its taps where three quarters of nominal load
// leave them.
func circuit(tb testing.TB, o synthetic.Options) *synthetic.Circuit {
	tb.Helper()
	study, err := synthetic.Study(o)
	if err != nil {
		tb.Fatal(err)
	}
	st, err := feeder.Open(study, "")
	if err != nil {
		tb.Fatal(err)
	}
	c, err := synthetic.NewCircuit(st)
	if err != nil {
		tb.Fatal(err)
	}
	if !c.Settle(c.Level(0.75), c.Solver.NewSolution()) {
		tb.Fatal("no solution at three quarters of the load")
	}
	return c
}

// minutes returns the power of every injection over some minutes from noon on, and the
// voltages of the first of them.
func minutes(tb testing.TB, c *synthetic.Circuit, o synthetic.Options, count int) (steps [][]complex128, start []complex128) {
	tb.Helper()
	rows, err := synthetic.Multipliers(o)
	if err != nil {
		tb.Fatal(err)
	}
	for _, row := range rows[720 : 720+count] {
		steps = append(steps, c.Input(row).Power)
	}
	out := c.Solver.NewSolution()
	if !c.Solver.Solve(&powerflow.Input{Source: c.Source, Power: steps[0]}, nil, powerflow.Contract, out) {
		tb.Fatal("no solution at noon")
	}
	return steps, out.V
}

// The yardstick and the reference solver find the same voltages, also where a load is
// so heavy that its voltage is below the corner of its characteristic.
func TestSameVoltagesAsTheReference(t *testing.T) {
	for _, x := range []struct {
		name  string
		o     synthetic.Options
		level float64 // of the whole load, 1: as the shapes are
	}{
		{"S", synthetic.S(), 1},
		{"M", synthetic.M(), 1},
		{"below the corner", synthetic.S(), 2.4},
	} {
		t.Run(x.name, func(t *testing.T) {
			c := circuit(t, x.o)
			steps, start := minutes(t, c, x.o, 20)
			for _, power := range steps {
				for k := range power {
					power[k] *= complex(x.level, 0)
				}
			}
			fast, err := klu.New(c.Solver, c.Level(0))
			if err != nil {
				t.Fatal(err)
			}
			defer fast.Close()
			reference := klu.NewReference(c.Solver, c.Level(0))
			want, got := make([]complex128, len(start)), make([]complex128, len(start))
			for i, s := range []struct {
				klu.Stepper
				v []complex128
			}{{reference, want}, {fast, got}} {
				s.Prepare(steps, start)
				n, err := s.Run(1e-10)
				if err != nil {
					t.Fatal(i, err)
				}
				if n < 2*len(steps) {
					t.Errorf("%s: %d iterations for %d steps", s.Name(), n, len(steps))
				}
				s.Voltages(s.v)
			}
			worst := 0.0
			for u := range got {
				worst = max(worst, cmplx.Abs(got[u]-want[u])/c.Net.Unknowns[u].Nominal)
			}
			if !(worst <= 1e-8) {
				t.Errorf("voltages differ by %.2g p.u., want at most 1e-8", worst)
			}
			if low := c.Lowest(got); (low < powerflow.Corner) != (x.level > 1) {
				t.Errorf("the lowest voltage is %.3f p.u.", low)
			}
			t.Logf("worst difference %.2g p.u., lowest voltage %.3f p.u.", worst, c.Lowest(got))
		})
	}
}

// The lanes find the voltages of the reference solver.
func TestLanesHaveTheSameVoltages(t *testing.T) {
	for name, o := range map[string]synthetic.Options{"S": synthetic.S(), "M": synthetic.M()} {
		c := circuit(t, o)
		steps, start := minutes(t, c, o, 20)
		want, got := make([]complex128, len(start)), make([]complex128, len(start))
		for s, v := range map[klu.Stepper][]complex128{
			klu.NewReference(c.Solver, c.Level(0)):               want,
			klu.NewLaneRun(c.Solver, c.Source, c.Power, c.Shape): got,
		} {
			s.Prepare(steps, start)
			if _, err := s.Run(1e-10); err != nil {
				t.Fatal(name, err)
			}
			s.Voltages(v)
		}
		for u := range got {
			if d := cmplx.Abs(got[u]-want[u]) / c.Net.Unknowns[u].Nominal; !(d <= 1e-8) {
				t.Fatalf("%s, %s: %v, the reference %v", name, c.Net.Unknowns[u].Name, got[u], want[u])
			}
		}
	}
}
