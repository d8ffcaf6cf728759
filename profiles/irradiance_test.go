package profiles

import (
	"math"
	"testing"
)

// The polynomial of Erbs, Klein and Duffie 1982, by pencil.
func TestErbs(t *testing.T) {
	for kt, want := range map[float64]float64{-1: 1, 0: 1, .1: .9910, .22: .9802, .3: .9486, .5: .65915, .7: .24398, .8: .16527, .85: .165, 1.2: .165} {
		near(t, "diffuse fraction", Erbs(kt), want, 1e-5)
	}
}

func TestDecompose(t *testing.T) {
	sun := SunPosition{Zenith: 60, Extraterrestrial: 1361}
	// kt = 340.25/(1361·0.5) = 0.5: the fraction is 0.65915.
	dni, dhi := Decompose(340.25, sun)
	near(t, "diffuse", dhi, 340.25*0.65915, 0.01)
	near(t, "direct", dni, 340.25*(1-0.65915)/0.5, 0.01)
	for zenith := 0.0; zenith < 180; zenith += 0.7 {
		for ghi := -10.0; ghi < 1800; ghi += 37 {
			sun.Zenith = zenith
			dni, dhi := Decompose(ghi, sun)
			if dni < 0 || dhi < 0 || dni > sun.Extraterrestrial || zenith > 87 && dni != 0 {
				t.Fatalf("ghi %v at zenith %v: dni %v, dhi %v", ghi, zenith, dni, dhi)
			}
			if ghi > 0 {
				near(t, "closure", dni*math.Cos(zenith*radians)+dhi, ghi, 1e-9)
			} else if dni != 0 || dhi != 0 {
				t.Fatalf("ghi %v: dni %v, dhi %v", ghi, dni, dhi)
			}
		}
	}
}

// The closed form of Haurwitz 1945 with 0.057, by pencil.
func TestHaurwitz(t *testing.T) {
	for z, want := range map[float64]float64{0: 1037.16, 30: 890.33, 60: 489.85, 80: 137.31, 90: 0, 120: 0} {
		near(t, "clear sky", Haurwitz(z), want, 0.01)
	}
}

func TestClearSky(t *testing.T) {
	sea := Site{}
	// By pencil at the zenith: E 1361, AM = 0.99971, f1 = f2 = 1, TL 3.
	// GHI = 0.868·1361·exp(-0.0387·0.99971·3)·exp(0.01·0.99971^1.8) = 1181.348·0.890427·1.010045
	sun := SunPosition{Zenith: 0, Extraterrestrial: 1361}
	ghi, dni, dhi := ClearSky(sun, sea, 3)
	near(t, "global", ghi, 1062.46, 0.1)
	// DNI = 0.827·1361·exp(-0.09·0.99971·2) = 1125.547·0.835314
	near(t, "direct", dni, 940.19, 0.1)
	near(t, "closure", dhi, ghi-dni, 1e-9)
	for z := 0.0; z < 90; z += 0.25 {
		sun.Zenith = z
		ghi, dni, dhi := ClearSky(sun, sea, ClearTurbidity)
		cos := math.Cos(z * radians)
		near(t, "closure", dni*cos+dhi, ghi, 1e-9)
		if ghi < 0 || dhi <= 0 || dni < 0 || ghi > 1361*cos {
			t.Errorf("zenith %v: ghi %v, dni %v, dhi %v", z, ghi, dni, dhi)
		}
		// Two formulas of other authors, all the way down to the horizon.
		if h := Haurwitz(z); math.Abs(ghi-h) > 0.06*h+10 {
			t.Errorf("zenith %v: Ineichen and Perez %.1f, Haurwitz %.1f", z, ghi, h)
		}
		high, highDirect, _ := ClearSky(sun, Site{Elevation: 2000}, ClearTurbidity)
		hazy, hazyDirect, _ := ClearSky(sun, sea, 5)
		if z < 80 && (high <= ghi || highDirect <= dni || hazy >= ghi || hazyDirect >= dni) {
			t.Errorf("zenith %v: sea %.1f %.1f, mountain %.1f %.1f, haze %.1f %.1f", z, ghi, dni, high, highDirect, hazy, hazyDirect)
		}
	}
	if ghi, dni, dhi := ClearSky(SunPosition{Zenith: 90.5, Extraterrestrial: 1361}, sea, 3); ghi != 0 || dni != 0 || dhi != 0 {
		t.Errorf("night: %v %v %v", ghi, dni, dhi)
	}
}

// One case through by pencil: DNI 800, DHI 100, zenith 40°, sun in the south, 30° to
// the south, albedo 0.2, E 1361.
func TestTransposition(t *testing.T) {
	sun := SunPosition{Zenith: 40, Azimuth: 180, Extraterrestrial: 1361}
	p := Plane{Tilt: 30, Azimuth: 180, Albedo: 0.2}
	ghi := 800*math.Cos(40*radians) + 100
	near(t, "ghi", ghi, 712.84, 0.01)
	near(t, "incidence", p.Incidence(sun), 10, 1e-9)
	iso := p.Isotropic(sun, ghi, 800, 100)
	near(t, "beam", iso.Beam, 787.85, 0.01)
	near(t, "sky", iso.Sky, 93.30, 0.01)
	near(t, "ground", iso.Ground, 9.55, 0.01)
	near(t, "plane", iso.Total(), 890.70, 0.01)
	hay := p.HayDavies(sun, ghi, 800, 100)
	near(t, "sky of Hay and Davies", hay.Sky, 114.03, 0.01)
	near(t, "plane of Hay and Davies", hay.Total(), 911.42, 0.01)
}

func TestTranspositionProperties(t *testing.T) {
	for zenith := 0.0; zenith < 90; zenith += 7 {
		for azimuth := 0.0; azimuth < 360; azimuth += 30 {
			sun := SunPosition{Zenith: zenith, Azimuth: azimuth, Extraterrestrial: 1361}
			ghi := 500*math.Cos(zenith*radians) + 120
			// A flat plane sees the global irradiance, whatever it faces.
			flat := Plane{Tilt: 0, Azimuth: 77, Albedo: 0.2}
			near(t, "flat", flat.Isotropic(sun, ghi, 500, 120).Total(), ghi, 1e-9)
			if zenith < 88 {
				near(t, "flat, Hay and Davies", flat.HayDavies(sun, ghi, 500, 120).Total(), ghi, 1e-9)
			}
			// Facing the sun the whole beam falls on it.
			facing := Plane{Tilt: zenith, Azimuth: azimuth - 360, Albedo: 0.2}
			near(t, "facing", facing.HayDavies(sun, ghi, 500, 120).Beam, 500, 1e-9)
			// A wall turned away has no beam and still some sky.
			away := Plane{Tilt: 90, Azimuth: azimuth + 180}
			if l := away.HayDavies(sun, ghi, 500, 120); l.Beam > 1e-9 || l.Sky <= 0 || l.Sky > 60+1e-9 || l.Ground != 0 {
				t.Errorf("away from the sun: %+v", l)
			}
			// Without a beam the two skies are one.
			if a, b := facing.HayDavies(sun, 120, 0, 120), facing.Isotropic(sun, 120, 0, 120); a != b {
				t.Errorf("overcast: %+v, %+v", a, b)
			}
		}
	}
}
