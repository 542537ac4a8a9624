package rest

import (
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"midrail/chain"
	"midrail/chain/circuit"
)

const (
	// solved is rounding in a solve of a dozen unknowns, in V.
	solved = 1e-9
	// stepped is how far a time of settling may lie off its closed form: the start is followed in steps of 1e-4 of the
	// slowest time constant and its supply's rise of a millisecond is cut into them.
	stepped = 2e-3
)

func find(t *testing.T, text string) (*circuit.Network, *Rest) {
	t.Helper()
	c, err := chain.Read("test.toml", []byte(text), nil)
	if err != nil {
		t.Fatal(err)
	}
	n := circuit.New(c)
	r, err := Find(n)
	if err != nil {
		t.Fatal(err)
	}
	return n, r
}

func (r *Rest) node(t *testing.T, name string) Node {
	t.Helper()
	for _, x := range r.Nodes {
		if x.Name == name {
			return x
		}
	}
	t.Fatalf("no node %q", name)
	return Node{}
}

func near(t *testing.T, what string, got, want, within float64) {
	t.Helper()
	if !(math.Abs(got-want) <= within) {
		t.Errorf("%s: %.12g, want %.12g ± %g", what, got, want, within)
	}
}

const (
	supply = "[supply]\nvoltage = \"3.3V\"\n"
	half   = "[bias.half]\ntop = \"100k\"\nbottom = \"100k\"\nbypass = \"10u\"\n"
	ideal  = "[amplifier.one]\nclass = \"ideal\"\n"
	line   = "[input.line]\nkind = \"line\"\nfull_scale = \"1Vrms\"\n"
	other  = "[input.other]\nkind = \"line\"\nfull_scale = \"1Vrms\"\n"
	tail   = "[converter]\nfrom = \"it\"\nrate = 48000\nbits = 10\nhigh = \"3.3V\"\n"
)

// summer has direct-coupled legs, or legs behind capacitors.
func summer(coupling string) string {
	return supply + half + ideal + "swing_high = \"0.1V\"\n" + line + other + `
[[stage]]
name = "it"
kind = "summer"
amplifier = "one"
bias = "half"
r_f = "10k"
input = [{ from = "line", r = "10k"` + coupling + ` }, { from = "other", r = "10k"` + coupling + ` }]
` + tail
}

// Two sources at 0 V ask 1.65·(1 + 10k/5k) = 4.95 V of the output: it stands at its 3.2 V, and (−) at a third of that.
func TestSummerDraggedToItsRail(t *testing.T) {
	_, r := find(t, summer(""))
	it := r.node(t, "it")
	near(t, "output", it.Volts, 3.2, solved)
	near(t, "(−)", r.node(t, "it (−)").Volts, 3.2/3, solved)
	near(t, "upper limit", it.High, 3.2, solved)
	near(t, "lower limit", it.Low, 0, solved)
	if !strings.Contains(it.Word, "upper limit") {
		t.Errorf("it says %q", it.Word)
	}
	if !math.IsInf(r.Settling.Usable, 1) {
		t.Errorf("a stuck chain is said to be usable after %g s", r.Settling.Usable)
	}
}

// Behind capacitors the same summer rests on its bias; each capacitor has it across, its positive side at (−).
func TestSummerBehindCapacitors(t *testing.T) {
	_, r := find(t, summer(`, c = "1u"`))
	it := r.node(t, "it")
	near(t, "output", it.Volts, 1.65, solved)
	if it.Word != "" {
		t.Errorf("it says %q", it.Word)
	}
	if u := r.Settling.Usable; !(u > 0 && u <= r.Settling.LSB) {
		t.Errorf("usable after %g s, within an LSB after %g s", u, r.Settling.LSB)
	}
	across := 0
	for _, c := range r.Capacitors {
		near(t, c.Part.Name, c.Volts, 1.65, solved)
		if strings.HasPrefix(c.Part.Name, "it") {
			across++
			if c.Negative != "line" && c.Negative != "other" {
				t.Errorf("%s: negative at %s, positive at %s", c.Part.Name, c.Negative, c.Positive)
			}
		} else if c.Positive != "half" || c.Negative != "ground" {
			t.Errorf("%s: positive at %s, negative at %s", c.Part.Name, c.Positive, c.Negative)
		}
	}
	if across != 2 {
		t.Errorf("%d capacitors of the summer", across)
	}
	near(t, "supply current", r.Supply, 3.3/200e3, 1e-15)
}

// 1 µA into (+) comes through 470 kΩ and the divider's 50 kΩ: 1.65 V − 0.52 V.
func TestBiasPulledByInputCurrent(t *testing.T) {
	_, r := find(t, supply+half+ideal+"bias_current = \"1uA\"\noffset = \"2mV\"\n"+line+`
[[stage]]
name = "it"
kind = "follower"
from = "line"
amplifier = "one"
bias = "half"
c_in = "100n"
r_bias = "470k"
`+tail)
	near(t, "output", r.node(t, "it").Volts, 1.65-1e-6*520e3+2e-3, solved)
	near(t, "bias", r.node(t, "half").Volts, 1.65-1e-6*50e3, solved)
	if len(r.Shares) != 2 {
		t.Fatalf("shares: %v", r.Shares)
	}
	if s := r.Shares[0]; s.Name != "it (+)" || s.Kind != "bias current" {
		t.Errorf("the largest share is %v", s)
	}
	near(t, "share of the current", r.Shares[0].Volts, -0.52, solved)
	near(t, "share of the offset", r.Shares[1].Volts, 2e-3, solved)
	near(t, "a volt of offset", r.Shares[1].Gain, 1, solved)
}

// An inverting stage of gain −12 has a noise gain of 1 at DC behind a capacitor, of 13 without one; 1 mV and −20 nA through
// 120 kΩ, which lie on (−) and lift the output by 2.4 mV.
func TestOffsetOfAnInvertingStage(t *testing.T) {
	data := "offset = \"1mV\"\nbias_current = \"-20nA\"\n"
	stiff := "[bias.half]\ntop = \"100R\"\nbottom = \"100R\"\nbuffer = \"two\"\n[amplifier.two]\nclass = \"ideal\"\n"
	stage := "[[stage]]\nname = \"it\"\nkind = \"inverting\"\nfrom = \"line\"\namplifier = \"one\"\nbias = \"half\"\nr_in = \"10k\"\nr_f = \"120k\"\n"
	_, r := find(t, supply+stiff+ideal+data+line+stage+"c_in = \"1u\"\n"+tail)
	near(t, "behind a capacitor", r.node(t, "it").Volts, 1.65+1e-3-20e-9*120e3, solved)
	for _, s := range r.Shares {
		if s.Name == "it" && s.Kind == "offset" {
			near(t, "a volt of offset", s.Gain, 1, solved)
		}
	}
	// Without it the source's 0 V counts, too: 13·1.65 V is far beyond the supply.
	_, r = find(t, supply+stiff+ideal+data+line+stage+tail)
	near(t, "without one", r.node(t, "it").Volts, 3.3, solved)
}

// 0.3 mA through 1 kΩ and 2.2 kΩ from 3.3 V: 3.0 V and 2.34 V; the amplifier behind a capacitor at 1.65 V.
func TestCapsuleRests(t *testing.T) {
	_, r := find(t, supply+half+ideal+`
[input.capsule]
kind = "electret"
sensitivity = "-42dBV/Pa"
rated_load = "2k2"
load = "2k2"
current = "0.3mA"
supply_filter = { r = "1k", c = "47u" }
full_scale = "104dBSPL"
[[stage]]
name = "it"
kind = "inverting"
from = "capsule"
amplifier = "one"
bias = "half"
r_in = "10k"
c_in = "1u"
r_f = "47k"
`+tail)
	near(t, "drain", r.node(t, "capsule").Volts, 2.34, solved)
	near(t, "feed", r.node(t, "capsule feed").Volts, 3, solved)
	near(t, "output", r.node(t, "it").Volts, 1.65, solved)
	near(t, "supply current", r.Supply, 0.3e-3+3.3/200e3, 1e-12)
	want := map[string]struct {
		volts    float64
		positive string
	}{"capsule.supply_filter.c": {3, "capsule feed"}, "it.c_in": {0.69, "capsule"}, "half.bypass": {1.65, "half"}}
	for _, c := range r.Capacitors {
		w, known := want[c.Part.Name]
		if !known {
			t.Errorf("a capacitor %s", c.Part.Name)
			continue
		}
		near(t, c.Part.Name, c.Volts, w.volts, solved)
		if c.Positive != w.positive {
			t.Errorf("%s: positive at %s, want %s", c.Part.Name, c.Positive, w.positive)
		}
		delete(want, c.Part.Name)
	}
	for name := range want {
		t.Errorf("no word of %s", name)
	}
}

// Behind 10 kΩ of its own the supply drives 50 kΩ + 50 kΩ with 30 µA.
func TestSupplyCurrentBehindItsResistance(t *testing.T) {
	_, r := find(t, supply+"resistance = \"10k\"\n"+line+"[[stage]]\nname = \"it\"\nkind = \"biased coupling\"\nfrom = \"line\"\nc = \"1u\"\ntop = \"50k\"\nbottom = \"50k\"\n"+tail)
	near(t, "supply current", r.Supply, 30e-6, 1e-15)
	near(t, "supply", r.node(t, "supply").Volts, 3, solved)
	near(t, "output", r.node(t, "it").Volts, 1.5, solved)
}

// A gain of 11 from DC on puts 1.65 V at 18.15 V; with a capacitor in its leg it is 1 at DC.
func TestGainFromDCOn(t *testing.T) {
	stage := "[[stage]]\nname = \"it\"\nkind = \"non-inverting\"\nfrom = \"line\"\namplifier = \"one\"\nbias = \"half\"\n" +
		"c_in = \"100n\"\nr_bias = \"100k\"\nr_f = \"100k\"\nr_g = \"10k\"\n"
	_, r := find(t, supply+half+ideal+line+stage+tail)
	near(t, "without a capacitor", r.node(t, "it").Volts, 3.3, solved)
	if it := r.node(t, "it"); !strings.Contains(it.Word, "upper limit") {
		t.Errorf("it says %q", it.Word)
	}
	_, r = find(t, supply+half+ideal+line+stage+"c_g = \"10u\"\n"+tail)
	near(t, "with one", r.node(t, "it").Volts, 1.65, solved)
}

// A follower of an amplifier whose inputs work to 1.5 V below 3.3 V, biased at 2.2 V, is told of.
func TestInputsOutsideTheirRange(t *testing.T) {
	_, r := find(t, supply+"[bias.high]\ntop = \"10k\"\nbottom = \"20k\"\n"+ideal+"common_mode_high = \"1.5V\"\n"+line+`
[[stage]]
name = "it"
kind = "follower"
from = "line"
amplifier = "one"
bias = "high"
c_in = "100n"
r_bias = "100k"
`+tail)
	near(t, "output", r.node(t, "it").Volts, 2.2, solved)
	if it := r.node(t, "it"); !strings.Contains(it.Word, "common-mode") {
		t.Errorf("it says %q", it.Word)
	}
}

// rcStart is the time at which a low-pass of time constant τ comes within a share of its end, started with a ramp of T:
// its distance is (τ/T)·(e^(T/τ) − 1)·e^(−t/τ) once the ramp is over. Without one it is t = τ·ln(1/share).
func rcStart(tau, share float64) float64 {
	return tau * math.Log(tau/rise*math.Expm1(rise/tau)/share)
}

// A divider with its capacitor settles by (top ∥ bottom)·C.
func TestSettlingOfADivider(t *testing.T) {
	for _, c := range []struct {
		top, bottom, c string
		tau, rest      float64
	}{
		{"100k", "100k", "1u", 50e3 * 1e-6, 1.65},
		{"150k", "56k", "10u", 150e3 * 56e3 / 206e3 * 10e-6, 3.3 * 56 / 206},
		{"10k", "10k", "100n", 5e3 * 100e-9, 1.65},
	} {
		_, r := find(t, supply+line+fmt.Sprintf("[[stage]]\nname = \"it\"\nkind = \"biased coupling\"\nfrom = \"line\"\nc = %q\ntop = %q\nbottom = %q\n", c.c, c.top, c.bottom)+tail)
		near(t, "rest", r.node(t, "it").Volts, c.rest, solved)
		want := rcStart(c.tau, onePercent)
		near(t, "to 1 %", r.Settling.OnePercent, want, stepped*want)
		want = rcStart(c.tau, 3.3/1024/c.rest)
		near(t, "to 1 LSB", r.Settling.LSB, want, stepped*want)
		if c.tau < 1/(2*math.Pi*audible) {
			if len(r.Slow) != 0 {
				t.Errorf("slow: %v", r.Slow)
			}
			continue
		}
		if len(r.Slow) != 1 {
			t.Fatalf("slow: %v", r.Slow)
		}
		near(t, "time constant", r.Slow[0].Constant, c.tau, 1e-6*c.tau)
		near(t, "its part's weight", r.Slow[0].Weight, 1, 1e-6)
		if r.Slow[0].Part.Name != "it.c" {
			t.Errorf("slow by %s", r.Slow[0].Part.Name)
		}
	}
}

// Behind an inverting stage's coupling capacitor, (Rs + R1)·C: the bias is there after the ramp, so the output swings to
// its rail, and comes back as 1.65·10·e^(−t/τ) does.
func TestSettlingBehindACouplingCapacitor(t *testing.T) {
	_, r := find(t, supply+"[bias.half]\ntop = \"100R\"\nbottom = \"100R\"\n"+ideal+line+"source_resistance = \"2k\"\n"+`
[[stage]]
name = "it"
kind = "inverting"
from = "line"
amplifier = "one"
bias = "half"
r_in = "8k"
c_in = "10u"
r_f = "10k"
`+tail)
	// At the rail (−) is let go: the source charges the capacitor through r_in + r_f until the output leaves it. With a
	// gain of 1 the output asks for 2·1.65 V at the ramp's end and touches the rail at most there.
	const tau = 10e3 * 10e-6
	want := rcStart(tau, onePercent)
	near(t, "to 1 %", r.Settling.OnePercent, want, 5*stepped*want)
	if len(r.Slow) != 1 || r.Slow[0].Part.Name != "it.c_in" {
		t.Fatalf("slow: %v", r.Slow)
	}
	near(t, "time constant", r.Slow[0].Constant, tau, 1e-6*tau)
	// A sine of 1 % of full scale, √2·10 mV at the input and as much at the output, has room when the output has come
	// that far from its 3.3 V: 1.65·e^(−t/τ) = 1.65 − 0.0141.
	if u := r.Settling.Usable; !(u >= rise && u < 0.02*tau+2*rise) {
		t.Errorf("usable after %g s", u)
	}
}

// The start-up of each chain of the test data finds the limits of all its amplifiers, capsules and diodes at each step,
// among them a capsule whose drain is still too low and a dozen amplifiers whose rails are not up.
func TestEveryChainStarts(t *testing.T) {
	files, err := filepath.Glob("../../testdata/chains/*.toml")
	if err != nil || len(files) == 0 {
		t.Fatal("no chains", err)
	}
	for _, file := range files {
		text, err := os.ReadFile(file)
		if err != nil {
			t.Fatal(err)
		}
		n, r := find(t, string(text))
		at, err := n.Rest()
		if err != nil {
			t.Fatal(err)
		}
		if s := r.Settling; !(s.OnePercent <= s.LSB) || (s.OnePercent > rise) != (at.Volts[n.Output] != 0) {
			t.Errorf("%s, resting at %g V: %+v", file, at.Volts[n.Output], s)
		}
	}
}
