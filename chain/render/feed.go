package render

import (
	"errors"
	"io"
	"math"

	"midrail/chain/circuit"
	"midrail/signals"
	"midrail/signals/resample"
)

// Feed is the recording that goes into one of the chain's inputs.
type Feed struct {
	Sound signals.Stream
	Rate  float64 // Hz
}

// preRing is how many samples of the track the interpolation may ring before the first.
const preRing = 256

// source is one input's sound at the internal rate, parted at half the converter's rate.
type source struct {
	counted   *counter
	low, high signals.Stream // high is nil where the track holds nothing there
}

// counter counts the samples of a stream and remembers its end.
type counter struct {
	signals.Stream
	n     int64
	ended bool
}

func (c *counter) Read(dst []float64) (int, error) {
	n, err := c.Stream.Read(dst)
	c.n += int64(n)
	c.ended = c.ended || errors.Is(err, io.EOF)
	return n, err
}

// lead returns by how many conversions a run must start before the first so that nothing of the filters' ringing
// before the tracks' first sample is missing.
func lead(feeds []Feed, fc float64) int64 {
	most := 0.
	for _, f := range feeds {
		if f.Sound == nil {
			continue
		}
		ring := float64(preRing)
		if fc/2 < f.Rate/2 {
			ring += float64(resample.NewSplit(nil, f.Rate, fc/2, 0).HalfLength())
		}
		most = math.Max(most, ring/f.Rate)
	}
	return int64(math.Ceil(most*fc)) + 1
}

// newSource returns a feed's sound from the given step of the internal rate on.
func newSource(f Feed, fc, fi float64, first int64) *source {
	s := &source{counted: &counter{Stream: f.Sound}}
	if fc/2 >= f.Rate/2 {
		s.low = resample.New(s.counted, f.Rate, fi, 0, first, preRing)
		return s
	}
	half := resample.NewSplit(nil, f.Rate, fc/2, 0).HalfLength()
	both := &tee{split: resample.NewSplit(s.counted, f.Rate, fc/2, half)}
	s.low = resample.New(both.side(0), f.Rate, fi, -int64(half), first, preRing)
	s.high = resample.New(both.side(1), f.Rate, fi, -int64(half), first, preRing)
	return s
}

// length returns the source's samples once they are known, else −1.
func (s *source) length() int64 {
	if s.counted.ended {
		return s.counted.n
	}
	return -1
}

// tee gives the two sides of a split as two streams that are read in turns.
type tee struct {
	split   *resample.Split
	pending [2][]float64
	err     error
}

type teeSide struct {
	t    *tee
	side int
}

func (t *tee) side(i int) signals.Stream { return &teeSide{t, i} }

func (s *teeSide) Read(dst []float64) (int, error) {
	t := s.t
	if missing := len(dst) - len(t.pending[s.side]); missing > 0 && t.err == nil {
		low, high := make([]float64, missing), make([]float64, missing)
		n, err := t.split.Read(low, high)
		t.pending[0] = append(t.pending[0], low[:n]...)
		t.pending[1] = append(t.pending[1], high[:n]...)
		t.err = err
	}
	n := copy(dst, t.pending[s.side])
	t.pending[s.side] = append(t.pending[s.side][:0], t.pending[s.side][n:]...)
	if n < len(dst) {
		return n, t.err
	}
	return n, nil
}

// chunk is a block of the internal rate: for each of the network's inputs u the deviations that the layers' sources
// make, in volts or amperes. A nil slice is silence.
type chunk struct {
	first     int64 // step of the internal rate, counted from the tracks' first sample
	wanted    [][]float64
	folded    [][]float64
	inBand    [][]float64 // interference below half the converter's rate
	outOfBand [][]float64 // and above
	end       int64       // conversions in the whole run, once known; else -1
}

// feeder fills chunks.
type feeder struct {
	n            *circuit.Network
	sources      []*source // nil where the input is silent
	rates        []float64
	interference *interference
	plan         Plan
}

func newFeeder(n *circuit.Network, feeds []Feed, plan Plan, first int64, seed uint64) *feeder {
	f := &feeder{n: n, plan: plan, interference: newInterference(n, plan.Rate, seed)}
	for _, one := range feeds {
		if one.Sound == nil {
			f.sources = append(f.sources, nil)
		} else {
			f.sources = append(f.sources, newSource(one, n.Chain.Converter.Rate, plan.Rate, first))
		}
		f.rates = append(f.rates, one.Rate)
	}
	return f
}

// fill puts the next steps into the chunk, as many as it holds; c.first is set.
func (f *feeder) fill(c *chunk) error {
	for i, s := range f.sources {
		if s == nil {
			continue
		}
		u, scale := circuit.SoundInput(i), f.n.Inputs[i].Scale
		if err := readScaled(s.low, c.wanted[u], scale); err != nil {
			return err
		}
		if s.high != nil {
			if err := readScaled(s.high, c.folded[u], scale); err != nil {
				return err
			}
		}
	}
	for _, x := range f.interference.sources {
		clear(c.inBand[x.input])
		clear(c.outOfBand[x.input])
	}
	for _, x := range f.interference.sources {
		addScaled(x.inBand, c.inBand[x.input], c.first, x.scale)
		addScaled(x.folded, c.outOfBand[x.input], c.first, x.scale)
	}
	c.end = f.conversions()
	return nil
}

// conversions returns ceil(N·fc/ft) over the longest track once every track has been read, else −1.
func (f *feeder) conversions() int64 {
	most := int64(0)
	for i, s := range f.sources {
		if s == nil {
			continue
		}
		n := s.length()
		if n < 0 {
			return -1
		}
		most = max(most, Conversions(n, f.rates[i], f.n.Chain.Converter.Rate))
	}
	return most
}

// Conversions returns how many samples a converter at rate fc takes of n samples at rate ft: those at k/fc before
// the end of the track, ceil(n·fc/ft).
func Conversions(n int64, ft, fc float64) int64 {
	exact := float64(n) * fc / ft
	// A quotient that is whole but for rounding counts as whole.
	if whole := math.Round(exact); math.Abs(exact-whole) <= 1e-9*math.Max(1, exact) {
		return int64(whole)
	}
	return int64(math.Ceil(exact))
}

// readScaled fills dst from the stream, with zeros after its end.
func readScaled(s signals.Stream, dst []float64, scale float64) error {
	n, err := s.Read(dst)
	if err != nil && !errors.Is(err, io.EOF) {
		return err
	}
	clear(dst[n:])
	for i := range dst[:n] {
		dst[i] *= scale
	}
	return nil
}

func addScaled(g generator, dst []float64, first int64, scale float64) {
	if g == nil {
		return
	}
	scratch := make([]float64, len(dst))
	g.add(scratch, first)
	for i, v := range scratch {
		dst[i] += scale * v
	}
}
