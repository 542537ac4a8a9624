package parts

import (
	"math"
	"testing"

	"pgregory.net/rapid"

	"midrail/chain/preferred"
)

func near(t *testing.T, what string, got, want, relative float64) {
	t.Helper()
	if !(math.Abs(got-want) <= relative*math.Abs(want)) {
		t.Errorf("%s is %.9g, want %.9g", what, got, want)
	}
}

// The fifth-order 50 kHz Butterworth of Op Amps for Everyone, 5th ed., fig. 16-22: with its capacitors its formula gives
// 1865.797/4415.001 and 1447.250/4513.826 Ω, printed 1.87k/4.42k and 1.45k/4.51k. Of its final 1 % values three are the
// nearest of E96; for 1447 Ω it takes 1.47k, where 1.43k is nearer.
func TestHandbookFilter(t *testing.T) {
	for _, c := range []struct{ q, c1, c2, r1, r2, e96r1, e96r2 float64 }{
		{1 / 1.618, 1.5e-9, 820e-12, 1865.797, 4415.001, 1870, 4420},
		{1 / 0.618, 4.7e-9, 330e-12, 1447.250, 4513.826, 1430, 4530},
	} {
		r1, r2, ok := SallenKey(50e3, c.q, c.c1, c.c2)
		if !ok {
			t.Fatal("no values")
		}
		// Its coefficients a = 1.618 and 0.618 are cut to three decimals.
		near(t, "r1", r1, c.r1, 1e-3)
		near(t, "r2", r2, c.r2, 1e-3)
		near(t, "r1 of E96", preferred.E96.Nearest(r1), c.e96r1, 0)
		near(t, "r2 of E96", preferred.E96.Nearest(r2), c.e96r2, 0)
	}
}

// Multiple-feedback designs computed by a nodal solve.
func TestMultipleFeedbackDesigns(t *testing.T) {
	for _, c := range []struct{ f0, q, gain, c1, c2, r1, r2, r3 float64 }{
		{1000, 0.707106781187, 1, 1e-8, 4.7e-8, 6910.79999241, 6910.79999241, 7798.55395576},
		{20000, 0.707106781187, 1, 4.7e-10, 2.2e-9, 7406.23864069, 7406.23864069, 8269.17211791},
		{10000, 0.707106781187, 10, 1e-10, 2.7e-9, 6411.02325919, 64110.2325919, 14633.5314952},
		{12720.5462829, 0.577314944761, 2, 1e-9, 4.7e-9, 3326.36079144, 6652.72158287, 5006.46900598},
	} {
		// The quadratic has two solutions; the table's is the one with the smaller r2.
		f0, q, gain := MultipleFeedbackOf(Values{c.r1, c.r2, c.r3, c.c1, c.c2})
		near(t, "f0", f0, c.f0, 1e-9)
		near(t, "Q", q, c.q, 1e-9)
		near(t, "gain", gain, c.gain, 1e-9)
	}
}

func TestDesignsRoundTrip(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		f0 := math.Pow(10, rapid.Float64Range(1, 5.5).Draw(t, "f0"))
		q := rapid.Float64Range(0.5, 12).Draw(t, "Q")
		gain := math.Pow(10, rapid.Float64Range(-1, 1.3).Draw(t, "gain"))
		slack := rapid.Float64Range(1.01, 5).Draw(t, "slack")
		c := math.Pow(10, rapid.Float64Range(-10, -7).Draw(t, "c"))
		v := Values{C1: c * 4 * q * q * slack, C2: c}
		var ok bool
		if v.R1, v.R2, ok = SallenKey(f0, q, v.C1, v.C2); !ok {
			t.Fatal("no sallen-key")
		}
		if gotF0, gotQ := SallenKeyOf(v); math.Abs(gotF0/f0-1) > 1e-9 || math.Abs(gotQ/q-1) > 1e-7 {
			t.Fatalf("sallen-key: %g Hz, Q %g, want %g Hz, Q %g", gotF0, gotQ, f0, q)
		}
		v = Values{C1: c, C2: c * 4 * q * q * (1 + gain) * slack}
		if v.R1, v.R2, v.R3, ok = MultipleFeedback(f0, q, gain, v.C1, v.C2); !ok {
			t.Fatal("no multiple-feedback")
		}
		if gotF0, gotQ, gotGain := MultipleFeedbackOf(v); math.Abs(gotF0/f0-1) > 1e-9 || math.Abs(gotQ/q-1) > 1e-7 || math.Abs(gotGain/gain-1) > 1e-9 {
			t.Fatalf("multiple-feedback: %g Hz, Q %g, gain %g, want %g, %g, %g", gotF0, gotQ, gotGain, f0, q, gain)
		}
	})
}

// A Sallen-Key of 10 kHz with an amplifier of 300 kHz: R1 = R2 = 10 kΩ, 2.2 nF, 1.1 nF has f0 9981.957389 Hz and Q
// 0.7239001066; of 100 kHz 9483.671428 Hz and 0.7551299997 (roots of the exact cubic).
func TestAmplifiersPullFiltersDown(t *testing.T) {
	v := Values{R1: 10e3, R2: 10e3, C1: 2.2e-9, C2: 1.1e-9}
	for gbw, want := range map[float64][2]float64{1e7: {10223.46324, 0.707618138}, 1e6: {10156.60741, 0.7122022539}, 3e5: {9981.957389, 0.7239001066}, 1e5: {9483.671428, 0.7551299997}} {
		f0, q := withAmplifier(SallenKeyKind, v, gbw)
		near(t, "f0", f0, want[0], 1e-8)
		near(t, "Q", q, want[1], 1e-8)
	}
}

// Predistorted values land nearer than those of the ideal design do.
func TestPredistortionHelps(t *testing.T) {
	for _, kind := range []Kind{SallenKeyKind, MultipleFeedbackKind} {
		w := Wish{Kind: kind, F0: 20e3, Q: 1.3, GainBandwidth: 1e6}
		ideal := w
		ideal.GainBandwidth = 0
		plain := w.judge(Find(ideal, 1)[0].Values)
		best := Find(w, 1)[0]
		if !(math.Abs(best.ErrorF0)+math.Abs(best.ErrorQ) < (math.Abs(plain.ErrorF0)+math.Abs(plain.ErrorQ))/3) {
			t.Errorf("%s: %+.3f %% and %+.3f %%, without %+.3f %% and %+.3f %%", kind, 100*best.ErrorF0, 100*best.ErrorQ, 100*plain.ErrorF0, 100*plain.ErrorQ)
		}
	}
}

func TestFindLandsNear(t *testing.T) {
	for _, w := range []Wish{
		{Kind: SallenKeyKind, F0: 3e3, Q: 0.707}, {Kind: SallenKeyKind, F0: 3e3, Q: 2.5}, {Kind: MultipleFeedbackKind, F0: 12e3, Q: 0.9, Gain: 4},
		{Kind: RCKind, F0: 3e3}, {Kind: SallenKeyKind, F0: 40, Q: 0.6},
	} {
		found := Find(w, 5)
		if len(found) == 0 {
			t.Errorf("%+v: nothing", w)
			continue
		}
		if c := found[0]; !(math.Abs(c.ErrorF0) < 0.01 && math.Abs(c.ErrorQ) < 0.01) {
			t.Errorf("%+v: %+v", w, c)
		}
	}
}

func TestRatios(t *testing.T) {
	if r := Inverting(12, preferred.E24, 3)[0]; !(math.Abs(r.Error) < 1e-9) {
		t.Errorf("gain 12: %+v", r)
	}
	if r := NonInverting(11, preferred.E24, 3)[0]; !(math.Abs(r.Error) < 1e-9) {
		t.Errorf("gain 11: %+v", r)
	}
	if r := Bias(0.9, 3.3, preferred.E24, 3)[0]; !(math.Abs(r.Error) < 0.005) {
		t.Errorf("0.9 V of 3.3 V: %+v", r)
	}
	if c, f := Coupling(20, 10e3, preferred.E12); c != 820e-9 || f > 20 {
		t.Errorf("20 Hz with 10 kΩ: %g F, %g Hz", c, f)
	}
}
