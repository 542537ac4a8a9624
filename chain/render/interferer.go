package render

import (
	"math"
	"math/cmplx"
	"math/rand/v2"

	"gonum.org/v1/gonum/floats"

	"midrail/bilinear"
	"midrail/chain/circuit"
	"midrail/signals/resample"
)

// interferer is one part of the interferers on its way into one input of the network.
type interferer struct {
	part   part
	from   part    // as of a lane
	input  int     // of the network's u
	scale  float64 // volts or amperes of u for one unit of the interferer
	fine   bool    // made at the internal rate
	signal generator
	stairs stairs // what is made of in place of signal: at the internal rate too, but constant over long stretches
}

// generator adds its signal at the steps first, first+1, … of the internal rate to dst.
type generator interface {
	add(dst []float64, first int64)
}

// stairs is a signal at the internal rate that rarely changes.
type stairs interface {
	// over sets t to the steps first, first+1, … of a block of n.
	over(t *stair, first int64, n int)
}

// generators are several at once.
type generators []generator

func (all generators) add(dst []float64, first int64) {
	for _, g := range all {
		g.add(dst, first)
	}
}

// newInterferers prepares the chain's interferers, parted at half the converter's rate, with noise drawn from the seed.
// Tones that the tracks could hold too are made at the base rate, everything else at the internal rate.
func newInterferers(n *circuit.Network, plan Plan, seed uint64) []*interferer {
	c := n.Chain
	half := c.Converter.Rate / 2
	var all []*interferer
	for i, x := range c.Interferers {
		one := interferer{input: circuit.SupplyInput, scale: 1}
		for k := range c.Inputs {
			if in := &c.Inputs[k]; in.Name == x.Into {
				one.input = circuit.SoundInput(k)
				one.scale = n.Inputs[k].Scale / (in.FullScale * math.Sqrt2)
			}
		}
		add := func(p, from part, fine bool, g generator) {
			if g == nil {
				return
			}
			for _, other := range all { // that go the same way
				if other.stairs == nil && other.part == p && other.from == from && other.input == one.input && other.fine == fine {
					other.signal = append(other.signal.(generators), g)
					return
				}
			}
			all = append(all, &interferer{part: p, from: from, input: one.input, scale: one.scale, fine: fine, signal: generators{g}})
		}
		tone := func(f, level float64) (g generator, fine bool) {
			if f <= baseTone*plan.To {
				return sine{level: level, cycles: f / plan.baseRate()}, false
			}
			return sine{level: level, cycles: f / plan.Rate}, true
		}
		switch x.Shape {
		case "square":
			// Its harmonics below half the converter's rate are put where they belong and taken from the rest.
			all = append(all, &interferer{part: outOfBandPart, input: one.input, scale: one.scale, stairs: square{level: x.Level, cycles: x.Frequency / plan.Rate}})
			for k := 1; float64(k)*x.Frequency < half; k += 2 {
				g, fine := tone(float64(k)*x.Frequency, 4/math.Pi/float64(k)*x.Level)
				add(inBandPart, outOfBandPart, fine, g)
			}
		case "saw":
			// Rising, from −1 at half a period; its harmonics alternate: 2/π·Σ (−1)^(k+1)/k·sin.
			add(outOfBandPart, none, true, saw{level: x.Level, cycles: x.Frequency / plan.Rate})
			for k := 1; float64(k)*x.Frequency < half; k++ {
				level := 2 / math.Pi / float64(k) * x.Level
				if k%2 == 0 {
					level = -level
				}
				g, fine := tone(float64(k)*x.Frequency, level)
				add(inBandPart, outOfBandPart, fine, g)
			}
		case "noise":
			low, high := math.Max(x.Frequency-x.Bandwidth/2, 0), x.Frequency+x.Bandwidth/2
			if x.Frequency == 0 {
				low, high = 0, x.Bandwidth
			}
			// The two parts are independent, as bands of white noise are.
			for stream, b := range [...]struct {
				part     part
				from, to float64
			}{{inBandPart, low, math.Min(high, half)}, {outOfBandPart, math.Max(low, half), high}} {
				if b.from < b.to {
					level := x.Level * math.Sqrt((b.to-b.from)/(high-low))
					g, fine := noiseBand(b.from, b.to, level, plan, rand.New(rand.NewPCG(seed, 2*uint64(i)+uint64(stream))))
					add(b.part, none, fine, g)
				}
			}
		default:
			g, fine := tone(x.Frequency, x.Level)
			p := inBandPart
			if x.Frequency >= half {
				p = outOfBandPart
			}
			add(p, none, fine, g)
		}
	}
	return all
}

// baseTone is how much of the tracks' band half-band filters pass flat.
const baseTone = 0.92

// sine is a tone that is 0 and rising at step 0.
type sine struct {
	level  float64
	cycles float64 // a step
}

// stretch is how many steps a tone is turned on from one exact value, on a grid of its own.
const stretch = 64

func (s sine) add(dst []float64, first int64) {
	turn := cmplx.Rect(1, 2*math.Pi*s.cycles)
	var now complex128
	for at := first &^ (stretch - 1); at < first+int64(len(dst)); at++ {
		if at%stretch == 0 {
			_, phase := math.Modf(s.cycles * float64(at))
			now = cmplx.Rect(s.level, 2*math.Pi*phase)
		}
		if at >= first {
			dst[at-first] += imag(now)
		}
		now *= turn
	}
}

// square is a square wave that steps up at step 0, its edges smoothed over two steps so that harmonics above half
// the internal rate do not come back.
type square struct {
	level  float64
	cycles float64
}

// at returns the value at a step.
func (s square) at(step int64) float64 {
	_, phase := math.Modf(s.cycles * float64(step))
	if phase < 0 {
		phase++
	}
	v := 1.
	if phase >= 0.5 {
		v = -1
	}
	_, opposite := math.Modf(phase + 0.5)
	return s.level * (v + edge(phase, s.cycles) - edge(opposite, s.cycles))
}

func (s square) over(t *stair, first int64, n int) {
	before := s.at(first)
	t.from, t.changes = before, t.changes[:0]
	// Edges are 1/(2·cycles) steps apart, and nothing changes but from the step before one to the second after it.
	half := 0.5 / s.cycles
	next := 1 // step of the block
	for k := math.Floor(float64(first) / half); ; k++ {
		at := int64(math.Floor(k*half)) - first
		if at-1 >= int64(n) {
			return
		}
		for ; int64(next) <= at+2 && next < n; next++ {
			if int64(next) < at-1 {
				next = int(at - 1)
			}
			if v := s.at(first + int64(next)); v != before {
				t.changes = append(t.changes, change{next, v - before})
				before = v
			}
		}
	}
}

// stair is a signal over a block: a value at its first step, and by how much it changes at others, in their order.
type stair struct {
	from    float64
	changes []change
}

type change struct {
	step int
	by   float64
}

// at returns the value at a step of the block.
func (t *stair) at(step int) float64 {
	v := t.from
	for _, c := range t.changes {
		if c.step <= step {
			v += c.by
		}
	}
	return v
}

// flat tells whether the value is the same from a step of the block to before another.
func (t *stair) flat(from, to int) bool {
	for _, c := range t.changes {
		if c.step > from && c.step < to {
			return false
		}
	}
	return true
}

// addTo adds the values from a step on to dst.
func (t *stair) addTo(dst []float64, from int) {
	v := t.at(from)
	next := 0
	for next < len(t.changes) && t.changes[next].step <= from {
		next++
	}
	for i := range dst {
		for ; next < len(t.changes) && t.changes[next].step == from+i; next++ {
			v += t.changes[next].by
		}
		dst[i] += v
	}
}

// most returns the largest magnitude.
func (t *stair) most() float64 {
	v := t.from
	most := math.Abs(v)
	for _, c := range t.changes {
		v += c.by
		most = math.Max(most, math.Abs(v))
	}
	return most
}

// scaleBy multiplies the signal.
func (t *stair) scaleBy(by float64) {
	t.from *= by
	for i := range t.changes {
		t.changes[i].by *= by
	}
}

// saw is a rising saw that is 0 at step 0, its fall smoothed over two steps.
type saw struct {
	level  float64
	cycles float64
}

func (s saw) add(dst []float64, first int64) {
	for i := range dst {
		_, phase := math.Modf(s.cycles*float64(first+int64(i)) + 0.5)
		if phase < 0 {
			phase++
		}
		dst[i] += s.level * (2*phase - 1 - edge(phase, s.cycles))
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

// noiseBand returns a band of noise and whether it is made at the internal rate: at the base rate where the tracks could
// hold it too, else at as low a rate as gives its highest frequency its steps, and interpolated.
func noiseBand(from, to, level float64, plan Plan, draw *rand.Rand) (g generator, fine bool) {
	if to <= baseTone*plan.To {
		return newBand(from, to, level, plan.baseRate(), draw), false
	}
	halvings := 0
	for math.Ldexp(plan.Rate, -halvings-1) >= perInterferer*to {
		halvings++
	}
	b := newBand(from, to, level, math.Ldexp(plan.Rate, -halvings), draw)
	if halvings == 0 {
		return b, true
	}
	return &interpolatedBand{band: b, halvings: halvings, rate: plan.Rate}, true
}

// interpolatedBand is a band made at a fraction of a rate and interpolated. Its steps are asked for in their order.
type interpolatedBand struct {
	*band
	halvings int
	rate     float64
	in       *resample.Interpolator
	block    []float64
}

func (b *interpolatedBand) add(dst []float64, first int64) {
	if b.in == nil {
		const top = 0.25 // of its own rate, far beyond the band
		own := first >> b.halvings
		b.in = resample.New(&bandStream{b.band, own}, math.Ldexp(b.rate, -b.halvings), b.rate, top, own, first, 0)
	}
	b.block = append(b.block[:0], make([]float64, len(dst))...)
	if err := readAll(b.in, b.block); err != nil {
		panic("render: noise does not end")
	}
	floats.Add(dst, b.block)
}

// bandStream is a band without end.
type bandStream struct {
	band *band
	next int64
}

func (s *bandStream) Read(dst []float64) (int, error) {
	clear(dst)
	s.band.add(dst, s.next)
	s.next += int64(len(dst))
	return len(dst), nil
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
