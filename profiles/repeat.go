package profiles

import "fmt"

// segment says that from an instant on, up to the next segment, the file is read
// shift later than the time of the run.
type segment struct{ from, shift int64 }

// segments lays a file over an axis. problem is why it does not fit, or blank.
func (g grid) segments(a Axis) (list []segment, problem string) {
	if a.Start >= g.start && a.End <= g.end() {
		return []segment{{from: a.Start}}, ""
	}
	if g.again == noRepeat {
		return nil, g.tooShort(a)
	}
	c, problem := newCycle(g)
	if problem != "" {
		return nil, problem
	}
	for t := a.Start; t < a.End; {
		shift, next := c.at(t)
		if len(list) == 0 || list[len(list)-1].shift != shift {
			list = append(list, segment{t, shift})
		}
		t = next
	}
	return list, ""
}

func (g grid) tooShort(a Axis) string {
	missing := g.end()
	if a.Start < g.start || a.Start >= g.end() {
		missing = a.Start
	}
	return fmt.Sprintf("no value at %s: the file covers %s to %s, the period is %s to %s; lengthen the file, shorten the period, or set repeat = \"day\", \"week\" or \"year\" for it",
		Format(missing, a.Zone), Format(g.start, a.Zone), Format(g.end(), a.Zone), Format(a.Start, a.Zone), Format(a.End, a.Zone))
}

// cycle repeats a file by local clock time and date.
type cycle struct {
	grid
	target, source *clock // of the run and of the file: one zone, two places in time
	first          int64  // the clock's reading at the file's start
	length         int64  // of the cycle on the clock, by days and weeks
	years          int    // of the cycle, by years
}

// newCycle returns the cycle of a file, which must be whole units long.
func newCycle(g grid) (*cycle, string) {
	c := &cycle{grid: g, target: newClock(g.zone), source: newClock(g.zone)}
	c.first = c.source.local(g.start)
	last := c.source.local(g.end())
	c.length = last - c.first
	name, whole := "days", c.length >= day && c.length%day == 0
	switch g.again {
	case byWeek:
		name, whole = "weeks", c.length >= 7*day && c.length%(7*day) == 0
	case byYear:
		y0, m0, d0 := civilDate(floorDiv(c.first, day))
		y1, m1, d1 := civilDate(floorDiv(last, day))
		c.years = y1 - y0
		name, whole = "years", c.years >= 1 && m0 == m1 && d0 == d1 && floorMod(c.first, day) == floorMod(last, day)
	}
	if !whole {
		return nil, fmt.Sprintf("the file covers %s to %s on the clock of %s, which is not whole local %s: repeat = %q needs that, else the file must cover the period",
			civilText(c.first), civilText(last), g.zone, name, name[:len(name)-1])
	}
	return c, ""
}

// at returns how much later than t the file is read at t, and until when.
func (c *cycle) at(t int64) (shift, next int64) {
	if t >= c.start && t < c.end() {
		return 0, c.end()
	}
	reading := c.target.local(t)
	next = min(c.target.to, t+c.nextBreak(reading)-reading)
	u := c.find(c.image(reading), c.repeated(t, reading))
	c.source.local(u)
	// The stretch of the source's offset, and the file, may end before.
	until := min(c.source.to, c.end())
	return u - t, min(next, t+(until-u))
}

// repeated reports whether t is the second time that the clock reads so.
func (c *cycle) repeated(t, reading int64) bool {
	_, last, n := c.target.instants(reading)
	c.target.local(t)
	return n > 1 && t == last
}

// nextBreak returns the clock's reading at the next midnight, or at the next time
// of day at which the file begins; the file's own start is such a time.
func (c *cycle) nextBreak(reading int64) int64 {
	midnight := (floorDiv(reading, day) + 1) * day
	begin := floorDiv(reading, day)*day + floorMod(c.first, day)
	if begin <= reading {
		begin += day
	}
	return min(midnight, begin)
}

// image returns the clock's reading inside the file for a reading of the run.
func (c *cycle) image(reading int64) int64 {
	if c.again != byYear {
		return c.first + floorMod(reading-c.first, c.length)
	}
	y, m, d := civilDate(floorDiv(reading, day))
	y0, m0, d0 := civilDate(floorDiv(c.first, day))
	tod, tod0 := floorMod(reading, day), floorMod(c.first, day)
	began := y // the year in which the file's year began
	if m < m0 || m == m0 && (d < d0 || d == d0 && tod < tod0) {
		began--
	}
	y += y0 + int(floorMod(int64(began-y0), int64(c.years))) - began
	if m == 2 && d == 29 && !leap(y) {
		d = 28
	}
	return dayNumber(y, m, d)*day + tod
}

// find returns the instant of the file at which its clock reads so: of two the
// second where again is true; where the clock skips it, an hour (the length of the
// jump) before.
func (c *cycle) find(reading int64, again bool) int64 {
	first, last, n := c.source.instants(reading)
	inside := func(t int64) bool { return t >= c.start && t < c.end() }
	if n == 0 {
		g := c.source.gap(reading)
		first, last = reading-g.after, reading-g.before
		again = false
	}
	switch {
	case again && inside(last), !inside(first) && inside(last):
		return last
	case inside(first):
		return first
	}
	return max(c.start, min(first, c.end()-1))
}

// civilDate returns the date of day n since 1970-01-01, the inverse of dayNumber.
func civilDate(n int64) (year, month, dom int) {
	t := at(n*day, nil)
	y, m, d := t.Date()
	return y, int(m), d
}
