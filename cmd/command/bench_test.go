package command

import (
	"context"
	"io"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// BenchmarkRun times whole runs, everything written, of 60 s of pink noise: the demo's chain with its gain so low that
// nothing is overloaded, as it is, and far too high; the same without its interferer; and four amplifiers into 48 kHz.
func BenchmarkRun(b *testing.B) {
	dir := b.TempDir()
	track := filepath.Join(dir, "pink.wav")
	if status := Exec(context.Background(), []string{"tracks", "pink", track, "--seconds", "60", "--level", "-30"}, strings.NewReader(""), io.Discard, os.Stderr); status != Done {
		b.Fatal("no track")
	}
	demo := filepath.Join("demo", demoName)
	text, err := os.ReadFile(demo)
	if err != nil {
		b.Fatal(err)
	}
	before, after, _ := strings.Cut(string(text), "[[interferer]]")
	_, after, _ = strings.Cut(after, "[limits]")
	quiet := filepath.Join(dir, "quiet.toml")
	if err := os.WriteFile(quiet, []byte(before+"[limits]"+after), 0o666); err != nil {
		b.Fatal(err)
	}
	for _, c := range []struct {
		name, chain, gain string
	}{
		{"untouched", quiet, "150k"}, {"some overload", quiet, "2M"}, {"much overload", quiet, "10M"}, {"untouched, interferer", demo, "150k"},
	} {
		b.Run(c.name, func(b *testing.B) {
			seconds := 0.
			for b.Loop() {
				status := Exec(context.Background(), []string{"run", c.chain, track, "--set", "capsule amp.r_f=" + c.gain, "--out", filepath.Join(dir, "out")}, strings.NewReader(""), io.Discard, os.Stderr)
				if status != Done && status != Broken {
					b.Fatal("no run")
				}
				seconds += 60
			}
			b.ReportMetric(seconds/b.Elapsed().Seconds(), "xrealtime")
		})
	}
}
