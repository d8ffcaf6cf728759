package profiles

import (
	"bytes"
	"compress/gzip"
	"errors"
	"fmt"
	"math"
	"strings"
	"testing"
	"testing/fstest"
	"time"

	"yearflow/sim/tables"
)

// meters opens one block of files that are given as name, text, name, text, ...
func meters(t testing.TB, b MeterBlock, rules MeterRules, files ...string) (*MeterSet, error) {
	t.Helper()
	fsys := fstest.MapFS{}
	for i := 0; i < len(files); i += 2 {
		fsys[files[i]] = &fstest.MapFile{Data: []byte(files[i+1])}
		b.Files = append(b.Files, files[i])
	}
	return OpenMeters(fsys, []MeterBlock{b}, "", rules)
}

func mustMeters(t testing.TB, b MeterBlock, rules MeterRules, files ...string) *MeterSet {
	t.Helper()
	s, err := meters(t, b, rules, files...)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

func mustMeter(t testing.TB, s *MeterSet, name string) *Meter {
	t.Helper()
	m, ok := s.Lookup(name)
	if !ok {
		t.Fatalf("no meter %q among %v", name, s.names())
	}
	return m
}

// demand is an invented household: kW at an instant, never zero, its step to step
// change never nothing, with a day, a week and a year in it.
func demand(t int64, seed int) float64 {
	u := func(i uint64) float64 { return chance(uint64(t/minute)*1_000_003 + uint64(seed)*2_000_003 + i) }
	tod := float64(floorMod(t, day)) / float64(hour)
	v := 0.4 + 0.3*math.Pow(math.Sin(math.Pi*(tod-5)/24), 2) + 0.2*math.Cos(2*math.Pi*float64(t)/float64(365*day))
	if d := kindOf(floorDiv(t, day)); d != workingDay {
		v += 0.15
	}
	v += 0.1 * u(0)
	if u(1) < 1.0/40 {
		v += 1.5 * u(2) // the oven
	}
	return math.Round(v*1000) / 1000
}

// chance is a number of [0, 1) that follows from i (SplitMix64: G. L. Steele, D. Lea and
// C. H. Flood, Fast splittable pseudorandom number generators, OOPSLA 2014).
func chance(i uint64) float64 {
	z := i * 0x9e3779b97f4a7c15
	z = (z ^ z>>30) * 0xbf58476d1ce4e5b9
	z = (z ^ z>>27) * 0x94d049bb133111eb
	return float64((z^z>>31)>>11) / (1 << 53)
}

// longFile writes rows of meters in order of time.
func longFile(header string, start int64, step int64, n int, zone *time.Location, names []string, value func(name string, k int) string) string {
	var b strings.Builder
	b.WriteString(header + "\n")
	for k := range n {
		for _, name := range names {
			if v := value(name, k); v != "absent" {
				fmt.Fprintf(&b, "%s,%s,%s\n", at(start+int64(k)*step, zone).Format("2006-01-02T15:04"), name, v)
			}
		}
	}
	return b.String()
}

// TestMeterLayouts reads the same demand from every layout, and it comes out alike.
func TestMeterLayouts(t *testing.T) {
	denver := zone(t, "America/Denver")
	start, err := ParseTime("2025-03-07", denver)
	if err != nil {
		t.Fatal(err)
	}
	const n = 4 * 96 // over the day that has 23 hours
	step := 15 * minute
	kw := func(seed, k int) float64 { return demand(start+int64(k)*step, seed) }
	want := map[string][]float64{"A": nil, "B": nil}
	for k := range n {
		want["A"] = append(want["A"], kw(1, k))
		want["B"] = append(want["B"], kw(2, k))
	}
	seed := map[string]int{"A": 1, "B": 2}
	stampAt := func(k int, z *time.Location, layout string) string {
		return at(start+int64(k)*step, z).Format(layout)
	}
	const local, offset = "2006-01-02T15:04", "2006-01-02T15:04:05-07:00"
	long := func(header string, shift int, z *time.Location, layout string, cell func(name string, k int) string) string {
		var b strings.Builder
		b.WriteString(header + "\n")
		for k := range n {
			for _, name := range []string{"A", "B"} {
				fmt.Fprintf(&b, "%s,%s,%s\n", stampAt(k+shift, z, layout), name, cell(name, k))
			}
		}
		return b.String()
	}
	kWh := func(name string, k int) string { return fmt.Sprint(kw(seed[name], k) / 4) }
	power := func(name string, k int) string { return fmt.Sprint(kw(seed[name], k)) }
	register := func(name string, k int) string {
		r := 99990.0 // goes over its highest number soon
		for i := range k {
			r += kw(seed[name], i) / 4
		}
		return fmt.Sprintf("%.6f", math.Mod(r, 1e5))
	}
	var wide, counter strings.Builder
	wide.WriteString("\xef\xbb\xbftime;A [W];note;B [W]\r\n")
	counter.WriteString("time,A [kWh],B [kWh]\n")
	for k := range n + 1 {
		if k < n {
			fmt.Fprintf(&wide, "%s;%s;x;%s\r\n", stampAt(k, denver, local), strings.Replace(fmt.Sprintf("%.1f", 1000*kw(1, k)), ".", ",", 1), strings.Replace(fmt.Sprintf("%.1f", 1000*kw(2, k)), ".", ",", 1))
		}
		fmt.Fprintf(&counter, "%s,%s,%s\n", stampAt(k, denver, offset), register("A", k), register("B", k))
	}
	byMeter := func() string {
		var b strings.Builder
		b.WriteString("meter,value [kWh],time\n")
		for _, name := range []string{"B", "A"} {
			for k := n - 1; k >= 0; k-- { // from the last to the first
				fmt.Fprintf(&b, "%s,%s,%s\n", name, kWh(name, k), stampAt(k, denver, local))
			}
		}
		return b.String()
	}()
	whole := long("time,meter,value [kWh]", 0, denver, local, kWh)
	cut := strings.Index(whole[len(whole)/2:], "\n") + len(whole)/2 + 1
	for _, c := range []struct {
		name  string
		block MeterBlock
		tol   float64
		files []string
	}{
		{"long, kWh, local", MeterBlock{Zone: denver}, 0, []string{"m.csv", whole}},
		{"long, kW", MeterBlock{Zone: denver, Layout: "long", Values: "interval", Stamped: "start"}, 0, []string{"m.csv", long("time,meter,value [kW]", 0, denver, local, power)}},
		{"stamped at the end", MeterBlock{Zone: denver, Stamped: "end"}, 0, []string{"m.csv", long("time,meter,value [kWh]", 1, denver, local, kWh)}},
		{"UTC", MeterBlock{}, 0, []string{"m.csv", long("time,meter,value [kWh]", 0, time.UTC, local, kWh)}},
		{"offset", MeterBlock{}, 0, []string{"m.csv", long("time,meter,value [kWh]", 0, denver, offset, kWh)}},
		{"unit of the block", MeterBlock{Zone: denver, Unit: "kWh"}, 0, []string{"m.csv", long("time,meter,value", 0, denver, local, kWh)}},
		{"wide, semicolons", MeterBlock{Zone: denver, Layout: "wide"}, 0, []string{"m.csv", wide.String()}},
		{"registers, wide", MeterBlock{Layout: "wide", Values: "register"}, 1e-4, []string{"m.csv", counter.String()}},
		{"newest first, by meter", MeterBlock{Zone: denver}, 0, []string{"m.csv", byMeter}},
		{"two files", MeterBlock{Zone: denver}, 0, []string{"m2.csv", "time,meter,value [kWh]\n" + whole[cut:], "m1.csv", whole[:cut]}},
		{"gzip", MeterBlock{Zone: denver}, 0, []string{"m.csv.gz", packed(t, whole)}},
	} {
		t.Run(c.name, func(t *testing.T) {
			s := mustMeters(t, c.block, MeterRules{Zone: denver}, c.files...)
			for name, values := range want {
				m := mustMeter(t, s, name)
				from, _ := m.Span()
				if from != start || m.StepLength() != step || m.Len() != n || m.Edited != 0 {
					t.Fatalf("%s: starts %s, step %d, %d values, %d edited", name, Format(from, denver), m.StepLength()/second, m.Len(), m.Edited)
				}
				for k, v := range values {
					if math.Abs(m.Value(k)-v) > c.tol+1e-6*v {
						t.Fatalf("%s, interval %d: %v kW, want %v", name, k, m.Value(k), v)
					}
				}
			}
			for _, m := range s.Mended {
				if !strings.HasPrefix(m.Rule, "rows out of order") {
					t.Errorf("mended: %+v", m)
				}
			}
		})
	}
}

// TestMeterOddDays: the days of 23 and 25 hours in two zones, stamped on the local
// clock at either end of the interval, hourly and by the quarter hour, are whole.
func TestMeterOddDays(t *testing.T) {
	for _, c := range []struct {
		zone, date string
		hours      int
	}{
		{"America/Denver", "2025-03-09", 23}, // second Sunday of March (Energy Policy Act of 2005)
		{"America/Denver", "2025-11-02", 25},
		{"Europe/Zurich", "2026-03-29", 23}, // last Sunday of March (Directive 2000/84/EC)
		{"Europe/Zurich", "2026-10-25", 25},
	} {
		for _, stamped := range []string{"start", "end"} {
			for _, step := range []int64{15 * minute, hour} {
				t.Run(fmt.Sprint(c.zone, c.date, stamped, step/minute), func(t *testing.T) {
					z := zone(t, c.zone)
					midnight, err := ParseTime(c.date, z)
					if err != nil {
						t.Fatal(err)
					}
					start := midnight - 7*day
					n := int((14*day + int64(c.hours)*hour) / step)
					shift := int64(0)
					if stamped == "end" {
						shift = step
					}
					file := longFile("time,meter,value [kW]", start+shift, step, n, z, []string{"A", "B"}, func(name string, k int) string {
						return fmt.Sprint(demand(start+int64(k)*step, int(name[0])))
					})
					s := mustMeters(t, MeterBlock{Zone: z, Stamped: stamped}, MeterRules{}, "m.csv", file)
					for _, name := range []string{"A", "B"} {
						m := mustMeter(t, s, name)
						if from, to := m.Span(); from != start || to != start+int64(n)*step || m.Edited != 0 {
							t.Fatalf("%s covers %s to %s with %d edited", name, Format(from, z), Format(to, z), m.Edited)
						}
						for k := range n {
							if want := demand(start+int64(k)*step, int(name[0])); math.Abs(m.Value(k)-want) > 1e-6 {
								t.Fatalf("%s at %s: %v, want %v", name, Format(start+int64(k)*step, z), m.Value(k), want)
							}
						}
					}
					if len(s.Mended) > 0 {
						t.Errorf("mended: %+v", s.Mended)
					}
				})
			}
		}
	}
}

// TestMeterSpringWithoutValues: an export that writes 24 hours on the day of 23, the
// skipped hour blank or zero, is taken; one with values in it runs on standard time.
func TestMeterSpringWithoutValues(t *testing.T) {
	z := zone(t, "America/Denver")
	row := func(v string) string {
		return "time,meter,value [kWh]\n2025-03-09T00:00,A,1.1\n2025-03-09T01:00,A,1.2\n2025-03-09T02:00,A," + v + "\n2025-03-09T03:00,A,1.3\n2025-03-09T04:00,A,1.4\n"
	}
	for _, v := range []string{"", "0", "0.000"} {
		s := mustMeters(t, MeterBlock{Zone: z}, MeterRules{}, "m.csv", row(v))
		if m := mustMeter(t, s, "A"); m.Len() != 4 || m.Edited != 0 || math.Abs(m.After-5) > 1e-6 {
			t.Errorf("%q: %d values, %d edited, %v kWh", v, m.Len(), m.Edited, m.After)
		}
		if len(s.Warnings) != 1 || !strings.Contains(s.Warnings[0].Text, "1 rows without a value stand in the hour that spring skips") {
			t.Errorf("%q: warnings %v", v, s.Warnings)
		}
	}
	_, err := meters(t, MeterBlock{Zone: z}, MeterRules{}, "m.csv", row("1.25"))
	if err == nil || !strings.Contains(err.Error(), "m.csv:4:1: 2025-03-09T02:00:00 does not exist in America/Denver") {
		t.Errorf("got %v", err)
	}
}

// TestMeterFaults: what no rule mends is told with its place and what would do.
func TestMeterFaults(t *testing.T) {
	hourly := func(n int) (s string) {
		for k := range n {
			s += fmt.Sprintf("2025-01-%02dT%02d:00,A,%g\n", 1+k/24, k%24, demand(int64(k)*hour, 1))
		}
		return s
	}
	for _, c := range []struct {
		name  string
		block MeterBlock
		text  string
		want  string
	}{
		{"mixed steps", MeterBlock{}, "time,meter,value [kWh]\n" + strings.ReplaceAll(hourly(48), ",A,", ",B,") + hourly(24) +
			func() (s string) {
				for k := range 40 {
					s += fmt.Sprintf("2025-01-02T%02d:%02d,A,1.%d\n", k/4, 15*(k%4), k)
				}
				return s
			}(), `m.csv:51: meter "A" mixes steps: from here to m.csv:58 its values are 1 h apart, elsewhere 15 min`},
		{"odd step", MeterBlock{}, "time,meter,value [kWh]\n" + hourly(20) + "2025-01-01T20:10,A,1\n", `m.csv:22: meter "A" mixes steps: 70 min after the value at m.csv:21, where its step is 1 h`},
		{"7 minutes", MeterBlock{}, "time,meter,value [kWh]\n2025-01-01T00:00,A,1\n2025-01-01T00:07,A,1\n2025-01-01T00:14,A,1\n", `m.csv:3: meter "A" has values every 7 min; want a step from 1 min to 1 h that divides an hour`},
		{"far date", MeterBlock{}, "time,meter,value [kWh]\n" + hourly(20) + "2099-01-01T20:00,A,1\n", `m.csv:22: meter "A" stands years away`},
		{"single", MeterBlock{}, "time,meter,value [kWh]\n2025-01-01,A,1\n", `m.csv:2: meter "A" has only one value`},
		{"no unit", MeterBlock{}, "time,meter,value\n", `m.csv:1:3: column "value" has no unit; want "value [unit]" with one of [kWh], [Wh]`},
		{"wrong unit", MeterBlock{}, "time,meter,value [degC]\n", `m.csv:1:3: column "value": the unit "degC" is not one of meter data`},
		{"register in kW", MeterBlock{Values: "register"}, "time,meter,value [kW]\n", `m.csv:1:3: column "value": a register counts energy`},
		{"two values", MeterBlock{}, "time,meter,a [kWh],b [kWh]\n", `m.csv:1:4: column "b" stands twice, first as column 3`},
		{"reactive alone", MeterBlock{Layout: "wide"}, "time,A [kWh],B [kvarh]\n", `m.csv:1:3: meter "B" has reactive values alone`},
		{"no time", MeterBlock{}, "meter,value [kWh]\n", "m.csv:1: there is no column `time`; a header reads: time,meter,value [kWh]"},
		{"wide as long", MeterBlock{}, "time,A [kWh]\n", "m.csv:1: there is no column `meter`"},
		{"no number", MeterBlock{}, "time,meter,value [kWh]\n2025-01-01,A,x\n", `m.csv:2:3: meter "A": want a number, got "x"`},
		{"no time of row", MeterBlock{}, "time,meter,value [kWh]\n01/02/2025,A,1\n", `m.csv:2:1: want a time such as`},
		{"short row", MeterBlock{}, "time,meter,value [kWh]\n2025-01-01,A\n", `m.csv:2: the row has 2 cells, the header has 3`},
		{"empty", MeterBlock{}, "", `m.csv: is empty`},
		{"no rows", MeterBlock{}, "time,meter,value [kWh]\n", `there are no rows`},
		{"negative", MeterBlock{}, "time,meter,value [kWh]\n" + hourly(48) +
			"2025-01-03T00:00,A,-1\n2025-01-03T01:00,A,-1\n", `m.csv:2:3: meter "A" is negative in 2 of 50 values, first at 2025-01-03T00:00:00+00:00: set net = true if what flows back is counted so, else delivered and received are swapped`},
		{"wrong words", MeterBlock{Layout: "tall", Values: "sum", Stamped: "middle", Unit: "kV"}, "time", `: stamped = "middle": want start or end`},
		{"damaged gzip", MeterBlock{}, "\x1f\x8b\x08xxxxxxxxxxxxxx", `m.csv: `},
		{"image", MeterBlock{}, "\x89PNG....", `m.csv: is a PNG image, not a table`},
	} {
		t.Run(c.name, func(t *testing.T) {
			_, err := meters(t, c.block, MeterRules{}, "m.csv", c.text)
			var faults tables.Faults
			if !errors.As(err, &faults) || !strings.Contains(err.Error(), c.want) {
				t.Errorf("got  %v\nwant %s", err, c.want)
			}
		})
	}
}

func packed(t testing.TB, text string) string {
	t.Helper()
	var b bytes.Buffer
	w := gzip.NewWriter(&b)
	if _, err := w.Write([]byte(text)); err != nil {
		t.Fatal(err)
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	return b.String()
}
