package sim

import "yearflow/devices"

// charger is a charging point in the run.
type charger struct {
	sheet    devices.Charger
	state    devices.ChargerState
	kW       float64 // drawn at present
	tangent  float64 // kvar per kW
	branches []int
}

// share is a group of chargers with a common limit.
type share struct {
	members []int
	power   []float64 // kW, by member
	limit   float64   // kW
}

// before is how long before a run chargers are followed without a network, so that it
// begins with vehicles that have been charging. No stay is longer than a day.
const before = 2 * 24 * 3600 * devices.Second

// arrive brings every charger to where it stands at an instant, with nothing served
// yet. What a charger draws depends on time and on those that it shares a limit with
// alone, not on the network.
func (p *plants) arrive(now devices.Time) {
	if len(p.chargers) == 0 {
		return
	}
	at := now - before
	for _, c := range p.chargers {
		c.state = c.sheet.Start(at)
	}
	for at < now {
		p.share(at)
		next := min(p.nextCharger(at), now)
		p.charge(at, next)
		at = next
	}
	for _, c := range p.chargers {
		c.state.Served, c.state.Unserved, c.state.Short = 0, 0, 0
	}
}

// share sets what every charger draws at an instant.
func (p *plants) share(now devices.Time) {
	for _, c := range p.chargers {
		c.state = c.sheet.Observe(c.state, now)
		c.kW = c.sheet.Wants(c.state, now)
	}
	for _, s := range p.shares {
		for k, i := range s.members {
			s.power[k] = p.chargers[i].kW
		}
		devices.Share(s.power, s.power, s.limit)
		for k, i := range s.members {
			p.chargers[i].kW = s.power[k]
		}
	}
}

// nextCharger returns the next instant at which a charger's power changes.
func (p *plants) nextCharger(now devices.Time) devices.Time {
	next := devices.Never
	for _, c := range p.chargers {
		if t := c.sheet.NextEvent(c.state, c.kW, now); t > now {
			next = min(next, t)
		}
	}
	return next
}

// charge lets an interval pass, and reports whether a vehicle has come, begun, become
// full or left with its end.
func (p *plants) charge(from, to devices.Time) (changed bool) {
	for _, c := range p.chargers {
		drew := c.sheet.Wants(c.state, from) > 0
		c.state, _ = c.sheet.Advance(c.state, c.kW, to-from)
		s := c.sheet.Observe(c.state, to)
		changed = changed || s != c.state || drew != (c.sheet.Wants(s, to) > 0)
	}
	return changed
}
