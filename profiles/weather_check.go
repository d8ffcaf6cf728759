package profiles

import (
	"fmt"
	"math"

	"yearflow/sim/tables"
)

const (
	// lightAtNight is the share of a file's light that may fall while the sun is below
	// the horizon: stars, lamps and snow give none worth the name.
	lightAtNight = 0.02
	// betterFit is by how much light must follow another sun better than that of the
	// site before it is said. An hour's shift costs 0.03 of the correlation, clouds that
	// prefer the afternoon less than 0.01 (own trials).
	betterFit = 0.01
	// samples is how many intervals the sun is compared at.
	samples = 9000
)

// checkLight holds the irradiance against the sun of the site. Weather of another place
// or of another clock is a fault; single odd values are a warning.
func (r *weatherReader) checkLight() {
	r.checkSize()
	r.checkClosure()
	r.checkPlace()
}

func (r *weatherReader) warn(c int, format string, args ...any) {
	pos := r.column[c].pos
	if pos.File == "" {
		pos.File = r.name
	}
	r.warnings.Add(pos, format, args...)
}

// checkSize counts light beyond the limits of what is physically possible (C. N. Long
// and E. G. Dutton, BSRN Global Network recommended QC tests, V2.0, 2002, recalled from
// memory): global 1.5·E·cos^1.2 z + 100, diffuse 0.95·E·cos^1.2 z + 50, direct E, W/m².
func (r *weatherReader) checkSize() {
	var count [3]int
	var first [3]int
	day, high, brightest := 0, 0, 0.0
	for k, d := range r.daylight {
		if d.Fraction == 0 {
			continue
		}
		day++
		cos := math.Pow(math.Max(0, math.Cos(d.Zenith*radians)), 1.2)
		most := [3]float64{1.5*d.Extraterrestrial*cos + 100, d.Extraterrestrial, 0.95*d.Extraterrestrial*cos + 50}
		for c := range most {
			if v := r.values[c][k]; v > most[c] {
				if count[c] == 0 {
					first[c] = k
				}
				count[c]++
			}
		}
		if !math.IsNaN(r.values[ghi][k]) && d.Zenith < 75 {
			high++
			brightest = max(brightest, r.values[ghi][k])
		}
	}
	for c, n := range count {
		if n == 0 || r.column[c].at < 0 {
			continue
		}
		k := first[c]
		text := fmt.Sprintf("%s is more than the sun can give in %d of %d intervals of daylight, the first at %s (line %d): %.4g W/m2 with the sun %.1f degrees high",
			weatherNames[c], n, day, r.at(k), r.lineAt(k), r.values[c][k], 90-r.daylight[k].Zenith)
		if n*20 > day {
			r.faults.Add(r.column[c].pos, "%s; check the unit, the clock and the place", text)
		} else {
			r.warn(c, "%s", text)
		}
	}
	if int64(high)*r.step > 24*hour && brightest < 5 {
		r.faults.Add(r.lightPos(), "irradiance is never above %.3g W/m2 in %d intervals with the sun well up; is it in [kW/m2]?", brightest, high)
	}
}

func (r *weatherReader) at(k int) string {
	return Format(r.start+int64(k)*r.step, r.clock.zone)
}

// checkClosure holds global against direct and diffuse irradiance where the file has
// all three: within 8 %, with a low sun 15 % (Long and Dutton 2002).
func (r *weatherReader) checkClosure() {
	if r.column[ghi].at < 0 || r.column[dni].at < 0 || r.column[dhi].at < 0 {
		return
	}
	tested, bad, sum, total := 0, 0, 0.0, 0.0
	for k, d := range r.daylight {
		parts := r.values[dni][k]*math.Cos(d.Zenith*radians) + r.values[dhi][k]
		if d.Fraction < 1 || !(parts > 50) || math.IsNaN(r.values[ghi][k]) {
			continue
		}
		within := 0.08
		if d.Zenith > 75 {
			within = 0.15
		}
		tested++
		sum += parts
		total += r.values[ghi][k]
		if math.Abs(r.values[ghi][k]/parts-1) > within {
			bad++
		}
	}
	if bad*10 > tested {
		r.warn(ghi, "ghi differs from dni·cos z + dhi by more than 8 %% in %d of %d intervals; over all it is %.2f of it: are the columns what their names say, and the stamps the %s of the interval?",
			bad, tested, total/sum, r.stamped())
	}
}

func (r *weatherReader) stamped() string {
	switch {
	case r.tmy3:
		return "end"
	case r.options.Stamped == "":
		return "start"
	}
	return r.options.Stamped
}

// suns is samples of the file's intervals and where the sun is in the middle of each.
type suns struct {
	times  []int64
	light  []float64 // of the file
	places []ephemeris
}

// outside returns the light outside the atmosphere on level ground of a site, of the sun
// as it stands some time later; in half a day its declination does not move by more than
// the correlation can see.
func (s *suns) outside(site Site, later int64) []float64 {
	v := make([]float64, len(s.times))
	sinLatitude, cosLatitude := math.Sincos(site.Latitude * radians)
	turn := site.Longitude*radians + 2*math.Pi*float64(later)/float64(day)
	for i, e := range s.places {
		sinDeclination, cosDeclination := math.Sincos(e.declination)
		v[i] = max(0, sinLatitude*sinDeclination+cosLatitude*cosDeclination*math.Cos(e.greenwich+turn)) / (e.distance * e.distance)
	}
	return v
}

// fit is the correlation through the origin of two lights.
func fit(a, b []float64) float64 {
	ab, aa, bb := 0.0, 0.0, 0.0
	for i := range a {
		ab, aa, bb = ab+a[i]*b[i], aa+a[i]*a[i], bb+b[i]*b[i]
	}
	if aa == 0 || bb == 0 {
		return 0
	}
	return ab / math.Sqrt(aa*bb)
}

// sample takes intervals at a stride that meets every time of day.
func (r *weatherReader) sample() *suns {
	stride := len(r.line)/samples + 1
	for perDay := max(1, int(day/r.step)); common(stride, perDay) > 1; {
		stride++
	}
	s := &suns{}
	for k := 0; k < len(r.line); k += stride {
		if v := r.values[ghi][k]; !math.IsNaN(v) {
			t := r.start + int64(k)*r.step + r.step/2
			s.times = append(s.times, t)
			s.places = append(s.places, ephemerisAt(t))
			s.light = append(s.light, v)
		}
	}
	return s
}

// common returns the greatest common divisor.
func common(a, b int) int {
	for b > 0 {
		a, b = b, a%b
	}
	return a
}

// checkPlace asks whether the light follows the sun of the site, or rather that of
// another: of the other hemisphere, of the other side of the globe, of another clock.
func (r *weatherReader) checkPlace() {
	night, total := 0.0, 0.0
	for k := range r.daylight {
		if v := r.values[ghi][k]; v > 0 {
			total += v
			from := r.start + int64(k)*r.step
			if r.daylight[k].Fraction == 0 && Sun(from, r.site).TrueZenith > 92 && Sun(from+r.step, r.site).TrueZenith > 92 {
				night += v
			}
		}
	}
	if total == 0 {
		return
	}
	s := r.sample()
	best, what, given := r.bestSun(s)
	better := best > given+betterFit && float64(len(r.line))*float64(r.step) >= 3*float64(day)
	switch share := night / total; {
	case share > lightAtNight:
		text := fmt.Sprintf("%.0f %% of the light falls while the sun is below the horizon of latitude %.4g, longitude %.4g: it is brightest around %s, the sun stands highest around %s (standard time)",
			100*share, r.site.Latitude, r.site.Longitude, r.brightest(s.times, s.light), r.brightest(s.times, s.outside(r.site, 0)))
		if better {
			text += "; " + what
		} else {
			text += "; check the place, the zone and the units of the file"
		}
		r.faults.Add(r.lightPos(), "%s", text)
	case better:
		r.warnings.Add(r.lightPos(), "the light does not follow the sun of latitude %.4g, longitude %.4g well: it is brightest around %s, the sun stands highest around %s (standard time); %s",
			r.site.Latitude, r.site.Longitude, r.brightest(s.times, s.light), r.brightest(s.times, s.outside(r.site, 0)), what)
	}
}

func (r *weatherReader) lightPos() tables.Pos {
	for c := ghi; c <= dhi; c++ {
		if r.column[c].at >= 0 {
			return r.column[c].pos
		}
	}
	return tables.Pos{File: r.name}
}

// bestSun tries other suns and says which the light follows best.
func (r *weatherReader) bestSun(s *suns) (best float64, what string, given float64) {
	given = fit(s.light, s.outside(r.site, 0))
	best = given
	try := func(site Site, later int64, text string) {
		if f := fit(s.light, s.outside(site, later)); f > best+1e-3 {
			best, what = f, text
		}
	}
	south, east, both := r.site, r.site, r.site
	south.Latitude, east.Longitude = -south.Latitude, -east.Longitude
	both.Latitude, both.Longitude = south.Latitude, east.Longitude
	// The commonest mistakes first: a later one must fit better yet.
	try(south, 0, "it fits the other hemisphere: is the sign of the latitude right (north is positive)?")
	try(east, 0, "it fits the other side of the globe: is the sign of the longitude right (east is positive)?")
	try(both, 0, "it fits the opposite hemispheres: are the signs of latitude and longitude right (north and east are positive)?")
	if r.step < hour {
		try(r.site, r.step, r.stampText(r.step))
		try(r.site, -r.step, r.stampText(-r.step))
	}
	for h := int64(1); h <= 12; h++ {
		for _, later := range [...]int64{h * hour, -h * hour} {
			try(r.site, later, r.stampText(later))
		}
	}
	return best, what, given
}

// stampText says what a shift of the light means: it follows the sun of later.
func (r *weatherReader) stampText(later int64) string {
	way, wrong := "late", later
	if later > 0 {
		way = "early"
	} else {
		wrong = -later
	}
	s := fmt.Sprintf("it fits when its stamps are taken to be %s too %s: check the zone", stepText(wrong), way)
	switch {
	case r.tmy3:
		return s + " (the hours from UTC on the first line)"
	case later == -r.step && r.stamped() == "start":
		return s + ", or are the stamps the end of their intervals (stamped = \"end\")?"
	case later == r.step && r.stamped() == "end":
		return s + ", or are the stamps the start of their intervals (stamped = \"start\")?"
	}
	return s + ", and whether the clock is put forward in summer"
}

// brightest returns the hh:mm of standard time around which light falls, the mean on
// the circle of the day.
func (r *weatherReader) brightest(times []int64, light []float64) string {
	x, y := 0.0, 0.0
	for i, t := range times {
		sin, cos := math.Sincos(2 * math.Pi * float64(floorMod(t+r.offset, day)) / float64(day))
		x, y = x+light[i]*cos, y+light[i]*sin
	}
	minutes := int(math.Round(math.Atan2(y, x)/(2*math.Pi)*1440)+1440) % 1440
	return fmt.Sprintf("%02d:%02d", minutes/60, minutes%60)
}
