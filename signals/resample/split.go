package resample

import (
	"errors"
	"io"
	"math"

	"gonum.org/v1/gonum/dsp/fourier"

	"midrail/signals"
)

// Split parts a stream at an edge frequency into what lies below and what lies at and above it. The two are
// complementary: they sum to the stream. The lower one is −6 dB at the edge, flat up to 1 % below it and 120 dB down
// from 1 % above it.
type Split struct {
	src  signals.Stream
	half int // half the filter's length; 0: everything lies below

	plan     *fourier.FFT
	response []complex128
	input    []float64 // the block: 2·half values of the last one, then new ones
	fresh    int       // where the new ones begin
	spectrum []complex128
	result   []float64

	low, high []float64 // parted, not yet read
	zeros     int       // still to come before the source's first sample
	given     int64     // values parted
	read      int64     // values of the source
	lead      int
	ended     bool
	err       error
}

// NewSplit parts src, at the given rate in Hz, at the edge in Hz, above 0. The first value read is that of the
// source's sample −lead, so that a lead of [Split.HalfLength] misses nothing of the filter's ringing; after the
// source's last sample comes as much again. Where the edge is half the rate or more, everything lies below and nothing
// follows. src may be nil if only HalfLength is wanted.
func NewSplit(src signals.Stream, rate, edge float64, lead int) *Split {
	s := &Split{src: src, lead: lead}
	size := 4096
	if edge < rate/2 {
		s.half = taps(2*math.Pi*0.02*edge/rate)/2 + 1
		for size < 8*s.half {
			size *= 2
		}
	}
	if src == nil {
		return s
	}
	s.zeros = lead + s.half
	s.input = make([]float64, size)
	if s.half == 0 {
		return s
	}
	s.plan = fourier.NewFFT(size)
	impulse := make([]float64, size)
	cut := 2 * edge / rate
	for i := -s.half; i <= s.half; i++ {
		// The transform there and back multiplies by its length.
		impulse[i+s.half] = cut * sinc(cut*float64(i)) * kaiser(float64(i)/float64(s.half+1)) / float64(size)
	}
	s.response = s.plan.Coefficients(nil, impulse)
	s.result = make([]float64, size)
	return s
}

// HalfLength returns half the length of the filter in samples, which is how far it rings before and after.
func (s *Split) HalfLength() int { return s.half }

// Read fills low and high, which are of the same length, and returns how many values it put into each; fewer than
// fit come only with an error, io.EOF at the end.
func (s *Split) Read(low, high []float64) (int, error) {
	if len(low) != len(high) {
		panic("resample: low and high of different lengths")
	}
	for len(s.low) < len(low) && s.err == nil {
		s.more()
	}
	n := copy(low, s.low)
	copy(high, s.high)
	s.low = s.low[:copy(s.low, s.low[n:])]
	s.high = s.high[:copy(s.high, s.high[n:])]
	if n < len(low) {
		return n, s.err
	}
	return n, nil
}

// more parts one block. Blocks lie on a grid of their own, so that the values do not depend on how they are read.
func (s *Split) more() {
	if err := s.fill(s.input[s.fresh:]); err != nil {
		s.err = err
		return
	}
	low := s.input
	if s.half > 0 {
		s.spectrum = s.plan.Coefficients(s.spectrum, s.input)
		for i, r := range s.response {
			s.spectrum[i] *= r
		}
		low = s.plan.Sequence(s.result, s.spectrum)[2*s.half:]
	}
	if s.ended {
		if left := int64(s.lead) + s.read + int64(s.half) - s.given; left <= int64(len(low)) {
			low, s.err = low[:left], io.EOF
		}
	}
	for i, v := range low {
		s.low = append(s.low, v)
		s.high = append(s.high, s.input[s.half+i]-v)
	}
	s.given += int64(len(low))
	s.fresh = 2 * s.half
	copy(s.input, s.input[len(s.input)-s.fresh:])
}

// fill takes the next values: zeros before the source's first sample, the source, zeros after its last.
func (s *Split) fill(dst []float64) error {
	n := min(s.zeros, len(dst))
	clear(dst[:n])
	s.zeros -= n
	if n < len(dst) && !s.ended {
		more, err := s.src.Read(dst[n:])
		n += more
		s.read += int64(more)
		if err != nil && !errors.Is(err, io.EOF) {
			return err
		}
		s.ended = err != nil
	}
	clear(dst[n:])
	return nil
}
