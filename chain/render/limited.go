package render

import (
	"math"

	"gonum.org/v1/gonum/blas/blas64"
	"gonum.org/v1/gonum/floats"

	"midrail/bilinear"
)

// limiter takes the limited run through the blocks in which a limit could be touched. As long as every element stays on
// one piece the circuit is affine: a few cells, each of which is the steps of one base sample, are one map, or else each
// cell is, or each eighth of it. Only an eighth in which an element may leave its piece is stepped.
type limiter struct {
	plain   bool // step everything
	state   *bilinear.State
	cell    grid      // of blocks of one cell
	holders []*holder // of several cells and of one, the longest first
	eighth  *holder
	refined blas64.General // to a cell's steps, from a window of base samples
	x, rows []float64      // what a map is applied to, and what it gives
	y       []float64      // watched nodes
}

// holder has the maps over a stretch of steps with the elements on the pieces met so far.
type holder struct {
	grid    grid // of blocks as long as the stretch; of no base sample where coarse inputs are given as steps, not as windows
	steps   int
	seen    []int // steps at which the watched nodes and the sources are told
	columns int
	held    map[string]*heldRun // nil where there is none
	key     []byte
}

// heldRun is some steps with every element on one piece. The columns of the maps are the state, then what each of the
// inputs is given.
type heldRun struct {
	looks       int            // at each condition
	most        []float64      // of each condition
	maps        blas64.General // to the states after, the conditions, and the watched nodes and the sources each time
	constant    []float64
	convert     blas64.General // to the ports at the last step, and to the first of them at the one before
	convertFrom []float64      // its constant
	limits      bool           // whether any piece is not the linear one
}

const (
	// mostHeld bounds how many stretches are kept.
	mostHeld = 256
	// eighths is how many stretches a cell has: they are looked at for excursions, too, at least 16 times to a period of
	// the tracks' highest frequency.
	eighths = 8
)

func newLimiter(s *simulator, plain bool) *limiter {
	l := &limiter{plain: plain, state: s.circuit.Start(), cell: s.grid, y: make([]float64, len(s.watch))}
	l.cell.base, l.cell.steps = 1, 1<<s.grid.plan.Doublings
	l.refined = l.cell.refined()
	for cells := mostCells; cells > 0; cells-- {
		// Conversions come at the end of a stretch.
		if s.grid.plan.Base%cells == 0 {
			l.holders = append(l.holders, newHolder(s, cells, cells*l.cell.steps))
			if cells > 1 {
				cells = 2 // one cell is next
			}
		}
	}
	l.eighth = newHolder(s, 0, max(1, l.cell.steps/eighths))
	l.x = make([]float64, max(l.holders[0].columns, l.eighth.columns))
	return l
}

// mostCells is how many cells are one map at the most.
const mostCells = 4

func newHolder(s *simulator, cells, steps int) *holder {
	h := &holder{grid: s.grid, steps: steps, columns: s.circuit.States(), held: map[string]*heldRun{}, key: make([]byte, len(s.bounds))}
	h.grid.base, h.grid.steps = cells, steps
	for part := range max(cells, 1) {
		h.seen = append(h.seen, (part+1)*steps/max(cells, 1)-1)
	}
	for u := range s.inputs {
		if cells == 0 {
			if s.driven(u) {
				h.columns += steps
			}
			continue
		}
		if s.sums[u] != nil {
			h.columns += h.grid.window()
		}
		if s.fineSums[u] != nil {
			h.columns += steps
		}
		if s.stairs[u].present {
			h.columns++
		}
	}
	return h
}

// driven tells whether anything goes into an input.
func (s *simulator) driven(u int) bool {
	return s.sums[u] != nil || s.fineSums[u] != nil || s.stairs[u].present
}

// of returns the stretch with the elements on the pieces that the last step ended on.
func (h *holder) of(s *simulator) *heldRun {
	for i, p := range s.limited.state.Pieces {
		h.key[i] = byte(p)
	}
	one, known := h.held[string(h.key)]
	if !known {
		if len(h.held) == mostHeld {
			clear(h.held)
		}
		one = h.build(s)
		h.held[string(h.key)] = one
	}
	return one
}

// looks are the steps at which conditions are looked at: the first, and the last of each quarter; where a fine lane is as
// fast as its steps allow, of each two; and all where stairs change.
func (h *holder) looks(s *simulator) []int {
	parts := 4
	for _, in := range s.fineSums {
		if in != nil {
			parts = max(parts, h.steps/2)
		}
	}
	for _, in := range s.stairs {
		if in.present && h.grid.base == 0 {
			parts = h.steps
		}
	}
	list := []int{0}
	for part := 1; part <= parts; part++ {
		if at := part*h.steps/parts - 1; at > list[len(list)-1] {
			list = append(list, at)
		}
	}
	return list
}

// build makes a stretch; nil where the pieces allow none.
func (h *holder) build(s *simulator) *heldRun {
	if h.steps < 2 {
		return nil
	}
	var readings []bilinear.Reading
	last := h.steps - 1
	for _, at := range h.seen {
		for w := range s.watch {
			readings = append(readings, bilinear.Reading{Step: at, Of: bilinear.Node, Item: w})
		}
		for k := range s.n.Amplifiers {
			readings = append(readings, bilinear.Reading{Step: at, Of: bilinear.Source, Item: k})
		}
	}
	converted := len(s.ports) + 1
	for _, p := range s.ports {
		readings = append(readings, bilinear.Reading{Step: last, Of: bilinear.Node, Item: p})
	}
	readings = append(readings, bilinear.Reading{Step: last - 1, Of: bilinear.Node, Item: s.ports[0]})
	looks := h.looks(s)
	pieces := s.limited.state.Pieces
	held := s.circuit.Hold(pieces, h.steps, looks, readings)
	if held == nil {
		return nil
	}
	all := blas64.General{Rows: len(held.Constant), Cols: h.columns, Stride: h.columns, Data: make([]float64, len(held.Constant)*h.columns)}
	at := 0
	put := func(m blas64.General) {
		for r := range m.Rows {
			copy(all.Data[r*all.Stride+at:], m.Data[r*m.Stride:r*m.Stride+m.Cols])
		}
		at += m.Cols
	}
	put(held.FromState)
	for u := range s.inputs {
		if h.grid.base == 0 {
			if s.driven(u) {
				put(held.FromInput[u])
			}
			continue
		}
		if s.sums[u] != nil {
			put(h.grid.fold(held.FromInput[u]))
		}
		if s.fineSums[u] != nil {
			put(held.FromInput[u])
		}
		if s.stairs[u].present {
			put(constant(held.FromInput[u]))
		}
	}
	main := all.Rows - converted
	one := &heldRun{
		looks: len(looks), most: held.Most, maps: rows(all, 0, main), constant: held.Constant[:main],
		convert: rows(all, main, all.Rows), convertFrom: held.Constant[main:],
	}
	for _, p := range pieces {
		one.limits = one.limits || p != bilinear.Linear
	}
	return one
}

// constant returns a matrix, whose columns are steps, for a value that is the same at all of them.
func constant(m blas64.General) blas64.General {
	out := blas64.General{Rows: m.Rows, Cols: 1, Stride: 1, Data: make([]float64, m.Rows)}
	for r := range m.Rows {
		out.Data[r] = floats.Sum(m.Data[r*m.Stride : r*m.Stride+m.Cols])
	}
	return out
}

// stays tells whether a condition, by its values at the looks, is from 0 to most throughout: none comes nearer to the ends
// than the values bend from one look to the next, of which a parabola needs an eighth between two.
func stays(v []float64, most float64) bool {
	low, high, bend := spread(v)
	return low > bend && high < most-bend
}

// stepBlock takes the limited run through a block. What its overload is at the conversions is known once the lanes have
// been taken through the block too: [simulator.compare] tells it.
func (s *simulator) stepBlock(o *conversions, first int, step int64) {
	l := s.limited
	for k := range s.asked {
		s.peaks(k)
	}
	for i, d := range s.difference {
		s.change[i] = s.linear[i] + d
	}
	s.circuit.Unpack(l.state, s.change[:len(s.difference)])
	s.touched = false
	plain := l.plain
	for u, clip := range s.clip {
		plain = plain || s.inputMost[u]*margin >= clip
	}
	b := limitedBlock{s: s, o: o, first: first, step: step}
	for from := 0; from < s.grid.steps; {
		if !plain {
			if taken := b.stride(from); taken > 0 {
				from += taken
				continue
			}
		}
		b.prepare(from)
		to := from + l.cell.steps
		for ; from < to; from += l.eighth.steps {
			if plain || !b.take(l.eighth, from) {
				b.walk(from, from+l.eighth.steps)
			}
		}
	}
}

// stride takes the limited run through the longest stretch of whole cells that can be taken from a step of the block, and
// returns its steps; 0 where there is none.
func (b *limitedBlock) stride(from int) int {
	for _, h := range b.s.limited.holders {
		if from%h.steps == 0 && b.take(h, from) {
			return h.steps
		}
	}
	return 0
}

// limitedBlock is a block on which the limited run is.
type limitedBlock struct {
	s     *simulator
	o     *conversions
	first int   // conversion
	step  int64 // of the run, the block's first
}

// take takes the limited run through a stretch that begins with a step of the block, if all elements stay on the pieces
// they are on.
func (b *limitedBlock) take(h *holder, from int) bool {
	s, l := b.s, b.s.limited
	one := h.of(s)
	if one == nil {
		return false
	}
	states := len(s.linear)
	x := l.x[:h.columns]
	s.circuit.Pack(x, l.state)
	at, cell, in := states, from/l.cell.steps, from%l.cell.steps
	for u := range s.inputs {
		if h.grid.base == 0 {
			if s.driven(u) {
				at += copy(x[at:], s.steps[u][in:in+h.steps])
			}
			continue
		}
		if s.sums[u] != nil {
			at += copy(x[at:], s.sums[u][cell:cell+h.grid.window()])
		}
		if s.fineSums[u] != nil {
			at += copy(x[at:], s.fineSums[u][from:from+h.steps])
		}
		if s.stairs[u].present {
			x[at] = 0
			for _, lane := range s.lanes {
				if lane.stairs == nil || lane.input != u {
					continue
				}
				if !lane.stair.flat(from, from+h.steps) {
					return false
				}
				x[at] += lane.stair.at(from)
			}
			at++
		}
	}
	out := append(l.rows[:0], one.constant...)
	l.rows = out
	bilinear.Apply(out, one.maps, x)
	conditions := len(one.most) * one.looks
	for i, most := range one.most {
		if !stays(out[states+i*one.looks:states+(i+1)*one.looks], most) {
			return false
		}
	}
	s.circuit.Unpack(l.state, out[:states])
	to := from + h.steps
	last := b.step + int64(to) - 1
	if one.limits {
		s.touched = true
		s.watchers.touched(s, to/l.cell.steps, last, int64(h.steps))
	}
	told := out[states+conditions:]
	for _, at := range h.seen {
		y, rest := told[:len(s.watch)], told[len(s.watch):]
		b.see(from+at+1, y, rest[:len(s.n.Amplifiers)], int64(h.steps/len(h.seen)))
		told = rest[len(s.n.Amplifiers):]
	}
	if to%s.grid.plan.Steps() == 0 {
		out := append(s.converted[:0], one.convertFrom...)
		s.converted = out
		bilinear.Apply(out, one.convert, x)
		b.convert(to, out, out[len(s.ports)])
	}
	return true
}

// prepare finds the steps of the cell that begins with a step of the block.
func (b *limitedBlock) prepare(from int) {
	s, l := b.s, b.s.limited
	cell := from / l.cell.steps
	for u, dst := range s.steps {
		clear(dst)
		if s.sums[u] != nil {
			bilinear.Apply(dst, l.refined, s.sums[u][cell:cell+l.cell.window()])
		}
		if s.fineSums[u] != nil {
			for j, v := range s.fineSums[u][from : from+l.cell.steps] {
				dst[j] += v
			}
		}
	}
	for _, lane := range s.lanes {
		if lane.stairs != nil {
			lane.stair.addTo(s.steps[lane.input], from)
		}
	}
}

// walk steps the limited run from a step of the block to another.
func (b *limitedBlock) walk(from, to int) {
	s, l := b.s, b.s.limited
	converts := to%s.grid.plan.Steps() == 0
	before := 0.
	for j := from; j < to; j++ {
		at := b.step + int64(j)
		clipped := s.inputsAt(j%l.cell.steps, at)
		var y []float64
		if j == to-1 || converts && j == to-2 {
			y = l.y
		}
		if s.circuit.Step(l.state, s.u, y) || clipped {
			s.touched = true
			s.watchers.touched(s, (j+1)/l.cell.steps, at, 1)
		}
		if y != nil && j == to-2 {
			before = y[s.ports[0]]
		}
	}
	b.see(to, l.y, l.state.E, int64(to-from))
	if converts {
		for p, i := range s.ports {
			s.converted[p] = l.y[i]
		}
		b.convert(to, s.converted, before)
	}
}

// convert tells of the conversion that ends with the step before the given one of the block: the voltages at the ports,
// and that at the first of them one step earlier.
func (b *limitedBlock) convert(to int, ports []float64, before float64) {
	s := b.s
	k := b.first + to/s.grid.plan.Steps() - 1
	for p := range s.ports {
		b.o.overload[p][k] = ports[p]
	}
	b.o.slope[k] = (ports[0] - before) * s.grid.plan.Rate
}

// see notes where the watched voltages of the limited run and the amplifiers' sources are at the last of several steps,
// which end before the given one of the block.
func (b *limitedBlock) see(to int, y, sources []float64, several int64) {
	s := b.s
	if scale := s.limited.cell.steps; to%scale == 0 {
		s.scope.see(to/scale-1, y)
	}
	for k, q := range s.stageIndex {
		s.stages[k].see(y[q])
	}
	for k := range s.watchers.amplifiers {
		a := &s.watchers.amplifiers[k]
		a.watch(y[a.plus], y[a.minus], y[a.out], sources[k], b.step+int64(to)-1, several)
	}
}

// compare takes the linear run, which the lanes have made of a block that was stepped, from the limited one.
func (s *simulator) compare(o *conversions, first int) {
	parted := s.parted || s.touched
	for k := first; k < first+s.grid.conversions; k++ {
		for p := range s.ports {
			linear := 0.
			for part := range o.parts {
				linear += o.parts[part][p][k]
			}
			if parted {
				o.overload[p][k] -= linear
			} else {
				o.overload[p][k] = 0
			}
		}
	}
	if !parted {
		return
	}
	s.circuit.Pack(s.difference, s.limited.state)
	for _, l := range s.lanes {
		if l.from == none {
			floats.Sub(s.difference, l.state[:len(s.difference)])
		}
	}
	s.settleDifference()
}

// inputsAt sets u to the cell's j-th step, which is the given one of the run, and reports whether a microphone passed less than it was given.
func (s *simulator) inputsAt(j int, step int64) (clipped bool) {
	for u := range s.u {
		v := s.steps[u][j]
		if clip := s.clip[u]; math.Abs(v) > clip {
			s.watchers.loud[u-1].touch(step, math.Abs(v)/clip, 1)
			v = math.Copysign(clip, v)
			clipped = true
		}
		s.u[u] = v
	}
	return clipped
}
