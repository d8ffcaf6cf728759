package vector

import "math"

func plainGroups(dst, src *float64, index *int32, coef, lanes *float64, groups int, add bool) {
	r, own := reader{index: index, coef: coef}, int32(0)
	for range groups {
		d, rows, n := r.next(), r.next(), r.next()
		each := rows > GroupRows
		if each {
			rows -= GroupRows
		}
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
				var c [Width]float64
				if each {
					c = *value(lanes, own)
					own += Stride
				} else {
					cr, ci := r.number(), r.number()
					for l := range Lanes {
						c[l], c[Lanes+l] = cr, ci
					}
				}
				for l := range Lanes {
					cr, ci := c[l], c[Lanes+l]
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
