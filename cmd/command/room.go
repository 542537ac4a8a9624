package command

import (
	"context"
	"errors"
	"io"
	"math"

	"github.com/spf13/cobra"

	"midrail/chain"
	"midrail/chain/circuit"
	"midrail/chain/quantity"
	"midrail/chain/render"
	"midrail/chain/room"
	"midrail/cmd/report"
	"midrail/signals/level"
)

func newRoom(s streams) *cobra.Command {
	var f chainFlags
	var margin, svg string
	var read reading
	cmd := &cobra.Command{
		Use:   "room CHAIN [TRACK...]",
		Short: "Headroom of each stage on a track, and the gain and the bias that fit",
		Long: `room runs a recording (the demo's, if none is given) through the chain and tells how far each stage is taken and how
far it may go; the level at the input at which it first clips; and the gain and the bias, in preferred values, that leave
a margin. The gain is verified by a full run. Several recordings are taken as one, the second following the first. A sweep of a tone's level tells where THD+N comes to 1 %.`,
		Example: "  midrail room front-end.toml song.wav --margin 3dB",
		Args:    withChain,
		RunE: func(cmd *cobra.Command, args []string) (err error) {
			defer func() { err = errors.Join(err, read.close()) }()
			n, err := s.open(args[0], f.set)
			if err != nil {
				return err
			}
			db, err := valueOf(quantity.Decibels, margin, 0, 60)
			if err != nil {
				return err
			}
			r, err := read.one(cmd.Context(), n.Chain, s.in, args[1:])
			if err != nil {
				return err
			}
			out, err := roomOf(cmd.Context(), n, r, db)
			if err != nil {
				return err
			}
			if svg != "" {
				if err := replaceFile(svg, func(w io.Writer) error { return report.PlotSVG(w, out.plot(), 100) }); err != nil {
					return err
				}
			}
			if f.json {
				return writeJSON(s.out, out)
			}
			return out.print(s.out, n)
		},
	}
	f.add(cmd)
	read.add(cmd, s)
	cmd.Flags().StringVar(&margin, "margin", "3dB", "room that the suggested gain is to leave")
	cmd.Flags().StringVar(&svg, "svg", "", "draw THD+N against the input's level into a `file`")
	return cmd
}

// The room as JSON.
type roomResult struct {
	Track      string          `json:"track"`
	Crest      report.Number   `json:"track_crest_db"` // peak against RMS
	Margin     report.Number   `json:"margin_db"`
	Stages     []roomStage     `json:"stages"`
	Suggestion *roomSuggestion `json:"suggestion"`
	Biases     []roomBias      `json:"biases"`
	Sweep      []roomPoint     `json:"sweep"`
	OnePercent report.Number   `json:"thdn_1_percent_at_db"` // against full scale at the input
}

type roomStage struct {
	Name      string          `json:"name"`
	Lowest    report.Number   `json:"lowest_v"`
	Highest   report.Number   `json:"highest_v"`
	LimitLow  report.Number   `json:"limit_low_v"`
	LimitHigh report.Number   `json:"limit_high_v"`
	Down      report.Number   `json:"room_down_db"`
	Up        report.Number   `json:"room_up_db"`
	Sine      []report.Number `json:"sine_clips_at"`  // RMS at each input: V, or Pa
	Level     []report.Number `json:"track_clips_at"` // full scale at each input: V, or Pa
}

type roomSuggestion struct {
	Stage string        `json:"stage"`
	Part  string        `json:"part"`
	Value report.Number `json:"value_ohm"`
	Room  report.Number `json:"room_db"`
	Fits  bool          `json:"fits"`
}

type roomBias struct {
	Bias   string        `json:"bias"`
	Now    report.Number `json:"now_v"`
	Wanted report.Number `json:"wanted_v"`
	Top    report.Number `json:"top_ohm"`
	Bottom report.Number `json:"bottom_ohm"`
}

type roomPoint struct {
	Level report.Number `json:"level_db"`
	THDN  report.Number `json:"thdn"`
}

func roomOf(ctx context.Context, n *circuit.Network, r recording, margin float64) (*roomResult, error) {
	crest := math.NaN()
	run := func(n *circuit.Network) (*render.Result, error) {
		tracks, err := openTracks(n.Chain, jobOf(n.Chain, r))
		if err != nil {
			return nil, err
		}
		defer tracks.close()
		result, err := render.Run(ctx, n, tracks.feeds, render.Options{}, func(*render.Block) error { return nil })
		if err == nil {
			t := tracks.list[0]
			crest = level.Peak(t.peak) - level.DBFS(t.rms()) + 20*math.Log10(math.Sqrt2)
		}
		return result, err
	}
	result, err := run(n)
	if err != nil {
		return nil, err
	}
	of := report.Of
	out := &roomResult{Track: r.name, Margin: of(margin)}
	for _, s := range room.Of(n, result) {
		one := roomStage{Name: s.Name, Lowest: of(s.Lowest), Highest: of(s.Highest), LimitLow: of(s.LimitLow), LimitHigh: of(s.LimitHigh), Down: of(s.Down), Up: of(s.Up)}
		for i := range s.Sine {
			one.Sine, one.Level = append(one.Sine, of(s.Sine[i])), append(one.Level, of(s.Track[i]))
		}
		out.Stages = append(out.Stages, one)
	}
	suggestion, found, err := room.Suggest(n, result, margin, run)
	if err != nil {
		return nil, err
	}
	if found {
		out.Suggestion = &roomSuggestion{suggestion.Stage, suggestion.Part.Name, of(suggestion.Value), of(suggestion.Room), suggestion.Fits}
	}
	for _, c := range room.Centres(n, result) {
		out.Biases = append(out.Biases, roomBias{c.Bias, of(c.Now), of(c.Wanted), of(c.Divider.A), of(c.Divider.B)})
	}
	sweep, err := room.Sweep(ctx, n)
	if err != nil {
		return nil, err
	}
	for _, p := range sweep {
		out.Sweep = append(out.Sweep, roomPoint{of(p.Level), of(p.THDN)})
	}
	out.Crest, out.OnePercent = of(crest), of(room.OnePercent(sweep))
	return out, nil
}

// levelAt prints a level at an input in its own unit.
func levelAt(in *chain.Input, x report.Number) string {
	v, there := x.Value()
	if !there {
		return report.Plain(x, 3)
	}
	if in.Kind != chain.Line {
		return quantity.Format(quantity.SoundLevel, v)
	}
	return quantity.Format(quantity.Level, v)
}

func (r *roomResult) print(w io.Writer, n *circuit.Network) error {
	t := report.NewText(w)
	t.Line("Room on %s, whose peaks are %s above its RMS", r.Track, report.DB(r.Crest))
	t.Line("")
	var rows [][]string
	for _, s := range r.Stages {
		rows = append(rows, []string{s.Name, report.Volts(s.Lowest) + " to " + report.Volts(s.Highest), report.Volts(s.LimitLow) + " to " + report.Volts(s.LimitHigh), report.DB(s.Down), report.DB(s.Up)})
	}
	t.Table([]string{"stage", "asked for", "can reach", "room down", "up"}, rows)
	t.Line("")
	rows = nil
	for _, s := range r.Stages {
		for i := range s.Sine {
			in := &n.Chain.Inputs[i]
			rows = append(rows, []string{s.Name, in.Name, levelAt(in, s.Sine[i]), levelAt(in, s.Level[i])})
		}
	}
	t.Table([]string{"first clips", "at input", "a sine of 1 kHz at", "this track with full scale at"}, rows)
	t.Line("")
	if s := r.Suggestion; s != nil {
		value, _ := s.Value.Value()
		words := "which a full run leaves with " + report.DB(s.Room)
		if !s.Fits {
			words = "which is the best that was found, and does not fit: " + report.DB(s.Room) + " are left"
		}
		t.Words("For %s of room at %s: %s = %s, %s", report.DB(r.Margin), s.Stage, s.Part, quantity.FormatCode(quantity.Resistance, value), words)
	}
	for _, b := range r.Biases {
		top, _ := b.Top.Value()
		bottom, _ := b.Bottom.Value()
		t.Words("Bias %s is at %s; midway between what its stage can reach is %s: top = %s, bottom = %s", b.Bias, report.Volts(b.Now), report.Volts(b.Wanted),
			quantity.FormatCode(quantity.Resistance, top), quantity.FormatCode(quantity.Resistance, bottom))
	}
	if _, there := r.OnePercent.Value(); there {
		t.Words("A tone comes to 1 %% of THD+N at %s of full scale at the input", report.DB(r.OnePercent))
	}
	return t.Err()
}

func (r *roomResult) plot() report.Plot {
	p := report.Plot{Title: "THD+N against the input's level", X: "level, dB of full scale", Y: "THD+N, dB"}
	c := report.PlotCurve{Label: "THD+N"}
	for _, x := range r.Sweep {
		l, _ := x.Level.Value()
		d, there := x.THDN.Value()
		if !there {
			d = math.NaN()
		}
		c.X, c.Y = append(c.X, l), append(c.Y, 20*math.Log10(d))
	}
	p.Curves = []report.PlotCurve{c}
	return p
}
