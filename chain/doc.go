// Package chain holds a front end as its owner describes it, and reads the chain file that it is described in.
//
// # Words
//
//	input       where sound enters: a line, an electret capsule, a microphone
//	stage       one step from input to converter; its kind says how its parts are connected
//	part        a component on the board: a resistor in Ω or a capacitor in F
//	bias        a divider across the supply, which makes the point that signals ride on
//	amplifier   an operational amplifier's data, which any number of stages and biases use
//	leg         one of several inputs of a summer or of a passive sum; or where the r_g of a non-inverting stage ends
//	converter   samples what the last stage gives
//	interferer  an unwanted signal
//	(+), (−)    the inputs of a stage's amplifier
//	a – b, a ∥ b  one after the other, side by side
//
// # Units and signs
//
// Values are in SI units: V, A, Ω, F, Hz, s, K, Pa. Levels are RMS values of a sine, whose peak is √2 times that; levels
// in dBFS and limits in dB stay so. Voltages are against ground. Full scale of a recording is a sine with peaks at
// ±1.0 (AES17), which the input's full_scale puts in volts or pascals; 0 dB SPL is 20 µPa (ISO 1683). Calibrate finds it
// in a recording of a tone of which a meter was read.
// "Below the supply" and "above ground" are positive towards the middle.
//
// # The chain file
//
// The file is TOML 1.0 in UTF-8, of 1 MiB at most, with at most 200 of each: inputs, stages, legs of a stage, biases,
// amplifiers, interferers. [Read] is strict: a key that is unknown, does nothing, is missing, or has a value of the wrong kind
// or out of the range that its field here states is a [Fault], with its place and what to do. All are told at once.
// Values are numbers in SI units or texts as package quantity reads them. A part is a value, or a table of value, ref
// (its reference on the board) and series (E3 to E192, in which it can be bought).
//
//	title, notes           free text
//	[supply]               voltage
//	[conditions]           temperature, noise_from; the table and both may be left out
//	[bias.NAME]            top, bottom; may have bypass, buffer (an amplifier)
//	[amplifier.NAME]       class; may have any figure of amplifier.Model
//	[input.NAME]           kind, full_scale or calibrate = { reading, track, from, to }, of which from and to may be
//	                       left out; may have channel; then
//	    line               may have source_resistance
//	    electret           sensitivity, rated_load, load, current; may have output_resistance, minimum_voltage,
//	                       supply_filter = { r, c }, self_noise or snr
//	    microphone         sensitivity; may have output_resistance, rest, maximum_level, self_noise or snr
//	[[stage]]              name, kind, from, and what its [Kind] takes
//	[[stage.input]]        from, r; may have c: a leg of the stage above
//	[converter]            from, bits, high (volts, or "supply"), rate or clock and divide; may have low,
//	                       sampling_capacitor with acquisition (and switch_resistance, shares_with), pin_capacitor,
//	                       enob, jitter
//	[[interferer]]         into (an input, or "supply"), level, frequency; may have shape; noise has bandwidth and may
//	                       be without frequency
//	[limits]               any of overload_time, fold_back, fold_back_below_wanted, interference, noise, room,
//	                       droop = { at, max }, settling
//
// Names are of 200 characters at most, without point, equals sign or control characters. Inputs, stages, biases and
// amplifiers share one set of names, in which supply, ground, mix, conditions, converter and limits are taken.
package chain
