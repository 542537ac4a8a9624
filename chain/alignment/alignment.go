// Package alignment holds the low-pass alignments that filters are designed to: Butterworth, Bessel, and Chebyshev with
// 0.5 dB of ripple, in second- and first-order sections.
//
// Sections are told by f0 and Q, with the filter's corner at 1: the frequency at which it is 3.01 dB below its gain at
// 0 Hz (for even Chebyshev orders this differs from 3.01 dB below the highest of its ripple).
package alignment

import (
	"fmt"
	"math"
	"math/cmplx"
	"sort"

	"gonum.org/v1/gonum/mat"
)

// Alignment is one of the alignments.
type Alignment string

// The alignments.
const (
	Butterworth Alignment = "butterworth"
	Bessel      Alignment = "bessel"
	Chebyshev   Alignment = "chebyshev" // 0.5 dB of ripple
)

// All returns the alignments.
func All() []Alignment { return []Alignment{Butterworth, Bessel, Chebyshev} }

// Highest is the highest order.
const Highest = 8

// ripple of the Chebyshev alignment in dB.
const ripple = 0.5

// Section is a section of a low-pass filter: F0 times the filter's corner, and Q; 0 is a first-order one.
type Section struct{ F0, Q float64 }

// Sections returns the sections of an alignment, the lowest Q first. It returns an error for an order below 1 or above
// [Highest], or an alignment that is none.
func Sections(a Alignment, order int) ([]Section, error) {
	if order < 1 || order > Highest {
		return nil, fmt.Errorf("order %d: 1 to %d are there", order, Highest)
	}
	var poles []complex128
	switch a {
	case Butterworth:
		poles = ellipse(order, 1, 1)
	case Chebyshev:
		// M = asinh(1/ε)/n: the poles of the circle, drawn in to an ellipse (ripple edge at 1).
		m := math.Asinh(1/math.Sqrt(math.Pow(10, ripple/10)-1)) / float64(order)
		poles = ellipse(order, math.Sinh(m), math.Cosh(m))
	case Bessel:
		poles = besselPoles(order)
	default:
		return nil, fmt.Errorf("there is no alignment %q: butterworth, bessel, chebyshev", a)
	}
	corner := halfPower(poles)
	var sections []Section
	for _, p := range poles {
		f0 := cmplx.Abs(p) / corner
		switch {
		case math.Abs(imag(p)) < 1e-9*cmplx.Abs(p):
			sections = append(sections, Section{F0: f0})
		case imag(p) > 0:
			sections = append(sections, Section{f0, -cmplx.Abs(p) / (2 * real(p))})
		}
	}
	sort.Slice(sections, func(i, j int) bool { return sections[i].Q < sections[j].Q })
	return sections, nil
}

// ellipse returns the poles at equal angles on an ellipse with the given half axes.
func ellipse(order int, across, along float64) []complex128 {
	poles := make([]complex128, order)
	for k := range poles {
		sin, cos := math.Sincos(math.Pi * float64(2*k+1) / float64(2*order))
		poles[k] = complex(-across*sin, along*cos)
	}
	return poles
}

// besselPoles returns the roots of the reverse Bessel polynomial Σ (2n−k)!/((n−k)!·k!·2^(n−k))·s^k: unit delay at 0 Hz.
func besselPoles(order int) []complex128 {
	coefficient := make([]float64, order+1) // of s^k; the highest is 1
	for k := range coefficient {
		c := 1.
		for i := order - k + 1; i <= 2*order-k; i++ {
			c *= float64(i)
		}
		for i := 2; i <= k; i++ {
			c /= float64(i)
		}
		coefficient[k] = c / math.Exp2(float64(order-k))
	}
	companion := mat.NewDense(order, order, nil)
	for i := range order {
		if i > 0 {
			companion.Set(i, i-1, 1)
		}
		companion.Set(i, order-1, -coefficient[i]/coefficient[order])
	}
	var eigen mat.Eigen
	if !eigen.Factorize(companion, mat.EigenNone) {
		panic("alignment: no roots of a polynomial")
	}
	poles := eigen.Values(nil)
	for i, p := range poles { // a step of Newton's makes the last digits good
		for range 3 {
			value, slope := complex(coefficient[order], 0), complex128(0)
			for k := order - 1; k >= 0; k-- {
				slope = slope*p + value
				value = value*p + complex(coefficient[k], 0)
			}
			p -= value / slope
		}
		poles[i] = p
	}
	return poles
}

// halfPower returns where an all-pole low-pass is 3.01 dB below its gain at 0.
func halfPower(poles []complex128) float64 {
	power := func(w float64) float64 {
		g := 1.
		for _, p := range poles {
			g *= cmplx.Abs(p) / cmplx.Abs(complex(0, w)-p)
		}
		return g * g
	}
	low, high := 0., 1.
	for power(high) > 0.5 {
		high *= 2
	}
	// Ripple may cross half power nowhere else: it is 0.5 dB.
	for range 100 {
		if mid := (low + high) / 2; power(mid) > 0.5 {
			low = mid
		} else {
			high = mid
		}
	}
	return (low + high) / 2
}

// Corner returns the frequency at which sections are 3.01 dB below their gain at 0 Hz, in the unit of their F0.
func Corner(sections []Section) float64 {
	low, high := 0., 0.
	for _, s := range sections {
		high = math.Max(high, 10*s.F0)
	}
	for range 60 {
		if mid := (low + high) / 2; cmplx.Abs(Response(sections, mid)) > math.Sqrt(0.5) {
			low = mid
		} else {
			high = mid
		}
	}
	return low
}

// Response returns the complex gain of sections with the filter's corner at 1, at f.
func Response(sections []Section, f float64) complex128 {
	h := complex(1, 0)
	for _, s := range sections {
		p := complex(0, f/s.F0)
		if s.Q == 0 {
			h /= 1 + p
		} else {
			h /= 1 + p/complex(s.Q, 0) + p*p
		}
	}
	return h
}

// Overshoot returns by which share of its final value the step response goes beyond it.
func Overshoot(sections []Section) float64 {
	// States of each section, stepped finely against the corner: 2π·f0 rad/s with the corner at 1 Hz.
	const step = 1. / 2000
	x := make([][2]float64, len(sections))
	peak := 0.
	for range 12000 {
		in := 1.
		for i, s := range sections {
			w := 2 * math.Pi * s.F0
			if s.Q == 0 {
				x[i][0] += step * w * (in - x[i][0])
			} else {
				x[i][1] += step * w * (in - x[i][0] - x[i][1]/s.Q)
				x[i][0] += step * w * x[i][1]
			}
			in = x[i][0]
		}
		peak = math.Max(peak, in)
	}
	return math.Max(peak-1, 0)
}
