package sim

import (
	"yearflow/devices"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// reverseControl drives a tap changer that minds the direction of power, by both of
// its settings sheets.
type reverseControl struct {
	sheet devices.ReversePower
	state devices.ReverseState
}

var (
	_ Controller = (*reverseControl)(nil)
	_ edger      = (*reverseControl)(nil)
)

var reverseModes = [...]devices.ReverseMode{
	feeder.ReverseNone: devices.ReverseNone, feeder.ForwardOnly: devices.ForwardOnly, feeder.ReverseOnly: devices.ReverseOnly,
	feeder.ReverseIdle: devices.ReverseIdle, feeder.ReverseFollow: devices.ReverseFollow, feeder.ReverseNeutral: devices.ReverseNeutral,
	feeder.ReverseStay: devices.ReverseStay,
}

// reversePower makes both sheets of a control of its forward one.
func reversePower(forward devices.TapChanger, s *feeder.TapSettings) *devices.ReversePower {
	back := forward
	back.Set, back.Bandwidth, back.Delay, back.R, back.X = s.ReverseSet, s.ReverseBandwidth, ns(s.ReverseDelay), s.ReverseR, s.ReverseX
	return &devices.ReversePower{Mode: reverseModes[s.Reverse], Threshold: s.ReverseThreshold * forward.CT, Forward: forward, Backward: back}
}

func (c *reverseControl) see(r Reading) devices.ReverseReading {
	return c.sheet.Measure(r.Volts, r.Amperes, r.SourceVolts, r.SourceAmperes)
}

func (c *reverseControl) Position() int { return c.state.Position }

func (c *reverseControl) Observe(r Reading, now devices.Time) {
	c.state = c.sheet.Observe(c.state, c.see(r), now)
}

func (c *reverseControl) Due() devices.Time { return c.sheet.Due(c.state) }

func (c *reverseControl) Act(now devices.Time) (a devices.Action) {
	c.state, a = c.sheet.Act(c.state, now)
	return a
}

func (c *reverseControl) Drop()   { c.state = c.sheet.Drop(c.state) }
func (c *reverseControl) Forget() { c.state = c.sheet.Forget(c.state) }

func (c *reverseControl) State(r Reading) (results.DeviceState, bool) {
	m := c.see(r)
	return results.DeviceState{
		OutOfBand: c.sheet.OutOfBand(c.state, m),
		AtStop:    c.sheet.AtStop(c.state),
		Reverse:   c.sheet.Forward.Backward(1, complex(m.Current, 0)), // whatever the threshold, as without a mode
	}, c.sheet.Standing(c.state)
}

func (c *reverseControl) Edge(r Reading) bool { return c.sheet.Edge(c.state, c.see(r)) }

// tapSheet returns the forward sheet of a tap changer and where it stands; nil where
// a device is none, or is driven by another control.
func (d *device) tapSheet() (*devices.TapChanger, int) {
	switch c := d.Controller.(type) {
	case *tapControl:
		return &c.sheet, c.state.Position
	case *reverseControl:
		return &c.sheet.Forward, c.state.Position
	}
	return nil, 0
}
