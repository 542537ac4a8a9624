package circuit

import (
	"fmt"
	"math"
	"math/cmplx"
	"strings"
	"testing"

	"midrail/chain"
)

// stageOf is a chain of one stage, "it", of the given kind and keys, and of what these name: a stiff bias (buffered by an
// ideal amplifier), a soft one, the amplifier "one" with the given data, the inputs "line" and "other" of no resistance.
func stageOf(t *testing.T, kind, keys, data string) *Network {
	text := "[supply]\nvoltage = \"5V\"\n"
	for _, of := range [...]struct{ name, table string }{
		{"stiff", "[bias.stiff]\ntop = \"10k\"\nbottom = \"10k\"\nbuffer = \"buffer\"\n[amplifier.buffer]\nclass = \"ideal\"\n"},
		{"soft", "[bias.soft]\ntop = \"33k\"\nbottom = \"22k\"\nbypass = \"1u\"\n"},
		{"one", "[amplifier.one]\nclass = \"ideal\"\n" + data},
		{"line", "[input.line]\nkind = \"line\"\nfull_scale = \"1Vrms\"\n"},
		{"other", "[input.other]\nkind = \"line\"\nfull_scale = \"1Vrms\"\n"},
	} {
		if strings.Contains(keys, "\""+of.name+"\"") {
			text += of.table
		}
	}
	return parse(t, text+"[[stage]]\nname = \"it\"\nkind = \""+kind+"\"\n"+keys+end)
}

// softly is the impedance of the soft bias.
func softly(s complex128) complex128 { return beside(beside(33e3, 22e3), 1/(s*1e-6)) }

// beside is two impedances in parallel.
func beside(a, b complex128) complex128 { return a * b / (a + b) }

// resistance and capacitor in parallel and in series.
func rc(s complex128, r, c float64) complex128     { return beside(complex(r, 0), 1/(s*complex(c, 0))) }
func series(s complex128, r, c float64) complex128 { return complex(r, 0) + 1/(s*complex(c, 0)) }

// closedForms are the kinds of stage and what each passes of an input, with e = 1/A(s) for its amplifier; from Kirchhoff's
// current law at each of its nodes, as in any textbook, and for the filters as in R. P. Sallen, E. L. Key, "A practical
// method of designing RC active filters", IRE Trans. CT-2 (1955), and, with several feedbacks, B. Carter, R. Mancini (eds),
// "Op Amps for Everyone", 5th ed. (2017), ch. 16.
func closedForms() []struct {
	kind, keys string
	input      int
	h          func(s, e complex128) complex128
} {
	type form = struct {
		kind, keys string
		input      int
		h          func(s, e complex128) complex128
	}
	const op = "amplifier = \"one\"\n"
	const from = "from = \"line\"\n"
	inverting := func(ratio, all, e complex128) complex128 { return -ratio / (1 + e*(1+all)) }
	lowPass := func(s, k complex128) complex128 {
		const r1, r2, c1, c2 = 10e3, 12e3, 2.2e-9, 1.1e-9
		return 1 / (k*((1+s*r2*c2)*(1+r1/r2+s*c1*r1)-r1/r2) - s*c1*r1)
	}
	sum := func(which int) func(s, e complex128) complex128 {
		return func(s, e complex128) complex128 {
			zf, y := rc(s, 22e3, 100e-12), []complex128{1. / 10e3, 1 / series(s, 4.7e3, 1e-6)}
			return inverting(zf*y[which], zf*(y[0]+y[1]), e)
		}
	}
	passive := func(which int) func(s, e complex128) complex128 {
		return func(s, _ complex128) complex128 {
			y := []complex128{1 / series(s, 4.7e3, 1e-6), 1. / 10e3}
			return y[which] / (y[0] + y[1] + 1./100e3)
		}
	}
	legs := op + "bias = \"soft\"\nr_f = \"22k\"\nc_f = \"100p\"\n" +
		"input = [{ from = \"line\", r = \"10k\" }, { from = \"other\", r = \"4k7\", c = \"1u\" }]\n"
	load := "r_load = \"100k\"\ninput = [{ from = \"line\", r = \"4k7\", c = \"1u\" }, { from = \"other\", r = \"10k\" }]\n"
	return []form{
		{"inverting", from + op + "bias = \"soft\"\nr_in = \"10k\"\nc_in = \"1u\"\nr_f = \"100k\"\nc_f = \"33p\"\n", 0, func(s, e complex128) complex128 {
			ratio := rc(s, 100e3, 33e-12) / series(s, 10e3, 1e-6)
			return inverting(ratio, ratio, e)
		}},
		{"summer", legs, 0, sum(0)},
		{"summer", legs, 1, sum(1)},
		{"non-inverting", from + op + "bias = \"soft\"\nc_in = \"100n\"\nr_bias = \"47k\"\nr_f = \"22k\"\nc_f = \"100p\"\nr_g = \"2k2\"\nc_g = \"10u\"\n", 0, func(s, e complex128) complex128 {
			z := 47e3 + softly(s)
			g := 1 + rc(s, 22e3, 100e-12)/series(s, 2.2e3, 10e-6)
			return z / (z + 1/(s*100e-9)) * g / (1 + e*g)
		}},
		{"non-inverting", from + op + "bias = \"soft\"\nleg = \"bias\"\nr_f = \"22k\"\nr_g = \"2k2\"\n", 0, func(s, e complex128) complex128 {
			g := 1 + 22e3/(2.2e3+softly(s)) // the leg and the bias in one
			return g / (1 + e*g)
		}},
		{"follower", from + op + "bias = \"soft\"\nc_in = \"100n\"\nr_bias = \"47k\"\n", 0, func(s, e complex128) complex128 {
			z := 47e3 + softly(s)
			return z / (z + 1/(s*100e-9)) / (1 + e)
		}},
		{"sallen-key low-pass", from + op + "r_1 = \"10k\"\nr_2 = \"12k\"\nc_1 = \"2n2\"\nc_2 = \"1n1\"\n", 0, func(s, e complex128) complex128 { return lowPass(s, 1+e) }},
		{"sallen-key low-pass", from + op + "bias = \"stiff\"\nr_1 = \"10k\"\nr_2 = \"12k\"\nc_1 = \"2n2\"\nc_2 = \"1n1\"\nr_a = \"20k\"\nr_b = \"10k\"\n", 0,
			func(s, e complex128) complex128 { return lowPass(s, e+1/1.5) }},
		{"sallen-key high-pass", from + op + "bias = \"stiff\"\nc_1 = \"100n\"\nc_2 = \"47n\"\nr_1 = \"15k\"\nr_2 = \"33k\"\n", 0, func(s, e complex128) complex128 {
			const r1, r2, c1, c2 = 15e3, 33e3, 100e-9, 47e-9
			return s * c1 / ((1+e)*((1+1/(s*c2*r2))*(s*c1+s*c2+1/r1)-s*c2) - 1/r1)
		}},
		{"multiple-feedback low-pass", from + op + "bias = \"soft\"\nr_1 = \"10k\"\nr_2 = \"22k\"\nr_3 = \"5k1\"\nc_1 = \"1n\"\nc_2 = \"3n9\"\n", 0, func(s, e complex128) complex128 {
			const r1, r2, r3, c1, c2 = 10e3, 22e3, 5.1e3, 1e-9, 3.9e-9
			m := -e - s*r3*c1*(1+e)
			return 1 / r1 / (m*(1/r1+1/r2+1/r3+s*c2) - 1/r2 + e/r3)
		}},
		{"rc low-pass", from + "r = \"1k\"\nc = \"10n\"\n", 0, func(s, _ complex128) complex128 { return 1 / (1 + s*1e3*10e-9) }},
		{"rc high-pass", from + "c = \"100n\"\nr = \"10k\"\n", 0, func(s, _ complex128) complex128 { return s * 1e-3 / (1 + s*1e-3) }},
		{"rc high-pass", from + "bias = \"soft\"\nto = \"bias\"\nc = \"100n\"\nr = \"10k\"\n", 0, func(s, _ complex128) complex128 {
			z := 10e3 + softly(s)
			return z / (z + 1/(s*100e-9))
		}},
		{"divider", from + "r_top = \"10k\"\nr_bottom = \"4k7\"\nc_top = \"22p\"\nc_bottom = \"47p\"\n", 0, func(s, _ complex128) complex128 {
			top, bottom := rc(s, 10e3, 22e-12), rc(s, 4.7e3, 47e-12)
			return bottom / (top + bottom)
		}},
		{"biased coupling", from + "c = \"1u\"\ntop = \"100k\"\nbottom = \"56k\"\n", 0, func(s, _ complex128) complex128 {
			r := beside(100e3, 56e3)
			return r / (r + 1/(s*1e-6))
		}},
		{"passive sum", load, 0, passive(0)},
		{"passive sum", load, 1, passive(1)},
		{"select", "from = [\"line\", \"other\"]\npick = \"other\"\n", 1, func(_, _ complex128) complex128 { return 1 }},
	}
}

// Every kind of stage, with an ideal amplifier and with one of 1 MHz and 80 dB, against its closed form. The clamp, the
// transfer function and the network have tests of their own.
func TestEveryKindIsItsClosedForm(t *testing.T) {
	seen := map[string]bool{"clamp": true, "transfer function": true, "network": true}
	for i, c := range closedForms() {
		seen[c.kind] = true
		for _, finite := range []bool{false, true} {
			if finite && !strings.Contains(c.keys, "amplifier") {
				continue
			}
			t.Run(fmt.Sprintf("%d %s finite=%v", i, c.kind, finite), func(t *testing.T) {
				data := ""
				if finite {
					data = "gain_bandwidth = \"1MHz\"\nopen_loop_gain = \"80dB\"\n"
				}
				n := stageOf(t, c.kind, c.keys, data)
				same(t, n, SoundInput(c.input), func(s complex128) complex128 {
					e := complex(0, 0)
					if finite {
						e = s/(2*math.Pi*1e6) + 1e-4
					}
					return c.h(s, e)
				})
			})
		}
	}
	for _, k := range chain.Kinds() {
		if !seen[k.Name] {
			t.Errorf("no closed form for %q", k.Name)
		}
	}
}

// A passive stage loads the one before it, and a source its resistance.
func TestPassiveStagesLoadEachOther(t *testing.T) {
	n := parse(t, strings.Replace(start, "[amplifier.one]\nclass = \"ideal\"\n", "", 1)+`source_resistance = "600R"
[[stage]]
name = "first"
kind = "rc low-pass"
from = "line"
r = "1k"
c = "10n"
[[stage]]
name = "it"
kind = "rc low-pass"
from = "first"
r = "2k2"
c = "22n"
`+end)
	same(t, n, SoundInput(0), func(s complex128) complex128 {
		const r1, c1, r2, c2 = 1.6e3, 10e-9, 2.2e3, 22e-9
		return 1 / (1 + s*(r1*c1+r1*c2+r2*c2) + s*s*r1*c1*r2*c2)
	})
}

// printed is half a digit in the last place of the tables below, which have eight decimals of a dB and of a degree, or six.
const (
	printed8 = 0.6e-8
	printed6 = 0.6e-6
)

// filterOf is a chain of one low-pass filter and the amplifier's data.
func filterOf(t *testing.T, kind, data string) *Network {
	parts := "r_1 = \"10k\"\nr_2 = \"10k\"\nc_1 = \"2n2\"\nc_2 = \"1n1\"\n"
	if strings.HasPrefix(kind, "multiple") {
		parts = "bias = \"stiff\"\nr_1 = \"10k\"\nr_2 = \"10k\"\nr_3 = \"5k1\"\nc_1 = \"1n\"\nc_2 = \"3n9\"\n"
	}
	return stageOf(t, kind, "from = \"line\"\namplifier = \"one\"\n"+parts, data)
}

// Second-order low-passes with amplifiers of a finite gain-bandwidth: dB and degrees at 1, 10, 20, 100 kHz and 1 MHz.
// The exact transfer functions H = 1/[(1 + s/ωt)·D0 + s²R1C1/ωt], D0 = 1 + sC2(R1+R2) + s²R1R2C1C2, and, with u = s/ωt,
// H = −(1/R1)/{[u(1+sR3C1)+sR3C1](1/R1+1/R2+1/R3+sC2) + 1/R2 − u/R3}, computed with NumPy 1.24.2 and by a nodal solve.
func TestFiltersWithFiniteGainBandwidth(t *testing.T) {
	for _, row := range []struct {
		kind, gbw string
		want      [10]float64
	}{
		{"sallen-key low-pass", "", [10]float64{-0.00039638, -7.94507641, -2.8165743, -88.15106694, -11.9323441, -135.58368845, -39.60397784, -171.68134428, -79.6035021, -179.17097958}},
		{"sallen-key low-pass", "10MHz", [10]float64{-0.00027752, -7.95091554, -2.81631155, -88.26560239, -11.94106233, -135.75423748, -39.61685468, -172.2654387, -79.65916654, 175.12543665}},
		{"sallen-key low-pass", "1MHz", [10]float64{0.00078826, -8.00347485, -2.815509, -89.29660288, -12.02253187, -137.27349926, -39.77121658, -177.4289381, -82.67752588, 136.23449333}},
		{"sallen-key low-pass", "300kHz", [10]float64{0.00351793, -8.13979939, -2.8265132, -91.96725241, -12.25703326, -141.07395745, -40.44446815, 170.32428687, -90.47227205, 108.28223585}},
		{"sallen-key low-pass", "100kHz", [10]float64{0.01105022, -8.52976118, -2.95976002, -99.49088938, -13.06755323, -150.74026241, -43.31300746, 146.55119876, -99.66183153, 97.35772663}},
		{"multiple-feedback low-pass", "", [10]float64{-0.00202298, 172.71004055, -2.19323908, 99.60458978, -10.42456376, 49.85557727, -37.90344075, 9.29800346, -77.89991894, 0.92614041}},
		{"multiple-feedback low-pass", "10MHz", [10]float64{-0.00192227, 172.69845079, -2.19717171, 99.43240418, -10.44513268, 49.6344773, -37.93078151, 8.70522467, -77.96995968, -4.76893783}},
		{"multiple-feedback low-pass", "1MHz", [10]float64{-0.00103187, 172.59413093, -2.23598393, 97.89015736, -10.63365696, 47.69154039, -38.21231597, 3.54973576, -81.04730516, -43.20450794}},
		{"multiple-feedback low-pass", "300kHz", [10]float64{0.00114284, 172.32357574, -2.36422749, 93.96531129, -11.14482843, 43.03994282, -39.16458868, -8.11110421, -88.81248732, -70.7551908}},
	} {
		data := ""
		if row.gbw != "" {
			data = "gain_bandwidth = \"" + row.gbw + "\"\n"
		}
		n := filterOf(t, row.kind, data)
		for i, f := range []float64{1e3, 1e4, 2e4, 1e5, 1e6} {
			h := n.At(f).Into(n.Output).Input(SoundInput(0))
			if d := Gain(h) - row.want[2*i]; !(math.Abs(d) <= printed8) {
				t.Errorf("%s, %s, %g Hz: %.8f dB, want %.8f", row.kind, row.gbw, f, Gain(h), row.want[2*i])
			}
			if got := cmplx.Phase(h) * 180 / math.Pi; !(math.Abs(got-row.want[2*i+1]) <= printed8) {
				t.Errorf("%s, %s, %g Hz: %.8f°, want %.8f°", row.kind, row.gbw, f, got, row.want[2*i+1])
			}
		}
	}
}

// What a Sallen-Key low-pass lets past its amplifier's output resistance: far out Zo/(R1+Zo). The model is that of
// "Learn the limitations of low-pass Sallen-Key filters" (Electronic Design); the figures from a nodal solve with NumPy.
func TestFilterLeaksThroughOutputResistance(t *testing.T) {
	for _, row := range []struct {
		ro, gbw string
		want    [5]float64 // dB at 10 kHz, 100 kHz, 1 MHz, 10 MHz, 100 MHz
		plateau float64
	}{
		{"10R", "1MHz", [5]float64{-2.815508, -39.782881, -63.047329, -60.061654, -60.0178}, -60.017354},
		{"10R", "10MHz", [5]float64{-2.816311, -39.618041, -76.90554, -63.025259, -60.060521}, -60.017354},
		{"100R", "1MHz", [5]float64{-2.815499, -39.852034, -43.158956, -40.214749, -40.172433}, -40.172003},
		{"100R", "10MHz", [5]float64{-2.816309, -39.628363, -60.02208, -43.103252, -40.213666}, -40.172003},
		{"300R", "1MHz", [5]float64{-2.815479, -39.768737, -33.786093, -31.003264, -30.96409}, -30.963692},
		{"300R", "10MHz", [5]float64{-2.816304, -39.649027, -50.516354, -33.734043, -31.002281}, -30.963692},
	} {
		n := filterOf(t, "sallen-key low-pass", fmt.Sprintf("gain_bandwidth = %q\noutput_resistance = %q\n", row.gbw, row.ro))
		db := func(f float64) float64 { return Gain(n.At(f).Into(n.Output).Input(SoundInput(0))) }
		for i, f := range []float64{1e4, 1e5, 1e6, 1e7, 1e8} {
			if got := db(f); !(math.Abs(got-row.want[i]) <= printed6) {
				t.Errorf("%s, %s, %g Hz: %.6f dB, want %.6f", row.ro, row.gbw, f, got, row.want[i])
			}
		}
		// Two decades above the last the plateau is reached to within the printed digits.
		if got := db(1e11); !(math.Abs(got-row.plateau) <= 1e-5) {
			t.Errorf("%s, %s: plateau %.6f dB, want %.6f", row.ro, row.gbw, got, row.plateau)
		}
	}
}

// Far above its corner a filter with several feedbacks has no such leak.
func TestMultipleFeedbackDoesNotLeak(t *testing.T) {
	n := filterOf(t, "multiple-feedback low-pass", "gain_bandwidth = \"1MHz\"\noutput_resistance = 300\n")
	last := 0.
	for _, f := range []float64{1e5, 1e6, 1e7, 1e8} {
		now := Gain(n.At(f).Into(n.Output).Input(SoundInput(0)))
		if !(now < last-15) {
			t.Errorf("%g Hz: %.1f dB after %.1f dB a decade before", f, now, last)
		}
		last = now
	}
}
