package devices

import (
	"math"
	"math/cmplx"
	"testing"
)

// reversing is the control of most timelines: forward 120 V ± 1 V, 30 s, backward
// 122 V ± 1 V, 20 s, 5 s between steps; 2 % of 200 A, so that a current of more than
// 4 A either way is flow.
func reversing(m ReverseMode) ReversePower {
	c := ReversePower{Mode: m, Threshold: 4, Forward: sheet(), Backward: sheet()}
	c.Backward.Set, c.Backward.Delay = 122, 20*Second
	return c
}

// bothRow is one line of a pencil timeline: what is seen at a time, what is asked then
// (in taps of the unit) and when it is due; act takes the action, due at that time.
// What each side sees is its voltage without compensation.
type bothRow struct {
	t       float64 // s
	current float64 // A
	load    float64 // V, by the forward sheet
	back    float64 // V, by the reverse sheet
	ask     int8
	due     float64 // s
	act     *Action
}

func runBoth(t *testing.T, c ReversePower, s ReverseState, rows []bothRow) ReverseState {
	t.Helper()
	for i, r := range rows {
		s = c.Observe(s, ReverseReading{TapReading{r.load, r.load}, TapReading{r.back, r.back}, r.current}, at(r.t))
		if s.Ask != r.ask || c.Due(s) != at(r.due) || c.Standing(s) != (r.ask != 0) {
			t.Fatalf("row %d (%v s, %v A, %v V, %v V): asks %d due %v s, want %d due %v s", i, r.t, r.current, r.load, r.back,
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

// Every due time and action here is worked by hand from the settings beside it: the
// forward band is 119 to 121 V, the reverse one 121 to 123 V.
func TestReverseTimelines(t *testing.T) {
	limited := func(m ReverseMode) ReversePower {
		c := reversing(m)
		c.Forward.LimitHigh, c.Forward.LimitLow = 126, 114
		c.Backward.LimitHigh, c.Backward.LimitLow = 126, 114
		return c
	}
	integrating := func(m ReverseMode) ReversePower {
		c := reversing(m)
		c.Forward.Integrate, c.Backward.Integrate = true, true
		return c
	}
	held := reversing(ReverseNeutral)
	held.Forward.Held, held.Backward.Held = true, true
	stops := reversing(ReverseFollow)
	stops.Forward.Highest, stops.Forward.Lowest = 2, -1
	stops.Backward.Highest, stops.Backward.Lowest = 2, -1
	above0 := reversing(ReverseNeutral)
	above0.Forward.Lowest = 1
	lazy := reversing(ReverseNeutral)
	lazy.Forward.TapTime = 20 * Second

	tests := []struct {
		name string
		c    ReversePower
		tap  int
		rows []bothRow
	}{
		{"none: the load side, whatever flows", reversing(ReverseNone), 0, []bothRow{
			{0, 50, 118, 0, +1, 30, nil},
			{10, -50, 118, 0, +1, 30, nil},
			{20, 0, 118, 0, +1, 30, nil},
			{30, -50, 118, 0, +1, 30, act(0, 1, BandLow, 118, 119, 30)},
			{30, -50, 118.7, 0, +1, 35, nil},
		}},
		{"forward only: reverse flow drops the clock, the dead zone does not", reversing(ForwardOnly), 0, []bothRow{
			{0, 50, 118, 0, +1, 30, nil},
			{10, 0, 118, 0, +1, 30, nil},
			{20, -4, 118, 0, +1, 30, nil}, // the edge is not beyond it
			{25, -5, 118, 0, 0, never, nil},
			{28, -3, 118, 0, +1, 58, nil},
			{58, -3, 118, 0, +1, 58, act(0, 1, BandLow, 118, 119, 30)},
			{58, -6, 118.7, 0, 0, never, nil}, // in the middle of a sequence
			{61, 6, 118.7, 0, +1, 91, nil},
		}},
		{"forward only: an integrating clock is dropped too", integrating(ForwardOnly), 0, []bothRow{
			{0, 50, 118, 0, +1, 30, nil},
			{20, -5, 118, 0, 0, never, nil},
			{21, 5, 118, 0, +1, 51, nil},
		}},
		{"forward only: held back, a limit does not move it", limited(ForwardOnly), 0, []bothRow{
			{0, -5, 128, 0, 0, never, nil},
			{9, -4, 128, 0, -1, 9, act(0, -1, LimitHigh, 128, 127, 0)},
			{9, -5, 127.2, 0, 0, never, nil},
			{9, -4, 127.2, 0, -1, 14, nil}, // not twice at one instant
		}},
		// Reversed action: the source side, at 120 V, wants 121 V and more, and a lower of
		// the tap raises it.
		{"reverse only: the source side until forward flow", reversing(ReverseOnly), 0, []bothRow{
			{0, -50, 110, 120, -1, 20, nil},
			{10, 0, 110, 120, -1, 20, nil},
			{15, 4, 110, 120, -1, 20, nil},
			{20, 4, 110, 120, -1, 20, act(0, -1, BandLow, 120, 121, 20)},
			{20, 4, 110, 120.7, -1, 25, nil},
			{25, 4, 110, 120.7, -1, 25, act(-1, -2, BandLow, 120.7, 121, 5)},
			{25, 4, 110, 121.4, 0, never, nil},
			{30, 4, 110, 123.4, +1, 50, nil},
			{40, 4.1, 110, 123.4, 0, never, nil},
			{45, 4, 110, 123.4, +1, 65, nil},
			{65, 4, 110, 123.4, +1, 65, act(-2, -1, BandHigh, 123.4, 123, 20)},
			{66, 100, 110, 123.4, 0, never, nil},
		}},
		{"idle: forward flow above the threshold and nothing else", reversing(ReverseIdle), 0, []bothRow{
			{0, 4, 118, 0, 0, never, nil},
			{10, 4.1, 118, 0, +1, 40, nil},
			{20, 3.9, 118, 0, 0, never, nil},
			{21, 5, 118, 0, +1, 51, nil},
			{51, 5, 118, 0, +1, 51, act(0, 1, BandLow, 118, 119, 30)},
			{51, -50, 118.7, 0, 0, never, nil},
			{56, 0, 118.7, 0, 0, never, nil},
		}},
		// Through the dead zone and straight across it: a side that changes is a new
		// request, even where the tap would move the same way.
		{"follow: one side, the dead zone, the other side", reversing(ReverseFollow), 0, []bothRow{
			{0, 50, 118, 123.5, +1, 30, nil},
			{10, 4, 118, 123.5, 0, never, nil},
			{20, -4, 118, 123.5, 0, never, nil},
			{25, -5, 118, 123.5, +1, 45, nil},
			{45, -5, 118, 123.5, +1, 45, act(0, 1, BandHigh, 123.5, 123, 20)},
			{45, -5, 118, 122.8, 0, never, nil},
			{50, -5, 118, 123.5, +1, 70, nil},
			{60, 5, 118, 123.5, +1, 90, nil},
			{70, -5, 118, 123.5, +1, 90, nil},
			{90, -5, 118, 123.5, +1, 90, act(1, 2, BandHigh, 123.5, 123, 20)},
			{92, 5, 118, 123.5, +1, 122, nil}, // nor does a sequence go on at the other side
		}},
		{"follow: the stops are those of the unit", stops, 1, []bothRow{
			{0, -50, 120, 124, +1, 20, nil},
			{20, -50, 120, 124, +1, 20, act(1, 2, BandHigh, 124, 123, 20)},
			{20, -50, 120, 123.5, 0, never, nil}, // at 2
			{30, -50, 120, 120, -1, 50, nil},
			{50, -50, 120, 120, -1, 50, act(2, 1, BandLow, 120, 121, 20)},
			{55, -50, 120, 120, -1, 55, act(1, 0, BandLow, 120, 121, 5)},
			{60, -50, 120, 120, -1, 60, act(0, -1, BandLow, 120, 121, 5)},
			{60, -50, 120, 120, 0, never, nil}, // at −1
		}},
		// A raise from tap t to t+1 takes the source side from V to V·ratio(t)/ratio(t+1),
		// a lower from 0 to V/0.99375 = 1.0062893·V: 126 V is reached from 125.2125 V.
		{"follow: the limits look at the source side", limited(ReverseFollow), 0, []bothRow{
			{0, -50, 130, 127.5, +1, 0, act(0, 1, LimitHigh, 127.5, 127, 0)},
			{0, -50, 130, 126.7, +1, 5, nil}, // back to the limit itself, 5 s later
			{5, -50, 130, 126.7, +1, 5, act(1, 2, LimitHigh, 126.7, 126, 5)},
			{5, -50, 130, 125.9, +1, 10, nil}, // the band goes on with the sequence
			{6, -50, 130, 112.9, -1, 6, act(2, 1, LimitLow, 112.9, 113, 0)},
		}},
		{"follow: a lower that would take the source side beyond its limit", func() ReversePower {
			c := limited(ReverseFollow)
			c.Backward.Set = 127
			return c
		}(), 0, []bothRow{
			{0, -50, 120, 126 * 0.99375, -1, 20, nil},
			{1, -50, 120, 126*0.99375 + 1e-6, 0, never, nil},
		}},
		// 10 s of reverse flow without a break, then a step every 5 s; the threshold
		// crossed is a current.
		{"neutral: ten seconds, and there until forward again", reversing(ReverseNeutral), 3, []bothRow{
			{0, 50, 118, 0, +1, 30, nil},
			{5, -5, 118, 0, -1, 15, nil},
			{14, -4, 118, 0, 0, never, nil}, // a break: the dead zone holds
			{15, -5, 118, 0, -1, 25, nil},
			{25, -6, 118, 0, -1, 25, act(3, 2, Reverse, -6, -4, 10)},
			{25, -6, 117.3, 0, -1, 30, nil},
			{30, -7, 117.3, 0, -1, 30, act(2, 1, Reverse, -7, -4, 5)},
			{30, -1, 116.6, 0, -1, 35, nil}, // once begun, it goes on through the dead zone
			{35, 3, 116.6, 0, -1, 35, act(1, 0, Reverse, 3, -4, 5)},
			{35, 3, 115.9, 0, 0, never, nil},
			{60, -50, 115.9, 0, 0, never, nil},
			{90, 0, 115.9, 0, 0, never, nil},
			{99, 4.1, 115.9, 0, +1, 129, nil},
			{129, 4.1, 115.9, 0, +1, 129, act(0, 1, BandLow, 115.9, 119, 30)},
		}},
		{"neutral: forward flow ends the run, and the next one waits again", reversing(ReverseNeutral), -2, []bothRow{
			{0, -5, 120, 0, +1, 10, nil},
			{10, -5, 120, 0, +1, 10, act(-2, -1, Reverse, -5, -4, 10)},
			{12, 5, 120, 0, 0, never, nil},
			{13, 0, 120, 0, 0, never, nil},
			{14, -5, 120, 0, +1, 24, nil},
			{24, -5, 120, 0, +1, 24, act(-1, 0, Reverse, -5, -4, 10)},
			{24, -5, 120, 0, 0, never, nil},
		}},
		{"neutral: at exactly ten seconds the flow has changed", reversing(ReverseNeutral), 1, []bothRow{
			{0, -5, 120, 0, -1, 10, nil},
			{10, 0, 120, 0, 0, never, nil},
			{20, 0, 120, 0, 0, never, nil},
		}},
		{"neutral: the tap time may be longer than the ten seconds", lazy, 2, []bothRow{
			{0, -5, 120, 0, -1, 10, nil},
			{10, -5, 120, 0, -1, 10, act(2, 1, Reverse, -5, -4, 10)},
			{25, -5, 120, 0, -1, 30, nil},
			{30, -5, 120, 0, -1, 30, act(1, 0, Reverse, -5, -4, 20)},
		}},
		// From tap −1 a raise makes 125.5·1/0.99375 = 126.29 V: not asked for.
		{"neutral: not through a limit, and at once when it is gone", limited(ReverseNeutral), -1, []bothRow{
			{0, -5, 125.5, 0, 0, never, nil},
			{25, -5, 125, 0, +1, 25, nil},
			{25, -5, 125.5, 0, 0, never, nil},
			{30, 0, 125, 0, +1, 30, act(-1, 0, Reverse, 0, -4, 30)}, // 10 s had passed
		}},
		{"neutral: as near as the stops let it", above0, 3, []bothRow{
			{0, -5, 120, 0, -1, 10, nil},
			{10, -5, 120, 0, -1, 10, act(3, 2, Reverse, -5, -4, 10)},
			{15, -5, 120, 0, -1, 15, act(2, 1, Reverse, -5, -4, 5)},
			{15, -5, 120, 0, 0, never, nil},
		}},
		{"neutral: held", held, 3, []bothRow{{0, -50, 100, 100, 0, never, nil}, {60, -50, 100, 100, 0, never, nil}}},
		// 120 V is inside the forward band and below the reverse one.
		{"stay: the reverse settings until forward flow", reversing(ReverseStay), 0, []bothRow{
			{0, 0, 120, 120, 0, never, nil}, // nothing has flowed yet
			{1, 50, 120, 120, 0, never, nil},
			{5, -4, 120, 120, 0, never, nil},
			{10, -5, 120, 120, +1, 30, nil},
			{20, 4, 120, 120, +1, 30, nil}, // through the dead zone
			{30, 4, 120, 120, +1, 30, act(0, 1, BandLow, 120, 121, 20)},
			{30, 4, 120.7, 120.7, +1, 35, nil},
			{33, 4.1, 120.7, 120.7, 0, never, nil},
			{34, 0, 120.7, 120.7, 0, never, nil},
		}},
		// The load side is low by both sheets: the request goes on, and is due by the
		// delay in use, 20 s backward and 30 s forward.
		{"stay: the clock of a request that stays goes on", reversing(ReverseStay), 0, []bothRow{
			{0, 50, 118, 118, +1, 30, nil},
			{10, -5, 118, 118, +1, 20, nil},
			{15, 5, 118, 118, +1, 30, nil},
			{25, -5, 118, 118, +1, 25, act(0, 1, BandLow, 118, 121, 25)},
			{25, 5, 118.7, 118.7, +1, 30, nil}, // the sequence too
			{30, 5, 118.7, 118.7, +1, 30, act(1, 2, BandLow, 118.7, 119, 5)},
		}},
		{"stay: an integrating clock runs on", integrating(ReverseStay), 0, []bothRow{
			{0, 50, 118, 118, +1, 30, nil},
			{15, 50, 120, 122, 0, never, nil},
			{20, -5, 120, 120, +1, 30, nil}, // 15 s less 5 s of 20 s
		}},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			runBoth(t, tt.c, ReverseState{TapState: TapState{Position: tt.tap}}, tt.rows)
		})
	}
}

// The edges of the dead zone belong to it, within 1e-7 of the threshold: each row is
// what reverse flow, its edge, zero, the other edge and forward flow make of a
// request. The load side is low by both sheets, the source side high.
func TestReverseThreshold(t *testing.T) {
	currents := [...]float64{-4 * (1 + 1.1e-7), -4 * (1 + 0.9e-7), -4, 0, 4, 4 * (1 + 0.9e-7), 4 * (1 + 1.1e-7)}
	const fwd, rev = 30, 20 // s: the delay tells which sheet is in use
	for _, tt := range []struct {
		mode ReverseMode
		due  [7]float64
	}{
		{ReverseNone, [7]float64{fwd, fwd, fwd, fwd, fwd, fwd, fwd}},
		{ForwardOnly, [7]float64{never, fwd, fwd, fwd, fwd, fwd, fwd}},
		{ReverseOnly, [7]float64{rev, rev, rev, rev, rev, rev, never}},
		{ReverseIdle, [7]float64{never, never, never, never, never, never, fwd}},
		{ReverseFollow, [7]float64{rev, never, never, never, never, never, fwd}},
		{ReverseNeutral, [7]float64{10, never, never, never, never, never, fwd}},
		{ReverseStay, [7]float64{rev, fwd, fwd, fwd, fwd, fwd, fwd}},
	} {
		c := reversing(tt.mode)
		for i, current := range currents {
			back := 118.0
			if tt.mode.Source() {
				back = 125
			}
			s := c.Observe(ReverseState{TapState: TapState{Position: -1}}, ReverseReading{TapReading{118, 118}, TapReading{back, back}, current}, 0)
			if c.Due(s) != at(tt.due[i]) {
				t.Errorf("%v at %.9g A: due %v s, want %v s", tt.mode, current, float64(c.Due(s))/1e9, tt.due[i])
			}
		}
	}
	// A threshold of zero has a tolerance of its own: 1e-7 of a thousandth of 200 A.
	c := reversing(ReverseIdle)
	c.Threshold = 0
	for current, want := range map[float64]Time{0: Never, 1e-8: Never, 3e-8: 30 * Second, -1: Never} {
		if s := c.Observe(ReverseState{}, ReverseReading{Forward: TapReading{118, 118}, Current: current}, 0); c.Due(s) != want {
			t.Errorf("%v A at a threshold of zero: due %v, want %v", current, c.Due(s), want)
		}
	}
}

// A reading is near an edge within 1e-5 of the current's threshold and of the voltages
// that the sheet in use looks at; no others count.
func TestReverseEdge(t *testing.T) {
	both := func(load, back, current float64) ReverseReading {
		return ReverseReading{TapReading{load, load}, TapReading{back, back}, current}
	}
	limited := reversing(ReverseNeutral)
	limited.Forward.LimitHigh, limited.Forward.LimitLow = 126, 114
	held := reversing(ReverseFollow)
	held.Forward.Held = true
	for _, tt := range []struct {
		name string
		c    ReversePower
		tap  int
		r    ReverseReading
		want bool
	}{
		{"the threshold", reversing(ReverseIdle), 0, both(100, 100, 4*(1+0.9e-5)), true},
		{"the other threshold", reversing(ReverseIdle), 0, both(100, 100, -4*(1-0.9e-5)), true},
		{"not so near", reversing(ReverseIdle), 0, both(100, 100, 4*(1+1.1e-5)), false},
		{"direction ignored", reversing(ReverseNone), 0, both(100, 100, 4), false},
		{"forward edge, forward flow", reversing(ReverseFollow), 0, both(119, 100, 5), true},
		{"forward edge, holding", reversing(ReverseFollow), 0, both(119, 100, 3), false},
		{"forward edge, reverse flow", reversing(ReverseFollow), 0, both(119, 100, -5), false},
		{"reverse edge, reverse flow", reversing(ReverseFollow), 0, both(100, 123, -5), true},
		{"reverse edge, forward flow", reversing(ReverseFollow), 0, both(100, 123, 5), false},
		{"a step to neutral that meets the limit", limited, -1, both(126*0.99375, 0, -5), true},
		{"a step to neutral that does not", limited, -1, both(125, 0, -5), false},
		{"at neutral", limited, 0, both(126*0.99375, 0, -5), false},
		{"held", held, 0, both(119, 121, 4), false},
	} {
		if got := tt.c.Edge(ReverseState{TapState: TapState{Position: tt.tap}}, tt.r); got != tt.want {
			t.Errorf("%s: near an edge %v, want %v", tt.name, got, tt.want)
		}
	}
	// Stay: the sheet in use in the dead zone is that of the last flow.
	c := reversing(ReverseStay)
	s := c.Observe(ReverseState{}, both(100, 110, -5), 0)
	if !c.Edge(s, both(100, 121, 0)) || c.Edge(s, both(119, 100, 0)) || !c.Edge(ReverseState{}, both(119, 100, 0)) {
		t.Error("stay looks at the edges of the sheet that is in use")
	}
}

// What is dropped where no solution was found, and what stays; start-up forgets all.
func TestReverseDrop(t *testing.T) {
	n := reversing(ReverseNeutral)
	s := runBoth(t, n, ReverseState{TapState: TapState{Position: 2}}, []bothRow{{0, -5, 120, 0, -1, 10, nil}})
	s = runBoth(t, n, n.Drop(s), []bothRow{{8, -5, 120, 0, -1, 18, nil}}) // the ten seconds again
	s = runBoth(t, n, s, []bothRow{{18, -5, 120, 0, -1, 18, act(2, 1, Reverse, -5, -4, 10)}, {18, 0, 120, 0, -1, 23, nil}})
	runBoth(t, n, n.Drop(s), []bothRow{{30, 0, 120, 0, -1, 30, nil}}) // it still belongs to neutral
	runBoth(t, n, n.Forget(s), []bothRow{{30, 0, 120, 0, 0, never, nil}})
	c := reversing(ReverseStay)
	s = runBoth(t, c, ReverseState{}, []bothRow{{0, -5, 120, 120, +1, 20, nil}})
	runBoth(t, c, c.Drop(s), []bothRow{{5, 0, 120, 120, +1, 25, nil}})
	runBoth(t, c, c.Forget(s), []bothRow{{5, 0, 120, 120, 0, never, nil}})
}

// The source side by the reverse sheet: V_relay = |V/PT − (R + jX)·a·I/CT| with the
// voltage there and the current that leaves towards it. 7,200 V, 100 A that leave on
// the source side, R 6 V and X 3 V at 200 A: |120 − (3 + j1.5)| = 117.0096 V.
// 100 A at 60° behind the voltage are 50 A of real current.
func TestReverseMeasure(t *testing.T) {
	for _, m := range []ReverseMode{ReverseFollow, ReverseOnly} {
		c := reversing(m)
		c.Backward.R, c.Backward.X = 6, 3
		r := c.Measure(7500, cmplx.Rect(100, 2*math.Pi/3), 7200, 100)
		if want := math.Hypot(117, 1.5); math.Abs(r.Backward.Relay-want) > 1e-9 || math.Abs(r.Backward.Local-120) > 1e-9 {
			t.Errorf("%v: the source side sees %+v, want %v V of 120 V", m, r.Backward, want)
		}
		if math.Abs(r.Current+50) > 1e-9 || r.Forward != (TapReading{125, 125}) {
			t.Errorf("%v: %v A and %+v, want −50 A and 125 V", m, r.Current, r.Forward)
		}
	}
	// Stay looks at the load side, with what leaves there: 100 A that flow back.
	c := reversing(ReverseStay)
	c.Backward.R, c.Backward.X = 6, 3
	r := c.Measure(7200, -100, 7500, 100)
	if want := math.Hypot(123, 1.5); math.Abs(r.Backward.Relay-want) > 1e-9 || r.Forward != (TapReading{120, 120}) || r.Current != -100 {
		t.Errorf("stay sees %+v, want %v V by the reverse sheet", r, want)
	}
	// A pair: the line current of A lags V_AB by 30° at unity power factor.
	c.Forward.Rotation = math.Pi / 6
	if r := c.Measure(12470, cmplx.Rect(80, -math.Pi/6), 12470, 0); math.Abs(r.Current-80) > 1e-9 {
		t.Errorf("a pair sees %v A, want 80 A", r.Current)
	}
	if r := c.Measure(0, 5, 0, -5); r.Current != 0 {
		t.Errorf("without a voltage %v A, want no direction", r.Current)
	}
}

// The mirror of the taps is the unit seen from its load side: a constant voltage there
// over the ratio of the tap is what the reverse sheet expects after a step, both types.
func TestReverseMirror(t *testing.T) {
	for _, b := range []bool{false, true} {
		c := reversing(ReverseFollow)
		c.Forward.TypeB, c.Backward.TypeB = b, b
		for tap := -15; tap <= 15; tap++ {
			sheet, _ := c.sheet(Reverses, ReverseReading{})
			for _, step := range []int{-1, 1} {
				got := sheet.after(TapState{Position: -tap}, TapReading{Local: 120}, -step)
				if want := 120 * c.Forward.Ratio(tap) / c.Forward.Ratio(tap+step); math.Abs(got-want) > 1e-12*want {
					t.Errorf("type B %v: %d to %d takes 120 V to %v V, want %v V", b, tap, tap+step, got, want)
				}
			}
		}
	}
}

func TestReverseBand(t *testing.T) {
	read := ReverseReading{TapReading{118, 118}, TapReading{122, 122}, 0}
	for _, tt := range []struct {
		mode    ReverseMode
		current float64
		want    bool
	}{
		{ReverseNone, -5, true}, {ForwardOnly, -5, true}, {ReverseIdle, 0, true}, {ReverseNeutral, -5, true},
		{ReverseFollow, 5, true}, {ReverseFollow, 0, true}, {ReverseFollow, -5, false},
		{ReverseOnly, 5, false}, {ReverseOnly, -5, false}, {ReverseStay, 5, true}, {ReverseStay, -5, false},
	} {
		c := reversing(tt.mode)
		read.Current = tt.current
		if got := c.OutOfBand(c.Observe(ReverseState{}, read, 0), read); got != tt.want {
			t.Errorf("%v at %v A: out of band %v, want %v", tt.mode, tt.current, got, tt.want)
		}
	}
	c := reversing(ReverseFollow)
	if !c.AtStop(ReverseState{TapState: TapState{Position: -16}}) || c.AtStop(ReverseState{}) {
		t.Error("the stops are those of the unit")
	}
}

func TestReverseWords(t *testing.T) {
	for m, want := range map[ReverseMode]string{ReverseNone: "none", ForwardOnly: "forward only", ReverseOnly: "reverse only", ReverseIdle: "idle",
		ReverseFollow: "follow", ReverseNeutral: "neutral", ReverseStay: "stay", 99: "ReverseMode(99)"} {
		if got := m.String(); got != want {
			t.Errorf("mode %d is %q, want %q", uint8(m), got, want)
		}
	}
}
