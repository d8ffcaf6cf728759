package devices

import (
	"math"
	"math/cmplx"
	"testing"
)

// Power flows back where the current has a part against the voltage, whatever the angle of
// both; what rounding leaves of no current, a billionth of the rating, does not.
func TestBackward(t *testing.T) {
	c := TapChanger{CT: 200}
	for _, x := range []struct {
		amperes, angle float64
		want           bool
	}{
		{50, 0, false}, {50, 80, false}, {50, 100, true}, {50, 180, true}, {0, 0, false},
		{1.9e-7, 180, false}, {2.1e-7, 180, true}, {1e-12, 180, false}, {1e-5, 91, false}, {1e-4, 91, true},
	} {
		for _, turn := range []float64{0, 37, -120, 211} {
			v := cmplx.Rect(7200, turn*math.Pi/180)
			i := cmplx.Rect(x.amperes, (turn-x.angle)*math.Pi/180)
			if got := c.Backward(v, i); got != x.want {
				t.Errorf("%g A at %g°, voltage at %g°: %v", x.amperes, x.angle, turn, got)
			}
		}
	}
	if !(&TapChanger{}).Backward(1, -1e-100) {
		t.Error("without a rating the smallest current counts")
	}
}
