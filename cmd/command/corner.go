package command

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"

	"github.com/spf13/cobra"

	"midrail/chain"
	"midrail/chain/alignment"
	"midrail/chain/circuit"
	"midrail/chain/corner"
	"midrail/chain/parts"
	"midrail/chain/preferred"
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
full run. Of several recordings each candidate is judged on the one that it serves worst. It tells, too, whether converting
faster with a digital low-pass behind the converter would save amplifiers. --write puts the recommendation into a chain file.`,
		Example: "  midrail corner front-end.toml song.wav --keep 3kHz --write better.toml",
		Args:    withChain,
		RunE: func(cmd *cobra.Command, args []string) (err error) {
			defer func() { err = errors.Join(err, read.close()) }()
			n, err := s.open(args[0], f.set)
			if err != nil {
				return err
			}
			if write != "" && filepath.Dir(write) != filepath.Dir(args[0]) && len(calibrationsOf(n.Chain)) > 0 {
				return refusal{fmt.Errorf("%s: an input is calibrated by a recording whose path goes from the chain file's folder; write into that", write)}
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
			if write != "" && len(f.set) > 0 {
				return usageError{errors.New("--write writes what is in the chain file: put the values of --set there first")}
			}
			list, err := read.orDemo(cmd.Context(), n.Chain, s.in, args[1:])
			if err != nil {
				return err
			}
			text, err := os.ReadFile(args[0])
			if err != nil {
				return err
			}
			out, err := cornerOf(cmd.Context(), n, string(text), f.set, list, w)
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
	Tracks       []cornerTrack   `json:"tracks"`
	Replaces     []string        `json:"replaces"` // stages
	Tried        int             `json:"tried"`
	Efficient    []cornerChoice  `json:"efficient"`
	Best         cornerChoice    `json:"recommendation"`
	Meets        bool            `json:"meets"`
	Stages       []string        `json:"stages"` // of the recommendation, as lines of a chain file
	Oversampling *cornerOversamp `json:"oversampling"`
	File         string          `json:"-"`
	Keep         float64         `json:"-"` // Hz
}

// cornerChoice is a candidate; what folds back is that of the track of which it lies the least below the wanted sound.
type cornerChoice struct {
	Rate      report.Number `json:"rate_hz"` // conversions a second
	Order     int           `json:"order"`
	Alignment string        `json:"alignment"`
	Corner    report.Number `json:"corner_hz"`
	Droop     report.Number `json:"droop_db"`
	Track     string        `json:"track"`
	cornerFold
	WorstTone  report.Number `json:"worst_tone_db"`
	Overshoot  report.Number `json:"overshoot"`
	Amplifiers int           `json:"amplifiers"`
}

type cornerFold struct {
	FoldBack  report.Number `json:"fold_back_dbfs"`
	FoldBackA report.Number `json:"fold_back_dbfs_a"`
	Worst     report.Number `json:"fold_back_worst_125ms_dbfs"`
	Below     report.Number `json:"fold_back_below_wanted_db"`
	Proven    bool          `json:"track_proves_it"` // whether the track holds anything where sound comes down into the band that is kept
}

// cornerTrack is what the recommendation does on one track.
type cornerTrack struct {
	Name string        `json:"track"`
	Top  report.Number `json:"holds_up_to_hz"`
	cornerFold
	FullRun cornerRun `json:"full_run"`
}

type cornerRun struct {
	FoldBack report.Number `json:"fold_back_dbfs"`
	Below    report.Number `json:"fold_back_below_wanted_db"`
	Wanted   report.Number `json:"wanted_dbfs"`
}

// cornerOversamp compares a converter at the rate that is handed on with a faster one and a digital low-pass behind it.
type cornerOversamp struct {
	HandedOn report.Number  `json:"handed_on_hz"`
	Fastest  report.Number  `json:"fastest_hz"` // that was tried
	Direct   cornerChoice   `json:"direct"`
	Meets    bool           `json:"direct_meets"`
	Over     *cornerDigital `json:"oversampled"` // null: none saves an amplifier
}

type cornerDigital struct {
	cornerChoice
	By           int           `json:"by"`
	Taps         int           `json:"taps"`
	PassEdge     report.Number `json:"pass_edge_hz"`
	StopEdge     report.Number `json:"stop_edge_hz"`
	Attenuation  report.Number `json:"stop_attenuation_db"`
	MultiplyAdds report.Number `json:"multiply_adds_per_s"`
}

func foldOf(f corner.Fold) cornerFold {
	of := report.Of
	return cornerFold{of(f.FoldBack), of(f.FoldBackA), of(f.Worst), of(f.Below), f.Proven}
}

func choiceOf(c corner.Candidate, list []recording) cornerChoice {
	of := report.Of
	return cornerChoice{of(c.Rate), c.Order, string(c.Alignment), of(c.Corner), of(c.Droop), list[c.Sound].name, foldOf(c.Fold), of(c.WorstTone), of(c.Overshoot), c.Amplifiers}
}

// soundOf reads a recording as it is in front of the filter.
func soundOf(ctx context.Context, n *circuit.Network, r recording) (*corner.Sound, error) {
	tracks, err := openTracks(n.Chain, jobOf(n.Chain, r))
	if err != nil {
		return nil, err
	}
	defer tracks.close()
	feeds := make([]signals.Stream, len(tracks.feeds))
	for i := range feeds {
		feeds[i] = tracks.feeds[i].Sound
	}
	return corner.Listen(ctx, n, feeds, tracks.list[0].Rate())
}

func cornerOf(ctx context.Context, n *circuit.Network, text string, set []string, list []recording, w corner.Wish) (*cornerResult, error) {
	var sounds []*corner.Sound
	for i, r := range list {
		sound, err := soundOf(ctx, n, r)
		if err != nil {
			return nil, during(err, "reading %s, %d of %d", r.name, i+1, len(list))
		}
		sounds = append(sounds, sound)
	}
	all, err := corner.Candidates(ctx, n, sounds, w)
	if err != nil {
		return nil, during(err, "judging candidates, the recordings being read")
	}
	if len(all) == 0 {
		return nil, usageError{fmt.Errorf("no rate holds a band up to %s: a rate is at least twice that", quantity.Format(quantity.Frequency, w.Keep))}
	}
	replaces, from := corner.Filter(n)
	best, meets, stages, err := recommendation(n, all, w, replaces, from)
	if err != nil {
		return nil, err
	}
	out := &cornerResult{Tried: len(all), Best: choiceOf(best, list), Meets: meets, Replaces: replaces, Stages: stages, Keep: w.Keep}
	for _, c := range corner.Efficient(all, w) {
		out.Efficient = append(out.Efficient, choiceOf(c, list))
	}
	if out.Oversampling, err = oversamplingOf(ctx, n, sounds, list, w); err != nil {
		return nil, during(err, "comparing with oversampling, %d candidates being judged", len(all))
	}
	out.File = rewritten(text, out.Replaces, out.Stages, best.Rate)
	c, err := chain.Read(n.Chain.File+" with the recommended filter", []byte(out.File), kept(set, out.Replaces))
	if err != nil {
		return nil, err
	}
	for i := range c.Inputs { // which the filter leaves alone
		c.Inputs[i].FullScale = n.Chain.Inputs[i].FullScale
	}
	with := circuit.New(c)
	for i, r := range list {
		fold, err := best.On(n, sounds[i], w.Keep)
		if err != nil {
			return nil, err
		}
		full, err := fullRun(ctx, with, r)
		if err != nil {
			return nil, during(err, "verifying the recommendation on %s, %d of %d", r.name, i+1, len(list))
		}
		out.Tracks = append(out.Tracks, cornerTrack{r.name, report.Of(sounds[i].Top), foldOf(fold), full})
	}
	return out, nil
}

// recommendation is the best candidate that preferred values make, and its stages.
func recommendation(n *circuit.Network, all []corner.Candidate, w corner.Wish, replaces []string, from string) (corner.Candidate, bool, []string, error) {
	for left := slices.Clone(all); ; {
		best, meets := corner.Recommend(left, w)
		stages, err := filterStages(n, best, replaces, from)
		if !errors.Is(err, errNoValues) {
			return best, meets, stages, err
		}
		same := func(c corner.Candidate) bool {
			return c.Order == best.Order && c.Alignment == best.Alignment && c.Corner == best.Corner
		}
		if left = slices.DeleteFunc(left, same); len(left) == 0 {
			return best, false, nil, refusal{err}
		}
	}
}

// errNoValues says that no preferred values make a filter.
var errNoValues = errors.New("no preferred values make it")

// kept is those of --set that the recommended filter and its converter leave standing.
func kept(set, replaces []string) []string {
	var still []string
	for _, one := range set {
		name, _, _ := strings.Cut(one, "=")
		owner, key, _ := strings.Cut(strings.TrimSpace(name), ".")
		if slices.Contains(replaces, owner) || owner == "converter" && slices.Contains(converterSource, key) {
			continue
		}
		still = append(still, one)
	}
	return still
}

// oversamplingOf compares order with oversampling for the chain's own rate or, where that does not hold the band, for the
// lowest of those that are tried.
func oversamplingOf(ctx context.Context, n *circuit.Network, sounds []*corner.Sound, list []recording, w corner.Wish) (*cornerOversamp, error) {
	handedOn := n.Chain.Converter.Rate
	if handedOn < 2*w.Keep {
		handedOn = math.Inf(1)
		for _, r := range w.Rates {
			if r >= 2*w.Keep {
				handedOn = math.Min(handedOn, r)
			}
		}
	}
	direct, meets, over, err := corner.Oversample(ctx, n, sounds, w, handedOn)
	if err != nil {
		return nil, err
	}
	of := report.Of
	out := &cornerOversamp{HandedOn: of(handedOn), Fastest: of(slices.Max(w.Rates)), Direct: choiceOf(direct, list), Meets: meets}
	if over != nil {
		out.Over = &cornerDigital{choiceOf(*over, list), over.By, len(over.Taps), of(w.Keep), of(handedOn / 2), of(over.Attenuation), of(over.MultiplyAdds(over.Rate))}
	}
	return out, nil
}

// fullRun renders the recording through the recommended chain.
func fullRun(ctx context.Context, n *circuit.Network, r recording) (cornerRun, error) {
	meters := residue.NewMeters(n.Chain.Converter.Rate)
	if _, _, err := runOf(ctx, n, r, meters.Write); err != nil {
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
	resistors, capacitors := preferred.DefaultResistors, preferred.DefaultCapacitors
	for _, one := range replaces {
		for _, p := range n.Chain.StageNamed(one).Parts {
			if p.Unit == chain.Farad {
				capacitors = p.Preferred()
			} else {
				resistors = p.Preferred()
			}
		}
	}
	var stages []string
	for i, section := range sections {
		wish := parts.Wish{Kind: parts.SallenKeyKind, F0: section.F0 * c.Corner, Q: section.Q, GainBandwidth: model, Resistors: resistors, Capacitors: capacitors}
		if section.Q == 0 {
			wish.Kind = parts.RCKind
		}
		found := parts.Find(wish, 1)
		if len(found) == 0 {
			return nil, fmt.Errorf("a section of %s with a Q of %.2f: %w", quantity.Format(quantity.Frequency, wish.F0), wish.Q, errNoValues)
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

// converterSource are the keys that tell a converter's rate and what it converts.
var converterSource = []string{"rate", "clock", "divide", "from"}

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
			out = append(out, remarks(block)...)
			continue
		case strings.HasPrefix(header, "[converter]"):
			for _, s := range stages {
				out = append(out, strings.Split(s, "\n")...)
				out = append(out, "")
			}
			for _, line := range block {
				if key, _, _ := strings.Cut(strings.TrimSpace(line), "="); slices.Contains(converterSource, strings.TrimSpace(key)) {
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

// remarks is what stands below a table's last key: it is about the next table.
func remarks(block []string) []string {
	last := len(block)
	for last > 0 {
		if line := strings.TrimSpace(block[last-1]); line != "" && !strings.HasPrefix(line, "#") {
			break
		}
		last--
	}
	if below := block[last:]; slices.ContainsFunc(below, func(line string) bool { return strings.TrimSpace(line) != "" }) {
		return below
	}
	return nil
}

// named tells whether a stage's block is of one of the names.
func named(block, names []string) bool {
	for _, line := range block {
		key, value, ok := strings.Cut(line, "=")
		if !ok || strings.TrimSpace(key) != "name" {
			continue
		}
		for _, n := range names {
			if v := strings.TrimSpace(value); strings.HasPrefix(v, strconv.Quote(n)) || strings.HasPrefix(v, "'"+n+"'") {
				return true
			}
		}
	}
	return false
}

// tenth prints a figure to a tenth, without its unit.
func tenth(n report.Number) string {
	v, there := n.Value()
	if !there {
		return report.Plain(n, 3)
	}
	return strings.Replace(strconv.FormatFloat(math.Round(10*v)/10+0, 'f', 1, 64), "-", "−", 1)
}

// kilo prints a frequency in kHz.
func kilo(n report.Number) string {
	v, _ := n.Value()
	return report.Plain(report.Of(v/1000), 4)
}

// shortAlignment are the names of alignments in a table.
var shortAlignment = map[string]string{"butterworth": "Bu", "bessel": "Be", "chebyshev": "Ch"}

func (r *cornerResult) print(w io.Writer, written string) error {
	t := report.NewText(w)
	var names []string
	for _, track := range r.Tracks {
		names = append(names, track.Name)
	}
	t.Words("%d candidates on %s. Those than which none is better in rate, amplifiers, droop and fold-back:", r.Tried, strings.Join(names, ", "))
	t.Line("")
	var rows [][]string
	const most = 14
	step := max(1, (len(r.Efficient)+most-1)/most)
	for i, c := range r.Efficient {
		if i%step == 0 {
			over, _ := c.Overshoot.Value()
			rows = append(rows, []string{kilo(c.Rate), fmt.Sprint(c.Order, " ", shortAlignment[c.Alignment]), kilo(c.Corner), fmt.Sprint(c.Amplifiers), tenth(c.Droop), fmt.Sprintf("%.0f", 100*over),
				tenth(c.WorstTone), tenth(c.FoldBack), tenth(c.FoldBackA), tenth(c.Worst), tenth(c.Below)})
		}
	}
	t.Table([]string{"rate", "order", "corner", "amps", "droop", "step", "tone", "fold", "A", "125 ms", "below"}, rows)
	t.Line("")
	t.Words("rate: thousand conversions a second. order: Bu Butterworth, Be Bessel, Ch Chebyshev of 0.5 dB. corner: kHz. amps: amplifiers. droop: dB at %s. step: overshoot, %%. "+
		"tone: the most that comes into the band of a full-scale tone at any frequency, dB. fold, A, 125 ms: fold-back, A-weighted, and of the worst eighth of a second, dBFS. below: fold-back below wanted, dB.", report.Hz(report.Of(r.Keep)))
	if len(r.Tracks) > 1 {
		t.Words("Fold-back is that of the recording which a candidate serves worst.")
	}
	if step > 1 {
		t.Line("One in %d of %d is shown; --json tells all.", step, len(r.Efficient))
	}
	t.Line("")
	verdict := "does all that is asked with the fewest amplifiers and the lowest rate"
	if !r.Meets {
		verdict = "is the best there is; none does all that is asked"
	}
	b := r.Best
	t.Words("Recommended: %s, which %s: it %s, a step overshoots by %s, and a full-scale tone of any frequency leaves %s at most in the band.",
		filterWords(b), verdict, droopWords(b.Droop, r.Keep), report.Percent(b.Overshoot), report.DB(b.WorstTone))
	t.Line("")
	rows = nil
	proven := false
	for _, track := range r.Tracks {
		rows = append(rows, []string{track.Name, tenth(track.Below), tenth(track.FoldBack), tenth(track.FoldBackA), tenth(track.Worst), tenth(track.FullRun.Below), tenth(track.FullRun.FoldBack)})
		proven = proven || track.Proven
	}
	t.Table([]string{"fold-back on", "below", "fold", "A", "125 ms", "full run: below", "fold"}, rows)
	t.Words("The full run is of that chain with its preferred values.")
	if rate, _ := b.Rate.Value(); !proven {
		top := 0.
		for _, track := range r.Tracks {
			hz, _ := track.Top.Value()
			top = math.Max(top, hz)
		}
		t.Words("The track cannot prove it: there is nothing in it above half its own rate, %s, and what would come down into the band lies above %s. The choice went by the worst tone as well.",
			report.Hz(report.Of(top)), report.Hz(report.Of(rate-r.Keep)))
	}
	t.Line("")
	r.Oversampling.print(t, r.Keep)
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

// filterWords tells a candidate in words.
func filterWords(c cornerChoice) string {
	return fmt.Sprintf("%s, %s", report.Hz(c.Rate), c.filter())
}

// filter tells the filter alone.
func (c *cornerChoice) filter() string {
	order := fmt.Sprint("order ", c.Order)
	if c.Order > 1 {
		order += " " + c.Alignment
	}
	return fmt.Sprintf("%s at %s (%s)", order, report.Hz(c.Corner), amplifierWords(c.Amplifiers))
}

func amplifierWords(count int) string {
	switch count {
	case 0:
		return "no amplifier"
	case 1:
		return "1 amplifier"
	}
	return fmt.Sprintf("%d amplifiers", count)
}

func droopWords(droop report.Number, keep float64) string {
	v, _ := droop.Value()
	switch {
	case math.Abs(v) < 0.05:
		return "is flat to " + report.Hz(report.Of(keep))
	case v < 0:
		return fmt.Sprintf("lifts %s by %s", report.Hz(report.Of(keep)), report.DB(report.Of(-v)))
	}
	return fmt.Sprintf("droops by %s at %s", report.DB(droop), report.Hz(report.Of(keep)))
}

func (o *cornerOversamp) print(t *report.Text, keep float64) {
	rate := report.Hz(o.HandedOn)
	direct := fmt.Sprintf("converting at that rate takes %s, with fold-back %s below", o.Direct.filter(), report.DB(o.Direct.Below))
	if !o.Meets {
		direct = "no order up to 8 does what is asked when converting at that rate"
	}
	if o.Over == nil {
		faster := "no rate that was tried is twice as fast"
		on, _ := o.HandedOn.Value()
		if top, _ := o.Fastest.Value(); top >= 2*on {
			faster = fmt.Sprintf("converting faster, up to %s, with a digital low-pass behind would save no amplifier", report.Hz(o.Fastest))
		}
		t.Words("To hand on %s, %s; %s.", rate, direct, faster)
		return
	}
	c := o.Over
	t.Words("To hand on %s, %s. Cheaper than order: convert %d times as often, at %s, behind %s, then a digital low-pass of %d taps (to %s, %s down from %s; %s multiply-adds a second for the samples that are kept), and keep one sample in %d: "+
		"fold-back lies %s below the wanted sound (%s), the worst tone %s, and it %s.",
		rate, direct, c.By, report.Hz(c.Rate), c.filter(), c.Taps, report.Hz(c.PassEdge), report.DB(c.Attenuation), report.Hz(c.StopEdge), millions(c.MultiplyAdds), c.By,
		report.DB(c.Below), report.DBFS(c.FoldBack), report.DB(c.WorstTone), droopWords(c.Droop, keep))
}

// millions prints a count in thousands or millions.
func millions(n report.Number) string {
	v, _ := n.Value()
	if v < 1e6 {
		return report.Plain(report.Of(v/1e3), 3) + " thousand"
	}
	return report.Plain(report.Of(v/1e6), 3) + " million"
}
