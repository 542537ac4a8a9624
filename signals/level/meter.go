package level

import (
	"math"

	"midrail/signals/spectrum"
)

const (
	// shortTerm is the length in s of the windows whose loudest is told; cells are the parts that they move by.
	shortTerm = 0.125
	cells     = 12
	// mostPoints is the largest number of points of a level along time.
	mostPoints = 1024
	// resolution is how far apart in Hz a spectrum's points are at most: a third of the third octave named 20 Hz.
	resolution = 1.5
)

// Meter measures a stream. What it finds does not depend on how the stream is cut into blocks.
type Meter struct {
	rate  float64
	welch *spectrum.Welch

	// pivot is the stream's first value. Sums are taken from there, so that DC costs no digits and a constant has no
	// power at all.
	pivot  float64
	length int     // values in a cell
	cell   moments // the one being filled
	count  int64   // whole cells
	whole  moments // all of those

	ring   [cells]moments
	worst  float64 // power of the loudest window
	worstT int64   // the cell that it begins with

	// steady is the power, times the number of values, about the mean of each stretch as long as half a segment of
	// the spectrum: what the spectrum sees, which has no slower changes.
	steady     float64
	stretch    moments
	perStretch int64 // cells

	points   []moments // along time
	point    moments
	perPoint int64 // cells
}

// moments are sums over a stretch of values.
type moments struct {
	n          float64
	sum, power float64 // of values from the pivot
	peak       float64 // largest size of values from 0
}

func (m moments) join(o moments) moments {
	return moments{m.n + o.n, m.sum + o.sum, m.power + o.power, math.Max(m.peak, o.peak)}
}

// mean returns the mean value from the pivot.
func (m moments) mean() float64 {
	if m.n == 0 {
		return 0
	}
	return m.sum / m.n
}

// about returns the mean square about a value from the pivot.
func (m moments) about(x float64) float64 {
	if m.n == 0 {
		return 0
	}
	// NaN stays what it is.
	if p := m.power/m.n - float64(x*(2*m.mean()-x)); !(p < 0) {
		return p
	}
	return 0
}

// variance returns the mean square without DC.
func (m moments) variance() float64 { return m.about(m.mean()) }

// NewMeter starts a meter for a stream at a rate in Hz, above 0.
func NewMeter(rate float64) *Meter {
	m := &Meter{rate: rate, length: max(1, int(math.Round(rate*shortTerm/cells))), perPoint: 1}
	segment := spectrum.Length(rate, resolution)
	m.welch = spectrum.NewWelch(rate, segment)
	m.perStretch = max(1, int64(math.Round(float64(segment)/2/float64(m.length))))
	return m
}

// Write takes the stream's next values.
func (m *Meter) Write(x []float64) {
	if m.count == 0 && m.cell.n == 0 && len(x) > 0 {
		m.pivot = x[0]
	}
	m.welch.Write(x)
	for len(x) > 0 {
		n := min(m.length-int(m.cell.n), len(x))
		m.cell.add(x[:n], m.pivot)
		x = x[n:]
		if int(m.cell.n) == m.length {
			m.endCell()
		}
	}
}

func (m *moments) add(x []float64, pivot float64) {
	sum, power, peak := m.sum, m.power, m.peak
	for _, v := range x {
		if a := math.Abs(v); a > peak {
			peak = a
		}
		v -= pivot
		sum += v
		power += float64(v * v)
	}
	*m = moments{m.n + float64(len(x)), sum, power, peak}
}

func (m *Meter) endCell() {
	c := m.cell
	m.cell = moments{}
	m.ring[m.count%cells] = c
	m.count++
	m.whole = m.whole.join(c)
	if m.count >= cells {
		m.worst, m.worstT = m.louder(m.ring, m.count)
	}
	m.stretch = m.stretch.join(c)
	if m.count%m.perStretch == 0 {
		m.steady += m.stretch.n * m.stretch.variance()
		m.stretch = moments{}
	}
	m.point = m.point.join(c)
	if m.count%m.perPoint == 0 {
		m.endPoint()
	}
}

// louder returns the loudest window's power and first cell, with that of the ring, which ends before the given cell.
func (m *Meter) louder(ring [cells]moments, end int64) (power float64, first int64) {
	var window moments
	for i := range int64(cells) {
		window = window.join(ring[(end+i)%cells])
	}
	if p := window.variance(); p > m.worst {
		return p, max(0, end-cells)
	}
	return m.worst, m.worstT
}

func (m *Meter) endPoint() {
	m.points = append(m.points, m.point)
	m.point = moments{}
	if len(m.points) < mostPoints {
		return
	}
	for i := range mostPoints / 2 {
		m.points[i] = m.points[2*i].join(m.points[2*i+1])
	}
	m.points = m.points[:mostPoints/2]
	m.perPoint *= 2
}

// Reading is what a meter found.
type Reading struct {
	DC   float64 // full scale
	RMS  float64 // dBFS
	A    float64 // dBFS, A-weighted
	Peak float64 // dB of full scale, DC included
	// Worst is the level in dBFS of the loudest 125 ms, each window without its own mean, moved by a twelfth of its
	// length; a shorter stream is one window.
	Worst   float64
	WorstAt float64 // s, where that window begins
	Thirds  []Third // whose upper edge is not above half the rate
	Density spectrum.Density
	Time    Timeline
}

// Third is the level in a third octave.
type Third struct {
	Band
	Level float64 // dBFS
}

// Timeline is the level along time: up to 1024 points, which stand for about 10 ms each in a short stream and for
// more in a longer one. Both slices are as long as there are points.
type Timeline struct {
	Step float64   // s from point to point; the first stands for 0 to Step
	RMS  []float64 // dBFS, about the DC of the whole stream
	Peak []float64 // dB of full scale, DC included
}

// Result returns what was found so far; more may follow. Nothing written is silence.
func (m *Meter) Result() Reading {
	whole := m.whole.join(m.cell)
	r := Reading{DC: m.pivot + whole.mean(), RMS: dBFS2(whole.variance()), Peak: Peak(whole.peak)}

	worst, first := m.worst, m.worstT
	if m.cell.n > 0 { // the last window ends with the stream
		ring := m.ring
		ring[m.count%cells] = m.cell
		worst, first = m.louder(ring, m.count+1)
	} else if m.count < cells {
		worst = whole.variance()
	}
	r.Worst, r.WorstAt = dBFS2(worst), float64(first)*float64(m.length)/m.rate

	r.Density = m.welch.Result()
	stretch := m.stretch.join(m.cell)
	steady := m.steady + float64(stretch.n*stretch.variance())
	if whole.n > 0 {
		steady /= whole.n
	}
	r.spectral(steady, m.rate)

	r.Time.Step = float64(m.perPoint) * float64(m.length) / m.rate
	point := func(p moments) {
		r.Time.RMS = append(r.Time.RMS, dBFS2(p.about(whole.mean())))
		r.Time.Peak = append(r.Time.Peak, Peak(p.peak))
	}
	for _, p := range m.points {
		point(p)
	}
	if p := m.point.join(m.cell); p.n > 0 {
		point(p)
	}
	return r
}

// dBFS2 returns the level of a mean square.
func dBFS2(power float64) float64 { return DBFS(math.Sqrt(power)) }

// spectral finds the levels that go by frequency. The spectrum's total is brought to the power measured in time, of
// which its windows see a little more here and less there.
func (r *Reading) spectral(power, rate float64) {
	d := r.Density
	total, weighted := 0., 0.
	for i := 1; i < len(d.Values); i++ {
		p := d.Values[i] * d.Step
		total += p
		weighted += float64(p * math.Pow(10, AWeighting(float64(i)*d.Step)/10))
	}
	scale := 0.
	if total > 0 {
		scale = power / total
	}
	r.A = dBFS2(weighted * scale)
	for _, b := range Thirds(rate / 2) {
		r.Thirds = append(r.Thirds, Third{b, dBFS2(scale * between(d, b.Low, b.High))})
	}
}

// between returns the power of a density between two frequencies; point i stands for Step about i·Step.
func between(d spectrum.Density, low, high float64) float64 {
	sum := 0.
	first, last := int(low/d.Step+0.5), int(high/d.Step+0.5)
	for i := first; i <= last && i < len(d.Values); i++ {
		from, to := (float64(i)-0.5)*d.Step, (float64(i)+0.5)*d.Step
		if width := math.Min(to, high) - math.Max(from, low); width > 0 && i > 0 {
			sum += float64(d.Values[i] * width)
		}
	}
	return sum
}
