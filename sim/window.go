package sim

import (
	"yearflow/sim/powerflow"
	"yearflow/sim/powerflow/vector"
)

// window is a row of steps between two instants of the calendar, or from the last action
// to such an instant, over which inputs are straight lines or constant. Its first, middle
// and last step are solved before the others, which start from a curve through the three:
// nearly a solution. Those of the window behind it are solved with them.
type window struct {
	length     int // steps from one instant of the calendar to the next; 0: no windows
	first, end int // steps that the curve is of
	state      int // device state that it is of
	lanes      *powerflow.Lanes
	rows       []float64
	curve      *powerflow.Curve
	last       *powerflow.Solution // at its last step
	behind     struct {
		first, end int // −1: not solved
		curve      *powerflow.Curve
		last       *powerflow.Solution
	}
}

// A window is as long as it is from one value of the profiles to the next, or a part of
// that about mostWindow long; below leastWindow steps it would gain nothing.
const leastWindow, mostWindow = 8, 120

// prepareWindow chooses the length of windows.
func (e *Engine) prepareWindow() {
	a, axis := e.ahead, &e.in.axis
	spacing := e.in.sampler.Spacing()
	n := int(spacing / axis.Step)
	if spacing%axis.Step != 0 || n < leastWindow {
		return
	}
	w := &a.window
	for parts := 1; w.length == 0; parts++ {
		if n%parts == 0 && n/parts <= mostWindow || n/parts < mostWindow/2 {
			w.length = n / parts
		}
	}
	w.lanes = powerflow.NewLanes(e.flow, e.in.largest())
	w.rows = make([]float64, len(a.rows))
	w.curve, w.last = w.lanes.NewCurve(), e.flow.NewSolution()
	w.behind.curve, w.behind.last = w.lanes.NewCurve(), e.flow.NewSolution()
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
	if b := &w.behind; known && b.first == step && w.end == step {
		w.first, w.end = b.first, b.end
		w.curve, b.curve = b.curve, w.curve
		w.last, b.last = b.last, w.last
		b.first = -1
		return true
	}
	end := w.endOf(e, step)
	if end-step < leastWindow {
		return false
	}
	w.load(e, 0, step, end)
	mask := uint8(7)
	behind := w.endOf(e, end)
	if end < min(e.in.axis.Steps(), e.dayEnd(step)) && behind-end >= leastWindow {
		w.load(e, 3, end, behind)
		mask |= 7 << 3
	}
	w.lanes.Drive(w.rows)
	start := e.anchor
	if known && w.end == step {
		start = w.last.V
	}
	w.lanes.StartAll(start, &e.input)
	arrived := w.lanes.Solve(mask, powerflow.Contract)
	w.behind.first = -1
	if arrived&7 != 7 {
		w.first, w.end = -1, -1
		return false
	}
	w.lanes.Take(2, w.last)
	w.lanes.Fit(w.curve, 0, middleOf(step, end))
	w.first, w.end, w.state = step, end, state
	if arrived>>3 == 7 {
		w.lanes.Take(5, w.behind.last)
		w.lanes.Fit(w.behind.curve, 3, middleOf(end, behind))
		w.behind.first, w.behind.end = end, behind
	}
	return true
}

// endOf is the end of the window that begins at a step.
func (w *window) endOf(e *Engine, step int) int {
	return min((step/w.length+1)*w.length, e.in.axis.Steps(), e.dayEnd(e.step))
}

// load puts the first, the middle and the last step of a window into three lanes.
func (w *window) load(e *Engine, lane, first, end int) {
	for k, s := range [...]int{first, (first + end - 1) / 2, end - 1} {
		e.in.loadLane(w.lanes, w.rows, e.ahead.values, lane+k, s)
	}
}

// middleOf is where the middle of a window lies between its first and its last step.
func middleOf(first, end int) float64 {
	return float64((first+end-1)/2-first) / float64(end-1-first)
}

// start starts the lanes of a block on the curve.
func (w *window) start(a *ahead) {
	var when [vector.Lanes]float64
	for step := a.first; step < a.end; step++ {
		when[step%vector.Lanes] = float64(step-w.first) / float64(w.end-1-w.first)
	}
	a.lanes.Predict(w.curve, &when)
}
