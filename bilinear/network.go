package bilinear

import "fmt"

// Ground is the node that voltages are told against.
const Ground = 0

// Network describes a circuit: nodes 0 (ground) to Nodes−1, parts between them, and the inputs u that drive it.
// Input p < len(Drives) is the voltage of node Drives[p] in V; input len(Drives)+i is the current in A that source
// Currents[i] carries.
type Network struct {
	Nodes      int
	Resistors  []Branch // Ω, above 0
	Capacitors []Branch // F, above 0
	Drives     []int    // nodes whose voltage is prescribed; not ground, each at most once
	Currents   []Current
	Amplifiers []Amplifier
	Capsules   []Capsule
	Diodes     []Diode
}

// Branch is a resistor or a capacitor between two nodes.
type Branch struct {
	A, B  int
	Value float64
}

// Current is a current source: its current leaves node From and enters node To.
type Current struct{ From, To int }

// Amplifier is an internal source e behind an output resistance:
//
//	g = de/dt = clip( ωt·(v+ − v− + Offset) − ωa·(e − Vref), ±SlewRate ),   ωt = 2π·GainBandwidth, ωa = ωt/OpenLoopGain
//	v(LowRail) + LowMargin ≤ e ≤ v(HighRail) − HighMargin,   Vref midway between the two
//
// Where the limits cross, as on a supply that is not up yet, e is held midway between the rails.
type Amplifier struct {
	Plus, Minus, Out      int     // nodes
	GainBandwidth         float64 // Hz; +Inf: ideal
	OpenLoopGain          float64 // V/V; +Inf: ideal
	OutputResistance      float64 // Ω; 0: e is the output node's voltage
	SlewRate              float64 // V/s; +Inf: no limit
	HighRail, LowRail     int     // driven nodes, or ground
	HighMargin, LowMargin float64 // V
	Offset                float64 // V
	Terms                 []Term  // what else adds to v+ − v−
}

// Term is a share of a node's voltage.
type Term struct {
	Node int
	Gain float64
}

// Capsule is an electret capsule's transistor: it draws Current + u[Signal] from Drain to ground, never less than
// nothing, and never more than leaves v(Drain) at Minimum.
type Capsule struct {
	Drain   int
	Minimum float64 // V
	Current float64 // A, above 0
	Signal  int     // index of an input u
}

// Diode carries no current while v(Anode) − v(Cathode) < Forward, and beyond it as much as drops the rest across
// Resistance.
type Diode struct {
	Anode, Cathode int
	Forward        float64 // V
	Resistance     float64 // Ω, 0 or more
}

// Operating is a network's operating point.
type Operating struct {
	Volts   []float64 // V, of every node
	Sources []float64 // e of each amplifier in V, then the drain current of each capsule and the current of each diode in A
}

// NoPathError says that nodes have no resistive path to ground, to a driven node or to an amplifier's output, so
// that they have no voltage at rest.
type NoPathError struct{ Nodes []int }

func (e *NoPathError) Error() string {
	return fmt.Sprintf("bilinear: nodes %v have no DC path", e.Nodes)
}

// SingularError says that a network's equations have no one solution.
type SingularError struct{ What string }

func (e *SingularError) Error() string { return "bilinear: " + e.What }

// Piece is the law that an element follows at a step.
type Piece uint8

// The pieces. Linear is every element's law as long as no limit is touched.
const (
	Linear    Piece = iota
	High            // amplifier: at its upper limit
	Low             // amplifier: at its lower limit
	SlewUp          // amplifier: rising as fast as it can
	SlewDown        // amplifier: falling as fast as it can
	CutOff          // capsule: no drain current
	Saturated       // capsule: drain at its lowest voltage
	Off             // diode: not conducting, where it does at rest
	On              // diode: conducting, where it does not at rest
)

func (n *Network) elements() int { return len(n.Amplifiers) + len(n.Capsules) + len(n.Diodes) }

func (n *Network) inputs() int { return len(n.Drives) + len(n.Currents) }

// check panics where the description breaks its own rules.
func (n *Network) check() {
	node := func(is ...int) {
		for _, i := range is {
			if i < 0 || i >= n.Nodes {
				panic("bilinear: no such node")
			}
		}
	}
	positive := func(list []Branch) {
		for _, b := range list {
			node(b.A, b.B)
			if !(b.Value > 0) {
				panic("bilinear: part without a positive value")
			}
		}
	}
	positive(n.Resistors)
	positive(n.Capacitors)
	rail := map[int]bool{Ground: true}
	for _, d := range n.Drives {
		node(d)
		if rail[d] {
			panic("bilinear: node driven twice")
		}
		rail[d] = true
	}
	for _, c := range n.Currents {
		node(c.From, c.To)
	}
	for _, a := range n.Amplifiers {
		node(a.Plus, a.Minus, a.Out)
		if !rail[a.HighRail] || !rail[a.LowRail] {
			panic("bilinear: amplifier's rail is not driven")
		}
		for _, t := range a.Terms {
			node(t.Node)
		}
		if a.OutputResistance == 0 {
			if rail[a.Out] {
				panic("bilinear: node driven twice")
			}
		}
	}
	for _, c := range n.Capsules {
		node(c.Drain)
		if c.Signal < 0 || c.Signal >= n.inputs() {
			panic("bilinear: no such input")
		}
	}
	for _, d := range n.Diodes {
		node(d.Anode, d.Cathode)
	}
}
