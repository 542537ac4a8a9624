package circuit

import "math"

// matrix is a square complex matrix in row order.
type matrix struct {
	size int
	a    []complex128
}

func newMatrix(size int) matrix { return matrix{size: size, a: make([]complex128, size*size)} }

func (m matrix) add(i, j int, v complex128) { m.a[i*m.size+j] += v }

func (m matrix) row(i int) []complex128 { return m.a[i*m.size : (i+1)*m.size] }

func (m matrix) clearRow(i int) { clear(m.row(i)) }

// lu is a matrix factored with row pivoting, P·A = L·U, each row's pivot told against the row's largest entry, so that
// rows of siemens and rows of volts are alike. gonum has no complex solve.
type lu struct {
	matrix
	pivot []int // row of A that stands in row i
}

// factor takes the matrix over and reports whether it is regular.
func (f *lu) factor(m matrix) bool {
	n := m.size
	f.matrix, f.pivot = m, make([]int, n)
	largest := make([]float64, n)
	for i := range f.pivot {
		f.pivot[i] = i
		for _, v := range m.row(i) {
			largest[i] = max(largest[i], size1(v))
		}
	}
	for k := range n {
		best, at := 0.0, -1
		for i := k; i < n; i++ {
			if v := size1(m.a[i*n+k]) / largest[i]; v > best {
				best, at = v, i
			}
		}
		if at < 0 {
			return false
		}
		if at != k {
			f.pivot[k], f.pivot[at] = f.pivot[at], f.pivot[k]
			largest[k], largest[at] = largest[at], largest[k]
			top, other := m.row(k), m.row(at)
			for j := range top {
				top[j], other[j] = other[j], top[j]
			}
		}
		top := m.row(k)
		inverse := 1 / top[k]
		for i := k + 1; i < n; i++ {
			row := m.row(i)
			if row[k] == 0 {
				continue
			}
			factor := row[k] * inverse
			row[k] = factor
			for j := k + 1; j < n; j++ {
				row[j] -= factor * top[j]
			}
		}
	}
	return true
}

// size1 is |Re| + |Im|, a magnitude good enough to pick pivots by; NaN counts as 0.
func size1(v complex128) float64 { return math.Abs(real(v)) + math.Abs(imag(v)) }

// solve puts the solution x of A·x = b in b.
func (f *lu) solve(b []complex128) {
	n := f.size
	x := make([]complex128, n)
	for i := range n {
		sum := b[f.pivot[i]]
		row := f.row(i)
		for j := range i {
			sum -= row[j] * x[j]
		}
		x[i] = sum
	}
	for i := n - 1; i >= 0; i-- {
		row := f.row(i)
		sum := x[i]
		for j := i + 1; j < n; j++ {
			sum -= row[j] * x[j]
		}
		x[i] = sum / row[i]
	}
	copy(b, x)
}

// solveTransposed puts the solution x of Aᵀ·x = b in b.
func (f *lu) solveTransposed(b []complex128) {
	n := f.size
	x := make([]complex128, n)
	copy(x, b)
	for i := range n { // Uᵀ·w = b
		for j := range i {
			x[i] -= f.a[j*n+i] * x[j]
		}
		x[i] /= f.a[i*n+i]
	}
	for i := n - 1; i >= 0; i-- { // Lᵀ·y = w
		for j := i + 1; j < n; j++ {
			x[i] -= f.a[j*n+i] * x[j]
		}
	}
	for i, p := range f.pivot {
		b[p] = x[i]
	}
}
