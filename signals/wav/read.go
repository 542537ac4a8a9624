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
	"midrail/signals/raw"
)

// Format tags of the fmt chunk.
const (
	tagPCM        = 1
	tagFloat      = 3
	tagExtensible = 0xFFFE
)

// File is a WAV file opened for reading: raw samples behind a header. It is a [signals.Track].
type File struct {
	*raw.File
	note   string
	closer io.Closer // nil: what New was given stays its caller's
}

// Open opens a WAV file. The error is a *[signals.FormatError] where the file is not one that is read.
func Open(path string) (*File, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	w, err := New(path, f)
	if err != nil {
		f.Close()
		return nil, err
	}
	w.closer = f
	return w, nil
}

// New reads a WAV file from src; name is what faults call it. The error is a *[signals.FormatError] where the file is not
// one that is read.
func New(name string, src io.ReadSeeker) (*File, error) {
	size, err := src.Seek(0, io.SeekEnd)
	if err != nil {
		return nil, err
	}
	if _, err := src.Seek(0, io.SeekStart); err != nil {
		return nil, err
	}
	h := &header{name: name}
	if err := h.walk(src, size); err != nil {
		return nil, err
	}
	if h.frames == 0 {
		return nil, h.fault("data", h.data, "there is not one frame of sound in it", "record again")
	}
	if _, err := src.Seek(h.data, io.SeekStart); err != nil {
		return nil, err
	}
	var decode raw.Decoder // floating-point samples the library reads as integers
	if h.format.Kind != 'f' {
		decode = (&integers{format: h.format}).decode
	}
	return &File{File: raw.Part(name, src, h.format, h.frames, decode), note: h.note}, nil
}

// integers decodes blocks of integer samples by the library. It gets a block alone, behind a header that says what was
// found, for it trusts what a file says of itself.
type integers struct {
	format raw.Format
	file   []byte
	buffer audio.IntBuffer
}

func (d *integers) decode(dst []float64, block []byte) error {
	f := d.format
	le := binary.LittleEndian
	align := f.Channels * f.Bits / 8
	h := append(d.file[:0], "RIFF"...)
	h = le.AppendUint32(h, uint32(len(block)+36))
	h = append(h, "WAVEfmt "...)
	h = le.AppendUint32(h, 16)
	h = le.AppendUint16(h, tagPCM)
	h = le.AppendUint16(h, uint16(f.Channels))
	h = le.AppendUint32(h, uint32(f.Rate))
	h = le.AppendUint32(h, uint32(f.Rate)*uint32(align))
	h = le.AppendUint16(h, uint16(align))
	h = le.AppendUint16(h, uint16(f.Bits))
	h = append(h, "data"...)
	h = le.AppendUint32(h, uint32(len(block)))
	d.file = append(h, block...)
	if cap(d.buffer.Data) < len(dst) {
		d.buffer.Data = make([]int, len(dst))
	}
	d.buffer.Data = d.buffer.Data[:len(dst)]
	n, err := wav.NewDecoder(bytes.NewReader(d.file)).PCMBuffer(&d.buffer)
	if err != nil {
		return err
	}
	if n != len(dst) {
		return fmt.Errorf("%d of %d samples", n, len(dst))
	}
	middle := 0
	if f.Kind == 'u' {
		middle = 1 << (f.Bits - 1)
	}
	scale := math.Ldexp(1, 1-f.Bits)
	for i, code := range d.buffer.Data {
		dst[i] = float64(code-middle) * scale
	}
	return nil
}

// Note returns a word about what is missing from the file, or "".
func (f *File) Note() string { return f.note }

// Close closes the file that [Open] opened.
func (f *File) Close() error {
	if f.closer == nil {
		return nil
	}
	return f.closer.Close()
}

// header is what a file says before its sound.
type header struct {
	name   string
	format raw.Format // of no channels before a fmt chunk was read
	data   int64      // byte at which the sound begins
	frames int64
	note   string
}

// fault is one in a chunk, or, without its name, in the file as a whole.
func (h *header) fault(chunk string, at int64, text, remedy string) *signals.FormatError {
	where := fmt.Sprintf("at byte %d", at)
	if chunk != "" {
		where = fmt.Sprintf("chunk %q %s", chunk, where)
	}
	return &signals.FormatError{File: h.name, At: where, Text: text, Remedy: remedy}
}

func (h *header) unsupported(chunk string, at int64, text, remedy string) *signals.FormatError {
	e := h.fault(chunk, at, text, remedy)
	e.Unsupported = true
	return e
}

// walk finds the format and the data. Chunks that are not needed are skipped unread.
func (h *header) walk(src io.ReadSeeker, size int64) error {
	var head [12]byte
	if size == 0 {
		return h.fault("", 0, "the file is empty", "record again")
	}
	if _, err := io.ReadFull(src, head[:]); err != nil {
		return short(err, h.fault("", 0, "the file ends before its header does", "record again, or copy it again"))
	}
	switch string(head[:4]) {
	case "RIFF", "RF64", "BW64":
	case "RIFX":
		return h.unsupported("", 0, "its bytes are in the other order (RIFX)", "convert it to RIFF")
	default:
		return h.fault("", 0, fmt.Sprintf("it begins with %q, not RIFF", printable(head[:4])), "is this a recording? samples without a header are read with --raw")
	}
	if string(head[8:]) != "WAVE" {
		return h.fault("", 8, fmt.Sprintf("it holds %q, not WAVE", printable(head[8:])), "is this a WAV file?")
	}
	ended := int64(binary.LittleEndian.Uint32(head[4:]))+8 == size // the header was written when the sound had been
	long := int64(0)                                               // the data's size by a ds64 chunk
	for at := int64(12); ; {
		var b [8]byte
		if _, err := src.Seek(at, io.SeekStart); err != nil {
			return err
		}
		if _, err := io.ReadFull(src, b[:]); err != nil {
			missing := "data"
			if h.format.Channels == 0 {
				missing = "fmt"
			}
			return short(err, h.fault("", at, "there is no "+missing+" chunk", "record again, or copy it again"))
		}
		id, length := string(b[:4]), int64(binary.LittleEndian.Uint32(b[4:]))
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
			if err := h.readFormat(src, body, length); err != nil {
				return err
			}
		case "data":
			if h.format.Channels == 0 {
				return h.fault("data", at, "the sound comes before the fmt chunk", "convert the file")
			}
			if length == math.MaxUint32 && long > 0 {
				length, ended = long, true
			}
			h.findData(body, length, size, ended)
			return nil
		}
		next := body + length
		if length%2 != 0 && padded(src, next) {
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
func padded(src io.ReadSeeker, at int64) bool {
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
func (h *header) findData(body, length, size int64, ended bool) {
	h.data = body
	align := int64(h.format.Channels * h.format.Bits / 8)
	left := max(size-body, 0)
	switch {
	case !ended && (length == 0 && left > 0 || length >= neverWritten && length > left || length == math.MaxUint32):
		h.note = "the length of the sound was never written, as from a pipe, or the file is cut short; used to its end"
		if left%align != 0 {
			h.note += fmt.Sprintf(", but for %d bytes of a last frame", left%align)
		}
		length = left
	case length > left:
		h.note = fmt.Sprintf("the file is cut short: %d of %d frames are there, and used", left/align, length/align)
		length = left
	case length%align != 0:
		h.note = fmt.Sprintf("the sound ends within a frame; its last %d bytes are left out", length%align)
	}
	h.frames = length / align
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

func (h *header) readFormat(src io.Reader, at, length int64) error {
	if length < 16 {
		return h.fault("fmt ", at, fmt.Sprintf("it has %d bytes, at least 16 belong there", length), "convert the file")
	}
	b := make([]byte, min(length, 40))
	if _, err := io.ReadFull(src, b); err != nil {
		return short(err, h.fault("fmt ", at, "the file ends within it", "copy the file again"))
	}
	le := binary.LittleEndian
	tag, channels, rate, align, bits := le.Uint16(b), int(le.Uint16(b[2:])), float64(le.Uint32(b[4:])), int(le.Uint16(b[12:])), int(le.Uint16(b[14:]))
	valid := bits // of them, those that carry sound, which are the upper ones
	if tag == tagExtensible {
		if len(b) < 40 {
			return h.fault("fmt ", at, "an extensible format has 40 bytes", "convert the file")
		}
		valid = int(le.Uint16(b[18:]))
		if tag = le.Uint16(b[24:]); !bytes.Equal(b[26:40], subFormatTail) {
			return h.unsupported("fmt ", at+24, "its sub-format is not one that is known", "convert it to integer or floating-point PCM")
		}
	}
	switch tag {
	case tagPCM:
		if bits != 8 && bits != 16 && bits != 24 && bits != 32 {
			return h.unsupported("fmt ", at+14, fmt.Sprintf("samples of %d bits are not read", bits), "convert it to 8, 16, 24 or 32 bits")
		}
	case tagFloat:
		if bits != 32 && bits != 64 {
			return h.unsupported("fmt ", at+14, fmt.Sprintf("floating-point samples of %d bits are not read", bits), "convert it to 32 or 64 bits")
		}
	default:
		return h.unsupported("fmt ", at, fmt.Sprintf("format %d is not PCM", tag), "convert it to integer or floating-point PCM")
	}
	switch {
	case channels < 1 || channels > signals.MostChannels:
		return h.unsupported("fmt ", at+2, fmt.Sprintf("%d channels", channels), fmt.Sprintf("1 to %d are read", signals.MostChannels))
	case rate < signals.LeastRate || rate > signals.MostRate:
		return h.unsupported("fmt ", at+4, fmt.Sprintf("a rate of %.0f Hz", rate), fmt.Sprintf("%g to %g Hz are read", signals.LeastRate, signals.MostRate))
	case align != channels*bits/8:
		return h.fault("fmt ", at+12, fmt.Sprintf("a frame of %d bytes does not hold %d channels of %d bits", align, channels, bits), "convert the file")
	case valid > bits:
		return h.fault("fmt ", at+18, fmt.Sprintf("%d of %d bits are said to be valid", valid, bits), "convert the file")
	}
	h.format = raw.Format{Kind: 's', Bits: bits, Rate: rate, Channels: channels}
	switch {
	case tag == tagFloat:
		h.format.Kind = 'f'
	case bits == 8:
		h.format.Kind = 'u'
	}
	return nil
}
