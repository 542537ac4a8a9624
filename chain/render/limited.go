package render

import (
	"math"

	"gonum.org/v1/gonum/blas/blas64"

	"midrail/bilinear"
)

// limiter takes the limited run through the blocks in which a limit could be touched, cell by cell; a cell is the steps
// of one base sample. As long as every element stays on one piece the circuit is affine, so a cell is one map; only where
// an element may leave its piece is it stepped.
type limiter struct {
	grid  grid // of blocks of one cell
	plain bool // step every cell
	state *bilinear.State
	// held are the cells with the elements on the pieces met so far; nil where there is none.
	held    map[string]*heldCell
	key     []byte
	columns int       // of the maps
	x, rows []float64 // what a map is applied to, and what it gives
	y       []float64 // watched nodes at a cell's end
}

// heldCell is a cell with every element on one piece. The columns of the maps are the state, then what each of the
// inputs is given: a window of base samples, then the steps of fine lanes.
type heldCell struct {
	looks       int            // at each condition
	maps        blas64.General // to the states after, the conditions, the watched nodes and the sources at the end
	constant    []float64
	convert     blas64.General // to the ports at the last step, and to the first of them at the one before
	convertFrom []float64      // its constant
	limits      bool           // whether any piece is not the linear one
}

// mostHeld bounds how many cells are kept.
const mostHeld = 256

func newLimiter(s *simulator, plain bool) *limiter {
	l := &limiter{grid: s.grid, plain: plain, state: s.circuit.Start(), held: map[string]*heldCell{}}
	l.grid.base, l.grid.steps = 1, 1<<s.grid.plan.Doublings
	l.key = make([]byte, len(l.state.Pieces))
	l.columns = s.circuit.States()
	for u := range s.inputs {
		if s.coarse[u].present {
			l.columns += l.grid.window()
		}
		if s.fine[u].present {
			l.columns += l.grid.steps
		}
	}
	l.x, l.y = make([]float64, l.columns), make([]float64, len(s.watch))
	return l
}

// cell returns the held cell of the pieces that the last step ended on.
func (l *limiter) cell(s *simulator) *heldCell {
	for i, p := range l.state.Pieces {
		l.key[i] = byte(p)
	}
	h, known := l.held[string(l.key)]
	if !known {
		if len(l.held) == mostHeld {
			clear(l.held)
		}
		h = l.hold(s)
		l.held[string(l.key)] = h
	}
	return h
}

// hold builds a held cell; nil where the pieces allow none.
func (l *limiter) hold(s *simulator) *heldCell {
	steps := l.grid.steps
	// The first step, and the last of each quarter or, where a fine lane is as fast as its steps allow, of each two.
	parts := 4
	for _, in := range s.fine {
		if in.present {
			parts = max(parts, steps/2)
		}
	}
	looks := []int{0}
	for part := 1; part <= parts; part++ {
		if at := part*steps/parts - 1; at > looks[len(looks)-1] {
			looks = append(looks, at)
		}
	}
	var readings []bilinear.Reading
	for w := range s.watch {
		readings = append(readings, bilinear.Reading{Step: steps - 1, Of: bilinear.Node, Item: w})
	}
	for k := range s.n.Amplifiers {
		readings = append(readings, bilinear.Reading{Step: steps - 1, Of: bilinear.Source, Item: k})
	}
	converted := len(s.ports) + 1
	for _, p := range s.ports {
		readings = append(readings, bilinear.Reading{Step: steps - 1, Of: bilinear.Node, Item: p})
	}
	readings = append(readings, bilinear.Reading{Step: steps - 2, Of: bilinear.Node, Item: s.ports[0]})
	held := s.circuit.Hold(l.state.Pieces, steps, looks, readings)
	if held == nil {
		return nil
	}
	all := blas64.General{Rows: len(held.Constant), Cols: l.columns, Stride: l.columns, Data: make([]float64, len(held.Constant)*l.columns)}
	at := 0
	put := func(m blas64.General) {
		for r := range m.Rows {
			copy(all.Data[r*all.Stride+at:], m.Data[r*m.Stride:r*m.Stride+m.Cols])
		}
		at += m.Cols
	}
	put(held.FromState)
	for u := range s.inputs {
		if s.coarse[u].present {
			put(l.grid.fold(held.FromInput[u]))
		}
		if s.fine[u].present {
			put(held.FromInput[u])
		}
	}
	main := all.Rows - converted
	h := &heldCell{
		looks: len(looks), maps: rows(all, 0, main), constant: held.Constant[:main],
		convert: rows(all, main, all.Rows), convertFrom: held.Constant[main:],
	}
	for _, p := range l.state.Pieces {
		h.limits = h.limits || p != bilinear.Linear
	}
	return h
}

// stays tells whether a condition, by its values at the looks, is kept throughout: none comes nearer to 0 than the values
// bend from one look to the next, of which a parabola needs an eighth between two.
func stays(v []float64) bool {
	bend := 0.
	for i := 1; i+1 < len(v); i++ {
		bend = math.Max(bend, math.Abs(v[i-1]-2*v[i]+v[i+1]))
	}
	for _, x := range v {
		if !(x > bend) {
			return false
		}
	}
	return true
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
	for cell := range s.grid.base {
		if plain || !s.holdCell(o, first, cell, step) {
			s.stepCell(o, first, cell, step)
		}
	}
}

// holdCell takes the limited run through a cell of a block in one go, if all elements stay on the pieces they are on.
func (s *simulator) holdCell(o *conversions, first, cell int, step int64) bool {
	l := s.limited
	h := l.cell(s)
	if h == nil {
		return false
	}
	states := len(s.linear)
	s.circuit.Pack(l.x, l.state)
	at := states
	for u := range s.inputs {
		if s.coarse[u].present {
			at += copy(l.x[at:], s.sums[u][cell:cell+l.grid.window()])
		}
		if s.fine[u].present {
			at += copy(l.x[at:], s.fineSums[u][cell*l.grid.steps:(cell+1)*l.grid.steps])
		}
	}
	out := append(l.rows[:0], h.constant...)
	l.rows = out
	bilinear.Apply(out, h.maps, l.x)
	conditions := len(out) - states - len(s.watch) - len(s.n.Amplifiers)
	for i := 0; i < conditions; i += h.looks {
		if !stays(out[states+i : states+i+h.looks]) {
			return false
		}
	}
	s.circuit.Unpack(l.state, out[:states])
	several := int64(l.grid.steps)
	last := step + int64(cell+1)*several - 1
	if h.limits {
		s.touched = true
		s.watchers.touched(s, cell+1, last, several)
	}
	y, sources := out[states+conditions:states+conditions+len(s.watch)], out[states+conditions+len(s.watch):]
	s.scope.see(cell, y)
	s.see(y, sources, last, several)
	if (cell+1)%s.grid.plan.Base == 0 {
		k := first + cell/s.grid.plan.Base
		out := append(s.converted[:0], h.convertFrom...)
		s.converted = out
		bilinear.Apply(out, h.convert, l.x)
		for p := range s.ports {
			o.overload[p][k] = out[p]
		}
		o.slope[k] = (out[0] - out[len(s.ports)]) * s.grid.plan.Rate
	}
	return true
}

// stepCell steps the limited run through a cell of a block.
func (s *simulator) stepCell(o *conversions, first, cell int, step int64) {
	l := s.limited
	steps := l.grid.steps
	from := cell * steps
	for u := range s.inputs {
		dst := s.steps[u]
		clear(dst)
		if s.coarse[u].present {
			l.grid.refine(dst, s.sums[u][cell:cell+l.grid.window()])
		}
		if s.fine[u].present {
			for j, v := range s.fineSums[u][from : from+steps] {
				dst[j] += v
			}
		}
	}
	converts := (cell+1)%s.grid.plan.Base == 0
	every := max(1, steps/watchedPerBase)
	before := 0.
	for j := range steps {
		at := step + int64(from+j)
		clipped := s.inputsAt(j, at)
		y := l.y
		if (j+1)%every != 0 && !(converts && j == steps-2) {
			y = nil
		}
		if s.circuit.Step(l.state, s.u, y) || clipped {
			s.touched = true
			s.watchers.touched(s, (from+j+1)/steps, at, 1)
		}
		if y == nil {
			continue
		}
		if (j+1)%every == 0 {
			s.see(y, l.state.E, at, int64(every))
		}
		if j == steps-2 {
			before = y[s.ports[0]]
		}
	}
	s.scope.see(cell, l.y)
	if converts {
		k := first + cell/s.grid.plan.Base
		for p, i := range s.ports {
			o.overload[p][k] = l.y[i]
		}
		o.slope[k] = (l.y[s.ports[0]] - before) * s.grid.plan.Rate
	}
}

// see notes where the watched voltages of the limited run and the amplifiers' sources are at a step that stands for
// several.
func (s *simulator) see(y, sources []float64, step, several int64) {
	for k, q := range s.stageIndex {
		s.stages[k].see(y[q])
	}
	for k := range s.watchers.amplifiers {
		a := &s.watchers.amplifiers[k]
		a.watch(y[a.plus], y[a.minus], y[a.out], sources[k], step, several)
	}
}

// watchedPerBase is how often a cell's steps are looked at for excursions while the limited run is stepped: at least 16
// times to a period of the tracks' highest frequency.
const watchedPerBase = 8

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
		for i := range s.difference {
			s.difference[i] -= l.state[i]
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
