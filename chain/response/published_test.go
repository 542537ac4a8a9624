package response

import (
	"fmt"
	"math"
	"testing"
)

const (
	// midBand is how far a corner may lie off the one against 0 Hz: mid-band is told a hundredth of the corner up, where a
	// low-pass of second order has moved by 1e-4·(1/Q² − 2) of a power.
	midBand = 2e-4
	// digits is the rounding of tables of ten digits.
	digits = 2e-9
)

// Second-order low-passes with an ideal amplifier: f0 in Hz, Q and the −3.01 dB frequency against 0 Hz.
// Unity gain and gain K: R. P. Sallen, E. L. Key (1955). The parts are those of B. Carter, R. Mancini (eds), "Op Amps for
// Everyone", 5th ed. (2017), ch. 16, example 16-2 and fig. 16-22; S. A. Pactitis, "Active Filters: Theory and Design" (2008),
// fig. 2.13; Texas A&M University, ECEN 622, homework of 2016. With several feedbacks: the ratios of a published
// application note for unity gain, the others by the formulas of ch. 16.
func TestPublishedLowPasses(t *testing.T) {
	const sallenKey, multiple = "sallen-key low-pass", "multiple-feedback low-pass"
	for _, c := range []struct {
		name, kind string
		parts      string
		f0, q, f3  float64
	}{
		{"example 16-2, designed", sallenKey, "r_1 = 1234.892353\nr_2 = 1333.2896832\nc_1 = 1.5e-7\nc_2 = 2.2e-8\n", 2159.1675854, 1.3046237946, 2999.9824671},
		{"example 16-2, printed", sallenKey, "r_1 = 1260\nr_2 = 1300\nc_1 = 1.5e-7\nc_2 = 2.2e-8\n", 2164.7423472, 1.3054230371, 3008.1698648},
		{"ECEN 622", sallenKey, "r_1 = 40e3\nr_2 = 40e3\nc_1 = 1.6e-11\nc_2 = 1e-12\n", 994718.39432, 2, 1476668.8295},
		{"fig. 2.13", sallenKey, "r_1 = 10e3\nr_2 = 10e3\nc_1 = 3.9e-8\nc_2 = 1.02e-7\nbias = \"half\"\nr_a = \"5k\"\nr_b = \"20k\"\n", 252.34095495, 1.3139872526, 351.2039123},
		{"fig. 16-22, a = 1.618", sallenKey, "r_1 = 1865.79696\nr_2 = 4415.0005503\nc_1 = 1.5e-9\nc_2 = 8.2e-10\n", 50000, 0.61804697157, 42944.12254},
		{"fig. 16-22, a = 0.618", sallenKey, "r_1 = 1447.2503921\nr_2 = 4513.8256583\nc_1 = 4.7e-9\nc_2 = 3.3e-10\n", 50000, 1.6181229773, 72376.242695},
		{"equal resistors", sallenKey, "r_1 = 10e3\nr_2 = 10e3\nc_1 = 2.2e-9\nc_2 = 1.1e-9\n", 10230.867229, 0.70710678119, 10230.867229},
		{"E24", sallenKey, "r_1 = 8200\nr_2 = 8200\nc_1 = 3.3e-9\nc_2 = 1.5e-9\n", 8723.75941, 0.74161984871, 9128.8747329},
		{"Butterworth, 20 kHz, −1", multiple, "r_1 = 7406.23864069\nr_2 = 7406.23864069\nr_3 = 8269.17211791\nc_1 = 4.7e-10\nc_2 = 2.2e-9\n", 20000, 0.707106781187, 20000},
		{"Butterworth, 10 kHz, −10", multiple, "r_1 = 6411.02325919\nr_2 = 64110.2325919\nr_3 = 14633.5314952\nc_1 = 1e-10\nc_2 = 2.7e-9\n", 10000, 0.707106781187, 10000},
		{"Bessel, 10 kHz, −2", multiple, "r_1 = 3326.36079144\nr_2 = 6652.72158287\nr_3 = 5006.46900598\nc_1 = 1e-9\nc_2 = 4.7e-9\n", 12720.5462829, 0.577314944761, 9999.45408649},
		{"unity-gain ratios", multiple, "r_1 = 7071.06781187\nr_2 = 7071.06781187\nr_3 = 3535.53390593\nc_1 = 1e-9\nc_2 = 4e-9\n", 15915.4943092, 0.707106781187, 15915.4943092},
		{"E24, several feedbacks", multiple, "r_1 = 10e3\nr_2 = 10e3\nr_3 = 5100\nc_1 = 1e-9\nc_2 = 3.9e-9\n", 11285.0305753, 0.698177778626, 11140.7298811},
	} {
		t.Run(c.name, func(t *testing.T) {
			text := fmt.Sprintf(head, `"ideal"`)
			if c.kind == multiple || c.name == "fig. 2.13" {
				// A stiff bias: its own impedance is no part of the filter.
				text += "[bias.half]\ntop = \"10k\"\nbottom = \"10k\"\nbuffer = \"one\"\n"
			}
			text += "[[stage]]\nname = \"it\"\nkind = \"" + c.kind + "\"\nfrom = \"line\"\namplifier = \"one\"\n" + c.parts
			if c.kind == multiple {
				text += "bias = \"half\"\n"
			}
			n := parse(t, text+tail)
			at, err := n.Rest()
			if err != nil {
				t.Fatal(err)
			}
			poles, err := Poles(n, at)
			if err != nil {
				t.Fatal(err)
			}
			if len(poles) != 1 {
				t.Fatalf("poles: %+v", poles)
			}
			near(t, "f0", poles[0].Frequency, c.f0, digits*c.f0)
			near(t, "Q", poles[0].Q, c.q, digits*c.q)
			p, err := NewPath(n, "", "")
			if err != nil {
				t.Fatal(err)
			}
			near(t, "corner", p.Figures().HighCorner, c.f3, midBand*c.f3)
			// The corner against 0 Hz itself, by the response.
			down := 20 * math.Log10(abs(p.Gain(c.f3))/abs(p.Gain(0)))
			near(t, "at the corner", down, -halfPower, 1e-8)
		})
	}
}

func abs(x complex128) float64 { return math.Hypot(real(x), imag(x)) }
