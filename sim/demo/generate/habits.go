package main

import (
	"math"
	"time"
)

// holidays are the federal holidays of the United States in 2025.
var holidays = map[string]bool{
	"01-01": true, "01-20": true, "02-17": true, "05-26": true, "06-19": true, "07-04": true,
	"09-01": true, "10-13": true, "11-11": true, "11-27": true, "12-25": true,
}

// working tells whether a local day is a working day.
func working(t time.Time) bool {
	d := t.Weekday()
	return d != time.Saturday && d != time.Sunday && !holidays[t.Format("01-02")]
}

// clock is the local time of day in hours.
func clock(t time.Time) float64 {
	return float64(t.Hour()) + float64(t.Minute())/60 + float64(t.Second())/3600
}

// open is a smooth 1 between two hours of the day, with flanks of the given length.
func open(hour, from, to, flank float64) float64 {
	edge := func(x float64) float64 { return 1 / (1 + math.Exp(-4*x/flank)) }
	return edge(hour-from) * edge(to-hour)
}

// A habit is how the load of one profile follows the clock, the calendar and the weather.
// It is not yet divided by its own peak.
type habit struct {
	class   class
	variant int
	slow    *noise // over hours: people
	fast    *noise // over minutes: machines
}

// habits lists the profiles in the order of their columns.
func habits() []habit {
	count := [...]int{homes: 5, shops: 2, offices: 2, works: 3, pumps: 2}
	var all []habit
	for c, n := range count {
		for v := 1; v <= n; v++ {
			seed := uint64(100 + 10*c + v)
			all = append(all, habit{class(c), v, newNoise(seed, 2, hoursPerYear, 0.6), newNoise(seed+500, 0.05, hoursPerYear, 0.6)})
		}
	}
	return all
}

// at returns the load at h hours of the year.
func (b habit) at(c *climate, h float64) float64 {
	t := c.start.Add(time.Duration(math.Round(h*3600)) * time.Second).In(c.start.Location())
	var x, slow, fast float64
	switch b.class {
	case homes:
		x, slow, fast = b.home(c, h, t), 0.035, 0.018
	case shops:
		x, slow, fast = b.shop(c, h, t), 0.02, 0.012
	case offices:
		x, slow, fast = b.office(c, h, t), 0.02, 0.012
	case works:
		x, slow, fast = b.work(h, t), 0.04, 0.03
	case pumps:
		return b.pump(c, h)
	}
	return x * (1 + slow*b.slow.at(h) + fast*b.fast.at(h))
}

// home: morning and evening, lights after dark, air conditioning with the heat of the
// last hours, and electric heating in a part of the homes.
func (b habit) home(c *climate, h float64, t time.Time) float64 {
	v := float64(b.variant)
	hour := clock(t) + 0.3*(v-3) // streets rise and retire at different times
	base := 0.42 + 0.20*bump(hour, 7.2, 3) + 0.42*bump(hour, 19.5, 5) + 0.10*bump(hour, 12.5, 5)
	if !working(t) {
		base += 0.14*bump(hour, 11, 6) - 0.10*bump(hour, 6.8, 2)
	}
	lights := 0.16 * (1 - season(h)) * (bump(hour, 18.5, 4) + 0.5*bump(hour, 7, 2.5))
	warm := (c.temperature(h) + c.temperature(h-1.5) + c.temperature(h-3)) / 3
	cooling := softplus((warm-22.5)/2.2) * (0.19 + 0.02*v) * (0.75 + 0.45*bump(hour, 18, 6))
	heating := softplus((8-warm)/5) * (0.10 + 0.03*math.Mod(v, 3)) * (0.8 + 0.3*bump(hour, 7, 4) + 0.25*bump(hour, 20, 5))
	return base + lights + cooling + heating
}

// shop: opening hours on all days, short on Sundays and holidays.
func (b habit) shop(c *climate, h float64, t time.Time) float64 {
	hour := clock(t)
	from, to := 8.5, 20.5
	if b.variant == 2 { // the supermarket
		from, to = 6.5, 22
	}
	if t.Weekday() == time.Sunday || holidays[t.Format("01-02")] {
		from, to = from+1.5, to-2.5
	}
	busy := open(hour, from, to, 1.5)
	cooling := softplus((c.temperature(h-1)-19)/3.5) * 0.085 * (0.3 + busy)
	heating := softplus((6-c.temperature(h-1))/6) * 0.05 * (0.4 + busy)
	return 0.3 + 0.5*busy + cooling + heating
}

// office: working days.
func (b habit) office(c *climate, h float64, t time.Time) float64 {
	busy := open(clock(t), 7+0.5*float64(b.variant), 17.2+0.6*float64(b.variant), 2.2)
	if !working(t) {
		busy *= 0.12
	}
	cooling := softplus((c.temperature(h-1.5)-18)/3.5) * 0.07 * (0.15 + busy)
	heating := softplus((5-c.temperature(h-1.5))/6) * 0.05 * (0.4 + busy)
	return 0.27 + 0.55*busy + cooling + heating
}

// work: one, two or three shifts, with a dip at noon.
func (b habit) work(h float64, t time.Time) float64 {
	hour := clock(t)
	var busy float64
	switch b.variant {
	case 1: // two shifts
		busy = open(hour, 6, 21.5, 1.5)
	case 2: // one shift
		busy = open(hour, 7, 16.3, 1.2)
	default: // the cold store and the mill: round the clock
		busy = 0.55 + 0.35*open(hour, 6, 18, 2)
	}
	busy *= 1 - 0.12*bump(hour, 12.3, 0.9)
	switch {
	case t.Weekday() == time.Saturday && b.variant != 2:
		busy *= 0.5
	case !working(t):
		busy *= 0.15
	}
	return 0.22 + 0.75*busy
}

// pump: irrigation from late April to September, most by night and in dry, hot
// spells; a ditch company's pumps in turns, so that their sum is smooth.
func (b habit) pump(c *climate, h float64) float64 {
	day := h / 24
	grown := open(day, 122, 262, 30)
	thirst := 0.62 + 0.13*c.days.at(h-6) + 0.08*b.slow.at(h/6)
	turn := 0.78 + 0.22*math.Cos(2*math.Pi*(math.Mod(h, 24)-2.5-2*float64(b.variant))/24)
	return 0.02 + grown*math.Min(1.05, math.Max(0.1, thirst))*turn*(1+0.02*b.fast.at(h))
}
