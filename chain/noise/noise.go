// Package noise adds up every noise source of a chain at its converter, folding included.
//
// Symbols and units: S(f), one-sided power spectral density in V²/Hz at the converter's input; fc, the converter's
// rate in Hz; k, Boltzmann's constant; T in K.
//
//	resistor:   4kT/R in A²/Hz across it
//	amplifier:  en²·(1 + fe/f) in V²/Hz at its (+) input, in²·(1 + fi/f) in A²/Hz at each input
//	capsule:    white sound pressure whose A-weighted level from 20 Hz to 20 kHz is the stated self-noise
//	converter:  what its effective bits say beyond rounding, or kT/C of its sampling capacitor
//
// Each goes through the exact network. Sampling folds all of it into the band:
//
//	Sfold(f) = S(f) + Σ S(k·fc − f) + S(k·fc + f),   k = 1, 2, …,   0 ≤ f ≤ fc/2
//
// summed to where it has died, or to a hundred times the amplifiers' gain-bandwidth where a flat floor is left.
// Nothing is counted below the chain's lowest noise frequency.
package noise

import (
	"math"
	"math/cmplx"
	"sort"

	"midrail/chain"
	"midrail/chain/circuit"
	"midrail/signals/level"
)

// Boltzmann is Boltzmann's constant in J/K, exact in the SI of 2019.
const Boltzmann = 1.380649e-23

const (
	perDecade = 100 // points of the frequency grid; a resonance of Q 10 is wider than three of them
	compared  = 25  // as many where budgets are only compared
	// beyond is how many times the widest amplifier's gain-bandwidth the grid reaches at the most: no real circuit
	// keeps a flat floor further than its parts' own strays let it.
	beyond = 100
	// highest is where the grid ends, in Hz, for amplifiers without limit.
	highest = 1e9
	// died is the share of the power that the spectrum beyond the grid may still hold, taken as 1/f².
	died = 1e-6
	// bins of the folded spectrum from 0 to half the converter's rate.
	bins = 4096
	// explicit is how many images of the converter's rate are folded one by one; what lies beyond is smooth over
	// one rate, and its mean is added.
	explicit = 16
)

// Kind tells the kinds of source apart.
type Kind string

// The kinds of source.
const (
	Thermal   Kind = "thermal"
	Voltage   Kind = "amplifier voltage"
	Current   Kind = "amplifier current"
	Capsule   Kind = "capsule"
	Converter Kind = "converter"
	Supply    Kind = "supply"
)

// Source is one source of noise as the converter sees it.
type Source struct {
	Name    string
	Kind    Kind
	Power   float64   // V², all of it, folding included
	Density []float64 // V²/Hz at Budget.Frequencies, before folding; nil for the converter's own noise
}

// Budget is all the noise of a chain at its converter's input.
type Budget struct {
	Frequencies []float64 // Hz, a logarithmic grid from the chain's lowest noise frequency
	Density     []float64 // V²/Hz at Frequencies, all sources of the circuit, before folding
	Sources     []Source  // the largest first
	Power       float64   // V², all sources
	Folded      []float64 // V²/Hz, all sources, at i·Step
	Step        float64   // Hz, between the points of Folded; the last is at half the converter's rate
	Highest     float64   // Hz, up to which the spectrum was followed
}

// At computes the noise budget of a network.
func At(n *circuit.Network) *Budget {
	c := n.Chain
	b := unfolded(n, perDecade)
	b.fold(c.Converter.Rate)
	for _, s := range converterSources(c) {
		for i := range b.Folded {
			b.Folded[i] += s.Power / (c.Converter.Rate / 2)
		}
	}
	sort.SliceStable(b.Sources, func(i, j int) bool { return b.Sources[i].Power > b.Sources[j].Power })
	return b
}

// unfolded computes the budget but for the folded spectrum, its sources in no order, from so many points a decade.
func unfolded(n *circuit.Network, points float64) *Budget {
	c := n.Chain
	b := &Budget{}
	sources := circuitSources(n)
	b.Sources = make([]Source, len(sources))
	for i, s := range sources {
		b.Sources[i] = Source{Name: s.name, Kind: s.kind}
	}
	ratio := math.Pow(10, 1/points)
	widest := 0.
	for _, a := range n.Amplifiers {
		widest = math.Max(widest, a.Model.GainBandwidth)
	}
	top := math.Min(highest, math.Max(beyond*widest, 1000*c.Converter.Rate))
	f, power := c.Conditions.NoiseFrom, 0.
	for i := 0; ; i++ {
		into := n.At(f).Into(n.Output)
		total := 0.
		for j, s := range sources {
			d := s.density(f, into)
			b.Sources[j].Density = append(b.Sources[j].Density, d)
			total += d
		}
		b.Frequencies = append(b.Frequencies, f)
		b.Density = append(b.Density, total)
		if i > 0 {
			power += area(b.Frequencies[i-1], f, b.Density[i-1], total)
		}
		if f >= top || f > 2*c.Converter.Rate && f > 1e6 && total*f <= died*power {
			break
		}
		f = c.Conditions.NoiseFrom * math.Pow(ratio, float64(i+1))
	}
	for i := range b.Sources {
		b.Sources[i].Power = integral(b.Frequencies, b.Sources[i].Density)
	}
	b.Highest = b.Frequencies[len(b.Frequencies)-1]
	b.Sources = append(b.Sources, converterSources(c)...)
	for _, s := range b.Sources {
		b.Power += s.Power
	}
	return b
}

// source is a source within the circuit and the density it makes at the converter.
type source struct {
	name    string
	kind    Kind
	density func(f float64, into circuit.Into) float64 // V²/Hz
}

func circuitSources(n *circuit.Network) []source {
	var list []source
	kT := 4 * Boltzmann * n.Chain.Conditions.Temperature
	for _, r := range n.Resistors {
		if r.Virtual {
			continue
		}
		list = append(list, source{r.Part.Name, Thermal, func(_ float64, into circuit.Into) float64 {
			return kT / r.Part.Value * power(into.Current(r.A, r.B))
		}})
	}
	for k, a := range n.Amplifiers {
		m := a.Model
		if m.NoiseVoltage > 0 {
			list = append(list, source{a.Name, Voltage, func(f float64, into circuit.Into) float64 {
				return m.NoiseVoltage * m.NoiseVoltage * (1 + m.NoiseVoltageCorner/f) * power(into.AmplifierInput(k))
			}})
		}
		if m.NoiseCurrent > 0 {
			list = append(list, source{a.Name, Current, func(f float64, into circuit.Into) float64 {
				both := power(into.Current(circuit.Ground, a.Plus)) + power(into.Current(circuit.Ground, a.Minus))
				return m.NoiseCurrent * m.NoiseCurrent * (1 + m.NoiseCurrentCorner/f) * both
			}})
		}
	}
	if v := n.Chain.Supply.Noise; v > 0 {
		list = append(list, source{"supply", Supply, func(_ float64, into circuit.Into) float64 {
			return v * v * power(into.Input(circuit.SupplyInput))
		}})
	}
	for i := range n.Chain.Inputs {
		in := &n.Chain.Inputs[i]
		if in.SelfNoise == 0 {
			continue
		}
		perPascal := n.Inputs[i].Scale / (in.FullScale * math.Sqrt2)
		density := in.SelfNoise * in.SelfNoise / weightedBand()
		list = append(list, source{in.Name, Capsule, func(_ float64, into circuit.Into) float64 {
			return density * perPascal * perPascal * power(into.Input(circuit.SoundInput(i)))
		}})
	}
	return list
}

// converterSources returns the converter's own noise, white over its band: what its effective bits leave beyond
// the rounding of an ideal converter, span²/(12·4^ENOB) − q²/12; or, where they are not given, kT/C of the
// sampling capacitor.
func converterSources(c *chain.Chain) []Source {
	cv := &c.Converter
	span := cv.High - cv.Low
	if cv.ENOB > 0 {
		v := span * span / 12 * (math.Exp2(-2*cv.ENOB) - math.Exp2(-2*float64(cv.Bits)))
		return []Source{{Name: "converter", Kind: Converter, Power: math.Max(v, 0)}}
	}
	if cv.SamplingCapacitor > 0 {
		return []Source{{Name: "converter.sampling_capacitor", Kind: Thermal, Power: Boltzmann * c.Conditions.Temperature / cv.SamplingCapacitor}}
	}
	return nil
}

// weightedBand returns ∫|A(f)|²df from 20 Hz to 20 kHz in Hz, A being the A-weighting of IEC 61672-1.
func weightedBand() float64 {
	var f, a []float64
	for x := 0; x <= 3*perDecade; x++ {
		at := 20 * math.Pow(10, float64(x)/perDecade)
		f = append(f, at)
		a = append(a, math.Pow(10, level.AWeighting(at)/10))
	}
	return integral(f, a)
}

func power(h complex128) float64 { a := cmplx.Abs(h); return a * a }

// area is the integral of a density between two frequencies, as a power law between its two values.
func area(f1, f2, s1, s2 float64) float64 {
	if s1 <= 0 || s2 <= 0 {
		return (s1 + s2) / 2 * (f2 - f1)
	}
	p := math.Log(s2/s1)/math.Log(f2/f1) + 1
	if math.Abs(p) < 1e-9 {
		return s1 * f1 * math.Log(f2/f1)
	}
	return s1 * f1 * math.Expm1(p*math.Log(f2/f1)) / p
}

func integral(f, s []float64) float64 {
	sum := 0.
	for i := 1; i < len(f); i++ {
		sum += area(f[i-1], f[i], s[i-1], s[i])
	}
	return sum
}

// curve is a budget's density as a power law between the points of its grid: straight lines of logarithms.
type curve struct {
	first, last float64 // Hz
	logs        []float64
	end         float64 // V²/Hz at last
}

func (b *Budget) curve() curve {
	c := curve{first: b.Frequencies[0], last: b.Highest, end: b.Density[len(b.Density)-1]}
	for _, d := range b.Density {
		c.logs = append(c.logs, math.Log(d)) // −Inf where nothing is
	}
	return c
}

// at returns the density at f: 0 below the grid, beyond it falling as 1/f².
func (c *curve) at(f float64) float64 {
	switch {
	case f < c.first:
		return 0
	case f >= c.last:
		r := c.last / f
		return c.end * r * r
	}
	x := math.Log(f/c.first) * (perDecade / math.Ln10)
	i := min(int(x), len(c.logs)-2)
	from, to := c.logs[i], c.logs[i+1]
	if math.IsInf(from, -1) || math.IsInf(to, -1) {
		return 0
	}
	return math.Exp(from + (x-float64(i))*(to-from))
}

// fold sets the folded spectrum of the circuit's sources.
func (b *Budget) fold(rate float64) {
	b.Step = rate / 2 / bins
	b.Folded = make([]float64, bins+1)
	density := b.curve()
	for i := range b.Folded {
		f := float64(i) * b.Step
		sum := density.at(f)
		for k := 1; k <= explicit; k++ {
			sum += density.at(float64(k)*rate-f) + density.at(float64(k)*rate+f)
		}
		b.Folded[i] = sum
	}
	// Beyond: from (explicit + ½)·rate on, two images a rate.
	from := (explicit + 0.5) * rate
	rest := 0.
	for i := 1; i < len(b.Frequencies); i++ {
		if f1, f2 := b.Frequencies[i-1], b.Frequencies[i]; f2 > from {
			lo := math.Max(f1, from)
			rest += area(lo, f2, density.at(lo), b.Density[i])
		}
	}
	for i := range b.Folded {
		b.Folded[i] += rest * 2 / rate
	}
}
