package command

import (
	"context"
	"encoding/json"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"midrail/cmd/report"
)

// What a report says would help is done with --set, and helps as it says.
func TestChangesHelpAsTold(t *testing.T) {
	dir := t.TempDir()
	chain := filepath.Join(dir, "chain.toml")
	if err := os.WriteFile(chain, []byte(sections(2, 8000, "120k")+"[limits]\nfold_back_below_wanted = \"60dB\"\ndroop = { at = \"3kHz\", max = \"0.1dB\" }\n"), 0o666); err != nil {
		t.Fatal(err)
	}
	track := filepath.Join(dir, "voice.wav")
	if err := writeVoice(track, 48000, 1, 2); err != nil {
		t.Fatal(err)
	}
	run := func(set string) *report.Run {
		t.Helper()
		out := filepath.Join(dir, "out")
		args := []string{"run", chain, track, "--out", out, "--no-html"}
		if set != "" {
			args = append(args, "--set", set)
		}
		if status := Exec(context.Background(), args, strings.NewReader(""), io.Discard, os.Stderr); status != Done && status != Broken {
			t.Fatalf("%q: status %d", set, status)
		}
		data, err := os.ReadFile(filepath.Join(out, "report.json"))
		if err != nil {
			t.Fatal(err)
		}
		var r report.Run
		if err := json.Unmarshal(data, &r); err != nil {
			t.Fatal(err)
		}
		return &r
	}
	value := func(n report.Number) float64 {
		x, there := n.Value()
		if !there {
			return math.NaN()
		}
		return x
	}
	// The number that a change is about, and how far it may be from what was told: room is that of the loudest frequencies
	// of a few, fold-back comes from the means of the spectrum.
	number := func(r *report.Run, about string) (x, tolerance float64) {
		switch about {
		case report.AboutOverload:
			least := math.Inf(1)
			for _, s := range r.Stages {
				if room := value(s.RoomDB); room < least {
					least = room
				}
			}
			return least, 0.5
		case report.AboutFoldBack:
			for _, l := range r.Layers {
				if l.Name == report.FoldBack {
					return value(l.BelowWantedDB), 1.5
				}
			}
		case report.AboutSettling:
			return value(r.Rest.Settling.ToPercentS), 1e-9
		case report.AboutDroop:
			for _, l := range r.Limits {
				if l.Name == "droop" {
					return value(l.Value), 1e-9
				}
			}
		}
		return math.NaN(), 0
	}
	before := run("")
	told := map[string]bool{}
	for _, c := range before.Changes {
		told[c.About] = true
		if c.Set == "" {
			continue // no one value does it
		}
		was, _ := number(before, c.About)
		if d := math.Abs(was - value(c.Was)); !(d <= 1e-9) {
			t.Errorf("%s is %g, told to be %g", c.About, was, value(c.Was))
		}
		is, tolerance := number(run(c.Set), c.About)
		if !c.Becomes.There() && math.IsNaN(is) {
			continue // nothing folds back
		}
		if d := math.Abs(is - value(c.Becomes)); !(d <= tolerance) {
			t.Errorf("%s: %s makes it %g, told %g", c.About, c.Set, is, value(c.Becomes))
		}
	}
	for _, about := range []string{report.AboutOverload, report.AboutFoldBack, report.AboutNoise, report.AboutSettling, report.AboutDroop} {
		if !told[about] {
			t.Errorf("no change is told for %s: %s", about, fmt.Sprint(before.Changes))
		}
	}
}
