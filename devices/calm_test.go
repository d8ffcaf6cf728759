package devices

import (
	"math"
	"math/rand/v2"
	"testing"
)

// Whatever Calm says of a reading, Observe leaves the state and Edge is false.
func TestCalmChangesNothing(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 2))
	calm := 0
	for range 200_000 {
		c := TapChanger{Set: 120, Bandwidth: 0.5 + 3*r.Float64(), Delay: 30 * Second, TapTime: 5 * Second, Integrate: r.IntN(2) == 0,
			LimitHigh: math.NaN(), LimitLow: math.NaN(), Held: r.IntN(9) == 0, Highest: 16, Lowest: -16, PT: 60, CT: 200, Range: 0.1, Steps: 16}
		if r.IntN(4) == 0 {
			c.LimitHigh = 126
		}
		s := TapState{Position: r.IntN(33) - 16}
		if r.IntN(3) == 0 {
			s.Side, s.Since, s.Clock = 1, 5*Second, Time(r.Int64N(int64(20*Second)))
		}
		if r.IntN(5) == 0 {
			s.Rest = Time(r.Int64N(int64(20 * Second)))
		}
		local := 120 + 2*r.NormFloat64()
		reading := TapReading{Local: local, Relay: local}
		if !c.Calm(s, reading) {
			continue
		}
		calm++
		if now := 10 * Second; c.Observe(s, reading, now) != s || c.Edge(s, reading) || c.Standing(s) {
			t.Fatalf("%+v, %+v, %+v: not calm", c, s, reading)
		}
	}
	if calm < 1000 {
		t.Errorf("only %d readings were calm", calm)
	}
}
