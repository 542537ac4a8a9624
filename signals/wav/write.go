package wav

import (
	"bufio"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"math"

	"github.com/go-audio/audio"
	"github.com/go-audio/wav"
)

// ErrTooLong says that a file would pass the 4 GiB that a WAV file can have.
var ErrTooLong = errors.New("wav: the file would be longer than the 4 GiB that the format allows")

// longest is how many bytes of sound a file can hold, with room for its header.
const longest = math.MaxUint32 - 256

// IntegerWriter writes integer codes.
type IntegerWriter struct {
	encoder *wav.Encoder
	file    *bufferedFile
	buffer  audio.IntBuffer
	bits    int
	width   int
	bytes   int64
}

// NewIntegerWriter starts a file of integer codes of 16 or 24 bits at a rate in Hz, which the header holds rounded to
// whole hertz. [IntegerWriter.Close] ends it; w itself is not closed.
func NewIntegerWriter(w io.WriteSeeker, rate float64, channels, bits int) *IntegerWriter {
	if bits != 16 && bits != 24 {
		panic("wav: codes of 16 or 24 bits are written")
	}
	file := &bufferedFile{w: w, buffer: bufio.NewWriterSize(w, 1<<16)}
	// The library makes room for a minute of sound by rate and channels; at 1 Hz and one it does not.
	e := wav.NewEncoder(file, 1, bits, 1, tagPCM)
	e.SampleRate, e.NumChans = int(math.Round(rate)), channels
	return &IntegerWriter{
		encoder: e, file: file, bits: bits, width: channels,
		buffer: audio.IntBuffer{Format: &audio.Format{NumChannels: channels, SampleRate: int(math.Round(rate))}, SourceBitDepth: bits},
	}
}

// Write writes codes, channel beside channel; those beyond the bits are held to their range.
func (w *IntegerWriter) Write(codes []int32) error {
	if len(codes)%w.width != 0 {
		panic("wav: not a whole number of frames")
	}
	if w.bytes += int64(len(codes) * w.bits / 8); w.bytes > longest {
		return ErrTooLong
	}
	top := 1<<(w.bits-1) - 1
	w.buffer.Data = w.buffer.Data[:0]
	for _, c := range codes {
		w.buffer.Data = append(w.buffer.Data, min(max(int(c), -top-1), top))
	}
	return w.encoder.Write(&w.buffer)
}

// Close writes the lengths into the header.
func (w *IntegerWriter) Close() error {
	if w.bytes == 0 { // the header comes with the first samples
		if err := w.Write(nil); err != nil {
			return err
		}
	}
	if w.bytes%2 != 0 {
		if _, err := w.file.Write([]byte{0}); err != nil {
			return err
		}
		w.encoder.WrittenBytes++
	}
	if err := w.encoder.Close(); err != nil {
		return err
	}
	return w.file.buffer.Flush()
}

// bufferedFile is a buffered writer that can seek. It hides the file from the library, which would sync it.
type bufferedFile struct {
	w      io.WriteSeeker
	buffer *bufio.Writer
}

func (f *bufferedFile) Write(p []byte) (int, error) { return f.buffer.Write(p) }

func (f *bufferedFile) Seek(offset int64, whence int) (int64, error) {
	if err := f.buffer.Flush(); err != nil {
		return 0, err
	}
	return f.w.Seek(offset, whence)
}

// FloatWriter writes 32-bit floating-point samples of one channel. The library's encoder writes no fact chunk, which
// the format asks for, and no more than a frame at a time.
type FloatWriter struct {
	file   *bufferedFile
	frames int64
	block  []byte
}

// floatHeader is the length of a FloatWriter's header.
const floatHeader = 58

// NewFloatWriter starts a file at a rate in Hz, which the header holds rounded to whole hertz. [FloatWriter.Close]
// ends it; w itself is not closed.
func NewFloatWriter(w io.WriteSeeker, rate float64) (*FloatWriter, error) {
	f := &FloatWriter{file: &bufferedFile{w: w, buffer: bufio.NewWriterSize(w, 1<<16)}}
	le := binary.LittleEndian
	h := append([]byte(nil), "RIFF\x00\x00\x00\x00WAVEfmt "...)
	h = le.AppendUint32(h, 18)
	h = le.AppendUint16(h, tagFloat)
	h = le.AppendUint16(h, 1)
	hz := uint32(math.Round(rate))
	h = le.AppendUint32(h, hz)
	h = le.AppendUint32(h, 4*hz)
	h = le.AppendUint16(h, 4)
	h = le.AppendUint16(h, 32)
	h = le.AppendUint16(h, 0)
	h = append(h, "fact\x04\x00\x00\x00\x00\x00\x00\x00data\x00\x00\x00\x00"...)
	_, err := f.file.Write(h)
	return f, err
}

// Write writes samples.
func (f *FloatWriter) Write(samples []float64) error {
	if f.frames += int64(len(samples)); 4*f.frames > longest {
		return ErrTooLong
	}
	f.block = f.block[:0]
	for _, x := range samples {
		f.block = binary.LittleEndian.AppendUint32(f.block, math.Float32bits(float32(x)))
	}
	_, err := f.file.Write(f.block)
	return err
}

// Close writes the lengths into the header.
func (f *FloatWriter) Close() error {
	for _, at := range [...]struct {
		offset int64
		value  int64
	}{{4, 4*f.frames + floatHeader - 8}, {46, f.frames}, {54, 4 * f.frames}} {
		if _, err := f.file.Seek(at.offset, io.SeekStart); err != nil {
			return err
		}
		if _, err := f.file.Write(binary.LittleEndian.AppendUint32(nil, uint32(at.value))); err != nil {
			return err
		}
	}
	if err := f.file.buffer.Flush(); err != nil {
		return fmt.Errorf("wav: %w", err)
	}
	_, err := f.file.Seek(0, io.SeekEnd)
	return err
}
