package bilinear

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

// The pieces that policy iteration finds and those that trying every combination finds give the same sources. −B is
// diagonally dominant, as with negative feedback around each amplifier, so that there is one solution (R. W. Cottle,
// J.-S. Pang, R. E. Stone, The Linear Complementarity Problem, ch. 3: a P-matrix; from memory).
func TestTryingAllPiecesFindsTheSameSources(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		k := rapid.IntRange(1, 3).Draw(t, "amplifiers")
		b, s0, laws := make([]float64, k*k), make([]float64, k), make([]law, k)
		for i := range k {
			for j := range k {
				b[i*k+j] = rapid.Float64Range(-0.3, 0.3).Draw(t, "b")
			}
			b[i*k+i] = -rapid.Float64Range(0.7, 1).Draw(t, "own")
			s0[i] = rapid.Float64Range(-5, 5).Draw(t, "s0")
			h := rapid.Float64Range(-1, 1).Draw(t, "h")
			slew := rapid.Float64Range(0.01, 2).Draw(t, "slew")
			laws[i] = law{kind: amplifierElement, den: 0.1, num: 0.1 * h, low: -1, high: 1, down: h - slew, up: h + slew}
		}
		v := newSolver(k, b)
		policy, all := make([]float64, k), make([]float64, k)
		if !v.solve(laws, s0, make([]Piece, k), policy) {
			t.Fatal("no solution")
		}
		if !v.search(laws, s0, make([]Piece, k), all) {
			t.Fatal("no combination is a solution")
		}
		for i := range k {
			if !(math.Abs(policy[i]-all[i]) <= 1e-10) { // rounding, and the bounds' slack of 1e-13
				t.Fatalf("source %d: %g, of all combinations %g", i, policy[i], all[i])
			}
		}
	})
}
