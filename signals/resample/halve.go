package resample

import (
	"math"

	"gonum.org/v1/gonum/floats"
)

const (
	// halveStop is how far down lies what would fold in halving, in dB: below the rounding of 16 bits.
	halveStop = 100
	// halvePass and halveEdge are the ends of the transition, in shares of the rate.
	halvePass, halveEdge = 0.21, 0.25
)

// Halve returns samples at half their rate, (len(x)+1)/2 of them, without delay: flat within 0.001 dB to 0.21 of the
// rate, and what lies above a quarter of the rate at least 100 dB down. Around the samples are zeros. It leaves x as it is.
func Halve(x []float64) []float64 {
	half := taps(halveStop, 2*math.Pi*(halveEdge-halvePass)) / 2
	kernel := make([]float64, 2*half+1)
	const cut = halvePass + halveEdge // twice the middle of the transition
	for i := range kernel {
		at := float64(i - half)
		kernel[i] = cut * sinc(cut*at) * kaiser(shape(halveStop), at/float64(half+1))
	}
	floats.Scale(1/floats.Sum(kernel), kernel)
	out := make([]float64, (len(x)+1)/2)
	for i := range out {
		from, to := max(0, 2*i-half), min(2*i+half+1, len(x))
		first := from - (2*i - half)
		out[i] = floats.Dot(kernel[first:first+to-from], x[from:to])
	}
	return out
}
