package amplifier

import "math"

// classes are typical figures of kinds of amplifier, from memory: a part's own datasheet has the last word.
func classes() []Model {
	inf := math.Inf(1)
	return []Model{
		{
			Class: "bipolar single-supply", GainBandwidth: 1e6, OpenLoopGain: 1e5, SlewRate: 0.4e6,
			SwingHigh: 1.5, SwingLow: 20e-3, SwingLoad: 10e3, OutputResistance: 200,
			CurrentSource: 20e-3, CurrentSink: 8e-3, CommonModeHigh: 1.5, CommonModeLow: 0,
			Offset: 0, BiasCurrent: -20e-9,
			NoiseVoltage: 40e-9, NoiseVoltageCorner: 20, NoiseCurrent: 0.2e-12, NoiseCurrentCorner: 200, PhaseMargin: 60, SupplyRejection: 1e5, SupplyRejectionCorner: 10,
		},
		{
			Class: "bipolar audio", GainBandwidth: 10e6, OpenLoopGain: 1e5, SlewRate: 5e6,
			SwingHigh: 1.5, SwingLow: 1.5, SwingLoad: 2e3, OutputResistance: 60,
			CurrentSource: 30e-3, CurrentSink: 30e-3, CommonModeHigh: 1.5, CommonModeLow: 1.5,
			Offset: 0, BiasCurrent: 200e-9,
			NoiseVoltage: 5e-9, NoiseVoltageCorner: 20, NoiseCurrent: 0.7e-12, NoiseCurrentCorner: 100, PhaseMargin: 60, SupplyRejection: 1e5, SupplyRejectionCorner: 100,
		},
		{
			Class: "cmos rail-to-rail", GainBandwidth: 5e6, OpenLoopGain: 1e5, SlewRate: 3e6,
			SwingHigh: 20e-3, SwingLow: 20e-3, SwingLoad: 10e3, OutputResistance: 300,
			CurrentSource: 20e-3, CurrentSink: 20e-3, CommonModeHigh: -0.1, CommonModeLow: -0.1,
			Offset: 0, BiasCurrent: 1e-12,
			NoiseVoltage: 12e-9, NoiseVoltageCorner: 500, NoiseCurrent: 1e-15, NoiseCurrentCorner: 0, PhaseMargin: 60, SupplyRejection: 3e4, SupplyRejectionCorner: 100,
		},
		{
			Class: "cmos micropower", GainBandwidth: 150e3, OpenLoopGain: 1e5, SlewRate: 0.08e6,
			SwingHigh: 20e-3, SwingLow: 20e-3, SwingLoad: 50e3, OutputResistance: 2e3,
			CurrentSource: 3e-3, CurrentSink: 3e-3, CommonModeHigh: -0.1, CommonModeLow: -0.1,
			Offset: 0, BiasCurrent: 1e-12,
			NoiseVoltage: 60e-9, NoiseVoltageCorner: 100, NoiseCurrent: 1e-15, NoiseCurrentCorner: 0, PhaseMargin: 65, SupplyRejection: 3e4, SupplyRejectionCorner: 10,
		},
		{
			Class: "ideal", GainBandwidth: inf, OpenLoopGain: inf, SlewRate: inf, SwingLoad: inf,
			CurrentSource: inf, CurrentSink: inf, CommonModeHigh: -inf, CommonModeLow: -inf, PhaseMargin: 90, SupplyRejection: inf, SupplyRejectionCorner: inf,
		},
	}
}

// Class returns the typical figures of a class, from memory, and whether there is one of that name, which is spelled as
// [Classes] does.
func Class(name string) (Model, bool) {
	for _, m := range classes() {
		if m.Class == name {
			return m, true
		}
	}
	return Model{}, false
}

// Classes returns the names of all classes, in the order in which they are told; the slice is the caller's.
func Classes() []string {
	var names []string
	for _, m := range classes() {
		names = append(names, m.Class)
	}
	return names
}

// Limits returns the limits of the internal source e in V on a supply in V, with a load in Ω from the output to
// mid-supply; +Inf: none. A datasheet gives the output's swing with SwingLoad to mid-supply; e lies beyond it by what the
// load's current drops across the output resistance:
//
//	e = limit + Ro·(limit − supply/2)/SwingLoad
//
// Where that is beyond the rail, what the output stage is short of the rail by is no constant but a resistance, which with
// SwingLoad leaves the limit: of a divider of the load and
//
//	Rs = SwingLoad·(rail − limit)/(limit − supply/2),    e = v + Ro·(v − supply/2)/load
//
// v being where the divider puts the output. An output without a load then comes to its rail, and never beyond.
func (m Model) Limits(supply, load float64) (low, high float64) {
	middle := supply / 2
	side := func(limit, rail, outwards float64) float64 {
		e := limit + m.OutputResistance*(limit-middle)/m.SwingLoad
		if outwards*(e-rail) <= 0 {
			return e
		}
		inner := m.SwingLoad * (rail - limit) / (limit - middle)
		v := middle + (rail-middle)/(1+inner/load)
		return v + m.OutputResistance*(v-middle)/load
	}
	return side(m.SwingLow, 0, -1), side(supply-m.SwingHigh, supply, 1)
}
