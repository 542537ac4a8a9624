package bilinear

import (
	"math"
	"math/cmplx"

	"gonum.org/v1/gonum/mat"
)

// Compiled is a network ready to be stepped at a rate, around an operating point. It is not changed once made and
// may be shared by goroutines; what changes is in a [State].
type Compiled struct {
	rate                    float64
	modes, inputs, elements int
	watched                 int

	// Passive part: z' = λ·z + Bu·u + Be·e, sense s = Sz·z + Su·u + B·e, watched y = Yz·z + Yu·u + Ye·e.
	// Each of the three has one row after the other of [z u e].
	lambda []float64
	drive  []float64 // modes × (inputs + elements)
	sense  []float64 // elements × (modes + inputs)
	b      []float64 // elements × elements
	watch  []float64 // watched × (modes + inputs + elements)
	weight []float64 // V, how much each mode moves any node at most

	amplifiers []amplifierLaw
	capsules   []capsuleLaw
	diodes     []diodeLaw
	linear     []float64 // elements × elements: e = linear·(num + s0) where every element is on its linear piece
	residual   bool      // whether an amplifier rests on a limit
}

// amplifierLaw is what the law of an amplifier is made from at each step, in deviations from the operating point.
type amplifierLaw struct {
	perSlope        float64 // 1/(ωt·k), k = T/2; 0: ideal
	den             float64 // 1/(ωt·k) + 1/A0
	residual        float64 // v+ − v− + Vos − (e − Vref)/A0 at rest: 0 but on a limit
	k               float64 // s, half a step
	slew            float64 // V, slew rate times half a step
	low, high       float64 // V, limits of e
	lowIn, highIn   int     // inputs that move them; −1: none
	middle          float64 // V, midway between the rails, where crossed limits hold e
	lowRail, hiRail float64 // V at rest
}

type capsuleLaw struct {
	signal       int
	residual     float64 // A, what the capsule asks for at rest beyond what it draws: 0 but with the drain at its lowest
	least, floor float64
}

type diodeLaw struct {
	forward, resist, off float64
	conducts             bool
}

// State is where a network stands between two steps. E and Pieces belong to the last step.
type State struct {
	Z      []float64 // modes of the capacitors' histories
	H      []float64 // e + (T/2)·g of each amplifier, V from rest
	E      []float64 // e of each amplifier in V, drain current of each capsule, current of each diode in A, from rest
	Pieces []Piece
	Held   int64 // steps so far at which the elements' laws had no solution that could be found

	s0    []float64
	num   []float64
	laws  []law
	solve solver
}

// Compile prepares a network for stepping at a rate in Hz around its operating point; watch lists the nodes whose
// voltages [Compiled.Step] tells.
//
// Every capacitor becomes its trapezoidal companion, a conductance Gc = 2C/T beside a history current w, with
// w' = 2·Gc·v − w: the bilinear transform s = (2/T)(z−1)/(z+1) of the circuit itself. With the elements' sources e
// and the inputs known the rest is passive, so in √Gc⁻¹·w the step is symmetric, and diagonal in the coordinates of
// its eigenvectors, with eigenvalues from −1 to 1. Modes that move no node are left out.
//
// Yeh, Abel, Smith, "Automated physical modeling of nonlinear audio circuits for real-time audio effects", IEEE
// Trans. ASLP 18 (2010), for the nodal discretisation.
//
// It returns a *[SingularError] where the network cannot be solved, and panics where the description breaks its own
// rules.
func Compile(n Network, at Operating, rate float64, watch []int) (*Compiled, error) {
	if !(rate > 0) {
		panic("bilinear: rate must be above 0")
	}
	if len(at.Volts) != n.Nodes || len(at.Sources) != n.elements() {
		panic("bilinear: operating point of another network")
	}
	twice := 2 * rate
	p, err := newNodal(&n, func(c float64) float64 { return twice * c })
	if err != nil {
		return nil, err
	}
	c := &Compiled{rate: rate, inputs: n.inputs(), elements: n.elements(), watched: len(watch)}
	modal := c.diagonalise(&n, p, twice) // nodes × modes
	c.compileRows(&n, p, modal, watch)
	c.compileLaws(&n, at, rate)
	if !c.invert() {
		return nil, &SingularError{"the amplifiers' equations have no one solution"}
	}
	return c, nil
}

// diagonalise finds the modes; it returns the node voltages that each makes.
func (c *Compiled) diagonalise(n *Network, p *nodal, twice float64) *mat.Dense {
	caps := len(n.Capacitors)
	if caps == 0 {
		return nil
	}
	root := make([]float64, caps)
	for q, b := range n.Capacitors {
		root[q] = math.Sqrt(twice * b.Value)
	}
	across := func(m mat.Matrix, q, j int) float64 { return m.At(n.Capacitors[q].A, j) - m.At(n.Capacitors[q].B, j) }
	m := mat.NewSymDense(caps, nil)
	for q := range caps {
		for r := q; r < caps; r++ {
			m.SetSym(q, r, root[q]*(across(p.vw, q, r)+across(p.vw, r, q))/2*root[r])
		}
	}
	var eigen mat.EigenSym
	if !eigen.Factorize(m, true) {
		panic("bilinear: no eigenvalues of a symmetric matrix")
	}
	var vectors mat.Dense
	eigen.VectorsTo(&vectors)
	share := eigen.Values(nil) // how much of a history's energy passes on: 0 moves no node
	keep := make([]int, 0, caps)
	for j, s := range share {
		if s > unseen {
			keep = append(keep, j)
		}
	}
	c.modes = len(keep)
	modal := mat.NewDense(n.Nodes, max(c.modes, 1), nil)
	c.lambda = make([]float64, c.modes)
	c.weight = make([]float64, c.modes)
	width := c.inputs + c.elements
	c.drive = make([]float64, c.modes*width)
	for i, j := range keep {
		c.lambda[i] = 2*math.Min(share[j], 1) - 1
		for node := range n.Nodes {
			sum := 0.
			for q := range caps {
				sum += p.vw.At(node, q) * root[q] * vectors.At(q, j)
			}
			modal.Set(node, i, sum)
			c.weight[i] = math.Max(c.weight[i], math.Abs(sum))
		}
		for q := range caps {
			by := 2 * root[q] * vectors.At(q, j)
			for u := range c.inputs {
				c.drive[i*width+u] += by * across(p.vu, q, u)
			}
			for e := range c.elements {
				c.drive[i*width+c.inputs+e] += by * across(p.ve, q, e)
			}
		}
	}
	return modal
}

// unseen is the eigenvalue below which a mode is the null space of a loop of capacitors and sources in rounding.
const unseen = 1e-13

func (c *Compiled) compileRows(n *Network, p *nodal, modal *mat.Dense, watch []int) {
	for _, node := range watch {
		for j := range c.modes {
			c.watch = append(c.watch, modal.At(node, j))
		}
		for j := range c.inputs {
			c.watch = append(c.watch, p.vu.At(node, j))
		}
		for j := range c.elements {
			c.watch = append(c.watch, p.ve.At(node, j))
		}
	}
	if c.elements == 0 {
		return
	}
	var sz *mat.Dense
	if c.modes > 0 {
		sz = n.sense(modal)
	}
	su, se := n.sense(p.vu), n.sense(p.ve)
	for k := range c.elements {
		for j := range c.modes {
			c.sense = append(c.sense, sz.At(k, j))
		}
		for j := range c.inputs {
			c.sense = append(c.sense, su.At(k, j))
		}
		for j := range c.elements {
			c.b = append(c.b, se.At(k, j))
		}
	}
}

func (c *Compiled) compileLaws(n *Network, at Operating, rate float64) {
	input := func(node int) int {
		for p, d := range n.Drives {
			if d == node {
				return p
			}
		}
		return -1
	}
	k := 1 / (2 * rate)
	width := c.modes + c.inputs
	for i, a := range n.Amplifiers {
		e := at.Sources[i]
		l := amplifierLaw{
			perSlope: 1 / (2 * math.Pi * a.GainBandwidth * k), k: k, slew: a.SlewRate * k,
			lowIn: input(a.LowRail), highIn: input(a.HighRail),
			lowRail: at.Volts[a.LowRail], hiRail: at.Volts[a.HighRail],
		}
		leak := 1 / a.OpenLoopGain
		l.den = l.perSlope + leak
		low, high := a.limits(l.lowRail, l.hiRail)
		l.low, l.high = l.lowRail+a.LowMargin-e, l.hiRail-a.HighMargin-e
		l.middle = (l.lowRail+l.hiRail)/2 - e
		if e <= low || e >= high {
			l.residual = a.senseAt(at.Volts) + a.Offset - e*leak + leakOf(leak, low, high)
			c.residual = c.residual || l.residual != 0
		}
		// The rails carry Vref, and through the finite gain a little of their movement into the sense.
		for _, in := range [...]int{l.lowIn, l.highIn} {
			if in >= 0 {
				c.sense[i*width+c.modes+in] += leak / 2
			}
		}
		c.amplifiers = append(c.amplifiers, l)
	}
	i := len(n.Amplifiers)
	for _, s := range n.Capsules {
		c.capsules = append(c.capsules, capsuleLaw{signal: s.Signal, residual: s.Current - at.Sources[i], least: -at.Sources[i], floor: s.Minimum - at.Volts[s.Drain]})
		i++
	}
	for _, d := range n.Diodes {
		rest := at.Sources[i]
		v := at.Volts[d.Anode] - at.Volts[d.Cathode]
		c.diodes = append(c.diodes, diodeLaw{forward: d.Forward - v + d.Resistance*rest, resist: d.Resistance, off: -rest, conducts: rest > 0})
		i++
	}
}

// senseAt returns v+ − v− with all its terms.
func (a *Amplifier) senseAt(volts []float64) float64 {
	sum := volts[a.Plus] - volts[a.Minus]
	for _, t := range a.Terms {
		sum += t.Gain * volts[t.Node]
	}
	return sum
}

// limits returns the limits of e with the rails at the given voltages.
func (a *Amplifier) limits(lowRail, highRail float64) (low, high float64) {
	low, high = lowRail+a.LowMargin, highRail-a.HighMargin
	if low > high {
		low = (lowRail + highRail) / 2
		high = low
	}
	return low, high
}

// invert prepares the solution with every element on its linear piece.
func (c *Compiled) invert() bool {
	k := c.elements
	c.linear = make([]float64, k*k)
	laws := make([]law, k)
	c.fill(laws, make([]float64, c.inputs), make([]float64, len(c.amplifiers)))
	v := newSolver(k, c.b)
	e, s0, pieces := make([]float64, k), make([]float64, k), make([]Piece, k)
	for j := range k {
		for i := range laws {
			laws[i].num = 0
			if laws[i].kind == diodeElement {
				laws[i].forward, laws[i].off = 0, 0
			}
		}
		// A unit on the right-hand side of row j.
		switch l := &laws[j]; {
		case l.kind == diodeElement && l.conducts:
			l.forward = 1
		case l.kind == diodeElement:
			l.off = 1
		default:
			l.num = 1
		}
		if !v.linear(laws, s0, pieces, e) {
			return false
		}
		for i := range k {
			c.linear[i*k+j] = e[i]
		}
	}
	return true
}

// Start returns the state at rest.
func (c *Compiled) Start() *State {
	return &State{
		Z: make([]float64, c.modes), H: make([]float64, len(c.amplifiers)),
		E: make([]float64, c.elements), Pieces: make([]Piece, c.elements),
		s0: make([]float64, c.elements), num: make([]float64, c.elements),
		laws: make([]law, c.elements), solve: newSolver(c.elements, c.b),
	}
}

// Size returns a bound in V on how far a packed state, as the difference of two, moves the nodes' voltages and the
// amplifiers' sources.
func (c *Compiled) Size(x []float64) float64 {
	sum := 0.
	for i, v := range x {
		if i < c.modes {
			v *= c.weight[i]
		}
		sum += math.Abs(v)
	}
	return sum
}

// Poles returns the network's natural frequencies in rad/s with every element on its linear piece: the eigenvalues ζ
// of the step, mapped back by s = (2/T)(ζ−1)/(ζ+1), which is exact.
func (c *Compiled) Poles() []complex128 {
	var states []int // of [Z H]; an ideal amplifier's H is no state
	for i := range c.modes {
		states = append(states, i)
	}
	for i, a := range c.amplifiers {
		if a.perSlope > 0 {
			states = append(states, c.modes+i)
		}
	}
	if len(states) == 0 {
		return nil
	}
	m := mat.NewDense(len(states), len(states), nil)
	s, u := c.Start(), make([]float64, c.inputs)
	for j, from := range states {
		clear(s.Z)
		clear(s.H)
		*c.place(s, from) = 1
		c.StepLinear(s, u, nil)
		for i, to := range states {
			m.Set(i, j, *c.place(s, to))
		}
	}
	var eigen mat.Eigen
	if !eigen.Factorize(m, mat.EigenNone) {
		panic("bilinear: no eigenvalues of a finite matrix")
	}
	var poles []complex128
	for _, z := range eigen.Values(nil) {
		if cmplx.Abs(z+1) > noDynamics {
			poles = append(poles, complex(2*c.rate, 0)*(z-1)/(z+1))
		}
	}
	return poles
}

// noDynamics is how near to −1 an eigenvalue of the step is that comes from no pole, as of a capacitor that an ideal
// amplifier holds.
const noDynamics = 1e-9

// place returns the i-th state of [Z H].
func (c *Compiled) place(s *State, i int) *float64 {
	if i < c.modes {
		return &s.Z[i]
	}
	return &s.H[i-c.modes]
}
