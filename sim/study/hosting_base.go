package study

import (
	"context"
	"slices"

	"yearflow/sim"
	"yearflow/sim/results"
)

// baseVoltages are the voltages of the base at the end of every step in which a new unit
// would deliver. Where the devices of a candidate stand as they do in the base, those are
// what the loss of the unit leads to, and nothing has to be solved.
type baseVoltages struct {
	log   *positionsLog
	wants []float64 // output by step
	v     [][]complex128
	room  int // numbers that may still be kept
}

// mostKept bounds what is kept, 16 bytes a number: a year by the hour of 1,500
// node.phases. Whether a step is kept depends on the study alone.
const mostKept = 16 << 20

// newBaseVoltages returns nil where what stands in the base depends on more than its
// inputs and where the devices stand: stores, lags, and loads that are shared anew.
func newBaseVoltages(e *sim.Engine, log *positionsLog, output []float64) *baseVoltages {
	m := e.Study.Model
	if len(m.Batteries)+len(m.Chargers)+len(m.Functions) > 0 || e.Study.Settings.Allocation != nil {
		return nil
	}
	return &baseVoltages{log: log, wants: output, room: mostKept}
}

var _ sim.Recorder = (*baseVoltages)(nil)

func (b *baseVoltages) Interval(*results.Interval) error { return nil }
func (b *baseVoltages) Action(*results.Action) error     { return nil }

func (b *baseVoltages) Step(s *results.Step) error {
	var v []complex128
	if k := len(b.v); s.Status == results.OK && s.Last != nil && b.wants[k] != 0 && b.room >= len(s.Last.V) {
		b.room -= len(s.Last.V)
		v = slices.Clone(s.Last.V)
	}
	b.v = append(b.v, v)
	return nil
}

// at is for jump.known.
func (b *baseVoltages) at(step int, s *results.State) []complex128 {
	if slices.Equal(s.Taps, b.log.taps[step]) && slices.Equal(s.Closed, b.log.closed[step]) {
		return b.v[step]
	}
	return nil
}

// probes lends engines of the base for jumps, one to a candidate at a time: what they were
// used for before leaves no trace in what they solve.
type probes struct{ free chan *sim.Engine }

func newProbes(workers int) *probes { return &probes{make(chan *sim.Engine, workers)} }

// take returns a free engine, or makes one.
func (p *probes) take(ctx context.Context, h *hosting) (*sim.Engine, error) {
	select {
	case e := <-p.free:
		return e, nil
	default:
		return h.walks.prepare(ctx, variant(h.st, "hosting, lost", nil), h.demo)
	}
}

func (p *probes) give(e *sim.Engine) {
	select {
	case p.free <- e:
	default:
	}
}
