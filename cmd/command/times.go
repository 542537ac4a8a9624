package command

import (
	"fmt"
	"io"
	"time"

	"midrail/chain/render"
)

// stopwatch tells where the time of a run went.
type stopwatch struct {
	on    bool
	last  time.Time
	lines []string
	total time.Duration
}

func (w *stopwatch) lap(what string) {
	now := time.Now()
	w.add(what, now.Sub(w.last))
	w.total += now.Sub(w.last)
	w.last = now
}

func (w *stopwatch) add(what string, d time.Duration) {
	w.lines = append(w.lines, fmt.Sprintf("%8.1f ms  %s", float64(d)/1e6, what))
}

// laps adds the parts of rendering, whose whole is one lap.
func (w *stopwatch) laps(t render.Times) {
	w.lap("rendering, of which")
	w.add("  preparing", t.Preparing)
	w.add("  tracks: read, part, interpolate", t.Tracks)
	w.add("  circuit", t.Circuit)
	w.add("  converter, measuring, writing", t.Converter)
}

// tell prints the times, for a run of sound of the given length in s.
func (w *stopwatch) tell(out io.Writer, seconds float64) {
	if !w.on {
		return
	}
	for _, l := range w.lines {
		fmt.Fprintln(out, l)
	}
	fmt.Fprintf(out, "%8.1f ms  in all, %.0f times real time\n", float64(w.total)/1e6, seconds/w.total.Seconds())
}
