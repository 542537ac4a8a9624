package render

import (
	"math"
	"math/rand/v2"

	"gonum.org/v1/gonum/dsp/fourier"
)

// colouredNoise draws Gaussian noise with a given spectrum: white noise through the linear-phase filter whose
// response is its square root, by overlap-add on a grid of its own. One transform takes two blocks, as its real and its
// imaginary part.
type colouredNoise struct {
	draw     *rand.Rand
	response []complex128 // of the filter at the transform's points
	work     []complex128
	overlap  []float64 // tail of the last block
	block    []float64 // finished samples, those from next on not yet given
	next     int
}

// newColouredNoise takes the one-sided density in units²/Hz at equal steps from 0 to half the rate, both included. There
// must be one more than a power of two, of 2 or more, of them.
func newColouredNoise(density []float64, rate float64, draw *rand.Rand) *colouredNoise {
	taps := 2 * (len(density) - 1)
	size := 4
	for size < 2*taps {
		size *= 4
	}
	// White samples of power 1 have density 2/rate.
	design := fourier.NewFFT(taps)
	half := make([]complex128, len(density))
	for i, d := range density {
		half[i] = complex(math.Sqrt(d*rate/2), 0)
	}
	impulse := design.Sequence(nil, half)
	fresh := size - taps // samples of white noise in a block
	c := &colouredNoise{
		draw: draw, response: make([]complex128, size), work: make([]complex128, size),
		overlap: make([]float64, taps), block: make([]float64, 2*fresh),
	}
	scale := 1 / (float64(taps) * float64(size)) // the transforms there and back multiply by their lengths
	for i, v := range impulse {
		c.response[(i+taps/2)%taps] = complex(v*scale, 0)
	}
	fourier.CoefficientsRadix4(c.response)
	c.refill()
	c.next = taps // the first lack what came before them
	return c
}

func (c *colouredNoise) refill() {
	fresh := len(c.block) / 2
	for i := range c.block {
		c.block[i] = c.draw.NormFloat64()
	}
	for i := range fresh {
		c.work[i] = complex(c.block[i], c.block[fresh+i])
	}
	clear(c.work[fresh:])
	fourier.CoefficientsRadix4(c.work)
	for i, r := range c.response {
		c.work[i] *= r
	}
	fourier.SequenceRadix4(c.work)
	for i, z := range c.work[:fresh] {
		c.block[i], c.block[fresh+i] = real(z), imag(z)
	}
	for i, z := range c.work[fresh:] { // tails
		c.block[i] += c.overlap[i]
		c.block[fresh+i] += real(z)
		c.overlap[i] = imag(z)
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
