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

// idler is a control that can tell whether a reading leaves it as it is: it asks for
// nothing, starts or stops no clock, and stands near no edge. Then it says how the device
// stands, and, of a tap changer, what coarse watches.
type idler interface {
	Idle(r Reading, now devices.Time) (s results.DeviceState, watched float64, idle bool)
}

func (c *tapControl) Idle(r Reading, now devices.Time) (s results.DeviceState, watched float64, idle bool) {
	m := c.sheet.Measure(r.Volts, r.Amperes)
	if !c.sheet.Calm(c.state, m) && (c.sheet.Standing(c.state) || c.sheet.Edge(c.state, m) || c.sheet.Observe(c.state, m, now) != c.state) {
		return s, 0, false
	}
	s = results.DeviceState{OutOfBand: c.sheet.OutOfBand(m), AtStop: c.sheet.AtStop(c.state), Reverse: c.reverse(r)}
	return s, coarseOf(&c.sheet, c.state.Position, m), true
}

func (c *reverseControl) Idle(r Reading, now devices.Time) (s results.DeviceState, watched float64, idle bool) {
	m := c.see(r)
	if c.sheet.Standing(c.state) || c.sheet.Edge(c.state, m) || c.sheet.Observe(c.state, m, now) != c.state {
		return s, 0, false
	}
	s, _ = c.State(r)
	return s, coarseOf(&c.sheet.Forward, c.state.Position, c.sheet.Forward.Measure(r.Volts, r.Amperes)), true
}

func (c *capacitorControl) Idle(r Reading, now devices.Time) (s results.DeviceState, watched float64, idle bool) {
	m := c.reading(r)
	idle = !c.sheet.Standing(c.state) && !c.sheet.Edge(c.state, m) && c.sheet.Observe(c.state, m, now) == c.state
	return s, math.NaN(), idle
}

// quiet hands on runs of steps in which no device acts, asks or changes what it
// remembers, straight from their lanes: each is one settled interval.
type quiet struct {
	recorders []quietRecorder
	controls  []idler // by device
	currents  *powerflow.LaneCurrents
	measured  bool // currents are those of the block at hand
	out       results.Quiet
	lanes     results.Lanes
	coarse    []float64 // by device and lane: what coarse watches
	states    []results.DeviceState
}

// newQuiet returns nil where a recorder or a control cannot do without every step.
func newQuiet(r *runner) *quiet {
	e := r.Engine
	if e.ahead == nil || len(e.devices) > 0 && e.Study.Settings.Limits.Allowance != 0 {
		return nil
	}
	q := &quiet{coarse: make([]float64, len(e.devices)*vector.Lanes), states: make([]results.DeviceState, len(e.devices))}
	for _, x := range r.recorders {
		k, ok := x.(quietRecorder)
		if !ok {
			return nil
		}
		q.recorders = append(q.recorders, k)
	}
	for _, d := range e.devices {
		c, ok := d.Controller.(idler)
		if !ok {
			return nil
		}
		q.controls = append(q.controls, c)
	}
	q.currents = e.ahead.lanes.NewLaneCurrents()
	q.lanes.V, q.lanes.Slot = e.ahead.lanes.Voltages()
	q.lanes.Flow, q.lanes.Coupling = q.currents.Flow, q.currents.Coupling
	q.lanes.Source = vector.Make(3 * len(e.net.Model.Sources))
	q.out.State = &q.lanes
	q.out.Solver = powerflow.InLanes.String()
	return q
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
	if q == nil || !r.started || r.acted || step >= a.dayEnd || e.due() != devices.Never {
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
	turn := e.nextSwitch(start)
	n := 0
	for ; step+n < a.end; n++ {
		k := (step + n) % vector.Lanes
		from, to := e.in.axis.Bounds(step + n)
		if a.arrived>>k&1 == 0 || turn < to || to-from != e.in.axis.Step || !q.read(e, k, from, n == 0) {
			break
		}
		whole := false
		for _, rec := range q.recorders {
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

// noQuiet is the step, ns, from which on runs of quiet steps are too rare to look for.
const noQuiet = 1800 * devices.Second

// read looks at a lane with every device, and tells whether it leaves all of them as they
// are and as they stood in the first lane.
func (q *quiet) read(e *Engine, k int, now devices.Time, first bool) bool {
	if !q.measured {
		q.measured = true
		e.lap(&e.timing.Controls)
		e.ahead.lanes.Currents(q.currents, e.ahead.arrived)
		e.lap(&e.timing.Solving)
	}
	for i, d := range e.devices {
		x := read(e, lane{e, k}, d, now)
		s, watched, idle := q.controls[i].Idle(x, now)
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
	}
	return true
}

// hand gives n steps to the recorders.
func (r *runner) hand(step, n int) error {
	e, q := r.Engine, r.quiet
	a := e.ahead
	start, _ := e.in.axis.Bounds(step)
	q.out.Start, q.out.Step, q.out.First, q.out.Count, q.out.Devices = start, e.in.axis.Step, step%vector.Lanes, n, q.states
	q.lanes.Taps, q.lanes.Closed = e.state.Taps, e.state.Closed
	for f, x := range e.net.Fixed {
		at := 3*x.Source + int(x.Phase)
		copy(q.lanes.Source[at*vector.Width:(at+1)*vector.Width], q.currents.Source[f*vector.Width:])
	}
	hours := float64(e.in.axis.Step) / 3.6e12
	for i := range n {
		k := (step + i) % vector.Lanes
		generation := 0.0
		for g := range r.generated {
			p, curtailed := a.delivered(e, g, k)
			generation += p
			r.generated[g] += p / 1000 * hours
			r.curtailed[g] += curtailed * hours
		}
		q.lanes.Generation[k] = generation
		q.lanes.Load[k] = q.currents.Drawn[k] + generation
		r.coarse.skip(q.coarse, k)
		e.timing.Iterations += a.lanes.Iterations[k]
		e.countLane(k)
	}
	e.paths[powerflow.InLanes] += n
	e.timing.Solutions += n
	e.timing.QuietSteps += n
	e.lap(&e.timing.Controls)
	for _, rec := range q.recorders {
		if err := rec.Quiet(&q.out); err != nil {
			return err
		}
	}
	e.lap(&e.timing.Statistics)
	return nil
}

// delivered is what a generator delivers in a lane, W, and what its function takes from
// what it could, kW.
func (a *ahead) delivered(e *Engine, generator, k int) (watts, curtailed float64) {
	for _, v := range e.plants.inverters {
		if v.generator != generator {
			continue
		}
		g := &e.in.groups[v.group]
		mean := 0.0
		for _, m := range g.Members {
			j := &e.in.injections[m]
			x := across(lane{e, k}, j.From, j.To)
			mean += math.Hypot(real(x), imag(x)) / j.Nominal
		}
		mean /= float64(len(g.Members))
		available := -a.lanes.Power(int(g.Members[0]), k) / 1000 * v.law.members
		o := v.law.output(available, mean)
		return o.P * 1000, o.Curtailed
	}
	for _, m := range e.in.branchesOf[generator] {
		watts -= a.lanes.Power(m, k)
	}
	return watts, 0
}

// skip takes lane k of what coarse watches, by device.
func (c *coarse) skip(values []float64, k int) {
	for i := range c.last {
		c.take(i, values[i*vector.Lanes+k])
	}
}
