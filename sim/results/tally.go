package results

import (
	"bytes"
	"encoding/csv"
	"fmt"
	"math"
	"time"
)

// Tally makes the statistics of a run as its results folder would have them, without
// writing anything: for runs of which only a few numbers are wanted. It is a
// sim.Recorder.
type Tally struct{ w Writer }

// NewTally prepares the statistics of a run.
func NewTally(p *Plan) *Tally {
	t := &Tally{Writer{plan: p, clock: newZoneClock(p.Settings.Period.Zone), solver: map[string]int{}}}
	w := &t.w
	w.meter = NewMeter(p.Network)
	w.stats = newStatistics(p, w.meter, 0)
	w.pend = newPending(w.meter, len(w.stats.judge.services), len(p.Devices))
	w.duty = make([]duty, len(p.Devices))
	w.startPositions()
	return t
}

// Meter is the meter that the run is read with.
func (t *Tally) Meter() *Meter { return t.w.meter }

// Action counts a movement of a device.
func (t *Tally) Action(a *Action) error {
	w := &t.w
	d := &w.plan.Devices[a.Device]
	w.duty[a.Device].act(a, w.clock.dayOf(a.Time))
	month := w.stats.month(w.clock.monthOf(a.Time))
	for _, b := range [...]*bucket{&w.stats.total, month} {
		if d.Kind == TapDevice {
			b.tapOperations++
		} else {
			b.capOperations++
		}
	}
	return nil
}

// Interval takes an interval, as Writer.Interval does.
func (t *Tally) Interval(iv *Interval) error { return t.w.Interval(iv) }

// Step closes a step: what is low or unsolved enters no statistic.
func (t *Tally) Step(s *Step) error {
	w := &t.w
	month := w.stats.month(w.clock.monthOf(s.Start))
	for _, b := range [...]*bucket{&w.stats.total, month} {
		b.steps++
		switch s.Status {
		case Low:
			b.low++
		case Unsolved:
			b.unsolved++
		}
	}
	if s.Status == OK {
		w.pend.commit(w.stats, month, w.duty)
	}
	w.pend.reset()
	return nil
}

// Summary returns the rows of summary.csv.
func (t *Tally) Summary() ([]SummaryRow, error) {
	t.w.stats.gather()
	var out memory
	f := &outFile{name: "summary.csv", out: &out, sum: noHash{}}
	if err := t.w.writeSummary(f); err != nil {
		return nil, err
	}
	if err := f.finish(); err != nil {
		return nil, err
	}
	rows, err := csv.NewReader(&out.Buffer).ReadAll()
	if err != nil {
		return nil, fmt.Errorf("summary: %w", err)
	}
	var s []SummaryRow
	for _, r := range rows[1:] {
		s = append(s, SummaryRow{Quantity: r[0], Value: r[1], Unit: r[2]})
	}
	return s, nil
}

// memory is a sink that keeps what is written.
type memory struct{ bytes.Buffer }

func (*memory) Sync() error  { return nil }
func (*memory) Close() error { return nil }

// noHash is the hash of a file that nobody asks the hash of.
type noHash struct{}

func (noHash) Write(p []byte) (int, error) { return len(p), nil }
func (noHash) Sum(b []byte) []byte         { return b }
func (noHash) Reset()                      {}
func (noHash) Size() int                   { return 0 }
func (noHash) BlockSize() int              { return 1 }

// PointLimits are the voltage limits of a point, p.u., and whether it is judged.
type PointLimits struct {
	VoltageLimits
	Source string
	Judged bool
}

// PointTally is what a run comes to at one of Meter.Points: settled intervals of ok
// steps. Voltages are p.u.; NaN where there was none.
type PointTally struct {
	Point
	Limits           PointLimits
	Min, Max         float64
	MinTime, MaxTime int64 // ns
	// Hours outside the limits, at the meter where [limits] has an allowance.
	BelowA, AboveA, BelowB, AboveB float64
}

// Limits returns the limits of every point.
func (t *Tally) Limits() []PointLimits {
	j := t.w.stats.judge
	out := make([]PointLimits, len(t.w.meter.Points))
	for i := range out {
		c := &j.classes[j.of[i]]
		out[i] = PointLimits{VoltageLimits{OuterLow: c.LowB, Low: c.LowA, High: c.HighA, OuterHigh: c.HighB}, c.Source, j.judged[i]}
	}
	return out
}

// Points returns what the run comes to at each point.
func (t *Tally) Points() []PointTally {
	limits := t.Limits()
	out := make([]PointTally, len(limits))
	h := func(ns int64) float64 { return float64(ns) / float64(hour) }
	for i := range out {
		p := &t.w.stats.points[i]
		out[i] = PointTally{Point: t.w.meter.Points[i], Limits: limits[i], Min: p.min, Max: p.max, MinTime: p.minTime, MaxTime: p.maxTime,
			BelowA: h(p.belowA), AboveA: h(p.aboveA), BelowB: h(p.belowB), AboveB: h(p.aboveB)}
		if p.min > p.max {
			out[i].Min, out[i].Max = math.NaN(), math.NaN()
		}
	}
	return out
}

// Loading returns the rows of loading.csv, in their order.
func (t *Tally) Loading() []LoadingRow {
	st := t.w.stats
	var out []LoadingRow
	for i := range t.w.meter.loading {
		row, p := &t.w.meter.loading[i], &st.loadPeak[i]
		r := LoadingRow{Element: row.element, Phase: row.phase, Peak: p.orNaN(), Rating: math.NaN(), Percent: math.NaN(),
			HoursAboveRating: float64(st.aboveRating[i]) / float64(hour), HoursAboveEmergency: float64(st.aboveEmergency[i]) / float64(hour)}
		if p.known {
			r.PeakTime = time.Unix(0, p.time)
		}
		if row.rating > 0 {
			r.Rating, r.Percent = row.rating, 100*r.Peak/row.rating
		}
		out = append(out, r)
	}
	return out
}

// Operations returns how often each of Plan.Devices acted.
func (t *Tally) Operations() []int {
	out := make([]int, len(t.w.duty))
	for i := range t.w.duty {
		out[i] = t.w.duty[i].operations
	}
	return out
}

// Percent fills out, by the rows of loading.csv, with the loading of an instant that
// was read, in per cent of the rating; NaN where none is known.
func (m *Meter) Percent(r *Reading, out []float64) []float64 {
	out = out[:0]
	for i := range m.loading {
		p := math.NaN()
		if m.loading[i].rating > 0 {
			p = 100 * r.loading[i] / m.loading[i].rating
		}
		out = append(out, p)
	}
	return out
}

// Entering measures the real power that elements take in at their from ends.
type Entering struct {
	Name string
	flow *endFlow
}

// Regulators returns what measures each of Model.Regulators.
func (m *Meter) Regulators() []Entering {
	var out []Entering
	for i := range m.net.Model.Regulators {
		name := m.net.Model.Regulators[i].Name
		// By its own kinds and not by name alone: a section may be called like it.
		out = append(out, Entering{name, m.regulatorFlow(i)})
	}
	return out
}

// KW is the real power at an instant.
func (e Entering) KW(s *State) float64 { return real(e.flow.power(s)) / 1000 }

// LoadingName names a row of loading.csv: element.phase, of a bank the element.
func (m *Meter) LoadingName(row int) string {
	r := &m.loading[row]
	if r.phase == "" {
		return r.element
	}
	return r.element + "." + r.phase
}
