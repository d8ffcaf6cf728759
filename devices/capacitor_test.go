package devices

import (
	"math"
	"testing"
)

// capRow is one line of a pencil timeline of a capacitor control.
type capRow struct {
	t    float64 // s
	v    float64 // V120
	q    float64 // the control's quantity
	ask  int8
	due  float64 // s
	acts *Action
}

// kvarSheet is the settings sheet of most timelines: a 600 kvar bank that closes
// above 400 kvar lagging and opens above 400 kvar leading (two thirds of the bank and a span of 1.33 times it: common practice),
// 60 s and the 300 s that its discharge takes (IEEE 18), overridden at 117 V and 127 V.
func kvarSheet() CapacitorControl {
	return CapacitorControl{Kind: CapacitorKVAR, On: 400, Off: -400, OverrideOn: 117, OverrideOff: 127, OverrideDeadband: 2,
		Delay: 60 * Second, Lockout: 300 * Second}
}

func runCapacitor(t *testing.T, c CapacitorControl, s CapacitorState, rows []capRow) CapacitorState {
	t.Helper()
	for i, r := range rows {
		s = c.Observe(s, CapacitorReading{V120: r.v, Quantity: r.q, Clock: at(r.t)}, at(r.t))
		if s.Ask != r.ask || c.Due(s) != at(r.due) || c.Standing(s) != (r.ask != 0) {
			t.Fatalf("row %d (%v s, %v V, %v): asks %d due %v s, want %d due %v s; %+v", i, r.t, r.v, r.q,
				s.Ask, float64(c.Due(s))/1e9, r.ask, r.due, s)
		}
		if r.acts == nil {
			continue
		}
		if c.Due(s) != at(r.t) {
			t.Fatalf("row %d: the action is due at %v s, not at %v s", i, float64(c.Due(s))/1e9, r.t)
		}
		var a Action
		if s, a = c.Act(s, at(r.t)); a != *r.acts {
			t.Fatalf("row %d (%v s): action %+v, want %+v", i, r.t, a, *r.acts)
		}
	}
	return s
}

func TestCapacitorTimelines(t *testing.T) {
	voltage := CapacitorControl{Kind: CapacitorVoltage, On: 118, Off: 126, Delay: 60 * Second, Lockout: 300 * Second}
	current := CapacitorControl{Kind: CapacitorCurrent, On: 200, Off: 120, OverrideOn: math.NaN(), OverrideOff: math.NaN(), Delay: 60 * Second}
	// 90 °F on, 82 °F off: common practice for summer load.
	heat := CapacitorControl{Kind: CapacitorTemperature, On: 32.2, Off: 27.8, OverrideOn: math.NaN(), OverrideOff: math.NaN(), Delay: 60 * Second}
	cold := heat
	cold.On, cold.Off = -5, 5
	held := kvarSheet()
	held.Kind = CapacitorHeld
	limited := kvarSheet()
	limited.DailyLimit, limited.Lockout = 2, 60*Second
	const midnight = 86400

	tests := []struct {
		name   string
		c      CapacitorControl
		closed bool
		rows   []capRow
	}{
		{"after opening it waits for the lockout, and the delay runs meanwhile", voltage, true, []capRow{
			{0, 126.5, 0, -1, 60, nil},
			{60, 126.5, 0, -1, 60, act(1, 0, ByControl, 126.5, 126, 60)},
			{60, 122, 0, 0, never, nil},
			{100, 117, 0, +1, 360, nil},  // 100 + 60 is before 60 + 300
			{200, 118, 0, 0, never, nil}, // on the edge is inside
			{250, 117, 0, +1, 360, nil},
			{360, 117, 0, +1, 360, act(0, 1, ByControl, 117, 118, 110)},
			{360, 121, 0, 0, never, nil},
			{400, 127, 0, -1, 460, nil}, // opening is not locked out
		}},
		{"a request late in the lockout waits for its own delay", voltage, true, []capRow{
			{0, 126.5, 0, -1, 60, nil},
			{60, 126.5, 0, -1, 60, act(1, 0, ByControl, 126.5, 126, 60)},
			{310, 117, 0, +1, 370, nil},
			{365, 117, 0, +1, 370, nil}, // seen after the lockout's end
			{370, 117, 0, +1, 370, act(0, 1, ByControl, 117, 118, 60)},
		}},
		{"a lockout that ends while the request stands moves nothing", voltage, true, []capRow{
			{0, 126.5, 0, -1, 60, nil},
			{60, 126.5, 0, -1, 60, act(1, 0, ByControl, 126.5, 126, 60)},
			{100, 117, 0, +1, 360, nil},
			{360, 117, 0, +1, 360, nil},
			{360, 117, 0, +1, 360, act(0, 1, ByControl, 117, 118, 260)},
		}},
		{"a clock restarts", voltage, false, []capRow{
			{0, 117, 0, +1, 60, nil},
			{59, 119, 0, 0, never, nil},
			{60, 117, 0, +1, 120, nil},
		}},
		{"by kvar the high side closes", kvarSheet(), false, []capRow{
			{0, 122, 400, 0, never, nil},
			{1, 122, 400.01, +1, 61, nil},
			{61, 122, 450, +1, 61, act(0, 1, ByControl, 450, 400, 60)},
			{61, 123, -150, 0, never, nil},
			{70, 123, -400, 0, never, nil},
			{80, 123, -401, -1, 140, nil},
			{140, 123, -500, -1, 140, act(1, 0, ByControl, -500, -400, 60)},
		}},
		{"by current the high side closes", current, false, []capRow{
			{0, 90, 200, 0, never, nil}, // no override is set: the voltage does not matter
			{1, 140, 201, +1, 61, nil},
			{61, 140, 201, +1, 61, act(0, 1, ByControl, 201, 200, 60)},
			{70, 140, 120, 0, never, nil},
			{80, 140, 119, -1, 140, nil},
		}},
		{"in summer the warm side closes", heat, false, []capRow{
			{0, 120, 32, 0, never, nil}, {10, 120, 33, +1, 70, nil}, {70, 120, 33, +1, 70, act(0, 1, ByControl, 33, 32.2, 60)},
			{80, 120, 30, 0, never, nil}, {90, 120, 27, -1, 150, nil},
		}},
		{"in winter the cold side closes", cold, false, []capRow{
			{0, 120, -4, 0, never, nil}, {10, 120, -6, +1, 70, nil}, {70, 120, -6, +1, 70, act(0, 1, ByControl, -6, -5, 60)},
			{80, 120, 0, 0, never, nil}, {90, 120, 6, -1, 150, nil},
		}},
		{"an override closes, and its latch holds until the deadband is passed", kvarSheet(), false, []capRow{
			{0, 117, 0, 0, never, nil}, // on the edge
			{1, 116.5, 0, +1, 61, nil},
			{61, 116.5, -500, +1, 61, act(0, 1, OverrideLow, 116.5, 117, 60)},
			{61, 118.5, -500, 0, never, nil}, // the control wants it open
			{70, 119, -500, 0, never, nil},   // 117 + 2: on the edge of the deadband
			{80, 119.01, -500, -1, 140, nil},
			{100, 118, -500, -1, 140, nil}, // released is released
			{140, 118, -500, -1, 140, act(1, 0, ByControl, -500, -400, 60)},
		}},
		{"an override opens, and its latch holds until the deadband is passed", kvarSheet(), true, []capRow{
			{0, 127.5, 500, -1, 60, nil},
			{60, 127.5, 500, -1, 60, act(1, 0, OverrideHigh, 127.5, 127, 60)},
			{60, 125.5, 500, 0, never, nil},
			{400, 125, 500, 0, never, nil},
			{500, 124.99, 500, +1, 560, nil},
		}},
		{"an override holds against the control without a latch", kvarSheet(), true, []capRow{
			{0, 116, -500, 0, never, nil},  // it is closed, as the override wants it
			{10, 117, -500, -1, 70, nil},   // at once the control's again
			{20, 116, -500, 0, never, nil}, // and the override's
		}},
		{"an override turns a request of the control around", kvarSheet(), false, []capRow{
			{0, 122, 500, +1, 60, nil},
			{30, 128, 500, 0, never, nil},
			{40, 122, 500, +1, 100, nil},
			{50, 116, 500, +1, 100, nil}, // the same direction: the clock goes on
			{100, 116, 500, +1, 100, act(0, 1, OverrideLow, 116, 117, 60)},
		}},
		{"the opposite override ends a latch", kvarSheet(), false, []capRow{
			{0, 116, 0, +1, 60, nil},
			{60, 116, 0, +1, 60, act(0, 1, OverrideLow, 116, 117, 60)},
			{60, 128, 0, -1, 120, nil},
			{120, 128, 0, -1, 120, act(1, 0, OverrideHigh, 128, 127, 60)},
			{130, 116, 0, +1, 420, nil}, // an override's closing waits for the lockout too
		}},
		{"a daily limit counts both ways, and overrides' openings do not wait", limited, false, []capRow{
			{0, 122, 500, +1, 60, nil},
			{60, 122, 500, +1, 60, act(0, 1, ByControl, 500, 400, 60)},
			{100, 122, -500, -1, 160, nil},
			{160, 122, -500, -1, 160, act(1, 0, ByControl, -500, -400, 60)},
			{300, 122, 500, 0, never, nil}, // two of two
			{400, 116, 500, 0, never, nil}, // an override's closing waits
			{midnight - 1, 122, 500, 0, never, nil},
			{midnight, 122, 500, +1, midnight + 60, nil},
			{midnight + 60, 122, 500, +1, midnight + 60, act(0, 1, ByControl, 500, 400, 60)},
			{midnight + 100, 128, 0, -1, midnight + 160, nil},
			{midnight + 160, 128, 0, -1, midnight + 160, act(1, 0, OverrideHigh, 128, 127, 60)}, // exempt
			{midnight + 300, 122, 500, +1, midnight + 360, nil},
			{midnight + 360, 122, 500, +1, midnight + 360, act(0, 1, ByControl, 500, 400, 60)}, // the second
			{midnight + 400, 122, -500, 0, never, nil},
			{midnight + 500, 128, -500, -1, midnight + 560, nil}, // at the limit an override still opens
			{midnight + 560, 128, -500, -1, midnight + 560, act(1, 0, OverrideHigh, 128, 127, 60)},
			{midnight + 700, 116, 0, 0, never, nil},
		}},
		{"held", held, false, []capRow{{0, 90, 900, 0, never, nil}, {100, 140, -900, 0, never, nil}}},
		{"before 1970", voltage, false, []capRow{{-1e8, 117, 0, +1, -1e8 + 60, nil}}},
		{"no voltage is no request", voltage, false, []capRow{{0, math.NaN(), 0, 0, never, nil}}},
		{"an edge met exactly is inside", voltage, false, []capRow{
			{0, 118 - 0.9e-7, 0, 0, never, nil}, {1, 118 - 1.1e-7, 0, +1, 61, nil},
		}},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) { runCapacitor(t, tt.c, CapacitorState{Closed: tt.closed}, tt.rows) })
	}
}

// What is dropped, and what an unsolved instant leaves: lockout, latch and count stay
// until start-up forgets them.
func TestCapacitorDrop(t *testing.T) {
	c := kvarSheet()
	c.DailyLimit = 5
	s := runCapacitor(t, c, CapacitorState{}, []capRow{
		{0, 122, 500, +1, 60, nil},
		{60, 122, 500, +1, 60, act(0, 1, ByControl, 500, 400, 60)},
		{70, 128, 0, -1, 130, nil},
		{130, 128, 0, -1, 130, act(1, 0, OverrideHigh, 128, 127, 60)},
		{140, 126, 0, 0, never, nil}, // latched
		{150, 126, 0, 0, never, nil},
	})
	s.Ask, s.Since, s.Reason, s.Measured = +1, 150*Second, ByControl, 500
	d := c.Drop(s)
	if d.Ask != 0 || c.Due(d) != Never || d.Latch != OverrideHigh || !d.Locked || d.Counted != 1 {
		t.Errorf("dropped: %+v", d)
	}
	if got, want := c.Forget(s), (CapacitorState{}); got != want {
		t.Errorf("forgotten: %+v, want %+v", got, want)
	}
	if again, a := c.Act(d, 500*Second); again != d || a.From != 0 || a.To != 0 {
		t.Errorf("an action nobody asked for: %+v, %+v", again, a)
	}
	// What is over leaves nothing behind.
	c.DailyLimit = 0
	d.Latch, d.From, d.Switch, d.Counted = None, 0, 0, 0
	if got := c.Observe(d, CapacitorReading{V120: 122}, 430*Second); got != (CapacitorState{}) {
		t.Errorf("after the lockout: %+v, want nothing", got)
	}
}

// Power factor, lagging positive: closes lagging beyond 0.9 (25.84°), opens leading
// beyond 0.98 (11.48°). By hand: 100 kW with 60 kvar is 30.96°, 0.857 lagging; with
// 48 kvar 25.64°; with −20 kvar 11.31° leading; with −21 kvar 11.86°, 0.979 leading.
func TestPowerFactorControl(t *testing.T) {
	c := CapacitorControl{Kind: CapacitorPowerFactor, On: 0.9, Off: -0.98, OverrideOn: math.NaN(), OverrideOff: math.NaN(),
		Delay: 60 * Second, Rating: 400}
	edge := 100 * math.Tan(math.Acos(0.9))
	for _, tt := range []struct {
		name     string
		closed   bool
		p, q, i  float64
		want     int8
		measured float64
	}{
		{"lagging beyond", false, 100, 60, 100, +1, 0.8575},
		{"inside", false, 100, 48, 100, 0, 0},
		{"inside, closed", true, 100, -20, 100, 0, 0},
		{"leading beyond", true, 100, -21, 100, -1, -0.9787},
		{"lagging, closed already", true, 100, 60, 100, 0, 0},
		{"leading, open already", false, 100, -90, 100, 0, 0},
		{"on the edge", false, 100, edge, 100, 0, 0},
		{"just beyond the edge", false, 100, edge * (1 + 1e-5), 100, +1, 0.9},
		{"the direction of the real power does not matter", false, -100, 60, 100, +1, 0.8575},
		{"nor for leading", true, -100, -21, 100, -1, -0.9787},
		{"below 5 % of the rating", false, 100, 60, 19.9, 0, 0},
		{"at 5 % of the rating", false, 100, 60, 20, +1, 0.8575},
		{"nothing flows", false, 0, 0, 100, 0, 0},
		{"only reactive", false, 0, 10, 100, +1, 0},
	} {
		r := CapacitorReading{V120: 120, P: tt.p, Q: tt.q, Quantity: tt.i}
		s := c.Observe(CapacitorState{Closed: tt.closed}, r, 0)
		if s.Ask != tt.want || math.Abs(s.Measured-tt.measured) > 1e-4 {
			t.Errorf("%s: asks %d at %v, want %d at %v", tt.name, s.Ask, s.Measured, tt.want, tt.measured)
		}
	}
	c.Rating = math.NaN()
	if s := c.Observe(CapacitorState{}, CapacitorReading{P: 100, Q: 60, Quantity: 0.1}, 0); s.Ask != 1 {
		t.Error("an unknown rating has no least load")
	}
	// 0.95 leading closes and 0.9 lagging opens: nonsense for a capacitor, but the order decides.
	c.On, c.Off = -0.95, 0.9
	if s := c.Observe(CapacitorState{Closed: true}, CapacitorReading{P: 100, Q: 60}, 0); s.Ask != -1 {
		t.Error("with on below off the high side opens")
	}
}

func TestCapacitorEdge(t *testing.T) {
	kvar := kvarSheet()
	zero := kvarSheet()
	zero.Off = 0
	voltage := CapacitorControl{Kind: CapacitorVoltage, On: 118, Off: 126, OverrideOn: 110, OverrideOff: 130}
	pf := CapacitorControl{Kind: CapacitorPowerFactor, On: 0.9, Off: 1, OverrideOn: math.NaN(), OverrideOff: math.NaN(), Rating: 400}
	q9 := 100 * math.Tan(math.Acos(0.9)*(1+0.9e-5))
	q11 := 100 * math.Tan(math.Acos(0.9)*(1+1.1e-5))
	for _, tt := range []struct {
		name string
		c    CapacitorControl
		s    CapacitorState
		r    CapacitorReading
		want bool
	}{
		{"voltage on", voltage, CapacitorState{}, CapacitorReading{V120: 118 + 0.9e-5}, true},
		{"voltage off", voltage, CapacitorState{}, CapacitorReading{V120: 126 - 0.9e-5}, true},
		{"voltage, farther", voltage, CapacitorState{}, CapacitorReading{V120: 126 - 1.1e-5}, false},
		{"voltage has no override", voltage, CapacitorState{}, CapacitorReading{V120: 130}, false},
		{"kvar on", kvar, CapacitorState{}, CapacitorReading{V120: 120, Quantity: 400 + 0.0039}, true},
		{"kvar, farther", kvar, CapacitorState{}, CapacitorReading{V120: 120, Quantity: 400 + 0.0041}, false},
		{"kvar off at zero is held against the span", zero, CapacitorState{}, CapacitorReading{V120: 120, Quantity: 0.0039}, true},
		{"override on", kvar, CapacitorState{}, CapacitorReading{V120: 117 + 0.9e-5}, true},
		{"override off", kvar, CapacitorState{}, CapacitorReading{V120: 127 + 0.9e-5}, true},
		{"a deadband without its latch", kvar, CapacitorState{}, CapacitorReading{V120: 119}, false},
		{"a deadband with its latch", kvar, CapacitorState{Latch: OverrideLow}, CapacitorReading{V120: 119}, true},
		{"the upper deadband", kvar, CapacitorState{Latch: OverrideHigh}, CapacitorReading{V120: 125}, true},
		{"power factor", pf, CapacitorState{}, CapacitorReading{P: 100, Q: q9, Quantity: 100}, true},
		{"power factor, farther", pf, CapacitorState{}, CapacitorReading{P: 100, Q: q11, Quantity: 100}, false},
		{"unity power factor", pf, CapacitorState{}, CapacitorReading{P: 100, Q: 1e-6, Quantity: 100}, true},
		{"least load", pf, CapacitorState{}, CapacitorReading{P: 100, Q: 20, Quantity: 20}, true},
		{"temperature", CapacitorControl{Kind: CapacitorTemperature, On: 30, Off: 20, OverrideOn: 117}, CapacitorState{}, CapacitorReading{V120: 120, Quantity: 30}, false},
		{"temperature's override", CapacitorControl{Kind: CapacitorTemperature, On: 30, Off: 20, OverrideOn: 117}, CapacitorState{}, CapacitorReading{V120: 117}, true},
		{"held", CapacitorControl{On: 118}, CapacitorState{}, CapacitorReading{V120: 118}, false},
	} {
		if got := tt.c.Edge(tt.s, tt.r); got != tt.want {
			t.Errorf("%s: near an edge %v, want %v", tt.name, got, tt.want)
		}
	}
}
