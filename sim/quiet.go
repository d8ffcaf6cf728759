package sim

import (
	"math"

	"yearflow/devices"
	"yearflow/sim/powerflow"
	"yearflow/sim/powerflow/vector"
	"yearflow/sim/results"
)

// quietRecorder takes steps in which nothing happens several at a time, as they were
// solved.
type quietRecorder interface {
	Recorder
	// Whole tells whether a step must come with its intervals.
	Whole(start, end int64) bool
	Quiet(*results.Quiet) error
}

// idler is a control that can tell whether a reading leaves it as it is: no request comes
// or goes, no clock starts or stops, and it stands near no edge. Then it says how the
// device stands, and, of a tap changer, what coarse watches.
type idler interface {
	Idle(r Reading, now devices.Time) (s results.DeviceState, watched float64, idle bool)
}

func (c *tapControl) Idle(r Reading, now devices.Time) (s results.DeviceState, watched float64, idle bool) {
	m := c.sheet.Measure(r.Volts, r.Amperes)
	if !c.sheet.Calm(c.state, m) {
		next := c.sheet.Observe(c.state, m, now)
		next.Measured = c.state.Measured // it is seen again before an action
		if c.sheet.Edge(c.state, m) || next != c.state {
			return s, 0, false
		}
	}
	s = results.DeviceState{OutOfBand: c.sheet.OutOfBand(m), AtStop: c.sheet.AtStop(c.state), Reverse: c.reverse(r)}
	return s, coarseOf(&c.sheet, c.state.Position, m), true
}

func (c *reverseControl) Idle(r Reading, now devices.Time) (s results.DeviceState, watched float64, idle bool) {
	m := c.see(r)
	next := c.sheet.Observe(c.state, m, now)
	next.Measured = c.state.Measured
	if c.sheet.Edge(c.state, m) || next != c.state {
		return s, 0, false
	}
	s, _ = c.State(r)
	return s, coarseOf(&c.sheet.Forward, c.state.Position, c.sheet.Forward.Measure(r.Volts, r.Amperes)), true
}

func (c *capacitorControl) Idle(r Reading, now devices.Time) (s results.DeviceState, watched float64, idle bool) {
	m := c.reading(r)
	next := c.sheet.Observe(c.state, m, now)
	next.Measured = c.state.Measured
	return s, math.NaN(), !c.sheet.Edge(c.state, m) && next == c.state
}

// quiet finds runs of steps in which no device acts or changes what it remembers, though
// requests may stand that are due later: each step is one interval.
type quiet struct {
	controls  []idler // by device
	glance    *glance
	currents  *powerflow.LaneCurrents
	positions powerflow.LaneDevices
	number    int       // of the block that currents are of
	lent      bool      // the block at hand has been handed on
	coarse    []float64 // by device and lane: what coarse watches
	states    []results.DeviceState
}

// newQuiet returns nil where steps are solved one by one or a control cannot do without
// seeing each.
func newQuiet(e *Engine) *quiet {
	if e.ahead == nil {
		return nil
	}
	q := &quiet{number: -1, coarse: make([]float64, len(e.devices)*vector.Lanes), states: make([]results.DeviceState, len(e.devices))}
	for _, d := range e.devices {
		c, ok := d.Controller.(idler)
		if !ok {
			return nil
		}
		q.controls = append(q.controls, c)
	}
	q.currents = e.ahead.lanes.NewLaneCurrents(e.watchedFlows())
	q.glance = newGlance(e)
	return q
}

// watchedFlows are the places in State.Flow that devices look at.
func (e *Engine) watchedFlows() []int {
	flows := []int{}
	for _, d := range e.devices {
		if d.tap != nil {
			flows = append(flows, d.tap.source.flows...)
			continue
		}
		for _, w := range d.cap.watched {
			flows = append(flows, w.flows...)
		}
	}
	return flows
}

// lane is an instant that was solved ahead.
type lane struct {
	*Engine
	k int
}

func (l lane) volt(u int32) complex128   { return l.ahead.lanes.V(u, l.k) }
func (l lane) flow(i int) complex128     { return vector.At(l.quiet.currents.Flow, i, l.k) }
func (l lane) coupling(k int) complex128 { return vector.At(l.quiet.currents.Coupling, k, l.k) }
func (l lane) value(series int) float64  { return l.ahead.rows[(series+1)*vector.Lanes+l.k] }

// quietFrom hands on the quiet steps from step on, as far as they have been solved, and
// returns their number. The first step of a day is left to the event loop, which begins
// its start vectors; so is one whose devices are not all at rest.
func (r *runner) quietFrom(step int) (int, error) {
	e, q := r.Engine, r.quiet
	a := e.ahead
	if q == nil || r.relay == nil || !r.started || r.acted || step >= a.dayEnd {
		return 0, nil
	}
	if step < a.first || step >= a.end || a.state != e.flow.DeviceState() {
		if e.in.axis.Step >= noQuiet { // by the hour every step is looked at by itself anyway
			return 0, nil
		}
		e.step = step
		e.solveLanes()
	}
	start, _ := e.in.axis.Bounds(step)
	turn := min(e.due(), e.nextSwitch(start))
	if turn <= start {
		return 0, nil
	}
	n := 0
	for ; step+n < a.end; n++ {
		k := (step + n) % vector.Lanes
		from, to := e.in.axis.Bounds(step + n)
		if a.arrived>>k&1 == 0 || turn < to || to-from != e.in.axis.Step || !q.read(e, k, from, n == 0) {
			break
		}
		whole := false
		for _, rec := range r.relay.recorders {
			whole = whole || rec.Whole(from, to)
		}
		if whole {
			break
		}
	}
	if n == 0 {
		return 0, nil
	}
	return n, r.hand(step, n)
}

// standing tells whether some request stands.
func (e *Engine) standing() bool {
	for _, d := range e.devices {
		if d.Due() != devices.Never {
			return true
		}
	}
	return false
}

// noQuiet is the step, ns, from which on runs of quiet steps are too rare to look for.
const noQuiet = 1800 * devices.Second

// read looks at a lane with every device, and tells whether it leaves all of them as they
// are and as they stood in the first lane.
func (q *quiet) read(e *Engine, k int, now devices.Time, first bool) bool {
	if a := e.ahead; q.number != a.number {
		q.number = a.number
		e.lap(&e.timing.Controls)
		if q.currents.Devices(&q.positions) {
			q.currents.Use(&q.positions)
		}
		q.currents.Read(a.lanes.Block, a.arrived)
		e.lap(&e.timing.Solving)
	}
	g := q.glance
	if first {
		g.rest()
	}
	if g.rests {
		g.look(q.currents.Coupling)
	}
	alone := func(i int) bool { return q.look(e, i, k, now, first) }
	if !g.rests {
		for i := range e.devices {
			if !alone(i) {
				return false
			}
		}
		return true
	}
	if !g.calm(k, first, now, q.states, q.coarse, alone) {
		return false
	}
	for _, i := range g.slow {
		if !alone(i) {
			return false
		}
	}
	return true
}

// look looks at a lane with one device.
func (q *quiet) look(e *Engine, i, k int, now devices.Time, first bool) bool {
	d := e.devices[i]
	s, watched, idle := q.controls[i].Idle(read(e, lane{e, k}, d, now), now)
	if !idle {
		return false
	}
	s.Hunting = d.hunting.Hunts(now)
	if first {
		q.states[i] = s
	} else if q.states[i] != s {
		return false
	}
	q.coarse[i*vector.Lanes+k] = watched
	return true
}

// hand gives n steps to the recorders.
func (r *runner) hand(step, n int) error {
	e, q := r.Engine, r.quiet
	for i := range n {
		k := (step + i) % vector.Lanes
		r.coarse.skip(q.coarse, k)
		e.timing.Iterations += e.ahead.lanes.Iterations[k]
		e.countLane(k)
	}
	e.paths[powerflow.InLanes] += n
	e.timing.Solutions += n
	e.timing.QuietSteps += n
	e.lap(&e.timing.Controls)
	q.lent = true
	err := r.relay.quiet(step, n, q.states, e.standing())
	e.lap(&e.timing.Waiting)
	return err
}

// skip takes lane k of what coarse watches, by device.
func (c *coarse) skip(values []float64, k int) {
	for i := range c.last {
		c.take(i, values[i*vector.Lanes+k])
	}
}
