// Package amplifier holds what an operational amplifier is to Midrail: a few figures from its datasheet,
// and the classes that give typical ones.
//
// An amplifier is an internal source e behind its output resistance Ro:
//
//	g = de/dt = clip( ωt·(v+ − v− + Vos) − ωa·(e − Vref), ±SR ),   ωt = 2π·GainBandwidth, ωa = ωt/OpenLoopGain
//
// with e held between limits that come from the swing at its load.
package amplifier

// Model is one amplifier's data, with the range that each figure may have in a chain file. +Inf stands for "without
// limit", which a chain file has from the ideal class alone.
type Model struct {
	Class                 string  // the class whose figures it began with, one of [Classes]
	GainBandwidth         float64 // Hz, 1e3 to 1e10; +Inf: ideal
	OpenLoopGain          float64 // V/V, 10 to 1e9; +Inf: ideal
	SlewRate              float64 // V/s, 1e2 to 1e11; +Inf: no limit
	SwingHigh             float64 // V below the supply that the output reaches with SwingLoad to mid-supply, 0 to 30
	SwingLow              float64 // V above ground that the output reaches with SwingLoad to mid-supply, 0 to 30
	SwingLoad             float64 // Ω, 10 to 1e11; +Inf: unloaded
	OutputResistance      float64 // Ω, open loop, 0 to 1e5
	CurrentSource         float64 // A the output can source, 1e-6 to 10; +Inf: no limit
	CurrentSink           float64 // A the output can sink, 1e-6 to 10; +Inf: no limit
	CommonModeHigh        float64 // V below the supply up to which both inputs work, −30 to 30; negative: above the supply; −Inf: no limit
	CommonModeLow         float64 // V above ground down to which both inputs work, −30 to 30; negative: below ground; −Inf: no limit
	Offset                float64 // V at the input, −0.1 to 0.1
	BiasCurrent           float64 // A into each input (positive: into the amplifier), −1e-4 to 1e-4
	NoiseVoltage          float64 // V/√Hz, 0 to 1e-5
	NoiseVoltageCorner    float64 // Hz, of the 1/f part, 0 (none) to 1e6
	NoiseCurrent          float64 // A/√Hz, 0 to 1e-8
	NoiseCurrentCorner    float64 // Hz, of the 1/f part, 0 (none) to 1e6
	PhaseMargin           float64 // degrees that a follower of it has left, from a second pole, 5 to 90; for loop margins alone
	SupplyRejection       float64 // V/V, 1 to 1e8, of the supply at the input, up to SupplyRejectionCorner; +Inf: none passes
	SupplyRejectionCorner float64 // Hz, 0.1 to 1e8, from which on it falls by 20 dB a decade; +Inf: never
}
