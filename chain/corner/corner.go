// Package corner chooses converter rate, filter order, alignment and corner together: what each would let fold back of a
// recording, from its spectrum through the chain's exact response.
//
// A chain's anti-alias filter is the run of low-pass stages in front of its converter. A candidate is another filter in
// its place, taken for ideal, and another rate:
//
//	fold-back power = ∫ S(f)·|B(f)|²·|H(f)|² df  from half the rate on
//
// with S the recording's density, B the exact response of what comes before the filter, and H the candidate's.
package corner

import (
	"context"
	"errors"
	"io"
	"math"
	"math/cmplx"
	"sort"

	"gonum.org/v1/gonum/dsp/fourier"

	"midrail/chain/alignment"
	"midrail/chain/circuit"
	"midrail/signals"
	"midrail/signals/level"
)

// Filter returns the run of low-pass stages in front of the converter, the last one first, and what drives it. A follower
// that does nothing but keep an RC from being loaded is of it.
func Filter(n *circuit.Network) (stages []string, from string) {
	from = n.Chain.Converter.From
	for {
		s := n.Chain.StageNamed(from)
		if s == nil || len(s.From) != 1 {
			return stages, from
		}
		switch s.Kind.Name {
		case "sallen-key low-pass", "multiple-feedback low-pass", "rc low-pass":
			stages, from = append(stages, s.Name), s.From[0]
		case "follower":
			before := n.Chain.StageNamed(s.From[0])
			if len(s.Parts) > 0 || before == nil || before.Kind.Name != "rc low-pass" {
				return stages, from
			}
			stages, from = append(stages, s.Name), s.From[0]
		default:
			return stages, from
		}
	}
}

// Sound is what a recording is in front of the filter: frames of an eighth of a second.
type Sound struct {
	step float64     // Hz, between the points of a frame
	mean []float64   // V² at each point, over all frames
	each [][]float64 // the same of each input, as samples
	loud [][]float64 // the frames that are loudest above loudAbove
	Top  float64     // Hz, half the recording's rate
}

const (
	frameSeconds = 0.125
	// loudAbove is the frequency in Hz above which the loudest frames are looked for: what may fold.
	loudAbove = 3000
	// mostLoud is how many of them are kept.
	mostLoud = 96
)

// Listen takes a recording, one feed for each of the chain's inputs (nil: silence) and all at one rate in Hz, as it is in
// front of the filter. It returns ctx's error where that ends it.
func Listen(ctx context.Context, n *circuit.Network, feeds []signals.Stream, rate float64) (*Sound, error) {
	length := 2 * int(math.Round(frameSeconds*rate/2))
	plan := fourier.NewFFT(length)
	points := length/2 + 1
	s := &Sound{step: rate / float64(length), mean: make([]float64, points), each: make([][]float64, len(feeds)), Top: rate / 2}
	_, from := Filter(n)
	node, _ := n.NodeOf(from)
	before := make([][]float64, len(feeds)) // |B|² of each input, for a sample of 1
	for i := range feeds {
		before[i], s.each[i] = make([]float64, points), make([]float64, points)
		for k := 1; k < points; k++ {
			g := cmplx.Abs(n.At(float64(k)*s.step).Into(node).Input(circuit.SoundInput(i))) * n.Inputs[i].Scale
			before[i][k] = g * g
		}
	}
	window := make([]float64, length)
	power := 0.
	for i := range window {
		window[i] = 0.5 - 0.5*math.Cos(2*math.Pi*float64(i)/float64(length))
		power += window[i] * window[i]
	}
	history := make([][]float64, len(feeds))
	for i := range history {
		history[i] = make([]float64, length)
	}
	fresh, scratch, spectrum := make([]float64, length/2), make([]float64, length), make([]complex128, points)
	type loudFrame struct {
		power float64
		frame []float64
	}
	var loud []loudFrame
	for frames := 0; ; frames++ {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		frame := make([]float64, points)
		ended := true
		for i, feed := range feeds {
			if feed == nil {
				continue
			}
			got, err := feed.Read(fresh)
			if err != nil && !errors.Is(err, io.EOF) {
				return nil, err
			}
			clear(fresh[got:])
			ended = ended && got == 0
			copy(history[i], history[i][length/2:])
			copy(history[i][length/2:], fresh)
			for k, v := range history[i] {
				scratch[k] = v * window[k]
			}
			plan.Coefficients(spectrum, scratch)
			for k := 1; k < points; k++ {
				a := cmplx.Abs(spectrum[k])
				share := 2.
				if k == points-1 {
					share = 1
				}
				a = share * a * a / (power * float64(length))
				s.each[i][k] += a
				frame[k] += a * before[i][k]
			}
		}
		if ended {
			if frames == 0 {
				frames = 1
			}
			for k := range s.mean {
				s.mean[k] /= float64(frames)
				for i := range s.each {
					s.each[i][k] /= float64(frames)
				}
			}
			break
		}
		high := 0.
		for k, v := range frame {
			s.mean[k] += v
			if float64(k)*s.step >= loudAbove {
				high += v
			}
		}
		if len(loud) < mostLoud || high > loud[len(loud)-1].power {
			loud = append(loud, loudFrame{high, frame})
			sort.SliceStable(loud, func(i, j int) bool { return loud[i].power > loud[j].power })
			loud = loud[:min(len(loud), mostLoud)]
		}
	}
	for _, l := range loud {
		s.loud = append(s.loud, l.frame)
	}
	return s, nil
}

// Fold is what a candidate lets through of a recording.
type Fold struct {
	Wanted    float64 // dBFS
	FoldBack  float64 // dBFS; −Inf where the recording holds nothing to fold
	FoldBackA float64 // dBFS, A-weighted where it lands
	Worst     float64 // dBFS of the worst eighth of a second
	Below     float64 // dB of fold-back below wanted; +Inf where there is none
	Proven    bool    // whether the recording holds anything where sound comes down into the band that is kept
}

// Candidate is a rate and a filter, and what they do.
type Candidate struct {
	Rate      float64 // Hz, of the converter
	Order     int
	Alignment alignment.Alignment
	Corner    float64 // Hz
	Digital           // what stands behind the converter

	Droop      float64 // dB lost at the edge of the band that is kept; negative where ripple lifts it
	Fold               // of that recording of which it lies the least below the wanted sound
	Sound      int     // which recording that is
	WorstTone  float64 // dB: the loudest that a tone of any frequency comes out within the band, against one in it
	Overshoot  float64 // of a step, share
	Amplifiers int
}

// Digital is a linear-phase low-pass behind the converter, of whose outputs every By-th is kept.
type Digital struct {
	By          int       // 1: there is none
	Taps        []float64 // at the converter's rate
	Attenuation float64   // dB, of its stop band
}

// MultiplyAdds returns how many multiply-adds a second it takes behind a converter of the rate in Hz: those of the outputs
// that are kept.
func (d *Digital) MultiplyAdds(rate float64) float64 {
	return float64(len(d.Taps)) * rate / float64(d.By)
}

// power returns the square of its gain at f, at a converter's rate, both in Hz.
func (d *Digital) power(f, rate float64) float64 {
	if d.By == 1 {
		return 1
	}
	half := len(d.Taps) / 2
	g := d.Taps[half]
	for i := 1; i <= half; i++ {
		g += 2 * d.Taps[half+i] * math.Cos(2*math.Pi*f/rate*float64(i))
	}
	return g * g
}

// Wish is what is wanted.
type Wish struct {
	Keep  float64   // Hz, the edge of the band that is kept
	Rates []float64 // Hz
	Droop float64   // dB, at most
	Below float64   // dB, fold-back below wanted, at least
}

// Common are the rates that are tried where none are given: common practice, no source.
func Common() []float64 {
	return []float64{8000, 9600, 11025, 12000, 16000, 22050, 24000, 32000, 44100, 48000, 64000, 96000}
}

// corners are the corners that are tried, as multiples of the band's edge.
var corners = [...]float64{0.9, 1, 1.1, 1.2, 1.35, 1.5, 1.7, 2, 2.4, 3}

// behind is a converter's rate in Hz and what stands behind it.
type behind struct {
	rate float64
	Digital
	points []points // of each recording
}

// points are what becomes of a recording's points behind the converter.
type points struct {
	digital  []float64 // the square of the digital filter's gain; nil: 1
	weighted []float64 // the A-weighting, as a factor of power, of where they land
}

func (s *Sound) behind(rate float64, d Digital) points {
	p := points{weighted: make([]float64, len(s.mean))}
	if d.By > 1 {
		p.digital = make([]float64, len(s.mean))
	}
	for k := range s.mean {
		f := float64(k) * s.step
		if d.By > 1 {
			p.digital[k] = d.power(f, rate)
		}
		p.weighted[k] = math.Pow(10, level.AWeighting(math.Max(Folds(f, rate/float64(d.By)), s.step))/10)
	}
	return p
}

func behindAll(sounds []*Sound, rate float64, d Digital) behind {
	b := behind{rate: rate, Digital: d}
	for _, s := range sounds {
		b.points = append(b.points, s.behind(rate, d))
	}
	return b
}

// Candidates judges every rate that can hold the band with every order, alignment and corner, on one or more recordings.
// It returns ctx's error where that ends it.
func Candidates(ctx context.Context, n *circuit.Network, sounds []*Sound, w Wish) ([]Candidate, error) {
	var converters []behind
	for _, rate := range w.Rates {
		if rate >= 2*w.Keep {
			converters = append(converters, behindAll(sounds, rate, Digital{By: 1}))
		}
	}
	return candidates(ctx, n, sounds, w, converters)
}

func candidates(ctx context.Context, n *circuit.Network, sounds []*Sound, w Wish, converters []behind) ([]Candidate, error) {
	var all []Candidate
	h := make([][]float64, len(sounds))
	for order := 1; order <= alignment.Highest; order++ {
		for _, a := range alignment.All() {
			if order == 1 && a != alignment.Butterworth {
				continue // one pole is one pole
			}
			sections, err := alignment.Sections(a, order)
			if err != nil {
				return nil, err
			}
			overshoot := alignment.Overshoot(sections)
			for _, by := range corners {
				if err := ctx.Err(); err != nil {
					return nil, err
				}
				for i, s := range sounds {
					h[i] = s.through(sections, by*w.Keep)
				}
				for _, b := range converters {
					c := Candidate{Rate: b.rate, Order: order, Alignment: a, Corner: by * w.Keep, Digital: b.Digital, Overshoot: overshoot, Amplifiers: amplifiers(order)}
					c.Droop = -20*math.Log10(cmplx.Abs(alignment.Response(sections, 1/by))) - 10*math.Log10(b.power(w.Keep, b.rate))
					c.WorstTone = c.worstTone(sections, w.Keep)
					for i, s := range sounds {
						f := c.on(n, s, h[i], b.points[i], w.Keep)
						if i == 0 || f.Below < c.Below {
							f.Proven = f.Proven || c.Proven
							c.Fold, c.Sound = f, i
						}
						c.Proven = c.Proven || f.Proven
					}
					all = append(all, c)
				}
			}
		}
	}
	return all, nil
}

// amplifiers is how many a filter takes: one for each pair of poles, and one between a lone pole and the pairs behind it.
func amplifiers(order int) int {
	if order == 1 {
		return 0
	}
	return (order + 1) / 2
}

// through returns the square of a filter's gain at each point.
func (s *Sound) through(sections []alignment.Section, corner float64) []float64 {
	h := make([]float64, len(s.mean))
	for k := range h {
		g := cmplx.Abs(alignment.Response(sections, float64(k)*s.step/corner))
		h[k] = g * g
	}
	return h
}

// On tells what the candidate lets through of one recording.
func (c *Candidate) On(n *circuit.Network, s *Sound, keep float64) (Fold, error) {
	sections, err := alignment.Sections(c.Alignment, c.Order)
	if err != nil {
		return Fold{}, err
	}
	return c.on(n, s, s.through(sections, c.Corner), s.behind(c.Rate, c.Digital), keep), nil
}

// on is On with the square of the filter's gain at each point.
func (c *Candidate) on(n *circuit.Network, s *Sound, h []float64, behind points, keep float64) Fold {
	out := c.Rate / float64(c.By)
	half := len(h)
	if s.Top > out/2 {
		half = int(math.Ceil(out / 2 / s.step))
	}
	if behind.digital != nil {
		both := make([]float64, len(h))
		for k := range both {
			both[k] = h[k] * behind.digital[k]
		}
		h = both
	}
	wanted, fold, weighted := 0., 0., 0.
	for k := 1; k < len(h); k++ {
		p := s.mean[k] * h[k]
		if k < half {
			wanted += p
			continue
		}
		fold += p
		weighted += p * behind.weighted[k]
	}
	worst := 0.
	for _, frame := range s.loud {
		p := 0.
		for k := half; k < len(h); k++ {
			p += frame[k] * h[k]
		}
		worst = math.Max(worst, p)
	}
	halfSpan := (n.Chain.Converter.High - n.Chain.Converter.Low) / 2
	db := func(power float64) float64 { return level.DBFS(math.Sqrt(power) / halfSpan) }
	f := Fold{Wanted: db(wanted), FoldBack: db(fold), FoldBackA: db(weighted), Worst: db(worst), Below: math.Inf(1), Proven: s.Top > c.Rate-keep}
	if fold > 0 {
		f.Below = f.Wanted - f.FoldBack
	}
	return f
}

// worstTone looks at the tones that come down into the band. Above its corner the filter falls, so the nearest to the
// converter's rate is the loudest of those that fold there; the others are folded by what stands behind.
func (c *Candidate) worstTone(sections []alignment.Section, keep float64) float64 {
	const points = 64
	response := func(f float64) float64 { return cmplx.Abs(alignment.Response(sections, f/c.Corner)) }
	worst := 0.
	look := func(from, to float64) {
		for i := range points + 1 {
			f := from + (to-from)*float64(i)/points
			worst = math.Max(worst, response(f)*math.Sqrt(c.power(f, c.Rate)))
		}
	}
	out := c.Rate / float64(c.By)
	for m := 1; m < c.By; m++ {
		look(float64(m)*out-keep, float64(m)*out+keep)
	}
	look(c.Rate-keep, math.Max(c.Rate+keep, c.Corner))
	return 20 * math.Log10(worst)
}

// Folds returns where a frequency lands after sampling at a rate, both in Hz.
func Folds(f, rate float64) float64 {
	r := math.Mod(f, rate)
	return math.Min(r, rate-r)
}

// meets tells whether a candidate is good enough.
func (c *Candidate) meets(w Wish) bool { return c.off() <= w.Droop && c.Held() >= w.Below }

// Held returns by how many dB fold-back is held below the wanted sound: on the recordings and, where none of them holds
// anything that would land in the band, of the worst tone against one in the band.
func (c *Candidate) Held() float64 {
	if c.Proven {
		return c.Below
	}
	return math.Min(c.Below, -c.WorstTone)
}

// off is how far the band's edge is from flat, up or down.
func (c *Candidate) off() float64 { return math.Abs(c.Droop) }

// cost orders candidates by what they need: amplifiers first, then conversions, then how much they droop.
func (c *Candidate) cost() [3]float64 { return [3]float64{float64(c.Amplifiers), c.Rate, c.off()} }

func less(a, b [3]float64) bool {
	for i := range a {
		if a[i] != b[i] {
			return a[i] < b[i]
		}
	}
	return false
}

// Recommend returns the candidate that meets the wish with the fewest amplifiers, then the lowest rate, then the least
// droop; where none does, the one of those with the wanted droop, or else of all, whose fold-back is lowest, and false.
func Recommend(all []Candidate, w Wish) (Candidate, bool) {
	var best *Candidate
	for i := range all {
		if c := &all[i]; c.meets(w) && (best == nil || less(c.cost(), best.cost())) {
			best = c
		}
	}
	if best != nil {
		return *best, true
	}
	for i := range all {
		c := &all[i]
		if best == nil || (c.off() <= w.Droop) != (best.off() <= w.Droop) && c.off() <= w.Droop || (c.off() <= w.Droop) == (best.off() <= w.Droop) && c.Held() > best.Held() {
			best = c
		}
	}
	return *best, false
}

// Efficient returns the candidates than which none is better in every respect - rate, amplifiers, droop, fold-back - the
// cheapest first, of those that droop no more than the wish.
func Efficient(all []Candidate, w Wish) []Candidate {
	var keep []Candidate
	for i := range all {
		c := &all[i]
		if c.off() > w.Droop {
			continue
		}
		beaten := false
		for j := range all {
			d := &all[j]
			if d.Rate <= c.Rate && d.Amplifiers <= c.Amplifiers && d.off() <= c.off() && d.Held() >= c.Held() &&
				(d.Rate < c.Rate || d.Amplifiers < c.Amplifiers || d.off() < c.off() || d.Held() > c.Held() || j < i) {
				beaten = true
				break
			}
		}
		if !beaten {
			keep = append(keep, *c)
		}
	}
	sort.SliceStable(keep, func(i, j int) bool { return less(keep[i].cost(), keep[j].cost()) })
	return keep
}

// foldPoints is how many frequencies [Sound.BelowWith] looks at, by equal ratios.
const foldPoints = 64

// BelowWith returns by how many dB fold-back lies below the wanted sound in a network of the same inputs, from the means of
// the spectrum over equal ratios of frequency and the network's whole response: for comparing boards of one chain.
func (s *Sound) BelowWith(n *circuit.Network) float64 {
	half := n.Chain.Converter.Rate / 2
	between := func(from, to float64) (total float64) {
		ratio := math.Pow(to/from, 2./foldPoints)
		for low := range foldPoints / 2 {
			low := from * math.Pow(ratio, float64(low))
			first, end := max(1, int(math.Ceil(low/s.step))), min(int(math.Ceil(low*ratio/s.step)), len(s.mean))
			if first >= end {
				continue
			}
			into := n.At(low * math.Sqrt(ratio)).Into(n.Output)
			for i, input := range n.Inputs {
				power := 0.
				for _, p := range s.each[i][first:end] {
					power += p
				}
				g := cmplx.Abs(into.Input(circuit.SoundInput(i))) * input.Scale
				total += power * g * g
			}
		}
		return total
	}
	if s.Top <= half {
		return math.Inf(1)
	}
	fold := between(half, s.Top)
	if fold == 0 {
		return math.Inf(1)
	}
	return 10 * math.Log10(between(math.Min(20, half/2), half)/fold)
}
