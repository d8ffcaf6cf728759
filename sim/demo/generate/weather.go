package main

import (
	"math"
	"math/rand/v2"
	"time"
)

// A noise is a smooth random series: normal values at regular knots, with the
// correlation of a first-order process from knot to knot, joined by cubic
// curves. It is a pure function of time once it is made.
type noise struct {
	every float64 // h between knots
	knots []float64
}

// newNoise makes a noise of zero mean and unit deviation at its knots, over the given
// hours; rho is the correlation of neighbours.
func newNoise(seed uint64, every, hours, rho float64) *noise {
	r := rand.New(rand.NewPCG(seed, 1204))
	n := &noise{every: every, knots: make([]float64, int(hours/every)+4)}
	x := r.NormFloat64()
	for i := range n.knots {
		n.knots[i] = x
		x = rho*x + math.Sqrt(1-rho*rho)*r.NormFloat64()
	}
	return n
}

// at returns the value h hours after the beginning of the year (a cubic through four
// knots, after Catmull and Rom).
func (n *noise) at(h float64) float64 {
	u := h/n.every + 1
	i := int(math.Floor(u))
	i = max(1, min(i, len(n.knots)-3))
	t := u - float64(i)
	a, b, c, d := n.knots[i-1], n.knots[i], n.knots[i+1], n.knots[i+2]
	return b + 0.5*t*(c-a+t*(2*a-5*b+4*c-d+t*(3*(b-c)+d-a)))
}

// A climate is the weather of the year as functions of time. Hours count from the
// beginning of the year in standard time.
type climate struct {
	days     *noise // warm and cold spells
	sky      *noise // cloudiness, by spells of a day and more
	passing  *noise // clouds that pass within hours
	gusts    *noise // clouds that pass within minutes
	grid     *noise // wandering of the 69 kV voltage
	start    time.Time
	latitude float64 // degrees
	solarLag float64 // h by which the clock runs ahead of the mean sun
}

// hoursPerYear is the length of the year 2025.
const hoursPerYear = 8760

// newClimate makes the weather of an invented town on the high plains, at 39.6° N
// and 104.6° W, whose standard time is that of 105° W.
func newClimate(start time.Time) *climate {
	return &climate{
		days:     newNoise(11, 24, hoursPerYear, 0.68),
		sky:      newNoise(12, 18, hoursPerYear, 0.55),
		passing:  newNoise(13, 1.5, hoursPerYear, 0.5),
		gusts:    newNoise(14, 0.05, hoursPerYear, 0.75),
		grid:     newNoise(16, 3, hoursPerYear, 0.8),
		start:    start,
		latitude: 39.6,
		solarLag: (104.6 - 105) / 15,
	}
}

// season runs from −1 in the middle of January to +1 in the middle of July.
func season(h float64) float64 {
	return -math.Cos(2 * math.Pi * (h/24 - 17) / 365)
}

// cover is the cloudiness from 0 (clear) to 1. Springs are cloudier than autumns.
func (c *climate) cover(h float64) float64 {
	x := -0.55 + 1.05*c.sky.at(h) + 0.3*math.Sin(2*math.Pi*(h/24-20)/365)
	return 1 / (1 + math.Exp(-2.2*x))
}

// sunshine is the share of the clear sky's irradiance that arrives: broken skies pass
// it in turns, overcast skies hold back three quarters.
func (c *climate) sunshine(h float64) float64 {
	cover := c.cover(h)
	// The shadow of single clouds is deepest where the sky is half covered.
	broken := 4 * cover * (1 - cover)
	shadow := 1 / (1 + math.Exp(-4*(0.8*c.passing.at(h)+0.9*c.gusts.at(h)-0.3)))
	clear := 1 - 0.72*math.Pow(cover, 1.6)
	return max(0.08, clear*(1-0.62*broken*shadow)) * (1 + 0.03*broken*(1-shadow))
}

// temperature is in °C: 23 in July and −1 in January on average, coldest before sunrise
// and warmest at three in the afternoon, with a smaller swing under clouds.
func (c *climate) temperature(h float64) float64 {
	s := season(h - 24*5) // the ground lags the sun
	cover := c.cover(h - 3)
	swing := (6.0 + 1.6*s) * (1 - 0.45*cover)
	spell := (4.4 - 1.3*s) * c.days.at(h)
	// A day is steeper in the morning than in the evening.
	day := 2 * math.Pi * (math.Mod(h, 24) - 15) / 24
	return 11 + 12*s + spell - 1.5*cover*(1+s) + swing*(math.Cos(day)+0.18*math.Cos(2*day-0.6))
}

// voltage is that of the 69 kV network in per unit, behind the source's
// impedance: lower on working days and in the heat, with a slow wandering.
func (c *climate) voltage(h float64) float64 {
	at := c.start.Add(time.Duration(h * float64(time.Hour)))
	day := bump(clock(at), 14, 9)
	if !working(at) {
		day *= 0.6
	}
	heat := softplus((c.temperature(h-1)-26)/4) * 0.0022
	return 1.0165 - 0.0085*day - heat + 0.0028*c.grid.at(h)
}

// softplus is a smooth max(0, x).
func softplus(x float64) float64 { return math.Log1p(math.Exp(x)) }

// bump is a smooth hill of height 1 on the clock's face, around the hour of its top, with
// the given half-width in hours.
func bump(hour, top, width float64) float64 {
	d := math.Mod(hour-top+36, 24) - 12
	return math.Exp(-2 * d * d / (width * width))
}
