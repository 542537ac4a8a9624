package command

import (
	"context"
	"errors"
	"io"
	"math"
	"slices"
	"strings"

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
		Long: `room runs recordings (the demo's, if none is given) through the chain and tells of each how far each stage is taken and
how far it may go, and the level at the input at which it first clips; and the gain and the bias, in preferred values, that
leave a margin on the recording with the least room. Both are verified by full runs. A sweep of a tone's level tells where
THD+N comes to 1 %.`,
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
			list, err := read.orDemo(cmd.Context(), n.Chain, s.in, args[1:])
			if err != nil {
				return err
			}
			out, err := roomOf(cmd.Context(), n, list, db)
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
	Margin     report.Number   `json:"margin_db"`
	Tracks     []roomTrack     `json:"tracks"`
	Worst      string          `json:"worst_track"` // what the suggestion and the biases are for
	Suggestion *roomSuggestion `json:"suggestion"`
	Biases     []roomBias      `json:"biases"`
	Sweep      []roomPoint     `json:"sweep"`
	OnePercent report.Number   `json:"thdn_1_percent_at_db"` // against full scale at the input
}

type roomTrack struct {
	Name     string        `json:"track"`
	Crest    report.Number `json:"crest_db"` // peak against RMS
	Tightest string        `json:"tightest_stage"`
	Room     report.Number `json:"room_db"` // of that stage
	Stages   []roomStage   `json:"stages"`
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
	Room  report.Number `json:"room_db"` // the least that full runs of all tracks leave
	Fits  bool          `json:"fits"`
}

type roomBias struct {
	Bias   string        `json:"bias"`
	Now    report.Number `json:"now_v"`
	Wanted report.Number `json:"wanted_v"`
	Top    report.Number `json:"top_ohm"`
	Bottom report.Number `json:"bottom_ohm"`
	Room   report.Number `json:"room_db"` // that a full run with it leaves
}

type roomPoint struct {
	Level report.Number `json:"level_db"`
	THDN  report.Number `json:"thdn"`
}

// runOf runs a recording through a chain, nothing being written, and returns the recording's crest factor in dB, too.
func runOf(ctx context.Context, n *circuit.Network, r recording, write func(*render.Block)) (result *render.Result, crest float64, err error) {
	tracks, err := openTracks(n.Chain, jobOf(n.Chain, r))
	if err != nil {
		return nil, 0, err
	}
	defer tracks.close()
	result, err = render.Run(ctx, n, tracks.feeds, render.Options{}, func(b *render.Block) error { write(b); return nil })
	if err != nil {
		return nil, 0, err
	}
	t := tracks.list[0]
	return result, level.Peak(t.peak) - level.DBFS(t.rms()) + 20*math.Log10(math.Sqrt2), nil
}

func roomOf(ctx context.Context, n *circuit.Network, list []recording, margin float64) (*roomResult, error) {
	of := report.Of
	out := &roomResult{Margin: of(margin)}
	crest := 0.
	run := func(n *circuit.Network, r recording) (*room.Heard, error) {
		h := &room.Heard{}
		var err error
		h.Result, crest, err = runOf(ctx, n, r, h.Write)
		return h, err
	}
	results, worst, least := make([]*room.Heard, len(list)), 0, math.Inf(1)
	for i, r := range list {
		h, err := run(n, r)
		if err != nil {
			return nil, during(err, "running %s, %d of %d", r.name, i+1, len(list))
		}
		results[i] = h
		one := roomTrack{Name: r.name, Crest: of(crest), Stages: roomStages(n, h)}
		var left float64
		one.Tightest, _, left = room.Tightest(n, h)
		if one.Room = of(left); left < least {
			worst, least = i, left
		}
		out.Tracks = append(out.Tracks, one)
	}
	// What suits the worst recording mostly suits the others; where it does not, that one is the worst.
	chosen := worst
	for range list {
		s, found, err := room.Suggest(n, results[chosen], margin, func(n *circuit.Network) (*room.Heard, error) { return run(n, list[chosen]) })
		if err != nil {
			return nil, during(err, "looking for a gain for %s", list[chosen].name)
		}
		if !found {
			break
		}
		with, _ := n.With(s.Part.Name, s.Value)
		next := chosen
		for i, r := range list {
			if i == chosen {
				continue
			}
			result, err := run(with, r)
			if err != nil {
				return nil, during(err, "verifying a gain on %s", r.name)
			}
			if _, _, left := room.Tightest(with, result); left < s.Room {
				s.Room, next = left, i
				s.Fits = s.Fits && left >= margin && result.Overloaded == 0
			}
		}
		out.Suggestion = &roomSuggestion{s.Stage, s.Part.Name, of(s.Value), of(s.Room), s.Fits}
		if s.Fits || next == chosen {
			break
		}
		chosen = next
	}
	out.Worst = list[chosen].name
	for _, c := range room.Centres(n, results[chosen]) {
		with := c.Network(n)
		result, err := run(with, list[chosen])
		if err != nil {
			return nil, during(err, "verifying the bias %s", c.Bias)
		}
		_, _, left := room.Tightest(with, result)
		out.Biases = append(out.Biases, roomBias{c.Bias, of(c.Now), of(c.Wanted), of(c.Divider.A), of(c.Divider.B), of(left)})
	}
	sweep, err := room.Sweep(ctx, n)
	if err != nil {
		return nil, during(err, "sweeping a tone's level, the recordings being done")
	}
	for _, p := range sweep {
		out.Sweep = append(out.Sweep, roomPoint{of(p.Level), of(p.THDN)})
	}
	out.OnePercent = of(room.OnePercent(sweep))
	return out, nil
}

func roomStages(n *circuit.Network, r *room.Heard) []roomStage {
	of := report.Of
	var list []roomStage
	for _, s := range room.Of(n, r) {
		one := roomStage{Name: s.Name, Lowest: of(s.Lowest), Highest: of(s.Highest), LimitLow: of(s.LimitLow), LimitHigh: of(s.LimitHigh), Down: of(s.Down), Up: of(s.Up)}
		for i := range s.Sine {
			one.Sine, one.Level = append(one.Sine, of(s.Sine[i])), append(one.Level, of(s.Track[i]))
		}
		list = append(list, one)
	}
	return list
}

// Levels above these are not met: the loudest sine in air, and more than any line carries.
const mostPascals, mostVolts = 1e5, 1e3

// levelAt prints a level at an input in the unit that its owner wrote its full scale in.
func levelAt(in *chain.Input, x report.Number) string {
	v, there := x.Value()
	switch {
	case !there:
		return report.Plain(x, 3)
	case in.Kind != chain.Line && v > mostPascals || v > mostVolts:
		return "never"
	case in.Kind != chain.Line:
		return quantity.Format(quantity.SoundLevel, v)
	}
	decibels := func(reference float64, unit string) string {
		if v == 0 {
			return "none"
		}
		return report.Plain(report.Of(math.Round(200*math.Log10(v/reference))/10), 4) + " " + unit
	}
	switch in.FullScaleUnit {
	case "dBu":
		return decibels(quantity.DBu, "dBu")
	case "dBV":
		return decibels(1, "dBV")
	case "Vp":
		return report.Volts(report.Of(v*math.Sqrt2)) + " peak"
	case "Vpp":
		return report.Volts(report.Of(2*v*math.Sqrt2)) + " pp"
	}
	return quantity.Format(quantity.Level, v)
}

// leftWords prints the room to a side, of which there is none where the amplifier is asked for more from a limit.
func leftWords(x report.Number, beyond bool) string {
	if !x.There() && beyond {
		return "none"
	}
	return report.DB(x)
}

func (r *roomResult) print(w io.Writer, n *circuit.Network) error {
	t := report.NewText(w)
	figure := func(x report.Number) float64 { v, _ := x.Value(); return v }
	for _, track := range r.Tracks {
		t.Line("Room on %s, whose peaks are %s above its RMS", track.Name, report.DB(track.Crest))
		t.Line("")
		var rows [][]string
		for _, s := range track.Stages {
			rows = append(rows, []string{s.Name, report.Volts(s.Lowest) + " to " + report.Volts(s.Highest), report.Volts(s.LimitLow) + " to " + report.Volts(s.LimitHigh),
				leftWords(s.Down, figure(s.Lowest) < figure(s.LimitLow)), leftWords(s.Up, figure(s.Highest) > figure(s.LimitHigh))})
		}
		t.Table([]string{"stage", "asked for", "can reach", "room down", "up"}, rows)
		t.Line("")
		rows = nil
		for _, s := range track.Stages {
			for i := range s.Sine {
				in := &n.Chain.Inputs[i]
				rows = append(rows, []string{s.Name, in.Name, levelAt(in, s.Sine[i]), levelAt(in, s.Level[i])})
			}
		}
		t.Table([]string{"first clips", "at input", "a sine of 1 kHz at", "this track with full scale at"}, rows)
		t.Line("")
	}
	if len(r.Tracks) > 1 {
		var rows [][]string
		for _, track := range r.Tracks {
			rows = append(rows, []string{track.Name, report.DB(track.Crest), track.Tightest, leftWords(track.Room, true)})
		}
		t.Table([]string{"track", "crest", "tightest stage", "room"}, rows)
		t.Line("")
	}
	on := ""
	if len(r.Tracks) > 1 {
		on = " on " + r.Worst
	}
	if s := r.Suggestion; s != nil {
		words := "which leaves " + report.DB(s.Room) + " in a full run"
		if len(r.Tracks) > 1 {
			words = "which leaves " + report.DB(s.Room) + " at least in full runs of them all"
		}
		if !s.Fits {
			words = "which is the best that was found, and does not fit: a full run leaves " + leftWords(s.Room, true)
		}
		t.Words("For %s of room at %s%s: %s = %s, %s", report.DB(r.Margin), s.Stage, on, s.Part, quantity.FormatCode(quantity.Resistance, figure(s.Value)), words)
	} else if i := slices.IndexFunc(r.Tracks, func(t roomTrack) bool { return t.Name == r.Worst }); r.Tracks[i].Tightest != "" {
		t.Words("No one part sets the gain of %s, the tightest stage: a level in front of it has to", r.Tracks[i].Tightest)
	}
	for _, b := range r.Biases {
		t.Words("Bias %s is at %s; midway between what its stage can reach is %s: top = %s, bottom = %s, with which a full run%s leaves %s (now %s)", b.Bias, report.Volts(b.Now), report.Volts(b.Wanted),
			quantity.FormatCode(quantity.Resistance, figure(b.Top)), quantity.FormatCode(quantity.Resistance, figure(b.Bottom)), on, leftWords(b.Room, true), leftWords(r.least(), true))
	}
	if r.OnePercent.There() {
		var at []string
		for i := range n.Chain.Inputs {
			in := &n.Chain.Inputs[i]
			at = append(at, levelAt(in, report.Of(in.FullScale*math.Pow(10, figure(r.OnePercent)/20)))+" at "+in.Name)
		}
		t.Words("A tone comes to 1 %% of THD+N at %s of full scale at the input%s", report.DB(r.OnePercent), ": "+strings.Join(at, ", "))
	} else {
		t.Words("THD+N of a tone does not come up through 1 %% between −60 and +12 dB of full scale at the input")
	}
	return t.Err()
}

// least is the room that the worst track leaves.
func (r *roomResult) least() report.Number {
	i := slices.IndexFunc(r.Tracks, func(t roomTrack) bool { return t.Name == r.Worst })
	return r.Tracks[i].Room
}

func (r *roomResult) plot() report.Plot {
	p := report.Plot{Title: "THD+N against the input's level", X: "level, dB of full scale", Y: "THD+N, dB"}
	c := report.PlotCurve{Label: "tone"}
	one := report.PlotCurve{Label: "1 %"}
	for _, x := range r.Sweep {
		l, _ := x.Level.Value()
		d, there := x.THDN.Value()
		if !there {
			d = math.NaN()
		}
		c.X, c.Y = append(c.X, l), append(c.Y, 20*math.Log10(d))
		one.X, one.Y = append(one.X, l), append(one.Y, -40)
	}
	p.Curves = []report.PlotCurve{c, one}
	return p
}
