package devices

import "time"

const day = 24 * 3600 * Second

// wall is what a control's clock shows: local time in nanoseconds, counted as if
// every day had 24 hours, from 1970-01-01 00:00 local.
type wall = int64

// shown returns the latest local time that a clock in a zone has shown up to an
// instant. It stands still while the hour that is repeated in autumn runs for the
// second time, so that every switching time comes once a day: at its first showing.
func shown(t Time, zone *time.Location) wall {
	at := time.Unix(0, t).In(zone)
	_, offset := at.Zone()
	local := t + int64(offset)*Second
	start, _ := at.ZoneBounds()
	if start.IsZero() {
		return local
	}
	// A clock is put back by less than a day.
	began := start.Unix()
	if t/Second-began > 24*3600 {
		return local
	}
	_, before := start.Add(-1).Zone()
	if last := (began+int64(before))*Second - 1; last > local {
		return last
	}
	return local
}

// firstShown returns the first instant at which a clock in a zone shows w or, where w
// is in the hour that is skipped in spring, anything later.
func firstShown(w wall, zone *time.Location) Time {
	t := w - day // no zone is a day away from UTC
	for {
		at := time.Unix(0, t).In(zone)
		_, offset := at.Zone()
		x := max(t, w-int64(offset)*Second)
		_, end := at.ZoneBounds()
		if end.IsZero() || x < end.Unix()*Second {
			return x
		}
		t = end.Unix() * Second
	}
}

// dayOf returns the local day, counted from 1970-01-01, and the time in it.
func dayOf(w wall) (int64, Time) {
	d := w / day
	if w%day < 0 {
		d--
	}
	return d, w - d*day
}

// weekday tells whether a day counted from 1970-01-01, a Thursday, is Monday to Friday.
func weekday(d int64) bool {
	n := ((d+3)%7 + 7) % 7 // 0 is Monday
	return n < 5
}

// closedAt tells whether a time control wants its bank closed when its clock shows w.
// A window whose end is before its beginning wraps past midnight; every instant is
// judged by its own day, so that a window of Friday night ends with Friday.
func (c *CapacitorControl) closedAt(w wall) bool {
	d, t := dayOf(w)
	if c.Weekdays && !weekday(d) {
		return false
	}
	if c.TimeOn <= c.TimeOff {
		return c.TimeOn <= t && t < c.TimeOff
	}
	return c.TimeOn <= t || t < c.TimeOff
}

// nextSwitch returns the first instant after t at which the clock alone changes what
// a time control wants, or Never.
func (c *CapacitorControl) nextSwitch(t Time) Time {
	zone := c.zone()
	now := shown(t, zone)
	wants := c.closedAt(now)
	today, _ := dayOf(now)
	first, second := min(c.TimeOn, c.TimeOff), max(c.TimeOn, c.TimeOff)
	for d := today; d <= today+8; d++ { // a weekend and a day of grace
		for _, w := range [3]wall{d * day, d*day + first, d*day + second} {
			if w <= now {
				continue
			}
			// In the skipped hour the clock shows something later at once.
			if x := firstShown(w, zone); c.closedAt(shown(x, zone)) != wants {
				return x
			}
		}
	}
	return Never
}

// nextDay returns the instant at which the local day after that of t begins.
func (c *CapacitorControl) nextDay(t Time) Time {
	d, _ := dayOf(shown(t, c.zone()))
	return firstShown((d+1)*day, c.zone())
}

func (c *CapacitorControl) zone() *time.Location {
	if c.Zone == nil {
		return time.UTC
	}
	return c.Zone
}
