package vector

import "unsafe"

// Pick moves lanes about: lane l of every value of a becomes lane from[l] of a, or, from
// Lanes on, lane from[l]−Lanes of b.
func Pick(a, b []float64, from *[Lanes]uint64) {
	n := len(a) / Width
	if len(b) < n*Width {
		panic("vector: lanes are picked beyond the values")
	}
	for _, f := range from {
		if f >= 2*Lanes {
			panic("vector: there is no such lane")
		}
	}
	if n > 0 {
		pick(&a[0], &b[0], &from[0], n)
	}
}

func plainPick(a, b *float64, from *uint64, n int) {
	f := *(*[Lanes]uint64)(unsafe.Pointer(from))
	for k := range n {
		x, y := value(a, int32(k*Stride)), value(b, int32(k*Stride))
		old := *x
		for l, i := range f {
			if i < Lanes {
				x[l], x[Lanes+l] = old[i], old[Lanes+i]
			} else {
				x[l], x[Lanes+l] = y[i-Lanes], y[i]
			}
		}
	}
}
