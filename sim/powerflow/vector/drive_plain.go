package vector

import (
	"math"
	"unsafe"
)

func plainScale(power, values *float64, index *int32, share *float64, n int) {
	r := reader{index: index, coef: share}
	for k := range n {
		re := (*[Lanes]float64)(unsafe.Add(unsafe.Pointer(values), int(r.next())))
		im := (*[Lanes]float64)(unsafe.Add(unsafe.Pointer(values), int(r.next())))
		p, q := r.number(), r.number()
		out := value(power, int32(k*Stride))
		for l := range Lanes {
			out[l], out[Lanes+l] = p*re[l], q*im[l]
		}
	}
}

func plainPredict(v, curve, when *float64, n int) {
	w := (*[Lanes]float64)(unsafe.Pointer(when))
	r := reader{coef: curve}
	for k := range n {
		var c [6]float64
		for i := range c {
			c[i] = r.number()
		}
		out := value(v, int32(k*Stride))
		for l := range Lanes {
			out[l] = math.FMA(math.FMA(c[4], w[l], c[2]), w[l], c[0])
			out[Lanes+l] = math.FMA(math.FMA(c[5], w[l], c[3]), w[l], c[1])
		}
	}
}
