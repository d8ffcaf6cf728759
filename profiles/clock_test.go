package profiles

import (
	"math/rand/v2"
	"strings"
	"testing"
	"time"
	_ "time/tzdata"
)

func zone(t testing.TB, name string) *time.Location {
	t.Helper()
	z, err := time.LoadLocation(name)
	if err != nil {
		t.Fatal(err)
	}
	return z
}

// instant reads a time that carries its offset.
func instant(t testing.TB, text string) int64 {
	t.Helper()
	v, err := time.Parse(time.RFC3339Nano, text)
	if err != nil {
		t.Fatal(err)
	}
	return v.UnixNano()
}

func TestParseTime(t *testing.T) {
	denver, zurich := zone(t, "America/Denver"), zone(t, "Europe/Zurich")
	for _, c := range []struct {
		text string
		zone *time.Location
		want string
	}{
		{"2025-01-01", denver, "2025-01-01T00:00:00-07:00"},
		{"2025-07-01T06:30", denver, "2025-07-01T06:30:00-06:00"},
		{"2025-07-01 06:30:15", zurich, "2025-07-01T06:30:15+02:00"},
		{"2025-07-01T06:30:15.25", zurich, "2025-07-01T06:30:15.25+02:00"},
		{"2025-07-01T24:00", zurich, "2025-07-02T00:00:00+02:00"},
		{"2025-07-01T06:30Z", denver, "2025-07-01T06:30:00Z"},
		{"2025-07-01T06:30:00+05:30", denver, "2025-07-01T06:30:00+05:30"},
		{"2025-07-01T06:30-0330", denver, "2025-07-01T06:30:00-03:30"},
		{"2025-07-01T06:30-03", denver, "2025-07-01T06:30:00-03:00"},
		{"2025-07-01T06:30", nil, "2025-07-01T06:30:00Z"},
		{"2024-02-29", nil, "2024-02-29T00:00:00Z"},
		// 2025: 2 November in the USA, 26 October in Europe (the dates of field practice:
		// first Sunday of November at 02:00 local, last Sunday of October at 01:00 UTC).
		{"2025-11-02T01:30", denver, "2025-11-02T01:30:00-06:00"},
		{"2025-10-26T02:30", zurich, "2025-10-26T02:30:00+02:00"},
	} {
		got, err := ParseTime(c.text, c.zone)
		if want := instant(t, c.want); err != nil || got != want {
			t.Errorf("%s in %v: got %s, %v; want %s", c.text, c.zone, Format(got, c.zone), err, c.want)
		}
	}
}

func TestParseTimeRefuses(t *testing.T) {
	denver := zone(t, "America/Denver")
	for text, want := range map[string]string{
		"":                          "want a time",
		"2025":                      "want a time",
		"2025-02-29":                "no such date",
		"2025-13-01":                "no such date",
		"31/12/2025":                "want a time",
		"2025-01-01T":               "want a time",
		"2025-01-01T25:00":          "want a time",
		"2025-01-01T24:01":          "want a time",
		"2025-01-01T10:60":          "want a time",
		"2025-01-01T10:00:60":       "want a time",
		"2025-01-01T10:00:00.":      "want a time",
		"2025-01-01T10:00 MST":      "want a time",
		"2025-01-01T10:00+1":        "want a time",
		"1492-01-01":                "1800 to 2200",
		"2025-03-09T02:30":          "does not exist in America/Denver: the clock goes from 02:00 to 03:00",
		strings.Repeat("2025-", 99): "want a time",
	} {
		if _, err := ParseTime(text, denver); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%q: got error %v, want %q", text, err, want)
		}
	}
	if _, err := ParseTime("2025-03-09T02:30", denver); !strings.Contains(err.Error(), `"Etc/GMT+7"`) {
		t.Errorf("want the zone of standard time in %v", err)
	}
}

// Every instant comes back from its text, and each local time has the instants that
// the time package gives it.
func TestFormatParses(t *testing.T) {
	rnd := rand.New(rand.NewPCG(1, 2))
	for _, name := range []string{"UTC", "America/Denver", "Europe/Zurich", "Australia/Lord_Howe", "Asia/Kathmandu", "Pacific/Apia", "America/St_Johns"} {
		z := zone(t, name)
		c := newClock(z)
		for range 3000 {
			v := instant(t, "1975-01-01T00:00:00Z") + rnd.Int64N(80*365*24)*hour/2
			got, err := ParseTime(Format(v, z), nil)
			if err != nil || got != v {
				t.Fatalf("%s: %s came back as %s, %v", name, Format(v, z), Format(got, z), err)
			}
			first, last, n := c.instants(c.local(v))
			if n == 0 || (first != v && last != v) {
				t.Fatalf("%s: %s has %d instants, %s and %s", name, Format(v, z), n, Format(first, z), Format(last, z))
			}
			reading := c.local(v)
			if first, last, n = c.instants(reading); n == 0 || c.local(first) != reading || c.local(last) != reading || (n > 1) != (first != last) {
				t.Fatalf("%s: %s: %d instants %d, %d", name, Format(v, z), n, first, last)
			}
		}
	}
}

func TestClockAtChanges(t *testing.T) {
	for _, c := range []struct {
		zone, reading string
		first, last   string // blank: skipped
	}{
		{"America/Denver", "2025-11-02T00:59:59", "2025-11-02T00:59:59-06:00", "2025-11-02T00:59:59-06:00"},
		{"America/Denver", "2025-11-02T01:00:00", "2025-11-02T01:00:00-06:00", "2025-11-02T01:00:00-07:00"},
		{"America/Denver", "2025-11-02T01:59:59", "2025-11-02T01:59:59-06:00", "2025-11-02T01:59:59-07:00"},
		{"America/Denver", "2025-11-02T02:00:00", "2025-11-02T02:00:00-07:00", "2025-11-02T02:00:00-07:00"},
		{"America/Denver", "2025-03-09T01:59:59", "2025-03-09T01:59:59-07:00", "2025-03-09T01:59:59-07:00"},
		{"America/Denver", "2025-03-09T02:00:00", "", ""},
		{"America/Denver", "2025-03-09T02:59:59", "", ""},
		{"America/Denver", "2025-03-09T03:00:00", "2025-03-09T03:00:00-06:00", "2025-03-09T03:00:00-06:00"},
		{"Europe/Zurich", "2025-10-26T02:00:00", "2025-10-26T02:00:00+02:00", "2025-10-26T02:00:00+01:00"},
		{"Europe/Zurich", "2025-10-26T03:00:00", "2025-10-26T03:00:00+01:00", "2025-10-26T03:00:00+01:00"},
		{"Europe/Zurich", "2025-03-30T02:30:00", "", ""},
	} {
		s, problem := parseStamp([]byte(c.reading))
		if problem != "" {
			t.Fatal(problem)
		}
		first, last, n := newClock(zone(t, c.zone)).instants(s.civil)
		if c.first == "" {
			if n != 0 {
				t.Errorf("%s %s: got %d instants, want none", c.zone, c.reading, n)
			}
			continue
		}
		if first != instant(t, c.first) || last != instant(t, c.last) {
			t.Errorf("%s %s: got %s and %s", c.zone, c.reading, Format(first, zone(t, c.zone)), Format(last, zone(t, c.zone)))
		}
	}
}

func TestDaysAndMonths(t *testing.T) {
	z := zone(t, "America/Denver")
	n := Day(instant(t, "2025-03-09T12:00:00-06:00"), z)
	if got := Format(DayStart(n, z), z); got != "2025-03-09T00:00:00-07:00" {
		t.Errorf("the day starts at %s", got)
	}
	if got := DayStart(n+1, z) - DayStart(n, z); got != 23*hour {
		t.Errorf("9 March 2025 has %v, want 23 h", time.Duration(got))
	}
	n = Day(instant(t, "2025-11-02T23:59:59-07:00"), z)
	if got := DayStart(n+1, z) - DayStart(n, z); got != 25*hour {
		t.Errorf("2 November 2025 has %v, want 25 h", time.Duration(got))
	}
	// Midnight is skipped in Havana on 9 March 2025: the day starts at 01:00.
	havana := zone(t, "America/Havana")
	n = Day(instant(t, "2025-03-09T12:00:00-04:00"), havana)
	if got := Format(DayStart(n, havana), havana); got != "2025-03-09T01:00:00-04:00" {
		t.Errorf("the day without midnight starts at %s", got)
	}
	if got := Month(instant(t, "2025-02-01T06:59:59Z"), z); got != "2025-01" {
		t.Errorf("month %s, want 2025-01", got)
	}
}

func TestAppendTimeAllocates(t *testing.T) {
	z := zone(t, "America/Denver")
	buf := make([]byte, 0, 64)
	v := instant(t, "2025-02-01T06:59:59Z")
	if n := testing.AllocsPerRun(100, func() { buf = AppendMonth(AppendTime(buf[:0], v, z), v, z) }); n != 0 {
		t.Errorf("%v allocations", n)
	}
	if got := string(buf); got != "2025-01-31T23:59:59-07:002025-01" {
		t.Error(got)
	}
}

// TestClockLeapYearsBeyondTheTable: every clock time of the turn of a leap year long
// after the table of a zone ends is one instant, and comes back.
func TestClockLeapYearsBeyondTheTable(t *testing.T) {
	for _, name := range []string{"America/Denver", "Europe/Zurich", "Australia/Sydney", "Pacific/Auckland"} {
		z := zone(t, name)
		for _, year := range []int{2040, 2064, 2104} {
			c := newClock(z)
			from := dayNumber(year, 12, 28) * day
			for civil := from; civil < from+7*day; civil += 30 * minute {
				first, last, n := c.instants(civil)
				if n != 1 || first != last || c.local(first) != civil {
					t.Fatalf("%s, %s: %d instants, %s and %s", name, civilText(civil), n, Format(first, z), Format(last, z))
				}
				if want := time.Date(year, 12, 28, 0, int((civil-from)/minute), 0, 0, z).UnixNano(); first != want {
					t.Fatalf("%s, %s: %s, want %s", name, civilText(civil), Format(first, z), Format(want, z))
				}
			}
		}
	}
}
