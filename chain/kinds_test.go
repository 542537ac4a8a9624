package chain_test

import (
	"fmt"
	"slices"
	"strings"
	"testing"

	"midrail/chain"
)

// head and tail make a chain file of one stage named "it" between them.
const head = `
[supply]
voltage = "5V"
[bias.half]
top = "100k"
bottom = "100k"
buffer = "amp"
[amplifier.amp]
class = "cmos rail-to-rail"
[input.line]
kind = "line"
full_scale = "1Vrms"
[input.other]
kind = "line"
full_scale = "1Vrms"
[[stage]]
name = "used"
kind = "summer"
amplifier = "amp"
bias = "half"
r_f = "10k"
input = [{ from = "line", r = "10k" }, { from = "other", r = "10k" }, { from = "it", r = "10k" }]
`

const tail = `
[converter]
from = "used"
rate = "48kHz"
bits = 12
high = "5V"
`

// keysOf returns the lines of a stage of the kind that takes everything it can take.
func keysOf(k *chain.Kind) []string {
	lines := []string{`name = "it"`, fmt.Sprintf("kind = %q", k.Name)}
	switch {
	case k.Legs:
		lines = append(lines, `input = [{ from = "line", r = "1k" }, { from = "other", r = "2k", c = "1u" }]`)
	case k.Pick:
		lines = append(lines, `from = ["line", "other"]`, `pick = "other"`)
	default:
		lines = append(lines, `from = "line"`)
	}
	if k.Amplifier != chain.No {
		lines = append(lines, `amplifier = "amp"`)
	}
	if k.Bias != chain.No {
		lines = append(lines, `bias = "half"`)
	}
	if k.Leg {
		lines = append(lines, `leg = "bias"`)
	}
	if k.To {
		lines = append(lines, `to = "bias"`)
	}
	if k.Diodes {
		lines = append(lines, `forward = "0.3V"`, `to_supply = true`, `to_ground = true`)
	}
	if k.Polynomials {
		lines = append(lines, `numerator = [1]`, `denominator = [1e-4, 1]`)
	}
	if k.Own {
		lines = append(lines, `part = [{ r = "1k", between = ["in", "out"] }, { c = "1n", between = ["out", "bias"] }]`,
			`amplifier = [{ use = "amp", plus = "out", minus = "second", output = "second" }]`)
	}
	for i, p := range k.Parts {
		if p.Unit == chain.Ohm {
			lines = append(lines, fmt.Sprintf(`%s = "%dk"`, p.Key, i+1))
		} else {
			lines = append(lines, fmt.Sprintf(`%s = "%dn"`, p.Key, i+1))
		}
	}
	return lines
}

func stageFile(lines []string) string {
	return head + "[[stage]]\n" + strings.Join(lines, "\n") + tail
}

// without returns the lines but those that give one of the keys.
func without(lines []string, keys ...string) []string {
	return slices.DeleteFunc(slices.Clone(lines), func(line string) bool {
		key, _, _ := strings.Cut(line, " ")
		return slices.Contains(keys, key)
	})
}

// TestEveryKind holds each kind to what all promise: it reads with all that it takes and with no more than it needs,
// and tells of each key that is missing or is not its own.
func TestEveryKind(t *testing.T) {
	for _, k := range chain.Kinds() {
		t.Run(k.Name, func(t *testing.T) {
			if chain.KindNamed(k.Name).Name != k.Name || k.Connection == "" {
				t.Error("it is not found by its name, or nobody says how it is connected")
			}
			all := keysOf(k)
			s := mustRead(t, stageFile(all)).StageNamed("it")
			if s.Kind.Name != k.Name || (s.Amplifier == "amp") != (k.Amplifier != chain.No) || (s.Bias == "half") != (k.Bias != chain.No) {
				t.Errorf("stage is %+v", s)
			}
			if len(s.Parts) != len(k.Parts) {
				t.Fatalf("it has %d parts", len(s.Parts))
			}
			for i, key := range k.Parts {
				want := float64(i+1) * map[chain.Unit]float64{chain.Ohm: 1e3, chain.Farad: 1e-9}[key.Unit]
				p := s.Parts[i]
				near(t, key.Key, p.Value, want)
				if p.Key != key.Key || p.Name != "it."+key.Key || p.Unit != key.Unit {
					t.Errorf("part %d is %+v", i, p)
				}
			}
			switch {
			case k.Legs:
				if len(s.Legs) != 2 || len(s.From) != 2 || s.Legs[1].From != "other" || s.Legs[1].C == nil || s.Legs[0].R.Value != 1e3 {
					t.Errorf("legs are %+v", s.Legs)
				}
			case k.Pick:
				if len(s.From) != 2 || s.Pick != "other" {
					t.Errorf("from is %q, pick %q", s.From, s.Pick)
				}
			case len(s.From) != 1 || s.From[0] != "line":
				t.Errorf("from is %q", s.From)
			}

			// No more than it needs.
			var optional []string
			for _, p := range k.Parts {
				if p.Optional {
					optional = append(optional, p.Key)
				}
			}
			if k.Bias == chain.May {
				optional = append(optional, "bias", "leg", "to")
			}
			least := without(all, optional...)
			for i := range least { // what a bias that is not there held
				least[i] = strings.ReplaceAll(least[i], `"bias"]`, `"ground"]`)
			}
			s = mustRead(t, stageFile(least)).StageNamed("it")
			for _, p := range k.Parts {
				if _, there := s.Part(p.Key); there == p.Optional {
					t.Errorf("%s: there is %v", p.Key, there)
				}
			}
			if k.Leg != (s.Leg == "ground") || k.To != (s.To == "ground") {
				t.Errorf("leg is %q, to is %q", s.Leg, s.To)
			}

			// Each key that it needs.
			for _, line := range least {
				key, _, _ := strings.Cut(line, " ")
				if key == "to_supply" || key == "to_ground" || key == "amplifier" && k.Own {
					continue // one of the two does; a network need have none
				}
				faults := faultsOf(t, stageFile(without(least, key)))
				if !slices.ContainsFunc(faults, func(f chain.Fault) bool { return strings.HasSuffix(f.Text, " has no "+key) }) {
					t.Errorf("without %s:\n%v", key, faults)
				}
			}

			// Each key that another kind has, and none has.
			foreign := []string{"series", "supply_rejection"}
			for _, other := range chain.Kinds() {
				for _, line := range keysOf(other) {
					if key, _, _ := strings.Cut(line, " "); len(without(all, key)) == len(all) {
						foreign = append(foreign, key)
					}
				}
			}
			for _, key := range foreign {
				faults := faultsOf(t, stageFile(append(slices.Clone(all), key+" = 1")))
				if want := fmt.Sprintf(`stage "it" takes no %q`, key); len(faults) != 1 || faults[0].Text != want {
					t.Errorf("with %s:\n%v", key, faults)
				}
			}
		})
	}
	if chain.KindNamed("valve") != nil {
		t.Error("there is a kind that there is not")
	}
}
