package profiles

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"
	"testing/fstest"
	"time"
)

// truth says by brute force what a file is worth, in units of time so small that
// nothing changes within one but straight lines.
type truth struct {
	values      []float64
	start, step int64
	unit        int64
	block       Block
	instants    map[int64][]int64 // of a reading of the clock, in the file
}

const layout = "2006-01-02T15:04:05"

func newTruth(values []float64, first, step, unit int64, b Block) *truth {
	u := &truth{values: values, start: first, step: step, unit: unit, block: b, instants: make(map[int64][]int64)}
	if b.Stamped == "end" {
		u.start -= step
	}
	for t := u.start; t < u.end(); t += unit {
		r := u.clock(t).Unix()
		u.instants[r] = append(u.instants[r], t)
	}
	return u
}

func (u *truth) end() int64 { return u.start + int64(len(u.values))*u.step }

// source returns the file's instant that is read at t.
func (u *truth) source(t int64) int64 {
	if t >= u.start && t < u.end() {
		return t
	}
	again := u.clock(t - hour).Equal(u.clock(t))
	first, last := u.clock(u.start), u.clock(u.end())
	image := u.clock(t)
	apart := int(image.Sub(first).Hours() / 24)
	for try := -2; ; try++ {
		k := try - apart
		shifted := image.AddDate(0, 0, k)
		switch u.block.Repeat {
		case "week":
			k = try - apart/7
			shifted = image.AddDate(0, 0, 7*k)
		case "year":
			k = try - apart/365
			y, m, d := image.Date()
			if m == time.February && d == 29 && !leap(y+k) {
				d = 28
			}
			shifted = time.Date(y+k, m, d, image.Hour(), image.Minute(), image.Second(), 0, time.UTC)
		}
		// More than one shift may land in a file of several units: only whole lengths of
		// the file count.
		if shifted.Before(first) || !shifted.Before(last) || !u.whole(image, shifted, first, last) {
			continue
		}
		image = shifted
		break
	}
	for _, try := range []time.Duration{0, -time.Hour, time.Hour} {
		if found := u.instants[image.Add(try).Unix()]; len(found) > 0 {
			if again && try == 0 {
				return found[len(found)-1]
			}
			return found[0]
		}
	}
	panic("no instant")
}

// whole reports whether two readings are whole lengths of the file apart.
func (u *truth) whole(a, b, first, last time.Time) bool {
	if u.block.Repeat == "year" {
		return (a.Year()-b.Year())%(last.Year()-first.Year()) == 0
	}
	return a.Sub(b)%last.Sub(first) == 0
}

func (u *truth) clock(t int64) time.Time {
	l := at(t, u.block.Zone)
	y, m, d := l.Date()
	return time.Date(y, m, d, l.Hour(), l.Minute(), l.Second(), 0, time.UTC)
}

// value is the mean over the unit that begins at t.
func (u *truth) value(t int64) float64 {
	s := u.source(t)
	if !u.block.Interpolate {
		return u.values[(s-u.start)/u.step]
	}
	stamp := u.start
	if u.block.Stamped == "end" {
		stamp += u.step
	}
	x := (float64(s-stamp) + float64(u.unit)/2) / float64(u.step)
	last := len(u.values) - 1
	switch k := int(math.Floor(x)); {
	case x <= 0:
		return u.values[0]
	case k >= last:
		return u.values[last]
	default:
		return u.values[k]*(1-(x-float64(k))) + u.values[k+1]*(x-float64(k))
	}
}

func (u *truth) mean(from, to int64) float64 {
	sum := 0.0
	for t := from; t < to; t += u.unit {
		sum += u.value(t)
	}
	return sum / float64((to-from)/u.unit)
}

// write writes the file of a truth.
func (u *truth) write(first int64, offsets bool) []byte {
	var b strings.Builder
	b.WriteString("time,p [pu],q [pu]\n")
	for k, v := range u.values {
		t := at(first+int64(k)*u.step, u.block.Zone)
		text := t.Format(layout)
		if offsets {
			text = t.Format(time.RFC3339)
		}
		fmt.Fprintf(&b, "%s,%v,%v\n", text, v, -v)
	}
	return []byte(b.String())
}

// open returns p and q of a file.
func open(t testing.TB, data []byte, b Block) []*Series {
	t.Helper()
	b.Files = []string{"p.csv"}
	set, err := Open(fstest.MapFS{"p.csv": {Data: data}}, []Block{b})
	if err != nil {
		t.Fatal(err)
	}
	var list []*Series
	for _, name := range set.Names() {
		one, _ := set.Lookup(name)
		list = append(list, one)
	}
	return list
}

// check compares a sampler with the truth on every step of an axis, asked in a random
// order. The tolerance is rounding of the truth's own sum of up to 10⁵ terms.
func check(t *testing.T, rnd *rand.Rand, u *truth, list []*Series, a Axis) {
	t.Helper()
	s, err := NewSampler(a, list)
	if err != nil {
		t.Fatal(err)
	}
	highest := math.Inf(-1)
	var got [2]float64
	for _, i := range rnd.Perm(a.Steps()) {
		from, to := a.Bounds(i)
		s.Step(got[:], i)
		want := u.mean(from, to)
		if math.Abs(got[0]-want) > 1e-11 || got[1] != -got[0] {
			t.Fatalf("%+v, file %s to %s by %v, step %s to %s: got %v, want %v", u.block, Format(u.start, u.block.Zone), Format(u.end(), u.block.Zone),
				time.Duration(u.step), Format(from, u.block.Zone), Format(to, u.block.Zone), got, want)
		}
		highest = max(highest, got[0])
	}
	if s.Max(0) != highest {
		t.Fatalf("Max %v, highest step %v", s.Max(0), highest)
	}
}

func randomValues(rnd *rand.Rand, n int) []float64 {
	v := make([]float64, n)
	for i := range v {
		v[i] = math.Round(rnd.Float64()*2e4-1e4) / 1e4
	}
	return v
}

func pick[T any](rnd *rand.Rand, list ...T) T { return list[rnd.IntN(len(list))] }
