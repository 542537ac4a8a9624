package circuit

import (
	"fmt"
	"math"
	"testing"

	"midrail/bilinear"
)

// filter is a state-variable filter of three amplifiers as its equations, derived by hand, in V about the bias, which
// is stiff: all resistors R but the band-pass's 2R to the feedback node, both integrators R and C.
// State: e of the three amplifiers, whose outputs they are (no output resistance), and (−) − output of both integrators.
type filter struct {
	tau       float64 // s, RC
	w, slew   float64 // rad/s, V/s
	low, high float64 // V
}

func (c *filter) slope(dx, x []float64, in float64) {
	high, band, low := x[0], x[1], x[2]
	first, second := band+x[3], low+x[4]
	limited := func(e, sense float64) float64 {
		g := math.Max(-c.slew, math.Min(c.slew, c.w*sense))
		if e >= c.high && g > 0 || e <= c.low && g < 0 {
			return 0
		}
		return g
	}
	dx[0] = limited(high, band/3-(in+low+high)/3)
	dx[1] = limited(band, -first)
	dx[2] = limited(low, -second)
	// What comes through R charges C from (−) to the output: d((−) − output) = (before − (−))/RC.
	dx[3] = (high - first) / c.tau
	dx[4] = (band - second) / c.tau
}

// advance is one step of the classical Runge-Kutta method (RK4), each source held to its rails.
func (c *filter) advance(x []float64, u func(at float64) float64, at, step float64) {
	const n = 5
	var k [4][n]float64
	var y [n]float64
	c.slope(k[0][:], x, u(at))
	for stage, part := range [...]float64{0.5, 0.5, 1} {
		for i := range n {
			y[i] = x[i] + part*step*k[stage][i]
		}
		c.slope(k[stage+1][:], y[:], u(at+part*step))
	}
	for i := range n {
		x[i] += step / 6 * (k[0][i] + 2*k[1][i] + 2*k[2][i] + k[3][i])
		if i < 3 {
			x[i] = math.Max(c.low, math.Min(c.high, x[i]))
		}
	}
}

// The state-variable filter overloaded, run as the network that the chain file makes of it, against its own equations in
// steps of 5 ns. Its three amplifiers clip on different sides and slew.
func TestOverloadedStateVariableFilterMatchesRungeKutta(t *testing.T) {
	const (
		bias, gbw = 2.5, 1e6
		rate      = 6144e3
		fine      = 33 // steps to one of the network's: 5 ns
	)
	n := parse(t, `
[supply]
voltage = "5V"
[bias.half]
top = "10k"
bottom = "10k"
buffer = "buffer"
[amplifier.buffer]
class = "ideal"
[amplifier.one]
class = "ideal"
gain_bandwidth = "1MHz"
slew_rate = "0.4V/us"
swing_high = "1.5V"
swing_low = "20mV"
[input.mic]
kind = "microphone"
sensitivity = "1V/Pa"
rest = "2.5V"
full_scale = "94dBSPL"
[[stage]]
name = "it"
kind = "network"
from = "mic"
bias = "half"
part = [
  { r = "10k", between = ["in", "sum"] }, { r = "10k", between = ["out", "sum"] }, { r = "10k", between = ["high", "sum"] },
  { r = "20k", between = ["band", "feed"] }, { r = "10k", between = ["feed", "bias"] },
  { r = "10k", between = ["high", "first"] }, { c = "10n", between = ["first", "band"] },
  { r = "10k", between = ["band", "second"] }, { c = "10n", between = ["second", "out"] },
]
amplifier = [
  { use = "one", plus = "feed", minus = "sum", output = "high" },
  { use = "one", plus = "bias", minus = "first", output = "band" },
  { use = "one", plus = "bias", minus = "second", output = "out" },
]
`+end)
	at, err := n.Rest()
	if err != nil {
		t.Fatal(err)
	}
	watch := make([]int, 3)
	for i, name := range [...]string{"it high", "it band", "it"} {
		for k := range n.Nodes {
			if n.Nodes[k] == name {
				watch[i] = k
			}
		}
		if !(math.Abs(at.Volts[watch[i]]-bias) < 1e-9) {
			t.Fatalf("%s rests at %g V", name, at.Volts[watch[i]])
		}
	}
	for _, c := range []struct {
		f, amplitude float64
		allowed      float64 // dB of swing, as for a two-stage chain with the same amplifiers
	}{{1000, 2, -115}, {1600, 1.5, -110}, {5000, 3, -100}} {
		t.Run(fmt.Sprintf("%g Hz, %g V", c.f, c.amplitude), func(t *testing.T) {
			compiled, err := bilinear.Compile(n.Description(), at, rate, watch)
			if err != nil {
				t.Fatal(err)
			}
			by := filter{tau: 1e-4, w: 2 * math.Pi * gbw, slew: 0.4e6, low: 20e-3 - bias, high: 3.5 - bias}
			u := func(s float64) float64 { return c.amplitude * math.Sin(2*math.Pi*c.f*s) }
			state, y, x := compiled.Start(), make([]float64, 3), make([]float64, 5)
			var sum, least, most [3]float64
			touched := 0
			steps := int(3e-3 * rate)
			for i := range steps {
				for k := range fine {
					by.advance(x, u, (float64(i)+float64(k)/fine)/rate, 1/(rate*fine))
				}
				if compiled.Step(state, []float64{0, u(float64(i+1) / rate)}, y) {
					touched++
				}
				for k := range sum {
					sum[k] += (y[k] - x[k]) * (y[k] - x[k])
					least[k], most[k] = math.Min(least[k], x[k]), math.Max(most[k], x[k])
				}
			}
			if touched < steps/10 {
				t.Fatalf("only %d of %d steps were limited", touched, steps)
			}
			for k := range sum {
				db := 20 * math.Log10(math.Sqrt(sum[k]/float64(steps))/(most[k]-least[k]))
				t.Logf("output %d: %.1f dB of swing", k+1, db)
				if !(db <= c.allowed) {
					t.Errorf("output %d is %.1f dB of swing off, %.0f allowed", k+1, db, c.allowed)
				}
			}
		})
	}
}
