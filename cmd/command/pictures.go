package command

import (
	"errors"
	"io"
	"math"

	"midrail/chain/circuit"
	"midrail/chain/noise"
	"midrail/chain/render"
	"midrail/chain/residue"
	"midrail/cmd/report"
	"midrail/signals"
	"midrail/signals/level"
	"midrail/signals/spectrum"
	"midrail/signals/wav"
)

const (
	// gramColumns and gramLength are how many columns a spectrogram has, and how many samples each of its segments.
	gramColumns, gramLength = 400, 256
	// perOctave is how many points the spectra have in an octave.
	perOctave = 24
)

// writePage writes the report that people open into the folder, and notes in run what it has to listen to.
func writePage(n *circuit.Network, j job, out *folder, run *report.Run, r *render.Result, res *residue.Residue, budget *noise.Budget) error {
	var grams []func() (report.Gram, error)
	for _, name := range []string{report.Heard, report.FoldBack} {
		grams = append(grams, later(func() (report.Gram, error) { return gramOf(out.file(name+".wav"), name) }))
	}
	pictures := later(func() (*report.Pictures, error) { return picturesOf(n, r, res, budget), nil })
	sound, sounds, err := listen(out, j, r, res, run)
	if err != nil {
		return err
	}
	p, _ := pictures()
	run.Listen, p.Sounds = sound, sounds
	for _, wait := range grams {
		g, err := wait()
		if err != nil {
			return err
		}
		p.Grams = append(p.Grams, g)
	}
	return writeFile(out.file("report.html"), func(w io.Writer) error { return report.WriteHTML(w, run, p) })
}

// gramOf returns the spectrogram of a file of one channel.
func gramOf(path, name string) (report.Gram, error) {
	f, err := wav.Open(path)
	if err != nil {
		return report.Gram{}, err
	}
	density, err := spectrum.Gram(signals.Channels(f, 1)[0], f.Rate(), f.Frames(), gramLength, gramColumns)
	if err := errors.Join(err, f.Close()); err != nil {
		return report.Gram{}, err
	}
	g := report.Gram{Layer: name, Duration: float64(f.Frames()) / f.Rate(), Top: f.Rate() / 2}
	for _, column := range density {
		levels := make([]float64, len(column))
		for i, d := range column {
			levels[i] = level.DBFS(math.Sqrt(d * f.Rate() / gramLength))
		}
		g.Level = append(g.Level, levels)
	}
	return g, nil
}

// picturesOf returns what the plots of a report are drawn from.
func picturesOf(n *circuit.Network, r *render.Result, res *residue.Residue, budget *noise.Budget) *report.Pictures {
	c := &n.Chain.Converter
	p := &report.Pictures{HalfRate: c.Rate / 2, Duration: r.Seconds}
	if d := n.Chain.Limits.Droop; d != nil {
		p.Kept = d.At
	}
	const points = 240
	top := math.Max(4*c.Rate, 40e3)
	for i := range n.Inputs {
		line := report.Response{Input: n.Chain.Inputs[i].Name}
		for k := range points {
			f := 10 * math.Pow(top/10, float64(k)/(points-1))
			h := n.At(f).Into(n.Output).Input(circuit.SoundInput(i))
			line.Frequency = append(line.Frequency, f)
			line.Gain = append(line.Gain, circuit.Gain(h)+20*math.Log10(math.Abs(n.Inputs[i].Scale)/r.Span.Unit()))
		}
		p.Responses = append(p.Responses, line)
	}
	perHertz, thirds := report.Spectrum{Per: "hertz"}, report.Spectrum{Per: "third octave"}
	for i, reading := range res.Layers {
		name := render.Layer(i).String()
		line := report.Line{Layer: name}
		for _, t := range reading.Thirds {
			line.Frequency = append(line.Frequency, t.Middle)
			line.Level = append(line.Level, t.Level)
		}
		thirds.Layers = append(thirds.Layers, line)
		perHertz.Layers = append(perHertz.Layers, densityOf(name, reading.Density))
		p.Levels = append(p.Levels, timelineOf(name, reading.Time))
	}
	p.Spectra = []report.Spectrum{perHertz, thirds}
	p.Levels = append(p.Levels, timelineOf(report.Heard, res.Heard.Time))
	for _, e := range r.Events {
		if e.Kind.Limits() {
			p.Spans = append(p.Spans, report.Span{Stage: e.Owner, From: e.From, To: e.To})
		}
	}
	for _, w := range r.Waveforms {
		p.Scopes = append(p.Scopes, report.Scope{From: w.From, Step: w.Step, Asked: w.Asked, Real: w.Real})
	}
	p.Densities = noiseLines(budget, c.Rate)
	return p
}

// densityOf returns a layer's spectrum per hertz: the mean power of all its points in each twenty-fourth of an octave.
func densityOf(name string, d spectrum.Density) report.Line {
	line := report.Line{Layer: name}
	ratio := math.Pow(2, 1./perOctave)
	for i := 1; i < len(d.Values); {
		sum, from, last := 0., i, math.Max(float64(i)*ratio, float64(i)+0.5)
		for i < len(d.Values) && float64(i) < last {
			sum += d.Values[i]
			i++
		}
		if f := float64(from+i-1) / 2 * d.Step; f >= 10 {
			line.Frequency = append(line.Frequency, f)
			line.Level = append(line.Level, level.DBFS(math.Sqrt(sum/float64(i-from))))
		}
	}
	return line
}

// noiseLines returns the density of the noise at the converter's input, and that which sampling makes of it.
func noiseLines(b *noise.Budget, rate float64) []report.Line {
	before, after := report.Line{Layer: "at the converter"}, report.Line{Layer: "sampled"}
	for i, f := range b.Frequencies {
		before.Frequency = append(before.Frequency, f)
		before.Level = append(before.Level, math.Sqrt(b.Density[i]))
	}
	for f := b.Frequencies[0]; f < rate/2; f *= math.Pow(2, 1./perOctave) {
		after.Frequency = append(after.Frequency, f)
		after.Level = append(after.Level, math.Sqrt(b.Folded[min(int(math.Ceil(f/b.Step)), len(b.Folded)-1)]))
	}
	return []report.Line{before, after}
}

func timelineOf(name string, t level.Timeline) report.Level {
	l := report.Level{Layer: name, RMS: t.RMS, Peak: t.Peak}
	for i := range t.RMS {
		l.Time = append(l.Time, (float64(i)+0.5)*t.Step)
	}
	return l
}
