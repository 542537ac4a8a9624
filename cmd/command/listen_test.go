package command

import (
	"math"
	"reflect"
	"testing"

	"midrail/chain/render"
	"midrail/chain/residue"
	"midrail/cmd/report"
	"midrail/signals"
	"midrail/signals/level"
	"midrail/signals/tone"
)

// The passages are in order, apart, within the track and no longer together than asked for; the worst overload is in them.
func TestPassages(t *testing.T) {
	r := &render.Result{Seconds: 1200}
	for i := range 100 {
		r.Events = append(r.Events, render.Event{Kind: render.UpperLimit, From: 12 * float64(i), Over: float64(i * 37 % 100)})
	}
	r.Events = append(r.Events, render.Event{Kind: render.CommonMode, From: 5, Over: 1000}) // no sound of its own
	for _, most := range []float64{2, 3, 7.5, 20, 1199, 1200, 5000} {
		list := passagesOf(r, &residue.Residue{}, most)
		total, end := 0., math.Inf(-1)
		worst := false
		for _, p := range list {
			if p[0] <= end || p[1] <= p[0] || p[0] < 0 || p[1] > r.Seconds {
				t.Errorf("%v s: %v", most, list)
			}
			total, end = total+p[1]-p[0], p[1]
			worst = worst || p[0] <= 12*27 && 12*27 < p[1] // 27·37 mod 100 is 99
		}
		if total > most*(1+1e-9) || total < most/2 && most < r.Seconds || !worst {
			t.Errorf("%v s: %v, %v s together", most, list, total)
		}
	}
	res := &residue.Residue{Heard: level.Reading{WorstAt: 1199.9}}
	res.Layers[render.FoldBack].WorstAt = 600
	if got := passagesOf(&render.Result{Seconds: 1200}, res, 8); !reflect.DeepEqual(got, [][2]float64{{0, 2}, {599, 601}, {1198, 1200}}) {
		t.Errorf("without overloads: %v", got)
	}
}

func TestCutTakesThePassages(t *testing.T) {
	x := make(signals.Samples, 20000)
	for i := range x {
		x[i] = float64(i)
	}
	got, err := cut(&x, 1000, [][2]float64{{0, 2}, {8, 9.5}, {19, 20}})
	if err != nil || len(got) != 2000+1500+1000 {
		t.Fatalf("%d samples, %v", len(got), err)
	}
	for at, want := range map[int]float64{0: 0, 1000: 1000, 2700: 8700, 4000: 19500, 4490: 19990} {
		if got[at] != want {
			t.Errorf("sample %d is %v, want %v", at, got[at], want)
		}
	}
	for _, at := range []int{1999, 2000, 3499, 3500, 4499} { // passages end and begin softly
		if v := got[at]; v > 3000 { // the first step of a fade is a tenth
			t.Errorf("sample %d is %v", at, v)
		}
	}
}

// matchTolerance is how far apart, in dB, two sounds that are to be as loud may be: nothing but rounding.
const matchTolerance = 1e-6

// Track and heard come to one A-weighted level, nothing beyond the peak, and silence stays as it is.
func TestLoudness(t *testing.T) {
	tone := func(amplitude, f, rate float64) []float64 {
		x := make([]float64, int(rate))
		for i := range x {
			x[i] = amplitude * math.Sin(2*math.Pi*f*float64(i)/rate)
		}
		return x
	}
	click := make([]float64, 8000)
	click[4000] = 0.9
	for _, c := range [][2][]float64{{tone(0.5, 100, 24000), tone(0.01, 1000, 8000)}, {tone(1, 40, 24000), tone(0.3, 2000, 8000)}} {
		samples := [][]float64{c[0], c[1], click, make([]float64, 8000)}
		sounds := []report.PlayerSound{{Rate: 24000}, {Rate: 8000}, {Rate: 8000}, {Rate: 8000}}
		gains := loudness(samples, sounds)
		var levels []float64
		for i, x := range samples {
			m := level.NewMeter(sounds[i].Rate)
			m.Write(x)
			r := m.Result()
			levels = append(levels, r.A+gains[i])
			if !math.IsInf(r.Peak, -1) && !(r.Peak+gains[i] <= listenPeak+matchTolerance) {
				t.Errorf("sound %d peaks at %v dB", i, r.Peak+gains[i])
			}
		}
		if !(math.Abs(levels[0]-levels[1]) <= matchTolerance) || levels[0] > listenLevel+matchTolerance {
			t.Errorf("levels %v and %v", levels[0], levels[1])
		}
		if gains[3] > 0 {
			t.Errorf("silence is raised by %v dB", gains[3])
		}
	}
}

// A sound slower than browsers play is interpolated, and is the same sound.
func TestSlowSoundsAreInterpolated(t *testing.T) {
	const f, rate = 100, 1000
	got, at, err := cutTrack(func() (signals.Track, error) { return tone.Sine(rate, 2, f, -6), nil }, [][2]float64{{0, 2}})
	if err != nil || at != 4*rate || len(got) != 8*rate {
		t.Fatalf("%d samples at %g Hz, %v", len(got), at, err)
	}
	for i := 1000; i < 7000; i++ {
		want := math.Pow(10, -6./20) * math.Sin(2*math.Pi*f*float64(i)/at)
		if d := math.Abs(got[i] - want); !(d <= 1e-5) {
			t.Fatalf("sample %d is %g, want %g", i, got[i], want)
		}
	}
}
