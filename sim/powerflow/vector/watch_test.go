//go:build amd64 && !purego

package vector

import (
	"math"
	"math/rand/v2"
	"testing"
)

// bytes turns flags into numbers that can be compared.
func bytes(f []uint8) (x []float64) {
	for _, b := range f {
		x = append(x, float64(b))
	}
	return x
}

// outside makes rows of numbers between fences.
func outside(rows int) (whole, values []float64) {
	const f = 2 * Lanes
	whole = make([]float64, rows*Lanes+2*f)
	for i := range whole {
		whole[i] = math.NaN()
	}
	return whole, whole[f : f+rows*Lanes : f+rows*Lanes]
}

// watchers are the kernels that look at solved instants, on random rows; of the lanes
// that are not in the mask some hold what is no number.
func watchers(random func() *rand.Rand, wild bool) (out []twin) {
	const n = 23
	lanes := func(rng *rand.Rand) ([]float64, []float64, uint8) {
		_, v := fence(n, rng)
		_, i := fence(n, rng)
		mask := uint8(rng.IntN(256))
		for k := range v {
			if mask>>(k%Lanes)&1 == 0 && rng.IntN(3) == 0 {
				v[k], i[k] = math.NaN(), math.Inf(1)
			}
		}
		if wild {
			odd(v, rng)
			odd(i, rng)
		}
		return v, i, mask
	}
	pairs := func(rng *rand.Rand) (p [][2]int) {
		for range rng.IntN(5) {
			p = append(p, [2]int{rng.IntN(n), rng.IntN(n)})
		}
		return p
	}
	out = append(out, twin{"lengths", func(t *testing.T, kind int) [][]float64 {
		rng := random()
		v, _, mask := lanes(rng)
		whole, x := outside(n)
		var l Lengths
		for k := range n {
			l.Row(rng.IntN(n), rng.IntN(n+1)-1, 1+rng.Float64())
			r := &l.Rows[k]
			r.Low, r.High, r.From, r.To, r.Sum = rng.Float64(), 3*rng.Float64(), rng.Float64(), 3*rng.Float64(), rng.Float64()
		}
		var least, most [Lanes]float64
		f := []func(out, v *float64, index *int32, rows *float64, flags, left *uint8, mask *uint64, least, most *float64, n int) uint64{plainLengths, lengths256, lengths512}[kind]
		found := f(&x[0], &v[0], &l.index[0], &l.Rows[0].Base, &l.Flags[0], &l.Left[0], &masks[mask][0], &least[0], &most[0], n)
		sums := []float64{float64(found)}
		for _, r := range l.Rows {
			sums = append(sums, r.Base, r.Low, r.High, r.From, r.To, r.Sum)
		}
		return [][]float64{whole, least[:], most[:], bytes(l.Flags), bytes(l.Left), sums}
	}})
	out = append(out, twin{"dots", func(t *testing.T, kind int) [][]float64 {
		rng := random()
		v, i, mask := lanes(rng)
		whole, x := outside(n)
		var d Dots
		for k := range n {
			d.Row(pairs(rng)...)
			d.Rows[k] = DotRow{rng.NormFloat64(), rng.Float64()}
		}
		for k := range d.Limit {
			d.Limit[k] = 4 * rng.ExpFloat64()
		}
		var total [Lanes]float64
		f := []func(out, v, i *float64, index *int32, rows, limits *float64, flags, over *uint8, mask *uint64, total *float64, n int) uint64{plainDots, dots256, dots512}[kind]
		found := f(&x[0], &v[0], &i[0], &d.index[0], &d.Rows[0].High, &d.Limit[0], &d.Flags[0], &d.Over[0], &masks[mask][0], &total[0], n)
		sums := []float64{float64(found)}
		for _, r := range d.Rows {
			sums = append(sums, r.High, r.Sum)
		}
		return [][]float64{whole, total[:], bytes(d.Flags), bytes(d.Over), sums}
	}})
	out = append(out, twin{"squares", func(t *testing.T, kind int) [][]float64 {
		rng := random()
		v, _, mask := lanes(rng)
		var s Squares
		for k := range n {
			s.Row(rng.IntN(n), rng.IntN(n))
			s.High[k] = rng.ExpFloat64()
		}
		f := []func(x *float64, index *int32, high *float64, flags *uint8, mask *uint64, n int) uint64{plainSquares, squares256, squares512}[kind]
		found := f(&v[0], &s.index[0], &s.High[0], &s.Flags[0], &masks[mask][0], n)
		return [][]float64{bytes(s.Flags), {float64(found)}}
	}})
	out = append(out, twin{"banks", func(t *testing.T, kind int) [][]float64 {
		rng := random()
		v, i, mask := lanes(rng)
		var b Banks
		for k := range n {
			b.Row(pairs(rng)...)
			b.High[k] = rng.ExpFloat64()
		}
		f := []func(v, i *float64, index *int32, high *float64, flags *uint8, mask *uint64, n int) uint64{plainBanks, banks256, banks512}[kind]
		found := f(&v[0], &i[0], &b.index[0], &b.High[0], &b.Flags[0], &masks[mask][0], n)
		return [][]float64{bytes(b.Flags), {float64(found)}}
	}})
	out = append(out, twin{"triples", func(t *testing.T, kind int) [][]float64 {
		rng := random()
		v, _, _ := lanes(rng)
		whole, x := fence(n, rng)
		var r Triples
		for range n {
			r.Row(rng.IntN(n), rng.IntN(n), rng.IntN(n))
		}
		var far, ratio [Lanes]float64
		f := []func(out, v *float64, index *int32, constants, far, ratio *float64, n int){plainTriples, triples256, triples512}[kind]
		f(&x[0], &v[0], &r.index[0], &tripleConstants[0], &far[0], &ratio[0], n)
		return [][]float64{whole, far[:], ratio[:]}
	}})
	return append(out, twin{"bins", func(t *testing.T, kind int) [][]float64 {
		rng := random()
		v, _, _ := lanes(rng)
		var b [2*n*Lanes + 2]int32
		f := []func(out *int32, x, scale *float64, n int){plainBins, bins256, bins512}[kind]
		scale := [2]float64{1e-4, 40000}
		f(&b[1], &v[0], &scale[0], 2*n)
		var x []float64
		for _, k := range b {
			x = append(x, float64(k))
		}
		return [][]float64{x}
	}})
}

func TestWatchingAssemblyEqualsPlainGo(t *testing.T) {
	for seed := range uint64(200) {
		rng := func() *rand.Rand { return rand.New(rand.NewPCG(seed, 8)) }
		for _, w := range watchers(rng, seed%3 == 2) {
			want := w.run(t, 0)
			for _, kind := range kinds()[1:] {
				for i, got := range w.run(t, kind) {
					if at, ok := same(want[i], got); !ok {
						t.Fatalf("seed %d, %s, kernel %d, array %d, element %d: %g, plain Go %g", seed, w.name, kind, i, at, got[at], want[i][at])
					}
				}
			}
		}
	}
}

// What watching finds is what a loop over the lanes of the mask finds.
func TestWatchingFindsWhatIsBeyond(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 3))
	const n = 40
	v, x, mask := Make(n), make([]float64, n*Lanes), uint8(0b1011_0110)
	for i := range v {
		v[i] = rng.NormFloat64()
		if mask>>(i%Lanes)&1 == 0 {
			v[i] = math.NaN() // enters nothing
		}
	}
	var l Lengths
	for k := range n {
		l.Row(k, (k+1)%n, 2)
		l.Rows[k].Low, l.Rows[k].High, l.Rows[k].From, l.Rows[k].To = 0.4, 1.1, 0, 1.1
	}
	var least, most [Lanes]float64
	found, left := l.Watch(x, v, mask, &least, &most)
	var all, allHigh uint8
	for k := range n {
		want, high, sum := uint8(0), uint8(0), 0.0
		for lane := range Lanes {
			d := At(v, k, lane) - At(v, (k+1)%n, lane)
			pu := math.Hypot(real(d), imag(d)) / 2
			if mask>>lane&1 == 0 {
				continue
			}
			if math.Abs(pu-x[k*Lanes+lane]) > 1e-15*pu {
				t.Fatalf("row %d, lane %d: %g, want %g", k, lane, x[k*Lanes+lane], pu)
			}
			sum += pu
			if pu < 0.4 || pu > 1.1 {
				want |= 1 << lane
			}
			if pu > 1.1 {
				high |= 1 << lane
			}
		}
		all |= want
		allHigh |= high
		if l.Flags[k] != want || l.Left[k] != high || !(math.Abs(l.Rows[k].Sum-sum) <= 1e-14*sum) {
			t.Errorf("row %d: flags %08b and sum %g, want %08b and %g", k, l.Flags[k], l.Rows[k].Sum, want, sum)
		}
	}
	if found != all || left != allHigh || all == 0 || allHigh == 0 {
		t.Errorf("flags %08b and %08b, want %08b and %08b", found, left, all, allHigh)
	}
}
