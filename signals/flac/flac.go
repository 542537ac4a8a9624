// Package flac reads FLAC streams (RFC 9639) in blocks of frames.
//
// A sample is its code of b bits divided by 2^(b−1), as in a WAV file of the same codes. A file is never trusted: what
// it says of itself is checked first, and no more memory is used than one of its blocks takes.
package flac

import (
	"bufio"
	"errors"
	"fmt"
	"io"
	"math"

	"github.com/mewkiz/flac"
	"github.com/mewkiz/flac/frame"

	"midrail/signals"
)

// Signature begins every stream.
const Signature = "fLaC"

// mostBits is the widest sample that is read; wider ones do not fit the decoder's arithmetic.
const mostBits = 24

// File is a FLAC stream being read. It is a [signals.Track].
type File struct {
	name   string
	src    *source
	stream *flac.Stream
	rate   uint32
	width  int
	bits   int
	frames int64 // as the stream says; −1: it does not
	read   int64 // frames handed out
	block  *frame.Frame
	used   int // frames of block handed out
	err    error
	note   string
}

// New reads a stream from src; name is what faults call it. The error is a *[signals.FormatError] where the stream is
// not one that is read.
func New(name string, src io.Reader) (*File, error) {
	f := &File{name: name, src: &source{Reader: src}}
	buffered := bufio.NewReader(f.src)
	// The decoder takes whatever block comes first, at its word; so the first is looked at before.
	head, err := buffered.Peek(8)
	if err != nil && f.src.err == nil {
		return nil, f.fault("byte 0", "the file ends before its header does", "record again, or copy it again")
	}
	if err != nil {
		return nil, f.src.err
	}
	if string(head[:4]) != Signature {
		return nil, f.fault("byte 0", "it does not begin with "+Signature, "is this a FLAC file?")
	}
	if head[4]&0x7f != 0 || head[5] != 0 || head[6] != 0 || head[7] != 34 {
		return nil, f.fault("byte 4", "it does not begin with a block that describes the stream", "copy the file again")
	}
	if f.stream, err = flac.New(buffered); err != nil {
		return nil, f.failed("header", err)
	}
	info := f.stream.Info
	f.rate, f.width, f.bits, f.frames = info.SampleRate, int(info.NChannels), int(info.BitsPerSample), int64(info.NSamples)
	if f.frames == 0 {
		f.frames = -1
	}
	if r := float64(f.rate); r < signals.LeastRate || r > signals.MostRate {
		return nil, f.unsupported(fmt.Sprintf("a rate of %d Hz", f.rate), fmt.Sprintf("%g to %g Hz are read", signals.LeastRate, signals.MostRate))
	}
	if f.bits > mostBits {
		return nil, f.unsupported(fmt.Sprintf("samples of %d bits", f.bits), fmt.Sprintf("convert it to %d bits or fewer, or to WAV", mostBits))
	}
	if f.next(); f.block == nil {
		if errors.Is(f.err, io.EOF) {
			return nil, f.fault("the end", "there is not one frame of sound in it", "record again")
		}
		return nil, f.err
	}
	return f, nil
}

func (f *File) fault(at, text, remedy string) *signals.FormatError {
	return &signals.FormatError{File: f.name, At: at, Text: text, Remedy: remedy}
}

func (f *File) unsupported(text, remedy string) error {
	e := f.fault("header", text, remedy)
	e.Unsupported = true
	return e
}

// failed is the fault of an error of the decoder's; one of reading passes as it is.
func (f *File) failed(at string, err error) error {
	switch {
	case f.src.err != nil:
		return f.src.err
	case errors.Is(err, io.ErrUnexpectedEOF), errors.Is(err, io.EOF):
		return f.fault(at, "the file ends within it", "copy the file again")
	}
	return f.fault(at, "it is damaged ("+err.Error()+")", "copy the file again")
}

// source remembers the error of reading that ended it, which the decoder may tell otherwise.
type source struct {
	io.Reader
	err error
}

func (s *source) Read(p []byte) (int, error) {
	n, err := s.Reader.Read(p)
	if err != nil && !errors.Is(err, io.EOF) {
		s.err = err
	}
	return n, err
}

// Rate returns the rate in Hz.
func (f *File) Rate() float64 { return float64(f.rate) }

// Channels returns the number of channels, 1 to 8.
func (f *File) Channels() int { return f.width }

// Frames returns the number of frames that the stream says it has, −1 where it does not.
func (f *File) Frames() int64 { return f.frames }

// Note returns a word about what is missing from the file, or "": it is known at the end.
func (f *File) Note() string { return f.note }

// Close does nothing: what New was given stays its caller's.
func (f *File) Close() error { return nil }

// next takes the stream's next block; without one, err tells why.
func (f *File) next() {
	f.used = 0
	if f.frames >= 0 && f.read >= f.frames { // what follows is no sound
		f.block, f.err = nil, io.EOF
		return
	}
	f.block, f.err = f.stream.ParseNext()
	at := fmt.Sprintf("the block at frame %d", f.read)
	cut := errors.Is(f.err, io.ErrUnexpectedEOF) && f.read > 0
	switch {
	case f.err == nil:
		f.err = f.check(at)
	case f.src.err == nil && (cut || errors.Is(f.err, io.EOF)):
		f.err = io.EOF
		if f.read < f.frames {
			f.note = fmt.Sprintf("the file is cut short: %d of %d frames are there, and used", f.read, f.frames)
		} else if cut {
			f.note = fmt.Sprintf("the file ends within a block; the %d frames before it are used", f.read)
		}
	default:
		f.err = f.failed(at, f.err)
	}
	if f.err != nil {
		f.block = nil
	}
}

// check holds a block to what the stream says of itself: the decoder lets each block say something else.
func (f *File) check(at string) error {
	b := f.block
	if len(b.Subframes) != f.width || b.BitsPerSample != 0 && int(b.BitsPerSample) != f.bits || b.SampleRate != 0 && b.SampleRate != f.rate {
		return f.fault(at, "its rate, channels or bits are not those of the stream", "convert the file")
	}
	for _, s := range b.Subframes {
		if len(s.Samples) != int(b.BlockSize) {
			return f.fault(at, "it holds fewer samples than it says", "copy the file again")
		}
	}
	return nil
}

// ReadFrames implements [signals.Track].
func (f *File) ReadFrames(dst []float64) (int, error) {
	if len(dst)%f.width != 0 {
		panic("flac: not a whole number of frames")
	}
	scale := math.Ldexp(1, 1-f.bits)
	done := 0
	for done < len(dst)/f.width {
		if f.block == nil {
			return done, f.err
		}
		n := min(int(f.block.BlockSize)-f.used, len(dst)/f.width-done)
		if f.frames >= 0 {
			n = int(min(int64(n), f.frames-f.read))
		}
		for c, s := range f.block.Subframes {
			for i, code := range s.Samples[f.used : f.used+n] {
				dst[(done+i)*f.width+c] = float64(code) * scale
			}
		}
		done, f.used, f.read = done+n, f.used+n, f.read+int64(n)
		if f.used == int(f.block.BlockSize) || f.read == f.frames {
			f.next()
		}
	}
	return done, nil
}
