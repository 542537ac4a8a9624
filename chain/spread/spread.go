// Package spread draws a production run: boards whose parts, amplifiers and supply lie within their tolerances.
//
// Boards are a Latin hypercube: each part's range is cut into as many equal shares as there are boards, and each share is
// drawn once, in an order of its own. M. D. McKay, R. J. Beckman, W. J. Conover, "A comparison of three methods for
// selecting values of input variables", Technometrics 21 (1979).
package spread

import (
	"context"
	"errors"
	"math"
	"math/cmplx"
	"math/rand/v2"
	"runtime"
	"slices"
	"sort"
	"sync"
	"sync/atomic"

	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"

	"midrail/chain"
	"midrail/chain/circuit"
	"midrail/chain/corner"
	"midrail/chain/noise"
	"midrail/chain/render"
	"midrail/chain/response"
	"midrail/chain/rest"
)

// Options are what a production run is made with.
type Options struct {
	Boards int // 2 or more
	Seed   uint64
	Keep   float64 // Hz, where droop is told; 0: the chain's limit, or none
	// Results and Sounds are of recordings through the nominal chain; room and fold-back are those of the recording that a
	// board serves worst. None leaves them out.
	Results []*render.Result
	Sounds  []*corner.Sound
	// Thorough adds settling and noise, which take a hundred times as long.
	Thorough bool
	Progress func(done int) // called now and then, from several goroutines; may be nil
}

// Names of the figures.
const (
	HighCorner = "high corner"
	LowCorner  = "low corner"
	MidBand    = "mid-band gain"
	Droop      = "droop"
	Room       = "room"
	Below      = "fold-back below wanted"
	Settling   = "settling to 1 %"
	Noise      = "noise"
)

// Figure is one figure over all boards.
type Figure struct {
	Name                string
	Unit                string    // "Hz", "dB", "dBFS" or "s"
	Nominal             float64   // of the board with every part at its value
	Sorted              []float64 // of every board, ascending
	Shares              []Share   // parts by their share of the variance, the largest first
	WorstLow, WorstHigh Vertex
	Sound               int // which recording the nominal board serves worst; of room and fold-back
}

// Vertex is a worst case: a figure with every part at an end of its tolerance. Where a part alone takes the figure up and
// down tells which end; where a board that was drawn lies further out, the ends nearest to that board are looked at too, and
// where that does not reach it, either, the board is told itself.
type Vertex struct {
	Figure float64
	// Up and Down are the parts at the higher and at the lower end; those of no influence are in neither. Both are empty
	// for a board that was drawn.
	Up, Down []string
}

// Percentile returns the figure that p of 1 of the boards do not pass.
func (f *Figure) Percentile(p float64) float64 {
	x := p * float64(len(f.Sorted)-1)
	i := min(int(x), len(f.Sorted)-2)
	return f.Sorted[i] + (x-float64(i))*(f.Sorted[i+1]-f.Sorted[i])
}

// Share is a part's share of a figure's variance: of what a straight line through all parts together, by least squares,
// ascribes to it. Bends and what parts do together belong to none.
type Share struct {
	Part  string
	Share float64
}

// Limit is one of the chain's limits over all boards.
type Limit struct {
	Name  string
	Bound float64
	Yield float64 // share of the boards that hold it
}

// Run is a production run.
type Run struct {
	Boards  int
	Figures []Figure
	Limits  []Limit
	Yield   float64 // share of the boards that hold every limit told of
}

// variable is one thing that differs from board to board, as a factor of its value.
type variable struct {
	name      string
	tolerance float64
	apply     func(b *board, factor float64)
}

// board is one board's factors.
type board struct {
	resistors, capacitors []float64
	gainBandwidth         map[string]float64
	supply                float64
}

func newBoard(n *circuit.Network) *board {
	b := &board{resistors: make([]float64, len(n.Resistors)), capacitors: make([]float64, len(n.Capacitors)), gainBandwidth: map[string]float64{}, supply: 1}
	for i := range b.resistors {
		b.resistors[i] = 1
	}
	for i := range b.capacitors {
		b.capacitors[i] = 1
	}
	return b
}

func (b *board) network(n *circuit.Network) *circuit.Network {
	return n.Varied(b.resistors, b.capacitors, b.gainBandwidth, b.supply)
}

// variables lists what differs: parts with a reference of the board's own, amplifier entries, the supply.
func variables(n *circuit.Network) []variable {
	t := n.Chain.Tolerance
	var list []variable
	part := func(p chain.Part, of float64, apply func(b *board, factor float64)) {
		if p.Tolerance > 0 {
			of = p.Tolerance
		}
		list = append(list, variable{p.Name, of, apply})
	}
	for i, r := range n.Resistors {
		if !r.Virtual {
			part(r.Part, t.Resistors, func(b *board, f float64) { b.resistors[i] = f })
		}
	}
	for i, c := range n.Capacitors {
		if !c.Virtual {
			part(c.Part, t.Capacitors, func(b *board, f float64) { b.capacitors[i] = f })
		}
	}
	for i := range n.Chain.Amplifiers {
		a := &n.Chain.Amplifiers[i]
		if !math.IsInf(a.Model.GainBandwidth, 1) {
			list = append(list, variable{a.Name + ".gain_bandwidth", t.GainBandwidth, func(b *board, f float64) { b.gainBandwidth[a.Name] = f }})
		}
	}
	return append(list, variable{"supply.voltage", t.Supply, func(b *board, f float64) { b.supply = f }})
}

// ErrBoards says that a production run is of two boards or more.
var ErrBoards = errors.New("spread: a production run is of two boards or more")

// Make draws a production run. The same options give the same run on any number of cores. It returns ctx's error where
// that ends it.
func Make(ctx context.Context, n *circuit.Network, o Options) (*Run, error) {
	if o.Boards < 2 {
		return nil, ErrBoards
	}
	m := newMeasure(n, o)
	vars := variables(n)
	factors := hypercube(vars, n.Chain.Tolerance.Normal, o)
	values := make([][]float64, o.Boards)
	var next, done atomic.Int64
	var wait sync.WaitGroup
	for range runtime.GOMAXPROCS(0) {
		wait.Go(func() {
			for ctx.Err() == nil {
				i := int(next.Add(1)) - 1
				if i >= o.Boards {
					return
				}
				b := newBoard(n)
				for v := range vars {
					vars[v].apply(b, factors[v][i])
				}
				values[i] = m.figures(b.network(n))
				if d := done.Add(1); o.Progress != nil && d%64 == 0 {
					o.Progress(int(d))
				}
			}
		})
	}
	wait.Wait()
	if err := ctx.Err(); err != nil {
		return nil, err
	}
	return m.gather(ctx, n, vars, factors, values)
}

// hypercube draws each variable's factor for every board.
func hypercube(vars []variable, normal bool, o Options) [][]float64 {
	all := make([][]float64, len(vars))
	for v, x := range vars {
		draw := rand.New(rand.NewPCG(o.Seed, uint64(v)))
		order := draw.Perm(o.Boards)
		all[v] = make([]float64, o.Boards)
		for i, share := range order {
			u := (float64(share) + draw.Float64()) / float64(o.Boards)
			away := 2*u - 1
			if normal {
				away = distuv.UnitNormal.Quantile(u) / 3
			}
			all[v][i] = math.Max(1+x.tolerance*away, 1e-3)
		}
	}
	return all
}

// measure knows what to look at on each board.
type measure struct {
	o       Options
	names   []string
	units   []string
	input   int
	scale   float64 // units of u for one of the input's own: 1, or A a Pa
	mid     float64 // Hz, of the nominal chain
	low     float64 // Hz, nominal corners; NaN: none
	high    float64
	droopAt float64   // Hz; 0: none
	asked   []float64 // magnitude at each amplifier's output at mid, nominal
	nominal []float64
	worst   []int // of each figure, the recording that the nominal board serves worst
}

func newMeasure(n *circuit.Network, o Options) *measure {
	m := &measure{o: o, input: circuit.SoundInput(0), scale: perUnit(n), droopAt: o.Keep}
	path, _ := response.NewPath(n, "", "")
	f := path.Figures()
	m.low, m.high = f.LowCorner, f.HighCorner
	switch {
	case !math.IsNaN(m.low) && !math.IsNaN(m.high):
		m.mid = math.Sqrt(m.low * m.high)
	case !math.IsNaN(m.high):
		m.mid = m.high / 100
	case !math.IsNaN(m.low):
		m.mid = m.low * 100
	default:
		m.mid = 1000
	}
	if d := n.Chain.Limits.Droop; d != nil && m.droopAt == 0 {
		m.droopAt = d.At
	}
	add := func(there bool, name, unit string) {
		if there {
			m.names, m.units = append(m.names, name), append(m.units, unit)
		}
	}
	add(true, MidBand, "dB")
	add(!math.IsNaN(m.low), LowCorner, "Hz")
	add(!math.IsNaN(m.high), HighCorner, "Hz")
	add(m.droopAt > 0, Droop, "dB")
	add(len(o.Results) > 0, Room, "dB")
	add(len(o.Sounds) > 0, Below, "dB")
	add(o.Thorough, Settling, "s")
	add(o.Thorough, Noise, "dBFS")
	if len(o.Results) > 0 {
		m.asked = atOutputs(n, m.mid)
	}
	m.nominal, m.worst = m.figures(n), make([]int, len(m.names))
	if k := slices.Index(m.names, Room); k >= 0 {
		_, m.worst[k] = m.room(n)
	}
	if k := slices.Index(m.names, Below); k >= 0 {
		_, m.worst[k] = m.below(n)
	}
	return m
}

// perUnit is how much of what drives the network the first input's own unit is: 1 for a volt, and what a capsule makes of a
// pascal.
func perUnit(n *circuit.Network) float64 {
	in := &n.Chain.Inputs[0]
	if in.Kind == chain.Line {
		return 1
	}
	return math.Abs(n.Inputs[0].Scale) / (in.FullScale * math.Sqrt2)
}

// atOutputs returns the largest magnitude from any input at each amplifier's output.
func atOutputs(n *circuit.Network, f float64) []float64 {
	exact := n.At(f)
	most := make([]float64, len(n.Amplifiers))
	for i, in := range n.Inputs {
		h := exact.FromInput(circuit.SoundInput(i))
		for k, a := range n.Amplifiers {
			most[k] = math.Max(most[k], cmplx.Abs(h[a.Out])*math.Abs(in.Scale))
		}
	}
	return most
}

// figures returns a board's figures, in the order of names.
func (m *measure) figures(n *circuit.Network) []float64 {
	gain := func(f float64) float64 { return cmplx.Abs(n.At(f).Into(n.Output).Input(m.input)) }
	mid := gain(m.mid)
	out := []float64{20 * math.Log10(mid*m.scale)}
	half := mid * math.Sqrt(0.5)
	if !math.IsNaN(m.low) {
		out = append(out, cross(gain, m.low, half, 1))
	}
	if !math.IsNaN(m.high) {
		out = append(out, cross(gain, m.high, half, -1))
	}
	if m.droopAt > 0 {
		out = append(out, 20*math.Log10(mid/gain(m.droopAt)))
	}
	if len(m.o.Results) > 0 {
		left, _ := m.room(n)
		out = append(out, left)
	}
	if len(m.o.Sounds) > 0 {
		below, _ := m.below(n)
		out = append(out, below)
	}
	if m.o.Thorough {
		out = append(out, settling(n), noise.At(n).Figures(n).DBFS)
	}
	return out
}

// settling returns the time to 1 % of the rest point; +Inf where there is none.
func settling(n *circuit.Network) float64 {
	at, err := n.Rest()
	if err != nil {
		return math.Inf(1)
	}
	s, err := rest.Settle(n, at)
	if err != nil {
		return math.Inf(1)
	}
	return s.OnePercent
}

// cross finds where the gain goes through a level near a frequency, on the side where it rises (1) or falls (−1) with it,
// by secants in the logarithm.
func cross(gain func(f float64) float64, near, level float64, rises float64) float64 {
	x0, x1 := math.Log(near), math.Log(near)+0.02
	y0, y1 := math.Log(gain(near)/level), math.Log(gain(math.Exp(x1))/level)
	for range 30 {
		if y1 == y0 || math.Abs(y1) < 1e-12 {
			break
		}
		step := -y1 * (x1 - x0) / (y1 - y0)
		if rises*(y1-y0)*(x1-x0) < 0 { // on the wrong slope: go the way that the level lies
			step = -rises * y1
		}
		x0, y0 = x1, y1
		x1 += math.Max(-1, math.Min(1, step))
		y1 = math.Log(gain(math.Exp(x1)) / level)
	}
	return math.Exp(x1)
}

// below is by how much fold-back lies below the wanted sound of the recording that a board serves worst, and which that is.
func (m *measure) below(n *circuit.Network) (least float64, which int) {
	least = math.Inf(1)
	for i, s := range m.o.Sounds {
		if b := s.BelowWith(n); b < least {
			least, which = b, i
		}
	}
	return least, which
}

// room is what the tightest amplifier of a board has left of the nominal runs' excursions, which grow with the gain, and of
// which run.
func (m *measure) room(n *circuit.Network) (least float64, which int) {
	at, err := n.Rest()
	if err != nil {
		return math.Inf(-1), 0
	}
	asked := atOutputs(n, m.mid)
	least = math.Inf(1)
	for i, result := range m.o.Results {
		for k, x := range result.Amplifiers {
			a := &n.Amplifiers[k]
			if a.Virtual {
				continue
			}
			grown := 1.
			if m.asked[k] > 0 {
				grown = asked[k] / m.asked[k]
			}
			rest := at.Sources[k]
			board := render.AmplifierRange{Rest: rest, Lowest: rest + (x.Lowest-x.Rest)*grown, Highest: rest + (x.Highest-x.Rest)*grown, LimitLow: a.Low, LimitHigh: a.High}
			if left := board.Room(); left < least {
				least, which = left, i
			}
		}
	}
	return least, which
}

// gather puts the boards' figures together.
func (m *measure) gather(ctx context.Context, n *circuit.Network, vars []variable, factors, values [][]float64) (*Run, error) {
	run := &Run{Boards: m.o.Boards}
	slopes, err := m.slopes(ctx, n, vars)
	if err != nil {
		return nil, err
	}
	columns := make([][]float64, len(m.names))
	for k := range m.names {
		column := make([]float64, len(values))
		for i := range values {
			column[i] = values[i][k]
		}
		columns[k] = column
		f := Figure{Name: m.names[k], Unit: m.units[k], Nominal: m.nominal[k], Sorted: slices.Clone(column), Sound: m.worst[k]}
		sort.Float64s(f.Sorted)
		for v, share := range shares(factors, column) {
			f.Shares = append(f.Shares, Share{vars[v].name, share})
		}
		sort.SliceStable(f.Shares, func(i, j int) bool { return f.Shares[i].Share > f.Shares[j].Share })
		f.WorstLow, f.WorstHigh = m.vertex(n, vars, k, -1, slopes, factors, column), m.vertex(n, vars, k, 1, slopes, factors, column)
		run.Figures = append(run.Figures, f)
	}
	holds := make([]bool, len(values))
	for i := range holds {
		holds[i] = true
	}
	limit := func(figure, name string, bound *float64, most bool) {
		k := slices.Index(m.names, figure)
		if k < 0 || bound == nil {
			return
		}
		good := 0
		for i, v := range columns[k] {
			if v == *bound || (v < *bound) == most {
				good++
			} else {
				holds[i] = false
			}
		}
		run.Limits = append(run.Limits, Limit{name, *bound, float64(good) / float64(len(values))})
	}
	l := &n.Chain.Limits
	if l.Droop != nil && m.droopAt == l.Droop.At {
		limit(Droop, "droop", &l.Droop.Max, true)
	}
	limit(Room, "room", l.Room, false)
	if l.OverloadTime != nil && *l.OverloadTime == 0 && l.Room == nil {
		zero := 0.
		limit(Room, "overload_time", &zero, false)
	}
	limit(Below, "fold_back_below_wanted", l.FoldBackBelowWanted, false)
	limit(Settling, "settling", l.Settling, true)
	limit(Noise, "noise", l.Noise, true)
	good := 0
	for _, h := range holds {
		if h {
			good++
		}
	}
	run.Yield = float64(good) / float64(len(values))
	return run, nil
}

// vertex finds the worst case of the k-th figure towards +1 or −1.
func (m *measure) vertex(n *circuit.Network, vars []variable, k int, toward float64, slopes, factors [][]float64, column []float64) Vertex {
	at := func(end func(v int) float64) Vertex {
		b := newBoard(n)
		var x Vertex
		for v := range vars {
			if vars[v].tolerance == 0 {
				continue
			}
			switch e := end(v); {
			case e > 0:
				x.Up = append(x.Up, vars[v].name)
				vars[v].apply(b, 1+vars[v].tolerance)
			case e < 0:
				x.Down = append(x.Down, vars[v].name)
				vars[v].apply(b, 1-vars[v].tolerance)
			}
		}
		x.Figure = m.figures(b.network(n))[k]
		return x
	}
	worst := at(func(v int) float64 { return toward * slopes[v][k] })
	furthest := 0
	for i := range column {
		if toward*(column[i]-column[furthest]) > 0 {
			furthest = i
		}
	}
	beyond := func(x float64) bool { return toward*(x-worst.Figure) > 0 }
	if beyond(column[furthest]) {
		if near := at(func(v int) float64 { return factors[v][furthest] - 1 }); beyond(near.Figure) {
			worst = near
		}
		if beyond(column[furthest]) {
			worst = Vertex{Figure: column[furthest]}
		}
	}
	return worst
}

// slopes tells, for each variable and figure, how far the figure goes from the lower to the higher end of that variable
// alone; 0 where that is less than rounding.
func (m *measure) slopes(ctx context.Context, n *circuit.Network, vars []variable) ([][]float64, error) {
	const rounding = 1e-10
	all := make([][]float64, len(vars))
	for v, x := range vars {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		low, high := newBoard(n), newBoard(n)
		x.apply(low, 1-x.tolerance)
		x.apply(high, 1+x.tolerance)
		from, to := m.figures(low.network(n)), m.figures(high.network(n))
		all[v] = make([]float64, len(m.names))
		for k := range all[v] {
			if d := to[k] - from[k]; math.Abs(d) > rounding*math.Abs(m.nominal[k]) {
				all[v][k] = d
			}
		}
	}
	return all, nil
}

// shares returns each variable's share of the variance of y: β²·var(x)/var(y) with y = Σβ·x by least squares, of the sum
// of those where that is more. It is 0 where either does not vary, or there are too few boards to tell.
func shares(factors [][]float64, y []float64) []float64 {
	out := make([]float64, len(factors))
	centre, variance := stat.PopMeanVariance(y, nil)
	var vary []int
	for v := range factors {
		if stat.PopVariance(factors[v], nil) > 0 {
			vary = append(vary, v)
		}
	}
	if !(variance > 0) || math.IsInf(variance, 0) || len(vary) == 0 || len(y) < 2*len(vary) {
		return out
	}
	x, b := mat.NewDense(len(y), len(vary), nil), mat.NewVecDense(len(y), nil)
	for i := range y {
		b.SetVec(i, y[i]-centre)
		for j, v := range vary {
			x.Set(i, j, factors[v][i]-1)
		}
	}
	var beta mat.VecDense
	if err := beta.SolveVec(x, b); err != nil {
		return out
	}
	total := 0.
	for j, v := range vary {
		out[v] = beta.AtVec(j) * beta.AtVec(j) * stat.PopVariance(factors[v], nil)
		total += out[v]
	}
	for v := range out { // parts that happen to pull against each other have more than the whole
		out[v] /= math.Max(variance, total)
	}
	return out
}

// Band is a line of a band of responses.
type Band struct {
	Name string
	Gain []float64 // dB at each frequency
}

// bandBoards is how many boards a band is made of.
const bandBoards = 100

// Bands returns the nominal gain from the first input, volts for a volt or for a pascal, at frequencies in Hz, and the lowest, the 5 %, the 95 % and the highest of a hundred
// boards.
func Bands(n *circuit.Network, o Options, frequencies []float64) []Band {
	o.Boards = bandBoards
	vars := variables(n)
	factors := hypercube(vars, n.Chain.Tolerance.Normal, o)
	unit := perUnit(n)
	gain := func(n *circuit.Network, f float64) float64 {
		return circuit.Gain(n.At(f).Into(n.Output).Input(circuit.SoundInput(0)) * complex(unit, 0))
	}
	var boards []*circuit.Network
	for i := range bandBoards {
		b := newBoard(n)
		for v := range vars {
			vars[v].apply(b, factors[v][i])
		}
		boards = append(boards, b.network(n))
	}
	bands := []Band{{Name: "nominal"}, {Name: "lowest"}, {Name: "5 %"}, {Name: "95 %"}, {Name: "highest"}}
	for _, f := range frequencies {
		var all []float64
		for _, b := range boards {
			all = append(all, gain(b, f))
		}
		sort.Float64s(all)
		for i, v := range [...]float64{gain(n, f), all[0], all[bandBoards/20], all[bandBoards-1-bandBoards/20], all[bandBoards-1]} {
			bands[i].Gain = append(bands[i].Gain, v)
		}
	}
	return bands
}
