//go:build outside

package circuit

import (
	"encoding/json"
	"fmt"
	"math"
	"math/cmplx"
	"os/exec"
	"testing"
)

// SciPy's frequency response of the handbook filter's transfer function, from its parts, in amplitude and phase.
func TestResponseIsSciPys(t *testing.T) {
	n := read(t, "../../testdata/chains/handbook-fifth-order.toml")
	frequencies := []float64{10, 1e3, 2e4, 5e4, 1.3e5, 1e6}
	list, err := json.Marshal(frequencies)
	if err != nil {
		t.Fatal(err)
	}
	out, err := exec.Command("/usr/bin/python3", "-c", fmt.Sprintf(`
import json, numpy as np
from scipy import signal
w = 2*np.pi*np.array(%s)
h = np.ones(len(w), complex)
for a in ([3.16e3*1e-9, 1], [1.87e3*4.42e3*1.5e-9*820e-12, 820e-12*(1.87e3+4.42e3), 1], [1.47e3*4.53e3*4.7e-9*330e-12, 330e-12*(1.47e3+4.53e3), 1]):
    h *= signal.freqs([1], a, w)[1]
print(json.dumps([[x.real, x.imag] for x in h]))`, list)).Output()
	if err != nil {
		t.Fatalf("python3: %v", err)
	}
	var want [][2]float64
	if err := json.Unmarshal(out, &want); err != nil {
		t.Fatal(err)
	}
	for i, f := range frequencies {
		w := complex(want[i][0], want[i][1])
		got := n.At(f).Into(n.Output).Input(SoundInput(0))
		if d := cmplx.Abs(got-w) / cmplx.Abs(w); !(d <= 1e-9) || math.IsNaN(d) {
			t.Errorf("%g Hz: %v, SciPy %v", f, got, w)
		}
	}
}
