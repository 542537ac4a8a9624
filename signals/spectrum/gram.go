package spectrum

import (
	"errors"
	"io"

	"gonum.org/v1/gonum/dsp/fourier"

	"midrail/signals"
)

// perColumn is how many segments a column of a [Gram] is the mean of, at the most.
const perColumn = 4

// Gram returns the spectrogram of a stream of the given number of frames: columns of equal length in time, each the
// density at 0, rate/length, … to half the rate, in units²/Hz, of up to four segments spread over the column under a
// Hann window. A stream shorter than a segment has one column of its beginning and zeros. The rate is in Hz. Length is
// a power of four, columns 1 or more; it panics otherwise. Its error is the stream's.
func Gram(s signals.Stream, rate float64, frames int64, length, columns int) ([][]float64, error) {
	if columns < 1 {
		panic("spectrum: no columns")
	}
	check(length)
	starts := max(frames-int64(length), 0)
	columns = int(min(int64(columns), starts+1))
	w := hann(length)
	power := 0.
	for _, v := range w {
		power += v * v
	}
	gram := make([][]float64, columns)
	segment, work := make([]float64, length), make([]complex128, length)
	have, at := 0, int64(0) // of the segment; number of its first value
	for c := range gram {
		from, to := starts*int64(c)/int64(columns), starts*int64(c+1)/int64(columns)
		several := int64(perColumn)
		several = max(1, min(several, to-from))
		gram[c] = make([]float64, length/2+1)
		for k := range several {
			next := from + (to-from)*k/several
			for at < next || have < length {
				drop := int(min(next-at, int64(have)))
				have, at = copy(segment, segment[drop:have]), at+int64(drop)
				n, err := s.Read(segment[have:])
				have += n
				if err != nil && !errors.Is(err, io.EOF) {
					return nil, err
				}
				if err != nil { // what is missing is silence
					clear(segment[have:])
					have = length
				}
			}
			mean := 0.
			for _, v := range segment {
				mean += v
			}
			mean /= float64(length)
			for i, v := range segment {
				work[i] = complex((v-mean)*w[i], 0)
			}
			z := fourier.CoefficientsRadix4(work)
			for i := range gram[c] {
				scale := 2.
				if i == 0 || i == length/2 {
					scale = 1
				}
				gram[c][i] += scale * square(z[i]) / (rate * power * float64(several))
			}
		}
	}
	return gram, nil
}
