package command

import (
	"math"
	"strings"

	"midrail/bilinear"
	"midrail/chain"
	"midrail/chain/circuit"
	"midrail/chain/noise"
	"midrail/chain/preferred"
	"midrail/chain/response"
	"midrail/chain/rest"
	"midrail/chain/ripple"
	"midrail/cmd/report"
)

// restOf returns the chain without sound.
func restOf(c *chain.Chain, r *rest.Rest) report.Rest {
	of := report.Of
	out := report.Rest{
		SupplyV: of(c.Supply.Voltage), SupplyA: of(r.Supply),
		Settling: report.Settling{ToPercentS: of(r.Settling.OnePercent), ToLSBS: of(r.Settling.LSB), UsableS: of(r.Settling.Usable)},
	}
	for _, n := range r.Nodes {
		out.Nodes = append(out.Nodes, report.Node{Name: n.Name, Volts: of(n.Volts), LimitLowV: of(n.Low), LimitHighV: of(n.High), Word: n.Word})
	}
	for _, x := range r.Capacitors {
		out.Capacitors = append(out.Capacitors, report.Capacitor{Part: x.Part.Name, Volts: of(x.Volts), Positive: x.Positive, Negative: x.Negative})
	}
	return out
}

// noiseOf returns the noise budget.
func noiseOf(n *circuit.Network, b *noise.Budget) report.Budget {
	of, f := report.Of, b.Figures(n)
	out := report.Budget{Total: report.NoiseTotal{V: of(f.Volts), DBFS: of(f.DBFS), DBFSA: of(f.A), LSB: of(f.LSB), UsefulBits: of(f.UsefulBits)}}
	for _, s := range b.Sources {
		out.Sources = append(out.Sources, report.NoiseSource{Name: s.Name, Kind: string(s.Kind), V: of(math.Sqrt(s.Power)), Share: of(s.Power / b.Power)})
	}
	for _, e := range f.Inputs {
		out.Inputs = append(out.Inputs, report.NoiseInput{Input: e.Input, Value: of(e.Value), Unit: e.Unit})
	}
	return out
}

// marginsOf returns the margins of the amplifiers' loops.
func marginsOf(margins []response.Margin) []report.Margin {
	var list []report.Margin
	for _, m := range margins {
		list = append(list, report.Margin{Amplifier: m.Amplifier, CrossoverHz: report.Of(m.Crossover), PhaseDeg: report.Of(m.Phase), GainDB: report.Of(m.Gain)})
	}
	return list
}

// supplyOf returns what comes from the supply to the converter, at mains ripple's frequency and two of the audible.
func supplyOf(n *circuit.Network, at bilinear.Operating) report.SupplyPaths {
	r := ripple.Find(n, at, []float64{100, 1e3, 10e3})
	var out report.SupplyPaths
	for _, f := range r.Frequencies {
		out.Hz = append(out.Hz, report.Of(f))
	}
	for _, p := range append(r.Paths, ripple.Path{Name: "all together", Gain: r.Total}) {
		one := report.Path{Name: p.Name}
		for _, g := range p.Gain {
			one.DB = append(one.DB, report.Of(circuit.Gain(g)))
		}
		out.Paths = append(out.Paths, one)
	}
	return out
}

// tolerances of the series of preferred values, a fraction: IEC 60063:2015; E3 has more than E6.
var tolerances = map[preferred.Series]float64{
	preferred.E6: 0.2, preferred.E12: 0.1, preferred.E24: 0.05, preferred.E48: 0.02, preferred.E96: 0.01, preferred.E192: 0.005,
}

// roles are what parts do, by their keys.
var roles = map[string]string{
	"r_f": "feedback resistor", "c_f": "feedback capacitor", "r_in": "input resistor", "c_in": "coupling capacitor",
	"r_g": "gain resistor", "c_g": "gain capacitor", "r_bias": "bias resistor", "r_1": "filter resistor", "r_2": "filter resistor",
	"r_3": "filter resistor", "c_1": "filter capacitor", "c_2": "filter capacitor", "r_a": "gain resistor to the bias",
	"r_b": "gain resistor to the output", "r": "resistor", "c": "capacitor", "r_top": "upper resistor", "r_bottom": "lower resistor",
	"c_top": "upper capacitor", "c_bottom": "lower capacitor", "top": "divider, upper resistor", "bottom": "divider, lower resistor",
	"bypass": "bypass capacitor", "load": "capsule load", "r_load": "load resistor",
}

// partsOf returns everything on the board: the parts of the chain file, then the amplifiers.
func partsOf(c *chain.Chain) []report.Part {
	var list []report.Part
	for _, p := range c.Parts() {
		owner := strings.TrimSuffix(p.Name, "."+p.Key)
		one := report.Part{Ref: p.Ref, Stage: owner, Role: roles[p.Key], Key: p.Key, Value: report.Of(p.Value), Unit: report.Ohm, Series: p.Series}
		series := p.Preferred()
		if p.Unit == chain.Farad {
			one.Unit = report.Farad
		}
		if owner, filter := strings.CutSuffix(owner, ".supply_filter"); filter {
			one.Stage, one.Role = owner, "supply filter "+one.Role
		}
		one.Series = series.String()
		if t, there := tolerances[series]; there {
			one.Tolerance = report.Of(t)
		}
		list = append(list, one)
	}
	amplifier := func(owner, name string) {
		if a := c.AmplifierNamed(name); a != nil {
			list = append(list, report.Part{Stage: owner, Role: "amplifier " + name, Key: "amplifier", Series: a.Model.Class, Unit: report.Piece})
		}
	}
	for i := range c.Biases {
		amplifier(c.Biases[i].Name, c.Biases[i].Buffer)
	}
	for i := range c.Stages {
		amplifier(c.Stages[i].Name, c.Stages[i].Amplifier)
	}
	return list
}
