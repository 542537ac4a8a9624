package resample

import "math"

// LowPass returns the taps of a linear-phase low-pass, odd in number, whose pass band ends and whose stop band begins at
// the given cycles a sample, 0 < pass < stop < 0.5, with the stop band the given number of dB down, 21 or more, and a
// gain of 1 at 0 Hz:
//
//	β = 0.1102·(A − 8.7) above 50 dB, else 0.5842·(A − 21)^0.4 + 0.07886·(A − 21)
//	taps = (A − 7.95)/(2.285·Δω) + 1, rounded up
//
// (Kaiser 1974, as in Oppenheim, Schafer, Discrete-Time Signal Processing, sec. 7.5.3). Kaiser's count is short by a tap or
// two for some. It panics where the edges are not so.
func LowPass(pass, stop, attenuation float64) []float64 {
	if !(pass > 0 && stop > pass && stop < 0.5 && attenuation >= 21) {
		panic("resample: no such low-pass")
	}
	beta := shape(attenuation)
	if attenuation <= 50 {
		beta = 0.5842*math.Pow(attenuation-21, 0.4) + 0.07886*(attenuation-21)
	}
	half := int(math.Ceil((attenuation - 7.95) / (2.285 * 2 * math.Pi * (stop - pass)) / 2))
	edge := pass + stop // twice the middle of the transition, cycles a sample
	w := make([]float64, 2*half+1)
	sum := 0.
	for i := range w {
		x := float64(i - half)
		w[i] = sinc(edge*x) * besselI0(beta*math.Sqrt(1-x*x/float64(half*half)))
		sum += w[i]
	}
	for i := range w {
		w[i] /= sum
	}
	return w
}
