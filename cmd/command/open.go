package command

import (
	"fmt"
	"io"
	"math"
	"os"

	"midrail/bilinear"
	"midrail/chain"
	"midrail/chain/circuit"
)

// mostChain is the largest chain file that is read.
const mostChain = 1 << 20

// open reads a chain file, or the demo's for an empty path, with the values of set changed, prints its warnings,
// calibrates its inputs and builds its network. A network that has no rest point, or runs away from it, is a fault.
func (s streams) open(path string, set []string) (*circuit.Network, error) {
	name, data := demoName, demoChain
	if path != "" {
		file, err := os.Open(path)
		if err != nil {
			return nil, err
		}
		defer file.Close()
		name = path
		if data, err = io.ReadAll(io.LimitReader(file, mostChain+1)); err != nil {
			return nil, err
		}
	}
	c, err := chain.Read(name, data, set)
	if err != nil {
		return nil, err
	}
	for _, w := range c.Warnings {
		fmt.Fprintln(s.err, "warning:", w)
	}
	if err := s.calibrate(c); err != nil {
		return nil, err
	}
	n := circuit.New(c)
	if err := stable(n); err != nil {
		return nil, err
	}
	return n, nil
}

// stable refuses a circuit without a rest point, and one that runs away from it.
func stable(n *circuit.Network) error {
	at, err := n.Rest()
	if err != nil {
		return err
	}
	c, err := bilinear.Compile(n.Description(), at, 1e6, nil)
	if err != nil {
		return err
	}
	growing := 0
	for _, p := range c.Poles() {
		if real(p) > 1e-9*math.Hypot(real(p), imag(p)) {
			growing++
		}
	}
	switch {
	case growing%2 == 1:
		return chain.Faults{{File: n.Chain.File, Text: "the circuit latches: an amplifier's feedback is positive and it runs to a limit", Remedy: "look at gains above 1 around a loop"}}
	case growing > 0:
		return chain.Faults{{File: n.Chain.File, Text: "the circuit oscillates by itself", Remedy: "look at gains around a loop and at loads on amplifiers' outputs"}}
	}
	return nil
}
