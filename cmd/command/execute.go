package command

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"slices"
	"strings"
	"time"

	"github.com/vbauerster/mpb/v8"
	"github.com/vbauerster/mpb/v8/decor"

	"midrail/chain"
	"midrail/chain/circuit"
	"midrail/chain/noise"
	"midrail/chain/render"
	"midrail/chain/residue"
	"midrail/chain/response"
	"midrail/chain/rest"
	"midrail/cmd/report"
	"midrail/signals"
	"midrail/signals/level"
	"midrail/signals/wav"
)

// finished is a run that is done.
type finished struct {
	run    *report.Run
	folder string
}

// holds tells whether every limit of the chain does.
func (f *finished) holds() bool {
	for _, l := range f.run.Limits {
		if !l.Holds {
			return false
		}
	}
	return true
}

// tell prints the summary of a run.
func (s streams) tell(f *finished) error {
	if err := report.Summary(s.out, f.run, report.Options{Color: isTerminal(s.out)}); err != nil {
		return err
	}
	first := "report.html and heard.wav"
	if f.run.Listen == nil { // no page
		first = "heard.wav"
	}
	_, err := fmt.Fprintf(s.out, "written to %s; start with %s, the volume low\n", f.folder, first)
	return err
}

// isTerminal tells whether a writer is a terminal.
func isTerminal(w io.Writer) bool {
	f, ok := w.(*os.File)
	if !ok {
		return false
	}
	info, err := f.Stat()
	return err == nil && info.Mode()&os.ModeCharDevice != 0
}

// execute does one job: it renders, measures, and writes the folder.
func execute(ctx context.Context, s streams, f *runFlags, n *circuit.Network, j job) (*finished, error) {
	tracks, err := openTracks(n.Chain, j)
	if err != nil {
		return nil, err
	}
	defer tracks.close()
	out, err := newFolder(j.folder)
	if err != nil {
		return nil, err
	}
	if err := out.needs(outputBytes(n.Chain, tracks.seconds(), !f.noPage)); err != nil {
		return nil, errors.Join(err, out.discard())
	}
	clock := stopwatch{on: f.times, last: time.Now()}
	budget := noise.At(n)
	clock.lap("adding up the noise")
	known := later(func() (*known, error) { return knownOf(n, budget) })
	result, res, err := renderInto(ctx, s, f, n, j, tracks, budget, out)
	if err != nil {
		return nil, errors.Join(err, out.discard())
	}
	clock.laps(result.Times)
	run, err := describe(ctx, n, j, tracks, result, res, budget, known)
	if err == nil && !f.noPage {
		err = writePage(n, j, out, run, result, res, budget)
	}
	if err == nil {
		err = errors.Join(
			writeFile(out.file("report.json"), func(w io.Writer) error { return report.WriteJSON(w, run) }),
			writeFile(out.file("parts.csv"), func(w io.Writer) error { return report.WritePartsCSV(w, run.Parts) }),
		)
	}
	if err == nil {
		err = ctx.Err()
	}
	if err != nil {
		return nil, errors.Join(err, out.discard())
	}
	if err := out.finish(); err != nil {
		return nil, err
	}
	clock.lap("writing the report")
	clock.tell(s.err, result.Seconds)
	return &finished{run, j.folder}, nil
}

// outputBytes is about how much a run writes: heard, the layers, the reports.
func outputBytes(c *chain.Chain, seconds float64, page bool) int64 {
	frame := 2 + 4*render.LayerCount
	if c.Converter.Bits > 16 {
		frame++
	}
	reports := 1e6
	if page {
		reports = 7e6
	}
	return int64(seconds*c.Converter.Rate)*int64(frame) + int64(reports)
}

func writeFile(path string, write func(io.Writer) error) error {
	f, err := os.Create(path)
	if err != nil {
		return err
	}
	return errors.Join(write(f), f.Close())
}

// openTrack is a track being read, with what is measured of it on the way.
type openTrack struct {
	signals.Track
	name  string
	power []float64 // of each channel: sums of squares
	sum   []float64
	peak  float64
	read  int64
}

func (t *openTrack) ReadFrames(dst []float64) (int, error) {
	n, err := t.Track.ReadFrames(dst)
	width := t.Channels()
	for c := range width {
		sum, power, peak := t.sum[c], t.power[c], t.peak
		for i := c; i < n*width; i += width {
			x := dst[i]
			sum += x
			power += float64(x * x)
			peak = max(peak, x, -x)
		}
		t.sum[c], t.power[c], t.peak = sum, power, peak
	}
	t.read += int64(n)
	return n, err
}

// rms returns the RMS over all channels, without DC.
func (t *openTrack) rms() float64 {
	total := 0.
	for c := range t.power {
		mean := t.sum[c] / float64(t.read)
		total += math.Max(t.power[c]/float64(t.read)-mean*mean, 0)
	}
	return math.Sqrt(total / float64(len(t.power)))
}

// openTracks are a job's tracks, each opened once, and the feeds that they are for the chain's inputs.
type openedTracks struct {
	list  []*openTrack
	feeds []render.Feed
}

func openTracks(c *chain.Chain, j job) (*openedTracks, error) {
	o := &openedTracks{feeds: make([]render.Feed, len(c.Inputs))}
	inputs := map[string][]int{} // by the track's name
	var names []string
	for i, r := range j.tracks {
		if r.open == nil {
			continue
		}
		if inputs[r.name] == nil {
			names = append(names, r.name)
		}
		inputs[r.name] = append(inputs[r.name], i)
	}
	for _, name := range names {
		t, err := j.tracks[inputs[name][0]].open()
		if err != nil {
			o.close()
			return nil, err
		}
		one := &openTrack{Track: t, name: name, power: make([]float64, t.Channels()), sum: make([]float64, t.Channels())}
		o.list = append(o.list, one)
		var channels []int
		for _, i := range inputs[name] {
			in := &c.Inputs[i]
			if in.Channel > t.Channels() {
				o.close()
				return nil, chain.Faults{{File: c.File, Pos: in.Pos, Text: fmt.Sprintf("input %q takes channel %d of %s, which has %d", in.Name, in.Channel, name, t.Channels()), Remedy: "change channel"}}
			}
			channels = append(channels, in.Channel)
		}
		for k, stream := range signals.Channels(one, channels...) {
			o.feeds[inputs[name][k]] = render.Feed{Sound: stream, Rate: t.Rate()}
		}
	}
	return o, nil
}

func (o *openedTracks) close() {
	for _, t := range o.list {
		t.Close()
	}
}

// notes are what there is to be said of the tracks' files, which is known when they have been read.
func (o *openedTracks) notes() []string {
	var list []string
	for _, t := range o.list {
		if f, ok := t.Track.(*openFile); ok && f.Note() != "" {
			list = append(list, f.Note())
		}
	}
	return list
}

// seconds returns the length of the longest track, 0 where it is not known.
func (o *openedTracks) seconds() float64 {
	longest := 0.
	for _, t := range o.list {
		longest = math.Max(longest, float64(t.Frames())/t.Rate())
	}
	return longest
}

// renderInto renders a job and writes its sound into the folder.
func renderInto(ctx context.Context, s streams, f *runFlags, n *circuit.Network, j job, tracks *openedTracks, budget *noise.Budget, out *folder) (*render.Result, *residue.Residue, error) {
	files, err := newSoundFiles(out, n.Chain.Converter.Rate, n.Chain.Converter.Bits)
	if err != nil {
		return nil, nil, err
	}
	if j.demo() {
		if err := writeTrack(out.file("track.wav"), j.tracks[0]); err != nil {
			return nil, nil, errors.Join(err, files.close())
		}
	}
	meters := residue.NewMeters(n.Chain.Converter.Rate)
	bar := newBar(s, j.label, int64(tracks.seconds()*n.Chain.Converter.Rate))
	result, err := render.Run(ctx, n, tracks.feeds, render.Options{Seed: f.seed, Noise: budget, Progress: bar.to}, func(b *render.Block) error {
		meters.Write(b)
		return files.write(b)
	})
	bar.end(err == nil)
	if err := errors.Join(err, files.close()); err != nil {
		return nil, nil, err
	}
	return result, meters.Result(), nil
}

// demo tells whether the job's track is the demo's.
func (j job) demo() bool { return len(j.tracks) > 0 && j.tracks[0].demo }

// writeTrack writes a track of one channel as 16-bit WAV.
func writeTrack(path string, r recording) error {
	t, err := r.open()
	if err != nil {
		return err
	}
	file, err := os.Create(path)
	if err != nil {
		return err
	}
	return errors.Join(copyTrack(file, t, 16), file.Close())
}

// copyTrack writes a track as integer WAV.
func copyTrack(file io.WriteSeeker, t signals.Track, bits int) error {
	w := wav.NewIntegerWriter(file, t.Rate(), t.Channels(), bits)
	block, codes := make([]float64, 4096*t.Channels()), []int32(nil)
	for {
		n, err := t.ReadFrames(block)
		codes = codes[:0]
		for _, x := range block[:n*t.Channels()] {
			codes = append(codes, int32(math.RoundToEven(x*math.Exp2(float64(bits-1)))))
		}
		if werr := w.Write(codes); werr != nil {
			return werr
		}
		if errors.Is(err, io.EOF) {
			return w.Close()
		}
		if err != nil {
			return err
		}
	}
}

// soundFiles are the WAV files of a run: heard, and each layer.
type soundFiles struct {
	files  []*os.File
	heard  *wav.IntegerWriter
	layers [render.LayerCount]*wav.FloatWriter
	middle int32
	shift  int
	codes  []int32
}

// newSoundFiles creates the files. heard holds the converter's codes less their middle, shifted to the top of 16 bits
// or, for converters of more, of 24.
func newSoundFiles(out *folder, rate float64, bits int) (*soundFiles, error) {
	container := 16
	if bits > 16 {
		container = 24
	}
	s := &soundFiles{middle: 1 << (bits - 1), shift: container - bits}
	create := func(name string) (*os.File, error) {
		f, err := os.Create(out.file(name + ".wav"))
		if err == nil {
			s.files = append(s.files, f)
		}
		return f, err
	}
	f, err := create("heard")
	if err != nil {
		return nil, err
	}
	s.heard = wav.NewIntegerWriter(f, rate, 1, container)
	for i := range s.layers {
		f, err := create(render.Layer(i).String())
		if err != nil {
			return nil, errors.Join(err, s.closeFiles())
		}
		s.layers[i] = wav.NewFloatWriter(f, rate)
	}
	return s, nil
}

func (s *soundFiles) write(b *render.Block) error {
	s.codes = s.codes[:0]
	for _, c := range b.Codes {
		s.codes = append(s.codes, (c-s.middle)<<s.shift)
	}
	err := s.heard.Write(s.codes)
	for i, w := range s.layers {
		err = errors.Join(err, w.Write(b.Layers[i]))
	}
	return err
}

func (s *soundFiles) close() error {
	err := s.heard.Close()
	for _, w := range s.layers {
		err = errors.Join(err, w.Close())
	}
	return errors.Join(err, s.closeFiles())
}

func (s *soundFiles) closeFiles() error {
	var err error
	for _, f := range s.files {
		err = errors.Join(err, f.Close())
	}
	return err
}

// bar shows progress on a terminal; elsewhere it is nothing.
type bar struct {
	progress *mpb.Progress
	bar      *mpb.Bar
}

func newBar(s streams, label string, total int64) *bar {
	if !isTerminal(s.err) {
		return &bar{}
	}
	p := mpb.New(mpb.WithOutput(s.err), mpb.WithWidth(40))
	return &bar{p, p.AddBar(total, mpb.PrependDecorators(decor.Name(label+" ")), mpb.AppendDecorators(decor.Percentage(), decor.Name(" "), decor.AverageETA(decor.ET_STYLE_GO)))}
}

func (b *bar) to(done int64) {
	if b.bar != nil {
		b.bar.SetCurrent(done)
	}
}

// end takes the bar away, or completes it.
func (b *bar) end(complete bool) {
	if b.bar == nil {
		return
	}
	if complete {
		b.bar.SetTotal(-1, true)
	} else {
		b.bar.Abort(true)
	}
	b.progress.Wait()
}

// later does work beside what follows; the function that it returns waits for what came of it.
func later[T any](work func() (T, error)) func() (T, error) {
	type outcome struct {
		value T
		err   error
	}
	done := make(chan outcome, 1)
	go func() {
		value, err := work()
		done <- outcome{value, err}
	}()
	return func() (T, error) {
		o := <-done
		return o.value, o.err
	}
}

// known is what a report tells of a chain whatever its track.
type known struct {
	rest     *rest.Rest
	margins  []response.Margin
	answers  []report.Answer
	best     noise.Change
	settling *report.Change
}

func knownOf(n *circuit.Network, budget *noise.Budget) (*known, error) {
	atRest, err := rest.Find(n)
	if err != nil {
		return nil, err
	}
	best := noise.Best(n)
	answers, err := answersOf(n, atRest, budget, best)
	if err != nil {
		return nil, err
	}
	settling, err := settlingChange(n, atRest)
	return &known{atRest, response.Margins(n), answers, best, settling}, err
}

// describe puts a run's results into the form of reports.
func describe(ctx context.Context, n *circuit.Network, j job, tracks *openedTracks, r *render.Result, res *residue.Residue, budget *noise.Budget, wait func() (*known, error)) (*report.Run, error) {
	c := n.Chain
	of := report.Of
	first := tracks.list[0]
	var names []string
	for _, t := range tracks.list {
		names = append(names, t.name)
	}
	run := &report.Run{
		Tool:  report.Tool{Name: "midrail", Version: version()},
		Chain: report.Chain{File: c.File, Title: c.Title},
		Track: report.Track{
			File: strings.Join(names, ", "), RateHz: of(first.Rate()), Channels: first.Channels(), Seconds: of(r.Seconds),
			PeakDBFS: of(level.Peak(first.peak)), RMSDBFS: of(level.DBFS(first.rms())),
		},
		Internal: report.Internal{RateHz: of(r.Plan.Rate), LargestErrorDB: of(r.Plan.LargestError), ToHz: of(r.Plan.To)},
		Overload: overloadOf(r, nil),
		Converter: report.Converter{
			RateHz: of(c.Converter.Rate), Bits: c.Converter.Bits, LowV: of(c.Converter.Low), HighV: of(c.Converter.High),
			Samples: r.Conversions, Saturated: r.Saturated, Rest: of(r.Rest),
			PeakDBFS: of(res.Heard.Peak), RMSDBFS: of(res.Heard.RMS),
		},
		Calibrations: calibrationsOf(c),
		Assumptions:  append(tracks.notes(), assumptions(c, budget)...),
	}
	run.Overload.Events = int(r.EventCount)
	for i := range c.Stages {
		run.Stages = append(run.Stages, stageOf(n, r, i))
	}
	for i, reading := range res.Layers {
		run.Layers = append(run.Layers, layerOf(render.Layer(i).String(), reading, res.BelowWanted(render.Layer(i))))
	}
	for _, e := range r.Events {
		run.Events = append(run.Events, report.Event{Stage: e.Owner, Kind: string(e.Kind), FromS: of(e.From), ToS: of(e.To), OverDB: overOf(e.Over)})
	}
	for _, w := range r.Waveforms {
		run.Waveforms = append(run.Waveforms, report.Waveform{Stage: w.Owner, Kind: string(w.Kind), AtS: of(w.At), OverDB: overOf(w.Over)})
	}
	known, err := wait()
	if err != nil {
		return nil, err
	}
	atRest, margins := known.rest, known.margins
	if run.Changes, err = changesOf(ctx, n, j, r, res, known); err != nil {
		return nil, err
	}
	run.Rest, run.Noise, run.Parts, run.Answers = restOf(c, atRest), noiseOf(n, budget), partsOf(c), known.answers
	run.Margins, run.SupplyPaths = marginsOf(margins), supplyOf(n, r.At)
	for _, l := range residue.Limits(n, r, res, atRest.Settling.OnePercent) {
		run.Limits = append(run.Limits, report.Limit{Name: l.Name, Limit: of(l.Limit), Value: of(l.Value), Holds: l.Holds})
	}
	for _, f := range residue.Findings(n, r, res, margins) {
		run.Findings = append(run.Findings, report.Finding{Severity: string(f.Severity), About: f.About, Text: f.Text})
	}
	return run, nil
}

// overOf returns by how much a limit was passed, where that is known.
func overOf(db float64) report.Number {
	if db == 0 {
		return report.Number{}
	}
	return report.Of(db)
}

// overloadOf gathers the overloads of some owners, or of all for nil. What is only watched is no overload.
func overloadOf(r *render.Result, owners []string) report.Overload {
	o := report.Overload{}
	total := 0.
	var worst render.Event
	for _, x := range r.Overloads {
		if owners != nil && !slices.Contains(owners, x.Owner) || !x.Kind.Limits() {
			continue
		}
		total += x.Seconds
		o.Events += int(x.Events)
		switch x.Kind {
		case render.UpperLimit:
			o.High += int(x.Events)
		case render.LowerLimit:
			o.Low += int(x.Events)
		case render.Slew:
			o.Slew += int(x.Events)
		}
		if o.Worst == nil || x.Worst.Over > worst.Over {
			worst = x.Worst
			o.Worst = &report.Worst{AtS: report.Of(worst.From), Seconds: report.Of(worst.To - worst.From), OverDB: overOf(worst.Over)}
		}
	}
	seconds := r.Overloaded
	if owners != nil {
		seconds = math.Min(total, r.Seconds)
	}
	o.Seconds, o.Fraction = report.Of(seconds), report.Of(seconds/r.Seconds)
	return o
}

func stageOf(n *circuit.Network, r *render.Result, i int) report.Stage {
	s := &n.Chain.Stages[i]
	at := r.Stages[i]
	of := report.Of
	stage := report.Stage{
		Name: s.Name, Kind: s.Kind.Name, RestV: of(at.Rest), LowestV: of(at.Lowest), HighestV: of(at.Highest),
	}
	owners, room := []string{s.Name}, math.NaN()
	for k, a := range n.Amplifiers {
		if a.Stage != i {
			continue
		}
		if a.Out == n.StageNode(i) {
			low, high := a.Reach()
			stage.LimitLowV, stage.LimitHighV = of(low), of(high)
		}
		owners = append(owners, a.Name)
		if left := r.Amplifiers[k].Room(); !(left > room) {
			room = left
		}
	}
	stage.RoomDB, stage.Overload = of(room), overloadOf(r, owners)
	return stage
}

func layerOf(name string, reading level.Reading, below float64) report.Layer {
	l := report.Layer{
		Name: name, RMSDBFS: report.Of(reading.RMS), RMSDBFSA: report.Of(reading.A), Worst125msDBFS: report.Of(reading.Worst),
		BelowWantedDB: report.Of(below),
	}
	for _, t := range reading.Thirds {
		l.Thirds = append(l.Thirds, report.Third{Hz: report.Of(t.Nominal), DBFS: report.Of(t.Level)})
	}
	return l
}

// assumptions returns what a run takes for granted, for the reader to check.
func assumptions(c *chain.Chain, budget *noise.Budget) []string {
	list := []string{
		"parts have their nominal values; tolerances are not in this run",
		"the supply is stiff: amplifiers' currents do not move it",
		fmt.Sprintf("noise is counted from %g Hz to %.3g MHz and at %.0f °C", c.Conditions.NoiseFrom, budget.Highest/1e6, c.Conditions.Temperature-273.15),
		"an amplifier outside its common-mode range or beyond its output current is told of, but goes on amplifying here",
	}
	seen := map[string]bool{}
	for _, a := range c.Amplifiers {
		if class := a.Model.Class; class != "ideal" && !seen[class] {
			seen[class] = true
			list = append(list, fmt.Sprintf("amplifier class %q: typical figures from memory where the chain file gives none; check the datasheet's worst case", class))
		}
	}
	for i := range c.Inputs {
		if in := &c.Inputs[i]; in.Calibrate != nil {
			list = append(list, "calibrated: "+calibrationWords(in))
		}
	}
	for i := range c.Inputs {
		if c.Inputs[i].Kind == chain.Line {
			list = append(list, "equipment on the mains: isolation and earthing of line feeds are for a licensed person and the local code")
			break
		}
	}
	return append(list, "playing residue files loud can hurt ears: start low")
}
