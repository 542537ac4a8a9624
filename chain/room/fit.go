// Package room tells how far each stage's excursions are from its limits, and which part would make them fit.
package room

import (
	"math/cmplx"

	"midrail/chain"
	"midrail/chain/circuit"
	"midrail/chain/render"
)

// gainParts are the parts that set a stage kind's gain, and whether less of them is less gain.
var gainParts = map[string]struct {
	key  string
	less bool
}{
	"inverting":                  {"r_f", true},
	"summer":                     {"r_f", true},
	"non-inverting":              {"r_f", true},
	"sallen-key low-pass":        {"r_b", true},
	"multiple-feedback low-pass": {"r_1", false},
}

// tries bounds the search: three decades of E24.
const tries = 72

// Fit returns the part that sets the gain in front of or around the k-th amplifier, and the preferred value nearest
// to its present one with which the excursions that a run asked for would stay within the amplifier's limits, and the room
// in dB that is left then. It reports false where no such part is found.
func Fit(n *circuit.Network, r *render.Result, k int) (part chain.Part, value, left float64, ok bool) {
	room := r.Amplifiers[k].Room()
	part, less, ok := gainPart(n.Chain, n.Amplifiers[k].Stage)
	if !ok {
		return chain.Part{}, 0, 0, false
	}
	series := part.Preferred()
	out := n.Amplifiers[k].Out
	before := loudest(n, out)
	value = part.Value
	for range tries {
		if less {
			value = series.Down(value)
		} else {
			value = series.Up(value)
		}
		with, ok := n.With(part.Name, value)
		if !ok {
			return chain.Part{}, 0, 0, false
		}
		if louder := circuit.Gain(complex(loudest(with, out)/before, 0)); louder <= room {
			return part, value, room - louder, true
		}
	}
	return chain.Part{}, 0, 0, false
}

// gainPart finds the part that sets the gain of the i-th stage, or of the nearest one before it that has such a part.
func gainPart(c *chain.Chain, i int) (part chain.Part, less, ok bool) {
	for range len(c.Stages) {
		if i < 0 {
			return
		}
		s := &c.Stages[i]
		if g, has := gainParts[s.Kind.Name]; has {
			if p, there := s.Part(g.key); there {
				return p, g.less, true
			}
		}
		if len(s.From) != 1 {
			return
		}
		i = stageIndex(c, s.From[0])
	}
	return
}

func stageIndex(c *chain.Chain, name string) int {
	for i := range c.Stages {
		if c.Stages[i].Name == name {
			return i
		}
	}
	return -1
}

// loudest returns the largest gain from any input to the node at frequencies of speech and music.
func loudest(n *circuit.Network, node int) float64 {
	most := 0.
	for _, f := range [...]float64{100, 200, 500, 1000, 2000, 5000} {
		into := n.At(f).Into(node)
		for i, in := range n.Inputs {
			most = max(most, magnitude(into.Input(circuit.SoundInput(i)))*abs(in.Scale))
		}
	}
	return most
}

func magnitude(h complex128) float64 { return cmplx.Abs(h) }

func abs(x float64) float64 { return max(x, -x) }
