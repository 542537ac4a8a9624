package alignment

import (
	"math"
	"math/cmplx"
	"testing"
)

// Sections as the handbooks have them, here to ten digits from SciPy 1.10.1 (buttap, besselap(norm="mag")) and 40-digit
// roots; Op Amps for Everyone, 5th ed., tables 16.6 and 16.7 agree to their printed digits but for one misprint (Bessel,
// n = 7, first row: k is 1.684, printed 1.648). Chebyshev 0.5 dB, −3.0103 dB below the gain at 0 Hz: tables 16.8 to 16.11.
func TestSectionsAreTheTables(t *testing.T) {
	const digits = 2e-9
	for _, c := range []struct {
		a    Alignment
		want []Section
	}{
		{Butterworth, []Section{{1, 0.7071067812}}}, {Butterworth, []Section{{1, 0}, {1, 1}}},
		{Butterworth, []Section{{1, 0.5411961001}, {1, 1.3065629649}}}, {Butterworth, []Section{{1, 0}, {1, 0.6180339888}, {1, 1.6180339888}}},
		{Butterworth, []Section{{1, 0.5097955791}, {1, 0.6013448869}, {1, 0.8999762231}, {1, 2.5629154477}}},
		{Bessel, []Section{{1.2720196495, 0.5773502692}}}, {Bessel, []Section{{1.3226757999, 0}, {1.4476171332, 0.6910466258}}},
		{Bessel, []Section{{1.4301715600, 0.5219345817}, {1.6033575162, 0.8055382818}}},
		{Bessel, []Section{{1.6843681793, 0}, {1.7163560449, 0.5323556979}, {1.8224174789, 0.6608213893}, {2.0494909003, 1.1262575420}}},
		{Bessel, []Section{{1.7784659118, 0.5059910694}, {1.8320926012, 0.5596091648}, {1.9531957590, 0.7108520744}, {2.1887262305, 1.2256694254}}},
		{Chebyshev, []Section{{0.8504118487, 0.8637209782}}}, {Chebyshev, []Section{{0.5365862285, 0}, {0.9155177767, 1.7061894771}}},
		{Chebyshev, []Section{{0.5396237497, 0.7051102368}, {0.9321537158, 2.9405541744}}},
		{Chebyshev, []Section{{0.2891493005, 0.6765747816}, {0.5835624731, 1.6106774328}, {0.8389935285, 3.4656702779}, {0.9802285361, 11.5307940468}}},
	} {
		order := 0
		for _, s := range c.want {
			order += 2
			if s.Q == 0 {
				order--
			}
		}
		got, err := Sections(c.a, order)
		if err != nil || len(got) != len(c.want) {
			t.Fatalf("%s %d: %v, %v", c.a, order, got, err)
		}
		for i, w := range c.want {
			if !(math.Abs(got[i].F0-w.F0) <= digits) || !(math.Abs(got[i].Q-w.Q) <= 10*digits) {
				t.Errorf("%s %d, section %d: %+v, want %+v", c.a, order, i+1, got[i], w)
			}
		}
	}
}

func TestCornersAreAtOne(t *testing.T) {
	for _, a := range All() {
		for order := 1; order <= Highest; order++ {
			s, err := Sections(a, order)
			if err != nil {
				t.Fatal(err)
			}
			if db := 20 * math.Log10(cmplx.Abs(Response(s, 1))); !(math.Abs(db+10*math.Log10(2)) <= 1e-9) {
				t.Errorf("%s %d: %.9f dB at its corner", a, order, db)
			}
		}
	}
	if _, err := Sections(Butterworth, 9); err == nil {
		t.Error("order 9 is there")
	}
	if _, err := Sections("cauer", 2); err == nil {
		t.Error("an alignment that is none is there")
	}
}

// Overshoot of a second-order system: exp(−π/√(4Q²−1)); Butterworth of order 2 has 4.32 %.
func TestOvershoot(t *testing.T) {
	for _, q := range []float64{0.7071067812, 1, 2} {
		want := math.Exp(-math.Pi / math.Sqrt(4*q*q-1))
		if got := Overshoot([]Section{{1, q}}); !(math.Abs(got-want) <= 0.005) {
			t.Errorf("Q %g: %.4f, want %.4f", q, got, want)
		}
	}
}
