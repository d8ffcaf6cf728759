package profiles

import (
	"sync"
	"time"

	"yearflow/sim/tables"
)

// Series is one column of a file: values at a regular step.
type Series struct {
	Name string
	Unit string     // pu, kW, kvar, V, A, degC, W/m2, or a currency per kWh such as USD/kWh
	Pos  tables.Pos // of its header cell
	// Kvar is the reactive companion of a [kW] series, a [kvar] column of the same
	// name in the same file; nil where there is none.
	Kvar *Series

	grid   grid
	values []float64
	sums   func() []wide // prefix sums of blocks, made when first needed
}

// Len returns the number of values.
func (s *Series) Len() int { return len(s.values) }

// Value returns value k in Unit.
func (s *Series) Value(k int) float64 { return s.values[k] }

// Interval returns the time that value k stands for, were it held.
func (s *Series) Interval(k int) (from, to int64) {
	from = s.grid.start + int64(k)*s.grid.step
	return from, from + s.grid.step
}

// Span returns the time that the file covers, [start, end).
func (s *Series) Span() (start, end int64) { return s.grid.start, s.grid.end() }

// StepLength returns the file's step in nanoseconds.
func (s *Series) StepLength() int64 { return s.grid.step }

// Held tells whether a value stands over its interval; else straight lines join them.
func (s *Series) Held() bool { return !s.grid.lines }

// Range returns the smallest and the largest value.
func (s *Series) Range() (lowest, highest float64) {
	lowest, highest = s.values[0], s.values[0]
	for _, v := range s.values {
		lowest, highest = min(lowest, v), max(highest, v)
	}
	return lowest, highest
}

func newSeries(name string, u unit, pos tables.Pos, g grid, values []float64) *Series {
	s := &Series{Name: name, Unit: u.base, Pos: pos, grid: g, values: values}
	s.sums = sync.OnceValue(func() []wide { return blockSums(values) })
	return s
}

// repeat is how a file goes on beyond its own time.
type repeat uint8

const (
	noRepeat repeat = iota
	byDay
	byWeek
	byYear
)

// grid is the time of a file. Series of equal grids are sampled together.
type grid struct {
	start int64 // the beginning of the first interval
	step  int64
	n     int
	stamp int64 // the first stamp: start, or start + step where values are stamped at the end
	lines bool  // straight lines between stamps
	again repeat
	zone  *time.Location
}

func (g grid) end() int64 { return g.start + int64(g.n)*g.step }
