package devices

import (
	"math"
	"math/cmplx"
)

// TapChanger is the settings sheet of the control of one step-voltage regulator, of
// a ganged bank, or of a load tap changer, with what it needs to know of the unit. It
// is constant while it is used. Direction of power is ignored.
type TapChanger struct {
	Set       float64 // V, secondary
	Bandwidth float64 // V, total: the band is Set ± Bandwidth/2
	Delay     Time    // before the first step of a sequence
	TapTime   Time    // between the steps of a sequence
	// Integrate: outside a request the clock runs down at the rate it ran up, instead
	// of starting again from zero.
	Integrate bool

	R, X     float64 // line-drop compensation, V at rated CT primary current
	Rotation float64 // rad: the angle of a, +30° for AB, BC, CA, −30° for BA, CB, AC, 0 for wye

	LimitHigh, LimitLow float64 // V, secondary, at the unit itself; NaN: none
	LimitMargin         float64 // V

	Held            bool // never asks
	Highest, Lowest int  // stops

	PT    float64 // ratio of the voltage transformer
	CT    float64 // primary rating of the current transformer, A
	Range float64 // p.u. each way, such as 0.10
	Steps int     // each way, such as 16
	TypeB bool
}

// Ratio returns the unit's output over its input voltage at a tap,
//
//	type A: 1 + Range/Steps·tap        type B: 1/(1 − Range/Steps·tap)
//
// (Kersting, Distribution System Modeling and Analysis, ch. 7, with the sign of tap
// positive for raise).
func (c *TapChanger) Ratio(tap int) float64 {
	step := c.Range / float64(c.Steps) * float64(tap)
	if c.TypeB {
		return 1 / (1 - step)
	}
	return 1 + step
}

// TapReading is what the control sees, in secondary volts.
type TapReading struct {
	Local float64 // |V|/PT: the limits look at it
	Relay float64 // after line-drop compensation: the band looks at it
}

// Measure returns the reading at a regulated voltage v, V, and a current i, A, that
// leaves the bank on the unit's first phase:
//
//	Local = |V|/PT        Relay = |V/PT − (R + jX)·a·I/CT|,   a = 1∠Rotation
//
// (Kersting, ch. 7; the rotation of pairs is common practice). The voltage of a unit
// across two phases is that of the pair.
func (c *TapChanger) Measure(v, i complex128) TapReading {
	local := complex(real(v)/c.PT, imag(v)/c.PT)
	r := TapReading{Local: cmplx.Abs(local)}
	r.Relay = r.Local
	if c.R != 0 || c.X != 0 {
		z := complex(c.R, c.X)
		if c.Rotation != 0 {
			sin, cos := math.Sincos(c.Rotation)
			z *= complex(cos, sin)
		}
		z *= i
		r.Relay = cmplx.Abs(local - complex(real(z)/c.CT, imag(z)/c.CT))
	}
	return r
}

// CalmRange returns the relay voltages, V, between which a control that Rests is left as
// it is, and stands near no edge; ok is false where there is no such range, of a held
// control or one with limits.
func (c *TapChanger) CalmRange() (low, high float64, ok bool) {
	half := c.Bandwidth/2 - 2*Near
	return c.Set - half, c.Set + half, !c.Held && c.LimitHigh != c.LimitHigh && c.LimitLow != c.LimitLow
}

// Calm tells of most readings that leave a control at rest that they do: Observe changes
// nothing and Edge is false. Where Calm is false, they say.
func (c *TapChanger) Calm(s TapState, r TapReading) bool {
	low, high, ok := c.CalmRange()
	return s.Rests() && (c.Held || ok && r.Relay > low && r.Relay < high)
}

// Rests tells whether nothing is asked and no clock shows anything.
func (s TapState) Rests() bool { return s.Ask == 0 && s.Side == 0 && s.Rest == 0 && !s.Sequence }

// TapState is the state of a tap changer and its control. The zero value, with a
// position, is that of a control that has seen nothing yet.
type TapState struct {
	Position int
	Ask      int8    // +1 raise, −1 lower, 0 nothing
	Reason   Reason  // of the request
	Sequence bool    // the request has been acted on: what follows comes after TapTime
	Side     int8    // the direction that Clock counts for; 0: the clock shows nothing
	Since    Time    // when Clock was read: the request's appearance or vanishing, or the last step of a sequence
	Clock    Time    // what the clock showed at Since
	Next     Time    // when the request is due
	Rest     Time    // the end of a forced movement that began at the last instant seen; 0: none
	Measured float64 // V, what was seen last of the request's quantity; 0 without a request
}

// Backward tells whether power flows back through a unit with the current i, A, turned as the
// compensator turns it, at the voltage v, V: whether Re(v·ī)/|v| is below zero by more than a
// billionth of the current transformer's rating. Less is what rounding makes of no flow.
func (c *TapChanger) Backward(v, i complex128) bool {
	p := real(v)*real(i) + imag(v)*imag(i)
	if !(p < 0) {
		return false
	}
	least := 1e-9 * max(c.CT, 0)
	return p*p > least*least*(real(v)*real(v)+imag(v)*imag(v))
}

// Observe returns the state after a reading. A request starts its clock when it
// appears or changes direction. One that vanishes drops it, or leaves it running
// down where timers integrate.
func (c *TapChanger) Observe(s TapState, r TapReading, now Time) TapState {
	if s.Rest != now+c.tapTime() {
		s.Rest = 0
	}
	ask, why := c.wants(s, r)
	if ask == 0 {
		return c.vanish(s, now)
	}
	was := s.Reason
	if ask != s.Ask {
		s.Clock = c.resumed(s, ask, now)
		s.Ask, s.Side, s.Sequence, s.Since = ask, ask, false, now
		s.Next = now + c.delay() - s.Clock
		was = None
	}
	s.Reason, s.Measured = why, r.Relay
	if forced(why) {
		s.Measured = r.Local
	}
	switch {
	case s.Sequence: // the next step is due when it is due, whatever asks for it now
	case forced(why) && !forced(was):
		// At once; but two limits that are nearer together than a step, with another
		// device between them, must not move this one twice at one instant.
		s.Next = now
		if s.Rest != 0 {
			s.Next = s.Rest
		}
	case !forced(why) && forced(was):
		s.Next = max(now, s.Since+c.delay()-s.Clock)
	}
	return s
}

// resumed returns what the clock shows when a request appears in direction ask: what
// is left of the last one in that direction, which is nothing unless timers integrate.
func (c *TapChanger) resumed(s TapState, ask int8, now Time) Time {
	if s.Side != ask {
		return 0
	}
	return max(0, s.Clock-(now-s.Since))
}

// vanish returns the state when nothing is asked.
func (c *TapChanger) vanish(s TapState, now Time) TapState {
	next := TapState{Position: s.Position, Rest: s.Rest}
	if !c.Integrate || s.Sequence {
		return next
	}
	if s.Ask == 0 {
		if s.Clock > now-s.Since {
			return s // still running down
		}
		return next
	}
	next.Clock = min(s.Clock+now-s.Since, c.delay())
	if next.Clock > 0 {
		next.Side, next.Since = s.Side, now
	}
	return next
}

// wants returns the direction that the reading asks for, and why.
func (c *TapChanger) wants(s TapState, r TapReading) (int8, Reason) {
	if c.Held {
		return 0, None
	}
	if c.beyondHigh(s, r) && c.may(s, r, -1) {
		return -1, LimitHigh
	}
	if c.beyondLow(s, r) && c.may(s, r, +1) {
		return +1, LimitLow
	}
	if below(r.Relay, c.Set-c.Bandwidth/2) && c.may(s, r, +1) {
		return +1, BandLow
	}
	if above(r.Relay, c.Set+c.Bandwidth/2) && c.may(s, r, -1) {
		return -1, BandHigh
	}
	return 0, None
}

// beyondHigh tells whether the way back from the upper limit is to start or to go on.
func (c *TapChanger) beyondHigh(s TapState, r TapReading) bool {
	return above(r.Local, c.LimitHigh+c.LimitMargin) || s.Reason == LimitHigh && above(r.Local, c.LimitHigh)
}

// beyondLow is the mirror of beyondHigh.
func (c *TapChanger) beyondLow(s TapState, r TapReading) bool {
	return below(r.Local, c.LimitLow-c.LimitMargin) || s.Reason == LimitLow && below(r.Local, c.LimitLow)
}

// may tells whether a step is possible at the stops and stays within the limit on
// its side, by the ratio of the taps.
func (c *TapChanger) may(s TapState, r TapReading, step int) bool {
	if step > 0 {
		return s.Position < c.Highest && !above(c.after(s, r, step), c.LimitHigh)
	}
	return s.Position > c.Lowest && !below(c.after(s, r, step), c.LimitLow)
}

// after returns the local voltage that a step would make.
func (c *TapChanger) after(s TapState, r TapReading, step int) float64 {
	return r.Local * c.Ratio(s.Position+step) / c.Ratio(s.Position)
}

// Due returns when the request is to be acted on, or Never.
func (c *TapChanger) Due(s TapState) Time {
	if s.Ask == 0 {
		return Never
	}
	return s.Next
}

// Standing tells whether a request stands.
func (c *TapChanger) Standing(s TapState) bool { return s.Ask != 0 }

// Act moves one tap. The next step of the sequence is due after TapTime, if the next
// Observe still asks for it. Without a request nothing moves, and From is To.
func (c *TapChanger) Act(s TapState, now Time) (TapState, Action) {
	a := Action{From: s.Position, To: s.Position + int(s.Ask), Reason: s.Reason, Measured: s.Measured}
	if s.Ask == 0 {
		return s, a
	}
	a.Set = c.crossed(s)
	a.Waited = seconds(s.Clock + now - s.Since)
	s.Position = a.To
	s.Sequence, s.Since, s.Clock = true, now, 0
	s.Next = now + c.tapTime()
	if forced(s.Reason) {
		s.Rest = s.Next
	}
	return s, a
}

// crossed returns the threshold that the measured value lies beyond. On the way back
// within the margin that is the limit itself.
func (c *TapChanger) crossed(s TapState) float64 {
	switch s.Reason {
	case BandLow:
		return c.Set - c.Bandwidth/2
	case BandHigh:
		return c.Set + c.Bandwidth/2
	case LimitHigh:
		if above(s.Measured, c.LimitHigh+c.LimitMargin) {
			return c.LimitHigh + c.LimitMargin
		}
		return c.LimitHigh
	case LimitLow:
		if below(s.Measured, c.LimitLow-c.LimitMargin) {
			return c.LimitLow - c.LimitMargin
		}
		return c.LimitLow
	}
	return math.NaN()
}

// Drop forgets the request and the clock.
func (c *TapChanger) Drop(s TapState) TapState { return TapState{Position: s.Position} }

// Forget leaves only the position.
func (c *TapChanger) Forget(s TapState) TapState { return TapState{Position: s.Position} }

// Edge tells whether a reading is within Near of a threshold it is compared with:
// the edges of the band, the limits with and without margin, and the limits as one
// step either way would meet them. A held control compares nothing.
func (c *TapChanger) Edge(s TapState, r TapReading) bool {
	if c.Held {
		return false
	}
	return near(r.Relay, c.Set-c.Bandwidth/2) || near(r.Relay, c.Set+c.Bandwidth/2) ||
		near(r.Local, c.LimitHigh) || near(r.Local, c.LimitHigh+c.LimitMargin) ||
		near(r.Local, c.LimitLow) || near(r.Local, c.LimitLow-c.LimitMargin) ||
		s.Position < c.Highest && near(c.after(s, r, +1), c.LimitHigh) ||
		s.Position > c.Lowest && near(c.after(s, r, -1), c.LimitLow)
}

// OutOfBand tells whether the relay voltage is outside the band, whatever the control
// can do about it.
func (c *TapChanger) OutOfBand(r TapReading) bool {
	return below(r.Relay, c.Set-c.Bandwidth/2) || above(r.Relay, c.Set+c.Bandwidth/2)
}

// AtStop tells whether the unit stands at its highest or its lowest position.
func (c *TapChanger) AtStop(s TapState) bool {
	return s.Position >= c.Highest || s.Position <= c.Lowest
}

func (c *TapChanger) delay() Time   { return max(c.Delay, Shortest) }
func (c *TapChanger) tapTime() Time { return max(c.TapTime, Shortest) }

// forced tells whether a limit asks, not the band.
func forced(r Reason) bool { return r == LimitHigh || r == LimitLow }
