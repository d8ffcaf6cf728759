package results

import (
	"fmt"

	"yearflow/sim/powerflow/vector"
)

// Gathered is steps side by side, each of them ok: the intervals stand in the lanes in the
// order of time, each with its own length and its own positions of the devices.
type Gathered struct {
	State      *Lanes // but for Taps and Closed; what stands in the lanes beyond must be numbers
	Count      int    // intervals, 1 to vector.Lanes
	Start, End [vector.Lanes]int64
	Settled    uint8 // mask: no request stands
	Devices    [vector.Lanes][]DeviceState
	Taps       [vector.Lanes][]int
	Closed     [vector.Lanes][]bool
	Steps      []GatheredStep
}

// GatheredStep is one of the steps; its Last is not there, for the state at its end is
// that of its last interval.
type GatheredStep struct {
	Step
	Intervals int // at least 1
	Moves     []Action
	// More: the step goes on in what comes next, be it gathered or not. Only the last one
	// may.
	More bool
}

// Ended is the number of steps that end in g.
func (g *Gathered) Ended() int {
	n := len(g.Steps)
	if n > 0 && g.Steps[n-1].More {
		n--
	}
	return n
}

// check refuses what cannot stand in lanes.
func (g *Gathered) check() error {
	n := 0
	for i := range g.Steps {
		if s := &g.Steps[i]; s.Intervals < 1 || s.Status != OK || s.More && i < len(g.Steps)-1 {
			return fmt.Errorf("results: a gathered step of %d intervals that is %v (more to come: %v)", s.Intervals, s.Status, s.More)
		}
		n += g.Steps[i].Intervals
	}
	if g.Count < 1 || g.Count > vector.Lanes || n != g.Count {
		return fmt.Errorf("results: %d intervals in %d lanes", n, g.Count)
	}
	for k := range g.Count {
		if g.End[k] <= g.Start[k] {
			return fmt.Errorf("results: a gathered interval from %d to %d", g.Start[k], g.End[k])
		}
	}
	return nil
}

// Gathers tells whether the writer needs no more of a step than Gathered has.
func (w *Writer) Gathers() bool {
	return !w.stats.judge.drops && w.storage == nil && w.allocation == nil
}

// Gathered takes steps as if their actions and intervals had come one by one.
func (w *Writer) Gathered(g *Gathered) error {
	if w.err != nil {
		return w.err
	}
	if err := w.count(g); err != nil {
		return w.fail(err)
	}
	first := 0
	for i := range g.Steps {
		s := &g.Steps[i]
		for k := range s.Moves {
			if err := w.Action(&s.Moves[k]); err != nil {
				return err
			}
		}
		last := first + s.Intervals - 1
		if s.Solver != "" && !s.More {
			w.solver[s.Solver]++
		}
		copy(w.taps, g.Taps[last])
		copy(w.caps, g.Closed[last])
		if err := w.rowOf(g, s, first, last); err != nil {
			return w.fail(err)
		}
		first = last + 1
	}
	return nil
}

// count takes everything of gathered steps but their rows and actions.
func (w *Writer) count(g *Gathered) error {
	if err := g.check(); err != nil {
		return err
	}
	s := w.stats
	s.gathered(g)
	r := s.watch
	for from := 0; from < len(g.Steps); {
		to, month := from+1, w.clock.monthOf(g.Steps[from].Start)
		for to < len(g.Steps) && w.clock.monthOf(g.Steps[to].Start) == month {
			to++
		}
		s.book(g, from, to, s.month(month))
		from = to
	}
	r.forgetOutside()
	for k := range g.Count {
		powers := r.apart.powers(&r.block, g.State, k)
		w.balance.take(&powers, g.Start[k])
		for i, d := range g.Devices[k] {
			w.duty[i].hours.add(d, g.End[k]-g.Start[k], g.Settled>>k&1 == 1)
		}
	}
	w.balance.checked += g.Ended() // the end of each step
	return nil
}

// rowOf adds a step to the row of the logs, and writes it where it ends.
func (w *Writer) rowOf(g *Gathered, s *GatheredStep, first, last int) error {
	r := w.stats.watch
	row := &w.row
	row.begin(s.Start)
	for k := first; k <= last; k++ {
		if len(w.meter.Points) > 0 {
			row.lowest, row.highest = min(row.lowest, r.least[k]), max(row.highest, r.most[k])
		}
	}
	e := r.energiesOf(g, first, last)
	row.energies.merge(&e)
	if s.More {
		return nil
	}
	row.steps++
	row.solved++
	row.actions += s.Step.Actions
	row.last = w.rowEnds(&s.Step) // what a row says of its end is read there
	if !row.last {
		return nil
	}
	w.now = w.own
	r.instant(g.State, last, w.now, len(w.places) > 0)
	for i, e := range w.ends {
		w.flowNow[i].readLane(e, g.State, last)
	}
	return w.writeRow()
}

// Gathers tells whether the tally needs no more of a step than Gathered has.
func (t *Tally) Gathers() bool { return t.w.Gathers() }

// Gathered takes steps as if their actions and intervals had come one by one.
func (t *Tally) Gathered(g *Gathered) error {
	if t.w.err != nil {
		return t.w.err
	}
	if err := t.w.count(g); err != nil {
		return t.w.fail(err)
	}
	for i := range g.Steps {
		for k := range g.Steps[i].Moves {
			if err := t.Action(&g.Steps[i].Moves[k]); err != nil {
				return err
			}
		}
	}
	return nil
}

// readLane is read of a lane.
func (f *flowReading) readLane(e *endFlow, l *Lanes, lane int) {
	f.power = 0
	for k := range e.phases {
		p := &e.phases[k]
		var i complex128
		for _, at := range p.flows {
			i += vector.At(l.Flow, at, lane)
		}
		for _, at := range p.couplings {
			i += vector.At(l.Coupling, at, lane)
		}
		f.amps[k] = magnitude(i)
		f.power += apparent(vector.At(l.V, int(l.Slot[p.unknown]), lane), i)
	}
}
