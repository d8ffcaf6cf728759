package sim

import (
	"fmt"
	"math"

	"yearflow/profiles"
	"yearflow/sim/feeder"
	"yearflow/sim/tables"
)

// sky is the weather that solar generators are worked out from, laid over the period.
type sky struct {
	weather *profiles.Weather
	light   *profiles.Sunlight
	model   *feeder.Model
}

// assume tells an assumption once, at the first generator that it is made for.
func (s *sky) assume(at tables.Pos, what, value string) {
	for i := range s.model.Assumed {
		if s.model.Assumed[i].What == what {
			return
		}
	}
	s.model.Assumed = append(s.model.Assumed, feeder.Assumption{Pos: at, What: what, Value: value})
}

// newSky reads the study's weather where a generator needs it. Without a file the
// sky is clear, which is announced in odd.
func newSky(st *feeder.Study, axis profiles.Axis, faults *tables.Faults, odd *tables.Faults) *sky {
	at := firstSolar(st.Model)
	if at == nil {
		return nil
	}
	w := st.Settings.Weather
	site, known := siteOf(st)
	s := &sky{model: st.Model}
	if w.File == "" {
		if !known {
			faults.Add(*at, "output from weather needs a site: give latitude and longitude in [weather] of study.toml, or longitude and latitude in nodes.csv")
			return nil
		}
		s.weather = profiles.ClearSkyWeather(site, axis, 20)
		odd.Add(*at, "no weather is given: solar output is that of a cloudless sky at 20 degC, at %.3f, %.3f deg: an upper bound, not an estimate ([weather] file in study.toml names one)", site.Latitude, site.Longitude)
	} else {
		o := profiles.WeatherOptions{Zone: w.Zone, Stamped: w.Stamped}
		if known {
			o.Site = &site
		}
		var err error
		if s.weather, err = profiles.OpenWeather(st.FS, w.File, o); err != nil {
			if list, ok := err.(tables.Faults); ok {
				*faults = append(*faults, list...)
			} else {
				faults.Add(w.At, "%v", err)
			}
			return nil
		}
		*odd = append(*odd, s.weather.Warnings...)
	}
	for _, text := range s.weather.Assumed {
		st.Model.Assumed = append(st.Model.Assumed, feeder.Assumption{Pos: tables.Pos{File: w.File}, What: "weather", Value: text})
	}
	light, err := s.weather.Over(axis)
	if err != nil {
		faults.Add(w.At, "weather %s: %v", w.File, err)
		return nil
	}
	s.light = light
	return s
}

func firstSolar(m *feeder.Model) *tables.Pos {
	for i := range m.Generators {
		if m.Generators[i].Solar != nil {
			return &m.Generators[i].At
		}
	}
	return nil
}

// siteOf is the site of [weather], or the middle of the nodes' coordinates.
func siteOf(st *feeder.Study) (profiles.Site, bool) {
	w := st.Settings.Weather
	if !feeder.Unknown(w.Latitude) && !feeder.Unknown(w.Longitude) {
		s := profiles.Site{Latitude: w.Latitude, Longitude: w.Longitude}
		if !feeder.Unknown(w.Elevation) {
			s.Elevation = w.Elevation
		}
		return s, true
	}
	var s profiles.Site
	n := 0.0
	for i := range st.Model.Nodes {
		if x := &st.Model.Nodes[i]; x.LonLat {
			s.Longitude += x.X
			s.Latitude += x.Y
			n++
		}
	}
	s.Longitude /= math.Max(n, 1)
	s.Latitude /= math.Max(n, 1)
	return s, n > 0
}

// series works out one generator's output, kW: before clipping where a function
// shares the rating, else after it.
func (s *sky) series(g *feeder.Generator, faults *tables.Faults) *profiles.Series {
	a := profiles.DefaultArray(s.weather.Site)
	a.DCKW, a.RatingKVA = g.Solar.DC, g.KVA
	a.Tilt, a.Azimuth = or(g.Solar.Tilt, a.Tilt), or(g.Solar.Azimuth, a.Azimuth)
	a.Losses = 100 * or(g.Solar.Losses, a.Losses/100)
	a.TempCoefficient = or(g.Solar.Coefficient, a.TempCoefficient)
	a.InverterEfficiency = 100 * or(g.Solar.Efficiency, a.InverterEfficiency/100)
	for _, blank := range []struct {
		what  string
		given float64
		value float64
	}{{"tilt [deg]", g.Solar.Tilt, a.Tilt}, {"azimuth [deg]", g.Solar.Azimuth, a.Azimuth}, {"losses [%]", g.Solar.Losses, a.Losses},
		{"temperature coefficient [%/degC]", g.Solar.Coefficient, a.TempCoefficient}, {"inverter efficiency [%]", g.Solar.Efficiency, a.InverterEfficiency}} {
		if feeder.Unknown(blank.given) {
			s.assume(g.At, "solar generators: "+blank.what, fmt.Sprintf("%.6g (common practice)", blank.value))
		}
	}
	bad := false
	for _, f := range a.Check() {
		faults.Add(g.At, "generator %q: %s: %s", g.Name, f.Field, f.Text)
		bad = true
	}
	if bad {
		return nil
	}
	solar := s.light.Solar(fmt.Sprintf("output of %s", g.Name), a)
	if g.Function >= 0 {
		return solar.Available
	}
	return solar.AC
}
