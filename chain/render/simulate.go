package render

import (
	"math"

	"gonum.org/v1/gonum/blas/blas64"
	"gonum.org/v1/gonum/floats"

	"midrail/bilinear"
	"midrail/chain/circuit"
	"midrail/signals/resample"
)

const (
	// same is the difference in V below which the limited run is back on the linear one.
	same = 1e-12
	// margin is by how much less than a limit the bounds of a linear run must stay, which are of instants at least four to
	// a period of the tracks' highest frequency: 1/cos(π/4) is what may lie between them.
	margin = 1.42
	// blockBase is about how many base samples a block has.
	blockBase = 24
)

// simulator takes the circuit through chunks, block by block. Each lane has the linear circuit to itself, as a map from
// block to block; their sum is looked at where limits could be touched, and only through blocks in which they could the
// limited run is taken. What the limits change lives on as the difference of the limited run and the linear one.
type simulator struct {
	n       *circuit.Network
	circuit *bilinear.Compiled
	grid    grid
	bounds  []bilinear.Bounds
	clip    []float64 // of each input of u; +Inf: none
	always  bool      // take the limited run through every block

	elements   []element
	quantities int // that are read at each instant: first the watched nodes
	// reach bounds how far each can go over a block by the sizes of what makes it, the state and, of each input, what it is
	// given at the base rate and what in cells.
	reach   blas64.General
	sizes   []float64
	most    []float64      // how far each quantity can go in this block
	smooth  blas64.General // to the quantities' values, from the state and the middles of what the inputs are given
	middles []float64

	watch      []int // watched nodes
	indexOf    map[int]int
	stageIndex []int // of each stage's output among them
	ports      []int // indices of the nodes at the converter: the output and, if another, the one it shares with

	advanceState, inspectState blas64.General
	lanes                      []*laneRun
	inputs                     int
	coarse, fine               []inputMaps // of each input of u
	stairs                     []stairMaps
	cells                      []blas64.General // of each input with fine lanes or stairs, to the quantities

	linear, difference []float64 // states: the sum of the lanes'; limited minus linear
	parted             bool      // whether difference is not 0
	held               bool      // whether the last block touched a limit
	sums, fineSums     [][]float64
	cellMeans          [][]float64 // of each input with fine lanes or stairs
	inputMost          []float64   // V or A, how large each input of u gets in the block
	ripple             []float64   // V or A, by how much each is off its cells' means at most
	quick              []float64   // quantities × inputs: how far 1 of that takes a quantity within a cell at most
	deviations         []float64   // as sizes: of the difference, and of what the inputs are given from its middle
	level              []float64
	isRead             []bool    // of each quantity, in this block
	looked, moved      []float64 // readings of a block: of the linear run, and by how much the limited one differs
	change             []float64

	limited   *limiter // the limited run, in a block that is stepped
	touched   bool     // whether it touched a limit there
	u         []float64
	steps     [][]float64 // of each input, a cell's internal steps
	converted []float64

	stages   []excursion // of each stage's output, limited run
	asked    []excursion // of each amplifier's internal source, linear run
	watchers watchers
	list     eventList
	scope    *scope
	span     [2]float64 // V from rest at the output, the converter's ends
}

// laneRun is a lane's linear circuit.
type laneRun struct {
	*lane
	state, next []float64
	stair       stair // of the block
}

// conversions is what the circuit gives at the converter's instants over a chunk, in volts from rest. Each part has a
// row for each of the simulator's ports.
type conversions struct {
	first    int64
	parts    [parts][][]float64
	overload [][]float64
	slope    []float64 // V/s of the limited run at the output
	supply   []float64 // V from nominal
	end      int64     // as chunk.end
}

func newSimulator(n *circuit.Network, at bilinear.Operating, g grid, settle settling, lanes []*lane, plain bool) (*simulator, error) {
	s := &simulator{n: n, grid: g, indexOf: map[int]int{}, inputs: 1 + len(n.Inputs)}
	see := func(node int) int {
		if _, ok := s.indexOf[node]; !ok {
			s.indexOf[node] = len(s.watch)
			s.watch = append(s.watch, node)
		}
		return s.indexOf[node]
	}
	s.ports = []int{see(n.Output)}
	if settle.from > 0 {
		s.ports = append(s.ports, see(settle.from))
	}
	for i := range n.Chain.Stages {
		s.stageIndex = append(s.stageIndex, see(n.StageNode(i)))
	}
	for _, a := range n.Amplifiers {
		see(a.Plus)
		see(a.Minus)
		see(a.Out)
	}
	var err error
	s.circuit, err = n.Compile(n.Description(), at, g.plan.Rate, s.watch)
	if err != nil {
		return nil, err
	}
	s.bounds = s.circuit.Bounds()
	s.always = plain || s.circuit.RestsOnLimit()
	s.u = make([]float64, s.inputs)
	s.clip = make([]float64, s.inputs)
	s.clip[circuit.SupplyInput] = math.Inf(1)
	for i, in := range n.Inputs {
		s.clip[circuit.SoundInput(i)] = in.Clip
	}
	s.stages = make([]excursion, len(n.Chain.Stages))
	s.asked = make([]excursion, len(n.Amplifiers))
	top := 2 * g.plan.To * (1 - resample.PassBand) // what interpolation lets through
	for _, x := range n.Chain.Interferers {
		if x.Shape == "sine" {
			top = math.Max(top, x.Frequency)
		} else {
			top = math.Inf(1)
		}
	}
	s.layReadings(top)
	s.lift(lanes)
	s.limited, s.converted = newLimiter(s, plain), make([]float64, len(s.ports)+1)
	s.scope = newScope(s, at)
	s.watchers = newWatchers(n, at, s.indexOf, 1/g.plan.Rate, &s.list, s.scope)
	rest := at.Volts[n.Output]
	s.span = [2]float64{n.Chain.Converter.Low - rest, n.Chain.Converter.High - rest}
	return s, nil
}

// run takes the circuit through a chunk.
func (s *simulator) run(c *chunk, o *conversions) {
	o.first, o.end = c.first, c.end
	for p := range o.parts {
		for _, row := range o.parts[p] {
			clear(row)
		}
	}
	blocks := len(o.slope) / s.grid.conversions
	step := (c.first-1)*int64(s.grid.plan.Steps()) + 1
	for b := range blocks {
		s.block(c, o, b, step+int64(b*s.grid.steps))
	}
}

// block takes the circuit through the chunk's b-th block, whose first internal step is given.
func (s *simulator) block(c *chunk, o *conversions, b int, step int64) {
	s.gather(c, b, step)
	s.size()
	s.scope.open(step)
	near := s.look()
	first := b * s.grid.conversions
	stepped := near || s.held || s.always
	s.held = false
	if stepped {
		s.stepBlock(o, first, step)
	} else {
		clear(s.limited.state.Pieces)
		s.passBlock(o, first, step)
	}
	s.advanceLanes(c, o, b, stepped)
	if stepped {
		s.compare(o, first)
		s.held = s.touched
	}
	s.range_(o, first, step)
	s.scope.close(step + int64(s.grid.steps))
}

// range_ tells the scope of conversions beyond the converter's span.
func (s *simulator) range_(o *conversions, first int, step int64) {
	for k := range s.grid.conversions {
		if (o.first+int64(first+k))%int64(s.grid.plan.Instants) != 0 {
			continue
		}
		v := o.overload[0][first+k]
		for part := range o.parts {
			v += o.parts[part][0][first+k]
		}
		for _, end := range s.span {
			if ratio := v / end; ratio > 1 {
				s.scope.note("converter", ConverterRange, step+int64((k+1)*s.grid.plan.Steps())-1, ratio)
			}
		}
	}
}

// gather sums what the lanes add: their values over a block, whose first step is given, by input, and their states.
func (s *simulator) gather(c *chunk, b int, step int64) {
	clear(s.linear)
	for u := range s.inputs {
		clear(s.sums[u])
		clear(s.fineSums[u])
	}
	for i, l := range s.lanes {
		if l.from != none {
			continue
		}
		for k := range s.linear {
			s.linear[k] += l.state[k]
		}
		if l.stairs != nil {
			l.stairs.over(&l.stair, step, s.grid.steps)
			l.stair.scaleBy(l.scale)
			continue
		}
		sum := s.sums[l.input]
		if l.fine {
			sum = s.fineSums[l.input]
		}
		for k, v := range s.valuesOf(c, i, b) {
			sum[k] += v
		}
	}
}

// valuesOf returns a lane's values for the chunk's b-th block.
func (s *simulator) valuesOf(c *chunk, lane, b int) []float64 {
	if s.lanes[lane].fine {
		return c.lanes[lane][b*s.grid.steps : (b+1)*s.grid.steps]
	}
	return c.lanes[lane][b*s.grid.base : b*s.grid.base+s.grid.window()]
}

// passBlock takes the limited run through a block in which no limit is near: it differs from the linear run by what
// is left of the difference.
func (s *simulator) passBlock(o *conversions, first int, step int64) {
	for k := range s.asked {
		if s.widens(&s.asked[k], s.elements[k].source) {
			s.peaks(k)
		}
	}
	for k, q := range s.stageIndex {
		if s.widens(&s.stages[k], q) {
			linear, moved := s.read(q)
			for i, v := range linear {
				s.stages[k].see(v + moved[i])
			}
		}
	}
	s.watchBlock(step)
	for p := range s.ports {
		clear(o.overload[p][first : first+s.grid.conversions])
	}
	clear(o.slope[first : first+s.grid.conversions])
	if !s.parted {
		return
	}
	clear(s.change)
	bilinear.Apply(s.change, s.advanceState, s.difference)
	readings := s.change[len(s.difference):]
	for k := range s.grid.conversions {
		r := readings[k*(len(s.ports)+1):]
		for p := range s.ports {
			o.overload[p][first+k] = r[p]
		}
		o.slope[first+k] = (r[0] - r[len(s.ports)]) * s.grid.plan.Rate
	}
	copy(s.difference, s.change)
	s.settleDifference()
}

// settleDifference drops a difference that no longer is one.
func (s *simulator) settleDifference() {
	s.parted = s.circuit.Size(s.difference) >= same
	if !s.parted {
		clear(s.difference)
	}
}

// advanceLanes takes every lane through a block. In a block that was stepped the slope is known already.
func (s *simulator) advanceLanes(c *chunk, o *conversions, b int, stepped bool) {
	states := len(s.linear)
	first := b * s.grid.conversions
	for i, l := range s.lanes {
		clear(l.next)
		bilinear.Apply(l.next, s.advanceState, l.state[:states])
		switch {
		case l.stairs != nil:
			m := s.stairs[l.input].advance
			row := func(step int) []float64 { return m.Data[step*m.Stride : step*m.Stride+m.Cols] }
			floats.AddScaled(l.next, l.stair.from, row(0))
			for _, c := range l.stair.changes {
				floats.AddScaled(l.next, c.by, row(c.step))
			}
		case l.fine:
			bilinear.Apply(l.next, s.fine[l.input].advance, s.valuesOf(c, i, b))
		default:
			bilinear.Apply(l.next, s.coarse[l.input].advance, s.valuesOf(c, i, b))
		}
		rows, from := o.parts[l.part], [][]float64(nil)
		if l.from != none {
			from = o.parts[l.from]
		}
		for k := range s.grid.conversions {
			r := l.next[states+k*(len(s.ports)+1):]
			for p := range s.ports {
				rows[p][first+k] += r[p]
				if from != nil {
					from[p][first+k] -= r[p]
				}
			}
			if !stepped && from == nil {
				o.slope[first+k] += (r[0] - r[len(s.ports)]) * s.grid.plan.Rate
			}
		}
		l.state, l.next = l.next, l.state
	}
	for k := range s.grid.conversions {
		o.supply[first+k] = s.supplyAt(k)
	}
}

// supplyAt returns the supply's deviation at the block's k-th conversion.
func (s *simulator) supplyAt(k int) float64 {
	v := 0.
	if sum := s.sums[circuit.SupplyInput]; sum != nil {
		v += sum[s.grid.reach-1+(k+1)*s.grid.plan.Base]
	}
	if sum := s.fineSums[circuit.SupplyInput]; sum != nil {
		v += sum[(k+1)*s.grid.plan.Steps()-1]
	}
	for _, l := range s.lanes {
		if l.stairs != nil && l.input == circuit.SupplyInput {
			v += l.stair.at((k+1)*s.grid.plan.Steps() - 1)
		}
	}
	return v
}
