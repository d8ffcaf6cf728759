package profiles

import (
	"fmt"
	"math"
	"strings"
	"testing"
)

// tmy3Header has the columns that matter between others, as the manual orders them.
const tmy3Header = "Date (MM/DD/YYYY),Time (HH:MM),ETR (W/m^2),ETRN (W/m^2),GHI (W/m^2),GHI source,GHI uncert (%),DNI (W/m^2),DNI source,DNI uncert (%)," +
	"DHI (W/m^2),DHI source,DHI uncert (%),Dry-bulb (C),Dry-bulb source,Dry-bulb uncert (code),Wspd (m/s),Wspd source,Wspd uncert (code),Alb (unitless)\n"

// tmy3File writes the light of a site under moving cloud, months from 1985 to 1996; the
// temperature at a stamp is the number of its hour in the day.
func tmy3File(s Site, offset float64) string {
	var b strings.Builder
	fmt.Fprintf(&b, "724699,\"BRIDGE, FIELD\",CO,%.1f,%.3f,%.3f,%.0f\n%s", offset, s.Latitude, s.Longitude, s.Elevation, tmy3Header)
	for m := 1; m <= 12; m++ {
		for d := 1; d <= monthDays(2001, m); d++ {
			for h := 1; h <= 24; h++ {
				year := 1984 + m
				to := dayNumber(year, m, d)*day + int64(h)*hour - int64(offset*float64(hour))
				sun := DaylightOver(to-hour, to, s)
				g := lightAt(to-hour, to, s)
				n, f := 0.0, 0.0
				if sun.Fraction > 0 {
					n, f = Decompose(g/sun.Fraction, sun.SunPosition)
				}
				fmt.Fprintf(&b, "%02d/%02d/%d,%02d:00,0,0,%.0f,2,8,%.0f,2,15,%.0f,2,8,%d.0,A,7,3.1,A,7,-9900.0\n", m, d, year, h, g, n*sun.Fraction, f*sun.Fraction, h)
			}
		}
	}
	return b.String()
}

func TestTMY3(t *testing.T) {
	file := tmy3File(denverSite, -7)
	w := mustOpenWeather(t, file, WeatherOptions{Zone: zone(t, "America/Denver"), Stamped: "start"}) // both of no account
	if !w.Typical || w.Len() != 8760 || w.Station != "BRIDGE, FIELD CO" || len(w.Warnings) != 0 {
		t.Fatalf("typical %v, %d hours, %q, %v", w.Typical, w.Len(), w.Station, w.Warnings)
	}
	near(t, "latitude", w.Site.Latitude, 39.74, 0)
	near(t, "longitude", w.Site.Longitude, -104.99, 0)
	near(t, "elevation", w.Site.Elevation, 1609, 0)
	start, _ := w.Span()
	if start != instant(t, "2001-01-01T07:00:00Z") {
		t.Errorf("begins at %s", Format(start, nil))
	}
	if !strings.Contains(w.Assumed[0], "months from 1985 to 1996") {
		t.Errorf("assumed: %q", w.Assumed)
	}
	// The hour that ends at 05:00 has the mean of the thermometer at 04:00 and 05:00, the
	// first of the day that of 24:00 and 01:00.
	near(t, "temperature", w.Point(4).Temperature, 4.5, 1e-12)
	near(t, "temperature after midnight", w.Point(24).Temperature, 12.5, 1e-12)
	near(t, "wind", w.Point(100).Wind, 3.1, 1e-12)
}

// A typical year falls on the same month, day and hour of any year, by standard time.
func TestTMY3OverYears(t *testing.T) {
	z := zone(t, "America/Denver")
	w := mustOpenWeather(t, tmy3File(denverSite, -7), WeatherOptions{})
	for _, year := range []int{2023, 2024, 2025} {
		a := yearAxis(t, year, z)
		l, err := w.Over(a)
		if err != nil {
			t.Fatal(err)
		}
		if want := 8760 + 24*(monthDays(year, 2)-28); len(l.points) != want {
			t.Fatalf("%d has %d hours, want %d", year, len(l.points), want)
		}
		for i := range l.points {
			standard := at(l.grid.start+int64(i)*hour-7*hour, nil)
			_, m, d := standard.Date()
			if m == 2 && d == 29 {
				d = 28
			}
			k := int(dayNumber(2001, int(m), d)-dayNumber(2001, 1, 1))*24 + standard.Hour()
			if l.points[i] != w.points[k] {
				t.Fatalf("%s has hour %d's weather wrong", standard, k)
			}
		}
	}
}

func TestTMY3Faults(t *testing.T) {
	file := tmy3File(denverSite, -7)
	swap := func(old, text string) string {
		if !strings.Contains(file, old) {
			t.Fatalf("no %q in the file", old)
		}
		return strings.Replace(file, old, text, 1)
	}
	for _, c := range []struct {
		file, place string
		words       []string
	}{
		{swap("-7.0,39.740", "-7.0"), "w.csv:1", []string{"has 7 cells", "got 6"}},
		{swap("39.740", "99.740"), "w.csv:1:5", []string{"latitude is 99.74"}},
		{swap("-7.0,39", "-7.1,39"), "w.csv:1:4", []string{"hours from UTC"}},
		{swap("-7.0,39", "x,39"), "w.csv:1:4", []string{"want a number"}},
		{swap("GHI (W/m^2),", "GHX (W/m^2),"), "", nil}, // direct and diffuse are still there
		{strings.Replace(swap("GHI (W/m^2),", "GHX (W/m^2),"), "DNI (W/m^2),", "DNX,", 1), "w.csv:2", []string{`no column "GHI (W/m^2)"`}},
		{swap("Time (HH:MM)", "Clock"), "w.csv:2", []string{`no column "Time (HH:MM)"`}},
		{swap("01/01/1985,02:00", "01/01/1985,01:00"), "w.csv:4:1", []string{"01/01 01:00 stands twice", "line 3"}},
		{swap("01/01/1985,02:00", "01/01/1985,00:00"), "w.csv:4:2", []string{"01:00 to 24:00"}},
		{swap("01/01/1985,02:00", "01/01/1985,02:30"), "w.csv:4:2", []string{"01:00 to 24:00"}},
		{swap("01/01/1985,02:00", "1985-01-01,02:00"), "w.csv:4:1", []string{"want a date such as"}},
		{swap("01/01/1985,02:00", "02/30/1985,02:00"), "w.csv:4:1", []string{"want a date such as"}},
		{file[:len(tmy3Header)+70], "w.csv:", nil},
		{file[:strings.Index(file, "06/10/1990,01:00")], "w.csv:", []string{"no value for more than a day"}},
		{swap("39.740", "-39.740"), "w.csv:2:5", []string{"other hemisphere"}},
		{swap("-104.990", "104.990"), "w.csv:2:5", []string{"other side of the globe"}},
		{swap("-7.0,39", "5.0,39"), "w.csv:2:5", []string{"12 h too", "first line"}},
	} {
		if c.place == "" {
			if w := mustOpenWeather(t, c.file, WeatherOptions{}); !strings.Contains(strings.Join(w.Assumed, "\n"), "global irradiance from direct and diffuse") {
				t.Errorf("assumed: %q", w.Assumed)
			}
			continue
		}
		_, err := openWeather(c.file, WeatherOptions{})
		if err == nil {
			t.Errorf("accepted, want %q %q", c.place, c.words)
			continue
		}
		for _, word := range append(c.words, c.place) {
			if !strings.Contains(err.Error(), word) {
				t.Errorf("got %q, want %q", err, word)
			}
		}
	}
}

func TestTMY3MissingAndLeapDay(t *testing.T) {
	file := tmy3File(denverSite, -7)
	whole := mustOpenWeather(t, file, WeatherOptions{})
	lines := strings.SplitAfter(file, "\n")
	const noon = 2 + 24*150 + 11 // the hour that ends at 12:00 of 31 May
	cells := strings.Split(lines[noon], ",")
	for _, i := range []int{4, 7, 10, 13, 16} {
		cells[i] = "-9900"
	}
	lines[noon] = strings.Join(cells, ",")
	leap := "02/29/1988,01:00,0,0,500,2,8,0,2,15,0,2,8,1.0,A,7,3.1,A,7,-9900.0\n"
	w := mustOpenWeather(t, strings.Join(lines[:2+24*59], "")+leap+strings.Join(lines[2+24*59:], ""), WeatherOptions{})
	told := strings.Join(w.Assumed, "\n")
	for _, want := range []string{"1 rows of 29 February are left out", "ghi: 1 of 8760 values were missing", "temperature: 2 of 8760", "wind: 2 of 8760"} {
		if !strings.Contains(told, want) {
			t.Errorf("assumed %q, want %q", told, want)
		}
	}
	got, want := w.Point(noon-2), whole.Point(noon-2)
	near(t, "estimated temperature", got.Temperature, want.Temperature, 1e-9)
	if got.GHI < 100 || math.Abs(got.DNI*math.Cos(DaylightOver(w.start+int64(noon-2)*hour, w.start+int64(noon-1)*hour, w.Site).Zenith*radians)+got.DHI-got.GHI) > 1e-9 {
		t.Errorf("estimated light: %+v", got)
	}
	for k := range whole.points {
		if k < noon-3 && w.Point(k) != whole.Point(k) {
			t.Fatalf("hour %d changed: %+v, %+v", k, w.Point(k), whole.Point(k))
		}
	}
}
