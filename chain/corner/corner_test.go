package corner

import (
	"math"
	"testing"

	"midrail/chain/alignment"
)

// A tone of 6 kHz comes down to 2 kHz at a rate of 8 kHz: behind a Butterworth filter of order n it is
// −10·log10(1 + (f/fc)^2n) dB, and so are all others below.
func TestWorstToneOfAButterworth(t *testing.T) {
	const rounding = 1e-9 // dB
	for order := 1; order <= alignment.Highest; order++ {
		sections, err := alignment.Sections(alignment.Butterworth, order)
		if err != nil {
			t.Fatal(err)
		}
		c := Candidate{Rate: 8000, Order: order, Alignment: alignment.Butterworth, Corner: 2500, Digital: Digital{By: 1}}
		want := -10 * math.Log10(1+math.Pow(6000./2500, 2*float64(order)))
		if got := c.worstTone(sections, 2000); !(math.Abs(got-want) <= rounding) {
			t.Errorf("order %d: %.6f dB, want %.6f dB", order, got, want)
		}
	}
}

// A recording that holds nothing where sound comes down into the band says nothing of a candidate: the worst tone does.
func TestWhatNoRecordingProves(t *testing.T) {
	c := Candidate{Fold: Fold{Below: math.Inf(1)}, WorstTone: -30}
	if c.Held() != 30 {
		t.Errorf("unproven it holds %g dB, want 30", c.Held())
	}
	c.Proven, c.Below = true, 80
	if c.Held() != 80 {
		t.Errorf("proven it holds %g dB, want 80", c.Held())
	}
}

// The cheapest of those that do is recommended: amplifiers first, then rate; what is beaten in every respect is left out.
func TestRecommendAndEfficient(t *testing.T) {
	one := func(rate float64, amplifiers int, below float64) Candidate {
		return Candidate{Rate: rate, Amplifiers: amplifiers, Fold: Fold{Below: below, Proven: true}, Droop: 0.5}
	}
	all := []Candidate{one(8000, 3, 60), one(16000, 2, 40), one(16000, 2, 55), one(24000, 2, 55), one(24000, 1, 30), one(32000, 1, 20)}
	w := Wish{Droop: 1, Below: 50}
	if best, meets := Recommend(all, w); !meets || best.Rate != 16000 || best.Below != 55 {
		t.Errorf("recommended %+v, %v", best, meets)
	}
	if best, meets := Recommend(all, Wish{Droop: 1, Below: 70}); meets || best.Below != 60 {
		t.Errorf("where none does: %+v, %v", best, meets)
	}
	var left []float64
	for _, c := range Efficient(all, w) {
		left = append(left, c.Below)
	}
	if len(left) != 3 || left[0] != 30 || left[1] != 55 || left[2] != 60 {
		t.Errorf("efficient: %v, want 30, 55, 60", left)
	}
}

// What is built: a pair of poles takes an amplifier, a lone pole before pairs one more, alone none.
func TestAmplifiers(t *testing.T) {
	for order, want := range []int{1: 0, 2: 1, 3: 2, 4: 2, 5: 3, 6: 3, 7: 4, 8: 4} {
		if order > 0 && amplifiers(order) != want {
			t.Errorf("order %d takes %d, want %d", order, amplifiers(order), want)
		}
	}
}
