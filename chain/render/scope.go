package render

import (
	"math"
	"slices"

	"midrail/bilinear"
)

const (
	// scopeSpan is how many seconds are kept around a large overload.
	scopeSpan = 20e-3
	// mostWaveforms is how many of them are kept: the largest.
	mostWaveforms = 3
)

// Waveform is what the linear chain asks of every stage, and what the stage does, around one of the largest overloads.
type Waveform struct {
	Owner      string
	Kind       EventKind
	At         float64     // s, where the linear chain passes the limit by most
	Over       float64     // dB, by how much; 0 where not known
	From, Step float64     // s, of the first value and from value to value
	Asked      [][]float64 // V, for each of the chain's stages: the linear chain's output
	Real       [][]float64 // V, for each of the chain's stages, as long as Asked: the output
}

// scope keeps what the last blocks were made from, so that the stages' voltages can be told around an overload once it
// has shown to be a large one. What it keeps does not grow with the run.
type scope struct {
	s      *simulator
	rest   []float64 // V, of each stage
	half   int64     // steps, half of scopeSpan
	blocks []scopeBlock
	opened int64 // blocks so far

	found     bool // an overload is waiting for what follows it
	largest   loudest
	waveforms []Waveform // the largest first
}

// loudest is the step at which an overload is largest.
type loudest struct {
	owner string
	kind  EventKind
	step  int64
	ratio float64
}

// scopeBlock is what a block was made from.
type scopeBlock struct {
	step               int64 // its first
	linear, difference []float64
	sums, means        [][]float64
	stepped            bool
	limited            [][]float64 // V from rest, of each stage at each base sample, in a block that was stepped
}

func newScope(s *simulator, at bilinear.Operating) *scope {
	o := &scope{s: s, half: int64(scopeSpan / 2 * s.grid.plan.Rate)}
	for i := range s.stageIndex {
		o.rest = append(o.rest, at.Volts[s.n.StageNode(i)])
	}
	o.blocks = make([]scopeBlock, 2*o.half/int64(s.grid.steps)+3)
	for i := range o.blocks {
		b := &o.blocks[i]
		b.linear, b.difference = make([]float64, len(s.linear)), make([]float64, len(s.linear))
		b.sums, b.means = make([][]float64, s.inputs), make([][]float64, s.inputs)
		for u := range s.inputs {
			b.sums[u], b.means[u] = make([]float64, len(s.sums[u])), make([]float64, len(s.cellMeans[u]))
		}
		for range s.stageIndex {
			b.limited = append(b.limited, make([]float64, s.grid.base))
		}
	}
	return o
}

// open begins a block, of whose sums and states it takes copies.
func (o *scope) open(step int64) {
	b := &o.blocks[o.opened%int64(len(o.blocks))]
	o.opened++
	b.step, b.stepped = step, false
	copy(b.linear, o.s.linear)
	copy(b.difference, o.s.difference)
	for u := range b.sums {
		copy(b.sums[u], o.s.sums[u])
		copy(b.means[u], o.s.cellMeans[u])
	}
}

// see takes the watched voltages of the limited run at the block's i-th base sample.
func (o *scope) see(i int, y []float64) {
	b := &o.blocks[(o.opened-1)%int64(len(o.blocks))]
	b.stepped = true
	for k, q := range o.s.stageIndex {
		b.limited[k][i] = y[q]
	}
}

// note tells of a step at which a limit held.
func (o *scope) note(owner string, kind EventKind, step int64, ratio float64) {
	if !o.found || ratio > o.largest.ratio {
		o.found, o.largest = true, loudest{owner, kind, step, ratio}
	}
}

// close ends a block; step is the first of the next one.
func (o *scope) close(step int64) {
	if o.found && step > o.largest.step+o.half {
		o.take()
	}
}

// take keeps the waveforms around the largest overload seen, if it is one of the largest of all.
func (o *scope) take() {
	l := o.largest
	o.found = false
	w := Waveform{Owner: l.owner, Kind: l.kind, At: float64(l.step) / o.s.grid.plan.Rate}
	if l.ratio > 1 && !math.IsInf(l.ratio, 1) {
		w.Over = 20 * math.Log10(l.ratio)
	}
	if len(o.waveforms) == mostWaveforms {
		if w.Over <= o.waveforms[mostWaveforms-1].Over {
			return
		}
		o.waveforms = o.waveforms[:mostWaveforms-1]
	}
	o.fill(&w, l.step)
	at := slices.IndexFunc(o.waveforms, func(other Waveform) bool { return other.Over < w.Over })
	if at < 0 {
		at = len(o.waveforms)
	}
	o.waveforms = slices.Insert(o.waveforms, at, w)
}

// fill computes the stages' voltages around a step from the blocks that are kept.
func (o *scope) fill(w *Waveform, middle int64) {
	s := o.s
	n := int64(len(o.blocks))
	w.Asked, w.Real = make([][]float64, len(s.stageIndex)), make([][]float64, len(s.stageIndex))
	scale := int64(1) << s.grid.plan.Doublings
	w.Step = float64(scale) / s.grid.plan.Rate
	linear, moved := make([]float64, s.grid.base), make([]float64, s.grid.base)
	for i := max(0, o.opened-n); i < o.opened; i++ {
		b := &o.blocks[i%n]
		for k, q := range s.stageIndex {
			clear(linear)
			clear(moved)
			s.readFrom(linear, q, b.linear, b.sums, b.means)
			bilinear.Apply(moved, rows(s.inspectState, q*s.grid.base, (q+1)*s.grid.base), b.difference)
			for j := range linear {
				at := b.step + int64(j+1)*scale - 1
				if at < middle-o.half || at > middle+o.half {
					continue
				}
				if len(w.Asked[0]) == 0 {
					w.From = float64(at) / s.grid.plan.Rate
				}
				real := linear[j] + moved[j]
				if b.stepped {
					real = b.limited[k][j]
				}
				w.Asked[k] = append(w.Asked[k], o.rest[k]+linear[j])
				w.Real[k] = append(w.Real[k], o.rest[k]+real)
			}
		}
	}
}

// result returns the waveforms, the largest overload first.
func (o *scope) result() []Waveform {
	if o.found {
		o.take()
	}
	return o.waveforms
}
