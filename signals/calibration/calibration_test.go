package calibration

import (
	"errors"
	"math"
	"strings"
	"testing"

	"midrail/signals"
	"midrail/signals/tone"
)

// sum is a track made of several of one rate, sample by sample.
type sum []signals.Track

func (s sum) Rate() float64 { return s[0].Rate() }
func (s sum) Channels() int { return 1 }
func (s sum) Frames() int64 { return s[0].Frames() }
func (s sum) Close() error  { return nil }

func (s sum) ReadFrames(dst []float64) (int, error) {
	n, err := s[0].ReadFrames(dst)
	more := make([]float64, n)
	for _, t := range s[1:] {
		t.ReadFrames(more)
		for i, x := range more {
			dst[i] += x
		}
	}
	return n, err
}

// shaped is a track whose samples pass through a function of their frame number and value.
type shaped struct {
	signals.Track
	at int
	f  func(frame int, x float64) float64
}

func (s *shaped) ReadFrames(dst []float64) (int, error) {
	n, err := s.Track.ReadFrames(dst)
	for i := range dst[:n] {
		dst[i] = s.f(s.at, dst[i])
		s.at++
	}
	return n, err
}

// What the level and the frequency may be off by. The level is what is asked of a calibration; the frequency is told
// to five digits.
const (
	levelTolerance     = 0.01 // dB
	frequencyTolerance = 1e-5
)

func near(t *testing.T, what string, got Tone, hz, dBFS float64) {
	t.Helper()
	if d := 20*math.Log10(got.Amplitude) - dBFS; !(math.Abs(d) <= levelTolerance) {
		t.Errorf("%s: the level is off by %.4g dB", what, d)
	}
	if !(math.Abs(got.Frequency/hz-1) <= frequencyTolerance) {
		t.Errorf("%s: %.9g Hz, want %.9g Hz", what, got.Frequency, hz)
	}
}

// Tones of known level and frequency are found at any rate, also with DC, and with as much noise or distortion as is let
// pass.
func TestKnownTones(t *testing.T) {
	for _, rate := range []float64{4000, 9615.38, 48000, 768000} {
		for _, hz := range []float64{20, 50.3, 997, 0.449 * rate} {
			for _, level := range []float64{-0.01, -12.34, -59.9} {
				got, err := Find(tone.Sine(rate, 0.6, hz, level), "cal.wav", 1, 0, math.Inf(1))
				if err != nil {
					t.Errorf("%g Hz at %g Hz, %g dBFS: %v", hz, rate, level, err)
					continue
				}
				near(t, "plain", got, hz, level)
				if got.From != 0 || got.To != 0.5 || !(got.Residual < 1e-6) {
					t.Errorf("%g to %g s, residual %g", got.From, got.To, got.Residual)
				}
			}
		}
	}
	const rate = 48000
	for what, more := range map[string]signals.Track{
		"noise":     tone.White(rate, 4, -12-40.2, 7),
		"harmonic":  tone.Sine(rate, 4, 3*1000.1, -12-40.1),
		"hum":       tone.Sine(rate, 4, 50, -12-40.1),
		"DC of 0.3": &shaped{Track: tone.Silence(rate, 4), f: func(int, float64) float64 { return 0.3 }},
	} {
		got, err := Find(sum{tone.Sine(rate, 4, 1000.1, -12), more}, "cal.wav", 1, 0, math.Inf(1))
		if err != nil {
			t.Errorf("%s: %v", what, err)
			continue
		}
		near(t, what, got, 1000.1, -12)
		if what != "DC of 0.3" && !(math.Abs(20*math.Log10(got.Residual)+40.15) <= 0.2) {
			t.Errorf("%s: a residual of %.2f dB", what, 20*math.Log10(got.Residual))
		}
	}
}

// The stretch from one time to another is what counts, and no more than ten seconds of it; the channel is the one named.
func TestStretch(t *testing.T) {
	const rate = 8000
	later := func() signals.Track { // a tone of another frequency, then, from 2 s on, the tone
		return &shaped{Track: tone.Silence(rate, 20), f: func(i int, _ float64) float64 {
			if i < 2*rate {
				return 0.5 * math.Sin(2*math.Pi*300*float64(i)/rate)
			}
			return 0.25 * math.Sin(2*math.Pi*1000*float64(i)/rate)
		}}
	}
	quarter := 20 * math.Log10(0.25)
	got, err := Find(later(), "cal.wav", signals.Mix, 2, 3.1)
	if err != nil || got.From != 2 || got.To != 3 {
		t.Fatalf("%+v, %v", got, err)
	}
	near(t, "from 2 s", got, 1000, quarter)
	if got, err = Find(later(), "cal.wav", 1, 2.5, math.Inf(1)); err != nil || got.To != 12.5 {
		t.Errorf("%+v, %v", got, err)
	}
	if got, err = Find(later(), "cal.wav", 1, 0, 2); err != nil {
		t.Fatal(err)
	}
	near(t, "to 2 s", got, 300, 20*math.Log10(0.5))
}

// What is not a clean tone is a fault that says why, on one line.
func TestUnclean(t *testing.T) {
	const rate = 48000
	sine := func(level float64) signals.Track { return tone.Sine(rate, 2, 997, level) }
	clipped := func(_ int, x float64) float64 { return max(-1, min(1-1./(1<<15), x)) }
	for want, c := range map[string]signals.Track{
		"no tone of -60 dBFS":     sine(-60.1),
		"reaches full scale":      &shaped{Track: sine(1), f: clipped},
		"0.25 s of it":            tone.Sine(rate, 0.2, 997, -12),
		"ends before that":        tone.Sine(rate, 0.001, 997, -12),
		"19 Hz, 20 to":            tone.Sine(rate, 2, 19, -12),
		"22500 Hz, 20 to 21600":   tone.Sine(rate, 2, 22500, -12),
		"all else but DC is":      tone.White(rate, 2, -12, 1),
		"all else but DC is 1.1":  sum{sine(-12), tone.Sine(rate, 2, 3000, -12-39.2)},
		"its level moves by 0.21": &shaped{Track: sine(-12), f: func(i int, x float64) float64 { return x * math.Pow(10, float64(i)/(2*rate)*0.24/20) }},
	} {
		from := 0.
		if want == "ends before that" {
			from = 1
		}
		_, err := Find(c, "cal.wav", 1, from, math.Inf(1))
		if fault, ok := errors.AsType[*signals.FormatError](err); !ok || !strings.Contains(err.Error(), want) || fault.Remedy == "" || !strings.HasPrefix(err.Error(), "cal.wav: calibration from ") || strings.Contains(err.Error(), "\n") {
			t.Errorf("want %q: %v", want, err)
		}
	}
	if _, err := Find(tone.Silence(rate, 2), "cal.wav", 1, 0, math.Inf(1)); err == nil || !strings.Contains(err.Error(), "no tone") {
		t.Errorf("silence: %v", err)
	}
	// Above full scale a file of floating-point samples was not clipped.
	got, err := Find(&shaped{Track: sine(0), f: func(_ int, x float64) float64 { return 2 * x }}, "cal.wav", 1, 0, math.Inf(1))
	if err != nil {
		t.Fatal(err)
	}
	near(t, "beyond full scale", got, 997, 20*math.Log10(2))
}

// An error of the track's own passes.
func TestBrokenTrack(t *testing.T) {
	broken := errors.New("broken")
	for _, from := range []float64{0, 1} {
		if _, err := Find(failing{broken}, "cal.wav", 1, from, math.Inf(1)); !errors.Is(err, broken) {
			t.Errorf("%v", err)
		}
	}
}

type failing struct{ err error }

func (f failing) Rate() float64                         { return 8000 }
func (f failing) Channels() int                         { return 1 }
func (f failing) Frames() int64                         { return -1 }
func (f failing) ReadFrames(dst []float64) (int, error) { return 0, f.err }
func (f failing) Close() error                          { return nil }
