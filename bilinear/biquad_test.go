package bilinear

import (
	"math"
	"math/cmplx"
	"testing"
)

// digits is the accuracy of the published 14-digit coefficients, with a little for their last place.
const digits = 2e-13

func closeTo(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s = %.15g, want %.15g (%g apart, %g allowed)", what, got, want, math.Abs(got-want), tolerance)
	}
}

// Low-pass of R. Bristow-Johnson's Audio EQ Cookbook (W3C Note), evaluated to 14 digits.
func TestLowPassIsTheCookbooks(t *testing.T) {
	for _, c := range []struct{ f0, rate, q, b0, b1, b2, a1, a2 float64 }{
		{1000, 48000, 0.70710678118655, 0.0039161266605474, 0.0078322533210948, 0.0039161266605474, -1.8153410827046, 0.83100558934676},
		{10000, 48000, 0.70710678118655, 0.22019470027296, 0.44038940054592, 0.22019470027296, -0.30756635979221, 0.18834516088404},
		{20000, 192000, 0.70710678118655, 0.072230875325753, 0.14446175065151, 0.072230875325753, -1.1092287926184, 0.39815229392144},
		{3000, 44100, 1.3049, 0.038816907469182, 0.077633814938363, 0.038816907469182, -1.5706015607164, 0.72586919059311},
		{1000, 44100, 0.5, 0.0044363299627356, 0.0088726599254712, 0.0044363299627356, -1.7335768789993, 0.75132219885021},
		{1000, 48000, 5.0, 0.0042224552130173, 0.0084449104260346, 0.0042224552130173, -1.9573412921734, 0.97423111302544},
	} {
		q := LowPass(c.f0, c.q, c.rate)
		for _, p := range []struct {
			name      string
			got, want float64
		}{{"b0", q.B0, c.b0}, {"b1", q.B1, c.b1}, {"b2", q.B2, c.b2}, {"a1", q.A1, c.a1}, {"a2", q.A2, c.a2}} {
			closeTo(t, p.name, p.got, p.want, digits)
		}
	}
}

// scipy.signal.bilinear, SciPy 1.10.1: bilinear(b, a, fs) without prewarping; Q is 1/√2 where it reads 0.7071.
func TestTransformIsSciPys(t *testing.T) {
	w := 2 * math.Pi * 1000
	first := Transform([3]float64{0, 0, w}, [3]float64{0, 1, w}, 48000, 0)
	closeTo(t, "b0", first.B0, 0.061429308134174, digits)
	closeTo(t, "b1", first.B1, 0.061429308134174, digits)
	closeTo(t, "a1", first.A1, -0.87714138373165, digits)
	warped := Transform([3]float64{0, 0, w}, [3]float64{0, 1, w}, 48000, 1000)
	closeTo(t, "prewarped b0", warped.B0, 0.061511768503622, digits)
	closeTo(t, "prewarped a1", warped.A1, -0.87697646299276, digits)
	for _, c := range []struct{ f0, q, rate, b0, a1, a2 float64 }{
		{1000, math.Sqrt2 / 2, 48000, 0.0039054628249861, -1.815602857333, 0.83122470863296},
		{10000, math.Sqrt2 / 2, 48000, 0.1819770236099, -0.48567486465621, 0.21358295909583},
		{20000, math.Sqrt2 / 2, 192000, 0.068216180833168, -1.1375403266191, 0.41040504995176},
		{3000, 1.3049, 44100, 0.037763881274984, -1.5781144247317, 0.72916994983167},
	} {
		w := 2 * math.Pi * c.f0
		q := Transform([3]float64{0, 0, w * w}, [3]float64{1, w / c.q, w * w}, c.rate, 0)
		closeTo(t, "b0", q.B0, c.b0, digits)
		closeTo(t, "b1", q.B1, 2*c.b0, digits)
		closeTo(t, "a1", q.A1, c.a1, digits)
		closeTo(t, "a2", q.A2, c.a2, digits)
	}
}

// A. V. Oppenheim, R. W. Schafer, Discrete-Time Signal Processing, ch. 7: sixth-order Butterworth by the bilinear
// transform, T = 1, Ωc = 0.766 rad: the denominators as printed, to four decimals.
func TestButterworthIsOppenheimAndSchafers(t *testing.T) {
	const printed = 5e-5
	const corner = 0.766230957887 // Ωc with the stop band met exactly; printed 0.766
	cutoff := math.Atan(corner/2) / math.Pi
	cascade := ButterworthLowPass(6, cutoff, 1)
	want := [][2]float64{{-0.9044, 0.2155}, {-1.0106, 0.3583}, {-1.2686, 0.7051}}
	gain := 1.
	for i, q := range cascade {
		closeTo(t, "a1", q.A1, want[i][0], printed)
		closeTo(t, "a2", q.A2, want[i][1], printed)
		gain *= q.B0
	}
	closeTo(t, "gain", gain, 0.0007378, printed*1e-3)
}

// Fourth-order Butterworth, 45 Hz at 360 Hz: digits of scipy.signal.butter, SciPy 1.10.1.
func TestButterworthIsSciPys(t *testing.T) {
	cascade := ButterworthLowPass(4, 45, 360)
	b, a := []float64{1}, []float64{1}
	for _, q := range cascade {
		b, a = multiply(b, []float64{q.B0, q.B1, q.B2}), multiply(a, []float64{1, q.A1, q.A2})
	}
	for i, want := range []float64{0.010209480791203, 0.040837923164813, 0.061256884747219, 0.040837923164813, 0.010209480791203} {
		closeTo(t, "b", b[i], want, digits)
	}
	for i, want := range []float64{1.0, -1.9684277869385, 1.7358607092089, -0.72447082950736, 0.12038959989624} {
		closeTo(t, "a", a[i], want, digits)
	}
}

func multiply(p, q []float64) []float64 {
	r := make([]float64, len(p)+len(q)-1)
	for i, x := range p {
		for j, y := range q {
			r[i+j] += x * y
		}
	}
	return r
}

func TestWarpedFrequencies(t *testing.T) {
	for _, c := range []struct{ f, want float64 }{{1000, 1001.43034506}, {5000, 5186.47903216}, {10000, 11723.892778}, {15000, 22866.4516789}, {20000, 57021.5360539}} {
		closeTo(t, "warped", Warped(c.f, 48000), c.want, 1e-7)
	}
}

func TestBiquadStepsAsItResponds(t *testing.T) {
	q := LowPass(3000, 1.2, 48000)
	var s BiquadState
	var acc complex128
	const f, n, settle = 2500, 4800, 4800
	for i := range n + settle {
		y := q.Step(&s, math.Sin(2*math.Pi*f*float64(i)/48000))
		if i >= settle {
			acc += complex(y, 0) * cmplx.Exp(complex(0, -2*math.Pi*f*float64(i)/48000))
		}
	}
	got := acc * complex(0, 2./n)
	if d := cmplx.Abs(got - q.Response(f, 48000)); !(d < 1e-12) {
		t.Errorf("stepped %v, response %v", got, q.Response(f, 48000))
	}
}
