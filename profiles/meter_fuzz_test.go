package profiles

import (
	"math"
	"testing"
	"testing/fstest"
	"time"

	"yearflow/sim/tables"
)

// FuzzMeters: no file panics; one that is taken gives finite power on a regular grid
// whose books close; every fault and warning has a place and a text; and rows in
// another order of files give the same as one file twice over.
func FuzzMeters(f *testing.F) {
	for _, s := range []string{
		"time,meter,value [kWh]\n2025-01-01T00:00,A,1\n2025-01-01T01:00,A,2\n2025-01-01T04:00,A,2\n",
		"time,meter,value [kWh],q [kvarh]\n2025-01-01T00:00,A,1,\n2025-01-01T00:15,A,,2\n2025-01-01T00:30,A,3,4\n2025-01-01T00:00,B,1,1\n",
		"time,A [kW],B [W],A [kvar]\n2025-11-02T01:00,1,2,3\n2025-11-02T01:30,1,2,\n2025-11-02T01:00,5,-6,7\n2025-11-02T01:30,0,0,0\n2025-11-02T02:00,0,0,0\n",
		"time;meter;value [MWh]\r\n2025-03-09T01:45;A;1,5\r\n2025-03-09T02:00;A;\r\n2025-03-09T03:00;A;2,5\r\n",
		"time,meter,value [kWh]\n2025-01-01T00:00,A,99990\n2025-01-01T00:15,A,99999\n2025-01-01T00:30,A,5\n2025-01-01T01:30,A,9\n2025-01-01T01:45,A,2\n",
		"time,meter,value [kWh]\n2025-01-01T00:00Z,\"A\"\"1\",1\n2025-01-01T01:00Z,\"A\"\"1\",1\n2025-01-01T01:00Z,\"A\"\"1\",2\n",
		"time,meter,value [kW]\n2025-01-05T00:00,A,1\n2025-01-06T00:00,A,9e14\n2025-01-05T00:30,A,-1\n",
		"time", "\x1f\x8b", "\xff\xfe", ",,,", "time,meter\n", "time,A [kWh]\n",
	} {
		for mode := range uint8(8) {
			f.Add([]byte(s), mode)
		}
	}
	denver := zone(f, "America/Denver")
	f.Fuzz(func(t *testing.T, data []byte, mode uint8) {
		b := MeterBlock{Files: []string{"m.csv"}, Zone: denver}
		if mode&1 != 0 {
			b.Layout = "wide"
		}
		if mode&2 != 0 {
			b.Values = "register"
		}
		if mode&4 != 0 {
			b.Stamped, b.Zone, b.Net, b.Unit = "end", nil, true, "kWh"
		}
		set, err := OpenMeters(fstest.MapFS{"m.csv": {Data: data}}, []MeterBlock{b}, "", MeterRules{})
		if err != nil {
			faults, ok := err.(tables.Faults)
			if !ok || len(faults) == 0 {
				t.Fatalf("got %T with %d faults", err, len(faults))
			}
			checkPlaces(t, faults)
			return
		}
		checkPlaces(t, set.Warnings)
		added := make(map[string]float64)
		for _, one := range set.Mended {
			if one.Count < 1 || one.To < one.From || one.Rule == "" || one.Energy != one.Energy {
				t.Fatalf("mended %+v", one)
			}
			if len(one.Rule) < 5 || one.Rule[:5] != "kvar " {
				added[one.Meter] += one.Energy
			}
		}
		for _, m := range set.Meters() {
			largest := 0.0
			for k := range m.Len() {
				v := m.Value(k)
				if v-v != 0 {
					t.Fatalf("%s has %v at %d", m.Name, v, k)
				}
				largest = max(largest, math.Abs(v))
			}
			for _, v := range m.kvar {
				if v-v != 0 {
					t.Fatalf("%s has %v kvar", m.Name, v)
				}
			}
			if off := math.Abs(m.Before + added[m.Name] - m.After); off > 1e-6*(largest*float64(m.Len())+math.Abs(m.Before)) {
				t.Fatalf("%s: before %v, added %v, after %v", m.Name, m.Before, added[m.Name], m.After)
			}
		}
		start, end := int64(math.MaxInt64), int64(math.MinInt64)
		var ties []Tie
		for _, m := range set.Meters() {
			s, e := m.Span()
			start, end = min(start, s), max(end, e)
			ties = append(ties, Tie{Meter: m.Name, Load: "L", Multiplier: 1})
		}
		if len(ties) == 0 || end-start > 40*day {
			return
		}
		loads, err := set.Loads(ties, Axis{Start: start, End: end, Step: hour, Zone: time.UTC})
		if err != nil || len(loads) != 1 {
			t.Fatalf("loads %v, %v", loads, err)
		}
	})
}

func checkPlaces(t *testing.T, list tables.Faults) {
	t.Helper()
	for _, one := range list {
		if one.Pos.File != "m.csv" || one.Text == "" {
			t.Fatalf("a fault without place or text: %+v", one)
		}
	}
}

// FuzzReconcile: a profile keeps its energy and its peak, or there is a reason.
func FuzzReconcile(f *testing.F) {
	f.Add([]byte{1, 2, 4, 1}, 16.0, 5.0)
	f.Add([]byte{0, 0, 255}, 1e-9, 1e9)
	f.Add([]byte{7, 7, 7}, 21.0, 0.0)
	f.Fuzz(func(t *testing.T, shape []byte, kwh, peak float64) {
		if len(shape) == 0 || len(shape) > 500 || kwh > 1e12 || peak > 1e12 || kwh < 1e-9 || peak != 0 && peak < 1e-9 {
			return
		}
		values := make([]float64, len(shape))
		for k, b := range shape {
			values[k] = float64(b)
		}
		a := Axis{Start: 0, End: int64(len(values)) * hour, Step: hour}
		p, err := Reconcile(shapeSeries(0, hour, time.UTC, values), map[string]float64{"": kwh}, peak, a)
		if err != nil {
			return
		}
		sum, highest := 0.0, 0.0
		for k := range p.Len() {
			v := p.Value(k)
			if !(v >= 0) {
				t.Fatalf("step %d is %v", k, v)
			}
			sum, highest = sum+v, max(highest, v)
		}
		if math.Abs(sum-kwh) > 1e-9*kwh || peak > 0 && highest != peak {
			t.Fatalf("%v kWh, want %v; peak %v, want %v", sum, kwh, highest, peak)
		}
	})
}
