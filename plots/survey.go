package plots

import (
	"fmt"
	"math"
	"sort"
	"strings"
	"time"

	"yearflow/sim/results"
)

// survey is what several figures need of a folder, gathered once and then only read.
type survey struct {
	*results.Folder
	span   span
	limits results.VoltageLimits
	// rangeWords names the limits: "range A (up to 600 V)".
	rangeWords string
	judged     []results.NodeRow
	// lowest and highest are by row of steps.csv, NaN where the step is not ok: over the
	// judged places where voltages.csv has all of them, else over the whole feeder.
	lowest, highest []float64
	low, high       int    // the rows of the two worst instants; -1 where there is none
	lowAt, highAt   string // node.phase
	where           string // what the two are over: "at customers" or "on the feeder"
	// phases holds the lowest and the highest judged voltage of each row by phase, from
	// voltages.csv; empty where the run kept none.
	phases []phaseVoltages
	// atLow and atHigh are the rows of voltages.csv at the two worst instants.
	atLow, atHigh map[string]float64
	places        map[string]results.PlaceRow
	// measured holds the measurements over time; empty where the run had none.
	measured []results.MeasuredSeries
}

type phaseVoltages struct {
	phase    string
	min, max []float64
}

func newSurvey(f *results.Folder) (*survey, error) {
	s := &survey{Folder: f, low: -1, high: -1, places: make(map[string]results.PlaceRow, len(f.Places))}
	loc := f.Run.Location
	s.span = span{start: f.Run.Start.In(loc), end: f.Run.End.In(loc)}
	for _, p := range f.Places {
		s.places[p.Node] = p
	}
	s.judge()
	s.lowest = s.okOnly("lowest [pu]")
	s.highest = s.okOnly("highest [pu]")
	s.where = "on the feeder"
	all := s.coverJudged()
	if all && len(s.judged) < len(s.Nodes) {
		s.where = "at customers"
	}
	s.worstInstants()
	if err := s.readVoltages(all); err != nil {
		return nil, err
	}
	var err error
	s.measured, err = f.Series()
	return s, err
}

// coverJudged tells whether voltages.csv has every judged place.
func (s *survey) coverJudged() bool {
	if len(s.VoltageNames) == 0 {
		return false
	}
	have := make(map[string]bool, len(s.VoltageNames))
	for _, n := range s.VoltageNames {
		have[n] = true
	}
	for _, n := range s.judged {
		if !have[n.Node+"."+n.Phase] {
			return false
		}
	}
	return true
}

// worstInstants finds the rows of the lowest and of the highest voltage; the first
// of equals.
func (s *survey) worstInstants() {
	s.low, s.high, s.lowAt, s.highAt = -1, -1, "", ""
	for i, v := range s.lowest {
		if !math.IsNaN(v) && (s.low < 0 || v < s.lowest[s.low]) {
			s.low = i
		}
	}
	for i, v := range s.highest {
		if !math.IsNaN(v) && (s.high < 0 || v > s.highest[s.high]) {
			s.high = i
		}
	}
	if s.low >= 0 {
		s.lowAt = s.Steps.LowestAt[s.low]
	}
	if s.high >= 0 {
		s.highAt = s.Steps.HighestAt[s.high]
	}
}

// judge finds the places that count, in a fixed order, and the limits that hold for
// most of them.
func (s *survey) judge() {
	rows := append([]results.NodeRow(nil), s.Nodes...)
	sort.SliceStable(rows, func(i, j int) bool {
		if rows[i].Node != rows[j].Node {
			return rows[i].Node < rows[j].Node
		}
		return rows[i].Phase < rows[j].Phase
	})
	service, all := 0, 0
	for _, n := range rows {
		if !s.Judged(n) {
			continue
		}
		s.judged = append(s.judged, n)
		if all++; n.NominalKV <= 0.6 {
			service++
		}
	}
	if len(s.judged) == 0 {
		// No customers at all: the pictures still show the feeder.
		s.judged = rows
	}
	kv := 10.0
	if 2*service > all {
		kv = 0.4
	}
	s.limits = s.LimitsOf(kv)
	switch {
	case s.Run.Limits.Own:
		s.rangeWords = "the study's range"
	case kv < 1:
		s.rangeWords = "range A"
	default:
		s.rangeWords = "range A above 600 V"
	}
}

// okOnly returns a column of steps.csv without the rows whose step was not solved as
// asked.
func (s *survey) okOnly(column string) []float64 {
	v := append([]float64(nil), s.Steps.Column(column)...)
	for i := range v {
		if s.Steps.Status[i] != results.OK {
			v[i] = math.NaN()
		}
	}
	return v
}

// readVoltages goes through the voltages of every step once. Where it has all judged places, what
// is lowest and highest is taken from them.
func (s *survey) readVoltages(all bool) error {
	if len(s.VoltageNames) == 0 {
		return nil
	}
	if all {
		s.low, s.high = -1, -1
	}
	lowest, highest := math.Inf(1), math.Inf(-1)
	judged := make(map[string]bool, len(s.judged))
	for _, n := range s.judged {
		judged[n.Node+"."+n.Phase] = true
	}
	byPhase := make([]int, len(s.VoltageNames)) // −1: does not count
	for i, name := range s.VoltageNames {
		byPhase[i] = -1
		if !judged[name] {
			continue
		}
		_, ph := splitPlace(name)
		k := 0
		for k < len(s.phases) && s.phases[k].phase != ph {
			k++
		}
		if k == len(s.phases) {
			s.phases = append(s.phases, phaseVoltages{phase: ph})
		}
		byPhase[i] = k
	}
	// Sorting the phases by name while keeping byPhase right.
	order := make([]int, len(s.phases))
	for i := range order {
		order[i] = i
	}
	sort.Slice(order, func(i, j int) bool {
		a, b := s.phases[order[i]].phase, s.phases[order[j]].phase
		if len(a) != len(b) {
			return len(a) < len(b)
		}
		return a < b
	})
	sorted := make([]phaseVoltages, len(order))
	rank := make([]int, len(order))
	for to, from := range order {
		sorted[to], rank[from] = s.phases[from], to
	}
	s.phases = sorted
	for i, k := range byPhase {
		if k >= 0 {
			byPhase[i] = rank[k]
		}
	}
	rows := len(s.Steps.Time)
	row := 0
	var low, high []float64
	err := s.EachVoltage(func(at int64, v []float64) error {
		if row >= rows || at != s.Steps.Time[row] {
			return fmt.Errorf("%s is not the time of row %d of steps.csv: the files are of two runs; run the study again",
				time.Unix(0, at).In(s.Run.Location).Format(time.RFC3339), row+1)
		}
		for k := range s.phases {
			s.phases[k].min = append(s.phases[k].min, math.NaN())
			s.phases[k].max = append(s.phases[k].max, math.NaN())
		}
		if s.Steps.Status[row] == results.OK {
			for i, k := range byPhase {
				if k < 0 || math.IsNaN(v[i]) {
					continue
				}
				p := &s.phases[k]
				if !(p.min[row] <= v[i]) {
					p.min[row] = v[i]
				}
				if !(p.max[row] >= v[i]) {
					p.max[row] = v[i]
				}
				if all && v[i] < lowest {
					lowest, s.low, s.lowAt = v[i], row, s.VoltageNames[i]
				}
				if all && v[i] > highest {
					highest, s.high, s.highAt = v[i], row, s.VoltageNames[i]
				}
			}
		}
		if row == s.low {
			low = append(low[:0], v...)
		}
		if row == s.high {
			high = append(high[:0], v...)
		}
		row++
		return nil
	})
	if err != nil {
		return err
	}
	if row != rows {
		return fmt.Errorf("%s has %d rows, steps.csv %d: half a folder; run the study again", s.VoltageFile(), row, rows)
	}
	s.atLow, s.atHigh = named(s.VoltageNames, low), named(s.VoltageNames, high)
	if all {
		s.lowest, s.highest = s.overPhases()
	}
	return nil
}

// overPhases is the lowest and the highest voltage of each row over all phases.
func (s *survey) overPhases() (lowest, highest []float64) {
	for row := range s.Steps.Time {
		lo, hi := math.NaN(), math.NaN()
		for _, p := range s.phases {
			if !(lo <= p.min[row]) && !math.IsNaN(p.min[row]) {
				lo = p.min[row]
			}
			if !(hi >= p.max[row]) && !math.IsNaN(p.max[row]) {
				hi = p.max[row]
			}
		}
		lowest, highest = append(lowest, lo), append(highest, hi)
	}
	return lowest, highest
}

func named(names []string, v []float64) map[string]float64 {
	if v == nil {
		return nil
	}
	m := make(map[string]float64, len(names))
	for i, n := range names {
		m[n] = v[i]
	}
	return m
}

// foot is the line below every figure.
func (s *survey) foot() foot {
	f := foot{lines: [2]string{"Case " + s.Run.Case, s.span.spoken() + "  ·  steps of " + stepWords(s.Run.Step) + "  ·  " + strings.ReplaceAll(s.Run.Zone, "_", " ")}}
	if s.Run.Title != "" {
		f.lines[0] = s.Run.Title + "  ·  case " + s.Run.Case
	}
	if s.Run.Demo {
		f.tag = "demo study, invented data"
	}
	return f
}

// bins cuts the period for series in time: local days where it is long, else as many
// rows to a bin as make no more than columns bins.
func (s *survey) bins(columns int) []float64 {
	var edges []float64
	if s.daily() {
		edges = append(edges, s.span.lo())
		for m := midnight(s.span.start).AddDate(0, 0, 1); m.Before(s.span.end); m = m.AddDate(0, 0, 1) {
			edges = append(edges, seconds(m))
		}
		return append(edges, s.span.hi())
	}
	rows := len(s.Steps.Time)
	each := (rows + columns - 1) / max(columns, 1)
	for i := 0; i < rows; i += max(each, 1) {
		edges = append(edges, float64(s.Steps.Time[i])/1e9)
	}
	return append(edges, s.span.hi())
}

// binned is a series reduced to bins; NaN where a bin holds no value.
type binned struct{ lo, hi, mean []float64 }

// reduce takes the lowest, the highest and the mean value of each bin. Times are ns.
func reduce(times []int64, values, edges []float64) binned {
	n := len(edges) - 1
	b := binned{make([]float64, n), make([]float64, n), make([]float64, n)}
	counts := make([]float64, n)
	for i := range n {
		b.lo[i], b.hi[i] = math.NaN(), math.NaN()
	}
	k := 0
	for i, t := range times {
		v := values[i]
		at := float64(t) / 1e9
		for k < n-1 && at >= edges[k+1]-1e-6 {
			k++
		}
		if math.IsNaN(v) {
			continue
		}
		if !(b.lo[k] <= v) {
			b.lo[k] = v
		}
		if !(b.hi[k] >= v) {
			b.hi[k] = v
		}
		b.mean[k] += v
		counts[k]++
	}
	for i := range n {
		b.mean[i] /= counts[i] // 0/0: NaN
	}
	return b
}

// extremes returns the lowest and the highest of all values that are there.
func extremes(series ...[]float64) (lo, hi float64) {
	lo, hi = math.Inf(1), math.Inf(-1)
	for _, s := range series {
		for _, v := range s {
			if !math.IsNaN(v) {
				lo, hi = math.Min(lo, v), math.Max(hi, v)
			}
		}
	}
	return lo, hi
}

// voltageRange is a y axis that shows the data and at least the limits.
func (s *survey) voltageRange(series ...[]float64) (float64, float64) {
	lo, hi := extremes(series...)
	l := s.limits
	lo, hi = math.Min(lo, l.Low-0.012), math.Max(hi, l.High+0.012)
	// A collapsed step must not flatten everything else.
	lo, hi = math.Max(lo, 0.5), math.Min(hi, 1.5)
	if hi-lo > 0.3 {
		return roundRange(lo, hi, 6)
	}
	return math.Floor(lo*100-0.2) / 100, math.Ceil(hi*100+0.2) / 100
}

// voltageAxes draws the p.u. axis on the left and V120 on the right.
func (n *panel) voltageAxes(every int) {
	lo, hi := n.plot.Y.Min, n.plot.Y.Max
	n.yAxis(linear(lo, hi, every), "Voltage [p.u.]")
	step := roundStep(120 * (hi - lo) / float64(every))
	right := stepped(120*lo, 120*hi, math.Max(step, 1))
	for i := range right {
		right[i].at /= 120
	}
	n.rightAxis(right, "[V, 120 V base]")
}

// unsolved tells in a few words how many rows are no statistic.
func (s *survey) unsolved() string {
	n := 0
	for _, st := range s.Steps.Status {
		if st != results.OK {
			n++
		}
	}
	if n == 0 {
		return ""
	}
	return fmt.Sprintf(" Grey: %s without a valid solution (low or unsolved).", count(n, "row", "rows"))
}

// daily tells whether series in time are shown by the day.
func (s *survey) daily() bool {
	return s.span.days() > 62 && s.Steps.RowLength <= 24*int64(time.Hour)
}
