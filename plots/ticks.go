package plots

import (
	"math"
	"strconv"
	"strings"
	"time"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
)

// tick is a mark on an axis.
type tick struct {
	at    float64
	label string
	grid  bool
	bare  bool    // no mark, only the label
	mid   float64 // where the label stands, if not under the mark
}

// linear returns ticks at round values (1, 2, 2.5 or 5 times a power of ten), about
// n of them, inside [lo, hi].
func linear(lo, hi float64, n int) []tick {
	step := roundStep((hi - lo) / float64(max(n, 1)))
	return stepped(lo, hi, step)
}

// roundStep is the smallest of 1, 2, 2.5, 5 × 10^k that is not below x.
func roundStep(x float64) float64 {
	if !(x > 0) || math.IsInf(x, 0) {
		return 1
	}
	base := math.Pow(10, math.Floor(math.Log10(x)))
	for _, m := range []float64{1, 2, 2.5, 5, 10} {
		if m*base >= x*(1-1e-9) {
			return m * base
		}
	}
	return 10 * base
}

func stepped(lo, hi, step float64) []tick {
	var ticks []tick
	first := math.Ceil(lo/step - 1e-9)
	for k := first; k*step <= hi+1e-9*step && len(ticks) < 200; k++ {
		ticks = append(ticks, tick{at: k * step, label: number(k*step, decimals(step)), grid: true})
	}
	return ticks
}

// decimals is how many a label needs to show multiples of step.
func decimals(step float64) int {
	for d := 0; d < 9; d++ {
		s := step * math.Pow(10, float64(d))
		if math.Abs(s-math.Round(s)) < 1e-6*s {
			return d
		}
	}
	return 9
}

// roundRange widens [lo, hi] to whole steps for about n ticks.
func roundRange(lo, hi float64, n int) (float64, float64) {
	if !(hi > lo) {
		lo, hi = lo-math.Max(1e-3, math.Abs(lo)*0.05), hi+math.Max(1e-3, math.Abs(hi)*0.05)
	}
	step := roundStep((hi - lo) / float64(n))
	return math.Floor(lo/step+1e-9) * step, math.Ceil(hi/step-1e-9) * step
}

// number prints x with a true minus sign, commas between thousands, and no "-0".
func number(x float64, decimals int) string {
	s := strconv.FormatFloat(math.Abs(x), 'f', decimals, 64)
	whole, part := s, ""
	if i := strings.IndexByte(s, '.'); i >= 0 {
		whole, part = s[:i], s[i:]
	}
	for i := len(whole) - 3; i > 0; i -= 3 {
		whole = whole[:i] + "," + whole[i:]
	}
	s = whole + part
	if x < 0 && strings.Trim(s, "0.,") != "" {
		s = "\u2212" + s
	}
	return s
}

// span is a stretch of local time.
type span struct {
	start, end time.Time // end not included
}

func (s span) lo() float64 { return seconds(s.start) }
func (s span) hi() float64 { return seconds(s.end) }

func (s span) days() float64 { return s.end.Sub(s.start).Hours() / 24 }

func seconds(t time.Time) float64 { return float64(t.UnixNano()) / 1e9 }

func midnight(t time.Time) time.Time {
	return time.Date(t.Year(), t.Month(), t.Day(), 0, 0, 0, 0, t.Location())
}

// timeTicks marks local time: months, days or hours, whichever has room for its
// labels on a width.
func (s span) timeTicks(t text.Style, width vg.Length) []tick {
	d := s.days()
	per := func(n float64) vg.Length { return width / vg.Length(math.Max(n, 1)) }
	switch {
	case d > 62:
		months := d / 30.4
		for _, every := range []int{1, 2, 3, 6, 12, 24, 60, 120} {
			label := "Jan"
			if s.years() {
				label = "2025"
			}
			if per(months/float64(every)) > t.Width(label)+8 || every == 120 {
				return s.monthTicks(every)
			}
		}
	case d > 2.01:
		for _, every := range []int{1, 2, 7, 14} {
			if per(d/float64(every)) > t.Width("30 Mar")+6 || every == 14 {
				return s.dayTicks(every)
			}
		}
	}
	for _, every := range []int{5, 15, 30, 60, 120, 180, 360, 720} {
		if per(d*24*60/float64(every)) > t.Width("00:00")+12 || every == 720 {
			return s.minuteTicks(every)
		}
	}
	return nil
}

func (s span) monthTicks(every int) []tick {
	var ticks []tick
	first := time.Date(s.start.Year(), s.start.Month(), 1, 0, 0, 0, 0, s.start.Location())
	if every >= 12 {
		first = time.Date(s.start.Year(), 1, 1, 0, 0, 0, 0, s.start.Location())
	}
	for m := first; m.Before(s.end); m = m.AddDate(0, every, 0) {
		next := m.AddDate(0, every, 0)
		a, b := math.Max(seconds(m), s.lo()), math.Min(seconds(next), s.hi())
		k := tick{at: a, grid: m.After(s.start), bare: m.Before(s.start), label: m.Format("Jan"), mid: (a + b) / 2}
		if every > 1 {
			k.mid = 0 // the name is that of the month that begins here
		}
		if m.Month() == time.January && s.years() {
			k.label = m.Format("2006")
		}
		if every == 1 && b-a < 0.5*(seconds(next)-seconds(m)) {
			k.label = "" // a stub of a month has no room for its name
		}
		ticks = append(ticks, k)
	}
	return append(ticks, tick{at: s.hi()})
}

func (s span) dayTicks(every int) []tick {
	var ticks []tick
	for i, m := 0, midnight(s.start); m.Before(s.end); i, m = i+1, m.AddDate(0, 0, 1) {
		if i%every != 0 {
			continue
		}
		if m.Before(s.start) {
			continue
		}
		next := m.AddDate(0, 0, 1)
		ticks = append(ticks, tick{at: seconds(m), grid: true, label: m.Format("2 Jan"), mid: (seconds(m) + math.Min(seconds(next), s.hi())) / 2})
	}
	return append(ticks, tick{at: s.hi()})
}

// minuteTicks steps through absolute time and keeps the stamps whose wall clock is a
// multiple of every minutes: right on days of 23 and 25 hours.
func (s span) minuteTicks(every int) []tick {
	var ticks []tick
	for m := s.start.Truncate(5 * time.Minute); !m.After(s.end); m = m.Add(5 * time.Minute) {
		if m.Before(s.start) || (m.Hour()*60+m.Minute())%every != 0 || m.Second() != 0 {
			continue
		}
		label := m.Format("15:04")
		if m.Equal(s.end) && m.Hour() == 0 && m.Minute() == 0 {
			label = "24:00"
		}
		ticks = append(ticks, tick{at: seconds(m), grid: true, label: label})
	}
	return ticks
}
