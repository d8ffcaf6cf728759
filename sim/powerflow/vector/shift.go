package vector

import (
	"math"
	"unsafe"
)

// Directions are ways in which values can be moved: each a complex number for every value.
type Directions struct {
	coef []float64 // direction by direction
	n    int       // values

	offset []int64   // of the directions in use, in bytes
	times  []float64 // by direction in use and lane
}

// NewDirections makes room for directions of n values.
func NewDirections(directions, n int) *Directions {
	return &Directions{coef: make([]float64, 2*n*directions), n: n, offset: make([]int64, 0, directions), times: make([]float64, 0, directions*Lanes)}
}

// Set sets a direction at a value.
func (d *Directions) Set(direction, value int, z complex128) {
	at := 2 * (direction*d.n + value)
	d.coef[at], d.coef[at+1] = real(z), imag(z)
}

// Begin forgets what Use has asked for.
func (d *Directions) Begin() { d.offset, d.times = d.offset[:0], d.times[:0] }

// Use asks for a direction, each lane so many times of it.
func (d *Directions) Use(direction int, times *[Lanes]float64) {
	d.offset = append(d.offset, int64(16*direction*d.n))
	d.times = append(d.times, times[:]...)
}

// Shift moves the values by what Use has asked for since Begin.
func (d *Directions) Shift(v []float64) {
	if len(v) < d.n*Width {
		panic("vector: directions reach beyond the values")
	}
	if len(d.offset) > 0 && d.n > 0 {
		shift(&v[0], &d.coef[0], &d.offset[0], &d.times[0], len(d.offset), d.n)
	}
}

func plainShift(v, coef *float64, offset *int64, times *float64, directions, n int) {
	for k := range n {
		x := value(v, int32(k*Stride))
		for i := range directions {
			at := *(*int64)(unsafe.Add(unsafe.Pointer(offset), 8*i)) + int64(16*k)
			c := (*[2]float64)(unsafe.Add(unsafe.Pointer(coef), at))
			t := (*[Lanes]float64)(unsafe.Add(unsafe.Pointer(times), 8*Lanes*i))
			for l := range Lanes {
				x[l] = math.FMA(c[0], t[l], x[l])
				x[Lanes+l] = math.FMA(c[1], t[l], x[Lanes+l])
			}
		}
	}
}
