package sim

import (
	"yearflow/sim/powerflow"
	"yearflow/sim/powerflow/vector"
	"yearflow/sim/results"
)

// gatherer takes steps several at a time, their intervals side by side.
type gatherer interface {
	// Gathers tells whether no more of a step is needed than is in results.Gathered.
	Gathers() bool
	Gathered(*results.Gathered) error
}

// gathering puts the intervals of steps side by side where a relay receives them, so that
// what no control looks at is read of as many at once as there are lanes. A step is known
// to be ok before any of it is gathered. What is gathered depends on the order of events
// alone.
type gathering struct {
	r         *relay
	recorders []gatherer
	events    []*event // that have been gathered
	lanes     int      // intervals among them
	month     int      // of all of them
	open      []*event // of the step at hand
	single    bool     // the step at hand is handed on as it comes

	abreast *powerflow.Abreast
	v       [vector.Lanes][]complex128
	rows    []float64 // ones, then the values of each series, by lane, where states were sensed
	moves   []results.Action
	out     results.Gathered
}

const (
	// openMost bounds the events of one step, and of all that are gathered.
	openMost = 24
	// gatherLeast is the number of intervals from which on lanes pay.
	gatherLeast = 3
)

// newGathering returns nil where a recorder must see intervals one by one.
func newGathering(r *relay) *gathering {
	g := &gathering{r: r, abreast: r.currents.NewAbreast(), rows: make([]float64, (len(r.e.in.values)+1)*vector.Lanes)}
	for _, x := range r.recorders {
		to, ok := x.(gatherer)
		if !ok || !to.Gathers() {
			return nil
		}
		g.recorders = append(g.recorders, to)
	}
	for k := range vector.Lanes {
		g.rows[k] = 1
	}
	g.out.State = &results.Lanes{Flow: r.currents.Flow, Coupling: r.currents.Coupling, Source: r.lanes.Source, Turned: g.abreast.Turned}
	g.out.State.V, g.out.State.Slot = g.abreast.Block.Voltages()
	return g
}

// sort takes an event: it waits for its step to be whole, and the step for others.
func (g *gathering) sort(ev *event) {
	if ev.quiet > 0 || !ev.interval && !ev.step && !ev.action {
		if ev.quiet > 0 {
			g.flush()
		}
		g.r.handle(ev)
		return
	}
	g.open = append(g.open, ev)
	ends := ev.step
	switch {
	case !g.single && ends && g.fits():
		g.keep()
	case g.single || ends || len(g.open) == openMost:
		if !g.single {
			g.flush()
		}
		g.hand(&g.open)
		g.single = true
	}
	if ends {
		g.single = false
	}
}

// fits tells whether the step at hand, which is whole, can stand in lanes.
func (g *gathering) fits() bool {
	last := g.open[len(g.open)-1]
	if !last.interval || last.asStep.Status != results.OK {
		return false
	}
	for _, ev := range g.open {
		if !ev.action && ev.asInterval.End <= ev.asInterval.Start {
			return false
		}
	}
	return true
}

// keep puts the step at hand behind those that have been gathered. What has no room any
// more begins the next lanes.
func (g *gathering) keep() {
	last := g.open[len(g.open)-1]
	month := g.r.e.in.monthOf(last.number)
	if month != g.month || len(g.events)+len(g.open) > openMost {
		g.flush()
	}
	g.month = month
	single := false
	for i, ev := range g.open {
		g.open[i] = nil
		if single { // the step goes on as it has begun
			g.r.handle(ev)
			continue
		}
		g.events = append(g.events, ev)
		if ev.interval {
			ev.asStep = last.asStep
			if g.lanes++; g.lanes == vector.Lanes {
				single = !g.flush()
			}
		}
	}
	g.open = g.open[:0]
}

// end hands on what is left, of a run that ended in the midst of a step too.
func (g *gathering) end() {
	g.flush()
	g.hand(&g.open)
}

// flush hands on what has been gathered. It reports whether that went side by side.
func (g *gathering) flush() (abreast bool) {
	if g.lanes >= gatherLeast && g.r.err == nil && g.read() {
		abreast = true
		for _, rec := range g.recorders {
			if g.r.fail(rec.Gathered(&g.out)); g.r.err != nil {
				break
			}
		}
		for i, ev := range g.events {
			g.events[i] = nil
			g.r.free <- ev
		}
		g.events = g.events[:0]
	}
	g.hand(&g.events)
	g.lanes = 0
	return abreast
}

// hand hands events on one by one.
func (g *gathering) hand(events *[]*event) {
	for i, ev := range *events {
		(*events)[i] = nil
		g.r.handle(ev)
	}
	*events = (*events)[:0]
}

// read reads what has been gathered side by side. It reports whether it can be: below the
// corner injections draw otherwise.
func (g *gathering) read() bool {
	r, out := g.r, &g.out
	l := out.State
	g.list()
	k, sensed := 0, false // all of them are, or none
	for _, ev := range g.events {
		if !ev.interval {
			continue
		}
		s := &ev.state
		out.Start[k], out.End[k], out.Devices[k], out.Taps[k], out.Closed[k] = ev.asInterval.Start, ev.asInterval.End, ev.devices, s.Taps, s.Closed
		if ev.asInterval.Settled {
			out.Settled |= 1 << k
		}
		g.load(k, ev)
		generation, load := sum(s.Generation), sum(s.Load)
		l.Generation[k], l.GenerationVar[k] = real(generation), imag(generation)
		l.Load[k], l.LoadVar[k] = real(load), imag(load)
		sensed = ev.sensed
		k++
		if k == g.lanes {
			for ; k < vector.Lanes; k++ { // lanes beyond stand as the last does
				g.load(k, ev)
			}
		}
	}
	r.solved = -1 // the currents of quiet steps are read anew
	g.abreast.Load(&g.v)
	g.abreast.Flows(&out.Closed)
	if !sensed {
		return true
	}
	r.follow(g.month)
	r.currents.Drive(g.rows)
	below := g.abreast.Draws()
	for k := range g.lanes {
		l.Load[k] = r.currents.Drawn[k] + l.Generation[k]
		l.LoadVar[k] = g.abreast.Var[k] + l.GenerationVar[k]
	}
	return below&(1<<g.lanes-1) == 0
}

func sum(x []complex128) (all complex128) {
	for _, va := range x {
		all += va
	}
	return all
}

// list lists the steps and their actions.
func (g *gathering) list() {
	out := &g.out
	out.Count, out.Settled, out.Steps = g.lanes, 0, out.Steps[:0]
	g.moves = g.moves[:0]
	for _, ev := range g.events {
		if ev.action {
			g.moves = append(g.moves, ev.asAction)
		}
	}
	var s results.GatheredStep
	from := 0
	for i, ev := range g.events {
		if ev.action {
			s.Moves = g.moves[from : from+len(s.Moves)+1]
		}
		if !ev.interval {
			continue
		}
		s.Step, s.More = ev.asStep, !ev.step
		s.Intervals++
		if ev.step || i == len(g.events)-1 {
			s.Last = nil
			out.Steps = append(out.Steps, s)
			from += len(s.Moves)
			s = results.GatheredStep{}
		}
	}
}

// load puts an interval into a lane.
func (g *gathering) load(k int, ev *event) {
	l, s := g.out.State, &ev.state
	g.v[k], g.out.Closed[k] = s.V, s.Closed
	for i, z := range s.Coupling {
		vector.Put(l.Coupling, i, k, z)
	}
	for i := range s.Source {
		for p, z := range s.Source[i] {
			vector.Put(l.Source, 3*i+p, k, z)
		}
	}
	for i, v := range ev.values {
		g.rows[(i+1)*vector.Lanes+k] = v
	}
}
