package synthetic

import (
	"fmt"
	"math"
	"math/rand/v2"
	"time"
)

// Shapes is how many load shapes there are.
const Shapes = 24

const shapePrefix = "shape"

func shapeName(k int) string { return fmt.Sprintf("%s%02d", shapePrefix, k+1) }

// The noise of a shape: its standard deviation, and the time in which it decays to 1/e.
const (
	noise       = 0.06
	correlation = 10 * time.Minute
)

// Multipliers returns the shapes' values, p.u., by instant and shape: as many rows as
// the profiles of the options hold, each Inputs apart. They are what profiles/shapes.csv
// holds but for its rounding to 1e-5.
func Multipliers(o Options) ([][]float64, error) {
	o, err := o.complete()
	if err != nil {
		return nil, err
	}
	var out [][]float64
	walk(o, func(_ time.Time, row []float64) {
		out = append(out, append([]float64(nil), row...))
	})
	return out, nil
}

// walk calls f with each row of the shapes; row is f's until it returns.
//
// A shape is daily(t)·(1 + x), x the autoregressive noise
//
//	x ← φ·x + 0.06·√(1 − φ²)·ε,  φ = exp(−Δ/10 min)
//
// with ε of the standard normal distribution, held within ±3 of its deviations so that
// no load turns negative.
func walk(o Options, f func(at time.Time, row []float64)) {
	step := o.Inputs.spacing()
	phi := math.Exp(-float64(step) / float64(correlation))
	sigma := noise * math.Sqrt(1-phi*phi)
	r := rand.New(rand.NewPCG(o.Seed, 0x5a9e))
	x, row, curves := make([]float64, Shapes), make([]float64, Shapes), make([]curve, Shapes)
	for k := range x {
		x[k], curves[k] = noise*r.NormFloat64(), newCurve(r, k)
	}
	n := int(time.Duration(o.ProfileDays) * 24 * time.Hour / step)
	for i := range n {
		t := time.Duration(i) * step
		for k := range x {
			row[k] = curves[k].at(t.Hours()) * (1 + max(-3*noise, min(3*noise, x[k])))
			x[k] = phi*x[k] + sigma*r.NormFloat64()
		}
		f(o.Start.Add(t), row)
	}
}

// curve is a daily curve: a base and two bells, about 0.4 at night and up to 0.95.
type curve struct {
	base   float64
	height [2]float64
	hour   [2]float64
	width  [2]float64 // hours, the standard deviation of a bell
}

// newCurve draws the curve of a shape: two in three are homes with a peak in the
// morning and a higher one in the evening, the others are at work by day.
func newCurve(r *rand.Rand, k int) curve {
	vary := func(x, by float64) float64 { return x + by*(2*r.Float64()-1) }
	if k%3 == 2 {
		return curve{vary(0.4, 0.05), [2]float64{vary(0.45, 0.05), vary(0.25, 0.1)},
			[2]float64{vary(11, 1), vary(15.5, 1)}, [2]float64{vary(2.5, 0.3), vary(2, 0.3)}}
	}
	return curve{vary(0.4, 0.05), [2]float64{vary(0.2, 0.05), vary(0.5, 0.05)},
		[2]float64{vary(7.5, 1), vary(19, 0.8)}, [2]float64{vary(1.5, 0.3), vary(2.2, 0.3)}}
}

// at returns the value at an hour; the bells are those of every day, so that the curve
// has no step at midnight.
func (c *curve) at(hour float64) float64 {
	h := math.Mod(hour, 24)
	v := c.base
	for i := range c.hour {
		d := math.Abs(h - c.hour[i])
		d = min(d, 24-d) / c.width[i]
		v += c.height[i] * math.Exp(-d*d/2)
	}
	return v
}

// shapes writes the shapes as a profile.
func shapes(o Options) []byte {
	b := []byte("# Written by sim/synthetic; describes no real place.\ntime")
	for k := range Shapes {
		b = append(b, ","+shapeName(k)+" [pu]"...)
	}
	b = append(b, '\n')
	walk(o, func(at time.Time, row []float64) {
		b = at.AppendFormat(b, "2006-01-02T15:04:05")
		for _, v := range row {
			b = appendMultiplier(append(b, ','), v)
		}
		b = append(b, '\n')
	})
	return b
}

// appendMultiplier writes v, which is not negative, with five decimals.
func appendMultiplier(b []byte, v float64) []byte {
	n := int64(math.Round(v * 1e5))
	b = append(b, byte('0'+n/100000), '.')
	for d := int64(10000); d > 0; d /= 10 {
		b = append(b, byte('0'+n/d%10))
	}
	return b
}
