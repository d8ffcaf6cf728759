package sim

import (
	"yearflow/devices"
	"yearflow/sim/results"
)

// capacitorControl drives a capacitor bank by its settings sheet.
type capacitorControl struct {
	sheet devices.CapacitorControl
	state devices.CapacitorState
}

var (
	_ Controller = (*capacitorControl)(nil)
	_ edger      = (*capacitorControl)(nil)
	_ switcher   = (*capacitorControl)(nil)
)

// reading picks what the kind of control follows.
func (c *capacitorControl) reading(r Reading) devices.CapacitorReading {
	out := devices.CapacitorReading{V120: r.V120, P: r.KW, Q: r.KVAR, Clock: r.Wall}
	switch c.sheet.Kind {
	case devices.CapacitorKVAR:
		out.Quantity = r.KVAR
	case devices.CapacitorCurrent, devices.CapacitorPowerFactor:
		out.Quantity = r.Current
	case devices.CapacitorTemperature:
		out.Quantity = r.Outside
	}
	return out
}

func (c *capacitorControl) Position() int {
	if c.state.Closed {
		return 1
	}
	return 0
}

func (c *capacitorControl) Observe(r Reading, now devices.Time) {
	c.state = c.sheet.Observe(c.state, c.reading(r), now)
}

func (c *capacitorControl) Due() devices.Time { return c.sheet.Due(c.state) }

func (c *capacitorControl) Act(now devices.Time) (a devices.Action) {
	c.state, a = c.sheet.Act(c.state, now)
	return a
}

func (c *capacitorControl) Drop()   { c.state = c.sheet.Drop(c.state) }
func (c *capacitorControl) Forget() { c.state = c.sheet.Forget(c.state) }

func (c *capacitorControl) State(Reading) (results.DeviceState, bool) {
	return results.DeviceState{}, c.sheet.Standing(c.state)
}

func (c *capacitorControl) Edge(r Reading) bool { return c.sheet.Edge(c.state, c.reading(r)) }

func (c *capacitorControl) NextSwitch(devices.Time) devices.Time { return c.sheet.NextSwitch(c.state) }
