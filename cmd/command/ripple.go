package command

import (
	"io"
	"math"
	"math/cmplx"

	"github.com/spf13/cobra"

	"midrail/chain/circuit"
	"midrail/chain/ripple"
	"midrail/cmd/report"
)

func newRipple(s streams) *cobra.Command {
	var f chainFlags
	var frequencies string
	cmd := &cobra.Command{
		Use:   "ripple CHAIN",
		Short: "mV at the converter per mV of supply, by path and frequency",
		Long: `ripple follows what of the supply comes to the converter: through each divider, the capsule's feed, the
amplifiers' supply rejection and a reference that is the supply, each by frequency. The paths sum, with their phases,
to the total.`,
		Example: "  midrail ripple front-end.toml --frequencies 100,1k,10k",
		Args:    exactly(1),
		RunE: func(_ *cobra.Command, args []string) error {
			n, err := s.open(args[0], f.set)
			if err != nil {
				return err
			}
			list, err := parseFrequencies(frequencies)
			if err != nil {
				return usageError{err}
			}
			at, err := n.Rest()
			if err != nil {
				return err
			}
			r := ripple.Find(n, at, list)
			if f.json {
				return writeJSON(s.out, rippleJSON(n, r))
			}
			return printRipple(s.out, r)
		},
	}
	f.add(cmd)
	cmd.Flags().StringVar(&frequencies, "frequencies", rippleFrequencies, "frequencies to tell")
	return cmd
}

// rippleFrequencies are told when none are asked for: the mains, its rectified hum, and the switching of lamps.
const rippleFrequencies = "50,100,300,1k,3k,10k"

// The supply's ways as JSON.
type rippleResult struct {
	Total []rippleGain `json:"total"`
	Paths []ripplePath `json:"paths"`
}

type ripplePath struct {
	Name  string       `json:"name"`
	Gains []rippleGain `json:"gains"`
}

type rippleGain struct {
	Frequency report.Number `json:"frequency_hz"`
	Gain      report.Number `json:"gain_v_per_v"`
	DB        report.Number `json:"gain_db"`
	LSB       report.Number `json:"lsb_per_mv"`
}

func rippleJSON(n *circuit.Network, r *ripple.Ripple) rippleResult {
	gains := func(list []complex128) []rippleGain {
		var all []rippleGain
		for i, g := range list {
			a := cmplx.Abs(g)
			all = append(all, rippleGain{report.Of(r.Frequencies[i]), report.Of(a), report.Of(circuit.Gain(g)), report.Of(a * 1e-3 / lsbOf(n))})
		}
		return all
	}
	out := rippleResult{Total: gains(r.Total)}
	for _, p := range r.Paths {
		out.Paths = append(out.Paths, ripplePath{p.Name, gains(p.Gain)})
	}
	return out
}

func printRipple(w io.Writer, r *ripple.Ripple) error {
	t := report.NewText(w)
	t.Line("µV at the converter for each mV of the supply; 1000 would be all of it")
	t.Line("")
	head := []string{"by way of"}
	for _, f := range r.Frequencies {
		head = append(head, report.Hz(report.Of(f)))
	}
	row := func(name string, gains []complex128) []string {
		cells := []string{name}
		for _, g := range gains {
			cells = append(cells, report.Plain(report.Of(math.Round(cmplx.Abs(g)*1e6)/1e3), 3))
		}
		return cells
	}
	var rows [][]string
	for _, p := range r.Paths {
		rows = append(rows, row(p.Name, p.Gain))
	}
	t.Table(head, append(rows, row("all together", r.Total)))
	t.Line("")
	t.Line("The ways add with their phases, so the total may be less than their sum.")
	return t.Err()
}
