package powerflow_test

import (
	"fmt"
	"math"
	"math/cmplx"
	"math/rand/v2"
	"testing"

	"yearflow/sim/powerflow"
	"yearflow/sim/powerflow/vector"
)

// largest is what each injection draws at most where it draws up to 1.5 times power.
func largest(power []complex128) []float64 {
	out := make([]float64, len(power))
	for k, s := range power {
		out[k] = 1.5 * cmplx.Abs(s)
	}
	return out
}

// Every lane of 300 seeded feeders, radial and meshed, with every kind of connection,
// equals the solution of the solver for the same inputs; one lane alone gives the same
// bits as eight.
func TestLanesEqualTheSolver(t *testing.T) {
	worst, left, all := 0.0, 0, 0
	for seed := range uint64(300) {
		n, s, _, power := randomSolver(t, seed)
		r := rand.New(rand.NewPCG(seed, 9))
		ratio := randomRatios(r, n)
		lanes := powerflow.NewLanes(s, largest(power))
		alone := powerflow.NewLanes(s, largest(power))
		want, got, one := s.NewSolution(), s.NewSolution(), s.NewSolution()
		for round := range 2 {
			for k, c := range n.Couplings {
				if c.Unit >= 0 {
					ratio[k] += 0.00625 * float64(round)
				}
			}
			if err := s.SetDevices(ratio, []bool{r.IntN(2) == 0, r.IntN(2) == 0}); err != nil {
				t.Fatal(err)
			}
			var in [vector.Lanes]powerflow.Input
			for lane := range in {
				in[lane] = powerflow.Input{Source: sources(n)}
				for f := range in[lane].Source {
					in[lane].Source[f] *= complex(0.98+0.04*r.Float64(), 0)
				}
				for _, p := range power {
					in[lane].Power = append(in[lane].Power, p*complex(1.5*r.Float64(), 0))
				}
				lanes.Input(lane, &in[lane])
				lanes.Start(1<<lane, nil, &in[lane])
			}
			arrived := lanes.Solve(vector.All, powerflow.Contract)
			for lane := range in {
				all++
				if arrived>>lane&1 == 0 {
					left++
					continue
				}
				lanes.Take(lane, got)
				if !s.Solve(&in[lane], nil, powerflow.Reference, want) {
					t.Fatalf("seed %d, lane %d: a solution where the solver finds none", seed, lane)
				}
				for u := range want.V {
					d := cmplx.Abs(got.V[u]-want.V[u]) / n.Unknowns[u].Nominal
					if worst = math.Max(worst, d); !(d <= 1e-8) {
						t.Fatalf("seed %d, lane %d, %s: %v, the solver %v", seed, lane, n.Unknowns[u].Name, got.V[u], want.V[u])
					}
				}
				alone.Input(5, &in[lane])
				alone.Start(1<<5, nil, &in[lane])
				if alone.Solve(1<<5, powerflow.Contract) != 1<<5 {
					t.Fatalf("seed %d, lane %d does not arrive alone", seed, lane)
				}
				alone.Take(5, one)
				for u := range one.V {
					if one.V[u] != got.V[u] {
						t.Fatalf("seed %d, lane %d, %s: %v alone, %v among others", seed, lane, n.Unknowns[u].Name, one.V[u], got.V[u])
					}
				}
			}
		}
	}
	t.Logf("largest difference %.2g p.u.; %d of %d lanes left to the solver; kernel %s", worst, left, all, vector.Kernel())
	if left > all/20 {
		t.Errorf("%d of %d lanes are left to the solver", left, all)
	}
}

// A lane without a solution, and one whose input is no number, leave their neighbours
// as they are.
func TestALaneThatFailsDisturbsNoOther(t *testing.T) {
	s, in := demoSolver(t)
	lanes := powerflow.NewLanes(s, largest(in.Power))
	want, got := s.NewSolution(), s.NewSolution()
	solve := func(factor [vector.Lanes]float64) uint8 {
		for lane, f := range factor {
			x := powerflow.Input{Source: in.Source}
			for _, p := range in.Power {
				x.Power = append(x.Power, p*complex(f, 0))
			}
			lanes.Input(lane, &x)
		}
		lanes.Start(vector.All, nil, in)
		return lanes.Solve(vector.All, powerflow.Contract)
	}
	ones := [vector.Lanes]float64{1, 1, 1, 1, 1, 1, 1, 1}
	if solve(ones) != vector.All {
		t.Fatal("not every lane arrives")
	}
	lanes.Take(0, want)
	bad := ones
	bad[2], bad[5], bad[6] = 1000, math.NaN(), math.Inf(1)
	if got := solve(bad); got != vector.All&^(1<<2|1<<5|1<<6) {
		t.Fatalf("lanes %08b arrive", got)
	}
	for _, lane := range []int{0, 1, 3, 4, 7} {
		lanes.Take(lane, got)
		for u := range want.V {
			if want.V[u] != got.V[u] {
				t.Fatalf("lane %d, unknown %d: %v, without the bad lanes %v", lane, u, got.V[u], want.V[u])
			}
		}
	}
}

func TestLanesDoNotAllocate(t *testing.T) {
	s, in := demoSolver(t)
	lanes := powerflow.NewLanes(s, largest(in.Power))
	lanes.Input(0, in)
	got := testing.AllocsPerRun(10, func() {
		lanes.Input(1, in)
		lanes.Start(3, nil, in)
		if lanes.Solve(3, powerflow.Contract) != 3 {
			t.Fatal("no solution")
		}
	})
	if got != 0 {
		t.Errorf("%g allocations a solution", got)
	}
}

// BenchmarkLanes solves eight instants of the demonstration feeder, from its no-load
// voltages; BenchmarkSolve is the same for one.
func BenchmarkLanes(b *testing.B) {
	s, in := demoSolver(b)
	lanes := powerflow.NewLanes(s, largest(in.Power))
	for lane := range vector.Lanes {
		lanes.Input(lane, in)
	}
	for _, mask := range []uint8{1, vector.All} {
		b.Run(fmt.Sprintf("mask_%08b", mask), func(b *testing.B) {
			b.ReportAllocs()
			for b.Loop() {
				lanes.Start(mask, nil, in)
				if lanes.Solve(mask, powerflow.Contract) != mask {
					b.Fatal("no solution")
				}
			}
			b.ReportMetric(float64(lanes.Iterations[0]), "iterations")
		})
	}
}

// After any row of device states the factor is, to the bit, that of the last one alone.
func TestTheFactorDoesNotDependOnTheWay(t *testing.T) {
	for seed := range uint64(60) {
		n, s, _, _ := randomSolver(t, seed)
		r := rand.New(rand.NewPCG(seed, 5))
		ratio := make([]float64, len(n.Couplings))
		for k := range ratio {
			ratio[k] = 1
		}
		closed := []bool{true, true}
		for move := range 12 {
			for k, c := range n.Couplings {
				if c.Unit >= 0 && r.IntN(3) == 0 {
					ratio[k] = 1 + 0.00625*float64(r.IntN(33)-16)
				}
			}
			closed[r.IntN(2)] = r.IntN(2) == 0
			if err := s.SetDevices(ratio, closed); err != nil {
				t.Fatal(err)
			}
			if !s.SameFactor() {
				t.Fatalf("seed %d, move %d: the factor differs from that of all columns", seed, move)
			}
		}
	}
}

// Where injections may draw more, a smaller change is asked for, so that what they draw
// still meets every node.
func TestLanesExpectWhatIsDrawn(t *testing.T) {
	s, in := demoSolver(t)
	lanes := powerflow.NewLanes(s, largest(in.Power))
	iterations := func(times float64) int {
		most := largest(in.Power)
		for k := range most {
			most[k] *= times
		}
		lanes.Expect(most)
		lanes.Input(0, in)
		lanes.Start(1, nil, in)
		if lanes.Solve(1, powerflow.Contract) != 1 {
			t.Fatal("no solution")
		}
		return lanes.Iterations[0]
	}
	few, more, again := iterations(1), iterations(1e4), iterations(1)
	if more <= few || again != few {
		t.Errorf("%d iterations, %d where ten thousand times as much may be drawn, then %d", few, more, again)
	}
}
