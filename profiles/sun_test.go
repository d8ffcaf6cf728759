package profiles

import (
	"encoding/csv"
	"math"
	"os"
	"strconv"
	"testing"
)

// near fails where got is further than within from want.
func near(t *testing.T, what string, got, want, within float64) {
	t.Helper()
	if !(math.Abs(got-want) <= within) {
		t.Errorf("%s: got %.6f, want %.6f within %g", what, got, want, within)
	}
}

// The sites of testdata/sun-reference.mjs.
var referenceSites = []Site{{39.742476, -105.1786, 1830.14}, {-33.87, 151.21, 40}, {69.65, 18.96, 10}, {0.1, -78.5, 2850}, {51.48, 0, 30}, {-54.8, -68.3, 20}}

// The worked example of I. Reda and A. Andreas, Solar Position Algorithm for Solar
// Radiation Applications, NREL/TP-560-34302, 2003, appendix A.5 (values recalled from
// memory): 17 October 2003, 12:30:30 at UTC-7.
func TestSunPublishedExample(t *testing.T) {
	when, err := ParseTime("2003-10-17T12:30:30-07:00", nil)
	if err != nil {
		t.Fatal(err)
	}
	sun := Sun(when, Site{39.742476, -105.1786, 1830.14})
	// The example gives its own pressure and temperature.
	seen := sun.TrueZenith - Refraction(90-sun.TrueZenith, 820, 11)
	near(t, "zenith", seen, 50.11162, 0.01)
	near(t, "azimuth", sun.Azimuth, 194.34024, 0.01)
	near(t, "equation of time", sun.EquationOfTime, 14.6415, 0.04) // 0.01°
	sun.Zenith = seen
	near(t, "incidence", Plane{Tilt: 30, Azimuth: 170}.Incidence(sun), 25.18700, 0.01)
}

// Worked example 25.a of J. Meeus, Astronomical Algorithms (recalled from memory): 13
// October 1992, 0h TD: declination -7.78507°, distance 0.99766 au.
func TestSunMeeusExample(t *testing.T) {
	when := instant(t, "1992-10-13T00:00:00Z")
	sun := Sun(when, Site{})
	near(t, "declination", sun.Declination, -7.78507, 0.0005)
	near(t, "distance", math.Sqrt(SolarConstant/sun.Extraterrestrial), 0.99766, 0.00001)
	// Example 28.b of the same book: the equation of time is 13 min 42.7 s that day.
	near(t, "equation of time", sun.EquationOfTime, 13+42.7/60, 0.04) // 0.01°
}

// A year of hours, and a century, against a general-purpose library of astronomy:
// testdata/sun-reference.mjs says which. Between two directions it is their angle that
// counts: near the zenith the azimuth says little.
func TestSunAgainstReference(t *testing.T) {
	f, err := os.Open("testdata/sun-reference.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	r := csv.NewReader(f)
	r.Comment = '#'
	rows, err := r.ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	if len(rows) < 9600 {
		t.Fatalf("got %d rows", len(rows))
	}
	worst, sum := 0.0, 0.0
	for _, row := range rows[1:] {
		site, err1 := strconv.Atoi(row[1])
		elevation, err2 := strconv.ParseFloat(row[2], 64)
		azimuth, err3 := strconv.ParseFloat(row[3], 64)
		if err1 != nil || err2 != nil || err3 != nil {
			t.Fatalf("not numbers: %q", row)
		}
		sun := Sun(instant(t, row[0]+":00:00Z"), referenceSites[site])
		d := angleBetween(90-sun.TrueZenith, sun.Azimuth, elevation, azimuth)
		if d > 0.02 {
			t.Errorf("%s at site %d: got elevation %.3f, azimuth %.3f; want %.3f, %.3f (%.3f° apart)",
				row[0], site, 90-sun.TrueZenith, sun.Azimuth, elevation, azimuth, d)
		}
		worst, sum = max(worst, d), sum+d
	}
	t.Logf("%d positions: worst %.4f°, mean %.4f°", len(rows)-1, worst, sum/float64(len(rows)-1))
}

// angleBetween returns the angle between two directions in degrees.
func angleBetween(elevation1, azimuth1, elevation2, azimuth2 float64) float64 {
	e1, e2 := elevation1*radians, elevation2*radians
	d := (azimuth1 - azimuth2) * radians
	h := math.Pow(math.Sin((e1-e2)/2), 2) + math.Cos(e1)*math.Cos(e2)*math.Pow(math.Sin(d/2), 2)
	return 2 * math.Asin(math.Sqrt(h)) / radians
}

// spencer is another way to the same quantities, by the number of the day (J. W.
// Spencer, Search 2, 1971): eccentricity, declination in degrees, equation of time in minutes.
func spencer(n int) (eccentricity, declination, equation float64) {
	g := 2 * math.Pi * float64(n-1) / 365
	sin := func(k float64) float64 { return math.Sin(k * g) }
	cos := func(k float64) float64 { return math.Cos(k * g) }
	eccentricity = 1.00011 + 0.034221*cos(1) + 0.00128*sin(1) + 0.000719*cos(2) + 0.000077*sin(2)
	declination = (0.006918 - 0.399912*cos(1) + 0.070257*sin(1) - 0.006758*cos(2) + 0.000907*sin(2) - 0.002697*cos(3) + 0.00148*sin(3)) / radians
	equation = 229.18 * (0.000075 + 0.001868*cos(1) - 0.032077*sin(1) - 0.014615*cos(2) - 0.040849*sin(2))
	return eccentricity, declination, equation
}

func TestSunAgainstSpencer(t *testing.T) {
	// The values of the series itself, by pencil.
	for _, c := range []struct {
		n       int
		e, d, q float64
	}{{1, 1.03505, -23.0586, -2.904}, {172, 0.96744, 23.4521, -1.328}, {290, 1.00709, -8.9591, 14.819}} {
		e, d, q := spencer(c.n)
		near(t, "Spencer's eccentricity", e, c.e, 1e-5)
		near(t, "Spencer's declination", d, c.d, 1e-4)
		near(t, "Spencer's equation of time", q, c.q, 1e-3)
	}
	// By whole days the series is off by up to half a degree and a minute.
	for n := 1; n <= 365; n++ {
		sun := Sun(instant(t, "2025-01-01T12:00:00Z")+int64(n-1)*day, Site{})
		e, d, q := spencer(n)
		near(t, "eccentricity", sun.Extraterrestrial/SolarConstant, e, 0.001)
		near(t, "declination", sun.Declination, d, 0.6)
		near(t, "equation of time", sun.EquationOfTime, q, 1)
	}
}

// The closed form of Kasten and Young 1989; 37.92 at the horizon is published.
func TestAirMass(t *testing.T) {
	for z, want := range map[float64]float64{0: 0.9997, 30: 1.1540, 60: 1.9943, 75: 3.8129, 80: 5.5860, 85: 10.3058, 88: 19.4332, 90: 37.9196, 100: 37.9196} {
		near(t, "air mass", AirMass(z), want, 1e-4)
	}
}

func TestRefraction(t *testing.T) {
	// Meeus, example 16.a: at a true elevation of 33.24 arcminutes the sun is lifted by
	// 24.618 arcminutes, at 1010 mbar and 10 °C (recalled from memory).
	near(t, "near the horizon", Refraction(33.24/60, 1010, 10), 24.618/60, 0.001)
	near(t, "half way up", Refraction(45, 1010, 10), 1.0/60, 0.001)
	near(t, "thin air", Refraction(10, 505, 10), Refraction(10, 1010, 10)/2, 1e-12)
	near(t, "zenith", Refraction(90, 1010, 10), 0, 1e-12)
	near(t, "below the horizon", Refraction(-1, 1010, 10), 0, 0)
	// Standard atmosphere, ISO 2533: 794.95 mbar at 2000 m.
	near(t, "pressure", pressureAt(2000), 794.95, 0.05)
}

// The day is even around its middle, north and south of the line, and the sun is in
// the north at noon in the south.
func TestSunSymmetry(t *testing.T) {
	for _, s := range []Site{{40, -105, 1600}, {-34, 151, 0}, {0, 0, 0}, {60, 25, 100}} {
		for d := int64(0); d < 365; d += 13 {
			// Apparent noon: the clock's noon at the meridian less the equation of time.
			noon := instant(t, "2025-01-01T12:00:00Z") + d*day - int64(s.Longitude*240)*second
			noon -= int64(Sun(noon, s).EquationOfTime * float64(minute))
			top := Sun(noon, s)
			near(t, "noon elevation", 90-top.TrueZenith, 90-math.Abs(s.Latitude-top.Declination), 0.01)
			if math.Abs(s.Latitude) > 24 {
				want := 180.0
				if s.Latitude < 0 {
					want = 0
				}
				near(t, "noon azimuth", math.Remainder(top.Azimuth-want, 360), 0, 0.1)
			}
			for h := int64(1); h < 12; h++ {
				morning, evening := Sun(noon-h*hour, s), Sun(noon+h*hour, s)
				// The declination moves by up to 0.4° a day.
				near(t, "elevation", morning.TrueZenith, evening.TrueZenith, 0.4)
				if morning.Zenith < 88 && !(morning.Azimuth < 180) || evening.Zenith < 88 && !(evening.Azimuth > 180) {
					t.Errorf("at %v: morning azimuth %.1f, evening %.1f", s, morning.Azimuth, evening.Azimuth)
				}
				if morning.TrueZenith < top.TrueZenith || evening.TrueZenith < top.TrueZenith {
					t.Errorf("at %v: higher than at noon", s)
				}
			}
		}
	}
}

func TestDaylight(t *testing.T) {
	denver := Site{39.74, -104.99, 1609}
	length := func(date string, s Site, step int64) float64 {
		from := instant(t, date+"T00:00:00Z")
		sum := 0.0
		for u := from; u < from+day; u += step {
			d := DaylightOver(u, u+step, s)
			if d.Fraction < 0 || d.Fraction > 1 || d.Fraction > 0 && d.Zenith > 90 {
				t.Fatalf("%s: fraction %v at zenith %v", Format(u, nil), d.Fraction, d.Zenith)
			}
			sum += d.Fraction * float64(step) / float64(hour)
		}
		return sum
	}
	// Almanac: the longest day in Denver is 14 h 59 min, the shortest 9 h 21 min
	// (recalled from memory); an almanac takes the sun's upper edge at sea level, worth 3 min or so.
	near(t, "longest day", length("2025-06-21", denver, hour), 14.98, 0.1)
	near(t, "shortest day", length("2025-12-21", denver, hour), 9.35, 0.1)
	near(t, "steps do not matter", length("2025-03-03", denver, hour), length("2025-03-03", denver, minute), 0.002)
	tromso := Site{69.65, 18.96, 10}
	near(t, "polar night", length("2025-12-21", tromso, hour), 0, 0)
	near(t, "midnight sun", length("2025-06-21", tromso, hour), 24, 0)
	// In the hour after sunrise the middle of the lit part is later than the half hour.
	for u := instant(t, "2025-06-01T08:00:00Z"); ; u += hour {
		if d := DaylightOver(u, u+hour, denver); d.Fraction > 0 {
			if middle := Sun(u+hour/2, denver); d.Fraction >= 1 || d.Zenith >= middle.Zenith {
				t.Errorf("sunrise: fraction %v, zenith %v, at the half hour %v", d.Fraction, d.Zenith, middle.Zenith)
			}
			break
		}
	}
	// A sun that dips below the horizon, and one that only looks over it, within an hour.
	for lat := 65.0; lat < 69; lat += 0.05 {
		s := Site{lat, 0, 0}
		for _, date := range []string{"2025-06-11T23:00:00Z", "2025-12-21T11:00:00Z"} {
			from := instant(t, date)
			one := DaylightOver(from, from+2*hour, s)
			sum := 0.0
			for u := from; u < from+2*hour; u += 10 * second {
				if Sun(u+5*second, s).Zenith < 90 {
					sum += 10.0 / 7200
				}
			}
			// An interval whose three probes are alike is taken as they are.
			if one.Fraction > 0 && one.Fraction < 1 {
				near(t, "fraction", one.Fraction, sum, 0.01)
			}
		}
	}
}
