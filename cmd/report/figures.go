package report

import (
	"html/template"
	"math"
	"sort"
	"strings"
)

// figures are the drawings of the page, by the section that shows them.
type figures struct {
	Stages, Residue, Overloads, Response, Noise []drawn
}

// drawn is one figure as the page has it.
type drawn struct {
	Caption string
	Drawing template.HTML
}

// draw draws everything that there is data for.
func draw(run *Run, p *Pictures) (figures, error) {
	var f figures
	add := func(list *[]drawn, one figure, caption string) {
		if len(one.curves)+len(one.rows) > 0 {
			*list = append(*list, drawn{caption, one.draw()})
		}
	}
	if len(run.Stages) > 0 {
		f.Stages = append(f.Stages, drawn{"Volts through the chain, drawn to one scale. Shaded: where the stage can go. Bar: where it went on this track. Upright line: where it rests.", levelDiagram(run)})
	}
	add(&f.Overloads, levelFigure(run, p), "Level along time. Thick lines: RMS; thin: peak. The bars above show when each stage overloads.")
	for i := range min(len(p.Scopes), len(run.Waveforms)) {
		f.Overloads = append(f.Overloads, scopes(run, i, &p.Scopes[i])...)
	}
	add(&f.Response, responseFigure(p), "Response from each input to the converter. What lies in the shaded part, above half the converter rate, folds back below it; "+
		"the lines named “folded” show where it lands and how strongly. 0 dB: a full-scale tone in the track just fills the converter's span.")
	for _, s := range p.Spectra {
		add(&f.Residue, spectrumFigure(s, p.HalfRate), "What the converter hears, layer by layer, up to half its rate: level in each "+clean(s.Per)+".")
	}
	for _, g := range p.Grams {
		one, err := gramFigure(&g)
		if err != nil {
			return f, err
		}
		if one.image == nil {
			continue // silence
		}
		f.Residue = append(f.Residue, drawn{"Spectrogram of " + clean(g.Layer) + ": time across, frequency up; the brighter, the louder.", one.draw()})
	}
	add(&f.Noise, noiseFigure(p), "Noise density at the converter's input, and what sampling makes of it: everything above half the rate lands below.")
	return f, nil
}

// line adds a curve to the figure, if it has any value.
func (f *figure) line(c curve, levels *reach) {
	var own reach
	own.of(c.y)
	if own.some {
		f.curves = append(f.curves, c)
		levels.of(c.y)
	}
}

// frequencies is an axis of frequency.
func frequencies() axis { return axis{label: "frequency, Hz", unit: "Hz", log: true} }

// responseFigure draws the gain from each input to the converter, and where what lies above half the rate folds to.
func responseFigure(p *Pictures) figure {
	f := figure{title: "Response from each input to the converter", x: frequencies(), y: axis{label: "gain, dB", unit: "dB"}}
	var ends, levels reach
	for i, r := range p.Responses {
		f.line(curve{clean(r.Input), class(i), r.Frequency, r.Gain}, &levels)
		ends.of(r.Frequency)
	}
	for i, r := range p.Responses {
		x, y := folded(r.Frequency, r.Gain, p.HalfRate)
		f.line(curve{short(clean(r.Input), 14) + ", folded", class(i) + " thin", x, y}, &reach{})
	}
	f.x.lo, f.x.hi = ends.within(10, 100e3)
	f.y.lo, f.y.hi = levels.rounded(100, 10)
	if p.HalfRate > 0 {
		f.bands = []band{{label: "folds back", from: p.HalfRate, to: math.Inf(1), upright: true}}
		f.marks = []mark{{label: "half the rate, " + hertz(Of(p.HalfRate)), x: p.HalfRate}}
	}
	if p.Kept > 0 {
		f.marks = append(f.marks, mark{label: "kept to " + hertz(Of(p.Kept)), x: p.Kept, high: true})
	}
	f.text = f.words()
	return f
}

// folded returns the part of a line between half the rate and the rate where sampling puts it, f → rate − f.
func folded(x, y []float64, half float64) (fx, fy []float64) {
	for i := len(x) - 1; i >= 0; i-- {
		if x[i] >= half && x[i] < 2*half-10 {
			fx, fy = append(fx, 2*half-x[i]), append(fy, y[i])
		}
	}
	return fx, fy
}

// spectrumFigure draws the spectrum of each layer at the converter.
func spectrumFigure(s Spectrum, half float64) figure {
	f := figure{title: "Spectrum of the layers at the converter, in each " + clean(s.Per), x: frequencies(),
		y: axis{label: "dBFS per " + clean(s.Per), unit: "dBFS"}}
	var ends, levels reach
	for i, l := range s.Layers {
		f.line(curve{clean(l.Layer), classOf(l.Layer, i), l.Frequency, l.Level}, &levels)
		ends.of(l.Frequency)
	}
	f.x.lo, f.x.hi = ends.within(10, math.Max(half, 20))
	f.y.lo, f.y.hi = levels.rounded(140, 20)
	f.text = f.words()
	return f
}

// noiseFigure draws the noise density.
func noiseFigure(p *Pictures) figure {
	f := figure{title: "Noise density at the converter's input", x: frequencies(), y: axis{label: "µV/√Hz", unit: "µV/√Hz", log: true}}
	var ends, levels reach
	for i, l := range p.Densities {
		micro := make([]float64, len(l.Level))
		for k, v := range l.Level {
			micro[k] = v * 1e6
			if v <= 0 {
				micro[k] = math.NaN()
			}
		}
		f.line(curve{clean(l.Layer), class(i), l.Frequency, micro}, &levels)
		ends.of(l.Frequency)
	}
	f.x.lo, f.x.hi = ends.within(10, 1e6)
	const deep = 1e4 // what is farther below the loudest is of no use in a picture
	f.y.hi = 10 * levels.hi
	f.y.lo = math.Max(levels.lo, levels.hi/deep) / 2
	if !levels.some {
		f.y.lo, f.y.hi = 1, 10
	}
	if p.HalfRate > 0 {
		f.bands = []band{{label: "folds back", from: p.HalfRate, to: math.Inf(1), upright: true}}
		f.marks = []mark{{label: "half the rate, " + hertz(Of(p.HalfRate)), x: p.HalfRate}}
	}
	f.text = f.words()
	return f
}

// levelFigure draws the level of each layer along time, with the overloads.
func levelFigure(run *Run, p *Pictures) figure {
	f := figure{title: "Level along time, and overloads", x: axis{label: "time on the track", unit: "s", time: true, hi: p.Duration}, y: axis{label: "dBFS", unit: "dBFS"}, seeks: true}
	var levels reach
	levels.of([]float64{0})
	for i, l := range p.Levels {
		f.line(curve{"", classOf(l.Layer, i) + " thin", l.Time, l.Peak}, &levels)
	}
	for i, l := range p.Levels {
		f.line(curve{clean(l.Layer), classOf(l.Layer, i), l.Time, l.RMS}, &levels)
	}
	for _, name := range stagesOf(run, p.Spans) {
		r := row{label: clean(name)}
		for _, s := range p.Spans {
			if s.Stage == name {
				r.spans = append(r.spans, [2]float64{s.From, s.To})
			}
		}
		sort.Slice(r.spans, func(i, j int) bool { return r.spans[i][0] < r.spans[j][0] })
		f.rows = append(f.rows, r)
	}
	if f.x.hi <= 0 {
		f.x.hi = 1
	}
	f.y.lo, f.y.hi = levels.rounded(140, 20)
	f.y.hi = math.Max(f.y.hi, 6)
	f.bands = []band{{label: "beyond full scale", from: 0, to: math.Inf(1)}}
	f.text = f.words()
	return f
}

// scopes draws the waveforms of every stage around the i-th overload.
func scopes(run *Run, i int, s *Scope) []drawn {
	w := run.Waveforms[i]
	var list []drawn
	at, _ := w.AtS.Value()
	for k, stage := range run.Stages {
		if k >= len(s.Real) {
			break
		}
		f := figure{title: "Waveform of " + clean(stage.Name) + " around " + clock(w.AtS), low: true,
			x: axis{label: "ms from the overload", unit: "ms"}, y: axis{label: "V", unit: "V"}}
		x := make([]float64, len(s.Real[k]))
		for j := range x {
			x[j] = (s.From + float64(j)*s.Step - at) * 1e3
		}
		var ends, levels reach
		ends.of(x)
		f.x.lo, f.x.hi = ends.lo, ends.hi
		f.line(curve{"asked for", class(1), x, s.Asked[k]}, &levels)
		f.line(curve{"real", class(0), x, s.Real[k]}, &levels)
		low, isLow := stage.LimitLowV.Value()
		high, isHigh := stage.LimitHighV.Value()
		if isLow && isHigh {
			levels.of([]float64{low, high})
		}
		margin := math.Max(0.05*(levels.hi-levels.lo), 1e-6)
		f.y.lo, f.y.hi = levels.lo-margin, levels.hi+margin
		if isLow && isHigh {
			f.bands = []band{{label: "above its limit", from: high, to: math.Inf(1)}, {from: math.Inf(-1), to: low}}
		}
		f.text = "Dashed: what the chain without limits would put out. Solid: what the stage puts out. Shaded: beyond its limits."
		if !(f.x.hi > f.x.lo) || len(f.curves) == 0 {
			continue
		}
		by := "beyond its limit"
		if w.OverDB.There() {
			by = decibels(w.OverDB) + " over"
		}
		caption := "The output of " + clean(stage.Name) + " around " + clock(w.AtS) + ", where " + clean(w.Stage) + " is " + by + " (" + clean(w.Kind) +
			"). Dashed: asked for; solid: real; shaded: beyond its limits."
		list = append(list, drawn{caption, f.draw()})
	}
	return list
}

// stagesOf returns the stages that have spans: those of the run in its order, then any others.
func stagesOf(run *Run, spans []Span) []string {
	with := map[string]bool{}
	for _, s := range spans {
		with[s.Stage] = true
	}
	var names []string
	take := func(name string) {
		if with[name] {
			names = append(names, name)
			delete(with, name)
		}
	}
	for _, s := range run.Stages {
		take(s.Name)
	}
	for _, s := range spans {
		take(s.Stage)
	}
	return names
}

// words tells in words what the figure shows.
func (f figure) words() string {
	var names []string
	for _, c := range f.curves {
		if c.label != "" {
			names = append(names, c.label)
		}
	}
	s := "Lines: " + strings.Join(names, ", ") + "."
	for _, m := range f.marks {
		s += " A mark: " + m.label + "."
	}
	for _, r := range f.rows {
		s += " Bars: when " + r.label + " overloads."
	}
	return s + " The figures are in the tables of this page."
}

// class returns the style of the i-th line.
func class(i int) string { return "line-" + string(rune('1'+i%6)) }

// classOf returns the style of a layer's line: always the same one for the same layer.
func classOf(layer string, i int) string {
	for k, name := range []string{Wanted, FoldBack, Interference, Overloaded, Noise, Rounding} {
		if layer == name {
			return class(k)
		}
	}
	if layer == Heard {
		return "line-0"
	}
	return class(i)
}

// reach is the range of some values. The zero reach is of none.
type reach struct {
	lo, hi float64
	some   bool
}

// of takes more values in; NaN and the infinities are passed over.
func (r *reach) of(values []float64) {
	for _, v := range values {
		if gap(v) {
			continue
		}
		if !r.some {
			r.lo, r.hi, r.some = v, v, true
		}
		r.lo, r.hi = math.Min(r.lo, v), math.Max(r.hi, v)
	}
}

// within returns the range of positive values, or lo and hi where there is none.
func (r *reach) within(lo, hi float64) (float64, float64) {
	if !r.some || r.lo <= 0 || r.lo >= r.hi {
		return lo, hi
	}
	return r.lo, r.hi
}

// rounded returns the range widened to multiples of step, its lower end at most depth below the
// upper one: what is deeper is of no use in a picture.
func (r *reach) rounded(depth, step float64) (float64, float64) {
	hi := math.Ceil(r.hi/step) * step
	lo := math.Floor(math.Max(r.lo, hi-depth)/step) * step
	if lo >= hi {
		lo = hi - step
	}
	return lo, hi
}
