package resample

import (
	"math"
	"math/cmplx"
	"slices"
	"testing"
)

// Kaiser's formula aims at a stop band: what is reached may be short of it by as much, in dB (Kaiser gives 0.1 to 0.5 dB for
// his formula; the count of taps is rounded up).
const kaiserShort = 0.5

func TestLowPassStopsAndPasses(t *testing.T) {
	for _, c := range []struct{ pass, stop, down float64 }{{0.1, 0.15, 40}, {0.125, 0.2, 56}, {0.05, 0.07, 80}, {0.2, 0.3, 110}, {0.02, 0.3, 30}, {0.0625, 0.0833, 66}} {
		w := LowPass(c.pass, c.stop, c.down)
		gain := func(f float64) float64 {
			h := complex(0, 0)
			for i, x := range w {
				h += complex(x, 0) * cmplx.Exp(complex(0, -2*math.Pi*f*float64(i)))
			}
			return cmplx.Abs(h)
		}
		ripple := math.Pow(10, -(c.down-kaiserShort)/20)
		for k := range 1001 {
			f := 0.5 * float64(k) / 1000
			if g := gain(f); f <= c.pass && !(math.Abs(g-1) <= 2*ripple) || f >= c.stop && !(g <= ripple) {
				t.Errorf("%+v, %d taps: gain %.6f at %.4f", c, len(w), g, f)
			}
		}
		reversed := slices.Clone(w)
		slices.Reverse(reversed)
		for i := range w {
			if !(math.Abs(w[i]-reversed[i]) <= 1e-15) {
				t.Fatalf("tap %d of %d is not that of the other side", i, len(w))
			}
		}
	}
}
