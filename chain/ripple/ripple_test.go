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
