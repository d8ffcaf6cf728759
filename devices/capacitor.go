package devices

import (
	"fmt"
	"math"
	"time"
)

// CapacitorKind names the quantity that a capacitor control follows.
type CapacitorKind uint8

// The kinds of capacitor control. A held one never asks.
const (
	CapacitorHeld CapacitorKind = iota
	CapacitorVoltage
	CapacitorKVAR
	CapacitorCurrent
	CapacitorPowerFactor
	CapacitorTemperature
	CapacitorTime
)

var kinds = [...]string{"held", "voltage", "kvar", "current", "power factor", "temperature", "time"}

// String returns the word of the settings sheet.
func (k CapacitorKind) String() string {
	if int(k) < len(kinds) {
		return kinds[k]
	}
	return fmt.Sprintf("CapacitorKind(%d)", uint8(k))
}

// CapacitorControl is the settings sheet of a switched capacitor bank. It is
// constant while it is used.
type CapacitorControl struct {
	Kind CapacitorKind
	// On and Off are in the unit of the kind: V on the 120 V base, kvar, A, power
	// factor (lagging positive, leading negative), °C. Their order says which side
	// closes: with On below Off the bank closes below On and opens above Off (as by
	// voltage); with On above Off it closes above On and opens below Off (as by kvar).
	On, Off float64

	// OverrideOn and OverrideOff, V on the 120 V base, close the bank below and open it
	// above, whatever the control wants; NaN: none. A bank that an override moved stays
	// there until the voltage is back beyond the override's value by OverrideDeadband.
	OverrideOn, OverrideOff float64
	OverrideDeadband        float64

	TimeOn, TimeOff Time           // after local midnight: CapacitorTime is closed from TimeOn to before TimeOff, past midnight where TimeOff is less; never where they are equal
	Weekdays        bool           // on Saturday and Sunday it wants open
	Zone            *time.Location // of the control's clock; nil is UTC

	Delay      Time
	Lockout    Time // after opening, before it can close again
	DailyLimit int  // closings plus openings a local day, override openings exempt; 0: none

	// Rating, A, is that of the watched section: below 5 % of it nothing is asked for by
	// power factor. NaN or 0: unknown, no test.
	Rating float64
}

// leastLoad is the share of the watched section's rating below which a power factor
// says nothing.
const leastLoad = 0.05

// CapacitorReading is what a capacitor control sees.
type CapacitorReading struct {
	V120 float64 // voltage on the 120 V base
	// Quantity is kvar, A or °C by the kind of control; by power factor it is the
	// current of the watched section in A.
	Quantity float64
	P, Q     float64 // by power factor: kW and kvar through the watched section
	// Clock is the instant that the control's clock shows, UTC. It is the present, but
	// at start-up the time of day stands still while event time goes on.
	Clock Time
}

// CapacitorState is the state of a bank and its control. The zero value, with
// Closed, is that of a control that has seen nothing yet.
type CapacitorState struct {
	Closed   bool
	Ask      int8    // +1 close, −1 open, 0 nothing
	Reason   Reason  // of the request
	Latch    Reason  // OverrideLow or OverrideHigh while the bank stays where that put it
	Locked   bool    // it opened, and cannot close before Lock
	Lock     Time    // end of the lockout
	Since    Time    // when the request appeared
	Measured float64 // what was seen last of the request's quantity; 0 without a request

	Counted int   // switchings that count on the local day Day
	Day     int64 // local day, from 1970-01-01

	// What the clock says holds from From to before Switch.
	From, Switch Time
	Window       bool // the time control wants closed
}

// Observe returns the state after a reading. A request starts its clock when it
// appears or changes direction, and drops it when it vanishes.
func (c *CapacitorControl) Observe(s CapacitorState, r CapacitorReading, now Time) CapacitorState {
	if c.Kind == CapacitorHeld {
		return c.Drop(s)
	}
	s = c.calendar(s, r.Clock)
	if c.released(s, r) {
		s.Latch = None
	}
	ask, why := c.wants(s, r)
	if ask == 0 {
		if s.Locked && now >= s.Lock { // not earlier: it may be what the request is due by
			s.Locked, s.Lock = false, 0
		}
		return c.Drop(s)
	}
	if ask != s.Ask {
		s.Ask, s.Since = ask, now
	}
	s.Reason, s.Measured = why, c.measured(r, why)
	return s
}

// CalmRange returns the voltages, V on the 120 V base, between which a control that Rests
// is left as it is, and stands near no edge: ok is false where there is no such range, of
// any control but one by voltage.
func (c *CapacitorControl) CalmRange() (low, high float64, ok bool) {
	if c.Kind == CapacitorHeld {
		return math.Inf(-1), math.Inf(1), true
	}
	return c.On + 2*Near, c.Off - 2*Near, c.Kind == CapacitorVoltage && c.On < c.Off && c.DailyLimit <= 0
}

// Rests tells whether nothing is asked, locked out or latched.
func (c *CapacitorControl) Rests(s CapacitorState) bool {
	return s.Ask == 0 && !s.Locked && s.Latch == None && s.Reason == None
}

// calendar brings what depends on the local clock up to date.
func (c *CapacitorControl) calendar(s CapacitorState, clock Time) CapacitorState {
	if c.Kind != CapacitorTime && c.DailyLimit <= 0 || s.From <= clock && clock < s.Switch {
		return s
	}
	w := shown(clock, c.zone())
	s.From, s.Switch = clock, Never
	if d, _ := dayOf(w); d != s.Day {
		s.Day, s.Counted = d, 0
	}
	if c.Kind == CapacitorTime {
		s.Window = c.closedAt(w)
		s.Switch = c.nextSwitch(clock)
	}
	if c.DailyLimit > 0 {
		s.Switch = min(s.Switch, c.nextDay(clock))
	}
	return s
}

// NextSwitch returns the next instant at which the clock alone may change what the
// control asks for: a switching time, or midnight where there is a daily limit; Never
// where the clock plays no part. It is an event: the control must Observe there,
// before it acts on anything due at that instant. It is right after an Observe; where
// none was possible (no solution), it may lie in the past and is then no event.
func (c *CapacitorControl) NextSwitch(s CapacitorState) Time {
	if c.Kind == CapacitorHeld || c.Kind != CapacitorTime && c.DailyLimit <= 0 {
		return Never
	}
	return s.Switch
}

// released tells whether the voltage is back beyond the value of the override that
// moved the bank by the deadband.
func (c *CapacitorControl) released(s CapacitorState, r CapacitorReading) bool {
	switch s.Latch {
	case OverrideLow:
		return above(r.V120, c.OverrideOn+c.OverrideDeadband)
	case OverrideHigh:
		return below(r.V120, c.OverrideOff-c.OverrideDeadband)
	}
	return false
}

// wants returns what is asked for, and why: the overrides first, then the control.
func (c *CapacitorControl) wants(s CapacitorState, r CapacitorReading) (int8, Reason) {
	var ask int8
	var why Reason
	switch {
	case c.overrides() && above(r.V120, c.OverrideOff):
		ask, why = -1, OverrideHigh
	case c.overrides() && below(r.V120, c.OverrideOn):
		ask, why = +1, OverrideLow
	case s.Latch != None:
		return 0, None
	case c.Kind == CapacitorTime:
		ask, why = -1, ByTime
		if s.Window {
			ask = +1
		}
	default:
		ask, why = c.follows(r), ByControl
	}
	if s.Closed == (ask > 0) {
		return 0, None
	}
	if c.DailyLimit > 0 && s.Counted >= c.DailyLimit && why != OverrideHigh {
		return 0, None
	}
	return ask, why
}

// overrides tells whether the voltage can override the control: a control by voltage
// has no override.
func (c *CapacitorControl) overrides() bool { return c.Kind != CapacitorVoltage }

// follows returns what the control's own quantity asks for.
func (c *CapacitorControl) follows(r CapacitorReading) int8 {
	if c.Kind == CapacitorPowerFactor && c.idle(r) {
		return 0
	}
	q, on, off := c.quantity(r), c.on(), c.off()
	tolerance := func(threshold float64) float64 {
		if c.Kind == CapacitorVoltage {
			return Inside
		}
		return Inside * c.scale(threshold)
	}
	onHigh := on > off
	switch {
	case onHigh && q-on > tolerance(on), !onHigh && on-q > tolerance(on):
		return +1
	case onHigh && off-q > tolerance(off), !onHigh && q-off > tolerance(off):
		return -1
	}
	return 0
}

// scale is what tolerances of quantities other than voltages are relative to: the
// threshold or, where that is zero, the span of the two.
func (c *CapacitorControl) scale(threshold float64) float64 {
	if threshold == 0 {
		return math.Abs(c.on() - c.off())
	}
	return math.Abs(threshold)
}

// quantity, on and off are what is compared; a power factor is compared by its angle.
func (c *CapacitorControl) quantity(r CapacitorReading) float64 {
	switch c.Kind {
	case CapacitorVoltage:
		return r.V120
	case CapacitorPowerFactor:
		return math.Atan2(r.Q, math.Abs(r.P))
	}
	return r.Quantity
}

func (c *CapacitorControl) on() float64  { return c.threshold(c.On) }
func (c *CapacitorControl) off() float64 { return c.threshold(c.Off) }

func (c *CapacitorControl) threshold(x float64) float64 {
	if c.Kind == CapacitorPowerFactor {
		return PowerFactorAngle(x)
	}
	return x
}

// PowerFactorAngle returns the angle, rad, of a power factor that is positive where
// the current lags and negative where it leads: 0.9 is +25.84°, −0.9 is −25.84°, and
// 1 and −1 are 0.
func PowerFactorAngle(pf float64) float64 {
	return math.Copysign(math.Acos(min(1, math.Abs(pf))), pf)
}

// idle tells whether the watched section carries too little for its power factor to
// say anything.
func (c *CapacitorControl) idle(r CapacitorReading) bool {
	least := leastLoad * c.Rating
	return least > 0 && least-r.Quantity > Inside*least || r.P == 0 && r.Q == 0
}

// measured returns what the log shows for a request: V on the 120 V base for
// overrides and voltage, hours of the local day for time, the signed power factor,
// else the quantity.
func (c *CapacitorControl) measured(r CapacitorReading, why Reason) float64 {
	switch {
	case why == OverrideLow || why == OverrideHigh || c.Kind == CapacitorVoltage:
		return r.V120
	case why == ByTime:
		_, t := dayOf(shown(r.Clock, c.zone()))
		return seconds(t) / 3600
	case c.Kind == CapacitorPowerFactor:
		angle := c.quantity(r)
		return math.Copysign(math.Cos(angle), angle)
	}
	return r.Quantity
}

// Due returns when the request is to be acted on, or Never: the end of its delay,
// for a closing not before the end of the lockout.
func (c *CapacitorControl) Due(s CapacitorState) Time {
	if s.Ask == 0 {
		return Never
	}
	due := s.Since + max(c.Delay, Shortest)
	if s.Ask > 0 && s.Locked {
		due = max(due, s.Lock)
	}
	return due
}

// Standing tells whether a request stands; one that the lockout holds back does.
func (c *CapacitorControl) Standing(s CapacitorState) bool { return s.Ask != 0 }

// Act closes or opens the bank. Without a request nothing moves, and From is To.
func (c *CapacitorControl) Act(s CapacitorState, now Time) (CapacitorState, Action) {
	a := Action{From: position(s.Closed), Reason: s.Reason, Measured: s.Measured}
	if s.Ask == 0 {
		a.To = a.From
		return s, a
	}
	s.Closed = s.Ask > 0
	a.To = position(s.Closed)
	a.Set = c.crossed(s.Closed, s.Reason)
	a.Waited = seconds(now - s.Since)
	s.Latch = None
	if s.Reason == OverrideLow || s.Reason == OverrideHigh {
		s.Latch = s.Reason
	}
	if s.Reason != OverrideHigh && c.DailyLimit > 0 {
		s.Counted++
	}
	if !s.Closed {
		s.Locked, s.Lock = true, now+c.Lockout
	}
	return c.Drop(s), a
}

// crossed returns the threshold of an action, in the unit of measured.
func (c *CapacitorControl) crossed(closes bool, why Reason) float64 {
	switch {
	case why == OverrideLow:
		return c.OverrideOn
	case why == OverrideHigh:
		return c.OverrideOff
	case why == ByTime && closes:
		return seconds(c.TimeOn) / 3600
	case why == ByTime:
		return seconds(c.TimeOff) / 3600
	case closes:
		return c.On
	}
	return c.Off
}

// Drop forgets the request; lockout, latch and count stay.
func (c *CapacitorControl) Drop(s CapacitorState) CapacitorState {
	s.Ask, s.Reason, s.Since, s.Measured = 0, None, 0, 0
	return s
}

// Forget leaves only the position.
func (c *CapacitorControl) Forget(s CapacitorState) CapacitorState {
	return CapacitorState{Closed: s.Closed}
}

// Edge tells whether a reading is within Near of a threshold it is compared with. A
// temperature and a time do not come from a solution.
func (c *CapacitorControl) Edge(s CapacitorState, r CapacitorReading) bool {
	if c.Kind == CapacitorHeld {
		return false
	}
	if c.overrides() && (near(r.V120, c.OverrideOn) || near(r.V120, c.OverrideOff)) {
		return true
	}
	if s.Latch == OverrideLow && near(r.V120, c.OverrideOn+c.OverrideDeadband) ||
		s.Latch == OverrideHigh && near(r.V120, c.OverrideOff-c.OverrideDeadband) {
		return true
	}
	switch c.Kind {
	case CapacitorVoltage:
		return near(r.V120, c.On) || near(r.V120, c.Off)
	case CapacitorPowerFactor:
		least := leastLoad * c.Rating
		if least > 0 && math.Abs(r.Quantity-least) <= Near*least {
			return true
		}
	case CapacitorTemperature, CapacitorTime:
		return false
	}
	q := c.quantity(r)
	return math.Abs(q-c.on()) <= Near*c.scale(c.on()) || math.Abs(q-c.off()) <= Near*c.scale(c.off())
}

// position is 1 for closed and 0 for open.
func position(closed bool) int {
	if closed {
		return 1
	}
	return 0
}
