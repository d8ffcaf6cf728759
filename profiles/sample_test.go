package profiles

import (
	"fmt"
	"math/rand/v2"
	"slices"
	"strings"
	"sync"
	"testing"
	"time"

	"yearflow/sim/tables"
)

func TestMeansMatchBruteForce(t *testing.T) {
	rnd := rand.New(rand.NewPCG(3, 4))
	for range 150 {
		b := Block{
			Stamped:     pick(rnd, "start", "end", "instant", ""),
			Interpolate: pick(rnd, true, false),
			Zone:        pick(rnd, zone(t, "America/Denver"), zone(t, "Europe/Zurich"), nil),
		}
		step := pick[int64](rnd, 1, 2, 5, 15, 30, 60, 180) * minute
		n := 2 + rnd.IntN(600)
		// Around the changes of 2025, in minutes.
		first := instant(t, pick(rnd, "2025-03-08T20:00:00Z", "2025-10-25T22:00:00Z", "2025-11-02T03:00:00Z")) + rnd.Int64N(600)*minute
		u := newTruth(randomValues(rnd, n), first, step, minute, b)
		list := open(t, u.write(first, true), b)
		length := (u.end() - u.start) / minute
		start := rnd.Int64N(length)
		end := start + 1 + rnd.Int64N(length-start)
		a := Axis{Start: u.start + start*minute, End: u.start + end*minute, Step: pick[int64](rnd, 1, 7, 15, 60, 61, 240, 1440, 5000) * minute, Zone: b.Zone}
		check(t, rnd, u, list, a)
	}
}

func TestRepeatMatchesBruteForce(t *testing.T) {
	rnd := rand.New(rand.NewPCG(5, 6))
	for range 400 {
		z := zone(t, pick(rnd, "America/Denver", "Europe/Zurich", "UTC"))
		b := Block{Stamped: pick(rnd, "start", "end"), Interpolate: pick(rnd, true, false), Zone: z, Repeat: pick(rnd, "day", "week")}
		days := 1 + rnd.IntN(3)
		if b.Repeat == "week" {
			days *= 7
		}
		// A file of whole local days that begins at any hour around a change, in either
		// occurrence of a repeated one.
		near := at(instant(t, pick(rnd, "2025-03-01T12:00:00Z", "2025-03-28T12:00:00Z", "2025-10-23T12:00:00Z", "2025-11-01T12:00:00Z")), z)
		y, m, d := near.Date()
		h, mi := pick(rnd, 0, 1, 2, 3, rnd.IntN(24)), pick(rnd, 0, 30)
		d += rnd.IntN(4)
		start := time.Date(y, m, d, h, mi, 0, 0, z).UnixNano()
		end := time.Date(y, m, d+days, h, mi, 0, 0, z).UnixNano()
		for _, p := range []*int64{&start, &end} {
			if reading := at(*p, z).Format(layout); reading == at(*p+hour, z).Format(layout) && rnd.IntN(2) == 0 {
				*p += hour
			}
		}
		if at(start, z).Format("15:04") != at(end, z).Format("15:04") {
			continue // it would begin or end in a skipped hour
		}
		step := pick[int64](rnd, 15, 30, 60) * minute
		first := start
		if b.Stamped == "end" {
			first += step
		}
		u := newTruth(randomValues(rnd, int((end-start)/step)), first, step, 15*minute, b)
		list := open(t, u.write(first, true), b)
		from := start + (rnd.Int64N(4000)-3000)*15*minute
		a := Axis{Start: from, End: from + (1+rnd.Int64N(3000))*15*minute, Step: pick[int64](rnd, 15, 45, 60, 360, 1440, 30000) * minute, Zone: z}
		check(t, rnd, u, list, a)
	}
}

func TestRepeatYearMatchesBruteForce(t *testing.T) {
	rnd := rand.New(rand.NewPCG(7, 8))
	for _, c := range []struct {
		zone, start, end, from string
	}{
		{"America/Denver", "2025-01-01T00:00:00-07:00", "2026-01-01T00:00:00-07:00", "2023-06-01T05:00:00Z"},
		{"America/Denver", "2024-01-01T00:00:00-07:00", "2025-01-01T00:00:00-07:00", "2025-01-01T07:00:00Z"},
		{"Europe/Zurich", "2023-10-01T06:00:00+02:00", "2025-10-01T06:00:00+02:00", "2026-01-01T00:00:00Z"},
		{"UTC", "2025-01-01T00:00:00Z", "2026-01-01T00:00:00Z", "2027-12-01T00:00:00Z"},
		// The clock is put back on 2 November in 2025 and in 2031: second hour to second hour.
		{"America/Denver", "2025-01-01T00:00:00-07:00", "2026-01-01T00:00:00-07:00", "2031-01-01T07:00:00Z"},
	} {
		z := zone(t, c.zone)
		start, end, from := instant(t, c.start), instant(t, c.end), instant(t, c.from)
		for _, lines := range []bool{false, true} {
			b := Block{Zone: z, Repeat: "year", Interpolate: lines}
			u := newTruth(randomValues(rnd, int((end-start)/hour)), start, hour, hour, b)
			list := open(t, u.write(start, false), b)
			for _, step := range []int64{hour, 5 * hour, 100 * day} {
				check(t, rnd, u, list, Axis{Start: from, End: from + 800*day, Step: step, Zone: z})
			}
		}
	}
}

// A day of 24 values, the hour as the value, laid over days of 23 and 25 hours.
func TestRepeatedDayOnClockChanges(t *testing.T) {
	for _, c := range []struct {
		zone, day string
		want      []float64
	}{
		{"America/Denver", "2025-03-09", []float64{0, 1, 3, 4}},
		{"America/Denver", "2025-11-02", []float64{0, 1, 1, 2}},
		{"Europe/Zurich", "2025-03-30", []float64{0, 1, 3, 4}},
		{"Europe/Zurich", "2025-10-26", []float64{0, 1, 2, 2, 3}},
	} {
		z := zone(t, c.zone)
		var file strings.Builder
		file.WriteString("time,h [pu]\n")
		for h := range 24 {
			fmt.Fprintf(&file, "2025-01-15T%02d:00,%d\n", h, h)
		}
		start, err := ParseTime(c.day, z)
		if err != nil {
			t.Fatal(err)
		}
		end := DayStart(Day(start, z)+1, z)
		s, err := NewSampler(Axis{start, end, hour, z}, open(t, []byte(file.String()), Block{Zone: z, Repeat: "day"}))
		if err != nil {
			t.Fatal(err)
		}
		got := make([]float64, s.Axis().Steps())
		for i := range got {
			s.Step(got[i:], i)
		}
		if !slices.Equal(got[:len(c.want)], c.want) || got[len(got)-1] != 23 {
			t.Errorf("%s %s: got %v, want %v ... 23", c.zone, c.day, got, c.want)
		}
	}
}

// A file whose own day has 23 hours: on other days the skipped hour reads the hour
// before it.
func TestRepeatedShortDay(t *testing.T) {
	z := zone(t, "America/Denver")
	var file strings.Builder
	file.WriteString("time,h [pu]\n")
	for h := range 24 {
		if h != 2 {
			fmt.Fprintf(&file, "2025-03-09T%02d:00,%d\n", h, h)
		}
	}
	start := instant(t, "2025-03-10T00:00:00-06:00")
	s, err := NewSampler(Axis{start, start + day, hour, z}, open(t, []byte(file.String()), Block{Zone: z, Repeat: "day"}))
	if err != nil {
		t.Fatal(err)
	}
	var got [24]float64
	for i := range got {
		s.Step(got[i:], i)
	}
	for h, v := range got {
		want := float64(h)
		if h == 2 {
			want = 1
		}
		if v != want {
			t.Errorf("hour %d: got %v, want %v", h, v, want)
		}
	}
}

func TestRepeatLeapDay(t *testing.T) {
	var file strings.Builder
	file.WriteString("time,d [pu]\n")
	for d := range 365 {
		fmt.Fprintf(&file, "%s,%d\n", time.Date(2025, 1, 1+d, 0, 0, 0, 0, time.UTC).Format("2006-01-02"), d)
	}
	list := open(t, []byte(file.String()), Block{Repeat: "year"})
	start := instant(t, "2028-02-28T00:00:00Z") // 2028 is a leap year
	s, err := NewSampler(Axis{start, start + 3*day, day, nil}, list)
	if err != nil {
		t.Fatal(err)
	}
	var got [3]float64
	for i := range got {
		s.Step(got[i:], i)
	}
	// 28 February is day 58 counted from 0, 1 March is day 59.
	if got != [3]float64{58, 58, 59} {
		t.Errorf("got %v", got)
	}
}

// Weekdays are kept by repeat = "week": 2025-01-06 was a Monday.
func TestRepeatWeekKeepsWeekdays(t *testing.T) {
	z := zone(t, "Europe/Zurich")
	var file strings.Builder
	file.WriteString("time,d [pu]\n")
	for h := range 7 * 24 {
		fmt.Fprintf(&file, "%s,%d\n", time.Date(2025, 1, 8, h, 0, 0, 0, time.UTC).Format(layout), (2+h/24)%7)
	}
	a := Axis{instant(t, "2025-01-01T00:00:00+01:00"), instant(t, "2026-01-01T00:00:00+01:00"), hour, z}
	s, err := NewSampler(a, open(t, []byte(file.String()), Block{Zone: z, Repeat: "week"}))
	if err != nil {
		t.Fatal(err)
	}
	var v [1]float64
	for i := range a.Steps() {
		s.Step(v[:], i)
		from, _ := a.Bounds(i)
		if want := (int(at(from, z).Weekday()) + 6) % 7; v[0] != float64(want) {
			t.Fatalf("%s: got %v, want %d", Format(from, z), v[0], want)
		}
	}
}

// Constants come back as they stand in the file, whatever the step.
func TestConstantsAreExact(t *testing.T) {
	for _, text := range []string{"0.1", "0.7", "1.1", "3.3333333333333335", "1e-300", "123456.789", "-0.3", "1e15"} {
		for _, lines := range []bool{false, true} {
			var file strings.Builder
			file.WriteString("time,c [pu]\n")
			for i := range 3000 {
				fmt.Fprintf(&file, "%s,%s\n", Format(int64(i)*7*minute, nil), text)
			}
			list := open(t, []byte(file.String()), Block{Interpolate: lines, Repeat: "day"})
			want := list[0].Value(0)
			for _, step := range []int64{second, 11 * minute, hour, 7 * hour, day, 5*day + 1} {
				s, err := NewSampler(Axis{0, 14 * day, step, nil}, list)
				if err != nil {
					t.Fatal(err)
				}
				var v [1]float64
				for i := 0; i < s.Axis().Steps(); i += 1 + s.Axis().Steps()/500 {
					if s.Step(v[:], i); v[0] != want {
						t.Fatalf("%s, lines %v, step %v, %d: got %v", text, lines, time.Duration(step), i, v[0])
					}
				}
			}
		}
	}
}

// A mean is the exact one, rounded: 1e16 + 1 − 1e16 does not lose the 1.
func TestMeanDoesNotCancel(t *testing.T) {
	var file strings.Builder
	file.WriteString("time,c [pu]\n")
	for i := range 1024 {
		v := []string{"1e16", "1", "-1e16", "1"}[i%4]
		fmt.Fprintf(&file, "%s,%s\n", Format(int64(i)*minute, nil), v)
	}
	s, err := NewSampler(Axis{0, 1024 * minute, 512 * minute, nil}, open(t, []byte(file.String()), Block{}))
	if err != nil {
		t.Fatal(err)
	}
	for i := range 2 {
		var v [1]float64
		if s.Step(v[:], i); v[0] != 0.5 {
			t.Errorf("step %d: got %v, want 0.5", i, v[0])
		}
	}
}

func TestStampedAndLines(t *testing.T) {
	file := []byte("time,x [pu]\n2025-01-01T01:00,1\n2025-01-01T02:00,2\n2025-01-01T03:00,4\n")
	for _, c := range []struct {
		block Block
		start string
		want  []float64 // by half hours
	}{
		{Block{Stamped: "start"}, "2025-01-01T01:00:00Z", []float64{1, 1, 2, 2, 4, 4}},
		{Block{Stamped: "instant"}, "2025-01-01T01:00:00Z", []float64{1, 1, 2, 2, 4, 4}},
		{Block{Stamped: "end"}, "2025-01-01T00:00:00Z", []float64{1, 1, 2, 2, 4, 4}},
		// The middle of each half hour on the lines 1-2-4; the last value held.
		{Block{Stamped: "instant", Interpolate: true}, "2025-01-01T01:00:00Z", []float64{1.25, 1.75, 2.5, 3.5, 4, 4}},
		{Block{Stamped: "start", Interpolate: true}, "2025-01-01T01:00:00Z", []float64{1.25, 1.75, 2.5, 3.5, 4, 4}},
		// Stamps at the end: the first value is held before its stamp.
		{Block{Stamped: "end", Interpolate: true}, "2025-01-01T00:00:00Z", []float64{1, 1, 1.25, 1.75, 2.5, 3.5}},
	} {
		start := instant(t, c.start)
		s, err := NewSampler(Axis{start, start + 3*hour, 30 * minute, nil}, open(t, file, c.block))
		if err != nil {
			t.Fatal(err)
		}
		got := make([]float64, 6)
		for i := range got {
			s.Step(got[i:], i)
		}
		if !slices.Equal(got, c.want) {
			t.Errorf("%+v: got %v, want %v", c.block, got, c.want)
		}
	}
}

func TestSamplerFaults(t *testing.T) {
	z := zone(t, "America/Denver")
	file := "time,x [pu],y [pu]\n"
	for h := range 36 {
		file += fmt.Sprintf("%s,1,2\n", at(instant(t, "2025-01-01T00:00:00-07:00")+int64(h)*hour, z).Format(layout))
	}
	for _, c := range []struct {
		repeat, start, end string
		want               []string
	}{
		{"none", "2025-01-01T00:00:00-07:00", "2025-01-04T00:00:00-07:00", []string{"p.csv:1:2", `"x"`, "no value at 2025-01-02T12:00:00-07:00", "repeat"}},
		{"", "2024-12-31T00:00:00-07:00", "2025-01-02T00:00:00-07:00", []string{"no value at 2024-12-31T00:00:00-07:00"}},
		{"", "2026-01-01T00:00:00-07:00", "2026-01-02T00:00:00-07:00", []string{"no value at 2026-01-01T00:00:00-07:00"}},
		{"day", "2025-01-01T00:00:00-07:00", "2025-01-04T00:00:00-07:00", []string{"2025-01-01T00:00:00 to 2025-01-02T12:00:00", "not whole local days"}},
		{"week", "2025-01-01T00:00:00-07:00", "2025-01-04T00:00:00-07:00", []string{"not whole local weeks"}},
		{"year", "2025-01-01T00:00:00-07:00", "2025-01-04T00:00:00-07:00", []string{"not whole local years"}},
		{"day", "2025-01-01T00:00:00-07:00", "2025-01-01T00:00:00-07:00", []string{"no steps"}},
	} {
		list := open(t, []byte(file), Block{Zone: z, Repeat: c.repeat})
		_, err := NewSampler(Axis{instant(t, c.start), instant(t, c.end), hour, z}, list)
		faults, ok := err.(tables.Faults)
		if !ok || len(faults) != 1 {
			t.Errorf("%+v: got %v, want one fault", c, err)
			continue
		}
		for _, want := range c.want {
			if !strings.Contains(err.Error(), want) {
				t.Errorf("%v: want %q in it", err, want)
			}
		}
	}
	// A file that covers the period needs no whole units.
	list := open(t, []byte(file), Block{Zone: z, Repeat: "week"})
	start := instant(t, "2025-01-01T00:00:00-07:00")
	if _, err := NewSampler(Axis{start, start + 36*hour, hour, z}, list); err != nil {
		t.Error(err)
	}
}

func TestStepDoesNotAllocate(t *testing.T) {
	for _, b := range []Block{{}, {Interpolate: true}, {Repeat: "day"}, {Repeat: "week", Interpolate: true}} {
		list := open(t, manyColumns(3, 14*1440, minute), b)
		start, _ := list[0].Span()
		days := int64(14)
		if b.Repeat != "" {
			days = 40
		}
		for _, step := range []int64{second, hour, day, 30 * day} {
			s, err := NewSampler(Axis{start, start + days*day, step, nil}, list)
			if err != nil {
				t.Fatal(err)
			}
			dst, i := make([]float64, len(list)), 0
			if n := testing.AllocsPerRun(200, func() { s.Step(dst, i*7919%s.Axis().Steps()); i++ }); n != 0 {
				t.Errorf("%+v, step %v: %v allocations", b, time.Duration(step), n)
			}
		}
	}
}

// Many goroutines get what one gets. (The race detector has its say where it is on.)
func TestStepConcurrently(t *testing.T) {
	list := open(t, manyColumns(4, 14*1440, minute), Block{Repeat: "week"})
	start, _ := list[0].Span()
	s, err := NewSampler(Axis{start, start + 60*day, 5 * hour, nil}, list)
	if err != nil {
		t.Fatal(err)
	}
	n := s.Axis().Steps()
	want := make([][4]float64, n)
	for i := range n {
		s.Step(want[i][:], i)
	}
	var wg sync.WaitGroup
	for w := range 4 {
		wg.Go(func() {
			var got [4]float64
			s.Max(w)
			for i := range n {
				k := (i*31 + w*17) % n
				if s.Step(got[:], k); got != want[k] {
					t.Errorf("step %d: got %v, want %v", k, got, want[k])
				}
			}
		})
	}
	wg.Wait()
}
