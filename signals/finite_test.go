package signals

import (
	"errors"
	"io"
	"math"
	"slices"
	"strings"
	"testing"
)

// pairs is a track of two channels.
type pairs struct{ samples []float64 }

func (p *pairs) Rate() float64 { return 8000 }
func (p *pairs) Channels() int { return 2 }
func (p *pairs) Frames() int64 { return int64(len(p.samples) / 2) }
func (p *pairs) Close() error  { return nil }
func (p *pairs) Note() string  { return "noted" }
func (p *pairs) ReadFrames(dst []float64) (int, error) {
	n := copy(dst, p.samples)
	p.samples = p.samples[n:]
	if n < len(dst) {
		return n / 2, io.EOF
	}
	return n / 2, nil
}

func TestFinite(t *testing.T) {
	nan, inf := math.NaN(), math.Inf(-1)
	samples := func() *pairs { return &pairs{[]float64{1, nan, 2, 3, inf, 4, nan, nan, 5, 6}} }
	f := NewFinite(samples(), "x", false)
	block := make([]float64, 4)
	n, err := f.ReadFrames(block)
	if fault, ok := errors.AsType[*FormatError](err); n != 0 || !ok || !strings.Contains(err.Error(), "x: frame 0 (0.000000 s), channel 2") || fault.Remedy == "" {
		t.Errorf("%d frames, %v", n, err)
	}
	f = NewFinite(samples(), "x", true)
	var all []float64
	for err = nil; err == nil; {
		n, err = f.ReadFrames(block)
		all = append(all, block[:2*n]...)
	}
	if want := []float64{1, 0, 2, 3, 2, 4, 2, 4, 5, 6}; err != io.EOF || !slices.Equal(all, want) {
		t.Errorf("%v, %v, want %v", all, err, want)
	}
	if want := "noted; 4 samples"; !strings.HasPrefix(f.Note(), want) {
		t.Errorf("note %q, want %q", f.Note(), want)
	}
}
