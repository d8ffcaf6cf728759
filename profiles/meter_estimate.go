package profiles

import (
	"math"
	"sort"
	"time"
)

// zone returns the clock of a meter's customer.
func (w *mender) zone(s *store) *time.Location {
	if w.rules.Zone != nil {
		return w.rules.Zone
	}
	if s.block.Zone != nil {
		return s.block.Zone
	}
	return time.UTC
}

// sortMended orders a meter's list by rule and time.
func sortMended(list []Mended) {
	sort.SliceStable(list, func(i, j int) bool {
		if list[i].Rule != list[j].Rule {
			return list[i].Rule < list[j].Rule
		}
		return list[i].From < list[j].From
	})
}

// estimate fills everything that is not good: up to longestLine by a straight line
// between its neighbours, else by the mean of like days, else by the meter's mean for
// that kind of day and time, else by its mean. Where a register knows the sum of a
// stretch, the estimate is scaled to it.
func (w *mender) estimate(to *work) {
	line := int(longestLine / to.cal.step)
	w.days.of = nil
	n := len(to.now)
	for k := 0; k < n; k++ {
		if to.why[k] == good {
			continue
		}
		end := k + 1
		for end < n && to.why[end] != good {
			end++
		}
		if end-k <= line && k > 0 && end < n {
			to.line(k, end)
		} else {
			for i := k; i < end; i++ {
				w.like(to, i)
			}
		}
		k = end
	}
	for _, t := range to.totals {
		to.scale(t)
	}
}

// line fills [k, end) between its neighbours.
func (w *work) line(k, end int) {
	a, b := w.now[k-1], w.now[end]
	for i := k; i < end; i++ {
		f := float64(i-k+1) / float64(end-k+1)
		w.now[i], w.how[i] = a+(b-a)*f, byLine
	}
}

// like fills interval k by the mean of like days.
func (w *mender) like(to *work, k int) {
	sum, n := 0.0, 0
	to.cal.alike(k, func(j int) {
		if to.why[j] == good {
			sum += to.old[j]
			n++
		}
	})
	if n > 0 {
		to.now[k], to.how[k] = sum/float64(n), byLikeDays
		return
	}
	to.now[k], to.how[k] = w.days.mean(to, k)
}

// meanDays are a channel's means by kind of day and time, made when first asked for.
type meanDays struct {
	of    *work
	sums  [3][]float64
	count [3][]int
	all   float64
}

func (d *meanDays) mean(to *work, k int) (float64, method) {
	if d.of != to {
		d.sum(to)
	}
	kind, tod := to.cal.days[to.cal.dayOf[k]].kind, to.cal.tod[k]
	if n := d.count[kind][tod]; n > 0 {
		return d.sums[kind][tod] / float64(n), byMeanDay
	}
	return d.all, byMean
}

func (d *meanDays) sum(to *work) {
	d.of = to
	size := int(day/to.cal.step) + 1
	for kind := range d.sums {
		d.sums[kind], d.count[kind] = make([]float64, size), make([]int, size)
	}
	sum, n := 0.0, 0
	for k, v := range to.old {
		if to.why[k] != good {
			continue
		}
		kind, tod := to.cal.days[to.cal.dayOf[k]].kind, to.cal.tod[k]
		d.sums[kind][tod] += v
		d.count[kind][tod]++
		sum += v
		n++
	}
	d.all = 0
	if n > 0 {
		d.all = sum / float64(n)
	}
}

// scale makes the estimate of a stretch add up to what the register counted, which
// stands in old as its mean.
func (w *work) scale(t total) {
	want, sum := 0.0, 0.0
	for k := t.from; k < t.from+t.n; k++ {
		want += w.old[k]
		sum += w.now[k]
	}
	factor := want / sum
	for k := t.from; k < t.from+t.n; k++ {
		if sum > 0 && want >= 0 && !math.IsInf(factor, 0) {
			w.now[k] *= factor
		} else {
			w.now[k] = w.old[k]
		}
	}
}
