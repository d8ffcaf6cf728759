package study

import (
	"context"
	"math"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// trial is one run of a study over its period, kept in memory as far as impact and
// hosting ask for it.
type trial struct {
	name    string
	engine  *sim.Engine
	tally   *results.Tally
	outcome *results.Outcome
	summary map[string]results.SummaryRow
	points  []results.PointTally
	loading []results.LoadingRow
	acted   []int // by Plan.Devices
	reverse []reversed
}

// reversed is how long and how far power flows backwards through a place: settled
// intervals of ok steps.
type reversed struct {
	place string
	hours float64
	most  float64 // kW backwards, 0 where it never does
	at    int64
}

// runTrial runs a study with further recorders. Its numbers are those that the results
// folder of the same study would hold.
func runTrial(ctx context.Context, w *baseWalks, st *feeder.Study, demo bool, more func(*sim.Engine) ([]sim.Recorder, error)) (*trial, error) {
	e, err := w.prepare(ctx, st, demo)
	if err != nil {
		return nil, err
	}
	t := &trial{name: st.Case, engine: e, tally: results.NewTally(e.Plan)}
	back := newReverseWatch(e, t.tally.Meter())
	recorders := []sim.Recorder{t.tally, back}
	if more != nil {
		own, err := more(e)
		if err != nil {
			return nil, err
		}
		recorders = append(recorders, own...)
	}
	if t.outcome, err = e.Run(ctx, recorders...); err != nil {
		return nil, err
	}
	for _, r := range recorders {
		if f, ok := r.(finisher); ok {
			if err := f.finish(); err != nil {
				return nil, err
			}
		}
	}
	rows, err := t.tally.Summary()
	if err != nil {
		return nil, err
	}
	t.summary = make(map[string]results.SummaryRow, len(rows))
	for _, r := range rows {
		t.summary[r.Quantity] = r
	}
	t.points, t.loading, t.acted, t.reverse = t.tally.Points(), t.tally.Loading(), t.tally.Operations(), back.total
	return t, nil
}

// finisher is a recorder that has something left to do behind the last step.
type finisher interface{ finish() error }

// number is a row of the trial's summary, NaN where there is none.
func (t *trial) number(quantity string) float64 { return parse(t.summary[quantity].Value) }

// text is the same as it is written.
func (t *trial) text(quantity string) string { return t.summary[quantity].Value }

// reverseWatch is a recorder of reverse power at the source and at every regulator.
type reverseWatch struct {
	meter   *results.Meter
	reading *results.Reading
	through []results.Entering
	total   []reversed // the source first
	step    []reversed // of the step at hand, ns in hours
}

var _ sim.Recorder = (*reverseWatch)(nil)

func newReverseWatch(e *sim.Engine, m *results.Meter) *reverseWatch {
	w := &reverseWatch{meter: m, reading: m.NewReading(), through: m.Regulators()}
	w.total = append(w.total, reversed{place: "source"})
	for _, x := range w.through {
		w.total = append(w.total, reversed{place: x.Name})
	}
	w.step = make([]reversed, len(w.total))
	return w
}

func (w *reverseWatch) Action(*results.Action) error { return nil }

func (w *reverseWatch) Interval(iv *results.Interval) error {
	if !iv.Settled || iv.End <= iv.Start {
		return nil
	}
	ns := float64(iv.End - iv.Start)
	w.meter.Read(iv.State, w.reading)
	w.see(0, real(w.reading.Source)/1000, ns, iv.Start)
	for i, x := range w.through {
		w.see(i+1, x.KW(iv.State), ns, iv.Start)
	}
	return nil
}

func (w *reverseWatch) see(place int, kW, ns float64, at int64) {
	if kW >= 0 {
		return
	}
	s := &w.step[place]
	s.hours += ns
	if -kW > s.most {
		s.most, s.at = -kW, at
	}
}

func (w *reverseWatch) Step(s *results.Step) error {
	for i := range w.step {
		x, t := &w.step[i], &w.total[i]
		if s.Status == results.OK {
			t.hours += x.hours / 3.6e12
			if x.most > t.most {
				t.most, t.at = x.most, x.at
			}
		}
		*x = reversed{}
	}
	return nil
}

// positionsLog keeps where the devices stand at the end of each step, what batteries
// deliver (kW), and which steps are ok.
type positionsLog struct {
	taps    [][]int
	closed  [][]bool
	storage [][]float64
	ok      []bool
}

func (l *positionsLog) Interval(*results.Interval) error { return nil }
func (l *positionsLog) Action(*results.Action) error     { return nil }

func (l *positionsLog) Step(s *results.Step) error {
	var taps []int
	var closed []bool
	var storage []float64
	if s.Last != nil {
		taps, closed = append(taps, s.Last.Taps...), append(closed, s.Last.Closed...)
		for _, va := range s.Last.Storage {
			storage = append(storage, real(va)/1000)
		}
	}
	l.taps, l.closed, l.ok = append(l.taps, taps), append(l.closed, closed), append(l.ok, s.Status == results.OK)
	l.storage = append(l.storage, storage)
	return nil
}

// stepRecorder is a recorder that wants the ends of steps alone.
type stepRecorder func(*results.Step) error

func (f stepRecorder) Interval(*results.Interval) error { return nil }
func (f stepRecorder) Action(*results.Action) error     { return nil }
func (f stepRecorder) Step(s *results.Step) error       { return f(s) }

// nan is a number that is not known.
var nan = math.NaN()
