package bilinear

import "math"

// box is an element's law in one form for all kinds: the source e lies within [low, high], and
//
//	r = s + num − den·e   is 0 inside, 0 or more at the upper end, 0 or less at the lower end.
//
// An amplifier's e is its voltage, within what its limits and its slew rate leave. A capsule's is its current, from
// nothing to what it asks for, and within it the drain is held at its lowest. A diode's is its current, from nothing on,
// and while there is any the diode drops what it does.
type box struct {
	num, den  float64
	low, high float64
	at        end
}

// end is where in its box an element stands.
type end int8

const (
	lower end = iota - 1
	inside
	upper
)

// mostCurrent stands for a diode's unlimited current, in A.
const mostCurrent = 1e9

func (l *law) box() box {
	switch l.kind {
	case capsuleElement:
		return box{num: -l.floor, low: l.least, high: math.Max(l.num, l.least)}
	case diodeElement:
		return box{num: -l.forward, den: l.resist, low: l.off, high: mostCurrent}
	}
	within := func(x float64) float64 { return math.Min(math.Max(x, l.low), l.high) }
	return box{num: l.num, den: l.den, low: within(l.down), high: within(l.up)}
}

// piece names the end of its box that an element stands at.
func (l *law) piece(at end) Piece {
	switch l.kind {
	case capsuleElement:
		if l.num <= l.least {
			return CutOff
		}
		return [...]Piece{CutOff, Saturated, Linear}[at+1]
	case diodeElement:
		switch on := at != lower; {
		case on == l.conducts:
			return Linear
		case on:
			return On
		}
		return Off
	}
	switch {
	case at == upper && l.up < l.high && l.up >= l.low:
		return SlewUp
	case at == upper:
		return High
	case at == lower && l.down > l.low && l.down <= l.high:
		return SlewDown
	case at == lower:
		return Low
	}
	return Linear
}

// follow finds pieces that solve the laws by following the solution from boxes of no size, where each element stands
// at a known end, to the boxes as they are: every box is drawn together to a point by a factor t, and as t grows
// from 0 to 1 the solution moves in straight lines, from one in which one element leaves an end or comes to one to the
// next, t turning back where it must. There is but one solution at 0, so that the path ends at 1 whatever the network,
// unless two elements change at once or the equations on the way have no one solution; then it sets out from other
// points. It reports false where no path of several leads there.
//
// A. J. J. Talman, Y. Yamamoto, "A simplicial algorithm for stationary point problems on polytopes", Mathematics of
// Operations Research 14 (1989), from memory; J. Katzenelson, "An algorithm for solving nonlinear resistor networks",
// Bell System Technical Journal 44 (1965), for networks.
func (v *solver) follow(laws []law, s0 []float64, pieces []Piece) bool {
	k := v.k
	p := path{k: k, b: v.b, s0: s0, boxes: make([]box, k), start: make([]float64, k), x: make([]float64, k), y: make([]float64, k)}
	for try := range mostPaths {
		for i := range laws {
			p.boxes[i] = laws[i].box()
			// No two elements stand alike, so that none changes with another.
			_, share := math.Modf(float64(i*mostPaths+try+1) * math.Phi)
			p.start[i] = p.boxes[i].point(share)
		}
		if p.follow() && p.solves() {
			for i := range laws {
				pieces[i] = laws[i].piece(p.boxes[i].at)
			}
			return true
		}
	}
	return false
}

// mostPaths is how many paths are tried.
const mostPaths = 16

// point returns the point that has a share of the box below it; of one that is open, that lies a share of 1 within it.
func (b *box) point(share float64) float64 {
	switch {
	case math.IsInf(b.low, 0) && math.IsInf(b.high, 0):
		return 0
	case b.high == mostCurrent || math.IsInf(b.high, 0):
		return b.low + share
	case math.IsInf(b.low, 0):
		return b.high - share
	}
	return b.low + float64(share*(b.high-b.low))
}

// follow follows the path and reports whether it comes to its end.
func (p *path) follow() bool {
	if !p.begin() {
		return false
	}
	t, forward, last := 0., 1., -1
	for range 64 * (p.k + 1) {
		to, which, at := p.next(t, forward, last)
		if which < 0 {
			return forward > 0
		}
		from := p.boxes[which].at
		p.boxes[which].at = at
		if !p.solve() {
			return false
		}
		// On its new piece the element must move away from where it changed.
		away := float64(at) * p.slope(which)
		if at == inside {
			away = -float64(from) * (p.y[which] - p.bound(which, from))
		}
		forward = 1
		if away < 0 {
			forward = -1
		}
		t, last = to, which
	}
	return false
}

// rounding is by how much, relative to what they are sums of, the laws may be off at a path's end: what a solution of
// some equations whose condition is 1e6 is off by.
const rounding = 1e-10

// solves tells whether the path's end solves the laws.
func (p *path) solves() bool {
	e := make([]float64, p.k)
	for i := range e {
		e[i] = p.x[i] + p.y[i]
	}
	for i := range p.boxes {
		b := &p.boxes[i]
		if b.low == b.high {
			continue
		}
		size := 1 + math.Abs(b.num) + math.Abs(p.s0[i]) + math.Abs(b.den*e[i])
		for j, x := range p.b[i*p.k : (i+1)*p.k] {
			size += math.Abs(x * e[j])
		}
		if b.at != inside && !(float64(b.at)*(b.num+p.s0[i]+p.law(i, e)) >= -rounding*size) {
			return false
		}
		by := rounding * (1 + math.Abs(e[i]))
		if b.at == inside && !(e[i] >= b.low-by && e[i] <= b.high+by) {
			return false
		}
	}
	return true
}

// path is the solution between two changes of pieces: e = x + t·y.
type path struct {
	k     int
	b     []float64 // s = s0 + b·e
	s0    []float64
	boxes []box
	start []float64 // the points that the boxes are drawn together to
	x, y  []float64
}

// bound returns by how much an end of an element's box moves with t.
func (p *path) bound(i int, at end) float64 {
	if at == lower {
		return p.boxes[i].low - p.start[i]
	}
	return p.boxes[i].high - p.start[i]
}

// begin puts every element at the end of its box that it would go to from the start. One without ends stays inside.
func (p *path) begin() bool {
	for i := range p.boxes {
		if b := &p.boxes[i]; !math.IsInf(b.low, 0) && !math.IsInf(b.high, 0) {
			b.at = upper
		}
	}
	clear(p.y)
	copy(p.x, p.start)
	if !p.solve() {
		return false
	}
	for i := range p.boxes {
		if b := &p.boxes[i]; b.at == upper && p.rest(i) < 0 {
			b.at = lower
		}
	}
	return p.solve()
}

// solve finds x and y for the ends that the elements stand at.
func (p *path) solve() bool {
	var free []int
	for i := range p.boxes {
		if p.boxes[i].at == inside {
			free = append(free, i)
			continue
		}
		p.x[i], p.y[i] = p.start[i], p.bound(i, p.boxes[i].at)
	}
	n := len(free)
	for _, rate := range [...]bool{false, true} {
		e := p.x
		if rate {
			e = p.y
		}
		m, rhs := make([]float64, n*n), make([]float64, n)
		for a, i := range free {
			row := p.b[i*p.k : (i+1)*p.k]
			if !rate {
				rhs[a] = p.boxes[i].num + p.s0[i]
			}
			for j := range p.boxes {
				if p.boxes[j].at != inside {
					rhs[a] += row[j] * e[j]
				}
			}
			for c, j := range free {
				m[a*n+c] = -row[j]
			}
			m[a*n+a] += p.boxes[i].den
		}
		if !gauss(m, rhs, n) {
			return false
		}
		for a, i := range free {
			e[i] = rhs[a]
		}
	}
	return true
}

// rest returns an element's r at t = 0, and slope how it goes with t.
func (p *path) rest(i int) float64  { return p.boxes[i].num + p.s0[i] + p.law(i, p.x) }
func (p *path) slope(i int) float64 { return p.law(i, p.y) }

func (p *path) law(i int, e []float64) float64 {
	sum := -p.boxes[i].den * e[i]
	for j, b := range p.b[i*p.k : (i+1)*p.k] {
		sum += b * e[j]
	}
	return sum
}

// next returns the first t from the given one on, forward or back, at which an element changes, which one and to where;
// −1 where none does before 1, or back to 0. The one that changed last is not looked at where it changed.
func (p *path) next(t, forward float64, last int) (to float64, which int, at end) {
	to, which = math.Inf(1)*forward, -1
	see := func(i int, x, y float64, then end) { // x + t·y comes to 0
		if y*forward >= 0 {
			return
		}
		if z := -x / y; (z-to)*forward < 0 {
			to, which, at = math.Max(z*forward, t*forward)*forward, i, then
		}
	}
	for i := range p.boxes {
		b := &p.boxes[i]
		switch {
		case b.low == b.high:
		case b.at == inside:
			if !math.IsInf(b.high, 0) && !(i == last && p.cameFrom(i, t) == upper) {
				see(i, p.start[i]-p.x[i], p.bound(i, upper)-p.y[i], upper)
			}
			if !math.IsInf(b.low, 0) && !(i == last && p.cameFrom(i, t) == lower) {
				see(i, p.x[i]-p.start[i], p.y[i]-p.bound(i, lower), lower)
			}
		case i != last:
			see(i, float64(b.at)*p.rest(i), float64(b.at)*p.slope(i), inside)
		}
	}
	if which >= 0 && forward > 0 && to >= 1 {
		which = -1
	}
	return to, which, at
}

// cameFrom returns the end of its box that an element is nearer to.
func (p *path) cameFrom(i int, t float64) end {
	e := p.x[i] + t*p.y[i] - p.start[i]
	if math.Abs(e-t*p.bound(i, upper)) < math.Abs(e-t*p.bound(i, lower)) {
		return upper
	}
	return lower
}
