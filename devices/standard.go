package devices

import (
	"fmt"
	"math"
	"strconv"
)

// VoltVar is the curve of the voltage-reactive power function: four points, straight lines
// between them, flat outside.
type VoltVar struct {
	Reference float64    // V_ref, p.u.; 0: 1
	V         [4]float64 // V1 to V4, p.u.
	Q         [4]float64 // Q1 to Q4, share of the rating, positive delivers
}

// WattVar is the curve of the active power-reactive power function: three points, flat
// outside. For power that is drawn it is turned around: −P has −Q.
type WattVar struct {
	P [3]float64 // P1 to P3, share of rated active power
	Q [3]float64 // Q1 to Q3, share of the rating, positive delivers
}

// VoltWatt is the ceiling of the voltage-active power function: rated active power up to
// V1, P2 from V2 on, a straight line between.
type VoltWatt struct {
	V1, V2   float64 // p.u.
	P2       float64 // share of rated active power
	Response Time    // open loop response time; 0: 10 s
}

// Capability returns the least reactive capability of a category, shares of the rating
// (IEEE Std 1547-2018, Table 7).
func (c Category) Capability() (inject, absorb float64) {
	if c == CategoryA {
		return 0.44, 0.25
	}
	return 0.44, 0.44
}

// VoltVar returns the default points of a category (IEEE Std 1547-2018, Table 8).
func (c Category) VoltVar() VoltVar {
	if c == CategoryA {
		return VoltVar{1, [4]float64{0.90, 1, 1, 1.10}, [4]float64{0.25, 0, 0, -0.25}}
	}
	return VoltVar{1, [4]float64{0.92, 0.98, 1.02, 1.08}, [4]float64{0.44, 0, 0, -0.44}}
}

// WattVar returns the default points of a category for a minimum active power, share of
// rated (IEEE Std 1547-2018, Table 9).
func (c Category) WattVar(minimum float64) WattVar {
	_, absorb := c.Capability()
	return WattVar{[3]float64{max(0.2, minimum), 0.5, 1}, [3]float64{0, 0, -absorb}}
}

// DefaultVoltWatt returns the default points for a minimum active power, share of rated:
// P2 is the lesser of it and 0.2 (IEEE Std 1547-2018, Table 10). The function is off unless
// it is asked for.
func DefaultVoltWatt(minimum float64) VoltWatt {
	return VoltWatt{V1: 1.06, V2: 1.10, P2: min(0.2, minimum)}
}

// Around returns the curve moved to another reference voltage, p.u.
func (c VoltVar) Around(reference float64) VoltVar {
	shift := reference - c.reference()
	for i := range c.V {
		c.V[i] += shift
	}
	c.Reference = reference
	return c
}

func (c VoltVar) reference() float64 {
	if c.Reference == 0 {
		return 1
	}
	return c.Reference
}

// Fault is a setting outside what is allowed. Where Source is a clause of a standard the
// device can be run nevertheless, as some utilities' required profiles do; a fault without
// a source makes the results meaningless.
type Fault struct {
	Setting   string  // such as "V2" or "reserve"
	Value     float64 // as given
	Low, High float64 // the allowed range; −∞ or +∞: open
	Unit      string
	Source    string // such as "IEEE Std 1547-2018, 5.3.3, Table 8, category B"
}

// Error names the setting, the range and where it stands.
func (f Fault) Error() string {
	show := func(x float64) string { // without the last digits of a difference
		return strconv.FormatFloat(math.Round(x*1e9)/1e9, 'g', -1, 64)
	}
	var allowed string
	switch {
	case f.Low == f.High:
		allowed = show(f.Low)
	case math.IsInf(f.High, 1):
		allowed = "at least " + show(f.Low)
	case math.IsInf(f.Low, -1):
		allowed = "at most " + show(f.High)
	default:
		allowed = show(f.Low) + " to " + show(f.High)
	}
	if f.Unit != "" {
		allowed += " " + f.Unit
	}
	value := show(f.Value)
	if math.Abs(f.Value) > 1e6 {
		value = strconv.FormatFloat(f.Value, 'g', -1, 64)
	}
	s := fmt.Sprintf("%s is %s, allowed is %s", f.Setting, value, allowed)
	if f.Source != "" {
		s += " (" + f.Source + ")"
	}
	return s
}

// faults collects what is out of range.
type faults []error

// slack is what a decimal may miss a limit by that is a sum of decimals.
const slack = 1e-9

// within notes a value outside low…high, or not a number.
func (l *faults) within(setting string, value, low, high float64, unit, source string) {
	if !(value >= low-slack && value <= high+slack) || math.IsInf(value, 0) {
		*l = append(*l, Fault{setting, value, low, high, unit, source})
	}
}

// positive notes a value that is not above zero.
func (l *faults) positive(setting string, value float64, unit string) {
	if !(value > 0) || math.IsInf(value, 0) {
		*l = append(*l, fmt.Errorf("%s is %v %s, it must be above 0", setting, value, unit))
	}
}

// Check returns everything that is outside what IEEE Std 1547-2018 allows, or that makes
// no sense, in the order of the sheet: a [Fault] for a range, another error for the rest.
// Only the settings of functions that are on are looked at.
func (f *Inverter) Check() []error {
	var l faults
	l.positive("rating", f.Rating, "kVA")
	l.within("rated active power", f.Rated, 0, f.Rating, "kW", "")
	l.within("minimum active power", f.Minimum, 0, 1, "", "")
	l.within("active power limit", f.Limit, 0, 1, "", "IEEE Std 1547-2018, 4.6.2")
	inject, absorb := f.Category.Capability()
	table := "IEEE Std 1547-2018, 5.2, Table 7, category " + f.Category.String()
	if f.Injection != 0 {
		l.within("reactive injection", f.Injection, inject, 1, "", table)
	}
	if f.Absorption != 0 {
		l.within("reactive absorption", f.Absorption, absorb, 1, "", table)
	}
	switch f.Function {
	case ConstantPowerFactor:
		f.checkPowerFactor(&l)
	case VoltageReactive:
		f.checkVoltVar(&l)
	case ActiveReactive:
		f.checkWattVar(&l)
	case ConstantReactive:
		f.checkResponse(&l, "5.3.5")
		inject, absorb = f.capability()
		l.within("constant reactive power", f.Reactive, -absorb, inject, "", "IEEE Std 1547-2018, 5.3.5")
	default:
		l = append(l, fmt.Errorf("%v is no function of IEEE Std 1547-2018", f.Function))
	}
	if f.VoltWattOn {
		f.checkVoltWatt(&l)
	}
	return l
}

// checkResponse holds the functions that Table 8 has no time for to 10 s.
func (f *Inverter) checkResponse(l *faults, clause string) {
	if f.Response != 0 {
		l.within("open loop response time", seconds(f.Response), 0, 10, "s", "IEEE Std 1547-2018, "+clause)
	}
}

// checkPowerFactor: at the whole rating the power factor needs a reactive power of
// √(1 − pf²), which the capability has to cover.
func (f *Inverter) checkPowerFactor(l *faults) {
	const source = "IEEE Std 1547-2018, 5.3.2"
	f.checkResponse(l, "5.3.2")
	if f.PowerFactor == 0 {
		return
	}
	inject, absorb := f.capability()
	share, way := inject, "delivering"
	if f.PowerFactor < 0 {
		share, way = absorb, "absorbing"
	}
	least := math.Floor(1000*math.Sqrt(max(0, 1-share*share))) / 1000 // 44 %: 0.897, 25 %: 0.968
	l.within("power factor "+way, math.Abs(f.PowerFactor), least, 1, "", source)
}

func (f *Inverter) checkVoltVar(l *faults) {
	c, ref := &f.VoltVar, f.VoltVar.reference()
	source := "IEEE Std 1547-2018, 5.3.3, Table 8, category " + f.Category.String()
	band := 0.03
	if f.Category == CategoryA {
		band = 0
	}
	inject, absorb := f.capability()
	l.within("V_ref", ref, 0.95, 1.05, "", source)
	l.within("V1", c.V[0], ref-0.18, c.V[1]-0.02, "", source)
	l.within("V2", c.V[1], ref-band, ref, "", source)
	l.within("V3", c.V[2], ref, ref+band, "", source)
	l.within("V4", c.V[3], c.V[2]+0.02, ref+0.18, "", source)
	l.within("Q1", c.Q[0], 0, inject, "", source)
	l.within("Q2", c.Q[1], -absorb, inject, "", source) // recalled from memory, as Q3
	l.within("Q3", c.Q[2], -absorb, inject, "", source)
	l.within("Q4", c.Q[3], -absorb, 0, "", source)
	for i := 1; i < len(c.V); i++ {
		if !(c.V[i] >= c.V[i-1]) || c.V[i] == c.V[i-1] && c.Q[i] != c.Q[i-1] {
			*l = append(*l, fmt.Errorf("V%d is %v and V%d is %v: voltages must rise, or the reactive power jumps", i, c.V[i-1], i+1, c.V[i]))
		}
		if !(c.Q[i] <= c.Q[i-1]) {
			*l = append(*l, fmt.Errorf("Q%d is %v and Q%d is %v: more reactive power at a higher voltage drives the voltage away", i, c.Q[i-1], i+1, c.Q[i]))
		}
	}
	if f.Response != 0 {
		l.within("open loop response time", seconds(f.Response), 1, 90, "s", source)
	}
}

func (f *Inverter) checkWattVar(l *faults) {
	c := &f.WattVar
	source := "IEEE Std 1547-2018, 5.3.4, Table 9, category " + f.Category.String()
	inject, absorb := f.capability()
	l.within("P1", c.P[0], f.Minimum, c.P[1]-0.1, "", source)
	l.within("P2", c.P[1], 0.4, 0.8, "", source)
	l.within("P3", c.P[2], c.P[1]+0.1, 1, "", source)
	for i, q := range c.Q {
		l.within(fmt.Sprintf("Q%d", i+1), q, -absorb, inject, "", source)
	}
	for i := 1; i < len(c.P); i++ {
		if !(c.P[i] > c.P[i-1]) {
			*l = append(*l, fmt.Errorf("P%d is %v and P%d is %v: powers must rise", i, c.P[i-1], i+1, c.P[i]))
		}
		if !(math.Abs(c.Q[i]) >= math.Abs(c.Q[i-1])) {
			*l = append(*l, fmt.Errorf("Q%d is %v and Q%d is %v: reactive power must not shrink as active power rises", i, c.Q[i-1], i+1, c.Q[i]))
		}
	}
	f.checkResponse(l, "5.3.4")
}

func (f *Inverter) checkVoltWatt(l *faults) {
	const source = "IEEE Std 1547-2018, 5.4.2, Table 10"
	c := &f.VoltWatt
	l.within("V1 of voltage-active power", c.V1, 1.05, 1.09, "", source)
	l.within("V2 of voltage-active power", c.V2, c.V1+0.01, 1.10, "", source)
	l.within("P2 of voltage-active power", c.P2, min(0.2, f.Minimum), 1, "", source)
	if !(c.V2 > c.V1) {
		*l = append(*l, fmt.Errorf("V2 of voltage-active power is %v and V1 is %v: V2 must be above V1", c.V2, c.V1))
	}
	if c.Response != 0 {
		l.within("open loop response time of voltage-active power", seconds(c.Response), 0.5, 60, "s", source)
	}
}
