package render

import (
	"math"
	"math/rand/v2"

	"midrail/bilinear"
	"midrail/chain"
	"midrail/chain/circuit"
)

// interference makes the interferers of a chain at the internal rate, apart for what lies below half the
// converter's rate and what folds.
type interference struct {
	sources []*interferer
}

// interferer is one interferer on its way into one input of the network.
type interferer struct {
	input  int     // of the network's u
	scale  float64 // volts or amperes of u for one unit of the interferer
	inBand generator
	folded generator
}

// generator adds its signal at the steps first, first+1, … of the internal rate to dst.
type generator interface {
	add(dst []float64, first int64)
}

// newInterference prepares the chain's interferers, with noise drawn from the seed.
func newInterference(n *circuit.Network, rate float64, seed uint64) *interference {
	c := n.Chain
	half := c.Converter.Rate / 2
	all := &interference{}
	for i, x := range c.Interferers {
		one := &interferer{input: circuit.SupplyInput, scale: 1}
		for k := range c.Inputs {
			if in := &c.Inputs[k]; in.Name == x.Into {
				one.input = circuit.SoundInput(k)
				one.scale = n.Inputs[k].Scale / (in.FullScale * math.Sqrt2)
			}
		}
		switch x.Shape {
		case "square":
			one.inBand, one.folded = splitSquare(x, rate, half)
		case "noise":
			one.inBand, one.folded = splitNoise(x, rate, half, seed, uint64(i))
		default:
			tone := sine{level: x.Level, cycles: x.Frequency / rate}
			if x.Frequency < half {
				one.inBand = tone
			} else {
				one.folded = tone
			}
		}
		all.sources = append(all.sources, one)
	}
	return all
}

// sine is a tone that is 0 and rising at step 0.
type sine struct {
	level  float64
	cycles float64 // a step
}

func (s sine) add(dst []float64, first int64) {
	for i := range dst {
		_, phase := math.Modf(s.cycles * float64(first+int64(i)))
		dst[i] += s.level * math.Sin(2*math.Pi*phase)
	}
}

// sum is several generators at once.
type sum []generator

func (s sum) add(dst []float64, first int64) {
	for _, g := range s {
		g.add(dst, first)
	}
}

// square is a square wave that steps up at step 0, its edges smoothed over two steps so that harmonics above half
// the internal rate do not come back.
type square struct {
	level  float64
	cycles float64
}

func (s square) add(dst []float64, first int64) {
	for i := range dst {
		_, phase := math.Modf(s.cycles * float64(first+int64(i)))
		if phase < 0 {
			phase++
		}
		v := 1.
		if phase >= 0.5 {
			v = -1
		}
		_, opposite := math.Modf(phase + 0.5)
		v += edge(phase, s.cycles) - edge(opposite, s.cycles)
		dst[i] += s.level * v
	}
}

// edge is what a unit-slope edge spread over two steps adds to a jump from −1 to 1 at phase 0.
func edge(phase, cycles float64) float64 {
	switch {
	case phase < cycles:
		x := phase/cycles - 1
		return -x * x
	case phase > 1-cycles:
		x := (phase-1)/cycles + 1
		return x * x
	}
	return 0
}

// splitSquare parts a square wave into its harmonics below half the converter's rate and the rest.
func splitSquare(x chain.Interferer, rate, half float64) (inBand, folded generator) {
	var low, high sum
	for k := 1; float64(k)*x.Frequency < half; k += 2 {
		level := 4 / math.Pi / float64(k) * x.Level
		low = append(low, sine{level: level, cycles: float64(k) * x.Frequency / rate})
		high = append(high, sine{level: -level, cycles: float64(k) * x.Frequency / rate})
	}
	return low, append(high, square{level: x.Level, cycles: x.Frequency / rate})
}

// splitNoise parts a band of noise at half the converter's rate; the two parts are independent, as bands of
// white noise are.
func splitNoise(x chain.Interferer, rate, half float64, seed, index uint64) (inBand, folded generator) {
	low, high := math.Max(x.Frequency-x.Bandwidth/2, 0), x.Frequency+x.Bandwidth/2
	if x.Frequency == 0 {
		low, high = 0, x.Bandwidth
	}
	band := func(from, to float64, stream uint64) generator {
		if from >= to {
			return nil
		}
		level := x.Level * math.Sqrt((to-from)/(high-low))
		return newBand(from, to, level, rate, rand.New(rand.NewPCG(seed, 2*index+stream)))
	}
	return band(low, math.Min(high, half), 0), band(math.Max(low, half), high, 1)
}

// band is Gaussian noise between two frequencies: low-pass noise, where the band does not start at 0 in phase and
// in quadrature on a carrier in its middle.
type band struct {
	draw     *rand.Rand
	gain     float64
	carrier  float64 // cycles a step; 0: none
	lowPass  []bilinear.Biquad
	states   [2][]bilinear.BiquadState
	quadrate bool
}

const bandOrder = 8

func newBand(from, to, level, rate float64, draw *rand.Rand) *band {
	b := &band{draw: draw}
	corner := to
	if from > 0 {
		corner, b.carrier, b.quadrate = (to-from)/2, (from+to)/2/rate, true
	}
	b.lowPass = bilinear.ButterworthLowPass(bandOrder, corner, rate)
	for i := range b.states {
		b.states[i] = make([]bilinear.BiquadState, len(b.lowPass))
	}
	b.gain = level / math.Sqrt(b.energy(rate/corner))
	return b
}

// energy returns the energy of the low-pass's impulse response, which is the power it lets through of white noise
// of power 1; period is a corner's period in steps.
func (b *band) energy(period float64) float64 {
	state := make([]bilinear.BiquadState, len(b.lowPass))
	sum, x := 0., 1.
	for range int(64*period) + 64 {
		y := b.filter(state, x)
		sum += y * y
		x = 0
	}
	return sum
}

func (b *band) filter(state []bilinear.BiquadState, x float64) float64 {
	for i := range b.lowPass {
		x = b.lowPass[i].Step(&state[i], x)
	}
	return x
}

func (b *band) add(dst []float64, first int64) {
	for i := range dst {
		v := b.filter(b.states[0], b.draw.NormFloat64())
		if b.quadrate {
			_, phase := math.Modf(b.carrier * float64(first+int64(i)))
			q := b.filter(b.states[1], b.draw.NormFloat64())
			sin, cos := math.Sincos(2 * math.Pi * phase)
			v = float64(v*cos) + float64(q*sin)
		}
		dst[i] += b.gain * v
	}
}
