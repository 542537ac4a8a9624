package noise

import (
	"math"
	"math/cmplx"

	"midrail/chain"
	"midrail/chain/amplifier"
	"midrail/chain/circuit"
	"midrail/signals/level"
)

// Figures are a budget in the units that people compare.
type Figures struct {
	Volts      float64 // V RMS at the converter's input
	DBFS, A    float64 // dBFS of the converter, plain and A-weighted
	LSB        float64 // RMS in steps of the converter
	UsefulBits float64 // (SINAD − 1.76)/6.02 of a full-scale sine against noise and rounding
	Inputs     []Equivalent
}

// Equivalent is the noise that an input would need to have to make all of it.
type Equivalent struct {
	Input string
	Value float64 // A-weighted against the gain at 1 kHz
	Unit  string  // "dB SPL(A)" or "dBu(A)"
}

// hearingVolts are the units that equivalent input noise is told in: 0 dB SPL in Pa and 0 dBu in V.
const (
	zeroSPL = 20e-6
	zeroDBu = 0.7745966692414834
)

// Figures returns the budget's figures for its network.
func (b *Budget) Figures(n *circuit.Network) Figures {
	c := &n.Chain.Converter
	unit := (c.High - c.Low) / 2
	f := Figures{Volts: math.Sqrt(b.Power)}
	f.DBFS = level.DBFS(f.Volts / unit)
	weighted := b.weighted()
	f.A = level.DBFS(math.Sqrt(weighted) / unit)
	step := 2 * unit / math.Exp2(float64(c.Bits))
	f.LSB = f.Volts / step
	sinad := 10 * math.Log10(unit*unit/2/(b.Power+step*step/12))
	f.UsefulBits = (sinad - 10*math.Log10(1.5)) / (20 * math.Log10(2))
	into := n.At(1000).Into(n.Output)
	for i := range n.Inputs {
		in := &n.Chain.Inputs[i]
		gain, zero, name := cmplx.Abs(into.Input(circuit.SoundInput(i))), zeroDBu, "dBu(A)"
		if in.Kind != chain.Line {
			gain *= math.Abs(n.Inputs[i].Scale) / (in.FullScale * math.Sqrt2)
			zero, name = zeroSPL, "dB SPL(A)"
		}
		f.Inputs = append(f.Inputs, Equivalent{in.Name, 20 * math.Log10(math.Sqrt(weighted)/gain/zero), name})
	}
	return f
}

// weighted returns the A-weighted power in V² of the folded spectrum.
func (b *Budget) weighted() float64 {
	sum := 0.
	for i := 1; i < len(b.Folded); i++ {
		width := b.Step
		if i == len(b.Folded)-1 {
			width /= 2
		}
		sum += b.Folded[i] * width * math.Pow(10, level.AWeighting(float64(i)*b.Step)/10)
	}
	return sum
}

// Change is one change to a chain and what it would do to its noise.
type Change struct {
	Words string
	Gain  float64 // dB less noise
}

// lower is the factor by which impedances are tried.
const lower = 3

// Best tries one change at a time - each stage with its resistors a third and its capacitors three times as large,
// which keeps its response; each amplifier entry with the noise of another class; a converter of two more bits - and
// returns the one that takes off most noise, rounding included, against the gain of the inputs at 1 kHz: what only makes
// everything quieter helps nothing. Its gain is 0 where none helps.
func Best(n *circuit.Network) Change {
	before := againstGain(n)
	best := Change{Words: "nothing that was tried helps"}
	try := func(with *circuit.Network, words string) {
		if gain := before - againstGain(with); gain > best.Gain {
			best = Change{words, gain}
		}
	}
	for i := range n.Chain.Stages {
		s := &n.Chain.Stages[i]
		if with, ok := scaled(n, s); ok {
			try(with, "the resistors of "+s.Name+" a third and its capacitors three times as large, which keeps its response")
		}
	}
	for i := range n.Chain.Amplifiers {
		entry := &n.Chain.Amplifiers[i]
		for _, class := range amplifier.Classes() {
			m, _ := amplifier.Class(class)
			if class == "ideal" || class == entry.Model.Class {
				continue
			}
			try(n.WithNoiseOf(entry.Name, m), "for "+entry.Name+" an amplifier with the noise of the class "+class)
		}
	}
	finer, c := *n, *n.Chain
	c.Converter.Bits += 2
	if c.Converter.ENOB > 0 {
		c.Converter.ENOB += 2
	}
	finer.Chain = &c
	try(&finer, "a converter of two more bits")
	return best
}

// againstGain returns noise and rounding in dB of V², less the mean gain in dB of the inputs at 1 kHz.
func againstGain(n *circuit.Network) float64 {
	c := &n.Chain.Converter
	step := (c.High - c.Low) / math.Exp2(float64(c.Bits))
	db := 10 * math.Log10(unfolded(n, compared).Power+step*step/12)
	into := n.At(1000).Into(n.Output)
	for i := range n.Inputs {
		db -= circuit.Gain(into.Input(circuit.SoundInput(i))) / float64(len(n.Inputs))
	}
	return db
}

// scaled returns the network with a stage's impedances a third of what they are.
func scaled(n *circuit.Network, s *chain.Stage) (*circuit.Network, bool) {
	with, any := n, false
	change := func(p chain.Part) {
		value := p.Value / lower
		if p.Unit == chain.Farad {
			value = p.Value * lower
		}
		if next, ok := with.With(p.Name, value); ok {
			with, any = next, true
		}
	}
	for _, p := range s.Parts {
		change(p)
	}
	for _, l := range s.Legs {
		change(l.R)
		if l.C != nil {
			change(*l.C)
		}
	}
	return with, any
}
