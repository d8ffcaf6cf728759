package sim

import (
	"math"
	"math/rand/v2"
	"testing"
)

// The 95th percentile of 1…n is the size that ⌈0.95·n⌉ of them do not exceed.
func TestErrorPercentile(t *testing.T) {
	for n, want := range map[int]float64{1: 1, 2: 2, 19: 19, 20: 19, 100: 95, 101: 96} {
		var s errorSizes
		for _, k := range rand.New(rand.NewPCG(1, uint64(n))).Perm(n) {
			s.add(float64(k + 1))
		}
		if got := s.percentile(95); got != want {
			t.Errorf("of 1…%d: %g, want %g", n, got, want)
		}
	}
}

// In bins a percentile is within half a bin, 0.27 %, of what it is exactly.
func TestErrorPercentileInBins(t *testing.T) {
	r := rand.New(rand.NewPCG(4, 2))
	exact, binned := errorSizes{}, errorSizes{limit: 10}
	for range 5000 {
		x := math.Exp(6 * r.NormFloat64())
		exact.add(x)
		binned.add(x)
	}
	if binned.bins == nil || exact.bins != nil {
		t.Fatal("bins where there should be none, or none where there should")
	}
	for _, p := range []int{1, 50, 95, 100} {
		if a, b := exact.percentile(p), binned.percentile(p); math.Abs(b/a-1) > 0.0028 {
			t.Errorf("p%d: %g in bins, %g exactly", p, b, a)
		}
	}
	none := errorSizes{limit: 1}
	for range 5 {
		none.add(0)
	}
	if got := none.percentile(95); got != 0 {
		t.Errorf("nothing but zeros: %g", got)
	}
}
