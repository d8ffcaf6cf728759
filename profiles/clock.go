package profiles

import (
	"errors"
	"fmt"
	"math"
	"time"
)

const (
	second int64 = 1e9
	minute       = 60 * second
	hour         = 60 * minute
	day          = 24 * hour

	// No two clocks on Earth differ by more than this, local mean times of the
	// nineteenth century included.
	widest = 32 * hour
)

// Format returns t, in nanoseconds since 1970 UTC, as ISO 8601 with the offset of
// zone (nil: UTC), 2025-01-01T00:00:00-07:00. A fraction of a second is written
// only where there is one.
func Format(t int64, zone *time.Location) string {
	return string(AppendTime(make([]byte, 0, 40), t, zone))
}

// AppendTime appends Format(t, zone) to dst, without an allocation where dst has
// room for 36 bytes.
func AppendTime(dst []byte, t int64, zone *time.Location) []byte {
	return at(t, zone).AppendFormat(dst, "2006-01-02T15:04:05.999999999-07:00")
}

// Month returns the local month of t, "2025-01".
func Month(t int64, zone *time.Location) string {
	return string(AppendMonth(make([]byte, 0, 8), t, zone))
}

// AppendMonth appends Month(t, zone) to dst.
func AppendMonth(dst []byte, t int64, zone *time.Location) []byte {
	return at(t, zone).AppendFormat(dst, "2006-01")
}

// Day returns the number of the local day that t is in, counted from 1970-01-01.
func Day(t int64, zone *time.Location) int {
	_, offset := at(t, zone).Zone()
	return int(floorDiv(t+int64(offset)*second, day))
}

// DayStart returns the first instant of local day n, counted from 1970-01-01.
// Where the clock skips midnight it is the instant of the skip.
func DayStart(n int, zone *time.Location) int64 {
	c := newClock(zone)
	civil := int64(n) * day
	if first, _, k := c.instants(civil); k > 0 {
		return first
	}
	g := c.gap(civil)
	return g.at
}

// ParseTime reads a date or a date-time of ISO 8601: 2025-01-01,
// 2025-01-01T06:00, 2025-01-01 06:00:30, with or without an offset (Z, -07:00,
// -0700, -07); 24:00 is the end of its day. Without an offset it is on the clock of
// zone (nil: UTC): of an hour that the clock repeats the first is meant, and a
// time that the clock skips is an error.
func ParseTime(text string, zone *time.Location) (int64, error) {
	s, problem := parseStamp([]byte(text))
	if problem != "" {
		return 0, fmt.Errorf("%s, got %q", problem, shorten(text))
	}
	if s.zoned {
		return s.civil - s.offset, nil
	}
	c := newClock(zone)
	first, _, n := c.instants(s.civil)
	if n == 0 {
		return 0, errors.New(c.skipped(s.civil))
	}
	return first, nil
}

func at(t int64, zone *time.Location) time.Time {
	if zone == nil {
		zone = time.UTC
	}
	return time.Unix(0, t).In(zone)
}

// clock turns local time into instants and back. It remembers the stretch of
// constant offset it last used, so it is fast along a file and must not be shared
// between goroutines.
type clock struct {
	zone     *time.Location
	from, to int64 // the stretch [from, to)
	offset   int64 // local minus UTC in it
}

func newClock(zone *time.Location) *clock {
	if zone == nil {
		zone = time.UTC
	}
	c := &clock{zone: zone}
	c.move(0)
	return c
}

// move makes the stretch the one that holds t.
func (c *clock) move(t int64) {
	local := time.Unix(0, t).In(c.zone)
	_, offset := local.Zone()
	start, end := local.ZoneBounds()
	c.offset = int64(offset) * second
	c.from, c.to = math.MinInt64, math.MaxInt64
	if !start.IsZero() && start.Unix() > math.MinInt64/second {
		c.from = start.UnixNano()
	}
	if !end.IsZero() && end.Unix() < math.MaxInt64/second {
		c.to = end.UnixNano()
	}
	if c.to <= t {
		// Beyond the table of a zone package time ends each year, by UTC, after 365
		// days: on 31 December of a leap year the stretch that it gives is over already.
		c.from = floorDiv(t, day) * day
		c.to = c.from + day
	}
}

// local returns the clock's reading at t, as nanoseconds since 1970 of a clock
// that never jumps.
func (c *clock) local(t int64) int64 {
	if t < c.from || t >= c.to {
		c.move(t)
	}
	return t + c.offset
}

// instants returns the first and the last instant at which the clock reads civil,
// and how many there are: 0 where it is skipped, 2 where it is repeated.
func (c *clock) instants(civil int64) (first, last int64, n int) {
	if t := civil - c.offset; t >= c.from+widest && t < c.to-widest {
		return t, t, 1
	}
	for probe := civil - widest; ; probe = c.to {
		c.move(probe)
		if t := civil - c.offset; t >= c.from && t < c.to {
			if n == 0 {
				first = t
			}
			last = t
			n++
		}
		if c.to > civil+widest {
			return first, last, n
		}
	}
}

// gap is a jump of a clock: at the instant at the offset changes.
type gap struct{ at, before, after int64 }

// gap returns the jump that skips civil.
func (c *clock) gap(civil int64) gap {
	c.move(civil - widest)
	for {
		g := gap{at: c.to, before: c.offset}
		if g.at > civil+widest {
			return gap{at: civil - c.offset, before: c.offset, after: c.offset}
		}
		c.move(g.at)
		g.after = c.offset
		if civil >= g.at+g.before && civil < g.at+g.after {
			return g
		}
	}
}

// skipped says that civil does not exist, and what to do.
func (c *clock) skipped(civil int64) string {
	g := c.gap(civil)
	s := fmt.Sprintf("%s does not exist in %s: the clock goes from %s to %s", civilText(civil), c.zone,
		at(g.at+g.before, nil).Format("15:04"), at(g.at+g.after, nil).Format("15:04"))
	if name := fixedZone(g.before); name != "" {
		s += fmt.Sprintf("; where a clock keeps standard time all year write the offset, or set zone = %q", name)
	} else {
		s += "; where a clock keeps standard time all year write the offset"
	}
	return s
}

// fixedZone names the zone of a constant offset in whole hours, or is blank.
func fixedZone(offset int64) string {
	h := offset / hour
	switch {
	case offset%hour != 0 || h < -12 || h > 14:
		return ""
	case h == 0:
		return "UTC"
	}
	return fmt.Sprintf("Etc/GMT%+d", -h) // the sign of these names counts westwards
}

func civilText(civil int64) string { return at(civil, nil).Format("2006-01-02T15:04:05.999999999") }

// stamp is a written time: the clock's reading and, where zoned, its offset.
type stamp struct {
	civil, offset int64
	zoned         bool
}

const wantTime = "want a time such as 2025-01-31, 2025-01-31T06:00 or 2025-01-31T06:00:00-07:00"

// parseStamp reads a time; problem is what is wrong with it, or blank.
func parseStamp(b []byte) (s stamp, problem string) {
	year, ok1 := digits(b, 0, 4)
	month, ok2 := digits(b, 5, 2)
	dom, ok3 := digits(b, 8, 2)
	if !ok1 || !ok2 || !ok3 || b[4] != '-' || b[7] != '-' {
		return s, wantTime
	}
	switch {
	case year < 1800 || year > 2200:
		return s, "want a year from 1800 to 2200"
	case month < 1 || month > 12 || dom < 1 || dom > monthDays(year, month):
		return s, "no such date: want year-month-day"
	}
	s.civil = dayNumber(year, month, dom) * day
	if len(b) == 10 {
		return s, ""
	}
	clock, rest, ok := parseClock(b[10:])
	if !ok {
		return s, wantTime
	}
	s.civil += clock
	if len(rest) == 0 {
		return s, ""
	}
	s.offset, s.zoned = parseOffset(rest)
	if !s.zoned {
		return s, wantTime
	}
	return s, ""
}

// parseClock reads T06:00, T06:00:30 or T06:00:30.5 and returns what follows it.
func parseClock(b []byte) (t int64, rest []byte, ok bool) {
	if b[0] != 'T' && b[0] != ' ' && b[0] != 't' {
		return 0, nil, false
	}
	h, ok1 := digits(b, 1, 2)
	m, ok2 := digits(b, 4, 2)
	if !ok1 || !ok2 || b[3] != ':' || h > 24 || m > 59 {
		return 0, nil, false
	}
	t = int64(h)*hour + int64(m)*minute
	b = b[6:]
	if len(b) > 0 && b[0] == ':' {
		s, ok3 := digits(b, 1, 2)
		if !ok3 || s > 59 {
			return 0, nil, false
		}
		t += int64(s) * second
		b = b[3:]
		if len(b) > 1 && b[0] == '.' {
			i := 1
			for unit := second / 10; i < len(b) && isDigit(b[i]); i++ {
				t += int64(b[i]-'0') * unit
				unit /= 10
			}
			if i == 1 || i > 10 {
				return 0, nil, false
			}
			b = b[i:]
		}
	}
	return t, b, t <= day
}

// parseOffset reads Z, +hh, +hhmm or +hh:mm.
func parseOffset(b []byte) (offset int64, ok bool) {
	if len(b) == 1 && (b[0] == 'Z' || b[0] == 'z') {
		return 0, true
	}
	if b[0] != '+' && b[0] != '-' {
		return 0, false
	}
	h, ok := digits(b, 1, 2)
	m := 0
	switch {
	case ok && len(b) == 3:
	case ok && len(b) == 5:
		m, ok = digits(b, 3, 2)
	case ok && len(b) == 6 && b[3] == ':':
		m, ok = digits(b, 4, 2)
	default:
		return 0, false
	}
	if !ok || h > 15 || m > 59 {
		return 0, false
	}
	offset = int64(h)*hour + int64(m)*minute
	if b[0] == '-' {
		offset = -offset
	}
	return offset, true
}

func isDigit(c byte) bool { return c-'0' <= 9 }

// digits reads the n digits at b[i:].
func digits(b []byte, i, n int) (v int, ok bool) {
	if len(b) < i+n {
		return 0, false
	}
	for _, c := range b[i : i+n] {
		if !isDigit(c) {
			return 0, false
		}
		v = v*10 + int(c-'0')
	}
	return v, true
}

func leap(year int) bool { return year%4 == 0 && (year%100 != 0 || year%400 == 0) }

func monthDays(year, month int) int {
	switch {
	case month == 2 && leap(year):
		return 29
	case month == 2:
		return 28
	case month == 4 || month == 6 || month == 9 || month == 11:
		return 30
	}
	return 31
}

// dayNumber returns the days from 1970-01-01 to a date of the Gregorian calendar,
// counted in years that begin in March, so that the leap day comes last.
func dayNumber(year, month, dom int) int64 {
	if month <= 2 {
		year--
		month += 12
	}
	y := int64(year)
	return 365*y + floorDiv(y, 4) - floorDiv(y, 100) + floorDiv(y, 400) +
		(153*int64(month-3)+2)/5 + int64(dom) - 1 - 719468
}

func floorDiv(a, b int64) int64 {
	q := a / b
	if a%b < 0 {
		q--
	}
	return q
}

func floorMod(a, b int64) int64 { return a - floorDiv(a, b)*b }

// shorten keeps a quoted cell readable in a message.
func shorten(s string) string {
	const most = 40
	if len(s) <= most {
		return s
	}
	return s[:most] + "..."
}
