package vector

import (
	"math/cmplx"
	"math/rand/v2"
	"testing"
)

// A row is what its doc comment says, in complex numbers of the language.
func TestProductsAreWhatTheySay(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 9))
	const n = 12
	for range 500 {
		x := Make(n)
		for i := range x {
			x[i] = rng.NormFloat64()
		}
		var pairs [][2]int
		for range rng.IntN(4) {
			pairs = append(pairs, [2]int{rng.IntN(n), rng.IntN(n)})
		}
		kind, target, init := Kind(rng.IntN(8)), rng.IntN(n), rng.IntN(n+1)-1
		var want [Lanes]complex128
		for l := range want {
			z := complex128(0)
			if init >= 0 {
				z = At(x, init, l)
			}
			for _, p := range pairs {
				if ab := At(x, p[0], l) * At(x, p[1], l); kind&Plus != 0 {
					z += ab
				} else {
					z -= ab
				}
			}
			if kind&Negated != 0 {
				z = -z
			}
			if kind&Inverse != 0 {
				if z == 0 {
					z = cmplx.NaN()
				} else {
					z = 1 / z
				}
			}
			want[l] = z
		}
		var p Products
		p.Row(kind, target, init, pairs...)
		p.Run(x)
		for l, z := range want {
			got := At(x, target, l)
			if cmplx.IsNaN(z) && cmplx.IsNaN(got) {
				continue
			}
			if cmplx.Abs(got-z) > 1e-10*(1+cmplx.Abs(z)) {
				t.Fatalf("kind %d, init %d, %d pairs: %v, want %v", kind, init, len(pairs), got, z)
			}
		}
	}
}

// Coefficients of their own that are the same in all lanes give what common ones do.
func TestLaneGroupsOfEqualLanesAreGroups(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 10))
	const n = 20
	src := Make(n)
	for i := range src {
		src[i] = rng.NormFloat64()
	}
	var a, b Groups
	for at := 0; at+GroupRows <= n; at += GroupRows {
		rows, sources := 1+rng.IntN(GroupRows), []int{rng.IntN(n), rng.IntN(n)}
		a.Group(at, rows, sources...)
		first := b.LaneGroup(at, rows, sources...)
		b.LaneCoef = append(b.LaneCoef, make([]float64, (b.LaneCoefs()-first)*Width)...)
		for k := first; k < b.LaneCoefs(); k++ {
			z := complex(rng.NormFloat64(), rng.NormFloat64())
			a.Coef = append(a.Coef, real(z), imag(z))
			for l := range Lanes {
				Put(b.LaneCoef, k, l, z)
			}
		}
	}
	x, y := Make(n), Make(n)
	a.Set(x, src)
	b.Set(y, src)
	for i := range x {
		if x[i] != y[i] {
			t.Fatalf("number %d: %v, with coefficients by lane %v", i, x[i], y[i])
		}
	}
}
