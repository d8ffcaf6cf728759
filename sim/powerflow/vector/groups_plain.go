package vector

import "math"

func plainGroups(dst, src *float64, index *int32, coef *float64, groups int, add bool) {
	r := reader{index: index, coef: coef}
	for range groups {
		d, rows, n := r.next(), r.next(), r.next()
		// re = rr − ii, im = ri + ir
		var rr, ii, ri, ir [GroupRows][Lanes]float64
		for k := range rows {
			if add {
				t := value(dst, d+k*Stride)
				copy(rr[k][:], t[:Lanes])
				copy(ri[k][:], t[Lanes:])
			}
		}
		for range n {
			s := value(src, r.next())
			for k := range rows {
				cr, ci := r.number(), r.number()
				for l := range Lanes {
					rr[k][l] = math.FMA(cr, s[l], rr[k][l])
					ii[k][l] = math.FMA(ci, s[Lanes+l], ii[k][l])
					ri[k][l] = math.FMA(cr, s[Lanes+l], ri[k][l])
					ir[k][l] = math.FMA(ci, s[l], ir[k][l])
				}
			}
		}
		for k := range rows {
			t := value(dst, d+k*Stride)
			for l := range Lanes {
				t[l], t[Lanes+l] = rr[k][l]-ii[k][l], ri[k][l]+ir[k][l]
			}
		}
	}
}
