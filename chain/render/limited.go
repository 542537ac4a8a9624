package render

import "math"

// stepBlock steps the limited run through a block. What its overload is at the conversions is known once the lanes have
// been taken through the block too: [simulator.compare] tells it.
func (s *simulator) stepBlock(o *conversions, first int, step int64) {
	g := s.grid
	for u := range s.inputs {
		clear(s.steps[u])
		if s.coarse[u].present {
			g.refine(s.steps[u], s.sums[u])
		}
		for j, v := range s.fineSums[u] {
			s.steps[u][j] += v
		}
	}
	for k := range s.asked {
		s.peaks(k)
	}
	for i, d := range s.difference {
		s.change[i] = s.linear[i] + d
	}
	s.circuit.Unpack(s.limitedRun, s.change[:len(s.difference)])
	s.touched = false
	perConversion := g.plan.Steps()
	scale := 1 << g.plan.Doublings
	every := max(1, scale/watchedPerBase)
	for j := range g.steps {
		clipped := s.inputsAt(j, step)
		y := s.y
		if (j+1)%every != 0 && (j+2)%perConversion != 0 {
			y = nil
		}
		touched := s.circuit.Step(s.limitedRun, s.u, y) || clipped
		if touched {
			s.touched = true
			s.watchers.touched(s, j, step+int64(j))
		}
		if y == nil {
			continue
		}
		if (j+1)%scale == 0 {
			s.scope.see((j+1)/scale-1, y)
		}
		for k, q := range s.stageIndex {
			s.stages[k].see(y[q])
		}
		for k := range s.watchers.amplifiers {
			a := &s.watchers.amplifiers[k]
			a.watch(y[a.plus], y[a.minus], y[a.out], s.limitedRun.E[k], step+int64(j), int64(every))
		}
		k := first + j/perConversion
		switch (j + 1) % perConversion {
		case 0:
			for p, i := range s.ports {
				o.overload[p][k] = y[i]
			}
			o.slope[k] = (y[s.ports[0]] - o.slope[k]) * g.plan.Rate
		case perConversion - 1:
			o.slope[k] = y[s.ports[0]]
		}
	}
}

// watchedPerBase is how often a base sample's steps are looked at for excursions while the limited run is stepped: at
// least 16 times to a period of the tracks' highest frequency.
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
	s.circuit.Pack(s.difference, s.limitedRun)
	for _, l := range s.lanes {
		for i := range s.difference {
			s.difference[i] -= l.state[i]
		}
	}
	s.settleDifference()
}

// inputsAt sets u to the block's j-th step, and reports whether a microphone passed less than it was given.
func (s *simulator) inputsAt(j int, step int64) (clipped bool) {
	for u := range s.u {
		v := s.steps[u][j]
		if clip := s.clip[u]; math.Abs(v) > clip {
			s.watchers.loud[u-1].touch(step+int64(j), math.Abs(v)/clip, 1)
			v = math.Copysign(clip, v)
			clipped = true
		}
		s.u[u] = v
	}
	return clipped
}
