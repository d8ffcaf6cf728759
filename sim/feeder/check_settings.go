package feeder

import (
	"fmt"
	"math"
	"strings"
	"time"

	"github.com/pelletier/go-toml/v2"

	"yearflow/sim/tables"
)

// settingsReader turns a document into Settings; every fault has the line of its key.
type settingsReader struct {
	d        document
	caseName string
	at       places
	faults   *tables.Faults
	assumed  []Assumption
}

func (r *settingsReader) fault(key, format string, args ...any) {
	r.faults.Add(r.at.of(key), "%s: %s", key, fmt.Sprintf(format, args...))
}

func (r *settingsReader) assume(key, value string) {
	r.assumed = append(r.assumed, Assumption{Pos: r.at.of(key), What: key, Value: value})
}

// text reads a string; blank and false where nothing is said.
func (r *settingsReader) text(key string, v any) (string, bool) {
	if v == nil {
		return "", false
	}
	s, ok := v.(string)
	if !ok {
		r.fault(key, "want a text in quotation marks, got %v", shown(v))
		return "", false
	}
	return s, true
}

// word reads one of the words, or says which there are.
func (r *settingsReader) word(key string, v any, words ...string) string {
	s, ok := r.text(key, v)
	if !ok {
		return words[0]
	}
	for _, w := range words {
		if strings.EqualFold(strings.TrimSpace(s), w) {
			return w
		}
	}
	r.fault(key, "%q is not one of %s", s, strings.Join(words, ", "))
	return words[0]
}

func (r *settingsReader) number(key string, v any, fallback float64) float64 {
	switch x := v.(type) {
	case nil:
		return fallback
	case int64:
		return float64(x)
	case float64:
		if !math.IsNaN(x) && !math.IsInf(x, 0) {
			return x
		}
	}
	r.fault(key, "want a number, got %v", shown(v))
	return fallback
}

func (r *settingsReader) flag(key string, v any) bool {
	if v == nil {
		return false
	}
	b, ok := v.(bool)
	if !ok {
		r.fault(key, "want true or false, got %v", shown(v))
	}
	return b
}

func (r *settingsReader) list(key string, v any) []string {
	if v == nil {
		return nil
	}
	if s, ok := v.(string); ok {
		return []string{s}
	}
	l, ok := v.([]any)
	var out []string
	for _, e := range l {
		s, isText := e.(string)
		ok = ok && isText
		out = append(out, s)
	}
	if !ok {
		r.fault(key, "want a list of texts, such as [\"a\", \"b\"], got %v", shown(v))
		return nil
	}
	return out
}

// shown is a value as a message quotes it.
func shown(v any) string {
	s := fmt.Sprintf("%v", v)
	if t, ok := v.(string); ok {
		s = fmt.Sprintf("%q", t)
	}
	if len([]rune(s)) > 60 {
		s = string([]rune(s)[:57]) + "..."
	}
	return s
}

// duration reads a text such as "15min": a whole number of seconds, minutes or hours.
func (r *settingsReader) duration(key string, v any) (time.Duration, bool) {
	s, ok := r.text(key, v)
	if !ok {
		return 0, false
	}
	t := strings.TrimSpace(s)
	digits := strings.TrimLeft(t, "0123456789")
	var unit time.Duration
	switch strings.ToLower(strings.TrimSpace(digits)) {
	case "s":
		unit = time.Second
	case "min", "m":
		unit = time.Minute
	case "h":
		unit = time.Hour
	}
	n := int64(0)
	if _, err := fmt.Sscanf(t[:len(t)-len(digits)], "%d", &n); err != nil || unit == 0 || n <= 0 || n > 86400 {
		r.fault(key, "want a length of time such as \"1s\", \"15min\" or \"1h\", got %s", shown(v))
		return 0, false
	}
	return time.Duration(n) * unit, true
}

func (r *settingsReader) zone(key string, v any) *time.Location {
	s, ok := r.text(key, v)
	if !ok {
		return nil
	}
	if s == "" || strings.EqualFold(s, "local") {
		r.fault(key, "want the name of a time zone such as \"America/Denver\", or \"UTC\", got %q", s)
		return nil
	}
	z, err := time.LoadLocation(s)
	if err != nil {
		r.fault(key, "unknown time zone %q; want a name such as \"America/Denver\", or \"UTC\"", s)
		return nil
	}
	return z
}

// instant reads a local date or date-time as the time of the zone.
func (r *settingsReader) instant(key string, v any, zone *time.Location) (time.Time, bool) {
	var l toml.LocalDateTime
	switch x := v.(type) {
	case nil:
		r.fault(key, "is missing; want a date such as 2025-01-01")
		return time.Time{}, false
	case toml.LocalDate:
		l.LocalDate = x
	case toml.LocalDateTime:
		l = x
	case string:
		var err error
		for _, form := range []string{"2006-01-02", "2006-01-02T15:04", "2006-01-02 15:04", "2006-01-02T15:04:05", "2006-01-02 15:04:05"} {
			var t time.Time
			if t, err = time.Parse(form, x); err == nil {
				l = toml.LocalDateTime{LocalDate: toml.LocalDate{Year: t.Year(), Month: int(t.Month()), Day: t.Day()},
					LocalTime: toml.LocalTime{Hour: t.Hour(), Minute: t.Minute(), Second: t.Second()}}
				break
			}
		}
		if err != nil {
			r.fault(key, "want a local date or date-time such as 2025-01-01 or 2025-01-01T06:00:00, got %q", x)
			return time.Time{}, false
		}
	default:
		r.fault(key, "want a local date or date-time such as 2025-01-01 or 2025-01-01T06:00:00, without an offset; got %v", shown(v))
		return time.Time{}, false
	}
	if l.Year < 1700 || l.Year > 2200 {
		r.fault(key, "the year %d is outside 1700 to 2200", l.Year)
		return time.Time{}, false
	}
	t := time.Date(l.Year, time.Month(l.Month), l.Day, l.Hour, l.Minute, l.Second, l.Nanosecond, zone)
	if t.Hour() != l.Hour || t.Minute() != l.Minute {
		r.fault(key, "there is no %02d:%02d on %s in %s: the clocks are put forward then", l.Hour, l.Minute, l.LocalDate, zone)
		return time.Time{}, false
	}
	if l.Nanosecond != 0 {
		r.fault(key, "want whole seconds")
		return time.Time{}, false
	}
	return t, true
}

const day = 24 * time.Hour

func (r *settingsReader) period() Period {
	p := Period{At: r.at.of("period"), Step: int64(time.Hour)}
	d := r.d.Period
	p.Zone = r.zone("period.zone", d.Zone)
	if p.Zone == nil {
		if d.Zone == nil {
			r.assume("period.zone", "UTC")
		}
		p.Zone = time.UTC
	}
	start, hasStart := r.instant("period.start", d.Start, p.Zone)
	end, hasEnd := r.instant("period.end", d.End, p.Zone)
	if hasStart && hasEnd {
		p.Start, p.End = start.UnixNano(), end.UnixNano()
		if p.End <= p.Start {
			r.fault("period.end", "%s is not after the start, %s", end.Format("2006-01-02 15:04"), start.Format("2006-01-02 15:04"))
		}
	}
	if d.Step == nil {
		r.assume("period.step", "1h")
	} else if step, ok := r.duration("period.step", d.Step); ok {
		if step > day || day%step != 0 {
			r.fault("period.step", "%s does not divide a day; take 1s, 1min, 5min, 15min, 30min or 1h, for example", shown(d.Step))
		} else {
			p.Step = int64(step)
		}
	}
	return p
}

func (r *settingsReader) settings() Settings {
	s := Settings{Frequency: r.number("frequency", r.d.Frequency, 60)}
	s.Title, _ = r.text("title", r.d.Title)
	if s.Frequency < 45 || s.Frequency > 65 {
		r.fault("frequency", "want 50 or 60 Hz, got %v", shown(r.d.Frequency))
		s.Frequency = 60
	}
	s.Period = r.period()
	for i, d := range r.d.Profiles {
		s.Profiles = append(s.Profiles, r.profile(fmt.Sprintf("profiles[%d]", i), d, s.Period.Zone))
	}
	s.Run = r.run(s.Period)
	s.Limits = r.limits()
	s.Prices = r.prices()
	s.Weather = r.weather(s.Period)
	s.Allocation = r.allocation(r.caseName)
	for i, d := range r.d.Meters {
		s.Meters = append(s.Meters, r.meters(fmt.Sprintf("meters[%d]", i), d, s.Period.Zone))
	}
	s.ScaleLoad = r.scale("scale.load", r.d.Scale.Load)
	s.ScaleGeneration = r.scale("scale.generation", r.d.Scale.Generation)
	return s
}

func (r *settingsReader) scale(key string, v any) float64 {
	x := r.number(key, v, 1)
	if x < 0 {
		r.fault(key, "must not be negative, got %v", x)
	}
	return x
}

func (r *settingsReader) profile(key string, d profileDocument, zone *time.Location) ProfileBlock {
	b := ProfileBlock{
		At:          r.at.of(key),
		Files:       r.list(key+".files", d.Files),
		Stamped:     r.word(key+".stamped", d.Stamped, "start", "end", "instant"),
		Interpolate: r.flag(key+".interpolate", d.Interpolate),
		Repeat:      r.word(key+".repeat", d.Repeat, "none", "day", "week", "year"),
		Zone:        zone,
	}
	if d.Files == nil {
		r.fault(key+".files", "is missing; want a list such as [\"profiles/*.csv\"]")
	}
	if z := r.zone(key+".zone", d.Zone); z != nil {
		b.Zone = z
	}
	return b
}

func (r *settingsReader) run(p Period) RunSettings {
	d := r.d.Run
	s := RunSettings{Given: r.word("run.start", d.Start, "settled", "given") == "given", Voltages: "auto"}
	if _, isList := d.Voltages.([]any); isList {
		s.Voltages, s.Places = "list", r.list("run.voltages", d.Voltages)
	} else if d.Voltages != nil {
		s.Voltages = r.word("run.voltages", d.Voltages, "auto", "all", "none")
	}
	s.Flows = r.list("run.flows", d.Flows)
	s.Parquet = r.word("run.series", d.Series, "csv", "parquet") == "parquet"
	if t, ok := d.Log.(string); d.Log != nil && !(ok && strings.EqualFold(t, "step")) {
		if l, ok := r.duration("run.log", d.Log); ok {
			if l > day || day%l != 0 || int64(l)%p.Step != 0 {
				r.fault("run.log", "%s is no whole number of steps that divides a day", shown(d.Log))
			} else {
				s.Log = int64(l)
			}
		}
	}
	return s
}

// weather reads where the weather of solar generators comes from.
func (r *settingsReader) weather(p Period) Weather {
	d := r.d.Weather
	w := Weather{At: r.at.of("weather"), Zone: p.Zone, Stamped: r.word("weather.stamped", d.Stamped, "start", "end", "instant"),
		Latitude: r.number("weather.latitude", d.Latitude, math.NaN()), Longitude: r.number("weather.longitude", d.Longitude, math.NaN()),
		Elevation: r.number("weather.elevation", d.Elevation, math.NaN())}
	w.File, _ = r.text("weather.file", d.File)
	if z := r.zone("weather.zone", d.Zone); z != nil {
		w.Zone = z
	}
	if math.Abs(w.Latitude) > 90 {
		r.fault("weather.latitude", "want degrees north, -90 to 90, got %v", shown(d.Latitude))
	}
	if math.Abs(w.Longitude) > 180 {
		r.fault("weather.longitude", "want degrees east, -180 to 180, got %v", shown(d.Longitude))
	}
	if (d.Latitude == nil) != (d.Longitude == nil) {
		r.fault("weather", "latitude and longitude go together")
	}
	return w
}
