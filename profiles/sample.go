package profiles

import (
	"fmt"
	"sort"
	"sync"

	"yearflow/sim/tables"
)

// Sampler gives the mean of each of its series over each step of an axis. It is
// never changed after NewSampler, so any number of goroutines may ask it.
type Sampler struct {
	axis   Axis
	groups []group
	max    []func() float64
}

// group is the series that share a grid.
type group struct {
	grid
	segments []segment
	columns  []column
}

type column struct {
	to     int // place in Step's dst
	series *Series
}

// NewSampler lays series over an axis; their order is that of the values of Step.
// It fails, with tables.Faults, where the axis has no steps, where a file does not
// cover it and is not repeated, and where a repeated file is not whole local days,
// weeks or years long. It panics on a nil series.
func NewSampler(a Axis, series []*Series) (*Sampler, error) {
	var faults tables.Faults
	if a.Steps() == 0 {
		faults.Add(tables.Pos{}, "the period has no steps: its end %s is not after its start %s, or its step is not positive",
			Format(a.End, a.Zone), Format(a.Start, a.Zone))
		return nil, faults.Err()
	}
	s := &Sampler{axis: a, max: make([]func() float64, len(series))}
	known := make(map[grid]int)
	for k, one := range series {
		if one == nil {
			panic("profiles: nil series")
		}
		g, ok := known[one.grid]
		if !ok {
			g = len(s.groups)
			known[one.grid] = g
			s.groups = append(s.groups, group{grid: one.grid})
		}
		s.groups[g].columns = append(s.groups[g].columns, column{k, one})
		s.max[k] = sync.OnceValue(func() float64 { return s.highest(g, one) })
	}
	for i := range s.groups {
		s.groups[i].lay(a, &faults)
	}
	return s, faults.Err()
}

// lay fills in the segments and has the sums ready that steps will need.
func (g *group) lay(a Axis, faults *tables.Faults) {
	var problem string
	g.segments, problem = g.grid.segments(a)
	if problem != "" {
		told := make(map[string]bool)
		for _, c := range g.columns {
			if told[c.series.Pos.File] {
				continue
			}
			told[c.series.Pos.File] = true
			faults.Add(c.series.Pos, "profile %q: %s", c.series.Name, problem)
		}
		return
	}
	if a.Step/g.step >= blockLength {
		for _, c := range g.columns {
			c.series.sums()
		}
	}
}

// Axis returns the axis of the sampler.
func (s *Sampler) Axis() Axis { return s.axis }

// Step writes to dst the mean of each series over step i, in the series' units. It
// does not allocate and depends on i alone. It panics where dst is shorter than the
// list of series or the axis has no step i.
func (s *Sampler) Step(dst []float64, i int) {
	if len(dst) < len(s.max) {
		panic(fmt.Sprintf("profiles: room for %d of %d values", len(dst), len(s.max)))
	}
	if i < 0 || i >= s.axis.Steps() {
		panic(fmt.Sprintf("profiles: step %d of %d", i, s.axis.Steps()))
	}
	from, to := s.axis.Bounds(i)
	for k := range s.groups {
		s.groups[k].means(dst, from, to)
	}
}

// Max returns the highest step mean of series k over the axis. The first call for a
// series goes over all steps.
func (s *Sampler) Max(k int) float64 { return s.max[k]() }

// Spacing returns the least time, ns, from one value to the next over all series; 0:
// there is none.
func (s *Sampler) Spacing() (spacing int64) {
	for i := range s.groups {
		if g := &s.groups[i]; spacing == 0 || g.step < spacing {
			spacing = g.step
		}
	}
	return spacing
}

// Largest returns a bound of the absolute value of every series' step means: the
// largest value that it has.
func (s *Sampler) Largest() []float64 {
	out := make([]float64, len(s.max))
	for i := range s.groups {
		for _, c := range s.groups[i].columns {
			for _, v := range c.series.values {
				out[c.to] = max(out[c.to], v, -v)
			}
		}
	}
	return out
}

func (s *Sampler) highest(g int, one *Series) float64 {
	only := group{grid: s.groups[g].grid, segments: s.groups[g].segments, columns: []column{{0, one}}}
	var v [1]float64
	highest := 0.0
	for i := range s.axis.Steps() {
		from, to := s.axis.Bounds(i)
		only.means(v[:], from, to)
		if i == 0 || v[0] > highest {
			highest = v[0]
		}
	}
	return highest
}

// piece returns the number of the segment that holds t, and its end.
func (g *group) piece(t int64) int {
	if len(g.segments) == 1 {
		return 0
	}
	return sort.Search(len(g.segments), func(k int) bool { return g.segments[k].from > t }) - 1
}

func (g *group) pieceEnd(k int, to int64) int64 {
	if k+1 < len(g.segments) {
		return min(to, g.segments[k+1].from)
	}
	return to
}

// means writes the means over [from, to).
func (g *group) means(dst []float64, from, to int64) {
	k := g.piece(from)
	if g.pieceEnd(k, to) < to {
		for _, c := range g.columns {
			dst[c.to] = g.across(c.series, k, from, to)
		}
		return
	}
	shift := g.segments[k].shift
	if g.lines {
		s := g.slopes(from+shift, to+shift)
		for _, c := range g.columns {
			dst[c.to] = s.mean(c.series, float64(to-from))
		}
		return
	}
	h := g.holds(from+shift, to+shift)
	if h.a == h.b {
		for _, c := range g.columns {
			dst[c.to] = c.series.values[h.a]
		}
		return
	}
	for _, c := range g.columns {
		var sum wide
		h.add(&sum, c.series)
		dst[c.to] = sum.over(float64(to - from))
	}
}

// across returns the mean over [from, to), which begins in segment k and runs over
// its end.
func (g *group) across(s *Series, k int, from, to int64) float64 {
	var sum wide
	for t := from; t < to; k++ {
		end, shift := g.pieceEnd(k, to), g.segments[k].shift
		if g.lines {
			p := g.slopes(t+shift, end+shift)
			p.add(&sum, s)
		} else {
			p := g.holds(t+shift, end+shift)
			p.add(&sum, s)
		}
		t = end
	}
	return sum.over(float64(to - from))
}

// held is an interval over held values: value a for wa nanoseconds, the whole steps
// between, and value b for wb. Where a is b, wb is nothing.
type held struct {
	a, b         int
	wa, wb, step float64
}

// holds returns the interval [from, to) of the file's time.
func (g *grid) holds(from, to int64) held {
	from, to = from-g.start, to-g.start
	a, b := from/g.step, (to-1)/g.step
	if a == b {
		return held{a: int(a), b: int(b), wa: float64(to - from)}
	}
	return held{int(a), int(b), float64((a+1)*g.step - from), float64(to - b*g.step), float64(g.step)}
}

// add adds the integral of s.
func (h *held) add(sum *wide, s *Series) {
	sum.addProduct(h.wa, s.values[h.a])
	if h.a == h.b {
		return
	}
	if h.a+1 < h.b {
		sum.addScaled(h.step, s.sum(h.a+1, h.b))
	}
	sum.addProduct(h.wb, s.values[h.b])
}

// sloped is an interval over straight lines: the first value held for low
// nanoseconds, then the line from value a on at its fraction fa for wa, the whole
// lines between, the line from b on at fb for wb, and the last value for high. The
// mean of a line over an interval is its value in the middle.
type sloped struct {
	low, high    float64
	a, b         int
	wa, fa       float64
	wb, fb, step float64
}

// slopes returns the interval [from, to) of the file's time.
func (g *grid) slopes(from, to int64) sloped {
	last := int64(g.n-1) * g.step
	from, to = from-g.stamp, to-g.stamp
	var s sloped
	if from < 0 {
		s.low = float64(min(0, to) - from)
	}
	if to > last {
		s.high = float64(to - max(last, from))
	}
	from, to = max(from, 0), min(to, last)
	if from >= to {
		return s
	}
	s.step = float64(g.step)
	a, b := from/g.step, (to-1)/g.step
	s.a, s.b = int(a), int(b)
	if a == b {
		s.wa = float64(to - from)
		s.fa = (float64(from-a*g.step) + float64(to-a*g.step)) / 2 / s.step
		return s
	}
	s.wa = float64((a+1)*g.step - from)
	s.fa = 1 - s.wa/2/s.step
	s.wb = float64(to - b*g.step)
	s.fb = s.wb / 2 / s.step
	return s
}

func (p *sloped) mean(s *Series, length float64) float64 {
	if p.wa == length {
		return s.between(p.a, p.fa)
	}
	var sum wide
	p.add(&sum, s)
	return sum.over(length)
}

// add adds the integral of s.
func (p *sloped) add(sum *wide, s *Series) {
	v := s.values
	sum.addProduct(p.low, v[0])
	sum.addProduct(p.high, v[len(v)-1])
	if p.wa == 0 {
		return
	}
	sum.addProduct(p.wa, s.between(p.a, p.fa))
	if p.a == p.b {
		return
	}
	if p.a+1 < p.b {
		whole := s.sum(p.a+2, p.b)
		whole.add(v[p.a+1] / 2)
		whole.add(v[p.b] / 2)
		sum.addScaled(p.step, whole)
	}
	sum.addProduct(p.wb, s.between(p.b, p.fb))
}

// between returns the value at fraction f of the line from value k to the next.
func (s *Series) between(k int, f float64) float64 {
	v := s.values[k]
	return v + (s.values[k+1]-v)*f
}
