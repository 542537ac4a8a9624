package noise

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"midrail/chain"
	"midrail/chain/circuit"
)

func parse(t *testing.T, text string) *circuit.Network {
	t.Helper()
	c, err := chain.Read("test.toml", []byte(text), nil)
	if err != nil {
		t.Fatal(err)
	}
	return circuit.New(c)
}

func near(t *testing.T, what string, got, want, relative float64) {
	t.Helper()
	if !(math.Abs(got-want) <= relative*math.Abs(want)) {
		t.Errorf("%s is %.10g, want %.10g", what, got, want)
	}
}

// Johnson's √(4kTR) at 300 K (J. B. Johnson, H. Nyquist, 1928); 1 kΩ is printed as 4.07 nV/√Hz. An RC of them all has
// √(kT/C), whatever the resistance.
func TestResistorsAreJohnsons(t *testing.T) {
	for _, r := range []struct {
		ohms    float64
		density float64 // V/√Hz
	}{{50, 0.910158997099e-9}, {1000, 4.07035477569e-9}, {10e3, 12.8715919761e-9}, {100e3, 40.7035477569e-9}, {1e6, 128.715919761e-9}} {
		n := parse(t, fmt.Sprintf(`
[supply]
voltage = "5V"
[conditions]
temperature = "300K"
noise_from = "1mHz"
[input.line]
kind = "line"
full_scale = "1Vrms"
[[stage]]
name = "it"
kind = "rc low-pass"
from = "line"
r = %g
c = "100p"
[converter]
from = "it"
rate = 48000
bits = 16
high = 5
`, r.ohms))
		b := At(n)
		near(t, "density", math.Sqrt(b.Density[0]), r.density, 1e-9)
		// The grid is a hundred points a decade, between which the spectrum is taken for a power law; a corner bends by less
		// than 2e-4 of it. It ends where 1e-6 is left, or at a thousand times the rate.
		if r.ohms >= 1e5 {
			near(t, "kT/C", math.Sqrt(b.Power), 6.43579598807e-6, 1e-3)
		}
		folded := 0.
		for i := 1; i < len(b.Folded); i++ {
			folded += (b.Folded[i-1] + b.Folded[i]) / 2 * b.Step
		}
		if r.ohms >= 1e5 {
			near(t, "what folding leaves in the band", folded, b.Power, 2e-3)
		}
	}
}

// Equivalent noise bandwidth of N cascaded sections and of Butterworth filters, here by a transfer function without noise
// of its own on a resistor's: B/f3 = (π/2n)/sin(π/2n), printed 1.570796, 1.110721, 1.047198, 1.026172.
func TestBandwidthOfButterworth(t *testing.T) {
	w := 2 * math.Pi * 1000
	for order, denominator := range map[int]string{
		2: fmt.Sprintf("[%g, %g, 1]", 1/(w*w), math.Sqrt2/w),
		4: fmt.Sprintf("[%g, %g, %g, %g, 1]", 1/(w*w*w*w), 2.613125929752753/(w*w*w), 3.414213562373095/(w*w), 2.613125929752753/w),
	} {
		n := parse(t, fmt.Sprintf(`
[supply]
voltage = "5V"
[conditions]
temperature = "300K"
noise_from = "1mHz"
[amplifier.one]
class = "ideal"
[input.line]
kind = "line"
full_scale = "1Vrms"
source_resistance = "10k"
[[stage]]
name = "it"
kind = "transfer function"
from = "line"
amplifier = "one"
numerator = [1]
denominator = %s
[converter]
from = "it"
rate = 48000
bits = 16
high = 5
`, denominator))
		want := map[int]float64{2: 1.11072073453959, 4: 1.02617215297703}[order]
		b := At(n)
		near(t, fmt.Sprintf("bandwidth of order %d", order), b.Power/b.Density[0]/1000, want, 1e-3)
	}
}

// 1/f noise integrates to en·√((fH−fL) + fc·ln(fH/fL)); here up to what an RC low-pass lets through.
func TestFlickerIntegral(t *testing.T) {
	const en, fc, fl, fh = 1e-8, 100., 20., 20e3
	grid, density := []float64{}, []float64{}
	for x := 0; x <= 300; x++ {
		f := fl * math.Pow(fh/fl, float64(x)/300)
		grid, density = append(grid, f), append(density, en*en*(1+fc/f))
	}
	near(t, "flicker", math.Sqrt(integral(grid, density)), 1.43773347766e-6, 1e-6)
}

// The inverting stage at 300 K: Eo² = (en·G)² + m·4kTR1(R2/R1)² + 4kTR2 + (in·R2)² + 4kTRp·G² + (in·Rp·G)², G = 1 + m·R2/R1
// (Op Amp Applications Handbook, W. Jung ed., ch. 1, from memory), at mid-band.
func TestInvertingStage(t *testing.T) {
	for _, r := range []struct {
		r1, r2, en, in, rp float64
		total              float64 // V/√Hz
	}{
		{10e3, 100e3, 10e-9, 1e-12, 0, 200.80977765e-9},
		{2200, 100e3, 5e-9, 0.4e-12, 5000, 565.611272394e-9},
	} {
		bias := "[bias.half]\ntop = \"10k\"\nbottom = \"10k\"\nbypass = \"1\"\nbuffer = \"quiet\"\n[amplifier.quiet]\nclass = \"ideal\"\n"
		if r.rp > 0 {
			// A divider of 2·Rp each is Rp.
			bias = fmt.Sprintf("[bias.half]\ntop = %g\nbottom = %g\n", 2*r.rp, 2*r.rp)
		}
		n := parse(t, fmt.Sprintf(`
[supply]
voltage = "5V"
[conditions]
temperature = "300K"
%s
[amplifier.one]
class = "ideal"
noise_voltage = %g
noise_current = %g
[input.line]
kind = "line"
full_scale = "1Vrms"
[[stage]]
name = "it"
kind = "inverting"
from = "line"
amplifier = "one"
bias = "half"
r_in = %g
r_f = %g
[converter]
from = "it"
rate = 48000
bits = 16
high = 5
`, bias, r.en, r.in, r.r1, r.r2))
		b := At(n)
		near(t, "density", math.Sqrt(b.Density[len(b.Density)/4]), r.total, 1e-9)
	}
}

// The capsule's self-noise comes back as the equivalent input noise where nothing else makes any, and folding adds none.
func TestSelfNoiseComesBack(t *testing.T) {
	n := parse(t, `
[supply]
voltage = "5V"
[amplifier.one]
class = "ideal"
[input.mic]
kind = "microphone"
sensitivity = "10mV/Pa"
rest = "1V"
full_scale = "120dBSPL"
self_noise = "30dBSPL"
[[stage]]
name = "it"
kind = "transfer function"
from = "mic"
amplifier = "one"
numerator = [1]
denominator = [4e-11, 9e-6, 1]
[converter]
from = "it"
rate = 200000
bits = 16
high = 5
`)
	f := At(n).Figures(n)
	// A second-order corner at 25 kHz takes a little of the band's top and lets a little beyond it in.
	if got := f.Inputs[0].Value; !(math.Abs(got-30) <= 0.1) || f.Inputs[0].Unit != "dB SPL(A)" {
		t.Errorf("equivalent input noise %.3f %s, want 30 dB SPL(A)", got, f.Inputs[0].Unit)
	}
}

// Where resistors make all the noise, a third of them makes a third of the power: 4.77 dB less. A source's resistance in
// front of it makes that less gain, too, and no help.
func TestBestChangeIsTried(t *testing.T) {
	text := `
[supply]
voltage = "5V"
[bias.half]
top = "10k"
bottom = "10k"
bypass = "1m"
buffer = "one"
[amplifier.one]
class = "ideal"
[input.line]
kind = "line"
full_scale = "1Vrms"
source_resistance = %q
[[stage]]
name = "it"
kind = "inverting"
from = "line"
amplifier = "one"
bias = "half"
r_in = "1M"
c_f = "100p"
r_f = "1M"
[converter]
from = "it"
rate = 48000
bits = 24
high = 5
`
	best := Best(parse(t, fmt.Sprintf(text, "0R")))
	near(t, "gain", best.Gain, 10*math.Log10(3), 1e-3)
	if !strings.Contains(best.Words, "resistors of it") {
		t.Errorf("it says %q", best.Words)
	}
	// Output noise is 4kT·r_f·(1 + g) with g = r_f/(Rs + r_in); with g² it is 1·1.5/0.25 = 6 before, and with a third of
	// both resistors (1/3)·1.25/0.0625 = 6.7: less noise, and still less gain.
	best = Best(parse(t, fmt.Sprintf(text, "1M")))
	if strings.Contains(best.Words, "resistors of it") {
		t.Errorf("behind 1 MΩ it says %q, %g dB", best.Words, best.Gain)
	}
}
