package render

import (
	"math"

	"midrail/bilinear"
	"midrail/chain"
	"midrail/chain/circuit"
)

// same is the difference in V below which the limited run is back on the linear one.
const same = 1e-12

// simulator steps the circuit through chunks: a limited run, and beside it, from the moment they part until they
// meet again, the linear run. The layers of the linear chain are taken separately, by blocks of one conversion.
type simulator struct {
	n       *circuit.Network
	circuit *bilinear.Compiled
	plan    Plan

	limited, linear, before *bilinear.State
	parted                  bool      // whether linear is a run of its own
	u, uLinear              []float64 // inputs of the network
	y, yLinear              []float64 // watched nodes
	lastOut                 float64   // y at the output one step before

	watch    []int       // watched nodes
	indexOf  map[int]int // node → index in watch
	ports    []int       // nodes at the converter: the output and, if another, the one it shares with
	layers   []*layerRun
	stages   []excursion // of each stage's output, limited run
	asked    []excursion // of each amplifier's internal source, linear run
	watchers watchers
	list     eventList
}

// excursion is how far a voltage went from rest.
type excursion struct{ lowest, highest float64 } // V, ≤ 0 and ≥ 0

func (e *excursion) see(v float64) {
	if v < e.lowest {
		e.lowest = v
	} else if v > e.highest {
		e.highest = v
	}
}

// layerRun is one input's linear way to the converter for one layer.
type layerRun struct {
	pick  func(*chunk) [][]float64
	into  func(*conversions) [][]float64
	input int
	lift  *bilinear.Lifted
	state []float64
	after []float64 // room for the next state
	y     []float64
}

// conversions is what the circuit gives at the converter's instants over a chunk, in volts from rest. Each layer
// has a row for each of the simulator's ports.
type conversions struct {
	first                             int64
	wanted, folded, inBand, outOfBand [][]float64
	overload                          [][]float64
	slope                             []float64 // V/s of the limited run at the output
	supply                            []float64 // V from nominal
	end                               int64     // as chunk.end
}

func newSimulator(n *circuit.Network, at bilinear.Operating, plan Plan, settle settling) (*simulator, error) {
	s := &simulator{n: n, plan: plan, indexOf: map[int]int{}}
	see := func(node int) {
		if _, ok := s.indexOf[node]; !ok {
			s.indexOf[node] = len(s.watch)
			s.watch = append(s.watch, node)
		}
	}
	see(n.Output)
	s.ports = []int{n.Output}
	if settle.from > 0 {
		see(settle.from)
		s.ports = append(s.ports, settle.from)
	}
	for i := range n.Chain.Stages {
		see(n.StageNode(i))
	}
	for _, a := range n.Amplifiers {
		see(a.Plus)
		see(a.Minus)
		see(a.Out)
	}
	var err error
	s.circuit, err = bilinear.Compile(n.Description(), at, plan.Rate, s.watch)
	if err != nil {
		return nil, err
	}
	s.limited, s.linear, s.before = s.circuit.Start(), s.circuit.Start(), s.circuit.Start()
	inputs := 1 + len(n.Inputs)
	s.u, s.uLinear = make([]float64, inputs), make([]float64, inputs)
	s.y, s.yLinear = make([]float64, len(s.watch)), make([]float64, len(s.watch))
	s.stages = make([]excursion, len(n.Chain.Stages))
	s.asked = make([]excursion, len(n.Amplifiers))
	s.watchers = newWatchers(n, at, s.indexOf, 1/plan.Rate, &s.list)
	s.newLayers()
	return s, nil
}

// portIndices returns where the ports stand among the watched nodes.
func (s *simulator) portIndices() []int {
	var at []int
	for _, node := range s.ports {
		at = append(at, s.indexOf[node])
	}
	return at
}

// newLayers prepares the linear way of every input that carries a signal, for each layer.
func (s *simulator) newLayers() {
	supplied := make([]bool, 1+len(s.n.Inputs)) // inputs with an interferer
	for _, x := range s.n.Chain.Interferers {
		in := circuit.SupplyInput
		for i := range s.n.Chain.Inputs {
			if s.n.Chain.Inputs[i].Name == x.Into {
				in = circuit.SoundInput(i)
			}
		}
		supplied[in] = true
	}
	add := func(input int, pick func(*chunk) [][]float64, into func(*conversions) [][]float64) {
		l := s.circuit.Lift(s.plan.Steps, input, s.portIndices())
		s.layers = append(s.layers, &layerRun{pick: pick, into: into, input: input, lift: l, state: make([]float64, l.States()), after: make([]float64, l.States()), y: make([]float64, len(s.ports))})
	}
	for u, interfered := range supplied {
		if u != circuit.SupplyInput {
			add(u, func(c *chunk) [][]float64 { return c.wanted }, func(o *conversions) [][]float64 { return o.wanted })
			add(u, func(c *chunk) [][]float64 { return c.folded }, func(o *conversions) [][]float64 { return o.folded })
		}
		if interfered {
			add(u, func(c *chunk) [][]float64 { return c.inBand }, func(o *conversions) [][]float64 { return o.inBand })
			add(u, func(c *chunk) [][]float64 { return c.outOfBand }, func(o *conversions) [][]float64 { return o.outOfBand })
		}
	}
}

// run steps the circuit through a chunk, whose length is a whole number of conversions.
func (s *simulator) run(c *chunk, o *conversions) {
	s.runLayers(c, o)
	steps := s.plan.Steps
	for k := range o.slope {
		for j := k * steps; j < (k+1)*steps; j++ {
			s.step(c, j)
		}
		o.slope[k] = (s.y[0] - s.lastOut) * s.plan.Rate
		o.supply[k] = s.u[circuit.SupplyInput]
		for p, node := range s.ports {
			o.overload[p][k] = 0
			if s.parted {
				i := s.indexOf[node]
				o.overload[p][k] = s.y[i] - s.yLinear[i]
			}
		}
	}
	o.end = c.end
}

func (s *simulator) runLayers(c *chunk, o *conversions) {
	for _, rows := range [...][][]float64{o.wanted, o.folded, o.inBand, o.outOfBand} {
		for _, row := range rows {
			clear(row)
		}
	}
	steps := s.plan.Steps
	for _, l := range s.layers {
		sound := l.pick(c)[l.input]
		if sound == nil {
			continue
		}
		into := l.into(o)
		for k := range o.slope {
			l.lift.Step(l.state, sound[k*steps:(k+1)*steps], l.y, l.after)
			for p, v := range l.y {
				into[p][k] += v
			}
		}
	}
}

// step takes the limited run, and the linear one where they have parted, to the chunk's j-th step.
func (s *simulator) step(c *chunk, j int) {
	clipped := s.inputs(c, j)
	s.lastOut = s.y[0]
	var touched bool
	if !s.parted {
		s.before.CopyFrom(s.limited)
		touched = s.circuit.Step(s.limited, s.u, s.y) || clipped
		if touched {
			s.parted = true
			s.linear, s.before = s.before, s.linear
			s.circuit.StepLinear(s.linear, s.uLinear, s.yLinear)
		}
	} else {
		touched = s.circuit.Step(s.limited, s.u, s.y) || clipped
		s.circuit.StepLinear(s.linear, s.uLinear, s.yLinear)
		if !touched && s.circuit.Distance(s.limited, s.linear) < same {
			s.parted = false
			s.limited.CopyFrom(s.linear)
			copy(s.y, s.yLinear)
		}
	}
	linear := s.limited
	if s.parted {
		linear = s.linear
	}
	for i := range s.asked {
		s.asked[i].see(linear.E[i])
	}
	for i := range s.stages {
		s.stages[i].see(s.y[s.indexOf[s.n.StageNode(i)]])
	}
	s.watchers.see(s, linear, c.first+int64(j), touched)
}

// inputs sets u to what the sound and the interferers make at the chunk's j-th step, and reports whether a
// microphone passed less than it was given.
func (s *simulator) inputs(c *chunk, j int) (clipped bool) {
	for i := range s.u {
		v := 0.
		for _, layer := range [...][][]float64{c.wanted, c.folded, c.inBand, c.outOfBand} {
			if layer[i] != nil {
				v += layer[i][j]
			}
		}
		s.u[i], s.uLinear[i] = v, v
	}
	for i, in := range s.n.Inputs {
		if u := circuit.SoundInput(i); math.Abs(s.u[u]) > in.Clip {
			s.watchers.tooLoud(i, c.first+int64(j), math.Abs(s.u[u])/in.Clip)
			s.u[u] = math.Copysign(in.Clip, s.u[u])
			clipped = true
		}
	}
	return clipped
}

// watchers are all that is watched for overload.
type watchers struct {
	amplifiers []amplifierWatch
	capsules   []capsuleWatch
	loud       []*watcher // for each of the chain's inputs
	union      int64      // steps at which any limit held
}

type amplifierWatch struct {
	high, low, slew, commonMode, current *watcher
	rest, lowest, highest                float64 // V of the internal source: at rest, and its limits from rest
	plus, minus, out                     int     // indices of the watched nodes
	commonLow, commonHigh                float64 // V from rest that (+) may reach, and (−) with it
	minusLow, minusHigh                  float64
	restCurrent, conductance             float64 // A out of the output at rest; S, 1/Ro
	source, sink                         float64 // A
	slewStep                             float64 // V, the slew rate times half a step
}

type capsuleWatch struct {
	cutOff, saturated *watcher
	element           int // of State.Pieces
	input             int // of u
	current           float64
}

func newWatchers(n *circuit.Network, at bilinear.Operating, indexOf map[int]int, dt float64, list *eventList) watchers {
	var w watchers
	one := func(owner string, kind EventKind) *watcher {
		return &watcher{owner: owner, kind: kind, list: list, dt: dt}
	}
	for k, a := range n.Amplifiers {
		m := a.Model
		supply := n.Chain.Supply.Voltage
		e := at.Sources[k]
		aw := amplifierWatch{
			high: one(a.Name, UpperLimit), low: one(a.Name, LowerLimit), slew: one(a.Name, Slew),
			commonMode: one(a.Name, CommonMode), current: one(a.Name, OutputCurrent),
			rest: e, lowest: a.Low - e, highest: a.High - e,
			plus: indexOf[a.Plus], minus: indexOf[a.Minus], out: indexOf[a.Out],
			commonLow: m.CommonModeLow - at.Volts[a.Plus], commonHigh: supply - m.CommonModeHigh - at.Volts[a.Plus],
			minusLow: m.CommonModeLow - at.Volts[a.Minus], minusHigh: supply - m.CommonModeHigh - at.Volts[a.Minus],
			source: m.CurrentSource, sink: m.CurrentSink,
			slewStep: m.SlewRate * dt / 2,
		}
		if m.OutputResistance > 0 {
			aw.conductance = 1 / m.OutputResistance
			aw.restCurrent = (e - at.Volts[a.Out]) / m.OutputResistance
		}
		w.amplifiers = append(w.amplifiers, aw)
	}
	element := len(n.Amplifiers)
	for i := range n.Chain.Inputs {
		in := &n.Chain.Inputs[i]
		w.loud = append(w.loud, one(in.Name, TooLoud))
		if in.Kind == chain.Electret {
			w.capsules = append(w.capsules, capsuleWatch{
				cutOff: one(in.Name, CutOff), saturated: one(in.Name, Saturated),
				element: element, input: circuit.SoundInput(i), current: in.Current,
			})
			element++
		}
	}
	return w
}

func (w *watchers) tooLoud(input int, step int64, ratio float64) { w.loud[input].touch(step, ratio) }

// see looks at the state after a step.
func (w *watchers) see(s *simulator, linear *bilinear.State, step int64, touched bool) {
	if touched {
		w.union++
		for k := range w.amplifiers {
			a := &w.amplifiers[k]
			switch s.limited.Pieces[k] {
			case bilinear.High:
				a.high.touch(step, linear.E[k]/a.highest)
			case bilinear.Low:
				a.low.touch(step, linear.E[k]/a.lowest)
			case bilinear.SlewUp, bilinear.SlewDown:
				a.slew.touch(step, math.Abs(linear.E[k]-linear.H[k])/a.slewStep)
			}
		}
		for i := range w.capsules {
			c := &w.capsules[i]
			switch s.limited.Pieces[c.element] {
			case bilinear.CutOff:
				c.cutOff.touch(step, math.Abs(s.u[c.input])/c.current)
			case bilinear.Saturated:
				c.saturated.touch(step, 0)
			}
		}
	}
	for k := range w.amplifiers {
		a := &w.amplifiers[k]
		if p, m := s.y[a.plus], s.y[a.minus]; p > a.commonHigh || p < a.commonLow || m > a.minusHigh || m < a.minusLow {
			a.commonMode.touch(step, 0)
		}
		if i := a.restCurrent + (s.limited.E[k]-s.y[a.out])*a.conductance; i > a.source || -i > a.sink {
			a.current.touch(step, math.Max(i/a.source, -i/a.sink))
		}
	}
}

// results closes every watcher and returns those that saw something.
func (w *watchers) results() []Overload {
	var all []*watcher
	for i := range w.amplifiers {
		a := &w.amplifiers[i]
		all = append(all, a.high, a.low, a.slew, a.commonMode, a.current)
	}
	for i := range w.capsules {
		all = append(all, w.capsules[i].cutOff, w.capsules[i].saturated)
	}
	all = append(all, w.loud...)
	var seen []Overload
	for _, one := range all {
		if o := one.result(); o.Events > 0 {
			seen = append(seen, o)
		}
	}
	return seen
}
