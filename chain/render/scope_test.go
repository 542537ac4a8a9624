package render

import (
	"math"
	"math/cmplx"
	"testing"

	"midrail/chain/circuit"
	"midrail/signals/tone"
)

// waveformTolerance is how far, in share of the swing, the waveforms may lie from the circuit's exact response: the
// stepped response's error, interpolation's ripple, and what starting the tone leaves.
const waveformTolerance = 2e-3

// What is asked of each stage is the sine that the exact response gives; what it does keeps within the limits and ends
// at the limit where more is asked.
func TestWaveformsAreTheStages(t *testing.T) {
	n := parse(t, lineChain, "amp.r_f=33k", "amp.c_in=100u") // a tone that starts hardly moves so large a capacitor
	const f = 500.
	track := tone.Sine(48000, 1, f, 0)
	r := renderAll(t, n, Options{}, track).result
	if len(r.Waveforms) == 0 || len(r.Waveforms) > mostWaveforms {
		t.Fatalf("%d waveforms", len(r.Waveforms))
	}
	worst := 0.
	for _, e := range r.Events {
		worst = math.Max(worst, e.Over)
	}
	if got := r.Waveforms[0].Over; got != worst {
		t.Errorf("the first is %v dB over, the worst event %v", got, worst)
	}
	for _, w := range r.Waveforms {
		if w.From > w.At || w.From+float64(len(w.Real[0]))*w.Step < w.At {
			t.Errorf("%v is not in what is shown from %v", w.At, w.From)
		}
		for k := range n.Chain.Stages {
			h := n.At(f).Into(n.StageNode(k)).Input(circuit.SoundInput(0)) * complex(n.Inputs[0].Scale, 0)
			swing, rest := cmplx.Abs(h), r.Stages[k].Rest
			asked := excursion{}
			for i, v := range w.Asked[k] {
				asked.see((v - rest) / swing)
				real := w.Real[k][i]
				if low, high := r.Stages[k].Lowest, r.Stages[k].Highest; real < low-waveformTolerance*swing || real > high+waveformTolerance*swing {
					t.Errorf("stage %d at %d: %v, but it went from %v to %v only", k, i, real, low, high)
				}
			}
			if math.Abs(asked.highest-1) > waveformTolerance || math.Abs(asked.lowest+1) > waveformTolerance {
				t.Errorf("stage %d is asked for %v to %v of the exact response", k, asked.lowest, asked.highest)
			}
		}
		a := r.Amplifiers[0]
		top, asked := math.Inf(-1), math.Inf(-1)
		for i, v := range w.Real[0] {
			top, asked = math.Max(top, v), math.Max(asked, w.Asked[0][i])
		}
		if asked <= a.LimitHigh || math.Abs(top-a.LimitHigh) > 0.02*a.LimitHigh {
			t.Errorf("asked for %v, it reaches %v; the limit is %v", asked, top, a.LimitHigh)
		}
	}
}

// A chain that nothing overloads has no waveforms.
func TestNoOverloadNoWaveform(t *testing.T) {
	track := tone.Sine(48000, 0.2, 500, -12)
	if r := renderAll(t, parse(t, lineChain), Options{}, track).result; len(r.Waveforms) > 0 {
		t.Errorf("%d waveforms", len(r.Waveforms))
	}
}

// Beyond the converter's span with room in every stage, the waveforms are the converter's.
func TestConverterRangeHasWaveforms(t *testing.T) {
	track := tone.Sine(48000, 0.2, 500, -3)
	r := renderAll(t, parse(t, lineChain, "converter.low=1.8", "converter.high=3.2"), Options{}, track).result
	if len(r.Waveforms) == 0 || r.Waveforms[0].Kind != ConverterRange || len(r.Waveforms[0].Real) != 2 {
		t.Errorf("got %d waveforms", len(r.Waveforms))
	}
}
