package tone

import (
	"math"
	"testing"

	"midrail/signals"
	"midrail/signals/level"
)

func all(t *testing.T, track signals.Track) []float64 {
	t.Helper()
	x, err := signals.ReadAll(signals.Channels(track, 1)[0])
	if err != nil || int64(len(x)) != track.Frames() {
		t.Fatalf("%d of %d samples, %v", len(x), track.Frames(), err)
	}
	return x
}

func measure(t *testing.T, track signals.Track) level.Reading {
	t.Helper()
	m := level.NewMeter(track.Rate())
	m.Write(all(t, track))
	return m.Result()
}

func near(t *testing.T, what string, got, want, within float64) {
	t.Helper()
	if !(math.Abs(got-want) <= within) {
		t.Errorf("%s is %.3f, want %.3f", what, got, want)
	}
}

func TestLevels(t *testing.T) {
	near(t, "sine", measure(t, Sine(48000, 1, 997, -20)).RMS, -20, 1e-3)
	near(t, "sine's peak", measure(t, Sine(48000, 1, 997, -20)).Peak, -20, 1e-2)
	near(t, "sweep", measure(t, Sweep(48000, 4, 20, 20000, -6)).RMS, -6, 0.05)
	// Half the time at the level, half 20 dB less: 10·log10(0.505).
	near(t, "burst", measure(t, Burst(48000, 2, 1000, -10, 0.1)).RMS, -10+10*math.Log10(0.505), 0.01)
	// A second of noise has 48 000 independent values: 0.03 dB for one sigma.
	near(t, "white", measure(t, White(48000, 1, -20, 3)).RMS, -20, 0.15)
	if r := measure(t, Silence(48000, 1)); !math.IsInf(r.RMS, -1) {
		t.Errorf("silence is %g dBFS", r.RMS)
	}
}

// Pink noise has as much in each third octave from 10 Hz on: within the ladder's 0.3 dB and what eight seconds leave to
// chance, 0.5 dB for one sigma in the third at 50 Hz.
func TestPinkIsFlatByThirds(t *testing.T) {
	r := measure(t, Pink(48000, 16, -20, 3))
	near(t, "pink", r.RMS, -20, 1.5) // its lowest octaves swing slowly
	var mean, n float64
	for _, x := range r.Thirds {
		if x.Nominal >= 100 && x.Nominal <= 10000 {
			mean, n = mean+x.Level, n+1
		}
	}
	for _, x := range r.Thirds {
		if x.Nominal >= 100 && x.Nominal <= 10000 {
			near(t, "a third of pink noise", x.Level, mean/n, 1)
		}
	}
}

// A sweep is at √(from·to) halfway.
func TestSweepHalfway(t *testing.T) {
	x := all(t, Sweep(48000, 2, 100, 10000, 0))
	crossings := 0
	for i := 48000 - 2400; i < 48000+2400; i++ {
		if x[i] < 0 && x[i+1] >= 0 {
			crossings++
		}
	}
	near(t, "halfway", float64(crossings)/0.1, 1000, 20)
}

// The demo hums softly, pipes, is loudest where the mower is near, and keeps below full scale; crickets above 4 kHz.
func TestDemoTellsItsStory(t *testing.T) {
	x := all(t, Demo())
	loudness := func(from, to float64) float64 {
		m := level.NewMeter(demoRate)
		m.Write(x[int(from*demoRate):int(to*demoRate)])
		return m.Result().RMS
	}
	hum, pipe, mower := loudness(0, 3), loudness(3.5, 4.5), loudness(11.5, 12.5)
	if !(hum < -25 && pipe > hum+5 && mower > pipe+8) {
		t.Errorf("hum %.1f, queen %.1f, mower %.1f dBFS", hum, pipe, mower)
	}
	m := level.NewMeter(demoRate)
	m.Write(x)
	r := m.Result()
	if !(r.Peak < 0 && r.Peak > -3) {
		t.Errorf("peak %.2f dB", r.Peak)
	}
	above, below := 0., 0.
	for _, third := range r.Thirds {
		if third.Nominal == 5000 {
			above = third.Level
		}
		if third.Nominal == 10000 {
			below = third.Level
		}
	}
	if !(above > below+8) {
		t.Errorf("crickets: %.1f dBFS at 5 kHz, %.1f at 10 kHz", above, below)
	}
}

// What a generator gives does not hang on how it is read.
func TestReadingInPieces(t *testing.T) {
	make1 := map[string]func() signals.Track{
		"demo": Demo, "white": func() signals.Track { return White(8000, 0.5, -20, 1) }, "pink": func() signals.Track { return Pink(8000, 0.5, -20, 1) },
		"sweep": func() signals.Track { return Sweep(8000, 0.5, 100, 1000, 0) }, "burst": func() signals.Track { return Burst(8000, 0.5, 100, 0, 0.05) },
	}
	for name, new := range make1 {
		whole, pieces := make([]float64, 4000), make([]float64, 4000)
		if n, err := new().ReadFrames(whole); n != len(whole) || err != nil {
			t.Fatalf("%s: %d, %v", name, n, err)
		}
		track := new()
		for from, step := 0, 1; from < len(pieces); from, step = from+step, step*3%257+1 {
			to := min(from+step, len(pieces))
			if _, err := track.ReadFrames(pieces[from:to]); err != nil {
				t.Fatalf("%s: %v", name, err)
			}
		}
		for i := range whole {
			if whole[i] != pieces[i] {
				t.Fatalf("%s differs at %d", name, i)
			}
		}
	}
}
