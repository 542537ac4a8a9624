package report

import (
	"bytes"
	"crypto/sha256"
	"embed"
	"encoding/base64"
	"html/template"
	"io"
	"math"
	"sort"
	"strings"
)

// parts are the templates and the style sheet of the page.
//
//go:embed page
var parts embed.FS

// page is what the templates are filled from.
type page struct {
	*Run
	Head    template.HTML // the policy and the style sheet
	Title   string
	Verdict verdict
	First   *Finding // the finding to put right first; nil where there is none
	Figures []drawn
	Worst   []Event
	Thirds  *thirds // nil where no layer has them
}

// drawn is one figure as the page has it.
type drawn struct {
	Caption string
	Drawing template.HTML
}

// thirds are the third-octave levels of all layers as one table.
type thirds struct {
	Layers []string
	Rows   []thirdRow
}

// thirdRow is one third octave.
type thirdRow struct {
	Hz     Number
	Levels []Number // one for each of thirds.Layers
}

// WriteHTML writes the run as one self-contained page: it asks nothing of the network and runs no
// script, and every name in it is escaped. Pictures may be nil: then there are no plots. It
// returns the error of w.
func WriteHTML(w io.Writer, run *Run, pictures *Pictures) error {
	style, err := parts.ReadFile("page/style.css")
	if err != nil {
		return err
	}
	t, err := template.New("page.html").Funcs(template.FuncMap{
		"clean": clean, "dbfs": dbfs, "db": decibels, "errorDB": errorDB, "volts": volts, "between": between,
		"hertz": hertz, "seconds": seconds, "clock": clock, "percent": percent, "scaled": scaled, "count": count,
		"times": times, "plural": plural, "limitName": limitName, "limitValue": limitValue, "limitBound": limitBound,
		"lengthOf": lengthOf,
	}).ParseFS(parts, "page/*.html")
	if err != nil {
		return err
	}
	p := page{
		Run: run, Head: head(string(style)), Title: title(run), Verdict: judge(run), First: first(run.Findings),
		Worst: worstEvents(run.Events, mostEvents), Thirds: gather(run.Layers),
	}
	if pictures != nil {
		p.Figures = figures(run, pictures)
	}
	var b bytes.Buffer
	if err := t.Execute(&b, p); err != nil {
		return err
	}
	_, err = w.Write(b.Bytes())
	return err
}

// head returns the style sheet, and a policy that allows it and nothing else (Content Security
// Policy Level 3, W3C: a hash source names the text that may be used).
func head(style string) template.HTML {
	sum := sha256.Sum256([]byte(style))
	policy := "default-src 'none'; style-src 'sha256-" + base64.StdEncoding.EncodeToString(sum[:]) + "'; base-uri 'none'; form-action 'none'"
	return template.HTML(`<meta http-equiv="Content-Security-Policy" content="` + policy + "\">\n<style>" + style + "</style>")
}

// title returns the chain's title, or the name of its file where it has none.
func title(run *Run) string {
	if run.Chain.Title != "" {
		return clean(run.Chain.Title)
	}
	return clean(run.Chain.File)
}

// first returns the first finding that stops, or else the first caution; nil where there is none.
func first(findings []Finding) *Finding {
	for _, severity := range []string{Stop, Caution} {
		for i := range findings {
			if findings[i].Severity == severity {
				return &findings[i]
			}
		}
	}
	return nil
}

// gather puts the third octaves of all layers side by side; nil where there are none.
func gather(layers []Layer) *thirds {
	var t thirds
	at := map[float64]int{}
	for _, l := range layers {
		if len(l.Thirds) == 0 {
			continue
		}
		t.Layers = append(t.Layers, l.Name)
		for _, third := range l.Thirds {
			hz, there := third.Hz.Value()
			if _, known := at[hz]; there && !known {
				at[hz] = len(t.Rows)
				t.Rows = append(t.Rows, thirdRow{Hz: third.Hz})
			}
		}
	}
	if len(t.Rows) == 0 {
		return nil
	}
	sort.Slice(t.Rows, func(i, j int) bool { return t.Rows[i].Hz.value < t.Rows[j].Hz.value })
	for i := range t.Rows {
		for _, l := range layers {
			if len(l.Thirds) > 0 {
				t.Rows[i].Levels = append(t.Rows[i].Levels, levelAt(l.Thirds, t.Rows[i].Hz))
			}
		}
	}
	return &t
}

// levelAt returns the level in the third octave at hz.
func levelAt(list []Third, hz Number) Number {
	for _, third := range list {
		if third.Hz == hz {
			return third.DBFS
		}
	}
	return Number{}
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

// figures draws the plots that there is data for.
func figures(run *Run, p *Pictures) []drawn {
	var list []drawn
	add := func(f figure, caption string) {
		if len(f.curves)+len(f.rows) > 0 {
			list = append(list, drawn{caption, f.draw()})
		}
	}
	f := responseFigure(p)
	add(f, "Response from each input to the converter. What lies in the shaded part, above half the converter rate, folds back below it. "+
		"0 dB: a full-scale tone in the track just fills the converter's span.")
	f = spectrumFigure(p)
	add(f, "What the converter hears, layer by layer, up to half its rate: level in each "+clean(p.Spectrum.Per)+".")
	f = levelFigure(run, p)
	add(f, "Level along time. Thick lines: RMS; thin: peak. The bars above show when each stage overloads.")
	return list
}

// responseFigure draws the gain from each input to the converter.
func responseFigure(p *Pictures) figure {
	f := figure{title: "Response from each input to the converter", x: axis{label: "frequency, Hz", log: true}, y: axis{label: "gain, dB"}}
	var ends, levels reach
	for i, r := range p.Responses {
		f.line(curve{clean(r.Input), class(i), r.Frequency, r.Gain}, &levels)
		ends.of(r.Frequency)
	}
	f.x.lo, f.x.hi = ends.within(10, 100e3)
	f.y.lo, f.y.hi = levels.rounded(100, 10)
	if p.HalfRate > 0 {
		f.bands = []band{{label: "folds back", from: p.HalfRate, to: math.Inf(1), upright: true}}
		f.marks = []mark{{label: "half the rate, " + hertz(Of(p.HalfRate)), x: p.HalfRate}}
	}
	f.text = f.words()
	return f
}

// spectrumFigure draws the spectrum of each layer at the converter.
func spectrumFigure(p *Pictures) figure {
	f := figure{title: "Spectrum of the layers at the converter", x: axis{label: "frequency, Hz", log: true},
		y: axis{label: "dBFS per " + clean(p.Spectrum.Per)}}
	var ends, levels reach
	for i, l := range p.Spectrum.Layers {
		f.line(curve{clean(l.Layer), classOf(l.Layer, i), l.Frequency, l.Level}, &levels)
		ends.of(l.Frequency)
	}
	f.x.lo, f.x.hi = ends.within(10, math.Max(p.HalfRate, 20))
	f.y.lo, f.y.hi = levels.rounded(140, 20)
	f.text = f.words()
	return f
}

// levelFigure draws the level of each layer along time, with the overloads.
func levelFigure(run *Run, p *Pictures) figure {
	f := figure{title: "Level along time, and overloads", x: axis{label: "time on the track", time: true, hi: p.Duration}, y: axis{label: "dBFS"}}
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
