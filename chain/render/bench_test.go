package render

import (
	"context"
	"os"
	"testing"

	"midrail/chain"
	"midrail/chain/circuit"
	"midrail/chain/noise"
	"midrail/signals"
	"midrail/signals/tone"
)

// demoNetwork returns the network of the demo's chain.
func demoNetwork(tb testing.TB, set ...string) *circuit.Network {
	tb.Helper()
	return network(tb, "../../cmd/command/demo/brood-box.toml", set...)
}

func network(tb testing.TB, path string, set ...string) *circuit.Network {
	tb.Helper()
	data, err := os.ReadFile(path)
	if err != nil {
		tb.Fatal(err)
	}
	c, err := chain.Read(path, data, set)
	if err != nil {
		tb.Fatal(err)
	}
	return circuit.New(c)
}

// BenchmarkRun runs the demo's track through the demo's chain: as it is, and with the gain so low that nothing is
// overloaded.
func BenchmarkRun(b *testing.B) {
	for _, c := range []struct {
		name string
		set  []string
	}{{"demo", nil}, {"unclipped", []string{"capsule amp.r_f=150k"}}} {
		b.Run(c.name, func(b *testing.B) {
			n := demoNetwork(b, c.set...)
			budget := noise.At(n)
			seconds := 0.
			for b.Loop() {
				t := tone.Demo()
				feeds := []Feed{{Sound: signals.Channels(t, 1)[0], Rate: t.Rate()}}
				r, err := Run(context.Background(), n, feeds, Options{Noise: budget}, func(*Block) error { return nil })
				if err != nil {
					b.Fatal(err)
				}
				seconds += r.Seconds
			}
			b.ReportMetric(seconds/b.Elapsed().Seconds(), "xrealtime")
		})
	}
}
