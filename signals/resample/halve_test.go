package resample

import (
	"math"
	"testing"
)

// What halving promises: its pass band's ripple as a share, and how far down the stop band lies.
const (
	halveFlat = 1.2e-4 // 0.001 dB
	halveDown = 1e-5   // 100 dB
)

func TestHalve(t *testing.T) {
	const n = 4001
	for _, f := range []float64{0, 0.001, 0.05, 0.1, 0.2, 0.21, 0.25, 0.26, 0.3, 0.4, 0.5} {
		x := make([]float64, n)
		for i := range x {
			x[i] = math.Cos(2 * math.Pi * f * float64(i))
		}
		y := Halve(x)
		if len(y) != (n+1)/2 {
			t.Fatalf("%d values of %d", len(y), n)
		}
		for i := 200; i < len(y)-200; i++ { // where the filter sees nothing of the ends
			want, tolerance := x[2*i], halveFlat
			if f >= 0.25 {
				want, tolerance = 0, halveDown
			}
			if !(math.Abs(y[i]-want) <= tolerance) {
				t.Errorf("at %g of the rate, value %d: %g, want %g", f, i, y[i], want)
				break
			}
		}
	}
	if y := Halve(nil); len(y) != 0 {
		t.Errorf("nothing halved is %v", y)
	}
}
