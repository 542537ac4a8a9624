package bilinear

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

// What is packed is unpacked, and steps on to the same bits.
func TestUnpackedStateGoesOnAlike(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n, _ := ladder(t)
		c := compiled(t, n)
		s, other, x := c.Start(), c.Start(), make([]float64, c.States())
		y, z := make([]float64, 1), make([]float64, 1)
		for i := range 40 {
			c.StepLinear(s, []float64{0, math.Sin(float64(i))}, y)
		}
		c.Pack(x, s)
		c.Unpack(other, x)
		for i := range 40 {
			u := []float64{0, math.Cos(float64(i))}
			c.StepLinear(s, u, y)
			c.StepLinear(other, u, z)
			if y[0] != z[0] {
				t.Fatalf("step %d: %g V, unpacked %g V", i, y[0], z[0])
			}
		}
	})
}

// No state moves a node, or an amplifier's source, by more than its size while no input drives: at the next step the nodes
// are at what the histories and the sources make of them, of which the size bounds the histories' share, and every
// source is at its history where no slope moves it.
func TestSizeBoundsWhatAStateMoves(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n, _ := ladder(t)
		at := Operating{Volts: make([]float64, n.Nodes), Sources: make([]float64, n.elements())}
		watch := make([]int, n.Nodes)
		for i := range watch {
			watch[i] = i
		}
		c, err := Compile(n, at, 48000*64, watch)
		if err != nil {
			t.Fatal(err)
		}
		s, x := c.Start(), make([]float64, c.States())
		for i := range x {
			x[i] = rapid.Float64Range(-1, 1).Draw(t, "x")
			if i < c.modes {
				x[i] /= c.weight[i] // so that each matters
			}
		}
		c.Unpack(s, x)
		size, y := c.Size(x), make([]float64, n.Nodes)
		clear(s.E)
		c.advance(s, make([]float64, c.inputs), y) // the nodes with the sources at rest
		for node, v := range y {
			if !(math.Abs(v) <= size*(1+1e-12)) { // rounding
				t.Fatalf("node %d is moved by %g V, of %g V at most", node, v, size)
			}
		}
		for k, h := range x[c.modes:] {
			if !(math.Abs(h) <= size) {
				t.Fatalf("source %d is moved by %g V, of %g V at most", k, h, size)
			}
		}
	})
}

// Bounds are told from rest: an amplifier that rests at 1.2 V between 0.5 V and 3 V has −0.7 V to 1.8 V, and what it
// slews in half a step; one that rests on its limit says so.
func TestBoundsAreFromRest(t *testing.T) {
	const rate, slew = 1e6, 0.4e6
	network := func(low float64) Network {
		return Network{Nodes: 4, Drives: []int{1, 2}, Amplifiers: []Amplifier{{
			Plus: 2, Minus: 3, Out: 3, GainBandwidth: 1e6, OpenLoopGain: math.Inf(1), SlewRate: slew,
			HighRail: 1, LowRail: Ground, HighMargin: 2, LowMargin: low,
		}}}
	}
	for _, c := range []struct {
		low, e, below, above float64
		onLimit              bool
	}{{0.5, 1.2, -0.7, 1.8, false}, {1.5, 1.5, 0, 1.5, true}} {
		n := network(c.low)
		at, err := SolveRest(n, []float64{5, 1.2})
		if err != nil {
			t.Fatal(err)
		}
		closeTo(t, "rest", at.Sources[0], c.e, 1e-12)
		compiled, err := Compile(n, at, rate, nil)
		if err != nil {
			t.Fatal(err)
		}
		b := compiled.Bounds()[0]
		closeTo(t, "below", b.SourceLow, c.below, 1e-12)
		closeTo(t, "above", b.SourceHigh, c.above, 1e-12)
		closeTo(t, "slew", b.Slew, slew/rate/2, 1e-12)
		if got := compiled.RestsOnLimit(); got != c.onLimit {
			t.Errorf("with a limit at %g V: on a limit is %v", c.low, got)
		}
	}
}
