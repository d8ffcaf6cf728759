package devices

import (
	"math"
	"testing"
)

// plant is a feeder as simple as a pencil takes it: regulators in cascade, each
// multiplies what the one before it gives, and a drop in V behind each.
type plant struct {
	taps   []*TapChanger
	states []TapState
	drops  []float64          // V behind each regulator; nil: none
	source func(Time) float64 // V, constant over a step
	bank   *CapacitorControl  // a bank that sees the last voltage, and lifts it by rise V
	rise   float64
	closed CapacitorState
	log    []move
}

// move is one action of a plant: device −1 is the bank.
type move struct {
	t        float64
	device   int
	from, to int
}

// reading solves the plant at a regulator.
func (p *plant) reading(i int, step Time) TapReading {
	v := p.source(step)
	for k := 0; k <= i; k++ {
		if k > 0 && p.drops != nil {
			v -= p.drops[k-1]
		}
		v *= p.taps[k].Ratio(p.states[k].Position)
	}
	if p.closed.Closed {
		v += p.rise
	}
	return TapReading{v, v}
}

func (p *plant) observe(step, now Time) {
	for i, c := range p.taps {
		p.states[i] = c.Observe(p.states[i], p.reading(i, step), now)
	}
	if p.bank != nil {
		p.closed = p.bank.Observe(p.closed, CapacitorReading{V120: p.reading(len(p.taps)-1, step).Relay, Clock: now}, now)
	}
}

func (p *plant) due() Time {
	due := Never
	for i, c := range p.taps {
		due = min(due, c.Due(p.states[i]))
	}
	if p.bank != nil {
		due = min(due, p.bank.Due(p.closed))
	}
	return due
}

func (p *plant) act(now Time) {
	var a Action
	for i, c := range p.taps {
		if c.Due(p.states[i]) == now {
			p.states[i], a = c.Act(p.states[i], now)
			p.log = append(p.log, move{seconds(now), i, a.From, a.To})
		}
	}
	if p.bank != nil && p.bank.Due(p.closed) == now {
		p.closed, a = p.bank.Act(p.closed, now)
		p.log = append(p.log, move{seconds(now), -1, a.From, a.To})
	}
}

// steps runs constant inputs over steps of one length, in the order of events.
func (p *plant) steps(from, to, length Time) {
	for step := from; step < to; step += length {
		p.observe(step, step)
		for due := p.due(); due < min(step+length, to); due = p.due() {
			p.act(due)
			p.observe(step, due)
		}
	}
}

func (p *plant) run(from, to Time) { p.steps(from, to, to-from) }

func (p *plant) want(t *testing.T, want []move) {
	t.Helper()
	for i := range max(len(want), len(p.log)) {
		switch {
		case i >= len(p.log):
			t.Errorf("action %d is missing: want %+v", i, want[i])
		case i >= len(want):
			t.Errorf("action %d is too many: %+v", i, p.log[i])
		case p.log[i] != want[i]:
			t.Errorf("action %d: %+v, want %+v", i, p.log[i], want[i])
		}
	}
}

// Two regulators in cascade, 30 s and 45 s, as the cascade rule has it (common
// practice: nearest the source acts first). Source 116.5 V, 2 V drop between.
//
//	 0 s  V1 116.5, V2 114.5: both ask, due 30 and 45
//	30 s  1 → 1: V1 117.228, V2 115.228      35 s  1 → 2: V1 117.956, V2 115.956
//	40 s  1 → 3: V1 118.684, V2 116.684
//	45 s  1 → 4: V1 119.4125, inside. 2 → 1 at the same instant: V2 117.4125·1.00625 = 118.146
//	50 s  2 → 2: V2 117.4125·1.0125 = 118.880
//	55 s  2 → 3: V2 117.4125·1.01875 = 119.614, inside
func TestCascade(t *testing.T) {
	first, second := sheet(), sheet()
	second.Delay = 45 * Second
	build := func() *plant {
		return &plant{taps: []*TapChanger{&first, &second}, states: make([]TapState, 2), drops: []float64{2},
			source: func(Time) float64 { return 116.5 }}
	}
	want := []move{{30, 0, 0, 1}, {35, 0, 1, 2}, {40, 0, 2, 3}, {45, 0, 3, 4}, {45, 1, 0, 1}, {50, 1, 1, 2}, {55, 1, 2, 3}}
	p := build()
	p.run(0, 3600*Second)
	p.want(t, want)
	if v := p.reading(1, 0).Local; math.Abs(v-117.4125*1.01875) > 1e-9 {
		t.Errorf("the second regulator ends at %v V, want 119.614", v)
	}
	// An hour in one step, in minutes and in seconds is the same hour.
	for _, length := range []Time{60 * Second, Second, 7 * Second} {
		q := build()
		q.steps(0, 3600*Second, length)
		q.want(t, want)
		if q.states[0] != p.states[0] || q.states[1] != p.states[1] {
			t.Errorf("steps of %d s end in %+v, want %+v", length/Second, q.states, p.states)
		}
	}
}

// With equal delays the second regulator moves on what the first is about to cure, and
// has to come back: the waste that a warning of equal delays is about. Source 116.6 V,
// no drop.
//
//	30 s  both: V1 117.329, V2 118.062       35 s  both: V1 118.0575, V2 119.533, 2 rests
//	40 s  1 → 3: V1 118.786, V2 120.271      45 s  1 → 4: V1 119.515, V2 121.009: high
//	75 s  2 → 1: V2 120.262
func TestCascadeEqualDelays(t *testing.T) {
	first, second := sheet(), sheet()
	p := &plant{taps: []*TapChanger{&first, &second}, states: make([]TapState, 2),
		source: func(Time) float64 { return 116.6 }}
	p.run(0, 3600*Second)
	p.want(t, []move{{30, 0, 0, 1}, {30, 1, 0, 1}, {35, 0, 1, 2}, {35, 1, 1, 2}, {40, 0, 2, 3}, {45, 0, 3, 4}, {75, 1, 2, 1}})
}

// A band narrower than a step hunts: 119.6 V is below 119.75, and a raise makes
// 120.3475, above 120.25. It moves every 30 s: raise at 30, lower at 60 (the first
// change of direction), ... the eleventh change at 360 s.
func TestHuntingRegulator(t *testing.T) {
	c := sheet()
	c.Bandwidth = 0.5
	p := plant{taps: []*TapChanger{&c}, states: make([]TapState, 1), source: func(Time) float64 { return 119.6 }}
	p.run(0, 600*Second)
	var h Hunting
	var began []float64
	for i, m := range p.log {
		if want := (move{float64(30 * (i + 1)), 0, i % 2, 1 - i%2}); m != want {
			t.Fatalf("action %d: %+v, want %+v", i, m, want)
		}
		var yes bool
		if h, yes = h.See(at(m.t), m.to-m.from); yes {
			began = append(began, m.t)
		}
	}
	if len(p.log) != 19 || len(began) != 1 || began[0] != 360 {
		t.Fatalf("%d actions, hunting begins at %v, want 19 and 360 s", len(p.log), began)
	}
	// The last eleven changes are those of 270 to 570 s; an hour after the oldest fewer
	// than eleven are left.
	if until, ok := h.Until(); !ok || until != at(270+3600) {
		t.Errorf("hunts until %v s (%v), want 3870", seconds(until), ok)
	}
}

// A bank whose span is less than what it does to the voltage pumps: 117.5 V without
// it, 121 V with it, on at 118 and off at 120, 60 s. It opens 60 s after closing, and
// closes when the 300 s of lockout are over.
func TestPumpingBank(t *testing.T) {
	c := sheet()
	c.Held = true
	bank := CapacitorControl{Kind: CapacitorVoltage, On: 118, Off: 120, Delay: 60 * Second, Lockout: 300 * Second}
	p := plant{taps: []*TapChanger{&c}, states: make([]TapState, 1), bank: &bank, rise: 3.5,
		source: func(Time) float64 { return 117.5 }}
	p.run(0, 900*Second)
	p.want(t, []move{{60, -1, 0, 1}, {120, -1, 1, 0}, {420, -1, 0, 1}, {480, -1, 1, 0}, {780, -1, 0, 1}, {840, -1, 1, 0}})
}

// Hunting is more than ten changes within 3,600 s, whenever they are.
func TestHunting(t *testing.T) {
	see := func(times ...float64) (h Hunting, began []float64) {
		for i, s := range times {
			var yes bool
			if h, yes = h.See(at(s), 1-i%2*2); yes {
				began = append(began, s)
			}
		}
		return h, began
	}
	spaced := func(n int, gap float64) (out []float64) {
		for i := range n {
			out = append(out, -500+float64(i)*gap)
		}
		return out
	}
	// The first action is no change: eleven actions are ten changes.
	if h, began := see(spaced(11, 10)...); len(began) != 0 || h.Hunts(0) {
		t.Errorf("ten changes hunt at %v", began)
	}
	// Twelve actions 360 s apart: eleven changes within exactly an hour.
	if _, began := see(spaced(12, 360)...); len(began) != 1 || began[0] != -500+11*360 {
		t.Errorf("eleven changes within exactly an hour: hunting begins at %v", began)
	}
	if _, began := see(spaced(40, 360.001)...); len(began) != 0 {
		t.Errorf("eleven changes within more than an hour hunt at %v", began)
	}
	h, began := see(spaced(30, 100)...)
	if len(began) != 1 || began[0] != -500+11*100 {
		t.Errorf("hunting begins at %v, want once, at 600 s", began)
	}
	// The last change was at 2400 s, the oldest of eleven at 1400 s: until 5000 s.
	if !h.Hunts(at(4999.9)) || h.Hunts(at(5000)) {
		until, _ := h.Until()
		t.Errorf("hunts until %v s, want 5000", seconds(until))
	}
	// Many steps in one direction are one.
	var one Hunting
	for i := range 1000 {
		if one, _ = one.See(at(float64(i)), 1); one.Hunts(at(float64(i))) {
			t.Fatal("a device that goes one way hunts")
		}
	}
}
