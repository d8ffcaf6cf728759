package devices

import (
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"
	"time"
)

// follow runs chargers under a limit from event to event, as an engine does, and returns
// their states at the end. each sees the powers of every interval; it may be nil.
func follow(chargers []Charger, limit float64, from, to Time, each func(now, end Time, power []float64)) []ChargerState {
	states, power := make([]ChargerState, len(chargers)), make([]float64, len(chargers))
	for i := range chargers {
		states[i] = chargers[i].Start(from)
	}
	for now := from; now < to; {
		for i := range chargers {
			states[i] = chargers[i].Observe(states[i], now)
			power[i] = chargers[i].Wants(states[i], now)
		}
		Share(power, power, limit)
		end := to
		for i := range chargers {
			end = min(end, chargers[i].NextEvent(states[i], power[i], now))
		}
		if each != nil {
			each(now, end, power)
		}
		for i := range chargers {
			states[i], _ = chargers[i].Advance(states[i], power[i], end-now)
		}
		now = end
	}
	for i := range chargers {
		states[i] = chargers[i].Observe(states[i], to)
	}
	return states
}

// One stay with a pencil: 18:00 to 07:00, 14.4 kWh at 7.2 kW are two hours, 18:00–20:00 at
// once, 05:00–07:00 by departure, 22:00–24:00 from 22:00 on.
func TestChargerTimeline(t *testing.T) {
	for _, tt := range []struct {
		charging Charging
		from, to Time // the cheap hours
		arrive   Time
		energy   float64
		begin    Time
		unserved float64
	}{
		{Unmanaged, 0, 0, 18 * hour, 14.4, 18 * hour, 0},
		{ByDeparture, 0, 0, 18 * hour, 14.4, 29 * hour, 0},
		{CheapHours, 22 * hour, 6 * hour, 18 * hour, 14.4, 22 * hour, 0},
		{CheapHours, 22 * hour, 6 * hour, 23 * hour, 14.4, 23 * hour, 0},  // it is cheap already
		{CheapHours, 1 * hour, 6 * hour, 18 * hour, 14.4, 25 * hour, 0},   // tomorrow
		{CheapHours, 22 * hour, 6 * hour, 18 * hour, 72, 21 * hour, 0},    // ten hours do not fit after 22:00
		{CheapHours, 22 * hour, 22 * hour, 18 * hour, 14.4, 22 * hour, 0}, // a set hour
		{CheapHours, 18 * hour, 18 * hour, 18 * hour, 14.4, 18 * hour, 0},
		{CheapHours, 12 * hour, 13 * hour, 18 * hour, 14.4, 29 * hour, 0}, // it is not cheap before it leaves
		{ByDeparture, 0, 0, 18 * hour, 100.8, 18 * hour, 7.2},             // 14 h in 13
		{Unmanaged, 0, 0, 18 * hour, 100.8, 18 * hour, 7.2},
	} {
		c := Charger{Power: 7.2, Charging: tt.charging, From: tt.from, To: tt.to,
			Sessions: []Session{{Arrive: tt.arrive, Depart: 31 * hour, Energy: tt.energy}}}
		if errs := c.Check(); errs != nil {
			t.Fatal(errs)
		}
		var first, last Time
		s := follow([]Charger{c}, math.Inf(1), 0, 48*hour, func(now, end Time, power []float64) {
			if power[0] == 0 {
				return
			}
			if power[0] != 7.2 {
				t.Errorf("%v kW", power[0])
			}
			if first == 0 {
				first = now
			}
			last = end
		})[0]
		const rounding = 4 // ns
		served := tt.energy - tt.unserved
		if d := first - tt.begin; d > rounding || d < -rounding {
			t.Errorf("%v: begins at %v h, want %v", tt.charging, hours(first), hours(tt.begin))
		}
		if d := last - first - Time(served/7.2*float64(hour)); d > rounding || d < -rounding {
			t.Errorf("%v: draws for %v h, want %v", tt.charging, hours(last-first), served/7.2)
		}
		short := 0
		if tt.unserved > 0 {
			short = 1
		}
		if math.Abs(s.Served-served) > 1e-9 || math.Abs(s.Unserved-tt.unserved) > 1e-9 || s.Short != short || s.Connected || s.Need != 0 {
			t.Errorf("%v: %+v, want %v and %v kWh", tt.charging, s, served, tt.unserved)
		}
	}
}

// Three chargers share 12 kW. From 0 h two of 7.2 kW get 6 each; at 1 h one of 3 kW comes:
// 3, 4.5 and 4.5. The first needs 8.25 kWh: 6 + 4.5·0.5, full at 1:30; then the second gets
// 7.2 and the third 3. The second needs 6 + 2.25 + 7.2 = 15.45 kWh, full at 2:30. The third
// has 4.5 kWh then, and leaves at 3 h with 6 of 9 kWh.
func TestChargersShare(t *testing.T) {
	stay := func(arrive, depart Time, energy float64) []Session { return []Session{{arrive, depart, energy, 0}} }
	chargers := []Charger{
		{Power: 7.2, Sessions: stay(0, 10*hour, 8.25)},
		{Power: 7.2, Sessions: stay(0, 10*hour, 15.45)},
		{Power: 3, Sessions: stay(hour, 3*hour, 9)},
	}
	type span struct {
		at    float64 // h
		power [3]float64
	}
	var got []span
	states := follow(chargers, 12, 0, 4*hour, func(now, _ Time, power []float64) {
		got = append(got, span{hours(now), [3]float64(power)})
	})
	want := []span{{0, [3]float64{6, 6, 0}}, {1, [3]float64{4.5, 4.5, 3}}, {1.5, [3]float64{0, 7.2, 3}}, {2.5, [3]float64{0, 0, 3}}, {3, [3]float64{}}}
	if !slices.EqualFunc(got, want, func(a, b span) bool {
		return math.Abs(a.at-b.at) < 1e-11 && math.Abs(a.power[0]-b.power[0])+math.Abs(a.power[1]-b.power[1])+math.Abs(a.power[2]-b.power[2]) < 1e-12
	}) {
		t.Errorf("%v, want %v", got, want)
	}
	if s := states[2]; math.Abs(s.Served-6) > 1e-9 || math.Abs(s.Unserved-3) > 1e-9 || s.Short != 1 {
		t.Errorf("the third: %+v, want 6 of 9 kWh", s)
	}
}

// Hand-worked water-filling, and its properties on random wishes: nobody above the wish or
// below another who wants as much, the limit used up or every wish granted, the same for
// any order.
func TestShare(t *testing.T) {
	for _, tt := range []struct {
		wants []float64
		limit float64
		want  []float64
	}{
		{[]float64{2, 10, 4}, 12, []float64{2, 6, 4}}, {[]float64{2, 10, 4}, 9, []float64{2, 3.5, 3.5}}, {[]float64{2, 10, 4}, 3, []float64{1, 1, 1}},
		{[]float64{2, 10, 4}, 16, []float64{2, 10, 4}}, {[]float64{2, 10, 4}, 99, []float64{2, 10, 4}}, {[]float64{2, 10}, 0, []float64{0, 0}},
		{[]float64{2, 10}, -5, []float64{0, 0}}, {[]float64{0, 0}, 5, []float64{0, 0}}, {nil, 5, nil}, {[]float64{7, 7}, math.Inf(1), []float64{7, 7}},
	} {
		got := make([]float64, len(tt.wants))
		Share(got, tt.wants, tt.limit)
		if !slices.EqualFunc(got, tt.want, func(a, b float64) bool { return math.Abs(a-b) < 1e-12 }) {
			t.Errorf("%v of %v: %v, want %v", tt.limit, tt.wants, got, tt.want)
		}
	}
	rng := rand.New(rand.NewPCG(5, 1))
	for range 5000 {
		n := 1 + rng.IntN(30)
		wants := make([]float64, n)
		total := 0.0
		for i := range wants {
			wants[i] = math.Max(0, float64(rng.IntN(12))-2) * (1 + 1e-9*rng.Float64())
			total += wants[i]
		}
		limit := 1.5 * total * rng.Float64()
		got := make([]float64, n)
		Share(got, wants, limit)
		sum, highest := 0.0, 0.0
		for i := range got {
			sum, highest = sum+got[i], max(highest, got[i])
			if got[i] < 0 || got[i] > wants[i] {
				t.Fatalf("%v of %v", got, wants)
			}
		}
		if math.Abs(sum-min(limit, total)) > 1e-12*(1+total) {
			t.Fatalf("%v given of %v: %v of %v", sum, limit, got, wants)
		}
		for i := range got {
			if got[i] < wants[i] && got[i] < highest {
				t.Fatalf("%d gets %v of %v, another %v", i, got[i], wants[i], highest)
			}
		}
		order := rng.Perm(n)
		shuffled, other := make([]float64, n), make([]float64, n)
		for i, j := range order {
			shuffled[i] = wants[j]
		}
		Share(other, shuffled, limit)
		for i, j := range order {
			if math.Abs(other[i]-got[j]) > 1e-12*(1+got[j]) {
				t.Fatalf("another order gives %v, want %v", other[i], got[j])
			}
		}
	}
	defer func() {
		if recover() == nil {
			t.Error("no panic on different lengths")
		}
	}()
	Share(make([]float64, 1), make([]float64, 2), 1)
}

// Random chargers, stays and limits: what was asked for is served, still needed or unserved;
// nothing flows without a vehicle, above the limit or a charger's power; who charges
// without a limit and has the time is served whole, however it is managed.
func TestChargersConserve(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 2))
	unserved := 0.0
	for range 150 {
		limit := math.Inf(1)
		if rng.IntN(2) == 0 {
			limit = 25 * rng.Float64()
		}
		chargers := make([]Charger, 1+rng.IntN(6))
		for i := range chargers {
			c := &chargers[i]
			*c = Charger{Power: 1.4 + 10*rng.Float64(), Charging: Charging(rng.IntN(3)), From: Time(rng.IntN(24)) * hour, To: Time(rng.IntN(24)) * hour}
			for now := Time(rng.Int64N(int64(day))); now < 10*day; {
				stay := 1 + Time(rng.Int64N(int64(day)))
				a := Session{Arrive: now, Depart: now + stay, Energy: 0.1 + 40*rng.Float64()}
				if rng.IntN(3) == 0 {
					a.Power = 12 * rng.Float64()
				}
				c.Sessions = append(c.Sessions, a)
				now = a.Depart + Time(rng.IntN(2))*Time(rng.Int64N(int64(day)))
			}
			if errs := c.Check(); errs != nil {
				t.Fatal(errs)
			}
		}
		to := 5*day + Time(rng.Int64N(int64(10*day)))
		flowed := make([]float64, len(chargers))
		states := follow(chargers, limit, 0, to, func(now, end Time, power []float64) {
			sum := 0.0
			if end <= now {
				t.Fatalf("an interval of %d ns", end-now)
			}
			for i, p := range power {
				sum += p
				flowed[i] += p * hours(end-now)
				here := slices.ContainsFunc(chargers[i].Sessions, func(a Session) bool { return a.Arrive <= now && end <= a.Depart })
				if p < 0 || p > chargers[i].Power || p > 0 && !here {
					t.Fatalf("%v kW at %v h, a vehicle is there: %v", p, hours(now), here)
				}
			}
			if sum > limit+1e-9 {
				t.Fatalf("%v kW above the limit of %v", sum, limit)
			}
		})
		for i, s := range states {
			asked, lacks := 0.0, 0.0
			for _, a := range chargers[i].Sessions {
				if a.Arrive <= to {
					asked += a.Energy
				}
				if a.Depart <= to {
					lacks += max(0, a.Energy-chargers[i].draw(&a)*hours(a.Depart-a.Arrive))
				}
			}
			if math.Abs(asked-s.Served-s.Need-s.Unserved) > 1e-9 || math.Abs(flowed[i]-s.Served) > 1e-9 {
				t.Fatalf("asked for %v kWh, %v flowed: %+v", asked, flowed[i], s)
			}
			if math.IsInf(limit, 1) && math.Abs(s.Unserved-lacks) > 1e-9 || s.Unserved < lacks-1e-9 {
				t.Fatalf("%v kWh unserved, the stays are short of %v: %v", s.Unserved, lacks, chargers[i].Charging)
			}
			unserved += s.Unserved
		}
	}
	if unserved == 0 {
		t.Error("everybody was served: the limits did not bind")
	}
}

// At the beginning of a run who has left is forgotten, and who is there needs all. An
// instant seen late finds all that happened.
func TestChargerStart(t *testing.T) {
	c := Charger{Power: 5, Charging: ByDeparture, Sessions: []Session{{0, hour, 5, 0}, {2 * hour, 6 * hour, 10, 0}, {6 * hour, 7 * hour, 3, 0}, {8 * hour, 9 * hour, 4, 0}}}
	s := c.Start(3 * hour)
	if s.Next != 2 || !s.Connected || s.Need != 10 || s.Unserved != 0 || s.Begin != 4*hour-1 {
		t.Errorf("%+v", s)
	}
	if got := c.NextEvent(s, 0, 3*hour); got != 4*hour-1 {
		t.Errorf("next event at %v h, want the beginning at 4 h", hours(got))
	}
	if c.Wants(s, 4*hour-2) != 0 || c.Wants(s, 4*hour-1) != 5 {
		t.Error("it draws from its beginning on")
	}
	if again := c.Observe(s, 3*hour); again != s {
		t.Errorf("a second look: %+v", again)
	}
	s = c.Observe(s, 6*hour)
	if s.Unserved != 10 || s.Short != 1 || !s.Connected || s.Need != 3 {
		t.Errorf("one leaves as the next arrives: %+v", s)
	}
	if s = c.Observe(s, 20*hour); s.Unserved != 17 || s.Short != 3 || s.Connected || c.NextEvent(s, 0, 20*hour) != Never {
		t.Errorf("late: %+v", s)
	}
	if got := (&Charger{}).Start(0); got != (ChargerState{}) {
		t.Errorf("no sessions: %+v", got)
	}
}

// Every day from 18:00 to 07:30 in Denver over the night of 2025-03-09 (23 h) and that of
// 2025-11-02 (25 h): 12.5 and 14.5 h. A departure at 02:30 in spring is at 03:00.
func TestHabit(t *testing.T) {
	zone, err := time.LoadLocation("America/Denver")
	if err != nil {
		t.Fatal(err)
	}
	h := Habit{Arrive: 18 * hour, Depart: 7*hour + 30*minute, Energy: 10, Power: 7}
	for _, tt := range []struct {
		from time.Time
		want []float64 // h
	}{
		{time.Date(2025, 3, 8, 0, 0, 0, 0, zone), []float64{13.5, 12.5, 13.5}},
		{time.Date(2025, 11, 1, 0, 0, 0, 0, zone), []float64{13.5, 14.5, 13.5}},
	} {
		got := h.Sessions(nil, tt.from.UnixNano(), tt.from.AddDate(0, 0, 2).UnixNano(), zone)
		if len(got) != len(tt.want) {
			t.Fatalf("%d stays, want %d", len(got), len(tt.want))
		}
		for i, a := range got {
			at := time.Unix(0, a.Arrive).In(zone)
			if hours(a.Depart-a.Arrive) != tt.want[i] || at.Hour() != 18 || a.Energy != 10 || a.Power != 7 {
				t.Errorf("stay from %v: %v h, want %v", at, hours(a.Depart-a.Arrive), tt.want[i])
			}
		}
	}
	h = Habit{Arrive: 20 * hour, Depart: 2*hour + 30*minute, Energy: 1, Weekdays: true}
	from := time.Date(2025, 3, 7, 12, 0, 0, 0, zone) // a Friday
	got := h.Sessions(nil, from.UnixNano(), from.AddDate(0, 0, 4).UnixNano(), zone)
	if len(got) != 2 || time.Unix(0, got[1].Arrive).In(zone).Weekday() != time.Monday {
		t.Errorf("weekdays: %v", got)
	}
	h.Weekdays = false
	got = h.Sessions(nil, from.UnixNano(), from.AddDate(0, 0, 4).UnixNano(), zone)
	if len(got) != 4 || !time.Unix(0, got[1].Depart).Equal(time.Date(2025, 3, 9, 3, 0, 0, 0, zone)) {
		t.Errorf("every day: %v", got)
	}
	c := Charger{Power: 5, Sessions: Habit{Arrive: 8 * hour, Depart: 8 * hour, Energy: 1}.Sessions(nil, 0, 30*day, nil)}
	if errs := c.Check(); errs != nil || len(c.Sessions) != 31 {
		t.Errorf("whole days: %d stays, %v", len(c.Sessions), errs)
	}
}

// The instant at which a vehicle is full leaves nothing over, whatever the rounding.
func TestChargerFull(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 4))
	for range 20000 {
		c := Charger{Power: 1 + 10*rng.Float64(), Sessions: []Session{{0, 400 * day, 60 * rng.Float64(), 0}}}
		s, now := c.Start(0), Time(0)
		if rng.IntN(2) == 0 {
			now = Time(rng.Float64() * float64(hour) * s.Need / c.Power)
			s, _ = c.Advance(s, c.Power, now)
		}
		full := c.NextEvent(s, c.Power, now)
		if full == 400*day {
			continue
		}
		if s, _ = c.Advance(s, c.Power, full-now); s.Need != 0 || c.Wants(s, full) != 0 || math.Abs(s.Served-c.Sessions[0].Energy) > 1e-12*s.Served {
			t.Fatalf("full, and yet %+v of %+v", s, c)
		}
	}
}

func TestChargerCheck(t *testing.T) {
	for want, change := range map[string]func(*Charger){
		"power is -1 kW": func(c *Charger) { c.Power = -1 },
		"energy of session 1 is 0 kWh, it must be above 0": func(c *Charger) { c.Sessions[0].Energy = 0 },
		"power of session 2 is -3 kW":                      func(c *Charger) { c.Sessions[1].Power = -3 },
		"session 2 ends before it begins":                  func(c *Charger) { c.Sessions[1].Depart = hour },
		"session 2 begins before session 1 has ended":      func(c *Charger) { c.Sessions[1].Arrive = hour - 1 },
		"beginning of the cheap hours is 25":               func(c *Charger) { c.Charging, c.From = CheapHours, 25*hour },
		"is no way of charging":                            func(c *Charger) { c.Charging = 5 },
	} {
		c := Charger{Power: 5, Sessions: []Session{{0, hour, 5, 0}, {hour, 2 * hour, 5, 0}}}
		if errs := c.Check(); errs != nil {
			t.Fatal(errs)
		}
		change(&c)
		errs := c.Check()
		if len(errs) != 1 || !strings.Contains(errs[0].Error(), want) {
			t.Errorf("%v, want %q", errs, want)
		}
	}
}

func TestChargerAllocations(t *testing.T) {
	c := Charger{Power: 5, Charging: CheapHours, From: 3 * hour, To: 4 * hour, Sessions: []Session{{0, 10 * hour, 5, 0}, {10 * hour, 20 * hour, 5, 0}}}
	power := make([]float64, 20)
	if n := testing.AllocsPerRun(100, func() {
		s := c.Start(0)
		for now := Time(0); now < day; {
			s = c.Observe(s, now)
			power[0] = c.Wants(s, now)
			Share(power, power, 3)
			end := min(day, c.NextEvent(s, power[0], now))
			s, _ = c.Advance(s, power[0], end-now)
			now = end
		}
	}); n != 0 {
		t.Errorf("%v allocations", n)
	}
}

func BenchmarkShare(b *testing.B) {
	rng := rand.New(rand.NewPCG(5, 3))
	wants, power := make([]float64, 100), make([]float64, 100)
	for i := range wants {
		wants[i] = 11 * rng.Float64()
	}
	b.ReportAllocs()
	for b.Loop() {
		Share(power, wants, 200)
	}
}

func BenchmarkChargerYear(b *testing.B) {
	c := Charger{Power: 7.2, Charging: ByDeparture, Sessions: Habit{Arrive: 18 * hour, Depart: 7 * hour, Energy: 12}.Sessions(nil, 0, 365*day, nil)}
	b.ReportAllocs()
	for b.Loop() {
		s := c.Start(0)
		for now := Time(0); now < 365*day; {
			s = c.Observe(s, now)
			p := c.Wants(s, now)
			end := min(now-now%hour+hour, c.NextEvent(s, p, now))
			s, _ = c.Advance(s, p, end-now)
			now = end
		}
	}
}
