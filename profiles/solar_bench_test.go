package profiles

import (
	"testing"
	"testing/fstest"
)

func BenchmarkSun(b *testing.B) {
	t := int64(1735689600) * second
	b.ReportAllocs()
	for b.Loop() {
		if Sun(t, denverSite).Zenith < 0 {
			b.Fatal("no such zenith")
		}
		t += hour
	}
}

func BenchmarkOutput(b *testing.B) {
	a := DefaultArray(denverSite)
	a.DCKW, a.RatingKVA = 10, 8
	d := DaylightOver(1748800800*second, 1748804400*second, denverSite)
	w := WeatherPoint{800, 700, 150, 25, 3}
	b.ReportAllocs()
	for b.Loop() {
		if ac, _ := a.Output(w, d); ac <= 0 {
			b.Fatal("no output by day")
		}
	}
}

// BenchmarkSolarYear lays a typical year over a year and makes the series of 30 arrays.
func BenchmarkSolarYear(b *testing.B) {
	w, err := openWeather(tmy3File(denverSite, -7), WeatherOptions{})
	if err != nil {
		b.Fatal(err)
	}
	a := DefaultArray(denverSite)
	a.DCKW, a.RatingKVA = 10, 8
	ax := Axis{Start: 1735689600 * second, End: (1735689600 + 365*86400) * second, Step: hour}
	b.ReportAllocs()
	for b.Loop() {
		l, err := w.Over(ax)
		if err != nil {
			b.Fatal(err)
		}
		for range 30 {
			l.Solar("pv", a)
		}
	}
}

func BenchmarkOpenTMY3(b *testing.B) {
	fsys := fstest.MapFS{"w.csv": {Data: []byte(tmy3File(denverSite, -7))}}
	b.SetBytes(int64(len(fsys["w.csv"].Data)))
	b.ReportAllocs()
	for b.Loop() {
		if _, err := OpenWeather(fsys, "w.csv", WeatherOptions{}); err != nil {
			b.Fatal(err)
		}
	}
}
