package bilinear

import (
	"math"

	"gonum.org/v1/gonum/blas"
	"gonum.org/v1/gonum/blas/blas64"
)

// Reading is a quantity of a network at one step of a block: what a [Lifted] tells.
type Reading struct {
	Step int // 0 is the block's first
	Of   Quantity
	Item int // the watched node's place in the list given to [Compile], or the element's number
}

// Quantity tells what a [Reading] is of.
type Quantity uint8

// The quantities, from rest.
const (
	Node   Quantity = iota // V of a watched node
	Source                 // e of an element: V of an amplifier, A of others
	Slope                  // V that an amplifier's e moves in half a step at its slope at the step's end
	Sense                  // V that an element follows: v+ − v− of an amplifier, of a capsule's drain, across a diode
)

// Lifted is the linear map over a block of steps: from the state before it, and an input's values over it, to the
// state after it and to readings within it. Each is a matrix in rows: the states after, then the readings. It may be
// shared by goroutines.
type Lifted struct {
	States    int
	FromState blas64.General // rows × States
	FromInput blas64.General // rows × steps
}

// States returns how many numbers the network's state is.
func (c *Compiled) States() int { return c.modes + len(c.amplifiers) }

// Pack puts the state into x, which is as long as [Compiled.States] says.
func (c *Compiled) Pack(x []float64, s *State) {
	copy(x, s.Z)
	copy(x[c.modes:], s.H)
}

// Unpack sets the state from x.
func (c *Compiled) Unpack(s *State, x []float64) {
	copy(s.Z, x)
	copy(s.H, x[c.modes:])
}

// Lift builds the map over a number of steps for the network's given input by probing [Compiled.StepLinear] with unit
// vectors, so that it agrees with it but for rounding.
func (c *Compiled) Lift(steps, input int, readings []Reading) *Lifted {
	p := c.newProber(steps, readings)
	return &Lifted{States: c.States(), FromState: p.fromState(), FromInput: p.fromInput(input)}
}

// Apply adds m·x to y, for a matrix of a [Lifted] or a part of its rows.
func Apply(y []float64, m blas64.General, x []float64) {
	if m.Rows == 0 || m.Cols == 0 {
		return
	}
	blas64.Gemv(blas.NoTrans, 1, m, blas64.Vector{N: m.Cols, Data: x, Inc: 1}, 1, blas64.Vector{N: m.Rows, Data: y, Inc: 1})
}

// Bounds are what an element may do without leaving its linear piece, from rest, with the rails at rest.
type Bounds struct {
	SourceLow, SourceHigh float64 // of its source: V of an amplifier, A of others
	Slew                  float64 // V, of an amplifier, as a [Slope]; +Inf for others
	SenseLow, SenseHigh   float64 // V
}

// Bounds returns the bounds of each element: amplifiers, capsules, diodes.
func (c *Compiled) Bounds() []Bounds {
	inf := math.Inf(1)
	none := Bounds{-inf, inf, inf, -inf, inf}
	var all []Bounds
	for _, a := range c.amplifiers {
		b := none
		b.SourceLow, b.SourceHigh = a.low, a.high
		if a.low > a.high {
			b.SourceLow, b.SourceHigh = a.middle, a.middle
		}
		b.Slew = a.slew
		all = append(all, b)
	}
	for _, p := range c.capsules {
		b := none
		b.SourceLow, b.SenseLow = p.least, p.floor
		all = append(all, b)
	}
	for _, d := range c.diodes {
		b := none
		if d.conducts {
			b.SourceLow = d.off
		} else {
			b.SenseHigh = d.forward
		}
		all = append(all, b)
	}
	return all
}

// RestsOnLimit tells whether an element is at a limit without any signal, so that no step is a linear one.
func (c *Compiled) RestsOnLimit() bool {
	for _, p := range c.capsules {
		if p.residual != 0 {
			return true
		}
	}
	return c.residual
}
