package plots

import (
	"io/fs"
	"slices"
	"strings"
	"testing"
	"time"

	"yearflow/sim/results"
)

func mustRead(t testing.TB, dir fs.FS) *results.Folder {
	t.Helper()
	f, err := results.ReadFolder(dir)
	if err != nil {
		t.Fatal(err)
	}
	return f
}

func TestNumber(t *testing.T) {
	for _, c := range []struct {
		x    float64
		d    int
		want string
	}{
		{0, 0, "0"}, {-0.0004, 3, "0.000"}, {-0.0006, 3, "−0.001"}, {999.6, 0, "1,000"}, {1234567.891, 2, "1,234,567.89"}, {-1000, 0, "−1,000"}, {12, 1, "12.0"},
	} {
		if got := number(c.x, c.d); got != c.want {
			t.Errorf("number(%v, %d) = %q, want %q", c.x, c.d, got, c.want)
		}
	}
}

func TestLinearTicks(t *testing.T) {
	for _, c := range []struct {
		lo, hi float64
		n      int
		want   string
	}{
		{0, 10, 5, "0 2 4 6 8 10"}, {0.93, 1.07, 6, "0.950 0.975 1.000 1.025 1.050"}, {-0.5, 0.5, 4, "−0.50 −0.25 0.00 0.25 0.50"}, {0, 0.003, 3, "0.000 0.001 0.002 0.003"},
	} {
		var labels []string
		for _, k := range linear(c.lo, c.hi, c.n) {
			labels = append(labels, k.label)
		}
		if got := strings.Join(labels, " "); got != c.want {
			t.Errorf("linear(%v, %v, %d): %s, want %s", c.lo, c.hi, c.n, got, c.want)
		}
	}
}

// TestTimeTicksAreLocal looks at the two days of the year on which clocks change.
func TestTimeTicksAreLocal(t *testing.T) {
	z := denver()
	st := newStyle(72)
	for _, c := range []struct {
		name       string
		start, end time.Time
		want       string
	}{
		{"23 hours", time.Date(2025, 3, 9, 0, 0, 0, 0, z), time.Date(2025, 3, 10, 0, 0, 0, 0, z), "00:00 03:00 06:00 09:00 12:00 15:00 18:00 21:00 24:00"},
		{"25 hours", time.Date(2025, 11, 2, 0, 0, 0, 0, z), time.Date(2025, 11, 3, 0, 0, 0, 0, z), "00:00 03:00 06:00 09:00 12:00 15:00 18:00 21:00 24:00"},
		{"a week", time.Date(2025, 3, 7, 0, 0, 0, 0, z), time.Date(2025, 3, 14, 0, 0, 0, 0, z), "7 Mar 8 Mar 9 Mar 10 Mar 11 Mar 12 Mar 13 Mar"},
		{"a year", time.Date(2025, 1, 1, 0, 0, 0, 0, z), time.Date(2026, 1, 1, 0, 0, 0, 0, z), "Jan Feb Mar Apr May Jun Jul Aug Sep Oct Nov Dec"},
	} {
		s := span{c.start, c.end}
		var labels []string
		for _, k := range s.timeTicks(st.text(labelSize, black), 430) {
			if k.label != "" {
				labels = append(labels, k.label)
			}
			if at := time.Unix(int64(k.at), 0).In(z); at.Minute() != 0 || at.Before(c.start) || at.After(c.end) {
				t.Errorf("%s: a tick at %v", c.name, at)
			}
		}
		if got := strings.Join(labels, " "); got != c.want {
			t.Errorf("%s: %s, want %s", c.name, got, c.want)
		}
	}
}

// TestClockChangesOnTheHeatMap: the hour that spring leaves out is empty, of the hour
// that comes twice in autumn the worse value is kept.
func TestClockChangesOnTheHeatMap(t *testing.T) {
	z := denver()
	day := func(y int, m time.Month, d int) invented {
		g := year()
		g.trunk = 2
		g.start, g.end = time.Date(y, m, d, 0, 0, 0, 0, z), time.Date(y, m, d+1, 0, 0, 0, 0, z)
		return g
	}
	s, err := newSurvey(mustRead(t, day(2025, 3, 9).write()))
	if err != nil {
		t.Fatal(err)
	}
	g := s.byDay(s.lowest, true)
	for h := range 24 {
		if empty := g.cell[h] != g.cell[h]; empty != (h == 2) {
			t.Errorf("9 March, hour %d: empty %v", h, empty)
		}
	}
	if s, err = newSurvey(mustRead(t, day(2025, 11, 2).write())); err != nil {
		t.Fatal(err)
	}
	if len(s.lowest) != 25 {
		t.Fatalf("%d rows on 2 November, want 25", len(s.lowest))
	}
	g = s.byDay(s.lowest, true)
	if want := min(s.lowest[1], s.lowest[2]); g.cell[1] != want {
		t.Errorf("the doubled hour shows %v, want the lower of %v and %v", g.cell[1], s.lowest[1], s.lowest[2])
	}
	g = s.byDay(s.highest, false)
	if want := max(s.highest[1], s.highest[2]); g.cell[1] != want {
		t.Errorf("the doubled hour shows %v, want the higher of %v and %v", g.cell[1], s.highest[1], s.highest[2])
	}
}

// TestColoursReadInGrey: the scale of the heat maps grows darker from the calm end to
// far outside, so that it reads without colour.
func TestColoursReadInGrey(t *testing.T) {
	for name, k := range map[string]shade{
		"lowest":  {calm: 1.02, limit: 0.95, outer: 110. / 120, end: 0.88},
		"highest": {calm: 1.00, limit: 1.05, outer: 127. / 120, end: 1.09},
	} {
		before := 2.0
		for i := 0; i <= 200; i++ {
			v := k.calm + (k.end-k.calm)*float64(i)/200
			l := lightness(k.color(v))
			if l > before+0.005 {
				t.Errorf("%s: %.4f p.u. is lighter (%.3f) than what lies further inside (%.3f)", name, v, l, before)
			}
			before = l
		}
	}
	for i := 1; i < len(lossKinds); i++ {
		a, b := lightness(lossKinds[i-1].color), lightness(lossKinds[i].color)
		if d := a - b; d < 0.15 && d > -0.15 {
			t.Errorf("%s and %s print as nearly the same grey (%.2f, %.2f)", lossKinds[i-1].name, lossKinds[i].name, a, b)
		}
	}
}

func TestWrapFits(t *testing.T) {
	st := newStyle(72)
	tx := st.text(findingSize, black)
	long := strings.Repeat("a voltage of 0.95 p.u. at node ", 20) + strings.Repeat("x", 200)
	lines := wrap(tx, long, 300, 3)
	if len(lines) != 3 || !strings.HasSuffix(lines[2], "…") {
		t.Errorf("%d lines, the last %q", len(lines), lines[len(lines)-1])
	}
	for _, l := range lines {
		if w := tx.Width(l); w > 300 {
			t.Errorf("%q is %v wide", l, w)
		}
	}
	if got := wrap(tx, "short", 300, 3); len(got) != 1 || got[0] != "short" {
		t.Errorf("%q", got)
	}
}

// The legs of services share a line, and so an entry, which stands last; pairs stand
// with their first phase.
func TestPhaseKeys(t *testing.T) {
	var got []string
	for _, k := range phaseKeys([]string{"1", "2", "A", "B", "AB"}, phaseStyle) {
		got = append(got, k.text)
	}
	if want := []string{"phase A, AB", "phase B", "services"}; !slices.Equal(got, want) {
		t.Errorf("got %q, want %q", got, want)
	}
	if phaseStyle("1").Color == phaseStyle("A").Color || phaseStyle("2").Color == phaseStyle("B").Color {
		t.Error("a leg looks like a phase")
	}
}
