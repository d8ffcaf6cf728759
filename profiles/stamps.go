package profiles

import (
	"fmt"
	"time"
)

// readTime reads the stamp of a row.
func (r *reader) readTime(cell []byte) {
	s, problem := parseStamp(cell)
	switch {
	case len(cell) == 0:
		r.fault(1, "the time is empty; %s", wantTime)
	case problem != "":
		r.fault(1, "%s, got %q", problem, shorten(string(cell)))
	case s.zoned:
		r.addTime(s.civil - s.offset)
		return
	default:
		r.addTime(r.resolve(s.civil))
		return
	}
	r.addTime(noTime)
}

func (r *reader) addTime(t int64) {
	r.times = append(r.times, t)
	r.numbers = append(r.numbers, r.lines.number)
}

// resolve returns the instant of a clock reading: in a repeated hour the one that
// keeps the step of the rows before, else the first that is later than they.
func (r *reader) resolve(civil int64) int64 {
	first, last, n := r.clock.instants(civil)
	switch n {
	case 0:
		r.fault(1, "%s", r.clock.skipped(civil))
		return noTime
	case 1:
		return first
	}
	k := len(r.times)
	if k == 0 {
		r.unclear = true
		if r.later {
			return last
		}
		return first
	}
	before := r.times[k-1]
	if before == noTime {
		return first
	}
	if k > 1 && r.times[k-2] != noTime {
		if next := before + (before - r.times[k-2]); next == first || next == last {
			return next
		}
	}
	if first > before {
		return first
	}
	return last
}

// checkTimes reports every place where the step is not regular.
func (r *reader) checkTimes() {
	switch len(r.times) {
	case 0:
		r.faultAt(r.lines.number, 0, "there are no rows below the header; want at least two, since their distance is the step")
		return
	case 1:
		r.faultAt(r.numbers[0], 0, "there is only one row; want at least two, since their distance is the step (a constant is two equal rows)")
		return
	}
	step := r.commonStep()
	var expected int64
	sure := false // a row whose time could not be read says nothing of the next one
	for k, t := range r.times {
		if t == noTime {
			sure = false
			continue
		}
		if sure && t != expected {
			r.irregular(k, expected, step)
		}
		expected, sure = t+step, true
	}
}

// commonStep returns the distance that occurs most often among the first rows, the
// smaller of two that occur equally often.
func (r *reader) commonStep() int64 {
	const rows = 64
	count := make(map[int64]int)
	for k := 1; k < min(len(r.times), rows); k++ {
		if a, b := r.times[k-1], r.times[k]; a != noTime && b > a {
			count[b-a]++
		}
	}
	step, most := hour, 0
	for d, n := range count {
		if n > most || n == most && d < step {
			step, most = d, n
		}
	}
	return step
}

// stepText writes a step in the unit that suits it.
func stepText(step int64) string {
	switch {
	case step%hour == 0:
		return fmt.Sprintf("%d h", step/hour)
	case step%minute == 0:
		return fmt.Sprintf("%d min", step/minute)
	}
	return time.Duration(step).String()
}

// irregular reports row k, which stands where expected should.
func (r *reader) irregular(k int, expected, step int64) {
	t, line := r.times[k], r.numbers[k]
	want := fmt.Sprintf("expected %s (the step is %s)", Format(expected, r.clock.zone), stepText(step))
	before := expected - step
	switch {
	case t == before:
		r.faultAt(line, 1, "%s stands twice, on line %d too; %s%s", Format(t, r.clock.zone), r.numbers[k-1], want, r.localHint(expected, t, step))
	case t < before:
		r.faultAt(line, 1, "the time goes back to %s; %s; put the rows in order", Format(t, r.clock.zone), want)
	case t > expected && (t-expected)%step == 0:
		n := (t - expected) / step
		r.faultAt(line, 1, "a gap: %s, found %s; add the missing rows (%d)%s", want, Format(t, r.clock.zone), n, r.localHint(expected, t, step))
	default:
		r.faultAt(line, 1, "the step is not regular: %s, %s%s", want, r.found(t), r.localHint(expected, t, step))
	}
}

// localHint explains what a clock that is put forward and back does to a file.
func (r *reader) localHint(expected, t, step int64) string {
	reading := r.clock.local(expected)
	_, last, n := r.clock.instants(reading)
	switch {
	case n == 2 && last == expected:
		return fmt.Sprintf("; %s occurs twice in %s, so both hours must stand in the file; where its clock keeps standard time all year write the offset or set the zone of the block",
			civilText(reading), r.clock.zone)
	case step%day == 0 && t != expected && r.clock.local(t)-r.clock.local(expected-step) == step:
		return "; a local day has 23 or 25 hours when the clock is changed, so values per day are no regular step: write them by the hour, or set zone = \"UTC\""
	}
	return ""
}
