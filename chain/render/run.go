package render

import (
	"cmp"
	"context"
	"errors"
	"math"
	"math/rand/v2"
	"time"

	"midrail/bilinear"
	"midrail/chain/circuit"
	"midrail/chain/noise"
)

// Layer numbers the layers that sum, with the rest, to what is heard.
type Layer int

// The layers, in the order they are shown.
const (
	Wanted Layer = iota
	FoldBack
	Interference
	Overloaded
	Noise
	Rounding
	LayerCount
)

// String returns the layer's name.
func (l Layer) String() string {
	return [...]string{"wanted", "fold-back", "interference", "overload", "noise", "rounding"}[l]
}

// Block is a stretch of conversions. Its slices are reused for the next one.
type Block struct {
	First  int64                 // number of its first conversion
	Layers [LayerCount][]float64 // full scale
	Folded []float64             // that part of the interference that lies above half the converter's rate
	Heard  []float64             // full scale
	Codes  []int32
}

// Options are what a run leaves to its caller.
type Options struct {
	Seed     uint64                  // of all that is drawn by chance
	Noise    *noise.Budget           // of the network; nil runs without noise
	Progress func(conversions int64) // called now and then, from one goroutine; may be nil

	plain bool // step every block
	chunk int  // base samples in a chunk; 0: chunkBase
}

// Result is what a run found beside the sound.
type Result struct {
	Plan        Plan
	At          bilinear.Operating
	Span        Span
	Rest        float64 // full scale, what the converter rests at
	Conversions int64
	Saturated   int64   // conversions at which the voltage was beyond the span
	Seconds     float64 // of the longest track
	Overloaded  float64 // s at which any limit held, the converter's span included
	Stages      []StageRange
	Amplifiers  []AmplifierRange
	Overloads   []Overload // for each owner and kind that saw any
	Events      []Event    // the largest, in the order of time
	EventCount  int64
	Waveforms   []Waveform // around the largest overloads, the largest first
	Times       Times
}

// Times are how long the parts of a run were at work; all but the first go on beside each other.
type Times struct {
	Preparing time.Duration // rest point, internal rate, maps
	Tracks    time.Duration // reading, parting, interpolating
	Circuit   time.Duration
	Converter time.Duration // layers and codes, and what the caller does with them
}

// StageRange is where a stage's output went.
type StageRange struct {
	Rest, Lowest, Highest float64 // V
}

// AmplifierRange is where the linear chain would have taken an amplifier's internal source, and how much room that
// leaves.
type AmplifierRange struct {
	Rest, Lowest, Highest float64 // V, as the linear chain asks
	LimitLow, LimitHigh   float64 // V
}

// Room returns what is left (+) or missing (−) in dB between the largest excursion asked for and the nearer limit;
// +Inf where nothing is asked for.
func (a AmplifierRange) Room() float64 {
	room := math.Inf(1)
	if up := a.Highest - a.Rest; up > 0 {
		room = math.Min(room, 20*math.Log10(math.Max(a.LimitHigh-a.Rest, 0)/up))
	}
	if down := a.Rest - a.Lowest; down > 0 {
		room = math.Min(room, 20*math.Log10(math.Max(a.Rest-a.LimitLow, 0)/down))
	}
	return room
}

// ErrNoSound says that no input of the chain was given a track.
var ErrNoSound = errors.New("render: no track feeds the chain")

// Run renders the feeds, one for each of the chain's inputs in their order (a Feed without Sound is silent),
// through the network and hands every block of conversions to sink. An error of a feed, of sink or of ctx ends it
// and is returned.
func Run(ctx context.Context, n *circuit.Network, feeds []Feed, o Options, sink func(*Block) error) (*Result, error) {
	top := 0.
	for _, f := range feeds {
		if f.Sound != nil {
			top = math.Max(top, f.Rate/2)
		}
	}
	if top == 0 {
		return nil, ErrNoSound
	}
	begun := time.Now()
	at, err := n.Rest()
	if err != nil {
		return nil, err
	}
	fc := n.Chain.Converter.Rate
	g := newGrid(NewPlan(n, top), 2*top)
	settle := newSettling(n)
	// The run begins one step behind a conversion, whole blocks before the tracks do.
	before := lead(feeds, fc) * int64(g.plan.Instants)
	blocks := (before + int64(g.conversions) - 1) / int64(g.conversions)
	first := -blocks * int64(g.conversions)
	feed := newFeeder(n, feeds, g, first, o.Seed)
	sim, err := newSimulator(n, at, g, settle, feed.lanes, o.plain)
	if err != nil {
		return nil, err
	}
	p := &pipeline{
		feed: feed, sim: sim, conv: newConverter(n, at, settle, o, g.plan.Instants),
		conversion: first + 1, blocks: max(1, cmp.Or(o.chunk, chunkBase)/g.base),
	}
	p.conv.sink, p.conv.progress = sink, o.Progress
	p.times.Preparing = time.Since(begun)
	if err := p.run(ctx); err != nil {
		return nil, err
	}
	if held := sim.limited.state.Held; held > 0 {
		return nil, n.Unsolved(held)
	}
	return p.result(at, g.plan), nil
}

// chunkBase is about how many base samples a chunk holds.
const chunkBase = 3072

// pipeline has three goroutines pass chunks on: tracks → circuit → converter.
type pipeline struct {
	feed       *feeder
	sim        *simulator
	conv       *converter
	conversion int64 // the next chunk's first instant
	blocks     int   // in a chunk
	times      Times // each part's is its goroutine's
}

// timed adds the time that work takes to a total.
func timed(total *time.Duration, work func()) {
	begun := time.Now()
	work()
	*total += time.Since(begun)
}

// work is a chunk on its way.
type work struct {
	chunk *chunk
	out   *conversions
	err   error
}

const inFlight = 3

func (p *pipeline) run(ctx context.Context) error {
	ctx, stop := context.WithCancel(ctx)
	defer stop()
	free, fed, stepped := make(chan *work, inFlight), make(chan *work, inFlight), make(chan *work, inFlight)
	for range inFlight {
		free <- p.newWork()
	}
	go func() {
		defer close(fed)
		for {
			select {
			case <-ctx.Done():
				return
			case w := <-free:
				w.chunk.first = p.conversion
				timed(&p.times.Tracks, func() { w.err = p.feed.fill(w.chunk) })
				p.conversion += int64(len(w.out.slope))
				fed <- w
				if w.err != nil || w.chunk.end >= 0 && p.conversion >= w.chunk.end {
					return
				}
			}
		}
	}()
	go func() {
		defer close(stepped)
		for w := range fed {
			if w.err == nil && ctx.Err() == nil {
				timed(&p.times.Circuit, func() { p.sim.run(w.chunk, w.out) })
			}
			stepped <- w
		}
	}()
	var failed error
	for w := range stepped {
		if failed == nil {
			failed = errors.Join(ctx.Err(), w.err)
		}
		if failed == nil {
			timed(&p.times.Converter, func() { failed = p.conv.take(w.out) })
		}
		if failed != nil {
			stop()
			continue // let the others end
		}
		free <- w
	}
	if failed == nil {
		failed = ctx.Err()
	}
	return failed
}

func (p *pipeline) newWork() *work {
	g := p.sim.grid
	w := &work{chunk: &chunk{}, out: &conversions{}}
	for _, l := range p.feed.lanes {
		length := p.blocks * g.steps
		switch {
		case l.stairs != nil:
			length = 0
		case !l.fine:
			length = p.blocks*g.base + 2*g.reach
		}
		w.chunk.lanes = append(w.chunk.lanes, make([]float64, length))
	}
	conversions := p.blocks * g.conversions
	rows := func() [][]float64 {
		r := make([][]float64, len(p.sim.ports))
		for i := range r {
			r[i] = make([]float64, conversions)
		}
		return r
	}
	for i := range w.out.parts {
		w.out.parts[i] = rows()
	}
	w.out.overload, w.out.slope, w.out.supply = rows(), make([]float64, conversions), make([]float64, conversions)
	return w
}

func (p *pipeline) result(at bilinear.Operating, plan Plan) *Result {
	r := &Result{Plan: plan, At: at, Span: p.conv.span, Rest: p.conv.rest, Conversions: p.conv.count, Saturated: p.conv.saturated, Seconds: p.feed.seconds(), Times: p.times}
	for i, e := range p.sim.stages {
		rest := at.Volts[p.sim.n.StageNode(i)]
		r.Stages = append(r.Stages, StageRange{Rest: rest, Lowest: rest + e.lowest, Highest: rest + e.highest})
	}
	for k, e := range p.sim.asked {
		rest, a := at.Sources[k], p.sim.n.Amplifiers[k]
		r.Amplifiers = append(r.Amplifiers, AmplifierRange{Rest: rest, Lowest: rest + e.lowest, Highest: rest + e.highest, LimitLow: a.Low, LimitHigh: a.High})
	}
	r.Overloads = p.sim.watchers.results()
	r.Overloaded = float64(p.sim.watchers.union) / plan.Rate
	for _, o := range p.conv.overloads(&p.sim.list) {
		r.Overloads = append(r.Overloads, o)
		r.Overloaded += o.Seconds
	}
	r.Overloaded = math.Min(r.Overloaded, r.Seconds)
	r.Events, r.EventCount = p.sim.list.inTime(), p.sim.list.count
	r.Waveforms = p.sim.scope.result()
	return r
}

// converter turns the circuit's conversions into layers and codes.
type converter struct {
	instants int64 // for each conversion
	span     Span
	rest     float64
	settled  [5]settled // wanted, fold-back, interference in band and out of it, overload
	supply   float64    // V, nominal; 0 where the span does not follow it
	noise    *colouredNoise
	jitter   float64 // s
	draw     *rand.Rand
	rate     float64
	block    Block
	range_   [2]watcher // below, above the span
	list     eventList
	sink     func(*Block) error
	progress func(int64)

	count, saturated int64
}

func newConverter(n *circuit.Network, at bilinear.Operating, settle settling, o Options, instants int) *converter {
	c := &n.Chain.Converter
	v := &converter{instants: int64(instants), span: spanOf(n.Chain), jitter: c.Jitter, rate: c.Rate, draw: rand.New(rand.NewPCG(o.Seed, jitterStream))}
	for i := range v.settled {
		v.settled[i].settling = settle
	}
	volts := at.Volts[n.Output]
	if settle.from >= 0 {
		volts += settle.short * (at.Volts[settle.from] - volts)
	}
	v.rest = snap((volts - v.span.Middle()) / v.span.Unit())
	if c.HighIsSupply {
		v.supply = n.Chain.Supply.Voltage
	}
	if o.Noise != nil {
		unit := v.span.Unit()
		density := make([]float64, len(o.Noise.Folded))
		for i, d := range o.Noise.Folded {
			density[i] = d / (unit * unit)
		}
		v.noise = newColouredNoise(density, c.Rate, rand.New(rand.NewPCG(o.Seed, noiseStream)))
	}
	for i := range v.range_ {
		v.range_[i] = watcher{owner: "converter", kind: ConverterRange, list: &v.list, dt: 1 / c.Rate}
	}
	return v
}

// Streams of the seed; interferers use those from 0 on.
const (
	noiseStream  = math.MaxUint64
	jitterStream = math.MaxUint64 - 1
)

// take turns the conversions among instants into a block and hands it on; what lies before the first only settles.
func (v *converter) take(o *conversions) error {
	n := int64(len(o.slope))
	from, to := max(0, -o.first), n
	if o.end >= 0 {
		to = min(n, o.end-o.first)
	}
	b := &v.block
	b.reset()
	b.First = v.count
	for k := range to {
		if (o.first+k)%v.instants == 0 {
			v.one(o, int(k), k >= from)
		}
	}
	if len(b.Codes) == 0 {
		return nil
	}
	v.count += int64(len(b.Codes))
	if v.progress != nil {
		v.progress(v.count)
	}
	return v.sink(b)
}

func (b *Block) reset() {
	for i := range b.Layers {
		b.Layers[i] = b.Layers[i][:0]
	}
	b.Folded, b.Heard, b.Codes = b.Folded[:0], b.Heard[:0], b.Codes[:0]
}

// one takes the k-th conversion; kept tells whether it is one of the run's.
func (v *converter) one(o *conversions, k int, kept bool) {
	unit := v.span.Unit()
	var part [5]float64
	for i, rows := range [...][][]float64{o.parts[wantedPart], o.parts[foldBackPart], o.parts[inBandPart], o.parts[outOfBandPart], o.overload} {
		other := 0.
		if len(rows) > 1 {
			other = rows[1][k]
		}
		part[i] = snap(v.settled[i].sample(rows[0][k], other) / unit)
	}
	if !kept {
		return
	}
	wanted, folded, inBand, outOfBand, overload := part[0], part[1], part[2], part[3], part[4]
	noise := 0.
	if v.noise != nil {
		noise = v.noise.one()
	}
	if v.jitter > 0 {
		noise += v.jitter * v.draw.NormFloat64() * o.slope[k] / unit
	}
	noise = snap(noise)
	// A span that follows the supply moves the whole scale: (v − low)/(high + δ − low).
	if δ := o.supply[k]; v.supply > 0 && δ != 0 {
		x := v.rest + wanted + folded + inBand + outOfBand + overload + noise
		inBand += snap((x + 1) * (1/(1+δ/(2*unit)) - 1))
	}
	interference := inBand + outOfBand
	x := v.rest + wanted + folded + interference + overload + noise
	held := v.span.Clamp(x)
	if held != x {
		v.saturated++
		side, ratio := 0, 0.
		if x > held {
			side = 1
		}
		if d := held - v.rest; d != 0 {
			ratio = (x - v.rest) / d
		}
		v.range_[side].touch((o.first+int64(k))/v.instants, ratio, 1)
		overload += held - x
	}
	code := v.span.Code(held)
	heard := v.span.Value(code)
	b := &v.block
	for i, value := range [LayerCount]float64{wanted, folded, interference, overload, noise, heard - held} {
		b.Layers[i] = append(b.Layers[i], value)
	}
	b.Folded = append(b.Folded, outOfBand)
	b.Heard = append(b.Heard, heard)
	b.Codes = append(b.Codes, code)
}

// overloads returns what ran beyond the span, and adds its events to the list.
func (v *converter) overloads(list *eventList) []Overload {
	var seen []Overload
	for i := range v.range_ {
		if o := v.range_[i].result(); o.Events > 0 {
			seen = append(seen, o)
		}
	}
	for _, e := range v.list.kept {
		list.add(e)
	}
	list.count += v.list.count - int64(len(v.list.kept))
	return seen
}
