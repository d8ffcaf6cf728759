package sim

import (
	"context"
	"fmt"
	"strings"

	"yearflow/devices"
	"yearflow/profiles"
	"yearflow/sim/powerflow"
	"yearflow/sim/results"
)

// A Recorder takes what a run finds, in order: the actions and the intervals of a
// step, then the step. It must neither keep nor change what it is handed. An error
// ends the run. results.Writer is one; statistics and tests are others.
type Recorder interface {
	Interval(*results.Interval) error
	Action(*results.Action) error
	Step(*results.Step) error
}

// rounds is how often devices may act at one instant. Those of a settings sheet come to
// rest after two; a control of the user's own may not, and is named then.
const rounds = 1000

// startUp is the longest event time of a start-up.
const startUp = 24 * 3600 * devices.Second

// Run walks through the study's period and hands everything to the recorders. It
// begins settled, unless the study says "given". A cancelled context ends it between
// two steps.
func (e *Engine) Run(ctx context.Context, recorders ...Recorder) (*results.Outcome, error) {
	e.startClock()
	if err := e.baseOver(ctx); err != nil {
		return nil, err
	}
	e.Reset()
	out := &results.Outcome{Paths: map[string]int{}}
	e.plants.reset(e.in.axis.Start)
	e.steady = true
	if !e.Study.Settings.Run.Given {
		moving, _, err := e.settle(0)
		if err != nil {
			return nil, err
		}
		out.StillMoving = moving
	}
	clear(e.paths)
	e.timing.startOver()
	e.anchored = false
	e.plants.reset(e.in.axis.Start)
	e.steady = false
	out.Taps = append(out.Taps, e.state.Taps...)
	out.Closed = append(out.Closed, e.state.Closed...)
	r := &runner{Engine: e, recorders: recorders, out: out,
		generated: make([]float64, len(e.state.Generation)), curtailed: make([]float64, len(e.state.Generation)),
		stepGenerated: make([]float64, len(e.state.Generation)), stepCurtailed: make([]float64, len(e.state.Generation))}
	r.coarse = newCoarse(e)
	if e.ahead != nil {
		e.ahead.begin(e.in)
		e.prepareForesight()
		e.speculate = true
		defer func() { e.speculate = false }()
	}
	if err := r.walk(ctx); err != nil {
		return nil, err
	}
	for p, k := range e.paths {
		out.Paths[p.String()] = k
	}
	out.CoarseAt = r.coarse.names(e)
	out.Speed = e.speed()
	e.lap(&e.timing.Controls)
	out.Plants = r.totals()
	return out, nil
}

// walk goes through the steps. Recorders that need not look at the engine work beside it.
func (r *runner) walk(ctx context.Context) (err error) {
	e := r.Engine
	e.quiet, e.relay, e.sense = nil, nil, nil
	if beside := detached(r.recorders); beside != nil && e.allocation == nil {
		e.quiet, e.relay = newQuiet(e), newRelay(e, beside)
		r.recorders = []Recorder{e.relay}
		if e.ahead != nil && len(e.in.groups) == 0 {
			e.sense = e.flow.NewSense(e.watchedFlows())
		}
		defer func() {
			e.sense = nil
			failed := e.relay.close()
			if failed != nil {
				err = failed
			}
			e.timing.Beside = true
			e.timing.Waiting += e.timing.Statistics
			e.timing.Statistics = e.relay.busy
			for g := range r.generated {
				r.generated[g] += e.relay.tally.generated[g]
				r.curtailed[g] += e.relay.tally.curtailed[g]
			}
		}()
	}
	n := e.in.axis.Steps()
	for step := 0; step < n; {
		if err := ctx.Err(); err != nil {
			return err
		}
		skip, err := r.quietFrom(step)
		if err == nil && skip == 0 {
			skip, err = 1, r.step(step)
		}
		if err != nil {
			return err
		}
		step += skip
	}
	return nil
}

// detached returns the recorders where none of them needs more than what it is handed;
// else nil.
func detached(recorders []Recorder) (out []quietRecorder) {
	for _, x := range recorders {
		q, ok := x.(quietRecorder)
		if !ok {
			return nil
		}
		out = append(out, q)
	}
	return out
}

// Steps is the number of steps of the study's period.
func (e *Engine) Steps() int { return e.in.axis.Steps() }

// StepAt returns the step that an instant lies in.
func (e *Engine) StepAt(t int64) (int, bool) { return e.in.axis.Index(t) }

// settle runs the event loop on one step's inputs without an end, time of day
// standing at its start, until nothing asks or 24 h have passed. Actions are not
// operations; clocks, lockouts and counts are forgotten after it. Where there is no
// solution the devices stay at the positions of the tables.
func (e *Engine) settle(step int) (moving []string, actions int, err error) {
	start, _ := e.in.axis.Bounds(step)
	e.takeInputs(step)
	now, at := start, 0
	allocate, again := true, 0
	for {
		ok, err := e.solveWith(allocate, start)
		if err != nil {
			return nil, actions, err
		}
		if !ok {
			e.Reset()
			return nil, 0, nil
		}
		allocate = false
		for {
			if err := e.observe(now, start); err != nil {
				return nil, actions, err
			}
			due := e.due()
			if due == devices.Never && again < allocationAgain && actions > 0 && e.stale() {
				again++
				if ok, err := e.allocate(start); !ok || err != nil {
					e.Reset()
					return nil, 0, err
				}
				continue
			}
			if due == devices.Never || due >= start+startUp {
				for _, d := range e.devices {
					if d.Due() != devices.Never {
						moving = append(moving, d.title())
					}
				}
				for _, d := range e.devices {
					d.Forget()
				}
				return moving, actions, nil
			}
			if due <= now {
				break
			}
			now, at = due, 0
		}
		if at++; at > rounds {
			return nil, actions, e.restless(now)
		}
		for _, d := range e.devices {
			if d.Due() <= now {
				d.Act(now)
				actions++
			}
		}
		e.takePositions()
		e.keep()
	}
}

// restless is the error of a run whose devices do not come to rest at an instant.
func (e *Engine) restless(now devices.Time) error {
	var names []string
	for _, d := range e.devices {
		if d.Due() <= now {
			names = append(names, d.title())
		}
	}
	return fmt.Errorf("%s acted %d times at %s and ask again: a control must never ask at the instant of its own action",
		strings.Join(names, ", "), rounds, profiles.Format(now, e.in.axis.Zone))
}

func (d *device) title() string {
	if d.Phase == "" {
		return d.Name
	}
	return d.Name + "." + d.Phase
}

// observe lets every control see the solution at hand. One that stands near an edge
// gets it from the reference path.
func (e *Engine) observe(now, wall devices.Time) error {
	for _, d := range e.devices {
		e.measure(d, wall)
	}
	if !e.exact && e.nearEdge() {
		e.timing.Edges++
		ok, err := e.solve(powerflow.Reference)
		if err != nil {
			return err
		}
		e.exact = true
		if !ok {
			return fmt.Errorf("the reference path finds no solution at %s where the fast one did", profiles.Format(now, e.in.axis.Zone))
		}
		for _, d := range e.devices {
			e.measure(d, wall)
		}
	}
	for _, d := range e.devices {
		d.Observe(d.reading, now)
	}
	return nil
}

func (e *Engine) nearEdge() bool {
	for _, d := range e.devices {
		if x, ok := d.Controller.(edger); ok && x.Edge(d.reading) {
			return true
		}
	}
	return false
}

// solveExact solves at the contract's tolerance and marks the solution as not yet
// exact. Batteries that follow a flow are moved until they rest, at the inputs as they
// are; one that swings is taken as it is after dispatchRounds.
func (e *Engine) solveExact(now devices.Time) (bool, error) {
	e.exact, e.now = false, now
	e.setPlants(now)
	for round := 0; ; round++ {
		ok, err := e.solve(powerflow.Contract)
		if !ok || err != nil {
			return ok, err
		}
		if round == dispatchRounds || !e.follow(now) {
			break
		}
	}
	e.solvedPlants()
	return true, nil
}

func (e *Engine) due() devices.Time {
	due := devices.Never
	for _, d := range e.devices {
		due = min(due, d.Due())
	}
	return due
}

// runner is one walk through the period.
type runner struct {
	*Engine
	recorders []Recorder
	out       *results.Outcome
	coarse    *coarse
	day       int
	started   bool
	acted     bool // since the last solution
	action    results.Action
	record    results.Step

	generated, curtailed         []float64 // kWh by generator
	stepGenerated, stepCurtailed []float64 // the same of the step at hand
}

// step runs the events of one step.
func (r *runner) step(step int) error {
	e := r.Engine
	start, end := e.in.axis.Bounds(step)
	e.lap(&e.timing.Controls)
	e.takeInputs(step)
	e.lap(&e.timing.Assembling)
	// Start voltages are those after the last action, or of the first step of the day:
	// a function of the inputs and the calendar.
	if day := profiles.Day(start, e.in.axis.Zone); !r.started || day != r.day {
		r.day, r.started = day, true
		e.anchored = false
	}
	r.record = results.Step{Start: start, End: end}
	now, at := start, 0
	fresh, seen := true, false
	allocate, again, moved := true, 0, false
	for {
		if fresh {
			ok, err := e.solveWith(allocate, now)
			if err != nil {
				return err
			}
			if !ok {
				return r.unsolved(now, end)
			}
			if r.acted || !e.anchored {
				e.keep()
			}
			fresh, r.acted = false, false
			allocate = false
		}
		if err := e.observe(now, now); err != nil {
			return err
		}
		if !seen { // before anything moves at the step's beginning
			seen = true
			r.coarse.see(e)
		}
		due, turn := e.due(), e.nextSwitch(now)
		if due <= now {
			if at++; at > rounds {
				return e.restless(now)
			}
			if err := r.act(now); err != nil {
				return err
			}
			fresh, moved = true, true
			continue
		}
		if moved && due > end && again < allocationAgain && e.stale() {
			allocate, fresh, moved = true, true, false
			again++
			continue
		}
		next := min(due, turn, end, e.nextPlant(now))
		if err := r.interval(now, next); err != nil {
			return err
		}
		at = 0
		r.tally(now, next)
		fresh = e.advancePlants(now, next)
		moved = moved || fresh
		if now = next; now >= end {
			break
		}
	}
	if where := e.low(); where != "" {
		r.record.Status, r.record.Where = results.Low, where
	}
	r.record.Last = &e.state
	r.record.Allocation = e.allocationAtEnd()
	r.record.Solver = e.solution.Path.String()
	return r.close()
}

// nextSwitch returns the next instant at which time alone changes something: the
// clock of a control, or the end of an hour of hunting.
func (e *Engine) nextSwitch(now devices.Time) devices.Time {
	next := devices.Never
	for _, d := range e.devices {
		if until, ok := d.hunting.Until(); ok && until > now {
			next = min(next, until)
		}
		if s, ok := d.Controller.(switcher); ok {
			if t := s.NextSwitch(now); t > now {
				next = min(next, t)
			}
		}
	}
	return next
}

func (r *runner) close() error {
	r.book()
	r.lap(&r.timing.Controls)
	for _, rec := range r.recorders {
		if err := rec.Step(&r.record); err != nil {
			return err
		}
	}
	r.lap(&r.timing.Statistics)
	return nil
}

// unsolved ends a step that has no solution: requests are dropped, positions stay.
func (r *runner) unsolved(now, end int64) error {
	for _, d := range r.devices {
		d.Drop()
	}
	r.record.Status = results.Unsolved
	r.record.Where = r.net.Unknowns[r.solution.Worst].Name
	r.record.Solver = powerflow.None.String()
	r.record.Last = nil
	r.record.Allocation = r.allocationUnsolved()
	r.started, r.acted = false, false
	return r.close()
}

// act takes every action that is due, in the order of the tables.
func (r *runner) act(now devices.Time) error {
	e := r.Engine
	for k, d := range e.devices {
		if d.Due() > now {
			continue
		}
		a := d.Act(now)
		if a.From == a.To {
			continue
		}
		r.record.Actions++
		r.action = results.Action{Time: now, Device: k, From: a.From, To: a.To, Reason: a.Reason.String(), Measured: a.Measured, Set: a.Set, Waited: a.Waited}
		for _, rec := range r.recorders {
			if err := rec.Action(&r.action); err != nil {
				return err
			}
		}
		var began bool
		if d.hunting, began = d.hunting.See(now, a.To-a.From); began {
			r.out.Hunting = append(r.out.Hunting, results.HuntingEvent{Time: now, Device: k})
		}
	}
	e.takePositions()
	e.keep()
	r.acted = true
	return nil
}

// interval hands on a time over which nothing changes.
func (r *runner) interval(from, to devices.Time) error {
	e := r.Engine
	iv := &e.interval
	iv.Devices = iv.Devices[:0]
	iv.Start, iv.End, iv.Settled, iv.State = from, to, true, &e.state
	for _, d := range e.devices {
		s, standing := d.State(d.reading)
		s.Hunting = d.hunting.Hunts(from)
		iv.Devices = append(iv.Devices, s)
		iv.Settled = iv.Settled && !standing
	}
	e.lap(&e.timing.Controls)
	for _, rec := range r.recorders {
		if err := rec.Interval(iv); err != nil {
			return err
		}
	}
	e.lap(&e.timing.Statistics)
	return nil
}
