package devices

import (
	"math"
	"testing"
)

// never stands for Never in tables of seconds.
var never = math.Inf(1)

// at converts a table's seconds to an instant.
func at(s float64) Time {
	if math.IsInf(s, 1) {
		return Never
	}
	return Time(math.Round(s * 1e9))
}

// sheet is the settings sheet of most timelines: 120 V ± 1 V, 30 s, 5 s, a type A
// unit of ±10 % in 32 steps (IEEE C57.15).
func sheet() TapChanger {
	return TapChanger{
		Set: 120, Bandwidth: 2, Delay: 30 * Second, TapTime: 5 * Second,
		LimitHigh: math.NaN(), LimitLow: math.NaN(), LimitMargin: 1,
		Highest: 16, Lowest: -16, PT: 60, CT: 200, Range: 0.10, Steps: 16,
	}
}

// tapRow is one line of a pencil timeline: what is seen at a time, what is asked
// then and when it is due; act takes the action, which must be due at that time.
type tapRow struct {
	t            float64 // s
	local, relay float64 // V
	ask          int8
	due          float64 // s
	act          *Action
}

func runTap(t *testing.T, c TapChanger, s TapState, rows []tapRow) TapState {
	t.Helper()
	for i, r := range rows {
		s = c.Observe(s, TapReading{Local: r.local, Relay: r.relay}, at(r.t))
		if s.Ask != r.ask || c.Due(s) != at(r.due) || c.Standing(s) != (r.ask != 0) {
			t.Fatalf("row %d (%v s, local %v V, relay %v V): asks %d due %v s, want %d due %v s", i, r.t, r.local, r.relay,
				s.Ask, float64(c.Due(s))/1e9, r.ask, r.due)
		}
		if r.act == nil {
			continue
		}
		if c.Due(s) != at(r.t) {
			t.Fatalf("row %d: the action is due at %v s, not at %v s", i, float64(c.Due(s))/1e9, r.t)
		}
		var a Action
		if s, a = c.Act(s, at(r.t)); a != *r.act {
			t.Fatalf("row %d (%v s): action %+v, want %+v", i, r.t, a, *r.act)
		}
	}
	return s
}

func act(from, to int, why Reason, measured, set, waited float64) *Action {
	return &Action{From: from, To: to, Reason: why, Measured: measured, Set: set, Waited: waited}
}

// Every due time and action here is worked by hand from the settings beside it.
func TestTapTimelines(t *testing.T) {
	integrate := sheet()
	integrate.Integrate = true
	limited := sheet()
	limited.LimitHigh, limited.LimitLow = 126, 114
	stops := sheet()
	stops.Highest, stops.Lowest = 2, -1
	held := sheet()
	held.Held = true
	everyStep := sheet()
	everyStep.TapTime = everyStep.Delay
	quick := sheet()
	quick.Delay, quick.TapTime = 0, 1
	quickLimited := limited
	quickLimited.LimitHigh, quickLimited.LimitLow, quickLimited.LimitMargin = 120.2, 119.8, 0
	waiting := quickLimited
	waiting.LimitHigh, waiting.Delay = 121.5, 2*Second

	tests := []struct {
		name string
		c    TapChanger
		tap  int
		rows []tapRow
	}{
		{"the delay starts when the request appears, and again when it comes back", sheet(), 0, []tapRow{
			{0, 120, 120, 0, never, nil},
			{10, 118.9, 118.9, +1, 40, nil},
			{20, 118.5, 118.5, +1, 40, nil}, // deeper: the clock goes on
			{25, 119.5, 119.5, 0, never, nil},
			{30, 118.9, 118.9, +1, 60, nil},
			{60, 118.9, 118.9, +1, 60, act(0, 1, BandLow, 118.9, 119, 30)},
			{60, 119.65, 119.65, 0, never, nil},
		}},
		{"a sequence goes on every tap time and ends in the band", sheet(), 0, []tapRow{
			{0, 117, 117, +1, 30, nil},
			{30, 117, 117, +1, 30, act(0, 1, BandLow, 117, 119, 30)},
			{30, 117.75, 117.75, +1, 35, nil},
			{35, 117.75, 117.75, +1, 35, act(1, 2, BandLow, 117.75, 119, 5)},
			{35, 118.5, 118.5, +1, 40, nil},
			{38, 118.2, 118.2, +1, 40, nil}, // a new step in between does not move it
			{40, 118.2, 118.2, +1, 40, act(2, 3, BandLow, 118.2, 119, 5)},
			{40, 119, 119, 0, never, nil},
			{41, 118.9, 118.9, +1, 71, nil}, // ended: the delay again
		}},
		{"a change of direction waits the delay", sheet(), 0, []tapRow{
			{0, 118, 118, +1, 30, nil},
			{12, 122, 122, -1, 42, nil},
			{42, 122, 122, -1, 42, act(0, -1, BandHigh, 122, 121, 30)},
			{42, 118, 118, +1, 72, nil}, // also out of a sequence
			{72, 118, 118, +1, 72, act(-1, 0, BandLow, 118, 119, 30)},
		}},
		{"a delay before every step is a tap time equal to the delay", everyStep, 0, []tapRow{
			{0, 118, 118, +1, 30, nil},
			{30, 118, 118, +1, 30, act(0, 1, BandLow, 118, 119, 30)},
			{30, 118.7, 118.7, +1, 60, nil},
			{60, 118.7, 118.7, +1, 60, act(1, 2, BandLow, 118.7, 119, 30)},
		}},
		{"an integrating timer runs down at the rate it ran up", integrate, 0, []tapRow{
			{0, 118, 118, +1, 30, nil},
			{20, 120, 120, 0, never, nil}, // it shows 20 s
			{25, 118, 118, +1, 40, nil},   // 15 s: 15 to go
			{31, 120, 120, 0, never, nil}, // 21 s
			{32, 120.5, 120.5, 0, never, nil},
			{34, 118, 118, +1, 46, nil}, // 18 s: 12 to go
			{46, 118, 118, +1, 46, act(0, 1, BandLow, 118, 119, 30)},
			{46, 118.7, 118.7, +1, 51, nil},
			{51, 118.7, 118.7, +1, 51, act(1, 2, BandLow, 118.7, 119, 5)},
			{51, 119.4, 119.4, 0, never, nil},
			{52, 118, 118, +1, 82, nil}, // a sequence that ended left zero
		}},
		{"the floor of an integrating timer is zero", integrate, 0, []tapRow{
			{0, 118, 118, +1, 30, nil},
			{20, 120, 120, 0, never, nil},
			{50, 118, 118, +1, 80, nil},
		}},
		{"an integrating timer starts from zero when the direction changes", integrate, 0, []tapRow{
			{0, 118, 118, +1, 30, nil},
			{20, 122, 122, -1, 50, nil},
			{24, 120, 120, 0, never, nil},
			{25, 118, 118, +1, 55, nil}, // the 3 s that are left count for lowering
			{30, 122, 122, -1, 60, nil},
		}},
		{"an integrating timer that is full waits for the next request", integrate, 0, []tapRow{
			{0, 118, 118, +1, 30, nil},
			{30, 120, 120, 0, never, nil}, // the step ended at the very instant
			{31, 118, 118, +1, 32, nil},   // 29 s
			{32, 118, 118, +1, 32, act(0, 1, BandLow, 118, 119, 30)},
		}},
		{"a raise that would pass the limit is not asked for", limited, 0, []tapRow{
			{0, 125.3, 118, 0, never, nil},  // 125.3·1.00625 = 126.083
			{1, 125.2, 118, +1, 31, nil},    // 125.983
			{20, 125.3, 118, 0, never, nil}, // and the clock is dropped
			{21, 125.2, 118, +1, 51, nil},
			{51, 125.2, 118, +1, 51, act(0, 1, BandLow, 118, 119, 30)},
			{51, 125.98, 118.7, 0, never, nil},
			{60, 126.9, 118.7, 0, never, nil}, // beyond the limit, within the margin
			{61, 127, 118.7, 0, never, nil},   // on the edge of the margin
		}},
		{"beyond the margin the way back starts at once and ends within the limit", limited, 4, []tapRow{
			{0, 126.8, 120, 0, never, nil},
			{7, 127.8, 120.9, -1, 7, act(4, 3, LimitHigh, 127.8, 127, 0)},
			{7, 127.02, 120.2, -1, 12, nil},
			{12, 127.02, 120.2, -1, 12, act(3, 2, LimitHigh, 127.02, 127, 5)},
			{12, 126.25, 119.5, -1, 17, nil}, // within the margin: it goes on
			{17, 126.25, 119.5, -1, 17, act(2, 1, LimitHigh, 126.25, 126, 5)},
			{17, 125.5, 118.7, 0, never, nil}, // low in the band, but a raise would pass the limit
		}},
		{"the way back from the lower limit", limited, -4, []tapRow{
			{0, 113, 122, 0, never, nil}, // 113 is on the edge of the margin; a lower would pass the limit
			{3, 112.5, 122, +1, 3, act(-4, -3, LimitLow, 112.5, 113, 0)},
			{3, 113.2, 122.7, +1, 8, nil},
			{8, 113.2, 122.7, +1, 8, act(-3, -2, LimitLow, 113.2, 114, 5)},
			{8, 114, 123.5, 0, never, nil},
		}},
		{"after the way back the band goes on in the same sequence", limited, 0, []tapRow{
			{0, 127.2, 127.2, -1, 0, act(0, -1, LimitHigh, 127.2, 127, 0)},
			{0, 126.4, 126.4, -1, 5, nil},
			{5, 126.4, 126.4, -1, 5, act(-1, -2, LimitHigh, 126.4, 126, 5)},
			{5, 125.6, 125.6, -1, 10, nil},
			{10, 125.6, 125.6, -1, 10, act(-2, -3, BandHigh, 125.6, 121, 5)},
		}},
		{"a limit breaks into a waiting request", limited, 0, []tapRow{
			{0, 124, 122, -1, 30, nil},
			{10, 127.5, 125.5, -1, 10, act(0, -1, LimitHigh, 127.5, 127, 10)},
			{10, 126.7, 124.7, -1, 15, nil},
		}},
		{"a limit turns a sequence around at once", limited, 0, []tapRow{
			{0, 120, 118, +1, 30, nil},
			{30, 120, 118, +1, 30, act(0, 1, BandLow, 118, 119, 30)},
			{33, 128, 118.5, -1, 33, act(1, 0, LimitHigh, 128, 127, 0)},
		}},
		{"two forced steps never share an instant", quickLimited, 0, []tapRow{
			{0, 121, 120, -1, 0, act(0, -1, LimitHigh, 121, 120.2, 0)},
			{0, 119, 120, +1, 5, nil}, // another device overdid it meanwhile
			{5, 119, 120, +1, 5, act(-1, 0, LimitLow, 119, 119.8, 5)},
			{5.5, 121, 120, -1, 5.5, nil}, // at a later instant: at once
		}},
		{"a forced step that waits, and is no longer forced, has its delay", waiting, 0, []tapRow{
			{0, 122, 120, -1, 0, act(0, -1, LimitHigh, 122, 121.5, 0)},
			{0, 119, 120, +1, 5, nil},
			{1, 119.9, 118, +1, 2, nil}, // the band asks since 0 s
			{1.5, 119, 118, +1, 1.5, nil},
			{3, 119.9, 118, +1, 3, nil}, // and is overdue
		}},
		{"nothing is asked at a stop", stops, 1, []tapRow{
			{0, 118, 118, +1, 30, nil},
			{30, 118, 118, +1, 30, act(1, 2, BandLow, 118, 119, 30)},
			{30, 118.7, 118.7, 0, never, nil},
			{40, 122, 122, -1, 70, nil},
			{70, 124, 124, -1, 70, act(2, 1, BandHigh, 124, 121, 30)},
			{75, 124, 124, -1, 75, act(1, 0, BandHigh, 124, 121, 5)},
			{80, 124, 124, -1, 80, act(0, -1, BandHigh, 124, 121, 5)},
			{80, 124, 124, 0, never, nil},
		}},
		{"a position beyond a stop finds back", stops, 5, []tapRow{
			{0, 118, 118, 0, never, nil},
			{1, 122, 122, -1, 31, nil},
			{31, 122, 122, -1, 31, act(5, 4, BandHigh, 122, 121, 30)},
			{31, 118, 118, 0, never, nil},
		}},
		{"held", held, 0, []tapRow{{0, 90, 90, 0, never, nil}, {100, 140, 140, 0, never, nil}}},
		{"no delay and no tap time are 1 s each", quick, 0, []tapRow{
			{0, 117, 117, +1, 1, nil},
			{1, 117, 117, +1, 1, act(0, 1, BandLow, 117, 119, 1)},
			{1, 117.7, 117.7, +1, 2, nil},
		}},
		{"an edge met exactly is inside", sheet(), 0, []tapRow{
			{0, 119, 119, 0, never, nil},
			{1, 121, 121, 0, never, nil},
			{2, 119 - 0.9e-7, 119 - 0.9e-7, 0, never, nil},
			{3, 119 - 1.1e-7, 119 - 1.1e-7, +1, 33, nil},
			{4, 121 + 0.9e-7, 121 + 0.9e-7, 0, never, nil},
			{5, 121 + 1.1e-7, 121 + 1.1e-7, -1, 35, nil},
		}},
		{"a step that would meet the limit exactly is taken", limited, 0, []tapRow{
			{0, 126 / 1.00625, 118, +1, 30, nil},
			{1, 126/1.00625 + 1e-6, 118, 0, never, nil},
			{2, 114 / 0.99375, 122, -1, 32, nil},
			{3, 114/0.99375 - 1e-6, 122, 0, never, nil},
		}},
		{"no voltage is no request", limited, 0, []tapRow{{0, math.NaN(), math.NaN(), 0, never, nil}}},
		{"before 1970", limited, 0, []tapRow{
			{-1e8, 128, 120, -1, -1e8, act(0, -1, LimitHigh, 128, 127, 0)},
			{-1e8, 125, 118, +1, -1e8 + 30, nil},
		}},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) { runTap(t, tt.c, TapState{Position: tt.tap}, tt.rows) })
	}
}

// What is dropped and what stays.
func TestTapDrop(t *testing.T) {
	c := sheet()
	c.Integrate = true
	s := runTap(t, c, TapState{Position: 3}, []tapRow{{0, 118, 118, +1, 30, nil}})
	if got, want := c.Drop(s), (TapState{Position: 3}); got != want {
		t.Errorf("dropped: %+v, want %+v", got, want)
	}
	s = c.Observe(s, TapReading{120, 120}, 20*Second)
	if got, want := c.Forget(s), (TapState{Position: 3}); got != want || s == want {
		t.Errorf("forgotten: %+v of %+v, want %+v", got, s, want)
	}
	// A clock that has run down leaves nothing behind.
	s = c.Observe(s, TapReading{120, 120}, 40*Second)
	if want := (TapState{Position: 3}); s != want {
		t.Errorf("run down: %+v, want %+v", s, want)
	}
	if again, a := c.Act(s, 50*Second); again != s || a.From != a.To {
		t.Errorf("an action nobody asked for: %+v, %+v", again, a)
	}
}

// A reading within 1e-5 V of any threshold it is compared with is near an edge.
func TestTapEdge(t *testing.T) {
	c := sheet()
	c.LimitHigh, c.LimitLow = 126, 114
	const in, out = 0.9e-5, 1.1e-5
	tests := []struct {
		name         string
		local, relay float64
	}{
		{"band low", 120, 119}, {"band high", 120, 121},
		{"limit high", 126, 120}, {"limit high and margin", 127, 120},
		{"limit low", 114, 120}, {"limit low and margin", 113, 120},
		{"raise to the limit", 126 / 1.00625, 120}, {"lower to the limit", 114 / 0.99375, 120},
	}
	for _, tt := range tests {
		for _, side := range []float64{-1, 1} {
			var dl, dr float64 = 0, 1
			if tt.relay == 120 {
				dl, dr = 1, 0
			}
			inside := TapReading{tt.local + side*dl*in, tt.relay + side*dr*in}
			outside := TapReading{tt.local + side*dl*out, tt.relay + side*dr*out}
			if !c.Edge(TapState{}, inside) || c.Edge(TapState{}, outside) {
				t.Errorf("%s, side %v: near %v at %+v, %v at %+v, want true and false", tt.name, side,
					c.Edge(TapState{}, inside), inside, c.Edge(TapState{}, outside), outside)
			}
		}
	}
	if (&TapChanger{Held: true, Set: 120}).Edge(TapState{}, TapReading{120, 120}) {
		t.Error("a held control compares nothing")
	}
	if c.Edge(TapState{Position: 16}, TapReading{126 / (1 + 0.1/16*17) * 1.1, 120}) {
		t.Error("at the stop no raise is compared with the limit")
	}
}

func TestTapBandAndStops(t *testing.T) {
	c := sheet()
	c.Held, c.Highest, c.Lowest = true, 8, -4
	for _, tt := range []struct {
		relay float64
		want  bool
	}{{119, false}, {121, false}, {118.999, true}, {121.001, true}, {120, false}} {
		if got := c.OutOfBand(TapReading{120, tt.relay}); got != tt.want {
			t.Errorf("%v V: out of band %v, want %v", tt.relay, got, tt.want)
		}
	}
	for tap, want := range map[int]bool{-5: true, -4: true, -3: false, 7: false, 8: true, 9: true} {
		if got := c.AtStop(TapState{Position: tap}); got != want {
			t.Errorf("tap %d: at a stop %v, want %v", tap, got, want)
		}
	}
}
