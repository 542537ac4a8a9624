// Package raw reads samples that have no header, as loggers write them.
package raw

import (
	"bufio"
	"errors"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"

	"midrail/signals"
)

// Format is what the samples are.
type Format struct {
	Kind     byte // 's' signed, 'u' unsigned (its middle is 0 of sound), 'f' floating-point
	Bits     int  // of a sample: 8, 16, 24 or 32; floating-point 32 or 64
	Big      bool // the most significant byte comes first
	Rate     float64
	Channels int
}

// Parse reads a format as "s16le,16000,1": the samples, the rate in Hz, the number of channels, 1 where it is not
// given. Samples are s8, u8, and s16, u16, s24, u24, s32, u32, f32 or f64 followed by le or be.
func Parse(text string) (Format, error) {
	wrong := func(what string) (Format, error) {
		return Format{}, fmt.Errorf("%q: %s; want SAMPLES,RATE,CHANNELS such as s16le,16000,1", text, what)
	}
	fields := strings.Split(text, ",")
	if len(fields) < 2 || len(fields) > 3 {
		return wrong(fmt.Sprintf("it has %d of the parts", len(fields)))
	}
	f := Format{Channels: 1}
	name := strings.TrimSpace(fields[0])
	bits, little := strings.CutSuffix(name, "le")
	if !little {
		bits, f.Big = strings.CutSuffix(name, "be")
	}
	switch ordered := little || f.Big; {
	case (bits == "s8" || bits == "u8") && !ordered:
	case ordered && strings.Contains(" s16 u16 s24 u24 s32 u32 f32 f64 ", " "+bits+" "):
	default:
		return wrong(fmt.Sprintf("there are no samples %q: s8 u8, and s16 u16 s24 u24 s32 u32 f32 f64 with le or be", name))
	}
	f.Kind = bits[0]
	var err error
	if f.Bits, err = strconv.Atoi(bits[1:]); err != nil {
		panic("raw: a kind of samples without its bits")
	}
	if f.Rate, err = strconv.ParseFloat(strings.TrimSpace(fields[1]), 64); err != nil || !(f.Rate >= signals.LeastRate && f.Rate <= signals.MostRate) {
		return wrong(fmt.Sprintf("the rate %q is not one of %g to %g Hz", fields[1], signals.LeastRate, signals.MostRate))
	}
	if len(fields) == 3 {
		if f.Channels, err = strconv.Atoi(strings.TrimSpace(fields[2])); err != nil || f.Channels < 1 || f.Channels > signals.MostChannels {
			return wrong(fmt.Sprintf("%q is not a number of channels, 1 to %d", fields[2], signals.MostChannels))
		}
	}
	return f, nil
}

// File is raw samples being read. It is a [signals.Track].
type File struct {
	name   string
	src    *bufio.Reader
	format Format
	frames int64
	read   int64 // frames
	block  []byte
	decode Decoder
	note   string
}

// Decoder fills dst with the samples that a block of whole frames is.
type Decoder func(dst []float64, block []byte) error

// New reads samples of a format from src, from its start to its end; name is what faults call it. The error is a
// *[signals.FormatError] where there is not one frame.
func New(name string, src io.ReadSeeker, f Format) (*File, error) {
	size, err := src.Seek(0, io.SeekEnd)
	if err != nil {
		return nil, err
	}
	if _, err := src.Seek(0, io.SeekStart); err != nil {
		return nil, err
	}
	width := int64(f.Channels * f.Bits / 8)
	r := Part(name, src, f, size/width, nil)
	if r.frames == 0 {
		return nil, &signals.FormatError{File: name, At: "byte 0", Text: "there is not one frame of sound in it", Remedy: "record again, or give its format with --raw"}
	}
	if left := size % width; left > 0 {
		r.note = fmt.Sprintf("the file ends within a frame; its last %d bytes are left out: is its format right?", left)
	}
	return r, nil
}

// Part reads a number of frames from src, as they lie within a file of another kind, by a decoder; nil: that of the
// format. That they are not all there is an error of reading.
func Part(name string, src io.Reader, f Format, frames int64, decode Decoder) *File {
	if decode == nil {
		decode = f.decode
	}
	return &File{name: name, src: bufio.NewReaderSize(src, 1<<16), format: f, frames: frames, decode: decode}
}

// Rate returns the rate in Hz.
func (r *File) Rate() float64 { return r.format.Rate }

// Channels returns the number of channels.
func (r *File) Channels() int { return r.format.Channels }

// Frames returns the number of whole frames.
func (r *File) Frames() int64 { return r.frames }

// Note returns a word about what is left out of the file, or "".
func (r *File) Note() string { return r.note }

// Close does nothing: what New was given stays its caller's.
func (r *File) Close() error { return nil }

// blockFrames is how many frames are taken from the file at once.
const blockFrames = 4096

// ReadFrames implements [signals.Track]. Floating-point samples are given as they are, finite or not.
func (r *File) ReadFrames(dst []float64) (int, error) {
	width := r.format.Channels
	if len(dst)%width != 0 {
		panic("raw: not a whole number of frames")
	}
	done := 0
	for done < len(dst)/width {
		frames := int(min(int64(len(dst)/width-done), blockFrames, r.frames-r.read))
		if frames == 0 {
			return done, io.EOF
		}
		size := frames * width * r.format.Bits / 8
		if cap(r.block) < size {
			r.block = make([]byte, size)
		}
		r.block = r.block[:size]
		if _, err := io.ReadFull(r.src, r.block); err != nil {
			if errors.Is(err, io.EOF) {
				err = io.ErrUnexpectedEOF // it has become shorter
			}
			return done, fmt.Errorf("%s: reading frame %d: %w", r.name, r.read, err)
		}
		if err := r.decode(dst[done*width:(done+frames)*width], r.block); err != nil {
			return done, fmt.Errorf("%s: decoding frame %d: %w", r.name, r.read, err)
		}
		done, r.read = done+frames, r.read+int64(frames)
	}
	return done, nil
}

// decode fills dst with the samples of b.
func (f Format) decode(dst []float64, b []byte) error {
	size, scale := f.Bits/8, math.Ldexp(1, 1-f.Bits)
	step, most := 1, size-1 // towards the most significant byte, which is the last
	if f.Big {
		step, most = -1, 0
	}
	for i := range dst {
		sample := b[i*size : (i+1)*size]
		var code uint64 // the sample at its top
		for k, at := 0, most-step*(size-1); k < size; k, at = k+1, at+step {
			code = code>>8 | uint64(sample[at])<<56
		}
		switch {
		case f.Kind == 'f' && f.Bits == 64:
			dst[i] = math.Float64frombits(code)
			continue
		case f.Kind == 'f':
			dst[i] = float64(math.Float32frombits(uint32(code >> 32)))
			continue
		case f.Kind == 'u':
			code ^= 1 << 63
		}
		dst[i] = float64(int64(code)>>(64-f.Bits)) * scale
	}
	return nil
}
