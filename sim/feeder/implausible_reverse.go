package feeder

import "math"

// reverse looks at the reverse settings of a control that has a mode.
func (c *checker) reverse(s *TapSettings, name string) {
	c.outside(s.At, 100*s.ReverseThreshold, 0.5, 10, name+": reverse threshold", " %", "1 to 5 % of the primary rating of the current transformer")
	if !s.Reverse.usesSettings() {
		return
	}
	c.outside(s.At, s.ReverseSet, 110, 130, name+": reverse set", " V", "118 to 126 V on the secondary, not p.u. and not primary volts")
	c.outside(s.At, s.ReverseBandwidth, 1, 8, name+": reverse bandwidth", " V", "1.5 to 3 V")
	c.outside(s.At, s.ReverseDelay, 5, 300, name+": reverse delay", " s", "15 to 120 s")
	c.outside(s.At, math.Abs(s.ReverseR), 0, 24, name+": reverse ldc r", " V", "0 to 24 V at rated current, not ohm")
	c.outside(s.At, math.Abs(s.ReverseX), 0, 24, name+": reverse ldc x", " V", "0 to 24 V at rated current, not ohm")
}
