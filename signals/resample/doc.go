// Package resample takes streams to another rate by band-limited interpolation, and parts them at a frequency, with
// linear-phase filters whose delay is taken out.
//
// All filters are windowed sincs with a Kaiser window (Kaiser, "Nonrecursive digital filter design using the
// I0-sinh window function", IEEE Int. Symp. Circuits and Systems, 1974): for a stop band A dB down and a transition of Δω rad a sample,
//
//	β = 0.1102·(A − 8.7),    taps ≈ (A − 8)/(2.285·Δω) + 1
package resample

import "math"

// stopBand is how far down the stop bands of all filters lie at least, in dB, with a little to spare over 120.
const stopBand = 126

// kaiser returns the Kaiser window at x from −1 to 1.
func kaiser(x float64) float64 {
	const beta = 0.1102 * (stopBand - 8.7)
	if x <= -1 || x >= 1 {
		return 0
	}
	return besselI0(beta*math.Sqrt(1-x*x)) / besselI0(beta)
}

// besselI0 is the modified Bessel function of the first kind and order 0, by its power series.
func besselI0(x float64) float64 {
	sum, term := 1., 1.
	for k := 1.; term > sum*1e-17; k++ {
		term *= x / (2 * k) * x / (2 * k)
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

// taps returns the number of taps of a filter with a transition of Δω rad a sample.
func taps(transition float64) int { return int(math.Ceil((stopBand-8)/(2.285*transition))) + 1 }
