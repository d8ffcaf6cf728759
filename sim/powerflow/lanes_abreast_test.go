package powerflow_test

import (
	"math/cmplx"
	"math/rand/v2"
	"testing"

	"yearflow/sim/network"
	"yearflow/sim/powerflow"
	"yearflow/sim/powerflow/vector"
)

// Solutions of different powers and positions, side by side, have the flows and the draws
// that the solver reads of each; lanes with an injection below the corner are told.
func TestSolutionsAbreast(t *testing.T) {
	read, below, open := 0, 0, 0
seeds:
	for seed := range uint64(120) {
		m, inj, power := randomFeeder(seed)
		n, err := network.Build(m)
		if err != nil {
			t.Fatal(err)
		}
		s, err := powerflow.New(n, inj)
		if err != nil {
			t.Fatalf("seed %d: %v", seed, err)
		}
		r := rand.New(rand.NewPCG(seed, 19))
		c := powerflow.NewLanes(s, largest(power)).NewLaneCurrents(nil)
		a := c.NewAbreast()
		p, q, share := make([]int, len(inj)), make([]int, len(inj)), make([]complex128, len(inj))
		rows := make([]float64, 2*len(inj)*vector.Lanes)
		for k := range inj {
			p[k], q[k], share[k] = 2*k, 2*k+1, 1+1i
		}
		var v [vector.Lanes][]complex128
		var closed [vector.Lanes][]bool
		var flow [vector.Lanes][]complex128
		var drawn [vector.Lanes]complex128
		low := uint8(0)
		for lane := range vector.Lanes {
			ratio := make([]float64, len(n.Couplings))
			for k, x := range n.Couplings {
				ratio[k] = 1
				if x.Unit >= 0 {
					ratio[k] = 1 + 0.00625*float64(r.IntN(33)-16)
				}
			}
			closed[lane] = []bool{r.IntN(2) == 0, r.IntN(2) == 0}
			in := powerflow.Input{Source: sources(n)}
			if r.IntN(8) == 0 {
				for f := range in.Source {
					in.Source[f] *= 0.69
				}
			}
			for k, x := range power {
				x *= complex(1.5*r.Float64(), 0)
				in.Power = append(in.Power, x)
				rows[p[k]*vector.Lanes+lane], rows[q[k]*vector.Lanes+lane] = real(x), imag(x)
			}
			out := s.NewSolution()
			if err := s.SetDevices(ratio, closed[lane]); err != nil || !s.Solve(&in, nil, powerflow.Reference, out) {
				continue seeds
			}
			v[lane] = out.V
			flow[lane] = make([]complex128, n.Offsets[len(n.Elements)])
			s.Flows(flow[lane], out.V)
			each := make([]complex128, len(inj))
			s.Drawn(each, &in, out.V)
			for _, x := range each {
				drawn[lane] += x
			}
			if s.LowAt(out.V) >= 0 {
				low |= 1 << lane
			}
			for _, is := range closed[lane] {
				if !is {
					open++
				}
			}
		}
		c.Follow(p, q, share)
		c.Drive(rows)
		a.Load(&v)
		a.Flows(&closed)
		told := a.Draws()
		if told&low != low {
			t.Errorf("seed %d: lanes %b stand below the corner, told %b", seed, low, told)
		}
		for lane := range vector.Lanes {
			if told>>lane&1 == 1 {
				below++
				continue
			}
			read++
			for e := range n.Elements {
				for i := n.Offsets[e]; i < n.Offsets[e+1]; i++ {
					want, got := flow[lane][i], vector.At(c.Flow, i, lane)
					terminal := 0.0 // the terms of a current may cancel
					el := &n.Elements[e]
					for k, u := range el.Terminals {
						terminal += cmplx.Abs(el.Y[(i-n.Offsets[e])*len(el.Terminals)+k] * v[lane][u])
					}
					if !(cmplx.Abs(got-want) <= 1e-13*terminal) {
						t.Fatalf("seed %d, lane %d: flow %d of element %d (%v) is %v, want %v", seed, lane, i, e, el.Kind, got, want)
					}
				}
			}
			got := complex(c.Drawn[lane], a.Var[lane])
			if !(cmplx.Abs(got-drawn[lane]) <= 1e-9*(1+cmplx.Abs(drawn[lane]))) {
				t.Fatalf("seed %d, lane %d: draws %v, want %v", seed, lane, got, drawn[lane])
			}
			for u, z := range v[lane] {
				if got := vector.At(a.Turned, laneSlot(a, u), lane); got != complex(imag(z), -real(z)) {
					t.Fatalf("seed %d, lane %d: voltage %d turned is %v of %v", seed, lane, u, got, z)
				}
			}
		}
	}
	t.Logf("%d lanes, %d below the corner, %d open banks", read, below, open)
	if read < 300 || below < 10 || open < 100 {
		t.Errorf("%d lanes, %d below the corner, %d open banks: the test shows little", read, below, open)
	}
}

func laneSlot(a *powerflow.Abreast, u int) int {
	_, slot := a.Block.Voltages()
	return int(slot[u])
}
