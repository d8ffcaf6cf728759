package vector

import "math"

func plainProducts(x *float64, index *int32, rows int) {
	r := reader{index: index}
	for range rows {
		kind, d, init, n := Kind(r.next()), r.next(), r.next(), r.next()
		var rr, ii, ri, ir [Lanes]float64
		var t [Width]float64
		if init >= 0 {
			t = *value(x, init)
		}
		for range n {
			a, b := value(x, r.next()), value(x, r.next())
			for l := range Lanes {
				rr[l] = math.FMA(a[l], b[l], rr[l])
				ii[l] = math.FMA(a[Lanes+l], b[Lanes+l], ii[l])
				ri[l] = math.FMA(a[l], b[Lanes+l], ri[l])
				ir[l] = math.FMA(a[Lanes+l], b[l], ir[l])
			}
		}
		out := value(x, d)
		for l := range Lanes {
			re, im := t[l], t[Lanes+l]
			if sr, si := rr[l]-ii[l], ri[l]+ir[l]; kind&Plus == 0 {
				re, im = re-sr, im-si
			} else {
				re, im = re+sr, im+si
			}
			if kind&Negated != 0 {
				re, im = 0-re, 0-im
			}
			if kind&Inverse != 0 {
				g := 1 / math.FMA(re, re, im*im)
				re, im = re*g, (0-im)*g
			}
			out[l], out[Lanes+l] = re, im
		}
	}
}
