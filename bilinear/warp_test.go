package bilinear

import (
	"math"
	"math/cmplx"
	"testing"
)

// warpTolerance is rounding: of the steps, and of the correlation over a whole number of periods.
const warpTolerance = 1e-10

// A stepped circuit responds at f exactly as the analogue one does at the warped frequency: H_d(f) = H_a((fs/π)·tan(πf/fs)),
// the property that defines the bilinear transform (Oppenheim, Schafer, Discrete-Time Signal Processing, ch. 7). The
// analogue responses are closed forms: 1/(1 + sRC), for the unity-gain Sallen-Key 1/(1 + s·C2(R1+R2) + s²·R1R2C1C2), for an
// inverting stage −Zf/Zin, and for the multiple-feedback low-pass, by Kirchhoff's current law at its two inner nodes,
// −1/(R1R3C1C2) / (s² + s·(1/R1+1/R2+1/R3)/C2 + 1/(R2R3C1C2)).
func TestSteppedCircuitsRespondAtTheWarpedFrequency(t *testing.T) {
	const rate = 48000.
	inf := math.Inf(1)
	for _, c := range []struct {
		name    string
		network Network
		out     int
		h       func(s complex128) complex128
	}{
		{"RC", Network{Nodes: 4, Resistors: []Branch{{2, 3, 10e3}}, Capacitors: []Branch{{3, Ground, 4.7e-9}}, Drives: []int{1, 2}}, 3,
			func(s complex128) complex128 { return 1 / (1 + s*10e3*4.7e-9) }},
		{"Sallen-Key", Network{Nodes: 6, Resistors: []Branch{{2, 3, 8.2e3}, {3, 4, 8.2e3}}, Capacitors: []Branch{{3, 5, 3.3e-9}, {4, Ground, 1.5e-9}}, Drives: []int{1, 2},
			Amplifiers: []Amplifier{{Plus: 4, Minus: 5, Out: 5, GainBandwidth: inf, OpenLoopGain: inf, SlewRate: inf, HighRail: 1, LowRail: Ground, HighMargin: -10, LowMargin: -10}}}, 5,
			func(s complex128) complex128 { return 1 / (1 + s*1.5e-9*16.4e3 + s*s*8.2e3*8.2e3*3.3e-9*1.5e-9) }},
		{"inverting", Network{Nodes: 6, Resistors: []Branch{{3, 4, 10e3}, {4, 5, 33e3}}, Capacitors: []Branch{{2, 3, 100e-9}, {4, 5, 470e-12}}, Drives: []int{1, 2},
			Amplifiers: []Amplifier{{Plus: Ground, Minus: 4, Out: 5, GainBandwidth: inf, OpenLoopGain: inf, SlewRate: inf, HighRail: 1, LowRail: Ground, HighMargin: -10, LowMargin: -10}}}, 5,
			func(s complex128) complex128 { return -1 / (1/complex(33e3, 0) + s*470e-12) / (10e3 + 1/(s*100e-9)) }},
		{"multiple-feedback", Network{Nodes: 6, Resistors: []Branch{{2, 3, 10e3}, {3, 5, 22e3}, {3, 4, 5.6e3}}, Capacitors: []Branch{{4, 5, 470e-12}, {3, Ground, 4.7e-9}}, Drives: []int{1, 2},
			Amplifiers: []Amplifier{{Plus: Ground, Minus: 4, Out: 5, GainBandwidth: inf, OpenLoopGain: inf, SlewRate: inf, HighRail: 1, LowRail: Ground, HighMargin: -10, LowMargin: -10}}}, 5,
			func(s complex128) complex128 {
				const r1, r2, r3, c1, c2 = 10e3, 22e3, 5.6e3, 470e-12, 4.7e-9
				return -1 / (r1 * r3 * c1 * c2) / (s*s + s*(1/r1+1/r2+1/r3)/c2 + 1/(r2*r3*c1*c2))
			}},
	} {
		compiled, err := Compile(c.network, Operating{Volts: make([]float64, c.network.Nodes), Sources: make([]float64, c.network.elements())}, rate, []int{c.out})
		if err != nil {
			t.Fatal(err)
		}
		for _, f := range []float64{100, 1000, 8000, 15000, 22000} { // 4800 steps are whole periods of each
			const settle, n = 4800, 4800
			s, y := compiled.Start(), make([]float64, 1)
			var sum complex128
			for i := range settle + n {
				turn := 2 * math.Pi * f * float64(i) / rate
				if compiled.Step(s, []float64{0, math.Cos(turn)}, y) {
					t.Fatalf("%s: a limit at 1 V", c.name)
				}
				if i >= settle {
					sum += complex(y[0], 0) * cmplx.Exp(complex(0, -turn))
				}
			}
			got, want := sum*complex(2./n, 0), c.h(complex(0, 2*math.Pi*Warped(f, rate)))
			if d := cmplx.Abs(got - want); !(d <= warpTolerance) {
				t.Errorf("%s at %g Hz: %v, want %v (%g apart)", c.name, f, got, want, d)
			}
		}
	}
}

// BenchmarkStep steps two stages of four capacitors and two amplifiers, once below their limits and once 13 dB beyond.
func BenchmarkStep(b *testing.B) {
	circuit := twoStages{rIn: 10e3, cIn: 1e-6, rF: 68e3, cF: 33e-12, r1: 9.1e3, r2: 9.1e3, c1: 2.2e-9, c2: 1e-9,
		ro: 200, gbw: 1e6, gain: 1e5, slew: 0.4e6, low: -0.9, high: 0.8}
	for _, c := range []struct {
		name string
		peak float64 // V
	}{{"unlimited", 0.05}, {"overloaded", 0.525}} {
		b.Run(c.name, func(b *testing.B) {
			n, at := circuit.network()
			compiled, err := Compile(n, at, coarse, []int{8})
			if err != nil {
				b.Fatal(err)
			}
			tones := make([]float64, 3072) // a period of 1 kHz
			for i := range tones {
				tones[i] = c.peak * math.Sin(2*math.Pi*float64(i)/float64(len(tones)))
			}
			s, u, y := compiled.Start(), make([]float64, 2), make([]float64, 1)
			b.ReportAllocs()
			i := 0
			for b.Loop() {
				u[1] = tones[i%len(tones)]
				compiled.Step(s, u, y)
				i++
			}
			b.ReportMetric(float64(i)/coarse/b.Elapsed().Seconds(), "xrealtime")
		})
	}
}
