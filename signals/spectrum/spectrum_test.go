package spectrum

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
	rate   = 48000.
	length = 16384
	step   = rate / length
	// rounding is what a transform of a few ten thousand values leaves, relative to the whole.
	rounding = 1e-11
)

func density(x []float64) Density {
	w := NewWelch(rate, length)
	w.Write(x)
	return w.Result()
}

func total(d Density) float64 { return floats.Sum(d.Values) * d.Step }

func sine(n int, amplitude, f, phase float64) []float64 {
	x := make([]float64, n)
	for i := range x {
		x[i] = amplitude * math.Sin(2*math.Pi*f*float64(i)/rate+phase)
	}
	return x
}

func white(n int, rms float64) []float64 {
	r := rand.New(rand.NewPCG(1, 2))
	x := make([]float64, n)
	for i := range x {
		x[i] = rms * r.NormFloat64()
	}
	return x
}

func close(t *testing.T, what string, got, want, relative float64) {
	t.Helper()
	if !(math.Abs(got-want) <= relative*math.Abs(want)) {
		t.Errorf("%s is %v, want %v", what, got, want)
	}
}

// A sine that fits the segments has the mean square A²/2, all of it within a bin to either side: the Hann window's
// transform is 1 there and ½ next to it (F. J. Harris, "On the use of windows for harmonic analysis with the discrete
// Fourier transform", Proc. IEEE 66, 1978), so that 2/3 of the power is in the middle bin.
func TestSine(t *testing.T) {
	const k, amplitude = 341, 0.3
	d := density(sine(5*length/2, amplitude, k*step, 0.7))
	if len(d.Values) != length/2+1 || d.Step != step {
		t.Fatalf("%d points %g apart", len(d.Values), d.Step)
	}
	const power = amplitude * amplitude / 2
	close(t, "the mean square", total(d), power, rounding)
	close(t, "the middle", d.Values[k]*step, power*2/3, rounding)
	close(t, "the side", d.Values[k+1]*step, power/6, rounding)
	if far := d.Values[k+2] * step; !(far <= rounding*power) {
		t.Errorf("%g two bins off", far)
	}
}

// White noise of variance σ² has the density σ²/(rate/2); an alternation, all its power at half the rate.
func TestWhite(t *testing.T) {
	const rms, segments = 0.1, 100
	d := density(white(segments*length/2, rms))
	const tolerance = 0.004 // √(2/n) is 0.0016 of the variance of n = 819 200 values
	close(t, "the mean square", total(d), rms*rms, tolerance)
	for k := 0; k+1000 < len(d.Values); k += 1000 {
		const tolerance = 0.02 // 1/√(1000·99·0.6) is 0.004: points that are 1.4 bins wide, segments that overlap
		close(t, fmt.Sprint("the density at point ", k), floats.Sum(d.Values[k+2:k+1000])/998, rms*rms/(rate/2), tolerance)
	}
	x := make([]float64, length)
	for i := range x {
		x[i] = float64(1 - 2*(i%2))
	}
	close(t, "an alternation's mean square", total(density(x)), 1, rounding)
}

// Sines stand out of noise with the power they have, and DC leaves nothing.
func TestSinesInNoise(t *testing.T) {
	const n = 40 * length
	x := white(n, 1e-3)
	floats.Add(x, sine(n, 1e-2, 1000.3, 0))
	floats.Add(x, sine(n, 2e-4, 7001.1, 0))
	floats.AddConst(0.4, x)
	d := density(x)
	around := func(f float64) float64 {
		k := int(math.Round(f / step))
		return floats.Sum(d.Values[k-4:k+5]) * step
	}
	const floor = 1e-6 / (rate / 2) * 9 * step
	close(t, "the large sine", around(1000.3), 1e-4/2+floor, 0.001)
	close(t, "the small sine", around(7001.1), 4e-8/2+floor, 0.05) // 9 points of the floor are 1e-9 ± 10 %
	if dc := d.Values[0] * step; !(dc <= 1e-6) {
		t.Errorf("%g of DC", dc)
	}
}

// The equivalent noise bandwidth of Butterworth low-passes, ∫|H|²df/|H(0)|² = f3·(π/2n)/sin(π/2n), read from the
// density of lines at every 16th point whose power goes by |H|². (S. Butterworth's response; the closed form is
// that of standard tables of noise bandwidth.)
func TestNoiseBandwidth(t *testing.T) {
	// Of orders 2 to 10; that of order 1 reaches beyond half the rate.
	table := []float64{
		1.11072073453959, 1.0471975511966, 1.02617215297703, 1.01664073846305, 1.01151515992746,
		1.00844208797213, 1.00645454279956, 1.00509505797521, 1.00412420395399,
	}
	const f3, spacing = 1000., 16
	for i, want := range table {
		order := float64(i + 2)
		x := make([]float64, 2*length)
		for k := spacing; k < length/2; k += spacing {
			gain := 1 / math.Sqrt(1+math.Pow(float64(k)*step/f3, 2*order))
			if gain > 1e-4 {
				floats.Add(x, sine(len(x), math.Sqrt2*gain, float64(k)*step, float64(k*k)))
			}
		}
		// The lines sample |H|² from the first on; at 0, half a line is missing.
		bandwidth := spacing*step*0.5 + total(density(x))*spacing*step
		const tolerance = 3e-5 // order 2 has 2.4e-5 of it above half the rate
		close(t, fmt.Sprintf("the bandwidth of order %g", order), bandwidth/f3, want, tolerance)
	}
}

// A stream shorter than a segment is a segment of its own length.
func TestShort(t *testing.T) {
	const n, periods = 1000, 20
	d := density(sine(n, 1, periods*rate/n, 0.1))
	close(t, "the mean square", total(d), 0.5, rounding)
	if peak := floats.MaxIdx(d.Values); math.Abs(float64(peak)*step-periods*rate/n) > step {
		t.Errorf("the peak is at %g Hz", float64(peak)*step)
	}
	for n := range 4 {
		if got := total(density(sine(n, 1, 100, 1))); got != 0 {
			t.Errorf("%d values have the mean square %g", n, got)
		}
	}
}

// Whatever the length, the end counts: a burst there is seen. A constant has no power at all.
func TestEnd(t *testing.T) {
	for _, n := range []int{100, length - 1, length, length + 1, 3 * length / 2, 3*length/2 + 1, 2 * length, 2*length + 77, 5 * length / 2, 3*length - 1} {
		x := make([]float64, n)
		for i := range 20 {
			x[n-21+i] = float64(1 - 2*(i%2))
		}
		if total(density(x)) == 0 {
			t.Errorf("the end of %d values is not seen", n)
		}
		for i := range x {
			x[i] = 0.3
		}
		if got := total(density(x)); got != 0 {
			t.Errorf("%d equal values have the mean square %g", n, got)
		}
	}
}

// The density is what its formula says, term by term: segments that overlap by half and one that ends with the stream.
func TestDefinition(t *testing.T) {
	const n = 64
	for size := n; size < 4*n; size += 9 {
		x := white(size, 1)
		starts := []int{}
		for at := 0; at+n <= size; at += n / 2 {
			starts = append(starts, at)
		}
		if last := starts[len(starts)-1]; last+n < size {
			starts = append(starts, size-n)
		}
		want := make([]float64, n/2+1)
		for _, at := range starts {
			segment := x[at : at+n]
			mean := floats.Sum(segment) / n
			for k := range want {
				re, im, sum := 0., 0., 0.
				for i, v := range segment {
					h := 0.5 - 0.5*math.Cos(2*math.Pi*float64(i)/n)
					re += h * (v - mean) * math.Cos(2*math.Pi*float64(k*i)/n)
					im += h * (v - mean) * math.Sin(2*math.Pi*float64(k*i)/n)
					sum += h * h
				}
				s := 2 * (re*re + im*im) / (rate * sum)
				if k == 0 || k == n/2 {
					s /= 2
				}
				want[k] += s / float64(len(starts))
			}
		}
		w := NewWelch(rate, n)
		w.Write(x)
		for k, got := range w.Result().Values {
			close(t, fmt.Sprintf("point %d of %d values", k, size), got, want[k], 1e-10)
		}
	}
}

// How a stream is cut, and results taken on the way, change no bit.
func TestBlocks(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		x := white(rapid.IntRange(0, 1000).Draw(t, "n"), 1)
		const length = 64
		whole := NewWelch(rate, length)
		whole.Write(x)
		cut := NewWelch(rate, length)
		for rest := x; len(rest) > 0; {
			n := rapid.IntRange(0, len(rest)).Draw(t, "block")
			cut.Write(rest[:n])
			cut.Result()
			rest = rest[n:]
		}
		if !slices.Equal(whole.Result().Values, cut.Result().Values) {
			t.Fatal("other bits")
		}
	})
}

func TestLength(t *testing.T) {
	for _, c := range []struct {
		rate, resolution float64
		want             int
	}{{48000, 1.5, 65536}, {48000, 3, 16384}, {8000, 1.5, 16384}, {1, 100, 4}, {16384, 1, 16384}} {
		if got := Length(c.rate, c.resolution); got != c.want {
			t.Errorf("%g Hz for %g Hz: %d, want %d", c.rate, c.resolution, got, c.want)
		}
	}
	for _, bad := range []int{0, 1, 2, 8, 48, 100} {
		func() {
			defer func() {
				if recover() == nil {
					t.Errorf("%d values a segment: no panic", bad)
				}
			}()
			NewWelch(rate, bad)
		}()
	}
}

func BenchmarkWelch(b *testing.B) {
	for _, length := range []int{16384, 65536} {
		b.Run(fmt.Sprint(length), func(b *testing.B) {
			w := NewWelch(rate, length)
			x := white(4096, 1)
			for b.Loop() {
				w.Write(x)
			}
			b.ReportMetric(float64(b.N*len(x))/rate/b.Elapsed().Seconds(), "xrealtime")
		})
	}
}
