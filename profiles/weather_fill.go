package profiles

import (
	"fmt"
	"math"
)

// finish checks what was read against the sun, fills in what is missing and makes the
// Weather; nil where there is a fault.
func (r *weatherReader) finish() *Weather {
	n := len(r.line)
	r.daylight = daylights(r.start, r.step, n, r.site)
	if r.typical {
		r.assumed = append(r.assumed, r.typicalAssumed())
	}
	if len(r.unused) > 0 {
		r.assumed = append(r.assumed, fmt.Sprintf("columns that are not used: %s", joined(r.unused)))
	}
	r.clampLight()
	r.closeLight()
	r.checkLight()
	if len(r.faults) > 0 {
		return nil
	}
	r.fillLight()
	r.fillPlain(temperature, mildAir, "degC")
	r.fillPlain(wind, calmWind, "m/s")
	if len(r.faults) > 0 {
		return nil
	}
	w := &Weather{
		File: r.name, Station: r.station, Site: r.site, Typical: r.typical, Assumed: r.assumed, Warnings: r.warnings,
		start: r.start, step: r.step, offset: r.offset, points: make([]WeatherPoint, n),
	}
	w.Warnings.Sort()
	for k := range w.points {
		v := func(c int) float64 { return r.values[c][k] }
		w.points[k] = WeatherPoint{v(ghi), v(dni), v(dhi), v(temperature), v(wind)}
	}
	return w
}

func joined(list []string) string {
	const most = 6
	s := ""
	for i, one := range list {
		switch {
		case i == most:
			return s + fmt.Sprintf(" and %d more", len(list)-most)
		case i > 0:
			s += ", "
		}
		s += one
	}
	return s
}

// clampLight takes the few watts below zero of a thermopile at night as nothing.
func (r *weatherReader) clampLight() {
	for c := ghi; c <= dhi; c++ {
		for k, v := range r.values[c] {
			if v < 0 {
				r.values[c][k] = 0
			}
		}
	}
}

// closeLight derives the one of the three irradiances that is not there from the other
// two, DNI·cos z + DHI = GHI, or two of them from GHI by Decompose.
func (r *weatherReader) closeLight() {
	var globals, directs, diffuses, split int
	for k, d := range r.daylight {
		g, n, h := r.values[ghi][k], r.values[dni][k], r.values[dhi][k]
		g0, n0, h0 := math.IsNaN(g), math.IsNaN(n), math.IsNaN(h)
		if d.Fraction == 0 {
			// Whatever stands here at night is held against the sun and never used.
			for c := ghi; c <= dhi; c++ {
				if math.IsNaN(r.values[c][k]) {
					r.values[c][k] = 0
				}
			}
			continue
		}
		cos := math.Cos(d.Zenith * radians)
		switch {
		case g0 && !n0 && !h0:
			g = n*cos + h
			globals++
		case !g0 && n0 && !h0:
			if n = 0; d.Zenith <= lowSun {
				n = min(max(0, g-h)/cos, d.Extraterrestrial)
			}
			directs++
		case !g0 && !n0 && h0:
			h = max(0, g-n*cos)
			diffuses++
		case !g0 && n0 && h0:
			n, h = Decompose(g/d.Fraction, d.SunPosition)
			n, h = n*d.Fraction, h*d.Fraction
			split++
		}
		r.values[ghi][k], r.values[dni][k], r.values[dhi][k] = g, n, h
	}
	tell := func(count int, what string) {
		if count > 0 {
			r.assumed = append(r.assumed, fmt.Sprintf("%s (%d of %d intervals)", what, count, len(r.daylight)))
		}
	}
	tell(globals, "global irradiance from direct and diffuse")
	tell(directs, "direct irradiance from global and diffuse")
	tell(diffuses, "diffuse irradiance from global and direct")
	tell(split, "direct and diffuse irradiance from global by Erbs, Klein and Duffie 1982")
}

// fillLight estimates missing irradiance by the clear-sky index, GHI over that of a
// clear sky, on a straight line between the intervals around the gap, and splits it by
// Decompose. A gap over a night goes on in the morning.
func (r *weatherReader) fillLight() {
	index := func(k int) (v float64, ok bool) {
		d := r.daylight[k]
		if d.Fraction < 1 || d.Zenith > 85 || math.IsNaN(r.values[ghi][k]) {
			return 0, false
		}
		clear, _, _ := ClearSky(d.SunPosition, r.site, ClearTurbidity)
		return r.values[ghi][k] / clear, true
	}
	g := gaps{r: r, column: ghi}
	for k := range r.daylight {
		if math.IsNaN(r.values[ghi][k]) {
			g.missing = append(g.missing, k)
		}
	}
	if !g.short() {
		return
	}
	type estimate struct{ g, n, h float64 }
	estimates := make([]estimate, len(g.missing))
	for i, k := range g.missing {
		a, va, okA := seek(k, -1, len(r.daylight), index)
		b, vb, okB := seek(k, 1, len(r.daylight), index)
		kc := 0.0
		switch {
		case okA && okB:
			kc = va + (vb-va)*float64(k-a)/float64(b-a)
		case okA:
			kc = va
		case okB:
			kc = vb
		}
		d := r.daylight[k]
		clear, _, _ := ClearSky(d.SunPosition, r.site, ClearTurbidity)
		n, h := Decompose(kc*clear, d.SunPosition)
		estimates[i] = estimate{kc * clear * d.Fraction, n * d.Fraction, h * d.Fraction}
	}
	for i, k := range g.missing {
		r.values[ghi][k], r.values[dni][k], r.values[dhi][k] = estimates[i].g, estimates[i].n, estimates[i].h
	}
	g.tell("by the clear-sky index of the intervals around them")
}

// seek returns the nearest interval from k on in a direction that has a value.
func seek(k, by, n int, value func(int) (float64, bool)) (at int, v float64, ok bool) {
	for at = k + by; at >= 0 && at < n; at += by {
		if v, ok = value(at); ok {
			return at, v, true
		}
	}
	return 0, 0, false
}

// fillPlain fills a column on straight lines; one that is not there, or empty, is the
// usual value.
func (r *weatherReader) fillPlain(c int, usual float64, base string) {
	values := r.values[c]
	g := gaps{r: r, column: c}
	for k, v := range values {
		if math.IsNaN(v) {
			g.missing = append(g.missing, k)
		}
	}
	if len(g.missing) == len(values) {
		for k := range values {
			values[k] = usual
		}
		r.assumed = append(r.assumed, fmt.Sprintf("no %s is given: %g %s at all times", weatherNames[c], usual, base))
		return
	}
	if !g.short() {
		return
	}
	for i := 0; i < len(g.missing); {
		j := i
		for j+1 < len(g.missing) && g.missing[j+1] == g.missing[j]+1 {
			j++
		}
		before, after := g.missing[i]-1, g.missing[j]+1
		for k := before + 1; k < after; k++ {
			switch {
			case before < 0:
				values[k] = values[after]
			case after == len(values):
				values[k] = values[before]
			default:
				values[k] = values[before] + (values[after]-values[before])*float64(k-before)/float64(after-before)
			}
		}
		i = j + 1
	}
	g.tell("on straight lines")
}

// gaps are the intervals of a column without a value, in order.
type gaps struct {
	r       *weatherReader
	column  int
	missing []int
}

// short reports whether there is anything to fill, and that no gap is too long; one
// that is becomes a fault.
func (g *gaps) short() bool {
	most := int(longestGap / g.r.step)
	first := 0 // of the gap
	for i, k := range g.missing {
		if i == 0 || g.missing[i-1] != k-1 && !g.onlyNight(g.missing[i-1], k) {
			first = k
		}
		if k-first >= most {
			g.r.faultAt(g.r.lineAt(first), g.r.column[g.column].at+1, "%s: no value for more than a day from %s on; longer gaps are not estimated: fill them from another source, or end the period before",
				weatherNames[g.column], Format(g.r.start+int64(first)*g.r.step, g.r.clock.zone))
			return false
		}
	}
	return len(g.missing) > 0
}

// onlyNight reports whether between two missing intervals of light there is only night,
// whose values say nothing.
func (g *gaps) onlyNight(a, b int) bool {
	if g.column != ghi {
		return false
	}
	for k := a + 1; k < b; k++ {
		if g.r.daylight[k].Fraction > 0 {
			return false
		}
	}
	return true
}

// lineAt returns the line of an interval, or of the last row before it.
func (r *weatherReader) lineAt(k int) int {
	for k = max(k, 0); k > 0 && r.line[k] == 0; k-- {
	}
	return r.line[k]
}

func (g *gaps) tell(how string) {
	k := g.missing[0]
	g.r.assumed = append(g.r.assumed, fmt.Sprintf("%s: %d of %d values were missing and are estimated %s, the first at %s (line %d)",
		weatherNames[g.column], len(g.missing), len(g.r.line), how, Format(g.r.start+int64(k)*g.r.step, g.r.clock.zone), g.r.lineAt(k)))
}
