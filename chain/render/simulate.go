package render

import (
	"math"

	"gonum.org/v1/gonum/blas"
	"gonum.org/v1/gonum/blas/blas64"
	"gonum.org/v1/gonum/floats"

	"midrail/bilinear"
	"midrail/chain/circuit"
	"midrail/signals/resample"
)

const (
	// same is the difference in V below which the limited run is back on the linear one.
	same = 1e-12
	// margin is by how much less than a limit a linear run must stay at the instants that are looked at, which are at
	// least four to a period of the tracks' highest frequency: 1/cos(π/4) is what may lie between them.
	margin = 1.42
	// blockBase is about how many base samples a block has.
	blockBase = 24
)

// simulator takes the circuit through chunks, block by block. Each lane has the linear circuit to itself, as a map from
// block to block; their sum is looked at where limits could be touched, and only blocks in which they could are
// stepped, with the limits. What the limits change lives on as the difference of the limited run and the linear one.
type simulator struct {
	n       *circuit.Network
	circuit *bilinear.Compiled
	grid    grid
	bounds  []bilinear.Bounds
	clip    []float64 // of each input of u; +Inf: none
	always  bool      // step every block

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

// inputMaps are what a block's values at one input add.
type inputMaps struct {
	present          bool
	advance, inspect blas64.General // of fine lanes, cells has the latter
}

// stairMaps are what a change by 1 at a step of the block, which is a row, adds.
type stairMaps struct {
	present bool
	advance blas64.General
}

// addReach adds, for each quantity, the largest row sum of magnitudes of m over the block's instants to a column of reach
// or, by column, the largest magnitudes to as many columns.
func (s *simulator) addReach(column int, m blas64.General, byColumn bool) {
	for r := range m.Rows {
		out := s.reach.Data[r/s.grid.base*s.reach.Stride+column:]
		sum := 0.
		for c, v := range m.Data[r*m.Stride : r*m.Stride+m.Cols] {
			if byColumn {
				out[c] = max(out[c], math.Abs(v))
			}
			sum += math.Abs(v)
		}
		if !byColumn {
			out[0] = max(out[0], sum)
		}
	}
}

// laneRun is a lane's linear circuit.
type laneRun struct {
	*lane
	state, next []float64
	stair       stair // of the block
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

// widens tells whether a quantity could go beyond what was seen of it.
func (s *simulator) widens(e *excursion, q int) bool {
	if s.most[q] <= e.highest && -s.most[q] >= e.lowest {
		return false
	}
	low, high := s.between(q)
	return low < e.lowest || high > e.highest
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

// element is where an element's quantities stand among those that are read; −1: not read.
type element struct{ source, slope, sense int }

// layReadings decides what is read at each instant that is looked at: the watched nodes, each element's source, and
// its slope and sense where they could come to a bound before its source does.
func (s *simulator) layReadings(top float64) {
	at := len(s.watch)
	next := func(wanted bool) int {
		if !wanted {
			return -1
		}
		at++
		return at - 1
	}
	for _, b := range s.bounds {
		// What is band-limited to top moves no faster than 2π·top times its peak (S. Bernstein 1912).
		swing := math.Max(math.Abs(b.SourceLow), math.Abs(b.SourceHigh))
		fastest := math.Pi * top * swing / s.grid.plan.Rate
		s.elements = append(s.elements, element{
			source: next(true),
			slope:  next(!math.IsInf(b.Slew, 1) && !(fastest < b.Slew)),
			sense:  next(!math.IsInf(b.SenseLow, -1) || !math.IsInf(b.SenseHigh, 1)),
		})
	}
	s.quantities = at
}

// lift makes the maps: those of a cell, the steps of one base sample, by lifting the circuit, and those of a block, which
// is some cells, from them.
func (s *simulator) lift(lanes []*lane) {
	g := s.grid
	scale := 1 << g.plan.Doublings
	// The quantities at a cell's last step, then the first port at the one before.
	readings := make([]bilinear.Reading, s.quantities+1)
	put := func(at int, of bilinear.Quantity, item int) {
		if at >= 0 {
			readings[at] = bilinear.Reading{Step: scale - 1, Of: of, Item: item}
		}
	}
	for w := range s.watch {
		put(w, bilinear.Node, w)
	}
	for k, e := range s.elements {
		put(e.source, bilinear.Source, k)
		put(e.slope, bilinear.Slope, k)
		put(e.sense, bilinear.Sense, k)
	}
	readings[s.quantities] = bilinear.Reading{Step: scale - 2, Of: bilinear.Node, Item: s.ports[0]}
	s.coarse, s.fine, s.stairs = make([]inputMaps, s.inputs), make([]inputMaps, s.inputs), make([]stairMaps, s.inputs)
	s.cells = make([]blas64.General, s.inputs)
	s.sums, s.fineSums = make([][]float64, s.inputs), make([][]float64, s.inputs)
	s.quick = make([]float64, s.quantities*s.inputs)
	states := s.circuit.States()
	cell := g
	cell.base, cell.steps = 1, scale
	for u := range s.inputs {
		var coarse, fine, stairs bool
		for _, l := range lanes {
			if l.input != u {
				continue
			}
			stairs = stairs || l.stairs != nil
			fine = fine || l.fine
			coarse = coarse || l.stairs == nil && !l.fine
			if l.from == none && l.stairs == nil && !l.fine {
				s.sums[u] = make([]float64, g.window())
			}
			if l.from == none && l.fine {
				s.fineSums[u] = make([]float64, g.steps)
			}
		}
		if !coarse && !fine && !stairs && u != circuit.SupplyInput {
			continue
		}
		l := s.circuit.Lift(scale, u, readings)
		if s.advanceState.Rows == 0 {
			s.advanceState, s.inspectState = s.overBlockFromState(l.FromState)
		}
		if coarse {
			advance, inspect := s.overBlock(l.FromState, cell.fold(l.FromInput), 1)
			s.coarse[u] = inputMaps{true, advance, inspect}
		}
		if fine || stairs {
			if stairs || s.fineSums[u] != nil {
				s.quicken(u, readings[:s.quantities])
				_, s.cells[u] = s.overBlock(l.FromState, constant(l.FromInput), 1)
			}
			advance, _ := s.overBlock(l.FromState, l.FromInput, scale)
			if fine {
				s.fine[u] = inputMaps{present: true, advance: advance}
			}
			if stairs {
				s.stairs[u] = stairMaps{true, rises(advance)}
			}
		}
	}
	for _, l := range lanes {
		run := &laneRun{lane: l, state: make([]float64, s.advanceState.Rows), next: make([]float64, s.advanceState.Rows)}
		s.lanes = append(s.lanes, run)
	}
	s.linear, s.difference = make([]float64, states), make([]float64, states)
	s.change = make([]float64, s.advanceState.Rows)
	s.looked, s.moved = make([]float64, s.inspectState.Rows), make([]float64, s.inspectState.Rows)
	s.steps = make([][]float64, s.inputs)
	for u := range s.inputs {
		s.steps[u] = make([]float64, scale)
	}
	s.cellMeans, s.inputMost, s.ripple = make([][]float64, s.inputs), make([]float64, s.inputs), make([]float64, s.inputs)
	s.isRead, s.most = make([]bool, s.quantities), make([]float64, s.quantities)
	s.reach = blas64.General{Rows: s.quantities, Cols: states + 2*s.inputs, Stride: states + 2*s.inputs, Data: make([]float64, s.quantities*(states+2*s.inputs))}
	s.sizes, s.deviations = make([]float64, s.reach.Cols), make([]float64, s.reach.Cols)
	s.addReach(0, s.inspectState, true)
	s.smooth = s.smoothed()
	s.middles, s.level = make([]float64, s.smooth.Cols), make([]float64, g.base)
	for u := range s.inputs {
		if s.coarse[u].present {
			s.addReach(states+2*u, s.coarse[u].inspect, false)
		}
		if s.cells[u].Rows > 0 {
			s.addReach(states+2*u+1, s.cells[u], false)
			s.cellMeans[u] = make([]float64, g.base)
		}
	}
}

// quicken finds how far an input takes the quantities, which are read as given but at every step, within a cell.
func (s *simulator) quicken(u int, quantities []bilinear.Reading) {
	steps := 1 << s.grid.plan.Doublings
	var readings []bilinear.Reading
	for _, r := range quantities {
		for r.Step = range steps {
			readings = append(readings, r)
		}
	}
	m := s.circuit.Lift(steps, u, readings).FromInput
	for i := range readings {
		row := m.Data[(m.Rows-len(readings)+i)*m.Stride:][:m.Cols]
		most := &s.quick[i/steps*s.inputs+u]
		*most = max(*most, floats.Norm(row, 1))
	}
}

// smoothed returns the maps to the quantities' values at a block's instants with nothing changing at the base rate: the
// columns are the state, then for each input the sum of its coarse columns, then its cells.
func (s *simulator) smoothed() blas64.General {
	m := s.inspectState
	width := m.Cols
	for u := range s.inputs {
		width += 1 + s.cells[u].Cols
	}
	out := blas64.General{Rows: m.Rows, Cols: width, Stride: width, Data: make([]float64, m.Rows*width)}
	for r := range m.Rows {
		row := out.Data[r*width : (r+1)*width]
		at := copy(row, m.Data[r*m.Stride:r*m.Stride+m.Cols])
		for u := range s.inputs {
			if in := s.coarse[u].inspect; in.Rows > 0 {
				row[at] = floats.Sum(in.Data[r*in.Stride : r*in.Stride+in.Cols])
			}
			at++
			if in := s.cells[u]; in.Rows > 0 {
				at += copy(row[at:], in.Data[r*in.Stride:r*in.Stride+in.Cols])
			}
		}
	}
	return out
}

// overBlockFromState returns the maps of a block from the state before it, by those of a cell: to the state after it and
// the conversions, and to the quantities at each base sample.
func (s *simulator) overBlockFromState(cell blas64.General) (advance, inspect blas64.General) {
	states := s.circuit.States()
	unit := blas64.General{Rows: cell.Rows, Cols: states, Stride: max(states, 1), Data: make([]float64, cell.Rows*max(states, 1))}
	for i := range states {
		unit.Data[i*unit.Stride+i] = 1
	}
	after := s.later(cell, unit, s.grid.base+1) // a cell later than the unit stands for the state before the first
	return s.gatherRows(states, func(row, at int, add func(m blas64.General, row, column int)) {
		add(after[at+1], row, 0)
	})
}

// overBlock returns the maps of a block from what an input is given, by that of a cell from its state and that from some
// columns; those of the next cell lie shift further.
func (s *simulator) overBlock(cell, in blas64.General, shift int) (advance, inspect blas64.General) {
	after := s.later(cell, in, s.grid.base)
	return s.gatherRows(shift*(s.grid.base-1)+in.Cols, func(row, at int, add func(m blas64.General, row, column int)) {
		for c := range at + 1 {
			add(after[at-c], row, c*shift)
		}
	})
}

// later returns what the rows of a map of a cell are so many cells later, nothing more being added: the k-th of the list
// after k cells.
func (s *simulator) later(cell, m blas64.General, cells int) []blas64.General {
	states := s.circuit.States()
	list := []blas64.General{m}
	for len(list) < cells {
		next := blas64.General{Rows: m.Rows, Cols: m.Cols, Stride: m.Stride, Data: make([]float64, len(m.Data))}
		if states > 0 && m.Cols > 0 {
			blas64.Gemm(blas.NoTrans, blas.NoTrans, 1, cell, rows(list[len(list)-1], 0, states), 0, next)
		}
		list = append(list, next)
	}
	return list
}

// gatherRows makes the two maps of a block, of so many columns: put adds to a row what the given row of a cell's map is at
// the end of the block's given cell.
func (s *simulator) gatherRows(columns int, put func(row, cell int, add func(m blas64.General, row, column int))) (advance, inspect blas64.General) {
	g := s.grid
	states := s.circuit.States()
	build := func(rows int, of func(r int) (row, cell int)) blas64.General {
		out := blas64.General{Rows: rows, Cols: columns, Stride: max(columns, 1), Data: make([]float64, rows*max(columns, 1))}
		for r := range rows {
			row, cell := of(r)
			dst := out.Data[r*out.Stride : (r+1)*out.Stride]
			put(row, cell, func(m blas64.General, row, column int) {
				for i, v := range m.Data[row*m.Stride : row*m.Stride+m.Cols] {
					dst[column+i] += v
				}
			})
		}
		return out
	}
	each := len(s.ports) + 1
	advance = build(states+g.conversions*each, func(r int) (row, cell int) {
		if r < states {
			return r, g.base - 1
		}
		k, p := (r-states)/each, (r-states)%each
		row = states + s.quantities // the step before
		if p < len(s.ports) {
			row = states + s.ports[p]
		}
		return row, (k+1)*g.plan.Base - 1
	})
	inspect = build(s.quantities*g.base, func(r int) (row, cell int) { return states + r/g.base, r % g.base })
	return advance, inspect
}

// rises returns, for a matrix whose columns are a block's steps, a matrix with a row for each: what the columns from that
// step on add up to.
func rises(m blas64.General) blas64.General {
	out := blas64.General{Rows: m.Cols, Cols: m.Rows, Stride: m.Rows, Data: make([]float64, m.Cols*m.Rows)}
	for r := range m.Rows {
		sum := 0.
		for j := m.Cols - 1; j >= 0; j-- {
			sum += m.Data[r*m.Stride+j]
			out.Data[j*out.Stride+r] = sum
		}
	}
	return out
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

// size bounds how far each quantity can go in the block.
func (s *simulator) size() {
	states := len(s.linear)
	for k, v := range s.linear {
		s.middles[k] = v
		s.deviations[k] = math.Abs(s.difference[k])
		s.sizes[k] = math.Abs(v) + s.deviations[k]
	}
	middles := states
	for u := range s.inputs {
		coarse, cells := states+2*u, states+2*u+1
		s.inputMost[u], s.ripple[u] = 0, 0
		if s.sums[u] != nil {
			low, high := ends(s.sums[u])
			s.middles[middles], s.deviations[coarse], s.sizes[coarse] = (low+high)/2, (high-low)/2, max(high, -low)
			s.inputMost[u] += s.sizes[coarse]
		}
		middles++
		if s.cells[u].Rows > 0 {
			most := 0.
			clear(s.cellMeans[u])
			if s.fineSums[u] != nil {
				low, high := ends(s.fineSums[u])
				most = max(high, -low)
				s.grid.means(s.cellMeans[u], s.fineSums[u])
				s.ripple[u] += s.grid.ripple(s.fineSums[u], s.cellMeans[u])
			}
			for _, l := range s.lanes {
				if l.stairs != nil && l.input == u {
					most += l.stair.most()
					for _, c := range l.stair.changes {
						s.ripple[u] += math.Abs(c.by)
					}
					s.grid.stairMeans(s.cellMeans[u], &l.stair)
				}
			}
			middles += copy(s.middles[middles:], s.cellMeans[u])
			s.sizes[cells] = most
			s.inputMost[u] += most
		}
	}
	clear(s.most)
	bilinear.Apply(s.most, s.reach, s.sizes)
}

// between bounds where a quantity goes at the block's instants more closely than most: it follows the state, the cells, and
// the middles of what the inputs are given at the base rate; only the deviations from there are bounded by their sizes. Both the linear and the
// limited run lie between low and high.
func (s *simulator) between(q int) (low, high float64) {
	clear(s.level)
	bilinear.Apply(s.level, rows(s.smooth, q*s.grid.base, (q+1)*s.grid.base), s.middles)
	low, high = ends(s.level)
	more := floats.Dot(s.reach.Data[q*s.reach.Stride:(q+1)*s.reach.Stride], s.deviations)
	return low - more, high + more
}

// read puts a quantity's values at the block's instants into looked, those of the linear run, and into moved, by how
// much the limited one differs; it returns both.
func (s *simulator) read(q int) (linear, moved []float64) {
	from, to := q*s.grid.base, (q+1)*s.grid.base
	linear, moved = s.looked[from:to], s.moved[from:to]
	if s.isRead[q] {
		return linear, moved
	}
	s.isRead[q] = true
	clear(linear)
	clear(moved)
	s.readFrom(linear, q, s.linear, s.sums, s.cellMeans)
	if s.parted {
		bilinear.Apply(moved, rows(s.inspectState, from, to), s.difference)
	}
	return linear, moved
}

// readFrom adds a quantity's values at a block's instants to dst, by the linear state that the block begins with and
// what its inputs are given: sums, and means of the fine lanes.
func (s *simulator) readFrom(dst []float64, q int, state []float64, sums, means [][]float64) {
	from, to := q*s.grid.base, (q+1)*s.grid.base
	bilinear.Apply(dst, rows(s.inspectState, from, to), state)
	for u := range s.inputs {
		if len(sums[u]) > 0 {
			bilinear.Apply(dst, rows(s.coarse[u].inspect, from, to), sums[u])
		}
		if s.cells[u].Rows > 0 {
			bilinear.Apply(dst, rows(s.cells[u], from, to), means[u])
		}
	}
}

// rows returns a matrix of some of a matrix's rows.
func rows(m blas64.General, from, to int) blas64.General {
	m.Data, m.Rows = m.Data[from*m.Stride:], to-from
	return m
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

// look tells whether the block could touch a limit. A quantity is read only where its bound does not settle it.
func (s *simulator) look() bool {
	clear(s.isRead)
	for u, clip := range s.clip {
		if s.inputMost[u]*margin >= clip {
			return true
		}
	}
	rails := s.inputMost[circuit.SupplyInput] * margin // the supply moves the amplifiers' limits
	for k := range s.bounds {
		b, e := &s.bounds[k], s.elements[k]
		if k >= len(s.n.Amplifiers) {
			rails = 0
		}
		if s.passes(e.source, b.SourceLow+rails, b.SourceHigh-rails) || s.passes(e.slope, -b.Slew, b.Slew) || s.passes(e.sense, b.SenseLow, b.SenseHigh) {
			return true
		}
	}
	return false
}

// passes tells whether a quantity could come to a bound in the block. It is read only where its size does not settle it.
func (s *simulator) passes(q int, low, high float64) bool {
	if q < 0 {
		return false
	}
	within := 0. // what inputs do within a cell, which the values at base samples do not tell
	for u, r := range s.ripple {
		within += s.quick[q*s.inputs+u] * r
	}
	low, high = low+within, high-within
	if s.most[q]*margin < min(high, -low) {
		return false
	}
	if l, h := s.between(q); l*margin > low && h*margin < high {
		return false
	}
	linear, moved := s.read(q)
	x := s.level
	for i, v := range linear {
		x[i] = v + moved[i]
	}
	// Between two of them it bends: a parabola by an eighth of what the values do.
	least, most, bend := spread(x)
	return least-bend <= low || most+bend >= high
}

// spread returns the least and the largest value, and by how much the values bend at most.
func spread(x []float64) (least, most, bend float64) {
	least, most = x[0], x[0]
	for i, v := range x[1:] {
		least, most = min(least, v), max(most, v)
		if i+2 < len(x) {
			bend = max(bend, math.Abs(x[i]-2*v+x[i+2]))
		}
	}
	return least, most, bend
}

// ends returns the least and the largest value.
func ends(x []float64) (low, high float64) {
	low, high = x[0], x[0]
	for _, v := range x {
		if v > high {
			high = v
		}
		if v < low {
			low = v
		}
	}
	return low, high
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

// watchBlock notes amplifiers outside their common-mode range or beyond their output current in a block that is not
// stepped.
func (s *simulator) watchBlock(step int64) {
	scale := int64(1) << s.grid.plan.Doublings
	for k := range s.watchers.amplifiers {
		a := &s.watchers.amplifiers[k]
		q := s.elements[k].source
		if s.most[a.plus] < a.plusRoom && s.most[a.minus] < a.minusRoom && (s.most[q]+s.most[a.out])*a.conductance < a.currentRoom {
			continue
		}
		var value, moves [4][]float64
		for j, q := range [...]int{a.plus, a.minus, a.out, q} {
			linear, moved := s.read(q)
			value[j], moves[j] = linear, moved
		}
		for i := range s.grid.base {
			at := func(j int) float64 { return value[j][i] + moves[j][i] }
			a.watch(at(0), at(1), at(2), at(3), step+int64(i+1)*scale-1, scale)
		}
	}
}

// settleDifference drops a difference that no longer is one.
func (s *simulator) settleDifference() {
	s.parted = s.circuit.Size(s.difference) >= same
	if !s.parted {
		clear(s.difference)
	}
}

// peaks sees how far the linear run takes an amplifier's source in the block: by a parabola through each three instants.
func (s *simulator) peaks(k int) {
	x, _ := s.read(s.elements[k].source)
	e := &s.asked[k]
	for i, v := range x {
		e.see(v)
		if i+1 == len(x) || i == 0 {
			continue
		}
		before, after := x[i-1], x[i+1]
		if (v-before)*(after-v) < 0 {
			d := after - before
			e.see(v - d*d/(8*(before-2*v+after)))
		}
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
