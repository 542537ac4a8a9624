package bilinear

import (
	"math"
	"sort"

	"gonum.org/v1/gonum/mat"
)

// nodal is the passive part of a network: with the histories w of the capacitors, the inputs u and the elements'
// sources e known, every node's voltage is V = Vw·w + Vu·u + Ve·e.
type nodal struct {
	n          *Network
	vw, vu, ve *mat.Dense // nodes × capacitors, inputs, elements
}

// newNodal solves the network's nodal equations with each capacitor as a conductance of conductance(C) beside its
// history current; nil leaves the capacitors open.
func newNodal(n *Network, conductance func(c float64) float64) (*nodal, error) {
	n.check()
	inputs, elements, caps := n.inputs(), n.elements(), len(n.Capacitors)
	// Every node is free, or its voltage is that of one column of [u; e].
	const free, ground = -1, -2
	column := make([]int, n.Nodes)
	for i := range column {
		column[i] = free
	}
	column[Ground] = ground
	for p, node := range n.Drives {
		column[node] = p
	}
	for k, a := range n.Amplifiers {
		if a.OutputResistance == 0 {
			if column[a.Out] != free {
				panic("bilinear: node driven twice")
			}
			column[a.Out] = inputs + k
		}
	}
	row := make([]int, n.Nodes)
	size := 0
	for i, c := range column {
		row[i] = -1
		if c == free {
			row[i] = size
			size++
		}
	}
	width := inputs + elements + caps
	known := mat.NewDense(max(size, 1), max(width, 1), nil) // currents into the free nodes
	y := mat.NewSymDense(max(size, 1), nil)
	inject := func(node, col int, by float64) {
		if r := row[node]; r >= 0 {
			known.Set(r, col, known.At(r, col)+by)
		}
	}
	admit := func(a, b int, g float64) {
		for _, pair := range [...][2]int{{a, b}, {b, a}} {
			from, to := pair[0], pair[1]
			r := row[from]
			if r < 0 {
				continue
			}
			y.SetSym(r, r, y.At(r, r)+g)
			if s := row[to]; s >= 0 {
				if s > r || a == b {
					y.SetSym(r, s, y.At(r, s)-g)
				}
			} else if c := column[to]; c >= 0 {
				known.Set(r, c, known.At(r, c)+g)
			}
		}
	}
	for _, b := range n.Resistors {
		if b.A != b.B {
			admit(b.A, b.B, 1/b.Value)
		}
	}
	for q, b := range n.Capacitors {
		if conductance == nil || b.A == b.B {
			continue
		}
		admit(b.A, b.B, conductance(b.Value))
		inject(b.A, inputs+elements+q, 1)
		inject(b.B, inputs+elements+q, -1)
	}
	for i, c := range n.Currents {
		inject(c.From, len(n.Drives)+i, -1)
		inject(c.To, len(n.Drives)+i, 1)
	}
	k := inputs
	for _, a := range n.Amplifiers {
		if r := a.OutputResistance; r > 0 {
			if i := row[a.Out]; i >= 0 {
				y.SetSym(i, i, y.At(i, i)+1/r)
				inject(a.Out, k, 1/r)
			}
		}
		k++
	}
	for _, c := range n.Capsules {
		inject(c.Drain, k, -1)
		k++
	}
	for _, d := range n.Diodes {
		inject(d.Anode, k, -1)
		inject(d.Cathode, k, 1)
		k++
	}
	var v mat.Dense
	if size > 0 {
		if err := solveScaled(&v, y, known, size); err != nil {
			return nil, err
		}
	}
	s := &nodal{n: n, vu: mat.NewDense(n.Nodes, max(inputs, 1), nil), ve: mat.NewDense(n.Nodes, max(elements, 1), nil), vw: mat.NewDense(n.Nodes, max(caps, 1), nil)}
	at := func(node, col int) float64 {
		switch {
		case row[node] >= 0:
			return v.At(row[node], col)
		case column[node] == col:
			return 1
		}
		return 0
	}
	for node := range n.Nodes {
		for c := range width {
			x := at(node, c)
			switch {
			case c < inputs:
				s.vu.Set(node, c, x)
			case c < inputs+elements:
				s.ve.Set(node, c-inputs, x)
			default:
				s.vw.Set(node, c-inputs-elements, x)
			}
		}
	}
	return s, nil
}

// solveScaled solves y·v = known for a conductance matrix, which is scaled to a unit diagonal first.
func solveScaled(v *mat.Dense, y *mat.SymDense, known *mat.Dense, size int) error {
	scale := make([]float64, size)
	for i := range scale {
		d := y.At(i, i)
		if !(d > 0) || math.IsInf(d, 0) {
			return &SingularError{"a node hangs on nothing"}
		}
		scale[i] = 1 / math.Sqrt(d)
	}
	scaled := mat.NewSymDense(size, nil)
	for i := range size {
		for j := i; j < size; j++ {
			scaled.SetSym(i, j, y.At(i, j)*scale[i]*scale[j])
		}
	}
	_, width := known.Dims()
	rhs := mat.NewDense(size, width, nil)
	for i := range size {
		for j := range width {
			rhs.Set(i, j, known.At(i, j)*scale[i])
		}
	}
	var chol mat.Cholesky
	if !chol.Factorize(scaled) {
		return &SingularError{"the circuit's conductances are too far apart to be told from each other"}
	}
	if err := chol.SolveTo(v, rhs); err != nil {
		if _, poor := err.(mat.Condition); !poor {
			return &SingularError{err.Error()}
		}
	}
	for i := range size {
		for j := range width {
			v.Set(i, j, v.At(i, j)*scale[i])
		}
	}
	return nil
}

// sense returns, for each element, the difference of node voltages that it follows: v+ − v− of an amplifier, the
// drain voltage of a capsule, anode minus cathode of a diode. m has a row for each node.
func (n *Network) sense(m mat.Matrix) *mat.Dense {
	_, width := m.Dims()
	s := mat.NewDense(max(n.elements(), 1), width, nil)
	k := 0
	put := func(plus, minus int) {
		for j := range width {
			s.Set(k, j, s.At(k, j)+m.At(plus, j)-m.At(minus, j))
		}
		k++
	}
	for _, a := range n.Amplifiers {
		for _, t := range a.Terms {
			for j := range width {
				s.Set(k, j, s.At(k, j)+t.Gain*m.At(t.Node, j))
			}
		}
		put(a.Plus, a.Minus)
	}
	for _, c := range n.Capsules {
		put(c.Drain, Ground)
	}
	for _, d := range n.Diodes {
		put(d.Anode, d.Cathode)
	}
	return s
}

// unreached returns the nodes without a resistive path to a node of known voltage.
func (n *Network) unreached() []int {
	parent := make([]int, n.Nodes)
	for i := range parent {
		parent[i] = i
	}
	find := func(i int) int {
		for parent[i] != i {
			parent[i] = parent[parent[i]]
			i = parent[i]
		}
		return i
	}
	join := func(a, b int) { parent[find(a)] = find(b) }
	for _, d := range n.Drives {
		join(d, Ground)
	}
	for _, a := range n.Amplifiers {
		join(a.Out, Ground)
	}
	for _, r := range n.Resistors {
		join(r.A, r.B)
	}
	var list []int
	for i := range n.Nodes {
		if find(i) != find(Ground) {
			list = append(list, i)
		}
	}
	sort.Ints(list)
	return list
}
