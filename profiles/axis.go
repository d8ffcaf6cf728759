package profiles

import "time"

// Axis is the time that a run covers, [Start, End), in nanoseconds since 1970 UTC,
// cut into steps of Step; the last one may be shorter. Zone is the clock for
// messages; steps are regular in absolute time.
type Axis struct {
	Start, End, Step int64
	Zone             *time.Location
}

// Steps returns the number of steps; 0 for an axis that is empty or has no step.
func (a Axis) Steps() int {
	if a.Step <= 0 || a.End <= a.Start {
		return 0
	}
	return int((a.End-a.Start-1)/a.Step) + 1
}

// Bounds returns the beginning and the end of step i.
func (a Axis) Bounds(i int) (from, to int64) {
	from = a.Start + int64(i)*a.Step
	return from, min(from+a.Step, a.End)
}

// Index returns the step that holds t, and whether there is one.
func (a Axis) Index(t int64) (i int, ok bool) {
	if t < a.Start || t >= a.End || a.Step <= 0 {
		return 0, false
	}
	return int((t - a.Start) / a.Step), true
}
