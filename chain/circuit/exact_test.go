package circuit

import (
	"math"
	"math/cmplx"
	"math/rand/v2"
	"testing"
)

// solveTolerance is rounding in a dense solve of a dozen unknowns.
const solveTolerance = 1e-11

func TestFactoredMatrixSolvesAndSolvesTransposed(t *testing.T) {
	draw := rand.New(rand.NewPCG(1, 2))
	for size := 1; size <= 12; size++ {
		m := newMatrix(size)
		for i := range m.a {
			m.a[i] = complex(draw.NormFloat64(), draw.NormFloat64())
		}
		original := append([]complex128(nil), m.a...)
		var f lu
		if !f.factor(m) {
			t.Fatalf("size %d: regular matrix called singular", size)
		}
		b := make([]complex128, size)
		for i := range b {
			b[i] = complex(draw.NormFloat64(), draw.NormFloat64())
		}
		x, xt := append([]complex128(nil), b...), append([]complex128(nil), b...)
		f.solve(x)
		f.solveTransposed(xt)
		for i := range size {
			sum, sumT := -b[i], -b[i]
			for j := range size {
				sum += original[i*size+j] * x[j]
				sumT += original[j*size+i] * xt[j]
			}
			if !(cmplx.Abs(sum) < solveTolerance) || !(cmplx.Abs(sumT) < solveTolerance) {
				t.Errorf("size %d, row %d: residuals %g and %g", size, i, cmplx.Abs(sum), cmplx.Abs(sumT))
			}
		}
	}
}

func TestSingularMatrixIsTold(t *testing.T) {
	m := newMatrix(2)
	m.add(0, 0, 1)
	m.add(1, 0, 2)
	var f lu
	if f.factor(m) {
		t.Error("a matrix with an empty column was factored")
	}
	if math.IsNaN(size1(cmplx.NaN())) != true {
		t.Error("size1 hides NaN")
	}
}
