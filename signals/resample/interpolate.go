package resample

import (
	"errors"
	"io"
	"math"
	"slices"

	"gonum.org/v1/gonum/floats"

	"midrail/signals"
)

const (
	// PassBand is how much of the source's rate passes flat; images then lie from 1 − PassBand on. A track's sound
	// between it and half the rate passes with the filter's slope, −6 dB at half the rate, and so do its images.
	PassBand = 0.46
	// mostPhases is the largest denominator of a ratio of rates that gets exact phases.
	mostPhases = 4096
	// tablePhases is the number of phases between which the kernel is interpolated for all other ratios: the error
	// of a straight line, (2π·0.23/tablePhases)²/8 at the end of the pass band, is −144 dB.
	tablePhases = 2048
)

// Interpolator takes a stream to a higher rate by band-limited interpolation on an absolute time grid, without delay:
// a windowed sinc to twice the source's rate, a shorter one to between two and four times of it, then half-band
// filters, each doubling. Flat within 0.001 dB to 0.46 of the source's rate, and the images of all that is there, from
// 0.54 on, are at least 120 dB down. What the source holds between 0.46 and half of its rate passes on the filter's
// slope, −6 dB at half the rate, and its images, between half and 0.54 of the rate, on the other side of the slope.
type Interpolator struct {
	source   *source
	last     stage
	from, to float64
	srcFirst int64
	next     int64 // grid index of the next output
	tail     int64
}

// stage is one step of the interpolation: fill puts the next values into dst, zeros without end after the source's.
type stage interface{ fill(dst []float64) error }

// New interpolates src: its sample j is at time (srcFirst+j)/from; value k read is the sound at time (first+k)/to. The
// source holds nothing above top of its rate; from [PassBand] on it may hold anything.
// Around the source's samples are zeros. Values come up to, but not at, the time (srcFirst+N+tail)/from, N being the
// source's length. Rates are in Hz, to at least 2·from; first must not lie behind the source's first sample. It panics
// where they are otherwise.
func New(src signals.Stream, from, to, top float64, srcFirst, first, tail int64) *Interpolator {
	if !(to >= 2*from) {
		panic("resample: an interpolator must at least double the rate")
	}
	doublings := 0
	for to/float64(int64(2)<<doublings) >= 2*from {
		doublings++
	}
	base := to / float64(int64(1)<<doublings)
	// Each stage begins where the one after it needs its first value.
	start := first
	halves := make([]*halfStage, doublings)
	for i := range halves {
		h := newHalfStage(halfBand(from/(to/float64(int64(2)<<i))), start)
		halves[i], start = h, h.origin
	}
	var shift *sincStage
	if base != 2*from {
		images := (1 - PassBand) / 2
		if top < PassBand {
			images = top / 2
		}
		shift = newSincStage(2*from, base, images, start)
		start = shift.origin
	}
	double := newSincStage(from, 2*from, math.Min(top, PassBand), start)
	if double.origin > srcFirst {
		panic("resample: interpolation begins behind the source's first sample")
	}
	p := &Interpolator{from: from, to: to, srcFirst: srcFirst, next: first, tail: tail}
	p.source = &source{src: src, before: srcFirst - double.origin}
	double.src = p.source
	p.last = double
	if shift != nil {
		shift.src, p.last = p.last, shift
	}
	for _, h := range slices.Backward(halves) {
		h.src, p.last = p.last, h
	}
	return p
}

// Read implements [signals.Stream].
func (p *Interpolator) Read(dst []float64) (int, error) {
	if err := p.last.fill(dst); err != nil {
		return 0, err
	}
	n := int64(len(dst))
	if p.source.ended {
		end := p.srcFirst + p.source.read + p.tail
		// The first grid index at or after the end.
		last := int64(float64(end) * p.to / p.from)
		for float64(last)*p.from < float64(end)*p.to {
			last++
		}
		if left := max(last-p.next, 0); left < n {
			p.next += left
			return int(left), io.EOF
		}
	}
	p.next += n
	return len(dst), nil
}

func floorHalf(i int64) int64 { return i >> 1 }

// source is a stream as a stage: with zeros before it and, without end, after it.
type source struct {
	src    signals.Stream
	before int64 // zeros still to come before the stream
	read   int64 // values of the stream
	ended  bool
}

func (s *source) fill(dst []float64) error {
	n := int(min(s.before, int64(len(dst))))
	clear(dst[:n])
	s.before -= int64(n)
	if n < len(dst) && !s.ended {
		more, err := s.src.Read(dst[n:])
		n += more
		s.read += int64(more)
		if err != nil && !errors.Is(err, io.EOF) {
			return err
		}
		s.ended = err != nil
	}
	clear(dst[n:])
	return nil
}

// sincStage interpolates from one rate to another by a windowed sinc.
type sincStage struct {
	src    stage
	reach  int       // the kernel reaches this many source samples to either side
	buffer []float64 // source samples from index origin on
	origin int64
	ratio  float64 // from/to
	num    int64   // ratio = num/den where den > 0
	den    int64
	next   int64 // grid index
	phases [][]float64
}

// newSincStage takes a source that holds something up to top of its rate, top being below ½; value first is the first
// one wanted.
func newSincStage(from, to, top float64, first int64) *sincStage {
	s := &sincStage{ratio: from / to, next: first}
	s.reach = (taps(interpolatorStop, 2*math.Pi*(1-2*top)) + 1) / 2
	if top < 0.25 { // for so wide a transition Kaiser's formula is short
		s.reach++
	}
	s.num, s.den = fraction(s.ratio)
	phases := tablePhases
	if s.den > 0 {
		phases = int(s.den)
	}
	s.phases = make([][]float64, phases+1)
	for i := range s.phases {
		mirrored := phases - i
		if mirrored >= i {
			s.phases[i] = s.kernel(float64(i) / float64(phases))
			continue
		}
		s.phases[i] = slices.Clone(s.phases[mirrored])
		slices.Reverse(s.phases[i])
	}
	at, _ := s.place(first)
	s.origin = at - int64(s.reach) + 1
	return s
}

// kernel returns the weights of the 2·reach samples around a point at the given phase behind the middle left one.
func (s *sincStage) kernel(phase float64) []float64 {
	w := make([]float64, 2*s.reach)
	beta := shape(interpolatorStop)
	sum := 0.
	for i := range w {
		x := float64(i-s.reach+1) - phase
		w[i] = sinc(x) * kaiser(beta, x/float64(s.reach))
		sum += w[i]
	}
	for i := range w { // a constant stays what it is
		w[i] /= sum
	}
	return w
}

// fraction returns ratio as num/den with den no more than mostPhases, or den 0 where it is no such fraction.
func fraction(ratio float64) (num, den int64) {
	for d := int64(1); d <= mostPhases; d++ {
		n := math.Round(ratio * float64(d))
		if math.Abs(n/float64(d)-ratio) <= 4e-16*ratio {
			return int64(n), d
		}
	}
	return 0, 0
}

// place returns where grid index k lies among the source's samples: after sample at, by phase of a sample.
func (s *sincStage) place(k int64) (at int64, phase float64) {
	if s.den > 0 {
		p := k * s.num
		at = p / s.den
		if p%s.den < 0 {
			at--
		}
		return at, float64(p-at*s.den) / float64(s.den)
	}
	whole := math.Floor(float64(k) * s.ratio)
	// The phase of the exact product, which hours into a track has more digits than a float64.
	phase = math.FMA(float64(k), s.ratio, -whole)
	return int64(whole), math.Min(math.Max(phase, 0), 1)
}

func (s *sincStage) fill(dst []float64) error {
	last, _ := s.place(s.next + int64(len(dst)) - 1)
	if err := s.need(last + int64(s.reach) + 1); err != nil {
		return err
	}
	if s.den > 0 {
		s.exact(dst)
	} else {
		s.between(dst)
	}
	s.next += int64(len(dst))
	// Keep what the next output needs.
	at, _ := s.place(s.next)
	if drop := at - int64(s.reach) + 1 - s.origin; drop > 0 {
		drop = min(drop, int64(len(s.buffer)))
		s.buffer = s.buffer[:copy(s.buffer, s.buffer[drop:])]
		s.origin += drop
	}
	return nil
}

// exact fills dst where every value has a kernel of its own.
func (s *sincStage) exact(dst []float64) {
	at, phase := s.place(s.next)
	from := int(at - int64(s.reach) + 1 - s.origin)
	p := int64(math.Round(phase * float64(s.den)))
	for i := range dst {
		if p == 0 { // the kernel is 1 at the sample itself and 0 at all others
			dst[i] = s.buffer[from+s.reach-1]
		} else {
			dst[i] = floats.Dot(s.phases[p], s.buffer[from:from+2*s.reach])
		}
		if p += s.num; p >= s.den {
			p -= s.den
			from++
		}
	}
}

// between fills dst with values between those of the two kernels whose phases are nearest.
func (s *sincStage) between(dst []float64) {
	for i := range dst {
		at, phase := s.place(s.next + int64(i))
		from := int(at - int64(s.reach) + 1 - s.origin)
		x := s.buffer[from : from+2*s.reach]
		position := phase * tablePhases
		p := min(int(position), tablePhases-1)
		a := position - float64(p)
		dst[i] = float64((1-a)*floats.Dot(s.phases[p], x)) + float64(a*floats.Dot(s.phases[p+1], x))
	}
}

// need makes the buffer reach up to, but not including, the source sample end.
func (s *sincStage) need(end int64) error {
	have := s.origin + int64(len(s.buffer))
	if have >= end {
		return nil
	}
	old := len(s.buffer)
	s.buffer = append(s.buffer, make([]float64, end-have)...)
	return s.src.fill(s.buffer[old:])
}

// halfStage doubles the rate: every second value is the source's own, the ones between are interpolated.
type halfStage struct {
	src    stage
	taps   []float64 // weights of the samples around a point midway
	buffer []float64 // source values from index origin on
	origin int64
	next   int64 // index at this stage's rate
}

// newHalfStage takes the weights of pairs as halfBand gives them; value first is the first one wanted.
func newHalfStage(taps []float64, first int64) *halfStage {
	mirrored := slices.Clone(taps)
	slices.Reverse(mirrored)
	return &halfStage{taps: append(mirrored, taps...), origin: floorHalf(first) - int64(len(taps)) + 1, next: first}
}

// halfBand returns the weights of the pairs of samples around a point midway, nearest first, for a source that holds
// the original's rate times share of its own.
func halfBand(share float64) []float64 {
	// The source's sound ends at (1 − PassBand) of the original's rate; its image begins that far below its own rate.
	top := (1 - PassBand) * share
	// At the doubled rate the filter may fall from top/2 to (1−top)/2. That is wide, the filter is short, and β after
	// Kaiser's formula is not the best: it is searched.
	for pairs := 2; ; pairs++ {
		if w, leak := leastLeaking(pairs, top); leak <= math.Pow(10, -halfBandStop/20.) {
			return w
		}
	}
}

// leastLeaking returns the half-band filter of so many pairs that leaks least, and how much, from (1−top)/2 of the
// doubled rate to half of it.
func leastLeaking(pairs int, top float64) (best []float64, leak float64) {
	const points, gentlest, steepest = 128, 4, 18
	cosines := make([][]float64, points)
	for p := range cosines {
		f := 0.5 - top/2*float64(p)/(points-1)
		cosines[p] = make([]float64, pairs)
		for i := range cosines[p] {
			cosines[p][i] = math.Cos(2 * math.Pi * f * float64(2*i+1))
		}
	}
	leak = math.Inf(1)
	for beta := float64(gentlest); beta <= steepest; beta += 0.25 {
		w := make([]float64, pairs)
		for i := range w {
			x := float64(i) + 0.5
			w[i] = sinc(x) * kaiser(beta, x/(float64(pairs)+0.25))
		}
		floats.Scale(0.5/floats.Sum(w), w) // a constant stays what it is
		most := 0.
		for _, c := range cosines {
			most = math.Max(most, math.Abs(0.5+floats.Dot(w, c)))
		}
		if most < leak {
			best, leak = w, most
		}
	}
	return best, leak
}

func (h *halfStage) fill(dst []float64) error {
	m := int64(len(h.taps) / 2)
	end := floorHalf(h.next+int64(len(dst))-1) + m + 1
	if missing := end - h.origin - int64(len(h.buffer)); missing > 0 {
		old := len(h.buffer)
		h.buffer = append(h.buffer, make([]float64, missing)...)
		if err := h.src.fill(h.buffer[old:]); err != nil {
			return err
		}
	}
	for i := range dst {
		k := h.next + int64(i)
		at := floorHalf(k) - h.origin
		if k&1 == 0 {
			dst[i] = h.buffer[at]
			continue
		}
		dst[i] = floats.Dot(h.taps, h.buffer[at-m+1:at+m+1])
	}
	h.next += int64(len(dst))
	drop := floorHalf(h.next) - m + 1 - h.origin
	h.buffer = h.buffer[:copy(h.buffer, h.buffer[drop:])]
	h.origin += drop
	return nil
}

// Refinement returns the kernel by which half-band filters take a stream to 2^doublings times its rate: what a sample
// of 1 among zeros becomes, from −reach to reach of the stream's samples, both included; reach·2^doublings values stand
// on either side of the middle one. The stream holds the original's rate times share of its own, share ½ or less.
func Refinement(share float64, doublings int) (kernel []float64, reach int) {
	kernel = []float64{1}
	for d := range doublings {
		taps := halfBand(share / float64(int64(1)<<d))
		middle := len(kernel) / 2
		at := func(i int) float64 {
			if i += middle; i < 0 || i >= len(kernel) {
				return 0
			}
			return kernel[i]
		}
		side := 2*middle + 2*len(taps) - 1
		finer := make([]float64, 2*side+1)
		for i := -side; i <= side; i++ {
			if i%2 == 0 {
				finer[i+side] = at(i / 2)
				continue
			}
			k := floorHalf(int64(i)) // between k and k+1
			for j, w := range taps {
				finer[i+side] += w * (at(int(k)-j) + at(int(k)+1+j))
			}
		}
		kernel = finer
	}
	scale := 1 << doublings
	reach = (len(kernel)/2 + scale - 1) / scale
	padded := make([]float64, 2*reach*scale+1)
	copy(padded[reach*scale-len(kernel)/2:], kernel)
	return padded, reach
}
