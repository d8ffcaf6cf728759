package sim_test

import (
	"math/cmplx"
	"math/rand/v2"
	"slices"
	"testing"

	"yearflow/sim"
	"yearflow/sim/demo"
)

// Instants that are held side by side are those that are held one by one, whatever stands
// beside them.
func TestHeldAllIsHeld(t *testing.T) {
	e, one := prepare(t, demo.Study(), "", sim.Options{}), prepare(t, demo.Study(), "", sim.Options{})
	in, err := one.Solve(4000, sim.Positions{})
	if err != nil || in.State == nil {
		t.Fatal(err, "no solution")
	}
	start, taps := slices.Clone(in.State.V), slices.Clone(in.State.Taps)
	closed := slices.Clone(in.State.Closed)
	r := rand.New(rand.NewPCG(8, 1))
	var all []sim.HeldInstant
	for k := range 61 {
		h := sim.HeldInstant{Step: r.IntN(e.Steps()), Start: start, V: make([]complex128, len(start))}
		if k%3 > 0 { // mostly the same month
			h.Step = 4000 + r.IntN(60)
		}
		h.Positions.Taps, h.Positions.Closed = slices.Clone(taps), slices.Clone(closed)
		for i := range h.Positions.Taps {
			h.Positions.Taps[i] += r.IntN(7) - 3
		}
		for i := range h.Positions.Closed {
			h.Positions.Closed[i] = r.IntN(2) == 0
		}
		all = append(all, h)
	}
	if err := e.HeldAll(all); err != nil {
		t.Fatal(err)
	}
	for k := range all {
		h := &all[k]
		in, err := one.Held(h.Step, h.Positions, h.Start)
		if err != nil {
			t.Fatal(err)
		}
		if h.Found != (in.State != nil) || h.Where != in.Where {
			t.Fatalf("instant %d: found %v at %q, by itself %v at %q", k, h.Found, h.Where, in.State != nil, in.Where)
		}
		for u, v := range in.State.V {
			if d := cmplx.Abs(h.V[u]-v) / cmplx.Abs(v); d > 1e-7 {
				t.Fatalf("instant %d, unknown %d: %v, by itself %v", k, u, h.V[u], v)
			}
		}
	}
	alone := []sim.HeldInstant{all[17]}
	alone[0].V = make([]complex128, len(start))
	if err := e.HeldAll(alone); err != nil {
		t.Fatal(err)
	}
	if !slices.Equal(alone[0].V, all[17].V) {
		t.Error("an instant alone is another one than among others")
	}
}

// What a unit draws after it has been given another size is what counts.
func TestHeldAllKnowsSizes(t *testing.T) {
	e, one := prepare(t, demo.Study(), "", sim.Options{}), prepare(t, demo.Study(), "", sim.Options{})
	in, err := one.Solve(4380, sim.Positions{}) // noon in July
	if err != nil || in.State == nil {
		t.Fatal(err, "no solution")
	}
	h := []sim.HeldInstant{{Step: 4380, Start: slices.Clone(in.State.V), V: make([]complex128, len(in.State.V)),
		Positions: sim.Positions{Taps: slices.Clone(in.State.Taps), Closed: slices.Clone(in.State.Closed)}}}
	if err := e.HeldAll(h); err != nil {
		t.Fatal(err)
	}
	before := slices.Clone(h[0].V)
	for _, s := range []*sim.Sizer{e.NewSizer(), one.NewSizer()} {
		for g := range e.Study.Model.Generators {
			s.Set(g, 0)
		}
	}
	if err := e.HeldAll(h); err != nil {
		t.Fatal(err)
	}
	if in, err = one.Held(4380, h[0].Positions, h[0].Start); err != nil {
		t.Fatal(err)
	}
	moved := 0.0
	for u, v := range in.State.V {
		if d := cmplx.Abs(h[0].V[u]-v) / cmplx.Abs(v); d > 1e-7 {
			t.Fatalf("unknown %d: %v, by itself %v", u, h[0].V[u], v)
		}
		moved = max(moved, cmplx.Abs(h[0].V[u]-before[u])/cmplx.Abs(v))
	}
	if moved < 1e-4 {
		t.Errorf("without generators voltages move by %g: the test shows nothing", moved)
	}
}
