package render

import (
	"math"
	"testing"

	"midrail/chain/noise"
	"midrail/signals/spectrum"
)

// The noise drawn has the folded spectrum that the budget adds up, band by band, within the statistical error of a draw of
// half a minute: the power in B·T independent values scatters by 1/√(B·T).
func TestNoiseDrawnHasTheBudgetsSpectrum(t *testing.T) {
	const (
		seconds, rate = 30, 16000.
		length        = 4096 // of a segment: 3.9 Hz
		bands         = 32
	)
	n := parse(t, lineChain, "amp.r_f=100k", "one.noise_voltage_corner=5k", "filter.c_1=22n", "filter.c_2=10n")
	budget := noise.At(n)
	s := renderAll(t, n, Options{Noise: budget, Seed: 6}, silence(seconds))
	w := spectrum.NewWelch(rate, length)
	w.Write(s.layers[Noise])
	drawn := w.Result()
	unit := s.result.Span.Unit()
	// Power of a density between two frequencies, by its points.
	between := func(values []float64, step, low, high float64) float64 {
		sum := 0.
		for i, v := range values {
			if f := float64(i) * step; f >= low && f < high {
				sum += v * step
			}
		}
		return sum
	}
	sigma := 1 / math.Sqrt(rate/2/bands*seconds)
	least, most := math.Inf(1), 0.
	for band := range bands {
		low, high := float64(band)*rate/2/bands, float64(band+1)*rate/2/bands
		if band == 0 {
			low = 4 * rate / length // clear of 0 Hz, where the segments' means are taken off
		}
		want := between(budget.Folded, budget.Step, low, high) / unit / unit
		least, most = math.Min(least, want), math.Max(most, want)
		// Four of them: one in five hundred such tests would fail by chance, and the seed is fixed.
		if got := between(drawn.Values, drawn.Step, low, high); !(math.Abs(got/want-1) <= 4*sigma) {
			t.Errorf("%g to %g Hz: %.4g, budget %.4g, scatter %.2g", low, high, got, want, sigma)
		}
	}
	if most < 4*least { // or it would prove nothing of its shape
		t.Errorf("the spectrum is flat: %.3g to %.3g", least, most)
	}
}
