package circuit

import (
	"math"
	"slices"

	"midrail/bilinear"
	"midrail/chain"
	"midrail/chain/amplifier"
)

// Ground is the node that every voltage is told against.
const Ground = 0

// Network is a whole chain as one circuit. It is not changed once built and may be shared by goroutines.
type Network struct {
	Chain      *chain.Chain
	Nodes      []string    // names; node 0 is ground
	Resistors  []Component // ohms
	Capacitors []Component // farads
	Amplifiers []Amplifier
	Inputs     []Input // in the order of the chain's inputs
	Diodes     []Diode
	Supply     int   // node of the supply, behind its resistance
	feed       int   // node that the supply's voltage is set at; Supply where it has no resistance
	Output     int   // node that the converter samples
	stages     []int // output node of each of the chain's stages
	biases     []int // node of each of the chain's biases
}

// Component is a resistor or a capacitor between two nodes.
type Component struct {
	Part chain.Part // Value is above 0 and finite
	A, B int        // nodes
	// Virtual is set on what stands for no component: it has no noise.
	Virtual bool
}

// Diode is a diode of a clamp.
type Diode struct {
	Stage          int // index of the stage
	Anode, Cathode int
	Forward        float64 // V
}

// Amplifier is an amplifier between its nodes.
type Amplifier struct {
	Name             string // the stage, or the bias it buffers
	Entry            string // name in the chain's amplifiers
	Stage            int    // index of the stage; -1 for a bias buffer
	Model            amplifier.Model
	Plus, Minus, Out int             // nodes
	Load             float64         // Ω, that the output sees at 0 Hz; +Inf: none
	Low, High        float64         // V, limits of the internal source at the nominal supply, with the load to mid-supply
	Terms            []bilinear.Term // what else adds to v+ − v−
	supply           float64         // V
	// Virtual is set on what stands for no amplifier: the integrators of a transfer function.
	Virtual bool
}

// Input is where one of the chain's inputs feeds the network.
type Input struct {
	Node int // where the stages take it from: behind the source resistance, or the capsule's drain
	// Drive is the node whose voltage the sound sets. For an electret it stands alone, and its "voltage" is the
	// current in A that the sound adds to the drain's.
	Drive int
	Scale float64 // what a sample of 1.0 is at Drive: V, or A for an electret (negative: pressure raises the drain)
	Clip  float64 // V at Drive, the largest peak that a microphone passes; +Inf: no limit
}

// Drives are the inputs u of the network in their order: the supply, then each of the chain's inputs.
// u[SupplyInput] is in V; u[SoundInput(i)] in V, or in A for an electret.
const SupplyInput = 0

// SoundInput returns the index in u of the chain's i-th input.
func SoundInput(i int) int { return 1 + i }

// New builds the network of a chain, which is one that [chain.Read] returned. It panics where an input has yet to be
// calibrated.
func New(c *chain.Chain) *Network {
	w := &wiring{
		Network: &Network{Chain: c, Nodes: []string{"ground"}},
		named:   map[string]int{},
	}
	w.Supply = w.node("supply")
	w.feed = w.Supply
	if r := c.Supply.Resistance; r > 0 {
		w.feed = w.node("supply source")
		w.resistor(chain.Part{Name: "supply.resistance", Key: "resistance", Unit: chain.Ohm, Value: r, Pos: c.Supply.Pos}, w.feed, w.Supply)
	}
	w.wireBiases()
	w.wireInputs()
	w.wireStages()
	w.Output = w.named[c.Converter.From]
	if cp := c.Converter.PinCapacitor; cp > 0 {
		w.capacitor(chain.Part{Name: "converter.pin_capacitor", Key: "pin_capacitor", Unit: chain.Farad, Value: cp, Pos: c.Converter.Pos}, w.Output, Ground)
	}
	for k := range w.Amplifiers {
		if a := &w.Amplifiers[k]; !a.Virtual {
			a.Load = w.load(k)
			a.limit(c.Supply.Voltage)
		}
	}
	return w.Network
}

// Reach returns how far the output goes in V with its load to mid-supply, the internal source being at its limits.
func (a *Amplifier) Reach() (low, high float64) {
	middle := a.supply / 2
	at := func(e float64) float64 { return middle + (e-middle)/(1+a.Model.OutputResistance/a.Load) }
	return at(a.Low), at(a.High)
}

// limit sets the limits of the internal source on a supply in V.
func (a *Amplifier) limit(supply float64) {
	a.supply = supply
	a.Low, a.High = a.Model.Limits(supply, a.Load)
}

// load returns what the k-th amplifier's output sees at 0 Hz in Ω, with every other loop closed: by the divider that it
// is with the output resistance. +Inf where there is no output resistance to tell by, or no load.
func (n *Network) load(k int) float64 {
	a := &n.Amplifiers[k]
	m := n.equations(0)
	row := len(n.Nodes) - 1 + k
	m.clearRow(row)
	m.add(row, row, 1)
	var e lu
	if a.Model.OutputResistance == 0 || !e.factor(m) { // where a node has no voltage at rest, that is told later
		return math.Inf(1)
	}
	b := make([]complex128, m.size)
	b[row] = 1
	e.solve(b)
	share := real(b[a.Out-1])
	if !(share > 0 && share < 1) {
		return math.Inf(1)
	}
	return a.Model.OutputResistance * share / (1 - share)
}

// StageNode returns the output node of the chain's i-th stage.
func (n *Network) StageNode(i int) int { return n.stages[i] }

// BiasNode returns the node of the chain's i-th bias.
func (n *Network) BiasNode(i int) int { return n.biases[i] }

// NodeOf returns the node that carries the given input, stage or bias, or the supply, and whether there is one.
func (n *Network) NodeOf(name string) (int, bool) {
	if name == "supply" {
		return n.Supply, true
	}
	for i := range n.Chain.Stages {
		if n.Chain.Stages[i].Name == name {
			return n.stages[i], true
		}
	}
	for i := range n.Chain.Inputs {
		if n.Chain.Inputs[i].Name == name {
			return n.Inputs[i].Node, true
		}
	}
	for i := range n.Chain.Biases {
		if n.Chain.Biases[i].Name == name {
			return n.biases[i], true
		}
	}
	return 0, false
}

// Description returns the network for [bilinear.Compile]. Its inputs are those that [SupplyInput] and
// [SoundInput] number.
func (n *Network) Description() bilinear.Network {
	d := bilinear.Network{Nodes: len(n.Nodes), Drives: []int{n.feed}}
	for _, r := range n.Resistors {
		d.Resistors = append(d.Resistors, bilinear.Branch{A: r.A, B: r.B, Value: r.Part.Value})
	}
	for _, c := range n.Capacitors {
		d.Capacitors = append(d.Capacitors, bilinear.Branch{A: c.A, B: c.B, Value: c.Part.Value})
	}
	for i, in := range n.Inputs {
		d.Drives = append(d.Drives, in.Drive)
		if ch := &n.Chain.Inputs[i]; ch.Kind == chain.Electret {
			d.Capsules = append(d.Capsules, bilinear.Capsule{Drain: in.Node, Minimum: ch.MinimumVoltage, Current: ch.Current, Signal: SoundInput(i)})
		}
	}
	for _, a := range n.Amplifiers {
		m := a.Model
		d.Amplifiers = append(d.Amplifiers, bilinear.Amplifier{
			Plus: a.Plus, Minus: a.Minus, Out: a.Out,
			GainBandwidth: m.GainBandwidth, OpenLoopGain: m.OpenLoopGain,
			OutputResistance: m.OutputResistance, SlewRate: m.SlewRate,
			HighRail: n.feed, LowRail: Ground,
			HighMargin: n.Chain.Supply.Voltage - a.High, LowMargin: a.Low,
			// The supply's rejection is of its changes.
			Offset: m.Offset - a.rejection()*n.Chain.Supply.Voltage, Terms: a.Terms,
		})
	}
	for _, x := range n.Diodes {
		d.Diodes = append(d.Diodes, bilinear.Diode{Anode: x.Anode, Cathode: x.Cathode, Forward: x.Forward})
	}
	return d
}

// rejection is what of the supply's voltage stands at the amplifier's input.
func (a *Amplifier) rejection() float64 {
	if a.Virtual {
		return 0
	}
	return 1 / a.Model.SupplyRejection
}

// RestInputs returns u with the supply at its voltage and every input silent.
func (n *Network) RestInputs() []float64 {
	u := make([]float64, 1+len(n.Inputs))
	u[SupplyInput] = n.Chain.Supply.Voltage
	for i := range n.Chain.Inputs {
		if n.Chain.Inputs[i].Kind == chain.Microphone {
			u[SoundInput(i)] = n.Chain.Inputs[i].Rest
		}
	}
	return u
}

// Powered returns the network for its rest point: beside the inputs of [Network.Description] it has the amplifiers'
// bias currents, and u holds what all of them are with the supply at its voltage and every sound silent.
func (n *Network) Powered() (d bilinear.Network, u []float64) {
	d, u = n.Description(), n.RestInputs()
	for _, a := range n.Amplifiers {
		if a.Model.BiasCurrent == 0 {
			continue
		}
		for _, pin := range [...]int{a.Plus, a.Minus} {
			d.Currents = append(d.Currents, bilinear.Current{From: pin, To: Ground})
			u = append(u, a.Model.BiasCurrent)
		}
	}
	return d, u
}

// Rest returns the operating point: every node's voltage with the capacitors open and the inputs silent, within
// the limits of amplifiers and capsules, offsets and bias currents included.
// The error is of type [chain.Faults] where the network has none: a node without a DC path.
func (n *Network) Rest() (bilinear.Operating, error) {
	at, err := bilinear.SolveRest(n.Powered())
	if err != nil {
		return bilinear.Operating{}, n.fault(err)
	}
	return at, nil
}

// posOf returns the place in the chain file of a part that touches the node.
func (n *Network) posOf(node int) chain.Pos {
	for _, list := range [...][]Component{n.Capacitors, n.Resistors} {
		for _, c := range list {
			if c.A == node || c.B == node {
				return c.Part.Pos
			}
		}
	}
	return chain.Pos{}
}

// With returns a copy of the network in which the named part has another value in ohms or farads, and whether there
// is such a part.
func (n *Network) With(part string, value float64) (*Network, bool) {
	other := *n
	for _, list := range [...]*[]Component{&other.Resistors, &other.Capacitors} {
		for i := range *list {
			if (*list)[i].Part.Name == part {
				*list = slices.Clone(*list)
				(*list)[i].Part.Value = value
				return &other, true
			}
		}
	}
	return nil, false
}

// WithNoiseOf returns a copy of the network in which the amplifiers of an entry have the noise of another model.
func (n *Network) WithNoiseOf(entry string, m amplifier.Model) *Network {
	other := *n
	other.Amplifiers = slices.Clone(n.Amplifiers)
	for i := range other.Amplifiers {
		if a := &other.Amplifiers[i]; a.Entry == entry {
			a.Model.NoiseVoltage, a.Model.NoiseVoltageCorner = m.NoiseVoltage, m.NoiseVoltageCorner
			a.Model.NoiseCurrent, a.Model.NoiseCurrentCorner = m.NoiseCurrent, m.NoiseCurrentCorner
		}
	}
	return &other
}

// Varied returns a copy of the network in which every resistor and capacitor has its value times a factor, by its place
// in Resistors and Capacitors, every amplifier its gain-bandwidth times that of its entry, and the supply its voltage
// times one. Limits and a converter that follows the supply go with it.
func (n *Network) Varied(resistors, capacitors []float64, gainBandwidth map[string]float64, supply float64) *Network {
	other, c := *n, *n.Chain
	other.Chain = &c
	c.Supply.Voltage *= supply
	if c.Converter.HighIsSupply {
		c.Converter.High = c.Supply.Voltage
	}
	other.Resistors, other.Capacitors, other.Amplifiers = slices.Clone(n.Resistors), slices.Clone(n.Capacitors), slices.Clone(n.Amplifiers)
	for i := range other.Resistors {
		other.Resistors[i].Part.Value *= resistors[i]
	}
	for i := range other.Capacitors {
		other.Capacitors[i].Part.Value *= capacitors[i]
	}
	for i := range other.Amplifiers {
		a := &other.Amplifiers[i]
		if by, there := gainBandwidth[a.Entry]; there && !a.Virtual {
			a.Model.GainBandwidth *= by
		}
		if !a.Virtual {
			a.limit(c.Supply.Voltage)
		}
	}
	return &other
}
