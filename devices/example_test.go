package devices_test

import (
	"fmt"
	"math"

	"yearflow/devices"
)

// A regulator at 7.2 kV with 122 V ± 1 V, 45 s and line-drop compensation meets a low
// voltage, and works its way back into the band tap by tap.
func ExampleTapChanger() {
	c := devices.TapChanger{
		Set: 122, Bandwidth: 2, Delay: 45 * devices.Second, TapTime: 5 * devices.Second, R: 4, X: 2,
		LimitHigh: 126, LimitLow: math.NaN(), LimitMargin: 1,
		Highest: 16, Lowest: -16, PT: 60, CT: 200, Range: 0.10, Steps: 16,
	}
	var s devices.TapState
	now := devices.Time(0)
	for {
		v := complex(7240*c.Ratio(s.Position), 0)
		s = c.Observe(s, c.Measure(v, complex(80, -26)), now)
		if c.Due(s) == devices.Never {
			break
		}
		now = c.Due(s)
		var a devices.Action
		s, a = c.Act(s, now)
		fmt.Printf("%d s: %d to %d, %s: %.2f V, below %.0f V\n", now/devices.Second, a.From, a.To, a.Reason, a.Measured, a.Set)
	}
	// Output:
	// 45 s: 0 to 1, band low: 118.81 V, below 121 V
	// 50 s: 1 to 2, band low: 119.56 V, below 121 V
	// 55 s: 2 to 3, band low: 120.32 V, below 121 V
}

// A capacitor control by voltage is not allowed to close again before its lockout is
// over, however long it has asked.
func ExampleCapacitorControl() {
	c := devices.CapacitorControl{Kind: devices.CapacitorVoltage, On: 118, Off: 126,
		Delay: 60 * devices.Second, Lockout: 300 * devices.Second}
	s := devices.CapacitorState{Closed: true}
	s = c.Observe(s, devices.CapacitorReading{V120: 126.4}, 0)
	s, a := c.Act(s, c.Due(s))
	fmt.Printf("opened: %s, waited %.0f s\n", a.Reason, a.Waited)
	s = c.Observe(s, devices.CapacitorReading{V120: 117.2}, 100*devices.Second)
	fmt.Printf("asks to close at 100 s, may at %d s\n", c.Due(s)/devices.Second)
	// Output:
	// opened: control, waited 60 s
	// asks to close at 100 s, may at 360 s
}

// reactor is a control of our own: it switches a shunt reactor in at light load, when
// the voltage has been above High for Delay, and out below Low.
type reactor struct {
	High, Low float64 // V on the 120 V base
	Delay     devices.Time
}

// reactorState is where the reactor stands and since when it asks to move.
type reactorState struct {
	In, Asks bool
	Since    devices.Time
	Volts    float64
}

func (c reactor) Observe(s reactorState, v float64, now devices.Time) reactorState {
	asks := !s.In && v > c.High || s.In && v < c.Low
	if !asks {
		return c.Drop(s)
	}
	if !s.Asks {
		s.Since = now
	}
	s.Asks, s.Volts = true, v
	return s
}

func (c reactor) Due(s reactorState) devices.Time {
	if !s.Asks {
		return devices.Never
	}
	return s.Since + max(c.Delay, devices.Shortest)
}

func (c reactor) Standing(s reactorState) bool { return s.Asks }

func (c reactor) Act(s reactorState, now devices.Time) (reactorState, devices.Action) {
	a := devices.Action{From: 0, To: 1, Reason: devices.ByControl, Measured: s.Volts, Set: c.High,
		Waited: float64(now-s.Since) / float64(devices.Second)}
	if s.In {
		a.From, a.To, a.Set = 1, 0, c.Low
	}
	return reactorState{In: !s.In}, a
}

func (c reactor) Drop(s reactorState) reactorState   { return reactorState{In: s.In} }
func (c reactor) Forget(s reactorState) reactorState { return reactorState{In: s.In} }

func (c reactor) Edge(s reactorState, v float64) bool {
	return math.Abs(v-c.High) <= devices.Near || math.Abs(v-c.Low) <= devices.Near
}

// The compiler holds our control against the shape of all controls.
var _ devices.Control[reactorState, float64] = reactor{}

// A control of the user's own has the same shape as those of the package: a state
// that is a plain value, and functions from one to the next.
func ExampleControl() {
	c := reactor{High: 125, Low: 119, Delay: 120 * devices.Second}
	var s reactorState
	for _, seen := range []struct {
		at devices.Time // s
		v  float64
	}{{0, 124}, {60, 125.5}, {180, 125.5}, {240, 122}, {300, 118.5}, {420, 118.5}} {
		now := seen.at * devices.Second
		s = c.Observe(s, seen.v, now)
		if c.Due(s) > now {
			continue
		}
		var a devices.Action
		s, a = c.Act(s, now)
		fmt.Printf("%d s: %d to %d at %.1f V after %.0f s\n", seen.at, a.From, a.To, a.Measured, a.Waited)
	}
	// Output:
	// 180 s: 0 to 1 at 125.5 V after 120 s
	// 420 s: 1 to 0 at 118.5 V after 120 s
}
