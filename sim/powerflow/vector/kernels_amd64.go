//go:build amd64 && !purego

package vector

import "golang.org/x/sys/cpu"

// kernel is what the processor can do: 2 AVX-512, 1 AVX2 and FMA, 0 neither.
var kernel = func() int {
	switch x := &cpu.X86; {
	case x.HasAVX512F && x.HasAVX512DQ && x.HasAVX512VL && x.HasFMA:
		return 2
	case x.HasAVX2 && x.HasFMA:
		return 1
	}
	return 0
}()

// Kernel names the kernels in use.
func Kernel() string { return [...]string{"plain", "AVX2", "AVX-512"}[kernel] }

func rowsSet(dst, src *float64, index *int32, coef *float64, rows int) {
	switch kernel {
	case 2:
		rowsSet512(dst, src, index, coef, rows)
	case 1:
		rowsSet256(dst, src, index, coef, rows)
	default:
		plainRows(dst, src, index, coef, rows, setRow)
	}
}

func rowsAdd(dst, src *float64, index *int32, coef *float64, rows int) {
	switch kernel {
	case 2:
		rowsAdd512(dst, src, index, coef, rows)
	case 1:
		rowsAdd256(dst, src, index, coef, rows)
	default:
		plainRows(dst, src, index, coef, rows, addRow)
	}
}

func drawWye(into, v, power *float64, index *int32, shape *float64, n int) uint64 {
	switch kernel {
	case 2:
		return drawWye512(into, v, power, index, shape, n)
	case 1:
		return drawWye256(into, v, power, index, shape, n)
	}
	return plainDraw(into, v, power, index, shape, n, false, false, false)
}

func drawPair(into, v, power *float64, index *int32, shape *float64, n int) uint64 {
	switch kernel {
	case 2:
		return drawPair512(into, v, power, index, shape, n)
	case 1:
		return drawPair256(into, v, power, index, shape, n)
	}
	return plainDraw(into, v, power, index, shape, n, true, false, false)
}

func drawWyeZIP(into, v, power *float64, index *int32, shape *float64, n int) uint64 {
	switch kernel {
	case 2:
		return drawWyeZIP512(into, v, power, index, shape, n)
	case 1:
		return drawWyeZIP256(into, v, power, index, shape, n)
	}
	return plainDraw(into, v, power, index, shape, n, false, true, false)
}

func drawPairZIP(into, v, power *float64, index *int32, shape *float64, n int) uint64 {
	switch kernel {
	case 2:
		return drawPairZIP512(into, v, power, index, shape, n)
	case 1:
		return drawPairZIP256(into, v, power, index, shape, n)
	}
	return plainDraw(into, v, power, index, shape, n, true, true, false)
}

func advance(v, x, weight *float64, mask *uint64, moved *float64, n int) {
	switch kernel {
	case 2:
		advance512(v, x, weight, mask, moved, n)
	case 1:
		advance256(v, x, weight, mask, moved, n)
	default:
		plainAdvance(v, x, weight, mask, moved, n)
	}
}

func scale(power, values *float64, index *int32, share *float64, n int) {
	switch kernel {
	case 2:
		scale512(power, values, index, share, n)
	case 1:
		scale256(power, values, index, share, n)
	default:
		plainScale(power, values, index, share, n)
	}
}

func predict(v, curve, when *float64, n int) {
	switch kernel {
	case 2:
		predict512(v, curve, when, n)
	case 1:
		predict256(v, curve, when, n)
	default:
		plainPredict(v, curve, when, n)
	}
}

func groupsSet(dst, src *float64, index *int32, coef, lanes *float64, groups int) {
	switch kernel {
	case 2:
		groupsSet512(dst, src, index, coef, lanes, groups)
	case 1:
		groupsSet256(dst, src, index, coef, lanes, groups)
	default:
		plainGroups(dst, src, index, coef, lanes, groups, false)
	}
}

func groupsAdd(dst, src *float64, index *int32, coef, lanes *float64, groups int) {
	switch kernel {
	case 2:
		groupsAdd512(dst, src, index, coef, lanes, groups)
	case 1:
		groupsAdd256(dst, src, index, coef, lanes, groups)
	default:
		plainGroups(dst, src, index, coef, lanes, groups, true)
	}
}

func drawWyeFirst(into, v, power *float64, index *int32, shape *float64, n int) uint64 {
	switch kernel {
	case 2:
		return drawWyeFirst512(into, v, power, index, shape, n)
	case 1:
		return drawWyeFirst256(into, v, power, index, shape, n)
	}
	return plainDraw(into, v, power, index, shape, n, false, false, true)
}

func drawWyeZIPFirst(into, v, power *float64, index *int32, shape *float64, n int) uint64 {
	switch kernel {
	case 2:
		return drawWyeZIPFirst512(into, v, power, index, shape, n)
	case 1:
		return drawWyeZIPFirst256(into, v, power, index, shape, n)
	}
	return plainDraw(into, v, power, index, shape, n, false, true, true)
}

func products(x *float64, index *int32, rows int) {
	switch kernel {
	case 2:
		products512(x, index, rows)
	case 1:
		products256(x, index, rows)
	default:
		plainProducts(x, index, rows)
	}
}

func pick(a, b *float64, from *uint64, n int) {
	if kernel == 2 {
		pick512(a, b, from, n)
		return
	}
	plainPick(a, b, from, n)
}

func shift(v, coef *float64, offset *int64, times *float64, directions, n int) {
	switch kernel {
	case 2:
		shift512(v, coef, offset, times, directions, n)
	case 1:
		shift256(v, coef, offset, times, directions, n)
	default:
		plainShift(v, coef, offset, times, directions, n)
	}
}

func groupsBack(v, x *float64, index *int32, coef, lanes, weight *float64, mask *uint64, moved *float64, groups int) {
	switch kernel {
	case 2:
		groupsBack512(v, x, index, coef, lanes, weight, mask, moved, groups)
	case 1:
		groupsBack256(v, x, index, coef, lanes, weight, mask, moved, groups)
	default:
		plainBack(v, x, index, coef, lanes, weight, mask, moved, groups)
	}
}

func blank(x *float64, index *int32, n int) {
	switch kernel {
	case 2:
		blank512(x, index, n)
	case 1:
		blank256(x, index, n)
	default:
		plainBlank(x, index, n)
	}
}
