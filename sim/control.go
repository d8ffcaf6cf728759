package sim

import (
	"math/cmplx"

	"yearflow/devices"
	"yearflow/sim/results"
)

// Reading is what the control of any device can see at an instant. A tap changer
// has Volts and Amperes; a capacitor has the rest.
type Reading struct {
	// Volts is the regulated voltage of a tap changer's unit, V (a pair's for delta
	// connections), Amperes the current that leaves the bank on its first phase, A.
	Volts, Amperes complex128
	// SourceVolts is the same voltage at the bank's source side, and SourceAmperes the
	// current that leaves there, towards the source, on the same phase.
	SourceVolts, SourceAmperes complex128
	// V120 is a capacitor's voltage on the 120 V base.
	V120 float64
	// KW, KVAR and Current (A) are those of the section that a capacitor watches.
	KW, KVAR, Current float64
	Outside           float64 // °C
	// Wall is the instant that clocks on the wall show; it stands still while a run
	// starts up.
	Wall devices.Time
}

// A Controller moves one device of a run. It sees a reading and a time and asks for
// an action; the engine takes it when it is due. One that Options.Controls names for a
// device replaces the control of its settings sheet.
//
// An implementation must depend on nothing but what it is given, and must never ask
// again at the instant of its own action.
type Controller interface {
	// Position returns where the device stands: a tap, or 0 open and 1 closed.
	Position() int
	// Observe sees a reading at an instant: a request starts, stays, is dropped or
	// turns around.
	Observe(r Reading, now devices.Time)
	// Due returns when the request is to be acted on, or devices.Never.
	Due() devices.Time
	// Act takes the action that is asked for.
	Act(now devices.Time) devices.Action
	// Drop forgets the request: no solution was found.
	Drop()
	// Forget leaves only the position, after start-up.
	Forget()
	// State says how the device stands, for duty.csv, and whether a request stands.
	State(r Reading) (s results.DeviceState, standing bool)
}

// Abilities that a Controller may have besides.
type (
	// edger tells whether a reading is so near to a threshold that it must come from
	// an exact solution.
	edger interface{ Edge(r Reading) bool }
	// switcher tells the next instant at which the time of day changes what it wants.
	switcher interface {
		NextSwitch(now devices.Time) devices.Time
	}
)

// tapControl drives a tap changer by its settings sheet.
type tapControl struct {
	sheet devices.TapChanger
	state devices.TapState
}

var (
	_ Controller = (*tapControl)(nil)
	_ edger      = (*tapControl)(nil)
)

func (c *tapControl) Position() int { return c.state.Position }

func (c *tapControl) Observe(r Reading, now devices.Time) {
	c.state = c.sheet.Observe(c.state, c.sheet.Measure(r.Volts, r.Amperes), now)
}

func (c *tapControl) Due() devices.Time { return c.sheet.Due(c.state) }

func (c *tapControl) Act(now devices.Time) (a devices.Action) {
	c.state, a = c.sheet.Act(c.state, now)
	return a
}

func (c *tapControl) Drop()   { c.state = c.sheet.Drop(c.state) }
func (c *tapControl) Forget() { c.state = c.sheet.Forget(c.state) }

func (c *tapControl) State(r Reading) (results.DeviceState, bool) {
	m := c.sheet.Measure(r.Volts, r.Amperes)
	return results.DeviceState{
		OutOfBand: c.sheet.OutOfBand(m),
		AtStop:    c.sheet.AtStop(c.state),
		Reverse:   c.reverse(r),
	}, c.sheet.Standing(c.state)
}

func (c *tapControl) Edge(r Reading) bool {
	return c.sheet.Edge(c.state, c.sheet.Measure(r.Volts, r.Amperes))
}

// reverse tells whether power flows from the load side back: the sign of the real
// part of the current, turned by the angle that belongs to its pair.
func (c *tapControl) reverse(r Reading) bool {
	i := r.Amperes
	if c.sheet.Rotation != 0 {
		i *= cmplx.Rect(1, c.sheet.Rotation)
	}
	return c.sheet.Backward(r.Volts, i)
}
