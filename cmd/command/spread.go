package command

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"sync/atomic"
	"unicode/utf8"

	"github.com/spf13/cobra"

	"midrail/chain"
	"midrail/chain/circuit"
	"midrail/chain/quantity"
	"midrail/chain/render"
	"midrail/chain/response"
	"midrail/chain/spread"
	"midrail/cmd/report"
)

func newSpread(s streams) *cobra.Command {
	var f chainFlags
	var boards int
	var thorough bool
	var seed uint64
	var keep, svg string
	var read reading
	cmd := &cobra.Command{
		Use:   "spread CHAIN [TRACK...]",
		Short: "A production run at the given tolerances: percentiles, yield, governing parts",
		Long: `spread draws a production run whose parts, amplifiers and supply lie within their tolerances ([tolerance] in the
chain file, or tolerance of a part), and tells how corners, gain and droop spread, and with recordings room and fold-back,
of the one that a board serves worst; how many boards hold the chain's limits; which parts govern; and each figure with
every part at its worst end.`,
		Example: "  midrail spread front-end.toml song.wav --boards 2000",
		Args:    withChain,
		RunE: func(cmd *cobra.Command, args []string) (err error) {
			defer func() { err = errors.Join(err, read.close()) }()
			n, err := s.open(args[0], f.set)
			if err != nil {
				return err
			}
			if boards < 2 || boards > 1e6 {
				return usageError{fmt.Errorf("--boards %d: 2 to a million can be drawn", boards)}
			}
			o := spread.Options{Boards: boards, Seed: seed, Thorough: thorough}
			if keep != "" {
				if o.Keep, err = valueOf(quantity.Frequency, keep, 0.1, 1e6); err != nil {
					return err
				}
			}
			list, err := read.recordings(cmd.Context(), n.Chain, s.in, args[1:])
			if err != nil {
				return err
			}
			for i, r := range list {
				if err := listenFor(cmd.Context(), n, r, &o); err != nil {
					return during(err, "running %s, %d of %d, before the boards", r.name, i+1, len(list))
				}
			}
			bar := newBar(s, "boards", int64(boards))
			var done atomic.Int64
			o.Progress = func(d int) { done.Store(int64(d)); bar.to(int64(d)) }
			run, err := spread.Make(cmd.Context(), n, o)
			bar.end(err == nil)
			if err != nil {
				return during(err, "drawing boards, %d of %d being done", done.Load(), boards)
			}
			if svg != "" {
				if err := replaceFile(svg, func(w io.Writer) error { return report.PlotSVG(w, bands(n, o), 100) }); err != nil {
					return err
				}
			}
			if f.json {
				return writeJSON(s.out, spreadJSON(run, seed, list))
			}
			return printSpread(s.out, n.Chain, run, list)
		},
	}
	f.add(cmd)
	read.add(cmd, s)
	cmd.Flags().IntVar(&boards, "boards", 1000, "boards to draw")
	cmd.Flags().Uint64Var(&seed, "seed", 1, "seed of the draw")
	cmd.Flags().StringVar(&keep, "keep", "", "frequency at which droop is told (default: the chain's limit)")
	cmd.Flags().BoolVar(&thorough, "thorough", false, "add settling and noise, which take a hundred times as long")
	cmd.Flags().StringVar(&svg, "svg", "", "draw the band of responses into a `file`")
	return cmd
}

// The production run as JSON.
type spreadResult struct {
	Boards  int            `json:"boards"`
	Seed    uint64         `json:"seed"`
	Yield   report.Number  `json:"yield"`
	Limits  []spreadLimit  `json:"limits"`
	Figures []spreadFigure `json:"figures"`
}

type spreadLimit struct {
	Name  string        `json:"name"`
	Limit report.Number `json:"limit"`
	Yield report.Number `json:"yield"`
}

type spreadFigure struct {
	Name      string        `json:"name"`
	Unit      string        `json:"unit"`
	Track     *string       `json:"track"` // the one that the nominal board serves worst; null: the figure is of none
	Nominal   report.Number `json:"nominal"`
	Lowest    report.Number `json:"lowest"`
	P1        report.Number `json:"p1"`
	P5        report.Number `json:"p5"`
	P50       report.Number `json:"p50"`
	P95       report.Number `json:"p95"`
	P99       report.Number `json:"p99"`
	Highest   report.Number `json:"highest"`
	WorstLow  spreadVertex  `json:"worst_case_low"`
	WorstHigh spreadVertex  `json:"worst_case_high"`
	Governs   []spreadShare `json:"governs"`
}

type spreadVertex struct {
	Figure report.Number `json:"figure"`
	Up     []string      `json:"parts_at_high_end"`
	Down   []string      `json:"parts_at_low_end"`
}

type spreadShare struct {
	Part  string        `json:"part"`
	Share report.Number `json:"share"`
}

// trackOf is the recording that a figure is of; "" for none.
func trackOf(f *spread.Figure, list []recording) string {
	if f.Name != spread.Room && f.Name != spread.Below {
		return ""
	}
	return list[f.Sound].name
}

func spreadJSON(run *spread.Run, seed uint64, list []recording) spreadResult {
	of := report.Of
	out := spreadResult{Boards: run.Boards, Seed: seed, Yield: of(run.Yield)}
	for _, l := range run.Limits {
		out.Limits = append(out.Limits, spreadLimit{l.Name, of(l.Bound), of(l.Yield)})
	}
	for i := range run.Figures {
		f := &run.Figures[i]
		p := func(x float64) report.Number { return of(f.Percentile(x)) }
		one := spreadFigure{f.Name, f.Unit, nil, of(f.Nominal), p(0), p(0.01), p(0.05), p(0.5), p(0.95), p(0.99), p(1), spreadVertex{of(f.WorstLow.Figure), f.WorstLow.Up, f.WorstLow.Down}, spreadVertex{of(f.WorstHigh.Figure), f.WorstHigh.Up, f.WorstHigh.Down}, nil}
		if name := trackOf(f, list); name != "" {
			one.Track = &name
		}
		for _, s := range f.Shares {
			one.Governs = append(one.Governs, spreadShare{s.Part, of(s.Share)})
		}
		out.Figures = append(out.Figures, one)
	}
	return out
}

func printSpread(w io.Writer, c *chain.Chain, run *spread.Run, list []recording) error {
	t := report.NewText(w)
	t.Line("%d boards", run.Boards)
	t.Line("")
	say := func(f *spread.Figure, x float64) string {
		switch f.Unit {
		case "Hz":
			return report.Hz(report.Of(x))
		case "s":
			return report.Seconds(report.Of(x))
		case "dBFS":
			return report.DBFS(report.Of(x))
		}
		return report.DB(report.Of(x))
	}
	const leastShare = 0.01 // that is told
	longest := 0
	var percentiles, ends, governs [][]string
	for i := range run.Figures {
		f := &run.Figures[i]
		longest = max(longest, len(f.Name))
		row := []string{f.Name}
		for _, p := range [...]float64{0.01, 0.05, 0.5, 0.95, 0.99} {
			row = append(row, say(f, f.Percentile(p)))
		}
		percentiles = append(percentiles, row)
		ends = append(ends, []string{f.Name, say(f, f.Nominal), say(f, f.Percentile(0)), say(f, f.Percentile(1)), say(f, f.WorstLow.Figure), say(f, f.WorstHigh.Figure)})
		var parts []string
		for _, s := range f.Shares[:min(3, len(f.Shares))] {
			if s.Share >= leastShare {
				parts = append(parts, fmt.Sprintf("%s %.0f %%", s.Part, 100*s.Share))
			}
		}
		governs = append(governs, append([]string{f.Name}, parts...))
	}
	t.Table([]string{"boards below", "1 %", "5 %", "50 %", "95 %", "99 %"}, percentiles)
	t.Line("")
	t.Table([]string{"", "nominal", "lowest", "highest", "worst case", "to"}, ends)
	if c.Inputs[0].Kind != chain.Line {
		t.Words("Gain is that of a pascal at %s: 0 dB is 1 V/Pa.", c.Inputs[0].Name)
	}
	t.Words("Lowest and highest are of the boards drawn; the worst case is with every part at that end of its tolerance which takes the figure there (--json tells which).")
	t.Line("")
	t.Line("Parts that govern, by their share of the variance:")
	for _, g := range governs {
		line := fmt.Sprintf("  %-*s  ", longest, g[0])
		for i, part := range g[1:] {
			if i > 0 {
				part = ", " + part
			}
			if utf8.RuneCountInString(line+part) <= 80 {
				line += part
			}
		}
		t.Line("%s", line)
	}
	t.Line("")
	if len(list) == 0 {
		t.Line("Give a recording to see room and fold-back.")
	}
	for i := range run.Figures {
		if f := &run.Figures[i]; len(list) > 1 && trackOf(f, list) != "" {
			t.Words("%s is that of the recording which a board serves worst; the nominal one: %s", f.Name, trackOf(f, list))
		}
	}
	if len(run.Limits) > 0 {
		var rows [][]string
		for _, l := range run.Limits {
			rows = append(rows, []string{l.Name, report.Plain(report.Of(l.Bound), 4), report.Percent(report.Of(l.Yield))})
		}
		t.Table([]string{"limit", "", "boards that hold it"}, rows)
		t.Line("")
		t.Line("Yield against all of them: %s", report.Percent(report.Of(run.Yield)))
	}
	return t.Err()
}

// bands draws the response of the nominal chain and, at each frequency, the lowest, the highest and the 5 and 95 % of a
// hundred boards.
func bands(n *circuit.Network, o spread.Options) report.Plot {
	grid := response.Grid(10, math.Max(50e3, 2*n.Chain.Converter.Rate), 20)
	p := report.Plot{Title: "Responses of a production run", X: "frequency, Hz", Y: "gain, dB", Log: true}
	if n.Chain.Inputs[0].Kind != chain.Line {
		p.Y = "gain, dB of 1 V/Pa"
	}
	for _, c := range spread.Bands(n, o, grid) {
		p.Curves = append(p.Curves, report.PlotCurve{Label: c.Name, X: grid, Y: c.Gain})
	}
	return p
}

// listenFor runs a recording through the nominal chain for its room and its fold-back.
func listenFor(ctx context.Context, n *circuit.Network, r recording, o *spread.Options) error {
	result, _, err := runOf(ctx, n, r, func(*render.Block) {})
	if err != nil {
		return err
	}
	sound, err := soundOf(ctx, n, r)
	if err != nil {
		return err
	}
	o.Results, o.Sounds = append(o.Results, result), append(o.Sounds, sound)
	return nil
}
