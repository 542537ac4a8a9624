package rest

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"midrail/chain"
	"midrail/chain/circuit"
)

func find(t *testing.T, text string) (*circuit.Network, *Rest) {
	t.Helper()
	c, err := chain.Read("test.toml", []byte(text), nil)
	if err != nil {
		t.Fatal(err)
	}
	n := circuit.New(c)
	r, err := Find(n)
	if err != nil {
		t.Fatal(err)
	}
	return n, r
}

func volts(t *testing.T, r *Rest, name string) Node {
	t.Helper()
	for _, x := range r.Nodes {
		if x.Name == name {
			return x
		}
	}
	t.Fatalf("no node %q", name)
	return Node{}
}

func near(t *testing.T, what string, got, want, within float64) {
	t.Helper()
	if !(math.Abs(got-want) <= within) {
		t.Errorf("%s is %.9g, want %.9g", what, got, want)
	}
}

// A divider with a bypass settles as (Ra ∥ Rb)·C: to ε after τ·ln(1/ε).
func TestDividerSettlesAsItsTimeConstant(t *testing.T) {
	_, r := find(t, `
[supply]
voltage = "5V"
[bias.half]
top = "20k"
bottom = "20k"
bypass = "10u"
[amplifier.one]
class = "ideal"
[input.line]
kind = "line"
full_scale = "1mVrms"
[[stage]]
name = "it"
kind = "inverting"
from = "line"
amplifier = "one"
bias = "half"
c_in = "1n"
r_in = "10k"
r_f = "10k"
[converter]
from = "it"
rate = 48000
bits = 10
high = 5
`)
	const tau = 10e3 * 10e-6
	// The supply's rise of 1 ms moves the start by half of it; a step of the search is 1e-5 s here.
	near(t, "to 1 %", r.Settling.OnePercent, tau*math.Log(100)+0.5e-3, 0.2e-3)
	near(t, "to 1 LSB", r.Settling.LSB, tau*math.Log(2.5/(5./1024))+0.5e-3, 0.2e-3)
	if len(r.Slow) != 1 || r.Slow[0].Part.Name != "half.bypass" {
		t.Fatalf("slow: %+v", r.Slow)
	}
	near(t, "time constant", r.Slow[0].Constant, tau, 1e-3*tau)
	near(t, "its share", r.Slow[0].Weight, 1, 0.02)
	near(t, "supply current", r.Supply, 5/40e3, 1e-9)
	if c := r.Capacitors[1]; c.Part.Name != "it.c_in" || c.Negative != "line" {
		t.Errorf("c_in: %+v", c)
	}
}

const summer = `
[supply]
voltage = "3.3V"
[bias.half]
top = "10k"
bottom = "10k"
[amplifier.one]
class = "cmos rail-to-rail"
[input.left]
kind = "line"
full_scale = "100mVrms"
[input.right]
kind = "line"
full_scale = "100mVrms"
[[stage]]
name = "sum"
kind = "summer"
amplifier = "one"
bias = "half"
r_f = "10k"
input = [{ from = "left", r = "10k"%s }, { from = "right", r = "10k"%[1]s }]
[converter]
from = "sum"
rate = 48000
bits = 10
high = 3.3
`

// Sources at 0 V straight into a summer on 1.65 V ask it for 3·1.65 V: stuck. Behind capacitors all is well.
func TestDirectCoupledSummerIsStuck(t *testing.T) {
	_, r := find(t, fmt.Sprintf(summer, ""))
	if x := volts(t, r, "sum"); !strings.Contains(x.Word, "upper limit") || x.Volts < 3.2 {
		t.Errorf("direct: %+v", x)
	}
	_, r = find(t, fmt.Sprintf(summer, `, c = "1u"`))
	x := volts(t, r, "sum")
	near(t, "behind capacitors", x.Volts, 1.65, 1e-3)
	if x.Word != "" {
		t.Errorf("behind capacitors: %q", x.Word)
	}
	if r.Settling.Usable > r.Settling.LSB || r.Settling.Usable <= 0 {
		t.Errorf("usable after %g s, within an LSB after %g s", r.Settling.Usable, r.Settling.LSB)
	}
}

// A microampere into the (+) of a follower on a 100 kΩ ∥ 100 kΩ coupling pulls it by 50 mV.
func TestBiasCurrentPullsADividerDown(t *testing.T) {
	n, r := find(t, `
[supply]
voltage = "5V"
[amplifier.one]
class = "ideal"
bias_current = "1uA"
[input.line]
kind = "line"
full_scale = "100mVrms"
[[stage]]
name = "coupled"
kind = "biased coupling"
from = "line"
c = "1u"
top = "100k"
bottom = "100k"
[[stage]]
name = "it"
kind = "follower"
from = "coupled"
amplifier = "one"
[converter]
from = "it"
rate = 48000
bits = 10
high = 5
`)
	near(t, "rest", volts(t, r, "it").Volts, 2.45, 1e-9)
	near(t, "the share told", r.Shares[0].Volts, -0.05, 1e-9)
	if r.Shares[0].Name != "it (+)" || n.Output == 0 {
		t.Errorf("shares: %+v", r.Shares)
	}
}
