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

	// Of a Gathered alone, which tells of reactive power too: Turned is the values of V
	// times −j, and the others are var.
	Turned                 []float64
	LoadVar, GenerationVar [vector.Lanes]float64
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
	// Settling: some request stands in all of them, so that they are settling intervals.
	Settling bool
}

// lane is that of the k-th step.
func (q *Quiet) lane(k int) int { return int(uint(q.First+k) % vector.Lanes) }

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
	if err := w.quiet(q); err != nil {
		return w.fail(err)
	}
	w.solver[q.Solver] += q.Count
	copy(w.taps, q.State.Taps)
	copy(w.caps, q.State.Closed)
	return nil
}

func (w *Writer) quiet(q *Quiet) error {
	if err := q.check(); err != nil {
		return err
	}
	for rest := *q; rest.Count > 0; {
		part, month := rest.cut(w.clock)
		w.stats.quiet(&part, w.stats.month(month))
		r := w.stats.watch
		r.balance(&part, &w.balance)
		energies := r.energies(&part)
		w.row.quiet(&part, r, &energies)
	}
	for i, d := range q.Devices {
		w.duty[i].hours.add(d, int64(q.Count)*q.Step, !q.Settling)
	}
	return nil
}

// cut takes the steps off that begin in the month of the first, and returns them and the
// month.
func (q *Quiet) cut(clock *zoneClock) (part Quiet, month int) {
	month = clock.monthOf(q.Start)
	part = *q
	if last := q.Start + int64(q.Count-1)*q.Step; clock.monthOf(last) != month {
		part.Count = 1
		for clock.monthOf(q.Start+int64(part.Count)*q.Step) == month {
			part.Count++
		}
	}
	q.Start += int64(part.Count) * q.Step
	q.First = q.lane(part.Count)
	q.Count -= part.Count
	return part, month
}

// quiet adds the steps to the row, which goes on behind them.
func (r *row) quiet(q *Quiet, w *watch, e *energies) {
	r.begin(q.Start)
	r.steps += q.Count
	r.solved += q.Count
	r.last = false // what a row says of its end is read there
	for k := range q.Count {
		x := q.lane(k)
		r.lowest, r.highest = min(r.lowest, w.least[x]), max(r.highest, w.most[x])
	}
	r.energies.merge(e)
}

// Whole tells whether a step must come as Interval and Step.
func (t *Tally) Whole(start, end int64) bool { return t.w.stats.judge.drops }

// Quiet takes steps as if each had come as an Interval and a Step.
func (t *Tally) Quiet(q *Quiet) error {
	if t.w.err != nil {
		return t.w.err
	}
	if err := t.w.quiet(q); err != nil {
		return t.w.fail(err)
	}
	return nil
}
