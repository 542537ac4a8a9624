package level

import (
	"math"

	"midrail/signals/spectrum"
)

const (
	// shortTerm is the length in s of the windows whose loudest is told, and quarters how many of a window's hops it
	// has.
	shortTerm = 0.125
	quarters  = 4
	// mostPoints is the largest number of points of a level along time.
	mostPoints = 1024
	// resolution is the width in Hz of a spectrum's points, at least: a fifth of the third octave named 25 Hz.
	resolution = 1.2
)

// Meter measures a stream. What it finds does not depend on how the stream is cut into blocks.
type Meter struct {
	rate  float64
	n     int64
	sum   float64
	power float64
	peak  float64
	welch *spectrum.Welch

	hop    int // values in a quarter of a short-term window
	inHop  int
	ring   [quarters]moments
	now    moments
	hops   int64
	worst  float64 // power
	worstT float64

	points []moments // along time
	perBin int64
	inBin  int64
	bin    moments
}

// moments are sums over a stretch of values.
type moments struct{ n, sum, power, peak float64 }

func (m *moments) add(x float64) {
	m.n++
	m.sum += x
	m.power += float64(x * x)
	m.peak = math.Max(m.peak, math.Abs(x))
}

func (m moments) join(o moments) moments {
	return moments{m.n + o.n, m.sum + o.sum, m.power + o.power, math.Max(m.peak, o.peak)}
}

// variance returns the mean square without DC.
func (m moments) variance() float64 {
	if m.n == 0 {
		return 0
	}
	mean := m.sum / m.n
	return math.Max(m.power/m.n-float64(mean*mean), 0)
}

// NewMeter starts a meter for a stream at a rate in Hz.
func NewMeter(rate float64) *Meter {
	length := 256
	for rate/float64(length) > resolution {
		length *= 2
	}
	return &Meter{
		rate: rate, welch: spectrum.NewWelch(rate, length),
		hop: max(1, int(math.Round(rate*shortTerm/quarters))), perBin: max(1, int64(math.Round(rate/100))),
	}
}

// Write takes the stream's next values.
func (m *Meter) Write(x []float64) {
	m.welch.Write(x)
	for _, v := range x {
		m.sum += v
		m.power += float64(v * v)
		m.peak = math.Max(m.peak, math.Abs(v))
		m.now.add(v)
		if m.inHop++; m.inHop == m.hop {
			m.endHop()
		}
		m.bin.add(v)
		if m.inBin++; m.inBin == m.perBin {
			m.endBin()
		}
	}
	m.n += int64(len(x))
}

func (m *Meter) endHop() {
	m.ring[m.hops%quarters] = m.now
	m.hops++
	m.now, m.inHop = moments{}, 0
	if m.hops < quarters {
		return
	}
	var window moments
	for _, q := range m.ring {
		window = window.join(q)
	}
	if p := window.variance(); p > m.worst {
		m.worst, m.worstT = p, float64((m.hops-quarters)*int64(m.hop))/m.rate
	}
}

func (m *Meter) endBin() {
	m.points = append(m.points, m.bin)
	m.bin, m.inBin = moments{}, 0
	if len(m.points) < mostPoints {
		return
	}
	for i := range mostPoints / 2 {
		m.points[i] = m.points[2*i].join(m.points[2*i+1])
	}
	m.points = m.points[:mostPoints/2]
	m.perBin *= 2
}

// Reading is what a meter found.
type Reading struct {
	DC      float64 // full scale
	RMS     float64 // dBFS
	A       float64 // dBFS, A-weighted
	Peak    float64 // dB of full scale, DC included
	Worst   float64 // dBFS of the loudest 125 ms; −Inf for a stream shorter than that
	WorstAt float64 // s, where it begins
	Thirds  []Third
	Density spectrum.Density
	Time    Timeline
}

// Third is the level in a third octave.
type Third struct {
	Band
	Level float64 // dBFS
}

// Timeline is the level along time.
type Timeline struct {
	Step float64   // s from point to point; the first stands for 0 to Step
	RMS  []float64 // dBFS
	Peak []float64 // dB of full scale
}

// Result returns what was found so far.
func (m *Meter) Result() Reading {
	whole := moments{n: float64(m.n), sum: m.sum, power: m.power, peak: m.peak}
	power := whole.variance()
	r := Reading{RMS: DBFS(math.Sqrt(power)), A: math.Inf(-1), Peak: Peak(m.peak), Worst: DBFS(math.Sqrt(m.worst)), WorstAt: m.worstT}
	if m.n > 0 {
		r.DC = m.sum / float64(m.n)
	}
	r.Density = m.welch.Result()
	r.spectral(power, m.rate)
	points := m.points
	if m.inBin > 0 {
		points = append(points[:len(points):len(points)], m.bin)
	}
	r.Time.Step = float64(m.perBin) / m.rate
	for _, p := range points {
		r.Time.RMS = append(r.Time.RMS, DBFS(math.Sqrt(p.variance())))
		r.Time.Peak = append(r.Time.Peak, Peak(p.peak))
	}
	return r
}

// spectral finds the levels that go by frequency. The spectrum's total is brought to the power measured in time, of
// which its windows see a little more here and less there.
func (r *Reading) spectral(power, rate float64) {
	d := r.Density
	total := 0.
	for i := 1; i < len(d.Values); i++ {
		total += d.Values[i] * d.Step
	}
	scale := 0.
	if total > 0 {
		scale = power / total
	}
	weighted := 0.
	for i := 1; i < len(d.Values); i++ {
		f := float64(i) * d.Step
		weighted += d.Values[i] * d.Step * math.Pow(10, AWeighting(f)/10)
	}
	r.A = DBFS(math.Sqrt(weighted * scale))
	for _, b := range Thirds(rate / 2) {
		r.Thirds = append(r.Thirds, Third{b, DBFS(math.Sqrt(scale * between(d, b.Low, b.High)))})
	}
}

// between returns the power of a density between two frequencies; point i stands for Step about i·Step.
func between(d spectrum.Density, low, high float64) float64 {
	sum := 0.
	first, last := int(low/d.Step+0.5), int(high/d.Step+0.5)
	for i := first; i <= last && i < len(d.Values); i++ {
		from, to := (float64(i)-0.5)*d.Step, (float64(i)+0.5)*d.Step
		if width := math.Min(to, high) - math.Max(from, low); width > 0 && i > 0 {
			sum += d.Values[i] * width
		}
	}
	return sum
}
