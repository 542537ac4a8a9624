package command

import (
	"context"
	"math"
	"strings"
	"testing"

	"midrail/chain"
	"midrail/chain/circuit"
	"midrail/chain/corner"
	"midrail/chain/render"
	"midrail/chain/residue"
	"midrail/signals"
	"midrail/signals/tone"
)

func BenchmarkCandidates(b *testing.B) {
	c, err := chain.Read("test.toml", demoChain, nil)
	if err != nil {
		b.Fatal(err)
	}
	n, track := circuit.New(c), tone.Demo()
	heard, err := corner.Listen(n, signals.Channels(track, 1), track.Rate())
	if err != nil {
		b.Fatal(err)
	}
	tried := 0
	for b.Loop() {
		all, err := corner.Candidates(n, heard, corner.Wish{Keep: 3000, Rates: corner.Common(), Droop: 1, Below: 50})
		if err != nil {
			b.Fatal(err)
		}
		tried += len(all)
	}
	b.ReportMetric(float64(tried)/b.Elapsed().Seconds(), "candidates/s")
}

// What corner predicts of a filter and a rate, a full run of that chain with preferred values gives within half a dB, for
// rates and orders from both ends, on noise and on the demo's track. Preferred values move a corner by up to 2 %, and
// fold-back with it.
func TestPredictedFoldBackIsTheFullRuns(t *testing.T) {
	const within = 0.5 // dB
	parse := func(text string) *circuit.Network {
		c, err := chain.Read("test.toml", []byte(text), nil)
		if err != nil {
			t.Fatalf("%v in\n%s", err, text)
		}
		return circuit.New(c)
	}
	// Without the mower's overloads, which are another layer's business.
	text := strings.Replace(string(demoChain), `"430k"`, `"150k"`, 1)
	n := parse(text)
	w := corner.Wish{Keep: 3000, Rates: corner.Common(), Droop: 3, Below: 40}
	for _, sound := range []struct {
		name  string
		open  func() signals.Track
		check []struct {
			rate  float64
			order int
			by    float64
		}
	}{
		{"white noise", func() signals.Track { return tone.White(48000, 2, -25, 5) }, []struct {
			rate  float64
			order int
			by    float64
		}{{8000, 1, 1}, {8000, 2, 1.2}, {8000, 4, 1}, {9600, 3, 1.5}, {11025, 2, 1.1}, {12000, 4, 1.35}, {16000, 2, 1.5}, {16000, 3, 2}, {22050, 2, 1}, {24000, 1, 1.2}, {32000, 2, 1.7}}},
		{"the demo", func() signals.Track { return tone.Demo() }, []struct {
			rate  float64
			order int
			by    float64
		}{{8000, 3, 1.1}, {12000, 2, 1.2}}},
	} {
		track := sound.open()
		heard, err := corner.Listen(n, signals.Channels(track, 1), track.Rate())
		if err != nil {
			t.Fatal(err)
		}
		all, err := corner.Candidates(n, heard, w)
		if err != nil {
			t.Fatal(err)
		}
		for _, x := range sound.check {
			var c *corner.Candidate
			for i := range all {
				if a := &all[i]; a.Rate == x.rate && a.Order == x.order && a.Alignment == "butterworth" && math.Abs(a.Corner-x.by*w.Keep) < 1 {
					c = a
				}
			}
			if c == nil {
				t.Fatalf("no candidate %+v", x)
			}
			replaces, from := corner.Filter(n)
			stages, err := filterStages(n, *c, replaces, from)
			if err != nil {
				t.Fatal(err)
			}
			with := parse(rewritten(text, replaces, stages, c.Rate))
			meters := residue.NewMeters(c.Rate)
			track := sound.open()
			feeds := []render.Feed{{Sound: signals.Channels(track, 1)[0], Rate: track.Rate()}}
			if _, err := render.Run(context.Background(), with, feeds, render.Options{}, func(b *render.Block) error { meters.Write(b); return nil }); err != nil {
				t.Fatal(err)
			}
			if got := meters.Result().BelowWanted(render.FoldBack); !(math.Abs(got-c.Below) <= within) {
				t.Errorf("%s, %g Hz, order %d at %g Hz: predicted %.2f dB below wanted, full run %.2f dB", sound.name, c.Rate, c.Order, c.Corner, c.Below, got)
			}
		}
	}
}
