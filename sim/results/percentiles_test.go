package results

import (
	"math"
	"math/rand/v2"
	"testing"
)

func TestPercentilesByHand(t *testing.T) {
	d := newDistribution(1, 3, exactValues)
	// 1.00 for 1 h, 0.95 for 97 h, 1.05 for 2 h: sorted, 0.95 covers 97 %, 1.00 reaches
	// 98 %, 1.05 all. So p1 to p95 are 0.95 and p99 is 1.05 (pencil).
	for _, x := range []struct {
		v float64
		h int64
	}{{1.00, 1}, {0.95, 97}, {1.05, 2}} {
		d.add([]float64{x.v}, x.h*hour)
	}
	want := [...]float64{0.95, 0.95, 0.95, 0.95, 1.05}
	if got := d.percentiles()[0]; got != want {
		t.Errorf("percentiles %v, want %v", got, want)
	}
	// Exactly half of the time at 0.95: p50 is 0.95, since half of the time is enough.
	d = newDistribution(1, 2, exactValues)
	d.add([]float64{1.02}, hour)
	d.add([]float64{0.95}, hour)
	want = [...]float64{0.95, 0.95, 0.95, 1.02, 1.02}
	if got := d.percentiles()[0]; got != want {
		t.Errorf("percentiles %v, want %v", got, want)
	}
}

func TestPercentilesAgreeWithSorting(t *testing.T) {
	r := rand.New(rand.NewPCG(7, 7))
	for trial := range 60 {
		n := 1 + r.IntN(4000)
		exact, binned := newDistribution(2, n, exactValues), newDistribution(2, n, 0)
		if exact.bins != nil || binned.bins == nil {
			t.Fatal("the limit does not choose the method")
		}
		var v, h []float64
		for range n {
			u := 1 + 0.02*r.NormFloat64()
			if trial%3 == 0 {
				u = math.Round(u*100) / 100 // many equal values
			}
			span := int64(1+r.IntN(3600)) * second
			exact.add([]float64{0, u}, span)
			binned.add([]float64{0, u}, span)
			v, h = append(v, u), append(h, float64(span))
		}
		got, near := exact.percentiles()[1], binned.percentiles()[1]
		for k, p := range percents {
			want := percentile(v, h, float64(p))
			if got[k] != want {
				t.Fatalf("trial %d, p%d of %d values: %.9g, want %.9g", trial, p, n, got[k], want)
			}
			if math.Abs(near[k]-want) > binWidth {
				t.Fatalf("trial %d, p%d of %d values: histogram gives %.6f, want %.6f within a bin", trial, p, n, near[k], want)
			}
		}
	}
}

func TestValuesBeyondTheStoreGoOverIntoHistograms(t *testing.T) {
	d, all := newDistribution(3, 10, 30), newDistribution(3, 10, 0)
	r := rand.New(rand.NewPCG(8, 8))
	for k := range 25 {
		row := []float64{r.Float64(), 1 + 0.1*r.Float64(), 5 * r.Float64()}
		d.add(row, int64(1+k)*second)
		all.add(row, int64(1+k)*second)
		if wantBins := k >= 10; (d.bins != nil) != wantBins {
			t.Fatalf("after %d rows: histograms %v, want %v", k+1, d.bins != nil, wantBins)
		}
	}
	for i := range 3 {
		if a, b := d.percentiles()[i], all.percentiles()[i]; a != b {
			t.Errorf("place %d: %v after going over, %v from the start", i, a, b)
		}
	}
}

func TestNothingHasNoPercentiles(t *testing.T) {
	for _, limit := range []int{0, exactValues} {
		for _, v := range newDistribution(1, 1, limit).percentiles()[0] {
			if !math.IsNaN(v) {
				t.Errorf("percentile of nothing is %g", v)
			}
		}
	}
}
