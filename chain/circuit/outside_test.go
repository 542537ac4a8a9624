//go:build outside

package circuit

import (
	"encoding/json"
	"fmt"
	"math/cmplx"
	"os/exec"
	"strings"
	"testing"
)

// scipy returns SciPy's responses, polynomials in s told in Python as lists (b, a), at frequencies in Hz.
func scipy(t *testing.T, frequencies []float64, filters []string) [][]complex128 {
	t.Helper()
	list, err := json.Marshal(frequencies)
	if err != nil {
		t.Fatal(err)
	}
	out, err := exec.Command("/usr/bin/python3", "-c", fmt.Sprintf(`
import json, numpy as np
from scipy import signal
w = 2*np.pi*np.array(%s)
def chain(*sections):
    b, a = np.ones(1), np.ones(1)
    for s in sections:
        b, a = np.polymul(b, s[0]), np.polymul(a, s[1])
    return b, a
print(json.dumps([[[x.real, x.imag] for x in signal.freqs(b, a, w)[1]] for b, a in [%s]]))`, list, strings.Join(filters, ",\n"))).Output()
	if err != nil {
		t.Fatalf("python3: %v", err)
	}
	var parts [][][2]float64
	if err := json.Unmarshal(out, &parts); err != nil {
		t.Fatal(err)
	}
	h := make([][]complex128, len(parts))
	for i := range parts {
		for _, x := range parts[i] {
			h[i] = append(h[i], complex(x[0], x[1]))
		}
	}
	return h
}

// Circuits of ideal amplifiers against SciPy's response of their polynomials, or of the filter that they were designed to
// be: the handbook's fifth-order low-pass, and one of each kind of stage.
func TestResponsesAreSciPys(t *testing.T) {
	frequencies := []float64{10, 100, 1e3, 5e3, 2e4, 5e4, 1.3e5, 1e6}
	const op = "from = \"line\"\namplifier = \"one\"\n"
	circuits := []struct{ name, kind, keys, filter string }{
		{"handbook", "", "", `chain(([1], [3.16e3*1e-9, 1]), ([1], [1.87e3*4.42e3*1.5e-9*820e-12, 820e-12*(1.87e3+4.42e3), 1]),
			([1], [1.47e3*4.53e3*4.7e-9*330e-12, 330e-12*(1.47e3+4.53e3), 1]))`},
		{"Butterworth of equal resistors", "sallen-key low-pass", op + "r_1 = \"10k\"\nr_2 = \"10k\"\nc_1 = \"2n2\"\nc_2 = \"1n1\"\n",
			`signal.butter(2, 1/np.sqrt(1e8*2.2e-9*1.1e-9), analog=True)`},
		{"Butterworth of 1 kHz", "multiple-feedback low-pass", op + "bias = \"stiff\"\nr_1 = 6910.79999241\nr_2 = 6910.79999241\nr_3 = 7798.55395576\nc_1 = \"10n\"\nc_2 = \"47n\"\n",
			`(lambda f: (-f[0], f[1]))(signal.butter(2, 2*np.pi*1e3, analog=True))`},
		{"low-pass with gain", "sallen-key low-pass", op + "bias = \"stiff\"\nr_1 = \"10k\"\nr_2 = \"10k\"\nc_1 = \"39n\"\nc_2 = \"102n\"\nr_a = \"5k\"\nr_b = \"20k\"\n",
			`([5], [1e8*39e-9*102e-9, 102e-9*20e3 - 4*1e4*39e-9, 1])`},
		{"high-pass", "sallen-key high-pass", op + "bias = \"stiff\"\nc_1 = \"100n\"\nc_2 = \"47n\"\nr_1 = \"15k\"\nr_2 = \"33k\"\n",
			`([15e3*33e3*100e-9*47e-9, 0, 0], [15e3*33e3*100e-9*47e-9, 15e3*147e-9, 1])`},
		{"inverting", "inverting", op + "bias = \"stiff\"\nr_in = \"10k\"\nc_in = \"1u\"\nr_f = \"120k\"\nc_f = \"33p\"\n",
			`chain(([-120e3*1e-6, 0], [10e3*1e-6, 1]), ([1], [120e3*33e-12, 1]))`},
		{"non-inverting", "non-inverting", op + "r_f = \"22k\"\nr_g = \"2k2\"\nc_g = \"10u\"\n",
			`([24.2e3*10e-6, 1], [2.2e3*10e-6, 1])`},
		{"follower", "follower", op + "bias = \"stiff\"\nc_in = \"100n\"\nr_bias = \"47k\"\n", `([47e3*100e-9, 0], [47e3*100e-9, 1])`},
		{"biased coupling", "biased coupling", "from = \"line\"\nc = \"1u\"\ntop = \"100k\"\nbottom = \"100k\"\n", `([0.05, 0], [0.05, 1])`},
		{"divider", "divider", "from = \"line\"\nr_top = \"10k\"\nr_bottom = \"5k\"\nc_top = \"100p\"\nc_bottom = \"200p\"\n", `([1/3], [1])`},
		{"passive sum", "passive sum", "input = [{ from = \"line\", r = \"4k7\", c = \"1u\" }]\nr_load = \"10k\"\n", `([10e3*1e-6, 0], [14.7e3*1e-6, 1])`},
		{"transfer function", "transfer function", op + "numerator = [2e-9, 0, 0.5]\ndenominator = [1e-13, 3e-9, 4e-5, 1]\n", `([2e-9, 0, 0.5], [1e-13, 3e-9, 4e-5, 1])`},
	}
	var filters []string
	for _, c := range circuits {
		filters = append(filters, c.filter)
	}
	want := scipy(t, frequencies, filters)
	for k, c := range circuits {
		n := read(t, "../../testdata/chains/handbook-fifth-order.toml")
		if c.kind != "" {
			n = stageOf(t, c.kind, c.keys, "")
		}
		// The Butterworth's printed parts have twelve digits; rounding apart all else is exact.
		allowed := exactly
		if c.name == "Butterworth of 1 kHz" {
			allowed = 1e-9 * 10
		}
		for i, f := range frequencies {
			got := n.At(f).Into(n.Output).Input(SoundInput(0))
			if d := cmplx.Abs(got-want[k][i]) / cmplx.Abs(want[k][i]); !(d <= allowed) {
				t.Errorf("%s, %g Hz: %v, SciPy %v", c.name, f, got, want[k][i])
			}
		}
	}
}
