package render

import (
	"math"
	"math/cmplx"

	"midrail/chain"
	"midrail/chain/circuit"
)

// grain is the step that every layer is a multiple of: 2⁻⁴⁴ of full scale.
const grain = 1.0 / (1 << 44)

// snap rounds to a multiple of grain.
func snap(x float64) float64 { return math.RoundToEven(x/grain) * grain }

// Span is a converter's range and resolution in its own full scale.
type Span struct {
	Low, High float64 // V
	Bits      int
}

// Middle returns the voltage that is 0 in full scale.
func (s Span) Middle() float64 { return (s.Low + s.High) / 2 }

// Unit returns the volts of 1.0 in full scale: half the span.
func (s Span) Unit() float64 { return (s.High - s.Low) / 2 }

// step is one code in full scale, q = 2/2^N.
func (s Span) step() float64 { return 2 / float64(int64(1)<<s.Bits) }

// Clamp returns x held to what the codes reach: from half a step below the lowest to half a step above the highest.
func (s Span) Clamp(x float64) float64 {
	half := s.step() / 2
	return min(max(x, -1-half), 1-half)
}

// Code returns the code of x in full scale, clamp(floor((v − low)/q + ½), 0, 2^N − 1).
func (s Span) Code(x float64) int32 {
	top := float64(int64(1)<<s.Bits) - 1
	return int32(min(max(math.Floor((x+1)/s.step()+0.5), 0), top))
}

// Value returns what a code stands for in full scale.
func (s Span) Value(code int32) float64 { return float64(code)*s.step() - 1 }

// settling is how far the sampling capacitor gets in the acquisition time: y[n] = v[n] + ε·(yprev − v[n]).
type settling struct {
	short float64 // ε
	from  int     // node whose voltage the capacitor comes with: -1 its own last sample, else a node (ground too)
}

// newSettling returns how a chain's converter settles. The capacitor is charged through the chain's output
// resistance and the switch's, taken as |Z| at 1/(2π·acquisition); a pin capacitor shares its charge at once:
//
//	ε = exp(−t/((Rs+Rsw)·Cs)),    with a pin capacitor Cp    ε = Cs/(Cs+Cp) · exp(−t/(Rs·(Cs+Cp)))
func newSettling(n *circuit.Network) settling {
	c := &n.Chain.Converter
	s := settling{from: -1}
	if c.SharesWith != "" {
		s.from, _ = n.NodeOf(c.SharesWith) // "ground" is no name, so node 0
	}
	if c.SamplingCapacitor == 0 || c.Acquisition == 0 {
		return s
	}
	cs, cp := c.SamplingCapacitor, c.PinCapacitor
	z := n.At(1/(2*math.Pi*c.Acquisition)).Into(n.Output).Current(circuit.Ground, n.Output)
	rs := cmplx.Abs(1 / (1/z - complex(0, cp/c.Acquisition))) // without the pin capacitor, at ω = 1/acquisition
	if cp > 0 {
		s.short = cs / (cs + cp) * math.Exp(-c.Acquisition/(rs*(cs+cp)))
	} else {
		s.short = math.Exp(-c.Acquisition / ((rs + c.SwitchResistance) * cs))
	}
	return s
}

// settled is one layer on the sampling capacitor.
type settled struct {
	settling
	last float64
}

// sample returns what the capacitor holds of v, in the presence of the other node's voltage.
func (s *settled) sample(v, other float64) float64 {
	from := other
	if s.from < 0 {
		from = s.last
	}
	s.last = v + float64(s.short*(from-v))
	return s.last
}

// spanOf returns the converter's range at rest.
func spanOf(c *chain.Chain) Span {
	return Span{Low: c.Converter.Low, High: c.Converter.High, Bits: c.Converter.Bits}
}
