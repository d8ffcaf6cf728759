package devices

import (
	"errors"
	"math"
	"strings"
	"testing"
)

// unit returns an inverter of 100 kVA and 100 kW with a reactive function at its defaults.
func unit(c Category, fn ReactiveFunction) Inverter {
	return Inverter{Rating: 100, Category: c, Function: fn, VoltVar: c.VoltVar(), WattVar: c.WattVar(0)}
}

// The default points of IEEE Std 1547-2018, Table 8, and the middles of the lines between
// them; field values "recalled from memory" for the points, by hand for the middles.
func TestVoltVarDefaults(t *testing.T) {
	for _, tt := range []struct {
		c    Category
		v, q float64 // p.u., kvar of 100 kVA
	}{
		{CategoryA, 0.80, 25}, {CategoryA, 0.90, 25}, {CategoryA, 0.95, 12.5}, {CategoryA, 1, 0},
		{CategoryA, 1.05, -12.5}, {CategoryA, 1.10, -25}, {CategoryA, 1.20, -25},
		{CategoryB, 0.80, 44}, {CategoryB, 0.92, 44}, {CategoryB, 0.95, 22}, {CategoryB, 0.98, 0}, {CategoryB, 1, 0},
		{CategoryB, 1.02, 0}, {CategoryB, 1.05, -22}, {CategoryB, 1.08, -44}, {CategoryB, 1.10, -44},
	} {
		f := unit(tt.c, VoltageReactive)
		if errs := f.Check(); errs != nil {
			t.Errorf("the defaults of %v: %v", tt.c, errs)
		}
		if o := f.Power(50, tt.v); math.Abs(o.Q-tt.q) > 1e-9 || o.P != 50 || o.Curtailed != 0 {
			t.Errorf("%v at %v p.u.: %+v, want %v kvar and 50 kW", tt.c, tt.v, o, tt.q)
		}
	}
}

// Table 9: nothing up to half of rated power, then down to −25 % (A) or −44 % (B); mirrored
// for power that is drawn. Points recalled from memory.
func TestWattVarDefaults(t *testing.T) {
	for _, tt := range []struct {
		c    Category
		p, q float64 // kW available, kvar of 200 kVA with 100 kW rated: the circle never binds
	}{
		{CategoryA, 20, 0}, {CategoryA, 50, 0}, {CategoryA, 75, -25}, {CategoryA, 100, -50},
		{CategoryB, 20, 0}, {CategoryB, 50, 0}, {CategoryB, 75, -44}, {CategoryB, 100, -88},
		{CategoryB, -50, 0}, {CategoryB, -75, 44}, {CategoryB, -100, 88}, {CategoryA, -100, 50},
	} {
		f := unit(tt.c, ActiveReactive)
		f.Rating, f.Rated = 200, 100
		if errs := f.Check(); errs != nil {
			t.Errorf("the defaults of %v: %v", tt.c, errs)
		}
		if o := f.Power(tt.p, 1); math.Abs(o.Q-tt.q) > 1e-9 || o.P != tt.p {
			t.Errorf("%v at %v kW: %+v, want %v kvar", tt.c, tt.p, o, tt.q)
		}
	}
	if c := CategoryB.WattVar(0.3); c.P != [3]float64{0.3, 0.5, 1} {
		t.Errorf("P1 for a minimum of 0.3 is %v, want the greater of 0.2 and it", c.P)
	}
}

// Table 10: rated power up to 1.06, P2 at 1.10; with P2 = 0.2 it is 0.60 at 1.08 (by hand).
func TestVoltWattDefaults(t *testing.T) {
	f := unit(CategoryB, ConstantPowerFactor)
	f.Minimum, f.VoltWattOn, f.VoltWatt = 0.3, true, DefaultVoltWatt(0.3)
	if errs := f.Check(); errs != nil {
		t.Error(errs)
	}
	for _, tt := range []struct{ v, p float64 }{{0.9, 100}, {1.06, 100}, {1.07, 80}, {1.08, 60}, {1.10, 20}, {1.2, 20}} {
		o := f.Power(130, tt.v)
		if math.Abs(o.P-tt.p) > 1e-9 || math.Abs(o.Curtailed-(100-tt.p)) > 1e-9 || o.Q != 0 {
			t.Errorf("at %v p.u.: %+v, want %v kW and the rest of 100 kW curtailed", tt.v, o, tt.p)
		}
	}
	if o := f.Power(-100, 1.2); o.P != -100 || o.Curtailed != 0 {
		t.Errorf("charging at a high voltage: %+v", o)
	}
	if got := DefaultVoltWatt(0.1); got != (VoltWatt{V1: 1.06, V2: 1.10, P2: 0.1}) {
		t.Errorf("P2 is the lesser of 0.2 and the minimum: %+v", got)
	}
}

// The rating: at full sun 44 kvar leave √(1 − 0.44²) = 0.8980 of the active power with
// reactive priority, and 0 kvar with active priority (by hand).
func TestPriority(t *testing.T) {
	f := unit(CategoryB, VoltageReactive)
	o := f.Power(100, 1.09)
	if math.Abs(o.P-89.79977728) > 1e-8 || o.Q != -44 || math.Abs(o.Curtailed-10.20022272) > 1e-8 {
		t.Errorf("reactive priority: %+v", o)
	}
	f.Priority = ActivePriority
	if o := f.Power(100, 1.09); o.P != 100 || o.Q != 0 || o.Curtailed != 0 {
		t.Errorf("active priority at the rating: %+v", o)
	}
	if o := f.Power(96, 1.09); o.P != 96 || math.Abs(o.Q+28) > 1e-9 { // 0.96² + 0.28² = 1
		t.Errorf("active priority: %+v, want 96 kW and −28 kvar", o)
	}
	// Voltage-active power makes room for reactive power: at 1.08 P ≤ 0.5, Q = −0.44.
	f.VoltWattOn, f.VoltWatt = true, VoltWatt{V1: 1.06, V2: 1.10}
	if o := f.Power(100, 1.08); math.Abs(o.P-50) > 1e-9 || math.Abs(o.Q+44) > 1e-9 || math.Abs(o.Curtailed-50) > 1e-9 {
		t.Errorf("both functions: %+v", o)
	}
}

// A function of active power stays on its curve under reactive priority. Power factor 0.95:
// P = 95, Q = √(1 − 0.95²) = 31.225. Watt-var B on the circle: P² + (0.88(P − 0.5))² = 1
// gives P = (0.7744 + √(0.7744² + 4·1.7744·0.8064))/(2·1.7744) = 0.92679 (by hand).
func TestStaysOnCurve(t *testing.T) {
	f := unit(CategoryB, ConstantPowerFactor)
	f.PowerFactor = -0.95
	if o := f.Power(100, 1); math.Abs(o.P-95) > 1e-9 || math.Abs(o.Q+31.2249900) > 1e-6 || math.Abs(o.Curtailed-5) > 1e-9 {
		t.Errorf("absorbing 0.95: %+v", o)
	}
	if o := f.Power(38, 1); math.Abs(o.Q+12.48999600) > 1e-6 || o.P != 38 {
		t.Errorf("38 kW at 0.95: %+v", o)
	}
	f.PowerFactor = 0.95
	if o := f.Power(-38, 1); math.Abs(o.Q-12.48999600) > 1e-6 || o.P != -38 {
		t.Errorf("delivering reactive power while charging: %+v", o)
	}
	f = unit(CategoryB, ActiveReactive)
	want := (0.7744 + math.Sqrt(0.7744*0.7744+4*1.7744*0.8064)) / (2 * 1.7744)
	if o := f.Power(100, 1); math.Abs(want-0.92679) > 1e-5 || math.Abs(o.P-100*want) > 1e-9 || math.Abs(o.Q+88*(want-0.5)) > 1e-9 {
		t.Errorf("watt-var at the rating: %+v, want %v", o, want)
	}
	if o := f.Power(-100, 1); math.Abs(o.P+100*want) > 1e-9 || math.Abs(o.Q-88*(want-0.5)) > 1e-9 {
		t.Errorf("mirrored: %+v", o)
	}
}

// Table 7 with 5.2: all of 44 % from 20 % of rated power on, in proportion to 5 %, none
// below; at night only where told.
func TestCapability(t *testing.T) {
	for _, tt := range []struct {
		c        Category
		reactive float64
		p, q     float64
	}{
		{CategoryB, 0.44, 20, 44}, {CategoryB, 0.44, 10, 22}, {CategoryB, 0.44, 5, 11}, {CategoryB, 0.44, 4.999, 0}, {CategoryB, 0.44, 0, 0},
		{CategoryB, -0.44, 20, -44}, {CategoryB, -0.44, 10, -22}, {CategoryA, 0.44, 20, 44}, {CategoryA, -0.44, 20, -25},
		{CategoryA, -0.44, 10, -12.5}, {CategoryA, -0.10, 10, -10}, {CategoryB, 0.30, -10, 22}, {CategoryB, 0.30, 0, 0},
	} {
		f := unit(tt.c, ConstantReactive)
		f.Reactive = tt.reactive
		if o := f.Power(tt.p, 1); math.Abs(o.Q-tt.q) > 1e-9 || o.P != tt.p {
			t.Errorf("%v asked for %v at %v kW: %+v, want %v kvar", tt.c, tt.reactive, tt.p, o, tt.q)
		}
		f.AtNight = true
		_, absorb := tt.c.Capability()
		if o, want := f.Power(0, 1), 100*max(tt.reactive, -absorb); o.Q != want || o.P != 0 || o.Curtailed != 0 {
			t.Errorf("%v at night: %+v, want %v kvar", tt.c, o, want)
		}
	}
	f := unit(CategoryB, ConstantReactive)
	f.Reactive, f.Injection, f.Minimum = 0.6, 0.6, 0.15
	if o := f.Power(50, 1); o.Q != 60 {
		t.Errorf("a capability above the least: %+v", o)
	}
	if o := f.Power(14, 1); o.Q != 0 {
		t.Errorf("below its minimum power: %+v", o)
	}
}

// The active power limit counts as curtailment, the rating does not.
func TestActivePowerLimit(t *testing.T) {
	f := Inverter{Rating: 100, Rated: 90, Limit: 0.5}
	if o := f.Power(120, 1); o.P != 45 || o.Curtailed != 45 {
		t.Errorf("%+v, want 45 kW and 45 kW curtailed", o)
	}
	if o := f.Power(30, 1); o.P != 30 || o.Curtailed != 0 {
		t.Errorf("%+v", o)
	}
}

// Every limit of the allowed ranges: on it nothing is wrong, beyond it one fault names the
// range and the table. Ranges recalled from memory.
func TestAllowedRanges(t *testing.T) {
	type set = func(*Inverter, float64)
	const t8, t9, t10 = "5.3.3, Table 8", "5.3.4, Table 9", "5.4.2, Table 10"
	vv := func(i int) set { return func(f *Inverter, x float64) { f.VoltVar.V[i] = x } }
	vq := func(i int) set { return func(f *Inverter, x float64) { f.VoltVar.Q[i] = x } }
	wp := func(i int) set { return func(f *Inverter, x float64) { f.WattVar.P[i] = x } }
	response := func(f *Inverter, x float64) { f.Response = Time(x * float64(Second)) }
	for _, tt := range []struct {
		name      string
		c         Category
		fn        ReactiveFunction
		set       set
		low, high float64
		source    string
	}{
		{"V1", CategoryA, VoltageReactive, vv(0), 0.82, 0.98, t8},
		{"V1", CategoryB, VoltageReactive, vv(0), 0.82, 0.96, t8},
		{"V2", CategoryB, VoltageReactive, vv(1), 0.97, 1, t8},
		{"V2", CategoryA, VoltageReactive, vv(1), 1, 1, t8},
		{"V3", CategoryA, VoltageReactive, vv(2), 1, 1, t8},
		{"V3", CategoryB, VoltageReactive, vv(2), 1, 1.03, t8},
		{"V4", CategoryA, VoltageReactive, vv(3), 1.02, 1.18, t8},
		{"V4", CategoryB, VoltageReactive, vv(3), 1.04, 1.18, t8},
		{"Q1", CategoryB, VoltageReactive, vq(0), 0, 0.44, t8},
		{"Q4", CategoryB, VoltageReactive, vq(3), -0.44, 0, t8},
		{"Q4", CategoryA, VoltageReactive, vq(3), -0.25, 0, t8},
		{"open loop response time", CategoryB, VoltageReactive, response, 1, 90, t8},
		{"open loop response time", CategoryB, ActiveReactive, response, 0, 10, "5.3.4"}, // 0 is the default, 10 s
		{"open loop response time", CategoryB, ConstantPowerFactor, response, 0, 10, "5.3.2"},
		{"open loop response time", CategoryB, ConstantReactive, response, 0, 10, "5.3.5"},
		{"P1", CategoryB, ActiveReactive, wp(0), 0, 0.4, t9},
		{"P2", CategoryB, ActiveReactive, wp(1), 0.4, 0.8, t9},
		{"P3", CategoryB, ActiveReactive, wp(2), 0.6, 1, t9},
		{"Q3", CategoryA, ActiveReactive, func(f *Inverter, x float64) { f.WattVar.Q[2] = x }, -0.25, 0.44, t9},
		{"V1 of", CategoryB, ConstantPowerFactor, func(f *Inverter, x float64) { f.VoltWatt.V1 = x }, 1.05, 1.09, t10},
		{"V2 of", CategoryB, ConstantPowerFactor, func(f *Inverter, x float64) { f.VoltWatt.V2 = x }, 1.07, 1.10, t10},
		{"P2 of", CategoryB, ConstantPowerFactor, func(f *Inverter, x float64) { f.VoltWatt.P2 = x }, 0, 1, t10},
		{"response time of", CategoryB, ConstantPowerFactor, func(f *Inverter, x float64) { f.VoltWatt.Response = Time(x * float64(Second)) }, 0.5, 60, t10},
		{"constant reactive", CategoryA, ConstantReactive, func(f *Inverter, x float64) { f.Reactive = x }, -0.25, 0.44, "5.3.5"},
		{"power factor delivering", CategoryA, ConstantPowerFactor, func(f *Inverter, x float64) { f.PowerFactor = x }, 0.897, 1, "5.3.2"},
		{"power factor absorbing", CategoryA, ConstantPowerFactor, func(f *Inverter, x float64) { f.PowerFactor = -x }, 0.968, 1, "5.3.2"},
		{"reactive injection", CategoryA, ConstantPowerFactor, func(f *Inverter, x float64) { f.Injection = x }, 0.44, 1, "5.2, Table 7"},
		{"reactive absorption", CategoryA, ConstantPowerFactor, func(f *Inverter, x float64) { f.Absorption = x }, 0.25, 1, "5.2, Table 7"},
	} {
		for _, x := range []struct {
			at   float64
			good bool
		}{{tt.low, true}, {tt.high, true}, {tt.low - 1e-4, false}, {tt.high + 1e-4, false}} {
			f := unit(tt.c, tt.fn)
			f.VoltWattOn, f.VoltWatt = true, DefaultVoltWatt(0)
			tt.set(&f, x.at)
			var found *Fault
			for _, err := range f.Check() {
				var fault Fault
				if errors.As(err, &fault) && strings.Contains(fault.Setting, tt.name) {
					found = &fault
				} else if x.good {
					t.Errorf("%s of %v at %v: %v", tt.name, tt.c, x.at, err)
				}
			}
			if (found == nil) != x.good {
				t.Errorf("%s of %v at %v: fault %v, want good %v", tt.name, tt.c, x.at, found, x.good)
				continue
			}
			if found == nil {
				continue
			}
			if !agree(found.Low, tt.low, 1e-9) || !agree(found.High, tt.high, 1e-9) || !strings.HasPrefix(found.Source, "IEEE Std 1547-2018, "+tt.source) {
				t.Errorf("%s of %v: %v to %v by %q, want %v to %v by %s", tt.name, tt.c, found.Low, found.High, found.Source, tt.low, tt.high, tt.source)
			}
		}
	}
}

func TestFaultText(t *testing.T) {
	f := unit(CategoryB, VoltageReactive)
	f.VoltVar.V[1] = 0.96
	errs := f.Check()
	if len(errs) != 1 {
		t.Fatalf("%v", errs)
	}
	if got, want := errs[0].Error(), "V2 is 0.96, allowed is 0.97 to 1 (IEEE Std 1547-2018, 5.3.3, Table 8, category B)"; got != want {
		t.Errorf("%q, want %q", got, want)
	}
}

// What makes no sense is told without the standard, and nothing panics on numbers that are none.
func TestNonsense(t *testing.T) {
	for name, change := range map[string]func(*Inverter){
		"rating":                  func(f *Inverter) { f.Rating = 0 },
		"rated active power":      func(f *Inverter) { f.Rated = 101 },
		"voltages must rise":      func(f *Inverter) { f.VoltVar.V[2] = 0.97 },
		"drives the voltage away": func(f *Inverter) { f.VoltVar.Q[1], f.VoltVar.Q[2] = -0.1, 0.1 },
		"V1 is NaN":               func(f *Inverter) { f.VoltVar.V[0] = math.NaN() },
		"Q4 is NaN":               func(f *Inverter) { f.VoltVar.Q[3] = math.NaN() },
		"is no function":          func(f *Inverter) { f.Function = 9 },
		"V2 must be above V1":     func(f *Inverter) { f.VoltWattOn, f.VoltWatt = true, VoltWatt{V1: 1.09, V2: 1.09} },
		"must not shrink":         func(f *Inverter) { f.Function, f.WattVar.Q = ActiveReactive, [3]float64{0, -0.2, -0.1} },
		"powers must rise":        func(f *Inverter) { f.Function, f.WattVar.P = ActiveReactive, [3]float64{0.5, 0.5, 1} },
	} {
		f := unit(CategoryB, VoltageReactive)
		change(&f)
		text := ""
		for _, err := range f.Check() {
			text += err.Error() + "\n"
		}
		if !strings.Contains(text, name) {
			t.Errorf("want %q in %q", name, text)
		}
		f.Power(50, math.NaN())
		f.Power(math.NaN(), 1.05)
		f.Power(math.Inf(1), math.Inf(1))
	}
}

// The curve follows its reference: V_ref 0.97 moves every point by −0.03.
func TestAround(t *testing.T) {
	f := unit(CategoryB, VoltageReactive)
	f.VoltVar = f.VoltVar.Around(0.97)
	if errs := f.Check(); errs != nil {
		t.Error(errs)
	}
	if o := f.Power(50, 1.02); math.Abs(o.Q+22) > 1e-9 {
		t.Errorf("%+v, want −22 kvar as at 1.05 around 1", o)
	}
	if back := f.VoltVar.Around(1); math.Abs(back.V[3]-1.08) > 1e-15 || back.Reference != 1 {
		t.Errorf("back again: %+v", back)
	}
}

// The words of inverter-functions.csv, batteries.csv and the standard.
func TestWords(t *testing.T) {
	for got, want := range map[string]string{
		CategoryA.String(): "A", CategoryB.String(): "B", Category(7).String(): "Category(7)",
		ConstantPowerFactor.String(): "constant power factor", VoltageReactive.String(): "voltage-reactive power",
		ActiveReactive.String(): "active power-reactive power", ConstantReactive.String(): "constant reactive power",
		ReactiveFunction(9).String(): "ReactiveFunction(9)", ActivePriority.String(): "active", ReactivePriority.String(): "reactive",
		Priority(9).String(): "Priority(9)", BySchedule.String(): "schedule", PeakShaving.String(): "peak shaving",
		SelfConsumption.String(): "self-consumption", ByProfile.String(): "profile", Dispatch(9).String(): "Dispatch(9)",
		Unmanaged.String(): "unmanaged", ByDeparture.String(): "by departure", CheapHours.String(): "cheap hours", Charging(9).String(): "Charging(9)",
	} {
		if got != want {
			t.Errorf("%q, want %q", got, want)
		}
	}
}
