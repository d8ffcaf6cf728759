package vector

import "math"

//go:generate go run -tags avo ./generate -part watch -out watch_amd64.s -stubs watch_stubs_amd64.go

// What follows looks at solved instants and points at what is worth a closer look: each
// list has a row of bounds for every quantity and a flag, the lanes of the mask in which
// it lies beyond them or is no number. What is beyond is left to the caller, so that
// the bounds may be drawn as tight or as wide as suits. Sums are those of the lanes of
// the mask, the others enter nothing.

// Lengths is a list of magnitudes: of values, or of differences of two.
type Lengths struct {
	index []int32
	wide  int
	Rows  []LengthRow
	Flags []uint8
	Left  []uint8 // flags of the other range
}

// LengthRow has what a magnitude is divided by, the bounds, a range besides, and the
// sum over all lanes and calls.
type LengthRow struct{ Base, Low, High, From, To, Sum float64 }

// Row appends a magnitude, of the value from where to is negative.
func (l *Lengths) Row(from, to int, base float64) {
	l.index = append(l.index, int32(from*Stride), offset(to))
	l.wide = max(l.wide, from+1, to+1)
	l.Rows = append(l.Rows, LengthRow{Base: base})
	l.Flags, l.Left = append(l.Flags, 0), append(l.Left, 0)
}

func offset(value int) int32 {
	if value < 0 {
		return -1
	}
	return int32(value * Stride)
}

// Watch sets out to the magnitudes, Lanes numbers a row, and least and most to the
// smallest and the largest of each lane, whatever the mask. It returns all flags in one,
// beyond those of the bounds and left those of the range. The operations are
// √(re² + im²)/Base, each rounded.
func (l *Lengths) Watch(out, v []float64, mask uint8, least, most *[Lanes]float64) (beyond, left uint8) {
	n := len(l.Rows)
	if n == 0 {
		return 0, 0
	}
	if len(v) < l.wide*Width || len(out) < n*Lanes || len(l.Flags) != n || len(l.Left) != n || len(l.index) != 2*n {
		panic("vector: magnitudes reach beyond the values")
	}
	found := lengths(&out[0], &v[0], &l.index[0], &l.Rows[0].Base, &l.Flags[0], &l.Left[0], &masks[mask][0], &least[0], &most[0], n)
	return uint8(found), uint8(found >> 8)
}

// Dots is a list of real powers, each Σ Re(V·conj(I)) over pairs of a voltage and a
// current.
type Dots struct {
	index        []int32
	wideV, wideI int
	Rows         []DotRow
	Flags        []uint8
	// Limit has, by pair, the largest square of the current, re² + im², that is within its
	// bounds; Over are the flags of rows with a current beyond.
	Limit []float64
	Over  []uint8
}

// DotRow has the upper bound of a power and its sum over all lanes and calls.
type DotRow struct{ High, Sum float64 }

// Row appends a power without bounds.
func (d *Dots) Row(pairs ...[2]int) {
	d.index = appendPairs(d.index, pairs, &d.wideV, &d.wideI)
	d.Rows = append(d.Rows, DotRow{High: math.Inf(1)})
	d.Flags, d.Over = append(d.Flags, 0), append(d.Over, 0)
	for range pairs {
		d.Limit = append(d.Limit, math.Inf(1))
	}
}

func appendPairs(index []int32, pairs [][2]int, wideV, wideI *int) []int32 {
	index = append(index, int32(len(pairs)))
	for _, p := range pairs {
		index = append(index, int32(p[0]*Stride), int32(p[1]*Stride))
		*wideV, *wideI = max(*wideV, p[0]+1), max(*wideI, p[1]+1)
	}
	return index
}

// Watch sets out to the powers, Lanes numbers a row, and total to their sums by lane,
// whatever the mask. It returns all flags in one, beyond those of powers and over those
// of currents. Every operation is rounded: Σ in order of re·re + im·im.
func (d *Dots) Watch(out, v, i []float64, mask uint8, total *[Lanes]float64) (beyond, over uint8) {
	*total = [Lanes]float64{}
	n := len(d.Rows)
	if n == 0 {
		return 0, 0
	}
	if len(v) < d.wideV*Width || len(i) < d.wideI*Width || len(out) < n*Lanes || len(d.Flags) != n || len(d.Over) != n || len(d.index) != n+2*len(d.Limit) {
		panic("vector: powers reach beyond the values")
	}
	found := dots(&out[0], &v[0], first(i), &d.index[0], &d.Rows[0].High, first(d.Limit), &d.Flags[0], &d.Over[0], &masks[mask][0], &total[0], n)
	return uint8(found), uint8(found >> 8)
}

// Squares is a list of squares of magnitudes, re² + im², each the larger one of two
// values. Every operation is rounded.
type Squares struct {
	index []int32
	wide  int
	High  []float64
	Flags []uint8
}

// Row appends a square.
func (s *Squares) Row(a, b int) {
	s.index = append(s.index, int32(a*Stride), int32(b*Stride))
	s.wide = max(s.wide, a+1, b+1)
	s.High = append(s.High, 0)
	s.Flags = append(s.Flags, 0)
}

// Watch returns all flags in one.
func (s *Squares) Watch(x []float64, mask uint8) uint8 {
	n := len(s.High)
	if n == 0 {
		return 0
	}
	if len(x) < s.wide*Width || len(s.Flags) != n || len(s.index) != 2*n {
		panic("vector: squares reach beyond the values")
	}
	return uint8(squares(&x[0], &s.index[0], &s.High[0], &s.Flags[0], &masks[mask][0], n))
}

// Banks is a list of squares of apparent powers, |Σ V·conj(I)|² over pairs of a voltage
// and a current. Every operation is rounded.
type Banks struct {
	index        []int32
	wideV, wideI int
	High         []float64
	Flags        []uint8
}

// Row appends a square.
func (b *Banks) Row(pairs ...[2]int) {
	b.index = appendPairs(b.index, pairs, &b.wideV, &b.wideI)
	b.High = append(b.High, 0)
	b.Flags = append(b.Flags, 0)
}

// Watch returns all flags in one.
func (b *Banks) Watch(v, i []float64, mask uint8) uint8 {
	n := len(b.High)
	if n == 0 {
		return 0
	}
	if len(v) < b.wideV*Width || len(i) < b.wideI*Width || len(b.Flags) != n {
		panic("vector: powers reach beyond the values")
	}
	return uint8(banks(&v[0], first(i), &b.index[0], &b.High[0], &b.Flags[0], &masks[mask][0], n))
}

// Triples is a list of three voltages each, a, b and c in this order of phases.
type Triples struct {
	index []int32
	wide  int
	n     int
}

// Row appends a triple.
func (t *Triples) Row(a, b, c int) {
	t.index = append(t.index, int32(a*Stride), int32(b*Stride), int32(c*Stride))
	t.wide = max(t.wide, a+1, b+1, c+1)
	t.n++
}

// Watch sets out to values, one a row. Real parts: of the squares of the three
// differences, the largest distance from their mean, over the mean. Imaginary parts: the
// square of the negative over that of the positive sequence. far and ratio are the
// largest of each lane, −1 where there is no number.
func (t *Triples) Watch(out, v []float64, far, ratio *[Lanes]float64) {
	for l := range Lanes {
		far[l], ratio[l] = -1, -1
	}
	if t.n == 0 {
		return
	}
	if len(v) < t.wide*Width || len(out) < t.n*Width || len(t.index) != 3*t.n {
		panic("vector: triples reach beyond the values")
	}
	triples(&out[0], &v[0], &t.index[0], &tripleConstants[0], &far[0], &ratio[0], t.n)
}

// A third, a half, and the sine of 120°.
var tripleConstants = [3]float64{1. / 3, 0.5, 0.86602540378443864676372317075293618}

// Bins sets out to the whole part of x/width, at most limit, Lanes numbers a row.
func Bins(out []int32, x []float64, width, limit float64) {
	n := len(x) / Lanes
	if n == 0 {
		return
	}
	if len(out) < n*Lanes {
		panic("vector: fewer bins than numbers")
	}
	scale := [2]float64{width, limit}
	bins(&out[0], &x[0], &scale[0], n)
}
