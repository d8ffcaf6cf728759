package sim

import (
	"fmt"
	"math"

	"yearflow/sim/feeder"
	"yearflow/sim/results"
	"yearflow/sim/tables"
)

// SetTapSheet gives the control of a regulator's unit, or of a ganged bank by its
// watched phase, another settings sheet for the runs to come, so that a search need not
// read the study again. Device names it as devices.csv does: "R1.A". The sheet's initial
// tap and its compensator's rotation are not taken: a run begins at the position of the
// tables, and the rotation belongs to how the transformers are connected.
//
// The result is that of a study with these settings in its tables. The error says what
// such a table would be refused for, that there is no such device, or that it is not
// driven by a settings sheet.
func (e *Engine) SetTapSheet(device string, s feeder.TapSettings) error {
	d, err := e.driven(device, results.TapDevice)
	if err != nil {
		return err
	}
	r := &e.net.Model.Regulators[d.Index]
	old := r.Units[d.Unit].Settings
	if old == nil {
		return fmt.Errorf("%s has no settings sheet to change: give it a row in regulator-settings.csv", device)
	}
	s.Tap, s.Rotation = old.Tap, old.Rotation
	if err := checkTapSheet(r, &s); err != nil {
		return fmt.Errorf("%s: %w", device, err)
	}
	sheet, _ := d.tapSheet()
	forward := *sheet
	forward.Set, forward.Bandwidth, forward.Delay, forward.TapTime, forward.Integrate = s.Set, s.Bandwidth, ns(s.Delay), ns(s.TapTime), s.Integrate
	forward.R, forward.X = s.R, s.X
	forward.LimitHigh, forward.LimitLow, forward.LimitMargin = s.LimitHigh, s.LimitLow, s.LimitMargin
	forward.Held, forward.Highest, forward.Lowest = s.Held, s.HighestTap, s.LowestTap
	if s.Reverse != feeder.ReverseNone {
		d.Controller = &reverseControl{sheet: *reversePower(forward, &s)}
	} else {
		d.Controller = &tapControl{sheet: forward}
	}
	d.tap.forward = s.Reverse == feeder.ReverseNone
	d.Highest, d.Lowest = s.HighestTap, s.LowestTap
	for i := range e.devices {
		if e.devices[i] == d {
			e.Plan.Devices[i].Highest, e.Plan.Devices[i].Lowest = s.HighestTap, s.LowestTap
		}
	}
	e.Reset()
	return nil
}

// SetCapacitorSheet gives a capacitor's control other set points for the runs to come.
// What it follows, watches and measures stays as the study has it.
func (e *Engine) SetCapacitorSheet(device string, s feeder.CapacitorSettings) error {
	d, err := e.driven(device, results.CapacitorDevice)
	if err != nil {
		return err
	}
	old := e.net.Model.Capacitors[d.Index].Control
	if old == nil {
		return fmt.Errorf("%s has no control to change: give it a row in capacitor-settings.csv", device)
	}
	s.Control = old.Control
	if err := checkCapacitorSheet(&s); err != nil {
		return fmt.Errorf("%s: %w", device, err)
	}
	c := &d.Controller.(*capacitorControl).sheet
	c.On, c.Off, c.OverrideOn, c.OverrideOff, c.OverrideDeadband = s.On, s.Off, s.OverrideOn, s.OverrideOff, s.OverrideDeadband
	c.TimeOn, c.TimeOff, c.Weekdays, c.Delay, c.Lockout, c.DailyLimit = ns(s.TimeOn), ns(s.TimeOff), s.Weekdays, ns(s.Delay), ns(s.Lockout), s.DailyLimit
	e.Reset()
	return nil
}

// driven finds a device that is driven by a settings sheet.
func (e *Engine) driven(name string, kind results.DeviceKind) (*device, error) {
	var names []string
	for _, d := range e.devices {
		if d.Kind != kind {
			continue
		}
		names = append(names, d.title())
		if d.title() != name {
			continue
		}
		switch d.Controller.(type) {
		case *tapControl, *reverseControl, *capacitorControl:
			return d, nil
		}
		return nil, fmt.Errorf("%s is driven by a control of its own and has no settings sheet", name)
	}
	return nil, fmt.Errorf("there is no device %q with a settings sheet of this kind%s", name, tables.Hint(name, names))
}

// checkTapSheet refuses what the tables refuse.
func checkTapSheet(r *feeder.Regulator, s *feeder.TapSettings) error {
	for _, x := range []struct {
		name string
		v    float64
	}{{"set", s.Set}, {"bandwidth", s.Bandwidth}, {"delay", s.Delay}, {"tap time", s.TapTime}, {"ldc r", s.R}, {"ldc x", s.X}, {"limit margin", s.LimitMargin}} {
		if math.IsNaN(x.v) || math.IsInf(x.v, 0) {
			return fmt.Errorf("%s is no number", x.name)
		}
	}
	switch {
	case s.Set <= 0:
		return fmt.Errorf("set is above 0 V, got %g", s.Set)
	case s.Bandwidth <= 0:
		return fmt.Errorf("bandwidth is above 0 V, got %g", s.Bandwidth)
	case s.Delay < 1 || s.TapTime < 1:
		return fmt.Errorf("delay and tap time are at least 1 s, got %g and %g", s.Delay, s.TapTime)
	case s.LimitLow >= s.LimitHigh:
		return fmt.Errorf("limit low %g V is not below limit high %g V", s.LimitLow, s.LimitHigh)
	case s.LimitMargin < 0:
		return fmt.Errorf("limit margin is not below 0 V, got %g", s.LimitMargin)
	case s.HighestTap > r.Steps || s.LowestTap < -r.Steps || s.Tap > s.HighestTap || s.Tap < s.LowestTap:
		return fmt.Errorf("taps %d to %d do not hold the initial tap %d within %d steps each way", s.LowestTap, s.HighestTap, s.Tap, r.Steps)
	}
	return nil
}

func checkCapacitorSheet(s *feeder.CapacitorSettings) error {
	switch {
	case s.Control == feeder.CapacitorTime && !(s.TimeOn >= 0 && s.TimeOn < 86400 && s.TimeOff >= 0 && s.TimeOff < 86400 && s.TimeOn != s.TimeOff):
		return fmt.Errorf("time on and time off are two times of a day, got %g and %g s after midnight", s.TimeOn, s.TimeOff)
	case s.Control != feeder.CapacitorTime && s.Control != feeder.CapacitorHeld && !(math.Abs(s.On-s.Off) > 0):
		return fmt.Errorf("on and off are two numbers; which side closes is said by their order, got %g and %g", s.On, s.Off)
	case s.Control == feeder.CapacitorPowerFactor && !(onFactor(s.On) && onFactor(s.Off)):
		return fmt.Errorf("a power factor is between -1 and 1 and not 0, got %g and %g", s.On, s.Off)
	case s.OverrideOn >= s.OverrideOff:
		return fmt.Errorf("the override closes below %g V and opens above %g V: on must be the lower", s.OverrideOn, s.OverrideOff)
	case !(s.Delay >= 1) || !(s.Lockout >= 0) || !(s.OverrideDeadband >= 0) || s.DailyLimit < 0:
		return fmt.Errorf("delay is at least 1 s, lockout, override deadband and daily limit are not below 0, got %g, %g, %g, %d", s.Delay, s.Lockout, s.OverrideDeadband, s.DailyLimit)
	}
	return nil
}

func onFactor(x float64) bool { return x != 0 && math.Abs(x) <= 1 }
