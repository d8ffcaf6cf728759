package powerflow_test

import (
	"fmt"
	"math"
	"math/cmplx"
	"testing"

	"yearflow/sim/conductor"
	"yearflow/sim/feeder"
	"yearflow/sim/network"
	"yearflow/sim/powerflow"
)

// steep is a volt-var curve of the steepest kind that IEEE Std 1547-2018 allows for
// category B (Table 8 as recalled from memory: V2 to V3 may close to the reference
// voltage, V1 and V4 0.02 p.u. beyond them): ±44 % of the rating within ±0.02 p.u.
type steep struct{ rating float64 }

func (c steep) Draws(s complex128, v float64) (complex128, complex128) {
	const q, half = 0.44, 0.02
	switch {
	case v <= 1-half:
		return s - complex(0, q*c.rating), 0
	case v >= 1+half:
		return s + complex(0, q*c.rating), 0
	}
	return s + complex(0, q*c.rating*(v-1)/half), complex(0, q*c.rating/half)
}

// Two hundred inverters with the steepest curve at the end of a weak line: the fixed
// point swings, Newton's method arrives, and the answer satisfies the curve and
// Kirchhoff's law.
func TestSteepInvertersOnAWeakFeeder(t *testing.T) {
	m := &feeder.Model{Frequency: 60, Sources: []feeder.Source{{Nominal: 12.47, Voltage: 1.01, Z1: 0.3 + 2i, Z0: 0.6 + 4i}}}
	c := conductor.Sequence(0.4+0.45i, 0.7+1.4i, 0, 0)
	m.Constructions = []feeder.Construction{{Name: "line", Matrices: c}}
	for i := range 201 {
		m.Nodes = append(m.Nodes, feeder.Node{Name: fmt.Sprintf("n%03d", i), Phases: abc, Nominal: 12.47, Grounded: true})
		if i > 0 {
			m.Sections = append(m.Sections, feeder.Section{Name: fmt.Sprintf("s%03d", i), From: i - 1, To: i, Phases: abc, LengthKM: 0.08})
		}
	}
	n, err := network.Build(m)
	if err != nil {
		t.Fatal(err)
	}
	var js []powerflow.Injection
	var groups []powerflow.Group
	in := &powerflow.Input{Source: sources(n)}
	const kva = 25e3
	for i := 1; i <= 200; i++ {
		g := powerflow.Group{Law: steep{kva}}
		for _, u := range n.At[i][:3] {
			g.Members = append(g.Members, int32(len(js)))
			js = append(js, powerflow.Injection{From: u, To: network.Ground, Nominal: 12470 / math.Sqrt(3), PC: 1, QC: 1, Generator: true, Size: kva / 3, Group: int32(len(groups) + 1)})
			in.Power = append(in.Power, complex(-0.9*kva, 0))
		}
		groups = append(groups, g)
	}
	s, err := powerflow.New(n, js, groups...)
	if err != nil {
		t.Fatal(err)
	}
	out := s.NewSolution()
	if !s.Solve(in, nil, powerflow.Contract, out) {
		t.Fatalf("no solution: change %g", out.Change)
	}
	t.Logf("%v, %d iterations", out.Path, out.Iterations)
	drawn := make([]complex128, len(js))
	s.Drawn(drawn, in, out.V)
	for i, g := range groups {
		mean, total := 0.0, complex128(0)
		for _, k := range g.Members {
			mean += cmplx.Abs(out.V[js[k].From]) / js[k].Nominal / 3
			total += drawn[k]
		}
		want, _ := g.Law.Draws(in.Power[g.Members[0]], mean)
		if cmplx.Abs(total-want) > 1e-3*kva*1e-3 {
			t.Errorf("inverter %d at %.6f p.u.: draws %v, its curve says %v", i, mean, total, want)
		}
	}
	if a := testing.AllocsPerRun(5, func() { s.Solve(in, nil, powerflow.Contract, out) }); a != 0 {
		t.Errorf("%v allocations a solution", a)
	}
}
