package vector

import (
	"math"
	"unsafe"
)

// Back sets every target of v to Σ coef·source, in the lanes of a mask: the way back of a
// substitution. Of the sources of a group the first, as many as it has rows, are values of
// x, the others values of v, which may be targets of groups before it. Lanes that are not in
// the mask stay, and must not matter.
//
// weight has a number for every value of v up to the last target. moved is raised to the
// largest weight·|change|² of each lane; it is no number where one of them is none.
func (g *Groups) Back(v, x, weight []float64, mask uint8, moved *Moved) {
	g.check(v, v)
	if len(x) < g.wide*Width || len(weight) < g.far {
		panic("vector: groups reach beyond the values, or have too few sources")
	}
	if g.groups > 0 {
		groupsBack(&v[0], &x[0], &g.index[0], first(g.Coef), first(g.LaneCoef), &weight[0], &masks[mask][0], &moved.most[0], g.groups)
	}
}

// Moved is the largest change of each lane so far; the zero value is none.
type Moved struct {
	most, sum [Lanes]float64 // in this order
}

// Most is the largest weight·|change|² of a lane; no number where one of them is none.
func (m *Moved) Most(lane int) float64 {
	return m.most[lane] + 0*m.sum[lane] // 0·Σ is 0, or NaN where a number was none or too large
}

func plainBack(v, x *float64, index *int32, coef, lanes, weight *float64, mask *uint64, moved *float64, groups int) {
	m := (*[Lanes]uint64)(unsafe.Pointer(mask))
	out := (*[Width]float64)(unsafe.Pointer(moved))
	r, own := reader{index: index, coef: coef}, int32(0)
	for range groups {
		d, rows, n, each := r.group()
		var a sums
		for i := range n {
			base := v
			if i < rows {
				base = x
			}
			a.column(value(base, r.next()), &r, lanes, &own, rows, each)
		}
		for k := range rows {
			t := value(v, d+int32(k*Stride))
			w := *(*float64)(unsafe.Add(unsafe.Pointer(weight), 8*(int(d)/Stride+k)))
			for l := range Lanes {
				re, im := a.rr[k][l]-a.ii[k][l], a.ri[k][l]+a.ir[k][l]
				x, y := re-t[l], im-t[Lanes+l]
				if m[l] != 0 {
					t[l], t[Lanes+l] = re, im
				}
				far := math.FMA(x, x, y*y) * w
				if far > out[l] {
					out[l] = far
				}
				out[Lanes+l] += far
			}
		}
	}
}
