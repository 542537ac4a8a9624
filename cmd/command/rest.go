package command

import (
	"io"
	"math"

	"github.com/spf13/cobra"

	"midrail/chain/circuit"
	"midrail/chain/rest"
	"midrail/cmd/report"
)

func newRest(s streams) *cobra.Command {
	var f chainFlags
	cmd := &cobra.Command{
		Use:   "rest CHAIN",
		Short: "DC voltage of every node, and settling after power-up",
		Long: `rest tells where every node rests without sound and how far that is from the amplifiers' limits, what stands
across each capacitor (and which side of an electrolytic is positive), what offsets and bias currents move, how long the
chain takes to come to rest after power-up, and which parts make it slow.`,
		Example: "  midrail rest front-end.toml",
		Args:    exactly(1),
		RunE: func(_ *cobra.Command, args []string) error {
			n, err := s.open(args[0], f.set)
			if err != nil {
				return err
			}
			r, err := rest.Find(n)
			if err != nil {
				return err
			}
			if f.json {
				return writeJSON(s.out, restJSON(n, r))
			}
			return printRest(s.out, n, r)
		},
	}
	f.add(cmd)
	return cmd
}

// The rest point as JSON.
type restResult struct {
	Nodes      []restNode      `json:"nodes"`
	Capacitors []restCapacitor `json:"capacitors"`
	Supply     report.Number   `json:"supply_a"`
	Shares     []restShare     `json:"moved_at_converter"`
	Slow       []restSlow      `json:"slow"`
	Settling   restSettling    `json:"settling"`
}

type restNode struct {
	Name  string        `json:"name"`
	Volts report.Number `json:"volts"`
	Low   report.Number `json:"limit_low_v"`
	High  report.Number `json:"limit_high_v"`
	Word  string        `json:"word"`
}

type restCapacitor struct {
	Part     string        `json:"part"`
	Volts    report.Number `json:"volts"`
	Positive string        `json:"positive"`
	Negative string        `json:"negative"`
}

type restShare struct {
	Name  string        `json:"name"`
	Kind  string        `json:"kind"`
	Volts report.Number `json:"volts"`
	LSB   report.Number `json:"lsb"`
	Gain  report.Number `json:"volts_per_unit"` // a volt of offset, an ampere into the pin
}

type restSlow struct {
	Constant report.Number `json:"time_constant_s"`
	Part     string        `json:"part"`
	Weight   report.Number `json:"weight"`
}

type restSettling struct {
	OnePercent report.Number `json:"to_1_percent_s"`
	LSB        report.Number `json:"to_1_lsb_s"`
	Usable     report.Number `json:"usable_s"`
}

func lsbOf(n *circuit.Network) float64 {
	c := &n.Chain.Converter
	return (c.High - c.Low) / math.Exp2(float64(c.Bits))
}

func restJSON(n *circuit.Network, r *rest.Rest) restResult {
	of := report.Of
	out := restResult{Supply: of(r.Supply), Settling: restSettling{of(r.Settling.OnePercent), of(r.Settling.LSB), of(r.Settling.Usable)}}
	for _, x := range r.Nodes {
		out.Nodes = append(out.Nodes, restNode{x.Name, of(x.Volts), of(x.Low), of(x.High), x.Word})
	}
	for _, x := range r.Capacitors {
		out.Capacitors = append(out.Capacitors, restCapacitor{x.Part.Name, of(x.Volts), x.Positive, x.Negative})
	}
	for _, x := range r.Shares {
		out.Shares = append(out.Shares, restShare{x.Name, x.Kind, of(x.Volts), of(x.Volts / lsbOf(n)), of(x.Gain)})
	}
	for _, x := range r.Slow {
		out.Slow = append(out.Slow, restSlow{of(x.Constant), x.Part.Name, of(x.Weight)})
	}
	return out
}

// leastShare is the least in V, for what there is and for a mV or a nA of it, that is printed of what moves the
// converter's input.
const leastShare = 1e-9

func printRest(w io.Writer, n *circuit.Network, r *rest.Rest) error {
	of, t := report.Of, report.NewText(w)
	t.Line("At rest, to be found with a meter or a scope against ground:")
	t.Line("")
	var rows [][]string
	for _, x := range r.Nodes {
		limits := ""
		if !math.IsNaN(x.Low) {
			limits = report.Volts(of(x.Low)) + " to " + report.Volts(of(x.High))
		}
		rows = append(rows, []string{x.Name, report.Volts(of(x.Volts)), limits})
	}
	t.Table([]string{"node", "rests at", "can reach"}, rows)
	for _, x := range r.Nodes {
		if x.Word != "" {
			t.Line("")
			t.Words("%s: %s", x.Name, x.Word)
		}
	}
	t.Line("")
	rows = nil
	for _, x := range r.Capacitors {
		rows = append(rows, []string{x.Part.Name, report.Volts(of(x.Volts)), x.Positive})
	}
	t.Table([]string{"capacitor", "across it", "positive side"}, rows)
	t.Line("")
	t.Line("From the supply, amplifiers' own current apart: %s", report.Amperes(of(r.Supply)))
	t.Line("")
	rows = nil
	unseen := 0
	for _, x := range r.Shares {
		per, unit := x.Gain*1e-3, " per mV"
		if x.Kind == "bias current" {
			per, unit = x.Gain*1e-9, " per nA"
		}
		if math.Abs(x.Volts) < leastShare && math.Abs(per) < leastShare {
			unseen++
			continue
		}
		lsb := math.Round(x.Volts/lsbOf(n)*1e5) / 1e5
		rows = append(rows, []string{x.Name + ", " + x.Kind, report.Volts(of(x.Volts)), report.Plain(of(lsb), 3), report.Volts(of(per)) + unit})
	}
	t.Table([]string{"moves the converter's input", "by", "LSB", "that is"}, rows)
	if unseen > 0 {
		t.Line("and %d more by less than a nanovolt; --json tells all", unseen)
	}
	t.Line("")
	t.Line("After power-up, every capacitor empty:")
	usable := "never: an amplifier rests at a limit, or too near"
	if !math.IsInf(r.Settling.Usable, 1) {
		usable = report.Seconds(of(r.Settling.Usable)) + "  (no limit touched, 1 % of full scale finds room)"
	}
	t.Pair("usable", usable)
	t.Pair("to 1 %", report.Seconds(of(r.Settling.OnePercent)))
	t.Pair("to 1 LSB", report.Seconds(of(r.Settling.LSB)))
	if len(r.Slow) > 0 {
		t.Line("")
		rows = nil
		for _, x := range r.Slow {
			rows = append(rows, []string{x.Part.Name, report.Seconds(of(x.Constant)), report.Percent(of(x.Weight))})
		}
		t.Table([]string{"slow because of", "time constant", "its share"}, rows)
	}
	return t.Err()
}
