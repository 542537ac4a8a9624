// Package ripple follows what of the supply comes to the converter, and by which way.
//
// The network is linear, so the supply's way to the converter is the sum of its ways through every part that touches
// it: with the supply held still elsewhere, a part Y from the supply to a node is a current vs·Y into that node. An
// amplifier's share is its supply rejection, and a converter whose span follows the supply sees its rest point move:
//
//	−(Vrest − low)/(high − low)  V a V
package ripple

import (
	"math"
	"math/cmplx"
	"sort"

	"midrail/bilinear"
	"midrail/chain/circuit"
)

// Path is one way from the supply to the converter.
type Path struct {
	Name string
	Gain []complex128 // V at the converter a V of the supply, at each of the frequencies
}

// Ripple is all of the supply at the converter.
type Ripple struct {
	Frequencies []float64 // Hz
	Total       []complex128
	Paths       []Path // the largest first, by their sums over the frequencies
}

// Find follows the supply at the given frequencies in Hz.
func Find(n *circuit.Network, at bilinear.Operating, frequencies []float64) *Ripple {
	r := &Ripple{Frequencies: frequencies, Total: make([]complex128, len(frequencies))}
	index := map[string]int{}
	add := func(name string, i int, gain complex128) {
		k, there := index[name]
		if !there {
			k = len(r.Paths)
			index[name] = k
			r.Paths = append(r.Paths, Path{Name: name, Gain: make([]complex128, len(frequencies))})
		}
		r.Paths[k].Gain[i] += gain
	}
	for i, f := range frequencies {
		// Behind a resistance of its own the supply's node is fed by it: then that is the supply of the paths, and the
		// resistance divides it.
		exact := n.At(f)
		supply := exact.FromInput(circuit.SupplyInput)[n.Supply]
		into := n.HeldSupply(f).Into(n.Output)
		through := func(p circuit.Component, admittance complex128) {
			node := p.B
			if p.B == n.Supply {
				node = p.A
			} else if p.A != n.Supply {
				return
			}
			if !p.Virtual {
				add(p.Part.Name, i, supply*admittance*into.Current(circuit.Ground, node))
			}
		}
		for _, p := range n.Resistors {
			if p.Part.Key != "resistance" {
				through(p, complex(1/p.Part.Value, 0))
			}
		}
		for _, p := range n.Capacitors {
			through(p, complex(0, 2*math.Pi*f*p.Part.Value))
		}
		for k, a := range n.Amplifiers {
			if gain := n.SupplyTerm(k, f); gain != 0 {
				add(a.Name+", rejection", i, supply*gain*into.AmplifierInput(k))
			}
		}
		r.Total[i] = exact.FromInput(circuit.SupplyInput)[n.Output]
		if c := &n.Chain.Converter; c.HighIsSupply {
			reference := complex(-(at.Volts[n.Output]-c.Low)/(c.High-c.Low), 0)
			add("the converter's reference", i, reference)
			r.Total[i] += reference
		}
	}
	size := func(p Path) float64 {
		sum := 0.
		for _, g := range p.Gain {
			sum += cmplx.Abs(g)
		}
		return sum
	}
	sort.SliceStable(r.Paths, func(i, j int) bool { return size(r.Paths[i]) > size(r.Paths[j]) })
	return r
}

// Apart returns the largest difference, over the frequencies, between the paths' sum and the total, in V a V.
func (r *Ripple) Apart() float64 {
	worst := 0.
	for i, total := range r.Total {
		sum := complex128(0)
		for _, p := range r.Paths {
			sum += p.Gain[i]
		}
		worst = math.Max(worst, cmplx.Abs(sum-total))
	}
	return worst
}
