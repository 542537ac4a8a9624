package resample

import (
	"io"
	"math"

	"gonum.org/v1/gonum/dsp/fourier"
	"gonum.org/v1/gonum/floats"

	"midrail/signals"
)

// Split parts a stream at an edge frequency: it gives what lies below and, beside it, the stream itself; the rest lies at
// and above the edge. What lies below is −6 dB at the edge, flat up to 1 % below it and 120 dB down from 1 % above it.
type Split struct {
	source source
	half   int // half the filter's length; 0: everything lies below

	response []complex128 // empty where everything lies below
	work     []complex128
	result   []float64
	input    []float64 // two blocks that overlap: 2·half values of the last two, then new ones
	fresh    int       // where the new ones begin

	low          []float64 // parted; the whole is in input, from half on
	given, ready int       // values of the block that were read, and that there are
	parted       int64     // values in all
	lead         int
	err          error
}

// SplitTop returns the share of a stream's rate above which a split leaves nothing in its lower side, but for −120 dB.
func SplitTop(rate, edge float64) float64 {
	half := NewSplit(nil, rate, edge, 0).half
	if half == 0 {
		return 0.5
	}
	width := (splitStop - 8) / (2.285 * float64(2*half)) // rad a sample, by Kaiser's formula; the edge is in its middle
	return edge/rate + width/(4*math.Pi)
}

// longestHalf bounds the filter, and with it what is held in memory: for an edge below about a 1300th of the rate the
// transition is wider than 1 %.
const longestHalf = 1 << 18

// NewSplit parts src, at the given rate in Hz, at the edge in Hz, above 0. The first value read is that of the
// source's sample −lead, so that a lead of [Split.HalfLength] misses nothing of the filter's ringing; after the
// source's last sample comes as much again. Where the edge is half the rate or more, everything lies below and nothing
// follows. src may be nil if only HalfLength is wanted.
func NewSplit(src signals.Stream, rate, edge float64, lead int) *Split {
	s := &Split{lead: lead}
	if edge < rate/2 {
		s.half = min(taps(splitStop, 2*math.Pi*0.02*edge/rate)/2+1, longestHalf)
	}
	if src == nil {
		return s
	}
	s.source = source{src: src, before: int64(lead + s.half)}
	size := 4096
	for size < 6*s.half {
		size *= 4
	}
	s.input = make([]float64, 2*(size-s.half))
	if s.half == 0 {
		return s
	}
	impulse := make([]float64, 2*s.half+1)
	cut, beta := 2*edge/rate, shape(splitStop)
	for i := range impulse {
		x := float64(i - s.half)
		impulse[i] = sinc(cut*x) * kaiser(beta, x/float64(s.half+1))
	}
	// A constant lies below, all of it. The transform there and back multiplies by its length.
	scale := 1 / (floats.Sum(impulse) * float64(size))
	s.response = make([]complex128, size)
	for i, v := range impulse {
		s.response[i] = complex(v*scale, 0)
	}
	fourier.CoefficientsRadix4(s.response)
	s.work = make([]complex128, size)
	s.result = make([]float64, 2*(size-2*s.half))
	return s
}

// HalfLength returns half the length of the filter in samples, which is how far it rings before and after.
func (s *Split) HalfLength() int { return s.half }

// Read fills low, what lies below the edge, and whole, the stream itself, which are of the same length, and returns how
// many values it put into each; fewer than fit come only with an error, io.EOF at the end.
func (s *Split) Read(low, whole []float64) (int, error) {
	if len(low) != len(whole) {
		panic("resample: parts of different lengths")
	}
	n := 0
	for n < len(low) {
		if s.given == s.ready {
			if s.err != nil {
				return n, s.err
			}
			s.more()
			continue
		}
		from := s.given
		to := min(from+len(low)-n, s.ready)
		copy(low[n:], s.low[from:to])
		n += copy(whole[n:], s.input[s.half+from:s.half+to])
		s.given = to
	}
	return n, nil
}

// more parts one block. Blocks lie on a grid of their own, so that the values do not depend on how they are read.
func (s *Split) more() {
	copy(s.input, s.input[len(s.input)-s.fresh:])
	s.given, s.ready = 0, 0
	if err := s.source.fill(s.input[s.fresh:]); err != nil {
		s.err = err
		return
	}
	s.fresh = 2 * s.half
	s.low = s.input
	if s.half > 0 {
		s.low = s.filter()
	}
	s.ready = len(s.low)
	if s.source.ended {
		if left := int64(s.lead) + s.source.read + int64(s.half) - s.parted; left <= int64(s.ready) {
			s.ready, s.err = int(left), io.EOF
		}
	}
	s.parted += int64(s.ready)
}

// filter returns what lies below of the input, whose two blocks are the real and the imaginary part of one transform.
func (s *Split) filter() []float64 {
	size, overlap := len(s.work), 2*s.half
	step := size - overlap
	for i := range s.work {
		s.work[i] = complex(s.input[i], s.input[step+i])
	}
	fourier.CoefficientsRadix4(s.work)
	for i, r := range s.response {
		s.work[i] *= r
	}
	fourier.SequenceRadix4(s.work)
	for i, z := range s.work[overlap:] {
		s.result[i], s.result[step+i] = real(z), imag(z)
	}
	return s.result
}
