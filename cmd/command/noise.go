package command

import (
	"io"
	"math"

	"github.com/spf13/cobra"

	"midrail/chain/circuit"
	"midrail/chain/noise"
	"midrail/cmd/report"
)

func newNoise(s streams) *cobra.Command {
	var f chainFlags
	var svg string
	cmd := &cobra.Command{
		Use:   "noise CHAIN",
		Short: "The noise budget",
		Long: `noise adds up every noise source to the converter - resistors, amplifiers with their 1/f corners, capsule,
converter - folding included, and tells which weigh most, what that is at the input, how many bits are left, and which
one change helps most, by trying.`,
		Example: "  midrail noise front-end.toml",
		Args:    exactly(1),
		RunE: func(_ *cobra.Command, args []string) error {
			n, err := s.open(args[0], f.set)
			if err != nil {
				return err
			}
			b := noise.At(n)
			r := noiseJSON(n, b, noise.Best(n))
			if svg != "" {
				if err := replaceFile(svg, func(w io.Writer) error { return report.PlotSVG(w, noisePlot(b), 80) }); err != nil {
					return err
				}
			}
			if f.json {
				return writeJSON(s.out, r)
			}
			return r.print(s.out)
		},
	}
	f.add(cmd)
	cmd.Flags().StringVar(&svg, "svg", "", "draw the density, before and after folding, into a `file`")
	return cmd
}

// The noise budget as JSON.
type noiseResult struct {
	Total      noiseTotal    `json:"total"`
	Sources    []noiseSource `json:"sources"`
	Equivalent []equivalent  `json:"equivalent_input"`
	Best       noiseChange   `json:"best_change"`
	From       report.Number `json:"from_hz"`
	To         report.Number `json:"to_hz"`
}

type noiseTotal struct {
	Volts report.Number `json:"v"`
	DBFS  report.Number `json:"dbfs"`
	A     report.Number `json:"dbfs_a"`
	LSB   report.Number `json:"lsb"`
	Bits  report.Number `json:"useful_bits"`
}

type noiseSource struct {
	Name  string        `json:"name"`
	Kind  string        `json:"kind"`
	Volts report.Number `json:"v"`
	Share report.Number `json:"share"` // of the power, 0 to 1
}

type equivalent struct {
	Input string        `json:"input"`
	Value report.Number `json:"value"`
	Unit  string        `json:"unit"`
}

type noiseChange struct {
	Words string        `json:"words"`
	Gain  report.Number `json:"less_db"`
}

func noiseJSON(n *circuit.Network, b *noise.Budget, best noise.Change) noiseResult {
	of, f := report.Of, b.Figures(n)
	r := noiseResult{
		Total: noiseTotal{of(f.Volts), of(f.DBFS), of(f.A), of(f.LSB), of(f.UsefulBits)},
		From:  of(n.Chain.Conditions.NoiseFrom), To: of(b.Highest),
	}
	for _, s := range b.Sources {
		r.Sources = append(r.Sources, noiseSource{s.Name, string(s.Kind), of(math.Sqrt(s.Power)), of(s.Power / b.Power)})
	}
	for _, e := range f.Inputs {
		r.Equivalent = append(r.Equivalent, equivalent{e.Input, of(e.Value), e.Unit})
	}
	r.Best = noiseChange{best.Words, of(best.Gain)}
	return r
}

// mostSources is how many sources are printed.
const mostSources = 12

func (r noiseResult) print(w io.Writer) error {
	t := report.NewText(w)
	t.Line("Noise at the converter, from %s on, folding included", report.Hz(r.From))
	t.Line("")
	t.Pair("total", report.Volts(r.Total.Volts)+" RMS, "+report.Plain(r.Total.LSB, 3)+" LSB")
	t.Pair("", report.DBFS(r.Total.DBFS)+", A-weighted "+report.DBFS(r.Total.A))
	t.Pair("useful bits", report.Plain(r.Total.Bits, 3))
	for _, e := range r.Equivalent {
		t.Pair("as at "+e.Input, report.Plain(e.Value, 3)+" "+e.Unit)
	}
	t.Line("")
	var rows [][]string
	for i, s := range r.Sources {
		if i < mostSources {
			rows = append(rows, []string{s.Name + ", " + s.Kind, report.Volts(s.Volts), report.Percent(s.Share)})
		}
	}
	t.Table([]string{"source", "RMS", "share of the power"}, rows)
	if more := len(r.Sources) - mostSources; more > 0 {
		t.Line("and %d more; --json tells all", more)
	}
	t.Line("")
	t.Words("What helps most of what was tried, one change at a time: %s (%s less)", r.Best.Words, report.DB(r.Best.Gain))
	return t.Err()
}

func noisePlot(b *noise.Budget) report.Plot {
	p := report.Plot{Title: "Noise density at the converter", X: "frequency, Hz", Y: "dBV/√Hz", Log: true}
	db := func(d float64) float64 { return 10 * math.Log10(d) }
	plain := report.PlotCurve{Label: "before folding"}
	for i, f := range b.Frequencies {
		plain.X, plain.Y = append(plain.X, f), append(plain.Y, db(b.Density[i]))
	}
	folded := report.PlotCurve{Label: "folded"}
	for i := 1; i < len(b.Folded); i++ {
		folded.X, folded.Y = append(folded.X, float64(i)*b.Step), append(folded.Y, db(b.Folded[i]))
	}
	p.Curves = []report.PlotCurve{plain, folded}
	return p
}
