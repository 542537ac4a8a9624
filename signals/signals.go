// Package signals is sound as data.
//
// Symbols and units: a sample is a number in full scale, ±1.0; a full-scale sine has peaks that just reach ±1.0 and
// is 0 dBFS (the convention of AES17), so that levels are
//
//	dBFS = 20·log10(√2·RMS)
//
// with the RMS taken without DC. Rates and frequencies are in Hz, time in s. A frame is one sample of every channel.
package signals

import (
	"errors"
	"io"
)

// Stream is one channel of sound, taken in blocks. Read fills dst from its start and returns how many samples it
// put there; n < len(dst) comes only with an error, [io.EOF] at the end.
type Stream interface {
	Read(dst []float64) (n int, err error)
}

// Track is a recording opened for reading.
type Track interface {
	Rate() float64 // Hz
	Channels() int // 1 or more
	// Frames returns the number of frames, −1 where it is not known before the end.
	Frames() int64
	// ReadFrames fills dst, whose length is a multiple of Channels, with whole frames, channel beside channel, and
	// returns how many. Fewer than fit come only with an error, io.EOF at the end.
	ReadFrames(dst []float64) (frames int, err error)
	Close() error
}

// Mix is the channel number of the mean of all channels.
const Mix = 0

// blockFrames is how many frames of a track are taken at once.
const blockFrames = 4096

// Channels returns a stream for each of the given channels of a track: 1, 2, …, or [Mix] for the mean of all. The
// streams share the track, which is read as far as the one that is furthest ahead; what the others have not taken
// waits in memory, so they are to be read in turns. It panics where the track has no such channel.
func Channels(t Track, channels ...int) []Stream {
	d := &deal{track: t, frames: make([]float64, blockFrames*t.Channels()), channels: channels, waiting: make([][]float64, len(channels))}
	streams := make([]Stream, len(channels))
	for i, c := range channels {
		if c < 0 || c > t.Channels() {
			panic("signals: no such channel")
		}
		streams[i] = &dealt{d, i}
	}
	return streams
}

// deal hands a track's frames out to streams.
type deal struct {
	track    Track
	frames   []float64
	channels []int
	waiting  [][]float64
	err      error
}

type dealt struct {
	deal *deal
	i    int
}

func (s *dealt) Read(dst []float64) (int, error) {
	d := s.deal
	for len(d.waiting[s.i]) < len(dst) && d.err == nil {
		d.more()
	}
	n := copy(dst, d.waiting[s.i])
	d.waiting[s.i] = d.waiting[s.i][:copy(d.waiting[s.i], d.waiting[s.i][n:])]
	if n < len(dst) {
		return n, d.err
	}
	return n, nil
}

// more takes one block of the track.
func (d *deal) more() {
	n, err := d.track.ReadFrames(d.frames)
	d.err = err
	width := d.track.Channels()
	for i, c := range d.channels {
		if width == 1 {
			d.waiting[i] = append(d.waiting[i], d.frames[:n]...)
			continue
		}
		for f := range n {
			frame := d.frames[f*width : (f+1)*width]
			v := 0.
			if c == Mix {
				for _, x := range frame {
					v += x
				}
				v /= float64(width)
			} else {
				v = frame[c-1]
			}
			d.waiting[i] = append(d.waiting[i], v)
		}
	}
}

// ReadAll returns the whole of a stream.
func ReadAll(s Stream) ([]float64, error) {
	var all []float64
	block := make([]float64, blockFrames)
	for {
		n, err := s.Read(block)
		all = append(all, block[:n]...)
		if errors.Is(err, io.EOF) {
			return all, nil
		}
		if err != nil {
			return all, err
		}
	}
}

// Samples is a stream of the values of a slice, which it takes over.
type Samples []float64

// Read implements [Stream].
func (s *Samples) Read(dst []float64) (int, error) {
	n := copy(dst, *s)
	*s = (*s)[n:]
	if n < len(dst) {
		return n, io.EOF
	}
	return n, nil
}
