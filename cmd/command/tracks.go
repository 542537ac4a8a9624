package command

import (
	"errors"
	"fmt"
	"os"

	"github.com/spf13/cobra"

	"midrail/signals"
	"midrail/signals/tone"
)

func newTracks(s streams) *cobra.Command {
	var rate, seconds, level, from, to, on float64
	var seed uint64
	cmd := &cobra.Command{
		Use:   "tracks KIND FILE",
		Short: "Make a test recording",
		Long: `tracks writes a test recording as 24-bit WAV of one channel. KIND is

  tone      a sine at --from
  sweep     a sine from --from to --to, by the same ratio in the same time
  burst     a sine at --from, --on seconds loud, as long 20 dB softer
  white     white noise
  pink      pink noise, 3 dB less an octave from 10 Hz on
  silence   nothing
  demo      the demo's track: a beehive's brood box

--level is in dBFS: 0 is a sine whose peaks just reach full scale; for noise it is the RMS of such a sine. Noise
has peaks far above its RMS: keep it at -15 or below. It does not overwrite a file.`,
		Example: `  midrail tracks sweep sweep.wav --from 20 --to 20000 --level -6
  midrail tracks demo brood.wav`,
		Args: exactly(2),
		RunE: func(_ *cobra.Command, args []string) error {
			if !(rate >= 4000 && rate <= 768000) || !(seconds > 0 && seconds <= 86400) || !(level <= 0 && level >= -200) {
				return usageError{errors.New("want a rate of 4000 to 768000 Hz, up to 86400 seconds, a level of 0 to -200 dBFS")}
			}
			if !(from > 0 && from < rate/2) || args[0] == "sweep" && !(to > 0 && to < rate/2) || !(on > 0) {
				return usageError{fmt.Errorf("frequencies must lie between 0 and half the rate, %g Hz, and --on above 0", rate/2)}
			}
			var t signals.Track
			switch args[0] {
			case "tone":
				t = tone.Sine(rate, seconds, from, level)
			case "sweep":
				t = tone.Sweep(rate, seconds, from, to, level)
			case "burst":
				t = tone.Burst(rate, seconds, from, level, on)
			case "white":
				t = tone.White(rate, seconds, level, seed)
			case "pink":
				t = tone.Pink(rate, seconds, level, seed)
			case "silence":
				t = tone.Silence(rate, seconds)
			case "demo":
				t = tone.Demo()
			default:
				return usageError{fmt.Errorf("there is no track kind %q: tone, sweep, burst, white, pink, silence, demo", args[0])}
			}
			if err := writeNew(args[1], func(f *os.File) error { return copyTrack(f, t, 24) }); err != nil {
				return err
			}
			fmt.Fprintf(s.out, "wrote %s: %.1f s at %.0f Hz\n", args[1], float64(t.Frames())/t.Rate(), t.Rate())
			return nil
		},
	}
	f := cmd.Flags()
	f.Float64Var(&rate, "rate", 48000, "sample rate in `Hz`")
	f.Float64Var(&seconds, "seconds", 10, "length in `s`")
	f.Float64Var(&level, "level", -20, "level in `dBFS`")
	f.Float64Var(&from, "from", 997, "frequency in `Hz`")
	f.Float64Var(&to, "to", 20000, "frequency that a sweep goes to in `Hz`")
	f.Float64Var(&on, "on", 0.1, "length of a burst in `s`")
	f.Uint64Var(&seed, "seed", 1, "seed of the noise")
	return cmd
}
