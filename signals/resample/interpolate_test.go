package resample

import (
	"errors"
	"fmt"
	"io"
	"math"
	"math/big"
	"math/cmplx"
	"slices"
	"testing"

	"gonum.org/v1/gonum/dsp/fourier"
	"pgregory.net/rapid"

	"midrail/signals"
)

// inaudible is −120 dB: what images and slips of the pass band may come to, in parts of a tone.
const inaudible = 1e-6

// ratios are pairs of rates: exact phases, a table of phases, and with half-band stages after either.
var ratios = [][2]float64{
	{48000, 96000}, {48000, 100000}, {44100, 96000}, {44100, 44100 * math.E}, {48000, 96153.8461},
	{48000, 192000}, {48000, 768000}, {44100, 1.152e6}, {8000, 8000 * 4 * math.Phi}, {48000, 3.072e6},
}

func forRatios(t *testing.T, f func(t *testing.T, from, to float64)) {
	for _, r := range ratios {
		t.Run(fmt.Sprintf("%g-%g", r[0], r[1]), func(t *testing.T) { f(t, r[0], r[1]) })
	}
}

func all(t testing.TB, s signals.Stream) []float64 {
	t.Helper()
	x, err := signals.ReadAll(s)
	if err != nil {
		t.Fatal(err)
	}
	return x
}

func samples(n int, f func(j int) float64) *signals.Samples {
	s := make(signals.Samples, n)
	for j := range s {
		s[j] = f(j)
	}
	return &s
}

// Tones at these fractions of half the source's rate, off whole periods, judge a resampler (common practice, no source).
var fractions = []float64{0.01, 0.1, 0.25, 0.5, 0.75, 0.9, 0.913}

// A tone comes out as the same tone, at the right times and with nothing beside it.
func TestTones(t *testing.T) {
	forRatios(t, func(t *testing.T, from, to float64) {
		const n = 400
		for _, fraction := range fractions {
			f := fraction*from/2 + 0.37
			tone := func(time float64) float64 { return math.Sin(2*math.Pi*f*time + 1) }
			y := all(t, New(samples(n, func(j int) float64 { return tone(float64(j) / from) }), from, to, PassBand, 0, 0, 0))
			for k := int(150 * to / from); k < int(250*to/from); k++ {
				if d := math.Abs(y[k] - tone(float64(k)/to)); !(d <= inaudible) {
					t.Fatalf("%g of half the rate: value %d is off by %g", fraction, k, d)
				}
			}
		}
	})
}

// A source that ends far below half its rate needs less of a filter for the same.
func TestTonesOfANarrowSource(t *testing.T) {
	forRatios(t, func(t *testing.T, from, to float64) {
		const n, top = 400, 0.1
		for _, share := range []float64{0.01, 0.05, 0.099} {
			tone := func(time float64) float64 { return math.Sin(2*math.Pi*share*from*time + 1) }
			y := all(t, New(samples(n, func(j int) float64 { return tone(float64(j) / from) }), from, to, top, 0, 0, 0))
			for k := int(150 * to / from); k < int(250*to/from); k++ {
				if d := math.Abs(y[k] - tone(float64(k)/to)); !(d <= inaudible) {
					t.Fatalf("%g of the rate: value %d is off by %g", share, k, d)
				}
			}
		}
	})
}

// A constant is exact. The fastest alternation, at half the source's rate, and its image, each −6 dB down, make a
// cosine.
func TestEnds(t *testing.T) {
	forRatios(t, func(t *testing.T, from, to float64) {
		const n = 400
		constant := all(t, New(samples(n, func(int) float64 { return 1 }), from, to, PassBand, 0, 0, 0))
		alternating := all(t, New(samples(n, func(j int) float64 { return float64(1 - 2*(j%2)) }), from, to, PassBand, 0, 0, 0))
		const rounding = 1e-14
		for k := int(150 * to / from); k < int(250*to/from); k++ {
			if d := math.Abs(constant[k] - 1); !(d <= rounding) {
				t.Fatalf("constant: value %d is off by %g", k, d)
			}
			if d := math.Abs(alternating[k] - math.Cos(math.Pi*float64(k)*from/to)); !(d <= inaudible) {
				t.Fatalf("alternating: value %d is off by %g", k, d)
			}
		}
	})
}

// The response to a unit impulse is symmetric about it, and its spectrum is flat to 0.46 of the source's rate, −6 dB
// at half and −120 dB from 0.54 on.
func TestImpulse(t *testing.T) {
	forRatios(t, func(t *testing.T, from, to float64) {
		const middle = 100
		ratio := to / from
		p := New(samples(middle+1, func(j int) float64 { return float64(j / middle) }), from, to, PassBand, 0, 0, middle-1)
		h := all(t, p)
		whole := ratio == math.Round(ratio)
		if whole {
			m := middle * int(ratio)
			for i := range m {
				const rounding = 1e-15
				if d := math.Abs(h[m-i] - h[m+i]); !(d <= rounding) {
					t.Fatalf("%d to either side the response differs by %g", i, d)
				}
				if want := math.Trunc(1 / float64(i+1)); i%int(ratio) == 0 && h[m+i] != want {
					t.Fatalf("the response is %g at a source sample, want %g", h[m+i], want)
				}
			}
		}
		size := 1
		for size < 16*len(h) {
			size *= 2
		}
		padded := make([]float64, size)
		copy(padded, h)
		for k, c := range fourier.NewFFT(size).Coefficients(nil, padded) {
			f, gain := float64(k)/float64(size)*ratio, cmplx.Abs(c)/ratio
			const flat = 0.001 // dB
			switch {
			case f <= PassBand && !(math.Abs(20*math.Log10(gain)) <= flat):
				t.Fatalf("gain %g at %g of the rate", gain, f)
			case f >= 1-PassBand && !(gain <= inaudible):
				t.Fatalf("images at %g of the rate are only %.1f dB down", f, -20*math.Log10(gain))
			}
		}
	})
}

// The same sound read on any part of the time grid, from any rate to any other, is the sound at those times.
func TestTimeGrid(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		from := rapid.Float64Range(4000, 200e3).Draw(t, "from")
		to := from * rapid.Float64Range(2, 70).Draw(t, "ratio")
		srcFirst := rapid.Int64Range(-10_000, 10_000).Draw(t, "srcFirst")
		first := int64(math.Floor(float64(srcFirst)*to/from)) - rapid.Int64Range(0, 300).Draw(t, "before")
		f := PassBand * from * rapid.Float64Range(0, 1).Draw(t, "f")
		tone := func(time float64) float64 { return math.Cos(2 * math.Pi * f * time) }
		y := make([]float64, int64(250*to/from)+300)
		p := New(samples(400, func(j int) float64 { return tone(float64(srcFirst+int64(j)) / from) }), from, to, PassBand, srcFirst, first, 0)
		if n, err := p.Read(y); n != len(y) || err != nil {
			t.Fatal(n, err)
		}
		const tolerance = inaudible + 1e-9 // and the rounding of phases of up to 10⁴ periods
		for k, v := range y {
			time := float64(first+int64(k)) / to
			if j := time*from - float64(srcFirst); j < 100 || j > 300 {
				continue
			}
			if d := math.Abs(v - tone(time)); !(d <= tolerance) {
				t.Fatalf("value %d is off by %g", k, d)
			}
		}
	})
}

// Values come as long as (first+k)/to < (srcFirst+N+tail)/from.
func TestLength(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		from := rapid.Int64Range(1, 200_000).Draw(t, "from")
		to := from*2 + rapid.Int64Range(0, 500_000).Draw(t, "more")
		if to > 20*from {
			to = 20 * from
		}
		n := rapid.Int64Range(0, 300).Draw(t, "n")
		tail := rapid.Int64Range(0, 300).Draw(t, "tail")
		srcFirst := rapid.Int64Range(-500, 500).Draw(t, "srcFirst")
		first := srcFirst*to/from - 1100
		y, err := signals.ReadAll(New(samples(int(n), func(int) float64 { return 1 }), float64(from), float64(to), PassBand, srcFirst, first, tail))
		if err != nil {
			t.Fatal(err)
		}
		// The smallest k that is too late: ceil((srcFirst+n+tail)·to/from).
		end := new(big.Int).Mul(big.NewInt(srcFirst+n+tail), big.NewInt(to))
		end.Add(end, big.NewInt(from-1)).Div(end, big.NewInt(from)) // Euclidean: the floor
		if want := max(end.Int64()-first, 0); int64(len(y)) != want {
			t.Fatalf("%d values, want %d", len(y), want)
		}
	})
}

// chopped reads a stream in pieces of drawn lengths.
func chopped(t *rapid.T, read func(n int) (int, error)) {
	lengths := rapid.SliceOfN(rapid.IntRange(0, 700), 1, 20).Filter(func(l []int) bool { return slices.Max(l) > 0 }).Draw(t, "blocks")
	for i := 0; ; i++ {
		_, err := read(lengths[i%len(lengths)])
		if errors.Is(err, io.EOF) {
			return
		}
		if err != nil {
			t.Fatal(err)
		}
	}
}

func noise(n int) *signals.Samples {
	seed := uint64(1)
	return samples(n, func(int) float64 {
		seed = seed*6364136223846793005 + 1442695040888963407
		return float64(int64(seed)) / (1 << 63)
	})
}

// How a stream is read changes no bit.
func TestBlocks(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		r := rapid.SampledFrom(ratios[:8]).Draw(t, "ratio")
		n := rapid.IntRange(0, 600).Draw(t, "n")
		make := func() *Interpolator { return New(noise(n), r[0], r[1], PassBand, 0, -50, 10) }
		want, err := signals.ReadAll(make())
		if err != nil {
			t.Fatal(err)
		}
		p := make()
		var got []float64
		chopped(t, func(n int) (int, error) {
			at := len(got)
			got = slices.Grow(got, n)[:at+n]
			n, err := p.Read(got[at:])
			got = got[:at+n]
			return n, err
		})
		if !slices.Equal(got, want) {
			t.Fatal("other bits")
		}
	})
}

// The kernel of a refinement does what the half-band stages do.
func TestRefinement(t *testing.T) {
	const from, base, doublings, n = 48000., 110000., 3, 300
	kernel, reach := Refinement(from/base, doublings)
	scale := 1 << doublings
	want := all(t, New(noise(n), from, base*float64(scale), PassBand, 0, 0, 0))
	if len(kernel) != 2*reach*scale+1 {
		t.Fatalf("%d weights for a reach of %d", len(kernel), reach)
	}
	coarse := all(t, New(noise(n), from, base, PassBand, 0, int64(-reach), 2*preRing))
	for k := range want {
		sum := 0.
		for i, x := range coarse {
			if at := k - (i-reach)*scale + reach*scale; at >= 0 && at < len(kernel) {
				sum += kernel[at] * x
			}
		}
		const rounding = 1e-14
		if d := math.Abs(sum - want[k]); !(d <= rounding) {
			t.Fatalf("value %d is off by %g", k, d)
		}
	}
}

// preRing is more than the interpolation reaches beyond the last sample.
const preRing = 128

type failing struct{ err error }

func (f failing) Read(dst []float64) (int, error) { return len(dst) / 2, f.err }

func TestFailures(t *testing.T) {
	broken := errors.New("broken")
	if _, err := New(failing{broken}, 1, 2, PassBand, 0, 0, 0).Read(make([]float64, 10)); !errors.Is(err, broken) {
		t.Errorf("an interpolator's error is %v", err)
	}
	if _, err := NewSplit(failing{broken}, 8, 1, 0).Read(make([]float64, 10), make([]float64, 10)); !errors.Is(err, broken) {
		t.Errorf("a split's error is %v", err)
	}
	for name, f := range map[string]func(){
		"below twice the rate": func() { New(noise(1), 2, 3.9, PassBand, 0, 0, 0) },
		"behind the first":     func() { New(noise(1), 1, 2, PassBand, 0, 1000, 0) },
		"lengths":              func() { NewSplit(noise(1), 8, 1, 0).Read(make([]float64, 1), nil) },
	} {
		t.Run(name, func(t *testing.T) {
			defer func() {
				if recover() == nil {
					t.Error("no panic")
				}
			}()
			f()
		})
	}
}

// endless is a stream of noise without end.
type endless struct {
	values []float64
	at     int
}

func (e *endless) Read(dst []float64) (int, error) {
	for i := range dst {
		dst[i] = e.values[e.at]
		e.at = (e.at + 1) % len(e.values)
	}
	return len(dst), nil
}

// perSecond tells how many times faster than the sound itself a benchmark went, which took so many values of it.
func perSecond(b *testing.B, values, rate float64) {
	b.ReportMetric(values/rate/b.Elapsed().Seconds(), "xrealtime")
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/values, "ns/value")
}

func BenchmarkInterpolator(b *testing.B) {
	for _, r := range ratios {
		b.Run(fmt.Sprintf("%g-%g", r[0], r[1]), func(b *testing.B) {
			p := New(&endless{values: *noise(4096)}, r[0], r[1], PassBand, 0, 0, 0)
			dst := make([]float64, 8192)
			for b.Loop() {
				if _, err := p.Read(dst); err != nil {
					b.Fatal(err)
				}
			}
			perSecond(b, float64(b.N*len(dst)), r[1])
		})
	}
}
