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

// rowTime is the instant of a row, or noTime, and its line.
type rowTime struct {
	t    int64
	line int
}

// stepRows is the number of rows from which the step of a file is told.
const stepRows = 64

// addTime takes the instant of a row. The first rows are kept until the step can be
// told from them; later ones are checked at once, so that a long file needs no
// room for its times.
func (r *reader) addTime(t int64) {
	row := rowTime{t, r.lines.number}
	r.count++
	r.before, r.last = r.last, row
	if r.step == 0 {
		r.first = append(r.first, row)
		if len(r.first) == stepRows {
			r.tellStep()
		}
		return
	}
	r.checkTime(row)
}

// tellStep finds the step and checks the rows that were kept.
func (r *reader) tellStep() {
	r.step = commonStep(r.first)
	r.checked.t = noTime
	for _, row := range r.first {
		r.checkTime(row)
	}
}

// checkTime reports a row that is not a step after the row before. A row whose time
// could not be read says nothing of the next one.
func (r *reader) checkTime(row rowTime) {
	if row.t != noTime && r.checked.t != noTime && row.t != r.checked.t+r.step {
		r.irregular(row)
	}
	r.checked = row
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
	switch {
	case r.count == 0:
		r.unclear = true
		if r.later {
			return last
		}
		return first
	case r.last.t == noTime:
		return first
	case r.count > 1 && r.before.t != noTime:
		if next := r.last.t + (r.last.t - r.before.t); next == first || next == last {
			return next
		}
	}
	if first > r.last.t {
		return first
	}
	return last
}

// endTimes closes the check of the times.
func (r *reader) endTimes() {
	switch {
	case r.count == 0:
		r.fault(0, "there are no rows below the header; want at least two, since their distance is the step")
	case r.count == 1:
		r.faultAt(r.last.line, 0, "there is only one row; want at least two, since their distance is the step (a constant is two equal rows)")
	case r.step == 0:
		r.tellStep()
	}
}

// commonStep returns the distance that occurs most often among rows, the smaller of
// two that occur equally often.
func commonStep(rows []rowTime) int64 {
	count := make(map[int64]int)
	for k := 1; k < len(rows); k++ {
		if a, b := rows[k-1].t, rows[k].t; a != noTime && b > a {
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

// irregular reports a row that is not a step after the one checked before.
func (r *reader) irregular(row rowTime) {
	t, line, step := row.t, row.line, r.step
	before := r.checked.t
	expected := before + step
	want := fmt.Sprintf("expected %s (the step is %s)", Format(expected, r.clock.zone), stepText(step))
	switch {
	case t == before:
		r.faultAt(line, 1, "%s stands twice, on line %d too; %s%s", Format(t, r.clock.zone), r.checked.line, want, r.localHint(expected, t, step))
	case t < before:
		r.faultAt(line, 1, "the time goes back to %s; %s; put the rows in order", Format(t, r.clock.zone), want)
	case t > expected && (t-expected)%step == 0:
		n := (t - expected) / step
		r.faultAt(line, 1, "a gap: %s, found %s; add the missing rows (%d)%s", want, Format(t, r.clock.zone), n, r.localHint(expected, t, step))
	default:
		r.faultAt(line, 1, "the step is not regular: %s, found %s%s", want, Format(t, r.clock.zone), r.localHint(expected, t, step))
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
