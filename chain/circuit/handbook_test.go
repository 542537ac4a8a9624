package circuit

import (
	"math"
	"os"
	"testing"

	"midrail/chain"
)

func read(t *testing.T, path string, set ...string) *Network {
	t.Helper()
	data, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	c, err := chain.Read(path, data, set)
	if err != nil {
		t.Fatal(err)
	}
	return New(c)
}

// The response of the handbook's circuit with ideal amplifiers, computed from its printed parts by a nodal solve and by
// polynomials; its −3 dB frequency is 49 908.24 Hz. B. Carter, R. Mancini (eds), "Op Amps for Everyone", 5th ed. (2017),
// ch. 16, fig. 16-22. The book names no rail: amplifiers that drive ±2.5 V from one supply do not matter to a response.
func TestHandbookFifthOrderLowPass(t *testing.T) {
	const digits = 1e-7 // dB, of the table
	n := read(t, "../../testdata/chains/handbook-fifth-order.toml")
	for _, r := range []struct{ f, db float64 }{
		{1000, 0.00008238}, {10000, 0.00820892}, {20000, 0.03205125}, {40000, -0.36085835}, {50000, -3.05159672},
		{100000, -30.27930859}, {200000, -60.34923685}, {500000, -100.13437370},
	} {
		if got := Gain(n.At(r.f).Into(n.Output).Input(SoundInput(0))); !(math.Abs(got-r.db) <= digits) {
			t.Errorf("%g Hz: %.8f dB, want %.8f dB", r.f, got, r.db)
		}
	}
	if got := Gain(n.At(49908.24109).Into(n.Output).Input(SoundInput(0))); !(math.Abs(got+10*math.Log10(2)) <= digits) {
		t.Errorf("at its corner: %.8f dB", got)
	}
}

// An adjoint solve says of every source what a direct one says of it.
func TestTransfersAgreeBothWays(t *testing.T) {
	n := read(t, "../../testdata/chains/every-key.toml")
	for _, f := range []float64{1, 100, 3e3, 1e5, 2e7} {
		x := n.At(f)
		into := x.Into(n.Output)
		for u := 0; u <= len(n.Inputs); u++ {
			direct := x.FromInput(u)[n.Output]
			if d := into.Input(u) - direct; !(math.Hypot(real(d), imag(d)) <= 1e-9*math.Hypot(real(direct), imag(direct))+1e-15) {
				t.Errorf("%g Hz, input %d: %v and %v", f, u, into.Input(u), direct)
			}
		}
	}
}

// Every stage kind of package chain has a wiring, and every wiring a kind.
func TestEveryKindIsWired(t *testing.T) {
	kinds := map[string]bool{}
	for _, k := range chain.Kinds() {
		kinds[k.Name] = true
		if wirings[k.Name] == nil {
			t.Errorf("no wiring for %q", k.Name)
		}
	}
	for name := range wirings {
		if !kinds[name] {
			t.Errorf("a wiring for %q, which is no kind", name)
		}
	}
}
