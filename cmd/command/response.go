package command

import (
	"bufio"
	"encoding/json"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"

	"github.com/spf13/cobra"

	"midrail/chain/circuit"
	"midrail/chain/quantity"
	"midrail/chain/response"
	"midrail/cmd/report"
)

// chainFlags are those of every command that takes a chain.
type chainFlags struct {
	set  []string
	json bool
}

func (f *chainFlags) add(cmd *cobra.Command) {
	cmd.Flags().StringArrayVar(&f.set, "set", nil, `change a value for this run: "NAME.key=value"; repeatable`)
	cmd.Flags().BoolVar(&f.json, "json", false, "print the result as JSON and nothing else")
}

func newResponse(s streams) *cobra.Command {
	var f chainFlags
	var from, at, frequencies, csv, svg string
	cmd := &cobra.Command{
		Use:   "response CHAIN",
		Short: "Gain and phase at any stage from any input or the supply",
		Long: `response tells how the chain treats each frequency: gain, phase and group delay; corners, peak, roll-off, the
floor that output resistances leave; what is left at half the converter's rate; the natural frequencies; and how far
each amplifier's loop is from oscillating. Gains are in dB of volts a volt, or volts a pascal from a microphone.`,
		Example: `  midrail response front-end.toml
  midrail response front-end.toml --from supply --at "mic amp" --frequencies 50,100,1k
  midrail response front-end.toml --csv response.csv`,
		Args: exactly(1),
		RunE: func(_ *cobra.Command, args []string) error {
			n, err := s.open(args[0], f.set)
			if err != nil {
				return err
			}
			path, err := response.NewPath(n, from, at)
			if err != nil {
				return usageError{err}
			}
			grid := responseGrid(n)
			if frequencies != "" {
				if grid, err = parseFrequencies(frequencies); err != nil {
					return usageError{err}
				}
			}
			r, err := responseOf(n, path, grid)
			if err != nil {
				return err
			}
			if csv != "" {
				if err := replaceFile(csv, r.writeCSV); err != nil {
					return err
				}
			}
			if svg != "" {
				if err := replaceFile(svg, func(w io.Writer) error { return report.ResponseSVG(w, r.picture(), n.Chain.Converter.Rate/2) }); err != nil {
					return err
				}
			}
			if f.json {
				return writeJSON(s.out, r)
			}
			return r.print(s.out, frequencies != "")
		},
	}
	f.add(cmd)
	cmd.Flags().StringVar(&from, "from", "", "input, or \"supply\" (default: the first input)")
	cmd.Flags().StringVar(&at, "at", "", "stage (default: what the converter samples)")
	cmd.Flags().StringVar(&frequencies, "frequencies", "", "frequencies to tell, such as 20,1k,8k (default: 20 a decade)")
	cmd.Flags().StringVar(&csv, "csv", "", "write the points to a `file`")
	cmd.Flags().StringVar(&svg, "svg", "", "draw the gain into a `file`")
	return cmd
}

// responseGrid is the frequencies told when none are asked for.
func responseGrid(n *circuit.Network) []float64 {
	return response.Grid(10, math.Max(100e3, 4*n.Chain.Converter.Rate), 20)
}

// parseFrequencies reads a list such as "20,1k,8k".
func parseFrequencies(list string) ([]float64, error) {
	var all []float64
	for _, one := range strings.Split(list, ",") {
		v, err := quantity.Parse(quantity.Frequency, one)
		if err != nil {
			return nil, err
		}
		if !(v.SI > 0 && v.SI <= 1e9) {
			return nil, fmt.Errorf("%s: frequencies go from above 0 to 1 GHz", one)
		}
		all = append(all, v.SI)
	}
	return all, nil
}

// The response as JSON.
type responseResult struct {
	From    string          `json:"from"`
	At      string          `json:"at"`
	Unit    string          `json:"gain_unit"` // what 0 dB is: "V/V" or "V/Pa"
	Points  []responsePoint `json:"points"`
	MidBand report.Number   `json:"mid_band_db"`
	At1k    report.Number   `json:"at_1_khz_db"`
	Corners []cornerAt      `json:"corners"`
	Peak    gainAt          `json:"peak"`
	RollOff report.Number   `json:"roll_off_db_per_decade"`
	Floor   gainAt          `json:"floor"`
	// Of the converter's rate: against mid-band, at half the rate, and at the rate less the high corner.
	AtHalfRate  report.Number `json:"at_half_rate_db"`
	AtFirstFold report.Number `json:"at_rate_less_corner_db"`
	Poles       []pole        `json:"poles"`
	Margins     []margin      `json:"margins"`
}

type responsePoint struct {
	Frequency report.Number `json:"frequency_hz"`
	Gain      report.Number `json:"gain_db"`
	Phase     report.Number `json:"phase_deg"`
	Delay     report.Number `json:"group_delay_s"`
}

type cornerAt struct {
	Kind      string        `json:"kind"` // "low" or "high"
	Frequency report.Number `json:"frequency_hz"`
}

type gainAt struct {
	Frequency report.Number `json:"frequency_hz"`
	Gain      report.Number `json:"gain_db"`
}

type pole struct {
	Re        report.Number `json:"re"`
	Im        report.Number `json:"im"`
	Frequency report.Number `json:"frequency_hz"`
	Q         report.Number `json:"q"`
}

type margin struct {
	Amplifier string        `json:"amplifier"`
	Crossover report.Number `json:"crossover_hz"`
	Phase     report.Number `json:"phase_margin_deg"`
	Gain      report.Number `json:"gain_margin_db"`
}

func responseOf(n *circuit.Network, p *response.Path, grid []float64) (*responseResult, error) {
	of := report.Of
	f := p.Figures()
	r := &responseResult{
		From: p.From, At: p.At, Unit: "V/" + p.Unit, MidBand: of(f.MidBand), At1k: of(f.At1k),
		Peak: gainAt{of(f.PeakAt), of(f.Peak)}, RollOff: of(f.RollOff), Floor: gainAt{of(f.FloorFrom), of(f.Floor)},
		AtHalfRate: of(f.AtHalfRate), AtFirstFold: of(f.AtFirstFold),
	}
	for _, x := range p.Points(grid) {
		r.Points = append(r.Points, responsePoint{of(x.Frequency), of(x.Gain), of(x.Phase), of(x.Delay)})
	}
	for _, c := range []cornerAt{{"low", of(f.LowCorner)}, {"high", of(f.HighCorner)}} {
		if _, there := c.Frequency.Value(); there {
			r.Corners = append(r.Corners, c)
		}
	}
	at, err := n.Rest()
	if err != nil {
		return nil, err
	}
	poles, err := response.Poles(n, at)
	if err != nil {
		return nil, err
	}
	for _, x := range poles {
		r.Poles = append(r.Poles, pole{of(real(x.Value)), of(imag(x.Value)), of(x.Frequency), of(x.Q)})
	}
	for _, m := range response.Margins(n) {
		r.Margins = append(r.Margins, margin{m.Amplifier, of(m.Crossover), of(m.Phase), of(m.Gain)})
	}
	return r, nil
}

func (r *responseResult) writeCSV(w io.Writer) error {
	b := bufio.NewWriter(w)
	fmt.Fprintln(b, "frequency_hz,gain_db,phase_deg,group_delay_s")
	cell := func(x report.Number) string {
		v, there := x.Value()
		if !there {
			return ""
		}
		return strconv.FormatFloat(v, 'g', -1, 64)
	}
	for _, p := range r.Points {
		fmt.Fprintf(b, "%s,%s,%s,%s\n", cell(p.Frequency), cell(p.Gain), cell(p.Phase), cell(p.Delay))
	}
	return b.Flush()
}

func (r *responseResult) picture() report.Response {
	line := report.Response{Input: r.From}
	for _, p := range r.Points {
		f, _ := p.Frequency.Value()
		g, there := p.Gain.Value()
		if !there {
			g = math.NaN()
		}
		line.Frequency, line.Gain = append(line.Frequency, f), append(line.Gain, g)
	}
	return line
}

// print writes the figures, and the points if they were asked for, otherwise a few of them.
func (r *responseResult) print(w io.Writer, all bool) error {
	t := report.NewText(w)
	t.Line("%s to %s, dB of %s", r.From, r.At, r.Unit)
	t.Line("")
	t.Pair("mid-band", report.DB(r.MidBand))
	t.Pair("at 1 kHz", report.DB(r.At1k))
	for _, c := range r.Corners {
		t.Pair(c.Kind+" corner", report.Hz(c.Frequency))
	}
	t.Pair("peak", report.DB(r.Peak.Gain)+" at "+report.Hz(r.Peak.Frequency))
	t.Pair("roll-off", report.DB(r.RollOff)+" a decade")
	if _, there := r.Floor.Frequency.Value(); there {
		t.Pair("floor", report.DB(r.Floor.Gain)+" from "+report.Hz(r.Floor.Frequency)+" on")
	}
	t.Pair("at half the rate", report.DB(r.AtHalfRate)+" against mid-band")
	t.Pair("at rate − corner", report.DB(r.AtFirstFold)+" against mid-band")
	t.Line("")
	points := r.Points
	if !all {
		points = nil
		for i, p := range r.Points {
			if i%10 == 0 {
				points = append(points, p)
			}
		}
	}
	var rows [][]string
	for _, p := range points {
		rows = append(rows, []string{report.Hz(p.Frequency), report.DB(p.Gain), report.Degrees(p.Phase), report.Seconds(p.Delay)})
	}
	t.Table([]string{"frequency", "gain", "phase", "group delay"}, rows)
	t.Line("")
	rows = nil
	for _, p := range r.Poles {
		rows = append(rows, []string{report.Hz(p.Frequency), report.Plain(p.Q, 3)})
	}
	t.Table([]string{"natural frequency", "Q"}, rows)
	t.Line("")
	rows = nil
	for _, m := range r.Margins {
		word := ""
		if v, there := m.Phase.Value(); there && v < response.Wary {
			word = "little"
		}
		rows = append(rows, []string{m.Amplifier, report.Hz(m.Crossover), report.Degrees(m.Phase), report.DB(m.Gain), word})
	}
	t.Table([]string{"amplifier", "crossover", "phase margin", "gain margin", ""}, rows)
	return t.Err()
}

// writeJSON writes a result as indented JSON.
func writeJSON(w io.Writer, v any) error {
	e := json.NewEncoder(w)
	e.SetEscapeHTML(false)
	e.SetIndent("", "  ")
	return e.Encode(v)
}
