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
	if math.IsNaN(x) {
		return dst
	}
	return appendFixed(dst, x, 6)
}

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
	for limit := 10.0; a < limit && decimals < 17; limit /= 10 {
		decimals++
	}
	return decimals
}

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

// appendFixed appends x with the given number of decimals. Up to 2⁵³ units of the
// last decimal it works in integers; above, and for infinities, strconv does it.
func appendFixed(dst []byte, x float64, decimals int) []byte {
	scaled := math.Round(math.Abs(x) * powersOfTen[decimals])
	if !(scaled < 1<<53) {
		return strconv.AppendFloat(dst, x, 'f', decimals, 64)
	}
	n := uint64(scaled)
	if x < 0 && n != 0 {
		dst = append(dst, '-')
	}
	var digits [24]byte
	i := len(digits)
	for k := 0; n != 0 || k <= decimals; k++ {
		if k == decimals && decimals > 0 {
			i--
			digits[i] = '.'
		}
		i--
		digits[i] = byte('0' + n%10)
		n /= 10
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
