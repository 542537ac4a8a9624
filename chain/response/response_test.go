package response

import (
	"fmt"
	"math"
	"os"
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

func near(t *testing.T, what string, got, want, within float64) {
	t.Helper()
	if !(math.Abs(got-want) <= within) {
		t.Errorf("%s is %.9g, want %.9g", what, got, want)
	}
}

const head = `
[supply]
voltage = "5V"
[amplifier.one]
class = %s
[input.line]
kind = "line"
full_scale = "1Vrms"
`

const tail = `
[converter]
from = "it"
rate = 48000
bits = 12
high = 5
`

// A follower with a capacitor on its output, behind a resistor or none: the output resistance and the load are a pole
// inside the loop. GBW 1 MHz, Ro 150 Ω, 10 nF: pole at 106 kHz, crossover near 0.33 MHz, which leaves 18° of a one-pole
// amplifier (atan arithmetic by hand); a resistor before the capacitor brings back a zero.
func follower(series string) string {
	load := `
[[stage]]
name = "it"
kind = "rc low-pass"
from = "amp"
r = "%s"
c = "10n"
`
	return fmt.Sprintf(head, "\"ideal\"\ngain_bandwidth = \"1MHz\"\noutput_resistance = \"150R\"\nopen_loop_gain = \"100dB\"") + `
[[stage]]
name = "amp"
kind = "follower"
from = "line"
amplifier = "one"
` + fmt.Sprintf(load, series) + tail
}

func TestLoadedFollowerLosesItsMargin(t *testing.T) {
	for _, r := range []struct {
		series string
		want   float64 // by the closed form L = (GBW/jf)·(1 + s·Rs·C)/(1 + s·(Rs + Ro)·C)
	}{{"0.01R", margin(0.01)}, {"22R", margin(22)}, {"100R", margin(100)}, {"1k", margin(1000)}} {
		m := Margins(parse(t, follower(r.series)))
		near(t, "margin behind "+r.series, m[0].Phase, r.want, 0.1)
	}
	if bare, filtered := Margins(parse(t, follower("0.01R")))[0].Phase, Margins(parse(t, follower("1k")))[0].Phase; !(bare < 20 && filtered > Wary) {
		t.Errorf("bare %g°, behind 1 kΩ %g°", bare, filtered)
	}
}

// margin finds the loaded follower's margin by bisection of its closed form.
func margin(rs float64) float64 {
	const gbw, ro, c = 1e6, 150., 10e-9
	gain := func(f float64) float64 {
		w := 2 * math.Pi * f
		return gbw / f * math.Hypot(1, w*rs*c) / math.Hypot(1, w*(rs+ro)*c)
	}
	low, high := 1e3, 1e7
	for range 80 {
		mid := math.Sqrt(low * high)
		if gain(mid) > 1 {
			low = mid
		} else {
			high = mid
		}
	}
	w := 2 * math.Pi * low
	return 90 + (math.Atan(w*rs*c)-math.Atan(w*(rs+ro)*c))*180/math.Pi
}

// A follower has the phase margin that its datasheet gives it, but for the second pole's own pull on the crossover.
func TestDatasheetMargin(t *testing.T) {
	n := parse(t, fmt.Sprintf(head, "\"bipolar audio\"\nphase_margin = 60\noutput_resistance = 0")+`
[[stage]]
name = "it"
kind = "follower"
from = "line"
amplifier = "one"
`+tail)
	near(t, "margin", Margins(n)[0].Phase, 60, 5)
}

// E24 example: 8k2, 8k2, 3n3, 1n5 has f0 = 8723.75941 Hz, Q = 0.74161984871, −3 dB at 9128.8747329 Hz; peak height
// Q/√(1−1/(4Q²)) at f0·√(1−1/(2Q²)); 40 dB a decade far out (common practice, no source).
func TestFiguresOfASallenKey(t *testing.T) {
	n := parse(t, fmt.Sprintf(head, `"ideal"`)+`
[[stage]]
name = "it"
kind = "sallen-key low-pass"
from = "line"
amplifier = "one"
r_1 = "8k2"
r_2 = "8k2"
c_1 = "3n3"
c_2 = "1n5"
`+tail)
	p, err := NewPath(n, "", "")
	if err != nil {
		t.Fatal(err)
	}
	f := p.Figures()
	const q, f0 = 0.74161984871, 8723.75941
	near(t, "corner", f.HighCorner, 9128.8747329, 2)
	near(t, "peak", f.Peak, 20*math.Log10(q/math.Sqrt(1-1/(4*q*q))), 1e-6)
	near(t, "peak's place", f.PeakAt, f0*math.Sqrt(1-1/(2*q*q)), 1)
	near(t, "roll-off", f.RollOff, -40, 0.2)
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
	near(t, "f0", poles[0].Frequency, f0, 1e-4)
	near(t, "Q", poles[0].Q, q, 1e-8)
	if !math.IsNaN(f.LowCorner) {
		t.Errorf("a low corner at %g Hz", f.LowCorner)
	}
}

// Within a state-variable filter one amplifier's loop holds two integrators and begins at −180°: its margin is what is
// left at the crossover, and never more than half a turn.
func TestMarginsOfAStateVariableFilter(t *testing.T) {
	const file = "../../testdata/chains/state-variable.toml"
	text, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	c, err := chain.Read(file, text, nil)
	if err != nil {
		t.Fatal(err)
	}
	margins := Margins(circuit.New(c))
	if len(margins) != 3 {
		t.Fatalf("%d margins, want 3", len(margins))
	}
	for _, m := range margins {
		if !(m.Phase > Wary && m.Phase < 180) {
			t.Errorf("%s: %g°", m.Amplifier, m.Phase)
		}
	}
}

// Group delay of an RC: τ/(1 + (ωτ)²).
func TestGroupDelay(t *testing.T) {
	n := parse(t, "[supply]\nvoltage = \"5V\"\n[input.line]\nkind = \"line\"\nfull_scale = \"1Vrms\"\n[[stage]]\nname = \"it\"\nkind = \"rc low-pass\"\nfrom = \"line\"\nr = \"10k\"\nc = \"10n\"\n"+tail)
	p, err := NewPath(n, "line", "it")
	if err != nil {
		t.Fatal(err)
	}
	for _, x := range p.Points([]float64{10, 1591.5494, 20e3}) {
		w := 2 * math.Pi * x.Frequency * 1e-4
		near(t, "delay", x.Delay, 1e-4/(1+w*w), 1e-11)
	}
	if _, err := NewPath(n, "lime", ""); err == nil {
		t.Error("found an input that is not there")
	}
	if _, err := NewPath(n, "", "its"); err == nil {
		t.Error("found a stage that is not there")
	}
}

// A gain of 5 that is 1 at 0 Hz, (1 + s·5τ)/(1 + s·τ), has its mid-band at 5 and a low corner where its power is half of 25:
// 1 + 25·x² = 12.5·(1 + x²), x = √(11.5/12.5) of 1/(2πτ).
func TestMidBandIsNotTheShelfBelow(t *testing.T) {
	n := parse(t, fmt.Sprintf(head, `"ideal"`)+`
[[stage]]
name = "it"
kind = "non-inverting"
from = "line"
amplifier = "one"
r_f = "8k"
r_g = "2k"
c_g = "10u"
`+tail)
	p, err := NewPath(n, "", "")
	if err != nil {
		t.Fatal(err)
	}
	f := p.Figures()
	near(t, "mid-band", f.MidBand, 20*math.Log10(5), 1e-3)
	want := math.Sqrt(11.5/12.5) / (2 * math.Pi * 2e3 * 10e-6)
	near(t, "low corner", f.LowCorner, want, midBand*want)
}

// A follower of finite gain-bandwidth has one pole, there; the supply's rejection adds none.
func TestFollowerHasOnePole(t *testing.T) {
	n := parse(t, fmt.Sprintf(head, `"ideal"
gain_bandwidth = "1MHz"
supply_rejection = "80dB"
supply_rejection_corner = "100Hz"`)+"[[stage]]\nname = \"it\"\nkind = \"follower\"\nfrom = \"line\"\namplifier = \"one\"\n"+tail)
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
	near(t, "pole", poles[0].Frequency, 1e6, 1e-2)
}
