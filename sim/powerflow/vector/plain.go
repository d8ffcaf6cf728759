package vector

import (
	"math"
	"unsafe"
)

// The plain kernels do, lane by lane, what the assembly does in registers: the same
// operations in the same order, so that both give the same bits.

func value(p *float64, offset int32) *[Width]float64 {
	return (*[Width]float64)(unsafe.Add(unsafe.Pointer(p), int(offset)))
}

// reader reads what a kernel reads in a row. It counts: a pointer must not be moved past the
// end of what it points into, which the last number would do.
type reader struct {
	index           *int32
	coef            *float64
	indices, coeffs int
}

func (r *reader) next() int32 {
	x := *(*int32)(unsafe.Add(unsafe.Pointer(r.index), 4*r.indices))
	r.indices++
	return x
}

func (r *reader) number() float64 {
	x := *(*float64)(unsafe.Add(unsafe.Pointer(r.coef), 8*r.coeffs))
	r.coeffs++
	return x
}

// How a row begins.
const (
	setRow = iota
	addRow
)

func plainRows(dst, src *float64, index *int32, coef *float64, rows, kind int) {
	r := reader{index: index, coef: coef}
	for range rows {
		d := value(dst, r.next())
		n := r.next()
		// re = rr − ii, im = ri + ir
		var rr, ii, ri, ir [Lanes]float64
		if kind == addRow {
			copy(rr[:], d[:Lanes])
			copy(ri[:], d[Lanes:])
		}
		for range n {
			s := value(src, r.next())
			cr, ci := r.number(), r.number()
			for l := range Lanes {
				rr[l] = math.FMA(cr, s[l], rr[l])
				ii[l] = math.FMA(ci, s[Lanes+l], ii[l])
				ri[l] = math.FMA(cr, s[Lanes+l], ri[l])
				ir[l] = math.FMA(ci, s[l], ir[l])
			}
		}
		for l := range Lanes {
			d[l], d[Lanes+l] = rr[l]-ii[l], ri[l]+ir[l]
		}
	}
}

func plainDraw(into, v, power *float64, index *int32, shape *float64, n int, pair, zip, begins bool) (below uint64) {
	r := reader{index: index, coef: shape}
	var ground [Width]float64
	for k := range n {
		from, to := r.next(), int32(0)
		x := value(v, from)
		y := &ground
		if pair {
			to = r.next()
			y = value(v, to)
		}
		least := r.number()
		var zi [6]float64
		if zip {
			for i := range zi {
				zi[i] = r.number()
			}
		}
		s := value(power, int32(k*Stride))
		a, b := value(into, from), value(into, to)
		for l := range Lanes {
			re, im := x[l], x[Lanes+l]
			if pair {
				re, im = re-y[l], im-y[Lanes+l]
			}
			m := math.FMA(re, re, im*im)
			if !(m >= least) {
				below |= 1 << l
			}
			p, q := s[l], s[Lanes+l]
			g := 1 / m
			var ir, ii float64
			if zip {
				root := math.Sqrt(g)
				p *= math.FMA(zi[0], g, math.FMA(zi[1], root, zi[2]))
				q *= math.FMA(zi[3], g, math.FMA(zi[4], root, zi[5]))
				ir = math.FMA(p, re, q*im)
				ii = math.FMA(p, im, -(q * re))
			} else {
				ir = math.FMA(p, re, q*im) * g
				ii = math.FMA(p, im, -(q*re)) * g
			}
			if begins {
				a[l], a[Lanes+l] = 0, 0
			}
			a[l] -= ir
			a[Lanes+l] -= ii
			if pair {
				b[l] += ir
				b[Lanes+l] += ii
			}
		}
	}
	return below
}

func plainAdvance(v, x, weight *float64, mask *uint64, moved *float64, n int) {
	m := (*[Lanes]uint64)(unsafe.Pointer(mask))
	out := (*[Lanes]float64)(unsafe.Pointer(moved))
	var most, sum [Lanes]float64
	for k := range n {
		a, b := value(v, int32(k*Stride)), value(x, int32(k*Stride))
		w := *(*float64)(unsafe.Add(unsafe.Pointer(weight), 8*k))
		for l := range Lanes {
			re, im := b[l]-a[l], b[Lanes+l]-a[Lanes+l]
			d := math.FMA(re, re, im*im) * w
			if d > most[l] {
				most[l] = d
			}
			sum[l] += d
			if m[l] != 0 {
				a[l], a[Lanes+l] = b[l], b[Lanes+l]
			}
		}
	}
	for l := range Lanes {
		// 0·Σ is 0, or NaN where a number was none or too large.
		out[l] = most[l] + 0*sum[l]
	}
}
