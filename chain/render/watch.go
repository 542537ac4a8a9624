package render

import (
	"math"

	"midrail/bilinear"
	"midrail/chain"
	"midrail/chain/circuit"
)

// watchers are all that is watched for overload.
type watchers struct {
	amplifiers []amplifierWatch
	capsules   []capsuleWatch
	diodes     []*watcher
	loud       []*watcher // for each of the chain's inputs
	union      int64      // steps at which any limit held
}

type amplifierWatch struct {
	high, low, slew, commonMode, current *watcher
	lowest, highest                      float64 // V, the limits of the internal source from rest
	plus, minus, out                     int     // indices of the watched nodes
	plusLow, plusHigh                    float64 // V from rest
	minusLow, minusHigh                  float64
	restCurrent, conductance             float64 // A out of the output at rest; S, 1/Ro
	source, sink                         float64 // A
	slewStep                             float64 // V, the slew rate times half a step
	// What the two inputs (V) and the output's current (A) may move by from rest without a word.
	plusRoom, minusRoom, currentRoom float64
}

type capsuleWatch struct {
	cutOff, saturated *watcher
	element           int // of State.Pieces
	input             int // of u
	current           float64
}

func newWatchers(n *circuit.Network, at bilinear.Operating, indexOf map[int]int, dt float64, list *eventList, scope *scope) watchers {
	var w watchers
	one := func(owner string, kind EventKind) *watcher {
		w := &watcher{owner: owner, kind: kind, list: list, dt: dt}
		if kind.Limits() {
			w.scope = scope
		}
		return w
	}
	for k, a := range n.Amplifiers {
		m := a.Model
		supply := n.Chain.Supply.Voltage
		e, plus, minus := at.Sources[k], at.Volts[a.Plus], at.Volts[a.Minus]
		aw := amplifierWatch{
			high: one(a.Name, UpperLimit), low: one(a.Name, LowerLimit), slew: one(a.Name, Slew),
			commonMode: one(a.Name, CommonMode), current: one(a.Name, OutputCurrent),
			lowest: a.Low - e, highest: a.High - e,
			plus: indexOf[a.Plus], minus: indexOf[a.Minus], out: indexOf[a.Out],
			plusLow: m.CommonModeLow - plus, plusHigh: supply - m.CommonModeHigh - plus,
			minusLow: m.CommonModeLow - minus, minusHigh: supply - m.CommonModeHigh - minus,
			source: m.CurrentSource, sink: m.CurrentSink,
			slewStep: m.SlewRate * dt / 2,
		}
		if m.OutputResistance > 0 {
			aw.conductance = 1 / m.OutputResistance
			aw.restCurrent = (e - at.Volts[a.Out]) / m.OutputResistance
		}
		aw.plusRoom, aw.minusRoom = math.Min(aw.plusHigh, -aw.plusLow), math.Min(aw.minusHigh, -aw.minusLow)
		aw.currentRoom = math.Min(aw.source-aw.restCurrent, aw.sink+aw.restCurrent)
		w.amplifiers = append(w.amplifiers, aw)
	}
	element := len(n.Amplifiers)
	for i := range n.Chain.Inputs {
		in := &n.Chain.Inputs[i]
		w.loud = append(w.loud, one(in.Name, TooLoud))
		if in.Kind == chain.Electret {
			w.capsules = append(w.capsules, capsuleWatch{
				cutOff: one(in.Name, CutOff), saturated: one(in.Name, Saturated),
				element: element, input: circuit.SoundInput(i), current: in.Current,
			})
			element++
		}
	}
	for _, d := range n.Diodes {
		w.diodes = append(w.diodes, one(n.Chain.Stages[d.Stage].Name, Clamped))
	}
	return w
}

// touched notes which limits hold at a step that stands for several. By how much the linear run passes them is told by
// the nearer ones, as they are numbered in the block, of its instants at the base rate.
func (w *watchers) touched(s *simulator, near int, step, several int64) {
	w.union += max(0, min(several, step+1)) // from the tracks' first sample on
	near = min(near, s.grid.base-1)
	linear := func(q int) float64 {
		x, _ := s.read(q)
		if near > 0 && math.Abs(x[near-1]) > math.Abs(x[near]) {
			return x[near-1]
		}
		return x[near]
	}
	for k := range w.amplifiers {
		a, e := &w.amplifiers[k], s.elements[k]
		switch s.limited.state.Pieces[k] {
		case bilinear.High:
			a.high.touch(step, linear(e.source)/a.highest, several)
		case bilinear.Low:
			a.low.touch(step, linear(e.source)/a.lowest, several)
		case bilinear.SlewUp, bilinear.SlewDown:
			ratio := 0.
			if e.slope >= 0 {
				ratio = math.Abs(linear(e.slope)) / a.slewStep
			}
			a.slew.touch(step, ratio, several)
		}
	}
	for i := range w.capsules {
		c := &w.capsules[i]
		switch s.limited.state.Pieces[c.element] {
		case bilinear.CutOff:
			c.cutOff.touch(step, math.Abs(s.u[c.input])/c.current, several)
		case bilinear.Saturated:
			c.saturated.touch(step, 0, several)
		}
	}
	for i, d := range w.diodes {
		if s.limited.state.Pieces[len(w.amplifiers)+len(w.capsules)+i] != bilinear.Linear {
			d.touch(step, 0, several)
		}
	}
}

// watch notes an amplifier outside its common-mode range or beyond its output current at a step that stands for
// several, by the voltages from rest of its inputs, its output and its internal source.
func (a *amplifierWatch) watch(plus, minus, out, source float64, step, several int64) {
	if plus > a.plusHigh || plus < a.plusLow || minus > a.minusHigh || minus < a.minusLow {
		a.commonMode.touch(step, 0, several)
	}
	if i := a.restCurrent + (source-out)*a.conductance; i > a.source || -i > a.sink {
		a.current.touch(step, math.Max(i/a.source, -i/a.sink), several)
	}
}

// results closes every watcher and returns those that saw something.
func (w *watchers) results() []Overload {
	var all []*watcher
	for i := range w.amplifiers {
		a := &w.amplifiers[i]
		all = append(all, a.high, a.low, a.slew, a.commonMode, a.current)
	}
	for i := range w.capsules {
		all = append(all, w.capsules[i].cutOff, w.capsules[i].saturated)
	}
	all = append(all, w.diodes...)
	all = append(all, w.loud...)
	var seen []Overload
	for _, one := range all {
		if o := one.result(); o.Events > 0 {
			seen = append(seen, o)
		}
	}
	return seen
}
