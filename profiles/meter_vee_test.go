package profiles

import (
	"fmt"
	"math"
	"math/rand"
	"strings"
	"testing"
	"time"
)

// veeStart is Monday 2025-01-06, UTC.
const veeStart = 1736121600 * second

// veeMeter opens one meter of power from values a step apart; NaN leaves the row out.
func veeMeter(t testing.TB, values []float64, step int64, rules MeterRules, b MeterBlock) (*MeterSet, *Meter) {
	t.Helper()
	s := mustMeters(t, b, rules, "m.csv", veeFile(values, step))
	return s, mustMeter(t, s, "A")
}

func veeFile(values []float64, step int64) string {
	return longFile("time,meter,value [kW]", veeStart, step, len(values), nil, []string{"A"}, func(_ string, k int) string {
		if values[k] != values[k] {
			return "absent"
		}
		return fmt.Sprint(values[k])
	})
}

// year makes days of the demand of demand.
func veeValues(days int, step int64, seed int) []float64 {
	values := make([]float64, int64(days)*day/step)
	for k := range values {
		values[k] = demand(veeStart+int64(k)*step, seed)
	}
	return values
}

// checkBooks: what was read and what each edit added make what stands, and no value
// that is not in a listed stretch differs from what was read.
func checkBooks(t *testing.T, s *MeterSet, m *Meter, read []float64, step int64) {
	t.Helper()
	h := float64(step) / float64(hour)
	before, after, added := 0.0, 0.0, 0.0
	for _, v := range read {
		if v == v {
			before += v * h
		}
	}
	for k := range m.Len() {
		after += m.Value(k) * h
	}
	count := 0
	touched := make([]bool, len(read))
	for _, one := range s.Mended {
		added += one.Energy
		if strings.Contains(one.Rule, "kept") || strings.Contains(one.Rule, "row") {
			continue
		}
		count += one.Count
		for k := (one.From - veeStart) / step; k < (one.To-veeStart)/step; k++ {
			if touched[k] {
				t.Errorf("interval %d is listed twice", k)
			}
			touched[k] = true
		}
	}
	tol := 1e-6 * (before + 1)
	if math.Abs(m.Before-before) > tol || math.Abs(m.After-after) > tol || math.Abs(m.Before+added-m.After) > tol {
		t.Errorf("before %v (%v), after %v (%v), added %v", m.Before, before, m.After, after, added)
	}
	if count != m.Edited {
		t.Errorf("%d values are listed, %d edited", count, m.Edited)
	}
	for k, v := range read {
		if !touched[k] && float32(v) != float32(m.Value(k)) {
			t.Errorf("interval %d was %v and is %v, and no rule says so", k, v, m.Value(k))
		}
	}
}

// TestMeterGoodDataStands: data without a fault, of many kinds, come through unchanged.
func TestMeterGoodDataStands(t *testing.T) {
	kinds := map[string]func(k int, r *rand.Rand) float64{
		"household":       func(k int, r *rand.Rand) float64 { return demand(veeStart+int64(k)*15*minute, 7) },
		"street light":    func(k int, r *rand.Rand) float64 { return []float64{0, 0.15}[k/48%2] },
		"constant":        func(k int, r *rand.Rand) float64 { return 2.5 },
		"empty building":  func(k int, r *rand.Rand) float64 { return 0 },
		"charger":         func(k int, r *rand.Rand) float64 { return []float64{0, 7.2}[r.Intn(20)/19] },
		"irrigation":      func(k int, r *rand.Rand) float64 { return []float64{0, 37.3}[k/700%2] },
		"coarse register": func(k int, r *rand.Rand) float64 { return float64(r.Intn(4)) + 1 },
		"rare flat pump":  func(k int, r *rand.Rand) float64 { return []float64{0, 11.1}[(k/200%13)/12] },
		"noise":           func(k int, r *rand.Rand) float64 { return 1 + r.Float64() },
		"season":          func(k int, r *rand.Rand) float64 { return 5 + 4*math.Cos(float64(k)/5000) + 0.01*r.Float64() },
	}
	for name, f := range kinds {
		t.Run(name, func(t *testing.T) {
			for seed := range int64(4) {
				r := rand.New(rand.NewSource(seed))
				values := make([]float64, 96*120)
				for k := range values {
					values[k] = f(k, r)
				}
				s, m := veeMeter(t, values, 15*minute, MeterRules{}, MeterBlock{})
				if m.Edited != 0 {
					t.Errorf("%d edited: %+v", m.Edited, s.Totals())
				}
				checkBooks(t, s, m, values, 15*minute)
			}
		})
	}
}

// TestMeterRules: each rule finds its fault, where it is, and what it puts there is
// what the rule says.
func TestMeterRules(t *testing.T) {
	const step = 15 * minute
	nan := math.NaN()
	base := func() []float64 { return veeValues(70, step, 3) }
	likeMean := func(values []float64, k int) float64 { // by hand: UTC, no clock changes
		sum, n := 0.0, 0
		kind := kindOf(floorDiv(veeStart+int64(k)*step, day))
		for j := k - 28*96; j <= k+28*96; j += 96 {
			if j >= 0 && j < len(values) && j != k && kindOf(floorDiv(veeStart+int64(j)*step, day)) == kind && values[j] == values[j] {
				sum, n = sum+values[j], n+1
			}
		}
		return sum / float64(n)
	}
	const at = 30*96 + 40 // Wednesday 10:00
	for _, c := range []struct {
		name  string
		rules MeterRules
		spoil func(v []float64)
		rule  string
		from  int
		count int
		want  func(clean, spoilt []float64, k int) float64
	}{
		{"two hours missing", MeterRules{}, func(v []float64) {
			for k := at; k < at+8; k++ {
				v[k] = nan
			}
		}, "gap, straight line", at, 8, func(_, v []float64, k int) float64 {
			return v[at-1] + (v[at+8]-v[at-1])*float64(k-at+1)/9
		}},
		{"more than two hours missing", MeterRules{}, func(v []float64) {
			for k := at; k < at+9; k++ {
				v[k] = nan
			}
		}, "gap, like days", at, 9, func(_, v []float64, k int) float64 { return likeMean(v, k) }},
		{"two days missing", MeterRules{}, func(v []float64) {
			for k := at; k < at+192; k++ {
				v[k] = nan
			}
		}, "gap, like days", at, 192, func(_, v []float64, k int) float64 { return likeMean(v, k) }},
		{"zeros", MeterRules{}, func(v []float64) {
			for k := at; k < at+12; k++ {
				v[k] = 0
			}
		}, "run of zeros, like days", at, 12, func(clean, _ []float64, k int) float64 { return likeMean(clean, k) }},
		{"zeros of an hour", MeterRules{}, func(v []float64) {
			for k := at; k < at+4; k++ {
				v[k] = 0
			}
		}, "run of zeros, straight line", at, 4, nil},
		{"stuck", MeterRules{}, func(v []float64) {
			for k := at; k < at+41; k++ {
				v[k] = v[at]
			}
		}, "stuck value, like days", at + 1, 40, nil},
		{"spike", MeterRules{}, func(v []float64) { v[at] = 655.35 }, "spike, straight line", at, 1, func(_, v []float64, k int) float64 { return (v[at-1] + v[at+1]) / 2 }},
		{"two spikes of a day", MeterRules{}, func(v []float64) { v[at], v[at+1] = 655.35, 99 }, "spike, straight line", at, 2, nil},
		{"spike above the service", MeterRules{ServiceKW: map[string]float64{"A": 10}}, func(v []float64) { v[at] = 11 }, "spike, straight line", at, 1, nil},
		{"negative", MeterRules{}, func(v []float64) { v[at] = -0.5 }, "negative value, straight line", at, 1, nil},
	} {
		t.Run(c.name, func(t *testing.T) {
			clean, values := base(), base()
			c.spoil(values)
			s, m := veeMeter(t, values, step, c.rules, MeterBlock{})
			checkBooks(t, s, m, values, step)
			if len(s.Mended) != 1 || s.Mended[0].Rule != c.rule || s.Mended[0].Count != c.count || s.Mended[0].From != veeStart+int64(c.from)*step || s.Mended[0].To != veeStart+int64(c.from+c.count)*step {
				t.Fatalf("mended %+v, want %s from %d, %d values", s.Mended, c.rule, c.from, c.count)
			}
			for k := c.from; c.want != nil && k < c.from+c.count; k++ {
				if want := c.want(clean, values, k); math.Abs(m.Value(k)-want) > 1e-6*want {
					t.Errorf("interval %d: %v, want %v", k, m.Value(k), want)
				}
			}
		})
	}
}

// TestMeterKept: what may be true is listed and stays.
func TestMeterKept(t *testing.T) {
	const step = 15 * minute
	for _, c := range []struct {
		name  string
		rules MeterRules
		block MeterBlock
		spoil func(v []float64)
		rule  string
		count int
	}{
		{"net metering", MeterRules{}, MeterBlock{Net: true}, func(v []float64) {
			for k := 40; k < len(v); k += 3 {
				v[k] = -v[k]
			}
		}, "negative value, kept: net metering", (70*96 - 40 + 2) / 3},
		{"net metering of one meter", MeterRules{Net: map[string]bool{"A": true}}, MeterBlock{}, func(v []float64) { v[3] = -1 }, "negative value, kept: net metering", 1},
		{"below the service", MeterRules{ServiceKW: map[string]float64{"A": 100}}, MeterBlock{}, func(v []float64) { v[3000] = 90 }, "", 0},
		{"above the service for long", MeterRules{ServiceKW: map[string]float64{"A": 10}}, MeterBlock{}, func(v []float64) {
			for k := 3000; k < 3010; k++ {
				v[k] = 12 + float64(k-3000)/10
			}
		}, "above the service size, kept", 10},
		{"vacant", MeterRules{}, MeterBlock{}, func(v []float64) {
			for k := 2000; k < 2000+8*96; k++ {
				v[k] = 0
			}
		}, "zero for over seven days, kept", 8 * 96},
		{"outages wanted", MeterRules{KeepZeros: true}, MeterBlock{}, func(v []float64) { v[2000], v[2001], v[2002], v[2003] = 0, 0, 0, 0 }, "", 0},
	} {
		t.Run(c.name, func(t *testing.T) {
			values := veeValues(70, step, 3)
			c.spoil(values)
			s, m := veeMeter(t, values, step, c.rules, c.block)
			checkBooks(t, s, m, values, step)
			switch {
			case m.Edited != 0, c.rule == "" && len(s.Mended) > 0:
				t.Errorf("mended %+v", s.Mended)
			case c.rule != "" && (len(s.Mended) != 1 || s.Mended[0].Rule != c.rule || s.Mended[0].Count != c.count || s.Mended[0].Energy != 0):
				t.Errorf("listed %+v, want %d of %q", s.Mended, c.count, c.rule)
			}
		})
	}
}

// TestMeterBooks: spoilt at random, the books still close and no good value moves.
func TestMeterBooks(t *testing.T) {
	for seed := range int64(30) {
		r := rand.New(rand.NewSource(seed))
		step := []int64{15 * minute, 30 * minute, hour}[seed%3]
		values := veeValues(60, step, int(seed))
		for range 1 + r.Intn(12) {
			k, n := 1+r.Intn(len(values)-2), 1+r.Intn(60)
			what := r.Intn(5)
			for i := k; i < min(k+n, len(values)-1); i++ {
				switch what {
				case 0, 1:
					values[i] = math.NaN()
				case 2:
					values[i] = 0
				case 3:
					values[i] = values[k]
				}
			}
			if what == 4 {
				values[k] = 1e4
			}
		}
		s, m := veeMeter(t, values, step, MeterRules{}, MeterBlock{})
		checkBooks(t, s, m, values, step)
		for k := range m.Len() {
			if v := m.Value(k); !(v >= 0) || v > 1e4 {
				t.Errorf("seed %d, interval %d: %v", seed, k, v)
			}
		}
	}
}

// TestMeterRows: rows out of order, twice, with two values, and what is blank.
func TestMeterRows(t *testing.T) {
	text := "time,meter,value [kWh],reactive [kvarh],note\n" +
		"2025-01-01T01:00,A,2,0.5,\n2025-01-01T00:00,A,1,0.25,\n2025-01-01T02:00,A,3,,\n2025-01-01T02:00,A,3,,again\n" +
		"2025-01-01T03:00,A,4,1,\n2025-01-01T03:00,A,4.5,1,\n2025-01-01T04:00,A,,1.25,\n2025-01-01T05:00,A,6,1.5,\n2025-01-01T06:00,A,NaN,,\n"
	s := mustMeters(t, MeterBlock{}, MeterRules{}, "m.csv", text)
	m := mustMeter(t, s, "A")
	for k, want := range []float64{1, 2, 3, 4.5, 5.25, 6} {
		if m.Value(k) != want {
			t.Errorf("hour %d: %v, want %v", k, m.Value(k), want)
		}
	}
	one := m.Series()
	for k, want := range []float64{0.25, 0.5, 0.75, 1, 1.25, 1.5} {
		if one.Kvar.Value(k) != want {
			t.Errorf("hour %d: %v kvar, want %v", k, one.Kvar.Value(k), want)
		}
	}
	if m.Len() != 6 || m.Before != 16.5 || m.After != 21.75 {
		t.Errorf("%d values, %v kWh before, %v after", m.Len(), m.Before, m.After)
	}
	want := []string{"gap, straight line 1 5.25", "kvar gap, straight line 1 0.75", "row repeated, dropped 1 0", "rows out of order, sorted 1 0", "two values for one time, the later kept 1 0"}
	for i, one := range s.Totals() {
		if got := fmt.Sprint(one.Rule, " ", one.Count, " ", one.Energy); i >= len(want) || got != want[i] {
			t.Errorf("listed %s", got)
		}
	}
	if len(s.Warnings) != 2 || !strings.Contains(s.Warnings.Error(), `m.csv:7: meter "A" has 1 times with two values, the first at 2025-01-01T03:00:00+00:00: 4.5 here and 4 at m.csv:6`) {
		t.Errorf("warnings %v", s.Warnings)
	}
}

// TestMeterRegisters: rollover, exchange, and a gap whose sum the counter knows.
func TestMeterRegisters(t *testing.T) {
	const step = 15 * minute
	values := veeValues(40, step, 5)
	text := func(begin float64, edit func(k int, r float64) (float64, bool)) string {
		var b strings.Builder
		b.WriteString("time,meter,value [kWh]\n")
		r := begin
		for k := 0; k <= len(values); k++ {
			if v, ok := edit(k, r); ok {
				fmt.Fprintf(&b, "%s,A,%.4f\n", time.Unix(0, veeStart+int64(k)*step).UTC().Format("2006-01-02T15:04"), v)
			}
			if k < len(values) {
				r += values[k] / 4
			}
		}
		return b.String()
	}
	sum := 0.0
	for _, v := range values {
		sum += v / 4
	}
	t.Run("rollover", func(t *testing.T) {
		s := mustMeters(t, MeterBlock{Values: "register"}, MeterRules{}, "m.csv", text(9900, func(_ int, r float64) (float64, bool) { return math.Mod(r, 1e4), true }))
		m := mustMeter(t, s, "A")
		if m.Edited != 0 || math.Abs(m.After-sum) > 1e-3 {
			t.Errorf("%v kWh, want %v; %+v", m.After, sum, s.Mended)
		}
	})
	t.Run("exchange", func(t *testing.T) {
		const at = 1000
		s := mustMeters(t, MeterBlock{Values: "register"}, MeterRules{}, "m.csv", text(5000, func(k int, r float64) (float64, bool) {
			if k > at {
				r -= 5100
			}
			return r, true
		}))
		m := mustMeter(t, s, "A")
		if len(s.Mended) != 1 || s.Mended[0].Rule != "register set back, straight line" || s.Mended[0].Count != 1 || s.Mended[0].From != veeStart+at*step {
			t.Errorf("mended %+v", s.Mended)
		}
		if math.Abs(m.After-sum) > 1 {
			t.Errorf("%v kWh, want about %v", m.After, sum)
		}
	})
	t.Run("gap", func(t *testing.T) {
		s := mustMeters(t, MeterBlock{Values: "register"}, MeterRules{}, "m.csv", text(50, func(k int, r float64) (float64, bool) { return r, k < 1000 || k > 1100 }))
		m := mustMeter(t, s, "A")
		if len(s.Mended) != 1 || s.Mended[0].Rule != "gap, like days" || s.Mended[0].Count != 102 {
			t.Errorf("mended %+v", s.Mended)
		}
		if math.Abs(m.After-sum) > 1e-3 || math.Abs(s.Mended[0].Energy) > 1e-3 {
			t.Errorf("%v kWh, want %v; added %v", m.After, sum, s.Mended[0].Energy)
		}
	})
}

// TestMeterOddDayLikeness: on the day of 25 hours both of its equal hours are like
// that hour of other days, and the day of 23 hours has none to give.
func TestMeterOddDayLikeness(t *testing.T) {
	z := zone(t, "America/Denver")
	start, err := ParseTime("2025-10-20", z)
	if err != nil {
		t.Fatal(err)
	}
	c := newCalendar(start, hour, 24*40+1, z)
	first, err := ParseTime("2025-11-02T01:00", z)
	if err != nil {
		t.Fatal(err)
	}
	for i := range int64(2) { // the first and the second 01:00
		k := int((first-start)/hour + i)
		n := 0
		c.alike(k, func(j int) {
			n++
			at := time.Unix(0, start+int64(j)*hour).In(z)
			if at.Hour() != 1 || at.Weekday() != time.Sunday || j == k {
				t.Errorf("hour %d of the day is like %s", k, at)
			}
		})
		if n != 4 { // 26 October, 9, 16 and 23 November; the run ends before the 30th
			t.Errorf("%d like hours", n)
		}
	}
}

// TestMeterReactiveMostlyMissing: a companion that is hardly known is left out, so that
// the load keeps its power factor; one that is nowhere known is so without a word.
func TestMeterReactiveMostlyMissing(t *testing.T) {
	for _, c := range []struct {
		cells    [4]string
		used     bool
		warnings int
	}{{[4]string{"1", "2", "", ""}, true, 0}, {[4]string{"1", "", "", ""}, false, 1}, {[4]string{}, false, 0}} {
		text := "time,A [kW],A [kvar]\n"
		for k, cell := range c.cells {
			text += fmt.Sprintf("2025-01-01T%02d:00,%d.5,%s\n", k, k, cell)
		}
		s := mustMeters(t, MeterBlock{Layout: "wide"}, MeterRules{}, "m.csv", text)
		m := mustMeter(t, s, "A")
		if (m.Series().Kvar != nil) != c.used || len(s.Warnings) != c.warnings || m.Edited != 0 {
			t.Errorf("%q: kvar %v, warnings %v", c.cells, m.Series().Kvar, s.Warnings)
		}
	}
}
