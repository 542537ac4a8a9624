package bilinear

import (
	"math"
	"testing"
)

// driver is a non-inverting stage of gain 1 + rF/rG whose slow amplifier, with an output resistance, drives an RC low-pass.
// State: e of the amplifier, the capacitor's voltage.
type driver struct {
	rF, rG, ro, r, c float64
	gbw, gain, slew  float64
}

// output solves Kirchhoff's current law at the output: (e−o)/ro = o/(rF+rG) + (o−v)/r.
func (d *driver) output(e, v float64) float64 {
	return (e/d.ro + v/d.r) / (1/d.ro + 1/(d.rF+d.rG) + 1/d.r)
}

func (d *driver) slope(x [2]float64, u float64) [2]float64 {
	o := d.output(x[0], x[1])
	w := 2 * math.Pi * d.gbw
	g := w*(u-o*d.rG/(d.rF+d.rG)) - w/d.gain*x[0]
	return [2]float64{math.Max(-d.slew, math.Min(d.slew, g)), (o - x[1]) / d.r / d.c}
}

func (d *driver) rk4(x [2]float64, u func(s float64) float64, at, step float64) [2]float64 {
	ahead := func(k [2]float64, by float64) [2]float64 { return [2]float64{x[0] + by*k[0], x[1] + by*k[1]} }
	k1 := d.slope(x, u(at))
	k2 := d.slope(ahead(k1, step/2), u(at+step/2))
	k3 := d.slope(ahead(k2, step/2), u(at+step/2))
	k4 := d.slope(ahead(k3, step), u(at+step))
	for i := range x {
		x[i] += step / 6 * (k1[i] + 2*k2[i] + 2*k3[i] + k4[i])
	}
	return x
}

// A driver that slews for most of the time is what a fourth-order Runge-Kutta run of its equations, at a tenth of the step,
// makes it; a finer one moves that by less than 0.1 dB of the difference. A source that slews remembers each instant at which
// it turned, so that errors add up: they start much higher than those of a rail, and are of second order, 12 dB for twice
// the rate and 20 at least for four times. What is allowed at 6 MHz is what was measured there.
func TestSlewingDriverMatchesRungeKutta(t *testing.T) {
	const finer = 10
	d := driver{rF: 22e3, rG: 10e3, ro: 300, r: 1e3, c: 4.7e-9, gbw: 1.5e6, gain: 1e5, slew: 0.08e6}
	n := Network{
		Nodes:      6,
		Resistors:  []Branch{{3, 4, d.rF}, {3, Ground, d.rG}, {4, 5, d.r}},
		Capacitors: []Branch{{5, Ground, d.c}},
		Drives:     []int{1, 2},
		Amplifiers: []Amplifier{{Plus: 2, Minus: 3, Out: 4, GainBandwidth: d.gbw, OpenLoopGain: d.gain, OutputResistance: d.ro, SlewRate: d.slew,
			HighRail: 1, LowRail: Ground, HighMargin: -20, LowMargin: -20}},
	}
	for _, one := range []struct{ rate, f, allowed float64 }{{6e6, 3000, -95}, {24e6, 3000, -115}, {6e6, 9000, -75}, {24e6, 9000, -95}} {
		rate, f := one.rate, one.f
		u := tone(f, 1.5, 1.37*f, 0.5)
		c, err := Compile(n, Operating{Volts: make([]float64, 6), Sources: make([]float64, 1)}, rate, []int{4, 5})
		if err != nil {
			t.Fatal(err)
		}
		s, y, x := c.Start(), make([]float64, 2), [2]float64{}
		var sum, low, high [2]float64
		slewing, steps := 0, int(rate/500)
		for i := range steps {
			if c.Step(s, []float64{0, u(float64(i+1) / rate)}, y) {
				slewing++
			}
			for j := range finer {
				x = d.rk4(x, u, (float64(i)+float64(j)/finer)/rate, 1/rate/finer)
			}
			for k, want := range [...]float64{d.output(x[0], x[1]), x[1]} {
				sum[k] += (y[k] - want) * (y[k] - want)
				low[k], high[k] = math.Min(low[k], want), math.Max(high[k], want)
			}
		}
		if slewing < steps/2 {
			t.Fatalf("%g Hz: only %d of %d steps slew", f, slewing, steps)
		}
		for k := range sum {
			db := 20 * math.Log10(math.Sqrt(sum[k]/float64(steps))/(high[k]-low[k]))
			t.Logf("%g Hz, node %d: %.1f dB of swing", f, 4+k, db)
			if !(db <= one.allowed) {
				t.Errorf("%g Hz, node %d is %.1f dB of swing off, %.0f allowed", f, 4+k, db, one.allowed)
			}
		}
	}
}
