package render

import (
	"math"

	"gonum.org/v1/gonum/blas"
	"gonum.org/v1/gonum/blas/blas64"
	"gonum.org/v1/gonum/floats"

	"midrail/bilinear"
	"midrail/chain/circuit"
)

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

// rows returns a matrix of some of a matrix's rows.
func rows(m blas64.General, from, to int) blas64.General {
	m.Data, m.Rows = m.Data[from*m.Stride:], to-from
	return m
}
