package bilinear

import "math"

// law is what one element asks of its source e and its sense s = v+ − v− (or the drain's, or the diode's voltage) at
// one instant. All elements are of one form: on each piece either e is fixed, or  den·e − slope·s = num.
type law struct {
	kind            elementKind
	num, den        float64 // the linear piece: den·e − s = num; slope is 1 for amplifiers, 0 for capsules
	low, high       float64 // amplifier: limits of e
	down, up        float64 // amplifier: e at the slew rate
	least           float64 // capsule: e where no current flows
	floor           float64 // capsule: s at the lowest drain voltage
	forward, resist float64 // diode: s where it begins to conduct, less what it drops at rest; Ω
	off             float64 // diode: e where it does not conduct
	conducts        bool    // diode: whether it conducts at rest
}

type elementKind uint8

const (
	amplifierElement elementKind = iota
	capsuleElement
	diodeElement
)

// row writes the piece's equation  a·e + b·s = c.
func (l *law) row(p Piece) (a, b, c float64) {
	switch p {
	case High:
		return 1, 0, l.high
	case Low:
		return 1, 0, l.low
	case SlewUp:
		return 1, 0, l.up
	case SlewDown:
		return 1, 0, l.down
	case CutOff:
		return 1, 0, l.least
	case Saturated:
		return 0, 1, l.floor
	case Off:
		return 1, 0, l.off
	case On:
		return -l.resist, 1, l.forward
	}
	switch l.kind {
	case capsuleElement:
		return 1, 0, l.num
	case diodeElement:
		if l.conducts {
			return l.row(On)
		}
		return l.row(Off)
	}
	return l.den, -1, l.num
}

// slack is by how much, relative to the quantities compared, a bound may be passed in rounding.
const slack = 1e-13

// proper returns the piece that the element belongs on, being on piece p with source e and sense s; p itself where
// it may stay.
func (l *law) proper(p Piece, e, s float64) Piece {
	switch l.kind {
	case capsuleElement:
		switch p {
		case Linear:
			if e < l.least {
				return CutOff
			}
			if s < l.floor-slack*(1+math.Abs(l.floor)) {
				return Saturated
			}
		case CutOff: // it belongs here while it asks for no more than nothing, or its drain lies too low to draw
			if l.num > l.least && s > l.floor {
				return Linear
			}
		case Saturated: // while it asks for more than the drain can give
			if e > l.num {
				return l.proper(Linear, l.num, math.Inf(1))
			}
			if e < l.least {
				return CutOff
			}
		}
		return p
	case diodeElement:
		on := p == On || p == Linear && l.conducts
		switch {
		case on && e < l.off-slack*math.Abs(l.off):
			on = false
		case !on && s > l.forward+l.resist*l.off+slack*(1+math.Abs(l.forward)):
			on = true
		}
		switch {
		case on == l.conducts:
			return Linear
		case on:
			return On
		}
		return Off
	}
	target := e
	if p != Linear { // where would it go with the sense as it is?
		target = s + l.num
		if l.den > 0 {
			target /= l.den
		} else if math.Abs(target) > slack*(math.Abs(s)+math.Abs(l.num)) {
			target = math.Copysign(math.Inf(1), target)
		} else {
			target = e
		}
	}
	// A bound is passed only by more than rounding, whichever side it is looked at from.
	beyond := func(bound float64, on Piece, sign float64) bool {
		by := slack * (1 + math.Abs(bound))
		if p == on {
			by = -by
		}
		return sign*(target-bound) > by
	}
	q, held := Linear, target
	if beyond(l.up, SlewUp, 1) {
		q, held = SlewUp, l.up
	} else if beyond(l.down, SlewDown, -1) {
		q, held = SlewDown, l.down
	}
	switch {
	case q == Linear && beyond(l.high, High, 1), q != Linear && held > l.high:
		return High
	case q == Linear && beyond(l.low, Low, -1), q != Linear && held < l.low:
		return Low
	}
	return q
}

// solver finds the pieces and sources of all elements: s = s0 + B·e with each element on its proper piece.
type solver struct {
	k      int
	b      []float64 // B, row by row
	matrix []float64 // scratch
	rhs    []float64
	sense  []float64
	key    []byte
	// inverses are those of the matrices of the combinations of pieces met so far; nil for a singular one. What they are
	// made from, den and resist of the laws, is the same at every step.
	inverses map[string][]float64
}

func newSolver(k int, b []float64) solver {
	return solver{
		k: k, b: b, matrix: make([]float64, k*k), rhs: make([]float64, k), sense: make([]float64, k),
		key: make([]byte, k), inverses: map[string][]float64{},
	}
}

// mostInverses and mostKept bound what is kept of the combinations met: how many there are of them, and how many numbers in all.
const mostInverses, mostKept = 1024, 1 << 22

// policyTries is how often all elements are put on their proper pieces before the search turns to one at a time.
const policyTries = 24

// solve starts from pieces and leaves the solution in pieces and e. It reports false where it found none.
func (v *solver) solve(laws []law, s0 []float64, pieces []Piece, e []float64) bool {
	for range policyTries {
		if !v.linear(laws, s0, pieces, e) {
			break
		}
		if !v.settle(laws, pieces, e, v.k) {
			return true
		}
	}
	// One element at a time, the first that is out of place, and to a piece beside its own: this cannot swing between two
	// states of several. K. G. Murty, "Note on a Bard-type scheme for solving the complementarity problem", Opsearch 11 (1974).
	for range 64 * v.k {
		if !v.linear(laws, s0, pieces, e) {
			break
		}
		if !v.settle(laws, pieces, e, 1) {
			return true
		}
	}
	return v.follow(laws, s0, pieces) && v.linear(laws, s0, pieces, e)
}

// settle moves up to most elements to their proper pieces and reports whether it moved any.
func (v *solver) settle(laws []law, pieces []Piece, e []float64, most int) bool {
	moved := 0
	for i := range laws {
		if p := laws[i].proper(pieces[i], e[i], v.sense[i]); p != pieces[i] {
			if most == 1 && pieces[i] != Linear && laws[i].kind == amplifierElement {
				p = Linear // what lies between its limits
			}
			pieces[i] = p
			if moved++; moved == most {
				break
			}
		}
	}
	return moved > 0
}

// linear solves for e with every element on its piece, and leaves the senses. It reports false where the equations
// are singular.
func (v *solver) linear(laws []law, s0 []float64, pieces []Piece, e []float64) bool {
	inverse := v.inverse(laws, pieces)
	if inverse == nil {
		return false
	}
	k := v.k
	for i := range k {
		_, b, c := laws[i].row(pieces[i])
		v.rhs[i] = c - float64(b*s0[i])
	}
	times(e, inverse, v.rhs)
	for i := range k {
		sum := s0[i]
		for j, x := range e {
			sum = math.FMA(v.b[i*k+j], x, sum)
		}
		v.sense[i] = sum
	}
	return true
}

// times sets y = m·x for a square matrix m.
func times(y, m, x []float64) {
	k := len(x)
	for i := range y {
		sum := 0.
		for j, v := range x {
			sum = math.FMA(m[i*k+j], v, sum)
		}
		y[i] = sum
	}
}

// inverse returns the inverse of the equations' matrix, (a + b·B)⁻¹; nil where there is none.
func (v *solver) inverse(laws []law, pieces []Piece) []float64 {
	for i, p := range pieces {
		v.key[i] = byte(p)
	}
	inverse, known := v.inverses[string(v.key)]
	if known {
		return inverse
	}
	k := v.k
	inverse = make([]float64, k*k)
	for i := range k {
		a, b, _ := laws[i].row(pieces[i])
		row := v.matrix[i*k : (i+1)*k]
		for m := range row {
			row[m] = b * v.b[i*k+m]
		}
		row[i] += a
		inverse[i*k+i] = 1
	}
	if !gauss(v.matrix, inverse, k) {
		inverse = nil
	}
	if most := min(mostInverses, mostKept/max(1, k*k)); len(v.inverses) >= most {
		clear(v.inverses)
	}
	v.inverses[string(v.key)] = inverse
	return inverse
}

// gauss solves m·x = b in place, b, of k rows, becoming x; false where m is singular or the result is not finite.
func gauss(m, b []float64, k int) bool {
	if k == 0 {
		return true
	}
	width := len(b) / k
	of := func(r int) []float64 { return b[r*width : (r+1)*width] }
	for c := range k {
		at, best := -1, 0.
		for r := c; r < k; r++ {
			if a := math.Abs(m[r*k+c]); a > best {
				at, best = r, a
			}
		}
		if at < 0 {
			return false
		}
		if at != c {
			for j := c; j < k; j++ {
				m[c*k+j], m[at*k+j] = m[at*k+j], m[c*k+j]
			}
			top, other := of(c), of(at)
			for j := range top {
				top[j], other[j] = other[j], top[j]
			}
		}
		for r := c + 1; r < k; r++ {
			f := m[r*k+c] / m[c*k+c]
			if f == 0 {
				continue
			}
			for j := c + 1; j < k; j++ {
				m[r*k+j] -= f * m[c*k+j]
			}
			for j, x := range of(c) {
				of(r)[j] -= f * x
			}
		}
	}
	for c := k - 1; c >= 0; c-- {
		row := of(c)
		for j := c + 1; j < k; j++ {
			for i, x := range of(j) {
				row[i] -= m[c*k+j] * x
			}
		}
		for i := range row {
			row[i] /= m[c*k+c]
			if math.IsNaN(row[i]) || math.IsInf(row[i], 0) {
				return false
			}
		}
	}
	return true
}
