package vector

import "math"

// sums are those of the rows of a group: re = rr − ii, im = ri + ir.
type sums struct{ rr, ii, ri, ir [GroupRows][Lanes]float64 }

// column adds a source times its coefficients: of a group whose lanes have their own those
// at own.
func (a *sums) column(s *[Width]float64, r *reader, lanes *float64, own *int32, rows int, each bool) {
	for k := range rows {
		var c [Width]float64
		if each {
			c = *value(lanes, *own)
			*own += Stride
		} else {
			cr, ci := r.number(), r.number()
			for l := range Lanes {
				c[l], c[Lanes+l] = cr, ci
			}
		}
		for l := range Lanes {
			cr, ci := c[l], c[Lanes+l]
			a.rr[k][l] = math.FMA(cr, s[l], a.rr[k][l])
			a.ii[k][l] = math.FMA(ci, s[Lanes+l], a.ii[k][l])
			a.ri[k][l] = math.FMA(cr, s[Lanes+l], a.ri[k][l])
			a.ir[k][l] = math.FMA(ci, s[l], a.ir[k][l])
		}
	}
}

// group reads the head of a group: its first target, its rows, its sources, and whether
// lanes have coefficients of their own.
func (r *reader) group() (target int32, rows, sources int, each bool) {
	target, rows, sources = r.next(), int(r.next()), int(r.next())
	if each = rows > GroupRows; each {
		rows -= GroupRows
	}
	return target, rows, sources, each
}

func plainGroups(dst, src *float64, index *int32, coef, lanes *float64, groups int, add bool) {
	r, own := reader{index: index, coef: coef}, int32(0)
	for range groups {
		d, rows, n, each := r.group()
		var a sums
		for k := range rows {
			if add {
				t := value(dst, d+int32(k*Stride))
				copy(a.rr[k][:], t[:Lanes])
				copy(a.ri[k][:], t[Lanes:])
			}
		}
		for range n {
			a.column(value(src, r.next()), &r, lanes, &own, rows, each)
		}
		for k := range rows {
			t := value(dst, d+int32(k*Stride))
			for l := range Lanes {
				t[l], t[Lanes+l] = a.rr[k][l]-a.ii[k][l], a.ri[k][l]+a.ir[k][l]
			}
		}
	}
}
