package results

import "time"

const (
	nanosecond = int64(1)
	second     = 1_000_000_000 * nanosecond
	hour       = 3600 * second
)

// zoneClock writes instants in local time and tells local days and months. It
// remembers the offset of the zone and the date, which change seldom, so that
// writing a time costs no look-up and no allocation.
type zoneClock struct {
	zone     *time.Location
	from, to int64 // seconds since 1970 over which offset holds
	offset   int64 // s
	suffix   [6]byte
	day      int64 // days since 1970 of the date kept
	date     [10]byte
	month    int // year·12 + month − 1 of that date
}

func newZoneClock(zone *time.Location) *zoneClock {
	if zone == nil {
		zone = time.UTC
	}
	return &zoneClock{zone: zone, from: 1, to: 0, day: -1 << 40}
}

// floorDivide divides towards minus infinity, so that times before 1970 keep their day.
func floorDivide(a, b int64) int64 {
	q := a / b
	if a%b < 0 {
		q--
	}
	return q
}

// set brings the kept offset and date to an instant and returns its local seconds
// since 1970 and the nanoseconds beyond them.
func (c *zoneClock) set(ns int64) (local, rest int64) {
	s := floorDivide(ns, second)
	rest = ns - s*second
	if s < c.from || s >= c.to {
		c.setOffset(s)
	}
	local = s + c.offset
	if day := floorDivide(local, 86400); day != c.day {
		c.day = day
		y, m, d := time.Unix(day*86400, 0).UTC().Date()
		c.month = y*12 + int(m) - 1
		digits(c.date[0:4], y)
		c.date[4] = '-'
		digits(c.date[5:7], int(m))
		c.date[7] = '-'
		digits(c.date[8:10], d)
	}
	return local, rest
}

func (c *zoneClock) setOffset(s int64) {
	t := time.Unix(s, 0).In(c.zone)
	start, end := t.ZoneBounds()
	c.from, c.to = -1<<62, 1<<62
	if !start.IsZero() {
		c.from = start.Unix()
	}
	if !end.IsZero() {
		c.to = end.Unix()
	}
	_, offset := t.Zone()
	c.offset = int64(offset)
	c.suffix[0] = '+'
	if offset < 0 {
		c.suffix[0], offset = '-', -offset
	}
	digits(c.suffix[1:3], offset/3600)
	c.suffix[3] = ':'
	digits(c.suffix[4:6], offset/60%60)
}

// digits writes n, not negative, with leading zeros over the whole of dst.
func digits(dst []byte, n int) {
	for i := len(dst) - 1; i >= 0; i-- {
		dst[i] = byte('0' + n%10)
		n /= 10
	}
}

// append appends an instant as ISO 8601 with offset; parts of a second only where
// there are any.
func (c *zoneClock) append(dst []byte, ns int64) []byte {
	local, rest := c.set(ns)
	s := int(local - c.day*86400)
	var hms [9]byte
	hms[0] = 'T'
	digits(hms[1:3], s/3600)
	hms[3] = ':'
	digits(hms[4:6], s/60%60)
	hms[6] = ':'
	digits(hms[7:9], s%60)
	dst = append(append(dst, c.date[:]...), hms[:]...)
	if rest != 0 {
		var frac [9]byte
		digits(frac[:], int(rest))
		end := len(frac)
		for frac[end-1] == '0' {
			end--
		}
		dst = append(append(dst, '.'), frac[:end]...)
	}
	return append(dst, c.suffix[:]...)
}

// text returns an instant as append writes it.
func (c *zoneClock) text(ns int64) string { return string(c.append(nil, ns)) }

// dayOf returns the local day of an instant, in days since 1970.
func (c *zoneClock) dayOf(ns int64) int64 {
	c.set(ns)
	return c.day
}

// monthOf returns the local month of an instant as year·12 + month − 1.
func (c *zoneClock) monthOf(ns int64) int {
	c.set(ns)
	return c.month
}

// appendDay appends a day, in days since 1970, as a date.
func appendDay(dst []byte, day int64) []byte {
	return time.Unix(day*86400, 0).UTC().AppendFormat(dst, "2006-01-02")
}

// appendMonth appends a month, year·12 + month − 1, as 2025-01.
func appendMonth(dst []byte, month int) []byte {
	var text [7]byte
	digits(text[0:4], month/12)
	text[4] = '-'
	digits(text[5:7], month%12+1)
	return append(dst, text[:]...)
}
