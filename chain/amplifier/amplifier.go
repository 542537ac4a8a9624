// Package amplifier holds what an operational amplifier is to Midrail: a few figures from its datasheet,
// and the classes that give typical ones.
//
// An amplifier is an internal source e behind its output resistance Ro:
//
//	g = de/dt = clip( ωt·(v+ − v− + Vos) − ωa·(e − Vref), ±SR ),   ωt = 2π·GainBandwidth, ωa = ωt/OpenLoopGain
//
// with e held between limits that come from the swing at its load.
package amplifier

// Model is one amplifier's data. +Inf stands for "without limit", 0 for "none".
type Model struct {
	Class                 string
	GainBandwidth         float64 // Hz, 1e3 to 1e10; +Inf: ideal
	OpenLoopGain          float64 // V/V, 10 to 1e9; +Inf: ideal
	SlewRate              float64 // V/s; +Inf: no limit
	SwingHigh             float64 // V below the supply that the output reaches with SwingLoad to mid-supply
	SwingLow              float64 // V above ground that the output reaches with SwingLoad to mid-supply
	SwingLoad             float64 // Ω; +Inf: unloaded
	OutputResistance      float64 // Ω, open loop
	CurrentSource         float64 // A the output can source; +Inf: no limit
	CurrentSink           float64 // A the output can sink; +Inf: no limit
	CommonModeHigh        float64 // V below the supply up to which both inputs work; negative: above the supply
	CommonModeLow         float64 // V above ground down to which both inputs work; negative: below ground
	Offset                float64 // V at the input
	BiasCurrent           float64 // A into each input (positive: into the amplifier)
	NoiseVoltage          float64 // V/√Hz
	NoiseVoltageCorner    float64 // Hz, of the 1/f part
	NoiseCurrent          float64 // A/√Hz
	NoiseCurrentCorner    float64 // Hz
	PhaseMargin           float64 // degrees that a follower of it has left, from a second pole, 5 to 90; for loop margins alone
	SupplyRejection       float64 // V/V, of the supply at the input, up to SupplyRejectionCorner; +Inf: none passes
	SupplyRejectionCorner float64 // Hz, from which on it falls by 20 dB a decade
}
