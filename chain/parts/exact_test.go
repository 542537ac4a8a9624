package parts_test

import (
	"fmt"
	"math"
	"math/cmplx"
	"strings"
	"testing"

	"midrail/chain"
	"midrail/chain/alignment"
	"midrail/chain/circuit"
	"midrail/chain/parts"
	"midrail/chain/quantity"
)

// asWhole is how near the exact response of the nearest choices together is to that of their f0 and Q, in dB up to the
// corner: the amplifiers' fast poles, a decade and more above, are not among those, four of them at the most.
const asWhole = 0.02

// nominal is how near it is to the alignment that is wanted, in dB up to the corner: preferred values land within a few
// tenths of a percent of f0 and Q, which sections of high Q turn into tenths of a dB.
const nominal = 0.25

// Filters of every order from 2 to 8, of both kinds, found for an amplifier of 30 times their corner, respond as their f0
// and Q say, in the exact network with that amplifier; and nearer to what is wanted than those that were found for an ideal
// amplifier do.
func TestFiltersWithAmplifiers(t *testing.T) {
	const corner, gbw = 10e3, 3e5
	for _, kind := range []parts.Kind{parts.SallenKeyKind, parts.MultipleFeedbackKind} {
		for order := 2; order <= alignment.Highest; order++ {
			wanted, err := alignment.Sections(alignment.Butterworth, order)
			if err != nil {
				t.Fatal(err)
			}
			var predistorted, plain []parts.Choice
			var told []alignment.Section
			for _, s := range wanted {
				w := parts.Wish{Kind: kind, F0: s.F0 * corner, Q: s.Q, GainBandwidth: gbw}
				if s.Q == 0 {
					w.Kind = parts.RCKind
				}
				best := parts.Find(w, 1)
				if len(best) == 0 {
					t.Fatalf("%s, order %d: no values for Q %g", kind, order, s.Q)
				}
				predistorted = append(predistorted, best[0])
				told = append(told, alignment.Section{F0: best[0].F0, Q: best[0].Q})
				w.GainBandwidth = 0
				plain = append(plain, parts.Find(w, 1)[0])
			}
			with, without := network(t, kind, predistorted, gbw), network(t, kind, plain, gbw)
			asTold, off, offPlain := 0., 0., 0.
			for f := corner / 50; f <= corner; f *= 1.05 {
				got := with(f)
				asTold = math.Max(asTold, math.Abs(got-20*math.Log10(cmplx.Abs(alignment.Response(told, f)))))
				want := 20 * math.Log10(cmplx.Abs(alignment.Response(wanted, f/corner)))
				off, offPlain = math.Max(off, math.Abs(got-want)), math.Max(offPlain, math.Abs(without(f)-want))
			}
			t.Logf("%s, order %d: as told within %.3f dB, as wanted within %.3f dB, without predistortion %.3f dB", kind, order, asTold, off, offPlain)
			if !(asTold <= asWhole) {
				t.Errorf("%s, order %d: the exact response is %.3f dB from what f0 and Q say", kind, order, asTold)
			}
			if !(off <= nominal && off < offPlain) {
				t.Errorf("%s, order %d: %.3f dB from what is wanted, without predistortion %.3f dB", kind, order, off, offPlain)
			}
		}
	}
}

// network returns the exact gain in dB, against that at a thousandth of 10 kHz, of sections in a row.
func network(t *testing.T, kind parts.Kind, sections []parts.Choice, gbw float64) func(f float64) float64 {
	var b strings.Builder
	b.WriteString("[supply]\nvoltage = \"5V\"\n[input.line]\nkind = \"line\"\nfull_scale = \"1Vrms\"\n")
	fmt.Fprintf(&b, "[amplifier.one]\nclass = \"ideal\"\ngain_bandwidth = %g\nopen_loop_gain = \"160dB\"\n", gbw)
	if kind == parts.MultipleFeedbackKind {
		b.WriteString("[bias.half]\ntop = \"10k\"\nbottom = \"10k\"\n")
	}
	if sections[0].Q == 0 {
		b.WriteString("[amplifier.ideal]\nclass = \"ideal\"\n") // keeps the next section from loading the first
	}
	from := "line"
	ohm := func(x float64) string { return quantity.FormatCode(quantity.Resistance, x) }
	farad := func(x float64) string { return quantity.FormatCode(quantity.Capacitance, x) }
	for i, s := range sections {
		name := fmt.Sprintf("section %d", i)
		fmt.Fprintf(&b, "[[stage]]\nname = %q\nfrom = %q\n", name, from)
		switch {
		case s.Q == 0:
			fmt.Fprintf(&b, "kind = \"rc low-pass\"\nr = %q\nc = %q\n[[stage]]\nname = \"buffer\"\nfrom = %q\nkind = \"follower\"\namplifier = \"ideal\"\n", ohm(s.R1), farad(s.C1), name)
			name = "buffer"
		case kind == parts.SallenKeyKind:
			fmt.Fprintf(&b, "kind = %q\namplifier = \"one\"\nr_1 = %q\nr_2 = %q\nc_1 = %q\nc_2 = %q\n", kind, ohm(s.R1), ohm(s.R2), farad(s.C1), farad(s.C2))
		default:
			fmt.Fprintf(&b, "kind = %q\namplifier = \"one\"\nbias = \"half\"\nr_1 = %q\nr_2 = %q\nr_3 = %q\nc_1 = %q\nc_2 = %q\n", kind, ohm(s.R1), ohm(s.R2), ohm(s.R3), farad(s.C1), farad(s.C2))
		}
		from = name
	}
	fmt.Fprintf(&b, "[converter]\nfrom = %q\nrate = 48000\nbits = 12\nlow = 0\nhigh = 5\n", from)
	text := b.String()
	c, err := chain.Read("test.toml", []byte(text), nil)
	if err != nil {
		t.Fatalf("%v in\n%s", err, text)
	}
	n := circuit.New(c)
	gain := func(f float64) float64 { return circuit.Gain(n.At(f).Into(n.Output).Input(circuit.SoundInput(0))) }
	flat := gain(10)
	return func(f float64) float64 { return gain(f) - flat }
}

// S of Q in closed form: ½ − r/(r1 + r2) for a Sallen-Key's resistors and ±½ for its capacitors; f0 goes by −½ of each, a
// multiple-feedback stage's gain by r2/r1.
func TestSensitivities(t *testing.T) {
	const rounding = 1e-6 // of differences of a ten-thousandth
	near := func(what string, got, want float64) {
		if !(math.Abs(got-want) <= rounding) {
			t.Errorf("%s: %.8f, want %.8f", what, got, want)
		}
	}
	c := parts.Find(parts.Wish{Kind: parts.SallenKeyKind, F0: 3e3, Q: 1.3}, 1)[0]
	for i, q := range []float64{0.5 - c.R1/(c.R1+c.R2), 0.5 - c.R2/(c.R1+c.R2), 0.5, -0.5} {
		s := c.Sensitivities[i]
		near("sallen-key, Q by "+s.Part, s.Q, q)
		near("sallen-key, f0 by "+s.Part, s.F0, -0.5)
		near("sallen-key, gain by "+s.Part, s.Gain, 0)
	}
	c = parts.Find(parts.Wish{Kind: parts.MultipleFeedbackKind, F0: 3e3, Q: 1.3, Gain: 2}, 1)[0]
	third := c.R2 * c.R3 / c.R1
	sum := c.R2 + c.R3 + third
	for i, want := range [][3]float64{{0, third / sum, -1}, {-0.5, 0.5 - (c.R2+third)/sum, 1}, {-0.5, 0.5 - (c.R3+third)/sum, 0}, {-0.5, -0.5, 0}, {-0.5, 0.5, 0}} {
		s := c.Sensitivities[i]
		near("multiple-feedback, f0 by "+s.Part, s.F0, want[0])
		near("multiple-feedback, Q by "+s.Part, s.Q, want[1])
		near("multiple-feedback, gain by "+s.Part, s.Gain, want[2])
	}
}
