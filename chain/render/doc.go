// Package render runs recordings through a chain in the time domain and gives back, at the converter's instants,
// the sound it hears as layers that sum to it exactly.
//
// Symbols and units: ft, the track's rate; fc, the converter's rate; fi = M·fc, the internal rate, all in Hz.
// Layers are in the converter's full scale: ±1.0 is half its span about its middle.
//
//	rest           the constant that the chain rests at
//	wanted         the linear chain's output for the track below fc/2
//	fold-back      the linear chain's output for the track at and above fc/2, which lands below it
//	interference   the linear chain's output for interferers, and what they do to a ratiometric span
//	overload       what the limits change: limited run minus linear run, its own folding included
//	noise          thermal, amplifier and converter noise, drawn with its folded spectrum; aperture jitter
//	rounding       codes minus the voltage before them: never more than half a step
//	heard          the codes
//
// Every layer is a multiple of 2⁻⁴⁴ of full scale, so that
//
//	rest + wanted + fold-back + interference + overload + noise + rounding = heard
//
// in any order, to the last bit. The bytes depend on the chain, the tracks and the seed alone.
package render
