package powerflow_test

import (
	"testing"

	"yearflow/sim/network"
	"yearflow/sim/powerflow"
)

// Where the equations are singular at the taps, the place that is told does not depend on
// whether the state before was factored, and the states after it are solved as ever.
func TestSingularAfterAStateThatWasNotFactored(t *testing.T) {
	tried := 0
	for seed := range uint64(60) {
		m, inj, power := randomFeeder(seed)
		n, err := network.Build(m)
		if err != nil {
			t.Fatal(err)
		}
		at := -1
		ratio, broken, other := make([]float64, len(n.Couplings)), make([]float64, len(n.Couplings)), make([]float64, len(n.Couplings))
		for k, c := range n.Couplings {
			ratio[k], broken[k], other[k] = 1, 1, 1
			if c.Unit >= 0 {
				other[k] = 1.0125
				// Of a unit that passes nothing on, and of one that would pass on endlessly much.
				if broken[k] = 1e14; at < 0 && seed%2 == 0 {
					broken[k] = 0
				}
				at = k
			}
		}
		if at < 0 {
			continue
		}
		closed := []bool{true, false}
		var worst [2]int
		var v [2][]complex128
		singular := false
		for i := range 2 {
			s, err := powerflow.New(n, inj)
			if err != nil {
				t.Fatal(err)
			}
			in := &powerflow.Input{Source: sources(n), Power: power}
			out := s.NewSolution()
			if i == 0 {
				_ = s.SetDevices(other, closed)
				singular = s.SetDevices(broken, closed) != nil
			} else {
				s.Place(other, closed)
				s.Place(broken, closed)
			}
			if s.Solve(in, nil, powerflow.Contract, out) && singular {
				t.Fatalf("seed %d: a solution of singular equations", seed)
			}
			worst[i] = out.Worst
			s.Place(ratio, closed)
			if !s.Solve(in, nil, powerflow.Contract, out) {
				t.Fatalf("seed %d: no solution", seed)
			}
			v[i] = out.V
		}
		if !singular {
			continue
		}
		tried++
		if worst[0] != worst[1] {
			t.Fatalf("seed %d: singular at %s, at %s where the state before was not factored", seed, n.Unknowns[worst[0]].Name, n.Unknowns[worst[1]].Name)
		}
		for u := range v[0] {
			if v[0][u] != v[1][u] {
				t.Fatalf("seed %d, %s: %v, %v", seed, n.Unknowns[u].Name, v[0][u], v[1][u])
			}
		}
	}
	if tried < 5 {
		t.Errorf("%d feeders were singular", tried)
	}
}
