package command

import (
	"context"
	"math"
	"slices"
	"strings"
	"testing"

	"gonum.org/v1/gonum/dsp/fourier"

	"midrail/chain"
	"midrail/chain/alignment"
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
	heard, err := corner.Listen(context.Background(), n, signals.Channels(track, 1), track.Rate())
	if err != nil {
		b.Fatal(err)
	}
	tried := 0
	for b.Loop() {
		all, err := corner.Candidates(context.Background(), n, []*corner.Sound{heard}, corner.Wish{Keep: 3000, Rates: corner.Common(), Droop: 1, Below: 50})
		if err != nil {
			b.Fatal(err)
		}
		tried += len(all)
	}
	b.ReportMetric(float64(tried)/b.Elapsed().Seconds(), "candidates/s")
}

// foldingWithin is how near corner's prediction is to a full run with preferred values, in dB: those move a filter's corner
// by up to 2 %, and fold-back with it.
const foldingWithin = 0.5

// folding is the demo's chain with its gain so low that no recording overloads it, which would be another layer's business.
type folding struct {
	text string
	n    *circuit.Network
}

func newFolding(t *testing.T) *folding {
	f := &folding{text: strings.Replace(string(demoChain), `"430k"`, `"150k"`, 1)}
	f.n = f.parse(t, f.text)
	return f
}

func (f *folding) parse(t *testing.T, text string) *circuit.Network {
	c, err := chain.Read("test.toml", []byte(text), nil)
	if err != nil {
		t.Fatalf("%v in\n%s", err, text)
	}
	return circuit.New(c)
}

func (f *folding) listen(t *testing.T, track signals.Track) *corner.Sound {
	heard, err := corner.Listen(context.Background(), f.n, signals.Channels(track, 1), track.Rate())
	if err != nil {
		t.Fatal(err)
	}
	return heard
}

// with is the chain with a candidate in it.
func (f *folding) with(t *testing.T, c corner.Candidate) *circuit.Network {
	replaces, from := corner.Filter(f.n)
	stages, err := filterStages(f.n, c, replaces, from)
	if err != nil {
		t.Fatal(err)
	}
	return f.parse(t, rewritten(f.text, replaces, stages, c.Rate))
}

// foldingCase is a candidate: a rate in Hz, a Butterworth order, and a corner in multiples of 3 kHz.
type foldingCase struct {
	rate  float64
	order int
	by    float64
}

// foldingCases are candidates of different rates and orders from both ends.
var foldingCases = []foldingCase{
	{8000, 3, 1.1}, {12000, 2, 1.2}, {16000, 2, 1.5}, // the demo's are held to these in every test
	{8000, 1, 1}, {8000, 2, 1.2}, {8000, 4, 1}, {9600, 3, 1.5}, {11025, 2, 1.1}, {12000, 4, 1.35}, {16000, 3, 2}, {22050, 2, 1}, {24000, 1, 1.2}, {32000, 2, 1.7},
}

// hold holds corner's predictions on a track against full runs.
func (f *folding) hold(t *testing.T, name string, open func() signals.Track, cases []foldingCase) {
	w := corner.Wish{Keep: 3000, Rates: corner.Common(), Droop: 3, Below: 40}
	all, err := corner.Candidates(context.Background(), f.n, []*corner.Sound{f.listen(t, open())}, w)
	if err != nil {
		t.Fatal(err)
	}
	for _, x := range cases {
		var c *corner.Candidate
		for i := range all {
			if a := &all[i]; a.Rate == x.rate && a.Order == x.order && a.Alignment == "butterworth" && math.Abs(a.Corner-x.by*w.Keep) < 1 {
				c = a
			}
		}
		if c == nil {
			t.Fatalf("no candidate %+v", x)
		}
		meters := residue.NewMeters(c.Rate)
		track := open()
		feeds := []render.Feed{{Sound: signals.Channels(track, 1)[0], Rate: track.Rate()}}
		if _, err := render.Run(context.Background(), f.with(t, *c), feeds, render.Options{}, func(b *render.Block) error { meters.Write(b); return nil }); err != nil {
			t.Fatal(err)
		}
		got := meters.Result().BelowWanted(render.FoldBack)
		t.Logf("%s, %g Hz, order %d at %g Hz: predicted %.2f dB below wanted, full run %.2f dB", name, c.Rate, c.Order, c.Corner, c.Below, got)
		if !(math.Abs(got-c.Below) <= foldingWithin) {
			t.Errorf("%s, %g Hz, order %d at %g Hz: predicted %.2f dB below wanted, full run %.2f dB", name, c.Rate, c.Order, c.Corner, c.Below, got)
		}
	}
}

func whiteNoise() signals.Track { return tone.White(48000, 1, -25, 5) }

// What corner predicts of a filter and a rate, a full run of that chain with preferred values gives. Among the outside
// checks it is held on more noise, and on the demo's track for every case.
func TestPredictedFoldBackIsTheFullRuns(t *testing.T) {
	f := newFolding(t)
	f.hold(t, "white noise", whiteNoise, foldingCases[:6])
	f.hold(t, "the demo", func() signals.Track { return tone.Demo() }, foldingCases[:1])
}

// A recommended filter of odd order is found again whole, with the follower that keeps its RC from being loaded.
func TestFilterTakesItsBuffer(t *testing.T) {
	f := newFolding(t)
	n := f.with(t, corner.Candidate{Rate: 12000, Order: 3, Alignment: alignment.Butterworth, Corner: 3000})
	if stages, from := corner.Filter(n); !slices.Equal(stages, []string{"filter", "filter 1 buffer", "filter 1"}) || from != "capsule amp" {
		t.Errorf("the filter is %q from %q", stages, from)
	}
}

// Sections of the highest Q that are recommended can be bought.
func TestSteepestFilterHasValues(t *testing.T) {
	f := newFolding(t)
	f.with(t, corner.Candidate{Rate: 12000, Order: alignment.Highest, Alignment: alignment.Chebyshev, Corner: 3300})
}

// What stands below a stage that is taken out stays: it is about the next table.
func TestRewrittenKeepsRemarks(t *testing.T) {
	text := "[[stage]]\nname = 'old'\nr = 1 # ohm\n\n# The converter.\n[converter]\nrate = 8000\nbits = 10"
	got := rewritten(text, []string{"old"}, []string{"[[stage]]\nname = \"new\""}, 16000)
	if want := "\n# The converter.\n[[stage]]\nname = \"new\"\n\n[converter]\nfrom = \"new\"\nrate = 16000\nbits = 10"; got != want {
		t.Errorf("rewritten:\n%s\nwant:\n%s", got, want)
	}
}

// What spread takes for fold-back of the nominal board is the full run's.
func TestFoldBackOfTheNominalBoard(t *testing.T) {
	f := newFolding(t)
	track := whiteNoise()
	meters := residue.NewMeters(f.n.Chain.Converter.Rate)
	if _, err := render.Run(context.Background(), f.n, []render.Feed{{Sound: signals.Channels(track, 1)[0], Rate: track.Rate()}}, render.Options{}, func(b *render.Block) error { meters.Write(b); return nil }); err != nil {
		t.Fatal(err)
	}
	got, want := f.listen(t, whiteNoise()).BelowWith(f.n), meters.Result().BelowWanted(render.FoldBack)
	if !(math.Abs(got-want) <= foldingWithin) {
		t.Errorf("%.2f dB below wanted, full run %.2f dB", got, want)
	}
}

// decimated renders sound through a chain, takes what of it is linear through a candidate's digital filter, keeps every
// By-th sample, and leaves the ends out.
func decimated(t *testing.T, n *circuit.Network, c *corner.Candidate, sound []float64, rate float64) []float64 {
	var x []float64
	stream := signals.Samples(append([]float64(nil), sound...))
	_, err := render.Run(context.Background(), n, []render.Feed{{Sound: &stream, Rate: rate}}, render.Options{}, func(b *render.Block) error {
		for i := range b.Layers[render.Wanted] {
			x = append(x, b.Layers[render.Wanted][i]+b.Layers[render.FoldBack][i])
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	var kept []float64
	for at := 0; at+len(c.Taps) <= len(x); at += c.By {
		y := 0.
		for i, h := range c.Taps {
			y += h * x[at+i]
		}
		kept = append(kept, y)
	}
	return kept
}

// What corner predicts of a faster converter with a digital filter behind it, really converting, filtering and decimating
// gives: what the track's part below half the rate that is handed on comes out as is wanted, the rest fold-back.
func (f *folding) holdOversampled(t *testing.T, name string, track signals.Track, w corner.Wish, handedOn float64) {
	rate := track.Rate()
	whole, err := signals.ReadAll(signals.Channels(track, 1)[0])
	if err != nil {
		t.Fatal(err)
	}
	heard := signals.Samples(append([]float64(nil), whole...))
	sound, err := corner.Listen(context.Background(), f.n, []signals.Stream{&heard}, rate)
	if err != nil {
		t.Fatal(err)
	}
	_, _, over, err := corner.Oversample(context.Background(), f.n, []*corner.Sound{sound}, w, handedOn)
	if err != nil {
		t.Fatal(err)
	}
	if over == nil {
		t.Fatalf("%s at %g Hz: oversampling saves nothing", name, handedOn)
	}
	plan := fourier.NewFFT(len(whole))
	spectrum := plan.Coefficients(nil, whole)
	for k := range spectrum {
		if float64(k)*rate/float64(len(whole)) >= handedOn/2 {
			spectrum[k] = 0
		}
	}
	low := plan.Sequence(nil, spectrum)
	for i := range low {
		low[i] /= float64(len(low))
	}
	with := f.with(t, *over)
	all, wanted := decimated(t, with, over, whole, rate), decimated(t, with, over, low, rate)
	var power, fold float64
	for i := range wanted {
		d := all[i] - wanted[i]
		power, fold = power+wanted[i]*wanted[i], fold+d*d
	}
	got := 10 * math.Log10(power/fold)
	t.Logf("%s handed on at %g Hz: %g Hz, order %d %s at %g Hz, %d taps: predicted %.2f dB below wanted, decimated %.2f dB", name, handedOn, over.Rate, over.Order, over.Alignment, over.Corner, len(over.Taps), over.Below, got)
	if !(math.Abs(got-over.Below) <= foldingWithin) {
		t.Errorf("%s handed on at %g Hz: predicted %.2f dB below wanted, decimated %.2f dB", name, handedOn, over.Below, got)
	}
}

func TestPredictedDecimation(t *testing.T) {
	f := newFolding(t)
	for _, w := range []corner.Wish{
		{Keep: 3000, Rates: []float64{24000}, Droop: 1, Below: 30},
	} {
		f.holdOversampled(t, "white noise", whiteNoise(), w, 8000)
	}
}
