package main

import "math"

// plantOutput returns the output of a solar plant at h hours of the year, per unit of
// its inverter's rating.
func (c *climate) plantOutput(p plant, h float64) float64 {
	day := math.Floor(h/24) + 1
	g := 2 * math.Pi * (day - 1) / 365
	// Declination and equation of time: Spencer, Fourier series representation of the
	// position of the sun, Search 2(5), 1971.
	decl := 0.006918 - 0.399912*math.Cos(g) + 0.070257*math.Sin(g) - 0.006758*math.Cos(2*g) +
		0.000907*math.Sin(2*g) - 0.002697*math.Cos(3*g) + 0.00148*math.Sin(3*g)
	eot := 229.18 / 60 * (0.000075 + 0.001868*math.Cos(g) - 0.032077*math.Sin(g) -
		0.014615*math.Cos(2*g) - 0.040849*math.Sin(2*g))
	angle := (math.Mod(h, 24) - c.solarLag + eot - 12) * math.Pi / 12
	lat := c.latitude * math.Pi / 180
	sinLat, cosLat := math.Sincos(lat)
	sinDecl, cosDecl := math.Sincos(decl)
	sinAngle, cosAngle := math.Sincos(angle)
	cosZ := sinLat*sinDecl + cosLat*cosDecl*cosAngle
	if cosZ < 0.02 {
		return 0
	}
	// East, north and up of the sun's direction; cosine of its incidence.
	east, north := -cosDecl*sinAngle, cosLat*sinDecl-sinLat*cosDecl*cosAngle
	sinTilt, cosTilt := math.Sincos(p.tilt * math.Pi / 180)
	sinAz, cosAz := math.Sincos(p.azimuth * math.Pi / 180)
	cosIn := max(0, cosZ*cosTilt+sinTilt*(east*sinAz+north*cosAz))

	// Clear sky: Haurwitz, Journal of Meteorology 2, 1945. Diffuse part: Erbs, Klein and Duffie, Solar
	// Energy 28(4), 1982. Isotropic sky: Liu and Jordan, 1963.
	ghi := 1098 * cosZ * math.Exp(-0.057/cosZ) * c.sunshine(h-p.lag)
	kt := min(1, ghi/(1361*cosZ))
	dhi := ghi * diffuse(kt)
	poa := (ghi-dhi)*cosIn/max(cosZ, 0.08) + dhi*(1+cosTilt)/2 + 0.2*ghi*(1-cosTilt)/2

	// Modules at 3 m/s of wind (Faiman, Progress in Photovoltaics 16(4), 2008), −0.4 % per kelvin, 12 % of
	// other losses (common practice), an inverter of 97 %.
	cell := c.temperature(h) + poa/(25+6.84*3)
	dc := p.ratio * poa / 1000 * (1 - 0.004*(cell-25)) * 0.88
	return min(1, max(0, 0.97*dc))
}

// diffuse is the share of diffuse in global irradiance by clearness index (Erbs, Klein
// and Duffie, 1982).
func diffuse(k float64) float64 {
	switch {
	case k <= 0.22:
		return 1 - 0.09*k
	case k <= 0.80:
		return 0.9511 + k*(-0.1604+k*(4.388+k*(-16.638+k*12.336)))
	}
	return 0.165
}
