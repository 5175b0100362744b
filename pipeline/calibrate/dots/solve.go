package dots

import "math"

// inverse returns the inverse of a symmetric positive definite matrix by Gauss–Jordan
// elimination with pivoting; false where it has none.
func inverse(a [][]float64) ([][]float64, bool) {
	n := len(a)
	m := make([][]float64, n)
	for i := range m {
		m[i] = make([]float64, 2*n)
		copy(m[i], a[i])
		m[i][n+i] = 1
	}
	for col := range n {
		pivot := col
		for row := col + 1; row < n; row++ {
			if math.Abs(m[row][col]) > math.Abs(m[pivot][col]) {
				pivot = row
			}
		}
		m[col], m[pivot] = m[pivot], m[col]
		p := m[col][col]
		if !(math.Abs(p) > 1e-300) {
			return nil, false
		}
		for k := range m[col] {
			m[col][k] /= p
		}
		for row := range n {
			if f := m[row][col]; row != col && f != 0 {
				for k := range m[row] {
					m[row][k] -= f * m[col][k]
				}
			}
		}
	}
	for i := range m {
		m[i] = m[i][n:]
	}
	return m, true
}
