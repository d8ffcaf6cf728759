package devices

import (
	"fmt"
	"time"
)

// Charging is when a charger begins with a vehicle that has arrived.
type Charging uint8

// The ways of charging.
const (
	Unmanaged   Charging = iota // at once
	ByDeparture                 // as late as will do
	CheapHours                  // within fixed hours of the day
)

var chargings = [...]string{Unmanaged: "unmanaged", ByDeparture: "by departure", CheapHours: "cheap hours"}

// String returns the word for it.
func (c Charging) String() string {
	if int(c) < len(chargings) {
		return chargings[c]
	}
	return fmt.Sprintf("Charging(%d)", uint8(c))
}

// Session is one stay of a vehicle.
type Session struct {
	Arrive, Depart Time
	Energy         float64 // kWh at the meter: what reaches the battery, over 0.88 to 0.92 (common practice)
	Power          float64 // kW at the meter that the vehicle takes; 0: the charger's
}

// Charger is one charging point, constant while it is used. Vehicles come one after the
// other and draw constant power until they have what they need, or leave: the taper near
// full, the least current of a session and giving back are not modelled.
//
// Once begun it goes on without a pause. CheapHours begins at once where a vehicle arrives
// in From…To, else when From comes; ahead of that, if it would not be done by departure.
type Charger struct {
	Power    float64 // kW at the meter
	Charging Charging
	From, To Time           // the hours of CheapHours, local time of day; To before From wraps past midnight
	Zone     *time.Location // of the hours; nil is UTC
	Sessions []Session      // by arrival, none before the one ahead has left
}

// ChargerState is where a charger stands. Over time, with what is asked for by those that
// have arrived,
//
//	asked = Served + Need + Unserved
type ChargerState struct {
	Next      int     // the session that arrives next
	Connected bool    // the one before it is here
	Need      float64 // kWh that it still needs
	Begin     Time    // when it starts to draw
	Served    float64 // kWh delivered so far
	Unserved  float64 // kWh that had not been delivered when vehicles left
	Short     int     // vehicles that left so
}

// Start returns the state at the beginning of a run. Who has left by then never was; who is
// there still needs all it came for.
func (c *Charger) Start(now Time) ChargerState {
	var s ChargerState
	for s.Next < len(c.Sessions) && c.Sessions[s.Next].Depart <= now {
		s.Next++
	}
	return c.Observe(s, now)
}

// Observe returns the state once departures and arrivals up to now have happened.
func (c *Charger) Observe(s ChargerState, now Time) ChargerState {
	for {
		switch {
		case s.Connected && c.Sessions[s.Next-1].Depart <= now:
			s.Unserved += s.Need
			if s.Need > 0 {
				s.Short++
			}
			s.Connected, s.Need, s.Begin = false, 0, 0
		case !s.Connected && s.Next < len(c.Sessions) && c.Sessions[s.Next].Arrive <= now:
			a := &c.Sessions[s.Next]
			s.Next++
			s.Connected, s.Need = true, a.Energy
			s.Begin = c.begin(a)
		default:
			return s
		}
	}
}

// begin returns when a session starts to draw.
func (c *Charger) begin(a *Session) Time {
	if c.Charging == Unmanaged {
		return a.Arrive
	}
	latest := a.Arrive
	// Rounded up, and one more, so that the sum of a start and a duration fits in the stay.
	if needs := ceiling(a.Energy / c.draw(a)); needs < a.Depart-a.Arrive {
		latest = a.Depart - needs - 1
	}
	if c.Charging == ByDeparture {
		return latest
	}
	d, t := dayOf(shown(a.Arrive, c.zone()))
	if inWindow(c.From, c.To, t) {
		return a.Arrive
	}
	if t > c.From {
		d++
	}
	return min(latest, max(a.Arrive, firstShown(d*day+c.From, c.zone())))
}

// Wants returns the power that a charger draws now if nothing limits it, kW.
func (c *Charger) Wants(s ChargerState, now Time) float64 {
	if !s.Connected || s.Need <= 0 || now < s.Begin {
		return 0
	}
	return c.draw(&c.Sessions[s.Next-1])
}

// NextEvent returns the first instant after now at which something happens at a power, kW:
// an arrival, the beginning, a vehicle is full, a departure; or Never.
func (c *Charger) NextEvent(s ChargerState, kW float64, now Time) Time {
	next := Never
	if s.Next < len(c.Sessions) {
		next = max(c.Sessions[s.Next].Arrive, now+1)
	}
	if !s.Connected {
		return next
	}
	next = min(next, max(c.Sessions[s.Next-1].Depart, now+1))
	if s.Need > 0 && s.Begin > now {
		next = min(next, s.Begin)
	}
	if s.Need > 0 && kW > 0 {
		if full := ceiling(s.Need / kW); full < Never-now {
			next = min(next, now+max(full, 1))
		}
	}
	return next
}

// Advance returns the state after a constant power, kW, over an interval, and the energy, kWh.
// A vehicle that is full within it stops there.
func (c *Charger) Advance(s ChargerState, kW float64, interval Time) (ChargerState, float64) {
	if !s.Connected || s.Need <= 0 || !(kW > 0) {
		return s, 0
	}
	e := kW * hours(interval)
	// What is less than a nanosecond's worth and the rounding of sums is delivered too.
	if e >= s.Need-kW*hours(1)-1e-13*c.Sessions[s.Next-1].Energy {
		e, s.Need = s.Need, 0
	} else {
		s.Need -= e
	}
	s.Served += e
	return s, e
}

// draw returns the power of a session, kW.
func (c *Charger) draw(a *Session) float64 {
	if a.Power > 0 {
		return min(a.Power, c.Power)
	}
	return c.Power
}

func (c *Charger) zone() *time.Location {
	if c.Zone == nil {
		return time.UTC
	}
	return c.Zone
}

// Check returns what is wrong with the sheet, in its order.
func (c *Charger) Check() []error {
	var l faults
	l.positive("power", c.Power, "kW")
	if int(c.Charging) >= len(chargings) {
		l = append(l, fmt.Errorf("%v is no way of charging", c.Charging))
	}
	if c.Charging == CheapHours {
		l.within("beginning of the cheap hours", seconds(c.From)/3600, 0, 24, "h", "")
		l.within("end of the cheap hours", seconds(c.To)/3600, 0, 24, "h", "")
	}
	for i := range c.Sessions {
		a := &c.Sessions[i]
		l.positive(fmt.Sprintf("energy of session %d", i+1), a.Energy, "kWh")
		if !(a.Power >= 0) {
			l = append(l, fmt.Errorf("power of session %d is %v kW, it must not be below 0", i+1, a.Power))
		}
		if a.Depart <= a.Arrive {
			l = append(l, fmt.Errorf("session %d ends before it begins", i+1))
		}
		if i > 0 && a.Arrive < c.Sessions[i-1].Depart {
			l = append(l, fmt.Errorf("session %d begins before session %d has ended: a charger serves one vehicle at a time", i+1, i))
		}
	}
	return l
}

// Share puts into power what each of several chargers gets of a limit, kW, where wants is
// what each would draw: all want the same at most, the level at which the limit is used up
// (water-filling), so that nobody could get more without somebody with less giving it.
// Without a limit that binds each gets what it wants. The order makes no difference beyond
// rounding, and the sum is never above the limit by more than that. power may be wants; it
// panics if the lengths differ.
func Share(power, wants []float64, limit float64) {
	if len(power) != len(wants) {
		panic("devices: Share: the lengths differ")
	}
	level := waterLevel(wants, limit)
	for i, w := range wants {
		power[i] = min(max(w, 0), level)
	}
}

// waterLevel returns the level: those that want no more than an equal share of what is left
// are served, until nobody is left who does. O(n²) at worst, a few passes as a rule.
func waterLevel(wants []float64, limit float64) float64 {
	level := 0.0
	for {
		// What those below the level want is given; the rest is shared by the others.
		left, n := max(limit, 0), 0
		for _, w := range wants {
			if w <= level {
				left -= max(w, 0)
				continue
			}
			n++
		}
		if n == 0 {
			return level
		}
		next := left / float64(n)
		if next <= level {
			return level
		}
		level = next
	}
}

// Habit is a stay that comes again every day.
type Habit struct {
	Arrive, Depart Time // local time of day; a departure not after the arrival is on the next day
	Weekdays       bool // arrives Monday to Friday only
	Energy, Power  float64
}

// Sessions appends to sessions the stays of a habit that end after from and begin before to,
// in a zone, nil for UTC. A time that is skipped in spring is the instant of the change; one that is
// repeated in autumn is its first showing.
func (h Habit) Sessions(sessions []Session, from, to Time, zone *time.Location) []Session {
	if zone == nil {
		zone = time.UTC
	}
	first, _ := dayOf(shown(from, zone))
	for d := first - 1; ; d++ {
		arrive := firstShown(d*day+h.Arrive, zone)
		if arrive >= to {
			return sessions
		}
		leaves := d
		if h.Depart <= h.Arrive {
			leaves++
		}
		depart := firstShown(leaves*day+h.Depart, zone)
		if h.Weekdays && !weekday(d) || depart <= from || depart <= arrive {
			continue
		}
		sessions = append(sessions, Session{arrive, depart, h.Energy, h.Power})
	}
}
