package powerflow_test

import (
	"math/cmplx"
	"math/rand/v2"
	"testing"

	"yearflow/sim/powerflow"
	"yearflow/sim/powerflow/vector"
)

// In however many parts the values go through an iteration, the voltages are those of the
// solver, and a lane alone gives the same bits as among others that take longer.
func TestPartsMakeNoDifference(t *testing.T) {
	subtrees, left, all := 0, 0, 0
	for seed := range uint64(300) {
		n, s, _, power := randomSolver(t, seed)
		r := rand.New(rand.NewPCG(seed, 12))
		ratio := randomRatios(r, n)
		closed := []bool{r.IntN(2) == 0, r.IntN(2) == 0}
		if err := s.SetDevices(ratio, closed); err != nil {
			t.Fatal(err)
		}
		want, got, one := s.NewSolution(), s.NewSolution(), s.NewSolution()
		most := 1 + r.IntN(12)
		for _, positioned := range []bool{false, true} {
			lanes, alone := powerflow.NewLanesOfParts(s, largest(power), most, positioned), powerflow.NewLanesOfParts(s, largest(power), most, positioned)
			subtrees += lanes.Parts()
			for range 2 {
				var in [vector.Lanes]powerflow.Input
				for lane := range in {
					in[lane] = powerflow.Input{Source: sources(n)}
					for _, p := range power {
						in[lane].Power = append(in[lane].Power, p*complex(1.5*r.Float64()*float64(lane)/7, 0))
					}
					lanes.Input(lane, &in[lane])
				}
				lanes.StartAll(nil, &in[0])
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
					alone.Input(lane, &in[lane])
					alone.StartAll(nil, &in[0])
					if alone.Solve(1<<lane, powerflow.Contract) != 1<<lane {
						t.Fatalf("seed %d, lane %d does not arrive alone", seed, lane)
					}
					alone.Take(lane, one)
					for u := range want.V {
						if d := cmplx.Abs(got.V[u]-want.V[u]) / n.Unknowns[u].Nominal; !(d <= 1e-8) {
							t.Fatalf("seed %d, lane %d, parts of %d, %s: %v, the solver %v", seed, lane, most, n.Unknowns[u].Name, got.V[u], want.V[u])
						}
						if got.V[u] != one.V[u] {
							t.Fatalf("seed %d, lane %d, %s: %v alone, %v among others", seed, lane, n.Unknowns[u].Name, one.V[u], got.V[u])
						}
					}
				}
			}
		}
	}
	if subtrees < 900 || left > all/20 {
		t.Errorf("%d subtrees; %d of %d lanes are left to the solver", subtrees, left, all)
	}
	t.Logf("%d subtrees", subtrees)
}
