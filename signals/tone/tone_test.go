package tone

import (
	"math"
	"midrail/signals"
	"testing"
)

func TestDemoPeak(t *testing.T) {
	x, _ := signals.ReadAll(signals.Channels(Demo(), 1)[0])
	for s := 0; s < 20; s++ {
		p, e := 0., 0.
		for _, v := range x[s*48000 : (s+1)*48000] {
			p = math.Max(p, math.Abs(v))
			e += v * v
		}
		t.Logf("%2d s: peak %.3f rms %.1f dBFS", s, p, 10*math.Log10(2*e/48000))
	}
}
