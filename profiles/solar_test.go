package profiles

import (
	"fmt"
	"math"
	"strings"
	"testing"
	"time"
)

func yearAxis(t *testing.T, year int, z *time.Location) Axis {
	t.Helper()
	start, err1 := ParseTime(fmt.Sprintf("%d-01-01", year), z)
	end, err2 := ParseTime(fmt.Sprintf("%d-01-01", year+1), z)
	if err1 != nil || err2 != nil {
		t.Fatal(err1, err2)
	}
	return Axis{Start: start, End: end, Step: hour, Zone: z}
}

func arrayAt(s Site) Array {
	a := DefaultArray(s)
	a.DCKW, a.RatingKVA = 10, 8
	return a
}

// clearYear returns the output of an array under a clear sky.
func clearYear(t *testing.T, s Site, a Array) (Solar, *Sunlight) {
	t.Helper()
	ax := yearAxis(t, 2025, time.UTC)
	w := ClearSkyWeather(s, ax, 15)
	l, err := w.Over(ax)
	if err != nil {
		t.Fatal(err)
	}
	return l.Solar("pv", a), l
}

func energy(s *Series, from, to int64) float64 {
	sum := 0.0
	for k := range s.Len() {
		if a, b := s.Interval(k); a >= from && b <= to {
			sum += s.Value(k) * float64(b-a) / float64(hour)
		}
	}
	return sum
}

func TestSolarYear(t *testing.T) {
	a := arrayAt(denverSite)
	s, l := clearYear(t, denverSite, a)
	start, end := s.AC.Span()
	clipped := 0
	for k, d := range l.daylight {
		ac, available := s.AC.Value(k), s.Available.Value(k)
		switch {
		case d.Fraction == 0 && (ac != 0 || available != 0):
			t.Fatalf("hour %d: %v kW at night", k, ac)
		case ac < 0 || ac > a.RatingKVA || available < ac:
			t.Fatalf("hour %d: %v of %v kW", k, ac, available)
		case available > a.RatingKVA && ac == a.RatingKVA:
			clipped++
		case d.Fraction == 1 && ac != available:
			t.Fatalf("hour %d: %v of %v kW", k, ac, available)
		case d.Fraction == 1 && d.Zenith < 80 && ac <= 0:
			t.Fatalf("hour %d: nothing at zenith %v", k, d.Zenith)
		}
	}
	if clipped == 0 {
		t.Error("10 kW of modules on 8 kVA are never clipped under a clear sky")
	}
	// A clear year in Denver gives some 2000 kWh per kW of modules; the real year, with
	// its clouds, about 1500 (common knowledge of the trade).
	if y := energy(s.Available, start, end) / a.DCKW; y < 1800 || y > 2400 {
		t.Errorf("%.0f kWh a kW in a clear year", y)
	}
	june := energy(s.AC, instant(t, "2025-06-01T07:00:00Z"), instant(t, "2025-07-01T07:00:00Z"))
	december := energy(s.AC, instant(t, "2025-12-01T07:00:00Z"), instant(t, "2025-12-31T07:00:00Z"))
	if !(june > 1.3*december) {
		t.Errorf("June %.0f kWh, December %.0f", june, december)
	}
	// The highest hour of a day lies around apparent noon, even on both sides of it.
	noon := instant(t, "2025-04-15T19:00:00Z") // 12:00 of standard time at 105° W
	k := int((noon - start) / hour)
	// The equation of time is nearly nothing that day.
	near(t, "around noon", s.Available.Value(k-1), s.Available.Value(k), 0.02)
	near(t, "morning and evening", s.Available.Value(k-5), s.Available.Value(k+4), 0.1)
	if s.Available.Value(k-3) >= s.Available.Value(k) || s.Available.Value(k+3) >= s.Available.Value(k) {
		t.Error("not highest at noon")
	}
	// Towards the east the morning is better.
	a.Azimuth, a.Tilt = 90, 40
	s, _ = clearYear(t, denverSite, a)
	if !(s.Available.Value(k-4) > 1.5*s.Available.Value(k+3)) {
		t.Errorf("east: %v in the morning, %v in the evening", s.Available.Value(k-4), s.Available.Value(k+3))
	}
}

// The year is the mirror of itself on the other half of the globe, half a year later;
// perihelion in January makes the southern one a little better.
func TestSolarHemispheres(t *testing.T) {
	north, south := Site{40, 0, 0}, Site{-40, 0, 0}
	n, _ := clearYear(t, north, arrayAt(north))
	s, _ := clearYear(t, south, arrayAt(south))
	start, end := n.AC.Span()
	a, b := energy(n.Available, start, end), energy(s.Available, start, end)
	near(t, "south over north", b/a, 1, 0.03)
	half := start + 182*day
	winter, summer := energy(n.Available, start, start+30*day), energy(n.Available, half, half+30*day)
	southSummer, southWinter := energy(s.Available, start, start+30*day), energy(s.Available, half, half+30*day)
	if !(summer > 1.3*winter && southSummer > 1.3*southWinter) {
		t.Errorf("north %v, %v; south %v, %v", winter, summer, southSummer, southWinter)
	}
	// An array that faces away from the equator has less, and so has one on a wall.
	wrong := arrayAt(north)
	wrong.Azimuth = 0
	w, _ := clearYear(t, north, wrong)
	if !(energy(w.Available, start, end) < 0.85*a) {
		t.Error("facing north is as good as facing south")
	}
	polar := Site{78, 15, 0}
	p, _ := clearYear(t, polar, arrayAt(polar))
	if e := energy(p.Available, instant(t, "2025-11-15T00:00:00Z"), instant(t, "2026-01-01T00:00:00Z")); e != 0 {
		t.Errorf("polar night: %v kWh", e)
	}
	for _, k := range []int{24 * 170, 24*170 + 12} {
		if p.Available.Value(k) <= 0 {
			t.Errorf("midnight sun: hour %d gives nothing", k)
		}
	}
}

// Solar series go through a Sampler like any other, over both odd days of the clock.
func TestSolarThroughSampler(t *testing.T) {
	z := zone(t, "America/Denver")
	ax := yearAxis(t, 2025, z)
	ax.Step = 15 * minute
	w := ClearSkyWeather(denverSite, ax, 15)
	s, err := SolarSeries("pv", w, arrayAt(denverSite), ax)
	if err != nil {
		t.Fatal(err)
	}
	sampler, err := NewSampler(ax, []*Series{s.AC, s.Available})
	if err != nil {
		t.Fatal(err)
	}
	var v [2]float64
	sum := 0.0
	for i := range ax.Steps() {
		sampler.Step(v[:], i)
		sum += v[0] / 4
	}
	near(t, "energy", sum, energy(s.AC, ax.Start, ax.End), 1e-6)
	// 8 March and 9 March: noon stays where it is by the sun and moves on the clock.
	for date, want := range map[string]string{"2025-03-08": "12:", "2025-03-09": "13:", "2025-11-01": "12:", "2025-11-02": "11:"} {
		from, err := ParseTime(date, z)
		if err != nil {
			t.Fatal(err)
		}
		best, when := 0.0, int64(0)
		for u := from + 6*hour; u < from+20*hour; u += 15 * minute {
			i, _ := ax.Index(u)
			if sampler.Step(v[:], i); v[1] > best {
				best, when = v[1], u
			}
		}
		if got := at(when, z).Format("15:04"); !strings.HasPrefix(got, want) {
			t.Errorf("%s: highest at %s, want %s", date, got, want)
		}
	}
	if n := testing.AllocsPerRun(100, func() { sampler.Step(v[:], 20000) }); n != 0 {
		t.Errorf("%v allocations a step", n)
	}
	p, d := WeatherPoint{800, 800, 100, 25, 2}, DaylightOver(ax.Start+12*hour, ax.Start+13*hour, denverSite)
	a := arrayAt(denverSite)
	if n := testing.AllocsPerRun(100, func() { v[0], v[1] = a.Output(p, d) }); n != 0 {
		t.Errorf("%v allocations an output", n)
	}
}

func TestClearSkyIsAnnounced(t *testing.T) {
	ax := yearAxis(t, 2025, zone(t, "America/Denver"))
	w := ClearSkyWeather(denverSite, ax, 15)
	if len(w.Assumed) != 1 || !strings.Contains(w.Assumed[0], "no weather is given: a clear sky on every day") {
		t.Errorf("assumed %q", w.Assumed)
	}
	for k := range w.Len() {
		p := w.Point(k)
		from, to := w.Interval(k)
		d := DaylightOver(from, to, denverSite)
		if d.Fraction == 0 && (p.GHI != 0 || p.DNI != 0 || p.DHI != 0) || p.Temperature != 15 {
			t.Fatalf("%s: %+v", Format(from, nil), p)
		}
		near(t, "closure", p.DNI*math.Cos(d.Zenith*radians)+p.DHI, p.GHI, 1e-9)
	}
}

func TestSolarCoverage(t *testing.T) {
	start := instant(t, "2025-06-01T00:00:00Z")
	week := mustOpenWeather(t, plainHeader+weatherRows(start, 168, hour, 0, denverSite, nil), WeatherOptions{Site: &denverSite})
	a := arrayAt(denverSite)
	ax := Axis{Start: start + 10*minute, End: start + 160*hour, Step: minute}
	s, err := SolarSeries("pv", week, a, ax)
	if err != nil {
		t.Fatal(err)
	}
	if from, to := s.AC.Span(); from > ax.Start || to < ax.End {
		t.Errorf("covers %s to %s", Format(from, nil), Format(to, nil))
	}
	ax.End = start + 169*hour
	if _, err = SolarSeries("pv", week, a, ax); err == nil || !strings.Contains(err.Error(), "no weather at 2025-06-08T00:00:00") {
		t.Errorf("a week for longer: %v", err)
	}
	ax.End = ax.Start
	if _, err = SolarSeries("pv", week, a, ax); err == nil {
		t.Error("an empty period is accepted")
	}
	a.Tilt = -5
	if _, err = SolarSeries("pv", week, a, ax); err == nil || !strings.Contains(err.Error(), "pv: tilt: want") {
		t.Errorf("a tilt of -5: %v", err)
	}
	// A measured year from July stands for any other year, the leap day included.
	july := instant(t, "2022-07-01T00:00:00Z")
	year := mustOpenWeather(t, plainHeader+weatherRows(july, 8760, hour, 0, denverSite, nil), WeatherOptions{Site: &denverSite})
	l, err := year.Over(yearAxis(t, 2024, time.UTC))
	if err != nil {
		t.Fatal(err)
	}
	if len(l.points) != 8784 {
		t.Fatalf("%d hours", len(l.points))
	}
	for i, p := range l.points {
		u := at(l.grid.start+int64(i)*hour-7*hour, nil) // days are matched by standard time
		y, d := 2022, u.Day()
		if u.Month() < 7 {
			y = 2023
		}
		if u.Month() == 2 && d == 29 {
			d = 28
		}
		k := int((time.Date(y, u.Month(), d, u.Hour()+7, 0, 0, 0, time.UTC).UnixNano() - july) / hour)
		if k < 0 || k >= 8760 {
			k = int(floorMod(int64(k), 8760)) // the evening before 1 July stands at the other end
		}
		if p != year.points[k] {
			t.Fatalf("%s: not the weather of hour %d", u, k)
		}
	}
	if t1 := l.Temperature("air"); t1.Unit != "degC" || t1.Value(5) != l.points[5].Temperature || t1.Len() != 8784 {
		t.Errorf("temperature: %s, %v", t1.Unit, t1.Value(5))
	}
}

// Under clouds the year is the smaller, and all of the light that was read is used.
func TestSolarUnderCloud(t *testing.T) {
	a := arrayAt(denverSite)
	a.Tilt, a.Losses, a.TempCoefficient, a.InverterEfficiency, a.RatingKVA = 0, 0, 0, 100, 0
	w := mustOpenWeather(t, tmy3File(denverSite, -7), WeatherOptions{})
	ax := yearAxis(t, 1985, zone(t, "America/Denver")) // the sun of the first month's year
	s, err := SolarSeries("pv", w, a, ax)
	if err != nil {
		t.Fatal(err)
	}
	light := 0.0
	for _, p := range w.points {
		light += p.GHI
	}
	// A flat array without losses is an instrument for GHI: 10 kW at 1000 W/m². What the
	// limits of sunrise and another year's sun cost is small.
	near(t, "flat", energy(s.AC, ax.Start, ax.End)/(light/1000*10), 1, 0.003)
	if math.IsNaN(s.AC.Value(0)) {
		t.Error("not a number")
	}
}
