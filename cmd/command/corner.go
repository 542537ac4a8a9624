package command

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"strconv"
	"strings"

	"github.com/spf13/cobra"

	"midrail/chain"
	"midrail/chain/alignment"
	"midrail/chain/circuit"
	"midrail/chain/corner"
	"midrail/chain/parts"
	"midrail/chain/quantity"
	"midrail/chain/render"
	"midrail/chain/residue"
	"midrail/cmd/report"
	"midrail/signals"
)

func newCorner(s streams) *cobra.Command {
	var f chainFlags
	var keep, rates, droop, below, write string
	var read reading
	cmd := &cobra.Command{
		Use:   "corner CHAIN [TRACK...]",
		Short: "Converter rate, filter order and corner, chosen together on a track",
		Long: `corner tries common converter rates with filters of order 1 to 8, three alignments and ten corners in place of the
chain's own anti-alias filter, and tells what each would let fold back of a recording (the demo's, if none is given):
the efficient ones, than which none is better in every respect, and one recommendation with its parts, verified by a
full run. Several recordings are taken as one, the second following the first. --write puts it into a chain file.`,
		Example: "  midrail corner front-end.toml song.wav --keep 3kHz --write better.toml",
		Args:    withChain,
		RunE: func(cmd *cobra.Command, args []string) (err error) {
			defer func() { err = errors.Join(err, read.close()) }()
			n, err := s.open(args[0], f.set)
			if err != nil {
				return err
			}
			var w corner.Wish
			if w.Keep, err = valueOf(quantity.Frequency, keep, 20, 1e6); err != nil {
				return err
			}
			if w.Droop, err = valueOf(quantity.Decibels, droop, 0, 60); err != nil {
				return err
			}
			if w.Below, err = valueOf(quantity.Decibels, below, 0, 160); err != nil {
				return err
			}
			w.Rates = corner.Common()
			if rates != "" {
				if w.Rates, err = parseFrequencies(rates); err != nil {
					return usageError{err}
				}
			}
			r, err := read.one(cmd.Context(), n.Chain, s.in, args[1:])
			if err != nil {
				return err
			}
			text, err := os.ReadFile(args[0])
			if err != nil {
				return err
			}
			out, err := cornerOf(cmd.Context(), n, string(text), r, w)
			if err != nil {
				return err
			}
			if write != "" {
				file := func(o *os.File) error { _, err := o.WriteString(out.File); return err }
				if err := writeNew(write, file); err != nil {
					return err
				}
			}
			if f.json {
				return writeJSON(s.out, out)
			}
			return out.print(s.out, write)
		},
	}
	f.add(cmd)
	read.add(cmd, s)
	cmd.Flags().StringVar(&keep, "keep", "3kHz", "edge of the band that is kept")
	cmd.Flags().StringVar(&rates, "rates", "", "converter rates to try (default: common ones)")
	cmd.Flags().StringVar(&droop, "droop", "1dB", "loss at the band's edge that is allowed")
	cmd.Flags().StringVar(&below, "below", "50dB", "how far fold-back is to lie below the wanted sound")
	cmd.Flags().StringVar(&write, "write", "", "write the recommendation as a chain file")
	return cmd
}

// The choice as JSON.
type cornerResult struct {
	Track     string            `json:"track"`
	Replaces  []string          `json:"replaces"` // stages
	Tried     int               `json:"tried"`
	Efficient []cornerCandidate `json:"efficient"`
	Best      cornerCandidate   `json:"recommendation"`
	Meets     bool              `json:"meets"`
	Proven    bool              `json:"track_proves_it"` // whether the track holds anything above half the recommended rate
	Stages    []string          `json:"stages"`          // of the recommendation, as lines of a chain file
	FullRun   cornerRun         `json:"full_run"`
	File      string            `json:"-"`
}

type cornerCandidate struct {
	Rate       report.Number `json:"rate_hz"`
	Order      int           `json:"order"`
	Alignment  string        `json:"alignment"`
	Corner     report.Number `json:"corner_hz"`
	Droop      report.Number `json:"droop_db"`
	FoldBack   report.Number `json:"fold_back_dbfs"`
	FoldBackA  report.Number `json:"fold_back_dbfs_a"`
	Worst      report.Number `json:"fold_back_worst_125ms_dbfs"`
	Below      report.Number `json:"fold_back_below_wanted_db"`
	WorstTone  report.Number `json:"worst_tone_db"`
	Overshoot  report.Number `json:"overshoot"`
	Amplifiers int           `json:"amplifiers"`
}

type cornerRun struct {
	FoldBack report.Number `json:"fold_back_dbfs"`
	Below    report.Number `json:"fold_back_below_wanted_db"`
	Wanted   report.Number `json:"wanted_dbfs"`
}

func candidateOf(c corner.Candidate) cornerCandidate {
	of := report.Of
	return cornerCandidate{of(c.Rate), c.Order, string(c.Alignment), of(c.Corner), of(c.Droop), of(c.FoldBack), of(c.FoldBackA), of(c.Worst), of(c.Below), of(c.WorstTone), of(c.Overshoot), c.Amplifiers}
}

// soundOf reads a recording as it is in front of the filter.
func soundOf(n *circuit.Network, r recording) (*corner.Sound, error) {
	tracks, err := openTracks(n.Chain, jobOf(n.Chain, r))
	if err != nil {
		return nil, err
	}
	defer tracks.close()
	feeds := make([]signals.Stream, len(tracks.feeds))
	for i := range feeds {
		feeds[i] = tracks.feeds[i].Sound
	}
	return corner.Listen(n, feeds, tracks.list[0].Rate())
}

func cornerOf(ctx context.Context, n *circuit.Network, text string, r recording, w corner.Wish) (*cornerResult, error) {
	sound, err := soundOf(n, r)
	if err != nil {
		return nil, err
	}
	all, err := corner.Candidates(n, sound, w)
	if err != nil {
		return nil, err
	}
	if len(all) == 0 {
		return nil, usageError{fmt.Errorf("no rate holds a band up to %s: a rate is at least twice that", quantity.Format(quantity.Frequency, w.Keep))}
	}
	best, meets := corner.Recommend(all, w)
	out := &cornerResult{Track: r.name, Tried: len(all), Best: candidateOf(best), Meets: meets, Proven: sound.Top > best.Rate/2}
	for _, c := range corner.Efficient(all, w) {
		out.Efficient = append(out.Efficient, candidateOf(c))
	}
	var from string
	out.Replaces, from = corner.Filter(n)
	if out.Stages, err = filterStages(n, best, out.Replaces, from); err != nil {
		return nil, err
	}
	out.File = rewritten(text, out.Replaces, out.Stages, best.Rate)
	c, err := chain.Read(n.Chain.File+" with the recommended filter", []byte(out.File), nil)
	if err != nil {
		return nil, err
	}
	for i := range c.Inputs { // which the filter leaves alone
		c.Inputs[i].FullScale = n.Chain.Inputs[i].FullScale
	}
	out.FullRun, err = fullRun(ctx, circuit.New(c), r)
	return out, err
}

// fullRun renders the recording through the recommended chain.
func fullRun(ctx context.Context, n *circuit.Network, r recording) (cornerRun, error) {
	tracks, err := openTracks(n.Chain, jobOf(n.Chain, r))
	if err != nil {
		return cornerRun{}, err
	}
	defer tracks.close()
	meters := residue.NewMeters(n.Chain.Converter.Rate)
	if _, err := render.Run(ctx, n, tracks.feeds, render.Options{}, func(b *render.Block) error { meters.Write(b); return nil }); err != nil {
		return cornerRun{}, err
	}
	res := meters.Result()
	return cornerRun{report.Of(res.Layers[render.FoldBack].RMS), report.Of(res.BelowWanted(render.FoldBack)), report.Of(res.Layers[render.Wanted].RMS)}, nil
}

// filterStages returns the stages of a candidate, each as the lines of its table. The first is driven by from; the last
// has the name of the filter that is replaced, or "anti-alias".
func filterStages(n *circuit.Network, c corner.Candidate, replaces []string, from string) ([]string, error) {
	name := "anti-alias"
	if len(replaces) > 0 {
		name = replaces[0]
	}
	entry, model := "", math.Inf(1)
	for _, one := range append(replaces, from) {
		if s := n.Chain.StageNamed(one); s != nil && s.Amplifier != "" {
			entry = s.Amplifier
			break
		}
	}
	if entry == "" && len(n.Chain.Amplifiers) > 0 {
		entry = n.Chain.Amplifiers[0].Name
	}
	if a := n.Chain.AmplifierNamed(entry); a != nil {
		model = a.Model.GainBandwidth
	} else if c.Order > 1 {
		return nil, refusal{fmt.Errorf("%s: the chain has no amplifier to build a filter of order %d with; add one, or try --rates that a first-order filter does for", n.Chain.File, c.Order)}
	}
	sections, err := alignment.Sections(c.Alignment, c.Order)
	if err != nil {
		return nil, err
	}
	var stages []string
	for i, section := range sections {
		wish := parts.Wish{Kind: parts.SallenKeyKind, F0: section.F0 * c.Corner, Q: section.Q, GainBandwidth: model}
		if section.Q == 0 {
			wish.Kind = parts.RCKind
		}
		found := parts.Find(wish, 1)
		if len(found) == 0 {
			return nil, refusal{fmt.Errorf("no preferred values make a section of %s with a Q of %.2f", quantity.Format(quantity.Frequency, wish.F0), wish.Q)}
		}
		v := found[0].Values
		own := name
		if i < len(sections)-1 {
			own = fmt.Sprintf("%s %d", name, i+1)
		}
		lines := []string{"[[stage]]", "name = " + strconv.Quote(own), "kind = " + strconv.Quote(string(wish.Kind)), "from = " + strconv.Quote(from)}
		ohm := func(key string, x float64) string {
			return fmt.Sprintf("%s = %q", key, quantity.FormatCode(quantity.Resistance, x))
		}
		farad := func(key string, x float64) string {
			return fmt.Sprintf("%s = %q", key, quantity.FormatCode(quantity.Capacitance, x))
		}
		if wish.Kind == parts.RCKind {
			lines = append(lines, ohm("r", v.R1), farad("c", v.C1))
		} else {
			lines = append(lines, "amplifier = "+strconv.Quote(entry), ohm("r_1", v.R1), ohm("r_2", v.R2), farad("c_1", v.C1), farad("c_2", v.C2))
		}
		stages = append(stages, strings.Join(lines, "\n"))
		from = own
		if wish.Kind == parts.RCKind && i < len(sections)-1 {
			// The next section would load it.
			own += " buffer"
			stages = append(stages, strings.Join([]string{"[[stage]]", "name = " + strconv.Quote(own), `kind = "follower"`, "from = " + strconv.Quote(from), "amplifier = " + strconv.Quote(entry)}, "\n"))
			from = own
		}
	}
	return stages, nil
}

// rewritten returns a chain file's text with the named stages taken out, others put in front of its converter, and the
// converter's rate and source set.
func rewritten(text string, without, stages []string, rate float64) string {
	var out []string
	last := ""
	for _, s := range stages {
		for _, line := range strings.Split(s, "\n") {
			if name, ok := strings.CutPrefix(line, "name = "); ok {
				last = name
			}
		}
	}
	for _, block := range blocks(text) {
		switch header := strings.TrimSpace(block[0]); {
		case strings.HasPrefix(header, "[[stage]]") && named(block, without):
			continue
		case strings.HasPrefix(header, "[converter]"):
			for _, s := range stages {
				out = append(out, strings.Split(s, "\n")...)
				out = append(out, "")
			}
			for _, line := range block {
				switch key, _, _ := strings.Cut(strings.TrimSpace(line), "="); strings.TrimSpace(key) {
				case "rate", "clock", "divide", "from":
					continue
				}
				out = append(out, line)
				if strings.HasPrefix(strings.TrimSpace(line), "[converter]") {
					out = append(out, "from = "+last, "rate = "+strconv.FormatFloat(rate, 'f', -1, 64))
				}
			}
			continue
		}
		out = append(out, block...)
	}
	return strings.Join(out, "\n")
}

// blocks parts a text before each table, the tables within a stage staying with it.
func blocks(text string) [][]string {
	list := [][]string{nil}
	for _, line := range strings.Split(text, "\n") {
		head := strings.TrimSpace(line)
		if strings.HasPrefix(head, "[") && !strings.HasPrefix(head, "[[stage.") && len(list[len(list)-1]) > 0 {
			list = append(list, nil)
		}
		list[len(list)-1] = append(list[len(list)-1], line)
	}
	return list
}

// named tells whether a stage's block is of one of the names.
func named(block, names []string) bool {
	for _, line := range block {
		key, value, ok := strings.Cut(line, "=")
		if !ok || strings.TrimSpace(key) != "name" {
			continue
		}
		for _, n := range names {
			if strings.HasPrefix(strings.TrimSpace(value), strconv.Quote(n)) {
				return true
			}
		}
	}
	return false
}

func (r *cornerResult) print(w io.Writer, written string) error {
	t := report.NewText(w)
	t.Words("%d candidates on %s; those than which none is better in rate, amplifiers, droop and fold-back:", r.Tried, r.Track)
	t.Line("")
	var rows [][]string
	row := func(c cornerCandidate) []string {
		return []string{report.Hz(c.Rate), fmt.Sprintf("%d %s", c.Order, c.Alignment), report.Hz(c.Corner), report.DB(c.Droop), report.DB(c.Below), report.DB(c.WorstTone), fmt.Sprint(c.Amplifiers)}
	}
	const most = 14
	step := max(1, (len(r.Efficient)+most-1)/most)
	for i, c := range r.Efficient {
		if i%step == 0 {
			rows = append(rows, row(c))
		}
	}
	t.Table([]string{"rate", "order", "corner", "droop", "below wanted", "worst tone", "amps"}, rows)
	if step > 1 {
		t.Line("one in %d of %d is shown; --json tells all", step, len(r.Efficient))
	}
	t.Line("")
	verdict := "does all that is asked with the fewest amplifiers and the lowest rate"
	if !r.Meets {
		verdict = "is the best there is; none does all that is asked. A higher rate, with a digital filter behind it, may be cheaper than a higher order"
	}
	b := r.Best
	t.Words("Recommended: %s, order %d %s at %s, which %s: it droops by %s, and fold-back lies %s below the wanted sound (%s; worst eighth of a second %s)",
		report.Hz(b.Rate), b.Order, b.Alignment, report.Hz(b.Corner), verdict, report.DB(b.Droop), report.DB(b.Below), report.DBFS(b.FoldBack), report.DBFS(b.Worst))
	t.Words("A full run of that chain, with its preferred values, gives %s below wanted (%s)", report.DB(r.FullRun.Below), report.DBFS(r.FullRun.FoldBack))
	if !r.Proven {
		t.Words("The track cannot prove it: it holds nothing above half its own rate")
	}
	t.Line("")
	for _, s := range r.Stages {
		for _, line := range strings.Split(s, "\n") {
			t.Line("%s", line)
		}
		t.Line("")
	}
	if written != "" {
		t.Line("written to %s", written)
	}
	return t.Err()
}
