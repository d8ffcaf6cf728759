package profiles

import (
	"bytes"
	"compress/zlib"
	"encoding/binary"
	"flag"
	"fmt"
	"io"
	"math"
	"os"
	"strings"
	"testing"
)

// forecastData is the data file of Debian's package r-cran-forecast (GPL-3), which is
// read where it is installed and is no part of this repository.
var forecastData = flag.String("forecast-data", "/usr/lib/R/site-library/forecast/data/Rdata.rdb", "the data of Debian's r-cran-forecast")

// taylor returns the half-hourly demand of England and Wales, MW, from Monday 5 June to
// Sunday 27 August 2000: the series `taylor` of R. J. Hyndman and Y. Khandakar's
// package forecast, from J. W. Taylor, Short-term electricity demand forecasting using
// double seasonal exponential smoothing, Journal of the Operational Research Society 54
// (2003) 799-805. The file is a row of objects, each a length and a zlib stream of R's
// serialization; the series is its vector of 4,032 integers.
func taylor(t *testing.T) []float64 {
	t.Helper()
	data, err := os.ReadFile(*forecastData)
	if err != nil {
		t.Skipf("the package r-cran-forecast is not installed: %v", err)
	}
	head := []byte{0, 0, 3, 13, 0, 0, 0x0f, 0xc0}
	for r := bytes.NewReader(data); r.Len() > 4; {
		if _, err := r.Seek(4, io.SeekCurrent); err != nil {
			t.Fatal(err)
		}
		z, err := zlib.NewReader(r)
		if err != nil {
			t.Fatal(err)
		}
		object, err := io.ReadAll(z)
		if err != nil {
			t.Fatal(err)
		}
		if i := bytes.Index(object, head); i >= 0 {
			values := make([]float64, 4032)
			for k := range values {
				values[k] = float64(binary.BigEndian.Uint32(object[i+len(head)+4*k:]))
			}
			return values
		}
	}
	t.Fatal("the data hold no series of 4,032 integers")
	return nil
}

// TestMeterMeasuredDemand runs measured demand through the reader: good data come
// through unchanged as energies, power and a register, and where a piece is taken away
// the estimate is near to what was measured.
func TestMeterMeasuredDemand(t *testing.T) {
	values := taylor(t)
	london := zone(t, "Europe/London")
	start, err := ParseTime("2000-06-05", london)
	if err != nil {
		t.Fatal(err)
	}
	const step = 30 * minute
	file := func(header string, n int, cell func(k int) string) string {
		return longFile(header, start, step, n, london, []string{"national"}, func(_ string, k int) string { return cell(k) })
	}
	sums := make([]float64, len(values)+1)
	for k, v := range values {
		sums[k+1] = sums[k] + v/2
	}
	for _, c := range []struct {
		name  string
		block MeterBlock
		text  string
	}{
		{"MW", MeterBlock{Zone: london}, file("time,meter,value [MW]", len(values), func(k int) string { return fmt.Sprint(values[k]) })},
		{"MWh", MeterBlock{Zone: london}, file("time,meter,value [MWh]", len(values), func(k int) string { return fmt.Sprint(values[k] / 2) })},
		{"register", MeterBlock{Zone: london, Values: "register"}, file("time,meter,value [MWh]", len(sums), func(k int) string { return fmt.Sprintf("%.1f", sums[k]) })},
	} {
		s := mustMeters(t, c.block, MeterRules{}, "m.csv", c.text)
		m := mustMeter(t, s, "national")
		if m.Len() != len(values) || m.Edited != 0 || len(s.Mended) > 0 || len(s.Warnings) > 0 {
			t.Errorf("%s: %d values, mended %+v, warnings %v", c.name, m.Len(), s.Mended, s.Warnings)
		}
		for k, v := range values {
			if m.Value(k) != 1000*v {
				t.Fatalf("%s, half-hour %d: %v kW, want %v MW", c.name, k, m.Value(k), v)
			}
		}
	}
	// Two hours on a Tuesday morning by a line, a Wednesday and a Saturday by like days.
	for _, c := range []struct {
		name    string
		from, n int
		rule    string
		most    float64 // mean error, share of the mean
	}{
		{"two hours", 8*48 + 20, 4, "gap, straight line", 0.02},
		{"a Wednesday", 30 * 48, 48, "gap, like days", 0.05},
		{"a Saturday", 40 * 48, 48, "gap, like days", 0.05},
	} {
		text := file("time,meter,value [MW]", len(values), func(k int) string {
			if k >= c.from && k < c.from+c.n {
				return ""
			}
			return fmt.Sprint(values[k])
		})
		s := mustMeters(t, MeterBlock{Zone: london}, MeterRules{}, "m.csv", text)
		m := mustMeter(t, s, "national")
		if len(s.Mended) != 1 || s.Mended[0].Rule != c.rule || s.Mended[0].Count != c.n {
			t.Errorf("%s: mended %+v", c.name, s.Mended)
		}
		off, mean := 0.0, 0.0
		for k := c.from; k < c.from+c.n; k++ {
			off += math.Abs(m.Value(k)/1000 - values[k])
			mean += values[k]
		}
		t.Logf("%s: mean error %.1f %%", c.name, 100*off/mean)
		if off > c.most*mean {
			t.Errorf("%s: the estimate is off by %.1f %%", c.name, 100*off/mean)
		}
	}
	text := file("time,meter,value [MW]", len(values), func(k int) string {
		if k == 2000 {
			return "655350"
		}
		return strings.TrimSuffix(fmt.Sprintf("%.1f", values[k]), ".0")
	})
	s := mustMeters(t, MeterBlock{Zone: london}, MeterRules{}, "m.csv", text)
	if len(s.Mended) != 1 || s.Mended[0].Rule != "spike, straight line" || math.Abs(mustMeter(t, s, "national").Value(2000)/1000/values[2000]-1) > 0.02 {
		t.Errorf("mended %+v", s.Mended)
	}
}
