// Package devices is the logic of the controls on a distribution feeder, and
// nothing else: tap changers, switched capacitors, and the watch for hunting; the
// functions of inverters, batteries and chargers.
//
// A control is a state machine. Its settings sheet is a constant value, its state
// is a plain value that can be compared with ==, and it knows no network: it sees a
// measurement and a time, and asks for an action, so that every timeline can be
// worked with a pencil. Whoever runs it does, at every instant at which something
// may have changed,
//
//	s = c.Observe(s, reading, now)      // starts, keeps, drops or reverses the request
//	due := c.Due(s)                     // when it would act; Never if it asks nothing
//	s, action = c.Act(s, due)           // once the clock stands there
//
// and observes again after every action of any device. [Control] names this shape;
// a control of the user's own that has it is driven the same way.
//
// Inverters, batteries and chargers do not ask for actions, they have a power. It comes
// from [Inverter.Power], [Battery.Request] and [Charger.Wants], is held over an interval
// that ends with the next event ([Inverter.NextMove], [Battery.Until],
// [Charger.NextEvent], [Battery.NextSwitch]), and what the interval did to the state is
// told by Advance.
//
// Everything is deterministic, free of allocation, and safe to call from several
// goroutines, since nothing but the returned state changes.
package devices

import (
	"fmt"
	"math"
)

// Time is an instant in nanoseconds since 1970-01-01 00:00 UTC, or a duration in
// nanoseconds.
type Time = int64

// Never is the due time of a control that asks for nothing.
const Never Time = math.MaxInt64

// Second is one second.
const Second Time = 1e9

// Shortest is the least delay and the least tap time: shorter settings count as
// this, so that no two devices can chase each other within one instant.
const Shortest = Second

// Tolerances of comparison. A voltage, in secondary volts, within Inside of a
// threshold counts as being on the side where nothing is asked; one within Near of it
// must not be decided from a solution that is less exact than Inside. For other
// quantities both are relative to the threshold: a factor, not volts.
const (
	Inside = 1e-7
	Near   = 1e-5
)

// Reason says why a control acted.
type Reason uint8

// The reasons for an action. None is that of a control that asks for nothing.
const (
	None         Reason = iota
	BandLow             // the regulated voltage is below the band
	BandHigh            // the regulated voltage is above the band
	LimitHigh           // the local voltage is above the limit
	LimitLow            // the local voltage is below the limit
	ByControl           // a capacitor's own quantity
	OverrideLow         // a capacitor closed because the voltage is low
	OverrideHigh        // a capacitor opened because the voltage is high
	ByTime              // a capacitor's clock
	Reverse             // run to neutral on reverse flow
)

var reasons = [...]string{
	None: "", BandLow: "band low", BandHigh: "band high", LimitHigh: "limit high", LimitLow: "limit low",
	ByControl: "control", OverrideLow: "override low", OverrideHigh: "override high", ByTime: "time", Reverse: "reverse",
}

// String returns the word of operations.csv.
func (r Reason) String() string {
	if int(r) < len(reasons) {
		return reasons[r]
	}
	return fmt.Sprintf("Reason(%d)", uint8(r))
}

// Action is one movement of a device: one tap, or one switching of a capacitor.
type Action struct {
	From, To int // tap positions, or 0 open and 1 closed
	Reason   Reason
	Measured float64 // what the control saw, in the unit of Set
	Set      float64 // the threshold crossed
	Waited   float64 // what the request's clock showed, s; between the steps of one sequence, the time since the last
}

// Control is the shape of every control in this package, with its state S and its
// reading R. An implementation must be a function of its arguments and its constant
// settings, and must not keep anything. It must come to rest at every instant: what
// it asks for is due at least [Shortest] after its last action, unless a limit turns it
// around, once.
type Control[S comparable, R any] interface {
	// Observe returns the state after a reading at an instant: the request starts,
	// stays, is dropped, or turns around.
	Observe(s S, r R, now Time) S
	// Due returns when the request is to be acted on, or Never.
	Due(s S) Time
	// Standing tells whether a request stands, be it held back or not.
	Standing(s S) bool
	// Act takes the action that is asked for.
	Act(s S, now Time) (S, Action)
	// Drop forgets the request (where no solution was found); positions, lockouts and
	// counts stay.
	Drop(s S) S
	// Forget leaves only the position, as after start-up.
	Forget(s S) S
	// Edge tells whether a reading is so near to a threshold it is compared with that
	// it must be taken from an exact solution; s is the state before Observe sees it.
	Edge(s S, r R) bool
}

// The controls of this package have the common shape.
var (
	_ Control[TapState, TapReading]             = (*TapChanger)(nil)
	_ Control[CapacitorState, CapacitorReading] = (*CapacitorControl)(nil)
)

// above and below compare a voltage with a threshold; on the edge, within Inside, is
// neither. A threshold or a voltage that is NaN is never crossed.
func above(v, threshold float64) bool { return v-threshold > Inside }
func below(v, threshold float64) bool { return threshold-v > Inside }

// near tells whether a voltage is within Near of a threshold.
func near(v, threshold float64) bool { return math.Abs(v-threshold) <= Near }

// seconds converts a duration to seconds.
func seconds(t Time) float64 { return float64(t) / float64(Second) }
