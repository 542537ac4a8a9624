package rest

import (
	"math"
	"sort"

	"midrail/bilinear"
	"midrail/chain"
	"midrail/chain/circuit"
)

// Node is where a node rests.
type Node struct {
	Name      string
	Volts     float64
	Low, High float64 // V, limits of an amplifier's output; NaN where no amplifier drives the node
	Word      string  // what is wrong; mostly ""
}

// Capacitor is what stands across a capacitor at rest.
type Capacitor struct {
	Part     chain.Part
	Volts    float64 // across it, 0 or more
	Positive string  // node of its positive side
	Negative string
}

// Share is what one source moves the converter's input by.
type Share struct {
	Name  string
	Kind  string  // "offset" or "bias current"
	Volts float64 // at the converter, for the figure that the chain file or the class gives
	Gain  float64 // V at the converter for 1 V of offset, or for 1 A into the pin
}

// Slow is a natural frequency below the audible, and the part that makes it.
type Slow struct {
	Constant float64 // s
	Part     chain.Part
	Weight   float64 // relative change of the constant for one of the part's value: 1 where it makes it alone
}

// Rest is a chain without sound.
type Rest struct {
	Nodes      []Node
	Capacitors []Capacitor
	Supply     float64 // A, what dividers, capsules and loads draw from the supply; amplifiers' own supply current apart
	Shares     []Share // the largest first
	Slow       []Slow  // the slowest first
	Settling   Settling
}

// Find answers for a network.
func Find(n *circuit.Network) (*Rest, error) {
	at, err := n.Rest()
	if err != nil {
		return nil, err
	}
	r := &Rest{}
	sounds := map[int]bool{} // nodes that stand for an electret's current, not a voltage
	for i, in := range n.Inputs {
		sounds[in.Drive] = n.Chain.Inputs[i].Kind == chain.Electret
	}
	for _, a := range n.Amplifiers { // nodes that stand for no place on the board
		sounds[a.Out] = sounds[a.Out] || a.Virtual
	}
	for _, c := range n.Capacitors {
		sounds[c.B] = sounds[c.B] || c.Virtual
	}
	for i, name := range n.Nodes {
		if i != circuit.Ground && !sounds[i] {
			r.Nodes = append(r.Nodes, node(n, at, i, name))
		}
	}
	for _, c := range n.Capacitors {
		if c.Virtual {
			continue
		}
		a, b := c.A, c.B
		if at.Volts[a] < at.Volts[b] {
			a, b = b, a
		}
		r.Capacitors = append(r.Capacitors, Capacitor{Part: c.Part, Volts: at.Volts[a] - at.Volts[b], Positive: n.Nodes[a], Negative: n.Nodes[b]})
	}
	for _, x := range n.Resistors {
		if x.Part.Key == "resistance" {
			continue // the supply's own, through which all of it comes
		}
		switch n.Supply {
		case x.A:
			r.Supply += (at.Volts[x.A] - at.Volts[x.B]) / x.Part.Value
		case x.B:
			r.Supply += (at.Volts[x.B] - at.Volts[x.A]) / x.Part.Value
		}
	}
	r.Shares = shares(n)
	if r.Slow, err = slow(n, at); err != nil {
		return nil, err
	}
	r.Settling, err = Settle(n, at)
	return r, err
}

// node tells where a node rests, and what is wrong with it.
func node(n *circuit.Network, at bilinear.Operating, i int, name string) Node {
	x := Node{Name: name, Volts: at.Volts[i], Low: math.NaN(), High: math.NaN()}
	supply := n.Chain.Supply.Voltage
	for k, a := range n.Amplifiers {
		if a.Out != i {
			continue
		}
		x.Low, x.High = a.Reach()
		low, high := a.Model.CommonModeLow, supply-a.Model.CommonModeHigh
		plus := at.Volts[a.Plus]
		switch e := at.Sources[k]; {
		case e >= a.High && at.Volts[a.Plus] > at.Volts[a.Minus]:
			x.Word = "stuck on its upper limit: its (+) rests above what feedback can bring to its (−)"
		case e <= a.Low && at.Volts[a.Plus] < at.Volts[a.Minus]:
			x.Word = "stuck on its lower limit: its (+) rests below what feedback leaves at its (−)"
		case plus < low || plus > high:
			x.Word = "its inputs rest outside their common-mode range"
		}
	}
	return x
}

// shares tells what each amplifier's offset and bias currents move the converter's input by, at 0 Hz.
func shares(n *circuit.Network) []Share {
	into := n.At(0).Into(n.Output)
	var list []Share
	for k, a := range n.Amplifiers {
		if a.Virtual {
			continue
		}
		offset := real(into.AmplifierInput(k))
		list = append(list, Share{Name: a.Name, Kind: "offset", Gain: offset, Volts: offset * a.Model.Offset})
		for _, pin := range [...]struct {
			node int
			name string
		}{{a.Plus, " (+)"}, {a.Minus, " (−)"}} {
			gain := real(into.Current(pin.node, circuit.Ground))
			if gain != 0 {
				list = append(list, Share{Name: a.Name + pin.name, Kind: "bias current", Gain: gain, Volts: gain * a.Model.BiasCurrent})
			}
		}
	}
	sort.SliceStable(list, func(i, j int) bool { return math.Abs(list[i].Volts) > math.Abs(list[j].Volts) })
	return list
}

// audible is the frequency in Hz below which a pole is a slow one.
const audible = 20

// slow finds the natural frequencies below the audible and the capacitor that each hangs on most, by changing each by a
// hundredth and looking how far the pole moves.
func slow(n *circuit.Network, at bilinear.Operating) ([]Slow, error) {
	base, err := slowPoles(n, at)
	if err != nil {
		return nil, err
	}
	list := make([]Slow, len(base))
	for i, p := range base {
		list[i].Constant = 1 / p
	}
	for _, c := range n.Capacitors {
		if c.Virtual {
			continue
		}
		const change = 0.01
		with, _ := n.With(c.Part.Name, c.Part.Value*(1+change))
		moved, err := slowPoles(with, at)
		if err != nil {
			return nil, err
		}
		if len(moved) != len(base) {
			continue // one went over the edge
		}
		for i := range base {
			if w := math.Log(base[i]/moved[i]) / math.Log1p(change); w > list[i].Weight {
				list[i].Weight, list[i].Part = w, c.Part
			}
		}
	}
	return list, nil
}

// slowPoles returns the decay rates in 1/s of the real poles below the audible, the slowest first.
func slowPoles(n *circuit.Network, at bilinear.Operating) ([]float64, error) {
	c, err := n.Compile(n.Description(), at, 4800, nil)
	if err != nil {
		return nil, err
	}
	var list []float64
	for _, p := range c.Poles() {
		if d := -real(p); d > 0 && d < 2*math.Pi*audible && math.Abs(imag(p)) < 1e-6*d {
			list = append(list, d)
		}
	}
	sort.Float64s(list)
	return list, nil
}
