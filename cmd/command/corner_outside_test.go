//go:build outside

package command

import (
	"testing"

	"midrail/chain/corner"
	"midrail/signals"
	"midrail/signals/tone"
)

// All candidates on more noise and on the whole of the demo's track: too long for every test.
func TestEveryPredictedFoldBack(t *testing.T) {
	f := newFolding(t)
	f.hold(t, "white noise", func() signals.Track { return tone.White(48000, 4, -25, 6) }, foldingCases)
	f.hold(t, "the demo", func() signals.Track { return tone.Demo() }, foldingCases)
}

func TestEveryPredictedDecimation(t *testing.T) {
	f := newFolding(t)
	for _, w := range []corner.Wish{
		{Keep: 3000, Rates: corner.Common(), Droop: 1, Below: 50},
		{Keep: 3000, Rates: []float64{16000}, Droop: 1, Below: 40},
	} {
		f.holdOversampled(t, "the demo", tone.Demo(), w, 8000)
	}
	for _, w := range []corner.Wish{
		{Keep: 3000, Rates: corner.Common(), Droop: 1, Below: 30},
		{Keep: 3000, Rates: []float64{32000}, Droop: 1, Below: 40},
		{Keep: 3400, Rates: []float64{24000}, Droop: 2, Below: 30},
	} {
		f.holdOversampled(t, "white noise", whiteNoise(), w, 8000)
	}
}
