package results

import (
	"math/rand/v2"
	"path/filepath"
	"slices"
	"testing"

	"yearflow/sim/powerflow/vector"
)

// Whether voltages rest in their bins, move now and then or all the time, and whether they
// wait for others or not, the time spent in each bin is what it is interval by interval.
func TestTimeInBins(t *testing.T) {
	moves := 0
	for seed := range uint64(40) {
		rnd := rand.New(rand.NewPCG(seed, 77))
		x := quietFeeder(t, seed)
		writer, err := create(filepath.Join(t.TempDir(), "base"), x.plan, 0)
		if err != nil {
			t.Fatal(err)
		}
		s := writer.stats
		n := len(s.meter.Points)
		s.dist.near = []int{0, n}[seed%2]
		w := newWatch(s)
		s.watch = w
		slot := make([]int32, len(x.net.Unknowns))
		for u := range slot {
			slot[u] = int32(u)
		}
		w.place(&Lanes{Slot: slot})
		want := newDistribution(n, 1, 0)
		want.toBins()
		v := make([]float64, n)
		for i := range v {
			v[i] = 0.9 + 0.2*rnd.Float64()
		}
		wander := 1e-3
		for range 300 {
			if rnd.IntN(30) == 0 {
				wander = []float64{0, 2e-7, 1e-5, 1e-3}[rnd.IntN(4)]
			}
			q := &Quiet{Step: int64(1+seed%3) * hour / 7, First: rnd.IntN(vector.Lanes), Count: 1 + rnd.IntN(vector.Lanes)}
			w.mask, w.spans = 0, w.spans[:0]
			for k := range q.Count {
				lane := q.lane(k)
				w.mask |= 1 << lane
				w.spans = append(w.spans, span{lane, 0, q.Step})
				for i := range v {
					v[i] += wander * rnd.NormFloat64()
					w.pu[i*vector.Lanes+lane] = v[i]
				}
				want.add(v, q.Step)
			}
			w.left = 0
			for i := range v {
				r := &w.points.Rows[i]
				w.points.Left[i] = 0
				for _, at := range w.spans {
					if u := w.pu[i*vector.Lanes+at.lane]; !(u >= r.From && u <= r.To) {
						w.points.Left[i] |= 1 << at.lane
					}
				}
				w.left |= w.points.Left[i]
			}
			w.distribute(q)
			if w.moving {
				moves++
			}
			if rnd.IntN(60) == 0 {
				w.step = q.Step
				w.gather()
			}
		}
		w.gather()
		for i := range want.bins {
			a, b := &want.bins[i], &s.dist.bins[i]
			if a.total != b.total {
				t.Fatalf("seed %d, point %d: %d ns, want %d", seed, i, b.total, a.total)
			}
			for bin := range 40000 {
				of := func(h *histogram) (ns int64) {
					if at := bin - h.first; at >= 0 && at < len(h.time) {
						ns = h.time[at]
					}
					return ns
				}
				if x, y := of(a), of(b); x != y {
					t.Fatalf("seed %d, point %d, bin %d: %d ns, want %d", seed, i, bin, y, x)
				}
			}
			if p, r := a.percentiles(), b.percentiles(); !slices.Equal(p[:], r[:]) {
				t.Fatalf("seed %d, point %d: percentiles %v, want %v", seed, i, r, p)
			}
		}
		writer.Abort()
	}
	if moves < 1000 {
		t.Errorf("voltages waited in %d blocks: the test shows nothing", moves)
	}
}
