// Package response answers how a chain treats each frequency: gain, phase and delay between any input and any stage,
// the figures that are read off a response, the natural frequencies, and the margins of every amplifier's loop.
//
// Gains are of the node's voltage for one unit at the input: 1 V for a line or the supply, 1 Pa for a microphone. All
// are exact solutions of the network; see package [midrail/chain/circuit].
package response
