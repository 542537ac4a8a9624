package bilinear

import (
	"math"

	"gonum.org/v1/gonum/floats"
)

// Step takes the state to the next instant, at which the inputs are u (deviations from the operating point, in the
// units of the network's inputs), and puts the watched nodes' voltages, from rest, into y, which may be nil. It
// reports whether any element left its linear piece: s.Pieces tells which.
//
//	e₁ = clip[low, high]( h + k·clip( ωt·(v+ − v− + Vos) − ωa·(e₁ − Vref), ±SR ) ),   k = T/2,   h' = e₁ + k·g
//
// solved exactly for all elements at once. Where no solution is found, as where parts differ by more than numbers can
// tell, every source stays where it is, within its limits, and s.Held counts it. It panics where u or y has another length
// than the network's.
func (c *Compiled) Step(s *State, u, y []float64) (touched bool) {
	c.senses(s, u)
	for _, p := range s.Pieces {
		touched = touched || p != Linear
	}
	if !touched {
		c.linearSources(s, u, true)
		touched = c.beyond(s, u)
	}
	if touched { // from the last step's pieces on
		c.fill(s.laws, u, s.H)
		if !s.solve.solve(s.laws, s.s0, s.Pieces, s.E) {
			c.hold(s)
		}
		touched = false
		for _, p := range s.Pieces {
			touched = touched || p != Linear
		}
	}
	c.advance(s, u, y)
	return touched
}

// hold leaves the sources where they are, within the limits of the laws.
func (c *Compiled) hold(s *State) {
	s.Held++
	for i := range s.laws {
		at := 0.
		if i < len(c.amplifiers) {
			at = s.H[i]
		}
		b := s.laws[i].box()
		s.E[i], s.Pieces[i] = math.Min(math.Max(at, b.low), b.high), Linear
	}
}

// StepLinear is [Compiled.Step] with every element on its linear piece, whatever its limits. Where Step would touch
// no limit the two give the same bits.
func (c *Compiled) StepLinear(s *State, u, y []float64) {
	c.senses(s, u)
	c.linearSources(s, u, false)
	for i := range s.Pieces {
		s.Pieces[i] = Linear
	}
	c.advance(s, u, y)
}

// senses finds the senses without the sources.
func (c *Compiled) senses(s *State, u []float64) {
	if len(u) != c.inputs {
		panic("bilinear: wrong number of inputs")
	}
	width := c.modes + c.inputs
	for i := range s.s0 {
		row := c.sense[i*width : (i+1)*width]
		sum := 0.
		for j, z := range s.Z {
			sum = math.FMA(row[j], z, sum)
		}
		for j, x := range u {
			sum = math.FMA(row[c.modes+j], x, sum)
		}
		s.s0[i] = sum
	}
}

// linearSources finds the sources of the linear pieces. Only a limited step knows of an amplifier that rests on a limit.
func (c *Compiled) linearSources(s *State, u []float64, limited bool) {
	for i := range c.amplifiers {
		a := &c.amplifiers[i]
		s.num[i] = s.s0[i] + float64(a.perSlope*s.H[i])
		if limited {
			s.num[i] += a.residual
		}
	}
	i := len(c.amplifiers)
	for j := range c.capsules {
		s.num[i] = u[c.capsules[j].signal]
		if limited {
			s.num[i] += c.capsules[j].residual
		}
		i++
	}
	for j := range c.diodes {
		d := &c.diodes[j]
		// At rest a conducting diode keeps s = R·e, one that does not keeps e = 0.
		if s.num[i] = 0; d.conducts {
			s.num[i] = -s.s0[i]
		}
		i++
	}
	times(s.E, c.linear, s.num)
}

// beyond reports whether the sources of the linear pieces pass any limit.
func (c *Compiled) beyond(s *State, u []float64) bool {
	for i := range c.amplifiers {
		a := &c.amplifiers[i]
		low, high := a.bounds(u)
		e := s.E[i]
		if e > high || e < low || math.Abs(e-s.H[i]) > a.slew {
			return true
		}
	}
	if len(c.capsules)+len(c.diodes) == 0 {
		return false
	}
	i := len(c.amplifiers)
	sense := func() float64 { return c.senseOf(s, i) }
	for j := range c.capsules {
		if l := &c.capsules[j]; s.E[i] < l.least || sense() < l.floor {
			return true
		}
		i++
	}
	for j := range c.diodes {
		d := &c.diodes[j]
		if d.conducts && s.E[i] < d.off || !d.conducts && sense() > d.forward {
			return true
		}
		i++
	}
	return false
}

// senseOf returns what the i-th element follows, with the sources found.
func (c *Compiled) senseOf(s *State, i int) float64 {
	return s.s0[i] + floats.Dot(c.b[i*c.elements:(i+1)*c.elements], s.E)
}

// bounds returns the limits of e with the rails where u puts them.
func (a *amplifierLaw) bounds(u []float64) (low, high float64) {
	low, high, middle := a.low, a.high, a.middle
	if a.lowIn >= 0 {
		low += u[a.lowIn]
		middle += u[a.lowIn] / 2
	}
	if a.highIn >= 0 {
		high += u[a.highIn]
		middle += u[a.highIn] / 2
	}
	if low > high {
		return middle, middle
	}
	return low, high
}

// fill writes the elements' laws for a step.
func (c *Compiled) fill(laws []law, u, h []float64) {
	for i := range c.amplifiers {
		a := &c.amplifiers[i]
		low, high := a.bounds(u)
		laws[i] = law{
			kind: amplifierElement, den: a.den, num: float64(a.perSlope*h[i]) + a.residual,
			low: low, high: high, down: h[i] - a.slew, up: h[i] + a.slew,
		}
	}
	i := len(c.amplifiers)
	for _, p := range c.capsules {
		laws[i] = law{kind: capsuleElement, num: u[p.signal] + p.residual, least: p.least, floor: p.floor}
		i++
	}
	for _, d := range c.diodes {
		laws[i] = law{kind: diodeElement, forward: d.forward, resist: d.resist, off: d.off, conducts: d.conducts}
		i++
	}
}

// advance tells the watched nodes and takes the histories on, with the sources found.
func (c *Compiled) advance(s *State, u, y []float64) {
	if y != nil {
		if len(y) != c.watched {
			panic("bilinear: wrong number of watched nodes")
		}
		width := c.modes + c.inputs + c.elements
		for i := range y {
			row := c.watch[i*width : (i+1)*width]
			sum := 0.
			for j, z := range s.Z {
				sum = math.FMA(row[j], z, sum)
			}
			row = row[c.modes:]
			for j, x := range u {
				sum = math.FMA(row[j], x, sum)
			}
			row = row[c.inputs:]
			for j, e := range s.E {
				sum = math.FMA(row[j], e, sum)
			}
			y[i] = sum
		}
	}
	width := c.inputs + c.elements
	for i, z := range s.Z {
		row := c.drive[i*width : (i+1)*width]
		sum := c.lambda[i] * z
		for j, x := range u {
			sum = math.FMA(row[j], x, sum)
		}
		row = row[c.inputs:]
		for j, e := range s.E {
			sum = math.FMA(row[j], e, sum)
		}
		s.Z[i] = sum
	}
	for i := range c.amplifiers {
		e := s.E[i]
		switch s.Pieces[i] {
		case Linear:
			if a := &c.amplifiers[i]; a.perSlope > 0 {
				s.H[i] = 2*e - s.H[i]
			} else {
				s.H[i] = e
			}
		case SlewUp, SlewDown:
			s.H[i] = 2*e - s.H[i]
		default:
			s.H[i] = e
		}
	}
}
