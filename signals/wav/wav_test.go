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

// A file's bytes by the format: Multimedia Programming Interface and Data Specifications 1.0 (1991), chapter 3, for the
// chunks and their pad byte; EBU Tech 3306 for the room of a ds64 chunk.
func TestWrittenBytes(t *testing.T) {
	const room = "JUNK\x1c\x00\x00\x00" + "\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00\x00"
	for name, c := range map[string]struct {
		channels, bits int
		codes          []int32
		want           string
	}{
		"no frames": {1, 16, nil,
			"RIFF\x48\x00\x00\x00WAVE" + room + "fmt \x10\x00\x00\x00\x01\x00\x01\x00\x40\x1f\x00\x00\x80\x3e\x00\x00\x02\x00\x10\x00data\x00\x00\x00\x00"},
		"16 bits, held to their range": {2, 16, []int32{1, -2, 40000, -40000},
			"RIFF\x50\x00\x00\x00WAVE" + room + "fmt \x10\x00\x00\x00\x01\x00\x02\x00\x40\x1f\x00\x00\x00\x7d\x00\x00\x04\x00\x10\x00data\x08\x00\x00\x00\x01\x00\xfe\xff\xff\x7f\x00\x80"},
		"24 bits, odd": {1, 24, []int32{-2},
			"RIFF\x4c\x00\x00\x00WAVE" + room + "fmt \x10\x00\x00\x00\x01\x00\x01\x00\x40\x1f\x00\x00\xc0\x5d\x00\x00\x03\x00\x18\x00data\x03\x00\x00\x00\xfe\xff\xff\x00"},
	} {
		path := filepath.Join(t.TempDir(), "x.wav")
		f, err := os.Create(path)
		if err != nil {
			t.Fatal(err)
		}
		w := NewIntegerWriter(f, 8000, c.channels, c.bits)
		if c.codes != nil {
			err = w.Write(c.codes)
		}
		if err := errors.Join(err, w.Close(), f.Close()); err != nil {
			t.Fatal(err)
		}
		if got, err := os.ReadFile(path); err != nil || string(got) != c.want {
			t.Errorf("%s: %q, %v, want %q", name, got, err, c.want)
		}
	}
}

// A file that becomes shorter while it is read is no file that ends.
func TestBecomesShorter(t *testing.T) {
	for _, x := range []flavour{{tag: tagPCM, bits: 8, size: -1}, {tag: tagPCM, bits: 16, size: -1}, {tag: tagPCM, bits: 24, size: -1}, {tag: tagPCM, bits: 32, size: -1}, {tag: tagFloat, bits: 32, size: -1}} {
		const frames = 10_000
		file := x.file(48000, 2, make([]float64, 2*frames))
		for _, lost := range []int{1, 1000, frames * 2 * x.bits / 8} {
			path := filepath.Join(t.TempDir(), "x.wav")
			if err := os.WriteFile(path, file, 0o600); err != nil {
				t.Fatal(err)
			}
			w, err := Open(path)
			if err != nil {
				t.Fatal(err)
			}
			if err := os.Truncate(path, int64(len(file)-lost)); err != nil {
				t.Fatal(err)
			}
			if n, err := w.ReadFrames(make([]float64, 2*frames)); n == frames || !errors.Is(err, io.ErrUnexpectedEOF) || errors.Is(err, io.EOF) {
				t.Errorf("%d bits, %d bytes lost: %d frames, %v", x.bits, lost, n, err)
			}
			w.Close()
		}
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

// nowhere keeps nothing.
type nowhere struct{}

func (nowhere) Write(p []byte) (int, error)         { return len(p), nil }
func (nowhere) Seek(at int64, _ int) (int64, error) { return at, nil }

func BenchmarkWrite(b *testing.B) {
	const rate = 48000
	for name, bits := range map[string]int{"16 bits": 16, "24 bits": 24} {
		b.Run(name, func(b *testing.B) {
			w := NewIntegerWriter(nowhere{}, rate, 1, bits)
			codes := make([]int32, rate)
			for b.Loop() {
				if err := w.Write(codes); err != nil {
					b.Fatal(err)
				}
			}
			b.ReportMetric(float64(b.N)/b.Elapsed().Seconds(), "xrealtime")
		})
	}
}
