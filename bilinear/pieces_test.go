package bilinear

import (
	"math"
	"slices"
	"testing"

	"pgregory.net/rapid"
)

// everySolution calls found with the sources of each combination of pieces that solves the laws.
func everySolution(v *solver, laws []law, s0 []float64, found func(e []float64)) {
	choices := [...][]Piece{
		amplifierElement: {Linear, High, Low, SlewUp, SlewDown},
		capsuleElement:   {Linear, CutOff, Saturated},
		diodeElement:     {Linear, Off, On},
	}
	pieces, e := make([]Piece, len(laws)), make([]float64, len(laws))
	var try func(i int)
	try = func(i int) {
		if i < len(laws) {
			for _, p := range choices[laws[i].kind] {
				pieces[i] = p
				try(i + 1)
			}
			return
		}
		if v.linear(laws, s0, pieces, e) && !v.settle(laws, slices.Clone(pieces), e, 1) {
			found(e)
		}
	}
	try(0)
}

// drawLaws draws the laws of a few elements and what they sense.
func drawLaws(t *rapid.T, kinds ...elementKind) (laws []law, s0 []float64) {
	between := func(low, high float64, what string) float64 { return rapid.Float64Range(low, high).Draw(t, what) }
	for range rapid.IntRange(1, 3).Draw(t, "elements") {
		s0 = append(s0, between(-5, 5, "s0"))
		l := law{kind: rapid.SampledFrom(kinds).Draw(t, "kind")}
		switch l.kind {
		case amplifierElement:
			h, slew := between(-1, 1, "h"), between(0.01, 2, "slew")
			l.num, l.den, l.low, l.high, l.down, l.up = 0.1*h, 0.1, -1, 1, h-slew, h+slew
		case capsuleElement:
			l.num, l.least, l.floor = between(-1, 1, "asked"), -0.5, between(-2, 0, "floor")
		case diodeElement:
			l.forward, l.resist, l.conducts = between(0, 1, "forward"), between(0, 1, "resist"), rapid.Bool().Draw(t, "conducts")
		}
		laws = append(laws, l)
	}
	return laws, s0
}

// rounded is how far two ways to the same sources may part: rounding, and the bounds' slack of 1e-13, through
// equations that pass on up to ten times what they are given.
const rounded = 1e-10

// near tells whether two sets of sources are the same.
func near(a, b []float64) bool {
	for i := range a {
		if !(math.Abs(a[i]-b[i]) <= rounded) {
			return false
		}
	}
	return true
}

// The sources that policy iteration finds, those that following a path finds and those that trying every combination
// finds are the same. −B is diagonally dominant, as with negative feedback around each amplifier, so that there is one
// solution (R. W. Cottle, J.-S. Pang, R. E. Stone, The Linear Complementarity Problem, ch. 3: a P-matrix; from memory).
func TestAllWaysFindTheSameSources(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		laws, s0 := drawLaws(t, amplifierElement, capsuleElement, diodeElement)
		k := len(laws)
		b := make([]float64, k*k)
		for i := range k {
			for j := range k {
				b[i*k+j] = rapid.Float64Range(-0.3, 0.3).Draw(t, "b")
			}
			b[i*k+i] = -rapid.Float64Range(0.7, 1).Draw(t, "own")
		}
		v := newSolver(k, b)
		policy, path, pieces := make([]float64, k), make([]float64, k), make([]Piece, k)
		if !v.solve(laws, s0, make([]Piece, k), policy) {
			t.Fatal("no solution")
		}
		if !v.follow(laws, s0, pieces) || !v.linear(laws, s0, pieces, path) {
			t.Fatal("no path")
		}
		if !near(policy, path) {
			t.Fatalf("sources are %v, by a path %v", policy, path)
		}
		count := 0
		everySolution(&v, laws, s0, func(e []float64) {
			if count++; !near(policy, e) {
				t.Fatalf("sources are %v, of all combinations %v", policy, e)
			}
		})
		if count == 0 {
			t.Fatal("no combination is a solution")
		}
	})
}

// Whatever amplifiers of finite limits feed back, there is a solution (Brouwer's theorem: their laws take a box into
// itself), and a path to it.
func TestAPathLeadsToASolutionOfAnyNetwork(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		laws, s0 := drawLaws(t, amplifierElement)
		k := len(laws)
		b := make([]float64, k*k)
		for i := range b {
			b[i] = rapid.Float64Range(-2, 2).Draw(t, "b")
		}
		v := newSolver(k, b)
		e, pieces := make([]float64, k), make([]Piece, k)
		if !v.follow(laws, s0, pieces) || !v.linear(laws, s0, pieces, e) {
			t.Fatal("no path")
		}
		found := false
		everySolution(&v, laws, s0, func(other []float64) { found = found || near(e, other) })
		if !found {
			t.Fatalf("pieces %v, sources %v are no solution", pieces, e)
		}
	})
}
