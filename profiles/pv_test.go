package profiles

import (
	"math"
	"strings"
	"testing"
)

// By pencil from the closed forms: 800 W/m², 25 °C, 2 m/s; NOCT 45; 10 kW at
// −0.4 %/°C.
func TestCellTemperature(t *testing.T) {
	cell := Faiman(800, 25, 2)
	near(t, "Faiman", cell, 45.683, 1e-3)
	near(t, "NOCT", NOCT(800, 25, 45), 50, 1e-12)
	a := Array{DCKW: 10, TempCoefficient: -0.4}
	near(t, "DC", a.DC(800, cell), 7.3382, 1e-4)
	near(t, "standard test conditions", a.DC(1000, 25), 10, 1e-12)
	near(t, "no light", a.DC(0, 25), 0, 0)
	near(t, "hotter than any silicon", a.DC(800, 400), 0, 0)
}

// The whole chain by pencil: the plane of TestTransposition sees 911.416 W/m²; wind
// 5 m/s at 10 m is 3 at the modules, which are at 25 + 911.416/45.52 = 45.0223 °C:
// 10·0.911416·(1 − 0.004·20.0223) = 8.38421 kW, less 10 % 7.54579, ·0.97 = 7.31941.
func TestOutputByPencil(t *testing.T) {
	a := Array{DCKW: 10, Tilt: 30, Azimuth: 180, Losses: 10, TempCoefficient: -0.4, InverterEfficiency: 97, RatingKVA: 8, WindFactor: 0.6, Albedo: 0.2}
	d := Daylight{SunPosition{Zenith: 40, Azimuth: 180, Extraterrestrial: 1361}, 1}
	w := WeatherPoint{800*math.Cos(40*radians) + 100, 800, 100, 25, 5}
	ac, clipped := a.Output(w, d)
	near(t, "AC", ac, 7.3194, 2e-4)
	near(t, "clipped", clipped, 0, 0)
	a.RatingKVA = 6
	ac, clipped = a.Output(w, d)
	near(t, "AC at the rating", ac, 6, 0)
	near(t, "clipped", clipped, 1.3194, 2e-4)
	// Half an hour of the same light is half of it, the clipped part too.
	w.GHI, w.DNI, w.DHI, d.Fraction = w.GHI/2, w.DNI/2, w.DHI/2, 0.5
	ac, clipped = a.Output(w, d)
	near(t, "AC of half an hour", ac, 3, 1e-12)
	near(t, "clipped of half an hour", clipped, 1.3194/2, 2e-4)
	a.RatingKVA = 0
	ac, clipped = a.Output(w, d)
	near(t, "AC without a rating", ac, 7.3194/2, 2e-4)
	near(t, "clipped without a rating", clipped, 0, 0)
	d.Fraction = 0
	if ac, clipped = a.Output(w, d); ac != 0 || clipped != 0 {
		t.Errorf("night: %v, %v", ac, clipped)
	}
}

// With the sun on the horizon no glow of the sky outshines the sky that was measured.
func TestOutputAtSunrise(t *testing.T) {
	a := Array{DCKW: 10, Tilt: 60, Azimuth: 90, InverterEfficiency: 100}
	for zenith := 87.01; zenith < 90; zenith += 0.1 {
		d := Daylight{SunPosition{Zenith: zenith, Azimuth: 90, Extraterrestrial: 1361}, 0.1}
		ac, _ := a.Output(WeatherPoint{3, 20, 3, 25, 0}, d)
		// Not more than all of the direct light and all of the diffuse, for the mean hour.
		if most := 10 * (20 + 3) / 1000.0; ac <= 0 || ac > most {
			t.Errorf("zenith %.2f: %v kW, at most %v", zenith, ac, most)
		}
		// A noisy instrument in the minute of sunrise: never more than outside the atmosphere.
		d.Fraction = 0.001
		if ac, _ = a.Output(WeatherPoint{40, 400, 40, 25, 0}, d); ac > 0.001*10*1.5 {
			t.Errorf("zenith %.2f: %v kW in four seconds", zenith, ac)
		}
	}
}

func TestArrayCheck(t *testing.T) {
	good := DefaultArray(Site{Latitude: 40})
	good.DCKW, good.RatingKVA = 10, 8
	if f := good.Check(); len(f) != 0 {
		t.Errorf("defaults: %v", f)
	}
	if south := DefaultArray(Site{Latitude: -40}); south.Azimuth != 0 || good.Azimuth != 180 {
		t.Errorf("azimuth %v in the north, %v in the south", good.Azimuth, south.Azimuth)
	}
	for field, spoil := range map[string]func(*Array){
		"dc":                      func(a *Array) { a.DCKW = -1 },
		"tilt":                    func(a *Array) { a.Tilt = 91 },
		"azimuth":                 func(a *Array) { a.Azimuth = 400 },
		"losses":                  func(a *Array) { a.Losses = 101 },
		"temperature coefficient": func(a *Array) { a.TempCoefficient = 0.4 },
		"inverter efficiency":     func(a *Array) { a.InverterEfficiency = 0 },
		"rating":                  func(a *Array) { a.RatingKVA = math.NaN() },
		"wind factor":             func(a *Array) { a.WindFactor = -1 },
		"albedo":                  func(a *Array) { a.Albedo = 2 },
	} {
		bad := good
		spoil(&bad)
		if f := bad.Check(); len(f) != 1 || f[0].Field != field || !strings.Contains(f[0].Text, "want") {
			t.Errorf("%s: got %v", field, f)
		}
	}
}
