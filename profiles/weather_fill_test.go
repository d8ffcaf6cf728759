package profiles

import (
	"fmt"
	"math"
	"strings"
	"testing"
)

// clearRows are the rows of clear days in Denver from the start of 1 June 2025 UTC, all
// five columns; spoil may change the cells of a row or leave it out.
func clearRows(n int, spoil func(i int, cells []string) bool) string {
	var b strings.Builder
	b.WriteString("time,ghi [W/m2],dni [W/m2],dhi [W/m2],temperature [degC],wind [m/s]\n")
	for i := range n {
		from := clearStart + int64(i)*hour
		d := DaylightOver(from, from+hour, denverSite)
		g, n, h := 0.0, 0.0, 0.0
		if d.Fraction > 0 {
			g, n, h = ClearSky(d.SunPosition, denverSite, ClearTurbidity)
		}
		cells := []string{Format(from, nil)}
		for _, v := range []float64{g * d.Fraction, n * d.Fraction, h * d.Fraction, float64(i % 40), 3} {
			cells = append(cells, fmt.Sprintf("%.6f", v))
		}
		if spoil(i, cells) {
			b.WriteString(strings.Join(cells, ",") + "\n")
		}
	}
	return b.String()
}

const clearStart = 1748736000 * second // 2025-06-01T00:00Z

func keep(int, []string) bool { return true }

// Under a clear sky the estimate of a gap is the clear sky, and a straight line is met
// exactly: gaps of cells and gaps of rows, at noon and over the evening.
func TestWeatherGaps(t *testing.T) {
	o := WeatherOptions{Site: &denverSite}
	whole := mustOpenWeather(t, clearRows(240, keep), o)
	for name, spoil := range map[string]func(int, []string) bool{
		"cells": func(i int, cells []string) bool {
			if i >= 90 && i < 93 {
				for c, text := range []string{"", "NA", "-9900", "9999", "-999"} {
					cells[c+1] = text
				}
			}
			return true
		},
		"rows":    func(i int, _ []string) bool { return i < 90 || i >= 93 },
		"evening": func(i int, _ []string) bool { return i < 95 || i >= 109 },
	} {
		w := mustOpenWeather(t, clearRows(240, spoil), o)
		if w.Len() != 240 {
			t.Errorf("%s: %d intervals", name, w.Len())
			continue
		}
		for k := range w.Len() {
			a, b := w.Point(k), whole.Point(k)
			near(t, fmt.Sprint(name, " ghi ", k), a.GHI, b.GHI, 1e-4)
			near(t, fmt.Sprint(name, " temperature ", k), a.Temperature, b.Temperature, 1e-4)
			near(t, fmt.Sprint(name, " wind ", k), a.Wind, b.Wind, 1e-4)
			if d := DaylightOver(clearStart+int64(k)*hour, clearStart+int64(k+1)*hour, denverSite); d.Fraction > 0 {
				near(t, fmt.Sprint(name, " closure ", k), a.DNI*math.Cos(d.Zenith*radians)+a.DHI, a.GHI, 1e-4)
			}
		}
		told := strings.Join(w.Assumed, "\n")
		if !strings.Contains(told, "ghi: ") || !strings.Contains(told, "of 240 values were missing") || !strings.Contains(told, "temperature: ") {
			t.Errorf("%s: assumed %q", name, told)
		}
	}
	if told := strings.Join(whole.Assumed, "\n"); told != "" {
		t.Errorf("nothing is missing and yet: %q", told)
	}
	// A gap at either end holds the nearest sky.
	w := mustOpenWeather(t, clearRows(240, func(i int, cells []string) bool {
		if i < 2 || i > 237 {
			cells[1], cells[2], cells[3], cells[4] = "", "", "", ""
		}
		return true
	}), o)
	near(t, "first", w.Point(0).GHI, whole.Point(0).GHI, 1e-4)
	near(t, "last", w.Point(239).GHI, whole.Point(239).GHI, 1e-4)
	near(t, "first temperature", w.Point(0).Temperature, 2, 1e-9)
	near(t, "last temperature", w.Point(239).Temperature, 237%40, 1e-9)
}

func TestWeatherLongGaps(t *testing.T) {
	o := WeatherOptions{Site: &denverSite}
	blank := func(from, to, c int) string {
		return clearRows(240, func(i int, cells []string) bool {
			if i >= from && i < to {
				cells[c] = ""
				if c == 1 {
					cells[2], cells[3] = "", ""
				}
			}
			return true
		})
	}
	wantWeatherFault(t, blank(60, 90, 4), o, "w.csv:62:5", "temperature: no value for more than a day from 2025-06-03T12:00:00+00:00")
	wantWeatherFault(t, blank(60, 90, 1), o, "w.csv:62:2", "ghi: no value for more than a day from 2025-06-03T12:00:00+00:00")
	wantWeatherFault(t, clearRows(240, func(i int, _ []string) bool { return i < 60 || i >= 90 }), o, "w.csv:62:1", "a gap", "(30)")
	for _, c := range []int{1, 4, 5} {
		if _, err := openWeather(blank(60, 84, c), o); err != nil {
			t.Errorf("a day without column %d: %v", c, err)
		}
	}
	// A column that is empty from end to end is one that is not there.
	w := mustOpenWeather(t, blank(0, 240, 4), o)
	if w.Point(7).Temperature != 20 || !strings.Contains(strings.Join(w.Assumed, "\n"), "no temperature is given: 20 degC") {
		t.Errorf("no temperature: %v, %q", w.Point(7).Temperature, w.Assumed)
	}
}

// Any two of the three irradiances give the third; global alone is split by Erbs.
func TestWeatherClosure(t *testing.T) {
	o := WeatherOptions{Site: &denverSite}
	whole := mustOpenWeather(t, clearRows(240, keep), o)
	for c, what := range map[int]string{1: "global irradiance from direct and diffuse", 2: "direct irradiance from global and diffuse", 3: "diffuse irradiance from global and direct"} {
		w := mustOpenWeather(t, clearRows(240, func(_ int, cells []string) bool { cells[c] = ""; return true }), o)
		if told := strings.Join(w.Assumed, "\n"); !strings.Contains(told, what) || strings.Contains(told, "missing") {
			t.Errorf("without column %d: %q", c, told)
		}
		for k := range w.Len() {
			d := DaylightOver(clearStart+int64(k)*hour, clearStart+int64(k+1)*hour, denverSite)
			if d.Fraction < 1 || d.Zenith > 85 {
				continue
			}
			a, b := w.Point(k), whole.Point(k)
			near(t, "ghi", a.GHI, b.GHI, 1e-4)
			near(t, "dni", a.DNI, b.DNI, 1e-4)
			near(t, "dhi", a.DHI, b.DHI, 1e-4)
		}
	}
	w := mustOpenWeather(t, clearRows(240, func(_ int, cells []string) bool { cells[2], cells[3] = "", ""; return true }), o)
	if !strings.Contains(strings.Join(w.Assumed, "\n"), "by Erbs, Klein and Duffie 1982") {
		t.Errorf("assumed %q", w.Assumed)
	}
	const k = 24*3 + 18 // near noon
	d := DaylightOver(clearStart+k*hour, clearStart+(k+1)*hour, denverSite)
	dni, dhi := Decompose(whole.Point(k).GHI, d.SunPosition)
	near(t, "dni of Erbs", w.Point(k).DNI, dni, 1e-4)
	near(t, "dhi of Erbs", w.Point(k).DHI, dhi, 1e-4)
}
