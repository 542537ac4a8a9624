package command

import (
	"context"
	"encoding/json"
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"midrail/signals/wav"
)

// BenchmarkRun times whole runs, everything written, of something like speech: tones of a voice's pitch with breath,
// swelling three times a second. Beside the speed it tells which share of the time was overloaded.
func BenchmarkRun(b *testing.B) {
	dir := b.TempDir()
	demo, err := os.ReadFile(filepath.Join("demo", demoName))
	if err != nil {
		b.Fatal(err)
	}
	// The demo's chain with a gain, with its interferer or without.
	listener := func(gain string, interferer bool) string {
		text := strings.Replace(string(demo), `"430k"`, fmt.Sprintf("%q", gain), 1)
		if !interferer {
			before, after, _ := strings.Cut(text, "[[interferer]]")
			_, after, _ = strings.Cut(after, "[limits]")
			text = before + "[limits]" + after
		}
		return text
	}
	for _, c := range []struct {
		name, chain    string
		seconds        float64
		rate, channels int
	}{
		{"untouched", listener("150k", false), 60, 48000, 1},
		{"untouched, interferer", listener("150k", true), 60, 48000, 1},
		{"1 % overload", listener("820k", false), 60, 48000, 1},
		{"10 % overload", listener("2M2", false), 60, 48000, 1},
		{"30 % overload", listener("10M", false), 60, 48000, 1},
		{"96 kHz stereo", listener("150k", false), 60, 96000, 2},
		{"44.1 kHz", listener("150k", false), 60, 44100, 1},
		{"1 s", listener("150k", false), 1, 48000, 1},
		{"10 s", listener("150k", false), 10, 48000, 1},
		{"600 s", listener("150k", false), 600, 48000, 1},
		{"1 amplifier", sections(1, 16000, "1k"), 60, 48000, 1},
		{"2 amplifiers", sections(2, 16000, "1k"), 60, 48000, 1},
		{"4 amplifiers", sections(4, 16000, "1k"), 60, 48000, 1},
		{"8 amplifiers", sections(8, 16000, "1k"), 60, 48000, 1},
		{"4 amplifiers, 1 % overload", sections(4, 16000, "22k"), 60, 48000, 1},
		{"4 amplifiers, 30 % overload", sections(4, 16000, "220k"), 60, 48000, 1},
		{"4 amplifiers into 8 kHz", sections(4, 8000, "1k"), 60, 48000, 1},
		{"4 amplifiers into 48 kHz", sections(4, 48000, "1k"), 60, 48000, 1},
	} {
		b.Run(c.name, func(b *testing.B) {
			chain, track, out := filepath.Join(dir, "chain.toml"), filepath.Join(dir, "voice.wav"), filepath.Join(dir, "out")
			if err := os.WriteFile(chain, []byte(c.chain), 0o666); err != nil {
				b.Fatal(err)
			}
			if err := writeVoice(track, c.rate, c.channels, c.seconds); err != nil {
				b.Fatal(err)
			}
			seconds := 0.
			b.ReportAllocs()
			for b.Loop() {
				status := Exec(context.Background(), []string{"run", chain, track, "--out", out}, strings.NewReader(""), io.Discard, os.Stderr)
				if status != Done && status != Broken {
					b.Fatal("no run")
				}
				seconds += c.seconds
			}
			b.ReportMetric(seconds/b.Elapsed().Seconds(), "xrealtime")
			b.ReportMetric(100*overloaded(b, filepath.Join(out, "report.json")), "%overload")
		})
	}
}

// sections returns a chain of an inverting stage of gain r_f/10 kΩ and Sallen-Key low-passes, of so many amplifiers in all.
func sections(amplifiers int, rate float64, rf string) string {
	text := fmt.Sprintf(`
[supply]
voltage = "5V"
[bias.half]
top = "22k"
bottom = "22k"
bypass = "10u"
[amplifier.one]
class = "bipolar single-supply"
[input.line]
kind = "line"
full_scale = "1Vrms"
[[stage]]
name = "1"
kind = "inverting"
from = "line"
amplifier = "one"
bias = "half"
c_in = "1u"
r_in = "10k"
r_f = %q
c_f = "47p"
`, rf)
	for i := 2; i <= amplifiers; i++ {
		text += fmt.Sprintf(`[[stage]]
name = "%d"
kind = "sallen-key low-pass"
from = "%d"
amplifier = "one"
r_1 = "6k8"
r_2 = "6k8"
c_1 = "3n3"
c_2 = "2n2"
`, i, i-1)
	}
	return text + fmt.Sprintf("[converter]\nfrom = \"%d\"\nrate = %g\nbits = 12\nlow = 0\nhigh = 5\n", amplifiers, rate)
}

// writeVoice writes something like speech, the same in every channel.
func writeVoice(path string, rate, channels int, seconds float64) error {
	f, err := os.Create(path)
	if err != nil {
		return err
	}
	w := wav.NewIntegerWriter(f, float64(rate), channels, 16)
	draw := rand.New(rand.NewPCG(1, 2))
	codes := make([]int32, 0, rate*channels)
	for from := 0; from < int(seconds*float64(rate)); from += rate {
		codes = codes[:0]
		for i := from; i < min(from+rate, int(seconds*float64(rate))); i++ {
			at := float64(i) / float64(rate)
			pitch := 2 * math.Pi * 140 * at
			swell := 0.5 + 0.5*math.Sin(2*math.Pi*3*at)
			v := swell * swell * (0.35*math.Sin(pitch) + 0.2*math.Sin(3*pitch+1) + 0.15*math.Sin(9*pitch+2) + 0.03*draw.NormFloat64())
			for range channels {
				codes = append(codes, int32(math.Round(v*32767)))
			}
		}
		if err := w.Write(codes); err != nil {
			return err
		}
	}
	if err := w.Close(); err != nil {
		return err
	}
	return f.Close()
}

// overloaded returns the share of the time that a report tells was overloaded.
func overloaded(b *testing.B, path string) float64 {
	text, err := os.ReadFile(path)
	if err != nil {
		b.Fatal(err)
	}
	var r struct {
		Overload struct{ Fraction float64 }
	}
	if err := json.Unmarshal(text, &r); err != nil {
		b.Fatal(err)
	}
	return r.Overload.Fraction
}
