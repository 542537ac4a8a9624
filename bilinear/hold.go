package bilinear

import (
	"math"

	"gonum.org/v1/gonum/blas/blas64"
)

// Held is the network over a block of steps with every element held on one piece: an affine map from the state before
// it and the inputs' values over it to the state after it, to conditions that are from 0 to a bound of each as long as the
// elements belong on their pieces, and to readings within it. The rows are the states after; the conditions, each at all of the
// steps that it is looked at; then the readings. It may be shared by goroutines.
type Held struct {
	FromState blas64.General   // rows × states
	FromInput []blas64.General // of each input, rows × steps
	Constant  []float64        // what the rows are with nothing in the state and at the inputs
	Most      []float64        // of each condition, the largest that it may be; +Inf: there is none
}

// Hold builds the map over a number of steps with the elements on the given pieces; the conditions are looked at at the
// steps in looks. It is built by probing the laws that [Compiled.Step] solves, so that it agrees with it but for
// rounding where the pieces are the ones that Step finds. It returns nil where the pieces' equations are singular.
func (c *Compiled) Hold(pieces []Piece, steps int, looks []int, readings []Reading) *Held {
	p := c.newProber(steps, readings)
	p.pieces, p.looks = pieces, looks
	copy(p.state.Pieces, pieces)
	c.fillHomogeneous(p.state.laws, p.u, p.state.H)
	if p.state.solve.inverse(p.state.laws, pieces) == nil {
		return nil
	}
	h := &Held{}
	c.fill(p.state.laws, p.u, p.state.H)
	c.conditions(p.state, func(_, most float64) { h.Most = append(h.Most, most) })
	p.values = make([]float64, len(h.Most))
	h.Constant = make([]float64, p.rows())
	p.limited = true
	for j := range steps {
		p.step()
		p.tell(j, func(row int, v float64) { h.Constant[row] = v })
	}
	p.limited = false
	h.FromState = p.fromState()
	for input := range c.inputs {
		h.FromInput = append(h.FromInput, p.fromInput(input))
	}
	return h
}

// prober finds what the rows of a map over a block of steps are by running the network.
type prober struct {
	c        *Compiled
	steps    int
	readings []Reading
	at       [][]int // readings of each step
	pieces   []Piece // that the elements are held on; nil: whatever their limits, on the linear one
	looks    []int   // steps at which the conditions are looked at
	values   []float64
	limited  bool // with all that is constant in the laws of the pieces
	state    *State
	u, y     []float64
	before   []float64 // of each amplifier, H before the last step
}

func (c *Compiled) newProber(steps int, readings []Reading) *prober {
	p := &prober{
		c: c, steps: steps, readings: readings, at: make([][]int, steps), state: c.Start(),
		u: make([]float64, c.inputs), y: make([]float64, c.watched), before: make([]float64, len(c.amplifiers)),
	}
	for i, r := range readings {
		p.at[r.Step] = append(p.at[r.Step], i)
	}
	return p
}

func (p *prober) rows() int { return p.c.States() + len(p.values)*len(p.looks) + len(p.readings) }

func (p *prober) matrix(columns int) blas64.General {
	stride := max(columns, 1)
	return blas64.General{Rows: p.rows(), Cols: columns, Stride: stride, Data: make([]float64, p.rows()*stride)}
}

// fromState returns the rows for the state before the block.
func (p *prober) fromState() blas64.General {
	m := p.matrix(p.c.States())
	for from := range p.c.States() {
		p.reset()
		*p.c.place(p.state, from) = 1
		for j := range p.steps {
			p.step()
			p.tell(j, func(row int, v float64) { m.Data[row*m.Stride+from] = v })
		}
	}
	return m
}

// fromInput returns the rows for an input's values over the block.
func (p *prober) fromInput(input int) blas64.General {
	m := p.matrix(p.steps)
	p.reset()
	p.u[input] = 1
	for later := range p.steps {
		p.step()
		p.u[input] = 0
		// What a unit does at a later step depends on how much later alone.
		for j := later; j < p.steps; j++ {
			p.tell(j, func(row int, v float64) { m.Data[row*m.Stride+j-later] = v })
		}
	}
	return m
}

func (p *prober) reset() {
	clear(p.state.Z)
	clear(p.state.H)
}

// step takes the state to the next instant.
func (p *prober) step() {
	c, s := p.c, p.state
	copy(p.before, s.H)
	if p.pieces == nil {
		c.StepLinear(s, p.u, p.y)
		return
	}
	c.senses(s, p.u)
	if p.limited {
		c.fill(s.laws, p.u, s.H)
	} else {
		c.fillHomogeneous(s.laws, p.u, s.H)
	}
	s.solve.linear(s.laws, s.s0, p.pieces, s.E)
	i := 0
	c.conditions(s, func(v, _ float64) {
		p.values[i] = v
		i++
	})
	c.advance(s, p.u, p.y)
}

// tell tells the values of the rows that belong to a step, which is the last one taken.
func (p *prober) tell(step int, row func(row int, v float64)) {
	states := p.c.States()
	for l, look := range p.looks {
		if look == step {
			for i, v := range p.values {
				row(states+i*len(p.looks)+l, v)
			}
		}
	}
	for _, i := range p.at[step] {
		row(states+len(p.values)*len(p.looks)+i, p.read(p.readings[i]))
	}
	if step == p.steps-1 {
		for i := range states {
			row(i, *p.c.place(p.state, i))
		}
	}
}

func (p *prober) read(r Reading) float64 {
	switch r.Of {
	case Node:
		return p.y[r.Item]
	case Source:
		return p.state.E[r.Item]
	case Sense:
		return p.c.senseOf(p.state, r.Item)
	}
	return p.state.E[r.Item] - p.before[r.Item]
}

// fillHomogeneous writes the elements' laws for a step without their constants.
func (c *Compiled) fillHomogeneous(laws []law, u, h []float64) {
	for i := range c.amplifiers {
		a := &c.amplifiers[i]
		var low, high float64
		if a.lowIn >= 0 {
			low = u[a.lowIn]
		}
		if a.highIn >= 0 {
			high = u[a.highIn]
		}
		if a.low > a.high {
			low = (low + high) / 2
			high = low
		}
		laws[i] = law{kind: amplifierElement, den: a.den, num: a.perSlope * h[i], low: low, high: high, down: h[i], up: h[i]}
	}
	i := len(c.amplifiers)
	for _, p := range c.capsules {
		laws[i] = law{kind: capsuleElement, num: u[p.signal]}
		i++
	}
	for _, d := range c.diodes {
		laws[i] = law{kind: diodeElement, resist: d.resist, conducts: d.conducts}
		i++
	}
}

// conditions tells, after a step's sources are found, of what must be from 0 to a bound for the elements to belong on the
// state's pieces. Of a capsule that is cut off they are more than necessary.
func (c *Compiled) conditions(s *State, tell func(v, most float64)) {
	inf := math.Inf(1)
	for i := range s.Pieces {
		l, e, sense := &s.laws[i], s.E[i], s.solve.sense[i]
		limits := func() {
			if a := &c.amplifiers[i]; a.lowIn < 0 && a.highIn < 0 {
				tell(e-l.low, l.high-l.low)
				return
			}
			tell(e-l.low, inf)
			tell(l.high-e, inf)
		}
		switch s.Pieces[i] {
		case Linear:
			switch l.kind {
			case amplifierElement:
				limits()
				if !math.IsInf(c.amplifiers[i].slew, 1) {
					tell(e-l.down, l.up-l.down)
				}
			case capsuleElement:
				tell(e-l.least, inf)
				tell(sense-l.floor, inf)
			case diodeElement:
				if l.conducts {
					tell(e-l.off, inf)
				} else {
					tell(l.forward+l.resist*l.off-sense, inf)
				}
			}
		case High: // it asks for more, and can follow its rail
			tell(sense+l.num-l.den*l.high, inf)
			if a := &c.amplifiers[i]; a.highIn >= 0 && !math.IsInf(a.slew, 1) {
				tell(l.up-l.high, inf)
			}
		case Low:
			tell(l.den*l.low-sense-l.num, inf)
			if a := &c.amplifiers[i]; a.lowIn >= 0 && !math.IsInf(a.slew, 1) {
				tell(l.low-l.down, inf)
			}
		case SlewUp:
			tell(sense+l.num-l.den*l.up, inf)
			limits()
		case SlewDown:
			tell(l.den*l.down-sense-l.num, inf)
			limits()
		case CutOff:
			tell(l.least-l.num, inf)
		case Saturated:
			tell(l.num-e, inf)
			tell(e-l.least, inf)
		case Off:
			tell(l.forward+l.resist*l.off-sense, inf)
		case On:
			tell(e-l.off, inf)
		}
	}
}
