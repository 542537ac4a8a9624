// Package spectrum estimates power spectral densities by Welch's method: the mean of the periodograms of segments that
// overlap by half, under a Hann window, each without its mean.
//
// Units: S(f), one-sided, in units²/Hz; S·Step summed over the points is the mean square. P. D. Welch, "The use of fast
// Fourier transform for the estimation of power spectra", IEEE Trans. Audio and Electroacoustics AU-15 (1967).
package spectrum

import (
	"gonum.org/v1/gonum/dsp/fourier"
	"gonum.org/v1/gonum/dsp/window"
	"gonum.org/v1/gonum/floats"
)

// Density is a one-sided power spectral density at 0, Step, 2·Step, … to half the rate.
type Density struct {
	Step   float64   // Hz
	Values []float64 // units²/Hz
}

// Welch gathers the density of a stream.
type Welch struct {
	rate     float64
	length   int
	segment  []float64
	filled   int
	plan     *fourier.FFT
	window   []float64
	windowed []float64
	spectrum []complex128
	sum      []float64
	segments int
}

// NewWelch starts an estimate for a stream at a rate in Hz from segments of the given length, which is even and has
// only small prime factors to be quick. It panics where the length is below 4 or odd.
func NewWelch(rate float64, length int) *Welch {
	if length < 4 || length%2 != 0 {
		panic("spectrum: a segment's length must be even and at least 4")
	}
	return &Welch{
		rate: rate, length: length, segment: make([]float64, length), plan: fourier.NewFFT(length),
		window: hann(length), windowed: make([]float64, length), spectrum: make([]complex128, length/2+1), sum: make([]float64, length/2+1),
	}
}

// hann returns a periodic Hann window.
func hann(length int) []float64 {
	w := make([]float64, length+1)
	for i := range w {
		w[i] = 1
	}
	return window.Hann(w)[:length]
}

// Write takes the stream's next values.
func (w *Welch) Write(x []float64) {
	for len(x) > 0 {
		n := copy(w.segment[w.filled:], x)
		w.filled += n
		x = x[n:]
		if w.filled == w.length {
			w.add(w.segment, w.window)
			w.filled = copy(w.segment, w.segment[w.length/2:])
		}
	}
}

// add adds the periodogram of a segment, which may be shorter than the others.
func (w *Welch) add(segment, window []float64) {
	mean := floats.Sum(segment) / float64(len(segment))
	for i, x := range segment {
		w.windowed[i] = (x - mean) * window[i]
	}
	clear(w.windowed[len(segment):])
	w.plan.Coefficients(w.spectrum, w.windowed)
	scale := 2 / (w.rate * floats.Dot(window, window))
	for i, c := range w.spectrum {
		p := float64(real(c)*real(c)) + float64(imag(c)*imag(c))
		if i == 0 || i == len(w.spectrum)-1 {
			p /= 2
		}
		w.sum[i] += p * scale
	}
	w.segments++
}

// Result returns the density of what was written. A stream shorter than one segment is one segment of its own length;
// otherwise what follows the last whole segment, less than half of one, does not count. An empty stream has none.
func (w *Welch) Result() Density {
	if w.segments == 0 && w.filled > 3 {
		w.add(w.segment[:w.filled], hann(w.filled))
	}
	d := Density{Step: w.rate / float64(w.length), Values: make([]float64, len(w.sum))}
	if w.segments > 0 {
		floats.ScaleTo(d.Values, 1/float64(w.segments), w.sum)
	}
	return d
}
