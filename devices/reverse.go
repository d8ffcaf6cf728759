package devices

import (
	"fmt"
	"math"
	"math/cmplx"
)

// ReverseMode says what the control of a tap changer does while power flows back.
type ReverseMode uint8

// The reverse modes of a settings sheet. In "forward" the load side is regulated by
// the forward settings; "backward" is what follows from [ReversePower.Source].
const (
	ReverseNone    ReverseMode = iota // direction is ignored
	ForwardOnly                       // forward; holds on reverse flow
	ReverseOnly                       // the mirror: backward; holds on forward flow
	ReverseIdle                       // forward on forward flow; holds else
	ReverseFollow                     // forward on forward flow, backward on reverse flow; holds in between
	ReverseNeutral                    // forward on forward flow; after 10 s of reverse flow to neutral, and there until forward flow; holds else
	ReverseStay                       // always the load side, by the reverse settings from reverse flow on until forward flow
)

var reverseModes = [...]string{ReverseNone: "none", ForwardOnly: "forward only", ReverseOnly: "reverse only", ReverseIdle: "idle",
	ReverseFollow: "follow", ReverseNeutral: "neutral", ReverseStay: "stay"}

// String returns the word of the settings sheet.
func (m ReverseMode) String() string {
	if int(m) < len(reverseModes) {
		return reverseModes[m]
	}
	return fmt.Sprintf("ReverseMode(%d)", uint8(m))
}

// Source tells whether the mode regulates the source side on reverse flow, by the
// reverse settings and with reversed action: a raise of the tap lowers that side.
func (m ReverseMode) Source() bool { return m == ReverseOnly || m == ReverseFollow }

// Settings tells whether the mode makes use of the reverse settings.
func (m ReverseMode) Settings() bool { return m.Source() || m == ReverseStay }

// NeutralDelay is how long power flows back before a control in mode neutral runs to
// neutral (design rule; makers differ).
const NeutralDelay = 10 * Second

// ReversePower is the control of a tap changer that minds the direction of power: two
// settings sheets of one unit, and which of them is in use when. The unit's own data
// (PT, CT, Range, Steps, type, stops, TapTime, Held) are those of Forward and must
// be the same in both sheets.
//
// Direction is the sign of the real part of the current, which counts as flow only
// beyond Threshold either way. Where a control holds, it does not ask for anything,
// limits included, and the clock is dropped.
type ReversePower struct {
	Mode      ReverseMode
	Threshold float64 // A, of the primary
	Forward   TapChanger
	Backward  TapChanger
}

// ReverseReading is what the control sees.
type ReverseReading struct {
	Forward  TapReading // at the load side, by the forward sheet
	Backward TapReading // by the reverse sheet, at the side that it regulates
	Current  float64    // A: the real part of the current that leaves on the load side
}

// Measure returns the reading at a regulated voltage v, V, with the current i, A,
// that leaves the bank on the unit's first phase; back and out are the same at the
// source side: its voltage, and the current that leaves towards the source.
//
//	Current = Re(a·I·V̄)/|V|
//
// with the a of [TapChanger.Measure], and 0 where there is no voltage.
func (c *ReversePower) Measure(v, i, back, out complex128) ReverseReading {
	r := ReverseReading{Forward: c.Forward.Measure(v, i)}
	if c.Mode.Source() {
		r.Backward = c.Backward.Measure(back, out)
	} else {
		r.Backward = c.Backward.Measure(v, i)
	}
	if size := cmplx.Abs(v); size > 0 {
		r.Current = real(i*cmplx.Rect(1, c.Forward.Rotation)*cmplx.Conj(v)) / size
	}
	return r
}

// ReverseState is the state of a tap changer and its control. The zero value, with a
// position, is that of a control that has seen nothing yet.
type ReverseState struct {
	TapState // its positions and directions are those of the unit
	Way      Way
	Turned   bool // mode neutral: power has flowed back since Began, or the run goes on
	Parked   bool // mode neutral: the unit is to be at neutral until power flows forward
	Began    Time // mode neutral: when the reverse flow began, or the last step of the run
	Ready    Time // mode neutral: when the run may go on
}

// Way is what a control does with a direction of flow.
type Way int8

// The ways to act. Unset is that of a control that has seen nothing yet.
const (
	Unset     Way = iota
	Regulates     // by the forward sheet
	Reverses      // by the reverse sheet
	Holds
	Parks // runs to neutral, or waits for it
)

// ways holds what each mode does on reverse flow, in the dead zone and on forward flow.
var ways = [...][3]Way{
	ReverseNone:    {Regulates, Regulates, Regulates},
	ForwardOnly:    {Holds, Regulates, Regulates},
	ReverseOnly:    {Reverses, Reverses, Holds},
	ReverseIdle:    {Holds, Holds, Regulates},
	ReverseFollow:  {Reverses, Holds, Regulates},
	ReverseNeutral: {Parks, Holds, Regulates}, // in the dead zone it parks where it has begun to
	ReverseStay:    {Reverses, Unset, Regulates},
}

// way returns what the control does in a state at a direction of flow. In the dead
// zone, stay keeps the settings that the last flow beyond it has chosen.
func (c *ReversePower) way(s ReverseState, flow int, now Time) Way {
	if int(c.Mode) >= len(ways) {
		return Holds
	}
	w := ways[c.Mode][flow+1]
	switch {
	case c.Mode == ReverseNeutral && flow == 0 && c.parked(s, now):
		return Parks
	case w == Unset && s.Way == Reverses:
		return Reverses
	case w == Unset:
		return Regulates
	}
	return w
}

// parked tells whether power has flowed back for long enough, before now.
func (c *ReversePower) parked(s ReverseState, now Time) bool {
	return s.Parked || s.Turned && now > s.Ready
}

// least is the smallest current, as a share of the primary rating of the current
// transformer, that tolerances are relative to: a threshold of zero has them too.
const least = 1e-3

func (c *ReversePower) scale() float64 { return max(c.Threshold, least*c.Forward.CT) }

// flow returns the direction of a current: +1 forward, −1 reverse, 0 within the dead
// zone, whose edges belong to it.
func (c *ReversePower) flow(current float64) int {
	switch beyond := c.Threshold + Inside*c.scale(); {
	case current > beyond:
		return +1
	case current < -beyond:
		return -1
	}
	return 0
}

// Observe returns the state after a reading.
func (c *ReversePower) Observe(s ReverseState, r ReverseReading, now Time) ReverseState {
	flow := c.flow(r.Current)
	w := c.way(s, flow, now)
	was := s.Way
	s.Way = w
	if w != Parks {
		s.Turned, s.Parked, s.Began, s.Ready = false, false, 0, 0
	}
	switch w {
	case Regulates, Reverses:
		if was != w && c.Mode != ReverseStay {
			s.TapState = c.hold(s.TapState, now)
		}
		sheet, reading := c.sheet(w, r)
		s.TapState = c.turn(w, sheet.Observe(c.turn(w, s.TapState), reading, now))
		if was != w && s.Ask != 0 && !s.Sequence && !forced(s.Reason) {
			// The request is the same, the delay that of the settings now in use.
			s.Next = s.Since + sheet.delay() - s.Clock
		}
		if s.Ask != 0 { // what the other sheet's clock shows may be more than this delay
			s.Next = max(now, s.Next)
		}
	case Parks:
		s = c.park(s, r, flow, now)
	default:
		s.TapState = c.hold(s.TapState, now)
	}
	return s
}

// hold drops the request and the clock. What is left is that a limit has moved the
// unit at this instant.
func (c *ReversePower) hold(s TapState, now Time) TapState {
	next := TapState{Position: s.Position}
	if s.Rest == now+c.Forward.tapTime() {
		next.Rest = s.Rest
	}
	return next
}

// park asks for the next step to neutral.
func (c *ReversePower) park(s ReverseState, r ReverseReading, flow int, now Time) ReverseState {
	if !s.Turned {
		s.Turned, s.Began, s.Ready = true, now, now+NeutralDelay
	}
	s.Parked = c.parked(s, now)
	measured := s.Measured
	s.TapState = c.hold(s.TapState, now)
	step := c.toNeutral(s.Position)
	if step == 0 || !c.Forward.may(s.TapState, r.Forward, step) {
		return s
	}
	s.Ask, s.Side, s.Reason = int8(step), int8(step), Reverse
	s.Since, s.Next, s.Measured = s.Began, max(now, s.Ready), measured
	if r.Current == r.Current {
		s.Measured = r.Current
	}
	return s
}

// toNeutral returns the direction of the next step to neutral, or as near to it as
// the stops let it; 0 there.
func (c *ReversePower) toNeutral(position int) int {
	neutral := min(max(0, c.Forward.Lowest), c.Forward.Highest)
	switch {
	case c.Forward.Held || position == neutral:
		return 0
	case position < neutral:
		return +1
	}
	return -1
}

// sheet returns the sheet in use and what it looks at. The source side moves against
// the tap: V_source = V_load/ratio(tap). In mirrored taps u = −tap that is
//
//	type A: V_load/(1 − Range/Steps·u)        type B: V_load·(1 + Range/Steps·u)
//
// so that to its source side a type A is a type B, and the other way round.
func (c *ReversePower) sheet(w Way, r ReverseReading) (TapChanger, TapReading) {
	if w != Reverses {
		return c.Forward, r.Forward
	}
	sheet := c.Backward
	if c.Mode.Source() {
		sheet.TypeB = !sheet.TypeB
		sheet.Highest, sheet.Lowest = -c.Backward.Lowest, -c.Backward.Highest
	}
	return sheet, r.Backward
}

// turn mirrors a state where the source side is regulated; twice is nothing.
func (c *ReversePower) turn(w Way, s TapState) TapState {
	if w == Reverses && c.Mode.Source() {
		s.Position, s.Ask, s.Side = -s.Position, -s.Ask, -s.Side
	}
	return s
}

// Due returns when the request is to be acted on, or Never.
func (c *ReversePower) Due(s ReverseState) Time { return c.Forward.Due(s.TapState) }

// Standing tells whether a request stands. The wait for the run to neutral is one,
// unless the unit is there.
func (c *ReversePower) Standing(s ReverseState) bool { return s.Ask != 0 }

// Act moves one tap. Measured and Set of a step to neutral are the current and the
// threshold of reverse flow, A; those of a step for the source side its voltage, V.
func (c *ReversePower) Act(s ReverseState, now Time) (ReverseState, Action) {
	if s.Ask == 0 {
		var a Action
		s.TapState, a = c.Forward.Act(s.TapState, now)
		return s, a
	}
	sheet, _ := c.sheet(s.Way, ReverseReading{})
	t, a := sheet.Act(c.turn(s.Way, s.TapState), now)
	s.TapState = c.turn(s.Way, t)
	if s.Way == Reverses && c.Mode.Source() {
		a.From, a.To = -a.From, -a.To
	}
	if s.Way == Parks {
		a.Set = -c.Threshold
		s.Parked, s.Began, s.Ready = true, now, s.Next
	}
	return s, a
}

// Drop forgets the request, and with it a reverse flow that has not lasted 10 s. That
// the unit is to be at neutral, and which settings are in use, stays.
func (c *ReversePower) Drop(s ReverseState) ReverseState {
	next := ReverseState{TapState: TapState{Position: s.Position}, Way: s.Way}
	if s.Parked {
		next.Turned, next.Parked, next.Began, next.Ready = true, true, s.Began, s.Ready
	}
	return next
}

// Forget leaves only the position.
func (c *ReversePower) Forget(s ReverseState) ReverseState {
	return ReverseState{TapState: TapState{Position: s.Position}}
}

// Edge tells whether a reading is within Near of a threshold it is compared with: the
// current at which a direction begins, and those of the sheet in use. now is not
// known here: where only the time decides whether a unit parks, it counts as parking.
func (c *ReversePower) Edge(s ReverseState, r ReverseReading) bool {
	if c.Forward.Held {
		return false
	}
	if c.Mode != ReverseNone && math.Abs(math.Abs(r.Current)-c.Threshold) <= Near*c.scale() {
		return true
	}
	switch w := c.way(s, c.flow(r.Current), math.MaxInt64); w {
	case Regulates, Reverses:
		sheet, reading := c.sheet(w, r)
		return sheet.Edge(c.turn(w, s.TapState), reading)
	case Parks:
		f := &c.Forward
		step := c.toNeutral(s.Position)
		return step > 0 && near(f.after(s.TapState, r.Forward, step), f.LimitHigh) ||
			step < 0 && near(f.after(s.TapState, r.Forward, step), f.LimitLow)
	}
	return false
}

// OutOfBand tells whether the relay voltage is outside the band of the sheet in use;
// of a control that holds, outside the band that it waits for: the reverse one in
// mode reverse only, else the forward one.
func (c *ReversePower) OutOfBand(s ReverseState, r ReverseReading) bool {
	w := s.Way
	if c.Mode == ReverseOnly {
		w = Reverses
	}
	sheet, reading := c.sheet(w, r)
	return sheet.OutOfBand(reading)
}

// AtStop tells whether the unit stands at its highest or its lowest position.
func (c *ReversePower) AtStop(s ReverseState) bool { return c.Forward.AtStop(s.TapState) }

var _ Control[ReverseState, ReverseReading] = (*ReversePower)(nil)
