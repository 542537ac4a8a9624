package circuit

import (
	"fmt"
	"math"

	"midrail/bilinear"
	"midrail/chain"
	"midrail/chain/amplifier"
)

// wiring is a network under construction.
type wiring struct {
	*Network
	named map[string]int // node of each input, stage and bias
}

func (w *wiring) node(name string) int {
	w.Nodes = append(w.Nodes, name)
	return len(w.Nodes) - 1
}

func (w *wiring) resistor(p chain.Part, a, b int) {
	w.Resistors = append(w.Resistors, Component{Part: p, A: a, B: b})
}

func (w *wiring) capacitor(p chain.Part, a, b int) {
	w.Capacitors = append(w.Capacitors, Component{Part: p, A: a, B: b})
}

func (w *wiring) amplifier(owner string, stage int, entry string, plus, minus, out int) {
	a := w.Chain.AmplifierNamed(entry)
	one := Amplifier{Name: owner, Entry: entry, Stage: stage, Model: a.Model, Plus: plus, Minus: minus, Out: out}
	one.Terms = w.rejection(owner, a.Model)
	w.Amplifiers = append(w.Amplifiers, one)
}

// rejection returns what of the supply stands at an amplifier's input: 1/SupplyRejection of it, rising from its corner
// fc on until all of it does, at fh = SupplyRejection·fc. The rise is the supply through a capacitor onto a resistor:
//
//	(1/PSR)·(1 + s/ωc) up to fh,   s/ωc/PSR = s/ωh ≈ s·RC/(1 + s·RC)
func (w *wiring) rejection(owner string, m amplifier.Model) []bilinear.Term {
	if math.IsInf(m.SupplyRejection, 1) {
		return nil
	}
	terms := []bilinear.Term{{Node: w.Supply, Gain: 1 / m.SupplyRejection}}
	if math.IsInf(m.SupplyRejectionCorner, 1) {
		return terms
	}
	const r = 1e12 // so large that it loads no supply
	slope := w.node(owner + " supply slope")
	c := 1 / (2 * math.Pi * m.SupplyRejection * m.SupplyRejectionCorner * r)
	w.Capacitors = append(w.Capacitors, Component{Part: chain.Part{Name: owner + " supply slope.c", Unit: chain.Farad, Value: c}, A: w.Supply, B: slope, Virtual: true})
	w.Resistors = append(w.Resistors, Component{Part: chain.Part{Name: owner + " supply slope.r", Unit: chain.Ohm, Value: r}, A: slope, B: Ground, Virtual: true})
	return append(terms, bilinear.Term{Node: slope, Gain: 1})
}

func (w *wiring) wireBiases() {
	for i := range w.Chain.Biases {
		b := &w.Chain.Biases[i]
		tap := w.node(b.Name)
		w.resistor(b.Top, w.Supply, tap)
		w.resistor(b.Bottom, tap, Ground)
		if b.Bypass != nil {
			w.capacitor(*b.Bypass, tap, Ground)
		}
		out := tap
		if b.Buffer != "" {
			w.Nodes[tap] = b.Name + " divider"
			out = w.node(b.Name)
			w.amplifier(b.Name, -1, b.Buffer, tap, out, out)
		}
		w.named[b.Name] = out
		w.biases = append(w.biases, out)
	}
}

func (w *wiring) wireInputs() {
	for i := range w.Chain.Inputs {
		in := &w.Chain.Inputs[i]
		if in.FullScale == 0 {
			panic("circuit: an input is not calibrated")
		}
		peak := in.FullScale * math.Sqrt2 // V or Pa of a sample of 1.0
		var one Input
		switch in.Kind {
		case chain.Line:
			one = w.wireSource(in, in.SourceResistance, "source_resistance")
			one.Scale, one.Clip = peak, math.Inf(1)
		case chain.Microphone:
			one = w.wireSource(in, in.OutputResistance, "output_resistance")
			one.Scale, one.Clip = in.Sensitivity*peak, in.Sensitivity*in.MaximumLevel*math.Sqrt2
		case chain.Electret:
			one = w.wireElectret(in, peak)
		default:
			panic("circuit: input of a kind that package chain does not have")
		}
		w.Inputs = append(w.Inputs, one)
		w.named[in.Name] = one.Node
	}
}

// wireSource wires a voltage source behind a resistance, which may be 0.
func (w *wiring) wireSource(in *chain.Input, resistance float64, key string) Input {
	node := w.node(in.Name)
	drive := node
	if resistance > 0 {
		drive = w.node(in.Name + " source")
		w.resistor(chain.Part{Name: in.Name + "." + key, Key: key, Unit: chain.Ohm, Value: resistance, Pos: in.Pos}, drive, node)
	}
	return Input{Node: node, Drive: drive}
}

// wireElectret wires the capsule's load, its supply filter and what lies across its drain. Sensitivity is given
// at the rated load, which the output resistance shunts: S = gm·(rated_load ∥ output_resistance).
func (w *wiring) wireElectret(in *chain.Input, peak float64) Input {
	drain := w.node(in.Name)
	feed := w.Supply
	if f := in.SupplyFilter; f != nil {
		feed = w.node(in.Name + " feed")
		w.resistor(f.R, w.Supply, feed)
		w.capacitor(f.C, feed, Ground)
	}
	w.resistor(in.Load, feed, drain)
	rated := in.RatedLoad
	if r := in.OutputResistance; !math.IsInf(r, 1) {
		w.resistor(chain.Part{Name: in.Name + ".output_resistance", Key: "output_resistance", Unit: chain.Ohm, Value: r, Pos: in.Pos}, drain, Ground)
		rated = rated * r / (rated + r)
	}
	return Input{
		Node: drain, Drive: w.node(in.Name + " sound"),
		Scale: -in.Sensitivity / rated * peak, Clip: math.Inf(1),
	}
}

func (w *wiring) wireStages() {
	c := w.Chain
	for i := range c.Stages {
		s := &c.Stages[i]
		if s.Kind.Name == "select" {
			w.stages = append(w.stages, 0)
			continue
		}
		out := w.node(s.Name)
		w.named[s.Name] = out
		w.stages = append(w.stages, out)
	}
	// A select is no node of its own: it is the one it picks, through other selects if need be.
	for range c.Stages {
		for i := range c.Stages {
			if s := &c.Stages[i]; s.Kind.Name == "select" {
				w.named[s.Name] = w.named[s.Pick]
				w.stages[i] = w.named[s.Pick]
			}
		}
	}
	for i := range c.Stages {
		s := &c.Stages[i]
		wire, ok := wirings[s.Kind.Name]
		if !ok {
			panic("circuit: no wiring for stage kind " + s.Kind.Name)
		}
		wire(&stageWiring{wiring: w, s: s, index: i, out: w.stages[i]})
	}
}

// stageWiring is one stage being wired into the network.
type stageWiring struct {
	*wiring
	s     *chain.Stage
	index int
	out   int
}

// wirings has the wiring of each stage kind; [chain.Kinds] has their keys.
var wirings = map[string]func(*stageWiring){
	"inverting":                  wireInverting,
	"summer":                     wireSummer,
	"non-inverting":              wireNonInverting,
	"follower":                   wireFollower,
	"sallen-key low-pass":        wireSallenKeyLowPass,
	"sallen-key high-pass":       wireSallenKeyHighPass,
	"multiple-feedback low-pass": wireMultipleFeedback,
	"rc low-pass":                wireRCLowPass,
	"rc high-pass":               wireRCHighPass,
	"divider":                    wireDivider,
	"biased coupling":            wireBiasedCoupling,
	"passive sum":                wirePassiveSum,
	"clamp":                      wireClamp,
	"transfer function":          wireTransferFunction,
	"network":                    wireNetwork,
	"select":                     func(*stageWiring) {},
}

func (w *stageWiring) from() int { return w.named[w.s.From[0]] }

func (w *stageWiring) bias() int { return w.named[w.s.Bias] }

// end returns the node that "ground" or "bias" names in the stage; an empty word is ground.
func (w *stageWiring) end(word string) int {
	if word == "bias" && w.s.Bias != "" {
		return w.bias()
	}
	return Ground
}

// inner adds a node within the stage.
func (w *stageWiring) inner(what string) int { return w.node(w.s.Name + " " + what) }

// amp adds the stage's amplifier; out is the stage's output.
func (w *stageWiring) amp(plus, minus int) {
	w.amplifier(w.s.Name, w.index, w.s.Amplifier, plus, minus, w.out)
}

// r adds the resistor with the key, which the kind requires.
func (w *stageWiring) r(key string, a, b int) {
	if !w.optionalR(key, a, b) {
		panic(fmt.Sprintf("circuit: stage %q has no %s", w.s.Name, key))
	}
}

// c adds the capacitor with the key, which the kind requires.
func (w *stageWiring) c(key string, a, b int) {
	if !w.optionalC(key, a, b) {
		panic(fmt.Sprintf("circuit: stage %q has no %s", w.s.Name, key))
	}
}

func (w *stageWiring) optionalR(key string, a, b int) bool {
	p, ok := w.s.Part(key)
	if ok {
		w.resistor(p, a, b)
	}
	return ok
}

func (w *stageWiring) optionalC(key string, a, b int) bool {
	p, ok := w.s.Part(key)
	if ok {
		w.capacitor(p, a, b)
	}
	return ok
}

// coupled returns the node behind the coupling capacitor with the key, or the node itself where there is none.
func (w *stageWiring) coupled(key string, from int) int {
	p, ok := w.s.Part(key)
	if !ok {
		return from
	}
	behind := w.inner("behind " + key)
	w.capacitor(p, from, behind)
	return behind
}

func wireInverting(w *stageWiring) {
	minus := w.inner("(−)")
	w.r("r_in", w.coupled("c_in", w.from()), minus)
	w.r("r_f", minus, w.out)
	w.optionalC("c_f", minus, w.out)
	w.amp(w.bias(), minus)
}

func wireSummer(w *stageWiring) {
	minus := w.inner("(−)")
	w.legs(minus)
	w.r("r_f", minus, w.out)
	w.optionalC("c_f", minus, w.out)
	w.amp(w.bias(), minus)
}

// legs wires each leg of the stage: from – c – r – to.
func (w *stageWiring) legs(to int) {
	for _, leg := range w.s.Legs {
		from := w.named[leg.From]
		if leg.C != nil {
			behind := w.inner("leg " + leg.From + " behind c")
			w.capacitor(*leg.C, from, behind)
			from = behind
		}
		w.resistor(leg.R, from, to)
	}
}

func wireNonInverting(w *stageWiring) {
	plus := w.coupled("c_in", w.from())
	w.optionalR("r_bias", plus, w.bias())
	minus := w.inner("(−)")
	w.r("r_f", minus, w.out)
	w.optionalC("c_f", minus, w.out)
	w.r("r_g", minus, w.coupled("c_g", w.end(w.s.Leg)))
	w.amp(plus, minus)
}

func wireFollower(w *stageWiring) {
	plus := w.coupled("c_in", w.from())
	w.optionalR("r_bias", plus, w.bias())
	w.amp(plus, w.out)
}

func wireSallenKeyLowPass(w *stageWiring) {
	middle, plus := w.inner("middle"), w.inner("(+)")
	w.r("r_1", w.from(), middle)
	w.r("r_2", middle, plus)
	w.c("c_1", middle, w.out)
	w.c("c_2", plus, Ground)
	minus := w.out
	if _, gain := w.s.Part("r_a"); gain {
		minus = w.inner("(−)")
		w.r("r_a", minus, w.bias())
		w.r("r_b", minus, w.out)
	}
	w.amp(plus, minus)
}

func wireSallenKeyHighPass(w *stageWiring) {
	middle, plus := w.inner("middle"), w.inner("(+)")
	w.c("c_1", w.from(), middle)
	w.c("c_2", middle, plus)
	w.r("r_1", middle, w.out)
	w.r("r_2", plus, w.bias())
	w.amp(plus, w.out)
}

func wireMultipleFeedback(w *stageWiring) {
	middle, minus := w.inner("middle"), w.inner("(−)")
	w.r("r_1", w.from(), middle)
	w.r("r_2", middle, w.out)
	w.r("r_3", middle, minus)
	w.c("c_1", minus, w.out)
	w.c("c_2", middle, Ground)
	w.amp(w.bias(), minus)
}

func wireRCLowPass(w *stageWiring) {
	w.r("r", w.from(), w.out)
	w.c("c", w.out, Ground)
}

func wireRCHighPass(w *stageWiring) {
	w.c("c", w.from(), w.out)
	w.r("r", w.out, w.end(w.s.To))
}

func wireDivider(w *stageWiring) {
	w.r("r_top", w.from(), w.out)
	w.optionalC("c_top", w.from(), w.out)
	to := w.end(w.s.To)
	w.r("r_bottom", w.out, to)
	w.optionalC("c_bottom", w.out, to)
}

func wireBiasedCoupling(w *stageWiring) {
	w.c("c", w.from(), w.out)
	w.r("top", w.Supply, w.out)
	w.r("bottom", w.out, Ground)
}

func wirePassiveSum(w *stageWiring) {
	w.legs(w.out)
	w.optionalR("r_load", w.out, Ground)
}

func wireClamp(w *stageWiring) {
	w.r("r", w.from(), w.out)
	if w.s.ToSupply {
		w.Diodes = append(w.Diodes, Diode{Stage: w.index, Anode: w.out, Cathode: w.Supply, Forward: w.s.Forward})
	}
	if w.s.ToGround {
		w.Diodes = append(w.Diodes, Diode{Stage: w.index, Anode: Ground, Cathode: w.out, Forward: w.s.Forward})
	}
}

// wireTransferFunction wires a function of s as a chain of integrators in front of the stage's amplifier (the
// controllable form). With p = s/ω0, ω0 = |a0/an|^(1/n), and coefficients αi, βi of p for an αn of 1:
//
//	xi' = ω0·x(i+1),   xn' = ω0·(u − Σ αi·x(i+1)),   y = Σ βi·x(i+1) + βn·(u − Σ αi·x(i+1))
func wireTransferFunction(w *stageWiring) {
	order := len(w.s.Denominator) - 1
	a := make([]float64, order+1) // lowest first
	b := make([]float64, order+1)
	for i, x := range w.s.Denominator {
		a[order-i] = x
	}
	for i, x := range w.s.Numerator {
		b[len(w.s.Numerator)-1-i] = x
	}
	w0 := 1.
	if order > 0 {
		w0 = math.Pow(math.Abs(a[0]/a[order]), 1/float64(order))
	}
	top := a[order] * math.Pow(w0, float64(order))
	for i := range a {
		a[i] *= math.Pow(w0, float64(i)) / top
		b[i] *= math.Pow(w0, float64(i)) / top
	}
	reference := w.end("bias")
	if w.s.Bias == "" {
		reference = Ground
	}
	sound := func(gain float64) []bilinear.Term {
		return []bilinear.Term{{Node: w.from(), Gain: gain}, {Node: reference, Gain: -gain}}
	}
	x := make([]int, order)
	for i := range x {
		x[i] = w.inner(fmt.Sprintf("state %d", i+1))
	}
	output := append(sound(b[order]), bilinear.Term{Node: reference, Gain: 1})
	for i := range x {
		output = append(output, bilinear.Term{Node: x[i], Gain: b[i] - b[order]*a[i]})
		integrator := Amplifier{
			Name: w.s.Name + " state", Stage: -1, Out: x[i], Low: math.Inf(-1), High: math.Inf(1), Virtual: true,
			Model: amplifier.Model{GainBandwidth: w0 / (2 * math.Pi), OpenLoopGain: math.Inf(1), SlewRate: math.Inf(1),
				CurrentSource: math.Inf(1), CurrentSink: math.Inf(1), CommonModeHigh: math.Inf(-1), CommonModeLow: math.Inf(-1)},
		}
		if i+1 < order {
			integrator.Terms = []bilinear.Term{{Node: x[i+1], Gain: 1}}
		} else {
			integrator.Terms = sound(1)
			for j := range x {
				integrator.Terms = append(integrator.Terms, bilinear.Term{Node: x[j], Gain: -a[j]})
			}
		}
		w.Amplifiers = append(w.Amplifiers, integrator)
	}
	w.amp(Ground, w.out)
	last := &w.Amplifiers[len(w.Amplifiers)-1]
	last.Terms = append(last.Terms, output...)
	// Its (+) is no pin that has a range.
	last.Model.CommonModeHigh, last.Model.CommonModeLow = math.Inf(-1), math.Inf(-1)
}

func wireNetwork(w *stageWiring) {
	nodes := map[string]int{"in": w.from(), "out": w.out, "supply": w.Supply, "ground": Ground, "bias": w.end("bias")}
	at := func(name string) int {
		if _, ok := nodes[name]; !ok {
			nodes[name] = w.inner(name)
		}
		return nodes[name]
	}
	for _, b := range w.s.Branches {
		if b.Part.Unit == chain.Ohm {
			w.resistor(b.Part, at(b.Between[0]), at(b.Between[1]))
		} else {
			w.capacitor(b.Part, at(b.Between[0]), at(b.Between[1]))
		}
	}
	for i, u := range w.s.Uses {
		owner := w.s.Name
		if u.Output != "out" {
			owner = fmt.Sprintf("%s amplifier %d", w.s.Name, i+1)
		}
		w.amplifier(owner, w.index, u.Amplifier, at(u.Plus), at(u.Minus), at(u.Output))
	}
}
