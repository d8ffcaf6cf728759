//go:build !amd64 || purego

package vector

// Kernel names the kernels in use.
func Kernel() string { return "plain" }

func rowsSet(dst, src *float64, index *int32, coef *float64, rows int) {
	plainRows(dst, src, index, coef, rows, setRow)
}

func rowsAdd(dst, src *float64, index *int32, coef *float64, rows int) {
	plainRows(dst, src, index, coef, rows, addRow)
}

func drawWye(into, v, power *float64, index *int32, shape *float64, n int) uint64 {
	return plainDraw(into, v, power, index, shape, n, false, false, false)
}

func drawPair(into, v, power *float64, index *int32, shape *float64, n int) uint64 {
	return plainDraw(into, v, power, index, shape, n, true, false, false)
}

func drawWyeZIP(into, v, power *float64, index *int32, shape *float64, n int) uint64 {
	return plainDraw(into, v, power, index, shape, n, false, true, false)
}

func drawPairZIP(into, v, power *float64, index *int32, shape *float64, n int) uint64 {
	return plainDraw(into, v, power, index, shape, n, true, true, false)
}

func advance(v, x, weight *float64, mask *uint64, moved *float64, n int) {
	plainAdvance(v, x, weight, mask, moved, n)
}

func scale(power, values *float64, index *int32, share *float64, n int) {
	plainScale(power, values, index, share, n)
}

func predict(v, curve, when *float64, n int) { plainPredict(v, curve, when, n) }

func groupsSet(dst, src *float64, index *int32, coef, lanes *float64, groups int) {
	plainGroups(dst, src, index, coef, lanes, groups, false)
}

func groupsAdd(dst, src *float64, index *int32, coef, lanes *float64, groups int) {
	plainGroups(dst, src, index, coef, lanes, groups, true)
}

func drawWyeFirst(into, v, power *float64, index *int32, shape *float64, n int) uint64 {
	return plainDraw(into, v, power, index, shape, n, false, false, true)
}

func drawWyeZIPFirst(into, v, power *float64, index *int32, shape *float64, n int) uint64 {
	return plainDraw(into, v, power, index, shape, n, false, true, true)
}

func products(x *float64, index *int32, rows int) { plainProducts(x, index, rows) }

func pick(a, b *float64, from *uint64, n int) { plainPick(a, b, from, n) }

func shift(v, coef *float64, offset *int64, times *float64, directions, n int) {
	plainShift(v, coef, offset, times, directions, n)
}

func groupsBack(v, x *float64, index *int32, coef, lanes, weight *float64, mask *uint64, moved *float64, groups int) {
	plainBack(v, x, index, coef, lanes, weight, mask, moved, groups)
}

func blank(x *float64, index *int32, n int) { plainBlank(x, index, n) }
