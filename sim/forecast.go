package sim

import (
	"yearflow/devices"
	"yearflow/sim/powerflow"
	"yearflow/sim/powerflow/vector"
)

// foreseen is a control whose future can be forecast: it can be put back to where it was.
type foreseen interface {
	remember(*saved)
	recall(*saved)
}

// saved is the state of a control of any kind.
type saved struct {
	tap       devices.TapState
	reverse   devices.ReverseState
	capacitor devices.CapacitorState
}

func (c *tapControl) remember(s *saved)       { s.tap = c.state }
func (c *tapControl) recall(s *saved)         { c.state = s.tap }
func (c *reverseControl) remember(s *saved)   { s.reverse = c.state }
func (c *reverseControl) recall(s *saved)     { c.state = s.reverse }
func (c *capacitorControl) remember(s *saved) { s.capacitor = c.state }
func (c *capacitorControl) recall(s *saved)   { c.state = s.capacitor }

// forecast lists what will be asked for, beginning with what is: it lets the controls go
// through the event loop with what they will see, as far as that is known, and puts them
// back.
func (e *Engine) forecast() {
	f := e.foresight
	f.here.set(e.step, e.state.Taps, e.state.Closed)
	if !f.gained {
		f.gained = true
		e.measureGains()
	}
	for i, d := range e.devices {
		d.Controller.(foreseen).remember(&f.saved[i])
	}
	e.foreseeFrom(e.now)
	for i, d := range e.devices {
		d.Controller.(foreseen).recall(&f.saved[i])
	}
}

// foreseeFrom is the event loop of the forecast, from an instant of the step at hand.
func (e *Engine) foreseeFrom(now devices.Time) {
	f := e.foresight
	_, end := e.in.axis.Bounds(f.here.step)
	fresh := true
	for turns := 0; turns < 8*vector.Lanes; turns++ {
		if fresh {
			if fresh = false; !e.add() {
				return
			}
		}
		for i, d := range e.devices {
			f.reading[i].Wall = now
			d.Observe(f.reading[i], now)
		}
		due, turn := e.due(), e.switchAfter(now)
		if due <= now {
			for _, d := range e.devices {
				if d.Due() <= now {
					d.Act(now)
				}
			}
			e.standAt(f.here.taps, f.here.closed)
			fresh = true
			continue
		}
		if now = min(due, turn, end); now < end {
			continue
		}
		f.here.step++
		if f.here.step >= f.steps || e.in.monthOf(f.here.step) != f.month {
			return
		}
		_, end = e.in.axis.Bounds(f.here.step)
		fresh = true
	}
}

// switchAfter is the next instant at which a control's clock changes what it wants.
func (e *Engine) switchAfter(now devices.Time) devices.Time {
	next := devices.Never
	for _, d := range e.devices {
		if s, ok := d.Controller.(switcher); ok {
			if t := s.NextSwitch(now); t > now {
				next = min(next, t)
			}
		}
	}
	return next
}

// add appends what is asked for where it is something new, and sets what the devices will
// see. It reports whether the forecast goes on.
func (e *Engine) add() bool {
	f := e.foresight
	h := &f.here
	n := f.count
	known := n > 0 && f.plan[n-1].is(h.step, h.taps, h.closed)
	if !known && n == vector.Lanes {
		return false
	}
	saw := e.see()
	if !known && (saw || n == 0) {
		f.plan[n].set(h.step, h.taps, h.closed)
		f.count++
	}
	return saw
}

// see sets what the devices see where the forecast stands: what is known of the step, and
// what it makes that devices have moved since. It reports whether something is known.
func (e *Engine) see() bool {
	f := e.foresight
	if f.here.step < f.first || f.here.step >= f.end {
		first := f.here.step
		if f.count > 0 { // what the lanes start from must be known of all their steps
			first = f.plan[0].step
		}
		e.scout(first)
	}
	x, _ := f.at(f.here.step)
	if x != nil && x.unread { // a scout's
		at := f.scoutedAt
		at.step = x.step
		if f.know(e, x, &f.scoutBlock, x.lane, &at); x.step < 0 {
			x = nil
		}
	}
	if x == nil {
		return false
	}
	copy(f.reading, x.readings)
	for k, d := range e.devices {
		if moved := position(d, &f.here) - x.positions[k]; moved != 0 {
			for i := range f.reading {
				f.reading[i].add(&f.gain[k][i], float64(moved))
			}
		}
	}
	return true
}

// add adds a difference of readings several times.
func (r *Reading) add(d *Reading, times float64) {
	z := complex(times, 0)
	r.Volts += z * d.Volts
	r.Amperes += z * d.Amperes
	r.SourceVolts += z * d.SourceVolts
	r.SourceAmperes += z * d.SourceAmperes
	r.V120 += times * d.V120
	r.KW += times * d.KW
	r.KVAR += times * d.KVAR
	r.Current += times * d.Current
}

// scout solves the steps from one on roughly, with the devices where they stand in the
// forecast.
func (e *Engine) scout(step int) {
	f := e.foresight
	f.first, f.end = step, step
	for k := range f.scouted {
		f.scouted[k].step = -1
	}
	mask := uint8(0)
	for ; f.end < min(step+vector.Lanes, f.steps) && e.in.monthOf(f.end) == f.month; f.end++ {
		k := f.end % vector.Lanes
		mask |= 1 << k
		f.scoutBlock.load(e, k, f.end)
		f.position(e, f.scouts, k, &f.here)
	}
	f.scouts.Drive(f.scoutBlock.rows)
	f.startAll(e, f.scouts)
	e.lap(&e.timing.Assembling)
	e.timing.Scouts++
	arrived := f.scouts.Solve(mask, roughly)
	f.scoutedAt.set(step, f.here.taps, f.here.closed)
	at := f.scoutedAt
	for at.step = f.first; at.step < f.end; at.step++ {
		k := at.step % vector.Lanes
		if arrived>>k&1 == 1 {
			f.knows(e, &f.scouted[k], k, &at)
		}
	}
	e.lap(&e.timing.Solving)
}

// measureGains finds what a movement of each device by one makes of what the others see, at
// the step at hand.
func (e *Engine) measureGains() {
	f := e.foresight
	base := make([]Reading, len(e.devices))
	for begin := 0; begin < len(e.devices); begin += vector.Lanes - 1 {
		var moved [vector.Lanes]int
		var at [vector.Lanes]wanted
		for k := range vector.Lanes {
			w := &at[k]
			w.set(e.step, e.state.Taps, e.state.Closed)
			if i := begin + k - 1; k > 0 && i < len(e.devices) {
				moved[k] = move(e.devices[i], w)
			}
			f.scoutBlock.load(e, k, e.step)
			f.position(e, f.scouts, k, w)
		}
		f.scouts.Drive(f.scoutBlock.rows)
		f.scouts.StartAll(nil, &e.input)
		arrived := f.scouts.Solve(vector.All, powerflow.Contract)
		for k := range vector.Lanes {
			i := begin + k - 1
			if arrived&1 == 0 || arrived>>k&1 == 0 || i >= len(e.devices) || k > 0 && moved[k] == 0 {
				continue
			}
			x := &f.scouted[0]
			if f.know(e, x, &f.scoutBlock, k, &at[k]); x.step < 0 {
				continue
			}
			if k == 0 {
				copy(base, x.readings)
				continue
			}
			f.scouts.Direct(f.move, i, k, 1/float64(moved[k]))
			for j := range base {
				g := &f.gain[i][j]
				*g = Reading{}
				g.add(&x.readings[j], 1/float64(moved[k]))
				g.add(&base[j], -1/float64(moved[k]))
			}
		}
	}
	f.scoutBlock.forget()
	f.forget()
}

// move moves a device by one within its limits, and returns by how much.
func move(d *device, w *wanted) int {
	if d.cap != nil {
		w.closed[d.Index] = !w.closed[d.Index]
		if w.closed[d.Index] {
			return 1
		}
		return -1
	}
	by := 1
	if w.taps[d.Units[0]] >= d.Highest {
		by = -1
	}
	for _, u := range d.Units {
		w.taps[u] += by
	}
	return by
}
