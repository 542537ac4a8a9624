package bilinear

import (
	"math"
	"math/cmplx"
)

// Biquad is a transfer function of second order or less in z:
//
//	H(z) = (B0 + B1·z⁻¹ + B2·z⁻²)/(1 + A1·z⁻¹ + A2·z⁻²)
type Biquad struct{ B0, B1, B2, A1, A2 float64 }

// BiquadState is what a [Biquad] remembers between two samples; the zero value is silence.
type BiquadState struct{ s1, s2 float64 }

// Step filters one sample (transposed direct form II).
func (q *Biquad) Step(s *BiquadState, x float64) float64 {
	y := math.FMA(q.B0, x, s.s1)
	s.s1 = math.FMA(q.B1, x, math.FMA(-q.A1, y, s.s2))
	s.s2 = math.FMA(q.B2, x, -float64(q.A2*y))
	return y
}

// Response returns H at f Hz for samples at a rate in Hz.
func (q *Biquad) Response(f, rate float64) complex128 {
	z := cmplx.Exp(complex(0, -2*math.Pi*f/rate))
	return (complex(q.B0, 0) + z*(complex(q.B1, 0)+z*complex(q.B2, 0))) / (1 + z*(complex(q.A1, 0)+z*complex(q.A2, 0)))
}

// Warped returns the analogue frequency whose response the bilinear transform puts at f, for samples at a rate, both
// in Hz: (rate/π)·tan(π·f/rate).
func Warped(f, rate float64) float64 { return rate / math.Pi * math.Tan(math.Pi*f/rate) }

// Transform returns the biquad of the analogue
//
//	H(s) = (b[0]·s² + b[1]·s + b[2]) / (a[0]·s² + a[1]·s + a[2])
//
// with s in rad/s, by s = c·(z−1)/(z+1). c is 2·rate; where match is above 0, it is the one with which the two responses
// are the same at match Hz (prewarping): 2π·match/tan(π·match/rate). For a first-order function b[0] and a[0] are 0. It
// panics where a is all zeros at s = c.
func Transform(b, a [3]float64, rate, match float64) Biquad {
	c := 2 * rate
	if match > 0 {
		c = 2 * math.Pi * match / math.Tan(math.Pi*match/rate)
	}
	if a[0] == 0 && b[0] == 0 { // keep a first-order function first order
		d := a[1]*c + a[2]
		if d == 0 {
			panic("bilinear: a pole where the transform has its own")
		}
		return Biquad{B0: (b[1]*c + b[2]) / d, B1: (b[2] - b[1]*c) / d, A1: (a[2] - a[1]*c) / d}
	}
	d := (a[0]*c+a[1])*c + a[2]
	if d == 0 {
		panic("bilinear: a pole where the transform has its own")
	}
	return Biquad{
		B0: ((b[0]*c+b[1])*c + b[2]) / d, B1: 2 * (b[2] - b[0]*c*c) / d, B2: ((b[0]*c-b[1])*c + b[2]) / d,
		A1: 2 * (a[2] - a[0]*c*c) / d, A2: ((a[0]*c-a[1])*c + a[2]) / d,
	}
}

// LowPass returns the second-order low-pass ω0²/(s² + s·ω0/q + ω0²), prewarped at f0 Hz.
func LowPass(f0, q, rate float64) Biquad {
	w := 2 * math.Pi * f0
	return Transform([3]float64{0, 0, w * w}, [3]float64{1, w / q, w * w}, rate, f0)
}

// ButterworthLowPass returns a Butterworth low-pass of the order with its −3 dB point at the corner in Hz, as a
// cascade of biquads, the lowest Q first. It panics where the order is below 1 or the corner not below half the rate.
func ButterworthLowPass(order int, corner, rate float64) []Biquad {
	if order < 1 || !(corner > 0 && corner < rate/2) {
		panic("bilinear: a low-pass needs an order and a corner below half the rate")
	}
	var cascade []Biquad
	if order%2 == 1 {
		w := 2 * math.Pi * corner
		cascade = append(cascade, Transform([3]float64{0, 0, w}, [3]float64{0, 1, w}, rate, corner))
	}
	for k := order / 2; k >= 1; k-- {
		q := 1 / (2 * math.Sin(math.Pi*float64(2*k-1)/float64(2*order)))
		cascade = append(cascade, LowPass(corner, q, rate))
	}
	return cascade
}
