package results

import (
	"math"
	"math/cmplx"
	"math/rand/v2"
	"testing"

	"yearflow/sim/feeder"
	"yearflow/sim/powerflow/vector"
)

// The bounds between which the distances of squares put the unbalance hold.
func TestUnbalanceLiesBetween(t *testing.T) {
	rnd := rand.New(rand.NewPCG(4, 4))
	v, out := vector.Make(3), vector.Make(1)
	var far, ratio [vector.Lanes]float64
	var triples vector.Triples
	triples.Row(0, 1, 2)
	for range 50_000 {
		size := math.Exp(-12 * rnd.Float64())
		var u [3]complex128
		for p := range u {
			u[p] = cmplx.Rect(7200*(1+size*rnd.NormFloat64()), -2*math.Pi/3*float64(p)+size*rnd.NormFloat64())
			vector.Put(v, p, 2, u[p])
		}
		triples.Watch(out, v, &far, &ratio)
		d, ok := unbalance(u[0], u[1], u[2])
		low, high := unbalanceBetween(far[2])
		if !ok || !(low <= d && d <= high) {
			t.Fatalf("unbalance %g of %v, want between %g and %g", d, u, low, high)
		}
		n, ok := sequences(u[0], u[1], u[2])
		if got := math.Sqrt(ratio[2]); !ok || math.Abs(got-n) > ratioSlack*(1+n) {
			t.Fatalf("negative sequence %g of %v, want %g", got, u, n)
		}
	}
}

// Of nodes that are about equally far out the one of the largest unbalance is found, which
// is not always the furthest.
func TestLargestUnbalanceOfANode(t *testing.T) {
	rnd := rand.New(rand.NewPCG(6, 6))
	const n = 30
	other := 0
	for range 300 {
		m := &Meter{}
		w := &watch{block: block{meter: m}, triple: vector.Make(n)}
		l := &Lanes{V: vector.Make(3 * n)}
		want, at, furthest := -1.0, -1, 0
		for k := range n {
			var u [3]complex128
			// One side or two, up or down: scaled until the distance is that of the others, but
			// for little.
			shape := [...][3]float64{{1, 0, 0}, {-1, 0, 0}, {1, -1, 0}, {0.3, -0.7, 0}, {0.7, 0.2, 0}}[rnd.IntN(5)]
			for scale := 0.05; ; {
				for p := range u {
					u[p] = cmplx.Rect(7200*(1+scale*shape[p]), -2*math.Pi/3*float64(p))
					vector.Put(l.V, 3*k+p, 0, u[p])
				}
				var one vector.Triples
				one.Row(3*k, 3*k+1, 3*k+2)
				one.Watch(w.triple[k*vector.Width:], l.V, &w.far, &w.ratioSq)
				if math.Abs(w.far[0]-0.05) < 1e-6 {
					break
				}
				scale *= 0.05 / w.far[0]
			}
			var at3 [feeder.PhaseCount]int32
			for p := range 3 {
				at3[p] = int32(3*k + p)
			}
			m.three, m.threeAt = append(m.three, at3), append(m.threeAt, 100+k)
			w.triples.Row(3*k, 3*k+1, 3*k+2)
			for p := range 3 {
				l.Slot = append(l.Slot, int32(3*k+p))
			}
			if d, _ := unbalance(u[0], u[1], u[2]); d > want {
				want, at = d, 100+k
			}
		}
		w.triples.Watch(w.triple, l.V, &w.far, &w.ratioSq)
		for k := range n {
			if w.triple[k*vector.Width] == w.far[0] {
				furthest = 100 + k
			}
		}
		got, node := w.unbalance(l, 0)
		if got != 100*want || node != at {
			t.Fatalf("unbalance %g at %d, want %g at %d", got, node, 100*want, at)
		}
		if at != furthest {
			other++
		}
	}
	if other < 100 {
		t.Errorf("in %d of 300 the largest is not the furthest: the test shows nothing", other)
	}
}
