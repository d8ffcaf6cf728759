package profiles

import (
	"fmt"
	"io/fs"
	"math"
	"time"

	"yearflow/sim/tables"
)

// Weather is the weather of one site at a regular step, every value filled in. It is
// not changed after it was made, so any number of goroutines may use it.
type Weather struct {
	File    string // blank: a clear sky
	Station string // as a TMY3 file names it
	Site    Site
	// Typical is true for a typical year: its months may come from different years
	// and it is laid over any year by month, day and hour.
	Typical bool
	// Assumed says what was assumed, estimated or left unused, one sentence each.
	Assumed []string
	// Warnings is what is possible but implausible.
	Warnings tables.Faults

	start, step int64
	offset      int64 // of the standard time by which days are matched
	points      []WeatherPoint
}

// WeatherOptions says how a file is to be read. The zero value reads stamps without
// an offset as UTC, at the start of their interval.
type WeatherOptions struct {
	Zone    *time.Location // of stamps without an offset; a TMY3 file knows its own
	Stamped string         // start (or blank), end or instant; a TMY3 file is always end
	Site    *Site          // of a file without latitude and longitude columns; it wins over TMY3's
}

// Columns of the weather.
const (
	ghi = iota
	dni
	dhi
	temperature
	wind
	weatherColumns
)

var weatherNames = [weatherColumns]string{"ghi", "dni", "dhi", "temperature", "wind"}

// longestGap is the time over which missing weather is estimated.
const longestGap = day

// longestWeatherStep is how long a step may be: in an hour the sun moves by 15°.
const longestWeatherStep = hour

// OpenWeather reads a file of weather: CSV with the columns
//
//	time, ghi [W/m2], dni [W/m2], dhi [W/m2], temperature [degC], wind [m/s],
//	latitude [deg], longitude [deg], elevation [m]
//
// in any order and with any unit of the same kind, or the layout of a TMY3 file (S.
// Wilcox and W. Marion, Users manual for TMY3 data sets, NREL/TP-581-43156, 2008),
// which is known by its two header lines. Needed are the time and ghi, or dni with
// dhi. Cells that are blank or hold −9900, −999, 9999 and the like are missing, as are
// rows that were left out; gaps up to a day are estimated and counted in Assumed. A file
// whose months come from different years, as those of a typical year do, is told by its
// dates: month, day and hour go on where the year jumps.
// Everything wrong with the file comes back together as tables.Faults; it
// includes weather that cannot be that of the site: light at night, more light than
// the sun gives.
func OpenWeather(fsys fs.FS, file string, o WeatherOptions) (*Weather, error) {
	r := &weatherReader{reader: reader{name: file, clock: newClock(o.Zone)}, options: o}
	for c := range r.column {
		r.column[c].at = -1
	}
	r.open(fsys)
	if len(r.faults) > 0 {
		return nil, r.faults.Err()
	}
	w := r.finish()
	return w, r.faults.Err()
}

// Len returns the number of intervals.
func (w *Weather) Len() int { return len(w.points) }

// Point returns the weather of interval k.
func (w *Weather) Point(k int) WeatherPoint { return w.points[k] }

// Interval returns interval k; that of a typical year is told in one year, 2001 for TMY3,
// else that of its first month.
func (w *Weather) Interval(k int) (from, to int64) {
	from = w.start + int64(k)*w.step
	return from, from + w.step
}

// StepLength returns the length of an interval in nanoseconds.
func (w *Weather) StepLength() int64 { return w.step }

// Span returns the time that the weather covers, [start, end).
func (w *Weather) Span() (start, end int64) {
	return w.start, w.start + int64(len(w.points))*w.step
}

// find returns the interval whose weather stands for the one that begins at t: its
// own, or the one of the same month, day and hour in the weather's years; 29 February
// reads 28 February where that year has none. ok is false where there is none.
func (w *Weather) find(t int64) (k int, ok bool) {
	start, end := w.Span()
	if t >= start && t < end {
		return int((t - start) / w.step), true
	}
	if end-start < 365*day || day%w.step != 0 {
		return 0, false
	}
	reading := t + w.offset
	_, month, dom := civilDate(floorDiv(reading, day))
	first, _, _ := civilDate(floorDiv(start+w.offset, day))
	// The file is a year long or more: one of two years has the day.
	for year := first; year <= first+1; year++ {
		image := dayNumber(year, month, min(dom, monthDays(year, month)))*day + floorMod(reading, day) - w.offset
		if image >= start && image < end {
			return int((image - start) / w.step), true
		}
	}
	return 0, false
}

// Sunlight is weather laid over the axis of a run, each interval with its sun.
type Sunlight struct {
	grid     grid
	points   []WeatherPoint
	daylight []Daylight
}

// Over lays the weather over an axis, at the weather's own step. A typical year, and a
// file of a year or more that does not cover the axis, is matched by month, day and hour
// of standard time; the sun is that of the axis. It fails where the weather does not
// cover the axis and is shorter than a year.
func (w *Weather) Over(a Axis) (*Sunlight, error) {
	first := w.start + floorDiv(a.Start-w.start, w.step)*w.step
	n := int(floorDiv(a.End-first+w.step-1, w.step))
	if a.End <= a.Start {
		return nil, fmt.Errorf("the period is empty: it ends at %s and starts at %s", Format(a.End, a.Zone), Format(a.Start, a.Zone))
	}
	l := &Sunlight{
		grid:   grid{start: first, stamp: first, step: w.step, n: n, zone: a.Zone},
		points: make([]WeatherPoint, n),
	}
	for i := range n {
		t := first + int64(i)*w.step
		k, ok := w.find(t)
		if !ok {
			start, end := w.Span()
			return nil, fmt.Errorf("no weather at %s: %s covers %s to %s; lengthen the file or shorten the period (a file of a whole year is laid over any year)",
				Format(t, a.Zone), w.File, Format(start, a.Zone), Format(end, a.Zone))
		}
		l.points[i] = w.points[k]
	}
	l.daylight = daylights(first, w.step, n, w.Site)
	return l, nil
}

// Solar is what an array gives over a period, as held means in kW.
type Solar struct {
	// AC is fed into the feeder, Available what it would be if the inverter's rating were
	// no limit; the difference is clipped.
	AC, Available *Series
}

// Solar returns the output of an array. The series of both kinds and of all arrays
// share one grid, so a Sampler takes them together.
func (l *Sunlight) Solar(name string, a Array) Solar {
	ac, available := make([]float64, len(l.points)), make([]float64, len(l.points))
	for i, p := range l.points {
		var clipped float64
		ac[i], clipped = a.Output(p, l.daylight[i])
		available[i] = ac[i] + clipped
	}
	return Solar{l.series(name, "kW", ac), l.series(name, "kW", available)}
}

// Temperature returns the air temperature in °C.
func (l *Sunlight) Temperature(name string) *Series {
	values := make([]float64, len(l.points))
	for i, p := range l.points {
		values[i] = p.Temperature
	}
	return l.series(name, "degC", values)
}

func (l *Sunlight) series(name, base string, values []float64) *Series {
	return newSeries(name, unit{base, 0, 1, 1}, tables.Pos{}, l.grid, values)
}

// SolarSeries returns the output of one array over an axis. For several arrays lay the
// weather once with Over.
func SolarSeries(name string, w *Weather, a Array, ax Axis) (Solar, error) {
	for _, f := range a.Check() {
		return Solar{}, fmt.Errorf("%s: %s: %s", name, f.Field, f.Text)
	}
	l, err := w.Over(ax)
	if err != nil {
		return Solar{}, fmt.Errorf("%s: %w", name, err)
	}
	return l.Solar(name, a), nil
}

// ClearSkyWeather returns weather by the hour for an axis where none is given: a clear
// sky on every day, at a temperature in °C. What an array makes of it is the most that it
// can, not what it will; Assumed says so.
func ClearSkyWeather(s Site, a Axis, ambient float64) *Weather {
	w := &Weather{Site: s, step: hour, start: floorDiv(a.Start, hour) * hour, offset: meridianOffset(s)}
	for t := w.start; t < a.End; t += hour {
		d := DaylightOver(t, t+hour, s)
		p := WeatherPoint{Temperature: ambient, Wind: calmWind}
		p.GHI, p.DNI, p.DHI = ClearSky(d.SunPosition, s, ClearTurbidity)
		if d.Fraction == 0 {
			p.GHI, p.DNI, p.DHI = 0, 0, 0
		}
		p.GHI, p.DNI, p.DHI = p.GHI*d.Fraction, p.DNI*d.Fraction, p.DHI*d.Fraction
		w.points = append(w.points, p)
	}
	w.Assumed = []string{fmt.Sprintf(
		"no weather is given: a clear sky on every day (Ineichen and Perez 2002, Linke turbidity %d), %g degC, wind %g m/s; solar output is the most that is possible, not what will be",
		ClearTurbidity, ambient, calmWind)}
	return w
}

// What stands for columns that are not there.
const (
	mildAir  = 20   // °C
	calmWind = 1.67 // m/s at 10 m, 1 m/s at the modules
)

// meridianOffset returns the whole hours of standard time that a longitude suggests.
func meridianOffset(s Site) int64 { return int64(math.Round(s.Longitude/15)) * hour }
