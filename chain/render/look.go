package render

import (
	"math"

	"gonum.org/v1/gonum/floats"

	"midrail/bilinear"
	"midrail/chain/circuit"
)

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
