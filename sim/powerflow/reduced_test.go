package powerflow_test

import (
	"math/cmplx"
	"testing"

	"yearflow/sim/network"
	"yearflow/sim/powerflow"
)

// A solution of the solver satisfies the exported equations Y·x = Pull + Tᵀ·J, and T
// gives back every voltage, at taps off neutral and with a capacitor open.
func TestReducedIsTheSystemThatTheSolverSolves(t *testing.T) {
	s, in := demoSolver(t)
	ratio, closed := make([]float64, len(s.Net.Couplings)), make([]bool, len(s.Net.Model.Capacitors))
	for k := range ratio {
		ratio[k] = 1
		if s.Net.Couplings[k].Unit >= 0 {
			ratio[k] = 1 + 0.00625*float64(k%5)
		}
	}
	for k := range closed {
		closed[k] = k%2 == 0
	}
	if err := s.SetDevices(ratio, closed); err != nil {
		t.Fatal(err)
	}
	out := s.NewSolution()
	if !s.Solve(in, nil, powerflow.Reference, out) {
		t.Fatal("no solution")
	}
	r := s.Reduced(in)
	if len(s.Order()) != r.N {
		t.Fatalf("an order of %d for %d independent voltages", len(s.Order()), r.N)
	}
	x, set := make([]complex128, r.N), make([]bool, r.N)
	for u, terms := range r.Terms {
		if len(terms) == 1 && terms[0].Col >= 0 && terms[0].Coef == 1 && !set[terms[0].Col] {
			x[terms[0].Col], set[terms[0].Col] = out.V[u], true
		}
	}
	for c, ok := range set {
		if !ok {
			t.Fatalf("no unknown of the network is independent voltage %d alone", c)
		}
	}
	spread := 0
	for u, terms := range r.Terms {
		var v complex128
		for _, p := range terms {
			if p.Col >= 0 {
				v += x[p.Col] * complex(p.Coef, 0)
			} else {
				v += in.Source[-1-p.Col] * complex(p.Coef, 0)
			}
			if p.Coef != 1 {
				spread++
			}
		}
		if d := cmplx.Abs(v - out.V[u]); d > 1e-9*s.Net.Unknowns[u].Nominal {
			t.Errorf("%s: T·x is %v, the solver says %v", s.Net.Unknowns[u].Name, v, out.V[u])
		}
	}
	if spread == 0 {
		t.Error("no regulator stands between the voltages: this feeder tests nothing")
	}
	// The mismatch of each row, A, as a part of the largest current that meets there.
	rest, size := append([]complex128(nil), r.Pull...), make([]float64, r.N)
	for k := range r.Rows {
		i, j, y := r.Rows[k], r.Cols[k], r.Values[k]
		if i < j {
			t.Fatalf("entry %d, %d is not in the lower triangle", i, j)
		}
		rest[i] -= y * x[j]
		size[i] = max(size[i], cmplx.Abs(y*x[j]))
		if i != j {
			rest[j] -= y * x[i]
			size[j] = max(size[j], cmplx.Abs(y*x[i]))
		}
	}
	power := make([]complex128, len(s.Injections))
	s.Drawn(power, in, out.V)
	put := func(u int32, i complex128) {
		for _, p := range r.Terms[u] {
			if p.Col >= 0 {
				rest[p.Col] += i * complex(p.Coef, 0)
			}
		}
	}
	for k, j := range s.Injections {
		v := out.V[j.From]
		if j.To != network.Ground {
			v -= out.V[j.To]
		}
		i := cmplx.Conj(power[k] / v)
		put(j.From, -i)
		if j.To != network.Ground {
			put(j.To, i)
		}
	}
	for c := range rest {
		if cmplx.Abs(rest[c]) > 1e-9*size[c] {
			t.Errorf("independent voltage %d: %v A are left, of terms up to %g A", c, rest[c], size[c])
		}
	}
}
