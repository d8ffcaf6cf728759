package devices

import (
	"math"
	"math/rand/v2"
	"testing"
)

// conform drives a control through a sequence of readings as an engine does, and
// checks what every control owes: the same arguments give the same state, a second
// look changes nothing, a request is not due in the past, a state is equal to itself
// (so that no NaN is in it), an action moves one position, dropping and forgetting
// leave nothing to do, and no instant sees more than two actions.
func conform[S comparable, R any](t *testing.T, c Control[S, R], s S, next func(k int) (R, Time), events int, each func(S, R)) (moves int) {
	t.Helper()
	last, same := Time(math.MinInt64), 0
	r, now := next(0)
	for k := range events {
		following, end := next(k + 1)
		for {
			before := s
			s = c.Observe(s, r, now)
			if again := c.Observe(before, r, now); again != s {
				t.Fatalf("event %d: the same reading gives %+v and %+v", k, s, again)
			}
			if twice := c.Observe(s, r, now); twice != s {
				t.Fatalf("event %d: a second look changes %+v into %+v", k, s, twice)
			}
			if self := s; self != s {
				t.Fatalf("event %d: the state is not equal to itself: %+v", k, s)
			}
			due := c.Due(s)
			if c.Standing(s) != (due != Never) || due < now {
				t.Fatalf("event %d: standing %v, due %d at %d: %+v", k, c.Standing(s), due, now, s)
			}
			if d := c.Drop(s); c.Standing(d) || c.Due(d) != Never {
				t.Fatalf("event %d: dropped, and yet it stands: %+v", k, d)
			}
			if f := c.Forget(s); c.Standing(f) || c.Forget(f) != f || c.Drop(f) != f {
				t.Fatalf("event %d: not forgotten: %+v", k, f)
			}
			each(s, r)
			if due >= end {
				break
			}
			now = due
			var a Action
			s, a = c.Act(s, now)
			if d := a.To - a.From; d != 1 && d != -1 || a.Reason == None || a.Waited < 0 || math.IsNaN(a.Set) || math.IsNaN(a.Measured) {
				t.Fatalf("event %d: action %+v", k, a)
			}
			if same++; now != last {
				last, same = now, 1
			}
			if same > 2 {
				t.Fatalf("event %d: %d actions at one instant: %+v", k, same, s)
			}
			moves++
		}
		r, now = following, end
	}
	return moves
}

// randomTaps draws a settings sheet.
func randomTaps(rng *rand.Rand) TapChanger {
	c := sheet()
	c.Set, c.Bandwidth = 118+4*rng.Float64(), 0.5+3*rng.Float64()
	c.Delay, c.TapTime = Time(rng.IntN(60))*Second, Time(rng.IntN(10))*Second
	c.Integrate, c.TypeB = rng.IntN(2) == 0, rng.IntN(2) == 0
	c.Highest, c.Lowest = rng.IntN(17), -rng.IntN(17)
	if rng.IntN(2) == 0 {
		c.LimitHigh = 123 + 3*rng.Float64()
	}
	if rng.IntN(2) == 0 {
		c.LimitLow = 114 + 3*rng.Float64()
	}
	return c
}

// Random sheets on random readings: no stop is passed, nothing is asked inside the
// band unless a limit does, nothing is asked that would pass a limit, and every
// request points the way its reading says.
func TestTapProperties(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	moves := 0
	for range 300 {
		c := randomTaps(rng)
		now := Time(rng.IntN(1e9)) - 5e8
		next := func(int) (TapReading, Time) {
			now += Time(rng.IntN(40))*Second + Time(rng.IntN(3))*Second/2
			v := 120 + 5*rng.NormFloat64()
			if rng.IntN(8) == 0 {
				v = math.Round(v) // some edges
			}
			return TapReading{v, v - 4*rng.Float64()}, now
		}
		start := TapState{Position: c.Lowest + rng.IntN(c.Highest-c.Lowest+1)}
		moves += conform(t, &c, start, next, 200, func(s TapState, r TapReading) {
			if s.Position > c.Highest || s.Position < c.Lowest {
				t.Fatalf("position %d passes a stop of %+v", s.Position, c)
			}
			inside := !above(r.Local, c.LimitHigh) && !below(r.Local, c.LimitLow)
			if s.Ask != 0 && inside && !c.OutOfBand(r) {
				t.Fatalf("it asks inside the band: %+v at %+v by %+v", s, r, c)
			}
			up := map[Reason]int8{BandLow: 1, LimitLow: 1, BandHigh: -1, LimitHigh: -1, None: 0}
			if s.Ask != up[s.Reason] {
				t.Fatalf("%v asks %d", s.Reason, s.Ask)
			}
			if s.Ask > 0 && (s.Position == c.Highest || above(c.after(s, r, 1), c.LimitHigh)) ||
				s.Ask < 0 && (s.Position == c.Lowest || below(c.after(s, r, -1), c.LimitLow)) {
				t.Fatalf("it asks what it must not: %+v at %+v by %+v", s, r, c)
			}
			if c.OutOfBand(r) && s.Ask == 0 && !c.AtStop(s) && inside &&
				!above(c.after(s, r, 1), c.LimitHigh) && !below(c.after(s, r, -1), c.LimitLow) {
				t.Fatalf("out of the band it asks nothing: %+v at %+v by %+v", s, r, c)
			}
		})
	}
	if moves < 1000 {
		t.Errorf("only %d movements: the readings ask too little of the test", moves)
	}
}

// stopwatch is a tap changer without limits and stops as one would build it from a
// clock that ticks once a second.
type stopwatch struct {
	c        TapChanger
	tap      int
	ask      int
	clock    int // s, of the direction side
	side     int
	sequence bool
}

// look sees a voltage at the beginning of a second, and returns the direction of an
// action that falls there.
func (w *stopwatch) look(v float64) int {
	ask := 0
	if v < w.c.Set-w.c.Bandwidth/2 {
		ask = 1
	} else if v > w.c.Set+w.c.Bandwidth/2 {
		ask = -1
	}
	if ask == 0 && (w.sequence || !w.c.Integrate) || ask != 0 && ask != w.side {
		w.clock, w.sequence = 0, false
	}
	if ask != 0 {
		w.side = ask
	}
	w.ask = ask
	wait := int(w.c.Delay / Second)
	if w.sequence {
		wait = int(w.c.TapTime / Second)
	}
	if ask != 0 && w.clock >= wait {
		w.clock, w.sequence = 0, true
		w.tap += ask
		return ask
	}
	return 0
}

// tick lets the second go by.
func (w *stopwatch) tick() {
	if w.ask != 0 {
		w.clock++
	} else {
		w.clock = max(0, w.clock-1)
	}
}

// The events of a control are those of a clock that ticks every second, for both
// timers: 200 random sheets over an hour each.
func TestTimersAgainstStopwatch(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 4))
	total := 0
	for run := range 200 {
		c := sheet()
		c.Highest, c.Lowest = 1000, -1000
		c.Range, c.Steps = 10, 16000 // small steps: never far from where it was
		c.Delay, c.TapTime = Time(1+rng.IntN(40))*Second, Time(1+rng.IntN(12))*Second
		c.Integrate = run%2 == 0
		w := stopwatch{c: c}
		var s TapState
		v, left := 120.0, 0
		for second := range 3600 {
			if left--; left <= 0 {
				v, left = 120+1.5*rng.NormFloat64(), 1+rng.IntN(50)
			}
			now := Time(second) * Second
			s = c.Observe(s, TapReading{v, v}, now)
			var got int
			if c.Due(s) == now {
				var a Action
				s, a = c.Act(s, now)
				got = a.To - a.From
				s = c.Observe(s, TapReading{v, v}, now)
			}
			if want := w.look(v); got != want || s.Position != w.tap {
				t.Fatalf("run %d, %d s, %v V, integrate %v, %d and %d s: moves %d to %d, the stopwatch %d to %d",
					run, second, v, c.Integrate, c.Delay/Second, c.TapTime/Second, got, s.Position, want, w.tap)
			} else if want != 0 {
				total++
			}
			w.tick()
		}
	}
	if total < 1000 {
		t.Errorf("only %d movements in the whole test", total)
	}
}

// Random capacitor sheets on random readings.
func TestCapacitorProperties(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 6))
	moves := 0
	for run := range 300 {
		c := kvarSheet()
		c.Kind = CapacitorKind(1 + run%6)
		switch c.Kind {
		case CapacitorVoltage:
			c.On, c.Off = 118, 124
		case CapacitorPowerFactor:
			c.On, c.Off, c.Rating = 0.95, -0.98, 400
		case CapacitorTime:
			c.TimeOn, c.TimeOff = Time(rng.IntN(1440))*60*Second, Time(rng.IntN(1440))*60*Second
		}
		c.Delay, c.Lockout = Time(rng.IntN(120))*Second, Time(rng.IntN(600))*Second
		c.DailyLimit = rng.IntN(3) * 4
		now := Time(rng.IntN(1e9)) - 5e8
		next := func(int) (CapacitorReading, Time) {
			now += Time(rng.IntN(300)) * Second
			return CapacitorReading{V120: 121 + 4*rng.NormFloat64(), Quantity: 800 * rng.NormFloat64(),
				P: 500 * rng.NormFloat64(), Q: 300 * rng.NormFloat64(), Clock: now}, now
		}
		var last CapacitorState
		moves += conform(t, &c, CapacitorState{}, next, 200, func(s CapacitorState, r CapacitorReading) {
			if s.Ask > 0 && s.Closed || s.Ask < 0 && !s.Closed {
				t.Fatalf("it asks for what is: %+v", s)
			}
			if s.Latch == OverrideLow && s.Ask < 0 && s.Reason != OverrideHigh || s.Latch == OverrideHigh && s.Ask > 0 && s.Reason != OverrideLow {
				t.Fatalf("it asks against a latch: %+v", s)
			}
			if s.Locked && s.Ask > 0 && c.Due(s) < s.Lock {
				t.Fatalf("it closes within the lockout: %+v", s)
			}
			if c.DailyLimit > 0 && (s.Counted > c.DailyLimit || s.Counted < last.Counted && s.Day == last.Day) {
				t.Fatalf("%d switchings of %d: %+v", s.Counted, c.DailyLimit, s)
			}
			if c.overrides() && r.V120 > c.OverrideOff && s.Closed != (s.Ask < 0 && s.Reason == OverrideHigh) {
				t.Fatalf("above the override it neither is open nor asks to be: %+v", s)
			}
			last = s
		})
	}
	if moves < 1000 {
		t.Errorf("only %d switchings: the readings ask too little of the test", moves)
	}
}

// A control allocates nothing.
func TestNoAllocation(t *testing.T) {
	taps, bank := sheet(), timeSheet("22:00", "06:00", load(t, "America/Denver"))
	taps.Integrate, taps.R, taps.X, taps.LimitHigh = true, 3, 5, 126
	bank.Weekdays, bank.DailyLimit, bank.OverrideOn = true, 20, 117
	pf := CapacitorControl{Kind: CapacitorPowerFactor, On: 0.9, Off: -0.98, OverrideOn: 117, OverrideOff: 127, Delay: 60 * Second}
	var ts TapState
	var bs, ps CapacitorState
	var h Hunting
	var now Time
	if n := testing.AllocsPerRun(2000, func() {
		now += 400 * Second
		v := 120 + 6*math.Sin(float64(now/Second)/4000)
		r := taps.Measure(complex(v*taps.PT, 0), complex(100, -30))
		ts = taps.Observe(ts, r, now)
		if taps.Due(ts) <= now {
			var a Action
			ts, a = taps.Act(ts, now)
			h, _ = h.See(now, a.To-a.From)
		}
		taps.Edge(ts, r)
		for _, x := range []struct {
			c *CapacitorControl
			s *CapacitorState
		}{{&bank, &bs}, {&pf, &ps}} {
			cr := CapacitorReading{V120: v, P: 100, Q: 20 * (v - 120), Clock: now}
			*x.s = x.c.Observe(*x.s, cr, now)
			x.c.Edge(*x.s, cr)
			x.c.NextSwitch(*x.s)
			if x.c.Due(*x.s) <= now {
				*x.s, _ = x.c.Act(*x.s, now)
			}
		}
	}); n != 0 {
		t.Errorf("%v allocations per instant, want none", n)
	}
}

func BenchmarkTapObserve(b *testing.B) {
	c := sheet()
	c.R, c.X, c.LimitHigh, c.LimitLow = 3, 5, 126, 114
	var s TapState
	b.ReportAllocs()
	for k := 0; b.Loop(); k++ {
		v := complex(60*(118+0.5*float64(k%8)), 100)
		r := c.Measure(v, complex(100, -30))
		s = c.Observe(s, r, Time(k)*Second)
		if c.Due(s) <= Time(k)*Second {
			s, _ = c.Act(s, Time(k)*Second)
		}
		if c.Edge(s, r) {
			s = c.Drop(s)
		}
	}
}

// BenchmarkCapacitorObserve is a control by time over seconds: the calendar is read
// again only where the clock changes what it says.
func BenchmarkCapacitorObserve(b *testing.B) {
	c := timeSheet("22:00", "06:00", load(b, "America/Denver"))
	c.DailyLimit = 6
	var s CapacitorState
	b.ReportAllocs()
	for k := 0; b.Loop(); k++ {
		now := Time(k) * Second
		s = c.Observe(s, CapacitorReading{V120: 120, Clock: now}, now)
		if c.Due(s) <= now {
			s, _ = c.Act(s, now)
		}
	}
}

func BenchmarkHunting(b *testing.B) {
	var h Hunting
	b.ReportAllocs()
	for k := 0; b.Loop(); k++ {
		h, _ = h.See(Time(k)*30*Second, 1-k%2*2)
	}
}
