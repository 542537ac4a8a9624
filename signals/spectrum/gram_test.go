package spectrum

import (
	"math"
	"testing"

	"midrail/signals"
)

// gramTolerance is how far a windowed tone's power may lie from its mean square, relative: of the segment's few periods
// some fall under the window's flanks.
const gramTolerance = 1e-3

// A tone that begins midway is in the later columns alone, at its frequency, with its power a²/2.
func TestGramOfATone(t *testing.T) {
	const rate, n, length, columns, amplitude = 8000., 16000, 256, 40, 0.5
	tone := func() *signals.Samples {
		x := make(signals.Samples, n)
		for i := n / 2; i < n; i++ {
			x[i] = amplitude * math.Sin(2*math.Pi*1000*float64(i)/rate)
		}
		return &x
	}
	gram, err := Gram(tone(), rate, n, length, columns)
	if err != nil || len(gram) != columns {
		t.Fatalf("%d columns, %v", len(gram), err)
	}
	for c, column := range gram {
		if len(column) != length/2+1 {
			t.Fatalf("column %d has %d points", c, len(column))
		}
		power, loudest := 0., 0
		for i, d := range column {
			power += d * rate / length
			if d > column[loudest] {
				loudest = i
			}
		}
		switch {
		case c < columns/2-1 && power != 0:
			t.Errorf("column %d, before the tone: %g", c, power)
		case c > columns/2 && (loudest != 32 || !(math.Abs(power/(amplitude*amplitude/2)-1) <= gramTolerance)):
			t.Errorf("column %d: power %g at point %d", c, power, loudest)
		}
	}
}

// What there is too little of for one segment still has its one column.
func TestGramOfLittle(t *testing.T) {
	for _, n := range []int{0, 1, 255, 256, 257} {
		x := make(signals.Samples, n)
		gram, err := Gram(&x, 8000, int64(n), 256, 40)
		if err != nil || len(gram) != 1 && len(gram) != 2 {
			t.Errorf("%d values: %d columns, %v", n, len(gram), err)
		}
	}
}
