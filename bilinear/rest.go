package bilinear

import "math"

// SolveRest returns the network's operating point: capacitors open, inputs u constant (absolute: volts of the
// driven nodes, amperes of the current sources), amplifiers with
//
//	e = clip[low, high]( Vref + A0·(v+ − v− + Vos) )
//
// and capsules and diodes within their limits. It returns a *[NoPathError] where nodes have no voltage at rest, and a
// *[SingularError] where the equations have no solution.
func SolveRest(n Network, u []float64) (Operating, error) {
	if len(u) != n.inputs() {
		panic("bilinear: wrong number of inputs")
	}
	n.check()
	if lost := n.unreached(); len(lost) > 0 {
		return Operating{}, &NoPathError{lost}
	}
	p, err := newNodal(&n, nil)
	if err != nil {
		return Operating{}, err
	}
	at := Operating{Volts: make([]float64, n.Nodes), Sources: make([]float64, n.elements())}
	for node := range at.Volts {
		for j, x := range u {
			at.Volts[node] += p.vu.At(node, j) * x
		}
	}
	k := n.elements()
	if k == 0 {
		return at, nil
	}
	b := make([]float64, 0, k*k)
	se := n.sense(p.ve)
	for i := range k {
		b = append(b, se.RawRowView(i)[:k]...)
	}
	laws, s0 := n.restLaws(at.Volts, u)
	v := newSolver(k, b)
	if !v.solve(laws, s0, make([]Piece, k), at.Sources) {
		return Operating{}, &SingularError{"the amplifiers have no rest point"}
	}
	for node := range at.Volts {
		for j, e := range at.Sources {
			at.Volts[node] += p.ve.At(node, j) * e
		}
	}
	return at, nil
}

// restLaws returns the elements' laws at rest and their senses without the sources; volts are the nodes' without
// the sources.
func (n *Network) restLaws(volts, u []float64) (laws []law, s0 []float64) {
	for _, a := range n.Amplifiers {
		low, high := a.limits(volts[a.LowRail], volts[a.HighRail])
		leak := 1 / a.OpenLoopGain
		laws = append(laws, law{
			kind: amplifierElement, den: leak, num: a.Offset + leakOf(leak, low, high),
			low: low, high: high, down: math.Inf(-1), up: math.Inf(1),
		})
		s0 = append(s0, a.senseAt(volts))
	}
	for _, c := range n.Capsules {
		laws = append(laws, law{kind: capsuleElement, num: c.Current + u[c.Signal], floor: c.Minimum})
		s0 = append(s0, volts[c.Drain])
	}
	for _, d := range n.Diodes {
		laws = append(laws, law{kind: diodeElement, forward: d.Forward, resist: d.Resistance})
		s0 = append(s0, volts[d.Anode]-volts[d.Cathode])
	}
	return laws, s0
}

// leakOf is what the middle between the limits adds to an amplifier's sense; without a leak its limits may be infinite.
func leakOf(leak, low, high float64) float64 {
	if leak == 0 {
		return 0
	}
	return leak * (low + high) / 2
}
