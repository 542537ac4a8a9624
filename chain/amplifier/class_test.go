package amplifier

import (
	"math"
	"slices"
	"testing"
)

// The classes, with the figures that each is known by.
func TestClasses(t *testing.T) {
	want := map[string][4]float64{ // Hz, V/s, V below the supply, V/√Hz
		"bipolar single-supply": {1e6, 0.4e6, 1.5, 40e-9},
		"bipolar audio":         {10e6, 5e6, 1.5, 5e-9},
		"cmos rail-to-rail":     {5e6, 3e6, 20e-3, 12e-9},
		"cmos micropower":       {150e3, 0.08e6, 20e-3, 60e-9},
		"ideal":                 {math.Inf(1), math.Inf(1), 0, 0},
	}
	names := Classes()
	if len(names) != len(want) {
		t.Errorf("the classes are %q", names)
	}
	for _, name := range names {
		m, ok := Class(name)
		if !ok || m.Class != name {
			t.Errorf("Class(%q) is %+v, %v", name, m, ok)
		}
		if got := [4]float64{m.GainBandwidth, m.SlewRate, m.SwingHigh, m.NoiseVoltage}; got != want[name] {
			t.Errorf("%s: %v, want %v", name, got, want[name])
		}
	}
	for _, name := range []string{"", "Ideal", "bipolar"} {
		if m, ok := Class(name); ok {
			t.Errorf("Class(%q) is %+v", name, m)
		}
	}
	names[0] = "changed"
	if slices.Contains(Classes(), "changed") {
		t.Error("the names are shared between callers")
	}
}

// Every figure of the classes of real parts lies within what operational amplifiers have.
func TestFiguresAreThoseOfRealParts(t *testing.T) {
	for _, name := range Classes() {
		if name == "ideal" {
			continue
		}
		m, _ := Class(name)
		for _, c := range []struct {
			figure             string
			value, least, most float64
		}{
			{"gain-bandwidth", m.GainBandwidth, 1e4, 1e9},
			{"open-loop gain", m.OpenLoopGain, 1e4, 1e7},
			{"slew rate", m.SlewRate, 1e4, 1e9},
			{"swing below the supply", m.SwingHigh, 1e-3, 3},
			{"swing above ground", m.SwingLow, 1e-3, 3},
			{"load of the swing", m.SwingLoad, 500, 1e6},
			{"output resistance", m.OutputResistance, 1, 1e4},
			{"current sourced", m.CurrentSource, 1e-4, 0.5},
			{"current sunk", m.CurrentSink, 1e-4, 0.5},
			{"common mode below the supply", m.CommonModeHigh, -0.5, 3},
			{"common mode above ground", m.CommonModeLow, -0.5, 3},
			{"offset", m.Offset, -10e-3, 10e-3},
			{"bias current", math.Abs(m.BiasCurrent), 1e-15, 1e-6},
			{"noise voltage", m.NoiseVoltage, 1e-9, 200e-9},
			{"corner of the noise voltage", m.NoiseVoltageCorner, 1, 1e4},
			{"noise current", m.NoiseCurrent, 1e-16, 1e-11},
			{"corner of the noise current", m.NoiseCurrentCorner, 0, 1e4},
			{"phase margin", m.PhaseMargin, 40, 90},
			{"supply rejection", m.SupplyRejection, 1e3, 1e7},
			{"corner of the supply rejection", m.SupplyRejectionCorner, 1, 1e4},
			// The full swing's charge on the compensation: SR/(2π·GBW) is the input voltage that makes an input stage
			// slew: 2·VT = 52 mV for a plain bipolar pair, up to some hundred mV for others (textbooks on operational
			// amplifiers, from memory).
			{"input that makes it slew", m.SlewRate / (2 * math.Pi * m.GainBandwidth), 20e-3, 0.5},
			// The shot noise of the bias current, √(2·q·I), is the least that a bipolar input's current noise can be.
			{"noise current over shot noise", m.NoiseCurrent / math.Sqrt(2*1.602176634e-19*math.Abs(m.BiasCurrent)), 1, 10},
		} {
			if !(c.value >= c.least && c.value <= c.most) {
				t.Errorf("%s: %s is %g, not %g to %g", name, c.figure, c.value, c.least, c.most)
			}
		}
	}
}

func TestIdealHasNoLimits(t *testing.T) {
	m, _ := Class("ideal")
	inf := math.Inf(1)
	want := Model{
		Class: "ideal", GainBandwidth: inf, OpenLoopGain: inf, SlewRate: inf, SwingLoad: inf, CurrentSource: inf, CurrentSink: inf,
		CommonModeHigh: -inf, CommonModeLow: -inf, PhaseMargin: 90, SupplyRejection: inf, SupplyRejectionCorner: inf,
	}
	if m != want {
		t.Errorf("%+v, want %+v", m, want)
	}
	if low, high := m.Limits(3.3, 10e3); low != 0 || high != 3.3 {
		t.Errorf("its limits are %g and %g", low, high)
	}
}

// rounding is what a few operations may be off by, of the supply.
const rounding = 1e-14

// Behind the output resistance and with the datasheet's load to mid-supply, the node reaches the datasheet's swing: the
// divider of Ro and the load.
func TestLimitsGiveTheSwingAtTheLoad(t *testing.T) {
	for _, name := range Classes() {
		m, _ := Class(name)
		for _, supply := range []float64{3.3, 5, 12, 30} {
			low, high := m.Limits(supply, m.SwingLoad)
			share := 1.0
			if !math.IsInf(m.SwingLoad, 1) {
				share = m.SwingLoad / (m.SwingLoad + m.OutputResistance)
			}
			node := func(e float64) float64 { return supply/2 + (e-supply/2)*share }
			if got, want := node(low), m.SwingLow; !(math.Abs(got-want) <= rounding*supply) {
				t.Errorf("%s on %g V reaches down to %g, want %g", name, supply, got, want)
			}
			if got, want := node(high), supply-m.SwingHigh; !(math.Abs(got-want) <= rounding*supply) {
				t.Errorf("%s on %g V reaches up to %g, want %g", name, supply, got, want)
			}
		}
	}
	// By hand: 200 Ω, 10 kΩ, 5 V: 0.02 − 200·2.48/10000 and 3.5 + 200·1/10000.
	m, _ := Class("bipolar single-supply")
	if low, high := m.Limits(5, 10e3); !(math.Abs(low+0.0296) <= rounding*5 && math.Abs(high-3.52) <= rounding*5) {
		t.Errorf("%g, %g", low, high)
	}
}

// Without a load an output comes to its rail at the most, and a heavier load than the datasheet's leaves it less swing.
func TestLimitsAreWithinTheRails(t *testing.T) {
	for _, name := range Classes() {
		m, _ := Class(name)
		const supply = 5.0
		node := func(load float64) (low, high float64) {
			low, high = m.Limits(supply, load)
			share := 1 / (1 + m.OutputResistance/load)
			return supply/2 + (low-supply/2)*share, supply/2 + (high-supply/2)*share
		}
		free, top := node(math.Inf(1))
		if !(free >= -rounding*supply && top <= supply*(1+rounding)) {
			t.Errorf("%s without a load goes from %g to %g", name, free, top)
		}
		if math.IsInf(m.SwingLoad, 1) {
			continue
		}
		low, high := node(m.SwingLoad / 3)
		if !(low > m.SwingLow && high < supply-m.SwingHigh) {
			t.Errorf("%s with a heavy load goes from %g to %g", name, low, high)
		}
	}
	// By hand: 20 mV with 10 kΩ to 2.5 V is 10 kΩ·0.02/2.48 = 80.645 Ω to ground; with 1 kΩ it leaves 2.5·80.645/1080.645 V,
	// and 200 Ω more drop 0.2·(v − 2.5).
	m, _ := Class("bipolar single-supply")
	v := 2.5 * 80.64516129032258 / 1080.6451612903226
	if low, _ := m.Limits(5, 1e3); !(math.Abs(low-(v+0.2*(v-2.5))) <= rounding*5) {
		t.Errorf("%g", low)
	}
}
