//go:build outside

package bilinear

import (
	"encoding/json"
	"fmt"
	"math"
	"os/exec"
	"testing"
)

// sciPy runs a Python script and decodes the JSON it prints. Debian's python3-scipy is for the outside checks only.
func sciPy(t *testing.T, script string, into any) {
	t.Helper()
	out, err := exec.Command("/usr/bin/python3", "-c", script).Output()
	if err != nil {
		t.Fatalf("python3: %v", err)
	}
	if err := json.Unmarshal(out, into); err != nil {
		t.Fatal(err)
	}
}

// SciPy's bilinear transform of a Sallen-Key low-pass's transfer function has the impulse response of the same circuit
// with every capacitor replaced by its companion: the two are one transform.
func TestSteppedCircuitIsSciPysBilinear(t *testing.T) {
	const (
		r1, r2, c1, c2 = 8.2e3, 8.2e3, 3.3e-9, 1.5e-9 // 9.1 kHz, Q 0.74, ideal amplifier
		rate           = 48000
		steps          = 200
	)
	var want []float64
	sciPy(t, fmt.Sprintf(`
import json, numpy as np
from scipy import signal
r1, r2, c1, c2, fs = %g, %g, %g, %g, %d
b, a = signal.bilinear([1], [r1*r2*c1*c2, c2*(r1+r2), 1], fs)
x = np.zeros(%d); x[0] = 1
print(json.dumps(list(signal.lfilter(b, a, x))))`, r1, r2, c1, c2, rate, steps), &want)
	inf := math.Inf(1)
	n := Network{Nodes: 6, Resistors: []Branch{{2, 3, r1}, {3, 4, r2}}, Capacitors: []Branch{{3, 5, c1}, {4, Ground, c2}}, Drives: []int{1, 2},
		Amplifiers: []Amplifier{{Plus: 4, Minus: 5, Out: 5, GainBandwidth: inf, OpenLoopGain: inf, SlewRate: inf, HighRail: 1, LowRail: Ground, HighMargin: -10, LowMargin: -10}}}
	c, err := Compile(n, Operating{Volts: make([]float64, 6), Sources: make([]float64, 1)}, rate, []int{5})
	if err != nil {
		t.Fatal(err)
	}
	s, y := c.Start(), make([]float64, 1)
	for i, w := range want {
		u := []float64{0, 0}
		if i == 0 {
			u[1] = 1
		}
		c.Step(s, u, y)
		if !(math.Abs(y[0]-w) <= 1e-12) {
			t.Fatalf("step %d: %.15g, SciPy %.15g", i, y[0], w)
		}
	}
}
