package sim_test

import (
	"math/cmplx"
	"testing"
	"time"

	"yearflow/sim"
	"yearflow/sim/demo"
	"yearflow/sim/results"
)

// The nodal equation of every node.phase of a solved instant adds up to nothing: within
// 1e-6 of what goes through it, or of 1 kVA. At a source, what it delivers is counted.
func TestNodesBalance(t *testing.T) {
	engines := map[string]*sim.Engine{
		"demo":         prepare(t, demo.Study(), "", sim.Options{}),
		"13-node":      open(t, "../testdata/published/thirteen-node", ""),
		"34-node":      open(t, "../testdata/published/thirty-four-node", ""),
		"random":       prepare(t, anyStudy(3, time.Hour), "", sim.Options{}),
		"another":      prepare(t, anyStudy(4, time.Hour), "", sim.Options{}),
		"compensation": prepare(t, settled(folder(inputs{step: time.Hour, steps: 1, volts: []float64{117}}, "regulators.csv", oneRegulator, "regulator-settings.csv", settings("", ""))), "", sim.Options{}),
	}
	for name, e := range engines {
		in, err := e.Solve(min(4500, e.Steps()-1), sim.Positions{})
		if err != nil || in.Status != results.OK {
			t.Fatal(name, err, in.Status)
		}
		for _, n := range e.Study.Model.Nodes {
			rows, err := e.Balance(n.Name)
			if err != nil || len(rows) != len(n.Phases) {
				t.Fatal(name, n.Name, err, len(rows))
			}
			for _, r := range rows {
				scale := cmplx.Abs(r.Load) + cmplx.Abs(r.Gen) + cmplx.Abs(r.Source)
				for _, x := range r.Elements {
					scale += cmplx.Abs(x.Power)
					var current complex128
					for _, term := range x.Terms {
						current += term.Y * term.V
					}
					// The terms are the current, where there are any.
					if len(x.Terms) > 0 && cmplx.Abs(current-x.Current) > 1e-9*(1+cmplx.Abs(x.Current)) {
						t.Errorf("%s: %s.%s, %s: terms make %v A, the current is %v A", name, n.Name, r.Phase, x.Name, current, x.Current)
					}
				}
				if off := cmplx.Abs(r.Sum); !(off <= 1e-6*max(scale, 1000)) {
					t.Errorf("%s: at %s.%s %v VA are left of %v VA", name, n.Name, r.Phase, off, scale)
				}
			}
		}
	}
}
