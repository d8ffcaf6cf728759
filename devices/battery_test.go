package devices

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"
	"time"
)

const (
	hour   = 3600 * Second
	minute = 60 * Second
)

// pack returns a battery of 100 kWh and 50 kW whose ways are 0.9 each.
func pack() Battery {
	return Battery{Energy: 100, Power: 50, RoundTrip: 0.81, Reserve: 0.2, Initial: 0.5}
}

// A day with a pencil: from 50 kWh with a reserve of 20 kWh. Discharging 36 kW takes
// 40 kW out of the store, 30 kWh are gone after 45 min: 27 kWh delivered, 3 lost. Charging
// 40 kW puts 36 kW into it; 80 kWh take 2 h 13 min 20 s and 88.889 kWh, 8.889 lost.
func TestBatteryTimeline(t *testing.T) {
	b := pack()
	s := b.Start()
	if s.Stored != 50 {
		t.Fatalf("starts with %v kWh", s.Stored)
	}
	if got := b.Until(s, 36); got != 45*minute {
		t.Errorf("down to the reserve after %v s, want 2700", seconds(got))
	}
	half, x := b.Advance(s, 36, 15*minute)
	if math.Abs(half.Stored-40) > 1e-12 || math.Abs(x.Out-9) > 1e-12 || math.Abs(x.Loss-1) > 1e-12 || x.In != 0 {
		t.Errorf("after a quarter: %+v %+v", half, x)
	}
	if got := b.Until(half, 36); got != 30*minute && got != 30*minute+1 {
		t.Errorf("then %v s more, want 1800", seconds(got))
	}
	s, x = b.Advance(s, 36, 45*minute)
	if s.Stored != 20 || math.Abs(x.Out-27) > 1e-10 || math.Abs(x.Loss-3) > 1e-10 {
		t.Errorf("at the reserve: %+v %+v", s, x)
	}
	if b.Allowed(s, 36) != 0 || b.Until(s, 36) != 0 || b.Allowed(s, -70) != -50 {
		t.Errorf("at the reserve it may only charge")
	}
	full := b.Until(s, -40)
	if want := 2*hour + 13*minute + 20*Second; full < want || full > want+1 {
		t.Errorf("full after %v s, want 8000", seconds(full))
	}
	s, x = b.Advance(s, -40, full)
	if s.Stored != 100 || math.Abs(x.In-80/0.9) > 1e-10 || math.Abs(x.Loss-8/0.9) > 1e-10 || x.Out != 0 {
		t.Errorf("full: %+v %+v", s, x)
	}
	if b.Allowed(s, -1) != 0 || b.Until(s, -1) != 0 || b.Allowed(s, 51) != 50 || b.Until(s, 0) != Never {
		t.Errorf("full it may only discharge")
	}
	// Whoever goes on too long gets no more than there is.
	if s, x := b.Advance(s, 50, 24*hour); s.Stored != 20 || math.Abs(x.Out-72) > 1e-10 || math.Abs(x.Loss-8) > 1e-10 {
		t.Errorf("a whole day: %+v %+v", s, x)
	}
	if same, x := b.Advance(s, 50, 0); same != s || x != (Exchange{}) {
		t.Errorf("in no time: %+v", x)
	}
}

// The usual efficiency, and a battery that begins below its reserve: it gives nothing, and
// loses nothing.
func TestBatteryStart(t *testing.T) {
	b := Battery{Energy: 100, Power: 50, Reserve: 0.3, Initial: 0.1}
	s := b.Start()
	if b.Allowed(s, 10) != 0 || b.Until(s, 10) != 0 {
		t.Error("it gives from its reserve")
	}
	if after, x := b.Advance(s, 10, hour); after != s || x != (Exchange{}) {
		t.Errorf("below the reserve %+v %+v", after, x)
	}
	s, x := b.Advance(s, -10, hour)
	if want := 10 + 10*math.Sqrt(0.85); math.Abs(s.Stored-want) > 1e-12 || math.Abs(x.In-x.Loss-(want-10)) > 1e-12 {
		t.Errorf("%+v %+v, want %v kWh", s, x, want)
	}
}

// Dispatch by a flow: what the battery does itself is taken out first.
func TestBatteryRequest(t *testing.T) {
	for _, tt := range []struct {
		dispatch      Dispatch
		flow, present float64
		want          float64
	}{
		{PeakShaving, 230, 0, 30}, {PeakShaving, 200, 30, 30}, {PeakShaving, 200, 0, 0}, {PeakShaving, 260, 0, 50}, {PeakShaving, 150, 0, 0},
		{PeakShaving, 100, 0, 0}, {PeakShaving, 80, 0, -20}, {PeakShaving, 100, -20, -20}, {PeakShaving, 20, 0, -50}, {PeakShaving, -20, 0, -50},
		{SelfConsumption, 12, 0, 12}, {SelfConsumption, 0, 12, 12}, {SelfConsumption, -7, 0, -7}, {SelfConsumption, 0, -7, -7}, {SelfConsumption, 80, 0, 50},
		{ByProfile, 99, 0, 17},
	} {
		b := pack()
		b.Dispatch, b.Target, b.Recharge = tt.dispatch, 200, 100
		if got := b.Request(b.Start(), BatteryReading{Flow: tt.flow, Present: tt.present, Profile: 17}, 0); got != tt.want {
			t.Errorf("%v at %v kW with %v kW: requests %v kW, want %v", tt.dispatch, tt.flow, tt.present, got, tt.want)
		}
		// The request is where the loop rests: the flow it makes asks for the same again.
		bare := tt.flow + tt.present
		if again := b.Request(b.Start(), BatteryReading{Flow: bare - tt.want, Present: tt.want, Profile: 17}, 0); again != tt.want {
			t.Errorf("%v: the second look requests %v kW, want %v", tt.dispatch, again, tt.want)
		}
	}
	b := pack()
	b.Dispatch = SelfConsumption
	if got := b.Request(BatteryState{20}, BatteryReading{Flow: 5}, 0); got != 0 {
		t.Errorf("at the reserve it requests %v kW", got)
	}
}

// Windows on a local clock: charge 01:00–05:00 every day, discharge 17:00–21:00 on
// weekdays, and one past midnight. 2025-03-07 is a Friday; on Sunday 2025-03-09 Denver
// skips 02:00–03:00, on 2025-11-02 it repeats 01:00–02:00.
func TestBatterySchedule(t *testing.T) {
	zone, err := time.LoadLocation("America/Denver")
	if err != nil {
		t.Fatal(err)
	}
	at := func(s string) Time {
		x, err := time.ParseInLocation("2006-01-02 15:04", s, zone)
		if err != nil {
			t.Fatal(err)
		}
		return x.UnixNano()
	}
	b := pack()
	b.Zone = zone
	b.Windows = []Window{{From: 1 * hour, To: 5 * hour, Power: -20}, {From: 17 * hour, To: 21 * hour, Weekdays: true, Power: 30}}
	if errs := b.Check(); errs != nil {
		t.Fatal(errs)
	}
	type change struct {
		at    string
		power float64
	}
	follow := func(from string, want []change) {
		t.Helper()
		now := at(from)
		for _, w := range want {
			now = b.NextSwitch(now)
			if now != at(w.at) {
				t.Fatalf("switches at %v, want %s", time.Unix(0, now).In(zone), w.at)
			}
			if got := b.Request(b.Start(), BatteryReading{}, now); got != w.power {
				t.Errorf("%s: %v kW, want %v", w.at, got, w.power)
			}
		}
	}
	follow("2025-03-07 04:00", []change{{"2025-03-07 05:00", 0}, {"2025-03-07 17:00", 30}, {"2025-03-07 21:00", 0},
		{"2025-03-08 01:00", -20}, {"2025-03-08 05:00", 0}, {"2025-03-09 01:00", -20}, {"2025-03-09 05:00", 0}, {"2025-03-10 01:00", -20}})
	if short := at("2025-03-09 05:00") - at("2025-03-09 01:00"); short != 3*hour {
		t.Errorf("the short night has %v s", seconds(short))
	}
	follow("2025-11-01 23:00", []change{{"2025-11-02 01:00", -20}, {"2025-11-02 05:00", 0}})
	if long := b.NextSwitch(at("2025-11-02 01:00")) - b.NextSwitch(at("2025-11-02 00:00")); long != 5*hour {
		t.Errorf("the long night has %v s", seconds(long))
	}
	b.Windows = []Window{{From: 22 * hour, To: 2 * hour, Weekdays: true, Power: -5}}
	follow("2025-03-06 12:00", []change{{"2025-03-06 22:00", -5}, {"2025-03-07 02:00", 0}, {"2025-03-07 22:00", -5}, {"2025-03-08 00:00", 0},
		{"2025-03-10 00:00", -5}, {"2025-03-10 02:00", 0}})
	b.Windows = []Window{{From: 0, To: 24 * hour, Power: 3}}
	if got := b.NextSwitch(at("2025-03-06 12:00")); got != Never {
		t.Errorf("always the same, and yet it switches at %v", time.Unix(0, got))
	}
	b.Windows = nil
	if b.NextSwitch(0) != Never || b.Request(b.Start(), BatteryReading{}, 0) != 0 {
		t.Error("no window, no power")
	}
	b.Zone, b.Windows = nil, []Window{{From: hour, To: 2 * hour, Power: 1}}
	if got := b.NextSwitch(0); got != hour {
		t.Errorf("in UTC it switches at %v s", seconds(got))
	}
}

// Random batteries on random powers, cut at their events as an engine cuts them, and
// sometimes not: the books close against an independent account, the store is never outside
// its limits, an event puts it exactly there.
func TestBatteryConserves(t *testing.T) {
	rng := rand.New(rand.NewPCG(4, 1))
	events := 0
	for range 300 {
		b := Battery{Energy: 1 + 200*rng.Float64(), Power: 1 + 100*rng.Float64(), RoundTrip: 0.5 + 0.5*rng.Float64(), Reserve: 0.5 * rng.Float64(), Initial: rng.Float64()}
		if errs := b.Check(); errs != nil {
			t.Fatal(errs)
		}
		s := b.Start()
		lowest := min(s.Stored, b.Reserve*b.Energy)
		var in, out, loss, lossByHand float64
		η := math.Sqrt(b.RoundTrip)
		for range 1000 {
			p := b.Allowed(s, 3*b.Power*(rng.Float64()-0.5))
			interval := 1 + Time(rng.Int64N(int64(2*hour)))
			if rng.IntN(20) == 0 {
				interval = 1 + Time(rng.IntN(5))
			}
			until := b.Until(s, p)
			if p == 0 != (until == Never) || until == 0 {
				t.Fatalf("%v kW may be kept up for %v s: %+v %+v", p, seconds(until), b, s)
			}
			atLimit := until <= interval
			if atLimit && rng.IntN(4) != 0 {
				interval = until
			}
			before := s
			var x Exchange
			s, x = b.Advance(s, p, interval)
			if again, y := b.Advance(before, p, interval); again != s || y != x {
				t.Fatal("the same again gives another result")
			}
			switch {
			case s.Stored > b.Energy || s.Stored < lowest:
				t.Fatalf("outside its limits: %+v %+v", b, s)
			case atLimit && p < 0 && s.Stored != b.Energy, atLimit && p > 0 && s.Stored != b.Reserve*b.Energy:
				t.Fatalf("at its event it stands at %v: %+v", s.Stored, b)
			case x.In < 0 || x.Out < 0 || x.Loss < -1e-12*b.Energy || x.In*x.Out != 0:
				t.Fatalf("%+v", x)
			}
			if atLimit {
				events++
				if b.Allowed(s, p) != 0 {
					t.Fatalf("at its limit it goes on: %+v %+v", b, s)
				}
				if short := math.Abs(p) * hours(until-2); x.In+x.Out < short-1e-9 {
					t.Fatalf("%v kWh exchanged, want at least %v", x.In+x.Out, short)
				}
			} else if e := p * hours(interval); math.Abs(x.Out-x.In-e) > 1e-11*b.Energy {
				t.Fatalf("%+v, want %v kWh", x, e)
			}
			if miss := x.In - x.Out - x.Loss - (s.Stored - before.Stored); math.Abs(miss) > 1e-12*b.Energy {
				t.Fatalf("the books miss %v kWh", miss)
			}
			in, out, loss = in+x.In, out+x.Out, loss+x.Loss
			lossByHand += (1-η)*x.In + (1/η-1)*x.Out
		}
		if miss := in - out - loss - (s.Stored - b.Start().Stored); math.Abs(miss) > 1e-10*b.Energy {
			t.Fatalf("the year's books miss %v kWh of %v", miss, in)
		}
		if math.Abs(loss-lossByHand) > 1e-9*(in+out) {
			t.Fatalf("lost %v kWh, want %v", loss, lossByHand)
		}
	}
	if events < 10000 {
		t.Errorf("only %d events", events)
	}
}

// A full cycle gives back the round-trip efficiency of what it took.
func TestRoundTrip(t *testing.T) {
	b := Battery{Energy: 13.5, Power: 5, RoundTrip: 0.9}
	s, in := b.Advance(b.Start(), -5, b.Until(b.Start(), -5))
	s, out := b.Advance(s, 3.3, b.Until(s, 3.3))
	if s.Stored != 0 || math.Abs(out.Out-0.9*in.In) > 1e-10 || math.Abs(in.In-13.5/math.Sqrt(0.9)) > 1e-10 {
		t.Errorf("in %+v, out %+v", in, out)
	}
}

func TestBatteryCheck(t *testing.T) {
	for want, change := range map[string]func(*Battery){
		"reserve is 1.1, allowed is 0 to 1 of the energy": func(b *Battery) { b.Reserve = 1.1 },
		"initial energy is -0.1":                          func(b *Battery) { b.Initial = -0.1 },
		"round-trip efficiency is 85, allowed is 0 to 1":  func(b *Battery) { b.RoundTrip = 85 },
		"energy is 0 kWh, it must be above 0":             func(b *Battery) { b.Energy = 0 },
		"power is NaN kW":                                 func(b *Battery) { b.Power = math.NaN() },
		"recharge is 3, allowed is at most 2 kW":          func(b *Battery) { b.Dispatch, b.Target, b.Recharge = PeakShaving, 2, 3 },
		"power of window 1 is 60, allowed is -50 to 50":   func(b *Battery) { b.Windows = []Window{{Power: 60}} },
		"end of window 1 is 25, allowed is 0 to 24 h":     func(b *Battery) { b.Windows = []Window{{To: 25 * hour}} },
		"is no dispatch":                                  func(b *Battery) { b.Dispatch = 7 },
	} {
		b := pack()
		change(&b)
		errs := b.Check()
		if len(errs) != 1 || !strings.Contains(errs[0].Error(), want) {
			t.Errorf("%v, want %q", errs, want)
		}
	}
}

func TestBatteryAllocations(t *testing.T) {
	b := pack()
	b.Windows = []Window{{From: hour, To: 2 * hour, Power: 1}}
	if n := testing.AllocsPerRun(100, func() {
		s := b.Start()
		p := b.Request(s, BatteryReading{}, 90*minute)
		b.Advance(s, p, b.Until(s, p))
		b.NextSwitch(0)
	}); n != 0 {
		t.Errorf("%v allocations", n)
	}
}

func BenchmarkBattery(b *testing.B) {
	p := pack()
	p.Dispatch = SelfConsumption
	s := p.Start()
	b.ReportAllocs()
	flow := 40.0
	for b.Loop() {
		kW := p.Request(s, BatteryReading{Flow: flow}, 0)
		if p.Until(s, kW) < hour {
			flow = -flow
		}
		s, _ = p.Advance(s, kW, hour)
	}
}
