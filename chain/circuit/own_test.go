package circuit

import (
	"math"
	"math/cmplx"
	"strings"
	"testing"

	"midrail/chain"
)

// exactly is how near an exact response lies to the closed form of the same circuit.
const exactly = 1e-9

func parse(t *testing.T, text string) *Network {
	t.Helper()
	c, err := chain.Read("test.toml", []byte(text), nil)
	if err != nil {
		t.Fatal(err)
	}
	n := New(c)
	if _, err := n.Rest(); err != nil {
		t.Fatal(err)
	}
	return n
}

const start = `
[supply]
voltage = "5V"
[amplifier.one]
class = "ideal"
[input.line]
kind = "line"
full_scale = "1Vrms"
`

const end = `
[converter]
from = "it"
rate = 48000
bits = 12
high = 5
`

func same(t *testing.T, n *Network, input int, want func(s complex128) complex128) {
	t.Helper()
	for _, f := range []float64{1, 30, 1e3, 4.7e3, 2e4, 1e6} {
		w := want(complex(0, 2*math.Pi*f))
		got := n.At(f).Into(n.Output).Input(input)
		if d := cmplx.Abs(got - w); !(d <= exactly*cmplx.Abs(w)+1e-12) {
			t.Errorf("%g Hz: %v, closed form %v", f, got, w)
		}
	}
}

func TestTransferFunctionIsWhatItSays(t *testing.T) {
	n := parse(t, start+`
[[stage]]
name = "it"
kind = "transfer function"
from = "line"
amplifier = "one"
numerator = [2e-9, 0, 0.5]
denominator = [1e-13, 3e-9, 4e-5, 1]
`+end)
	same(t, n, SoundInput(0), func(s complex128) complex128 {
		return (2e-9*s*s + 0.5) / (1e-13*s*s*s + 3e-9*s*s + 4e-5*s + 1)
	})
}

// A state-variable filter of three amplifiers, its low-pass output: with all summing resistors R and integrators RC,
// LP = −1/(1 + s·RC·(3·R_q/(R_q+R_x)) + (s·RC)²); W. J. Kerwin, L. P. Huelsman, R. W. Newcomb, "State-variable synthesis for
// insensitive integrated circuit transfer functions", IEEE J. Solid-State Circuits SC-2 (1967).
const stateVariable = `
[bias.half]
top = "10k"
bottom = "10k"
[[stage]]
name = "it"
kind = "network"
from = "line"
bias = "half"
part = [
  { r = "10k", between = ["in", "sum"] }, { r = "10k", between = ["low", "sum"] }, { r = "10k", between = ["high", "sum"] },
  { r = "20k", between = ["band", "feed"] }, { r = "10k", between = ["feed", "bias"] },
  { r = "10k", between = ["high", "first"] }, { c = "1n", between = ["first", "band"] },
  { r = "10k", between = ["band", "second"] }, { c = "1n", between = ["second", "low"] },
  { r = "100R", between = ["low", "out"] }, { r = "1M", between = ["out", "ground"] },
]
amplifier = [
  { use = "one", plus = "feed", minus = "sum", output = "high" },
  { use = "one", plus = "bias", minus = "first", output = "band" },
  { use = "one", plus = "bias", minus = "second", output = "low" },
]
`

func TestStateVariableFilterIsItsClosedForm(t *testing.T) {
	n := parse(t, start+stateVariable+end)
	tau := complex(10e3*1e-9, 0)
	same(t, n, SoundInput(0), func(s complex128) complex128 {
		// high = −in − low + 3·feed, feed = band/3 about a bias that its own divider holds: 20k from band into 10k + 5k.
		// band = −high/(s·τ), low = −band/(s·τ), and feed − bias' both move the bias node.
		p := s * tau
		// The bias node b moves with the current through the 10k of feed: b = 5k/(35k)·band; feed = band·15k/35k. Integrators
		// ride on b: band = b·(1 + 1/p) − high/p, low = b·(1 + 1/p) − band/p.
		beta, phi := complex(5./35, 0), complex(15./35, 0)
		// Unknown band for in = 1: high = −1 − low + 3·phi·band.
		// band·(1 − beta·(1+1/p)) = −high/p;   low = band·(beta·(1+1/p) − 1/p)
		k := beta * (1 + 1/p)
		band := (1 / p) / (1 - k - (k-1/p)/p + 3*phi/p)
		low := band * (k - 1/p)
		return low * complex(1e6/(1e6+100), 0)
	})
}

func TestClampPassesWhatIsWithinIt(t *testing.T) {
	n := parse(t, strings.Replace(start, "[amplifier.one]\nclass = \"ideal\"\n", "", 1)+`
[[stage]]
name = "clamped"
kind = "clamp"
from = "line"
r = "1k"
forward = "0.3V"
to_supply = true
to_ground = true
[[stage]]
name = "it"
kind = "rc low-pass"
from = "clamped"
r = "9k"
c = "1n"
`+end)
	same(t, n, SoundInput(0), func(s complex128) complex128 { return 1 / (1 + s*10e3*1e-9) })
}

// A follower passes 1/PSR of the supply, more from the corner on, and no more than all of it.
func TestSupplyRejectionFallsFromItsCornerOn(t *testing.T) {
	n := parse(t, `
[supply]
voltage = "5V"
[amplifier.one]
class = "ideal"
supply_rejection = "80dB"
supply_rejection_corner = "100Hz"
[input.line]
kind = "line"
full_scale = "1Vrms"
[[stage]]
name = "it"
kind = "follower"
from = "line"
amplifier = "one"
`+end)
	same(t, n, SupplyInput, func(s complex128) complex128 {
		wh := complex(1e4*2*math.Pi*100, 0)
		return 1e-4 + s/(s+wh)
	})
	at, err := n.Rest()
	if err != nil {
		t.Fatal(err)
	}
	if v := at.Volts[n.Output]; !(math.Abs(v) < 1e-12) {
		t.Errorf("the supply itself moves the output to %g V", v)
	}
}

// A divider behind a supply of 1 kΩ.
func TestSupplyHasItsResistance(t *testing.T) {
	n := parse(t, `
[supply]
voltage = "5V"
resistance = "1k"
[input.line]
kind = "line"
full_scale = "1Vrms"
[[stage]]
name = "it"
kind = "biased coupling"
from = "line"
c = "1u"
top = "9k"
bottom = "10k"
`+end)
	at, err := n.Rest()
	if err != nil {
		t.Fatal(err)
	}
	if got := at.Volts[n.Output]; !(math.Abs(got-2.5) <= 1e-12) {
		t.Errorf("rests at %g V, want 2.5 V", got)
	}
	same(t, n, SupplyInput, func(s complex128) complex128 {
		// The coupling capacitor is in parallel with the lower resistor.
		z := 1 / (complex(1e-4, 0) + s*1e-6)
		return z / (z + 10e3)
	})
}
