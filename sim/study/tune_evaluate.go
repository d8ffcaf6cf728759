package study

import (
	"context"
	"errors"
	"fmt"
	"runtime"
	"slices"
	"strings"

	"golang.org/x/sync/errgroup"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// evaluator runs candidate-years: an engine for each worker, whose sheets are changed
// in place. Nothing is written but the log.
type evaluator struct {
	place   Place
	knobs   []Knob
	model   *feeder.Model // of the base, never changed
	log     *tuneLog
	workers chan *tuneWorker // idle ones; nil where one is still to be made
}

// tuneWorker is an engine with what it counts into.
type tuneWorker struct {
	engine *sim.Engine
	totals *results.Totals
}

func newEvaluator(p Place, base *feeder.Study, knobs []Knob, log *tuneLog, workers int) *evaluator {
	if workers <= 0 {
		workers = runtime.GOMAXPROCS(0)
	}
	e := &evaluator{place: p, knobs: knobs, model: base.Model, log: log, workers: make(chan *tuneWorker, workers)}
	for range workers {
		e.workers <- nil
	}
	return e
}

// prepareCandidate makes the engine that candidates are run on. It bears the name of a
// case, for candidates are cases: loads that share a measured total keep what the base
// gave them.
func prepareCandidate(p Place) (*sim.Engine, error) {
	st, err := feeder.Open(p.FS, feeder.Base)
	if err != nil {
		return nil, err
	}
	st.Case = "candidate"
	return sim.Prepare(st, sim.Options{Demo: p.Demo})
}

// key is the value of every target of every knob: what tells candidates apart.
// values are by knob; nil is the base.
func (e *evaluator) key(values []float64) string {
	var out []string
	for i := range e.knobs {
		k := &e.knobs[i]
		for t := range k.targets {
			v := k.of(e.model, &k.targets[t])
			if values != nil {
				v = values[i]
			}
			out = append(out, fmt.Sprintf("%s %s=%s", k.targets[t].name, k.Setting, k.cellOf(v)))
		}
	}
	slices.Sort(out)
	return strings.Join(out, "; ")
}

// evaluation is what became of a candidate: sums, or why no sheet can hold it.
type evaluation struct {
	sums    *results.Sums
	invalid string
}

// batch evaluates candidates on all workers; the results stand in their order, whatever
// the number of workers.
func (e *evaluator) batch(ctx context.Context, candidates [][]float64) ([]evaluation, error) {
	out := make([]evaluation, len(candidates))
	g, ctx := errgroup.WithContext(ctx)
	g.SetLimit(cap(e.workers))
	for i, values := range candidates {
		g.Go(func() (err error) {
			out[i], err = e.evaluate(ctx, values)
			return err
		})
	}
	return out, g.Wait()
}

func (e *evaluator) evaluate(ctx context.Context, values []float64) (evaluation, error) {
	key := e.key(values)
	if s, ok := e.log.take(key); ok {
		return evaluation{sums: s}, nil
	}
	if err := ctx.Err(); err != nil {
		return evaluation{}, err
	}
	taps, caps, invalid := e.sheets(values)
	if invalid != "" {
		return evaluation{invalid: invalid}, nil
	}
	w := <-e.workers
	defer func() { e.workers <- w }()
	if w == nil {
		engine, err := prepareCandidate(e.place)
		if err != nil {
			return evaluation{}, err
		}
		w = &tuneWorker{engine: engine, totals: results.NewTotals(engine.Plan)}
	}
	for _, t := range e.touched() {
		var err error
		if t.capacitor {
			err = w.engine.SetCapacitorSheet(t.name, caps[t.name])
		} else {
			err = w.engine.SetTapSheet(t.name, taps[t.name])
		}
		if err != nil {
			return evaluation{invalid: err.Error()}, nil
		}
	}
	w.totals.Reset()
	if _, err := w.engine.Run(ctx, w.totals); err != nil {
		if errors.Is(err, context.Canceled) {
			return evaluation{}, err
		}
		return evaluation{invalid: err.Error()}, nil
	}
	s := w.totals.Sums()
	return evaluation{sums: &s}, e.log.put(key, &s)
}

// touched lists every device that a knob turns, once, in the order of the knobs.
func (e *evaluator) touched() (out []target) {
	seen := map[string]bool{}
	for i := range e.knobs {
		for _, t := range e.knobs[i].targets {
			if !seen[t.name] {
				seen[t.name] = true
				out = append(out, t)
			}
		}
	}
	return out
}

// sheets makes the sheets of all touched devices; invalid says why a candidate is none.
func (e *evaluator) sheets(values []float64) (taps map[string]feeder.TapSettings, caps map[string]feeder.CapacitorSettings, invalid string) {
	taps, caps = map[string]feeder.TapSettings{}, map[string]feeder.CapacitorSettings{}
	for _, t := range e.touched() {
		if t.capacitor {
			caps[t.name] = *e.model.Capacitors[t.bank].Control
		} else {
			taps[t.name] = *e.model.Regulators[t.bank].Units[t.unit].Settings
		}
	}
	if values == nil {
		return taps, caps, ""
	}
	for i := range e.knobs {
		k := &e.knobs[i]
		for _, t := range k.targets {
			if t.capacitor {
				s := caps[t.name]
				*k.kind.cap(&s) = k.inSheet(values[i])
				caps[t.name] = s
			} else {
				s := taps[t.name]
				*k.kind.tap(&s) = k.inSheet(values[i])
				taps[t.name] = s
			}
		}
	}
	for _, t := range e.touched() {
		if !t.capacitor {
			continue
		}
		was, now := e.model.Capacitors[t.bank].Control, caps[t.name]
		if was.Control != feeder.CapacitorTime && (was.On < was.Off) != (now.On < now.Off) {
			return nil, nil, fmt.Sprintf("%s: on and off change their order, and with it which side closes", t.name)
		}
	}
	return taps, caps, ""
}
