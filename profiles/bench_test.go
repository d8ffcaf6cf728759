package profiles

import (
	"fmt"
	"strconv"
	"strings"
	"testing"
	"testing/fstest"
)

// manyColumns writes rows of width columns of numbers with four digits, a step apart.
func manyColumns(width, rows int, step int64) []byte {
	var b strings.Builder
	b.WriteString("time")
	for k := range width {
		fmt.Fprintf(&b, ",p%d [pu]", k)
	}
	line := make([]byte, 0, 1024)
	x := uint32(1)
	for i := range rows {
		line = append(AppendTime(append(line[:0], '\n'), 1735689600*second+int64(i)*step, nil)[:17], ""...)
		for range width {
			x = x*1664525 + 1013904223 // a linear congruential generator
			line = append(line, ',')
			line = strconv.AppendFloat(line, float64(x>>18)/1e4, 'f', -1, 64)
		}
		b.Write(line)
	}
	b.WriteByte('\n')
	return []byte(b.String())
}

// BenchmarkOpen reads a year at one minute, 30 columns.
func BenchmarkOpen(b *testing.B) {
	fsys := fstest.MapFS{"p.csv": {Data: manyColumns(30, 525600, minute)}}
	b.SetBytes(int64(len(fsys["p.csv"].Data)))
	b.ReportAllocs()
	for b.Loop() {
		if _, err := Open(fsys, []Block{{Files: []string{"p.csv"}}}); err != nil {
			b.Fatal(err)
		}
	}
}

// BenchmarkStep samples 30 series: held within one value, the mean of 60 values,
// straight lines, and a week that is repeated.
func BenchmarkStep(b *testing.B) {
	for _, c := range []struct {
		name              string
		block             Block
		rows              int
		fileStep, runStep int64
	}{
		{"held", Block{}, 8760, hour, minute},
		{"mean of 60", Block{}, 525600, minute, hour},
		{"mean of 1440", Block{}, 525600, minute, day},
		{"lines", Block{Interpolate: true}, 8760, hour, minute},
		{"week", Block{Repeat: "week"}, 168, hour, hour},
	} {
		b.Run(c.name, func(b *testing.B) {
			c.block.Files = []string{"p.csv"}
			set, err := Open(fstest.MapFS{"p.csv": {Data: manyColumns(30, c.rows, c.fileStep)}}, []Block{c.block})
			if err != nil {
				b.Fatal(err)
			}
			var list []*Series
			for _, name := range set.Names() {
				one, _ := set.Lookup(name)
				list = append(list, one)
			}
			start := int64(1735689600) * second
			s, err := NewSampler(Axis{Start: start, End: start + 365*day, Step: c.runStep}, list)
			if err != nil {
				b.Fatal(err)
			}
			dst := make([]float64, len(list))
			n, i := s.Axis().Steps(), 0
			b.ReportAllocs()
			for b.Loop() {
				s.Step(dst, i%n)
				i++
			}
		})
	}
}
