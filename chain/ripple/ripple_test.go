package ripple

import (
	"math"
	"math/cmplx"
	"os"
	"testing"

	"midrail/chain"
	"midrail/chain/circuit"
)

func find(t *testing.T, path string, set ...string) *Ripple {
	t.Helper()
	data, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	c, err := chain.Read(path, data, set)
	if err != nil {
		t.Fatal(err)
	}
	n := circuit.New(c)
	at, err := n.Rest()
	if err != nil {
		t.Fatal(err)
	}
	return Find(n, at, []float64{20, 100, 1e3, 10e3, 1e6})
}

// Superposition: the paths sum to the total.
func TestPathsSumToTheTotal(t *testing.T) {
	for _, path := range []string{"../../testdata/chains/every-key.toml", "../../testdata/chains/brood-box.toml"} {
		r := find(t, path)
		if apart := r.Apart(); !(apart <= 1e-9) {
			t.Errorf("%s: the paths are %g V a V from the total", path, apart)
		}
		if len(r.Paths) < 3 {
			t.Errorf("%s: only %d paths", path, len(r.Paths))
		}
	}
}

// A capsule fed from the supply without a filter passes nearly all of it to its drain (0 dB less what the input of the
// stage loads), so that the stage's gain is on it; the divider's way is bypassed away. With the filter it is down.
func TestCapsuleFeedIsTheWorstPath(t *testing.T) {
	const chainFile = "../../testdata/chains/brood-box.toml"
	filtered := find(t, chainFile)
	bare := find(t, chainFile, "brood.supply_filter.r=0.01", "brood.supply_filter.c=1p")
	const at1k = 2
	if bare.Paths[0].Name != "brood.supply_filter.r" {
		t.Errorf("the worst path is %s", bare.Paths[0].Name)
	}
	down := 20 * math.Log10(cmplx.Abs(filtered.Paths[0].Gain[at1k])/cmplx.Abs(bare.Paths[0].Gain[at1k]))
	// 1 kΩ and 47 µF are −49.4 dB at 1 kHz, the load's 2.2 kΩ aside.
	if !(down < -45 && down > -55) {
		t.Errorf("the filter takes off %.1f dB", -down)
	}
}

// A network stage may hang anything on the supply: here 10 kΩ and 1 nF into a node with 10 kΩ to ground, of which the paths
// are R/2 each over 1 + s·RC/2.
func TestPartsFromTheSupply(t *testing.T) {
	c, err := chain.Read("test.toml", []byte(`
[supply]
voltage = "5V"
[input.line]
kind = "line"
full_scale = "1Vrms"
[[stage]]
name = "it"
kind = "network"
from = "line"
part = [
  { c = "1p", between = ["in", "out"] }, { r = "10k", between = ["supply", "out"] },
  { c = "1n", between = ["out", "supply"] }, { r = "10k", between = ["out", "ground"] },
]
[converter]
from = "it"
rate = 48000
bits = 12
high = "supply"
`), nil)
	if err != nil {
		t.Fatal(err)
	}
	n := circuit.New(c)
	at, err := n.Rest()
	if err != nil {
		t.Fatal(err)
	}
	const f = 20e3
	r := Find(n, at, []float64{f})
	s := complex(0, 2*math.Pi*f)
	z := 1 / (2e-4 + s*1.001e-9)
	want := map[complex128]bool{1e-4 * z: false, s * 1e-9 * z: false, -0.5: false} // the last is the span's
	for _, p := range r.Paths {
		for w := range want {
			if cmplx.Abs(p.Gain[0]-w) < 1e-12 {
				want[w] = true
			}
		}
	}
	for w, found := range want {
		if !found {
			t.Errorf("no path of %v among %v", w, r.Paths)
		}
	}
	if apart := r.Apart(); !(apart <= 1e-12) || len(r.Paths) != 3 {
		t.Errorf("%d paths, %g V a V from the total", len(r.Paths), apart)
	}
}

// Without a filter the capsule's drain follows the supply but for what the stage's 10 kΩ takes off behind 2.2 kΩ: −1.7 dB;
// the divider's node, bypassed by 10 µF, is 150 kΩ·2π·1 kHz·10 µF = 79.5 dB down.
func TestSupplyAtTheCapsuleAndAtTheDivider(t *testing.T) {
	const path = "../../testdata/chains/brood-box.toml"
	data, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	c, err := chain.Read(path, data, []string{"brood.supply_filter.r=0.01", "brood.supply_filter.c=1p", "half.top=150k", "half.bypass=10u", "brood.load=2k2", "capsule amp.r_in=10k"})
	if err != nil {
		t.Fatal(err)
	}
	n := circuit.New(c)
	h := n.At(1000).FromInput(circuit.SupplyInput)
	for name, want := range map[string]float64{"brood": 20 * math.Log10(10/12.2), "half": -20 * math.Log10(150e3*2*math.Pi*1000*10e-6)} {
		node, _ := n.NodeOf(name)
		// The stage's finite gain and coupling capacitor, and the divider's other half, are in the rest.
		if got := circuit.Gain(h[node]); !(math.Abs(got-want) <= 0.05) {
			t.Errorf("%s: %.3f dB, want %.3f dB", name, got, want)
		}
	}
}
