package devices

import (
	"fmt"
	"math"
)

// Category is the normal operating performance category of IEEE Std 1547-2018.
type Category uint8

// The categories. The zero value is B, that of inverters where much of the power is
// theirs (common practice).
const (
	CategoryB Category = iota
	CategoryA
)

// String returns the letter.
func (c Category) String() string {
	switch c {
	case CategoryA:
		return "A"
	case CategoryB:
		return "B"
	}
	return fmt.Sprintf("Category(%d)", uint8(c))
}

// ReactiveFunction is what an inverter's reactive power follows.
type ReactiveFunction uint8

// The reactive power functions of IEEE Std 1547-2018, 5.3. One at a time is active; as
// it leaves the factory that is constant power factor, unity.
const (
	ConstantPowerFactor ReactiveFunction = iota // 5.3.2
	VoltageReactive                             // 5.3.3, volt-var
	ActiveReactive                              // 5.3.4, watt-var
	ConstantReactive                            // 5.3.5
)

var reactiveFunctions = [...]string{
	ConstantPowerFactor: "constant power factor", VoltageReactive: "voltage-reactive power",
	ActiveReactive: "active power-reactive power", ConstantReactive: "constant reactive power",
}

// String returns the standard's name.
func (f ReactiveFunction) String() string {
	if int(f) < len(reactiveFunctions) {
		return reactiveFunctions[f]
	}
	return fmt.Sprintf("ReactiveFunction(%d)", uint8(f))
}

// Priority says which power gives way where the rating does not allow both.
type Priority uint8

// The priorities. The zero value is reactive, which the voltage-reactive power function
// asks for.
const (
	ReactivePriority Priority = iota // active power is cut
	ActivePriority                   // reactive power is cut
)

// String returns the word of inverter-functions.csv.
func (p Priority) String() string {
	switch p {
	case ReactivePriority:
		return "reactive"
	case ActivePriority:
		return "active"
	}
	return fmt.Sprintf("Priority(%d)", uint8(p))
}

// The reactive capability of IEEE Std 1547-2018, 5.2 and Table 7, depends on active
// power, as a share of the rated: whole from wholeFrom on, in proportion below, and
// none is asked for below noneBelow.
const (
	wholeFrom = 0.20
	noneBelow = 0.05
)

// Inverter is the settings sheet of an inverter's functions by IEEE Std 1547-2018, with
// what it needs to know of the unit. It is constant while it is used; [Inverter.Check]
// says what is wrong with it, and the rest trusts it. The zero value with a Rating is
// an inverter of unity power factor.
//
// It is a steady-state model. Ride-through, trip, momentary cessation, enter service
// and its ramp, frequency response and the slow adjustment of the reference voltage are
// not modelled.
type Inverter struct {
	Rating   float64 // kVA, nameplate
	Rated    float64 // kW, rated active power; 0: the rating
	Minimum  float64 // minimum active power P_min, share of Rated
	Category Category

	// Injection and Absorption are the reactive capability, shares of Rating; 0: what
	// Table 7 asks for. It shrinks in proportion below 20 % of rated power, and is nothing
	// below 5 % or Minimum. What counts is the power that is available: an inverter that is
	// curtailed while the sun shines keeps its capability, which is more than Table 7 asks
	// for (common practice), and a curve that bent back where the ceiling falls would leave
	// a feeder with several voltages to choose from. AtNight: all of it is there at any
	// active power; a battery that regulates while it rests needs it.
	Injection, Absorption float64
	AtNight               bool

	Function    ReactiveFunction
	PowerFactor float64 // positive delivers reactive power, negative absorbs; 0: unity
	Reactive    float64 // of constant reactive power, share of Rating, positive delivers
	VoltVar     VoltVar
	WattVar     WattVar
	Response    Time // open loop response time of the reactive function; 0: the default

	VoltWattOn bool // voltage-active power acts, beside any reactive function
	VoltWatt   VoltWatt
	Limit      float64 // active power limit (4.6.2), share of Rated; 0: none
	Priority   Priority
}

// Output is what an inverter does at one voltage.
type Output struct {
	P, Q      float64 // kW and kvar, positive delivered to the grid
	DP, DQ    float64 // by voltage, kW and kvar per p.u.; at a corner the one to higher voltage
	Curtailed float64 // kW, what the functions take from the available power within Rated
}

// Power returns the steady-state output at a voltage v, p.u. of nominal, with available
// kW on the AC side; a negative one is what a storage unit draws. It is continuous in v.
//
//	P0 = min(available, Rated, Limit·Rated, ceiling(v))
//	Q0 = the function's, at v or at P0, within −Absorption…Injection of the rating,
//	     times min(1, available / 0.2 Rated)
//	reactive priority: Q = Q0, P = min(P0, √(Rating² − Q²))
//	active priority:   P = P0, |Q| ≤ √(Rating² − P²)
//
// (IEEE Std 1547-2018, 5.2 to 5.4). With reactive priority a function of active power
// stays on its curve: P is the highest at which both are inside the rating. What is above
// Rated is clipped and not counted as curtailed. Charging knows no ceiling.
func (f *Inverter) Power(available, v float64) Output {
	sign, could := f.could(available)
	volts := sloped{v, 1}
	p := constant(could)
	if sign > 0 {
		p = lesser(p, f.ceiling(volts))
	}
	return f.within(available, sign, p, f.asked(sign, p, volts))
}

// could returns which way active power goes, and how much of it before the ceiling, kW.
func (f *Inverter) could(available float64) (sign, kW float64) {
	if available < 0 {
		return -1, min(-available, f.rated())
	}
	kW = min(available, f.rated())
	if f.Limit > 0 {
		kW = min(kW, f.Limit*f.rated())
	}
	return 1, kW
}

// ceiling returns the active power that the voltage allows, kW.
func (f *Inverter) ceiling(v sloped) sloped {
	if !f.VoltWattOn {
		return constant(f.rated())
	}
	x, y := [2]float64{f.VoltWatt.V1, f.VoltWatt.V2}, [2]float64{1, f.VoltWatt.P2}
	return through(x[:], y[:], v).times(f.rated())
}

// asked returns the reactive power that the function wants, kvar, before any limit.
func (f *Inverter) asked(sign float64, p, v sloped) sloped {
	switch f.Function {
	case VoltageReactive:
		return through(f.VoltVar.V[:], f.VoltVar.Q[:], v).times(f.Rating)
	case ConstantReactive:
		return constant(f.Reactive * f.Rating)
	}
	q := f.byPower(sign, p)
	if f.Priority == ReactivePriority && math.Hypot(p.at, q.at) > f.Rating {
		q = f.byPower(sign, constant(f.onCircle(sign, p.at)))
	}
	return q
}

// byPower returns the reactive power that goes with an amount of active power, kvar.
func (f *Inverter) byPower(sign float64, p sloped) sloped {
	if f.Function == ActiveReactive {
		return through(f.WattVar.P[:], f.WattVar.Q[:], p.times(1/f.rated())).times(sign * f.Rating)
	}
	return p.times(f.tangent())
}

// tangent returns kvar per kW of the power factor, positive where it delivers.
func (f *Inverter) tangent() float64 {
	if f.PowerFactor == 0 {
		return 0
	}
	c := min(math.Abs(f.PowerFactor), 1)
	return math.Copysign(math.Sqrt((1-c)*(1+c))/c, f.PowerFactor)
}

// onCircle returns the highest active power below p, kW, that together with its reactive
// power is within the rating, where p is not.
func (f *Inverter) onCircle(sign, p float64) float64 {
	if f.Function == ConstantPowerFactor {
		return f.Rating * math.Abs(f.PowerFactor)
	}
	// Down the curve, from corner to corner, until one is inside; then back on the line
	// |a + t·(b − a)| = rating, with a inside and b outside.
	bp, bq := p, f.byPower(sign, constant(p)).at
	for i := len(f.WattVar.P); i >= 0; i-- {
		ap := 0.0
		if i > 0 {
			ap = f.WattVar.P[i-1] * f.rated()
		}
		if ap >= bp {
			continue
		}
		aq := f.byPower(sign, constant(ap)).at
		if math.Hypot(ap, aq) <= f.Rating {
			dp, dq := bp-ap, bq-aq
			a, b, c := dp*dp+dq*dq, ap*dp+aq*dq, ap*ap+aq*aq-f.Rating*f.Rating
			return ap + dp*(math.Sqrt(b*b-a*c)-b)/a
		}
		bp, bq = ap, aq
	}
	return 0
}

// within returns the output for an amount p of active power and reactive power q, kW and
// kvar, under the reactive capability and the rating.
func (f *Inverter) within(available, sign float64, p, q sloped) Output {
	inject, absorb := f.capability()
	room := f.room(available) * f.Rating
	q = clamp(q, constant(absorb*room), constant(inject*room))
	if f.Priority == ActivePriority {
		rest := arc(f.Rating, p)
		q = clamp(q, rest, rest)
	} else {
		p = lesser(p, arc(f.Rating, q))
	}
	// Adding 0 makes 0 of −0.
	o := Output{P: sign*p.at + 0, Q: q.at + 0, DP: sign*p.slope + 0, DQ: q.slope + 0}
	if sign > 0 {
		o.Curtailed = max(0, min(available, f.rated())-p.at)
	}
	return o
}

// room returns the share of the reactive capability that available active power, kW,
// leaves.
func (f *Inverter) room(available float64) float64 {
	p := math.Abs(available) / f.rated()
	switch {
	case f.AtNight:
		return 1
	case p < max(noneBelow, f.Minimum):
		return 0
	}
	return min(1, p/wholeFrom)
}

// capability returns the reactive capability at rated power, shares of the rating.
func (f *Inverter) capability() (inject, absorb float64) {
	inject, absorb = f.Category.Capability()
	if f.Injection > 0 {
		inject = f.Injection
	}
	if f.Absorption > 0 {
		absorb = f.Absorption
	}
	return inject, absorb
}

func (f *Inverter) rated() float64 {
	if f.Rated > 0 {
		return f.Rated
	}
	return f.Rating
}
