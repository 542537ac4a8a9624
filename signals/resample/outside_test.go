//go:build outside

package resample

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"math"
	"os/exec"
	"testing"
)

// Tones to 0.9 of half the rate come out as from SoX 14.4.2, rate -v, to −120 dB, at whole ratios: there its pass band is
// flat and it leaves −181 dB beside a tone. At 44.1 to 96 kHz the difference is −80 dB, while TestTones holds ours to
// −120 dB of the tones themselves.
func TestAgainstSoX(t *testing.T) {
	const n = 20000
	for _, r := range [][2]float64{{48000, 96000}, {48000, 192000}, {44100, 352800}} {
		x := *samples(n, func(j int) float64 {
			sum := 0.
			for k := 1; k <= 9; k++ {
				sum += 0.1 * math.Sin(math.Pi*float64(j)*(0.1*float64(k)-0.000037)+float64(k))
			}
			return sum
		})
		var in, out bytes.Buffer
		binary.Write(&in, binary.LittleEndian, []float64(x))
		c := exec.Command("sox", "-t", "f64", "-r", fmt.Sprint(r[0]), "-c", "1", "-", "-t", "f64", "-", "rate", "-v", fmt.Sprint(r[1]))
		c.Stdin, c.Stdout = &in, &out
		if err := c.Run(); err != nil {
			t.Fatal(err)
		}
		want := make([]float64, out.Len()/8)
		binary.Read(&out, binary.LittleEndian, want)
		got := all(t, New(&x, r[0], r[1], PassBand, 0, 0, 0))
		difference, power := 0., 0.
		for k := len(want) / 3; k < 2*len(want)/3; k++ {
			difference += (got[k] - want[k]) * (got[k] - want[k])
			power += want[k] * want[k]
		}
		down := 10 * math.Log10(power/difference)
		t.Logf("%g to %g Hz: the difference is %.1f dB down", r[0], r[1], down)
		if !(down >= 120) {
			t.Errorf("%g to %g Hz: the difference is only %.1f dB down", r[0], r[1], down)
		}
	}
}

// The taps are those of SciPy's kaiserord, kaiser_beta and firwin with as many of them.
func TestLowPassAgainstSciPy(t *testing.T) {
	const rounding = 1e-9 // of SciPy's Bessel function, and of ours
	for _, c := range []struct{ pass, stop, down float64 }{{0.1, 0.15, 40}, {0.125, 0.2, 56}, {0.05, 0.07, 80}, {0.02, 0.3, 30}} {
		got := LowPass(c.pass, c.stop, c.down)
		script := fmt.Sprintf(`
from scipy import signal
import sys, struct
least, beta = signal.kaiserord(%[3]g, 2*(%[2]g-%[1]g))
w = signal.firwin(%[4]d, (%[1]g+%[2]g)/2, window=("kaiser", beta), fs=1.0)
sys.stdout.buffer.write(struct.pack("<d", least) + w.astype("<f8").tobytes())
`, c.pass, c.stop, c.down, len(got))
		out, err := exec.Command("/usr/bin/python3", "-c", script).Output()
		if err != nil {
			t.Fatal(err)
		}
		want := make([]float64, len(out)/8)
		binary.Read(bytes.NewReader(out), binary.LittleEndian, want)
		if least := int(want[0]); len(got) < least || len(got) > least+1 {
			t.Errorf("%+v: %d taps, SciPy %d", c, len(got), least)
		}
		for i, w := range want[1:] {
			if !(math.Abs(got[i]-w) <= rounding) {
				t.Fatalf("%+v: tap %d is %g, SciPy's %g", c, i, got[i], w)
			}
		}
	}
}
