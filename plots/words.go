package plots

import (
	"fmt"
	"strings"
	"time"
)

// pu prints a voltage as sentences have it.
func pu(v float64) string { return number(v, 3) + " p.u." }

// puVolts adds what it is on the 120 V base.
func puVolts(v float64) string {
	return fmt.Sprintf("%s p.u. (%s V on 120 V)", number(v, 3), number(120*v, 1))
}

// on prints a local instant in a sentence: "14 Jan at 18:00", with the year where the
// run has several.
func (s span) on(t time.Time) string { return s.day(t) + " at " + t.Format("15:04") }

func (s span) day(t time.Time) string {
	if s.years() {
		return t.Format("2 Jan 2006")
	}
	return t.Format("2 Jan")
}

// years tells whether the span touches more than one calendar year.
func (s span) years() bool { return s.start.Year() != s.end.Add(-time.Nanosecond).Year() }

// hours prints a number of hours with the figures that matter.
func hours(h float64) string {
	if h < 10 {
		return number(h, 1) + " h"
	}
	return number(h, 0) + " h"
}

// percent prints a share, given in per cent.
func percent(p float64) string {
	switch {
	case p != 0 && p < 0.95 && p > -0.95:
		return number(p, 2) + " %"
	case p < 10 && p > -10:
		return number(p, 1) + " %"
	}
	return number(p, 0) + " %"
}

// count prints a number of things.
func count(n int, one, many string) string {
	if n == 1 {
		return "1 " + one
	}
	return number(float64(n), 0) + " " + many
}

// power and energy choose the unit that reads well.
func power(kw float64) string {
	if kw >= 1000 || kw <= -1000 {
		return number(kw/1000, 2) + " MW"
	}
	return number(kw, 1) + " kW"
}

func energy(kwh float64) string {
	if kwh >= 10_000 || kwh <= -10_000 {
		return number(kwh/1000, 0) + " MWh"
	}
	return number(kwh, 0) + " kWh"
}

// splitPlace cuts node.phase at its last point.
func splitPlace(s string) (node, phase string) {
	if i := strings.LastIndexByte(s, '.'); i >= 0 {
		return s[:i], s[i+1:]
	}
	return s, ""
}

// spoken is a period of time in words: "1 Jan to 31 Dec 2025".
func (s span) spoken() string {
	last := s.end.Add(-time.Nanosecond)
	a, b := s.start, last
	switch {
	case a.Year() != b.Year():
		return a.Format("2 Jan 2006") + " to " + b.Format("2 Jan 2006")
	case a.YearDay() != b.YearDay():
		return a.Format("2 Jan") + " to " + b.Format("2 Jan 2006")
	}
	return a.Format("2 Jan 2006")
}

// stepWords prints a step's length: "1 h", "15 min", "1 s".
func stepWords(d time.Duration) string {
	switch {
	case d%time.Hour == 0:
		return fmt.Sprintf("%d h", d/time.Hour)
	case d%time.Minute == 0:
		return fmt.Sprintf("%d min", d/time.Minute)
	}
	return fmt.Sprintf("%d s", d/time.Second)
}
