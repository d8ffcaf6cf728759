package powerflow_test

import (
	"math"
	"math/cmplx"
	"math/rand/v2"
	"slices"
	"testing"

	"yearflow/sim/network"
	"yearflow/sim/powerflow"
	"yearflow/sim/powerflow/vector"
)

// reading is what a Sense reads.
type reading struct{ flow, own, source []complex128 }

func newReading(n *network.Network) reading {
	return reading{make([]complex128, n.Offsets[len(n.Elements)]), make([]complex128, len(n.Couplings)), make([]complex128, len(n.Fixed))}
}

// Every lane of 300 seeded feeders, radial and meshed, each lane with its own positions of
// the devices, equals the solution of the solver at these positions and inputs; one lane
// alone gives the same bits as eight, whatever stood in it before.
func TestPositionedLanesEqualTheSolver(t *testing.T) {
	worst, left, all, moved := 0.0, 0, 0, 0
	for seed := range uint64(300) {
		n, s, _, power := randomSolver(t, seed)
		r := rand.New(rand.NewPCG(seed, 10))
		lanes, alone := powerflow.NewPositionedLanes(s, largest(power)), powerflow.NewPositionedLanes(s, largest(power))
		want, got, one := s.NewSolution(), s.NewSolution(), s.NewSolution()
		sense := s.NewLaneSense([]int{})
		var in [vector.Lanes]powerflow.Input
		var ratio [vector.Lanes][]float64
		var closed [vector.Lanes][]bool
		for range 3 {
			for lane := range in {
				ratio[lane] = randomRatios(r, n)
				for _, x := range ratio[lane] {
					if x != 1 {
						moved++
					}
				}
				closed[lane] = []bool{r.IntN(2) == 0, r.IntN(2) == 0}
				lanes.Position(lane, ratio[lane], closed[lane])
				in[lane] = powerflow.Input{Source: sources(n)}
				for _, p := range power {
					in[lane].Power = append(in[lane].Power, p*complex(1.5*r.Float64(), 0))
				}
				lanes.Input(lane, &in[lane])
			}
			lanes.Start(vector.All, nil, &in[0])
			arrived := lanes.Solve(vector.All, powerflow.Contract)
			start := s.NewSolution()
			s.NoLoad(start.V, &in[0])
			for lane := range in {
				all++
				if arrived>>lane&1 == 0 {
					left++
					continue
				}
				lanes.Take(lane, got)
				sensed := newReading(n)
				if !sense.Read(sensed.flow, sensed.own, sensed.source, lanes, lane) {
					t.Fatal("the equations are regular")
				}
				alone.Position(5, ratio[lane], closed[lane])
				alone.Input(5, &in[lane])
				alone.Start(1<<5, start.V, &in[0])
				if alone.Solve(1<<5, powerflow.Contract) != 1<<5 {
					t.Fatalf("seed %d, lane %d does not arrive alone", seed, lane)
				}
				alone.Take(5, one)
				for u := range one.V {
					if one.V[u] != got.V[u] {
						t.Fatalf("seed %d, lane %d, %s: %v alone, %v among others", seed, lane, n.Unknowns[u].Name, one.V[u], got.V[u])
					}
				}
				if err := s.SetDevices(ratio[lane], closed[lane]); err != nil {
					t.Fatal(err)
				}
				read := newReading(n)
				s.NewSense([]int{}).Read(read.flow, read.own, read.source, &in[lane], got.V)
				if !slices.Equal(read.own, sensed.own) || !slices.Equal(read.source, sensed.source) {
					t.Fatalf("seed %d, lane %d: currents of couplings %v and sources %v, as of the solver %v and %v", seed, lane, sensed.own, sensed.source, read.own, read.source)
				}
				if !s.Solve(&in[lane], nil, powerflow.Reference, want) {
					t.Fatalf("seed %d, lane %d: a solution where the solver finds none", seed, lane)
				}
				for u := range want.V {
					d := cmplx.Abs(got.V[u]-want.V[u]) / n.Unknowns[u].Nominal
					if worst = math.Max(worst, d); !(d <= 1e-8) {
						t.Fatalf("seed %d, lane %d, %s: %v, the solver %v", seed, lane, n.Unknowns[u].Name, got.V[u], want.V[u])
					}
				}
			}
		}
	}
	t.Logf("largest difference %.2g p.u.; %d of %d lanes left to the solver; %d positions", worst, left, all, moved)
	if left > all/20 || moved < 1000 {
		t.Errorf("%d of %d lanes are left to the solver, %d positions", left, all, moved)
	}
}

// To put a lane elsewhere and solve it allocates nothing.
func TestPositionedLanesDoNotAllocate(t *testing.T) {
	s, in := demoSolver(t)
	lanes := powerflow.NewPositionedLanes(s, largest(in.Power))
	ratio, closed := make([]float64, len(s.Net.Couplings)), make([]bool, len(s.Net.Model.Capacitors))
	for k := range ratio {
		ratio[k] = 1
	}
	at := 0
	got := testing.AllocsPerRun(10, func() {
		for k, c := range s.Net.Couplings {
			if c.Unit >= 0 {
				at++
				ratio[k] = 1 + 0.00625*float64(at%5)
			}
		}
		lanes.Position(1, ratio, closed)
		lanes.Input(1, in)
		lanes.Start(2, nil, in)
		if lanes.Solve(2, powerflow.Contract) != 2 {
			t.Fatal("no solution")
		}
	})
	if got != 0 {
		t.Errorf("%g allocations a solution", got)
	}
}

// BenchmarkPositionedLanes is the factor of eight lanes that have all moved, and a block
// with the iterations besides.
func BenchmarkPositionedLanes(b *testing.B) {
	s, in := demoSolver(b)
	lanes := powerflow.NewPositionedLanes(s, largest(in.Power))
	ratio, closed := make([]float64, len(s.Net.Couplings)), make([]bool, len(s.Net.Model.Capacitors))
	at := 0
	move := func() {
		at++
		for lane := range vector.Lanes {
			for k, c := range s.Net.Couplings {
				ratio[k] = 1
				if c.Unit >= 0 {
					ratio[k] += 0.00625 * float64((at+k*lane)%9)
				}
			}
			lanes.Position(lane, ratio, closed)
			lanes.Input(lane, in)
		}
	}
	move()
	b.Run("position", func(b *testing.B) {
		for b.Loop() {
			move()
		}
	})
	b.Run("factor", func(b *testing.B) {
		for b.Loop() {
			lanes.Refactor()
		}
	})
	b.Run("solve", func(b *testing.B) {
		for b.Loop() {
			lanes.Start(vector.All, nil, in)
			if lanes.Solve(vector.All, powerflow.Contract) != vector.All {
				b.Fatal("no solution")
			}
		}
		b.ReportMetric(float64(lanes.Iterations[0]), "iterations")
	})
}
