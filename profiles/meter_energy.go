package profiles

import (
	"fmt"
	"math"

	"yearflow/sim/tables"
)

// EnergyClaim is a load's meters beside what the load table says of it. A number that
// is not known is zero or NaN.
type EnergyClaim struct {
	Load       string
	At         tables.Pos // of the load's row, for the fault
	Step       int64      // of the metered values, in nanoseconds
	MeteredKWh float64
	TableKWh   float64 // of the same time
	MeteredKW  float64 // highest value
	TableKW    float64 // peak, or real [kW]
}

// EnergyCheck compares what was metered with the load table, energy with energy where
// the table has it, else peak with peak, and reports what is odd: a ratio near
// steps per hour (power that was read as energy per interval), near its inverse (energy
// per interval that was read as power), near 1000 or its inverse, or else outside one
// third to three. "Near" is within a quarter for energies and a third for peaks, so that
// the meters of one year meet the bills of another; ratios of at most two and a half
// are told only for a step of half an hour or 24 minutes.
func EnergyCheck(c EnergyClaim) (tables.Fault, bool) {
	ratio, near, what := c.MeteredKWh/c.TableKWh, 1.25, fmt.Sprintf("%.6g kWh metered, %.6g kWh in the table", c.MeteredKWh, c.TableKWh)
	if !usable(ratio) {
		ratio, near, what = c.MeteredKW/c.TableKW, 1.33, fmt.Sprintf("a peak of %.6g kW metered, %.6g kW in the table", c.MeteredKW, c.TableKW)
	}
	if !usable(ratio) {
		return tables.Fault{}, false
	}
	text := ""
	is := func(factor float64) bool { return ratio > factor/near && ratio < factor*near }
	steps := 0.0
	if c.Step > 0 {
		steps = float64(hour) / float64(c.Step)
	}
	switch {
	case steps > 1.5 && is(steps):
		text = fmt.Sprintf("about %.4g times as much: values in kW every %s seem to be labelled [kWh]; write [kW]", steps, stepText(c.Step))
	case steps > 1.5 && is(1/steps):
		text = fmt.Sprintf("about %.4g times as much: values in kWh every %s seem to be labelled [kW]; write [kWh]", 1/steps, stepText(c.Step))
	case is(1000):
		text = "about 1000 times as much: the unit seems to be [Wh] or [W]"
	case is(1e-3):
		text = "about 0.001 times as much: the unit seems to be [MWh] or [MW]"
	case ratio > 3 || ratio < 1.0/3:
		text = fmt.Sprintf("%.3g times as much: look at the meter's multiplier (current and voltage transformers), at meters that are missing or tied to the wrong load, and at the table", ratio)
	default:
		return tables.Fault{}, false
	}
	return tables.Fault{Pos: c.At, Text: fmt.Sprintf("load %q: %s, %s", c.Load, what, text)}, true
}

func usable(ratio float64) bool { return ratio > 0 && !math.IsInf(ratio, 0) }
