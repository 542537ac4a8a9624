package level

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"gonum.org/v1/gonum/floats"
	"pgregory.net/rapid"
)

const (
	rate = 48000.
	// rounding is that of a logarithm of sums, in dB.
	rounding = 1e-9
)

func read(rate float64, x []float64) Reading {
	m := NewMeter(rate)
	m.Write(x)
	return m.Result()
}

// wave returns so many seconds of a waveform of the phase in periods, 0 to 1.
func wave(seconds, f float64, of func(phase float64) float64) []float64 {
	x := make([]float64, int(math.Round(seconds*rate)))
	for i := range x {
		p := f * float64(i) / rate
		x[i] = of(p - math.Floor(p))
	}
	return x
}

func sine(seconds, amplitude, f float64) []float64 {
	return wave(seconds, f, func(p float64) float64 { return amplitude * math.Sin(2*math.Pi*p) })
}

func noise(seconds, rms float64) []float64 {
	r := rand.New(rand.NewPCG(3, 4))
	return wave(seconds, 0, func(float64) float64 { return rms * r.NormFloat64() })
}

func about(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if got != want && !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s is %v, want %v", what, got, want)
	}
}

// The standard waveforms of unit peak: DC and RMS in closed form.
func TestWaveforms(t *testing.T) {
	for _, c := range []struct {
		name    string
		of      func(p float64) float64
		dc, rms float64 // DC included
	}{
		{"sine", func(p float64) float64 { return math.Sin(2 * math.Pi * p) }, 0, math.Sqrt(0.5)},
		{"half-wave", func(p float64) float64 { return math.Max(0, math.Sin(2*math.Pi*p)) }, 0.318309886184, 0.5},
		{"full-wave", func(p float64) float64 { return math.Abs(math.Sin(2 * math.Pi * p)) }, 0.636619772368, 0.707106781187},
		{"square", func(p float64) float64 { return 1 - 2*math.Floor(2*p) }, 0, 1},
		{"triangle", func(p float64) float64 { return 1 - 4*math.Abs(p-0.5) }, 0, 0.57735026919},
		{"sawtooth", func(p float64) float64 { return 2*p - 1 }, 0, 0.57735026919},
	} {
		r := read(rate, wave(2, 10, c.of))
		const perPeriod = 4800 // values of a period: a sum over them is off by as much of the largest step, 2, at most
		about(t, c.name+": DC", r.DC, c.dc, 2./perPeriod)
		about(t, c.name+": the level", r.RMS, DBFS(math.Sqrt(c.rms*c.rms-c.dc*c.dc)), 20/math.Ln10/perPeriod)
		about(t, c.name+": the peak", r.Peak, 0, 20/math.Ln10/perPeriod)
	}
}

// DC costs no digits: 140 dB below it a tone has its level still, and a constant has none at all.
func TestDC(t *testing.T) {
	x := sine(3, 1e-7, 1000)
	floats.AddConst(0.5, x)
	r := read(rate, x)
	about(t, "DC", r.DC, 0.5, 1e-12)
	const quantised = 1e-4 // dB, by values whose last digit is 1.1e-16: 1e-9 of the tone, and spread
	about(t, "the level", r.RMS, -140, quantised)
	about(t, "the worst", r.Worst, -140, quantised)
	about(t, "A-weighted", r.A, -140, 0.01)

	silent := math.Inf(-1)
	for _, n := range []int{0, 1, 1000, 100_000} {
		r := read(rate, slices.Repeat([]float64{0.1}, n))
		about(t, "a constant's level", r.RMS, silent, 0)
		about(t, "a constant's A-weighted level", r.A, silent, 0)
		about(t, "a constant's worst", r.Worst, silent, 0)
		for _, b := range r.Thirds {
			about(t, "a constant's third", b.Level, silent, 0)
		}
		if n > 0 {
			about(t, "a constant's DC", r.DC, 0.1, 0)
			about(t, "a constant's peak", r.Peak, -20, rounding)
		} else {
			about(t, "nothing's peak", r.Peak, silent, 0)
		}
	}
}

// A tone is in its third, and A-weighted it is as much less as the standard's table says.
func TestTones(t *testing.T) {
	for i, row := range aTable {
		exact := 1000 * math.Pow(10, float64(i-20)/10)
		r := read(rate, sine(5, 0.5, exact))
		level := 20 * math.Log10(0.5)
		// Of whole segments, not of whole periods, so that at 10 Hz the window sees not quite all.
		about(t, fmt.Sprintf("%g Hz: the level", row.nominal), r.RMS, level, 0.01)
		// Below 30 Hz the curve rises 12 dB an octave and bends over the 2.2 Hz of the window's lines.
		about(t, fmt.Sprintf("%g Hz: A-weighted", row.nominal), r.A, level+row.computed, max(0.001, 5/exact))
		for _, b := range r.Thirds {
			const leak = -100 // dBFS, from 25 Hz off, which is 34 lines of the window, whose skirts fall 18 dB an octave
			if b.Low <= exact && exact < b.High {
				about(t, fmt.Sprintf("%g Hz: its third", row.nominal), b.Level, level, 0.01)
			} else if (b.Low > exact+25 || b.High < exact-25) && !(b.Level <= leak) {
				t.Errorf("%g Hz: %g dBFS in the third of %g Hz", row.nominal, b.Level, b.Nominal)
			}
		}
	}
}

// White noise has in each third what its width says, and in all of them what it has between their edges.
func TestNoise(t *testing.T) {
	const rms = 0.1
	r := read(rate, noise(60, rms))
	about(t, "the level", r.RMS, DBFS(rms), 0.02)
	if len(r.Thirds) != len(thirdsTable) {
		t.Fatalf("%d thirds", len(r.Thirds))
	}
	sum, band := 0., 0.
	for _, b := range r.Thirds {
		want := DBFS(rms * math.Sqrt((b.High-b.Low)/(rate/2)))
		// Four standard deviations of the power of noise B wide over T: 1/√(B·T).
		about(t, fmt.Sprintf("the third of %g Hz", b.Nominal), b.Level, want, 4*10/math.Ln10/math.Sqrt((b.High-b.Low)*60))
		sum += math.Pow(10, b.Level/10)
		band += b.High - b.Low
	}
	about(t, "the sum of thirds", 10*math.Log10(sum), DBFS(rms*math.Sqrt(band/(rate/2))), 0.02)
}

// A burst is found, with its place, wherever it is, and its level by frequency is that of the whole.
func TestWorst(t *testing.T) {
	for _, at := range []float64{0, 0.5, 1.003, 2.7, 3.875} {
		x := slices.Concat(make([]float64, int(at*rate)), sine(0.125, 1, 1000), make([]float64, int((4-0.125-at)*rate)))
		r := read(rate, x)
		// The windows lie up to half a hop of 1/96 s off it.
		about(t, fmt.Sprintf("the worst of a burst at %g s", at), r.Worst, 0, 0.2)
		about(t, "its place", r.WorstAt, at, 0.125/24+1e-9)
		whole := 10 * math.Log10(0.125/4)
		about(t, "the level", r.RMS, whole, 0.001)
		about(t, "A-weighted", r.A, whole, 0.1)
	}
	// Its last 5 ms, and all of a short one.
	x := slices.Concat(make([]float64, 48000+77), sine(0.005, 1, 1000))
	about(t, "the worst at the end", read(rate, x).Worst, 10*math.Log10(0.005/0.125), 0.4)
	short := sine(0.05, 0.1, 1000)
	about(t, "the worst of 50 ms", read(rate, short).Worst, -20, 0.001)
	about(t, "the level of 50 ms by frequency", read(rate, short).A, -20, 0.05)
	about(t, "the worst of 62.5 ms", read(rate, sine(0.0625, 0.1, 1000)).Worst, -20, 0.001)
}

// A slow drift, which no third holds, is not spread over the thirds.
func TestDrift(t *testing.T) {
	x := sine(20, 0.01, 1000)
	for i := range x {
		x[i] += 0.3 * math.Exp(-float64(i)/(5*rate))
	}
	r := read(rate, x)
	if r.RMS < -20 {
		t.Fatalf("the drift's level is %g dBFS", r.RMS)
	}
	for _, b := range r.Thirds {
		if b.Nominal == 1000 {
			about(t, "the tone beside a drift", b.Level, -40, 1)
		}
	}
}

// The timeline stands for all of a stream, however long, in no more than mostPoints.
func TestTimeline(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		const rate = 960. // cells of 10
		n := rapid.IntRange(0, 60_000).Draw(t, "n")
		x := make([]float64, n)
		loud := 0
		if n > 0 {
			loud = rapid.IntRange(0, n-1).Draw(t, "loud")
			x[loud] = 0.5
		}
		r := read(rate, x)
		points := len(r.Time.RMS)
		if points != len(r.Time.Peak) || points > mostPoints {
			t.Fatalf("%d and %d points", points, len(r.Time.Peak))
		}
		if seconds := float64(n) / rate; !(float64(points)*r.Time.Step >= seconds-1e-9 && float64(points-1)*r.Time.Step < seconds) {
			t.Fatalf("%d points %g s apart for %g s", points, r.Time.Step, seconds)
		}
		if n > 20*mostPoints && points < mostPoints/2 {
			t.Fatalf("%d points only", points)
		}
		power := 0.
		for i, p := range r.Time.Peak {
			if (i == int(float64(loud)/rate/r.Time.Step)) != (p == Peak(0.5)) {
				t.Fatalf("the peak of point %d is %g", i, p)
			}
			count := math.Min(r.Time.Step*rate, float64(n)-float64(i)*r.Time.Step*rate)
			power += count * math.Pow(10, r.Time.RMS[i]/10)
		}
		if n > 1 && !(math.Abs(10*math.Log10(power/float64(n))-r.RMS) <= 1e-6) {
			t.Fatalf("the points make %g dBFS, the whole is %g", 10*math.Log10(power/float64(n)), r.RMS)
		}
	})
}

// How a stream is cut, and results taken on the way, change no bit.
func TestBlocks(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		const rate = 960.
		x := noise(rapid.Float64Range(0, 0.5).Draw(t, "seconds"), 1)
		whole, cut := NewMeter(rate), NewMeter(rate)
		whole.Write(x)
		for rest := x; len(rest) > 0; {
			n := min(rapid.IntRange(0, 20_000).Draw(t, "block"), len(rest))
			cut.Write(rest[:n])
			cut.Result()
			rest = rest[n:]
		}
		if a, b := fmt.Sprintf("%x", whole.Result()), fmt.Sprintf("%x", cut.Result()); a != b {
			t.Fatal("other bits")
		}
	})
}

// What is no number does not pass for silence.
func TestNaN(t *testing.T) {
	x := sine(1, 1, 1000)
	x[30_000] = math.NaN()
	if r := read(rate, x); !math.IsNaN(r.RMS) || !math.IsNaN(r.DC) {
		t.Errorf("with NaN in it a stream has %g dBFS and DC %g", r.RMS, r.DC)
	}
}

func BenchmarkMeter(b *testing.B) {
	m := NewMeter(rate)
	x := noise(0.1, 1)
	for b.Loop() {
		m.Write(x)
	}
	b.ReportMetric(float64(b.N*len(x))/rate/b.Elapsed().Seconds(), "xrealtime")
}
