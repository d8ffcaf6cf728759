package profiles

import (
	"fmt"
	"math"
	"strings"
	"testing"
	"testing/fstest"
	"time"

	"yearflow/sim/tables"
)

var denverSite = Site{39.74, -104.99, 1609}

// cloud is a repeatable factor of 0.3 to 1 that keeps for three hours.
func cloud(t int64) float64 {
	x := uint64(t/(3*hour))*0x9e3779b97f4a7c15 + 0x1234567
	x ^= x >> 29
	x *= 0xbf58476d1ce4e5b9
	return 0.3 + 0.7*float64(x>>40)/float64(1<<24)
}

// lightAt is the mean cloudy GHI of an interval at a site.
func lightAt(from, to int64, s Site) float64 {
	d := DaylightOver(from, to, s)
	g, _, _ := ClearSky(d.SunPosition, s, ClearTurbidity)
	if d.Fraction == 0 {
		return 0
	}
	return g * d.Fraction * cloud(from)
}

// weatherRows writes rows of GHI of one site at stamps on the clock of zone, beginning
// at start; shift moves the light behind the stamps.
func weatherRows(start int64, n int, step, shift int64, s Site, zone *time.Location) string {
	var b strings.Builder
	for i := range n {
		t := start + int64(i)*step
		stamp := at(t, zone).Format("2006-01-02T15:04")
		fmt.Fprintf(&b, "%s,%.2f,%.1f,2\n", stamp, lightAt(t-shift, t-shift+step, s), 10+8*math.Sin(float64(i)/24))
	}
	return b.String()
}

const plainHeader = "time,ghi [W/m2],temperature [degC],wind [m/s]\n"

func openWeather(file string, o WeatherOptions) (*Weather, error) {
	return OpenWeather(fstest.MapFS{"w.csv": {Data: []byte(file)}}, "w.csv", o)
}

func mustOpenWeather(t *testing.T, file string, o WeatherOptions) *Weather {
	t.Helper()
	w, err := openWeather(file, o)
	if err != nil {
		t.Fatal(err)
	}
	return w
}

// wantWeatherFault fails unless a file is refused with a fault that begins with the
// place and holds the words.
func wantWeatherFault(t *testing.T, file string, o WeatherOptions, place string, words ...string) {
	t.Helper()
	w, err := openWeather(file, o)
	if err == nil {
		t.Errorf("accepted, want %q %q; warnings: %v", place, words, w.Warnings)
		return
	}
	wantWords(t, err.Error(), place, words)
}

func wantWords(t *testing.T, text, place string, words []string) {
	t.Helper()
	for _, word := range words {
		if !strings.Contains(text, word) || !strings.HasPrefix(text, place+": ") {
			t.Errorf("got %q, want %q at %s", text, word, place)
		}
	}
}

// Every way to write the same three hours.
func TestFormsOfWeather(t *testing.T) {
	site := Site{39.74, -104.99, 1609}
	for name, file := range map[string]string{
		"plain":       "time,ghi [W/m2],temperature [degC],wind [m/s]\n2025-06-01T17:00Z,800,20,2\n2025-06-01T18:00Z,850.5,25,4\n",
		"site inside": "time,ghi [W/m2],temperature [degC],wind [m/s],latitude [deg],longitude [deg],elevation [ft]\n2025-06-01T17:00Z,800,20,2,39.74,-104.99,5278.8713911\n2025-06-01T18:00Z,850.5,25,4,39.74,-104.99,\n",
		"units":       "Time;GHI [kW/m2];Temperature [degF];Wind [km/h]\n2025-06-01T17:00Z;0,8;68;7,2\n2025-06-01T18:00Z;0,8505;77;14,4\n",
		"other order": "wind [mph],note,temperature [K],time,ghi [W/m2]\n4.4738725841,x,293.15,2025-06-01T17:00Z,800\n8.9477451682,,298.15,2025-06-01T18:00Z,850.5\n",
		"unused":      "time,ghi [W/m2],temperature [degC],wind [m/s],relative humidity [%]\n2025-06-01T17:00Z,800,20,2,30\n2025-06-01T18:00Z,850.5,25,4,40\n",
		"mark, CRLF":  "\xef\xbb\xbftime,ghi [W/m2],temperature [degC],wind [m/s]\r\n# a comment\r\n2025-06-01T17:00Z,800,20,2\r\n2025-06-01T18:00Z,850.5,25,4\r\n",
	} {
		o := WeatherOptions{Site: &site}
		if name == "site inside" {
			o.Site = nil
		}
		w, err := openWeather(file, o)
		if err != nil {
			t.Errorf("%s: %v", name, err)
			continue
		}
		if w.Len() != 2 || w.StepLength() != hour {
			t.Errorf("%s: %d intervals of %d", name, w.Len(), w.StepLength())
			continue
		}
		start, _ := w.Span()
		if start != instant(t, "2025-06-01T17:00:00Z") {
			t.Errorf("%s: begins at %s", name, Format(start, nil))
		}
		near(t, name+" elevation", w.Site.Elevation, 1609, 1e-4)
		for k, want := range []WeatherPoint{{GHI: 800, Temperature: 20, Wind: 2}, {GHI: 850.5, Temperature: 25, Wind: 4}} {
			p := w.Point(k)
			near(t, name+" ghi", p.GHI, want.GHI, 1e-9)
			near(t, name+" temperature", p.Temperature, want.Temperature, 1e-9)
			near(t, name+" wind", p.Wind, want.Wind, 1e-6)
		}
		if name == "unused" && !strings.Contains(strings.Join(w.Assumed, "\n"), "relative humidity") {
			t.Errorf("unused column not told: %q", w.Assumed)
		}
	}
}

func TestWeatherStamps(t *testing.T) {
	start := instant(t, "2025-06-01T06:00:00Z")
	for stamped, shift := range map[string]int64{"": 0, "start": 0, "end": hour, "instant": hour / 2} {
		w := mustOpenWeather(t, plainHeader+weatherRows(start, 24*10, hour, shift, denverSite, nil), WeatherOptions{Site: &denverSite, Stamped: stamped})
		if got, _ := w.Span(); got != start-shift {
			t.Errorf("stamped %q begins at %s", stamped, Format(got, nil))
		}
		if len(w.Warnings) != 0 {
			t.Errorf("stamped %q: %v", stamped, w.Warnings)
		}
	}
}

func TestWeatherFaults(t *testing.T) {
	site := WeatherOptions{Site: &denverSite}
	rows := "2025-06-01T17:00Z,800,20,2\n2025-06-01T18:00Z,850,25,4\n"
	for _, c := range []struct {
		file  string
		o     WeatherOptions
		place string
		words []string
	}{
		{"", site, "w.csv", []string{"is empty"}},
		{"\x89PNG\r\n", site, "w.csv", []string{"PNG image"}},
		{plainHeader, site, "w.csv:1", []string{"no rows"}},
		{plainHeader + "2025-06-01T17:00Z,800,20,2\n", site, "w.csv:2", []string{"only one row"}},
		{plainHeader + rows, WeatherOptions{}, "w.csv:1", []string{"where is this weather", "latitude [deg]"}},
		{"ghi [W/m2],wind [m/s]\n1,2\n", site, "w.csv:1", []string{"no column `time`"}},
		{"time,wind [m/s],dni [W/m2]\n" + rows, site, "w.csv:1", []string{"no irradiance"}},
		{"time,ghi,wind [m/s]\n" + rows, site, "w.csv:1:2", []string{"has no unit", "[kW/m2]"}},
		{"time,ghi [kW],wind [m/s]\n" + rows, site, "w.csv:1:2", []string{`"kW" is not known`}},
		{"time,ghi [degC],wind [m/s]\n" + rows, site, "w.csv:1:2", []string{"cannot be in [degC]"}},
		{"time,ghi [W/m2],temprature [degC]\n" + rows, site, "w.csv:1:3", []string{"did you mean temperature"}},
		{"time,ghi [W/m2],GHI [W/m2]\n" + rows, site, "w.csv:1:3", []string{"stands twice"}},
		{"time,ghi [W/m2],latitude [deg]\n" + rows, site, "w.csv:1", []string{"both latitude [deg] and longitude [deg]"}},
		{plainHeader + rows + "2025-06-01T18:00Z,850,25,4\n", site, "w.csv:4:1", []string{"stands twice"}},
		{plainHeader + rows + "2025-06-01T17:00Z,850,25,4\n", site, "w.csv:4:1", []string{"goes back"}},
		{plainHeader + rows + "2025-06-01T18:20Z,850,25,4\n2025-06-01T19:00Z,850,25,4\n2025-06-01T20:00Z,850,25,4\n", site, "w.csv:4:1", []string{"not regular"}},
		{plainHeader + rows + "2026-06-20T19:00Z,850,25,4\n2026-06-20T20:00Z,850,25,4\n", site, "w.csv:4:1", []string{"a gap"}},
		{plainHeader + "2025-06-01T12:00Z,800,20,2\n2025-06-01T18:00Z,850,25,4\n", site, "w.csv:2:1", []string{"the step is 6 h"}},
		{plainHeader + "2025-06-01T12:00:00.1Z,800,20,2\n2025-06-01T12:00:00.2Z,850,25,4\n", site, "w.csv:2:1", []string{"the step is 100ms"}},
		{plainHeader + "2025-06-01T12:00:00Z,1,1,1\n2025-06-01T12:00:01Z,1,1,1\n2025-06-01T22:00Z,1,1,1\n2025-06-02T10:00Z,1,1,1\n2025-06-03T00:00Z,1,1,1\n", site, "w.csv:6:1", []string{"most rows are missing"}},
		{plainHeader + rows + "2025-06-01T19:00Z,x,25,4\n", site, "w.csv:4:2", []string{"ghi: want a number"}},
		{plainHeader + rows + "2025-06-01T19:00Z,-200,25,4\n", site, "w.csv:4:2", []string{"is not negative"}},
		{plainHeader + rows + "2025-06-01T19:00Z,5000,25,4\n", site, "w.csv:4:2", []string{"check the unit"}},
		{plainHeader + rows + "2025-06-01T19:00Z,800,78,4\n", site, "w.csv:4:3", []string{"[degF]"}},
		{plainHeader + rows + "2025-06-01T19:00Z,800,25,-3\n", site, "w.csv:4:4", []string{"wind"}},
		{plainHeader + rows + "yesterday,800,25,3\n", site, "w.csv:4:1", []string{"want a time"}},
		{plainHeader + rows, WeatherOptions{Site: &Site{Latitude: 97}}, "w.csv:3", []string{"latitude is 97"}},
		{"time,ghi [W/m2],latitude [deg],longitude [deg]\n2025-06-01T12:00Z,1,40,255\n2025-06-01T13:00Z,1,40,255\n", WeatherOptions{}, "w.csv:2:3", []string{"longitude is 255"}},
		{plainHeader + rows, WeatherOptions{Site: &denverSite, Stamped: "middle"}, "w.csv", []string{"want start, end or instant"}},
	} {
		wantWeatherFault(t, c.file, c.o, c.place, c.words...)
	}
	if _, err := OpenWeather(fstest.MapFS{}, "none.csv", site); err == nil || !strings.Contains(err.Error(), "none.csv: cannot be read") {
		t.Errorf("a missing file: %v", err)
	}
}

// Weather that belongs to another sun than that of the site is refused, and what it
// belongs to is named.
func TestWeatherOfAnotherPlace(t *testing.T) {
	start := instant(t, "2025-01-01T00:00:00Z")
	year := func(shift int64, s Site) string { return plainHeader + weatherRows(start, 8760, hour, shift, s, nil) }
	good := year(0, denverSite)
	at := func(s Site) WeatherOptions { return WeatherOptions{Site: &s} }
	if w := mustOpenWeather(t, good, at(denverSite)); len(w.Warnings) != 0 {
		t.Errorf("right weather: %v", w.Warnings)
	}
	wantWeatherFault(t, good, at(Site{-39.74, -104.99, 1609}), "w.csv:1:2", "other hemisphere", "sign of the latitude")
	wantWeatherFault(t, good, at(Site{39.74, 104.99, 1609}), "w.csv:1:2", "other side of the globe", "brightest around")
	wantWeatherFault(t, good, at(Site{-39.74, 104.99, 1609}), "w.csv:1:2", "opposite hemispheres")
	wantWeatherFault(t, year(12*hour, denverSite), at(denverSite), "w.csv:1:2", "taken to be 12 h too", "brightest around 23:59", "stands highest around 12:00")
	wantWeatherFault(t, year(5*hour, denverSite), at(denverSite), "w.csv:1:2", "taken to be 5 h too late", "check the zone")
	// An hour is not enough to be sure: a warning that says what it may be.
	w := mustOpenWeather(t, year(hour, denverSite), at(denverSite))
	if !strings.Contains(w.Warnings.Error(), `1 h too late: check the zone, or are the stamps the end of their intervals (stamped = "end")`) {
		t.Errorf("stamped end: %v", w.Warnings)
	}
	// Watts that are called kilowatts, and the other way.
	wantWeatherFault(t, strings.Replace(good, "[W/m2]", "[kW/m2]", 1), at(denverSite), "w.csv:16:2", "check the unit", "and 4512 more values like it")
	small := plainHeader
	for i := range 240 {
		from := start + int64(i)*hour
		small += fmt.Sprintf("%s,%.4f,10,1\n", Format(from, nil), lightAt(from, from+hour, denverSite)/1000)
	}
	wantWeatherFault(t, small, at(denverSite), "w.csv:1:2", "is it in [kW/m2]?")
}

func TestWeatherOddValues(t *testing.T) {
	start := instant(t, "2025-06-01T00:00:00Z")
	file := plainHeader + weatherRows(start, 24*20, hour, 0, denverSite, nil)
	spike := strings.Replace(file, "2025-06-03T12:00,", "2025-06-03T12:00,1000 ,1,2\n#", 1)
	w := mustOpenWeather(t, spike, WeatherOptions{Site: &denverSite})
	if len(w.Warnings) != 1 || !strings.Contains(w.Warnings[0].Text, "more than the sun can give in 1 of") {
		t.Errorf("spike: %v", w.Warnings)
	}
	// Three columns that do not belong together.
	var b strings.Builder
	b.WriteString("time,ghi [W/m2],dni [W/m2],dhi [W/m2]\n")
	for i := range 240 {
		from := start + int64(i)*hour
		g := lightAt(from, from+hour, denverSite)
		fmt.Fprintf(&b, "%s,%.1f,%.1f,%.1f\n", Format(from, nil), g, g/2, g/5)
	}
	w = mustOpenWeather(t, b.String(), WeatherOptions{Site: &denverSite})
	if len(w.Warnings) != 1 || !strings.Contains(w.Warnings[0].Text, "differs from dni·cos z + dhi") {
		t.Errorf("closure: %v", w.Warnings)
	}
}

// A typical year in a table of its own: each month of another year, all of them hourly on
// standard time, is one year; a slip within a month is not.
func TestWeatherOfSeveralYears(t *testing.T) {
	var b strings.Builder
	b.WriteString(plainHeader)
	var want []float64
	for m := 1; m <= 12; m++ {
		year := []int{2003, 1998, 2010, 1996, 1999, 2007, 2001, 1995, 2002, 2009, 1997, 2005}[m-1]
		for i := range monthDays(2003, m) * 24 {
			from := dayNumber(year, m, 1)*day + int64(i)*hour + 7*hour
			g := lightAt(from, from+hour, denverSite)
			want = append(want, g)
			fmt.Fprintf(&b, "%s,%.6f,10,2\n", at(from-7*hour, time.UTC).Format("2006-01-02T15:04-07:00")[:16]+"-07:00", g)
		}
	}
	w := mustOpenWeather(t, b.String(), WeatherOptions{Site: &denverSite})
	if !w.Typical || w.Len() != 8760 || len(w.Warnings) != 0 || !strings.Contains(strings.Join(w.Assumed, ""), "months from 1995 to 2010") {
		t.Fatalf("typical %v, %d hours, %v, %q", w.Typical, w.Len(), w.Warnings, w.Assumed)
	}
	for k := range want {
		near(t, fmt.Sprint("hour ", k), w.Point(k).GHI, want[k], 1e-5)
	}
	l, err := w.Over(yearAxis(t, 2025, zone(t, "America/Denver")))
	if err != nil || len(l.points) != 8760 || l.points[4000] != w.points[4000] {
		t.Errorf("over 2025: %v", err)
	}
	slip := strings.Replace(b.String(), "2007-06-11T12:00", "2008-06-11T12:00", 1)
	wantWeatherFault(t, slip, WeatherOptions{Site: &denverSite}, "w.csv:3878:1", "a gap", "2007-06-11T19:00")
}

// A file on the clock of Denver over both odd days is the same instants.
func TestWeatherClockChanges(t *testing.T) {
	z := zone(t, "America/Denver")
	for _, from := range []string{"2025-03-08T07:00:00Z", "2025-11-01T06:00:00Z"} {
		start := instant(t, from)
		local := mustOpenWeather(t, plainHeader+weatherRows(start, 96, hour, 0, denverSite, z), WeatherOptions{Site: &denverSite, Zone: z})
		utc := mustOpenWeather(t, plainHeader+weatherRows(start, 96, hour, 0, denverSite, nil), WeatherOptions{Site: &denverSite})
		if local.Len() != 96 || utc.Len() != 96 {
			t.Fatalf("%s: %d and %d intervals", from, local.Len(), utc.Len())
		}
		for k := range 96 {
			a, _ := local.Interval(k)
			b, _ := utc.Interval(k)
			if a != b || local.Point(k) != utc.Point(k) {
				t.Fatalf("%s: interval %d: %s %+v, %s %+v", from, k, Format(a, z), local.Point(k), Format(b, z), utc.Point(k))
			}
		}
	}
}

func TestWeatherFaultsAreTables(t *testing.T) {
	_, err := openWeather("time,ghi\n", WeatherOptions{})
	if _, ok := err.(tables.Faults); !ok {
		t.Errorf("got %T", err)
	}
}
