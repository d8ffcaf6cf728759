package devices

import (
	"math"
	"testing"
	"time"
	_ "time/tzdata"
)

func load(t testing.TB, name string) *time.Location {
	t.Helper()
	zone, err := time.LoadLocation(name)
	if err != nil {
		t.Fatal(err)
	}
	return zone
}

// timeSheet is a control by time with switching times in hours and minutes.
func timeSheet(on, off string, zone *time.Location) CapacitorControl {
	clock := func(s string) Time {
		at, err := time.Parse("15:04", s)
		if err != nil {
			panic(err)
		}
		return Time(at.Hour()*3600+at.Minute()*60) * Second
	}
	return CapacitorControl{Kind: CapacitorTime, TimeOn: clock(on), TimeOff: clock(off), Zone: zone,
		OverrideOn: math.NaN(), OverrideOff: math.NaN(), Delay: 60 * Second}
}

// switches lists when a time control wants what, from NextSwitch, as local times.
func switches(c CapacitorControl, from, to time.Time) (out []string) {
	var s CapacitorState
	for t := from.UnixNano(); t < to.UnixNano(); t = c.NextSwitch(s) {
		s = c.Observe(s, CapacitorReading{V120: 120, Clock: t}, t)
		word := " open"
		if s.Window {
			word = " closed"
		}
		out = append(out, time.Unix(0, t).In(c.zone()).Format("Mon 02 15:04 -0700")+word)
	}
	return out
}

// 2025-03-07 and 2025-10-31 are Fridays; in Denver clocks go from 02:00 to 03:00 on
// Sunday 2025-03-09 and from 02:00 back to 01:00 on Sunday 2025-11-02.
func TestSwitchingTimes(t *testing.T) {
	denver := load(t, "America/Denver")
	on := func(y int, m time.Month, d, h int) time.Time { return time.Date(y, m, d, h, 0, 0, 0, denver) }
	spring, autumn := on(2025, 3, 7, 12), on(2025, 10, 31, 12)
	tests := []struct {
		name     string
		on, off  string
		weekdays bool
		from     time.Time
		days     int
		want     []string
	}{
		{"by day, over the spring change", "08:00", "18:30", false, spring, 3, []string{
			"Fri 07 12:00 -0700 closed", "Fri 07 18:30 -0700 open",
			"Sat 08 08:00 -0700 closed", "Sat 08 18:30 -0700 open",
			"Sun 09 08:00 -0600 closed", "Sun 09 18:30 -0600 open",
			"Mon 10 08:00 -0600 closed"}},
		{"wraps past midnight", "22:00", "06:00", false, spring, 2, []string{
			"Fri 07 12:00 -0700 open", "Fri 07 22:00 -0700 closed",
			"Sat 08 06:00 -0700 open", "Sat 08 22:00 -0700 closed",
			"Sun 09 06:00 -0600 open"}},
		{"wraps, on weekdays: past midnight the new day counts", "22:00", "06:00", true, spring, 4, []string{
			"Fri 07 12:00 -0700 open", "Fri 07 22:00 -0700 closed", "Sat 08 00:00 -0700 open",
			"Mon 10 00:00 -0600 closed", "Mon 10 06:00 -0600 open", "Mon 10 22:00 -0600 closed",
			"Tue 11 06:00 -0600 open"}},
		{"weekdays from midnight to midnight less a minute", "00:00", "23:59", true, spring, 4, []string{
			"Fri 07 12:00 -0700 closed", "Fri 07 23:59 -0700 open", "Mon 10 00:00 -0600 closed", "Mon 10 23:59 -0600 open",
			"Tue 11 00:00 -0600 closed"}},
		{"a time in the hour that is skipped comes when the clock is past it", "02:30", "05:00", false, spring, 2, []string{
			"Fri 07 12:00 -0700 open", "Sat 08 02:30 -0700 closed", "Sat 08 05:00 -0700 open",
			"Sun 09 03:00 -0600 closed", "Sun 09 05:00 -0600 open"}},
		{"a window in the hour that is skipped does not come", "02:10", "02:50", false, spring, 3, []string{
			"Fri 07 12:00 -0700 open", "Sat 08 02:10 -0700 closed", "Sat 08 02:50 -0700 open",
			"Mon 10 02:10 -0600 closed", "Mon 10 02:50 -0600 open"}},
		{"a time in the hour that comes twice counts once, the first time", "01:30", "05:00", false, autumn, 2, []string{
			"Fri 31 12:00 -0600 open", "Sat 01 01:30 -0600 closed", "Sat 01 05:00 -0600 open",
			"Sun 02 01:30 -0600 closed", "Sun 02 05:00 -0700 open"}},
		{"and an off time too", "20:00", "01:30", false, autumn, 2, []string{
			"Fri 31 12:00 -0600 open", "Fri 31 20:00 -0600 closed", "Sat 01 01:30 -0600 open",
			"Sat 01 20:00 -0600 closed", "Sun 02 01:30 -0600 open"}},
		{"until the hour after: two hours long", "01:00", "02:00", false, autumn, 2, []string{
			"Fri 31 12:00 -0600 open", "Sat 01 01:00 -0600 closed", "Sat 01 02:00 -0600 open",
			"Sun 02 01:00 -0600 closed", "Sun 02 02:00 -0700 open"}},
		{"never, where both times are one", "06:00", "06:00", false, spring, 30, []string{"Fri 07 12:00 -0700 open"}},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			c := timeSheet(tt.on, tt.off, denver)
			c.Weekdays = tt.weekdays
			got := switches(c, tt.from, tt.from.AddDate(0, 0, tt.days))
			for i := range max(len(got), len(tt.want)) {
				if i >= len(got) || i >= len(tt.want) || got[i] != tt.want[i] {
					t.Fatalf("got  %q\nwant %q", got, tt.want)
				}
			}
		})
	}
}

// The bank follows its window after the delay; the log shows hours of the local day.
// 2025-01-06 is a Monday; Denver is seven hours behind UTC.
func TestTimeControl(t *testing.T) {
	c := timeSheet("07:30", "19:00", load(t, "America/Denver"))
	c.OverrideOff, c.OverrideDeadband = 127, 2
	day := float64(time.Date(2025, 1, 6, 7, 0, 0, 0, time.UTC).Unix())
	on, off := day+7.5*3600, day+19*3600
	runCapacitor(t, c, CapacitorState{}, []capRow{
		{day, 120, 0, 0, never, nil},
		{on, 120, 0, +1, on + 60, nil},
		{on + 60, 120, 0, +1, on + 60, act(0, 1, ByTime, 7.5+1.0/60, 7.5, 60)},
		{on + 90, 128, 0, -1, on + 150, nil}, // the override wins over the clock
		{on + 150, 128, 0, -1, on + 150, act(1, 0, OverrideHigh, 128, 127, 60)},
		{on + 200, 124.9, 0, +1, on + 260, nil},
		{on + 260, 124.9, 0, +1, on + 260, act(0, 1, ByTime, 7.5+260.0/3600, 7.5, 60)},
		{off - 1, 120, 0, 0, never, nil},
		{off, 120, 0, -1, off + 60, nil},
		{off + 60, 120, 0, -1, off + 60, act(1, 0, ByTime, 19+1.0/60, 19, 60)},
	})
}

// At start-up the time of day stands still while event time goes on.
func TestStandingClock(t *testing.T) {
	c := timeSheet("07:30", "19:00", nil)
	noon := at(12 * 3600)
	s := c.Observe(CapacitorState{}, CapacitorReading{V120: 120, Clock: noon}, noon)
	s, _ = c.Act(s, c.Due(s))
	s = c.Observe(s, CapacitorReading{V120: 120, Clock: noon}, noon+at(20*3600))
	if !s.Closed || s.Ask != 0 {
		t.Errorf("eight hours of event time after midnight the clock still shows noon: %+v", s)
	}
	s = c.Observe(c.Forget(s), CapacitorReading{V120: 120, Clock: noon}, noon)
	if got, want := c.NextSwitch(s), at(19*3600); got != want {
		t.Errorf("the next switching is at %v h, want 19", seconds(got)/3600)
	}
}

// A daily limit makes local midnight an event, in the zone of the control.
func TestMidnightIsAnEvent(t *testing.T) {
	c := CapacitorControl{Kind: CapacitorVoltage, On: 118, Off: 126, DailyLimit: 1, Delay: 60 * Second, Zone: load(t, "America/Denver")}
	from := time.Date(2025, 3, 9, 12, 0, 0, 0, c.Zone)
	s := c.Observe(CapacitorState{}, CapacitorReading{V120: 117, Clock: from.UnixNano()}, from.UnixNano())
	s, _ = c.Act(s, c.Due(s))
	midnight := time.Date(2025, 3, 10, 0, 0, 0, 0, c.Zone).UnixNano()
	if got := c.NextSwitch(s); got != midnight {
		t.Fatalf("the next event is %v, want midnight", time.Unix(0, got).In(c.Zone))
	}
	high := CapacitorReading{V120: 127, Clock: midnight - 1}
	if s = c.Observe(s, high, high.Clock); s.Ask != 0 {
		t.Fatal("the limit is reached")
	}
	high.Clock = midnight
	if s = c.Observe(s, high, midnight); s.Ask != -1 || s.Counted != 0 {
		t.Fatalf("a new day: %+v", s)
	}
	c.DailyLimit = 0
	if got := c.NextSwitch(s); got != Never {
		t.Errorf("the clock plays no part, and yet %v", got)
	}
}

// Against a clock that is watched minute by minute, over every change of clocks that
// zones have made: by an hour, by half an hour, at midnight, over a whole day.
func TestSwitchingTimesByMinutes(t *testing.T) {
	for _, z := range []struct {
		zone string
		from time.Time
	}{
		{"America/Denver", time.Date(2025, 3, 5, 0, 0, 0, 0, time.UTC)},
		{"America/Denver", time.Date(2025, 10, 29, 0, 0, 0, 0, time.UTC)},
		{"Australia/Lord_Howe", time.Date(2025, 4, 2, 0, 0, 0, 0, time.UTC)},
		{"Australia/Lord_Howe", time.Date(2025, 10, 1, 0, 0, 0, 0, time.UTC)},
		{"America/Sao_Paulo", time.Date(2018, 2, 14, 0, 0, 0, 0, time.UTC)},  // back at midnight
		{"America/Sao_Paulo", time.Date(2018, 10, 31, 0, 0, 0, 0, time.UTC)}, // no midnight
		{"America/Havana", time.Date(2024, 10, 30, 0, 0, 0, 0, time.UTC)},
		{"Pacific/Apia", time.Date(2011, 12, 27, 0, 0, 0, 0, time.UTC)}, // no 30 December
		{"UTC", time.Date(1969, 12, 29, 0, 0, 0, 0, time.UTC)},
	} {
		zone := load(t, z.zone)
		for _, window := range [][2]string{{"08:00", "18:00"}, {"22:00", "06:00"}, {"01:30", "02:15"}, {"02:00", "01:45"}, {"23:30", "00:30"}, {"00:00", "12:00"}} {
			for _, weekdays := range []bool{false, true} {
				c := timeSheet(window[0], window[1], zone)
				c.Weekdays = weekdays
				byMinutes(t, z.zone, c, z.from)
			}
		}
	}
}

// byMinutes holds Window and NextSwitch against the latest wall clock seen.
func byMinutes(t *testing.T, name string, c CapacitorControl, from time.Time) {
	t.Helper()
	var s CapacitorState
	var latest string // the latest date and time shown so far; they sort as text
	next := Time(math.MinInt64)
	was := false
	start := from.Add(-24 * time.Hour)
	for i := range 10 * 24 * 60 {
		at := start.Add(time.Duration(i) * time.Minute)
		local := at.In(c.zone())
		if word := local.Format("2006-01-02 15:04:05"); word > latest {
			latest = word
		} else {
			local, _ = time.Parse("2006-01-02 15:04:05", latest) // only its fields are read
		}
		if at.Before(from) {
			continue
		}
		minute := Time(local.Hour()*60+local.Minute()) * 60 * Second
		want := minute >= c.TimeOn && minute < c.TimeOff
		if c.TimeOn > c.TimeOff {
			want = minute >= c.TimeOn || minute < c.TimeOff
		}
		if d := local.Weekday(); c.Weekdays && (d == time.Saturday || d == time.Sunday) {
			want = false
		}
		now := at.UnixNano()
		if next != math.MinInt64 && (want != was) != (now == next) {
			t.Fatalf("%s, %v to %v, weekdays %v: at %v the window turns %v, NextSwitch says %v", name, c.TimeOn, c.TimeOff, c.Weekdays,
				at.In(c.zone()), want != was, time.Unix(0, next).In(c.zone()))
		}
		s = c.Observe(s, CapacitorReading{V120: 120, Clock: now}, now)
		if s.Window != want {
			t.Fatalf("%s, %v to %v, weekdays %v: at %v it wants closed: %v, want %v", name, c.TimeOn, c.TimeOff, c.Weekdays,
				at.In(c.zone()), s.Window, want)
		}
		was, next = want, c.NextSwitch(s)
		// A control that has seen nothing before reads the clock the same way.
		fresh := c.Observe(CapacitorState{}, CapacitorReading{V120: 120, Clock: now}, now)
		if fresh.Window != want || c.NextSwitch(fresh) != next {
			t.Fatalf("%s, %v to %v, weekdays %v: at %v a fresh control wants closed: %v until %v, want %v until %v", name, c.TimeOn, c.TimeOff, c.Weekdays,
				at.In(c.zone()), fresh.Window, time.Unix(0, c.NextSwitch(fresh)).In(c.zone()), want, time.Unix(0, next).In(c.zone()))
		}
	}
}
