package devices

import (
	"fmt"
	"math"
	"time"
)

// Dispatch is what decides on a battery's power.
type Dispatch uint8

// The kinds of dispatch.
const (
	BySchedule      Dispatch = iota // fixed windows of the day
	PeakShaving                     // keeps the flow through a section below a target
	SelfConsumption                 // keeps the flow through a section at nothing
	ByProfile                       // follows a profile
)

var dispatches = [...]string{BySchedule: "schedule", PeakShaving: "peak shaving", SelfConsumption: "self-consumption", ByProfile: "profile"}

// String returns the word of batteries.csv.
func (d Dispatch) String() string {
	if int(d) < len(dispatches) {
		return dispatches[d]
	}
	return fmt.Sprintf("Dispatch(%d)", uint8(d))
}

// Battery is the sheet of a storage unit, constant while it is used. Power is positive
// when it is delivered to the grid, as a generator's. Standby consumption and ageing are
// not modelled; reactive power is that of an [Inverter].
type Battery struct {
	Energy    float64 // kWh between empty and full
	Power     float64 // kW at the terminals, the most either way
	RoundTrip float64 // efficiency, terminals to terminals, above 0 to 1; 0: 0.85 (common practice)
	Reserve   float64 // share of Energy below which it does not discharge
	Initial   float64 // share of Energy stored at the start

	Dispatch Dispatch
	Windows  []Window       // of BySchedule: the first that holds the time counts, outside all it rests
	Zone     *time.Location // of the windows; nil is UTC
	// PeakShaving discharges what the flow exceeds Target by, and charges up to Recharge,
	// kW; Recharge must not be above Target.
	Target, Recharge float64
}

// Window is a time of day at which a battery runs at a fixed power.
type Window struct {
	From, To Time    // local time of day; To before From wraps past midnight, each day for itself
	Weekdays bool    // Monday to Friday only
	Power    float64 // kW, positive delivered, negative drawn
}

// BatteryReading is what the dispatch sees.
type BatteryReading struct {
	Flow    float64 // kW through the named section, positive towards the load, while
	Present float64 // the battery delivers this, kW
	Profile float64 // kW of the profile now, positive delivered
}

// BatteryState is how much is stored, kWh.
type BatteryState struct {
	Stored float64
}

// Exchange is what an interval did to a battery, kWh at its terminals:
//
//	In = Out + Loss + change of what is stored
type Exchange struct {
	In, Out, Loss float64
}

// Start returns the state at the start.
func (b *Battery) Start() BatteryState {
	return BatteryState{Stored: min(max(b.Initial, 0), 1) * b.Energy}
}

// Request returns the power that the dispatch wants and the store allows now, kW. With
// the battery's own effect on the flow taken out,
//
//	bare = Flow + Present
//	peak shaving: bare − Target above Target, bare − Recharge below Recharge, else 0
//	self-consumption: bare
//
// The network's losses make the flow answer not quite one to one: the flow is solved
// again with what is requested, until it stays.
func (b *Battery) Request(s BatteryState, r BatteryReading, now Time) float64 {
	bare := r.Flow + r.Present
	var p float64
	switch b.Dispatch {
	case BySchedule:
		p = b.scheduled(shown(now, b.zone()))
	case PeakShaving:
		p = max(0, bare-b.Target) + min(0, bare-b.Recharge)
	case SelfConsumption:
		p = bare
	case ByProfile:
		p = r.Profile
	}
	return b.Allowed(s, p)
}

// Allowed returns the part of a power, kW, that the unit and its store allow.
func (b *Battery) Allowed(s BatteryState, kW float64) float64 {
	switch {
	case kW > 0 && s.Stored > b.floor(s):
		return min(kW, b.Power)
	case kW < 0 && s.Stored < b.Energy:
		return max(kW, -b.Power)
	}
	return 0
}

// Until returns how long a constant power, kW, can be kept up before the battery is full
// or down to its reserve: 0 where it is already, Never without power. It is rounded up to
// the nanosecond.
func (b *Battery) Until(s BatteryState, kW float64) Time {
	var hours float64
	switch {
	case kW > 0:
		hours = (s.Stored - b.floor(s)) * b.oneWay() / kW
	case kW < 0:
		hours = (b.Energy - s.Stored) / (b.oneWay() * -kW)
	default:
		return Never
	}
	return ceiling(hours)
}

// Advance returns the state after a constant power, kW, over an interval, and the energies.
// A battery that becomes full or empty within it stops there.
//
//	charging: change = √η·In        discharging: Out = √η·(−change)
//
// with η the round-trip efficiency. At the end of [Battery.Until] the store is exactly at
// its limit.
func (b *Battery) Advance(s BatteryState, kW float64, interval Time) (BatteryState, Exchange) {
	if interval <= 0 {
		return s, Exchange{}
	}
	η, energy := b.oneWay(), kW*hours(interval)
	// What is nearer to a limit than a nanosecond and the rounding of sums is at it.
	near := math.Abs(kW)*hours(1)/η + 1e-13*b.Energy
	switch {
	case kW < 0:
		in := -energy
		stored := s.Stored + η*in
		if stored > b.Energy-near {
			stored = max(s.Stored, b.Energy)
			in = (stored - s.Stored) / η
		}
		return BatteryState{stored}, Exchange{In: in, Loss: in - (stored - s.Stored)}
	case kW > 0:
		out, floor := energy, b.floor(s)
		stored := s.Stored - out/η
		if stored < floor+near {
			stored = floor
			out = (s.Stored - stored) * η
		}
		return BatteryState{stored}, Exchange{Out: out, Loss: s.Stored - stored - out}
	}
	return s, Exchange{}
}

// NextSwitch returns the first instant after now at which a schedule wants another power,
// or Never.
func (b *Battery) NextSwitch(now Time) Time {
	if b.Dispatch != BySchedule || len(b.Windows) == 0 {
		return Never
	}
	zone := b.zone()
	w := shown(now, zone)
	wants := b.scheduled(w)
	today, _ := dayOf(w)
	for d := today; d <= today+8; d++ { // a weekend and a day of grace
		first := Never
		for i := -1; i < len(b.Windows); i++ {
			edges := [2]wall{d * day, d * day} // the day may change what counts
			if i >= 0 {
				edges = [2]wall{d*day + b.Windows[i].From, d*day + b.Windows[i].To}
			}
			for _, e := range edges {
				if e <= w {
					continue
				}
				if x := firstShown(e, zone); x < first && b.scheduled(shown(x, zone)) != wants {
					first = x
				}
			}
		}
		if first != Never {
			return first
		}
	}
	return Never
}

// scheduled returns the power of the window that holds a local time, kW.
func (b *Battery) scheduled(w wall) float64 {
	d, t := dayOf(w)
	for i := range b.Windows {
		c := &b.Windows[i]
		if !(c.Weekdays && !weekday(d)) && inWindow(c.From, c.To, t) {
			return c.Power
		}
	}
	return 0
}

// inWindow tells whether a time of day is from first until before last, past midnight
// where last comes first.
func inWindow(first, last, t Time) bool {
	if first <= last {
		return first <= t && t < last
	}
	return first <= t || t < last
}

// Check returns what is wrong with the sheet, in its order.
func (b *Battery) Check() []error {
	var l faults
	l.positive("energy", b.Energy, "kWh")
	l.positive("power", b.Power, "kW")
	l.within("round-trip efficiency", b.RoundTrip, 0, 1, "", "")
	l.within("reserve", b.Reserve, 0, 1, "of the energy", "")
	l.within("initial energy", b.Initial, 0, 1, "of the energy", "")
	if b.Dispatch == PeakShaving && !(b.Recharge <= b.Target) {
		l.within("recharge", b.Recharge, math.Inf(-1), b.Target, "kW, the target", "")
	}
	if b.Dispatch == BySchedule {
		for i := range b.Windows {
			w := &b.Windows[i]
			l.within(fmt.Sprintf("power of window %d", i+1), w.Power, -b.Power, b.Power, "kW", "")
			l.within(fmt.Sprintf("beginning of window %d", i+1), seconds(w.From)/3600, 0, 24, "h", "")
			l.within(fmt.Sprintf("end of window %d", i+1), seconds(w.To)/3600, 0, 24, "h", "")
		}
	}
	if int(b.Dispatch) >= len(dispatches) {
		l = append(l, fmt.Errorf("%v is no dispatch", b.Dispatch))
	}
	return l
}

// floor returns what must stay in the store, kWh: a battery that begins below its reserve
// keeps what it has.
func (b *Battery) floor(s BatteryState) float64 { return min(b.Reserve*b.Energy, s.Stored) }

// oneWay returns the efficiency of one way through the battery.
func (b *Battery) oneWay() float64 {
	if b.RoundTrip == 0 {
		return math.Sqrt(0.85)
	}
	return math.Sqrt(b.RoundTrip)
}

func (b *Battery) zone() *time.Location {
	if b.Zone == nil {
		return time.UTC
	}
	return b.Zone
}

// hours converts a duration to hours.
func hours(t Time) float64 { return float64(t) / (3600 * float64(Second)) }

// ceiling converts hours to a duration, rounded up; more than three centuries is Never.
func ceiling(hours float64) Time {
	ns := math.Ceil(hours * 3600 * float64(Second))
	if !(ns < float64(Never)) {
		return Never
	}
	return Time(ns)
}
