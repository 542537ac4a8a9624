// Package resample takes streams to another rate by band-limited interpolation, and parts them at a frequency, with
// linear-phase filters whose delay is taken out.
//
// All filters are windowed sincs with a Kaiser window (Kaiser, "Nonrecursive digital filter design using the
// I0-sinh window function", IEEE Int. Symp. Circuits and Systems, 1974): for a stop band A dB down and a transition of Δω rad a sample,
//
//	β = 0.1102·(A − 8.7),    taps ≈ (A − 8)/(2.285·Δω) + 1
package resample

import "math"

// Stop bands lie at least so many dB down. What interpolation leaves, images and slips of the pass band of all its
// stages, adds up to less than −120 dB of a tone.
const (
	interpolatorStop = 136
	halfBandStop     = 134
	splitStop        = 126
)

// shape returns β for a stop band so many dB down.
func shape(stop float64) float64 { return 0.1102 * (stop - 8.7) }

// taps returns the number of taps of a filter with a transition of Δω rad a sample.
func taps(stop, transition float64) int { return int(math.Ceil((stop-8)/(2.285*transition))) + 1 }

// kaiser returns the Kaiser window at x from −1 to 1, but for a factor that is the same for all x.
func kaiser(beta, x float64) float64 {
	if x <= -1 || x >= 1 {
		return 0
	}
	return besselI0(beta * math.Sqrt(1-x*x))
}

// besselI0 is the modified Bessel function of the first kind and order 0, by its power series.
func besselI0(x float64) float64 {
	quarter := x * x / 4
	sum, term := 1., 1.
	for k := 1.; term > sum*1e-17; k++ {
		term *= quarter / (k * k)
		sum += term
	}
	return sum
}

// sinc is sin(πx)/(πx), exactly 0 at whole numbers but 0.
func sinc(x float64) float64 {
	if x == 0 {
		return 1
	}
	if x == math.Trunc(x) {
		return 0
	}
	return math.Sin(math.Pi*x) / (math.Pi * x)
}
