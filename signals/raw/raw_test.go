package raw

import (
	"bytes"
	"errors"
	"io"
	"math"
	"runtime"
	"slices"
	"strings"
	"testing"

	"midrail/signals"
)

func TestFormats(t *testing.T) {
	for text, want := range map[string]struct {
		file    []byte
		samples []float64
	}{
		"s8,8000":        {[]byte{0x00, 0x40, 0x80, 0x7f}, []float64{0, 0.5, -1, 127. / 128}},
		"u8,8000,1":      {[]byte{0x80, 0xc0, 0x00, 0xff}, []float64{0, 0.5, -1, 127. / 128}},
		"s16le,16000,2":  {[]byte{0, 0x40, 0, 0x80}, []float64{0.5, -1}},
		"s16be,16000,2":  {[]byte{0x40, 0, 0x80, 0}, []float64{0.5, -1}},
		"u16le,16000":    {[]byte{0, 0xc0, 1, 0x80}, []float64{0.5, 1. / 32768}},
		"s24le,16000":    {[]byte{0, 0, 0xc0, 1, 0, 0}, []float64{-0.5, 1. / (1 << 23)}},
		"s24be,16000":    {[]byte{0xc0, 0, 0, 0, 0, 1}, []float64{-0.5, 1. / (1 << 23)}},
		"u24le,16000":    {[]byte{0, 0, 0xc0}, []float64{0.5}},
		"s32le,16000":    {[]byte{1, 0, 0, 0x80}, []float64{-1 + 1./(1<<31)}},
		"u32be,16000":    {[]byte{0xc0, 0, 0, 0}, []float64{0.5}},
		"f32le,16000":    {[]byte{0, 0, 0x80, 0xbf}, []float64{-1}},
		"f32be,16000":    {[]byte{0xbf, 0x80, 0, 0}, []float64{-1}},
		"f64be, 9615.38": {[]byte{0x3f, 0xe0, 0, 0, 0, 0, 0, 0}, []float64{0.5}},
	} {
		f, err := Parse(text)
		if err != nil {
			t.Error(err)
			continue
		}
		r, err := New("x", bytes.NewReader(want.file), f)
		if err != nil {
			t.Errorf("%s: %v", text, err)
			continue
		}
		got := make([]float64, len(want.samples))
		n, err := r.ReadFrames(got)
		if err != nil || n*f.Channels != len(got) || !slices.Equal(got, want.samples) || r.Frames() != int64(n) || r.Note() != "" {
			t.Errorf("%s: %v, %v, want %v", text, got, err, want.samples)
		}
		if n, err := r.ReadFrames(got); n != 0 || err != io.EOF {
			t.Errorf("%s: after the end %d, %v", text, n, err)
		}
	}
}

func TestNoFormats(t *testing.T) {
	for text, want := range map[string]string{
		"s16le": "parts", "": "parts", "s16,16000": "no samples", "s8le,16000": "no samples", "s12le,16000": "no samples", "16le,8000": "no samples",
		"s16le,NaN": "rate", "s16le,1": "rate", "s16le,x": "rate", "s16le,16000,0": "channels", "s16le,16000,65": "channels", "s16le,16000,1,1": "parts",
	} {
		if _, err := Parse(text); err == nil || !strings.Contains(err.Error(), want) || !strings.Contains(err.Error(), "s16le,16000,1") {
			t.Errorf("%q: %v", text, err)
		}
	}
}

func TestEnds(t *testing.T) {
	f := Format{Kind: 's', Bits: 16, Rate: 8000, Channels: 2}
	r, err := New("x", bytes.NewReader(make([]byte, 7)), f)
	if err != nil || r.Frames() != 1 || !strings.Contains(r.Note(), "3 bytes") {
		t.Errorf("%v, %v", r, err)
	}
	_, err = New("x", bytes.NewReader(make([]byte, 3)), f)
	if fault, ok := errors.AsType[*signals.FormatError](err); !ok || fault.Remedy == "" {
		t.Errorf("%v", err)
	}
}

// zeros is a file of a size that no disk has.
type zeros struct{ at int64 }

const zerosSize = 1 << 50

func (z *zeros) Seek(offset int64, whence int) (int64, error) {
	if z.at = offset; whence == io.SeekEnd {
		z.at += zerosSize
	}
	return z.at, nil
}

func (z *zeros) Read(p []byte) (int, error) {
	clear(p)
	z.at += int64(len(p))
	return len(p), nil
}

// However large the file, a block is all that is in memory.
func TestMemory(t *testing.T) {
	var before, after runtime.MemStats
	runtime.ReadMemStats(&before)
	r, err := New("x", &zeros{}, Format{Kind: 'f', Bits: 64, Rate: 8000, Channels: 64})
	if err != nil || r.Frames() != zerosSize/512 {
		t.Fatalf("%v, %v", r, err)
	}
	x := make([]float64, 4096*64)
	for range 10 {
		if n, err := r.ReadFrames(x); n != 4096 || err != nil {
			t.Fatalf("%d frames, %v", n, err)
		}
	}
	runtime.ReadMemStats(&after)
	const most = 8 << 20 // bytes; a block has 2 Mi as bytes and as many as numbers, and ten have 40 Mi
	if got := after.TotalAlloc - before.TotalAlloc; got > most {
		t.Errorf("%d bytes allocated", got)
	}
}

// A file that becomes shorter while it is read is no file that ends.
func TestBecomesShorter(t *testing.T) {
	for _, left := range []int{0, 3, 4 * blockFrames, 4*blockFrames + 1} {
		r := Part("x", bytes.NewReader(make([]byte, left)), Format{Kind: 's', Bits: 16, Rate: 8000, Channels: 2}, 10*blockFrames, nil)
		n, err := r.ReadFrames(make([]float64, 2*10*blockFrames))
		if n != left/(4*blockFrames)*blockFrames || !errors.Is(err, io.ErrUnexpectedEOF) || errors.Is(err, io.EOF) {
			t.Errorf("%d bytes left: %d frames, %v", left, n, err)
		}
	}
}

// FuzzNew reads whatever it is given in whatever format, no more of it than there is.
func FuzzNew(f *testing.F) {
	f.Add("s16le,16000,2", []byte{1, 2, 3, 4, 5})
	f.Add("f64be,768000,64", make([]byte, 1024))
	f.Add("u24le,4000", []byte{1, 2, 3})
	f.Fuzz(func(t *testing.T, text string, file []byte) {
		format, err := Parse(text)
		if err != nil || len(file) > 1<<16 {
			return
		}
		r, err := New("x", bytes.NewReader(file), format)
		if err != nil {
			return
		}
		x := make([]float64, 100*r.Channels())
		total := 0
		for {
			n, err := r.ReadFrames(x)
			for _, v := range x[:n*r.Channels()] {
				if format.Kind != 'f' && !(math.Abs(v) <= 1) {
					t.Fatalf("a sample of %g", v)
				}
			}
			total += n
			if err != nil {
				break
			}
		}
		if int64(total) != r.Frames() {
			t.Fatalf("%d frames, %d told", total, r.Frames())
		}
	})
}
