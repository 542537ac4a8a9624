// Package tone makes test recordings: tones, sweeps, bursts, noise, silence and the demo track. What a generator gives
// depends on its arguments alone.
//
// Levels are in dBFS: a sine of 0 dBFS has peaks at ±1.0; noise of L dBFS has an RMS of 10^(L/20)/√2.
package tone

import (
	"io"
	"math"
	"math/rand/v2"

	"midrail/signals"
)

// generator is a track of one channel whose samples come one by one.
type generator struct {
	rate   float64
	frames int64
	at     int64
	next   func(i int64) float64
}

var _ signals.Track = (*generator)(nil)

func (g *generator) Rate() float64 { return g.rate }
func (g *generator) Channels() int { return 1 }
func (g *generator) Frames() int64 { return g.frames }
func (g *generator) Close() error  { return nil }

func (g *generator) ReadFrames(dst []float64) (int, error) {
	n := int(min(int64(len(dst)), g.frames-g.at))
	for i := range n {
		dst[i] = g.next(g.at)
		g.at++
	}
	if n < len(dst) {
		return n, io.EOF
	}
	return n, nil
}

func track(rate, seconds float64, next func(i int64) float64) signals.Track {
	if !(rate > 0) || !(seconds >= 0) {
		panic("tone: rate and length must be positive")
	}
	return &generator{rate: rate, frames: int64(math.Round(rate * seconds)), next: next}
}

func amplitude(level float64) float64 { return math.Pow(10, level/20) }

// turns returns sin(2π·x).
func turns(x float64) float64 {
	_, fraction := math.Modf(x)
	return math.Sin(2 * math.Pi * fraction)
}

// Sine is a tone at hz Hz that begins at 0, rising.
func Sine(rate, seconds, hz, level float64) signals.Track {
	a := amplitude(level)
	return track(rate, seconds, func(i int64) float64 { return a * turns(float64(i)*hz/rate) })
}

// Sweep is a tone whose frequency goes from one to another in Hz, by the same ratio in the same time.
func Sweep(rate, seconds, from, to, level float64) signals.Track {
	a, k := amplitude(level), math.Log(to/from)/seconds
	return track(rate, seconds, func(i int64) float64 {
		t := float64(i) / rate
		if k == 0 {
			return a * turns(from*t)
		}
		return a * turns(from*math.Expm1(k*t)/k)
	})
}

// Burst is a tone at hz Hz in bursts: on for onSeconds at level, off for as long at 20 dB less.
func Burst(rate, seconds, hz, level, onSeconds float64) signals.Track {
	loud, soft := amplitude(level), amplitude(level-20)
	on := max(1, int64(math.Round(onSeconds*rate)))
	return track(rate, seconds, func(i int64) float64 {
		a := loud
		if i/on%2 == 1 {
			a = soft
		}
		return a * turns(float64(i)*hz/rate)
	})
}

// Silence is zeros.
func Silence(rate, seconds float64) signals.Track {
	return track(rate, seconds, func(int64) float64 { return 0 })
}

// White is Gaussian noise of the same density at every frequency.
func White(rate, seconds, level float64, seed uint64) signals.Track {
	a, draw := amplitude(level)/math.Sqrt2, rand.New(rand.NewPCG(seed, 0))
	return track(rate, seconds, func(int64) float64 { return a * draw.NormFloat64() })
}

// Pink is Gaussian noise whose density falls by 3 dB an octave from 10 Hz on: white noise through a pole at 10·4^k Hz and
// a zero at twice that for each k. Such a ladder follows 1/√f within 0.3 dB; common practice, no source.
func Pink(rate, seconds, level float64, seed uint64) signals.Track {
	p := newPinkFilter(rate)
	a, draw := amplitude(level)/math.Sqrt2/p.gain(), rand.New(rand.NewPCG(seed, 0))
	return track(rate, seconds, func(int64) float64 { return a * p.filter(draw.NormFloat64()) })
}

type pinkFilter struct{ pole, zero, x, y []float64 }

func newPinkFilter(rate float64) *pinkFilter {
	p := &pinkFilter{}
	for f := 10.; 2*f < rate/2; f *= 4 {
		p.pole = append(p.pole, math.Exp(-2*math.Pi*f/rate))
		p.zero = append(p.zero, math.Exp(-2*math.Pi*2*f/rate))
	}
	p.x, p.y = make([]float64, len(p.pole)), make([]float64, len(p.pole))
	return p
}

func (p *pinkFilter) filter(v float64) float64 {
	for i := range p.pole {
		y := v - float64(p.zero[i]*p.x[i]) + float64(p.pole[i]*p.y[i])
		p.x[i], p.y[i] = v, y
		v = y
	}
	return v
}

// gain returns the RMS that white noise of RMS 1 comes out with: the root of the impulse response's energy.
func (p *pinkFilter) gain() float64 {
	sum, v := 0., 1.
	for range 200000 {
		y := p.filter(v)
		sum += y * y
		v = 0
	}
	clear(p.x)
	clear(p.y)
	return math.Sqrt(sum)
}
