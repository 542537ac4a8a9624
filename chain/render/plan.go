package render

import (
	"math"
	"math/cmplx"

	"midrail/bilinear"
	"midrail/chain/circuit"
)

// Plan is how finely a run steps the circuit: from the tracks' rate sound is interpolated to a base rate, a multiple of
// the converter's at least twice the tracks' rate, and from there by doublings to the internal rate.
type Plan struct {
	// Instants is how many instants of the run there are for each conversion, the last of which is the conversion's: one,
	// or as many as keep a stretch between two short where the converter is much slower than the tracks.
	Instants     int
	Base         int     // base samples for each instant
	Doublings    int     // internal rate = base rate·2^Doublings
	Rate         float64 // Hz, the internal rate
	LargestError float64 // dB, the largest difference between stepped and exact response up to To
	To           float64 // Hz, the highest frequency that the tracks hold
}

// Steps returns the internal steps for each instant.
func (p Plan) Steps() int { return p.Base << p.Doublings }

// baseRate returns the base rate in Hz.
func (p Plan) baseRate() float64 { return p.Rate / float64(int64(1)<<p.Doublings) }

const (
	// accuracy is the largest error of the stepped response that a run accepts, in dB.
	accuracy = 0.002
	// leastRate is the lowest internal rate in Hz: there a chain of bipolar amplifiers that run into their rails is exact to
	// −115 dB of swing at 1 kHz, −105 dB at 3 kHz and −99 dB at 9 kHz; one that slews through half of each period to −96 dB
	// at 3 kHz and −75 dB at 9 kHz.
	leastRate = 6e6
	// mostRate is the highest internal rate in Hz that accuracy is looked for at: a sharp resonance's error is told instead.
	mostRate = 200e6
	// unheard is how far below its peak a response may lie before its error no longer counts.
	unheard = 1e-7
	// perInterferer is how many steps the shortest period of an interferer gets at least.
	perInterferer = 16
	// gridPoints is the number of frequencies at which the error is looked at.
	gridPoints = 96
)

// NewPlan chooses the rates for tracks that hold frequencies up to the given one in Hz.
//
// The bilinear transform of the whole circuit is exact but for its warped frequency axis: at f it has the
// circuit's response at (fi/π)·tan(πf/fi). For n poles the error is about n·8.69·(πf/fi)²/3 dB.
func NewPlan(n *circuit.Network, to float64) Plan {
	fc := n.Chain.Converter.Rate
	p := Plan{Instants: max(1, int(4*to/fc/blockBase)), To: to}
	instants := fc * float64(p.Instants) // a second
	p.Base = int(math.Ceil(4 * to / instants * (1 - 1e-12)))
	least := float64(leastRate)
	for _, x := range n.Chain.Interferers {
		least = math.Max(least, perInterferer*(x.Frequency+x.Bandwidth))
	}
	for p.Doublings = 1; ; p.Doublings++ {
		p.Rate = instants * float64(p.Steps())
		if p.Rate < least {
			continue
		}
		if p.LargestError = warpError(n, p.Rate, to); p.LargestError <= accuracy || 2*p.Rate > mostRate {
			return p
		}
	}
}

// warpError returns the largest difference in dB, up to the given frequency, between the circuit stepped at the
// rate and the circuit itself, over all its inputs.
func warpError(n *circuit.Network, rate, to float64) float64 {
	type pair struct{ exact, stepped float64 }
	worst := 0.
	at := make([][]pair, len(n.Inputs))
	for i := range gridPoints {
		f := to * math.Pow(10, -3*float64(i)/(gridPoints-1))
		exact := n.At(f).Into(n.Output)
		stepped := n.At(bilinear.Warped(f, rate)).Into(n.Output)
		for in := range n.Inputs {
			u := circuit.SoundInput(in)
			at[in] = append(at[in], pair{cmplx.Abs(exact.Input(u)), cmplx.Abs(stepped.Input(u))})
		}
	}
	for _, pairs := range at {
		peak := 0.
		for _, p := range pairs {
			peak = math.Max(peak, p.exact)
		}
		for _, p := range pairs {
			if p.exact > unheard*peak {
				worst = math.Max(worst, math.Abs(20*math.Log10(p.stepped/p.exact)))
			}
		}
	}
	return worst
}
