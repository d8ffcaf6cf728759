package sim

import (
	"math"

	"yearflow/devices"
)

// coarse watches how far the voltage that a tap changer regulates moves from step to
// step: a step is too coarse for operations and durations where the mean exceeds the
// bandwidth.
type coarse struct {
	last, sum []float64
	count     []int
}

func newCoarse(e *Engine) *coarse {
	n := len(e.devices)
	c := &coarse{make([]float64, n), make([]float64, n), make([]int, n)}
	for i := range c.last {
		c.last[i] = math.NaN()
	}
	return c
}

func (c *coarse) see(e *Engine) {
	for i, d := range e.devices {
		c.take(i, coarseValue(d, d.reading))
	}
}

// coarseValue is the voltage that a tap changer regulates, V, at the present tap: what the
// inputs alone do. It is NaN for what regulates nothing.
func coarseValue(d *device, r Reading) float64 {
	sheet, tap := d.tapSheet()
	if sheet == nil {
		return math.NaN()
	}
	return coarseOf(sheet, tap, sheet.Measure(r.Volts, r.Amperes))
}

func coarseOf(sheet *devices.TapChanger, tap int, m devices.TapReading) float64 {
	if sheet.Held {
		return math.NaN()
	}
	return m.Relay / sheet.Ratio(tap)
}

func (c *coarse) take(i int, v float64) {
	if v != v {
		return
	}
	if c.last[i] == c.last[i] {
		c.sum[i] += math.Abs(v - c.last[i])
		c.count[i]++
	}
	c.last[i] = v
}

func (c *coarse) names(e *Engine) (out []string) {
	for i, d := range e.devices {
		if sheet, _ := d.tapSheet(); sheet != nil && c.count[i] > 0 && c.sum[i]/float64(c.count[i]) > sheet.Bandwidth {
			out = append(out, d.title())
		}
	}
	return out
}
