package profiles

import (
	"fmt"
	"math"
	"math/rand"
	"sort"
	"strings"
	"testing"
	"time"

	"yearflow/sim/tables"
)

// shapeSeries is a series a step apart in a zone.
func shapeSeries(start, step int64, zone *time.Location, values []float64) *Series {
	g := grid{start: start, stamp: start, step: step, n: len(values), zone: zone}
	return newSeries("class", unit{"pu", 0, 1, 1}, tables.Pos{File: "p.csv", Line: 1, Column: 2}, g, values)
}

// TestReconcile: whatever the shape, energies and peak are kept and the order of the
// hours within a month is the shape's, or the reason why not is told.
func TestReconcile(t *testing.T) {
	z := zone(t, "America/Denver")
	start, err := ParseTime("2025-01-01", z)
	if err != nil {
		t.Fatal(err)
	}
	end, err := ParseTime("2026-01-01", z)
	if err != nil {
		t.Fatal(err)
	}
	a := Axis{Start: start, End: end, Step: hour, Zone: z}
	names := MonthsOf(a)
	if len(names) != 12 || names[0] != "2025-01" || names[11] != "2025-12" {
		t.Fatalf("months %v", names)
	}
	made := 0
	for seed := range int64(60) {
		r := rand.New(rand.NewSource(seed))
		values := make([]float64, a.Steps())
		for k := range values {
			values[k] = math.Max(0, 1+math.Sin(float64(k)/24*2*math.Pi)+0.5*math.Cos(float64(k)/8760*2*math.Pi)+0.3*r.Float64()-float64(seed%3)*0.4)
		}
		energies, total := map[string]float64{}, 0.0
		for _, name := range names {
			energies[name] = 500 + 300*r.Float64()
			if seed%5 == 0 && name == "2025-08" {
				energies[name] = 0
			}
			total += energies[name]
		}
		peak := 0.0
		if seed%4 != 0 {
			peak = total / 8760 * (1.05 + 8*r.Float64())
		}
		shape := shapeSeries(start, hour, z, values)
		p, err := Reconcile(shape, energies, peak, a)
		if err != nil {
			if !strings.Contains(err.Error(), "which is more than its peak of") {
				t.Errorf("seed %d: %v", seed, err)
			}
			continue
		}
		made++
		got, highest := map[string]float64{}, 0.0
		byMonth := map[string][]int{}
		for k := range p.Len() {
			from, _ := p.Interval(k)
			got[Month(from, z)] += p.Value(k)
			byMonth[Month(from, z)] = append(byMonth[Month(from, z)], k)
			highest = max(highest, p.Value(k))
			if p.Value(k) < 0 {
				t.Fatalf("seed %d: %v at hour %d", seed, p.Value(k), k)
			}
		}
		for _, name := range names {
			if math.Abs(got[name]-energies[name]) > 1e-9*energies[name] {
				t.Errorf("seed %d, %s: %v kWh, want %v", seed, name, got[name], energies[name])
			}
			order := byMonth[name]
			sort.Slice(order, func(i, j int) bool { return values[order[i]] < values[order[j]] })
			for i := 1; i < len(order); i++ {
				if p.Value(order[i]) < p.Value(order[i-1])*(1-1e-12) {
					t.Fatalf("seed %d, %s: the order of the hours is not the shape's", seed, name)
				}
			}
		}
		if peak > 0 && highest != peak {
			t.Errorf("seed %d: peak %v, want %v", seed, highest, peak)
		}
	}
	if made < 30 {
		t.Errorf("only %d of 60 could be made", made)
	}
}

// TestReconcileByHand: a day of four steps with all three forms.
func TestReconcileByHand(t *testing.T) {
	a := Axis{Start: 0, End: 4 * hour, Step: hour}
	shape := shapeSeries(0, hour, time.UTC, []float64{1, 2, 4, 1})
	for _, c := range []struct {
		energy, peak float64
		want         []float64
	}{
		{16, 0, []float64{2, 4, 8, 2}},
		{16, 8, []float64{2, 4, 8, 2}},
		// λ: s/S sums to 2; 5·(2 + 2λ) = 16 gives 0.6; 5·(0.25 + 0.6·0.75) = 3.5
		{16, 5, []float64{3.5, 4, 5, 3.5}},
		// γ = 2: (1 + 4 + 16 + 1)/16 = 1.375
		{13.75, 10, []float64{0.625, 2.5, 10, 0.625}},
		{16, 4, []float64{4, 4, 4, 4}},
	} {
		p, err := Reconcile(shape, map[string]float64{"": c.energy}, c.peak, a)
		if err != nil {
			t.Fatal(err)
		}
		for k, want := range c.want {
			if math.Abs(p.Value(k)-want) > 1e-9 {
				t.Errorf("%v kWh, peak %v: step %d is %v, want %v", c.energy, c.peak, k, p.Value(k), want)
			}
		}
	}
}

// TestReconcileCannot: every reason is told.
func TestReconcileCannot(t *testing.T) {
	a := Axis{Start: 0, End: 4 * hour, Step: hour}
	whole := func(v float64) map[string]float64 { return map[string]float64{"": v} }
	for _, c := range []struct {
		values []float64
		kwh    map[string]float64
		peak   float64
		want   string
	}{
		{[]float64{1, 2, 4, 1}, whole(17), 4, `shape "class": the period has 17 kWh, which is more than its peak of 4 kW all the time (16 kWh)`},
		{[]float64{1, 4, 4, 1}, whole(16), 9, `the period has 16 kWh, which is less than its peak of 9 kW for the 2 h of the shape's highest value (18 kWh)`},
		{[]float64{0, 0, 0, 0}, whole(1), 0, `the shape is zero all through the period, which has 1 kWh`},
		{[]float64{0, 1, 0, 0}, whole(0), 3, `no month has energy, and the peak is 3 kW`},
		{[]float64{1, -1, 0, 0}, whole(1), 0, `shape "class" is -1 at 1970-01-01T01:00:00+00:00; a shape must not be negative`},
		{[]float64{1, 1, 0, 0}, whole(-1), 0, `the energy of the period is -1 kWh`},
		{[]float64{1, 1, 0, 0}, whole(math.Inf(1)), 0, `the energy of the period is +Inf kWh`},
		{[]float64{1, 1, 0, 0}, whole(1), math.NaN(), `the peak is NaN kW`},
		{[]float64{1, 1, 0, 0}, map[string]float64{"": 1, "1970-01": 1}, 0, `for the period and by month`},
		{[]float64{1, 1, 0, 0}, map[string]float64{"1970-01": 1}, 0, `no value at 1970-01-01T04:00:00+00:00`},
	} {
		_, err := Reconcile(shapeSeries(0, hour, time.UTC, c.values), c.kwh, c.peak, a)
		if err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("got  %v\nwant %s", err, c.want)
		}
	}
	month := make([]float64, 31*24)
	for k := range month {
		month[k] = 1 + float64(k%24)
	}
	shape := shapeSeries(0, hour, time.UTC, month)
	if _, err := Reconcile(shape, map[string]float64{"1970-02": 1}, 0, a); err == nil || !strings.Contains(err.Error(), "the energy of 1970-01 is missing") {
		t.Errorf("got %v", err)
	}
	p, err := Reconcile(shape, map[string]float64{"1970-01": 930}, 0, a)
	if err != nil || fmt.Sprint(p.Len()) != "744" || math.Abs(p.Value(3)-4*0.1) > 1e-12 { // 930 kWh / (31 × 300)
		t.Errorf("a part of a month: %v, %v", p, err)
	}
}
