package results

import (
	"math"
	"math/bits"
	"runtime"
	"slices"
	"sync"
	"sync/atomic"

	"yearflow/sim/powerflow/vector"
)

// The percentiles of nodes.csv. A percentile p is the lowest voltage v for which
// the time spent at v or below is at least p % of the time: the inverse of the
// distribution function, weighted by duration.
var percents = [...]uint64{1, 5, 50, 95, 99}

// exactValues is the number of voltages up to which all are kept and percentiles
// are exact. Above, histograms stand for them, so that memory does not grow with
// the period.
const exactValues = 10_000_000

// binWidth is the width of a histogram's bins, p.u.; within a bin the time is taken
// to be spread evenly.
const binWidth = 1e-4

// distribution gathers the voltages of every point over settled intervals.
type distribution struct {
	points int
	limit  int // values up to which they are kept

	// Exact: a row of voltages for every interval, in blocks, and its duration.
	blocks [][]float64
	spans  []int64
	// Else a histogram for each point. They are near each other in memory where points are
	// not more than near.
	bins []histogram
	near int
}

// nearPoints times a histogram, about 1 kB, is what the second cache of a processor holds.
const nearPoints = 1000

const rowsPerBlock = 256

// newDistribution prepares for about the given number of intervals.
func newDistribution(points, intervals, limit int) *distribution {
	d := &distribution{points: points, limit: limit, near: nearPoints}
	if points > 0 && intervals > limit/points {
		d.toBins()
	}
	return d
}

// method says how percentiles are found, for run.json.
func (d *distribution) method() string {
	if d.bins != nil {
		return "weighted by duration, histogram of 0.0001 p.u. bins, even within a bin"
	}
	return "weighted by duration, exact: the lowest voltage at or below which at least that share of the time was spent"
}

// add takes the voltages of an interval of the given duration.
func (d *distribution) add(pu []float64, ns int64) {
	if row := d.row(ns); row != nil {
		copy(row, pu)
		return
	}
	for i := range d.bins {
		d.bins[i].add(pu[i], ns)
	}
}

// addLane takes the voltages of one of several instants, which stand side by side.
func (d *distribution) addLane(pu []float64, lane int, ns int64) {
	if row := d.row(ns); row != nil {
		for i := range row {
			row[i] = pu[i*vector.Lanes+lane]
		}
		return
	}
	for i := range d.bins {
		d.bins[i].add(pu[i*vector.Lanes+lane], ns)
	}
}

// row returns where to put the voltages of an interval, nil where histograms take them.
func (d *distribution) row(ns int64) []float64 {
	if d.bins == nil && (len(d.spans)+1)*d.points > d.limit {
		d.toBins()
	}
	if d.bins != nil {
		return nil
	}
	if len(d.spans)%rowsPerBlock == 0 {
		d.blocks = append(d.blocks, make([]float64, 0, rowsPerBlock*d.points))
	}
	d.spans = append(d.spans, ns)
	b := &d.blocks[len(d.blocks)-1]
	n := len(*b)
	*b = (*b)[:n+d.points]
	return (*b)[n:]
}

// toBins goes over to histograms and takes along what has been kept.
func (d *distribution) toBins() {
	d.bins = make([]histogram, d.points)
	for r, ns := range d.spans {
		row := d.blocks[r/rowsPerBlock][r%rowsPerBlock*d.points:]
		for i := range d.bins {
			d.bins[i].add(row[i], ns)
		}
	}
	d.blocks, d.spans = nil, nil
}

// percentiles returns the percentiles of every point, NaN where nothing was gathered. The
// processors share the points.
func (d *distribution) percentiles() [][len(percents)]float64 {
	out := make([][len(percents)]float64, d.points)
	var next atomic.Int64
	var done sync.WaitGroup
	for range min(runtime.GOMAXPROCS(0), d.points/pointsAtOnce+1) {
		done.Go(func() {
			var s selector
			for {
				first := int(next.Add(pointsAtOnce)) - pointsAtOnce
				if first >= d.points {
					return
				}
				d.some(out[first:min(first+pointsAtOnce, d.points)], first, &s)
			}
		})
	}
	done.Wait()
	return out
}

// pointsAtOnce is the number of points whose voltages are taken out of their rows together:
// as many as stand in a line of the cache.
const pointsAtOnce = 8

// some sets out to the percentiles of points from one on.
func (d *distribution) some(out [][len(percents)]float64, first int, s *selector) {
	if d.bins != nil {
		for i := range out {
			out[i] = d.bins[first+i].percentiles()
		}
		return
	}
	n := len(d.spans)
	if cap(s.several) < n*pointsAtOnce {
		s.several = make([]float64, n*pointsAtOnce)
	}
	for r := range n {
		row := d.blocks[r/rowsPerBlock][r%rowsPerBlock*d.points+first:][:len(out)]
		for i, v := range row {
			s.several[i*n+r] = v
		}
	}
	for i := range out {
		s.values = s.several[i*n : (i+1)*n : (i+1)*n]
		out[i] = s.percentiles(d.spans)
	}
}

// reached tells whether sum is at least p % of total; exact in 128 bits.
func reached(sum, total int64, p uint64) bool {
	ah, al := bits.Mul64(uint64(sum), 100)
	bh, bl := bits.Mul64(uint64(total), p)
	return ah > bh || (ah == bh && al >= bl)
}

// selector finds exact percentiles without sorting everything: it shares the values
// out over bins, adds up the time in each, and sorts only the bins that hold a
// percentile. It keeps its memory from point to point.
type selector struct {
	several []float64 // point by point
	values  []float64
	bin     []uint16
	time    []int64
	inside  []weighted
}

type weighted struct {
	v  float64
	ns int64
}

const selectorBins = 1024

func (s *selector) percentiles(spans []int64) (out [len(percents)]float64) {
	for i := range out {
		out[i] = math.NaN()
	}
	if len(s.values) == 0 {
		return out
	}
	low, high := slices.Min(s.values), slices.Max(s.values)
	scale := 0.0
	if high > low {
		scale = selectorBins / (high - low)
	}
	s.bin = s.bin[:0]
	if s.time == nil {
		s.time = make([]int64, selectorBins)
	}
	clear(s.time)
	var total int64
	for i, v := range s.values {
		b := min(int((v-low)*scale), selectorBins-1) // rises with v: bins are in order
		s.bin = append(s.bin, uint16(b))
		s.time[b] += spans[i]
		total += spans[i]
	}
	var below int64 // time in the bins before b
	k := 0
	for b := 0; b < selectorBins && k < len(percents); b++ {
		sorted := false
		for ; k < len(percents) && reached(below+s.time[b], total, percents[k]); k++ {
			if !sorted {
				s.sortBin(uint16(b), spans)
				sorted = true
			}
			sum := below
			for _, w := range s.inside {
				if sum += w.ns; reached(sum, total, percents[k]) {
					out[k] = w.v
					break
				}
			}
		}
		below += s.time[b]
	}
	return out
}

func (s *selector) sortBin(b uint16, spans []int64) {
	s.inside = s.inside[:0]
	for i, x := range s.bin {
		if x == b {
			s.inside = append(s.inside, weighted{s.values[i], spans[i]})
		}
	}
	slices.SortFunc(s.inside, func(a, b weighted) int {
		switch {
		case a.v < b.v:
			return -1
		case a.v > b.v:
			return 1
		}
		return 0
	})
}

// histogram is the time spent in bins of binWidth. It covers only the bins that
// were met and grows as further ones are.
type histogram struct {
	first int // number of the bin at time[0]
	time  []int64
	total int64
}

// margin is the number of bins that a histogram grows by beyond what it needs.
const margin = 64

// lastBin takes what is beyond: far from any feeder's voltage one bin is as good as
// another.
const lastBin = 4 / binWidth

func (h *histogram) add(v float64, ns int64) {
	b := int(math.Floor(v / binWidth))
	h.enter(min(max(b, 0), int(lastBin)), ns)
}

// enter adds time to a bin.
func (h *histogram) enter(b int, ns int64) {
	h.reach(b)
	h.time[b-h.first] += ns
	h.total += ns
}

// enterLanes adds time to the bins of the lanes of a mask.
func (h *histogram) enterLanes(bin *[vector.Lanes]int32, mask uint8, ns int64) {
	if mask != vector.All {
		for x, k := range bin {
			if mask>>x&1 == 1 {
				h.enter(int(k), ns)
			}
		}
		return
	}
	for _, k := range bin {
		at := int(k) - h.first
		if uint(at) >= uint(len(h.time)) {
			h.grow(int(k))
			at = int(k) - h.first
		}
		h.time[at] += ns
	}
	h.total += vector.Lanes * ns
}

// enterAll adds to each bin the time that stands beside it.
func (h *histogram) enterAll(bins []uint16, ns []int64) {
	bins = bins[:len(ns)]
	time, first := h.time, h.first
	var total int64
	for k, t := range ns {
		at := int(bins[k]) - first
		if uint(at) >= uint(len(time)) {
			h.grow(int(bins[k]))
			time, first = h.time, h.first
			at = int(bins[k]) - first
		}
		time[at] += t
		total += t
	}
	h.total += total
}

// reach makes room for a bin.
func (h *histogram) reach(b int) {
	if b < h.first || b >= h.first+len(h.time) {
		h.grow(b)
	}
}

func (h *histogram) grow(b int) {
	if h.time == nil {
		h.first, h.time = b-margin, make([]int64, 2*margin)
		return
	}
	first, end := min(h.first, b-margin), max(h.first+len(h.time), b+margin)
	time := make([]int64, end-first)
	copy(time[h.first-first:], h.time)
	h.first, h.time = first, time
}

func (h *histogram) percentiles() (out [len(percents)]float64) {
	for i := range out {
		out[i] = math.NaN()
	}
	if h.total == 0 {
		return out
	}
	var sum int64
	k := 0
	for i, ns := range h.time {
		for ; k < len(percents) && ns > 0 && reached(sum+ns, h.total, percents[k]); k++ {
			want := float64(h.total) * float64(percents[k]) / 100
			part := min(max((want-float64(sum))/float64(ns), 0), 1)
			out[k] = (float64(h.first+i) + part) * binWidth
		}
		sum += ns
	}
	return out
}
