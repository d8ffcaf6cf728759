package sim

import (
	"math"
	"math/bits"
	"slices"

	"yearflow/sim/powerflow"
	"yearflow/sim/powerflow/vector"
)

// foresight solves what will be asked for, where steps are so long that devices move in
// many of them: a lane is a step with the devices where they will stand by then. What the
// devices will do is forecast with their own controls (forecast.go) from voltages that are
// roughly known. The event loop goes on as if each solution were found when it asks: it
// takes a lane that was solved for the step at hand and the devices where they do stand,
// and where the forecast failed all lanes are solved anew. So a forecast can cost time,
// and can never change a result but for the voltages that the iteration starts from.
type foresight struct {
	lanes *powerflow.Lanes
	block stepBlock
	plan  [vector.Lanes]wanted
	count int // of lanes in use

	arrived, taken uint8

	// Scouts are solved roughly, eight steps at once with the devices where they stand: what
	// the forecast begins with, and start voltages.
	scouts     *powerflow.Lanes
	scoutBlock stepBlock
	first      int // step of the scouts' window; end is the one after the last
	end        int
	scouted    [vector.Lanes]known // by step, modulo: in the scouts' lanes
	solved     [vector.Lanes]known // the same, in the lanes: nearer to what will be

	sense       *powerflow.LaneSense
	flow        []complex128 // what sense reads
	own, source []complex128
	here        wanted // where the devices of the forecast stand
	scoutedAt   wanted // where they stand in all lanes of the scouts
	ratio       []float64
	reading     []Reading
	move        *vector.Directions // of the voltages: by device that moves by one
	gain        [][]Reading        // by device that moves by one, and by device that sees it
	gained      bool
	month       int
	steps       int
	kept        bool // there is a solution to start from
	saved       []saved
	startFrom   [vector.Lanes]uint64
}

// wanted is a solution that is asked for: a step and where the devices stand.
type wanted struct {
	step   int
	taps   []int
	closed []bool
}

func (w *wanted) is(step int, taps []int, closed []bool) bool {
	return w.step == step && slices.Equal(w.taps, taps) && slices.Equal(w.closed, closed)
}

func (w *wanted) set(step int, taps []int, closed []bool) {
	w.step, w.taps, w.closed = step, append(w.taps[:0], taps...), append(w.closed[:0], closed...)
}

// known is what devices see at a step, in a lane in which they stand at positions.
type known struct {
	step      int
	lane      int
	positions []int
	readings  []Reading
	unread    bool // the readings are still to be taken from the lane
}

// stepBlock is the inputs of the steps in the lanes of a block.
type stepBlock struct {
	lanes  *powerflow.Lanes
	rows   []float64 // ones, then the values of each series, by lane
	loaded [vector.Lanes]int
}

func newStepBlock(in *inputs, lanes *powerflow.Lanes) stepBlock {
	b := stepBlock{lanes: lanes, rows: make([]float64, (len(in.values)+1)*vector.Lanes)}
	in.still(lanes, b.rows)
	b.forget()
	return b
}

func (b *stepBlock) forget() {
	for k := range b.loaded {
		b.loaded[k] = -1
	}
}

// load puts the inputs of a step into a lane.
func (b *stepBlock) load(e *Engine, k, step int) {
	if b.loaded[k] != step {
		b.loaded[k] = step
		e.in.loadLane(b.lanes, b.rows, e.ahead.values, k, step)
	}
}

// roughly is the change, p.u., at which scouts have seen enough.
var roughly = powerflow.Tolerance{Change: 1e-3, Mismatch: math.Inf(1)}

// mostGains bounds what is kept of what movements make, in numbers: some 16 of a Reading for
// each pair of devices, and a voltage of every unknown for each device.
const mostGains = 16 << 20

// prepareForesight has the lanes ready for a run, where steps are long and a forecast is
// possible.
func (e *Engine) prepareForesight() {
	if e.foresight != nil {
		e.foresight.begin()
		return
	}
	if e.ahead == nil || e.in.axis.Step < noQuiet || len(e.in.groups) > 0 || len(e.devices) == 0 {
		return
	}
	for _, d := range e.devices {
		if _, ok := d.Controller.(foreseen); !ok {
			return
		}
	}
	n := len(e.devices)
	if n*(16*n+2*len(e.net.Unknowns)) > mostGains {
		return
	}
	f := &foresight{steps: e.in.axis.Steps(), ratio: make([]float64, len(e.net.Couplings)), reading: make([]Reading, n), saved: make([]saved, n),
		flow: make([]complex128, len(e.state.Flow)), own: make([]complex128, len(e.net.Couplings)), source: make([]complex128, len(e.net.Fixed))}
	f.lanes, f.scouts = powerflow.NewPositionedLanes(e.flow, e.in.largest()), powerflow.NewPositionedLanes(e.flow, e.in.largest())
	if f.lanes == nil || f.scouts == nil {
		return
	}
	f.block, f.scoutBlock = newStepBlock(e.in, f.lanes), newStepBlock(e.in, f.scouts)
	f.move = f.scouts.NewDirections(n)
	f.sense = e.flow.NewLaneSense(e.watchedFlows())
	f.gain = make([][]Reading, n)
	for k := range f.gain {
		f.gain[k] = make([]Reading, n)
	}
	for k := range vector.Lanes {
		f.scouted[k] = known{positions: make([]int, n), readings: make([]Reading, n)}
		f.solved[k] = known{positions: make([]int, n), readings: make([]Reading, n)}
	}
	f.begin()
	e.foresight = f
}

// begin forgets what was solved before a run.
func (f *foresight) begin() {
	f.count, f.first, f.end, f.month, f.kept = 0, 0, 0, -1, false
	if f.gained { // what cannot be measured now must not be that of another settings sheet
		f.gained, f.move = false, f.scouts.NewDirections(len(f.gain))
		for _, row := range f.gain {
			clear(row)
		}
	}
	f.forget()
	f.block.forget()
	f.scoutBlock.forget()
}

// forget forgets what is known.
func (f *foresight) forget() {
	for k := range vector.Lanes {
		f.scouted[k].step, f.solved[k].step = -1, -1
	}
	f.first, f.end = 0, 0
}

// at returns what is known of a step, and the lane that it is known of as StartLanes counts;
// nil: nothing is.
func (f *foresight) at(step int) (x *known, lane uint64) {
	if x = &f.solved[step%vector.Lanes]; x.step == step {
		return x, uint64(x.lane)
	}
	if x = &f.scouted[step%vector.Lanes]; x.step == step {
		return x, uint64(x.lane + vector.Lanes)
	}
	return nil, 0
}

// solveForeseen takes the step at hand from its lane, after solving lanes where it must. It
// reports whether there was a solution to take.
func (e *Engine) solveForeseen() bool {
	f := e.foresight
	lane := f.find(e)
	if lane < 0 {
		e.foresee()
		lane = 0
	}
	if f.arrived>>lane&1 == 0 {
		return false
	}
	f.kept = true
	f.lanes.Take(lane, e.solution)
	if f.taken>>lane&1 == 0 {
		f.taken |= 1 << lane
		e.timing.LanesUsed++
	}
	return true
}

// find returns the lane of what is asked for; below zero there is none.
func (f *foresight) find(e *Engine) int {
	for k := range f.count {
		if f.plan[k].is(e.step, e.state.Taps, e.state.Closed) {
			return k
		}
	}
	return -1
}

// foresee solves what is asked for and what will be.
func (e *Engine) foresee() {
	f := e.foresight
	if month := e.in.monthOf(e.step); month != f.month { // shares of loads may change
		f.month, f.gained = month, false
		f.lanes.Follow(e.in.follow(month))
		f.scouts.Follow(e.in.follow(month))
		f.forget()
	}
	f.count, f.arrived, f.taken = 0, 0, 0
	e.forecast()
	mask := uint8(0)
	for k := range f.count {
		mask |= 1 << k
		w := &f.plan[k]
		f.block.load(e, k, w.step)
		f.position(e, f.lanes, k, w)
	}
	f.start(e)
	f.lanes.Drive(f.block.rows)
	e.lap(&e.timing.Assembling)
	e.timing.Blocks++
	e.timing.LanesSolved += bits.OnesCount8(mask)
	f.arrived = f.lanes.Solve(mask, powerflow.Contract)
	f.learn(e)
	e.ratios(e.state.Taps, e.ratio)
	e.lap(&e.timing.Solving)
}

// position puts the devices of a lane where they are wanted.
func (f *foresight) position(e *Engine, lanes *powerflow.Lanes, k int, w *wanted) {
	e.ratios(w.taps, f.ratio)
	lanes.Position(k, f.ratio, w.closed)
}

// start starts every lane from what is known of its step.
func (f *foresight) start(e *Engine) {
	x, lane := f.at(f.plan[0].step)
	if x == nil {
		f.startAll(e, f.lanes)
		return
	}
	for k := range f.startFrom {
		if k < f.count {
			if x, at := f.at(f.plan[k].step); x != nil {
				lane = at
			}
		}
		f.startFrom[k] = lane
	}
	f.lanes.StartLanes(f.scouts, &f.startFrom)
	f.move.Begin()
	for i, d := range e.devices {
		var times [vector.Lanes]float64
		moved := false
		for k := range f.count {
			w := &f.plan[k]
			if x, _ := f.at(w.step); x != nil { // else it starts elsewhere anyway
				times[k] = float64(position(d, w) - x.positions[i])
				moved = moved || times[k] != 0
			}
		}
		if moved {
			f.move.Use(i, &times)
		}
	}
	f.lanes.Shift(f.move)
}

// startAll starts lanes of which nothing is known.
func (f *foresight) startAll(e *Engine, lanes *powerflow.Lanes) {
	if f.kept {
		lanes.StartAll(e.anchor, &e.input)
		return
	}
	lanes.StartAll(nil, &e.input)
}

// learn takes over what devices see in the last lane of each step.
func (f *foresight) learn(e *Engine) {
	for k := range f.solved { // the block that they were in is no more
		f.solved[k].step = -1
	}
	for k := range f.count {
		w := &f.plan[k]
		if k+1 < f.count && f.plan[k+1].step == w.step {
			continue
		}
		if f.arrived>>k&1 == 1 {
			f.know(e, &f.solved[w.step%vector.Lanes], &f.block, k, w)
		}
	}
}

// knows notes a lane in which what devices see can be read while its block is at hand.
func (f *foresight) knows(e *Engine, x *known, k int, w *wanted) {
	x.step, x.lane, x.unread = w.step, k, true
	for i, d := range e.devices {
		x.positions[i] = position(d, w)
	}
}

// know reads what devices see in a lane.
func (f *foresight) know(e *Engine, x *known, b *stepBlock, k int, w *wanted) {
	x.step, x.unread = -1, false
	e.ratios(w.taps, e.ratio)
	if !f.sense.Read(f.flow, f.own, f.source, b.lanes, k) {
		return
	}
	x.step, x.lane = w.step, k
	at := laneOf{f, b, k}
	for i, d := range e.devices {
		x.readings[i] = read(e, at, d, 0)
		x.positions[i] = position(d, w)
	}
}

// position is where a device stands.
func position(d *device, w *wanted) int {
	if d.cap == nil {
		return w.taps[d.Units[0]]
	}
	if w.closed[d.Index] {
		return 1
	}
	return 0
}

// laneOf is a lane that devices look at.
type laneOf struct {
	f *foresight
	b *stepBlock
	k int
}

func (l laneOf) volt(u int32) complex128   { return l.b.lanes.V(u, l.k) }
func (l laneOf) flow(i int) complex128     { return l.f.flow[i] }
func (l laneOf) coupling(k int) complex128 { return l.f.own[k] }
func (l laneOf) value(series int) float64  { return l.b.rows[(series+1)*vector.Lanes+l.k] }
