package render

import (
	"context"
	"fmt"
	"io"
	"math"
	"math/cmplx"
	"math/rand/v2"
	"runtime"
	"strings"
	"testing"

	"midrail/chain"
	"midrail/chain/circuit"
	"midrail/chain/noise"
	"midrail/signals"
	"midrail/signals/tone"
)

// sound is everything a run gave.
type sound struct {
	result *Result
	layers [LayerCount][]float64
	folded []float64
	heard  []float64
	codes  []int32
}

func renderAll(tb testing.TB, n *circuit.Network, o Options, tracks ...signals.Track) *sound {
	tb.Helper()
	feeds := make([]Feed, len(n.Inputs))
	for i, t := range tracks {
		feeds[i] = Feed{Sound: signals.Channels(t, 1)[0], Rate: t.Rate()}
	}
	s := &sound{}
	var err error
	s.result, err = Run(context.Background(), n, feeds, o, func(b *Block) error {
		if b.First != int64(len(s.codes)) {
			return fmt.Errorf("block begins at %d, not %d", b.First, len(s.codes))
		}
		for i, l := range b.Layers {
			s.layers[i] = append(s.layers[i], l...)
		}
		s.folded = append(s.folded, b.Folded...)
		s.heard = append(s.heard, b.Heard...)
		s.codes = append(s.codes, b.Codes...)
		return nil
	})
	if err != nil {
		tb.Fatal(err)
	}
	return s
}

func parse(tb testing.TB, text string, set ...string) *circuit.Network {
	tb.Helper()
	c, err := chain.Read("test.toml", []byte(text), set)
	if err != nil {
		tb.Fatal(err)
	}
	return circuit.New(c)
}

// lineChain is a line input into an inverting stage of gain −1 and a Sallen-Key low-pass at 15 kHz.
const lineChain = `
[supply]
voltage = "5V"
[bias.half]
top = "22k"
bottom = "22k"
bypass = "10u"
[amplifier.one]
class = "cmos rail-to-rail"
[input.line]
kind = "line"
full_scale = "1Vrms"
[[stage]]
name = "amp"
kind = "inverting"
from = "line"
amplifier = "one"
bias = "half"
c_in = "1u"
r_in = "10k"
r_f = "10k"
[[stage]]
name = "filter"
kind = "sallen-key low-pass"
from = "amp"
amplifier = "one"
r_1 = "6k8"
r_2 = "6k8"
c_1 = "2n2"
c_2 = "1n"
[converter]
from = "filter"
rate = 16000
bits = 12
low = 0
high = 5
`

// fit returns the amplitude of the sine at f in x, whose samples are 1/rate apart, as a complex number, and the RMS of
// what is left of x. The first skip samples and the last half as many, where the sound begins and ends, do not count.
func fit(x []float64, f, rate float64, skip int) (complex128, float64) {
	x = x[:len(x)-skip/2]
	// Least squares over sine, cosine and a constant.
	var m [3][4]float64
	for i, v := range x[skip:] {
		w := 2 * math.Pi * f * float64(i+skip) / rate
		row := [4]float64{math.Cos(w), math.Sin(w), 1, v}
		for a := range 3 {
			for b := range 4 {
				m[a][b] += row[a] * row[b]
			}
		}
	}
	for c := range 3 {
		for r := c + 1; r < 3; r++ {
			k := m[r][c] / m[c][c]
			for j := c; j < 4; j++ {
				m[r][j] -= k * m[c][j]
			}
		}
	}
	var p [3]float64
	for c := 2; c >= 0; c-- {
		p[c] = m[c][3]
		for j := c + 1; j < 3; j++ {
			p[c] -= m[c][j] * p[j]
		}
		p[c] /= m[c][c]
	}
	rest := 0.
	for i, v := range x[skip:] {
		w := 2 * math.Pi * f * float64(i+skip) / rate
		d := v - p[0]*math.Cos(w) - p[1]*math.Sin(w) - p[2]
		rest += d * d
	}
	return complex(p[1], p[0]), math.Sqrt(rest / float64(len(x)-skip))
}

// expected returns the complex amplitude in full scale that a full-scale sine has at the converter.
func expected(n *circuit.Network, r *Result, f float64) complex128 {
	return n.At(f).Into(n.Output).Input(circuit.SoundInput(0)) * complex(n.Inputs[0].Scale/r.Span.Unit(), 0)
}

// linearTolerance is what a run promises of its stepped response, in dB, and interpolation's ripple with it.
const linearTolerance = accuracy + 0.001

func TestTonesBelowHalfTheRateComeOutAsTheCircuitResponds(t *testing.T) {
	n := parse(t, lineChain)
	for _, f := range []float64{50, 440, 1000, 3000.5, 7000} {
		s := renderAll(t, n, Options{}, tone.Sine(48000, 0.6, f, -6))
		got, rest := fit(s.layers[Wanted], f, 16000, 3200)
		want := expected(n, s.result, f) * complex(math.Pow(10, -6./20), 0)
		if db := 20 * math.Log10(cmplx.Abs(got)/cmplx.Abs(want)); !(math.Abs(db) <= linearTolerance) {
			t.Errorf("%g Hz is %.4f dB off", f, db)
		}
		// A phase error of 1e-3 rad is what warping leaves at most here.
		if d := cmplx.Phase(got / want); !(math.Abs(d) <= 2e-3) {
			t.Errorf("%g Hz is %.2g rad off", f, d)
		}
		if !(rest < 1e-6) {
			t.Errorf("%g Hz leaves %.3g beside the tone", f, rest)
		}
		// The split lets no more than −120 dB through to the other side.
		if fold, _ := fit(s.layers[FoldBack], f, 16000, 3200); !(cmplx.Abs(fold) < 1e-6) {
			t.Errorf("%g Hz: %.3g of it in fold-back", f, cmplx.Abs(fold))
		}
	}
}

// Where a tone folds to: r = f mod fs, fs − r beyond half of it (sampling theorem).
func TestTonesAboveHalfTheRateFold(t *testing.T) {
	n := parse(t, lineChain)
	for _, c := range []struct{ f, folds float64 }{{9000, 7000}, {15000, 1000}, {21000, 5000}, {17000, 1000}, {12345, 3655}} {
		s := renderAll(t, n, Options{}, tone.Sine(48000, 0.6, c.f, -6))
		got, rest := fit(s.layers[FoldBack], c.folds, 16000, 3200)
		want := cmplx.Abs(expected(n, s.result, c.f)) * math.Pow(10, -6./20)
		if db := 20 * math.Log10(cmplx.Abs(got)/want); !(math.Abs(db) <= linearTolerance) {
			t.Errorf("%g Hz at %g Hz is %.4f dB off", c.f, c.folds, db)
		}
		if !(rest < 1e-6) {
			t.Errorf("%g Hz leaves %.3g beside its image", c.f, rest)
		}
		if wanted, _ := fit(s.layers[Wanted], c.folds, 16000, 3200); !(cmplx.Abs(wanted) < 1e-6) {
			t.Errorf("%g Hz: %.3g of it in wanted", c.f, cmplx.Abs(wanted))
		}
	}
}

// A converter far slower than the track takes its samples where they belong, too.
func TestSlowConverter(t *testing.T) {
	n := parse(t, lineChain, "converter.rate=700")
	s := renderAll(t, n, Options{}, tone.Sine(96000, 2, 150, -6))
	if s.result.Plan.Instants < 2 || len(s.codes) != 1400 {
		t.Fatalf("%d instants a conversion, %d conversions", s.result.Plan.Instants, len(s.codes))
	}
	got, rest := fit(s.layers[Wanted], 150, 700, 300)
	want := expected(n, s.result, 150) * complex(math.Pow(10, -6./20), 0)
	if d := cmplx.Abs(got/want - 1); !(d <= 1e-3) || !(rest < 1e-6) {
		t.Errorf("%v, want %v; %.3g left", got, want, rest)
	}
}

// hostile are sounds that try the places where limits are looked for.
func hostile(rate float64) map[string]signals.Track {
	draw := rand.New(rand.NewPCG(7, 7))
	make1 := func(f func(i int) float64) signals.Track {
		x := make([]float64, int(0.06*rate))
		for i := range x {
			x[i] = f(i)
		}
		return &sliceTrack{rate: rate, x: x}
	}
	envelope := func(i int) float64 { return 0.5 + 0.5*math.Sin(2*math.Pi*3*float64(i)/rate) }
	return map[string]signals.Track{
		"white":  make1(func(int) float64 { return 0.3 * draw.NormFloat64() }),
		"square": make1(func(i int) float64 { return math.Copysign(0.9*envelope(i), math.Sin(2*math.Pi*313*float64(i)/rate)) }),
		"clicks and bursts": make1(func(i int) float64 {
			v := 0.
			if i%701 == 0 {
				v = 0.99
			}
			if i/900%3 == 1 {
				v += 0.7 * math.Sin(2*math.Pi*0.4375*float64(i))
			}
			return v
		}),
		"speech-like": make1(func(i int) float64 {
			w := 2 * math.Pi * 140 * float64(i) / rate
			return envelope(i) * envelope(i) * (0.5*math.Sin(w) + 0.3*math.Sin(3*w+1) + 0.2*math.Sin(9*w+2) + 0.1*draw.NormFloat64())
		}),
	}
}

type sliceTrack struct {
	rate float64
	x    []float64
	at   int
}

func (s *sliceTrack) Rate() float64 { return s.rate }
func (s *sliceTrack) Channels() int { return 1 }
func (s *sliceTrack) Frames() int64 { return int64(len(s.x)) }
func (s *sliceTrack) Close() error  { return nil }
func (s *sliceTrack) ReadFrames(dst []float64) (int, error) {
	n := copy(dst, s.x[s.at:])
	s.at += n
	if n < len(dst) {
		return n, io.EOF
	}
	return n, nil
}

// fastTolerance is how far the lifted passages may lie from stepping every step, in V.
const fastTolerance = 1e-12

func TestLiftedPassagesAreTheSteppedOnes(t *testing.T) {
	type fastCase struct {
		name string
		n    *circuit.Network
		rate float64
	}
	line := func(name, more string, rate float64, set ...string) fastCase {
		return fastCase{name, parse(t, lineChain+more, set...), rate}
	}
	file := func(path string, rate float64, set ...string) fastCase {
		return fastCase{path, network(t, path, set...), rate}
	}
	const chains = "../../testdata/chains/"
	for _, c := range []fastCase{
		line("line, loud", "", 48000, "amp.r_f=47k"),
		line("line, on the verge", "", 48000, "amp.r_f=18k"),
		line("line, soft", "", 48000, "amp.r_f=4k7"),
		line("slow amplifiers", "", 48000, "one.slew_rate=0.03V/us", "amp.r_f=22k"),
		line("44.1 kHz into 9615.38 Hz", "", 44100, "converter.rate=9615.38", "amp.r_f=33k"),
		line("into 96 kHz", "", 48000, "converter.rate=96k", "amp.r_f=33k"),
		line("a tone far above the tracks", "[[interferer]]\ninto = \"line\"\nfrequency = \"300k\"\nlevel = \"0.1Vrms\"\n", 48000, "amp.r_f=27k"),
		line("supply ripple", "[[interferer]]\ninto = \"supply\"\nfrequency = 700\nlevel = \"0.4Vpp\"\nshape = \"square\"\n[[interferer]]\ninto = \"line\"\nfrequency = \"300k\"\nlevel = \"0.1Vrms\"\n", 48000, "amp.r_f=27k"),
		line("squares at the supply and at the input", "[[interferer]]\ninto = \"supply\"\nfrequency = 7100\nlevel = \"0.3Vpp\"\nshape = \"square\"\n[[interferer]]\ninto = \"line\"\nfrequency = 450\nlevel = \"0.3Vpp\"\nshape = \"square\"\n", 48000, "amp.r_f=27k"),
		file("../../cmd/command/demo/brood-box.toml", 48000),
		file("../../cmd/command/demo/brood-box.toml", 44100, "capsule amp.r_f=4M7"),
		file(chains+"state-variable.toml", 48000),
		file(chains+"handbook-fifth-order.toml", 96000),
		file(chains+"every-key.toml", 48000),
	} {
		for name, track := range hostile(c.rate) {
			if strings.HasSuffix(c.name, ".toml") && name != "white" && name != "clicks and bursts" {
				continue // a plain run of a large chain takes its time
			}
			tracks := make([]signals.Track, len(c.n.Inputs))
			for i := range tracks {
				tracks[i] = &sliceTrack{rate: c.rate, x: track.(*sliceTrack).x}
			}
			run := func(plain bool) *sound {
				for _, one := range tracks {
					one.(*sliceTrack).at = 0
				}
				return renderAll(t, c.n, Options{plain: plain}, tracks...)
			}
			fast, plain := run(false), run(true)
			unit := fast.result.Span.Unit()
			if len(fast.codes) != len(plain.codes) {
				t.Fatalf("%s, %s: %d conversions, stepped %d", c.name, name, len(fast.codes), len(plain.codes))
			}
			for l := range fast.layers {
				for i, v := range fast.layers[l] {
					if !(math.Abs(v-plain.layers[l][i])*unit <= fastTolerance) {
						t.Fatalf("%s, %s: %v differs by %.3g V at %d", c.name, name, Layer(l), (v-plain.layers[l][i])*unit, i)
					}
				}
			}
			if fast.result.Overloaded != plain.result.Overloaded {
				t.Errorf("%s, %s: %g s overloaded, stepped %g s", c.name, name, fast.result.Overloaded, plain.result.Overloaded)
			}
		}
	}
}

func TestLayersSumToHeard(t *testing.T) {
	n := parse(t, lineChain+"[[interferer]]\ninto = \"supply\"\nfrequency = 1300\nlevel = \"0.1Vpp\"\n", "amp.r_f=33k", "converter.high=supply", "converter.jitter=10ns")
	for name, track := range hostile(48000) {
		s := renderAll(t, n, Options{Noise: noise.At(n), Seed: 3}, track)
		half := s.result.Span.step() / 2
		for i, heard := range s.heard {
			parts := []float64{s.result.Rest}
			for _, l := range s.layers {
				parts = append(parts, l[i])
			}
			forward, backward := 0., 0.
			for k := range parts {
				forward += parts[k]
				backward += parts[len(parts)-1-k]
				if parts[k] != snap(parts[k]) {
					t.Fatalf("%s: part %d of conversion %d is no multiple of 2⁻⁴⁴", name, k, i)
				}
			}
			if forward != heard || backward != heard {
				t.Fatalf("%s: conversion %d: layers sum to %.17g and %.17g, heard is %.17g", name, i, forward, backward, heard)
			}
			if r := s.layers[Rounding][i]; !(math.Abs(r) <= half) {
				t.Fatalf("%s: rounding is %g, more than half a step", name, r)
			}
			if heard != s.result.Span.Value(s.codes[i]) {
				t.Fatalf("%s: heard is not its code", name)
			}
		}
	}
}

func TestNothingTouchedIsNoOverload(t *testing.T) {
	n := parse(t, lineChain, "amp.r_f=3k3")
	s := renderAll(t, n, Options{}, tone.Demo())
	for i, v := range s.layers[Overloaded] {
		if v != 0 {
			t.Fatalf("overload is %g at conversion %d", v, i)
		}
	}
	if len(s.result.Overloads) != 0 || s.result.Overloaded != 0 {
		t.Errorf("overloads: %v", s.result.Overloads)
	}
}

func TestSameBytesWhateverTheCoresAndChunks(t *testing.T) {
	n := demoNetwork(t)
	run := func(cores, chunk int) *sound {
		defer runtime.GOMAXPROCS(runtime.GOMAXPROCS(cores))
		return renderAll(t, n, Options{Noise: noise.At(n), Seed: 9, chunk: chunk}, hostile(48000)["speech-like"])
	}
	want := run(1, 0)
	for _, c := range []struct{ cores, chunk int }{{4, 0}, {2, 1}, {2, 600}} {
		got := run(c.cores, c.chunk)
		for l := range want.layers {
			for i, v := range want.layers[l] {
				if v != got.layers[l][i] {
					t.Fatalf("%d cores, chunks of %d: %v differs at %d", c.cores, c.chunk, Layer(l), i)
				}
			}
		}
	}
}

func TestConversionsAreThoseBeforeTheEnd(t *testing.T) {
	n := parse(t, lineChain, "converter.rate=9615.38")
	for _, frames := range []int{1, 2, 4799, 4800} {
		s := renderAll(t, n, Options{}, &sliceTrack{rate: 48000, x: make([]float64, frames)})
		if want := int(math.Ceil(float64(frames) * 9615.38 / 48000)); len(s.codes) != want {
			t.Errorf("%d frames give %d conversions, want %d", frames, len(s.codes), want)
		}
	}
}

// SINAD of an ideal converter, 6.02·N + 1.76 dB (W. R. Bennett, 1948). The sine comes 0.1 dB below the span through a
// chain of nothing but a resistor; the tolerance is what the finite record leaves.
func TestRoundingIsThatOfAnIdealConverter(t *testing.T) {
	const tolerance = 0.2 // dB
	for _, bits := range []int{8, 10, 12} {
		n := parse(t, wireChain, fmt.Sprintf("converter.bits=%d", bits))
		s := renderAll(t, n, Options{}, tone.Sine(48000, 1, 997, -0.1))
		_, rest := fit(s.heard, 997, 16000, 400)
		amplitude := math.Pow(10, -0.1/20)
		got := 20 * math.Log10(amplitude/math.Sqrt2/rest)
		if want := 6.02059991328*float64(bits) + 1.760912590557 - 0.1; !(math.Abs(got-want) <= tolerance) {
			t.Errorf("%d bits: SINAD %.2f dB, want %.2f dB", bits, got, want)
		}
	}
}

// wireChain is a microphone that rests mid-span, straight into the converter: a sample of ±1.0 fills the span.
const wireChain = `
[supply]
voltage = "5V"
[input.line]
kind = "microphone"
sensitivity = "1V/Pa"
rest = "1V"
full_scale = "90.9691001300805dBSPL"
[[stage]]
name = "wire"
kind = "divider"
from = "line"
r_top = "0.01"
r_bottom = "100M"
[converter]
from = "wire"
rate = 16000
bits = 10
low = 0
high = 2
`

// interfered returns the line chain with an interferer.
func interfered(t *testing.T, into, frequency, level, rest string, set ...string) *circuit.Network {
	return parse(t, lineChain+fmt.Sprintf("[[interferer]]\ninto = %q\nfrequency = %q\nlevel = %q\n%s\n", into, frequency, level, rest), set...)
}

func silence(seconds float64) signals.Track { return tone.Silence(48000, seconds) }

func TestInterferingTonesComeOutAsTheCircuitResponds(t *testing.T) {
	for _, c := range []struct {
		into      string
		f, folds  float64
		frequency string
	}{{"line", 1000, 1000, "1kHz"}, {"line", 9000, 7000, "9kHz"}, {"supply", 700, 700, "700Hz"}, {"line", 301000, 3000, "301kHz"}} {
		n := interfered(t, c.into, c.frequency, "0.2Vp", "")
		// One second lets what begins with the tone die away, the bias' charge being the slowest: 0.11 s.
		s := renderAll(t, n, Options{}, silence(2))
		u := circuit.SoundInput(0)
		if c.into == "supply" {
			u = circuit.SupplyInput
		}
		want := 0.2 * cmplx.Abs(n.At(c.f).Into(n.Output).Input(u)) / s.result.Span.Unit()
		got, rest := fit(s.layers[Interference], c.folds, 16000, 16000)
		// At 300 kHz, with sixteen steps to a period, warping is 0.1 dB a pole: this chain has three there.
		tolerance := linearTolerance
		if c.f > 24000 {
			tolerance = 0.5
		}
		if db := 20 * math.Log10(cmplx.Abs(got)/want); !(math.Abs(db) <= tolerance) {
			t.Errorf("%s into %s is %.4f dB off", c.frequency, c.into, db)
		}
		if !(rest < 1e-6) {
			t.Errorf("%s into %s leaves %.3g", c.frequency, c.into, rest)
		}
		if folded, _ := fit(s.folded, c.folds, 16000, 16000); (cmplx.Abs(folded) > want/2) != (c.f > 8000) {
			t.Errorf("%s into %s: %.3g of it said to be folded", c.frequency, c.into, cmplx.Abs(folded))
		}
	}
}

// A square wave's harmonics are 4/(π·k) of its peak, k odd; those above half the rate fold.
func TestInterferingSquareHasItsHarmonics(t *testing.T) {
	n := interfered(t, "line", "1.1kHz", "0.4Vpp", `shape = "square"`)
	s := renderAll(t, n, Options{}, silence(0.6))
	for _, c := range []struct{ k, at float64 }{{1, 1100}, {3, 3300}, {5, 5500}, {7, 7700}, {9, 6100}, {11, 3900}, {13, 1700}} {
		want := 0.2 * 4 / (math.Pi * c.k) * cmplx.Abs(n.At(c.k*1100).Into(n.Output).Input(circuit.SoundInput(0))) / s.result.Span.Unit()
		got, _ := fit(s.layers[Interference], c.at, 16000, 3200)
		if db := 20 * math.Log10(cmplx.Abs(got)/want); !(math.Abs(db) <= 0.05) {
			t.Errorf("harmonic %g is %.4f dB off", c.k, db)
		}
	}
}

// A band of noise comes out with the power that the response's mean square over the band lets through.
func TestInterferingNoiseHasItsPower(t *testing.T) {
	for _, c := range []struct{ from, to float64 }{{2500, 3500}, {60e3, 64e3}} {
		n := interfered(t, "line", fmt.Sprint((c.from+c.to)/2), "0.1Vrms", fmt.Sprintf("shape = \"noise\"\nbandwidth = %g", c.to-c.from))
		s := renderAll(t, n, Options{Seed: 5}, silence(4))
		power, points := 0., 100
		for i := range points {
			f := c.from + (c.to-c.from)*(float64(i)+0.5)/float64(points)
			power += square2(cmplx.Abs(n.At(f).Into(n.Output).Input(circuit.SoundInput(0)))) / float64(points)
		}
		want := 0.1 * math.Sqrt(power) / s.result.Span.Unit()
		// 4000 independent values in four seconds of a band 1 kHz wide: 1.6 % for one sigma of the RMS; three allowed, and the
		// band's Butterworth skirts.
		if got := rms(s.layers[Interference]); !(math.Abs(got/want-1) <= 0.05) {
			t.Errorf("%g to %g Hz: RMS %.4g, want %.4g", c.from, c.to, got, want)
		}
	}
}

func square2(x float64) float64 { return x * x }

func rms(x []float64) float64 {
	sum := 0.
	for _, v := range x {
		sum += v * v
	}
	return math.Sqrt(sum / float64(len(x)))
}

// The noise drawn has the power that the budget adds up.
func TestNoiseDrawnIsTheBudgets(t *testing.T) {
	n := parse(t, lineChain, "converter.enob=10.5")
	budget := noise.At(n)
	s := renderAll(t, n, Options{Noise: budget, Seed: 2}, silence(4))
	want := math.Sqrt(budget.Power) / s.result.Span.Unit()
	// 64 000 values: 0.3 % for one sigma.
	if got := rms(s.layers[Noise]); !(math.Abs(got/want-1) <= 0.015) {
		t.Errorf("RMS %.5g, budget %.5g", got, want)
	}
}

// Aperture jitter: SNR = −20·log10(2πf·σ) (the standard formula, from memory).
func TestJitterIsTheFormulas(t *testing.T) {
	n := parse(t, wireChain, "converter.jitter=1us", "converter.bits=16")
	s := renderAll(t, n, Options{Seed: 4}, tone.Sine(48000, 2, 3001, -1))
	want := math.Pow(10, -1./20) / math.Sqrt2 * 2 * math.Pi * 3001 * 1e-6
	if got := rms(s.layers[Noise]); !(math.Abs(got/want-1) <= 0.03) {
		t.Errorf("RMS %.5g, want %.5g", got, want)
	}
}

// A sampling capacitor that settles to ε of its last sample is a low-pass (1−ε)/(1 − ε·z⁻¹); one that comes grounded
// loses ε of everything, the rest included.
func TestIncompleteSettling(t *testing.T) {
	// 10 kΩ behind the input and 10 pF for 0.2 µs: two time constants.
	set := []string{"line.output_resistance=10k", "converter.sampling_capacitor=10p", "converter.acquisition=0.2us", "converter.switch_resistance=0"}
	epsilon := math.Exp(-2)
	f := 1000.
	own := renderAll(t, parse(t, wireChain, set...), Options{}, tone.Sine(48000, 0.5, f, -6))
	got, _ := fit(own.layers[Wanted], f, 16000, 800)
	z := cmplx.Exp(complex(0, -2*math.Pi*f/16000))
	want := math.Pow(10, -6./20) * cmplx.Abs(complex(1-epsilon, 0)/(1-complex(epsilon, 0)*z))
	if db := 20 * math.Log10(cmplx.Abs(got)/want); !(math.Abs(db) <= 0.02) {
		t.Errorf("after its own sample: %.4f dB off", db)
	}
	grounded := renderAll(t, parse(t, wireChain, append(set, "converter.shares_with=ground")...), Options{}, tone.Sine(48000, 0.5, f, -6))
	got, _ = fit(grounded.layers[Wanted], f, 16000, 800)
	want = math.Pow(10, -6./20) * (1 - epsilon)
	if db := 20 * math.Log10(cmplx.Abs(got)/want); !(math.Abs(db) <= 0.02) {
		t.Errorf("after ground: %.4f dB off", db)
	}
	// The rest, 1 V on a span of 2 V, is 0 in full scale and falls by ε of 1 V.
	if want := -epsilon; !(math.Abs(grounded.result.Rest-want) <= 2e-3) {
		t.Errorf("rests at %.4f, want %.4f", grounded.result.Rest, want)
	}
}

// A microphone passes no more than its maximum level.
func TestMicrophoneClipsAtItsMaximumLevel(t *testing.T) {
	n := parse(t, wireChain, "line.maximum_level=84.9691001300805dBSPL") // 6 dB below full scale
	s := renderAll(t, n, Options{}, tone.Sine(48000, 0.3, 440, -3))
	most := 0.
	for i := range s.layers[Wanted][1000:4000] {
		most = math.Max(most, math.Abs(s.layers[Wanted][1000+i]+s.layers[Overloaded][1000+i]))
	}
	if want := math.Pow(10, -6./20); !(math.Abs(most-want) <= 1e-3) {
		t.Errorf("passes %.4f, want %.4f", most, want)
	}
	if len(s.result.Overloads) != 1 || s.result.Overloads[0].Kind != TooLoud || !(math.Abs(s.result.Overloads[0].Worst.Over-3) < 0.01) {
		t.Errorf("overloads: %+v", s.result.Overloads)
	}
}
