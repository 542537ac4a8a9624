// Package rest answers what a chain does without sound: how long it takes to come to rest after power-up.
package rest

import (
	"math"

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
}

// Settle follows a chain from an unpowered board, every capacitor empty, with the supply rising in a millisecond. The
// circuit is stepped more coarsely than for sound, with its limits; what stiff time constants alternate by is averaged
// out. at is the network's rest point. The error is bilinear's.
func Settle(n *circuit.Network, at bilinear.Operating) (Settling, error) {
	d, u := n.Powered()
	off := bilinear.Operating{Volts: make([]float64, d.Nodes), Sources: make([]float64, len(at.Sources))}
	slowest, err := slowest(n, at)
	if err != nil {
		return Settling{}, err
	}
	duration := rise + constants*slowest
	rate := steps / duration
	c, err := bilinear.Compile(d, off, rate, []int{n.Output})
	if err != nil {
		return Settling{}, err
	}
	rest := at.Volts[n.Output]
	lsb := (n.Chain.Converter.High - n.Chain.Converter.Low) / math.Exp2(float64(n.Chain.Converter.Bits))
	percent := onePercent * math.Max(math.Abs(rest), leastRest)
	var s Settling
	state, y, now, last := c.Start(), make([]float64, 1), make([]float64, len(u)), 0.
	for i := range steps {
		t := float64(i+1) / rate
		up := math.Min(t/rise, 1)
		for j := range u {
			now[j] = u[j] * up
		}
		c.Step(state, now, y)
		away := math.Abs((y[0]+last)/2 - rest)
		last = y[0]
		if away > percent {
			s.OnePercent = t
		}
		if away > lsb {
			s.LSB = t
		}
	}
	return s, nil
}

// slowest returns the network's longest time constant in s.
func slowest(n *circuit.Network, at bilinear.Operating) (float64, error) {
	const rate = 48000
	c, err := bilinear.Compile(n.Description(), at, rate, nil)
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
