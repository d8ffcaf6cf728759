package devices

import (
	"math"
	"math/rand/v2"
	"testing"
)

// Random sheets, modes and readings keep the rules of every control, pass no stop, and
// ask for nothing while they hold. With direction ignored, and with stay where both
// sheets are one, the control is the plain tap changer at every instant.
func TestReverseProperties(t *testing.T) {
	rng := rand.New(rand.NewPCG(7, 8))
	moves, runs := 0, 0
	for run := range 700 {
		c := ReversePower{Mode: ReverseMode(run % 7), Threshold: float64(rng.IntN(3)) * 2, Forward: randomTaps(rng)}
		c.Backward = c.Forward
		plain := run%2 == 0 && c.Mode == ReverseStay || c.Mode == ReverseNone
		if !plain {
			c.Backward.Set, c.Backward.Bandwidth, c.Backward.Delay = 118+4*rng.Float64(), 0.5+3*rng.Float64(), Time(rng.IntN(60))*Second
		}
		now := Time(rng.IntN(1e9)) - 5e8
		current := 0.0
		next := func(int) (ReverseReading, Time) {
			now += Time(rng.IntN(40))*Second + Time(rng.IntN(3))*Second/2
			load, back := 120+5*rng.NormFloat64(), 120+5*rng.NormFloat64()
			if rng.IntN(3) == 0 {
				current = float64(rng.IntN(21) - 10) // some edges
			}
			r := ReverseReading{TapReading{load, load - 4*rng.Float64()}, TapReading{back, back - 4*rng.Float64()}, current}
			if plain {
				r.Backward = r.Forward
			}
			return r, now
		}
		start := ReverseState{TapState: TapState{Position: c.Forward.Lowest + rng.IntN(c.Forward.Highest-c.Forward.Lowest+1)}}
		moves += conform(t, &c, start, next, 200, func(s ReverseState, r ReverseReading) {
			if s.Position > c.Forward.Highest || s.Position < c.Forward.Lowest {
				t.Fatalf("position %d passes a stop of %+v", s.Position, c)
			}
			if s.Way == Holds && (s.Ask != 0 || s.Clock != 0) {
				t.Fatalf("it holds and yet asks or counts: %+v", s)
			}
			if (s.Reason == Reverse) != (s.Way == Parks && s.Ask != 0) {
				t.Fatalf("%v asks for %v", s.Way, s.Reason)
			}
			if s.Reason == Reverse {
				runs++
			}
		})
		if plain {
			twin(t, c, start.TapState, next)
		}
	}
	if moves < 2000 || runs < 1000 {
		t.Errorf("only %d movements, and %d requests for neutral", moves, runs)
	}
}

// twin drives a control beside the plain tap changer.
func twin(t *testing.T, c ReversePower, plain TapState, next func(int) (ReverseReading, Time)) {
	t.Helper()
	s := ReverseState{TapState: plain}
	r, now := next(0)
	for range 100 {
		following, end := next(0)
		for {
			s, plain = c.Observe(s, r, now), c.Forward.Observe(plain, r.Forward, now)
			if s.TapState != plain || c.Edge(s, r) != c.Forward.Edge(plain, r.Forward) && c.Mode == ReverseNone {
				t.Fatalf("%v: %+v, the plain one %+v", c.Mode, s.TapState, plain)
			}
			if c.Due(s) >= end {
				break
			}
			now = c.Due(s)
			var a, b Action
			s, a = c.Act(s, now)
			plain, b = c.Forward.Act(plain, now)
			if a != b {
				t.Fatalf("%v: action %+v, the plain one %+v", c.Mode, a, b)
			}
		}
		r, now = following, end
	}
}

func TestReverseAllocatesNothing(t *testing.T) {
	for m := range ReverseMode(7) {
		c := reversing(m)
		c.Backward.R, c.Backward.X, c.Backward.LimitHigh = 3, 5, 126
		var s ReverseState
		now := Time(0)
		if n := testing.AllocsPerRun(100, func() {
			now += 7 * Second
			r := c.Measure(complex(7000, 10), complex(20*math.Sin(float64(now/Second)), 5), 7300, -10)
			s = c.Observe(s, r, now)
			if c.Due(s) <= now {
				s, _ = c.Act(s, now)
			}
			if c.Edge(s, r) || c.OutOfBand(s, r) {
				s = c.Drop(s)
			}
		}); n != 0 {
			t.Errorf("%v: %v allocations", m, n)
		}
	}
}
