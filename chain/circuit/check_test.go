package circuit_test

import (
	"fmt"
	"strings"
	"testing"

	"midrail/chain"
	"midrail/chain/circuit"
)

// A circuit that cannot be solved is a fault in one line, at a place, that names what to look at.
func TestCircuitsThatCannotBeSolvedAreFaults(t *testing.T) {
	const head = `[supply]
voltage = 3.3
[bias.half]
top = "10k"
bottom = "10k"
[input.in]
kind = "line"
full_scale = "1Vrms"
[amplifier.quad]
class = "cmos rail-to-rail"
output_resistance = 0
`
	const tail = `[converter]
from = "last"
rate = 8000
bits = 10
high = 3.3
`
	var many strings.Builder
	from := "in"
	for i := range 60 {
		name := fmt.Sprintf("stage %d", i)
		if i == 59 {
			name = "last"
		}
		fmt.Fprintf(&many, "[[stage]]\nname = %q\nkind = \"inverting\"\nfrom = %q\namplifier = \"quad\"\nbias = \"half\"\nr_in = 1e4\nr_f = 1e4\nc_f = 1e-9\n", name, from)
		from = name
	}
	const network = "[[stage]]\nname = \"last\"\nkind = \"network\"\nfrom = \"in\"\nbias = \"half\"\n"
	part := func(a, b string) string { return fmt.Sprintf("[[stage.part]]\nr = 1e4\nbetween = [%q, %q]\n", a, b) }
	amplifier := func(minus string) string {
		return fmt.Sprintf("[[stage.amplifier]]\nuse = \"quad\"\nplus = \"bias\"\nminus = %q\noutput = \"out\"\n", minus)
	}
	transfer := func(denominator string) string {
		return "[[stage]]\nname = \"last\"\nkind = \"transfer function\"\nfrom = \"in\"\namplifier = \"quad\"\nbias = \"half\"\nnumerator = [1]\ndenominator = " + denominator + "\n"
	}
	for name, c := range map[string]struct{ stages, wants string }{
		"too many":      {many.String(), "more than the 300 that are solved as a whole"},
		"driven twice":  {network + part("in", "x") + part("x", "out") + amplifier("x") + amplifier("x"), "drive the node “last”"},
		"wild function": {transfer("[1e-90, 1, 1e90]"), `stage "last": the coefficients of its transfer function are too far apart`},
		"slow function": {transfer("[1e90, 1]"), `stage "last"`},
		"unsteady":      {transfer("[1e-6, -1e-4, 1]"), "the circuit oscillates by itself"},
		"running to a limit": {network + part("in", "x") + part("x", "out") +
			"[[stage.amplifier]]\nuse = \"quad\"\nplus = \"x\"\nminus = \"bias\"\noutput = \"out\"\n", "the circuit latches"},
	} {
		t.Run(name, func(t *testing.T) {
			read, err := chain.Read("test.toml", []byte(head+c.stages+tail), nil)
			if err != nil {
				t.Fatal(err)
			}
			err = circuit.New(read).Check()
			faults, ok := err.(chain.Faults)
			if !ok || len(faults) != 1 || faults[0].Pos.Line < 1 || strings.ContainsRune(err.Error(), '\n') || !strings.Contains(err.Error(), c.wants) {
				t.Errorf("it reads\n%v\nwant %q", err, c.wants)
			}
		})
	}
}
