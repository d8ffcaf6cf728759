package sim

import (
	"fmt"
	"math"
	"math/cmplx"
	"slices"

	"yearflow/profiles"
	"yearflow/sim/feeder"
	"yearflow/sim/network"
	"yearflow/sim/results"
	"yearflow/sim/tables"
)

// meterPoint is one of Model.Measurements: where the model is read, and the series
// that was measured there.
type meterPoint struct {
	*feeder.Measurement
	series *profiles.Series
	scale  float64 // from the series' unit to that of the comparison
	// window is how long a sample lasts: a step, or an interval of the series where that
	// is whole steps long. Intervals begin at origin.
	window, origin int64

	voltages []voltagePoint
	watched  []watchedPhase
	source   []sourcePoint
	tap      int   // place in State.Taps; −1
	closed   int   // place in State.Closed; −1
	devices  []int // of operations, into Plan.Devices
}

// voltagePoint is a voltage between two unknowns and what is 1 p.u. of it, V.
type voltagePoint struct {
	from, to int32
	base     float64
}

type sourcePoint struct {
	source  int
	phase   feeder.Phase
	unknown int32
}

// comparison is what was measured, over the period. It drives nothing.
type comparison struct {
	measured []*profiles.Series // by Model.Measurements
	metered  *profiles.Sampler  // of them; nil where there are none
}

// measuredUnits are the units of profile that a quantity takes.
func measuredUnits(q feeder.MeasuredQuantity) []string {
	switch q {
	case feeder.MeasuredVoltage:
		return []string{"V", "pu"}
	case feeder.MeasuredCurrent:
		return []string{"A"}
	case feeder.MeasuredKW:
		return []string{"kW"}
	case feeder.MeasuredKVAR:
		return []string{"kvar", "kW"} // a kvar column goes by the name of its kW column
	}
	return []string{"pu"} // a plain number
}

// findMeasured finds the series of the model's measurements.
func (in *inputs) findMeasured(m *feeder.Model, find finder, faults *tables.Faults) {
	for i := range m.Measurements {
		x := &m.Measurements[i]
		s := find(x.Profile, x.At, measuredUnits(x.Quantity)...)
		if s != nil && x.Quantity == feeder.MeasuredKVAR && s.Unit == "kW" {
			if s.Kvar == nil {
				faults.Add(x.At, "measured kvar at %q: profile %q has a column in [kW] (%s) and none in [kvar]", x.Place, x.Profile, s.Pos)
			}
			s = s.Kvar
		}
		in.measured = append(in.measured, s)
	}
}

// sampleMeasured lays the measured series over the period.
func (in *inputs) sampleMeasured() (err error) {
	if len(in.measured) > 0 {
		in.metered, err = profiles.NewSampler(in.axis, in.measured)
	}
	return err
}

// meterPoints finds where the model is read for each of its measurements.
func (e *Engine) meterPoints() []meterPoint {
	m := e.net.Model
	out := make([]meterPoint, len(m.Measurements))
	for i := range out {
		p := &out[i]
		*p = meterPoint{Measurement: &m.Measurements[i], series: e.in.measured[i], scale: 1, tap: -1, closed: -1}
		p.window, p.origin = sampleLength(e.in.axis, p.series)
		switch p.Quantity {
		case feeder.MeasuredVoltage:
			p.voltages = e.voltagePoints(p.Node, p.Phases)
			if p.series.Unit == "V" {
				p.scale = 1 / p.voltages[0].base
			}
		case feeder.MeasuredTap, feeder.MeasuredOperations:
			e.devicePoint(p)
		default:
			e.flowPoint(p)
		}
	}
	return out
}

// sampleLength returns how long a sample of a series lasts: the longer of the step and
// the series' own interval, where that is whole steps long and begins with one; else
// the step, over which the series is averaged.
func sampleLength(a profiles.Axis, s *profiles.Series) (window, origin int64) {
	start, _ := s.Span()
	if n := s.StepLength(); n > a.Step && n%a.Step == 0 && (start-a.Start)%a.Step == 0 && s.Held() {
		return n, start
	}
	return a.Step, a.Start
}

// voltagePoints lists the voltages of phases of a node, or of the pair that two phases
// make; of no phases those that are reported there.
func (e *Engine) voltagePoints(node int, phases []feeder.Phase) []voltagePoint {
	at, line := e.net.At[node], e.net.Model.Nodes[node].Nominal*1000
	switch len(phases) {
	case 1:
		u := at[phases[0]]
		return []voltagePoint{{u, network.Ground, e.net.Unknowns[u].Nominal}}
	case 2:
		return []voltagePoint{{at[phases[0]], at[phases[1]], line}}
	}
	var out []voltagePoint
	for _, p := range results.Points(e.net) {
		if p.Node == node {
			out = append(out, voltagePoint{p.U, p.W, p.Base})
		}
	}
	return out
}

func (e *Engine) flowPoint(p *meterPoint) {
	if p.Element.Kind == "source" {
		s := &e.net.Model.Sources[p.Element.Index]
		for _, ph := range e.net.Model.Nodes[s.Node].Phases {
			if len(p.Phases) == 0 || ph == p.Phases[0] {
				p.source = append(p.source, sourcePoint{p.Element.Index, ph, e.net.At[s.Node][ph]})
			}
		}
		return
	}
	var only *feeder.Phase
	if len(p.Phases) == 1 {
		only = &p.Phases[0]
	}
	p.watched = e.watch(&p.Element, only)
}

func (e *Engine) devicePoint(p *meterPoint) {
	k := p.Element.Index
	kind := results.TapDevice
	if p.Element.Kind == "capacitor" {
		kind, p.closed = results.CapacitorDevice, k
	} else {
		r := &e.net.Model.Regulators[k]
		unit := max(p.Unit, 0)
		for u := range r.Units {
			if r.Ganged && p.Unit < 0 && r.Units[u].Watched {
				unit = u
			}
		}
		p.tap = e.unitAt[k] + unit
	}
	for i, d := range e.devices {
		all := p.Unit < 0 || kind == results.CapacitorDevice || e.net.Model.Regulators[k].Ganged
		if d.Kind == kind && d.Index == k && (all || d.Unit == p.Unit) {
			p.devices = append(p.devices, i)
		}
	}
}

// read returns the quantity in the instant at hand; that of operations is nothing.
func (e *Engine) read(p *meterPoint) float64 {
	var sum complex128
	highest := 0.0
	take := func(u int32, i complex128) {
		sum += e.state.V[u] * cmplx.Conj(i)
		highest = math.Max(highest, cmplx.Abs(i))
	}
	switch p.Quantity {
	case feeder.MeasuredVoltage:
		return e.readVoltage(p.voltages)
	case feeder.MeasuredOperations:
		return 0
	case feeder.MeasuredTap:
		if p.closed >= 0 {
			if e.state.Closed[p.closed] {
				return 1
			}
			return 0
		}
		return float64(e.state.Taps[p.tap])
	}
	for i := range p.watched {
		take(p.watched[i].unknown, into(e, present{e}, &p.watched[i]))
	}
	for _, s := range p.source {
		take(s.unknown, e.state.Source[s.source][s.phase])
	}
	switch p.Quantity {
	case feeder.MeasuredKW:
		return real(sum) / 1000
	case feeder.MeasuredKVAR:
		return imag(sum) / 1000
	}
	return highest
}

// readVoltage is the mean over the points, p.u.
func (e *Engine) readVoltage(points []voltagePoint) float64 {
	sum := 0.0
	for _, v := range points {
		sum += cmplx.Abs(e.between(v.from, v.to)) / v.base
	}
	return sum / float64(len(points))
}

// oddMeasured warns of measured series that are not what their row says: a voltage
// far from the nominal one is mostly in volts of another side, or between phases.
func (e *Engine) oddMeasured(points []meterPoint) (odd tables.Faults) {
	for i := range points {
		p := &points[i]
		if p.Quantity != feeder.MeasuredVoltage {
			continue
		}
		lowest, highest := p.series.Range()
		lowest, highest = lowest*p.scale, highest*p.scale
		if highest > 0.75 && lowest < 1.3 {
			continue
		}
		hint := "; look at the unit of its column and at the place"
		base := p.voltages[0].base
		switch middle := (lowest + highest) / 2; {
		case near(middle, math.Sqrt(3)):
			hint = "; that is √3 times as much: give a pair such as AB if it was measured between phases"
		case near(middle, 1/math.Sqrt(3)):
			hint = "; that is 1/√3 of it: give one phase if it was measured to ground"
		case p.series.Unit == "V" && near(middle*base, 120):
			hint = "; readings of a 120 V secondary go in as [pu], V/120"
		}
		odd.Add(p.At, "measured voltage at %q: profile %q (%s) runs from %.4g to %.4g p.u. of %.6g V%s", p.Place, p.Profile, p.series.Pos, lowest, highest, base, hint)
	}
	return odd
}

func near(x, y float64) bool { return math.Abs(x-y) < 0.15*y }

// Measured is the Recorder that holds the model against what was measured. A sample is
// a step, or an interval of the measured series where that is longer; a step that is
// low or unsolved, and a sample with such a step or one that the period cuts, is left
// out. Voltage, current and power are means over the time of a sample, settled or not,
// as a meter forms them; of phases together the mean of the voltages, the highest
// current and the sum of the powers. A position is that at the sample's end; operations
// are counted, and the series of them holds the number in each of its own intervals.
// It belongs to one run of its engine.
type Measured struct {
	// Log, where it is not nil, takes the values of every row of the logs by
	// Model.Measurements; NaN where a row has a step that is not ok.
	Log func(start int64, measured, modelled []float64) error

	e      *Engine
	points []meterPoint
	now    []stepSum // of the step that is open
	sample []stepSum
	row    []stepSum
	errs   []errorSums
	swaps  []swapWatch
	values []float64
	rowAt  int64
	open   bool // a row of the logs is open

	measured, modelled []float64
}

var _ Recorder = (*Measured)(nil)

// stepSum is what model and measurement come to over some steps.
type stepSum struct {
	start, ns          int64
	measured, modelled float64 // ∫ dt in ns; of a tap the last; of operations counts
	bad                bool
}

// Measured returns the recorder, or nil where the study measured nothing.
func (e *Engine) Measured() *Measured {
	points := e.meterPoints()
	if len(points) == 0 {
		return nil
	}
	n := len(points)
	return &Measured{e: e, points: points, now: make([]stepSum, n), sample: make([]stepSum, n), row: make([]stepSum, n), errs: make([]errorSums, n),
		swaps: e.swapWatches(points), values: make([]float64, n), measured: make([]float64, n), modelled: make([]float64, n)}
}

// Interval adds what the model shows over a time in which nothing changes.
func (r *Measured) Interval(iv *results.Interval) error {
	dt := float64(iv.End - iv.Start)
	for i := range r.points {
		if p := &r.points[i]; p.Quantity != feeder.MeasuredTap && p.Quantity != feeder.MeasuredOperations {
			r.now[i].modelled += r.e.read(p) * dt
		}
	}
	for i := range r.swaps {
		r.swaps[i].interval(r.e, dt)
	}
	return nil
}

// Action counts an operation.
func (r *Measured) Action(a *results.Action) error {
	for i := range r.points {
		if p := &r.points[i]; p.Quantity == feeder.MeasuredOperations && slices.Contains(p.devices, a.Device) {
			r.now[i].modelled++
		}
	}
	return nil
}

// Step closes a step, and the samples and the row of the logs that end with it.
func (r *Measured) Step(s *results.Step) error {
	step, ok := r.e.in.axis.Index(s.Start)
	if !ok {
		return fmt.Errorf("a step at %s is not of this run", profiles.Format(s.Start, r.e.in.axis.Zone))
	}
	r.e.in.metered.Step(r.values, step)
	if !r.open {
		r.rowAt, r.open = s.Start, true
	}
	for i := range r.points {
		p, now := &r.points[i], &r.now[i]
		now.start, now.ns, now.bad = s.Start, s.End-s.Start, s.Status != results.OK
		now.measured = r.values[i] * p.scale
		switch {
		case p.Quantity == feeder.MeasuredOperations:
			now.measured *= float64(now.ns) / float64(p.series.StepLength())
		case p.Quantity == feeder.MeasuredTap:
			if !now.bad {
				now.modelled = r.e.read(p)
			}
		default:
			now.measured *= float64(now.ns)
		}
		r.sample[i].add(p.Quantity, now)
		r.row[i].add(p.Quantity, now)
		if w := r.watchOf(i); w != nil {
			w.step(now)
		}
		if crossed(s.Start, s.End, p.origin, p.window) || s.End >= r.e.in.axis.End {
			r.close(i)
		}
		*now = stepSum{}
	}
	if log := r.e.Study.Settings.Run.Log; log <= r.e.in.axis.Step || s.End >= r.e.in.axis.End || crossed(s.Start, s.End, r.e.in.axis.Start, log) {
		return r.closeRow()
	}
	return nil
}

// crossed tells whether an interval of the given length ends in (from, to].
func crossed(from, to, origin, length int64) bool {
	floor := func(t int64) int64 {
		q := (t - origin) / length
		if (t-origin)%length < 0 {
			q--
		}
		return q
	}
	return floor(to) > floor(from)
}

func (s *stepSum) add(q feeder.MeasuredQuantity, step *stepSum) {
	if s.ns == 0 {
		s.start = step.start
	}
	s.ns += step.ns
	s.bad = s.bad || step.bad
	if q == feeder.MeasuredTap {
		s.measured, s.modelled = step.measured, step.modelled
		return
	}
	s.measured += step.measured
	s.modelled += step.modelled
}

// values are what was measured and what the model says, in the unit of the quantity.
func (s *stepSum) values(q feeder.MeasuredQuantity) (measured, modelled float64) {
	if q == feeder.MeasuredTap || q == feeder.MeasuredOperations {
		return s.measured, s.modelled
	}
	return s.measured / float64(s.ns), s.modelled / float64(s.ns)
}

// close enters a sample into the statistics. One that the period cuts off is left out:
// its measurement is of a longer time.
func (r *Measured) close(i int) {
	p, s := &r.points[i], &r.sample[i]
	whole := s.ns >= p.window || p.window <= r.e.in.axis.Step
	if whole && !s.bad {
		measured, modelled := s.values(p.Quantity)
		r.errs[i].add(modelled-measured, s.start)
		if w := r.watchOf(i); w != nil {
			w.sample(measured, float64(s.ns))
		}
	} else if w := r.watchOf(i); w != nil {
		w.gap()
	}
	*s = stepSum{}
}

func (r *Measured) closeRow() error {
	for i := range r.row {
		s := &r.row[i]
		r.measured[i], r.modelled[i] = s.values(r.points[i].Quantity)
		if s.bad {
			r.modelled[i] = math.NaN()
		}
		*s = stepSum{}
	}
	r.open = false
	if r.Log == nil {
		return nil
	}
	return r.Log(r.rowAt, r.measured, r.modelled)
}

// Rows returns measured.csv as far as the run has come: model less measurement, in the
// order of measurements.csv.
func (r *Measured) Rows() []results.MeasuredRow {
	out := make([]results.MeasuredRow, len(r.points))
	for i := range r.points {
		p := r.points[i]
		out[i] = results.MeasuredRow{Quantity: p.Quantity.String(), Place: p.Place, Phase: p.Phase}
		r.errs[i].fill(&out[i], r.e.in.axis.Zone)
	}
	return out
}
