// Package preferred holds the preferred numbers that parts are bought in: the series E3 to E192 of IEC 60063:2015.
package preferred

import (
	"fmt"
	"math"
	"strconv"
)

// Series is one of the series; its number is how many values a decade has.
type Series int

// The series.
const (
	E3   Series = 3
	E6   Series = 6
	E12  Series = 12
	E24  Series = 24
	E48  Series = 48
	E96  Series = 96
	E192 Series = 192
)

// What parts come in where nothing is said: common practice, no source.
const (
	DefaultResistors  = E24
	DefaultCapacitors = E12
)

// e24 are the two-figure values, of which E3 to E12 are every eighth, fourth and second. They are older than the rule
// and differ from it in eight places.
var e24 = [...]int{10, 11, 12, 13, 15, 16, 18, 20, 22, 24, 27, 30, 33, 36, 39, 43, 47, 51, 56, 62, 68, 75, 82, 91}

// All returns the series from the coarsest to the finest.
func All() []Series { return []Series{E3, E6, E12, E24, E48, E96, E192} }

// Parse returns the series of a name such as "E24".
func Parse(name string) (Series, error) {
	for _, s := range All() {
		if s.String() == name {
			return s, nil
		}
	}
	return 0, fmt.Errorf("%q is no series of preferred values: E3, E6, E12, E24, E48, E96, E192", name)
}

// String returns the series' name.
func (s Series) String() string { return "E" + strconv.Itoa(int(s)) }

// Decade returns the series' values from 1 to below 10, as numbers of three figures from 100 on.
func (s Series) Decade() []int {
	n := int(s)
	values := make([]int, n)
	for i := range values {
		switch {
		case n <= 24:
			values[i] = 10 * e24[i*24/n]
		case n == 192 && i == 185:
			values[i] = 920 // the one exception to the rule, which gives 919
		default:
			values[i] = int(math.Round(100 * math.Pow(10, float64(i)/float64(n))))
		}
	}
	return values
}

// value returns the k-th value of the series, the 0th being 1, as the number nearest to its decimal figures.
func (s Series) value(decade []int, k int) float64 {
	n := len(decade)
	power, i := k/n, k%n
	if i < 0 {
		power, i = power-1, i+n
	}
	x, _ := strconv.ParseFloat(fmt.Sprintf("%de%d", decade[i], power-2), 64)
	return x
}

// same is how near a value must lie to a preferred one to count as it.
const same = 1e-6

// at returns the largest k whose value is not above x but for rounding.
func (s Series) at(decade []int, x float64) int {
	if !(x > 1e-30 && x < 1e30) {
		panic("preferred: value out of range")
	}
	k := int(math.Floor(math.Log10(x) * float64(len(decade))))
	for s.value(decade, k) > x*(1+same) {
		k--
	}
	for s.value(decade, k+1) <= x*(1+same) {
		k++
	}
	return k
}

// Down returns the next value below x, which may itself be one of the series. It panics for x outside 1e-30 to 1e30.
func (s Series) Down(x float64) float64 {
	d := s.Decade()
	k := s.at(d, x)
	if v := s.value(d, k); v < x*(1-same) {
		return v
	}
	return s.value(d, k-1)
}

// Up returns the next value above x, which may itself be one of the series. It panics for x outside 1e-30 to 1e30.
func (s Series) Up(x float64) float64 {
	d := s.Decade()
	return s.value(d, s.at(d, x)+1)
}

// Nearest returns the value nearest to x by ratio. It panics for x outside 1e-30 to 1e30.
func (s Series) Nearest(x float64) float64 {
	d := s.Decade()
	k := s.at(d, x)
	low, high := s.value(d, k), s.value(d, k+1)
	if x/low <= high/x {
		return low
	}
	return high
}

// Pair is two values and what they make together.
type Pair struct {
	A, B   float64 // A ≥ B ≥ A/1000
	Makes  float64 // A + B, or A·B/(A + B)
	Summed bool    // whether the two add: resistors in series, capacitors in parallel
}

// widest is the largest A/B of a [Pair]: beyond it, B is less than the tolerance of A.
const widest = 1000

// nearer is by how much, of the wanted value, a pair must come nearer than another: less is rounding.
const nearer = 1e-12

// Pairs returns the pair of the series whose sum comes nearest to x, and the pair whose A·B/(A + B) does; of pairs that
// come equally near, the one whose values are closest to one another. It panics for x outside 1e-26 to 1e26.
func (s Series) Pairs(x float64) (sum, share Pair) {
	if !(x >= 1e-26 && x <= 1e26) {
		panic("preferred: value out of range")
	}
	d := s.Decade()
	sum, share = Pair{Summed: true, Makes: math.Inf(1)}, Pair{Makes: math.Inf(1)}
	better := func(p *Pair, a, b, makes float64) {
		if math.Abs(makes-x) < math.Abs(p.Makes-x)-nearer*x {
			p.A, p.B, p.Makes = math.Max(a, b), math.Min(a, b), makes
		}
	}
	// The larger of a sum goes from the last value up to x/2 to the first above x, the smaller of the others from the
	// last value up to x to the first above 2x; the partner is a neighbour of what would be exact.
	for k, last := s.at(d, x/2), s.at(d, x)+1; k <= last; k++ {
		a := s.value(d, k)
		below := s.at(d, math.Max(x-a, a/widest))
		for j := below; j <= below+1; j++ {
			if b := s.value(d, j); a <= widest*b*(1+same) {
				better(&sum, a, b, a+b)
			}
		}
	}
	for k, last := s.at(d, 2*x)+1, s.at(d, x); k >= last; k-- {
		b := s.value(d, k)
		exact := widest * b
		if b > x {
			exact = math.Min(exact, b*x/(b-x))
		}
		below := s.at(d, exact)
		for j := below; j <= below+1; j++ {
			if a := s.value(d, j); a <= widest*b*(1+same) {
				better(&share, a, b, a*b/(a+b))
			}
		}
	}
	return sum, share
}
