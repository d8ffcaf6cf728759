package profiles

import (
	"math"
	"slices"
)

const (
	zeroRun    = hour     // a run of zeros is judged from this length on
	vacant     = 7 * day  // beyond this it is an empty building, not a fault
	stuckRun   = 6 * hour // and at least six values
	ordinaryIf = 0.2      // share of zeros at which zero is ordinary for a meter
)

// checkNegative judges values below zero.
func (w *mender) checkNegative(m *Meter) {
	to := &w.real
	count, first, last, sum := 0, 0, 0, 0.0
	values := 0
	for k, v := range to.old {
		if to.why[k] == good {
			values++
		}
		if !(v < 0) {
			continue
		}
		if count == 0 {
			first = k
		}
		count, last, sum = count+1, k, sum+v
		if !w.net && to.why[k] == good {
			to.why[k] = negative
		}
	}
	switch {
	case count == 0:
	case w.net:
		w.list("negative value, kept: net metering", m.start+int64(first)*m.step, m.start+int64(last+1)*m.step, count, 0)
	case count > 1 && float64(count) > negativeMost*float64(values):
		w.fault(m.Pos, "is negative in %d of %d values, first at %s: set net = true if what flows back is counted so, else delivered and received are swapped",
			count, values, Format(m.start+int64(first)*m.step, m.zone))
	}
}

// runs calls use with every run of at least two equal good values.
func (w *work) runs(use func(from, end int, v float64)) {
	for k := 0; k < len(w.old); {
		v, end := w.old[k], k+1
		for end < len(w.old) && w.old[end] == v && w.why[end] == good {
			end++
		}
		if end-k > 1 && w.why[k] == good {
			use(k, end, v)
		}
		k = end
	}
}

// checkZeros judges runs of zeros of a meter that is not ordinarily at zero: from an
// hour to seven days, at times at which fewer than one in twenty of the like days has
// zero, they are the meter's or the line's fault and no demand.
func (w *mender) checkZeros(m *Meter) {
	to := &w.real
	type run struct{ from, end int }
	var runs []run
	zeroCount, values := 0, 0
	for k, v := range to.old {
		if to.why[k] != good {
			continue
		}
		values++
		if v == 0 {
			zeroCount++
		}
	}
	to.runs(func(from, end int, v float64) {
		if v != 0 {
			return
		}
		if length := int64(end-from) * m.step; length > vacant {
			zeroCount -= end - from
			values -= end - from
			if values > 0 {
				w.list("zero for over seven days, kept", m.start+int64(from)*m.step, m.start+int64(end)*m.step, end-from, 0)
			}
			return
		} else if length < zeroRun {
			return
		}
		runs = append(runs, run{from, end})
	})
	if w.rules.KeepZeros || values == 0 || float64(zeroCount) > ordinaryIf*float64(values) {
		return
	}
	for _, r := range runs {
		alike, atZero := 0, 0
		every := max(1, (r.end-r.from)/24) // some two dozen of the run's values will do
		for k := r.from; k < r.end; k += every {
			to.cal.alike(k, func(j int) {
				if j >= r.from && j < r.end || to.why[j] != good && to.why[j] != zeros {
					return
				}
				alike++
				if to.old[j] == 0 && to.why[j] == good {
					atZero++
				}
			})
		}
		if alike >= 10 && 20*atZero < alike {
			for k := r.from; k < r.end; k++ {
				to.why[k] = zeros
			}
		}
	}
}

// checkStuck judges runs of one value other than zero: six hours and six values long,
// and more than four times as long as the meter's longest run on nine of ten days with
// demand. Where that is six hours or more the meter is often flat, a pump or a lamp, and
// is not judged. The first value of a run stands.
func (w *mender) checkStuck() {
	to := &w.real
	longest := make([]int, len(to.cal.days)) // 0: no demand, all day
	for k, v := range to.old {
		if v != 0 && to.why[k] == good {
			longest[to.cal.dayOf[k]] = 1
		}
	}
	type run struct{ from, end int }
	var runs []run
	least := max(6, int(stuckRun/to.cal.step))
	to.runs(func(from, end int, v float64) {
		if v == 0 {
			return
		}
		if end-from >= least {
			runs = append(runs, run{from, end})
		}
		for k := from; k < end; {
			d := to.cal.dayOf[k]
			stop := min(end, to.cal.days[d].end)
			longest[d] = max(longest[d], stop-k)
			k = stop
		}
	})
	if len(runs) == 0 {
		return
	}
	slices.Sort(longest)
	idle, _ := slices.BinarySearch(longest, 1)
	longest = longest[idle:]
	usual := longest[len(longest)*9/10]
	if usual >= int(stuckRun/to.cal.step) {
		return
	}
	for _, r := range runs {
		if r.end-r.from > 4*usual {
			for k := r.from + 1; k < r.end; k++ {
				to.why[k] = stuck
			}
		}
	}
}

// checkSpikes judges the highest two values of each day: a spike is above 1.8 times the
// third-highest value of the day, above the like days by SpikeFactor times their
// range, and above the service's size; where that is not known, above five times the
// value that the meter exceeds in one of two hundred intervals.
func (w *mender) checkSpikes(m *Meter) {
	to := &w.real
	service, known := w.rules.ServiceKW[w.name]
	limit := service
	if !known {
		limit = math.NaN()
	}
	above := 0
	for d := range to.cal.days {
		top, k := to.highest(&to.cal.days[d])
		for i := range 2 {
			third := top[2]
			if k[2] < 0 || third < 0 || !(top[i] > spikeOfDay*third) || top[i] <= 0 {
				break
			}
			if limit != limit {
				limit = 5 * w.exceeded(to)
			}
			if top[i] > limit && w.aboveLikeDays(to, k[i]) {
				to.why[k[i]] = spike
			}
		}
	}
	if !known {
		return
	}
	first, last := 0, 0
	for k, v := range to.old {
		if to.why[k] == good && v > service {
			if above == 0 {
				first = k
			}
			above, last = above+1, k
		}
	}
	if above > 0 {
		w.list("above the service size, kept", m.start+int64(first)*m.step, m.start+int64(last+1)*m.step, above, 0)
	}
}

// highest returns the three highest good values of a day, and where they are; −1 for
// none.
func (w *work) highest(d *localDay) (top [3]float64, at [3]int) {
	at = [3]int{-1, -1, -1}
	top = [3]float64{math.Inf(-1), math.Inf(-1), math.Inf(-1)}
	for k := d.first; k < d.end; k++ {
		v := w.old[k]
		if !(v > top[2]) || w.why[k] != good {
			continue
		}
		i := 2
		for ; i > 0 && v > top[i-1]; i-- {
			top[i], at[i] = top[i-1], at[i-1]
		}
		top[i], at[i] = v, k
	}
	return top, at
}

// exceeded returns the good value above which one in two hundred lies.
func (w *mender) exceeded(to *work) float64 {
	w.pick = w.pick[:0]
	for k, v := range to.old {
		if to.why[k] == good {
			w.pick = append(w.pick, v)
		}
	}
	slices.Sort(w.pick)
	return w.pick[max(0, len(w.pick)-1-max(len(w.pick)/200, 2))]
}

// aboveLikeDays reports whether value k lies above the tenth-highest of ten of the like
// days' values, an interval either side included, by SpikeFactor times the distance
// from the tenth-lowest to it.
func (w *mender) aboveLikeDays(to *work, k int) bool {
	w.pick = w.pick[:0]
	to.cal.alike(k, func(j int) {
		for i := max(0, j-1); i <= min(len(to.old)-1, j+1); i++ {
			if to.why[i] == good {
				w.pick = append(w.pick, to.old[i])
			}
		}
	})
	if len(w.pick) < 10 {
		return true // nothing to say against it
	}
	slices.Sort(w.pick)
	n := len(w.pick)
	low, high := w.pick[n/10], w.pick[n-1-n/10]
	return to.old[k] > high+w.rules.SpikeFactor*(high-low)
}
