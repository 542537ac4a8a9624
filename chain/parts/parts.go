// Package parts finds buyable values for a wanted filter stage, gain, bias or coupling, ranked by how close they land.
//
// Symbols and units: f0 in Hz and Q of a second-order section, values in Ω and F; c1 and c2, r1 to r3 as the stage kinds
// name them (see package [midrail/chain/circuit]).
//
//	sallen-key low-pass, unity gain:     f0 = 1/(2π√(r1·r2·c1·c2)),  Q = √(r1·r2·c1·c2)/(c2·(r1 + r2))
//	multiple-feedback low-pass, gain A:  f0 = 1/(2π√(r2·r3·c1·c2)),  1/Q = 2πf0·c1·(r2 + r3 + r2·r3/r1),  A = r2/r1
//
// R. P. Sallen, E. L. Key, "A practical method of designing RC active filters", IRE Trans. CT-2 (1955); Op Amps for
// Everyone, 5th ed., ch. 16.
package parts

import (
	"math"
	"math/cmplx"
	"sort"

	"midrail/chain/preferred"
)

// Values are what a stage has.
type Values struct {
	R1, R2, R3 float64 // Ω; 0 where the stage has none
	C1, C2     float64 // F
}

// SallenKey returns the resistors that give a unity-gain section f0 and Q with the capacitors c1, from the middle to the
// output, and c2 ≤ c1/(4Q²); r1 is the smaller. It reports false where the capacitors cannot.
func SallenKey(f0, q, c1, c2 float64) (r1, r2 float64, ok bool) {
	// r1 + r2 = 1/(2πf0·Q·c2), r1·r2 = 1/((2πf0)²·c1·c2).
	w := 2 * math.Pi * f0
	sum, product := 1/(w*q*c2), 1/(w*w*c1*c2)
	d := sum*sum - 4*product
	if d < 0 {
		return 0, 0, false
	}
	r2 = (sum + math.Sqrt(d)) / 2
	return product / r2, r2, true
}

// SallenKeyOf returns what a unity-gain section's values give.
func SallenKeyOf(v Values) (f0, q float64) {
	root := math.Sqrt(v.R1 * v.R2 * v.C1 * v.C2)
	return 1 / (2 * math.Pi * root), root / (v.C2 * (v.R1 + v.R2))
}

// MultipleFeedback returns the resistors that give a section f0, Q and a gain of −gain with the capacitors c1, from (−)
// to the output, and c2 ≥ 4Q²(1 + gain)·c1, to ground. It reports false where the capacitors cannot.
func MultipleFeedback(f0, q, gain, c1, c2 float64) (r1, r2, r3 float64, ok bool) {
	// With r1 = r2/gain:  r2 + r3·(1 + gain) = 1/(2πf0·Q·c1),  r2·r3 = 1/((2πf0)²·c1·c2).
	w := 2 * math.Pi * f0
	sum, product := 1/(w*q*c1), 1/(w*w*c1*c2)
	d := sum*sum - 4*product*(1+gain)
	if d < 0 {
		return 0, 0, 0, false
	}
	r2 = (sum + math.Sqrt(d)) / 2
	return r2 / gain, r2, product / r2, true
}

// MultipleFeedbackOf returns what a section's values give.
func MultipleFeedbackOf(v Values) (f0, q, gain float64) {
	w := 1 / math.Sqrt(v.R2*v.R3*v.C1*v.C2)
	return w / (2 * math.Pi), 1 / (w * v.C1 * (v.R2 + v.R3 + v.R2*v.R3/v.R1)), v.R2 / v.R1
}

// Kind is the kind of stage that a section is built as.
type Kind string

// The kinds of stage.
const (
	SallenKeyKind        Kind = "sallen-key low-pass"
	MultipleFeedbackKind Kind = "multiple-feedback low-pass"
	RCKind               Kind = "rc low-pass"
)

// Wish is what a section is to be.
type Wish struct {
	Kind  Kind
	F0, Q float64
	Gain  float64 // of a multiple-feedback stage: V/V, 0 is 1

	Resistors, Capacitors preferred.Series // 0: E24 and E12
	// GainBandwidth of the amplifier in Hz: f0 and Q are told, and aimed at, as they come out with it. 0 or +Inf: ideal.
	GainBandwidth float64
}

// Choice is a set of values and what it gives.
type Choice struct {
	Values
	F0, Q, Gain float64 // with the amplifier
	ErrorF0     float64 // relative
	ErrorQ      float64
	ErrorGain   float64
	Spread      float64 // larger over smaller capacitor
	// Sensitivities are those to each part that the stage has, in the order of Values.
	Sensitivities []Sensitivity
}

// Sensitivity tells how f0, Q and gain go with a part's value: S = ∂ln y/∂ln x, the relative change for a relative change,
// with the amplifier.
type Sensitivity struct {
	Part        string // "r_1" to "c_2"
	F0, Q, Gain float64
}

// Range of parts that are looked at, common practice for filters between amplifiers: from what loads an amplifier to what
// a board's strays and bias currents move, and capacitors that are film or C0G.
const (
	leastOhms, mostOhms     = 1e3, 200e3
	leastFarads, mostFarads = 47e-12, 220e-9
	mostSpread              = 1000 // a unity-gain section takes 4Q²
)

// Find returns the best choices, at most so many, the nearest first.
func Find(w Wish, most int) []Choice {
	if w.Resistors == 0 {
		w.Resistors = preferred.DefaultResistors
	}
	if w.Capacitors == 0 {
		w.Capacitors = preferred.DefaultCapacitors
	}
	if w.Gain == 0 {
		w.Gain = 1
	}
	aim := w
	if w.Kind != RCKind && w.GainBandwidth > 0 && !math.IsInf(w.GainBandwidth, 1) {
		aim.F0, aim.Q = predistorted(w)
	}
	var all []Choice
	var capacitors []float64
	for c := w.Capacitors.Nearest(leastFarads); c <= mostFarads; c = w.Capacitors.Up(c) {
		capacitors = append(capacitors, c)
	}
	if w.Kind == RCKind {
		for _, c := range capacitors {
			all = w.consider(all, Values{R1: 1 / (2 * math.Pi * w.F0 * c), C1: c})
		}
		return w.told(nearest(all, most))
	}
	for _, c1 := range capacitors {
		for _, c2 := range capacitors {
			if spread(c1, c2) > mostSpread {
				continue
			}
			var v Values
			var ok bool
			if w.Kind == SallenKeyKind {
				v.R1, v.R2, ok = SallenKey(aim.F0, aim.Q, c1, c2)
			} else {
				v.R1, v.R2, v.R3, ok = MultipleFeedback(aim.F0, aim.Q, w.Gain, c1, c2)
			}
			if v.C1, v.C2 = c1, c2; ok {
				all = w.consider(all, v)
			}
		}
	}
	return w.told(nearest(all, most))
}

// told adds the sensitivities to choices.
func (w Wish) told(choices []Choice) []Choice {
	for i := range choices {
		choices[i].Sensitivities = w.sensitivities(choices[i].Values)
	}
	return choices
}

func spread(a, b float64) float64 { return math.Max(a/b, b/a) }

// consider adds the exact values brought to preferred ones, each resistor to the next below and above.
func (w Wish) consider(all []Choice, exact Values) []Choice {
	around := func(r float64) []float64 {
		if r == 0 {
			return []float64{0}
		}
		if !(r >= leastOhms && r <= mostOhms) {
			return nil
		}
		near := w.Resistors.Nearest(r)
		if near < r {
			return []float64{near, w.Resistors.Up(near)}
		}
		return []float64{w.Resistors.Down(near), near}
	}
	for _, r1 := range around(exact.R1) {
		for _, r2 := range around(exact.R2) {
			for _, r3 := range around(exact.R3) {
				all = append(all, w.judge(Values{r1, r2, r3, exact.C1, exact.C2}))
			}
		}
	}
	return all
}

// judge tells what values give.
func (w Wish) judge(v Values) Choice {
	c := Choice{Values: v, Gain: 1, Spread: 1}
	switch w.Kind {
	case RCKind:
		c.F0 = 1 / (2 * math.Pi * v.R1 * v.C1)
	case SallenKeyKind:
		c.F0, c.Q = SallenKeyOf(v)
	default:
		c.F0, c.Q, c.Gain = MultipleFeedbackOf(v)
	}
	if w.Kind != RCKind {
		c.Spread = spread(v.C1, v.C2)
		if w.GainBandwidth > 0 && !math.IsInf(w.GainBandwidth, 1) {
			c.F0, c.Q = withAmplifier(w.Kind, v, w.GainBandwidth)
		}
		c.ErrorQ = c.Q/w.Q - 1
		c.ErrorGain = c.Gain/w.Gain - 1
	}
	c.ErrorF0 = c.F0/w.F0 - 1
	return c
}

// easyOhms is the resistance that choices of equal error are the nearer to the better: common practice, no source. It
// loads an amplifier little, and what it feeds loads it little.
const easyOhms = 10e3

// nearest sorts by error, a wide spread of capacitors and resistors far from the easy ones counting as a little error, and
// keeps the first.
func nearest(all []Choice, most int) []Choice {
	cost := func(c Choice) float64 {
		away := math.Max(math.Abs(math.Log(c.R1/easyOhms)), math.Abs(math.Log(math.Max(c.R2, c.R1)/easyOhms)))
		return math.Abs(c.ErrorF0) + math.Abs(c.ErrorQ) + math.Abs(c.ErrorGain) + 1e-4*math.Log(c.Spread) + 1e-4*away
	}
	sort.SliceStable(all, func(i, j int) bool { return cost(all[i]) < cost(all[j]) })
	return all[:min(most, len(all))]
}

// sensitivities returns those of a choice by central differences.
func (w Wish) sensitivities(v Values) []Sensitivity {
	const step = 1e-4
	var list []Sensitivity
	for i, key := range [...]string{"r_1", "r_2", "r_3", "c_1", "c_2"} {
		up, down := v, v
		at := func(v *Values) *float64 { return [...]*float64{&v.R1, &v.R2, &v.R3, &v.C1, &v.C2}[i] }
		if *at(&v) == 0 {
			continue
		}
		*at(&up) *= math.Exp(step)
		*at(&down) *= math.Exp(-step)
		a, b := w.judge(up), w.judge(down)
		slope := func(up, down float64) float64 {
			if up == 0 {
				return 0
			}
			return math.Log(up/down) / (2 * step)
		}
		list = append(list, Sensitivity{key, slope(a.F0, b.F0), slope(a.Q, b.Q), slope(a.Gain, b.Gain)})
	}
	return list
}

// withAmplifier returns f0 and Q of the section's slow pole pair with a one-pole amplifier, from its cubic
//
//	sallen-key:         (1 + s/ωt)·(1 + s·c2(r1 + r2) + s²·r1·r2·c1·c2) + s²·r1·c1/ωt
//	multiple-feedback:  with u = s/ωt, (u(1 + s·r3·c1) + s·r3·c1)·(1/r1 + 1/r2 + 1/r3 + s·c2) + 1/r2 − u/r3
func withAmplifier(kind Kind, v Values, gbw float64) (f0, q float64) {
	t := 1 / (2 * math.Pi * gbw)
	var a [4]float64 // of s^k
	if kind == SallenKeyKind {
		b1, b2 := v.C2*(v.R1+v.R2), v.R1*v.R2*v.C1*v.C2
		a = [4]float64{1, b1 + t, b2 + b1*t + v.R1*v.C1*t, b2 * t}
	} else {
		g := 1/v.R1 + 1/v.R2 + 1/v.R3
		tau := v.R3 * v.C1
		// u(1 + sτ) + sτ = s(t + τ) + s²·t·τ.
		a = [4]float64{1 / v.R2, (t+tau)*g - t/v.R3, (t+tau)*v.C2 + t*tau*g, t * tau * v.C2}
	}
	// The real, fast root by Newton's method from far out; what is left is the pair.
	s := -a[2] / a[3]
	for range 60 {
		s -= (((a[3]*s+a[2])*s+a[1])*s + a[0]) / ((3*a[3]*s+2*a[2])*s + a[1])
	}
	// (s − root)·(a3·s² + p·s + r)
	p := a[2] + a[3]*s
	r := a[1] + p*s
	w := math.Sqrt(r / a[3])
	return w / (2 * math.Pi), w * a[3] / p
}

// predistorted returns the f0 and Q to design an ideal section for so that the amplifier brings it to the wish.
func predistorted(w Wish) (f0, q float64) {
	f0, q = w.F0, w.Q
	for range 30 {
		v, ok := typical(w.Kind, f0, q, w.Gain)
		if !ok {
			return w.F0, w.Q
		}
		gotF0, gotQ := withAmplifier(w.Kind, v, w.GainBandwidth)
		if !(gotF0 > 0 && gotQ > 0) || cmplx.IsNaN(complex(gotF0, gotQ)) {
			return w.F0, w.Q
		}
		f0, q = f0*w.F0/gotF0, q*w.Q/gotQ
	}
	return f0, q
}

// typical returns exact values for a section around 10 kΩ, by which the amplifier's pull is judged.
func typical(kind Kind, f0, q, gain float64) (Values, bool) {
	var v Values
	var ok bool
	c := 1 / (2 * math.Pi * f0 * 10e3)
	if kind == SallenKeyKind {
		v.C1, v.C2 = 2*q*c, c/(2*q)*0.98
		v.R1, v.R2, ok = SallenKey(f0, q, v.C1, v.C2)
		return v, ok
	}
	root := 2 * q * math.Sqrt(1+gain)
	v.C1, v.C2 = c/root*0.98, c*root
	v.R1, v.R2, v.R3, ok = MultipleFeedback(f0, q, gain, v.C1, v.C2)
	return v, ok
}

// Ratio is two resistors for a gain or a share.
type Ratio struct {
	A, B  float64 // Ω
	Value float64 // what they give
	Error float64 // relative
}

// Pairs returns the pairs a, b of a series, b in the range given, whose f(a/b) lies nearest to want. The ratio a/b that
// would be exact is given.
func pairs(series preferred.Series, exact, from, to float64, value func(a, b float64) float64, want float64, most int) []Ratio {
	var all []Ratio
	for b := series.Nearest(from); b <= to; b = series.Up(b) {
		a := series.Nearest(exact * b)
		v := value(a, b)
		all = append(all, Ratio{a, b, v, v/want - 1})
	}
	sort.SliceStable(all, func(i, j int) bool { return math.Abs(all[i].Error) < math.Abs(all[j].Error) })
	return all[:min(most, len(all))]
}

// Inverting returns r_f and r_in for a gain of −gain.
func Inverting(gain float64, series preferred.Series, most int) []Ratio {
	return pairs(series, gain, 4.7e3, 47e3, func(a, b float64) float64 { return a / b }, gain, most)
}

// NonInverting returns r_f and r_g for a gain of 1 + r_f/r_g, above 1.
func NonInverting(gain float64, series preferred.Series, most int) []Ratio {
	return pairs(series, gain-1, 1e3, 10e3, func(a, b float64) float64 { return 1 + a/b }, gain, most)
}

// Bias returns top and bottom of a divider that makes volts of supply.
func Bias(volts, supply float64, series preferred.Series, most int) []Ratio {
	return pairs(series, supply/volts-1, 10e3, 150e3, func(a, b float64) float64 { return supply * b / (a + b) }, volts, most)
}

// Coupling returns the next preferred capacitor whose corner with the resistance is not above the one wanted.
func Coupling(corner, ohms float64, series preferred.Series) (farads, gives float64) {
	exact := 1 / (2 * math.Pi * corner * ohms)
	farads = series.Nearest(exact)
	if farads < exact*(1-1e-9) {
		farads = series.Up(farads)
	}
	return farads, 1 / (2 * math.Pi * farads * ohms)
}

// WithoutPredistortion returns what the nearest choice for an ideal amplifier gives with the wish's own, and false where
// it has none.
func WithoutPredistortion(w Wish) (Choice, bool) {
	if w.Kind == RCKind || w.GainBandwidth == 0 || math.IsInf(w.GainBandwidth, 1) {
		return Choice{}, false
	}
	if w.Gain == 0 {
		w.Gain = 1
	}
	ideal := w
	ideal.GainBandwidth = 0
	found := Find(ideal, 1)
	if len(found) == 0 {
		return Choice{}, false
	}
	return w.judge(found[0].Values), true
}
