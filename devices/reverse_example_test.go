package devices_test

import (
	"fmt"
	"math"

	"yearflow/devices"
)

// Generation feeds 40 A back through a regulator whose source side is stiff, at 119 V.
// Set to follow, the control asks that side to come up to 121 V, and lowers its tap for
// it in vain; set to stay, it has nothing to do.
func ExampleReversePower() {
	sheet := devices.TapChanger{
		Set: 120, Bandwidth: 2, Delay: 30 * devices.Second, TapTime: 5 * devices.Second,
		LimitHigh: math.NaN(), LimitLow: math.NaN(),
		Highest: 16, Lowest: -16, PT: 60, CT: 200, Range: 0.10, Steps: 16,
	}
	for _, mode := range []devices.ReverseMode{devices.ReverseFollow, devices.ReverseStay} {
		c := devices.ReversePower{Mode: mode, Threshold: 4, Forward: sheet, Backward: sheet}
		if mode == devices.ReverseFollow {
			c.Backward.Set = 122
		}
		const source = 119 * 60
		var s devices.ReverseState
		now := devices.Time(0)
		for {
			load := complex(source*sheet.Ratio(s.Position), 0)
			if s = c.Observe(s, c.Measure(load, -40, source, 40), now); c.Due(s) == devices.Never {
				break
			}
			now = c.Due(s)
			s, _ = c.Act(s, now)
		}
		fmt.Printf("%s: tap %d after %d s\n", mode, s.Position, now/devices.Second)
	}
	// Output:
	// follow: tap -16 after 105 s
	// stay: tap 0 after 0 s
}
