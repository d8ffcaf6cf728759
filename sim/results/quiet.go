package results

import "yearflow/sim/powerflow/vector"

// Lanes is several solved steps side by side, with the devices at the same positions:
// arrays of package vector.
type Lanes struct {
	V    []float64 // values; the voltage of unknown u is value Slot[u]
	Slot []int32   // by Network.Unknowns; does not change
	// Flow is values, by State.Flow: the currents, A, that elements take in at their
	// terminals, zero at open capacitors.
	Flow     []float64
	Coupling []float64 // values, own current, A, by Network.Couplings
	// Source is values, the current, A, that each source sends into its node:
	// 3·source + phase.
	Source []float64
	// Load and Generation are W, of all loads and of all generators, by lane.
	Load, Generation [vector.Lanes]float64
	Taps             []int
	Closed           []bool
}

// Quiet is a row of steps in which nothing moves and nothing asks: each is one settled
// interval and ok.
type Quiet struct {
	Start int64 // of the first step, ns
	Step  int64 // length of each, ns
	// First is the lane of the first; the k-th is in lane (First+k) mod vector.Lanes.
	First   int
	Count   int // 1 to vector.Lanes
	State   *Lanes
	Devices []DeviceState // the same in all of them
	Solver  string        // path of the solutions
}

// lane is that of the k-th step.
func (q *Quiet) lane(k int) int { return (q.First + k) % vector.Lanes }

// Whole tells whether a step must come as Interval and Step, and not in a Quiet: a row
// of the logs ends with it, or what is asked of it is not in Lanes.
func (w *Writer) Whole(start, end int64) bool {
	return w.stats.judge.drops || w.storage != nil || w.allocation != nil || w.rowEnds(&Step{Start: start, End: end})
}

// Quiet takes steps as if each had come as an Interval and a Step.
func (w *Writer) Quiet(q *Quiet) error {
	if w.err != nil {
		return w.err
	}
	for k := range q.Count {
		s := q.unpack(k, w.plan)
		start := q.Start + int64(k)*q.Step
		balance := w.balance
		if err := w.Interval(&Interval{Start: start, End: start + q.Step, Settled: true, State: s, Devices: q.Devices}); err != nil {
			return err
		}
		if err := w.Step(&Step{Start: start, End: start + q.Step, Last: s, Solver: q.Solver}); err != nil {
			return err
		}
		balance.checked += 2
		w.balance = balance
	}
	return nil
}

// unpack returns the k-th step as a State.
func (q *Quiet) unpack(k int, p *Plan) *State {
	l, x := q.State, q.lane(k)
	s := &State{V: make([]complex128, len(l.Slot)), Flow: make([]complex128, len(l.Flow)/vector.Width), Coupling: make([]complex128, len(l.Coupling)/vector.Width),
		Source: make([][3]complex128, len(p.Model.Sources)), Load: []complex128{complex(l.Load[x], 0)}, Generation: []complex128{complex(l.Generation[x], 0)}, Taps: l.Taps, Closed: l.Closed}
	for u, at := range l.Slot {
		s.V[u] = vector.At(l.V, int(at), x)
	}
	for i := range s.Flow {
		s.Flow[i] = vector.At(l.Flow, i, x)
	}
	for i := range s.Coupling {
		s.Coupling[i] = vector.At(l.Coupling, i, x)
	}
	for i := range s.Source {
		for ph := range 3 {
			s.Source[i][ph] = vector.At(l.Source, 3*i+ph, x)
		}
	}
	return s
}

// Whole tells whether a step must come as Interval and Step.
func (t *Totals) Whole(start, end int64) bool { return t.stats.judge.drops }

// Quiet takes steps as if each had come as an Interval and a Step.
func (t *Totals) Quiet(q *Quiet) error {
	for k := range q.Count {
		start := q.Start + int64(k)*q.Step
		if err := t.Interval(&Interval{Start: start, End: start + q.Step, Settled: true, State: q.unpack(k, t.plan), Devices: q.Devices}); err != nil {
			return err
		}
		if err := t.Step(&Step{Start: start, End: start + q.Step, Solver: q.Solver}); err != nil {
			return err
		}
	}
	return nil
}

// Whole tells whether a step must come as Interval and Step.
func (t *Tally) Whole(start, end int64) bool { return t.w.stats.judge.drops }

// Quiet takes steps as if each had come as an Interval and a Step.
func (t *Tally) Quiet(q *Quiet) error {
	for k := range q.Count {
		start := q.Start + int64(k)*q.Step
		if err := t.Interval(&Interval{Start: start, End: start + q.Step, Settled: true, State: q.unpack(k, t.w.plan), Devices: q.Devices}); err != nil {
			return err
		}
		if err := t.Step(&Step{Start: start, End: start + q.Step, Solver: q.Solver}); err != nil {
			return err
		}
	}
	return nil
}
