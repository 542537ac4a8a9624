package circuit

import (
	"fmt"
	"math"
	"math/cmplx"
	"strings"
	"testing"
)

// tableDigits is the last digit of the tables, which give 8 decimals of a dB and of a degree.
const tableDigits = 2e-8

// Unity-gain Sallen-Key with a one-pole amplifier A(s) = ωt/s, R1 = R2 = 10 kΩ, Cf = 2.2 nF, Cg = 1.1 nF: exact
// H = 1/((1 + s/ωt)·D0 + s²·R1·Cf/ωt), evaluated to 8 decimals. First-order result in Budak, "Passive and Active Network
// Analysis and Synthesis" (from memory).
func TestSallenKeyWithFiniteGainBandwidth(t *testing.T) {
	frequencies := []float64{1e3, 1e4, 2e4, 1e5, 1e6}
	for _, r := range []struct {
		gbw string
		db  [5]float64
		deg [5]float64
	}{
		{"10MHz", [5]float64{-0.00027752, -2.81631155, -11.94106233, -39.61685468, -79.65916654}, [5]float64{-7.95091554, -88.26560239, -135.75423748, -172.2654387, 175.12543665}},
		{"1MHz", [5]float64{0.00078826, -2.815509, -12.02253187, -39.77121658, -82.67752588}, [5]float64{-8.00347485, -89.29660288, -137.27349926, -177.4289381, 136.23449333}},
		{"300kHz", [5]float64{0.00351793, -2.8265132, -12.25703326, -40.44446815, -90.47227205}, [5]float64{-8.13979939, -91.96725241, -141.07395745, 170.32428687, 108.28223585}},
		{"100kHz", [5]float64{0.01105022, -2.95976002, -13.06755323, -43.31300746, -99.66183153}, [5]float64{-8.52976118, -99.49088938, -150.74026241, 146.55119876, 97.35772663}},
	} {
		n := parse(t, sallenKey(r.gbw, "0"))
		for i, f := range frequencies {
			h := n.At(f).Into(n.Output).Input(SoundInput(0))
			if db := Gain(h); !(math.Abs(db-r.db[i]) <= tableDigits) {
				t.Errorf("GBW %s, %g Hz: %.8f dB, want %.8f dB", r.gbw, f, db, r.db[i])
			}
			if deg := cmplx.Phase(h) * 180 / math.Pi; !(math.Abs(deg-r.deg[i]) <= tableDigits) {
				t.Errorf("GBW %s, %g Hz: %.8f°, want %.8f°", r.gbw, f, deg, r.deg[i])
			}
		}
	}
}

// sallenKey is the table's filter with an amplifier whose open-loop gain does not end.
func sallenKey(gbw, ro string) string {
	return fmt.Sprintf(`
[supply]
voltage = "5V"
[amplifier.one]
class = "ideal"
gain_bandwidth = %q
output_resistance = %q
[input.line]
kind = "line"
full_scale = "1Vrms"
[[stage]]
name = "it"
kind = "sallen-key low-pass"
from = "line"
amplifier = "one"
r_1 = "10k"
r_2 = "10k"
c_1 = "2n2"
c_2 = "1n1"
`, gbw, ro) + end
}

// The same with an output resistance: far above the corner the signal goes past the amplifier, which flattens at
// (zo ∥ R2)/(R1 + zo ∥ R2). Model published in "Learn the limitations of low-pass Sallen-Key filters", Electronic Design;
// evaluated to 6 decimals.
func TestSallenKeyLeaksThroughItsOutputResistance(t *testing.T) {
	const digits = 2e-6
	frequencies := []float64{1e4, 1e5, 1e6, 1e7, 1e8}
	for _, r := range []struct {
		ro, gbw string
		db      [5]float64
	}{
		{"10R", "1MHz", [5]float64{-2.815508, -39.782881, -63.047329, -60.061654, -60.0178}},
		{"10R", "10MHz", [5]float64{-2.816311, -39.618041, -76.90554, -63.025259, -60.060521}},
		{"100R", "1MHz", [5]float64{-2.815499, -39.852034, -43.158956, -40.214749, -40.172433}},
		{"100R", "10MHz", [5]float64{-2.816309, -39.628363, -60.02208, -43.103252, -40.213666}},
		{"300R", "1MHz", [5]float64{-2.815479, -39.768737, -33.786093, -31.003264, -30.96409}},
		{"300R", "10MHz", [5]float64{-2.816304, -39.649027, -50.516354, -33.734043, -31.002281}},
	} {
		n := parse(t, sallenKey(r.gbw, r.ro))
		for i, f := range frequencies {
			if db := Gain(n.At(f).Into(n.Output).Input(SoundInput(0))); !(math.Abs(db-r.db[i]) <= digits) {
				t.Errorf("Ro %s, GBW %s, %g Hz: %.6f dB, want %.6f dB", r.ro, r.gbw, f, db, r.db[i])
			}
		}
	}
}

// Multiple-feedback low-pass R1 = R2 = 10 kΩ, R3 = 5.1 kΩ, C1 = 1 nF, C2 = 3.9 nF with a one-pole amplifier, exact.
func TestMultipleFeedbackWithFiniteGainBandwidth(t *testing.T) {
	frequencies := []float64{1e3, 1e4, 2e4, 1e5, 1e6}
	for _, r := range []struct {
		gbw string
		db  [5]float64
		deg [5]float64
	}{
		{"10MHz", [5]float64{-0.00192227, -2.19717171, -10.44513268, -37.93078151, -77.96995968}, [5]float64{172.69845079, 99.43240418, 49.6344773, 8.70522467, -4.76893783}},
		{"1MHz", [5]float64{-0.00103187, -2.23598393, -10.63365696, -38.21231597, -81.04730516}, [5]float64{172.59413093, 97.89015736, 47.69154039, 3.54973576, -43.20450794}},
		{"300kHz", [5]float64{0.00114284, -2.36422749, -11.14482843, -39.16458868, -88.81248732}, [5]float64{172.32357574, 93.96531129, 43.03994282, -8.11110421, -70.7551908}},
	} {
		n := parse(t, fmt.Sprintf(`
[supply]
voltage = "5V"
[bias.half]
top = "1R"
bottom = "1R"
bypass = "1"
[amplifier.one]
class = "ideal"
gain_bandwidth = %q
[input.line]
kind = "line"
full_scale = "1Vrms"
[[stage]]
name = "it"
kind = "multiple-feedback low-pass"
from = "line"
amplifier = "one"
bias = "half"
r_1 = "10k"
r_2 = "10k"
r_3 = "5k1"
c_1 = "1n"
c_2 = "3n9"
`, r.gbw)+end)
		for i, f := range frequencies {
			h := n.At(f).Into(n.Output).Input(SoundInput(0))
			if db := Gain(h); !(math.Abs(db-r.db[i]) <= tableDigits) {
				t.Errorf("GBW %s, %g Hz: %.8f dB, want %.8f dB", r.gbw, f, db, r.db[i])
			}
			if deg := cmplx.Phase(h) * 180 / math.Pi; !(math.Abs(deg-r.deg[i]) <= tableDigits) {
				t.Errorf("GBW %s, %g Hz: %.8f°, want %.8f°", r.gbw, f, deg, r.deg[i])
			}
		}
	}
}

// Every other kind against its closed form, with ideal amplifiers, the bias behind one too.
func TestKindsAreTheirClosedForms(t *testing.T) {
	const bias = "[bias.half]\ntop = \"10k\"\nbottom = \"10k\"\nbuffer = \"one\"\n"
	r := func(x float64) complex128 { return complex(x, 0) }
	for _, c := range []struct {
		name, stage string
		want        func(s complex128) complex128
	}{
		{"inverting", `kind = "inverting"
bias = "half"
amplifier = "one"
r_in = "10k"
c_in = "1u"
r_f = "68k"
c_f = "33p"`, func(s complex128) complex128 { return -1 / (1/r(68e3) + s*33e-12) / (r(10e3) + 1/(s*1e-6)) }},
		{"non-inverting", `kind = "non-inverting"
bias = "half"
amplifier = "one"
c_in = "100n"
r_bias = "220k"
r_f = "47k"
c_f = "100p"
r_g = "4k7"
c_g = "10u"`, func(s complex128) complex128 {
			in := r(220e3) / (r(220e3) + 1/(s*100e-9))
			return in * (1 + 1/(1/r(47e3)+s*100e-12)/(r(4.7e3)+1/(s*10e-6)))
		}},
		{"follower", `kind = "follower"
bias = "half"
amplifier = "one"
c_in = "100n"
r_bias = "220k"`, func(s complex128) complex128 { return r(220e3) / (r(220e3) + 1/(s*100e-9)) }},
		{"sallen-key low-pass with gain", `kind = "sallen-key low-pass"
bias = "half"
amplifier = "one"
r_1 = "10k"
r_2 = "22k"
c_1 = "4n7"
c_2 = "1n"
r_a = "10k"
r_b = "5k6"`, func(s complex128) complex128 {
			k := r(1.56)
			return k / (1 + s*(1e-9*r(32e3)+(1-k)*10e3*4.7e-9) + s*s*10e3*22e3*4.7e-9*1e-9)
		}},
		{"sallen-key high-pass", `kind = "sallen-key high-pass"
bias = "half"
amplifier = "one"
c_1 = "10n"
c_2 = "22n"
r_1 = "10k"
r_2 = "33k"`, func(s complex128) complex128 {
			// ω0² = 1/(R1·R2·C1·C2), damping (C1 + C2)/(R2·C1·C2).
			return s * s / (s*s + s*(10e-9+22e-9)/r(33e3*10e-9*22e-9) + 1/r(10e3*33e3*10e-9*22e-9))
		}},
		{"rc high-pass", `kind = "rc high-pass"
c = "10n"
r = "10k"`, func(s complex128) complex128 { return s * 1e-4 / (1 + s*1e-4) }},
		{"divider", `kind = "divider"
r_top = "10k"
c_top = "1n"
r_bottom = "4k7"
c_bottom = "2n2"`, func(s complex128) complex128 {
			top, bottom := 1/(1/r(10e3)+s*1e-9), 1/(1/r(4.7e3)+s*2.2e-9)
			return bottom / (top + bottom)
		}},
		{"biased coupling", `kind = "biased coupling"
c = "1u"
top = "100k"
bottom = "47k"`, func(s complex128) complex128 {
			p := r(100e3 * 47e3 / 147e3)
			return p / (p + 1/(s*1e-6))
		}},
		{"passive sum", `kind = "passive sum"
input = [{ from = "line", r = "10k", c = "1u" }]
r_load = "22k"`, func(s complex128) complex128 { return r(22e3) / (r(32e3) + 1/(s*1e-6)) }},
		{"summer", `kind = "summer"
bias = "half"
amplifier = "one"
input = [{ from = "line", r = "10k", c = "1u" }]
r_f = "22k"
c_f = "47p"`, func(s complex128) complex128 { return -1 / (1/r(22e3) + s*47e-12) / (r(10e3) + 1/(s*1e-6)) }},
	} {
		t.Run(c.name, func(t *testing.T) {
			text := "[supply]\nvoltage = \"5V\"\n"
			if strings.Contains(c.stage, "bias =") {
				text += bias
			}
			if strings.Contains(c.stage, "amplifier =") {
				text += "[amplifier.one]\nclass = \"ideal\"\n"
			}
			text += "[input.line]\nkind = \"line\"\nfull_scale = \"1Vrms\"\n[[stage]]\nname = \"it\"\n"
			if !strings.Contains(c.stage, "input =") {
				text += "from = \"line\"\n"
			}
			same(t, parse(t, text+c.stage+"\n"+end), SoundInput(0), c.want)
		})
	}
}
