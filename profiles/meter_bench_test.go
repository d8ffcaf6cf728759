package profiles

import (
	"bufio"
	"flag"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
)

// benchMeters is how many meters the benchmarks read; 2000 take a file of 2.3 GB and
// 4 GB of disk.
var benchMeters = flag.Int("meters", 200, "meters of the benchmarks of interval data")

// writeMeterYear writes a year of 15-minute data with 0.5 % missing rows, 0.05 %
// repeated ones, and in each tenth meter a spike, a run of zeros and a long gap.
func writeMeterYear(tb testing.TB, path string, meters int, wide bool) (rows int) {
	tb.Helper()
	f, err := os.Create(path)
	if err != nil {
		tb.Fatal(err)
	}
	w := bufio.NewWriterSize(f, 1<<20)
	names := make([]string, meters)
	for i := range names {
		names[i] = fmt.Sprintf("M%05d", i)
	}
	w.WriteString("time,meter,value [kWh]")
	if wide {
		w.Reset(f)
		w.WriteString("time," + strings.Join(names, " [kWh],") + " [kWh]")
	}
	w.WriteByte('\n')
	start := int64(1735689600) * second
	line := make([]byte, 0, 64)
	for k := range 35040 {
		tod := float64(k%96) / 96
		level := 0.1 + 0.08*math.Pow(math.Sin(math.Pi*(tod-0.2)), 2) + 0.04*math.Cos(2*math.Pi*float64(k)/35040)
		stamp := at(start+int64(k)*15*minute, nil).Format("2006-01-02T15:04")
		if wide {
			w.WriteString(stamp)
		}
		for i, name := range names {
			u := chance(uint64(k)*1_000_003 + uint64(i))
			v := level * (0.7 + 0.8*u)
			odd := i%10 == 0
			absent := u < 0.005 || odd && k > 9000 && k < 9700
			switch {
			case odd && k == 5000+i:
				v = 500
			case odd && k > 15000 && k < 15020:
				v = 0
			}
			line = line[:0]
			switch {
			case wide && absent:
				line = append(line, ',')
			case wide:
				line = strconv.AppendFloat(append(line, ','), v, 'f', 3, 64)
				rows++
			case !absent:
				for range 1 + int(math.Floor(u+0.0005)) {
					line = append(append(append(append(line, stamp...), ','), name...), ',')
					line = append(strconv.AppendFloat(line, v, 'f', 3, 64), '\n')
					rows++
				}
			}
			w.Write(line)
		}
		if wide {
			w.WriteByte('\n')
		}
	}
	if err := w.Flush(); err != nil {
		tb.Fatal(err)
	}
	if err := f.Close(); err != nil {
		tb.Fatal(err)
	}
	return rows
}

// BenchmarkMeters reads, checks and mends -meters meters of 15-minute data for a year,
// and opens them a second time from the cache.
func BenchmarkMeters(b *testing.B) {
	for _, layout := range []string{"long", "wide"} {
		b.Run(layout, func(b *testing.B) { benchmarkMeters(b, layout) })
	}
}

func benchmarkMeters(b *testing.B, layout string) {
	dir := b.TempDir()
	rows := writeMeterYear(b, filepath.Join(dir, "m.csv"), *benchMeters, layout == "wide")
	blocks := []MeterBlock{{Files: []string{"m.csv"}, Layout: layout}}
	open := func(b *testing.B, cache string, cached bool) {
		b.ReportAllocs()
		for b.Loop() {
			s, err := OpenMeters(os.DirFS(dir), blocks, cache, MeterRules{})
			if err != nil || s.Cached != cached || len(s.meters) != *benchMeters {
				b.Fatal(err, s)
			}
		}
		b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/float64(rows), "ns/value")
	}
	b.Run("first", func(b *testing.B) { open(b, "", false) })
	cache := filepath.Join(dir, "cache")
	if _, err := OpenMeters(os.DirFS(dir), blocks, cache, MeterRules{}); err != nil {
		b.Fatal(err)
	}
	b.Run("again", func(b *testing.B) { open(b, cache, true) })
}
