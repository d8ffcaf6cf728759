package results

import (
	"math"
	"strconv"
	"strings"
)

// The writers of figures append to a row and allocate nothing. NaN, which stands
// for "no figure here", leaves the cell empty.

// appendPU appends a voltage in p.u. with six decimals.
func appendPU(dst []byte, x float64) []byte {
	if scaled := x * 1e6; scaled >= 0 && scaled < 9_999_999 { // nearly all there are
		n := uint32(scaled)
		if scaled-float64(n) >= 0.5 {
			n++
		}
		whole := n / 1_000_000
		n -= whole * 1_000_000
		a, b := n/10_000, n/100
		c := n - b*100
		b -= a * 100
		return append(dst, byte('0'+whole), '.', tens[a], ones[a], tens[b], ones[b], tens[c], ones[c])
	}
	if math.IsNaN(x) {
		return dst
	}
	return appendFixed(dst, x, 6)
}

// The two digits of a number below a hundred.
const (
	tens = "0000000000111111111122222222223333333333444444444455555555556666666666777777777788888888889999999999"
	ones = "0123456789012345678901234567890123456789012345678901234567890123456789012345678901234567890123456789"
)

// appendFigure appends a power, a current, an energy or a share: four decimals,
// and as many more as six significant digits take. What is smaller than 1e-12
// is rounding of sums that cancel and is written as zero.
func appendFigure(dst []byte, x float64) []byte {
	if math.IsNaN(x) {
		return dst
	}
	decimals := figureDecimals(x)
	if decimals < 0 {
		return append(dst, "0.0000"...)
	}
	return appendFixed(dst, x, decimals)
}

// figureDecimals is the number of decimals of appendFigure; −1 stands for zero.
func figureDecimals(x float64) int {
	decimals, a := 4, math.Abs(x)
	if a < 1e-12 {
		return -1
	}
	for decimals < 17 && a < figureLimits[decimals-4] {
		decimals++
	}
	return decimals
}

// figureLimits are what a figure must reach to do with four decimals, with five and so on.
var figureLimits = func() (limits [13]float64) {
	limit := 10.0
	for i := range limits {
		limits[i] = limit
		limit /= 10
	}
	return limits
}()

// roundPU and roundFigure return the number that appendPU and appendFigure print, as it
// is read from the text.
func roundPU(x float64) float64 { return roundFixed(x, 6) }

func roundFigure(x float64) float64 {
	decimals := figureDecimals(x)
	if decimals < 0 {
		return 0
	}
	return roundFixed(x, decimals)
}

func roundFixed(x float64, decimals int) float64 {
	scaled := math.Round(math.Abs(x) * powersOfTen[decimals])
	switch {
	case scaled == 0:
		return 0
	case !(scaled < 1<<53):
		return x // its own nearest number with these decimals, or none
	}
	return math.Copysign(scaled/powersOfTen[decimals], x)
}

var powersOfTen = [...]float64{1, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9,
	1e10, 1e11, 1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18}

// wholePowers are the powers of ten as whole numbers, as far as digits are counted.
var wholePowers = [...]uint64{1, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9,
	1e10, 1e11, 1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18}

// appendFixed appends x with the given number of decimals. Up to 2⁵³ units of the
// last decimal it works in integers; above, and for infinities, strconv does it.
func appendFixed(dst []byte, x float64, decimals int) []byte {
	scaled := math.Abs(x) * powersOfTen[decimals]
	if !(scaled < 1<<53) {
		return strconv.AppendFloat(dst, x, 'f', decimals, 64)
	}
	n := uint64(scaled)
	if scaled-float64(n) >= 0.5 {
		if n++; n == 1<<53 {
			return strconv.AppendFloat(dst, x, 'f', decimals, 64)
		}
	}
	if x < 0 && n != 0 {
		dst = append(dst, '-')
	}
	whole := n / wholePowers[decimals]
	part := n - whole*wholePowers[decimals]
	var digits [40]byte
	i := len(digits)
	if decimals > 0 {
		for k := decimals; k >= 2; k -= 2 {
			two := part % 100
			part /= 100
			i -= 2
			digits[i], digits[i+1] = tens[two], ones[two]
		}
		if decimals&1 == 1 {
			i--
			digits[i] = ones[part]
		}
		i--
		digits[i] = '.'
	}
	for whole >= 100 {
		two := whole % 100
		whole /= 100
		i -= 2
		digits[i], digits[i+1] = tens[two], ones[two]
	}
	i--
	digits[i] = ones[whole]
	if whole >= 10 {
		i--
		digits[i] = tens[whole]
	}
	return append(dst, digits[i:]...)
}

// appendTrimmed appends x with up to nine decimals and no zeros at the end.
func appendTrimmed(dst []byte, x float64) []byte {
	if math.IsNaN(x) {
		return dst
	}
	dst = appendFixed(dst, x, 9)
	end := len(dst)
	for dst[end-1] == '0' {
		end--
	}
	if dst[end-1] == '.' {
		end--
	}
	return dst[:end]
}

// appendText appends a name, quoted where CSV wants it.
func appendText(dst []byte, s string) []byte {
	if !strings.ContainsAny(s, ",\"\r\n") && strings.TrimSpace(s) == s {
		return append(dst, s...)
	}
	dst = append(dst, '"')
	dst = append(dst, strings.ReplaceAll(s, `"`, `""`)...)
	return append(dst, '"')
}
