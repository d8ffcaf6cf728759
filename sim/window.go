package sim

import (
	"yearflow/devices"
	"yearflow/sim/powerflow"
	"yearflow/sim/powerflow/vector"
)

// window is a row of steps between two instants of the calendar, or from the last action
// to such an instant. Its first, middle and last step are solved before the others, which
// start from a curve through the three. Between two values of interpolated profiles
// inputs are straight lines, so that windows which end with them have starts that are
// nearly solutions.
type window struct {
	length     int // steps from one instant of the calendar to the next; 0: no windows
	first, end int // steps that the curve is of
	state      int // device state that it is of
	lanes      *powerflow.Lanes
	rows       []float64
	curve      *powerflow.Curve
	last       *powerflow.Solution // at its last step
}

// Windows are windowSteps long where profiles say nothing else, and at least leastWindow.
// Steps of longestWindowStep and more change too much from one to the next.
const (
	windowSteps       = 60
	leastWindow       = 8
	longestWindowStep = 600 * devices.Second
)

// prepareWindow chooses the length of windows.
func (e *Engine) prepareWindow() {
	axis := &e.in.axis
	if axis.Step >= longestWindowStep {
		return
	}
	a := e.ahead
	w := &a.window
	w.length = windowSteps
	if spacing := e.in.sampler.Spacing(); spacing%axis.Step == 0 {
		switch n := int(spacing / axis.Step); {
		case n >= leastWindow && n <= 2*windowSteps:
			w.length = n
		case n%windowSteps != 0 && n > windowSteps:
			for w.length = windowSteps; n%w.length != 0 && w.length > windowSteps/2; w.length-- {
			}
		}
	}
	w.lanes = powerflow.NewLanes(e.flow, e.in.largest())
	w.rows = make([]float64, len(a.rows))
	w.curve, w.last = w.lanes.NewCurve(), e.flow.NewSolution()
	e.in.still(w.lanes, w.rows)
}

// follow takes over the shares of a month.
func (w *window) follow(in *inputs, month int) {
	if w.length > 0 {
		w.lanes.Follow(in.follow(month))
	}
}

// prepare has a curve ready for the step at hand, and reports whether there is one.
func (w *window) prepare(e *Engine) bool {
	if w.length == 0 {
		return false
	}
	step, state := e.step, e.flow.DeviceState()
	known := w.first >= 0 && w.state == state
	if known && step >= w.first && step < w.end {
		return true
	}
	end := min((step/w.length+1)*w.length, e.in.axis.Steps(), e.dayEnd(step))
	if end-step < leastWindow {
		return false
	}
	middle := (step + end - 1) / 2
	for k, s := range [...]int{step, middle, end - 1} {
		e.in.loadLane(w.lanes, w.rows, e.ahead.values, k, s)
	}
	w.lanes.Drive(w.rows)
	start := e.anchor
	if known && w.end == step {
		start = w.last.V
	}
	w.lanes.Start(7, start, &e.input)
	if w.lanes.Solve(7, powerflow.Contract) != 7 {
		w.first, w.end = -1, -1
		return false
	}
	w.lanes.Take(2, w.last)
	w.lanes.Fit(w.curve, float64(middle-step)/float64(end-1-step))
	w.first, w.end, w.state = step, end, state
	return true
}

// start starts the lanes of a block on the curve.
func (w *window) start(a *ahead) {
	var when [vector.Lanes]float64
	for step := a.first; step < a.end; step++ {
		when[step%vector.Lanes] = float64(step-w.first) / float64(w.end-1-w.first)
	}
	a.lanes.Predict(w.curve, &when)
}
