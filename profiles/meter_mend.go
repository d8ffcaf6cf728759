package profiles

import (
	"fmt"
	"math"

	"yearflow/sim/tables"
)

// cause is why a value is not taken as it stands.
type cause uint8

const (
	good cause = iota
	missing
	negative
	zeros
	stuck
	spike
	counterReset
)

var causeNames = [...]string{"", "gap", "negative value", "run of zeros", "stuck value", "spike", "register set back"}

// method is how a value was estimated.
type method uint8

const (
	byLine method = iota + 1
	byLikeDays
	byMeanDay
	byMean
)

var methodNames = [...]string{"", "straight line", "like days", "mean day of the meter", "mean of the meter"}

// mending is the outcome for one meter.
type mending struct {
	meter            *Meter
	mended           []Mended
	warnings, faults tables.Faults
}

// work is one channel on its grid: what was read (NaN: nothing), what stands now, why
// it does not stand as read and how it was estimated.
type work struct {
	cal      *calendar
	old, now []float64
	why      []cause
	how      []method
	totals   []total
}

// total is a stretch whose sum a register knows.
type total struct{ from, n int }

// mender mends one meter after the other; each worker has its own.
type mender struct {
	files []meterFile
	rules MeterRules
	rows  ordered
	other ordered // of reactive power
	real  work
	kvar  work
	cal   calendar
	pick  []float64
	days  meanDays
	out   *mending
	name  string
	net   bool // the meter counts what flows back as negative
}

func newMender(files []meterFile, rules MeterRules) *mender {
	if rules.SpikeFactor == 0 {
		rules.SpikeFactor = 5
	}
	return &mender{files: files, rules: rules}
}

func (w *mender) where(r placed) tables.Pos {
	return tables.Pos{File: w.files[r.file].name, Line: int(r.line)}
}

func (w *mender) fault(at tables.Pos, format string, args ...any) {
	w.out.faults.Add(at, "meter %q %s", w.name, fmt.Sprintf(format, args...))
}

func (w *mender) warn(at tables.Pos, format string, args ...any) {
	w.out.warnings.Add(at, "meter %q %s", w.name, fmt.Sprintf(format, args...))
}

// mend makes a meter of its rows.
func (w *mender) mend(s *store) (out mending) {
	w.out, w.name = &out, s.name
	w.net = s.block.Net || w.rules.Net[s.name]
	register := s.block.Values == "register"
	w.rows.order(&s.real)
	w.rows.trim()
	if len(w.rows.rows) == 0 {
		w.warn(s.real.pos, "has no value of real power; it is left out")
		return out
	}
	step, at, problem := stepOf(w.rows.rows, w.where)
	if problem != "" {
		w.fault(w.where(at), "%s", problem)
		return out
	}
	m := &Meter{Name: s.name, Pos: s.real.pos, step: int64(step) * second, start: int64(w.rows.rows[0].sec) * second, zone: w.zone(s)}
	n := int((w.rows.rows[len(w.rows.rows)-1].sec - w.rows.rows[0].sec) / step)
	if !register {
		n++
		if s.block.Stamped == "end" {
			m.start -= m.step
		}
	}
	w.cal.lay(m.start, m.step, n, m.zone)
	origin := w.rows.rows[0].sec
	w.real.begin(&w.cal, n)
	w.place(&w.real, &w.rows, origin, step, register, s.real.energy)
	m.Read = len(w.rows.rows)
	w.tell(m)
	w.mendReal(m)
	if len(out.faults) > 0 {
		return out
	}
	if s.reactive.seen {
		w.mendReactive(m, s, origin, step, register)
	}
	out.meter = m
	sortMended(out.mended)
	return out
}

func (w *work) begin(cal *calendar, n int) {
	w.cal = cal
	w.old, w.now = room(w.old, n), room(w.now, n)
	w.why, w.how = room(w.why, n), room(w.how, n)
	w.totals = w.totals[:0]
	for k := range n {
		w.old[k], w.why[k], w.how[k] = math.NaN(), good, 0
	}
}

// room returns n elements, in s where it has room.
func room[T any](s []T, n int) []T {
	if cap(s) < n {
		return make([]T, n)
	}
	return s[:n]
}

// place puts readings to their intervals, as power; what is then missing is a gap.
func (w *mender) place(to *work, o *ordered, origin, step uint32, register, energy bool) {
	scale := 1.0
	if energy {
		scale = 3600 / float64(step)
	}
	if register {
		w.placeRegister(to, o, origin, step, scale)
	} else {
		for _, r := range o.rows {
			// Readings of reactive power may lie outside the span of the real ones.
			if r.sec >= origin && (r.sec-origin)%step == 0 && int((r.sec-origin)/step) < len(to.old) {
				to.old[(r.sec-origin)/step] = r.v * scale
			}
		}
	}
	for k, v := range to.old {
		v = float64(float32(v)) // as it is kept, so that sums agree to the last digit
		to.old[k], to.now[k] = v, v
		if v != v && to.why[k] == good {
			to.why[k] = missing
		}
	}
}

// tell lists what was done to rows before they were values.
func (w *mender) tell(m *Meter) {
	from, to := m.start, m.start+int64(len(w.real.old))*m.step
	if w.rows.untidy > 0 {
		w.list("rows out of order, sorted", from, to, w.rows.untidy, 0)
	}
	if w.rows.repeated > 0 {
		w.list("row repeated, dropped", from, to, w.rows.repeated, 0)
	}
	if c := w.rows.conflicts; len(c) > 0 {
		first := c[0]
		w.list("two values for one time, the later kept", int64(first.first.sec)*second, int64(c[len(c)-1].first.sec)*second, len(c), 0)
		w.warn(w.where(first.second), "has %d times with two values, the first at %s: %.7g here and %.7g at %s; the later row is kept",
			len(c), Format(int64(first.first.sec)*second, m.zone), first.second.v, first.first.v, w.where(first.first))
	}
}

func (w *mender) list(rule string, from, to int64, count int, energy float64) {
	w.out.mended = append(w.out.mended, Mended{w.name, rule, from, to, count, energy})
}

// mendReal validates, estimates and edits real power.
func (w *mender) mendReal(m *Meter) {
	to := &w.real
	w.checkNegative(m)
	if len(w.out.faults) > 0 {
		return
	}
	w.checkZeros(m)
	w.checkStuck()
	w.checkSpikes(m)
	w.estimate(to)
	m.values = to.narrowed()
	h := float64(m.step) / float64(hour)
	var before, after wide
	for k, v := range to.now {
		if old := to.old[k]; old == old {
			before.add(old)
		}
		after.add(v)
		if to.why[k] != good {
			m.Edited++
		}
	}
	m.Before, m.After = before.hi*h, after.hi*h
	w.listWork(m, to, "", h)
	if share := float64(m.Edited) / float64(len(m.values)); share > 0.1 {
		w.warn(m.Pos, "is estimated for %.0f %% of its time", 100*share)
	}
}

// mendReactive closes the gaps of the companion; its values are not judged. One that is
// known for less than half of the time is left out, so that the load's power factor
// holds.
func (w *mender) mendReactive(m *Meter, s *store, origin, step uint32, register bool) {
	w.other.order(&s.reactive)
	rows := w.other.rows
	for _, r := range rows {
		if r.v == r.v && (int64(r.sec)-int64(origin))%int64(step) != 0 {
			w.fault(w.where(r), "has a reactive value at %s, between the steps of its real ones", Format(int64(r.sec)*second, m.zone))
			return
		}
	}
	to := &w.kvar
	to.begin(&w.cal, len(w.real.old))
	w.place(to, &w.other, origin, step, register, s.reactive.energy)
	known := 0
	for _, why := range to.why {
		if why == good {
			known++
		}
	}
	if 2*known < len(to.why) {
		if known > 0 {
			w.warn(s.reactive.pos, "has reactive values for %.0f %% of its time; they are not used", 100*float64(known)/float64(len(to.why)))
		}
		return
	}
	w.estimate(to)
	m.kvar = to.narrowed()
	w.listWork(m, to, "kvar ", float64(m.step)/float64(hour))
}

// narrowed rounds what stands now to what is kept, and returns it.
func (w *work) narrowed() []float32 {
	out := make([]float32, len(w.now))
	for k, v := range w.now {
		out[k] = float32(v)
		w.now[k] = float64(out[k])
	}
	return out
}

// listWork lists every stretch that was edited for one cause by one method.
func (w *mender) listWork(m *Meter, to *work, prefix string, h float64) {
	for k := 0; k < len(to.now); k++ {
		if to.why[k] == good {
			continue
		}
		first := k
		var added wide
		for ; k < len(to.now) && to.why[k] == to.why[first] && to.how[k] == to.how[first]; k++ {
			added.add(to.now[k])
			if old := to.old[k]; old == old {
				added.add(-old)
			}
		}
		w.list(prefix+causeNames[to.why[first]]+", "+methodNames[to.how[first]],
			m.start+int64(first)*m.step, m.start+int64(k)*m.step, k-first, added.hi*h)
		k--
	}
}
