// Package column reads sound from one column of a text file, as loggers and oscilloscopes write it: comma-separated
// values (RFC 4180), or separated by semicolons or tabs, where numbers may have a decimal comma. Lines that begin
// with # are left out, and so are lines before the first number in the column: a heading. A row, and remarks in front of
// it, have 64 KiB at most, so that no more memory is used than one takes, whatever the file.
package column

import (
	"bufio"
	"bytes"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"slices"
	"strconv"
	"strings"

	"midrail/signals"
)

// mostHeading is how many lines a heading has at the most.
const mostHeading = 100

// longest is how many bytes a row has at the most, remarks in front of it included.
const longest = 1 << 16

// Form tells what the column's numbers are: a sample is (number − Zero)·Scale.
type Form struct {
	Column      int     // 1 is the first
	Rate        float64 // Hz
	Zero, Scale float64
}

// Counts returns the form of a converter's counts of the given bits, from 0: their middle is 0 of sound.
func Counts(bits int) (zero, scale float64) {
	middle := float64(int64(1) << (bits - 1))
	return middle, 1 / middle
}

// File is a column being read. It is a [signals.Track] of one channel.
type File struct {
	name   string
	form   Form
	src    *bounded
	rows   *csv.Reader
	commas bool // numbers may have a decimal comma
	first  float64
	waits  bool // first is yet to be handed out
}

// New reads a column of src; name is what faults call it. The error is a *[signals.FormatError] where there is no
// number in the column.
func New(name string, src io.Reader, form Form) (*File, error) {
	if form.Column < 1 {
		panic("column: columns are counted from 1")
	}
	// The library, given a buffered reader, puts no buffer of its own in front, so that what it takes is a row's.
	f := &File{name: name, form: form, src: &bounded{src: src}}
	buffered := bufio.NewReaderSize(f.src, 1<<16)
	if start, _ := buffered.Peek(len(byteOrderMark)); string(start) == byteOrderMark {
		buffered.Discard(len(byteOrderMark))
	}
	separator := separatorOf(buffered)
	f.commas, f.rows = separator != ',', csv.NewReader(buffered)
	f.rows.Comma, f.rows.Comment = separator, '#'
	f.rows.FieldsPerRecord, f.rows.ReuseRecord, f.rows.TrimLeadingSpace, f.rows.LazyQuotes = -1, true, true, true
	var heading error
	for range mostHeading {
		x, err := f.next()
		if err == nil {
			f.first, f.waits = x, true
			return f, nil
		}
		if errors.Is(err, io.EOF) {
			if heading == nil {
				heading = f.fault("line 1", "there is not one number in it", "record again")
			}
			return nil, heading
		}
		if format, ok := errors.AsType[*signals.FormatError](err); !ok || f.src.taken > longest {
			return nil, err
		} else if heading == nil {
			heading = format
		}
	}
	return nil, heading
}

// byteOrderMark begins the text files of some programs (UTF-8's, Unicode 23.8).
const byteOrderMark = "\ufeff"

// bounded is a reader that gives up where more than a row's bytes are taken from it without a row.
type bounded struct {
	src   io.Reader
	taken int // since the last row
}

var errLong = fmt.Errorf("a row has more than %d bytes", longest)

func (b *bounded) Read(p []byte) (int, error) {
	if b.taken > longest {
		return 0, errLong
	}
	n, err := b.src.Read(p)
	b.taken += n
	return n, err
}

// separatorOf looks for the separator in the last whole line of the file's beginning: the first may be a heading.
func separatorOf(r *bufio.Reader) rune {
	const beginning = 4096
	start, err := r.Peek(beginning)
	lines := bytes.Split(start, []byte("\n"))
	if err == nil && len(lines) > 1 { // there is more of the last
		lines = lines[:len(lines)-1]
	}
	for _, line := range slices.Backward(lines) {
		if len(bytes.TrimSpace(line)) == 0 || line[0] == '#' {
			continue
		}
		for _, c := range ";\t" {
			if bytes.ContainsRune(line, c) {
				return c
			}
		}
		break
	}
	return ','
}

func (f *File) fault(at, text, remedy string) error {
	return &signals.FormatError{File: f.name, At: at, Text: text, Remedy: remedy}
}

// next returns the column's next sample.
func (f *File) next() (float64, error) {
	f.src.taken = 0
	from := f.rows.InputOffset()
	row, err := f.rows.Read()
	if errors.Is(err, io.EOF) {
		return 0, io.EOF
	}
	if errors.Is(err, errLong) {
		return 0, f.fault(fmt.Sprintf("behind byte %d", from), errLong.Error(), "is this the right file? does a quotation mark end?")
	}
	if parse, ok := errors.AsType[*csv.ParseError](err); ok {
		return 0, f.fault(fmt.Sprintf("line %d", parse.Line), parse.Err.Error(), "mend the line")
	}
	if err != nil {
		return 0, fmt.Errorf("%s: %w", f.name, err)
	}
	if len(row) < f.form.Column {
		line, _ := f.rows.FieldPos(0)
		return 0, f.fault(fmt.Sprintf("line %d", line), fmt.Sprintf("it has %d columns, column %d is wanted", len(row), f.form.Column), "name another with --column, or mend the line")
	}
	text := strings.TrimSpace(row[f.form.Column-1])
	number := text
	if f.commas {
		number = strings.Replace(text, ",", ".", 1)
	}
	x, err := strconv.ParseFloat(number, 64)
	if err != nil && !errors.Is(err, strconv.ErrRange) { // what is out of range is infinite, and told as such
		line, _ := f.rows.FieldPos(f.form.Column - 1)
		if len(text) > 40 {
			text = strings.ToValidUTF8(text[:40], "") + "…"
		}
		return 0, f.fault(fmt.Sprintf("line %d", line), fmt.Sprintf("%q is no number", text), "name another column with --column, or mend the line")
	}
	return (x - f.form.Zero) * f.form.Scale, nil
}

// Rate returns the rate in Hz.
func (f *File) Rate() float64 { return f.form.Rate }

// Channels returns 1.
func (f *File) Channels() int { return 1 }

// Frames returns −1: the number of lines is not known before the end.
func (f *File) Frames() int64 { return -1 }

// Close does nothing: what New was given stays its caller's.
func (f *File) Close() error { return nil }

// ReadFrames implements [signals.Track]. Numbers that are not finite are given as they are.
func (f *File) ReadFrames(dst []float64) (int, error) {
	for i := range dst {
		if f.waits {
			dst[i], f.waits = f.first, false
			continue
		}
		x, err := f.next()
		if err != nil {
			return i, err
		}
		dst[i] = x
	}
	return len(dst), nil
}
