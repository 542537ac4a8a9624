package bilinear

import "gonum.org/v1/gonum/floats"

// Lifted is the linear map over a block of steps: from the state before it and one input's values over it to the
// state after it and the voltages of some nodes at its last instant. It may be shared by goroutines.
type Lifted struct {
	steps, states int
	rows          [][]float64 // for each state after, then each node: weights of [state before, input over the block]
}

// Lift builds the map over a number of steps for the network's given input, by probing [Compiled.StepLinear] with
// unit vectors, so that it agrees with it but for rounding. nodes are positions in the watch list given to [Compile].
func (c *Compiled) Lift(steps, input int, nodes []int) *Lifted {
	states := c.modes + len(c.amplifiers)
	l := &Lifted{steps: steps, states: states, rows: make([][]float64, states+len(nodes))}
	for i := range l.rows {
		l.rows[i] = make([]float64, states+steps)
	}
	s, u, y := c.Start(), make([]float64, c.inputs), make([]float64, c.watched)
	record := func(column int) {
		for i := range states {
			l.rows[i][column] = *c.place(s, i)
		}
		for i, node := range nodes {
			l.rows[states+i][column] = y[node]
		}
	}
	for from := range states {
		clear(s.Z)
		clear(s.H)
		*c.place(s, from) = 1
		for range steps {
			c.StepLinear(s, u, y)
		}
		record(from)
	}
	// A unit at the block's step j has steps−j steps to go, the one it enters at included.
	clear(s.Z)
	clear(s.H)
	u[input] = 1
	for j := steps - 1; j >= 0; j-- {
		c.StepLinear(s, u, y)
		u[input] = 0
		record(states + j)
	}
	return l
}

// States returns the length of the state that [Lifted.Step] takes.
func (l *Lifted) States() int { return l.states }

// Step takes the state over a block, whose input is u, and puts the nodes' voltages from rest at its last instant
// into y. scratch is for its own use and as long as the state. It panics where a length is wrong.
func (l *Lifted) Step(state, u, y, scratch []float64) {
	if len(state) != l.states || len(scratch) != l.states || len(u) != l.steps || len(y) != len(l.rows)-l.states {
		panic("bilinear: wrong length of a lifted step")
	}
	for i, row := range l.rows {
		v := floats.Dot(row[:l.states], state) + floats.Dot(row[l.states:], u)
		if i < l.states {
			scratch[i] = v
		} else {
			y[i-l.states] = v
		}
	}
	copy(state, scratch)
}
