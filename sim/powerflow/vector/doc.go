// Package vector computes with complex numbers of eight instants at once: the inner
// loops of a power flow, without a word about networks.
//
// A value is Width float64 in a row: the real parts of Lanes instants, then the
// imaginary parts. Arrays of values are flat []float64; an index into one is a byte
// offset, Stride for each value. No lane ever looks at another.
//
// There are three kernels of everything, and all give the same bits: plain Go, and
// assembly for processors with AVX2 and FMA or with AVX-512, which generate/main.go
// writes. The processor decides; the build tag purego leaves plain Go alone.
package vector

//go:generate go run -tags avo ./generate -out kernels_amd64.s -stubs stubs_amd64.go

import "unsafe"

// Lanes is the number of instants, Width the number of float64 of a value, and
// Stride its size in bytes.
const (
	Lanes  = 8
	Width  = 2 * Lanes
	Stride = 8 * Width
)

// All is the mask with every lane.
const All uint8 = 0xff

// Make returns n values of zero that begin at a cache line.
func Make(n int) []float64 {
	const line = 64 / 8
	x := make([]float64, n*Width+line)
	skip := 0
	if off := int(uintptr(unsafe.Pointer(unsafe.SliceData(x))) % 64); off != 0 {
		skip = (64 - off) / 8
	}
	return x[skip : skip+n*Width : skip+n*Width]
}

// At returns the value of a lane of the value at an index.
func At(x []float64, value, lane int) complex128 {
	return complex(x[value*Width+lane], x[value*Width+Lanes+lane])
}

// Put sets it.
func Put(x []float64, value, lane int, z complex128) {
	x[value*Width+lane] = real(z)
	x[value*Width+Lanes+lane] = imag(z)
}
