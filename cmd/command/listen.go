package command

import (
	"errors"
	"io"
	"math"
	"sort"

	"midrail/chain/render"
	"midrail/chain/residue"
	"midrail/cmd/report"
	"midrail/signals"
	"midrail/signals/level"
	"midrail/signals/resample"
	"midrail/signals/wav"
)

const (
	// soundBytes is how much sound a report holds, before it is written in base64: a page stays under 6 MB.
	soundBytes = 3_300_000
	// clearRate is the rate in Hz that the track is halved down to, so long as it stays at or above.
	clearRate = 22050
	// playedRate is the least rate in Hz that browsers play; slower sounds are interpolated.
	playedRate = 3000
	// mostPassages is how many passages of a long track a report holds, where they do not touch.
	mostPassages = 4
	// listenLevel is the A-weighted level in dBFS that sounds are brought to, at the most.
	listenLevel = -20
	// listenPeak is what their peaks may reach, in dB of full scale.
	listenPeak = -1
	// mostGain is by how much a sound is raised for listening, at the most, in dB.
	mostGain = 60
	// fade is how long a passage takes to begin and to end, in s.
	fade = 5e-3
)

// shownRate returns the rate at which a sound of the given rate is shown: its own or that halved or, far below what
// browsers play, doubled some times.
func shownRate(rate float64) float64 {
	for rate >= 2*clearRate {
		rate /= 2
	}
	for rate < playedRate {
		rate *= 2
	}
	return rate
}

// listen puts together what there is to listen to in a report: the track, heard, and every layer that is not silent.
func listen(out *folder, j job, r *render.Result, res *residue.Residue, run *report.Run) (*report.Listen, []report.PlayerSound, error) {
	trackRate, _ := run.Track.RateHz.Value()
	rate, _ := run.Converter.RateHz.Value()
	players := []report.Player{{Name: report.TrackSound}, {Name: report.Heard, File: "heard.wav"}}
	if j.demo() {
		players[0].File = "track.wav"
	}
	for _, l := range run.Layers {
		if _, there := l.RMSDBFS.Value(); there {
			players = append(players, report.Player{Name: l.Name, File: l.Name + ".wav"})
		}
	}
	passages := passagesOf(r, res, soundBytes/2/(shownRate(trackRate)+float64(len(players)-1)*shownRate(rate)))
	l := &report.Listen{}
	for _, p := range passages {
		l.Passages = append(l.Passages, report.Passage{FromS: report.Of(p[0]), ToS: report.Of(p[1])})
	}
	type excerpt struct {
		samples []float64
		rate    float64
	}
	var excerpts []func() (excerpt, error)
	for _, p := range players {
		open := func() (signals.Track, error) { return wav.Open(out.file(p.File)) }
		if p.File == "" {
			open = j.first().open
		}
		excerpts = append(excerpts, later(func() (excerpt, error) {
			x, at, err := cutTrack(open, passages)
			return excerpt{x, at}, err
		}))
	}
	var sounds []report.PlayerSound
	var samples [][]float64
	var failed error
	for i, wait := range excerpts {
		x, err := wait()
		failed = errors.Join(failed, err)
		players[i].RateHz = report.Of(x.rate)
		sounds = append(sounds, report.PlayerSound{Rate: x.rate})
		samples = append(samples, x.samples)
	}
	if failed != nil {
		return nil, nil, failed
	}
	gains := loudness(samples, sounds)
	for i, x := range samples {
		p := &players[i]
		p.Seconds, p.GainDB = report.Of(float64(len(x))/math.Round(sounds[i].Rate)), report.Of(gains[i])
		sounds[i].Codes = codesOf(x, math.Pow(10, gains[i]/20))
		l.Players = append(l.Players, *p)
	}
	return l, sounds, nil
}

// passagesOf chooses the stretches of the track, in s, that a report holds: all of it where it is no longer than most
// seconds; else those around the worst overloads, then around the loudest fold-back and the loudest of what is heard,
// then the beginning.
func passagesOf(r *render.Result, res *residue.Residue, most float64) [][2]float64 {
	if r.Seconds <= most {
		return [][2]float64{{0, r.Seconds}}
	}
	events := append([]render.Event(nil), r.Events...)
	sort.SliceStable(events, func(i, k int) bool { return events[i].Over > events[k].Over })
	var centres []float64
	for _, e := range events {
		if e.Kind.Limits() {
			centres = append(centres, e.From)
		}
	}
	centres = append(centres, res.Layers[render.FoldBack].WorstAt, res.Heard.WorstAt, 0)
	length := most / mostPassages
	var list [][2]float64
	for _, c := range centres {
		from := math.Max(0, math.Min(c-length/2, r.Seconds-length))
		if with, total := joined(append(list, [2]float64{from, from + length})); total <= most*(1+1e-12) {
			list = with
		}
	}
	return list
}

// joined returns stretches in order of time, those that touch as one, and how long they are together.
func joined(list [][2]float64) (merged [][2]float64, total float64) {
	sorted := append([][2]float64(nil), list...)
	sort.Slice(sorted, func(i, k int) bool { return sorted[i][0] < sorted[k][0] })
	for _, p := range sorted {
		if n := len(merged); n > 0 && p[0] <= merged[n-1][1] {
			merged[n-1][1] = math.Max(merged[n-1][1], p[1])
		} else {
			merged = append(merged, p)
		}
	}
	for _, p := range merged {
		total += p[1] - p[0]
	}
	return merged, total
}

// first returns the first of the job's recordings that is fed.
func (j job) first() recording {
	for _, r := range j.tracks {
		if r.open != nil {
			return r
		}
	}
	panic("command: a job without a recording")
}

// cutTrack takes the passages out of a track, all of its channels as one, and returns them at the rate they are shown at.
func cutTrack(open func() (signals.Track, error), passages [][2]float64) ([]float64, float64, error) {
	t, err := open()
	if err != nil {
		return nil, 0, err
	}
	rate := t.Rate()
	x, err := cut(signals.Channels(t, signals.Mix)[0], rate, passages)
	if err := errors.Join(err, t.Close()); err != nil {
		return nil, 0, err
	}
	shown := shownRate(rate)
	if shown > rate {
		slow := signals.Samples(x)
		x, err = signals.ReadAll(resample.New(&slow, rate, shown, resample.PassBand, 0, 0, 0))
		return x, shown, err
	}
	for ; rate > shown; rate /= 2 {
		x = resample.Halve(x)
	}
	return x, rate, nil
}

// cut takes the passages out of a stream, one after another. They end softly, and begin so but at the track's beginning.
func cut(s signals.Stream, rate float64, passages [][2]float64) ([]float64, error) {
	ends := func(p [2]float64) (from, to int) { return int(math.Round(p[0] * rate)), int(math.Round(p[1] * rate)) }
	total := 0
	for _, p := range passages {
		from, to := ends(p)
		total += to - from
	}
	all := make([]float64, 0, total)
	at := 0 // samples read
	between := make([]float64, blockSamples)
	for _, p := range passages {
		from, to := ends(p)
		for at < from {
			n, err := s.Read(between[:min(len(between), from-at)])
			if at += n; err != nil {
				return all, unlessEnd(err)
			}
		}
		begun := len(all)
		all = all[:begun+to-from]
		for k := begun; k < len(all); {
			n, err := s.Read(all[k:min(len(all), k+blockSamples)])
			at, k = at+n, k+n
			if err != nil {
				return all[:k], unlessEnd(err)
			}
		}
		soften(all[begun:], p[0] > 0, rate)
	}
	return all, nil
}

// blockSamples is how many samples are read at once.
const blockSamples = 4096

// unlessEnd returns err but where it is the end of a stream.
func unlessEnd(err error) error {
	if errors.Is(err, io.EOF) {
		return nil
	}
	return err
}

// soften fades a passage out, and in where that is wanted.
func soften(x []float64, in bool, rate float64) {
	n := min(int(fade*rate), len(x)/2)
	for i := range n {
		gain := (float64(i) + 0.5) / float64(n)
		if in {
			x[i] *= gain
		}
		x[len(x)-1-i] *= gain
	}
}

// loudness returns the gains in dB that bring sounds to one A-weighted level, the track and heard, which are the first
// two, to the same; no peak goes beyond listenPeak.
func loudness(samples [][]float64, sounds []report.PlayerSound) []float64 {
	type measured struct{ level, most float64 }
	var readings []func() (level.Reading, error)
	for i, x := range samples {
		readings = append(readings, later(func() (level.Reading, error) {
			m := level.NewMeter(sounds[i].Rate)
			m.Write(x)
			return m.Result(), nil
		}))
	}
	var all []measured
	target := float64(listenLevel)
	for i, wait := range readings {
		r, _ := wait()
		one := measured{r.A, math.Min(listenPeak-r.Peak, mostGain)}
		if math.IsInf(r.A, -1) {
			one = measured{listenLevel, 0} // silence stays as it is
		} else if i < 2 {
			target = math.Min(target, one.level+one.most)
		}
		all = append(all, one)
	}
	var gains []float64
	for _, m := range all {
		gains = append(gains, math.Min(target-m.level, m.most))
	}
	return gains
}

// codesOf returns samples under a gain as 16-bit codes.
func codesOf(x []float64, gain float64) []int16 {
	codes := make([]int16, len(x))
	for i, v := range x {
		codes[i] = int16(math.Round(math.Max(-1, math.Min(1, v*gain)) * math.MaxInt16))
	}
	return codes
}
