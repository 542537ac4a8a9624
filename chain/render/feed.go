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
	Sound signals.Stream // nil: silence
	Rate  float64        // Hz
}

// preRing is how many samples of a track its interpolation may ring before the first.
const preRing = 256

// part tells what a lane's sound becomes at the converter.
type part int

// The parts.
const (
	wantedPart part = iota
	foldBackPart
	inBandPart    // interference below half the converter's rate
	outOfBandPart // and above
	parts
	none // of them
)

// lane is one way of sound into the network: the part of a track or of an interferer that goes into one input, at the
// base rate or, where that is too coarse for it, at the internal rate. What a lane holds below half the converter's rate
// is a lane again, which adds to one part what it takes from another, and nothing to the sum.
type lane struct {
	part   part
	from   part    // that the same is taken from, or none
	input  int     // of the network's u
	fine   bool    // at the internal rate
	scale  float64 // V or A of u for 1 of the lane's values
	fill   func(dst []float64, first int64) error
	stairs stairs // where it is set, the lane has no values but those that it gives of a block

	next int64     // index of the next value at the lane's rate
	tail []float64 // values that the next chunk needs again
}

// chunk is a stretch of the run on its way: whole blocks of every lane's values, in V or A.
type chunk struct {
	first int64       // the first instant in it; instant 0 is the first conversion
	lanes [][]float64 // of each lane; those at the base rate begin as early, and end as late, as interpolation reaches
	end   int64       // the instant one past the last conversion, once known; else -1
}

// counter counts the samples of a stream and remembers its end.
type counter struct {
	signals.Stream
	rate  float64
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
		half := resample.NewSplit(nil, f.Rate, fc/2, 0).HalfLength()
		most = math.Max(most, float64(preRing+half)/f.Rate)
	}
	return int64(math.Ceil(most*fc)) + 1
}

// feeder fills chunks.
type feeder struct {
	n      *circuit.Network
	grid   grid
	lanes  []*lane
	tracks []*counter
}

// newFeeder prepares the lanes of tracks and interferers. The run's first step is one past the given instant's.
func newFeeder(n *circuit.Network, feeds []Feed, g grid, first int64, seed uint64) *feeder {
	f := &feeder{n: n, grid: g}
	base := g.plan.baseRate()
	start := first*int64(g.plan.Base) + 1 - int64(g.reach)
	for i, one := range feeds {
		if one.Sound == nil {
			continue
		}
		c := &counter{Stream: one.Sound, rate: one.Rate}
		f.tracks = append(f.tracks, c)
		add := func(p, from part, s signals.Stream, top float64, first int64) {
			in := resample.New(s, one.Rate, base, top, first, start, preRing)
			f.lanes = append(f.lanes, &lane{
				part: p, from: from, input: circuit.SoundInput(i), scale: n.Inputs[i].Scale, next: start,
				fill: func(dst []float64, _ int64) error { return readAll(in, dst) },
			})
		}
		edge := n.Chain.Converter.Rate / 2
		half := resample.NewSplit(nil, one.Rate, edge, 0).HalfLength()
		if half == 0 {
			add(wantedPart, none, c, resample.PassBand, 0)
			continue
		}
		both := &tee{split: resample.NewSplit(c, one.Rate, edge, half)}
		add(foldBackPart, none, both.side(0), resample.PassBand, -int64(half))
		add(wantedPart, foldBackPart, both.side(1), resample.SplitTop(one.Rate, edge), -int64(half))
	}
	fineStart := first*int64(g.plan.Steps()) + 1
	for _, x := range newInterferers(n, g.plan, seed) {
		if x.stairs != nil {
			f.lanes = append(f.lanes, &lane{part: x.part, from: none, input: x.input, scale: x.scale, stairs: x.stairs})
			continue
		}
		l := &lane{part: x.part, from: x.from, input: x.input, fine: x.fine, scale: x.scale, next: start, fill: func(dst []float64, first int64) error {
			clear(dst)
			x.signal.add(dst, first)
			return nil
		}}
		if x.fine {
			l.next = fineStart
		}
		f.lanes = append(f.lanes, l)
	}
	for _, l := range f.lanes {
		if !l.fine && l.stairs == nil {
			l.tail = make([]float64, 2*g.reach)
			// What the first chunk needs before its own values.
			l.next += int64(len(l.tail))
			if err := l.fill(l.tail, start); err != nil {
				l.fill = func([]float64, int64) error { return err }
			}
			scaleBy(l.tail, l.scale)
		}
	}
	return f
}

// fill puts the next values of every lane into the chunk.
func (f *feeder) fill(c *chunk) error {
	for i, l := range f.lanes {
		if l.stairs != nil {
			continue
		}
		dst := c.lanes[i]
		fresh := dst[copy(dst, l.tail):]
		if err := l.fill(fresh, l.next); err != nil {
			return err
		}
		scaleBy(fresh, l.scale)
		l.next += int64(len(fresh))
		copy(l.tail, dst[len(dst)-len(l.tail):])
	}
	c.end = f.conversions()
	return nil
}

func scaleBy(x []float64, scale float64) {
	for i := range x {
		x[i] *= scale
	}
}

// conversions returns the instant one past the last conversion, of which there are ceil(N·fc/ft) over the longest
// track, once every track has been read, else −1.
func (f *feeder) conversions() int64 {
	most := int64(0)
	for _, t := range f.tracks {
		if !t.ended {
			return -1
		}
		most = max(most, Conversions(t.n, t.rate, f.n.Chain.Converter.Rate))
	}
	if most > 0 {
		most = (most-1)*int64(f.grid.plan.Instants) + 1
	}
	return most
}

// seconds returns the length of the longest track.
func (f *feeder) seconds() float64 {
	longest := 0.
	for _, t := range f.tracks {
		longest = math.Max(longest, float64(t.n)/t.rate)
	}
	return longest
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

// readAll fills dst from the stream, with zeros after its end.
func readAll(s signals.Stream, dst []float64) error {
	n, err := s.Read(dst)
	if err != nil && !errors.Is(err, io.EOF) {
		return err
	}
	clear(dst[n:])
	return nil
}

// tee gives all of a split's stream, and what lies below, as two streams that are read in turns.
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

// Read implements [signals.Stream].
func (s *teeSide) Read(dst []float64) (int, error) {
	t := s.t
	if missing := len(dst) - len(t.pending[s.side]); missing > 0 && t.err == nil {
		t.more(missing)
	}
	own := t.pending[s.side]
	n := copy(dst, own)
	t.pending[s.side] = own[:copy(own, own[n:])]
	if n < len(dst) {
		return n, t.err
	}
	return n, nil
}

// more reads so many values of both sides.
func (t *tee) more(values int) {
	var room [2][]float64
	for i, p := range t.pending {
		for cap(p)-len(p) < values {
			p = append(p[:cap(p)], 0)[:len(p)]
		}
		t.pending[i], room[i] = p, p[len(p):len(p)+values]
	}
	n, err := t.split.Read(room[1], room[0])
	t.err = err
	for i, p := range t.pending {
		t.pending[i] = p[:len(p)+n]
	}
}
