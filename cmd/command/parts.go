package command

import (
	"fmt"
	"io"
	"math"
	"strings"

	"github.com/spf13/cobra"

	"midrail/chain/alignment"
	"midrail/chain/amplifier"
	"midrail/chain/parts"
	"midrail/chain/preferred"
	"midrail/chain/quantity"
	"midrail/cmd/report"
)

func newParts(s streams) *cobra.Command {
	cmd := &cobra.Command{
		Use:   "parts",
		Short: "Buyable values for a wanted filter, gain, bias or coupling",
		Long: `parts finds preferred values for a filter, a gain, a bias divider or a coupling capacitor, ranked by how close they
land to what is wanted.`,
		Example: `  midrail parts filter --corner 3kHz --order 4
  midrail parts filter --corner 20kHz --order 5 --alignment bessel --amplifier "cmos rail-to-rail" --resistors E96
  midrail parts gain 12
  midrail parts bias 0.9V 3.3V
  midrail parts coupling 20Hz 10k`,
		Args: cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error { return cmd.Help() },
	}
	cmd.AddCommand(newFilterParts(s), newGainParts(s), newBiasParts(s), newCouplingParts(s), newValueParts(s))
	return cmd
}

// partsFlags are those of all kinds of parts.
type partsFlags struct {
	json                  bool
	resistors, capacitors string
	most                  int
}

func (f *partsFlags) add(cmd *cobra.Command) {
	cmd.Flags().BoolVar(&f.json, "json", false, "print the result as JSON and nothing else")
	cmd.Flags().StringVar(&f.resistors, "resistors", preferred.DefaultResistors.String(), "series of resistors")
	cmd.Flags().StringVar(&f.capacitors, "capacitors", preferred.DefaultCapacitors.String(), "series of capacitors")
	cmd.Flags().IntVar(&f.most, "most", 5, "how many to tell")
}

func (f *partsFlags) series() (r, c preferred.Series, err error) {
	if r, err = preferred.Parse(f.resistors); err == nil {
		c, err = preferred.Parse(f.capacitors)
	}
	if err == nil && (f.most < 1 || f.most > 1000) {
		err = fmt.Errorf("--most %d: 1 to 1000 can be told", f.most)
	}
	if err != nil {
		err = usageError{err}
	}
	return r, c, err
}

// valueOf reads an argument within a range.
func valueOf(kind quantity.Kind, text string, low, high float64) (float64, error) {
	v, err := quantity.Parse(kind, text)
	if err != nil {
		return 0, usageError{err}
	}
	if !(v.SI >= low && v.SI <= high) {
		return 0, usageError{fmt.Errorf("%s is out of range, %s to %s", text, quantity.Format(kind, low), quantity.Format(kind, high))}
	}
	return v.SI, nil
}

type partsResult struct {
	Sections []partsSection `json:"sections"`
	// The −3 dB corner of the nearest choices together: wanted, as it comes out and, with an amplifier, as it would of
	// designs that take it for ideal. Null for a single section.
	Wanted report.Number `json:"corner_wanted_hz"`
	Corner report.Number `json:"corner_hz"`
	Plain  report.Number `json:"without_predistortion_corner_hz"`
}

type partsSection struct {
	Kind    string        `json:"kind"`
	F0      report.Number `json:"f0_hz"` // wanted
	Q       report.Number `json:"q"`
	Choices []partsChoice `json:"choices"`
	// What the nearest choice of a design that takes the amplifier for ideal would give with it; null without one.
	PlainF0     report.Number `json:"without_predistortion_f0_hz"`
	PlainQ      report.Number `json:"without_predistortion_q"`
	PlainErrF0  report.Number `json:"without_predistortion_error_f0"`
	PlainErrorQ report.Number `json:"without_predistortion_error_q"`
}

type partsChoice struct {
	R1          report.Number `json:"r_1_ohm"`
	R2          report.Number `json:"r_2_ohm"`
	R3          report.Number `json:"r_3_ohm"`
	C1          report.Number `json:"c_1_f"`
	C2          report.Number `json:"c_2_f"`
	F0          report.Number `json:"f0_hz"`
	Q           report.Number `json:"q"`
	Gain        report.Number `json:"gain"`
	ErrorF0     report.Number `json:"error_f0"`
	ErrorQ      report.Number `json:"error_q"`
	ErrorGain   report.Number `json:"error_gain"`
	Spread      report.Number `json:"capacitor_spread"`
	Sensitivity report.Number `json:"largest_sensitivity_of_q"`
	// Relative change for a relative change of each part.
	Sensitivities []partsSensitivity `json:"sensitivities"`
}

type partsSensitivity struct {
	Part string        `json:"part"`
	F0   report.Number `json:"f0"`
	Q    report.Number `json:"q"`
	Gain report.Number `json:"gain"`
}

func newFilterParts(s streams) *cobra.Command {
	var f partsFlags
	var corner, kind, align, class, f0, gain string
	var order int
	var q float64
	cmd := &cobra.Command{
		Use:   "filter",
		Short: "Values for a low-pass filter, section by section",
		Long: `filter finds values for each section of a low-pass: of an order from 1 to 8 and an alignment, or a single section of
a given f0 and Q. With --amplifier the values are chosen so that the section comes out right with that class's
gain-bandwidth; what an ideal design would give with it is told beside.`,
		Args: cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			wish := parts.Wish{Gain: 1}
			var err error
			if wish.Resistors, wish.Capacitors, err = f.series(); err != nil {
				return err
			}
			if wish.Gain, err = valueOf(quantity.Ratio, gain, 0.01, 1000); err != nil {
				return err
			}
			switch kind {
			case "sallen-key":
				wish.Kind = parts.SallenKeyKind
			case "multiple-feedback":
				wish.Kind = parts.MultipleFeedbackKind
			default:
				return usageError{fmt.Errorf("--kind %q: sallen-key or multiple-feedback", kind)}
			}
			if wish.Kind == parts.SallenKeyKind && wish.Gain != 1 {
				return usageError{fmt.Errorf("--gain is for multiple-feedback: the sallen-key sections have a gain of 1")}
			}
			if class != "" {
				m, ok := amplifier.Class(class)
				if !ok {
					return usageError{fmt.Errorf("--amplifier %q: the classes are %v", class, amplifier.Classes())}
				}
				wish.GainBandwidth = m.GainBandwidth
			}
			sections, unit, err := sectionsWanted(f0, q, corner, align, order)
			if err != nil {
				return err
			}
			var out partsResult
			for i, section := range sections {
				if err := cmd.Context().Err(); err != nil {
					return during(err, "finding values, %d of %d sections being done", i, len(sections))
				}
				one := wish
				if i > 0 {
					one.Gain = 1 // the first section has it all
				}
				if one.F0, one.Q = section.F0*unit, section.Q; one.Q == 0 {
					one.Kind = parts.RCKind
				}
				out.Sections = append(out.Sections, sectionResult(one, f.most))
			}
			if f0 == "" {
				out.corners(unit)
			}
			if f.json {
				return writeJSON(s.out, out)
			}
			return out.print(s.out)
		},
	}
	f.add(cmd)
	cmd.Flags().StringVar(&corner, "corner", "", "−3 dB `frequency` of the whole filter")
	cmd.Flags().IntVar(&order, "order", 2, "order, 1 to 8")
	cmd.Flags().StringVar(&align, "alignment", string(alignment.Butterworth), "butterworth, bessel or chebyshev (0.5 dB)")
	cmd.Flags().StringVar(&kind, "kind", "sallen-key", "sallen-key or multiple-feedback")
	cmd.Flags().StringVar(&f0, "f0", "", "f0 `frequency` of a single section, with --q, in place of --corner")
	cmd.Flags().Float64Var(&q, "q", 0, "Q of a single section")
	cmd.Flags().StringVar(&gain, "gain", "1", "gain of a multiple-feedback filter")
	cmd.Flags().StringVar(&class, "amplifier", "", "class of the amplifier")
	return cmd
}

// sectionsWanted returns the sections that the flags ask for, and the frequency that their f0 are told against.
func sectionsWanted(f0 string, q float64, corner, align string, order int) ([]alignment.Section, float64, error) {
	if f0 != "" {
		hz, err := valueOf(quantity.Frequency, f0, 1, 1e6)
		if err == nil && !(q >= 0.3 && q <= 50) {
			err = usageError{fmt.Errorf("--q %g: 0.3 to 50 can be had", q)}
		}
		return []alignment.Section{{F0: 1, Q: q}}, hz, err
	}
	if corner == "" {
		return nil, 0, usageError{fmt.Errorf("give --corner, or --f0 and --q")}
	}
	hz, err := valueOf(quantity.Frequency, corner, 1, 1e6)
	if err != nil {
		return nil, 0, err
	}
	sections, err := alignment.Sections(alignment.Alignment(align), order)
	if err != nil {
		return nil, 0, usageError{err}
	}
	return sections, hz, nil
}

func sectionResult(w parts.Wish, most int) partsSection {
	of := report.Of
	q := math.NaN()
	if w.Kind != parts.RCKind {
		q = w.Q
	}
	r := partsSection{Kind: string(w.Kind), F0: of(w.F0), Q: of(q)}
	there := func(x float64) report.Number {
		if x == 0 {
			return report.Number{}
		}
		return of(x)
	}
	for _, c := range parts.Find(w, most) {
		choice := partsChoice{R1: of(c.R1), R2: there(c.R2), R3: there(c.R3), C1: of(c.C1), C2: there(c.C2), F0: of(c.F0), ErrorF0: of(c.ErrorF0)}
		if w.Kind != parts.RCKind {
			choice.Q, choice.Gain, choice.ErrorQ, choice.ErrorGain = of(c.Q), of(c.Gain), of(c.ErrorQ), of(c.ErrorGain)
			most := 0.
			for _, s := range c.Sensitivities {
				most = math.Max(most, math.Abs(s.Q))
			}
			choice.Spread, choice.Sensitivity = of(c.Spread), of(most)
		}
		for _, s := range c.Sensitivities {
			one := partsSensitivity{Part: s.Part, F0: of(s.F0)}
			if w.Kind != parts.RCKind {
				one.Q, one.Gain = of(s.Q), of(s.Gain)
			}
			choice.Sensitivities = append(choice.Sensitivities, one)
		}
		r.Choices = append(r.Choices, choice)
	}
	if plain, ok := parts.WithoutPredistortion(w); ok {
		r.PlainF0, r.PlainQ, r.PlainErrF0, r.PlainErrorQ = of(plain.F0), of(plain.Q), of(plain.ErrorF0), of(plain.ErrorQ)
	}
	return r
}

// corners finds the corner of the nearest choices together.
func (r *partsResult) corners(wanted float64) {
	var with, plain []alignment.Section
	figure := func(n report.Number) float64 { x, _ := n.Value(); return x }
	predistorted := false
	for _, s := range r.Sections {
		if len(s.Choices) == 0 {
			return
		}
		one := alignment.Section{F0: figure(s.Choices[0].F0), Q: figure(s.Choices[0].Q)}
		with = append(with, one)
		if s.PlainF0.There() {
			one, predistorted = alignment.Section{F0: figure(s.PlainF0), Q: figure(s.PlainQ)}, true
		}
		plain = append(plain, one)
	}
	r.Wanted, r.Corner = report.Of(wanted), report.Of(alignment.Corner(with))
	if predistorted {
		r.Plain = report.Of(alignment.Corner(plain))
	}
}

func code(kind quantity.Kind, n report.Number) string {
	v, there := n.Value()
	if !there {
		return ""
	}
	return quantity.FormatCode(kind, v)
}

func (r partsResult) print(w io.Writer) error {
	t := report.NewText(w)
	for i, s := range r.Sections {
		if i > 0 {
			t.Line("")
		}
		wanted := "f0 " + report.Hz(s.F0)
		if _, there := s.Q.Value(); there {
			wanted += ", Q " + report.Plain(s.Q, 4)
		}
		t.Line("section %d, %s: %s", i+1, s.Kind, wanted)
		if len(s.Choices) == 0 {
			t.Line("no preferred values within the parts that are looked at")
			continue
		}
		s.print(t)
	}
	if r.Corner.There() {
		t.Line("")
		words := ""
		if r.Plain.There() {
			words = "; designed for an ideal amplifier, with " + report.Hz(r.Plain)
		}
		t.Words("The nearest choices together come out with a corner of %s (wanted: %s)%s", report.Hz(r.Corner), report.Hz(r.Wanted), words)
	}
	return t.Err()
}

// print prints a section's choices, the columns that its kind has.
func (s *partsSection) print(t *report.Text) {
	second, third := s.Kind != string(parts.RCKind), s.Kind == string(parts.MultipleFeedbackKind)
	only := func(first, second, third []string, has2, has3 bool) []string {
		row := first
		if has2 {
			row = append(row, second...)
		}
		if has3 {
			row = append(row, third...)
		}
		return row
	}
	var rows [][]string
	for _, c := range s.Choices {
		row := only([]string{code(quantity.Resistance, c.R1)}, []string{code(quantity.Resistance, c.R2)}, []string{code(quantity.Resistance, c.R3)}, second, third)
		row = append(row, code(quantity.Capacitance, c.C1))
		row = append(row, only(nil, []string{code(quantity.Capacitance, c.C2)}, nil, second, false)...)
		row = append(row, report.Percent(c.ErrorF0))
		rows = append(rows, append(row, only(nil, []string{report.Percent(c.ErrorQ), report.Plain(c.Spread, 3), report.Plain(c.Sensitivity, 2)}, []string{report.Percent(c.ErrorGain)}, second, third)...))
	}
	head := only([]string{"r_1"}, []string{"r_2"}, []string{"r_3"}, second, third)
	head = append(head, "c_1")
	head = append(head, only(nil, []string{"c_2"}, nil, second, false)...)
	head = append(head, "f0 off")
	head = append(head, only(nil, []string{"Q off", "c spread", "Q by a part"}, []string{"gain off"}, second, third)...)
	t.Table(head, rows)
	nearest := s.Choices[0]
	if s.PlainF0.There() {
		t.Words("With this amplifier the nearest comes out at f0 %s, Q %s (%s, %s off). Designed for an ideal amplifier it would at f0 %s, Q %s (%s, %s off).",
			report.Hz(nearest.F0), report.Plain(nearest.Q, 4), report.Percent(nearest.ErrorF0), report.Percent(nearest.ErrorQ),
			report.Hz(s.PlainF0), report.Plain(s.PlainQ, 4), report.Percent(s.PlainErrF0), report.Percent(s.PlainErrorQ))
	}
	rows = nil
	for _, x := range nearest.Sensitivities {
		rows = append(rows, only([]string{x.Part, hundredths(x.F0)}, []string{hundredths(x.Q)}, []string{hundredths(x.Gain)}, second, third))
	}
	t.Table(only([]string{"1 % more of", "f0, %"}, []string{"Q, %"}, []string{"gain, %"}, second, third), rows)
}

// hundredths prints a figure with its sign, to a hundredth.
func hundredths(n report.Number) string {
	v, _ := n.Value()
	return strings.Replace(fmt.Sprintf("%+.2f", math.Round(100*v)/100+0), "-", "−", 1)
}

type ratioResult struct {
	Pairs []ratioPair `json:"pairs"`
}

type ratioPair struct {
	A     report.Number `json:"a_ohm"`
	B     report.Number `json:"b_ohm"`
	Value report.Number `json:"value"`
	Error report.Number `json:"error"`
}

// tellRatios prints pairs of resistors.
func (s streams) tellRatios(json bool, a, b, what string, list []parts.Ratio) error {
	var r ratioResult
	var rows [][]string
	for _, p := range list {
		one := ratioPair{report.Of(p.A), report.Of(p.B), report.Of(p.Value), report.Of(p.Error)}
		r.Pairs = append(r.Pairs, one)
		rows = append(rows, []string{code(quantity.Resistance, one.A), code(quantity.Resistance, one.B), report.Plain(one.Value, 4), report.Percent(one.Error)})
	}
	if json {
		return writeJSON(s.out, r)
	}
	t := report.NewText(s.out)
	t.Table([]string{a, b, what, "off"}, rows)
	return t.Err()
}

func newGainParts(s streams) *cobra.Command {
	var f partsFlags
	var upright bool
	cmd := &cobra.Command{
		Use: "gain GAIN", Short: "Two resistors for a gain", Args: exactly(1),
		RunE: func(_ *cobra.Command, args []string) error {
			r, _, err := f.series()
			if err != nil {
				return err
			}
			gain, err := valueOf(quantity.Ratio, args[0], 0.01, 1000)
			if err != nil {
				return err
			}
			if !upright {
				return s.tellRatios(f.json, "r_f", "r_in", "gain, inverting", parts.Inverting(gain, r, f.most))
			}
			if gain <= 1.01 {
				return usageError{fmt.Errorf("a non-inverting gain is above 1")}
			}
			return s.tellRatios(f.json, "r_f", "r_g", "gain", parts.NonInverting(gain, r, f.most))
		},
	}
	f.add(cmd)
	cmd.Flags().BoolVar(&upright, "non-inverting", false, "1 + r_f/r_g in place of r_f/r_in")
	return cmd
}

func newValueParts(s streams) *cobra.Command {
	var f partsFlags
	cmd := &cobra.Command{
		Use: "value VALUE", Short: "The nearest preferred values to a resistance or a capacitance, alone and in pairs", Args: exactly(1),
		RunE: func(_ *cobra.Command, args []string) error {
			r, c, err := f.series()
			if err != nil {
				return err
			}
			kind, series := quantity.Resistance, r
			v, err := quantity.Parse(kind, args[0])
			if err != nil {
				kind, series = quantity.Capacitance, c
				if v, err = quantity.Parse(kind, args[0]); err != nil {
					return usageError{fmt.Errorf("%q is neither a resistance nor a capacitance, such as 4k73 or 12n4", args[0])}
				}
			}
			if !(v.SI > 1e-15 && v.SI < 1e12) {
				return usageError{fmt.Errorf("%s is out of range", args[0])}
			}
			sum, share := series.Pairs(v.SI)
			near := series.Nearest(v.SI)
			words := map[bool]string{true: "in series", false: "in parallel"}
			name := func(p preferred.Pair) string { return words[p.Summed == (kind == quantity.Resistance)] }
			var out []valueChoice
			out = append(out, valueChoice{"alone", report.Of(near), report.Number{}, report.Of(near), report.Of(near/v.SI - 1)})
			for _, p := range []preferred.Pair{sum, share} {
				out = append(out, valueChoice{name(p), report.Of(p.A), report.Of(p.B), report.Of(p.Makes), report.Of(p.Makes/v.SI - 1)})
			}
			if f.json {
				return writeJSON(s.out, out)
			}
			t := report.NewText(s.out)
			var rows [][]string
			for _, x := range out {
				makes, _ := x.Makes.Value()
				rows = append(rows, []string{x.How, code(kind, x.A), code(kind, x.B), quantity.Format(kind, makes), report.Percent(x.Error)})
			}
			t.Table([]string{series.String(), "", "", "makes", "off"}, rows)
			return t.Err()
		},
	}
	f.add(cmd)
	return cmd
}

type valueChoice struct {
	How   string        `json:"how"`
	A     report.Number `json:"a"`
	B     report.Number `json:"b"`
	Makes report.Number `json:"makes"`
	Error report.Number `json:"error"`
}

func newBiasParts(s streams) *cobra.Command {
	var f partsFlags
	cmd := &cobra.Command{
		Use: "bias VOLTS SUPPLY", Short: "A divider for a bias", Args: exactly(2),
		RunE: func(_ *cobra.Command, args []string) error {
			r, _, err := f.series()
			if err != nil {
				return err
			}
			supply, err := valueOf(quantity.Voltage, args[1], 0.5, 60)
			if err != nil {
				return err
			}
			volts, err := valueOf(quantity.Voltage, args[0], 0.01*supply, 0.99*supply)
			if err != nil {
				return err
			}
			return s.tellRatios(f.json, "top", "bottom", "volts", parts.Bias(volts, supply, r, f.most))
		},
	}
	f.add(cmd)
	return cmd
}

func newCouplingParts(s streams) *cobra.Command {
	var f partsFlags
	cmd := &cobra.Command{
		Use: "coupling CORNER RESISTANCE", Short: "A coupling capacitor for a corner", Args: exactly(2),
		RunE: func(_ *cobra.Command, args []string) error {
			_, c, err := f.series()
			if err != nil {
				return err
			}
			corner, err := valueOf(quantity.Frequency, args[0], 1e-3, 1e6)
			if err != nil {
				return err
			}
			ohms, err := valueOf(quantity.Resistance, args[1], 1, 1e9)
			if err != nil {
				return err
			}
			farads, gives := parts.Coupling(corner, ohms, c)
			if f.json {
				return writeJSON(s.out, struct {
					C      report.Number `json:"c_f"`
					Corner report.Number `json:"corner_hz"`
				}{report.Of(farads), report.Of(gives)})
			}
			_, err = fmt.Fprintf(s.out, "%s: the corner is at %s\n", quantity.FormatCode(quantity.Capacitance, farads), quantity.Format(quantity.Frequency, gives))
			return err
		},
	}
	f.add(cmd)
	return cmd
}
