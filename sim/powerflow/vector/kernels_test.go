//go:build amd64 && !purego

package vector

import (
	"math"
	"math/rand/v2"
	"testing"
)

// twin is one kernel in all its forms; each must give the same bits.
type twin struct {
	name string
	run  func(t *testing.T, kind int) [][]float64
}

// fence surrounds values with numbers that are none, so that a kernel which reads or
// writes beyond them shows.
func fence(n int, rng *rand.Rand) (whole, values []float64) {
	const f = 4 * Width
	whole = make([]float64, n*Width+2*f)
	for i := range whole {
		whole[i] = math.NaN()
	}
	values = whole[f : f+n*Width : f+n*Width]
	for i := range values {
		values[i] = rng.NormFloat64() * math.Exp(rng.NormFloat64())
	}
	return whole, values
}

// odd puts numbers in that are none, or not finite, or zero.
func odd(x []float64, rng *rand.Rand) {
	for range len(x) / 40 {
		x[rng.IntN(len(x))] = []float64{math.NaN(), math.Inf(1), math.Inf(-1), 0, math.Copysign(0, -1), 1e300, 5e-324}[rng.IntN(7)]
	}
}

func same(a, b []float64) (int, bool) {
	for i := range a {
		x, y := math.Float64bits(a[i]), math.Float64bits(b[i])
		if x != y && !(math.IsNaN(a[i]) && math.IsNaN(b[i])) {
			return i, false
		}
	}
	return 0, true
}

func kinds() []int {
	out := []int{0}
	for k := 1; k <= kernel; k++ {
		out = append(out, k)
	}
	return out
}

func TestAssemblyEqualsPlainGo(t *testing.T) {
	if kernel == 0 {
		t.Skip("this processor has neither AVX2 with FMA nor AVX-512")
	}
	for seed := range uint64(60) {
		rng := func() *rand.Rand { return rand.New(rand.NewPCG(seed, 7)) }
		for _, tw := range twins(rng, seed%3 == 2) {
			var want [][]float64
			for _, k := range kinds() {
				got := tw.run(t, k)
				if k == 0 {
					want = got
					continue
				}
				for i := range got {
					if at, ok := same(want[i], got[i]); !ok {
						t.Fatalf("seed %d, %s, kernel %d, array %d, element %d: %g, plain Go %g", seed, tw.name, k, i, at, got[i][at], want[i][at])
					}
				}
			}
		}
	}
}

func twins(random func() *rand.Rand, wild bool) (out []twin) {
	const n = 23
	for kind, name := range []string{"Set", "Add"} {
		out = append(out, twin{name, func(t *testing.T, k int) [][]float64 {
			rng := random()
			whole, x := fence(n, rng)
			from, y := fence(n, rng)
			if wild {
				odd(x, rng)
				odd(y, rng)
			}
			var r Rows
			for i := range n - 1 {
				var src []int
				for range rng.IntN(5) {
					src = append(src, rng.IntN(n))
				}
				r.Row(i, src...)
			}
			for range 2 * r.Entries() {
				r.Coef = append(r.Coef, rng.NormFloat64())
			}
			d, s, i, c := &x[0], &y[0], &r.index[0], &r.Coef[0]
			f := [][2]func(dst, src *float64, index *int32, coef *float64, rows int){
				{nil, nil},
				{rowsSet256, rowsAdd256},
				{rowsSet512, rowsAdd512},
			}[k][kind]
			if f == nil {
				plainRows(d, s, i, c, r.rows, kind)
			} else {
				f(d, s, i, c, r.rows)
			}
			return [][]float64{whole, from}
		}})
	}
	for mode, name := range []string{"wye", "pair", "wye ZIP", "pair ZIP", "first wye", "first wye ZIP"} {
		out = append(out, twin{name, func(t *testing.T, k int) [][]float64 {
			rng := random()
			whole, into := fence(n, rng)
			_, v := fence(n, rng)
			_, s := fence(2*n, rng)
			if wild {
				odd(v, rng)
				odd(s, rng)
			}
			l := NewLoads(mode&1 == 1, mode >= 2)
			if mode >= 4 {
				l = NewFirstLoads(mode == 5)
			}
			for range 2 * n {
				l.Branch(rng.IntN(n), rng.IntN(n), rng.Float64(), [6]float64{rng.Float64(), rng.Float64(), rng.Float64(), rng.Float64(), rng.Float64(), rng.Float64()})
			}
			var below uint64
			if k == 0 {
				below = plainDraw(&into[0], &v[0], &s[0], &l.index[0], &l.shape[0], l.n, l.pair, l.zi, l.begins)
			} else {
				f := [][6]func(into, v, power *float64, index *int32, shape *float64, n int) uint64{
					{drawWye256, drawPair256, drawWyeZIP256, drawPairZIP256, drawWyeFirst256, drawWyeZIPFirst256},
					{drawWye512, drawPair512, drawWyeZIP512, drawPairZIP512, drawWyeFirst512, drawWyeZIPFirst512},
				}[k-1][mode]
				below = f(&into[0], &v[0], &s[0], &l.index[0], &l.shape[0], l.n)
			}
			return [][]float64{whole, {float64(below)}}
		}})
	}
	for kind, name := range []string{"groups Set", "groups Add"} {
		out = append(out, twin{name, func(t *testing.T, k int) [][]float64 {
			rng := random()
			whole, x := fence(n, rng)
			from, y := fence(n, rng)
			if wild {
				odd(x, rng)
				odd(y, rng)
			}
			var g Groups
			for i := 0; i < n-3; {
				rows := 1 + rng.IntN(3)
				src := []int{rng.IntN(n)}
				for range rng.IntN(7) {
					src = append(src, rng.IntN(n))
				}
				if rng.IntN(2) == 0 {
					g.Group(i, rows, src...)
				} else {
					g.LaneGroup(i, rows, src...)
				}
				i += rows
			}
			for range 2 * g.coefs {
				g.Coef = append(g.Coef, rng.NormFloat64())
			}
			_, g.LaneCoef = fence(g.laneCoefs, rng)
			if wild {
				odd(g.LaneCoef, rng)
			}
			d, s, i, c, o := &x[0], &y[0], &g.index[0], first(g.Coef), first(g.LaneCoef)
			f := [][2]func(dst, src *float64, index *int32, coef, lanes *float64, groups int){
				{nil, nil},
				{groupsSet256, groupsAdd256},
				{groupsSet512, groupsAdd512},
			}[k][kind]
			if f == nil {
				plainGroups(d, s, i, c, o, g.groups, kind == 1)
			} else {
				f(d, s, i, c, o, g.groups)
			}
			return [][]float64{whole, from}
		}})
	}
	out = append(out, twin{"groups Back", func(t *testing.T, k int) [][]float64 {
		rng := random()
		whole, v := fence(n, rng)
		_, x := fence(n, rng)
		if wild {
			odd(v, rng)
			odd(x, rng)
		}
		var g Groups
		for i := 0; i < n-3; {
			rows := 1 + rng.IntN(3)
			var src []int
			for r := range rows {
				src = append(src, i+r)
			}
			for range rng.IntN(4) {
				src = append(src, rng.IntN(n))
			}
			if rng.IntN(2) == 0 {
				g.Group(i, rows, src...)
			} else {
				g.LaneGroup(i, rows, src...)
			}
			i += rows
		}
		for range 2 * g.coefs {
			g.Coef = append(g.Coef, rng.NormFloat64())
		}
		_, g.LaneCoef = fence(g.laneCoefs, rng)
		w := make([]float64, n)
		for i := range w {
			w[i] = rng.Float64()
		}
		m := &masks[rng.IntN(256)]
		var moved Moved
		f := []func(v, x *float64, index *int32, coef, lanes, weight *float64, mask *uint64, moved *float64, groups int){plainBack, groupsBack256, groupsBack512}[k]
		f(&v[0], &x[0], &g.index[0], first(g.Coef), first(g.LaneCoef), &w[0], &m[0], &moved.most[0], g.groups)
		return [][]float64{whole, moved.most[:], moved.sum[:]}
	}})
	out = append(out, twin{"scale", func(t *testing.T, k int) [][]float64 {
		rng := random()
		whole, power := fence(n, rng)
		_, values := fence(4, rng)
		if wild {
			odd(values, rng)
		}
		var d Drives
		for range n {
			d.Drive(rng.IntN(8), rng.IntN(8), complex(rng.NormFloat64(), rng.NormFloat64()))
		}
		f := []func(power, values *float64, index *int32, share *float64, n int){plainScale, scale256, scale512}[k]
		f(&power[0], &values[0], &d.index[0], &d.Share[0], d.n)
		return [][]float64{whole}
	}}, twin{"predict", func(t *testing.T, k int) [][]float64 {
		rng := random()
		whole, v := fence(n, rng)
		curve, when := make([]float64, 6*n), make([]float64, Lanes)
		for i := range curve {
			curve[i] = rng.NormFloat64()
		}
		for i := range when {
			when[i] = rng.Float64()
		}
		f := []func(v, curve, when *float64, n int){plainPredict, predict256, predict512}[k]
		f(&v[0], &curve[0], &when[0], n)
		return [][]float64{whole}
	}})
	out = append(out, twin{"products", func(t *testing.T, k int) [][]float64 {
		rng := random()
		whole, x := fence(n, rng)
		if wild {
			odd(x, rng)
		}
		var p Products
		for range n {
			var pairs [][2]int
			for range rng.IntN(5) {
				pairs = append(pairs, [2]int{rng.IntN(n), rng.IntN(n)})
			}
			p.Row(Kind(rng.IntN(8)), rng.IntN(n), rng.IntN(n+1)-1, pairs...)
		}
		f := []func(x *float64, index *int32, rows int){plainProducts, products256, products512}[k]
		f(&x[0], &p.index[0], p.rows)
		return [][]float64{whole}
	}})
	out = append(out, twin{"pick", func(t *testing.T, k int) [][]float64 {
		rng := random()
		whole, a := fence(n, rng)
		_, b := fence(n, rng)
		var from [Lanes]uint64
		for l := range from {
			from[l] = rng.Uint64N(2 * Lanes)
		}
		f := []func(a, b *float64, from *uint64, n int){plainPick, plainPick, pick512}[k]
		f(&a[0], &b[0], &from[0], n)
		return [][]float64{whole}
	}})
	out = append(out, twin{"blank", func(t *testing.T, k int) [][]float64 {
		rng := random()
		whole, x := fence(n, rng)
		var b Blank
		for range 1 + rng.IntN(n) {
			b.Value(rng.IntN(n))
		}
		f := []func(x *float64, index *int32, n int){plainBlank, blank256, blank512}[k]
		f(&x[0], &b.index[0], len(b.index))
		return [][]float64{whole}
	}})
	out = append(out, twin{"shift", func(t *testing.T, k int) [][]float64 {
		rng := random()
		whole, v := fence(n, rng)
		d := NewDirections(5, n)
		for i := range d.coef {
			d.coef[i] = rng.NormFloat64()
		}
		if wild {
			odd(d.coef, rng)
		}
		for range 1 + rng.IntN(4) {
			var times [Lanes]float64
			for l := range times {
				times[l] = float64(rng.IntN(5) - 2)
			}
			d.Use(rng.IntN(5), &times)
		}
		f := []func(v, coef *float64, offset *int64, times *float64, directions, n int){plainShift, shift256, shift512}[k]
		f(&v[0], &d.coef[0], &d.offset[0], &d.times[0], len(d.offset), d.n)
		return [][]float64{whole}
	}})
	return append(out, twin{"advance", func(t *testing.T, k int) [][]float64 {
		rng := random()
		whole, v := fence(n, rng)
		_, x := fence(n, rng)
		if wild {
			odd(x, rng)
		}
		w := make([]float64, n)
		for i := range w {
			w[i] = rng.Float64()
		}
		m := &masks[rng.IntN(256)]
		var moved [Lanes]float64
		f := []func(v, x, weight *float64, mask *uint64, moved *float64, n int){plainAdvance, advance256, advance512}[k]
		f(&v[0], &x[0], &w[0], &m[0], &moved[0], n)
		return [][]float64{whole, moved[:]}
	}})
}
