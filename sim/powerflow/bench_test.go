package powerflow_test

import (
	"math"
	"testing"

	"yearflow/sim/demo"
	"yearflow/sim/feeder"
	"yearflow/sim/network"
	"yearflow/sim/powerflow"
)

// demoSolver is the demonstration feeder with a third of its loads' peak.
func demoSolver(tb testing.TB) (*powerflow.Solver, *powerflow.Input) {
	st, err := feeder.Open(demo.Study(), "")
	if err != nil {
		tb.Fatal(err)
	}
	n, err := network.Build(st.Model)
	if err != nil {
		tb.Fatal(err)
	}
	in := &powerflow.Input{Source: sources(n)}
	var injections []powerflow.Injection
	add := func(from, to int32, nominal float64, va complex128, z feeder.ZIP) {
		injections = append(injections, powerflow.Injection{From: from, To: to, Nominal: nominal,
			PZ: z.PZ, PI: z.PI, PC: z.PP, QZ: z.QZ, QI: z.QI, QC: z.QP, Size: 1000})
		in.Power = append(in.Power, va)
	}
	for _, l := range st.Model.Loads {
		kw, tangent := l.KW, 0.0
		if kw != kw {
			kw, tangent = 10, l.KVARPerKW
		}
		kvar := l.KVAR
		if kvar != kvar {
			kvar = kw * tangent
		}
		ll, at := st.Model.Nodes[l.Node].Nominal*1000, n.At[l.Node]
		va := complex(kw*1000/3, kvar*1000/3)
		for _, p := range l.Phases {
			add(at[p], network.Ground, ll/math.Sqrt(3), va/complex(float64(len(l.Phases)), 0), l.ZIP)
		}
		for _, p := range l.Pairs {
			add(at[p[0]], at[p[1]], ll, va/complex(float64(len(l.Pairs)), 0), l.ZIP)
		}
	}
	s, err := powerflow.New(n, injections)
	if err != nil {
		tb.Fatal(err)
	}
	return s, in
}

// BenchmarkAssemble is what an action of a device costs: assembly and factorisation.
func BenchmarkAssemble(b *testing.B) {
	s, _ := demoSolver(b)
	b.ReportAllocs()
	for b.Loop() {
		if err := s.Refactor(); err != nil {
			b.Fatal(err)
		}
	}
	unknowns, entries := s.Size()
	b.ReportMetric(float64(unknowns), "unknowns")
	b.ReportMetric(float64(entries), "entries")
}

// BenchmarkFactor is the factorisation alone.
func BenchmarkFactor(b *testing.B) {
	s, _ := demoSolver(b)
	b.ReportAllocs()
	for b.Loop() {
		if !s.Factor() {
			b.Fatal("singular")
		}
	}
}

// BenchmarkSubstitute is one iteration's forward and back substitution.
func BenchmarkSubstitute(b *testing.B) {
	s, _ := demoSolver(b)
	b.ReportAllocs()
	for b.Loop() {
		s.Substitute()
	}
}

// BenchmarkSolve is one solution from the no-load voltages, by each method.
func BenchmarkSolve(b *testing.B) {
	for _, path := range []powerflow.Path{powerflow.FixedPoint, powerflow.Newton} {
		b.Run(path.String(), func(b *testing.B) {
			s, in := demoSolver(b)
			out := s.NewSolution()
			b.ReportAllocs()
			for b.Loop() {
				if !s.SolveBy(path, in, powerflow.Contract, out) {
					b.Fatal("no solution")
				}
			}
			b.ReportMetric(float64(out.Iterations), "iterations")
		})
	}
}

// The solver allocates nothing after New, by either method, nor when a device moves.
func TestSolutionsDoNotAllocate(t *testing.T) {
	s, in := demoSolver(t)
	out := s.NewSolution()
	flow, own := make([]complex128, s.Net.Offsets[len(s.Net.Elements)]), make([]complex128, len(s.Net.Couplings))
	source, drawn := make([]complex128, len(s.Net.Fixed)), make([]complex128, len(s.Injections))
	ratio, closed := make([]float64, len(s.Net.Couplings)), make([]bool, len(s.Net.Model.Capacitors))
	tap := 0
	if n := testing.AllocsPerRun(20, func() {
		tap++
		for k := range ratio {
			ratio[k] = 1
			if s.Net.Couplings[k].Unit >= 0 {
				ratio[k] = 1 + 0.00625*float64(tap%5)
			}
		}
		closed[0] = tap%2 == 0
		if err := s.SetDevices(ratio, closed); err != nil {
			t.Fatal(err)
		}
		if !s.Solve(in, nil, powerflow.Contract, out) || !s.SolveBy(powerflow.Newton, in, powerflow.Reference, out) {
			t.Fatal("no solution")
		}
		s.Flows(flow, out.V)
		s.Couplings(own, source, in, out.V, flow)
		s.Drawn(drawn, in, out.V)
	}); n != 0 {
		t.Errorf("%v allocations a solution", n)
	}
}
