package signals

import (
	"fmt"
	"math"
)

// Finite is a track whose samples are all finite numbers. Of the track it is made from, one that is not is a
// *[FormatError] with its place or, with repair, is replaced by the one before it of the same channel (0 at the
// beginning) and counted.
type Finite struct {
	Track
	name     string
	repair   bool
	read     int64     // frames
	last     []float64 // of each channel
	replaced int64
}

// NewFinite watches over a track; name is what faults call it.
func NewFinite(t Track, name string, repair bool) *Finite {
	return &Finite{Track: t, name: name, repair: repair, last: make([]float64, t.Channels())}
}

// ReadFrames implements [Track]. Of a block with a fault the frames before it are returned.
func (f *Finite) ReadFrames(dst []float64) (int, error) {
	n, err := f.Track.ReadFrames(dst)
	width := len(f.last)
	if n > 0 && allFinite(dst[:n*width]) {
		copy(f.last, dst[(n-1)*width:n*width])
		f.read += int64(n)
		return n, err
	}
	for i, x := range dst[:n*width] {
		channel := i % width
		if !math.IsNaN(x) && !math.IsInf(x, 0) {
			f.last[channel] = x
			continue
		}
		if !f.repair {
			frame := f.read + int64(i/width)
			return i / width, &FormatError{
				File: f.name, At: fmt.Sprintf("frame %d (%.6f s), channel %d", frame, float64(frame)/f.Rate(), channel+1),
				Text: "the sample is no finite number", Remedy: "mend the recording, or have --repair replace it",
			}
		}
		dst[i] = f.last[channel]
		f.replaced++
	}
	f.read += int64(n)
	return n, err
}

func allFinite(x []float64) bool {
	for _, v := range x {
		if v-v != 0 {
			return false
		}
	}
	return true
}

// Note returns what there is to be said of the track: what it says itself, and how many samples were replaced. It is
// whole at the end.
func (f *Finite) Note() string {
	note := ""
	if t, ok := f.Track.(interface{ Note() string }); ok {
		note = t.Note()
	}
	if f.replaced == 0 {
		return note
	}
	if note != "" {
		note += "; "
	}
	return note + fmt.Sprintf("%d samples were no finite numbers and were replaced by those before them", f.replaced)
}
