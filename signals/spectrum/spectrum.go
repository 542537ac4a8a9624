// Package spectrum estimates power spectral densities by Welch's method: the mean of the periodograms of segments that
// overlap by half, under a Hann window, each without its mean.
//
// Units: S(f), one-sided, in units²/Hz; S·Step summed over the points is the mean square without DC. For a segment x of
// n values at rate fs, with the window w:
//
//	S(k·fs/n) = 2·|Σ w[i]·(x[i] − mean)·exp(−2πj·ik/n)|² / (fs·Σ w²),    half of that at 0 and fs/2
//
// P. D. Welch, "The use of fast Fourier transform for the estimation of power spectra", IEEE Trans. Audio and
// Electroacoustics AU-15 (1967).
package spectrum

import (
	"math/bits"
	"slices"

	"gonum.org/v1/gonum/dsp/fourier"
	"gonum.org/v1/gonum/dsp/window"
	"gonum.org/v1/gonum/floats"
)

// shortest is the least number of values that have a spectrum.
const shortest = 4

// Density is a one-sided power spectral density at 0, Step, 2·Step, … to half the rate.
type Density struct {
	Step   float64   // Hz
	Values []float64 // units²/Hz
}

// Welch gathers the density of a stream.
type Welch struct {
	rate   float64
	half   int // half a segment
	window []float64
	// values holds four halves of segments: the first is kept for the last segment alone, the others make two
	// segments, which one transform takes at once.
	values []float64
	filled int
	n      int64 // values written
	tally  tally
}

// tally is a sum of periodograms.
type tally struct {
	work     []complex128
	power    []float64 // Σ|X|², twice that but for the first and the last
	segments int
}

// Length returns the least length of segments, for a rate in Hz, whose points are not more than resolution Hz apart.
func Length(rate, resolution float64) int {
	length := shortest
	for rate/float64(length) > resolution {
		length *= 4
	}
	return length
}

// NewWelch starts an estimate for a stream at a rate in Hz from segments of the given length. It panics where the
// length is not a power of four, 4 or more.
func NewWelch(rate float64, length int) *Welch {
	check(length)
	half := length / 2
	return &Welch{
		rate: rate, half: half, window: hann(length), values: make([]float64, 4*half), filled: half,
		tally: tally{work: make([]complex128, length), power: make([]float64, half+1)},
	}
}

// check panics where no segment can have the length.
func check(length int) {
	if length < shortest || bits.OnesCount(uint(length)) != 1 || bits.TrailingZeros(uint(length))%2 != 0 {
		panic("spectrum: a segment's length must be a power of four")
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

// Write takes the stream's next values. How the stream is cut into blocks changes nothing.
func (w *Welch) Write(x []float64) {
	w.n += int64(len(x))
	for len(x) > 0 {
		n := copy(w.values[w.filled:], x)
		w.filled += n
		x = x[n:]
		if w.filled == len(w.values) {
			w.tally.add(w.values[w.half:3*w.half], w.values[2*w.half:], w.window)
			w.filled = copy(w.values, w.values[2*w.half:])
		}
	}
}

// add adds the periodograms of two segments, as the real and the imaginary part of one transform:
// |Z(k)|² + |Z(−k)|² = 2·|A(k)|² + 2·|B(k)|². b may be nil; all segments of a tally are of the same length.
func (t *tally) add(a, b, window []float64) {
	t.segments++
	if b == nil {
		b = make([]float64, len(a))
	} else {
		t.segments++
	}
	if constant(a) && constant(b) {
		return
	}
	meanA, meanB := floats.Sum(a)/float64(len(a)), floats.Sum(b)/float64(len(b))
	for i, w := range window {
		t.work[i] = complex((a[i]-meanA)*w, (b[i]-meanB)*w)
	}
	z := fourier.CoefficientsRadix4(t.work)
	last := len(t.power) - 1
	t.power[0] += square(z[0])
	t.power[last] += square(z[last])
	for k := 1; k < last; k++ {
		t.power[k] += square(z[k]) + square(z[len(z)-k])
	}
}

func constant(x []float64) bool {
	for _, v := range x {
		if v != x[0] {
			return false
		}
	}
	return true
}

func square(z complex128) float64 { return float64(real(z)*real(z)) + float64(imag(z)*imag(z)) }

// Result returns the density of what was written so far; more may follow. The last segment ends with the last value
// and overlaps the one before it by more than half, unless the stream's length fits. A stream shorter than one segment
// is one segment of its own length; one of less than four values has no density.
func (w *Welch) Result() Density {
	t := tally{work: make([]complex128, 2*w.half), power: slices.Clone(w.tally.power), segments: w.tally.segments}
	win := w.window
	h, end := w.half, w.filled
	switch {
	case w.n < shortest:
	case w.n < int64(2*h):
		win = hann(int(w.n))
		t.add(w.values[h:end], nil, win)
	case end > 3*h:
		t.add(w.values[h:3*h], w.values[end-2*h:end], win)
	case end > 2*h:
		t.add(w.values[end-2*h:end], nil, win)
	}
	d := Density{Step: w.rate / float64(2*h), Values: t.power}
	if t.segments > 0 {
		floats.Scale(1/(w.rate*floats.Dot(win, win)*float64(t.segments)), d.Values)
	}
	return d
}
