package wav

import (
	"bytes"
	"errors"
	"io"
	"math"
	"os"
	"path/filepath"
	"testing"
)

func TestWrittenFilesReadBack(t *testing.T) {
	dir := t.TempDir()
	codes := []int32{0, 1, -1, 32767, -32768, 12345, 7}
	for _, bits := range []int{16, 24} {
		path := filepath.Join(dir, "codes.wav")
		f, err := os.Create(path)
		if err != nil {
			t.Fatal(err)
		}
		w := NewIntegerWriter(f, 9615.38, 1, bits)
		if err := errors.Join(w.Write(codes[:3]), w.Write(codes[3:]), w.Close(), f.Close()); err != nil {
			t.Fatal(err)
		}
		got := readAll(t, path, 9615)
		for i, c := range codes {
			if want := float64(c) / math.Exp2(float64(bits-1)); got[i] != want {
				t.Errorf("%d bits: sample %d is %g, want %g", bits, i, got[i], want)
			}
		}
	}
	path := filepath.Join(dir, "float.wav")
	f, err := os.Create(path)
	if err != nil {
		t.Fatal(err)
	}
	samples := []float64{0, 0.5, -2.25, 1e-3}
	w := NewFloatWriter(f, 48000)
	if err := errors.Join(w.Write(samples), w.Close(), f.Close()); err != nil {
		t.Fatal(err)
	}
	for i, got := range readAll(t, path, 48000) {
		if want := float64(float32(samples[i])); got != want {
			t.Errorf("float: sample %d is %g, want %g", i, got, want)
		}
	}
}

// head is a file of which only the beginning is kept.
type head struct {
	start bytes.Buffer
	at    int64
}

func (h *head) Write(p []byte) (int, error) {
	if h.at == 0 {
		h.start.Reset()
	}
	h.start.Write(p)
	h.at += int64(len(p))
	return len(p), nil
}

func (h *head) Seek(offset int64, whence int) (int64, error) {
	h.at = offset
	return offset, nil
}

// A file of 4 GiB and more is RF64, and reads back; one frame less is not.
func TestWrittenFilesOver4GiB(t *testing.T) {
	const integerHeader, floatHeader = 80, 94 // bytes
	for _, c := range []struct {
		frames int64
		long   bool
	}{{(math.MaxUint32 - integerHeader + 8) / 6, false}, {(math.MaxUint32-integerHeader+8)/6 + 1, true}, {1 << 40, true}} {
		var h head
		w := NewIntegerWriter(&h, 48000, 2, 24)
		w.frames = c.frames
		if err := w.Close(); err != nil {
			t.Fatal(err)
		}
		start := h.start.Bytes()
		r, err := New("x.wav", &behind{start: start, size: int64(len(start)) + 6*c.frames})
		if err != nil || r.Frames() != c.frames || r.Channels() != 2 || r.Note() != "" || (string(start[:4]) == "RF64") != c.long || len(start) != integerHeader {
			t.Errorf("%d frames: %v, %v, a header of %d bytes, %q", c.frames, r, err, len(start), start[:4])
		}
	}
	var h head
	w := NewFloatWriter(&h, 48000)
	w.frames = 1 << 31
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	r, err := New("x.wav", &behind{start: h.start.Bytes(), size: floatHeader + 4<<31})
	if err != nil || r.Frames() != 1<<31 || r.Note() != "" || h.start.Len() != floatHeader {
		t.Errorf("%v, %v, a header of %d bytes", r, err, h.start.Len())
	}
}

// What was written before a program was killed is read, with a word.
func TestFileThatWasNeverClosed(t *testing.T) {
	path := filepath.Join(t.TempDir(), "x.wav")
	f, err := os.Create(path)
	if err != nil {
		t.Fatal(err)
	}
	w := NewIntegerWriter(f, 48000, 1, 16)
	if err := errors.Join(w.Write(make([]int32, 100_000)), f.Close()); err != nil {
		t.Fatal(err)
	}
	r, err := Open(path)
	if err != nil || r.Frames() < 50_000 || r.Note() == "" {
		t.Fatalf("%v, %v", r, err)
	}
	r.Close()
}

func readAll(t *testing.T, path string, rate float64) []float64 {
	t.Helper()
	f, err := Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	if f.Rate() != rate || f.Note() != "" {
		t.Errorf("rate %g, note %q", f.Rate(), f.Note())
	}
	got := make([]float64, f.Frames()+1)
	n, err := f.ReadFrames(got)
	if err != io.EOF || int64(n) != f.Frames() {
		t.Fatalf("%d frames of %d, %v", n, f.Frames(), err)
	}
	return got[:n]
}

func BenchmarkRead(b *testing.B) {
	const rate = 48000
	for name, f := range map[string]flavour{
		"16 bits": {tag: tagPCM, bits: 16, size: -1}, "24 bits": {tag: tagPCM, bits: 24, size: -1}, "float": {tag: tagFloat, bits: 32, size: -1},
	} {
		b.Run(name, func(b *testing.B) {
			file := f.file(rate, 1, make([]float64, rate))
			x := make([]float64, rate)
			for b.Loop() {
				w, err := New("x.wav", bytes.NewReader(file))
				if err != nil {
					b.Fatal(err)
				}
				if n, err := w.ReadFrames(x); n != rate || err != nil {
					b.Fatal(n, err)
				}
			}
			b.ReportMetric(float64(b.N)/b.Elapsed().Seconds(), "xrealtime")
		})
	}
}
