package profiles

import (
	"bytes"
	"encoding/csv"
	"io"
	"math"
	"strconv"
	"strings"
	"testing"
	"testing/fstest"
	"time"

	"yearflow/sim/tables"
)

// FuzzNumber holds the fast decimal reader and the slow one against strconv.
func FuzzNumber(f *testing.F) {
	for _, s := range []string{"0", "-0", "1.5", " 1.5 ", "123456789012345", "1234567890123456", "0.1", "000000000000000.1", ".5", "5.", "-.5",
		"1e5", "1E-5", "+3", "NaN", "Inf", "0x1p-2", "1_000", "1,5", "--1", "1e999", "1e-999", "9007199254740993", "0.000000000000001", ".", "-", "e5"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, text string) {
		if strings.ContainsAny(text, ",\n") {
			return
		}
		m := marks{mark: '.'}
		slow, problem := m.number([]byte(text), 1)
		trimmed := strings.TrimSpace(text)
		want, err := strconv.ParseFloat(trimmed, 64)
		plain := strings.Trim(trimmed, "0123456789+-.eE") == "" // no NaN, Inf, hexadecimals, underscores
		if (problem == "") != (err == nil && plain) {
			t.Fatalf("%q: problem %q, strconv says %v", text, problem, err)
		}
		if problem == "" && math.Float64bits(slow) != math.Float64bits(want) {
			t.Fatalf("%q: got %v, strconv %v", text, slow, want)
		}
		fast, next, ok := shortDecimal([]byte(text+",7"), 0, ',', '.')
		if ok && (next != len(text) || problem != "" || math.Float64bits(fast) != math.Float64bits(want)) {
			t.Fatalf("%q: fast reader got %v up to %d of %d, strconv %v, %v", text, fast, next, len(text), want, err)
		}
	})
}

// FuzzTime holds parseStamp against the time package.
func FuzzTime(f *testing.F) {
	for _, s := range []string{"2025-01-01", "2025-01-01T00:00", "2025-01-01 00:00:59.123456789Z", "2025-06-30T24:00-07:00", "2024-02-29T00:00+0530", "2025-01-01T00:00:00,5", "2025-01-01t10:00z"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, text string) {
		s, problem := parseStamp([]byte(text))
		std, err := time.Parse(time.RFC3339Nano, text)
		if err == nil && std.Year() >= 1801 && std.Year() < 2200 && !strings.Contains(text, ",") {
			_, offset := std.Zone()
			outside := offset >= 16*3600 || offset <= -16*3600
			fraction, _, _ := strings.Cut(text[19:], "Z")
			if !outside && len(fraction) < 9 && (problem != "" || s.civil-s.offset != std.UnixNano()) {
				t.Fatalf("%q: got %s %q, the time package %s", text, Format(s.civil-s.offset, nil), problem, std)
			}
		}
		if problem != "" || !s.zoned {
			return
		}
		again, err := ParseTime(Format(s.civil-s.offset, time.UTC), nil)
		if err != nil || again != s.civil-s.offset {
			t.Fatalf("%q: came back as %s, %v", text, Format(again, nil), err)
		}
	})
}

// slowRead reads a file by encoding/csv and strconv, in UTC, for files of numbers
// without quotation marks across lines. It returns nil where the file is wrong.
func slowRead(data []byte) (names []string, columns [][]float64) {
	data = bytes.TrimPrefix(data, []byte("\xef\xbb\xbf"))
	r := csv.NewReader(bytes.NewReader(data))
	r.TrimLeadingSpace = true
	r.FieldsPerRecord = -1
	header, err := r.Read()
	if err != nil {
		return nil, nil
	}
	for _, cell := range header[1:] {
		h, problem := readHeading(strings.TrimSpace(cell))
		if problem != "" || h.note || !h.unit.plain() || h.unit.base == "kvar" {
			return nil, nil
		}
		names = append(names, h.name)
	}
	columns = make([][]float64, len(names))
	for {
		row, err := r.Read()
		if err == io.EOF {
			return names, columns
		}
		if err != nil || len(row) != len(header) {
			return nil, nil
		}
		for i, cell := range row[1:] {
			v, err := strconv.ParseFloat(strings.TrimSpace(cell), 64)
			if err != nil {
				return nil, nil
			}
			columns[i] = append(columns[i], v)
		}
	}
}

// FuzzOpen: no file panics, a file that is taken has the values that encoding/csv and
// strconv read in it, and every fault names the file.
func FuzzOpen(f *testing.F) {
	for _, s := range []string{
		"time,a [pu]\n2025-01-01,1\n2025-01-02,2\n",
		"time,a [pu],b [kW]\n2025-01-01T00:00, 1.25,-3\n2025-01-01T01:00,\"2\", 7e2\n",
		"\xef\xbb\xbftime,a [pu]\r\n2025-01-01T00:00,1\r\n2025-01-01T00:15,2\r\n2025-01-01T00:30,.5",
		"time;a [pu]\n2025-01-01;1,5\n2025-01-02;2\n",
		"# note\ntime\ta [pu]\n\n2025-01-01\t1.5\n2025-01-02\t2\n",
		"time,a [kW],a [kvar],note\n2025-01-01,1,2,x\n2025-01-02,2,3,\n",
		"time,a [%]\n2025-11-02T01:00,1\n2025-11-02T01:30,2\n2025-11-02T01:00,3\n",
		"time,a [pu]\n2025-01-01,\"1\"\"\"\n", "time", "\"", "\xff\xfe", "time,\n", "time,[pu]\n", ",,,\n;;\n",
	} {
		f.Add([]byte(s))
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		fsys := fstest.MapFS{"p.csv": {Data: data}}
		set, err := Open(fsys, []Block{{Files: []string{"p.csv"}}})
		if err != nil {
			faults, ok := err.(tables.Faults)
			if !ok || len(faults) == 0 || len(faults) > maxFaults+60 {
				t.Fatalf("got %T with %d faults", err, len(faults))
			}
			for _, one := range faults {
				if one.Pos.File != "p.csv" || one.Text == "" {
					t.Fatalf("a fault without place or text: %v", one)
				}
			}
			return
		}
		for _, name := range set.Names() {
			one, _ := set.Lookup(name)
			for k := range one.Len() {
				if v := one.Value(k); v-v != 0 {
					t.Fatalf("%s has %v at %d", name, v, k)
				}
			}
		}
		if bytes.ContainsAny(data, "#;\t") {
			return // comments and separators that the slow reader is not told of
		}
		names, columns := slowRead(data)
		for i, name := range names {
			one, ok := set.Lookup(name)
			if !ok || one.Len() != len(columns[i]) {
				return // rows that are only commas, or quotation marks across lines
			}
			for k, v := range columns[i] {
				if math.Float64bits(one.Value(k)) != math.Float64bits(v) {
					t.Fatalf("%s, row %d: got %v, encoding/csv %v", name, k, one.Value(k), v)
				}
			}
		}
	})
}

// FuzzSampler: whatever the file's time, the axis and the zone, a step's mean lies
// among the file's values, or the file is refused with a fault.
func FuzzSampler(f *testing.F) {
	zones := []string{"UTC", "America/Denver", "Europe/Zurich", "Australia/Lord_Howe", "Pacific/Apia", "America/Havana", "Asia/Tehran", "Africa/Monrovia", "America/St_Johns"}
	var loaded []*time.Location
	for _, name := range zones {
		loaded = append(loaded, zone(f, name))
	}
	f.Add(uint8(1), uint8(1), true, true, int64(482000), uint16(24), uint8(60), int64(-30), uint16(100), uint16(900))
	f.Add(uint8(4), uint8(1), false, false, int64(367992), uint16(24), uint8(60), int64(-100), uint16(200), uint16(60)) // the day that Samoa skipped
	f.Add(uint8(3), uint8(2), true, false, int64(486000), uint16(336), uint8(30), int64(400), uint16(400), uint16(45))
	f.Add(uint8(2), uint8(3), false, true, int64(482135), uint16(8760), uint8(60), int64(-9000), uint16(500), uint16(2000))
	f.Fuzz(func(t *testing.T, z, again uint8, lines, end bool, startHour int64, n uint16, stepMinutes uint8, axisHours int64, steps, runMinutes uint16) {
		if n < 2 || stepMinutes == 0 || runMinutes == 0 || startHour < -400000 || startHour > 1500000 || axisHours < -100000 || axisHours > 100000 {
			return
		}
		g := grid{
			start: startHour * hour, step: int64(stepMinutes) * minute, n: int(n), lines: lines,
			again: repeat(again % 4), zone: loaded[int(z)%len(loaded)],
		}
		g.stamp = g.start
		if end {
			g.stamp += g.step
		}
		values := make([]float64, n)
		for k := range values {
			values[k] = float64(k%50) / 7
		}
		one := newSeries("x", unit{"pu", 0, 1, 1}, tables.Pos{File: "p.csv"}, g, values)
		a := Axis{Start: g.start + axisHours*hour, Step: int64(runMinutes) * minute}
		a.End = a.Start + int64(steps%2000)*a.Step + minute
		s, err := NewSampler(a, []*Series{one})
		if err != nil {
			return
		}
		var v [1]float64
		for i := range a.Steps() {
			if s.Step(v[:], i); v[0] < -1e-15 || v[0] > 49.0/7+1e-15 || v[0] != v[0] {
				t.Fatalf("step %d: %v", i, v[0])
			}
		}
	})
}
