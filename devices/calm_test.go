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

// The same of a capacitor's control by voltage.
func TestCalmRangeOfACapacitor(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 4))
	calm := 0
	for range 100_000 {
		c := CapacitorControl{Kind: CapacitorVoltage, On: 117 + r.Float64(), Off: 120 + 4*r.Float64(), OverrideOn: math.NaN(), OverrideOff: math.NaN(), Delay: 30 * Second, Lockout: 300 * Second}
		if r.IntN(5) == 0 {
			c.Kind = CapacitorHeld
		}
		if r.IntN(5) == 0 {
			c.DailyLimit = 3
		}
		s := CapacitorState{Closed: r.IntN(2) == 0, Locked: r.IntN(5) == 0}
		low, high, ok := c.CalmRange()
		v := 119 + 3*r.NormFloat64()
		if !ok || !c.Rests(s) || !(v > low && v < high) {
			continue
		}
		calm++
		reading := CapacitorReading{V120: v}
		if now := 10 * Second; c.Observe(s, reading, now) != s || c.Edge(s, reading) || c.Standing(s) {
			t.Fatalf("%+v, %+v, %g V: not calm", c, s, v)
		}
	}
	if calm < 1000 {
		t.Errorf("only %d readings were calm", calm)
	}
}
