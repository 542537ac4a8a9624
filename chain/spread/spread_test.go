package spread

import (
	"context"
	"math"
	"reflect"
	"runtime"
	"slices"
	"testing"

	"midrail/chain"
	"midrail/chain/circuit"
)

func parse(t testing.TB, text string) *circuit.Network {
	t.Helper()
	c, err := chain.Read("test.toml", []byte(text), nil)
	if err != nil {
		t.Fatal(err)
	}
	return circuit.New(c)
}

const rc = `
[supply]
voltage = "5V"
[tolerance]
resistors = "1%"
capacitors = "5%"
[input.line]
kind = "line"
full_scale = "1Vrms"
[[stage]]
name = "it"
kind = "rc low-pass"
from = "line"
r = "10k"
c = "10n"
[converter]
from = "it"
rate = 48000
bits = 12
high = 5
`

const sallenKey = `
[supply]
voltage = "5V"
[tolerance]
resistors = "1%"
capacitors = "1%"
distribution = "normal"
[amplifier.one]
class = "ideal"
[input.line]
kind = "line"
full_scale = "1Vrms"
[[stage]]
name = "it"
kind = "sallen-key low-pass"
from = "line"
amplifier = "one"
r_1 = "10k"
r_2 = "10k"
c_1 = "2n2"
c_2 = "1n1"
[converter]
from = "it"
rate = 48000
bits = 12
high = 5
`

func figure(t *testing.T, run *Run, name string) *Figure {
	t.Helper()
	for i := range run.Figures {
		if run.Figures[i].Name == name {
			return &run.Figures[i]
		}
	}
	t.Fatalf("no %s", name)
	return nil
}

// relative returns the standard deviation against the mean.
func relative(x []float64) float64 {
	var mean, square float64
	for _, v := range x {
		mean += v / float64(len(x))
	}
	for _, v := range x {
		square += (v - mean) * (v - mean) / float64(len(x))
	}
	return math.Sqrt(square) / mean
}

// samplingError is what a Latin hypercube of 4000 boards leaves of a standard deviation that is a sum of sensitivities:
// far below the 1 % of independent draws; higher orders of a few percent of tolerance are about as much.
const samplingError = 0.01

// The corner of an RC goes as 1/R and 1/C: its relative variance is the sum of theirs, a third of the squared tolerance
// for an even spread.
func TestCornerOfAnRCSpreadsAsItsParts(t *testing.T) {
	run, err := Make(context.Background(), parse(t, rc), Options{Boards: 4000, Seed: 1})
	if err != nil {
		t.Fatal(err)
	}
	f := figure(t, run, HighCorner)
	want := math.Sqrt((0.01*0.01 + 0.05*0.05) / 3)
	if got := relative(f.Sorted); !(math.Abs(got/want-1) <= samplingError) {
		t.Errorf("standard deviation %.5f, want %.5f", got, want)
	}
	if f.Shares[0].Part != "it.c" || !(math.Abs(f.Shares[0].Share-25./26) <= 0.01) {
		t.Errorf("governed by %+v, want it.c with 25/26", f.Shares[0])
	}
	// Every part at its end: 1/((1 ± 1 %)(1 ± 5 %)). Mid-band is told a hundredth of the corner up, where an RC has lost
	// 4e-4 dB of it already.
	f0 := 1 / (2 * math.Pi * 1e-4)
	if low, high := f0/(1.01*1.05), f0/(0.99*0.95); !(math.Abs(f.WorstLow.Figure/low-1) < 2e-4) || !(math.Abs(f.WorstHigh.Figure/high-1) < 2e-4) {
		t.Errorf("worst %g to %g Hz, want %g to %g Hz", f.WorstLow.Figure, f.WorstHigh.Figure, low, high)
	}
	if !(f.Sorted[0] >= f.WorstLow.Figure && f.Sorted[len(f.Sorted)-1] <= f.WorstHigh.Figure) {
		t.Error("a board lies beyond the worst case")
	}
	if up, down := f.WorstHigh.Up, f.WorstHigh.Down; len(up) != 0 || !slices.Equal(down, []string{"it.r", "it.c"}) {
		t.Errorf("the highest corner has %v up and %v down", up, down)
	}
}

// Sensitivities of a unity-gain Sallen-Key: f0 goes by −½ of each part; Q by +½ of c_1, −½ of c_2, and of equal resistors
// not at all. At Q = 1/√2 the corner f3 = f0·√(x + √(x² + 1)), x = 1 − 1/(2Q²), has d ln f3/d ln Q = 1.
func TestCornerOfASallenKeySpreadsAsItsSensitivities(t *testing.T) {
	run, err := Make(context.Background(), parse(t, sallenKey), Options{Boards: 4000, Seed: 1})
	if err != nil {
		t.Fatal(err)
	}
	f := figure(t, run, HighCorner)
	// r_1, r_2: −½; c_1: −½ + ½ = 0; c_2: −½ − ½ = −1. The tolerance is three standard deviations.
	want := 0.01 / 3 * math.Sqrt(0.25+0.25+0+1)
	if got := relative(f.Sorted); !(math.Abs(got/want-1) <= samplingError) {
		t.Errorf("standard deviation %.6f, want %.6f", got, want)
	}
}

// An even spread of one part and a limit within it: of corners from 1/1.05 to 1/0.95, droop at the nominal corner is below
// 3.0103 dB where C is below its value: half the boards.
func TestYieldByHand(t *testing.T) {
	n := parse(t, `
[supply]
voltage = "5V"
[tolerance]
resistors = 0
capacitors = "5%"
supply = 0
[input.line]
kind = "line"
full_scale = "1Vrms"
[[stage]]
name = "it"
kind = "rc low-pass"
from = "line"
r = "10k"
c = "10n"
[converter]
from = "it"
rate = 48000
bits = 12
high = 5
[limits]
droop = { at = 1591.5494309, max = "3.0103dB" }
`)
	run, err := Make(context.Background(), n, Options{Boards: 1000, Seed: 3})
	if err != nil {
		t.Fatal(err)
	}
	if !(math.Abs(run.Yield-0.5) <= 0.002) {
		t.Errorf("yield %.3f, want 0.5", run.Yield)
	}
}

func TestSameRunOnAnyNumberOfCores(t *testing.T) {
	n := parse(t, sallenKey)
	make1 := func(cores int) *Run {
		defer runtime.GOMAXPROCS(runtime.GOMAXPROCS(cores))
		run, err := Make(context.Background(), n, Options{Boards: 300, Seed: 7})
		if err != nil {
			t.Fatal(err)
		}
		return run
	}
	if one, four := make1(1), make1(4); !reflect.DeepEqual(one, four) {
		t.Error("the run differs with the cores")
	}
}

func TestInterruptedRunSaysSo(t *testing.T) {
	ctx, stop := context.WithCancel(context.Background())
	stop()
	if _, err := Make(ctx, parse(t, rc), Options{Boards: 100}); err != context.Canceled {
		t.Errorf("%v", err)
	}
	if _, err := Make(context.Background(), parse(t, rc), Options{Boards: 1}); err != ErrBoards {
		t.Errorf("%v", err)
	}
}

func BenchmarkBoards(b *testing.B) {
	n := parse(b, sallenKey)
	boards := 0
	for b.Loop() {
		if _, err := Make(context.Background(), n, Options{Boards: 500, Seed: 1}); err != nil {
			b.Fatal(err)
		}
		boards += 500
	}
	b.ReportMetric(float64(boards)/b.Elapsed().Seconds(), "boards/s")
}
