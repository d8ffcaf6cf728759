package profiles

import "time"

// dayKind tells days that are alike.
type dayKind uint8

const (
	workingDay dayKind = iota
	saturday
	sunday
)

// calendar knows the local days of a meter's intervals. A day may have 23 or 25 hours,
// and the first and the last may be cut.
type calendar struct {
	start, step int64
	n           int
	zone        *time.Location

	dayOf []int32 // by interval
	tod   []int16 // by interval: time of day on the clock, in steps
	days  []localDay
}

// localDay is a day's intervals [first, end), and what stands before first had the day
// begun at midnight and run on evenly.
type localDay struct {
	first, end, base int
	kind             dayKind
}

func newCalendar(start, step int64, n int, zone *time.Location) *calendar {
	c := &calendar{}
	c.lay(start, step, n, zone)
	return c
}

// lay makes c the calendar of other intervals, unless it is that already.
func (c *calendar) lay(start, step int64, n int, zone *time.Location) {
	if c.start == start && c.step == step && c.n == n && c.zone == zone {
		return
	}
	c.start, c.step, c.n, c.zone = start, step, n, zone
	c.dayOf, c.tod, c.days = room(c.dayOf, n), room(c.tod, n), c.days[:0]
	clock := newClock(zone)
	number := int64(-1 << 62)
	for k := range n {
		local := clock.local(start + int64(k)*step)
		d := floorDiv(local, day)
		c.tod[k] = int16((local - d*day) / step)
		if d != number {
			number = d
			if last := len(c.days) - 1; last >= 0 {
				c.days[last].end = k
			}
			c.days = append(c.days, localDay{first: k, base: k - int(c.tod[k]), kind: kindOf(d)})
		}
		c.dayOf[k] = int32(len(c.days) - 1)
	}
	if last := len(c.days) - 1; last >= 0 {
		c.days[last].end = n
	}
}

// kindOf tells a day by its number since 1970-01-01, a Thursday.
func kindOf(number int64) dayKind {
	switch floorMod(number, 7) {
	case 2:
		return saturday
	case 3:
		return sunday
	}
	return workingDay
}

// slot returns the interval of day d at that time of day; of two the first, and
// ok = false where the day does not have it.
func (c *calendar) slot(d int, tod int16) (k int, ok bool) {
	day := &c.days[d]
	k = day.base + int(tod)
	if k >= day.first && k < day.end && c.tod[k] == tod {
		return k, true
	}
	if k < day.first-int(2*hour/c.step) || k >= day.end+int(2*hour/c.step) {
		return 0, false
	}
	// The clock is changed on this day: at most two hours to one side.
	for k = max(day.first, k-int(2*hour/c.step)); k < day.end && c.tod[k] <= tod; k++ {
		if c.tod[k] == tod {
			return k, true
		}
	}
	return 0, false
}

// alike calls use with every interval at k's time of day on days of k's kind within
// likeDays, k itself not among them.
func (c *calendar) alike(k int, use func(int)) {
	d, tod := int(c.dayOf[k]), c.tod[k]
	kind := c.days[d].kind
	for other := max(0, d-likeDays); other <= min(len(c.days)-1, d+likeDays); other++ {
		if other == d || c.days[other].kind != kind {
			continue
		}
		if j, ok := c.slot(other, tod); ok {
			use(j)
		}
	}
}
