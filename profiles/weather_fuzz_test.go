package profiles

import (
	"testing"
	"testing/fstest"

	"yearflow/sim/tables"
)

// readable checks what holds for any file: a list of faults with place and text, or
// weather of finite numbers that can be laid over its own time.
func readable(t *testing.T, data []byte, o WeatherOptions) {
	w, err := OpenWeather(fstest.MapFS{"w.csv": {Data: data}}, "w.csv", o)
	if err != nil {
		faults, ok := err.(tables.Faults)
		if !ok || len(faults) == 0 || len(faults) > maxFaults+20 {
			t.Fatalf("got %T with %d faults", err, len(faults))
		}
		for _, one := range faults {
			if one.Pos.File != "w.csv" || one.Text == "" {
				t.Fatalf("a fault without place or text: %v", one)
			}
		}
		return
	}
	for k := range w.Len() {
		p := w.Point(k)
		for _, v := range []float64{p.GHI, p.DNI, p.DHI, p.Wind} {
			if v-v != 0 || v < 0 {
				t.Fatalf("interval %d: %+v", k, p)
			}
		}
		if p.Temperature-p.Temperature != 0 {
			t.Fatalf("interval %d: %+v", k, p)
		}
	}
	start, end := w.Span()
	a := DefaultArray(w.Site)
	a.DCKW, a.RatingKVA = 10, 8
	s, err := SolarSeries("pv", w, a, Axis{Start: start, End: end, Step: w.StepLength()})
	if err != nil {
		t.Fatal(err)
	}
	if low, high := s.AC.Range(); low < 0 || high > 8 || high != high {
		t.Fatalf("output from %v to %v", low, high)
	}
}

func FuzzWeather(f *testing.F) {
	for _, s := range []string{
		plainHeader + "2025-06-01T17:00Z,800,20,2\n2025-06-01T18:00Z,850.5,25,4\n2025-06-01T21:00Z,,25,-9900\n",
		"time;dni [kW/m2];dhi [W/m2];latitude [deg];longitude [deg];elevation [ft]\n2025-06-01T12:00;0,8;100;-33,9;151,2;100\n2025-06-01T12:30;NA;110\n",
		"time,ghi [W/m2],note,humidity [%]\n2025-11-02T01:00-07:00,0,a,5\n2025-11-02T02:00-07:00,-3,\"b,c\",6\n",
		clearRows(60, func(i int, _ []string) bool { return i%7 != 5 }),
		"time", "\xff\xfe", "\"", "time,ghi [W/m2]\n1800-01-01,5\n2200-01-01,5\n", "time,ghi [W/m2]\n2025-01-01T00:00:00.000000001,1\n2025-01-01T00:00:00.000000002,1\n",
	} {
		f.Add([]byte(s), uint8(0))
		f.Add([]byte(s), uint8(1))
	}
	f.Fuzz(func(t *testing.T, data []byte, stamped uint8) {
		readable(t, data, WeatherOptions{Site: &denverSite, Stamped: []string{"start", "end", "instant"}[stamped%3]})
	})
}

// FuzzTMY3 lays a mutated head over the rest of a good file: mutating all 8,760 rows
// would hardly ever reach behind the rows.
func FuzzTMY3(f *testing.F) {
	file := tmy3File(denverSite, -7)
	head := len("724699,\"BRIDGE, FIELD\",CO,-7.0,39.740,-104.990,1609\n") + len(tmy3Header)
	f.Add([]byte(file[:head+400]), true)
	f.Add([]byte(file[:head+400]), false)
	f.Add([]byte("1,a,b,5.5,28.6,77.2,200\n"+tmy3Header+"01/01/1990,01:00,0,0,-9900,0,0,0,0,0,0,0,0,1\n"), true)
	f.Add([]byte("1,a,b,0,0,0,0\nDate (MM/DD/YYYY)\n"), false)
	f.Fuzz(func(t *testing.T, data []byte, rest bool) {
		if rest {
			data = append(append([]byte(nil), data...), file[head:]...)
		}
		readable(t, data, WeatherOptions{})
	})
}
