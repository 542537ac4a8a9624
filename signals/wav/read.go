package wav

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"math"
	"os"

	"github.com/go-audio/audio"
	"github.com/go-audio/wav"

	"midrail/signals"
)

// Format tags of the fmt chunk.
const (
	tagPCM        = 1
	tagFloat      = 3
	tagExtensible = 0xFFFE
)

// format is what the fmt chunk says.
type format struct {
	tag      uint16 // tagPCM or tagFloat, from the sub-format where extensible
	channels int
	rate     uint32
	align    int // bytes in a frame
	bits     int // of a sample's container
	valid    int // of them, those that carry sound
}

// File is a WAV file opened for reading. It is a [signals.Track].
type File struct {
	name   string
	closer io.Closer
	src    io.Reader // positioned in the data
	format format
	data   int64 // byte at which the data begins
	frames int64 // in the file
	read   int64 // frames
	note   string

	block  []byte // room for a header, then the samples read
	buffer audio.IntBuffer
}

// Open opens a WAV file. The error is a *[signals.FormatError] where the file is not one that is read.
func Open(path string) (*File, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	w, err := open(path, f)
	if err != nil {
		f.Close()
		return nil, err
	}
	w.closer = f
	return w, nil
}

// New reads a WAV file from src; name is what faults call it.
func New(name string, src io.ReadSeeker) (*File, error) { return open(name, src) }

func open(name string, src io.ReadSeeker) (*File, error) {
	f := &File{name: name}
	size, err := src.Seek(0, io.SeekEnd)
	if err != nil {
		return nil, err
	}
	if _, err := src.Seek(0, io.SeekStart); err != nil {
		return nil, err
	}
	if err := f.walk(src, size); err != nil {
		return nil, err
	}
	if _, err := src.Seek(f.data, io.SeekStart); err != nil {
		return nil, err
	}
	if f.frames == 0 {
		return nil, f.fault("data", f.data, "there is not one frame of sound in it", "record again")
	}
	f.src = io.LimitReader(src, f.frames*int64(f.format.align))
	return f, nil
}

// fault is one in a chunk, or, without its name, in the file as a whole.
func (f *File) fault(chunk string, at int64, text, remedy string) *signals.FormatError {
	where := fmt.Sprintf("at byte %d", at)
	if chunk != "" {
		where = fmt.Sprintf("chunk %q %s", chunk, where)
	}
	return &signals.FormatError{File: f.name, At: where, Text: text, Remedy: remedy}
}

func (f *File) unsupported(chunk string, at int64, text, remedy string) *signals.FormatError {
	e := f.fault(chunk, at, text, remedy)
	e.Unsupported = true
	return e
}

// walk finds the format and the data. Chunks that are not needed are skipped unread.
func (f *File) walk(src io.ReadSeeker, size int64) error {
	var head [12]byte
	if size == 0 {
		return f.fault("", 0, "the file is empty", "record again")
	}
	if _, err := io.ReadFull(src, head[:]); err != nil {
		return short(err, f.fault("", 0, "the file ends before its header does", "record again, or copy it again"))
	}
	switch string(head[:4]) {
	case "RIFF", "RF64", "BW64":
	case "RIFX":
		return f.unsupported("", 0, "its bytes are in the other order (RIFX)", "convert it to RIFF")
	default:
		return f.fault("", 0, fmt.Sprintf("it begins with %q, not RIFF", printable(head[:4])), "is this a recording? samples without a header are read with --raw")
	}
	if string(head[8:]) != "WAVE" {
		return f.fault("", 8, fmt.Sprintf("it holds %q, not WAVE", printable(head[8:])), "is this a WAV file?")
	}
	ended := int64(binary.LittleEndian.Uint32(head[4:]))+8 == size // the header was written when the sound had been
	long := int64(0)                                               // the data's size by a ds64 chunk
	for at := int64(12); ; {
		var h [8]byte
		if _, err := src.Seek(at, io.SeekStart); err != nil {
			return err
		}
		if _, err := io.ReadFull(src, h[:]); err != nil {
			missing := "data"
			if f.format.align == 0 {
				missing = "fmt"
			}
			return short(err, f.fault("", at, "there is no "+missing+" chunk", "record again, or copy it again"))
		}
		id, length := string(h[:4]), int64(binary.LittleEndian.Uint32(h[4:]))
		body := at + 8
		switch id {
		case "ds64":
			var sizes [24]byte
			if _, err := io.ReadFull(src, sizes[:]); err == nil {
				if n := binary.LittleEndian.Uint64(sizes[8:]); n < math.MaxInt64/2 {
					long = int64(n)
				}
			}
		case "fmt ":
			if err := f.readFormat(src, body, length); err != nil {
				return err
			}
		case "data":
			if f.format.align == 0 {
				return f.fault("data", at, "the sound comes before the fmt chunk", "convert the file")
			}
			if length == math.MaxUint32 && long > 0 {
				length, ended = long, true
			}
			f.findData(body, length, size, ended)
			return nil
		}
		next := body + length
		if length%2 != 0 && f.padded(src, next) {
			next++
		}
		at = next
	}
}

// short returns the fault where a file has ended, and otherwise the error of reading it.
func short(err error, fault error) error {
	if errors.Is(err, io.EOF) || errors.Is(err, io.ErrUnexpectedEOF) {
		return fault
	}
	return err
}

// padded tells whether a chunk of odd length is followed by its pad byte, as it should be, or by the next chunk's name.
func (f *File) padded(src io.ReadSeeker, at int64) bool {
	var b [4]byte
	if _, err := src.Seek(at, io.SeekStart); err != nil {
		return true
	}
	n, _ := io.ReadFull(src, b[:])
	return n < len(b) || !isID(b[:])
}

// isID tells whether four bytes could be a chunk's name.
func isID(b []byte) bool {
	for _, c := range b {
		if c < ' ' || c > '~' {
			return false
		}
	}
	return true
}

// neverWritten is the least length that is taken for one written before the sound was, where the file does not hold as
// much: programs that write into a pipe put 2³¹ less a block, or 2³² − 1.
const neverWritten = 0x7ffff000

// findData finds how much sound there is. The header says length bytes, ended that it was written after them.
func (f *File) findData(body, length, size int64, ended bool) {
	f.data = body
	align := int64(f.format.align)
	left := max(size-body, 0)
	switch {
	case !ended && (length == 0 && left > 0 || length >= neverWritten && length > left || length == math.MaxUint32):
		f.note = "the length of the sound was never written, as from a pipe, or the file is cut short; used to its end"
		if left%align != 0 {
			f.note += fmt.Sprintf(", but for %d bytes of a last frame", left%align)
		}
		length = left
	case length > left:
		f.note = fmt.Sprintf("the file is cut short: %d of %d frames are there, and used", left/align, length/align)
		length = left
	case length%align != 0:
		f.note = fmt.Sprintf("the sound ends within a frame; its last %d bytes are left out", length%align)
	}
	f.frames = length / align
}

func printable(b []byte) string {
	return string(bytes.Map(func(r rune) rune {
		if r < ' ' || r > '~' {
			return '.'
		}
		return r
	}, b))
}

// subFormatTail is the tail of the identifiers of an extensible format, whose first two bytes are a tag.
var subFormatTail = []byte{0x00, 0x00, 0x00, 0x00, 0x10, 0x00, 0x80, 0x00, 0x00, 0xAA, 0x00, 0x38, 0x9B, 0x71}

func (f *File) readFormat(src io.Reader, at, length int64) error {
	if length < 16 {
		return f.fault("fmt ", at, fmt.Sprintf("it has %d bytes, at least 16 belong there", length), "convert the file")
	}
	b := make([]byte, min(length, 40))
	if _, err := io.ReadFull(src, b); err != nil {
		return short(err, f.fault("fmt ", at, "the file ends within it", "copy the file again"))
	}
	le := binary.LittleEndian
	x := format{tag: le.Uint16(b), channels: int(le.Uint16(b[2:])), rate: le.Uint32(b[4:]), align: int(le.Uint16(b[12:])), bits: int(le.Uint16(b[14:]))}
	x.valid = x.bits
	if x.tag == tagExtensible {
		if len(b) < 40 {
			return f.fault("fmt ", at, "an extensible format has 40 bytes", "convert the file")
		}
		if v := int(le.Uint16(b[18:])); v > 0 {
			x.valid = v
		}
		if x.tag = le.Uint16(b[24:]); !bytes.Equal(b[26:40], subFormatTail) {
			return f.unsupported("fmt ", at+24, "its sub-format is not one that is known", "convert it to integer or floating-point PCM")
		}
	}
	switch x.tag {
	case tagPCM:
		if x.bits != 8 && x.bits != 16 && x.bits != 24 && x.bits != 32 {
			return f.unsupported("fmt ", at+14, fmt.Sprintf("samples of %d bits are not read", x.bits), "convert it to 8, 16, 24 or 32 bits")
		}
	case tagFloat:
		if x.bits != 32 && x.bits != 64 {
			return f.unsupported("fmt ", at+14, fmt.Sprintf("floating-point samples of %d bits are not read", x.bits), "convert it to 32 or 64 bits")
		}
	default:
		return f.unsupported("fmt ", at, fmt.Sprintf("format %d is not PCM", x.tag), "convert it to integer or floating-point PCM")
	}
	switch {
	case x.channels < 1 || x.channels > signals.MostChannels:
		return f.unsupported("fmt ", at+2, fmt.Sprintf("%d channels", x.channels), fmt.Sprintf("1 to %d are read", signals.MostChannels))
	case float64(x.rate) < signals.LeastRate || float64(x.rate) > signals.MostRate:
		return f.unsupported("fmt ", at+4, fmt.Sprintf("a rate of %d Hz", x.rate), fmt.Sprintf("%g to %g Hz are read", signals.LeastRate, signals.MostRate))
	case x.align != x.channels*x.bits/8:
		return f.fault("fmt ", at+12, fmt.Sprintf("a frame of %d bytes does not hold %d channels of %d bits", x.align, x.channels, x.bits), "convert the file")
	case x.valid > x.bits:
		return f.fault("fmt ", at+18, fmt.Sprintf("%d of %d bits are said to be valid", x.valid, x.bits), "convert the file")
	}
	f.format = x
	return nil
}

// Rate returns the rate in Hz.
func (f *File) Rate() float64 { return float64(f.format.rate) }

// Channels returns the number of channels.
func (f *File) Channels() int { return f.format.channels }

// Frames returns the number of frames.
func (f *File) Frames() int64 { return f.frames }

// Note returns a word about what is missing from the file, or "".
func (f *File) Note() string { return f.note }

// Close closes the file that [Open] opened.
func (f *File) Close() error {
	if f.closer == nil {
		return nil
	}
	return f.closer.Close()
}

// blockFrames is how many frames are taken from the file at once.
const blockFrames = 4096

// ReadFrames implements [signals.Track]. Floating-point samples are given as they are, finite or not.
func (f *File) ReadFrames(dst []float64) (int, error) {
	width := f.format.channels
	if len(dst)%width != 0 {
		panic("wav: not a whole number of frames")
	}
	done := 0
	for done < len(dst)/width {
		n, err := f.readBlock(dst[done*width:])
		done += n
		if err != nil {
			return done, err
		}
	}
	return done, nil
}

// readBlock reads up to blockFrames frames.
func (f *File) readBlock(dst []float64) (int, error) {
	width := f.format.channels
	frames := int(min(int64(len(dst)/width), blockFrames, f.frames-f.read))
	if frames == 0 {
		return 0, io.EOF
	}
	size := frames * f.format.align
	f.block = append(f.block[:0], make([]byte, headerSize+size)...)
	if _, err := io.ReadFull(f.src, f.block[headerSize:]); err != nil {
		return 0, fmt.Errorf("%s: reading frame %d: %w", f.name, f.read, err)
	}
	dst = dst[:frames*width]
	var err error
	if f.format.tag == tagFloat {
		f.floats(dst)
	} else {
		err = f.codes(dst)
	}
	f.read += int64(frames)
	return frames, err
}

// headerSize is the length of the header that [File.codes] puts before a block.
const headerSize = 44

// codes decodes a block of integer samples. The library gets the block alone, behind a header that says what was
// found: it trusts what a file says of itself.
func (f *File) codes(dst []float64) error {
	x := f.format
	h := f.block[:0]
	le := binary.LittleEndian
	size := uint32(len(f.block) - headerSize)
	h = append(h, "RIFF"...)
	h = le.AppendUint32(h, size+36)
	h = append(h, "WAVEfmt "...)
	h = le.AppendUint32(h, 16)
	h = le.AppendUint16(h, tagPCM)
	h = le.AppendUint16(h, uint16(x.channels))
	h = le.AppendUint32(h, x.rate)
	h = le.AppendUint32(h, x.rate*uint32(x.align))
	h = le.AppendUint16(h, uint16(x.align))
	h = le.AppendUint16(h, uint16(x.bits))
	h = append(h, "data"...)
	le.AppendUint32(h, size)
	if cap(f.buffer.Data) < len(dst) {
		f.buffer.Data = make([]int, len(dst))
	}
	f.buffer.Data = f.buffer.Data[:len(dst)]
	n, err := wav.NewDecoder(bytes.NewReader(f.block)).PCMBuffer(&f.buffer)
	if err != nil || n != len(dst) {
		return fmt.Errorf("%s: decoding at frame %d: %d of %d samples: %w", f.name, f.read, n, len(dst), err)
	}
	middle := 0
	if x.bits == 8 {
		middle = 128 // 8-bit samples are unsigned
	}
	scale := math.Ldexp(1, 1-x.bits)
	for i, code := range f.buffer.Data {
		dst[i] = float64(code-middle) * scale
	}
	return nil
}

// floats decodes a block of floating-point samples, which the library reads as integers.
func (f *File) floats(dst []float64) {
	b := f.block[headerSize:]
	for i := range dst {
		if f.format.bits == 64 {
			dst[i] = math.Float64frombits(binary.LittleEndian.Uint64(b[8*i:]))
		} else {
			dst[i] = float64(math.Float32frombits(binary.LittleEndian.Uint32(b[4*i:])))
		}
	}
}
