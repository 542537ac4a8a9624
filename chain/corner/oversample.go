package corner

import (
	"context"
	"math"

	"midrail/chain/circuit"
	"midrail/signals/resample"
)

const (
	// spare is by how many dB a digital filter's stop band goes further down than fold-back is to lie: what it lets through
	// is then a quarter of what is allowed.
	spare = 6
	// leastStop is the gentlest stop band in dB: below it the pass band's ripple would be heard.
	leastStop = 40
	// mostTaps is the longest digital filter that is thought of.
	mostTaps = 4096
)

// Oversample compares order with oversampling for a rate that is handed on: direct is the recommendation of a converter at
// that rate, and over the cheapest converter that runs a whole number of times faster, up to the fastest of the wish's
// rates, with a digital low-pass behind it whose pass band ends at the edge of the band that is kept and whose stop band
// begins at half the rate handed on. Cheaper is fewer amplifiers than direct has, or doing what is asked where direct does
// not; of those with the fewest, the slowest converter. It is paid for in conversions and multiply-adds. It is nil where
// none is cheaper.
func Oversample(ctx context.Context, n *circuit.Network, sounds []*Sound, w Wish, handedOn float64) (direct Candidate, meets bool, over *Candidate, err error) {
	straight, err := candidates(ctx, n, sounds, w, []behind{behindAll(sounds, handedOn, Digital{By: 1})})
	if err != nil {
		return direct, false, nil, err
	}
	direct, meets = Recommend(straight, w)
	fastest := 0.
	for _, r := range w.Rates {
		fastest = math.Max(fastest, r)
	}
	stop := math.Max(w.Below+spare, leastStop)
	for by := 2; float64(by)*handedOn <= fastest; by++ {
		rate := float64(by) * handedOn
		pass, from := w.Keep/rate, handedOn/2/rate
		if !(pass < from) {
			break
		}
		d := Digital{By: by, Taps: resample.LowPass(pass, from, stop), Attenuation: stop}
		if len(d.Taps) > mostTaps {
			break
		}
		all, err := candidates(ctx, n, sounds, w, []behind{behindAll(sounds, rate, d)})
		if err != nil {
			return direct, false, nil, err
		}
		best, ok := Recommend(all, w)
		if ok && (!meets || best.Amplifiers < direct.Amplifiers) && (over == nil || best.Amplifiers < over.Amplifiers) {
			over = &best
		}
	}
	return direct, meets, over, nil
}
