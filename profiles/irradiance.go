package profiles

import "math"

// lowSun is the zenith angle in degrees beyond which the direct beam is not told
// from the global irradiance: the division by cos z there makes noise of it (common
// practice: 85° to 87°).
const lowSun = 87

// Erbs returns the diffuse fraction DHI/GHI of hourly means for the clearness index
// kt = GHI/(E·cos z), E the extraterrestrial irradiance (D. G. Erbs, S. A. Klein and
// J. A. Duffie, Solar Energy 28, 1982, equation 1).
func Erbs(kt float64) float64 {
	switch {
	case kt <= 0.22:
		return 1 - 0.09*max(kt, 0)
	case kt <= 0.8:
		return 0.9511 + kt*(-0.1604+kt*(4.388+kt*(-16.638+kt*12.336)))
	}
	return 0.165
}

// Decompose splits the global horizontal irradiance in W/m² into direct normal and
// diffuse horizontal by Erbs, so that ghi = dni·cos z + dhi. Beyond 87° from the
// zenith all of it is diffuse, and dni is never more than there is outside the
// atmosphere.
func Decompose(ghi float64, sun SunPosition) (dni, dhi float64) {
	cos := math.Cos(sun.Zenith * radians)
	if ghi <= 0 || sun.Zenith > lowSun {
		return 0, max(ghi, 0)
	}
	dni = ghi * (1 - Erbs(ghi/(sun.Extraterrestrial*cos))) / cos
	dni = min(dni, sun.Extraterrestrial)
	return dni, ghi - dni*cos
}

// Haurwitz returns the global horizontal irradiance in W/m² under a clear sky,
//
//	1098·cos z·exp(−0.057/cos z)
//
// (B. Haurwitz, Journal of Meteorology 2, 1945; 0.059 is in print too and gives
// 0.2 % less with a high sun). It knows the zenith angle in degrees and nothing else.
func Haurwitz(zenith float64) float64 {
	cos := math.Cos(zenith * radians)
	if zenith >= 90 || cos <= 0 {
		return 0
	}
	return 1098 * cos * math.Exp(-0.057/cos)
}

// ClearTurbidity is the Linke turbidity of clear air that is assumed where no weather
// is given (2 is very clean, 5 hazy; common practice).
const ClearTurbidity = 3

// ClearSky returns the irradiance in W/m² under a sky without clouds, global
// horizontal, direct normal and diffuse horizontal, for a Linke turbidity and the
// site's elevation h in metres (P. Ineichen and R. Perez, Solar Energy 73, 2002):
//
//	GHI = c1·E·cos z·exp(−c2·AM·(f1 + f2·(TL − 1)))·exp(0.01·AM^1.8)
//	DNI = (0.664 + 0.163/f1)·E·exp(−0.09·AM·(TL − 1))
//	c1 = 5.09e-5·h + 0.868, c2 = 3.92e-5·h + 0.0387, f1 = exp(−h/8000), f2 = exp(−h/1250)
//
// AM is the air mass at the site's pressure. It is held at 10 in the last factor,
// which grows without bound towards the horizon; so bounded, GHI there stays beside
// Haurwitz. Only what GHI leaves room for is direct.
func ClearSky(sun SunPosition, s Site, turbidity float64) (ghi, dni, dhi float64) {
	cos := math.Cos(sun.Zenith * radians)
	if sun.Zenith >= 90 || cos <= 0 {
		return 0, 0, 0
	}
	h := min(max(s.Elevation, 0), 5000)
	am := AirMass(sun.Zenith) * pressureAt(h) / pressureAt(0)
	f1, f2 := math.Exp(-h/8000), math.Exp(-h/1250)
	c1, c2 := 5.09e-5*h+0.868, 3.92e-5*h+0.0387
	ghi = c1 * sun.Extraterrestrial * cos * math.Exp(-c2*am*(f1+f2*(turbidity-1))+0.01*math.Pow(min(am, 10), 1.8))
	dni = (0.664 + 0.163/f1) * sun.Extraterrestrial * math.Exp(-0.09*am*(turbidity-1))
	// With a low sun the two formulas disagree; some of the light is always diffuse.
	dni = min(dni, 0.95*ghi/cos)
	return ghi, dni, ghi - dni*cos
}

// Plane is a surface: its tilt from the horizontal and the direction it faces, from
// north clockwise, in degrees, and the albedo of the ground before it.
type Plane struct{ Tilt, Azimuth, Albedo float64 }

// Albedo is the part of the light that ordinary ground throws back (common practice;
// snow 0.6 to 0.8).
const Albedo = 0.2

// Incidence returns the angle in degrees between the sun and the plane's normal,
//
//	cos θ = cos z·cos β + sin z·sin β·cos(γ_sun − γ)
func (p Plane) Incidence(sun SunPosition) float64 {
	return math.Acos(max(-1, min(1, p.cosIncidence(sun)))) / radians
}

func (p Plane) cosIncidence(sun SunPosition) float64 {
	sinZenith, cosZenith := math.Sincos(sun.Zenith * radians)
	sinTilt, cosTilt := math.Sincos(p.Tilt * radians)
	return cosZenith*cosTilt + sinZenith*sinTilt*math.Cos((sun.Azimuth-p.Azimuth)*radians)
}

// Irradiance is light on a surface in W/m² and where it comes from.
type Irradiance struct{ Beam, Sky, Ground float64 }

// Total returns the sum.
func (i Irradiance) Total() float64 { return i.Beam + i.Sky + i.Ground }

// Isotropic puts light on the plane with a sky that is equally bright everywhere
// (B. Y. H. Liu and R. C. Jordan, Solar Energy 4, 1960).
func (p Plane) Isotropic(sun SunPosition, ghi, dni, dhi float64) Irradiance {
	cosTilt := math.Cos(p.Tilt * radians)
	return Irradiance{
		Beam:   dni * max(0, p.cosIncidence(sun)),
		Sky:    dhi * (1 + cosTilt) / 2,
		Ground: ghi * p.Albedo * (1 - cosTilt) / 2,
	}
}

// HayDavies puts light on the plane with a sky whose part A = DNI/E comes from
// around the sun and the rest from everywhere (J. E. Hay and J. A. Davies,
// Calculation of the solar radiation incident on an inclined surface, Proceedings of
// the First Canadian Solar Radiation Data Workshop, 1980):
//
//	sky = DHI·(A·R + (1 − A)·(1 + cos β)/2), R = cos θ/max(cos z, 0.0175)
func (p Plane) HayDavies(sun SunPosition, ghi, dni, dhi float64) Irradiance {
	light := p.Isotropic(sun, ghi, dni, dhi)
	if sun.Extraterrestrial <= 0 {
		return light
	}
	a := max(0, min(1, dni/sun.Extraterrestrial))
	r := max(0, p.cosIncidence(sun)) / max(math.Cos(sun.Zenith*radians), 0.0175)
	light.Sky = dhi*a*r + (1-a)*light.Sky
	return light
}
