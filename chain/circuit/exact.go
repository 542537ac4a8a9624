package circuit

import (
	"math"
	"math/cmplx"

	"midrail/chain"
)

// Exact is the network's small-signal response at one frequency: its nodal equations, factored.
// It may be shared by goroutines.
type Exact struct {
	n  *Network
	lu lu
}

// At returns the network's equations at f ≥ 0 Hz, factored. It panics where they are singular, which they are at
// no frequency for a network that has a rest point.
func (n *Network) At(f float64) *Exact {
	e := &Exact{n: n}
	if !e.lu.factor(n.equations(f)) {
		panic("circuit: singular equations")
	}
	return e
}

// Feedback returns the share β of the k-th amplifier's internal source that comes back to its inputs at f Hz, with the
// loop opened there and every other one closed: β = −(v+ − v−)/e.
func (n *Network) Feedback(k int, f float64) complex128 {
	m := n.equations(f)
	row := len(n.Nodes) - 1 + k
	m.clearRow(row)
	m.add(row, row, 1)
	var e lu
	if !e.factor(m) {
		panic("circuit: singular equations")
	}
	b := make([]complex128, m.size)
	b[row] = 1
	e.solve(b)
	at := func(node int) complex128 {
		if node == Ground {
			return 0
		}
		return b[node-1]
	}
	return at(n.Amplifiers[k].Minus) - at(n.Amplifiers[k].Plus)
}

// HeldSupply returns the network's equations at f Hz with the supply's node held still, factored.
func (n *Network) HeldSupply(f float64) *Exact {
	m := n.equations(f)
	m.clearRow(n.Supply - 1)
	m.add(n.Supply-1, n.Supply-1, 1)
	e := &Exact{n: n}
	if !e.lu.factor(m) {
		panic("circuit: singular equations")
	}
	return e
}

// SupplyTerm returns what of the supply stands at the k-th amplifier's input at f Hz: V a V.
func (n *Network) SupplyTerm(k int, f float64) complex128 {
	a := &n.Amplifiers[k]
	if a.Virtual || math.IsInf(a.Model.SupplyRejection, 1) {
		return 0
	}
	gain := complex(1/a.Model.SupplyRejection, 0)
	if corner := a.Model.SupplyRejectionCorner; !math.IsInf(corner, 1) {
		rise := complex(0, f/(a.Model.SupplyRejection*corner))
		gain += rise / (1 + rise)
	}
	return gain
}

// equations returns the matrix of the network's equations at f Hz.
func (n *Network) equations(f float64) matrix {
	s := complex(0, 2*math.Pi*f)
	nodes := len(n.Nodes) - 1 // unknowns: the nodes but ground, then each amplifier's e
	size := nodes + len(n.Amplifiers)
	m := newMatrix(size)
	admit := func(a, b int, y complex128) {
		if a != Ground {
			m.add(a-1, a-1, y)
		}
		if b != Ground {
			m.add(b-1, b-1, y)
		}
		if a != Ground && b != Ground {
			m.add(a-1, b-1, -y)
			m.add(b-1, a-1, -y)
		}
	}
	for _, r := range n.Resistors {
		admit(r.A, r.B, complex(1/r.Part.Value, 0))
	}
	for _, c := range n.Capacitors {
		admit(c.A, c.B, s*complex(c.Part.Value, 0))
	}
	for k, a := range n.Amplifiers {
		row := nodes + k
		m.add(row, row, s*complex(1/(2*math.Pi*a.Model.GainBandwidth), 0)+complex(1/a.Model.OpenLoopGain, 0))
		if a.Plus != Ground {
			m.add(row, a.Plus-1, -1)
		}
		if a.Minus != Ground {
			m.add(row, a.Minus-1, 1)
		}
		for _, t := range a.Terms {
			if t.Node != Ground {
				m.add(row, t.Node-1, complex(-t.Gain, 0))
			}
		}
		if ro := a.Model.OutputResistance; ro > 0 {
			m.add(a.Out-1, a.Out-1, complex(1/ro, 0))
			m.add(a.Out-1, row, complex(-1/ro, 0))
		} else {
			m.clearRow(a.Out - 1)
			m.add(a.Out-1, a.Out-1, 1)
			m.add(a.Out-1, row, -1)
		}
	}
	for i, in := range n.Inputs {
		if n.Chain.Inputs[i].Kind == chain.Electret { // its drive's "voltage" is a current drawn from the drain
			m.add(in.Node-1, in.Drive-1, 1)
		}
	}
	for u := 0; u <= len(n.Inputs); u++ {
		node := n.driveNode(u)
		m.clearRow(node - 1)
		m.add(node-1, node-1, 1)
	}
	return m
}

// driveNode returns the node that input u of the network sets.
func (n *Network) driveNode(u int) int {
	if u == SupplyInput {
		return n.feed
	}
	return n.Inputs[u-1].Drive
}

// FromInput returns every node's voltage (ground's is 0) for 1 V, or 1 A for an electret, at input u of the
// network, as [SupplyInput] and [SoundInput] number them.
func (e *Exact) FromInput(u int) []complex128 {
	b := make([]complex128, e.lu.size)
	b[e.n.driveNode(u)-1] = 1
	e.lu.solve(b)
	return append([]complex128{0}, b[:len(e.n.Nodes)-1]...)
}

// Into is how every source in the network reaches one node at one frequency.
type Into struct {
	n *Network
	y []complex128
}

// Into returns the transfers into the node, by one solve of the transposed equations.
func (e *Exact) Into(node int) Into {
	b := make([]complex128, e.lu.size)
	if node != Ground {
		b[node-1] = 1
	}
	e.lu.solveTransposed(b)
	return Into{n: e.n, y: b}
}

// Input returns volts at the node for 1 V, or 1 A for an electret, at input u of the network.
func (t Into) Input(u int) complex128 { return t.y[t.n.driveNode(u)-1] }

// Current returns volts at the node for 1 A that a source carries out of node from and into node to.
// A driven node holds its voltage against any current.
func (t Into) Current(from, to int) complex128 { return t.injected(to) - t.injected(from) }

func (t Into) injected(node int) complex128 {
	if node == Ground || t.n.held(node) {
		return 0
	}
	return t.y[node-1]
}

// held tells whether a source of no resistance sets the node's voltage.
func (n *Network) held(node int) bool {
	for u := 0; u <= len(n.Inputs); u++ {
		if n.driveNode(u) == node {
			return true
		}
	}
	for _, a := range n.Amplifiers {
		if a.Out == node && a.Model.OutputResistance == 0 {
			return true
		}
	}
	return false
}

// AmplifierInput returns volts at the node for 1 V in series with the (+) input of the k-th amplifier.
func (t Into) AmplifierInput(k int) complex128 { return t.y[len(t.n.Nodes)-1+k] }

// Gain returns 20·log10|h| in dB; −Inf for 0.
func Gain(h complex128) float64 { return 20 * math.Log10(cmplx.Abs(h)) }
