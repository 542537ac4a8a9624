// Package circuit makes one network of a whole chain: nodes, parts, amplifiers and sources. Nothing is cut at a
// stage's output, so passive stages load each other, a filter loads the amplifier before it, and stages that
// share a bias divider talk through it.
//
// Symbols and units: voltages in V against ground, currents in A, frequencies f in Hz, s = j2πf in rad/s.
// The network's unknowns are the node voltages v and each amplifier's internal source e, behind its output
// resistance Ro (see package [midrail/chain/amplifier]). Nodal analysis writes, at s,
//
//	free node:     Σ (v − v')·(1/R + sC) + Σ currents drawn = 0
//	driven node:   v = u
//	amplifier:     (s/ωt + 1/A0)·e − (v+ − v−) = Vos,   Vout = e where Ro = 0, else (Vout − e)/Ro in the node's sum
//
// and this is the exact small-signal response, the reference that the time-stepped network is held against.
// Ho, Ruehli, Brennan, "The modified nodal approach to network analysis", IEEE Trans. CAS-22 (1975).
package circuit
