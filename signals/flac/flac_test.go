package flac

import (
	"bytes"
	"errors"
	"io"
	"os"
	"runtime"
	"slices"
	"strings"
	"testing"
	"testing/iotest"

	"github.com/mewkiz/flac"
	"github.com/mewkiz/flac/frame"
	"github.com/mewkiz/flac/meta"

	"midrail/signals"
	"midrail/signals/wav"
)

func load(t testing.TB, name string) []byte {
	t.Helper()
	b, err := os.ReadFile("testdata/" + name)
	if err != nil {
		t.Fatal(err)
	}
	return b
}

// whole reads a track to its end in blocks of an odd size.
func whole(t signals.Track) ([]float64, error) {
	var all []float64
	block := make([]float64, 777*t.Channels())
	for {
		n, err := t.ReadFrames(block)
		all = append(all, block[:n*t.Channels()]...)
		if errors.Is(err, io.EOF) {
			return all, nil
		}
		if err != nil {
			return all, err
		}
	}
}

// A stream and the WAV file of the same sound, both written by sox, are the same to the bit.
func TestSameAsWAV(t *testing.T) {
	for _, name := range []string{"stereo-16", "mono-24"} {
		f, err := New(name, bytes.NewReader(load(t, name+".flac")))
		if err != nil {
			t.Fatal(err)
		}
		w, err := wav.New(name, bytes.NewReader(load(t, name+".wav")))
		if err != nil {
			t.Fatal(err)
		}
		if f.Rate() != w.Rate() || f.Channels() != w.Channels() || f.Frames() != w.Frames() {
			t.Errorf("%s: %g Hz, %d channels, %d frames", name, f.Rate(), f.Channels(), f.Frames())
		}
		got, err := whole(f)
		if err != nil {
			t.Fatal(err)
		}
		want, err := whole(w)
		if err != nil {
			t.Fatal(err)
		}
		if !slices.Equal(got, want) || len(want) == 0 {
			t.Errorf("%s: %d samples differ from the WAV file's %d", name, len(got), len(want))
		}
		if f.Note() != "" {
			t.Errorf("%s: note %q", name, f.Note())
		}
	}
}

// A stream that ends early is used to its end, with a word.
func TestCutStreamIsUsedToItsEnd(t *testing.T) {
	full, err := New("x", bytes.NewReader(load(t, "stereo-16.flac")))
	if err != nil {
		t.Fatal(err)
	}
	all, err := whole(full)
	if err != nil {
		t.Fatal(err)
	}
	b := load(t, "stereo-16.flac")
	f, err := New("x", bytes.NewReader(b[:len(b)*2/3]))
	if err != nil {
		t.Fatal(err)
	}
	got, err := whole(f)
	if err != nil || len(got) == 0 || len(got) >= len(all) || !slices.Equal(got, all[:len(got)]) || !strings.Contains(f.Note(), "cut short") {
		t.Errorf("%d of %d samples, %v, note %q", len(got), len(all), err, f.Note())
	}
}

func TestFaultsHaveTheirPlace(t *testing.T) {
	good := load(t, "stereo-16.flac")
	change := func(at int, to ...byte) []byte {
		b := bytes.Clone(good)
		copy(b[at:], to)
		return b
	}
	for name, c := range map[string]struct {
		file        []byte
		want        string
		unsupported bool
	}{
		"empty":          {nil, "ends before its header", false},
		"other":          {change(0, 'R', 'I', 'F', 'F'), "does not begin with fLaC", false},
		"other block":    {change(4, 1), "describes the stream", false},
		"no rate":        {change(18, 0, 0, good[20]&0x0f), "sample rate (0)", false},
		"1 Hz":           {change(18, 0, 0, 0x10|good[20]&0x0f), "a rate of 1 Hz", true},
		"32 bits":        {change(20, good[20]|1, 0xf0|good[21]&0x0f), "32 bits", true},
		"header alone":   {good[:30], "ends within it", false},
		"no sound":       {good[:42], "ends within it", false},
		"damaged":        {change(3000, good[3000]^0x55), "damaged", false},
		"other channels": {change(20, good[20]&^0x0e), "not those of the stream", false},
	} {
		f, err := New("x.flac", bytes.NewReader(c.file))
		if err == nil {
			_, err = whole(f)
		}
		fault, ok := errors.AsType[*signals.FormatError](err)
		if !ok {
			t.Errorf("%s: %v", name, err)
			continue
		}
		if !strings.Contains(err.Error(), c.want) || fault.Unsupported != c.unsupported || fault.Remedy == "" || !strings.HasPrefix(err.Error(), "x.flac: ") {
			t.Errorf("%s: %v (unsupported: %v)", name, err, fault.Unsupported)
		}
	}
}

// An error of reading is no fault of the file's.
func TestErrorsPass(t *testing.T) {
	good := load(t, "tiny.flac")
	broken := errors.New("broken")
	for at := range good {
		f, err := New("x", io.MultiReader(bytes.NewReader(good[:at]), iotest.ErrReader(broken)))
		if err == nil {
			_, err = whole(f)
		}
		if !errors.Is(err, broken) {
			t.Fatalf("broken at byte %d: %v", at, err)
		}
	}
}

// A small file that unpacks to hours takes the room of a block; one that claims more than it holds, too.
func TestMemory(t *testing.T) {
	const blocks, size, channels = 100, 65535, 8
	var file bytes.Buffer
	encoder, err := flac.NewEncoder(&file, &meta.StreamInfo{BlockSizeMin: size, BlockSizeMax: size, SampleRate: 8000, NChannels: channels, BitsPerSample: 16})
	if err != nil {
		t.Fatal(err)
	}
	for range blocks {
		block := &frame.Frame{Header: frame.Header{BlockSize: size, SampleRate: 8000, Channels: frame.ChannelsLRCLfeLsRsSlSr, BitsPerSample: 16, HasFixedBlockSize: true}}
		for range channels {
			block.Subframes = append(block.Subframes, &frame.Subframe{SubHeader: frame.SubHeader{Pred: frame.PredConstant}, Samples: slices.Repeat([]int32{1 << 14}, size), NSamples: size})
		}
		if err := encoder.WriteFrame(block); err != nil {
			t.Fatal(err)
		}
	}
	if err := encoder.Close(); err != nil {
		t.Fatal(err)
	}
	packed := file.Bytes()
	copy(packed[21:], []byte{packed[21] | 0x0f, 0xff, 0xff, 0xff, 0xff}) // 2³⁶ − 1 frames, it says
	if len(packed) > 4096 {
		t.Fatalf("the file has %d bytes", len(packed))
	}
	var before runtime.MemStats
	runtime.GC()
	runtime.ReadMemStats(&before)
	f, err := New("x", bytes.NewReader(packed))
	if err != nil {
		t.Fatal(err)
	}
	x := make([]float64, 4096*channels)
	frames := 0
	const most = 32 << 20 // bytes in use, garbage included, of which a block has 2; all have 210
	for err == nil {
		var n int
		n, err = f.ReadFrames(x)
		frames += n
		var now runtime.MemStats
		if frames%(16*4096) == 0 {
			runtime.ReadMemStats(&now)
		}
		if got := int64(now.HeapAlloc) - int64(before.HeapAlloc); got > most {
			t.Fatalf("%d bytes in use after %d frames", got, frames)
		}
	}
	if err != io.EOF || frames != blocks*size || x[0] != 0.5 || !strings.Contains(f.Note(), "6553500 of 68719476735 frames") {
		t.Errorf("%d frames, %v, note %q", frames, err, f.Note())
	}
}

// FuzzNew reads whatever it is given to its end. What a block decompresses to is bounded by the format: 65535 frames of
// 8 channels from no fewer than 10 bytes.
func FuzzNew(f *testing.F) {
	f.Add(load(f, "tiny.flac"))
	f.Fuzz(func(t *testing.T, file []byte) {
		if len(file) > 1<<13 {
			return
		}
		r, err := New("x.flac", bytes.NewReader(file))
		if err != nil {
			return
		}
		x := make([]float64, 4096*r.Channels())
		frames := 0
		for {
			n, err := r.ReadFrames(x)
			for _, v := range x[:n*r.Channels()] {
				if !(v >= -256 && v <= 256) {
					t.Fatalf("a sample of %g", v)
				}
			}
			if frames += n; frames > len(file)*65535/10 {
				t.Fatalf("%d frames from %d bytes", frames, len(file))
			}
			if err != nil {
				return
			}
		}
	})
}
