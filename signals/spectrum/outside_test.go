//go:build outside

package spectrum

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"os/exec"
	"testing"
)

// The density is that of SciPy's signal.welch for a stream that whole segments fill.
func TestAgainstSciPy(t *testing.T) {
	x := white(5*length/2, 0.1)
	for i, v := range sine(len(x), 0.3, 1234.5, 0) {
		x[i] += v + 0.05
	}
	var in, out, failure bytes.Buffer
	binary.Write(&in, binary.LittleEndian, x)
	c := exec.Command("/usr/bin/python3", "-c", fmt.Sprintf(`
import sys, numpy, scipy.signal
x = numpy.frombuffer(sys.stdin.buffer.read())
f, s = scipy.signal.welch(x, %g, "hann", %d, detrend="constant")
sys.stdout.buffer.write(s.tobytes())
`, rate, length))
	c.Stdin, c.Stdout, c.Stderr = &in, &out, &failure
	if err := c.Run(); err != nil {
		t.Fatal(err, failure.String())
	}
	want := make([]float64, out.Len()/8)
	binary.Read(&out, binary.LittleEndian, want)
	got := density(x).Values
	if len(got) != len(want) {
		t.Fatalf("%d points, want %d", len(got), len(want))
	}
	for k := range want {
		close(t, fmt.Sprint("point ", k), got[k], want[k], 1e-9)
	}
}
