package vector

import (
	"math"
	"unsafe"
)

// Plain kernels of what watches: conversions round every product, so that no processor
// fuses what the assembly does not.

func numbers(p *float64, row int) *[Lanes]float64 {
	return (*[Lanes]float64)(unsafe.Add(unsafe.Pointer(p), row*8*Lanes))
}

// gather is the sum of the lanes of a mask, in the order of the registers.
func gather(x *[Lanes]float64, m *[Lanes]uint64) float64 {
	var y [Lanes]float64
	for l := range y {
		y[l] = math.Float64frombits(math.Float64bits(x[l]) & m[l])
	}
	return ((y[0] + y[4]) + (y[2] + y[6])) + ((y[1] + y[5]) + (y[3] + y[7]))
}

func live(m *[Lanes]uint64) (bits uint8) {
	for l := range m {
		if m[l] != 0 {
			bits |= 1 << l
		}
	}
	return bits
}

func plainLengths(out, v *float64, index *int32, rows *float64, flags, left *uint8, mask *uint64, least, most *float64, n int) (found uint64) {
	m := (*[Lanes]uint64)(unsafe.Pointer(mask))
	alive := live(m)
	low, high := numbers(least, 0), numbers(most, 0)
	for l := range Lanes {
		low[l], high[l] = math.Inf(1), math.Inf(-1)
	}
	r := reader{index: index, coef: nil}
	for k := range n {
		row := (*LengthRow)(unsafe.Add(unsafe.Pointer(rows), k*int(unsafe.Sizeof(LengthRow{}))))
		a, to := value(v, r.next()), r.next()
		x := numbers(out, k)
		flag, out := uint8(0), uint8(0)
		for l := range Lanes {
			re, im := a[l], a[Lanes+l]
			if to >= 0 {
				b := value(v, to)
				re, im = re-b[l], im-b[Lanes+l]
			}
			d := math.Sqrt(float64(re*re)+float64(im*im)) / row.Base
			x[l] = d
			if d < low[l] {
				low[l] = d
			}
			if d > high[l] {
				high[l] = d
			}
			if !(d >= row.Low) || !(d <= row.High) {
				flag |= 1 << l
			}
			if !(d >= row.From) || !(d <= row.To) {
				out |= 1 << l
			}
		}
		row.Sum += gather(x, m)
		found |= put(flags, k, flag&alive) | put(left, k, out&alive)<<8
	}
	return found
}

func put(flags *uint8, k int, flag uint8) uint64 {
	*(*uint8)(unsafe.Add(unsafe.Pointer(flags), k)) = flag
	return uint64(flag)
}

func plainDots(out, v, i *float64, index *int32, rows, limits *float64, flags, over *uint8, mask *uint64, total *float64, n int) (found uint64) {
	m := (*[Lanes]uint64)(unsafe.Pointer(mask))
	alive := live(m)
	sum := numbers(total, 0)
	r := reader{index: index, coef: limits}
	for k := range n {
		row := (*DotRow)(unsafe.Add(unsafe.Pointer(rows), k*int(unsafe.Sizeof(DotRow{}))))
		var x [Lanes]float64
		flag, high := uint8(0), uint8(0)
		for range r.next() {
			a, b, limit := value(v, r.next()), value(i, r.next()), r.number()
			for l := range Lanes {
				x[l] += float64(a[l]*b[l]) + float64(a[Lanes+l]*b[Lanes+l])
				if !(float64(b[l]*b[l])+float64(b[Lanes+l]*b[Lanes+l]) <= limit) {
					high |= 1 << l
				}
			}
		}
		*numbers(out, k) = x
		for l := range Lanes {
			sum[l] += x[l]
			if !(x[l] <= row.High) {
				flag |= 1 << l
			}
		}
		row.Sum += gather(&x, m)
		found |= put(flags, k, flag&alive) | put(over, k, high&alive)<<8
	}
	return found
}

func plainSquares(x *float64, index *int32, high *float64, flags *uint8, mask *uint64, n int) (found uint64) {
	alive := live((*[Lanes]uint64)(unsafe.Pointer(mask)))
	r := reader{index: index, coef: high}
	for k := range n {
		a, b, bound := value(x, r.next()), value(x, r.next()), r.number()
		flag := uint8(0)
		for l := range Lanes {
			s := float64(a[l]*a[l]) + float64(a[Lanes+l]*a[Lanes+l])
			if t := float64(b[l]*b[l]) + float64(b[Lanes+l]*b[Lanes+l]); t > s {
				s = t
			}
			if !(s <= bound) {
				flag |= 1 << l
			}
		}
		found |= put(flags, k, flag&alive)
	}
	return found
}

func plainBanks(v, i *float64, index *int32, high *float64, flags *uint8, mask *uint64, n int) (found uint64) {
	alive := live((*[Lanes]uint64)(unsafe.Pointer(mask)))
	r := reader{index: index, coef: high}
	for k := range n {
		var re, im [Lanes]float64
		for range r.next() {
			a, b := value(v, r.next()), value(i, r.next())
			for l := range Lanes {
				re[l] += float64(a[l]*b[l]) + float64(a[Lanes+l]*b[Lanes+l])
				im[l] += float64(a[Lanes+l]*b[l]) - float64(a[l]*b[Lanes+l])
			}
		}
		bound := r.number()
		flag := uint8(0)
		for l := range Lanes {
			if !(float64(re[l]*re[l])+float64(im[l]*im[l]) <= bound) {
				flag |= 1 << l
			}
		}
		found |= put(flags, k, flag&alive)
	}
	return found
}

// above is a where it is greater, else b: what registers do with numbers that are none.
func above(a, b float64) float64 {
	if a > b {
		return a
	}
	return b
}

func below(a, b float64) float64 {
	if a < b {
		return a
	}
	return b
}

func plainTriples(out, v *float64, index *int32, constants, far, ratio *float64, n int) {
	c := (*[3]float64)(unsafe.Pointer(constants))
	f, q := numbers(far, 0), numbers(ratio, 0)
	r := reader{index: index, coef: nil}
	for k := range n {
		a, b, d := value(v, r.next()), value(v, r.next()), value(v, r.next())
		o := value(out, int32(k*Stride))
		for l := range Lanes {
			ar, ai, br, bi, cr, ci := a[l], a[Lanes+l], b[l], b[Lanes+l], d[l], d[Lanes+l]
			square := func(re, im float64) float64 { return math.FMA(re, re, im*im) }
			x, y, z := square(ar-br, ai-bi), square(br-cr, bi-ci), square(cr-ar, ci-ai)
			mean := (x + y + z) * c[0]
			o[l] = above(above(x, above(y, z))-mean, mean-below(x, below(y, z))) / mean
			f[l] = above(o[l], f[l])
			// a − (b + c)/2 ± j·sin 120°·(b − c)
			hr, hi := math.FMA(-c[1], br+cr, ar), math.FMA(-c[1], bi+ci, ai)
			tr, ti := c[2]*(bi-ci), c[2]*(br-cr)
			o[Lanes+l] = square(hr+tr, hi-ti) / square(hr-tr, hi+ti)
			q[l] = above(o[Lanes+l], q[l])
		}
	}
}

func plainBins(out *int32, x, scale *float64, n int) {
	s := (*[2]float64)(unsafe.Pointer(scale))
	for k := range n {
		o := (*[Lanes]int32)(unsafe.Add(unsafe.Pointer(out), k*4*Lanes))
		for l, d := range numbers(x, k) {
			o[l] = int32(above(below(d/s[0], s[1]), 0))
		}
	}
}
