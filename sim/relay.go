package sim

import (
	"errors"
	"sync/atomic"
	"time"

	"yearflow/devices"
	"yearflow/sim/powerflow"
	"yearflow/sim/powerflow/vector"
	"yearflow/sim/results"
)

// relay hands on what a run finds to recorders that work beside it, in order: while they
// take one interval in, the next is solved. Everything is copied, or lent until it has
// been taken in, so that the recorders see the same whatever the pace.
type relay struct {
	e         *Engine
	recorders []quietRecorder
	events    chan []*event
	batch     []*event // not sent yet
	free      chan *event
	blocks    chan *powerflow.Block // to be solved in
	done      chan struct{}
	failed    atomic.Bool
	err       error // of a recorder, to be read after done
	last      *event
	sent      int // events at a time
	state     int
	devices   *powerflow.LaneDevices // positions of the blocks that are handed on

	// What the receiving side works with.
	currents *powerflow.LaneCurrents
	solved   int // number of the block that currents are of
	month    int // whose shares the currents have
	lanes    results.Lanes
	out      results.Quiet
	gather   *gathering // nil: intervals are taken one by one
	rest     sensedRest
	tally    plantTally // of quiet steps
	busy     time.Duration
	timed    bool
}

// event is one thing that is handed on: an interval, the step that ends with it, an
// action, or quiet steps.
type event struct {
	interval, step, action bool
	state                  results.State
	sensed                 bool // the state is to be completed, from what follows
	number                 int  // of the step
	values                 []float64
	devices                []results.DeviceState
	asInterval             results.Interval
	asStep                 results.Step
	asAction               results.Action

	quiet    int // steps, beginning at lane and at start
	lane     int
	start    int64
	block    *powerflow.Block
	blockOf  int       // number of the block
	rows     []float64 // values of the series in the block's steps
	month    int       // of the block
	settling bool
	arrived  uint8
	taps     []int
	closed   []bool

	positions *powerflow.LaneDevices

	retired *powerflow.Block // nothing after this event is of the block
}

// plantTally is what generators delivered and did not, kWh.
type plantTally struct{ generated, curtailed []float64 }

// relayed bounds what is under way, in events and in numbers of their states.
const (
	relayEvents  = 128
	relayLeast   = 64 // more than twice what is held back to be gathered
	relayBlocks  = 48
	relayNumbers = 4 << 20
)

// newRelay begins to receive. Close ends it.
func newRelay(e *Engine, recorders []quietRecorder) *relay {
	numbers := len(e.state.V) + len(e.state.Flow)
	n := max(relayLeast, min(relayEvents, relayNumbers/max(numbers, 1)))
	r := &relay{e: e, recorders: recorders, events: make(chan []*event, n), free: make(chan *event, n), done: make(chan struct{}), timed: e.timed, solved: -1, month: -1, sent: max(1, 12),
		tally: plantTally{make([]float64, len(e.state.Generation)), make([]float64, len(e.state.Generation))}}
	for range n {
		r.free <- &event{devices: make([]results.DeviceState, len(e.devices)), taps: make([]int, len(e.state.Taps)), closed: make([]bool, len(e.state.Closed))}
	}
	if e.ahead != nil {
		l := e.ahead.lanes
		r.currents = l.NewLaneCurrents(nil)
		r.lanes.Flow, r.lanes.Coupling = r.currents.Flow, r.currents.Coupling
		r.lanes.Source = vector.Make(3 * len(e.net.Model.Sources))
		r.out.State, r.out.Solver, r.out.Step = &r.lanes, powerflow.InLanes.String(), e.in.axis.Step
		v, _ := l.Voltages()
		blocks := max(4, min(relayBlocks, relayNumbers/len(v)))
		r.blocks = make(chan *powerflow.Block, blocks+1)
		for range blocks {
			r.blocks <- l.NewBlock()
		}
		r.gather = newGathering(r)
	}
	go r.receive()
	return r
}

var errRecorder = errors.New("a recorder failed") // replaced by its own error when the relay closes

// next returns an event to fill.
func (r *relay) next() (*event, error) {
	if r.failed.Load() {
		return nil, errRecorder
	}
	var ev *event
	select {
	case ev = <-r.free:
	default:
		r.send()
		ev = <-r.free
	}
	ev.interval, ev.step, ev.action, ev.quiet, ev.block, ev.retired, ev.sensed = false, false, false, 0, nil, nil, false
	return ev, nil
}

// flush queues the interval that waited for the end of its step.
func (r *relay) flush() {
	if r.last != nil {
		r.queue(r.last)
		r.last = nil
	}
}

// queue puts an event behind the others. They are sent several at a time: to wake the
// receiver takes longer than most of them.
func (r *relay) queue(ev *event) {
	r.batch = append(r.batch, ev)
	if len(r.batch) >= r.sent {
		r.send()
	}
}

// send sends what has been queued.
func (r *relay) send() {
	if len(r.batch) > 0 {
		r.events <- r.batch
		r.batch = make([]*event, 0, r.sent)
	}
}

// Interval takes an interval, which waits for what comes next.
func (r *relay) Interval(iv *results.Interval) error {
	r.flush()
	ev, err := r.next()
	if err != nil {
		return err
	}
	ev.interval = true
	r.copy(ev, iv.State)
	ev.devices = append(ev.devices[:0], iv.Devices...)
	ev.asInterval = *iv
	ev.asInterval.State, ev.asInterval.Devices = &ev.state, ev.devices
	r.last = ev
	return nil
}

// copy takes a state over, and what it takes to complete it.
func (r *relay) copy(ev *event, s *results.State) {
	if r.e.sense == nil {
		ev.state.Copy(s)
		return
	}
	ev.state.CopySensed(s)
	ev.sensed, ev.number = true, r.e.step
	ev.values = append(ev.values[:0], r.e.in.values...)
}

// Step takes a step. Its last state is that of its last interval, but for what plants
// store.
func (r *relay) Step(s *results.Step) error {
	if r.last == nil || s.Last == nil || len(s.Last.Stored) > 0 {
		r.flush()
		ev, err := r.next()
		if err != nil {
			return err
		}
		if s.Last != nil {
			r.copy(ev, s.Last)
		}
		r.last = ev
	}
	ev := r.last
	ev.step, ev.asStep = true, *s
	if s.Last != nil {
		ev.asStep.Last = &ev.state
	}
	r.flush()
	return nil
}

// Action takes an action.
func (r *relay) Action(a *results.Action) error {
	r.flush()
	ev, err := r.next()
	if err != nil {
		return err
	}
	ev.action, ev.asAction = true, *a
	r.queue(ev)
	return nil
}

// quiet takes n steps of the block at hand.
func (r *relay) quiet(step, n int, states []results.DeviceState, settling bool) error {
	r.flush()
	ev, err := r.next()
	if err != nil {
		return err
	}
	a := r.e.ahead
	ev.settling = settling
	ev.quiet, ev.lane, ev.block, ev.blockOf, ev.arrived = n, step%vector.Lanes, a.lanes.Block, a.number, a.arrived
	ev.start, _ = r.e.in.axis.Bounds(step)
	if r.devices == nil || r.state != a.state { // those before may still be in use
		r.state, r.devices = a.state, &powerflow.LaneDevices{}
		r.currents.Devices(r.devices)
	}
	ev.positions = r.devices
	copy(ev.devices[:len(states)], states)
	ev.devices = ev.devices[:len(states)]
	ev.rows, ev.month = append(ev.rows[:0], a.rows...), a.month
	copy(ev.taps, r.e.state.Taps)
	copy(ev.closed, r.e.state.Closed)
	r.queue(ev)
	return nil
}

// exchange gives the lanes another block to be solved in: the one at hand is still lent.
func (r *relay) exchange() error {
	r.flush()
	ev, err := r.next()
	if err != nil {
		return err
	}
	var next *powerflow.Block
	select {
	case next = <-r.blocks:
	default:
		r.send()
		next = <-r.blocks
	}
	ev.retired = r.e.ahead.lanes.Exchange(next)
	r.queue(ev)
	return nil
}

// close ends the receiving and returns the error of the recorder that failed.
func (r *relay) close() error {
	r.flush()
	r.send()
	close(r.events)
	<-r.done
	return r.err
}

func (r *relay) receive() {
	defer close(r.done)
	for batch := range r.events {
		began := r.now()
		for _, ev := range batch {
			if r.gather != nil {
				r.gather.sort(ev)
			} else {
				r.handle(ev)
			}
		}
		if r.timed {
			r.busy += time.Since(began)
		}
	}
	if r.gather != nil {
		began := r.now()
		r.gather.end()
		if r.timed {
			r.busy += time.Since(began)
		}
	}
}

// handle takes an event in and gives back what was lent with it.
func (r *relay) handle(ev *event) {
	if r.err == nil {
		r.fail(r.take(ev))
	}
	if ev.retired != nil {
		r.blocks <- ev.retired
	}
	r.free <- ev
}

// fail keeps the error of a recorder, if any.
func (r *relay) fail(err error) {
	if err != nil {
		r.err = err
		r.failed.Store(true)
	}
}

func (r *relay) now() (t time.Time) {
	if r.timed {
		t = time.Now()
	}
	return t
}

// take hands an event to every recorder.
func (r *relay) take(ev *event) error {
	if ev.quiet > 0 {
		r.read(ev)
	}
	if ev.sensed {
		r.complete(ev)
	}
	for _, rec := range r.recorders {
		var err error
		switch {
		case ev.action:
			err = rec.Action(&ev.asAction)
		case ev.quiet > 0:
			err = rec.Quiet(&r.out)
		default:
			if ev.interval {
				err = rec.Interval(&ev.asInterval)
			}
			if err == nil && ev.step {
				err = rec.Step(&ev.asStep)
			}
		}
		if err != nil {
			return err
		}
	}
	return nil
}

// follow has the currents follow the loads' shares of a month.
func (r *relay) follow(month int) {
	if r.month != month {
		r.month = month
		r.currents.Follow(r.e.in.follow(month))
	}
}

// sensedRest has room for what sensed leaves out of a state.
type sensedRest struct {
	flow, load []complex128
	input      powerflow.Input
}

// complete reads the rest of a state. It holds until the next one is completed.
func (r *relay) complete(ev *event) {
	e, x := r.e, &r.rest
	if x.flow == nil {
		x.flow, x.load = make([]complex128, len(e.state.Flow)), make([]complex128, len(e.state.Load))
		x.input = powerflow.Input{Source: make([]complex128, len(e.in.fixed)), Power: make([]complex128, len(e.in.injections))}
	}
	e.in.scale(ev.values, ev.number, &x.input)
	ev.state.Flow, ev.state.Load = x.flow, x.load
	e.complete(&ev.state, x.input.Power)
}

// read reads what quiet steps are made of from their block.
func (r *relay) read(ev *event) {
	e, b := r.e, ev.block
	if r.solved != ev.blockOf {
		r.solved = ev.blockOf
		r.follow(ev.month)
		r.currents.Drive(ev.rows)
		r.currents.Use(ev.positions)
		r.currents.Read(b, ev.arrived)
		for f, x := range e.net.Fixed {
			at := 3*x.Source + int(x.Phase)
			copy(r.lanes.Source[at*vector.Width:(at+1)*vector.Width], r.currents.Source[f*vector.Width:])
		}
		r.lanes.V, r.lanes.Slot = b.Voltages()
	}
	r.lanes.Taps, r.lanes.Closed = ev.taps, ev.closed
	r.out.Start, r.out.First, r.out.Count, r.out.Devices, r.out.Settling = ev.start, ev.lane, ev.quiet, ev.devices, ev.settling
	hours := float64(e.in.axis.Step) / float64(3600*devices.Second)
	for i := range ev.quiet {
		k := (ev.lane + i) % vector.Lanes
		generation := 0.0
		for g := range r.tally.generated {
			watts, curtailed := r.delivered(b, g, k)
			generation += watts
			r.tally.generated[g] += watts / 1000 * hours
			r.tally.curtailed[g] += curtailed * hours
		}
		r.lanes.Generation[k] = generation
		r.lanes.Load[k] = r.currents.Drawn[k] + generation
	}
}

// delivered is what a generator delivers in a lane of a block, W, and what its function
// takes from what it could, kW.
func (r *relay) delivered(b *powerflow.Block, generator, k int) (watts, curtailed float64) {
	e := r.e
	for _, v := range e.plants.inverters {
		if v.generator == generator {
			available := -r.currents.Power(int(e.in.groups[v.group].Members[0]), k) / 1000 * v.law.members
			o := v.law.output(available, b.GroupVoltage(v.group, k))
			return o.P * 1000, o.Curtailed
		}
	}
	for _, m := range e.in.branchesOf[generator] {
		watts -= r.currents.Power(m, k)
	}
	return watts, 0
}
