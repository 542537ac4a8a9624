package signals_test

import (
	"errors"
	"slices"
	"testing"

	"midrail/signals"
	"midrail/signals/tone"
)

// Tracks that are joined sound as one after the other, whatever the blocks that they are read in.
func TestJoin(t *testing.T) {
	open := func() []signals.Track {
		return []signals.Track{tone.White(8000, 0.51, -20, 1), tone.White(8000, 0.003, -20, 2), tone.White(8000, 0.7, -20, 3)}
	}
	var want []float64
	for _, one := range open() {
		all, err := signals.ReadAll(signals.Channels(one, 1)[0])
		if err != nil {
			t.Fatal(err)
		}
		want = append(want, all...)
	}
	for _, block := range []int{1, 7, 4096, 100000} {
		track, err := signals.Join(open()...)
		if err != nil {
			t.Fatal(err)
		}
		if n := track.Frames(); n != int64(len(want)) {
			t.Errorf("%d frames, want %d", n, len(want))
		}
		var got []float64
		for dst := make([]float64, block); err == nil; {
			var n int
			n, err = track.ReadFrames(dst)
			got = append(got, dst[:n]...)
		}
		if !slices.Equal(got, want) {
			t.Errorf("in blocks of %d: %d frames, not the %d of the tracks", block, len(got), len(want))
		}
	}
	if _, err := signals.Join(tone.White(8000, 1, -20, 1), tone.White(9600, 1, -20, 1)); !errors.Is(err, signals.ErrUnlike) {
		t.Errorf("rates that differ: %v", err)
	}
}
