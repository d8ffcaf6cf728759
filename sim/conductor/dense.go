package conductor

import (
	"errors"
	"math"
)

// square returns an n×n matrix of zeros.
func square[T float64 | complex128](n int) [][]T {
	m := make([][]T, n)
	for i := range m {
		m[i] = make([]T, n)
	}
	return m
}

// kron returns the first n rows and columns of m after the others, which carry no
// voltage, are eliminated (G. Kron, Tensor Analysis of Networks, 1939):
//
//	m_ij − m_in·m_nj/m_nn
//
// for one conductor after the other. m must be symmetric, is overwritten, and stays
// symmetric to the bit. No pivoting: the real part of an impedance matrix and a
// matrix of potential coefficients are positive definite, and so are what is left.
func kron[T float64 | complex128](m [][]T, n int) [][]T {
	for last := len(m) - 1; last >= n; last-- {
		for i := 0; i < last; i++ {
			for j := 0; j <= i; j++ {
				m[i][j] -= m[i][last] * m[last][j] / m[last][last]
			}
		}
		for i := 0; i < last; i++ {
			for j := 0; j < i; j++ {
				m[j][i] = m[i][j]
			}
		}
		m = m[:last]
	}
	return m
}

var errSingular = errors.New("the matrix is singular")

// inverse returns the inverse of the leading n×n block of m by Gauss-Jordan
// elimination with row pivoting.
func inverse(m [3][3]complex128, n int) ([3][3]complex128, error) {
	var inv [3][3]complex128
	scale := 0.0
	for i := range n {
		inv[i][i] = 1
		for j := range n {
			scale = max(scale, abs1(m[i][j]))
		}
	}
	for c := range n {
		p := c
		for r := c + 1; r < n; r++ {
			if abs1(m[r][c]) > abs1(m[p][c]) {
				p = r
			}
		}
		if !(abs1(m[p][c]) > 1e-14*scale) {
			return [3][3]complex128{}, errSingular
		}
		m[c], m[p] = m[p], m[c]
		inv[c], inv[p] = inv[p], inv[c]
		f := 1 / m[c][c]
		for j := range n {
			m[c][j] *= f
			inv[c][j] *= f
		}
		for r := range n {
			if f := m[r][c]; r != c && f != 0 {
				for j := range n {
					m[r][j] -= f * m[c][j]
					inv[r][j] -= f * inv[c][j]
				}
			}
		}
	}
	return inv, nil
}

// abs1 is a cheap magnitude: |re| + |im|.
func abs1(z complex128) float64 { return math.Abs(real(z)) + math.Abs(imag(z)) }
