package circuit

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"

	"midrail/bilinear"
	"midrail/chain"
)

const (
	// mostUnknowns is the largest circuit that is solved, in nodes, amplifiers, inputs, diodes and capacitors, which are those of
	// some thirty amplifier stages: time goes with
	// the cube of it, memory with the square.
	mostUnknowns = 300
	// mostGain is the largest coefficient of a transfer function once its frequencies are told against their geometric mean.
	mostGain = 1e9
	// slowestPole and fastestPole bound that mean, in Hz.
	slowestPole, fastestPole = 1e-6, 1e10
)

// Check tells of a circuit that cannot be answered for: one too large, one that two amplifiers drive at one node, one
// whose equations cannot be told apart or have no rest point, and one that runs away from it. The error is of type
// [chain.Faults].
func (n *Network) Check() error {
	if err := n.checkSize(); err != nil {
		return err
	}
	at, err := n.Rest()
	if err != nil {
		return err
	}
	c, err := n.Compile(n.Description(), at, 1e6, nil)
	if err != nil {
		return err
	}
	for _, f := range [...]float64{0, 1e-4, 1, 1e3, 1e6, 1e9} {
		var e lu
		regular := e.factor(n.equations(f))
		if regular {
			into := (&Exact{n: n, lu: e}).Into(n.Output)
			for u := range 1 + len(n.Inputs) {
				h := size1(into.Input(u))
				regular = regular && !math.IsNaN(h) && !math.IsInf(h, 0)
			}
		}
		if !regular {
			return n.apart("the circuit's equations have no one solution")
		}
	}
	growing := 0
	for _, p := range c.Poles() {
		if real(p) > 1e-9*math.Hypot(real(p), imag(p)) {
			growing++
		}
	}
	switch {
	case growing%2 == 1:
		return n.faulted(chain.Pos{}, "the circuit latches: an amplifier's feedback is positive and it runs to a limit", "look at gains above 1 around a loop")
	case growing > 0:
		return n.faulted(chain.Pos{}, "the circuit oscillates by itself", "look at gains around a loop and at loads on amplifiers' outputs")
	}
	return nil
}

// checkSize tells of what no solving is to be tried on.
func (n *Network) checkSize() error {
	if all := len(n.Nodes) + len(n.Amplifiers) + len(n.Inputs) + len(n.Diodes) + len(n.Capacitors); all > mostUnknowns {
		return n.faulted(chain.Pos{}, fmt.Sprintf("the circuit has %d nodes, amplifiers and capacitors, more than the %d that are solved as a whole", all, mostUnknowns), "split the chain")
	}
	drives := map[int]string{}
	for _, a := range n.Amplifiers {
		if other, twice := drives[a.Out]; twice {
			return n.faulted(n.stagePos(a.Stage), fmt.Sprintf("two amplifiers, of %q and %q, drive the node “%s”", other, a.Name, n.Nodes[a.Out]), "part their outputs by a resistor")
		}
		drives[a.Out] = a.Name
		largest := 0.
		for _, t := range a.Terms {
			largest = max(largest, math.Abs(t.Gain)) // NaN stays
		}
		corner := a.Model.GainBandwidth
		if !(largest <= mostGain) || a.Virtual && !(corner >= slowestPole && corner <= fastestPole) {
			name := strings.TrimSuffix(a.Name, " state")
			at := chain.Pos{}
			if s := n.Chain.StageNamed(name); s != nil {
				at = s.Pos
			}
			return n.faulted(at, fmt.Sprintf("stage %q: the coefficients of its transfer function are too far apart", name), "check their powers of ten, highest power of s first")
		}
	}
	return nil
}

func (n *Network) stagePos(i int) chain.Pos {
	if i < 0 {
		return chain.Pos{}
	}
	return n.Chain.Stages[i].Pos
}

// faulted makes a fault of the chain file; of no place in it, of its first.
func (n *Network) faulted(at chain.Pos, text, remedy string) error {
	if at == (chain.Pos{}) {
		at = chain.Pos{Line: 1, Column: 1}
	}
	return chain.Faults{{File: n.Chain.File, Pos: at, Text: text, Remedy: remedy}}
}

// Compile is [bilinear.Compile] of a description of the network, whose faults name the chain's parts.
func (n *Network) Compile(d bilinear.Network, at bilinear.Operating, rate float64, watch []int) (*bilinear.Compiled, error) {
	c, err := bilinear.Compile(d, at, rate, watch)
	if err != nil {
		return nil, n.fault(err)
	}
	return c, nil
}

// Unsolved is the fault of a circuit that could not be solved at some steps.
func (n *Network) Unsolved(steps int64) error {
	return n.apart(fmt.Sprintf("at %d steps the circuit's limits have no common solution", steps))
}

// apart makes the fault of equations that cannot be solved: it names the two parts at one node whose impedances, at 1 kHz,
// are the furthest apart.
func (n *Network) apart(text string) error {
	type end struct {
		part      *chain.Part
		impedance float64
	}
	ends := map[int][]end{}
	for _, list := range [...][]Component{n.Resistors, n.Capacitors} {
		for i := range list {
			c := &list[i]
			z := c.Part.Value
			if c.Part.Unit == chain.Farad {
				z = 1 / (2 * math.Pi * 1e3 * z)
			}
			if c.Virtual {
				continue
			}
			for _, node := range [...]int{c.A, c.B} {
				ends[node] = append(ends[node], end{&c.Part, z})
			}
		}
	}
	var small, large end
	worst := 0.
	for node := 1; node < len(n.Nodes); node++ {
		list := ends[node]
		if len(list) == 0 {
			continue
		}
		by := func(a, b end) int {
			switch {
			case a.impedance < b.impedance:
				return -1
			case a.impedance > b.impedance:
				return 1
			}
			return 0
		}
		low, high := slices.MinFunc(list, by), slices.MaxFunc(list, by)
		if ratio := high.impedance / low.impedance; ratio > worst {
			worst, small, large = ratio, low, high
		}
	}
	if worst <= 1 {
		return n.faulted(chain.Pos{}, text, "look at gains around a loop")
	}
	return n.faulted(large.part.Pos, fmt.Sprintf("%s: %s and %s meet at a node and are %.0e apart", text, small.part.Name, large.part.Name, worst),
		"bring the values nearer to each other")
}

// fault turns what package bilinear says of a network into faults that name the owner's parts.
func (n *Network) fault(err error) error {
	var path *bilinear.NoPathError
	if !errors.As(err, &path) {
		return n.apart("the circuit cannot be solved: " + strings.TrimPrefix(err.Error(), "bilinear: "))
	}
	names := make([]string, len(path.Nodes))
	var at chain.Pos
	for i, node := range path.Nodes {
		names[i] = "“" + n.Nodes[node] + "”"
		if at.Line == 0 {
			at = n.posOf(node)
		}
	}
	text := "node " + names[0] + " has no DC path"
	switch more := len(names) - mostNodesTold; {
	case more > 0:
		text = fmt.Sprintf("nodes %s and %d more have no DC path", strings.Join(names[:mostNodesTold], ", "), more)
	case len(names) > 1:
		text = "nodes " + strings.Join(names, ", ") + " have no DC path"
	}
	return n.faulted(at, text, "add a resistor to ground or to a bias")
}

// mostNodesTold is how many nodes a fault names.
const mostNodesTold = 10
