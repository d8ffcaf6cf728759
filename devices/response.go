package devices

import "math"

// Lag is a first-order lag with an open loop response time: the time it takes to 90 % of
// the way after its target has jumped (IEEE Std 1547-2018, 3.1), so that its time constant
// is
//
//	τ = Response / ln 10
//
// It is followed in intervals: it stays where it is within one, and moves at the beginning
// of the next.
type Lag struct {
	Response Time
	Still    float64 // a target no farther away than this is reached
}

// Constant returns τ.
func (l Lag) Constant() Time { return max(1, Time(math.Round(float64(l.Response)/math.Ln10))) }

// Advance returns where the lag stands at the beginning of an interval,
//
//	x + (target − x)·(1 − e^(−Δ/τ))
//
// with Δ the length of the interval just ended and the target its state called for. What
// is within Still of the target is put on it.
func (l Lag) Advance(x, target float64, ended Time) float64 {
	x -= (target - x) * math.Expm1(-float64(ended)/float64(l.Constant()))
	if l.rests(x, target) {
		return target
	}
	return x
}

// NextMove returns the latest instant at which the interval that begins now may end: τ/2
// later while the lag moves, Never when it has reached the target.
func (l Lag) NextMove(x, target float64, now Time) Time {
	if l.rests(x, target) {
		return Never
	}
	return now + max(1, l.Constant()/2)
}

func (l Lag) rests(x, target float64) bool { return math.Abs(target-x) <= l.Still }

// still is the share of the rating that an inverter's lag counts as no distance.
const still = 1e-4

// InverterState is where an inverter's lags stand, and, as a target, where they go: the
// ceiling of voltage-active power, kW, and the reactive power asked for, kvar, both before
// the limits of capability and rating, which act at once.
type InverterState struct {
	Ceiling, Reactive float64
}

// Lags tells whether the response is slower than a step, so that the lag has to be
// followed; otherwise the steady state of [Inverter.Power] holds.
func (f *Inverter) Lags(step Time) bool {
	return f.response() > step || f.VoltWattOn && f.voltWattResponse() > step
}

// Target returns what the functions call for at a voltage v, p.u., with available kW. It is
// the state in which [Inverter.Held] gives what [Inverter.Power] gives.
func (f *Inverter) Target(available, v float64) InverterState {
	sign, could := f.could(available)
	volts, p := constant(v), constant(could)
	ceiling := f.ceiling(volts)
	if sign > 0 {
		p = lesser(p, ceiling)
	}
	return InverterState{Ceiling: ceiling.at, Reactive: f.asked(sign, p, volts).at}
}

// Advance returns the state at the beginning of an interval, after one of length ended in
// which the target was called for.
func (f *Inverter) Advance(s, target InverterState, ended Time) InverterState {
	p, q := f.lags()
	return InverterState{
		Ceiling:  p.Advance(s.Ceiling, target.Ceiling, ended),
		Reactive: q.Advance(s.Reactive, target.Reactive, ended),
	}
}

// NextMove returns the latest instant at which the interval that begins now may end.
func (f *Inverter) NextMove(s, target InverterState, now Time) Time {
	p, q := f.lags()
	return min(p.NextMove(s.Ceiling, target.Ceiling, now), q.NextMove(s.Reactive, target.Reactive, now))
}

// Held returns the output in a state with available kW; it does not depend on the voltage.
func (f *Inverter) Held(available float64, s InverterState) Output {
	sign, could := f.could(available)
	p := constant(could)
	if sign > 0 {
		p.at = min(p.at, s.Ceiling)
	}
	return f.within(available, sign, p, constant(s.Reactive))
}

func (f *Inverter) lags() (p, q Lag) {
	return Lag{f.voltWattResponse(), still * f.rated()}, Lag{f.response(), still * f.Rating}
}

// Responses returns the open loop response times that hold: of the reactive function, and
// of voltage-active power; the defaults of the standard where the sheet has none.
func (f *Inverter) Responses() (reactive, active Time) { return f.response(), f.voltWattResponse() }

func (f *Inverter) response() Time {
	switch {
	case f.Response > 0:
		return f.Response
	case f.Function == VoltageReactive && f.Category == CategoryB:
		return 5 * Second // Table 8
	}
	return 10 * Second
}

func (f *Inverter) voltWattResponse() Time {
	if f.VoltWatt.Response > 0 {
		return f.VoltWatt.Response
	}
	return 10 * Second // Table 10
}
