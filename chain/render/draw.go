package render

import (
	"math"
	"math/rand/v2"

	"gonum.org/v1/gonum/dsp/fourier"
)

// colouredNoise draws Gaussian noise with a given spectrum: white noise through the linear-phase filter whose
// response is its square root, by overlap-add on a grid of its own.
type colouredNoise struct {
	draw     *rand.Rand
	plan     *fourier.FFT
	response []complex128 // of the filter at the transform's points
	white    []float64
	spectrum []complex128
	overlap  []float64 // tail of the last block
	block    []float64 // finished samples, those from next on not yet given
	next     int
}

// newColouredNoise takes the one-sided density in units²/Hz at equal steps from 0 to half the rate, both included.
func newColouredNoise(density []float64, rate float64, draw *rand.Rand) *colouredNoise {
	taps := 2 * (len(density) - 1)
	// White samples of power 1 have density 2/rate.
	design := fourier.NewFFT(taps)
	half := make([]complex128, len(density))
	for i, d := range density {
		half[i] = complex(math.Sqrt(d*rate/2), 0)
	}
	impulse := design.Sequence(nil, half)
	c := &colouredNoise{
		draw: draw, plan: fourier.NewFFT(2 * taps), white: make([]float64, 2*taps),
		overlap: make([]float64, taps), block: make([]float64, taps), next: taps,
	}
	centred := make([]float64, 2*taps)
	for i, v := range impulse {
		centred[(i+taps/2)%taps] = v / float64(taps)
	}
	c.response = c.plan.Coefficients(nil, centred)
	c.refill() // and leave it: it lacks what came before it
	c.next = taps
	return c
}

func (c *colouredNoise) refill() {
	taps := len(c.block)
	for i := range taps {
		c.white[i] = c.draw.NormFloat64()
	}
	clear(c.white[taps:])
	c.spectrum = c.plan.Coefficients(c.spectrum, c.white)
	for i, r := range c.response {
		c.spectrum[i] *= r
	}
	y := c.plan.Sequence(c.white, c.spectrum)
	scale := 1 / float64(2*taps)
	for i := range taps {
		c.block[i] = float64(y[i]*scale) + c.overlap[i]
		c.overlap[i] = y[taps+i] * scale
	}
	c.next = 0
}

// one returns the next sample.
func (c *colouredNoise) one() float64 {
	if c.next == len(c.block) {
		c.refill()
	}
	v := c.block[c.next]
	c.next++
	return v
}
