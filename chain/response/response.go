package response

import (
	"fmt"
	"math"
	"math/cmplx"
	"slices"
	"sort"

	"midrail/bilinear"
	"midrail/chain"
	"midrail/chain/circuit"
)

// Supply is the name by which the supply is an input.
const Supply = "supply"

// Path is the way from an input to a node.
type Path struct {
	From, At string
	Unit     string // of the input: "V" or "Pa"; the gain is in volts a unit
	n        *circuit.Network
	input    int // of the network's u
	scale    float64
	node     int
}

// NewPath returns the way from the named input, or the supply, to the named stage or input; an empty from is the
// first input, an empty at is what the converter samples. The error names what there is instead.
func NewPath(n *circuit.Network, from, at string) (*Path, error) {
	p := &Path{From: from, At: at, Unit: "V", n: n, scale: 1}
	if from == "" {
		p.From = n.Chain.Inputs[0].Name
	}
	var names []string
	found := p.From == Supply
	for i := range n.Chain.Inputs {
		in := &n.Chain.Inputs[i]
		names = append(names, in.Name)
		if in.Name != p.From {
			continue
		}
		found = true
		p.input = circuit.SoundInput(i)
		if in.Kind != chain.Line {
			p.Unit, p.scale = "Pa", n.Inputs[i].Scale/(in.FullScale*math.Sqrt2)
		}
	}
	if !found {
		return nil, fmt.Errorf("there is no input %q: %v or supply", p.From, names)
	}
	p.node = n.Output
	if at == "" {
		p.At = n.Chain.Converter.From
	} else if node, ok := n.NodeOf(at); ok {
		p.node = node
	} else {
		names = names[:0]
		for i := range n.Chain.Stages {
			names = append(names, n.Chain.Stages[i].Name)
		}
		return nil, fmt.Errorf("there is no stage %q: %v", at, names)
	}
	return p, nil
}

// At returns the path's complex gain at f Hz.
func (p *Path) Gain(f float64) complex128 {
	return p.n.At(f).Into(p.node).Input(p.input) * complex(p.scale, 0)
}

func (p *Path) db(f float64) float64 { return circuit.Gain(p.Gain(f)) }

// Point is a path at one frequency.
type Point struct {
	Frequency float64 // Hz
	Gain      float64 // dB
	Phase     float64 // degrees, −180 to 180
	Delay     float64 // s, group delay −dφ/dω
}

// Points returns the path at the given frequencies in Hz.
func (p *Path) Points(frequencies []float64) []Point {
	points := make([]Point, len(frequencies))
	for i, f := range frequencies {
		h := p.Gain(f)
		const aside = 1e-4 // of f, to either side, for the slope of the phase
		turn := cmplx.Phase(p.Gain(f*(1+aside)) / p.Gain(f*(1-aside)))
		points[i] = Point{f, circuit.Gain(h), cmplx.Phase(h) * 180 / math.Pi, -turn / (2 * math.Pi * f * 2 * aside)}
	}
	return points
}

// Grid returns frequencies from one to another in Hz, by equal ratios, so many to a decade.
func Grid(from, to float64, perDecade int) []float64 {
	steps := int(math.Ceil(math.Log10(to/from) * float64(perDecade)))
	f := make([]float64, steps+1)
	for i := range f {
		f[i] = from * math.Pow(to/from, float64(i)/float64(steps))
	}
	return f
}

// Figures are what is read off a response.
type Figures struct {
	MidBand     float64 // dB, where the response is flat: midway, by ratio, between the corners
	At1k        float64 // dB
	LowCorner   float64 // Hz, −3.01 dB of mid-band below it; NaN: none above 0.1 mHz
	HighCorner  float64 // Hz; NaN: none below 1 GHz
	PeakAt      float64 // Hz, where the gain is largest
	Peak        float64 // dB
	RollOff     float64 // dB a decade, between ten and a hundred times the high corner; NaN: no corner
	FloorFrom   float64 // Hz, from where the response falls no further; NaN: it does to the end
	Floor       float64 // dB at its lowest
	AtHalfRate  float64 // dB against mid-band, at half the converter's rate
	AtFirstFold float64 // dB against mid-band, at the rate less the high corner: what folds onto the band's edge
}

const (
	lowest, highest = 1e-4, 1e9 // Hz, that figures are looked for in
	perDecade       = 40
	halfPower       = 3.0102999566398120 // dB, 10·log10 2
)

// Figures reads the figures off the path's response.
func (p *Path) Figures() Figures {
	grid := Grid(lowest, highest, perDecade)
	gain := make([]float64, len(grid))
	peak := 0
	for i, f := range grid {
		gain[i] = p.db(f)
		if gain[i] > gain[peak] {
			peak = i
		}
	}
	f := Figures{At1k: p.db(1000), LowCorner: math.NaN(), HighCorner: math.NaN(), RollOff: math.NaN(), FloorFrom: math.NaN(), Floor: math.NaN()}
	f.PeakAt, f.Peak = p.refinePeak(grid, gain, peak)
	// Mid-band is midway between the corners, and the corners are told against mid-band: twice round settles it but
	// for responses that have no flat part.
	mid := grid[flattest(grid, gain, peak)]
	for range 3 {
		f.MidBand = p.db(mid)
		f.LowCorner, f.HighCorner = p.corners(grid, gain, mid, f.MidBand-halfPower)
		low, high := f.LowCorner, f.HighCorner
		switch {
		case math.IsNaN(low) && math.IsNaN(high):
		case math.IsNaN(low):
			mid = high / 100
		case math.IsNaN(high):
			mid = low * 100
		default:
			mid = math.Sqrt(low * high)
		}
	}
	f.MidBand = p.db(mid)
	rate := p.n.Chain.Converter.Rate
	f.AtHalfRate = p.db(rate/2) - f.MidBand
	f.AtFirstFold = math.NaN()
	if c := f.HighCorner; !math.IsNaN(c) {
		f.RollOff = p.db(100*c) - p.db(10*c)
		if c < rate {
			f.AtFirstFold = p.db(rate-c) - f.MidBand
		}
		f.FloorFrom, f.Floor = p.floor(grid, gain, c)
	}
	return f
}

const (
	flat    = 0.5 // dB to either side, of a pass band
	passing = 12  // dB below the peak, that a pass band is looked for in
	audible = 1.  // Hz, below which a flat part is a matter of DC alone
	least   = 20  // points that a flat part has, half a decade: a peak has no more
)

// flattest returns the middle of the longest stretch of nearly one gain, among those that are not far below the peak; the
// peak where there is none.
func flattest(grid, gain []float64, peak int) int {
	best, longest := peak, least
	first := sort.SearchFloat64s(grid, audible)
	for i := first; i < len(gain); i++ {
		g := gain[i]
		if g < gain[peak]-passing {
			continue
		}
		low, high := i, i
		for low > first && math.Abs(gain[low-1]-g) <= flat {
			low--
		}
		for high+1 < len(gain) && math.Abs(gain[high+1]-g) <= flat {
			high++
		}
		if n := high - low; n > longest {
			best, longest = (low+high)/2, n
		}
	}
	return best
}

// refinePeak finds the peak between the grid's points, by golden section.
func (p *Path) refinePeak(grid, gain []float64, peak int) (at, db float64) {
	if peak == 0 || peak == len(grid)-1 {
		return grid[peak], gain[peak]
	}
	const golden = 0.6180339887498949
	a, b := math.Log(grid[peak-1]), math.Log(grid[peak+1])
	for range 40 {
		c, d := b-golden*(b-a), a+golden*(b-a)
		if p.db(math.Exp(c)) > p.db(math.Exp(d)) {
			b = d
		} else {
			a = c
		}
	}
	at = math.Exp((a + b) / 2)
	return at, p.db(at)
}

// corners finds where the gain falls through a level on either side of mid.
func (p *Path) corners(grid, gain []float64, mid, level float64) (low, high float64) {
	start := sort.SearchFloat64s(grid, mid)
	low, high = math.NaN(), math.NaN()
	for i := start; i < len(grid); i++ {
		if gain[i] < level {
			high = p.crossing(math.Max(mid, grid[max(i-1, 0)]), grid[i], level)
			break
		}
	}
	for i := min(start, len(grid)-1); i >= 0; i-- {
		if grid[i] < mid && gain[i] < level {
			low = p.crossing(math.Min(mid, grid[i+1]), grid[i], level)
			break
		}
	}
	return low, high
}

// crossing bisects, by ratio, for where the gain goes through a level between an inside above it and an outside below.
func (p *Path) crossing(inside, outside, level float64) float64 {
	for range 60 {
		mid := math.Sqrt(inside * outside)
		if p.db(mid) >= level {
			inside = mid
		} else {
			outside = mid
		}
	}
	return math.Sqrt(inside * outside)
}

// floor finds where the stop band ends to fall: where the amplifiers' output resistances let the signal past them. It
// tells the frequency from which it falls by less than 3 dB a decade, and the lowest gain.
func (p *Path) floor(grid, gain []float64, corner float64) (from, lowestGain float64) {
	from, lowestGain = math.NaN(), math.NaN()
	for i := range grid {
		if grid[i] < 2*corner || i+1 == len(grid) {
			continue
		}
		if slope := (gain[i+1] - gain[i]) * perDecade; slope > -3 {
			return grid[i], gain[i]
		}
	}
	return from, lowestGain
}

// Pole is a natural frequency of a network.
type Pole struct {
	Value     complex128 // rad/s
	Frequency float64    // Hz
	Q         float64    // 0.5 for a real one
}

// Poles returns the network's natural frequencies around its rest point, the slowest first, one of each conjugate pair.
func Poles(n *circuit.Network, at bilinear.Operating) ([]Pole, error) {
	// The step's eigenvalues map back exactly at any rate; in the middle of the poles they are told most sharply.
	// What stands for no part, as of a supply's rejection, has no natural frequency that anyone could find.
	parts := *n
	parts.Capacitors = slices.DeleteFunc(slices.Clone(n.Capacitors), func(c circuit.Component) bool { return c.Virtual })
	c, err := parts.Compile(parts.Description(), at, 1e5, nil)
	if err != nil {
		return nil, err
	}
	var poles []Pole
	for _, s := range c.Poles() {
		if imag(s) < -1e-9*cmplx.Abs(s) {
			continue
		}
		p := Pole{Value: s, Frequency: cmplx.Abs(s) / (2 * math.Pi), Q: 0.5}
		if imag(s) > 1e-9*cmplx.Abs(s) {
			p.Q = -cmplx.Abs(s) / (2 * real(s))
		}
		poles = append(poles, p)
	}
	sort.SliceStable(poles, func(i, j int) bool { return poles[i].Frequency < poles[j].Frequency })
	return poles, nil
}

// Margin is how far an amplifier's loop is from oscillating.
type Margin struct {
	Amplifier string
	Crossover float64 // Hz, where the loop gain is 1
	Phase     float64 // degrees left to −180° there; NaN: the gain never comes down to 1, as of an ideal amplifier
	Gain      float64 // dB below 1 where the phase is −180°; NaN: it never is
}

// Wary is the phase margin in degrees below which an amplifier is cautioned of: common practice, no source.
const Wary = 45

// Margins returns the margins of every amplifier, each loop opened at its internal source with all others closed:
//
//	L(f) = A(f)·β(f),   A = 1/(jf/GBW + 1/A0) · 1/(1 + jf/f2),   β = −(v+ − v−)/e
//
// where the second pole f2 is what leaves the datasheet's phase margin to a follower: f2 = GBW/tan(90° − margin).
func Margins(n *circuit.Network) []Margin {
	var all []Margin
	for k, a := range n.Amplifiers {
		if a.Virtual {
			continue
		}
		m := Margin{Amplifier: a.Name, Crossover: math.NaN(), Phase: math.NaN(), Gain: math.NaN()}
		if !math.IsInf(a.Model.GainBandwidth, 1) {
			m.find(n, k, a)
		}
		all = append(all, m)
	}
	return all
}

func (m *Margin) find(n *circuit.Network, k int, a circuit.Amplifier) {
	gbw := a.Model.GainBandwidth
	second := math.Inf(1)
	if a.Model.PhaseMargin < 90 {
		second = gbw / math.Tan((90-a.Model.PhaseMargin)*math.Pi/180)
	}
	loop := func(f float64) complex128 {
		forward := 1 / (complex(1/a.Model.OpenLoopGain, f/gbw) * complex(1, f/second))
		return forward * n.Feedback(k, f)
	}
	grid := Grid(0.1, 100*gbw, perDecade)
	last := cmplx.Phase(loop(grid[0]))
	phase := last
	if phase > math.Pi/2 {
		phase -= 2 * math.Pi // it lags, as two integrators within the loop do
	}
	lastGain := cmplx.Abs(loop(grid[0]))
	for i := 1; i < len(grid); i++ {
		h := loop(grid[i])
		now := phase + cmplx.Phase(h*cmplx.Conj(cmplx.Rect(1, last)))
		g := cmplx.Abs(h)
		if lastGain >= 1 && g < 1 {
			x := math.Log(lastGain) / math.Log(lastGain/g)
			m.Crossover = grid[i-1] * math.Pow(grid[i]/grid[i-1], x)
			if left := 180 + (phase+x*(now-phase))*180/math.Pi; math.IsNaN(m.Phase) || left < m.Phase {
				m.Phase = left
			}
		}
		if phase > -math.Pi && now <= -math.Pi && math.IsNaN(m.Gain) {
			x := (phase + math.Pi) / (phase - now)
			m.Gain = -20 * math.Log10(lastGain*math.Pow(g/lastGain, x))
		}
		phase, last, lastGain = now, cmplx.Phase(h), g
	}
}
