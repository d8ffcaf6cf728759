package sim

import (
	"math"
	"sort"
	"time"

	"yearflow/sim/results"
)

// errorSums gathers the errors of one measurement, model less measurement.
type errorSums struct {
	n        int
	sum, abs float64
	worst    float64
	worstAt  int64
	sizes    errorSizes
}

func (e *errorSums) add(err float64, at int64) {
	e.n++
	e.sum += err
	size := math.Abs(err)
	e.abs += size
	if e.n == 1 || size > math.Abs(e.worst) {
		e.worst, e.worstAt = err, at
	}
	e.sizes.add(size)
}

// fill writes the statistics: the mean of the errors, the mean of their sizes, the size
// at or below which at least 95 % of the samples lie, and the error of the largest size
// with the beginning of its sample (the first of equals).
func (e *errorSums) fill(row *results.MeasuredRow, zone *time.Location) {
	row.Samples = e.n
	row.Bias, row.MeanAbsolute, row.P95, row.Worst = math.NaN(), math.NaN(), math.NaN(), math.NaN()
	if e.n == 0 {
		return
	}
	if zone == nil {
		zone = time.UTC
	}
	row.Bias, row.MeanAbsolute = e.sum/float64(e.n), e.abs/float64(e.n)
	row.P95, row.Worst, row.WorstTime = e.sizes.percentile(95), e.worst, time.Unix(0, e.worstAt).In(zone)
}

// exactErrors is how many sizes of one measurement are kept as they are.
const exactErrors = 1 << 20

// binsPerOctave makes a bin 0.54 % wide, so that a percentile is within 0.27 %.
const binsPerOctave = 128

// errorSizes are the sizes of errors: kept as they are up to exactErrors, else counted
// in bins of even ratio, so that memory does not grow with the period.
type errorSizes struct {
	kept  []float64
	bins  map[int]int // number by ⌊log2(size)·binsPerOctave⌋
	zeros int
	limit int // other than exactErrors where it is not 0
}

func (s *errorSizes) add(size float64) {
	limit := exactErrors
	if s.limit > 0 {
		limit = s.limit
	}
	if s.bins == nil && len(s.kept) < limit {
		s.kept = append(s.kept, size)
		return
	}
	if s.bins == nil {
		s.bins = map[int]int{}
		for _, x := range s.kept {
			s.count(x)
		}
		s.kept = nil
	}
	s.count(size)
}

func (s *errorSizes) count(size float64) {
	if size == 0 {
		s.zeros++
		return
	}
	s.bins[int(math.Floor(math.Log2(size)*binsPerOctave))]++
}

// percentile returns the lowest size at or below which at least p % of all lie; in bins
// the middle of its bin.
func (s *errorSizes) percentile(p int) float64 {
	if s.bins == nil {
		sorted := append([]float64(nil), s.kept...)
		sort.Float64s(sorted)
		return sorted[(len(sorted)*p+99)/100-1]
	}
	keys := make([]int, 0, len(s.bins))
	total := s.zeros
	for k, n := range s.bins {
		keys = append(keys, k)
		total += n
	}
	sort.Ints(keys)
	seen := s.zeros
	if seen*100 >= total*p {
		return 0
	}
	for _, k := range keys {
		if seen += s.bins[k]; seen*100 >= total*p {
			return math.Exp2((float64(k) + 0.5) / binsPerOctave)
		}
	}
	return math.NaN() // not reached: all of them are at or below the last
}
