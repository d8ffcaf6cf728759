//go:build amd64 && !purego

package vector

func lengths(out, v *float64, index *int32, rows *float64, flags, left *uint8, mask *uint64, least, most *float64, n int) uint64 {
	switch kernel {
	case 2:
		return lengths512(out, v, index, rows, flags, left, mask, least, most, n)
	case 1:
		return lengths256(out, v, index, rows, flags, left, mask, least, most, n)
	}
	return plainLengths(out, v, index, rows, flags, left, mask, least, most, n)
}

func dots(out, v, i *float64, index *int32, rows, limits *float64, flags, over *uint8, mask *uint64, total *float64, n int) uint64 {
	switch kernel {
	case 2:
		return dots512(out, v, i, index, rows, limits, flags, over, mask, total, n)
	case 1:
		return dots256(out, v, i, index, rows, limits, flags, over, mask, total, n)
	}
	return plainDots(out, v, i, index, rows, limits, flags, over, mask, total, n)
}

func squares(x *float64, index *int32, high *float64, flags *uint8, mask *uint64, n int) uint64 {
	switch kernel {
	case 2:
		return squares512(x, index, high, flags, mask, n)
	case 1:
		return squares256(x, index, high, flags, mask, n)
	}
	return plainSquares(x, index, high, flags, mask, n)
}

func banks(v, i *float64, index *int32, high *float64, flags *uint8, mask *uint64, n int) uint64 {
	switch kernel {
	case 2:
		return banks512(v, i, index, high, flags, mask, n)
	case 1:
		return banks256(v, i, index, high, flags, mask, n)
	}
	return plainBanks(v, i, index, high, flags, mask, n)
}

func triples(out, v *float64, index *int32, constants, far, ratio *float64, n int) {
	switch kernel {
	case 2:
		triples512(out, v, index, constants, far, ratio, n)
	case 1:
		triples256(out, v, index, constants, far, ratio, n)
	default:
		plainTriples(out, v, index, constants, far, ratio, n)
	}
}

func bins(out *int32, x, scale *float64, n int) {
	switch kernel {
	case 2:
		bins512(out, x, scale, n)
	case 1:
		bins256(out, x, scale, n)
	default:
		plainBins(out, x, scale, n)
	}
}
