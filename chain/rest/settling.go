// Package rest answers what a chain does without sound: where every node rests and why, what offsets and bias currents
// move, and how long it takes to come to rest after power-up.
package rest

import (
	"math"
	"math/cmplx"

	"midrail/bilinear"
	"midrail/chain/circuit"
)

const (
	// rise is the time in s in which the supply comes up.
	rise = 1e-3
	// constants is for how many of its slowest time constants a start is followed: to 2e-9 of the step.
	constants = 20
	// steps is how many steps that takes.
	steps = 200000
	// onePercent of the rest voltage, at least of this many volts.
	onePercent, leastRest = 0.01, 0.01
)

// Settling is how long a chain's converter input takes to come to rest after power-up and stay there.
type Settling struct {
	OnePercent float64 // s, to within 1 % of its rest voltage
	LSB        float64 // s, to within one step of the converter
	Usable     float64 // s, from when on no limit is touched and a sine of 1 % of full scale finds room; +Inf: never
}

// Settle follows a chain from an unpowered board, every capacitor empty, with the supply rising in a millisecond. The
// circuit is stepped more coarsely than for sound, with its limits; what stiff time constants alternate by is averaged
// out. at is the network's rest point. The error is bilinear's, or
// tells of steps that have no solution.
func Settle(n *circuit.Network, at bilinear.Operating) (Settling, error) {
	d, u := n.Powered()
	off := bilinear.Operating{Volts: make([]float64, d.Nodes), Sources: make([]float64, len(at.Sources))}
	slowest, err := slowest(n, at)
	if err != nil {
		return Settling{}, err
	}
	duration := rise + constants*slowest
	rate := steps / duration
	c, err := n.Compile(d, off, rate, []int{n.Output})
	if err != nil {
		return Settling{}, err
	}
	rest := at.Volts[n.Output]
	lsb := (n.Chain.Converter.High - n.Chain.Converter.Low) / math.Exp2(float64(n.Chain.Converter.Bits))
	percent := onePercent * math.Max(math.Abs(rest), leastRest)
	room := roomFor(n)
	var s Settling
	state, y, now, last := c.Start(), make([]float64, 1), make([]float64, len(u)), 0.
	for i := range steps {
		t := float64(i+1) / rate
		up := math.Min(t/rise, 1)
		for j := range u {
			now[j] = u[j] * up
		}
		touched := c.Step(state, now, y)
		away := math.Abs((y[0]+last)/2 - rest)
		last = y[0]
		if up < 1 || touched || !roomy(n, state.E, room) {
			s.Usable = t
		}
		if away > percent {
			s.OnePercent = t
		}
		if away > lsb {
			s.LSB = t
		}
	}
	if state.Held > 0 {
		return Settling{}, n.Unsolved(state.Held)
	}
	if s.Usable == float64(steps)/rate {
		s.Usable = math.Inf(1)
	}
	return s, nil
}

// softly is the share of full scale that a usable chain passes.
const softly = 0.01

// roomFor returns, for each amplifier, how far a sine of 1 % of full scale at 1 kHz at every input takes its source.
func roomFor(n *circuit.Network) []float64 {
	exact := n.At(1000)
	room := make([]float64, len(n.Amplifiers))
	for i, in := range n.Inputs {
		h := exact.FromInput(circuit.SoundInput(i))
		for k, a := range n.Amplifiers {
			room[k] += softly * math.Abs(in.Scale) * cmplx.Abs(h[a.Out])
		}
	}
	return room
}

// roomy tells whether every amplifier's source, here against ground, has its room to both limits; one that rests on a
// limit never does.
func roomy(n *circuit.Network, e, room []float64) bool {
	for k, a := range n.Amplifiers {
		if e[k]+room[k] > a.High || e[k]-room[k] < a.Low {
			return false
		}
	}
	return true
}

// slowest returns the network's longest time constant in s.
func slowest(n *circuit.Network, at bilinear.Operating) (float64, error) {
	const rate = 48000
	c, err := n.Compile(n.Description(), at, rate, nil)
	if err != nil {
		return 0, err
	}
	longest := 1e-3
	for _, p := range c.Poles() {
		if decay := -real(p); decay > 0 {
			longest = math.Max(longest, 1/decay)
		}
	}
	return longest, nil
}
