package study

import (
	"context"
	"fmt"
	"math"
	"math/cmplx"
	"slices"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// jump watches how far the voltages jump when units are lost, or come back, at the end
// of every step in which they deliver or draw power: the devices are held where they
// stand, the loads and every other unit stay as they are. The change at a point is
//
//	d = 100·(|V after| − |V before|)/V nominal, in %
//
// The steps in which the units do nothing are left out, because nothing changes there.
// Inverter functions are in their steady state before and after.
type jump struct {
	probe    *sim.Engine
	points   []results.Point
	storage  func(step int, s *results.State) []float64 // kW by the probe's batteries
	active   func(step int, s *results.State) bool
	known    func(step int, s *results.State) []complex128 // the voltages after, where they were found before; nil: solve
	step     int
	ends     []stepEnd
	held     []sim.HeldInstant
	worst    []change  // by point
	low, hi  []float64 // p.u., of the probe: the voltage with the devices held
	lowAt    []int64
	hiAt     []int64
	skipped  int // steps that had no solution after the jump
	firstOff string
}

// change is the largest change of a voltage, by magnitude.
type change struct {
	percent float64 // signed
	at      int64
}

var _ sim.Recorder = (*jump)(nil)

// newJump prepares to jump from the state of running to that of a study with other
// units. active tells in which steps the units do something.
func newJump(ctx context.Context, w *baseWalks, running *sim.Engine, to *feeder.Study, demo bool, active func(step int, s *results.State) bool) (*jump, error) {
	probe, err := w.prepare(ctx, to, demo)
	if err != nil {
		return nil, err
	}
	return jumpTo(running, probe, active)
}

// jumpTo is newJump to an engine that is there already; no other may use it meanwhile.
func jumpTo(running, probe *sim.Engine, active func(step int, s *results.State) bool) (*jump, error) {
	to := probe.Study
	j := newEnds(running)
	j.probe, j.active = probe, active
	if n := len(probe.Meter().Points); n != len(j.points) {
		return nil, fmt.Errorf("with and without the units there are %d and %d node.phases to compare: a unit must stand at a node of the feeder", len(j.points), n)
	}
	from := running.Study.Model.Batteries
	var at []int
	for _, b := range to.Model.Batteries {
		at = append(at, slices.IndexFunc(from, func(x feeder.Battery) bool { return x.Name == b.Name }))
	}
	if len(at) > 0 && !slices.Contains(at, -1) { // what stays delivers what it did
		j.storage = func(_ int, s *results.State) []float64 {
			kW := make([]float64, len(at))
			for i, k := range at {
				kW[i] = real(s.Storage[k]) / 1000
			}
			return kW
		}
	}
	return j, nil
}

// newEnds is a jump of nothing: it keeps the extremes of the voltages at the ends of the
// steps.
func newEnds(running *sim.Engine) *jump {
	j := &jump{points: running.Meter().Points, active: func(int, *results.State) bool { return false }}
	n := len(j.points)
	j.worst, j.low, j.hi = make([]change, n), make([]float64, n), make([]float64, n)
	j.lowAt, j.hiAt = make([]int64, n), make([]int64, n)
	for i := range n {
		j.low[i], j.hi[i] = math.Inf(1), math.Inf(-1)
	}
	return j
}

func (j *jump) Interval(*results.Interval) error { return nil }
func (j *jump) Action(*results.Action) error     { return nil }

func (j *jump) Step(s *results.Step) error {
	step := j.step
	j.step++
	if s.Status != results.OK || s.Last == nil {
		return nil
	}
	e := j.end()
	e.start, e.before = s.Start, append(e.before[:0], s.Last.V...)
	e.after, e.solve = e.before, false // nothing changes where the units do nothing
	if j.active(step, s.Last) {
		if j.known != nil {
			e.after = j.known(step, s.Last)
		} else {
			e.after = nil
		}
		if e.solve = e.after == nil; e.solve {
			j.solve(e, step, s.Last)
		}
	}
	if len(j.ends) == cap(j.ends) {
		return j.finish()
	}
	return nil
}

// stepEnd is the end of a step that waits for the voltages after its jump.
type stepEnd struct {
	start         int64
	before, after []complex128
	solve         bool // after is to be solved
}

// end returns the next end of a step to fill, with the room of one that was there before.
func (j *jump) end() *stepEnd {
	if j.ends == nil {
		j.ends, j.held = make([]stepEnd, 0, atOnce), make([]sim.HeldInstant, 0, atOnce)
	}
	j.ends = j.ends[:len(j.ends)+1]
	return &j.ends[len(j.ends)-1]
}

// atOnce is the number of ends that are looked at together: jumps are solved side by side.
const atOnce = 16

// solve notes that the voltages after a jump are wanted.
func (j *jump) solve(e *stepEnd, step int, s *results.State) {
	j.held = j.held[:len(j.held)+1]
	h := &j.held[len(j.held)-1]
	h.Step, h.Start = step, e.before
	if h.V == nil { // positions that are nil would not be held
		h.V, h.Positions.Taps, h.Positions.Closed = make([]complex128, len(e.before)), []int{}, []bool{}
	}
	h.Positions.Taps, h.Positions.Closed = append(h.Positions.Taps[:0], s.Taps...), append(h.Positions.Closed[:0], s.Closed...)
	if h.Positions.Storage = nil; j.storage != nil {
		h.Positions.Storage = j.storage(step, s)
	}
}

// finish looks at the ends that wait.
func (j *jump) finish() error {
	if len(j.held) > 0 {
		if err := j.probe.HeldAll(j.held); err != nil {
			return err
		}
	}
	k := 0
	for i := range j.ends {
		e := &j.ends[i]
		if e.solve {
			h := &j.held[k]
			k++
			if !h.Found {
				if j.skipped++; j.firstOff == "" {
					j.firstOff = h.Where
				}
				continue
			}
			e.after = h.V
		}
		j.see(e)
	}
	j.ends, j.held = j.ends[:0], j.held[:0]
	return nil
}

// see takes the voltages after a jump from the end of a step.
func (j *jump) see(e *stepEnd) {
	for i := range j.points {
		p := &j.points[i]
		v, before := p.PU(e.after), p.PU(e.before)
		if v < j.low[i] {
			j.low[i], j.lowAt[i] = v, e.start
		}
		if v > j.hi[i] {
			j.hi[i], j.hiAt[i] = v, e.start
		}
		if d := 100 * (v - before); math.Abs(d) > math.Abs(j.worst[i].percent) {
			j.worst[i] = change{d, e.start}
		}
	}
}

// idle is the power, VA, below which a unit does nothing.
const idle = 1

// delivers tells of a running model which steps units do something in.
func (u units) delivers(m *feeder.Model) func(int, *results.State) bool {
	var gens, bats []int
	for i := range m.Generators {
		if u.generators[m.Generators[i].Name] {
			gens = append(gens, i)
		}
	}
	for i := range m.Batteries {
		if u.batteries[m.Batteries[i].Name] {
			bats = append(bats, i)
		}
	}
	return func(_ int, s *results.State) bool {
		for _, i := range gens {
			if cmplx.Abs(s.Generation[i]) > idle {
				return true
			}
		}
		for _, i := range bats {
			if cmplx.Abs(s.Storage[i]) > idle {
				return true
			}
		}
		return false
	}
}

// changeLimits are the limits of a rapid voltage change at the connection, % of nominal,
// above and up to 600 V.
//
// Source: IEEE Std 1547-2018, 7.2.2: 3 % at medium voltage, 5 % at low voltage.
const (
	changeLimitMV    = 3.0
	changeLimitLV    = 5.0
	changeSource     = "IEEE Std 1547-2018, 7.2.2 (3 % at medium, 5 % at low voltage; recalled from memory), held at every node.phase"
	lowVoltageHighKV = 0.6 // ANSI C84.1: up to 600 V
)

func changeLimit(p *results.Point) float64 {
	if p.NomKV > lowVoltageHighKV {
		return changeLimitMV
	}
	return changeLimitLV
}
