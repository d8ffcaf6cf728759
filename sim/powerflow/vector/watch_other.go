//go:build !amd64 || purego

package vector

func lengths(out, v *float64, index *int32, rows *float64, flags, left *uint8, mask *uint64, least, most *float64, n int) uint64 {
	return plainLengths(out, v, index, rows, flags, left, mask, least, most, n)
}

func dots(out, v, i *float64, index *int32, rows, limits *float64, flags, over *uint8, mask *uint64, total *float64, n int) uint64 {
	return plainDots(out, v, i, index, rows, limits, flags, over, mask, total, n)
}

func squares(x *float64, index *int32, high *float64, flags *uint8, mask *uint64, n int) uint64 {
	return plainSquares(x, index, high, flags, mask, n)
}

func banks(v, i *float64, index *int32, high *float64, flags *uint8, mask *uint64, n int) uint64 {
	return plainBanks(v, i, index, high, flags, mask, n)
}

func triples(out, v *float64, index *int32, constants, far, ratio *float64, n int) {
	plainTriples(out, v, index, constants, far, ratio, n)
}

func bins(out *int32, x, scale *float64, n int) { plainBins(out, x, scale, n) }
