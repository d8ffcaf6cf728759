package sim

import (
	"time"

	"yearflow/sim/results"
)

// Timing says what the last Run did and where its time went. The counts are functions of
// the study and hold for every run; the durations are wall times and stay zero unless
// Options.Timing asks for them.
type Timing struct {
	// Assembling is the time for inputs and equations: reading profiles at a step, powers
	// of loads, factoring for the positions of devices. Solving is that of the iterations
	// and of the flows that follow from the voltages, Controls that of measuring and of
	// everything that devices, plants and the event loop do, Statistics that of the
	// recorders, the writing of files included.
	//
	// Recorders that work Beside the run take time of another core: what Statistics says is
	// then not part of the run's own, and Waiting is the time that handing over took.
	Assembling, Solving, Controls, Statistics, Waiting time.Duration
	Beside                                             bool

	Blocks                 int // of steps solved at once
	Scouts                 int // of steps solved roughly, for a forecast of what devices will do
	LanesSolved, LanesUsed int // instants solved in blocks, and those taken from there
	Iterations, Solutions  int // of the solutions taken
	Edges                  int // instants solved again for a measurement near an edge
	QuietSteps             int // steps that go through the event loop at once, with their block
}

// LanesLost is the number of instants solved in blocks for nothing: a device moved before,
// or they did not arrive.
func (t *Timing) LanesLost() int { return t.LanesSolved - t.LanesUsed }

// Timing returns what the last Run did and where its time went.
func (e *Engine) Timing() Timing { return e.timing }

// startOver forgets what was counted while devices came to rest before the first step.
func (t *Timing) startOver() {
	*t = Timing{Assembling: t.Assembling, Solving: t.Solving, Controls: t.Controls, Statistics: t.Statistics}
}

// startClock begins the timing of a run.
func (e *Engine) startClock() {
	e.timing = Timing{}
	if e.timed {
		e.since = time.Now()
	}
}

// lap books the time since the lap before on a part of Timing. Every instant of a run is
// thus booked once. Without Options.Timing it costs a comparison.
func (e *Engine) lap(part *time.Duration) {
	if e.timed {
		e.spend(part)
	}
}

func (e *Engine) spend(part *time.Duration) {
	now := time.Now()
	*part += now.Sub(e.since)
	e.since = now
}

// countLane counts a lane of the block at hand as used.
func (e *Engine) countLane(lane int) {
	if a := e.ahead; a.taken>>lane&1 == 0 {
		a.taken |= 1 << lane
		e.timing.LanesUsed++
	}
}

// speed is what run.json says of the paths that the steps took.
func (e *Engine) speed() results.Speed {
	t := e.Timing()
	s := results.Speed{Blocks: t.Blocks, Scouts: t.Scouts, LanesSolved: t.LanesSolved, LanesUsed: t.LanesUsed, Iterations: t.Iterations, Solutions: t.Solutions,
		Edges: t.Edges, QuietSteps: t.QuietSteps, StepByStep: map[string]int{}}
	if e.stepwise != "" {
		s.StepByStep[e.stepwise] = e.Steps()
	}
	return s
}
