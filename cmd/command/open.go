package command

import (
	"fmt"
	"io"
	"os"

	"midrail/chain"
	"midrail/chain/circuit"
)

// mostChain is the largest chain file that is read.
const mostChain = 1 << 20

// open reads a chain file, or the demo's for an empty path, with the values of set changed, prints its warnings,
// calibrates its inputs and builds its network. A network that has no rest point, or runs away from it, is a fault.
func (s streams) open(path string, set []string) (*circuit.Network, error) {
	n, _, err := s.openText(path, set)
	return n, err
}

// openText opens a chain as open does, and returns its text too.
func (s streams) openText(path string, set []string) (*circuit.Network, []byte, error) {
	name, data := demoName, demoChain
	if path != "" {
		file, err := os.Open(path)
		if err != nil {
			return nil, nil, err
		}
		defer file.Close()
		name = path
		if data, err = io.ReadAll(io.LimitReader(file, mostChain+1)); err != nil {
			return nil, nil, err
		}
	}
	c, err := chain.Read(name, data, set)
	if err != nil {
		return nil, nil, err
	}
	for _, w := range c.Warnings {
		fmt.Fprintln(s.err, "warning:", w)
	}
	if err := s.calibrate(c); err != nil {
		return nil, nil, err
	}
	n := circuit.New(c)
	if err := n.Check(); err != nil {
		return nil, nil, err
	}
	return n, data, nil
}
