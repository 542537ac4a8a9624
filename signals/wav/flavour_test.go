package wav

import (
	"bytes"
	"encoding/binary"
	"errors"
	"io"
	"math"
	"runtime"
	"slices"
	"strings"
	"testing"

	"pgregory.net/rapid"

	"midrail/signals"
)

// flavour writes files by hand, as programs of all kinds do.
type flavour struct {
	tag        uint16
	bits       int
	extensible bool
	valid      int
	before     [][2]string // chunks before the data: name and body
	noPad      bool        // odd chunks without their pad byte
	size       int64       // of the data as the header says; -1: as it is
	cut        int         // bytes cut off the end
	rf64       bool
	long       uint64 // with rf64: what its ds64 chunk says; 0: the data's size
}

func (f flavour) file(rate, channels int, samples []float64) []byte {
	le := binary.LittleEndian
	var data []byte
	for _, x := range samples {
		switch {
		case f.tag == tagFloat && f.bits == 64:
			data = le.AppendUint64(data, math.Float64bits(x))
		case f.tag == tagFloat:
			data = le.AppendUint32(data, math.Float32bits(float32(x)))
		case f.bits == 8:
			data = append(data, byte(int(math.Round(x*128))+128))
		default:
			code := int32(math.Round(x * math.Exp2(float64(f.bits-1))))
			data = append(data, le.AppendUint32(nil, uint32(code))[:f.bits/8]...)
		}
	}
	align := channels * f.bits / 8
	tag := f.tag
	if f.extensible {
		tag = tagExtensible
	}
	var format []byte
	format = le.AppendUint16(format, tag)
	format = le.AppendUint16(format, uint16(channels))
	format = le.AppendUint32(format, uint32(rate))
	format = le.AppendUint32(format, uint32(rate*align))
	format = le.AppendUint16(format, uint16(align))
	format = le.AppendUint16(format, uint16(f.bits))
	if f.extensible {
		format = le.AppendUint16(format, 22)
		format = le.AppendUint16(format, uint16(f.valid))
		format = le.AppendUint32(format, 0)
		format = le.AppendUint16(format, f.tag)
		format = append(format, subFormatTail...)
	}
	out := []byte("RIFF\xff\xff\xff\xffWAVE")
	size := int64(len(data))
	if f.size >= 0 {
		size = f.size
	}
	if f.rf64 {
		copy(out, "RF64")
		out = append(out, "ds64"...)
		out = le.AppendUint32(out, 28)
		out = le.AppendUint64(out, 0)
		long := f.long
		if long == 0 {
			long = uint64(len(data))
		}
		out = le.AppendUint64(out, long)
		out = le.AppendUint64(out, uint64(len(data)/align))
		out = le.AppendUint32(out, 0)
		size = math.MaxUint32
	}
	chunk := func(name, body string) {
		out = append(out, name...)
		out = le.AppendUint32(out, uint32(len(body)))
		out = append(out, body...)
		if len(body)%2 != 0 && !f.noPad {
			out = append(out, 0)
		}
	}
	chunk("fmt ", string(format))
	for _, c := range f.before {
		chunk(c[0], c[1])
	}
	out = append(out, "data"...)
	out = le.AppendUint32(out, uint32(size))
	out = append(out, data...)
	return out[:len(out)-f.cut]
}

func decode(t *testing.T, file []byte) (*File, []float64, error) {
	t.Helper()
	f, err := New("x.wav", bytes.NewReader(file))
	if err != nil {
		return nil, nil, err
	}
	x := make([]float64, f.Frames()*int64(f.Channels()))
	n, err := f.ReadFrames(x)
	if err == nil {
		var more [64]float64
		if m, end := f.ReadFrames(more[:f.Channels()]); m != 0 || end != io.EOF {
			t.Errorf("after the end: %d frames, %v", m, end)
		}
	}
	return f, x[:n*f.Channels()], err
}

// Eighths of full scale are exact in every flavour.
var eighths = []float64{0, 0.125, -0.125, 0.5, -1, 0.875, -0.75, 0.25, -0.5, 0.375, 0, -0.25}

func TestEveryFlavourReadsTheSame(t *testing.T) {
	list := "INFOISFT\x05\x00\x00\x00odd\x00\x00"
	for name, f := range map[string]flavour{
		"8 bits":                {tag: tagPCM, bits: 8, size: -1},
		"16 bits":               {tag: tagPCM, bits: 16, size: -1},
		"24 bits":               {tag: tagPCM, bits: 24, size: -1},
		"32 bits":               {tag: tagPCM, bits: 32, size: -1},
		"float":                 {tag: tagFloat, bits: 32, size: -1},
		"double":                {tag: tagFloat, bits: 64, size: -1},
		"extensible 16":         {tag: tagPCM, bits: 16, extensible: true, valid: 16, size: -1},
		"extensible 20 in 24":   {tag: tagPCM, bits: 24, extensible: true, valid: 20, size: -1},
		"extensible float":      {tag: tagFloat, bits: 32, extensible: true, valid: 32, size: -1},
		"LIST before data":      {tag: tagPCM, bits: 16, before: [][2]string{{"LIST", list}}, size: -1},
		"bext and JUNK":         {tag: tagPCM, bits: 24, before: [][2]string{{"bext", strings.Repeat("x", 602)}, {"JUNK", strings.Repeat("\x00", 28)}}, size: -1},
		"odd chunk":             {tag: tagPCM, bits: 16, before: [][2]string{{"note", "abc"}}, size: -1},
		"odd chunk without pad": {tag: tagPCM, bits: 16, before: [][2]string{{"note", "abc"}}, noPad: true, size: -1},
		"from a pipe":           {tag: tagPCM, bits: 16, size: math.MaxUint32},
		"from a pipe, 0":        {tag: tagPCM, bits: 16, size: 0},
		"from a pipe, 2 GiB":    {tag: tagPCM, bits: 16, size: 0x7ffff000},
		"RF64":                  {tag: tagPCM, bits: 16, rf64: true},
	} {
		for _, channels := range []int{1, 2, 3, 12} {
			got, x, err := decode(t, f.file(44100, channels, eighths))
			if err != nil {
				t.Errorf("%s, %d channels: %v", name, channels, err)
				continue
			}
			if got.Rate() != 44100 || got.Channels() != channels || len(x) != len(eighths) {
				t.Errorf("%s: %g Hz, %d channels, %d samples", name, got.Rate(), got.Channels(), len(x))
				continue
			}
			for i, v := range eighths {
				if x[i] != v {
					t.Errorf("%s, %d channels: sample %d is %g, want %g", name, channels, i, x[i], v)
				}
			}
			if piped := f.size >= 0 && !f.rf64; piped != (got.Note() != "") {
				t.Errorf("%s: note %q", name, got.Note())
			}
		}
	}
}

func TestCutFileIsUsedToItsEnd(t *testing.T) {
	for note, c := range map[string]flavour{
		"4 of 6 frames":         {tag: tagPCM, bits: 16, size: -1, cut: 5},
		"4 of 268435456 frames": {tag: tagPCM, bits: 16, rf64: true, long: 1 << 30, cut: 5},
		"last frame":            {tag: tagPCM, bits: 16, size: math.MaxUint32, cut: 5},
	} {
		f, x, err := decode(t, c.file(48000, 2, eighths))
		if err != nil || len(x) != 8 || !strings.Contains(f.Note(), note) {
			t.Errorf("%d samples, %v, note %q, want %q", len(x), err, f.Note(), note)
		}
	}
}

// Every number of channels and every rate between the limits is read, and of one frame, too.
func TestLimits(t *testing.T) {
	for channels := 1; channels <= signals.MostChannels; channels++ {
		for _, rate := range []int{4000, 9615, 44100, 768000} {
			x := make([]float64, channels)
			x[channels-1] = 0.5
			for _, f := range []flavour{{tag: tagPCM, bits: 24, size: -1}, {tag: tagFloat, bits: 64, size: -1}} {
				got, read, err := decode(t, f.file(rate, channels, x))
				if err != nil || got.Rate() != float64(rate) || got.Channels() != channels || got.Frames() != 1 || !slices.Equal(read, x) {
					t.Errorf("%d channels at %d Hz: %v, %v", channels, rate, read, err)
				}
			}
		}
	}
	for _, c := range []struct{ rate, channels int }{{3999, 1}, {768001, 1}, {48000, 0}, {48000, 65}} {
		_, _, err := decode(t, flavour{tag: tagPCM, bits: 16, size: -1}.file(c.rate, c.channels, make([]float64, c.channels)))
		if fault, ok := errors.AsType[*signals.FormatError](err); !ok || !fault.Unsupported {
			t.Errorf("%d channels at %d Hz: %v", c.channels, c.rate, err)
		}
	}
}

// A data chunk of 0 bytes in a file whose header was written at the end holds nothing, whatever follows it.
func TestNothingIsNoPipe(t *testing.T) {
	file := flavour{tag: tagPCM, bits: 16, size: -1}.file(48000, 1, nil)
	file = append(file, "LIST\x04\x00\x00\x00INFO"...)
	binary.LittleEndian.PutUint32(file[4:], uint32(len(file)-8))
	if _, _, err := decode(t, file); err == nil || !strings.Contains(err.Error(), "not one frame") {
		t.Errorf("%v", err)
	}
}

// behind is a file of a beginning, and zeros.
type behind struct {
	start    []byte
	size, at int64
}

func (b *behind) Seek(offset int64, whence int) (int64, error) {
	if b.at = offset; whence == io.SeekEnd {
		b.at += b.size
	}
	return b.at, nil
}

func (b *behind) Read(p []byte) (int, error) {
	if b.at >= b.size {
		return 0, io.EOF
	}
	n := int(min(int64(len(p)), b.size-b.at))
	clear(p[:n])
	if b.at < int64(len(b.start)) {
		copy(p[:n], b.start[b.at:])
	}
	b.at += int64(n)
	return n, nil
}

// Files over 4 GiB have all of their frames: RF64, and those that were written into a pipe.
func TestOver4GiB(t *testing.T) {
	const frames = 10 << 20 // of 512 bytes: 5 GiB
	first := make([]float64, 64)
	first[63] = 0.375
	for name, f := range map[string]flavour{
		"RF64":      {tag: tagFloat, bits: 64, rf64: true, long: frames * 512},
		"pipe":      {tag: tagFloat, bits: 64, size: math.MaxUint32},
		"RF64 pipe": {tag: tagFloat, bits: 64, rf64: true, long: math.MaxUint64},
	} {
		start := f.file(48000, 64, first)
		w, err := New("x.wav", &behind{start: start, size: int64(len(start)) + (frames-1)*512})
		if err != nil || w.Frames() != frames || w.Channels() != 64 || (w.Note() == "") != (name == "RF64") {
			t.Errorf("%s: %v, %v", name, w, err)
			continue
		}
		x := make([]float64, 5000*64)
		if n, err := w.ReadFrames(x); n != 5000 || err != nil || !slices.Equal(x[:64], first) || x[64] != 0 {
			t.Errorf("%s: %d frames, %v", name, n, err)
		}
	}
}

// An error of reading is no fault of the file's.
func TestErrorsPass(t *testing.T) {
	good := flavour{tag: tagPCM, bits: 16, size: -1, before: [][2]string{{"JUNK", "12345"}}}.file(48000, 1, eighths)
	broken := errors.New("broken")
	junk := bytes.Index(good, []byte("12345"))
	for at := range good {
		if at >= junk && at <= junk+len("12345") {
			continue // what is skipped, and its pad byte
		}
		w, err := New("x.wav", &breaking{bytes.NewReader(good), at, broken})
		if err == nil {
			_, err = w.ReadFrames(make([]float64, len(eighths)))
		}
		if !errors.Is(err, broken) {
			t.Fatalf("broken at byte %d: %v", at, err)
		}
	}
}

// breaking fails to read a byte.
type breaking struct {
	*bytes.Reader
	at  int
	err error
}

func (b *breaking) Read(p []byte) (int, error) {
	from := int(b.Size()) - b.Len()
	if from > b.at {
		return b.Reader.Read(p)
	}
	if from == b.at {
		return 0, b.err
	}
	return b.Reader.Read(p[:min(len(p), b.at-from)])
}

func TestFaultsHaveTheirPlace(t *testing.T) {
	good := flavour{tag: tagPCM, bits: 16, size: -1}.file(48000, 1, eighths)
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
		"empty":       {nil, "empty", false},
		"short":       {good[:7], "header", false},
		"other":       {[]byte("fLaC is not this, no"), "RIFF", false},
		"RIFX":        {change(0, []byte("RIFX")...), "other order", true},
		"not WAVE":    {change(8, []byte("AVI ")...), "WAVE", false},
		"no chunks":   {good[:12], "no fmt chunk", false},
		"no data":     {good[:36], "no data chunk", false},
		"no frames":   {append(bytes.Clone(good[:40]), 0, 0, 0, 0), "not one frame", false},
		"12 bits":     {change(34, 12), "12 bits", true},
		"no channels": {change(22, 0), "0 channels", true},
		"1 Hz":        {change(24, 1, 0, 0, 0), "1 Hz", true},
		"compressed":  {change(20, 2), "format 2", true},
		"wrong frame": {change(32, 3), "does not hold", false},
	} {
		_, _, err := decode(t, c.file)
		var fault *signals.FormatError
		if !errors.As(err, &fault) {
			t.Errorf("%s: %v", name, err)
			continue
		}
		if !strings.Contains(err.Error(), c.want) || fault.Unsupported != c.unsupported || fault.Remedy == "" || !strings.HasPrefix(err.Error(), "x.wav: ") {
			t.Errorf("%s: %v (unsupported: %v)", name, err, fault.Unsupported)
		}
	}
}

// counted tells how many bytes were read.
type counted struct {
	*bytes.Reader
	read int
}

func (c *counted) Read(p []byte) (int, error) {
	n, err := c.Reader.Read(p)
	c.read += n
	return n, err
}

// A small file that claims gigabytes takes neither time nor room: no byte is read twice, and nothing is made for what
// is not there.
func TestClaimsCostNothing(t *testing.T) {
	list := flavour{tag: tagPCM, bits: 16, before: [][2]string{{"LIST", "INFO"}}, size: -1}.file(48000, 2, eighths)
	copy(list[40:], "\xff\xff\xff\xfe") // the LIST's length
	const most = 4 << 20                // bytes; a block of 4096 frames of 64 channels has 2 Mi
	for name, file := range map[string][]byte{
		"LIST":   list,
		"data":   flavour{tag: tagPCM, bits: 16, size: math.MaxUint32 - 1}.file(48000, 2, eighths),
		"ds64":   flavour{tag: tagPCM, bits: 16, rf64: true, long: 1 << 60}.file(48000, 2, eighths),
		"chunks": append([]byte("RIFF\x00\x00\x00\x00WAVE"), strings.Repeat("JUNK\x00\x00\x00\x00", 100)...),
	} {
		var before, after runtime.MemStats
		runtime.ReadMemStats(&before)
		src := &counted{Reader: bytes.NewReader(file)}
		f, err := New("x.wav", src)
		if sound := name == "data" || name == "ds64"; sound != (err == nil) {
			t.Errorf("%s: %v", name, err)
		} else if sound {
			x := make([]float64, 64)
			if n, err := f.ReadFrames(x); n != len(eighths)/2 || err != io.EOF || f.Note() == "" {
				t.Errorf("%s: %d frames, %v", name, n, err)
			}
		}
		runtime.ReadMemStats(&after)
		if got := after.TotalAlloc - before.TotalAlloc; got > most || src.read > len(file) {
			t.Errorf("%s: %d bytes allocated, %d read of %d", name, got, src.read, len(file))
		}
	}
}

func TestRoundTrips(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		f := rapid.SampledFrom([]flavour{
			{tag: tagPCM, bits: 8, size: -1}, {tag: tagPCM, bits: 16, size: -1}, {tag: tagPCM, bits: 24, size: -1}, {tag: tagPCM, bits: 32, size: -1},
			{tag: tagFloat, bits: 32, size: -1}, {tag: tagFloat, bits: 64, size: -1},
		}).Draw(rt, "flavour")
		channels := rapid.IntRange(1, 5).Draw(rt, "channels")
		frames := rapid.IntRange(1, 40).Draw(rt, "frames")
		codes := rapid.SliceOfN(rapid.IntRange(-128, 127), channels*frames, channels*frames).Draw(rt, "codes")
		x := make([]float64, len(codes))
		for i, c := range codes {
			x[i] = float64(c) / 128
		}
		_, got, err := decode(t, f.file(8000, channels, x))
		if err != nil || len(got) != len(x) {
			rt.Fatalf("%d samples, %v", len(got), err)
		}
		for i := range x {
			if got[i] != x[i] {
				rt.Fatalf("sample %d: %g, want %g", i, got[i], x[i])
			}
		}
	})
}

// FuzzNew reads whatever it is given, in bounded room: no more frames than bytes.
func FuzzNew(f *testing.F) {
	for _, x := range []flavour{{tag: tagPCM, bits: 16, size: -1}, {tag: tagFloat, bits: 32, size: -1}, {tag: tagPCM, bits: 24, extensible: true, valid: 20, size: -1}, {tag: tagPCM, bits: 16, rf64: true}, {tag: tagPCM, bits: 16, size: math.MaxUint32}} {
		f.Add(x.file(48000, 2, eighths))
	}
	f.Fuzz(func(t *testing.T, file []byte) {
		if len(file) > 1<<16 {
			return
		}
		w, err := New("x.wav", bytes.NewReader(file))
		if err != nil {
			return
		}
		if w.Frames() > int64(len(file)) {
			t.Fatalf("%d frames in %d bytes", w.Frames(), len(file))
		}
		x := make([]float64, 256*w.Channels())
		for {
			if _, err := w.ReadFrames(x); err != nil {
				return
			}
		}
	})
}
