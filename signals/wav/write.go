package wav

import (
	"bufio"
	"encoding/binary"
	"errors"
	"io"
	"math"

	"github.com/go-audio/audio"
	"github.com/go-audio/wav"
)

// writer writes a file: its header, samples, and at the end the header again with the lengths. A file of 4 GiB or more
// becomes RF64, for which every header has room (EBU Tech 3306).
type writer struct {
	file           io.WriteSeeker
	buffer         *bufio.Writer
	tag            uint16
	rate           uint32
	channels, bits int
	frames         int64
	block          []byte
}

func (w *writer) start(file io.WriteSeeker, tag uint16, rate float64, channels, bits int) {
	*w = writer{file: file, buffer: bufio.NewWriterSize(file, 1<<16), tag: tag, rate: uint32(math.Round(rate)), channels: channels, bits: bits}
}

// header returns the header of the frames written so far, whose length does not depend on them.
func (w *writer) header() []byte {
	const room = 28 // bytes of a ds64 chunk
	le := binary.LittleEndian
	align := w.channels * w.bits / 8
	data := w.frames * int64(align)
	format := le.AppendUint16(nil, w.tag)
	format = le.AppendUint16(format, uint16(w.channels))
	format = le.AppendUint32(format, w.rate)
	format = le.AppendUint32(format, w.rate*uint32(align))
	format = le.AppendUint16(format, uint16(align))
	format = le.AppendUint16(format, uint16(w.bits))
	behind := 4 + 8 + room + 8 + len(format) + 8 // bytes of the header from WAVE on
	if w.tag == tagFloat {
		format = le.AppendUint16(format, 0) // no extension
		behind += 2 + 12
	}
	whole := int64(behind) + data + data%2
	long := whole > math.MaxUint32
	size := func(b []byte, n int64) []byte {
		if long {
			n = math.MaxUint32
		}
		return le.AppendUint32(b, uint32(n))
	}
	name := func(short, other string) string {
		if long {
			return other
		}
		return short
	}
	h := size([]byte(name("RIFF", "RF64")), whole)
	h = append(h, "WAVE"+name("JUNK", "ds64")...)
	h = le.AppendUint32(h, room)
	sizes := make([]byte, room)
	if long {
		le.PutUint64(sizes, uint64(whole))
		le.PutUint64(sizes[8:], uint64(data))
		le.PutUint64(sizes[16:], uint64(w.frames))
	}
	h = append(h, sizes...)
	h = le.AppendUint32(append(h, "fmt "...), uint32(len(format)))
	h = append(h, format...)
	if w.tag == tagFloat {
		h = size(append(h, "fact\x04\x00\x00\x00"...), w.frames)
	}
	return size(append(h, "data"...), data)
}

// Close writes the lengths into the header, and leaves the file, which it does not close, at its end.
func (w *writer) Close() error {
	if w.frames*int64(w.channels*w.bits/8)%2 != 0 {
		w.buffer.WriteByte(0)
	}
	if err := w.buffer.Flush(); err != nil {
		return err
	}
	if _, err := w.file.Seek(0, io.SeekStart); err != nil {
		return err
	}
	if _, err := w.file.Write(w.header()); err != nil {
		return err
	}
	_, err := w.file.Seek(0, io.SeekEnd)
	return err
}

// IntegerWriter writes integer codes, by the library.
type IntegerWriter struct {
	writer
	encoder *wav.Encoder
	codes   audio.IntBuffer
}

// NewIntegerWriter starts a file of integer codes of 16 or 24 bits at a rate in Hz, which the header holds rounded to
// whole hertz. Close ends it; file itself is not closed.
func NewIntegerWriter(file io.WriteSeeker, rate float64, channels, bits int) *IntegerWriter {
	if bits != 16 && bits != 24 {
		panic("wav: codes of 16 or 24 bits are written")
	}
	w := &IntegerWriter{}
	w.start(file, tagPCM, rate, channels, bits)
	// The library makes room for a minute of sound by rate and channels; at 1 Hz and one it does not.
	w.encoder = wav.NewEncoder(&behindHeader{writer: &w.writer}, 1, bits, 1, tagPCM)
	w.encoder.SampleRate, w.encoder.NumChans = int(w.rate), channels
	w.codes = audio.IntBuffer{Format: &audio.Format{NumChannels: channels, SampleRate: int(w.rate)}, SourceBitDepth: bits}
	return w
}

// Write writes codes, channel beside channel; those beyond the bits are held to their range.
func (w *IntegerWriter) Write(codes []int32) error {
	if len(codes)%w.channels != 0 {
		panic("wav: not a whole number of frames")
	}
	top := 1<<(w.bits-1) - 1
	w.codes.Data = w.codes.Data[:0]
	for _, c := range codes {
		w.codes.Data = append(w.codes.Data, min(max(int(c), -top-1), top))
	}
	err := w.encoder.Write(&w.codes)
	w.frames += int64(len(codes) / w.channels)
	return err
}

// behindHeader is what the library writes into. Its header, which has no room for the lengths of a file of 4 GiB, is left
// out for that of the writer; and so is its Close, which would seek.
type behindHeader struct {
	*writer
	skipped int // bytes of the library's header
}

// libraryHeader is the length of the library's header.
const libraryHeader = 44

func (b *behindHeader) Write(p []byte) (int, error) {
	skip := min(libraryHeader-b.skipped, len(p))
	if b.skipped += skip; skip > 0 && b.skipped == libraryHeader {
		b.buffer.Write(b.header()) // what fails here fails again at the next
	}
	_, err := b.buffer.Write(p[skip:])
	return len(p), err
}

// Seek is what only the library's Close asks for.
func (b *behindHeader) Seek(int64, int) (int64, error) { return 0, errors.ErrUnsupported }

// FloatWriter writes 32-bit floating-point samples of one channel. The library's encoder writes no fact chunk, which the
// format asks for, and no more than a frame at a time.
type FloatWriter struct{ writer }

// NewFloatWriter starts a file at a rate in Hz, which the header holds rounded to whole hertz. Close ends it; file itself
// is not closed.
func NewFloatWriter(file io.WriteSeeker, rate float64) *FloatWriter {
	w := &FloatWriter{}
	w.start(file, tagFloat, rate, 1, 32)
	w.buffer.Write(w.header()) // what fails here fails again at the next
	return w
}

// Write writes samples.
func (w *FloatWriter) Write(samples []float64) error {
	w.block = w.block[:0]
	for _, x := range samples {
		w.block = binary.LittleEndian.AppendUint32(w.block, math.Float32bits(float32(x)))
	}
	w.frames += int64(len(samples))
	_, err := w.buffer.Write(w.block)
	return err
}
