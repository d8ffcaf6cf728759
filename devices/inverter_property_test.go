package devices

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// randomInverter draws a sheet that [Inverter.Check] passes.
func randomInverter(t *testing.T, rng *rand.Rand) Inverter {
	t.Helper()
	for {
		f := Inverter{Rating: 5 + 100*rng.Float64(), Category: Category(rng.IntN(2)), Function: ReactiveFunction(rng.IntN(4)),
			Priority: Priority(rng.IntN(2)), AtNight: rng.IntN(4) == 0, VoltWattOn: rng.IntN(2) == 0}
		if rng.IntN(2) == 0 {
			f.Rated = f.Rating * (0.6 + 0.4*rng.Float64())
		}
		if rng.IntN(3) == 0 {
			f.Injection, f.Absorption = 0.44+0.56*rng.Float64(), 0.44+0.56*rng.Float64()
		}
		if rng.IntN(4) == 0 {
			f.Limit = 0.3 + 0.7*rng.Float64()
		}
		f.Minimum = 0.2 * rng.Float64()
		inject, absorb := f.capability()
		f.PowerFactor = 0.97 + 0.03*rng.Float64()
		if rng.IntN(2) == 0 {
			f.PowerFactor = -f.PowerFactor
		}
		f.Reactive = -absorb + (absorb+inject)*rng.Float64()
		q := []float64{-absorb + (absorb+inject)*rng.Float64(), -absorb + (absorb+inject)*rng.Float64()}
		slices.Sort(q)
		f.VoltVar = f.Category.VoltVar()
		f.VoltVar.Q = [4]float64{max(q[1], 0) + (inject-max(q[1], 0))*rng.Float64(), q[1], q[0], min(q[0], 0) - (absorb+min(q[0], 0))*rng.Float64()}
		if f.Category == CategoryB {
			f.VoltVar.V[1], f.VoltVar.V[2] = 1-0.03*rng.Float64(), 1+0.03*rng.Float64()
			f.VoltVar.V[0], f.VoltVar.V[3] = f.VoltVar.V[1]-0.02, f.VoltVar.V[2]+0.02+0.1*rng.Float64()
		} else {
			f.VoltVar.Q[2] = f.VoltVar.Q[1]
			f.VoltVar.Q[3] = min(f.VoltVar.Q[3], f.VoltVar.Q[2])
		}
		f.VoltVar = f.VoltVar.Around(0.95 + 0.1*rng.Float64())
		p2 := 0.4 + 0.4*rng.Float64()
		f.WattVar.P = [3]float64{f.Minimum + (p2-0.1-f.Minimum)*rng.Float64(), p2, p2 + 0.1 + (0.9-p2)*rng.Float64()}
		f.WattVar.Q = [3]float64{0, -0.3 * absorb * rng.Float64(), -absorb}
		f.VoltWatt = DefaultVoltWatt(f.Minimum)
		f.VoltWatt.V1 = 1.05 + 0.04*rng.Float64()
		if errs := f.Check(); errs == nil {
			return f
		} else if f.Category == CategoryB {
			t.Fatalf("%+v: %v", f, errs)
		}
	}
}

// What every output owes: inside the rating and the capability, no more active power than
// there is, what is missing curtailed, nothing for reactive power at night.
func TestInverterLimits(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 1))
	for range 2000 {
		f := randomInverter(t, rng)
		inject, absorb := f.capability()
		for range 100 {
			available := f.rated() * (2.4*rng.Float64() - 1.2)
			if rng.IntN(10) == 0 {
				available = 0
			}
			v := 0.8 + 0.4*rng.Float64()
			o := f.Power(available, v)
			ε := 1e-9 * f.Rating
			could := math.Min(math.Abs(available), f.rated())
			switch {
			case math.IsNaN(o.P + o.Q + o.DP + o.DQ + o.Curtailed):
				t.Fatalf("%+v from %+v", o, f)
			case math.Hypot(o.P, o.Q) > f.Rating+ε:
				t.Fatalf("outside the rating: %+v from %+v", o, f)
			case o.Q > inject*f.Rating+ε || o.Q < -absorb*f.Rating-ε:
				t.Fatalf("outside the capability: %+v from %+v", o, f)
			case math.Abs(o.P) > could+ε || o.P*available < 0:
				t.Fatalf("%v kW are there: %+v from %+v", available, o, f)
			case available >= 0 && math.Abs(could-o.P-o.Curtailed) > ε || available < 0 && o.Curtailed != 0 || o.Curtailed < 0:
				t.Fatalf("curtailed of %v kW: %+v from %+v", available, o, f)
			case f.VoltWattOn && available > 0 && o.P > f.ceiling(constant(v)).at+ε:
				t.Fatalf("above the ceiling: %+v from %+v", o, f)
			case !f.AtNight && math.Abs(available) < 0.05*f.rated() && o.Q != 0:
				t.Fatalf("reactive power at night: %+v from %+v", o, f)
			case f.Priority == ActivePriority && available > 0 && math.Abs(o.P-min(could, f.limitKW(), f.ceiling(constant(v)).at)) > ε:
				t.Fatalf("active power cut in spite of its priority: %+v from %+v", o, f)
			}
			s := f.Target(available, v)
			if h := f.Held(available, s); math.Abs(h.P-o.P) > ε || math.Abs(h.Q-o.Q) > ε || math.Abs(h.Curtailed-o.Curtailed) > ε || h.DP != 0 || h.DQ != 0 {
				t.Fatalf("held %+v, steady %+v: %+v", h, o, f)
			}
		}
	}
}

func (f *Inverter) limitKW() float64 {
	if f.Limit > 0 {
		return f.Limit * f.rated()
	}
	return f.rated()
}

// Over a fine grid of voltages nothing jumps, and the derivative is what the difference to
// the right says. Where a circle stands upright the step is bounded by √(2·Rating·ΔP).
func TestInverterContinuous(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 2))
	const h = 1e-7
	worst := 0
	for range 500 {
		f := randomInverter(t, rng)
		for range 4 {
			available := f.rated() * 1.2 * rng.Float64()
			if rng.IntN(5) == 0 {
				available = f.rated()
			}
			// No slope of a curve is steeper than 1 / 0.01.
			steepest := 2 * 100 * f.Rating
			last := f.Power(available, 0.8500137) // off the grid of round corners
			for v := 0.8500137; v < 1.15; v += 5e-4 {
				o := f.Power(available, v)
				Δ := 5e-4 * steepest
				if bound := Δ + math.Sqrt(2*f.Rating*Δ); math.Abs(o.P-last.P) > bound || math.Abs(o.Q-last.Q) > bound {
					t.Fatalf("a jump at %v: %+v after %+v from %+v", v, o, last, f)
				}
				last = o
				// Close by, the step is as small as the slopes say.
				near := f.Power(available, v+h)
				bound := h*steepest + math.Sqrt(2*f.Rating*h*steepest)
				if math.Abs(near.P-o.P) > bound || math.Abs(near.Q-o.Q) > bound {
					t.Fatalf("a jump just above %v: %+v after %+v from %+v", v, near, o, f)
				}
				dp, dq := (near.P-o.P)/h, (near.Q-o.Q)/h
				if math.Abs(dp-o.DP) > 1e-3*f.Rating+1e-3*math.Abs(dp) || math.Abs(dq-o.DQ) > 1e-3*f.Rating+1e-3*math.Abs(dq) {
					worst++ // within h of a corner, or on the upright end of a circle
				}
			}
		}
	}
	if worst > 20 { // of 1.2 million
		t.Errorf("%d derivatives differ from the difference quotient", worst)
	}
}

// The derivative at a corner is the one to the right.
func TestDerivativeAtCorners(t *testing.T) {
	f := unit(CategoryB, VoltageReactive)
	slope := 44 / 0.06
	for _, tt := range []struct{ v, dq float64 }{{0.92, -slope}, {0.95, -slope}, {0.98, 0}, {1, 0}, {1.02, -slope}, {1.08, 0}, {0.9, 0}, {1.2, 0}} {
		if o := f.Power(50, tt.v); math.Abs(o.DQ-tt.dq) > 1e-9*slope || o.DP != 0 {
			t.Errorf("at %v: %+v, want dq/dv %v", tt.v, o, tt.dq)
		}
	}
	// Reactive priority at the rating: P = √(100² − Q²), so dP/dv = −Q/P·dQ/dv.
	o := f.Power(100, 1.05)
	if want := -o.Q / o.P * -slope; math.Abs(o.DP-want) > 1e-9 || math.Abs(o.P-math.Sqrt(100*100-22*22)) > 1e-9 {
		t.Errorf("%+v, want dp/dv %v", o, want)
	}
	g := unit(CategoryB, ConstantPowerFactor)
	g.VoltWattOn, g.VoltWatt, g.PowerFactor = true, VoltWatt{V1: 1.06, V2: 1.10, P2: 0.2}, -0.9
	for _, tt := range []struct{ v, dp float64 }{{1.05, 0}, {1.06, -2000}, {1.08, -2000}, {1.10, 0}} {
		if o := g.Power(80, tt.v); tt.v != 1.06 && math.Abs(o.DP-tt.dp) > 1e-8 || tt.v == 1.06 && o.DP != 0 {
			t.Errorf("80 kW at %v: %+v, want dp/dv %v (0 at 1.06, where the ceiling is 100 kW)", tt.v, o, tt.dp)
		}
	}
	// The reactive power of the power factor falls with the active power.
	if o := g.Power(80, 1.08); math.Abs(o.DQ-2000*math.Sqrt(1-0.81)/0.9) > 1e-8 {
		t.Errorf("%+v", o)
	}
}

// Where two quantities meet, and where one comes to a corner from the right or from the left.
func TestSlopes(t *testing.T) {
	flat, falls, rises := sloped{1, 0}, sloped{1, -2}, sloped{1, 3}
	for _, pair := range [][2]sloped{{flat, falls}, {falls, flat}, {rises, falls}, {falls, rises}} {
		if got := lesser(pair[0], pair[1]); got != falls {
			t.Errorf("the lesser of %v is %v", pair, got)
		}
		if got := greater(pair[0], pair[1]); got == falls {
			t.Errorf("the greater of %v is %v", pair, got)
		}
	}
	x, y := []float64{1, 2, 2, 4}, []float64{0, 1, 1, -3}
	for _, tt := range []struct{ in, out sloped }{
		{sloped{0, 1}, sloped{0, 0}}, {sloped{1, 1}, sloped{0, 1}}, {sloped{1, -1}, sloped{0, 0}}, {sloped{1.5, -5}, sloped{0.5, -5}},
		{sloped{2, 1}, sloped{1, -2}}, {sloped{2, -1}, sloped{1, -1}}, {sloped{2, 0}, sloped{1, 0}}, {sloped{3, 0.5}, sloped{-1, -1}},
		{sloped{4, 1}, sloped{-3, 0}}, {sloped{4, -1}, sloped{-3, 2}}, {sloped{5, -1}, sloped{-3, 0}},
	} {
		if got := through(x, y, tt.in); got != tt.out {
			t.Errorf("at %v: %v, want %v", tt.in, got, tt.out)
		}
	}
	if got := arc(5, sloped{3, 2}); got != (sloped{4, -1.5}) {
		t.Errorf("beside 3 of 5: %v", got)
	}
	if arc(5, sloped{5, -1}) != (sloped{}) || arc(5, sloped{6, -1}) != (sloped{}) {
		t.Error("on and outside the circle nothing is left")
	}
}

// The curve and the ceiling only fall as the voltage rises, and so does the reactive power
// that comes out of them: there is one voltage at which a feeder and its inverters agree
// on it.
func TestCurvesFall(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 3))
	for range 300 {
		f := randomInverter(t, rng)
		f.Function = VoltageReactive
		available := 1.2 * f.rated() * rng.Float64()
		lastP, lastQ, out := math.Inf(1), math.Inf(1), math.Inf(1)
		for v := 0.8; v < 1.2; v += 1e-3 {
			s := f.Target(f.rated(), v)
			if s.Ceiling > lastP || s.Reactive > lastQ+1e-12*f.Rating {
				t.Fatalf("at %v: %+v after %v kW and %v kvar from %+v", v, s, lastP, lastQ, f)
			}
			o := f.Power(available, v)
			// With active priority a falling ceiling makes room for more of what the curve
			// asks for, be it to deliver.
			if o.Q > out+1e-12*f.Rating && !(f.Priority == ActivePriority && o.Q > 0) {
				t.Fatalf("at %v: %+v after %v kvar from %+v", v, o, out, f)
			}
			lastP, lastQ, out = s.Ceiling, s.Reactive, o.Q
		}
	}
}

// The lag gets to 90 % in its open loop response time, however it is cut into intervals,
// and comes to rest on its target in finitely many.
func TestLag(t *testing.T) {
	l := Lag{Response: 5 * Second, Still: 1e-4}
	if got := l.Advance(0, 1, 5*Second); math.Abs(got-0.9) > 1e-9 {
		t.Errorf("%v after the response time, want 0.9", got)
	}
	rng := rand.New(rand.NewPCG(3, 4))
	for range 100 {
		x, now := 0.0, Time(0)
		for now < 5*Second {
			ended := min(1+Time(rng.Int64N(int64(Second))), 5*Second-now)
			x, now = l.Advance(x, 1, ended), now+ended
		}
		if math.Abs(x-0.9) > 1e-9 {
			t.Fatalf("%v in parts, want 0.9", x)
		}
	}
	x, now, moves := 0.0, Time(0), 0
	for l.NextMove(x, 1, now) != Never {
		next := l.NextMove(x, 1, now)
		if d := next - now; 2*d > l.Constant() || d <= 0 {
			t.Fatalf("an interval of %v s, want at most half of %v", seconds(d), seconds(l.Constant()))
		}
		x, now, moves = l.Advance(x, 1, next-now), next, moves+1
	}
	if x != 1 || moves != 19 { // e^(−19/2) < 1e-4 < e^(−18/2)
		t.Errorf("at rest at %v after %d moves, want 1 after 19", x, moves)
	}
	if got := l.Advance(0.3, 0.7, 0); got != 0.3 {
		t.Errorf("no time, and yet it moves to %v", got)
	}
}

// Both lags of an inverter: a jump from 1 to 1.08 p.u. of 50 kW, B with 5 s and a ceiling with
// 10 s. After 5 s Q is −0.9·44; the ceiling is 100 − 50·(1 − √0.1) = 65.81 kW (by hand).
func TestInverterLag(t *testing.T) {
	f := unit(CategoryB, VoltageReactive)
	f.VoltWattOn, f.VoltWatt = true, VoltWatt{V1: 1.06, V2: 1.10}
	for _, tt := range []struct {
		step Time
		lags bool
	}{{Second, true}, {9 * Second, true}, {10 * Second, false}, {900 * Second, false}} {
		if f.Lags(tt.step) != tt.lags {
			t.Errorf("steps of %v s: lags %v", seconds(tt.step), !tt.lags)
		}
	}
	s := f.Target(100, 1)
	if s != (InverterState{100, 0}) || f.NextMove(s, s, 7) != Never || f.Advance(s, s, Second) != s {
		t.Errorf("at rest: %+v", s)
	}
	goal := f.Target(100, 1.08)
	if got, want := f.NextMove(s, goal, 0), (Lag{Response: 5 * Second}).Constant()/2; got != want {
		t.Errorf("next move at %v s, want half the shorter constant, %v s", seconds(got), seconds(want))
	}
	s = f.Advance(s, goal, 5*Second)
	if math.Abs(s.Reactive+39.6) > 1e-7 || math.Abs(s.Ceiling-65.8114) > 1e-4 {
		t.Errorf("after 5 s %+v, want 65.81 kW and −39.6 kvar", s)
	}
	if o := f.Held(100, s); math.Abs(o.P-s.Ceiling) > 1e-12 || o.Q != s.Reactive || math.Abs(o.Curtailed-34.1886) > 1e-4 {
		t.Errorf("held %+v", o)
	}
	a := unit(CategoryA, VoltageReactive)
	if !a.Lags(9*Second) || a.Lags(10*Second) {
		t.Error("category A has 10 s")
	}
	f.VoltWattOn, f.Response = false, 90*Second
	if !f.Lags(60*Second) || f.Lags(90*Second) {
		t.Errorf("90 s of its own are not followed")
	}
}

func TestInverterAllocations(t *testing.T) {
	f := unit(CategoryB, VoltageReactive)
	f.VoltWattOn, f.VoltWatt = true, DefaultVoltWatt(0)
	w := unit(CategoryB, ActiveReactive)
	if n := testing.AllocsPerRun(100, func() {
		f.Power(100, 1.07)
		w.Power(100, 1.07)
		f.Held(100, f.Advance(f.Target(100, 1), f.Target(100, 1.07), Second))
	}); n != 0 {
		t.Errorf("%v allocations", n)
	}
}

func BenchmarkInverterPower(b *testing.B) {
	f := unit(CategoryB, VoltageReactive)
	f.VoltWattOn, f.VoltWatt = true, DefaultVoltWatt(0)
	b.ReportAllocs()
	v := 0.9
	for b.Loop() {
		f.Power(95, v)
		if v += 1e-3; v > 1.1 {
			v = 0.9
		}
	}
}
