package profiles

import "math"

// SolarConstant is the irradiance outside the atmosphere at the mean distance of
// the sun, in W/m² (G. Kopp and J. L. Lean, A new, lower value of total solar
// irradiance, Geophysical Research Letters 38, 2011: 1360.8).
const SolarConstant = 1361

const radians = math.Pi / 180

// Site is a place on the ground: degrees north, degrees east, metres above the sea.
type Site struct{ Latitude, Longitude, Elevation float64 }

// SunPosition is where the sun stands, seen from a site at one instant. Angles are
// in degrees.
type SunPosition struct {
	Zenith           float64 // of the sun's centre as it is seen, lifted by refraction
	TrueZenith       float64 // without refraction
	Azimuth          float64 // from north, clockwise, 0 to 360
	Declination      float64
	EquationOfTime   float64 // apparent less mean solar time, minutes
	Extraterrestrial float64 // on a plane that faces the sun, outside the atmosphere, W/m²
}

// Sun returns the sun's position at t, in nanoseconds since 1970 UTC.
//
// It follows the low-accuracy method of J. Meeus, Astronomical Algorithms, 2nd
// edition, 1998, chapters 12, 13, 22, 25 and 28: the apparent longitude of the sun
// is good to 0.01° between 1950 and 2050 and decays slowly outside. Terrestrial
// time is taken to be UTC, which moves the sun by 0.001°. Refraction is that of a
// standard atmosphere at the site's elevation and 10 °C; it is not added where the
// whole disc is below the horizon.
func Sun(t int64, s Site) SunPosition {
	e := ephemerisAt(t)
	sinLatitude, cosLatitude := math.Sincos(s.Latitude * radians)
	sinDeclination, cosDeclination := math.Sincos(e.declination)
	sinHour, cosHour := math.Sincos(e.greenwich + s.Longitude*radians)

	sinElevation := sinLatitude*sinDeclination + cosLatitude*cosDeclination*cosHour
	// From the components and not from the sine alone, which is blunt near the zenith.
	east := -cosDeclination * sinHour
	north := sinDeclination*cosLatitude - cosDeclination*sinLatitude*cosHour
	horizontal := math.Hypot(east, north)
	elevation := math.Atan2(sinElevation, horizontal) / radians
	// The parallax of the sun, 8.794″ at the horizon (Meeus, chapter 40).
	elevation -= 8.794 / 3600 * horizontal

	p := SunPosition{
		TrueZenith:       90 - elevation,
		Azimuth:          math.Mod(math.Atan2(east, north)/radians+360, 360),
		Declination:      e.declination / radians,
		EquationOfTime:   e.equation,
		Extraterrestrial: SolarConstant / (e.distance * e.distance),
	}
	p.Zenith = p.TrueZenith - Refraction(elevation, pressureAt(s.Elevation), 10)
	return p
}

// ephemeris is what all sites share: radians, astronomical units, minutes.
type ephemeris struct {
	declination float64
	greenwich   float64 // hour angle at longitude 0
	distance    float64
	equation    float64 // of time
}

func ephemerisAt(t int64) ephemeris {
	days := float64(t/day) + float64(t%day)/float64(day) - 10957.5 // since 2000-01-01 12:00
	c := days / 36525

	mean := (280.46646 + c*(36000.76983+c*0.0003032)) * radians
	anomaly := (357.52911 + c*(35999.05029-c*0.0001537)) * radians
	eccentricity := 0.016708634 - c*(0.000042037+c*0.0000001267)
	center := ((1.914602-c*(0.004817+c*0.000014))*math.Sin(anomaly) +
		(0.019993-c*0.000101)*math.Sin(2*anomaly) +
		0.000289*math.Sin(3*anomaly)) * radians
	sinNode, cosNode := math.Sincos((125.04 - 1934.136*c) * radians)
	nutation := -0.00478 * radians * sinNode
	sinLongitude, cosLongitude := math.Sincos(mean + center - 0.00569*radians + nutation)
	sinTilt, cosTilt := math.Sincos((23.4392911 - c*(0.0130042+c*0.00000016) + 0.00256*cosNode) * radians)

	ascension := math.Atan2(cosTilt*sinLongitude, cosLongitude)
	// Whole turns are taken off before the large number loses its digits.
	sidereal := 280.46061837 + 360*(days-math.Floor(days)) + 0.98564736629*days + c*c*0.000387933
	greenwich := sidereal*radians + nutation*cosTilt - ascension
	equation := mean - 0.0057183*radians - ascension + nutation*cosTilt
	return ephemeris{
		declination: math.Asin(sinTilt * sinLongitude),
		greenwich:   greenwich,
		distance:    1.000001018 * (1 - eccentricity*eccentricity) / (1 + eccentricity*math.Cos(anomaly+center)),
		equation:    math.Remainder(equation, 2*math.Pi) / radians * 4,
	}
}

// Refraction returns by how many degrees air at pressure in mbar and temperature in
// °C lifts the sun at a true elevation in degrees (T. Sæmundsson, Sky and Telescope
// 72, 1986, the companion of G. G. Bennett's formula, as in Meeus, chapter 16). It
// is 0 where the whole disc, with the refraction at the horizon, is below it.
func Refraction(elevation, pressure, temperature float64) float64 {
	if elevation < -0.8333 {
		return 0
	}
	lift := 1.02 / 60 / math.Tan((elevation+10.3/(elevation+5.11))*radians)
	return max(0, lift) * pressure / 1010 * 283 / (273 + temperature)
}

// pressureAt returns the pressure in mbar of the standard atmosphere at metres above
// the sea (ISO 2533).
func pressureAt(elevation float64) float64 {
	return 1013.25 * math.Pow(1-2.25577e-5*min(elevation, 11000), 5.25588)
}

// AirMass returns the relative optical air mass at a seen zenith angle in degrees,
//
//	1/(cos z + 0.50572·(96.07995 − z)^−1.6364)
//
// (F. Kasten and A. T. Young, Applied Optics 28, 1989), and that of the horizon, 38,
// below it.
func AirMass(zenith float64) float64 {
	zenith = min(zenith, 90)
	return 1 / (math.Cos(zenith*radians) + 0.50572*math.Pow(96.07995-zenith, -1.6364))
}

// Daylight is the part of an interval in which the sun is above the horizon.
type Daylight struct {
	SunPosition         // in the middle of that part
	Fraction    float64 // of the interval, 0 to 1
}

// DaylightOver returns the daylight of [from, to), which must not be longer than
// some hours. Hourly data are means over the hour, so the sun is taken in the middle of
// it, or of its sunlit part in the hours of sunrise and sunset.
func DaylightOver(from, to int64, s Site) Daylight {
	return daylightBetween(from, to, sunIsUp(from, s), sunIsUp(to, s), s)
}

// daylights returns the daylight of n intervals in a row.
func daylights(start, step int64, n int, s Site) []Daylight {
	list := make([]Daylight, n)
	first := sunIsUp(start, s)
	for k := range list {
		from := start + int64(k)*step
		last := sunIsUp(from+step, s)
		list[k] = daylightBetween(from, from+step, first, last, s)
		first = last
	}
	return list
}

// daylightBetween is DaylightOver where it is known whether the sun is up at the ends.
func daylightBetween(from, to int64, first, last bool, s Site) Daylight {
	middle := from + (to-from)/2
	m := Sun(middle, s)
	up := m.Zenith < 90
	switch {
	case up && first && last:
		return Daylight{m, 1}
	case !up && !first && !last:
		return Daylight{m, 0}
	}
	// Sunrise and sunset cut each half at most once.
	begin, end := middle, middle
	switch {
	case first && up:
		begin = from
	case first != up:
		begin = crossing(from, middle, s)
	}
	switch {
	case last && up:
		end = to
	case last != up:
		end = crossing(middle, to, s)
	}
	lit := float64(end - begin)
	if !up { // the sun is down in the middle: the lit parts are the two ends
		if !first {
			begin = from
		}
		if !last {
			end = to
		}
		lit = float64(begin-from) + float64(to-end)
		if begin-from > to-end {
			begin, end = from, begin
		} else {
			begin, end = end, to
		}
	}
	return Daylight{Sun(begin+(end-begin)/2, s), lit / float64(to-from)}
}

func sunIsUp(t int64, s Site) bool { return Sun(t, s).Zenith < 90 }

// crossing returns the instant, to a second, of the one rise or set in [from, to].
func crossing(from, to int64, s Site) int64 {
	before := sunIsUp(from, s)
	for to-from > second {
		middle := from + (to-from)/2
		if sunIsUp(middle, s) == before {
			from = middle
		} else {
			to = middle
		}
	}
	return to
}
