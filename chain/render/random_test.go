package render

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strconv"
	"strings"
)

// randomChain writes the chain file that a seed stands for: one to three inputs, one to eight stages of every kind in any
// order, parts over nine decades, ideal and real amplifiers. Its impedances are times one factor and its frequencies times
// the other, without changing what was drawn.
func randomChain(seed uint64, impedance, frequency float64) string {
	w := &chainWriter{draw: rand.New(rand.NewPCG(seed, 0)), impedance: impedance, frequency: frequency}
	w.write()
	return w.text.String()
}

type chainWriter struct {
	draw                 *rand.Rand
	text                 strings.Builder
	impedance, frequency float64
}

func (w *chainWriter) line(format string, a ...any) { fmt.Fprintf(&w.text, format+"\n", a...) }

// per writes a key with a value that is multiplied by a factor.
func (w *chainWriter) per(key string, value, factor float64) {
	w.line("%s = %s", key, strconv.FormatFloat(value*factor, 'e', -1, 64))
}

func (w *chainWriter) often(share float64) bool { return w.draw.Float64() < share }

// decades draws from low to high, every decade alike.
func (w *chainWriter) decades(low, high float64) float64 {
	return low * math.Pow(high/low, w.draw.Float64())
}

// ohms and farads draw mostly what a board has, now and then anything over nine decades.
func (w *chainWriter) ohms() float64 {
	if w.often(0.7) {
		return w.decades(1e3, 1e6)
	}
	return w.decades(1, 1e9)
}

func (w *chainWriter) farads() float64 {
	if w.often(0.7) {
		return w.decades(1e-10, 1e-5)
	}
	return w.decades(1e-12, 1e-3)
}

func (w *chainWriter) r(key string) { w.per(key, w.ohms(), w.impedance) }

func (w *chainWriter) c(key string) { w.per(key, w.farads(), 1/(w.impedance*w.frequency)) }

func (w *chainWriter) maybe(part func(string), key string) (there bool) {
	if there = w.often(0.5); there {
		part(key)
	}
	return there
}

func (w *chainWriter) write() {
	supply := w.decades(1.8, 24)
	w.line("[supply]")
	w.per("voltage", supply, 1)
	if w.often(0.5) {
		w.per("resistance", w.decades(0.1, 100), w.impedance)
	}
	w.line("[bias.half]")
	w.r("top")
	w.r("bottom")
	w.maybe(w.c, "bypass")
	buffered := w.often(0.3)
	if buffered {
		w.line("buffer = %q", "bias amp")
	}
	var open []string
	for i := range 1 + w.draw.IntN(3) {
		name := fmt.Sprintf("input %d", i)
		w.input(name)
		open = append(open, name)
	}
	kinds := []string{"inverting", "summer", "non-inverting", "follower", "sallen-key low-pass", "sallen-key high-pass", "multiple-feedback low-pass",
		"rc low-pass", "rc high-pass", "divider", "biased coupling", "passive sum", "clamp", "transfer function", "network", "select"}
	var stages strings.Builder
	header := w.text.String()
	usesBias := false
	names := []string{"bias amp"}
	amplifier := func() string {
		name := fmt.Sprintf("amp %d", len(names))
		names = append(names, name)
		return name
	}
	all := []string{}
	count := 1 + w.draw.IntN(8)
	for i := 0; i < count || len(open) > 1; i++ {
		w.text.Reset()
		kind := kinds[w.draw.IntN(len(kinds))]
		if i >= count {
			kind = [...]string{"summer", "passive sum", "select"}[w.draw.IntN(3)]
		}
		name := fmt.Sprintf("stage %d", i)
		w.draw.Shuffle(len(open), func(a, b int) { open[a], open[b] = open[b], open[a] })
		from := open[:1]
		switch kind {
		case "summer", "passive sum", "select":
			from = open[:1+w.draw.IntN(len(open))]
			if i >= count {
				from = open
			}
		}
		w.line("[[stage]]\nname = %q\nkind = %q", name, kind)
		usesBias = w.stage(kind, from, amplifier) || usesBias
		stages.WriteString(w.text.String())
		open = append([]string{name}, open[len(from):]...)
		if len(all) > 0 && i < count && w.often(0.1) { // a node that feeds two
			if extra := all[w.draw.IntN(len(all))]; !strings.Contains(strings.Join(open, ","), extra) {
				open = append(open, extra)
			}
		}
		all = append(all, name)
	}
	w.text.Reset()
	if !usesBias { // nothing may be there that nothing uses
		at := strings.Index(header, "[bias.half]")
		end := at + strings.Index(header[at:], "[input.")
		header = header[:at] + header[end:]
		buffered = false
	}
	w.text.WriteString(header)
	for i, name := range names {
		if i > 0 || buffered {
			w.amplifier(name, supply)
		}
	}
	w.text.WriteString(stages.String())
	w.line("[converter]\nfrom = %q\nbits = %d", open[0], 6+w.draw.IntN(19))
	w.per("rate", w.decades(8e3, 96e3), w.frequency)
	if w.often(0.3) {
		w.line("high = \"supply\"")
	} else {
		w.per("high", w.decades(1, supply), 1)
	}
	if w.often(0.3) {
		w.per("pin_capacitor", w.decades(1e-12, 1e-10), 1/(w.impedance*w.frequency))
	}
}

func (w *chainWriter) input(name string) {
	kind := [...]string{"line", "electret", "microphone"}[w.draw.IntN(3)]
	w.line("[input.%q]\nkind = %q", name, kind)
	if kind == "line" {
		w.line("full_scale = \"%gVrms\"", w.decades(1e-3, 10))
		if w.often(0.7) {
			w.per("source_resistance", w.decades(1, 1e6), w.impedance)
		}
		return
	}
	w.line("full_scale = \"%gdBSPL\"", 60+80*w.draw.Float64())
	w.line("sensitivity = \"%gV/Pa\"", w.decades(1e-3, 0.1))
	if kind == "microphone" {
		w.per("output_resistance", w.decades(10, 1e4), w.impedance)
		w.per("rest", 3*w.draw.Float64(), 1)
		if w.often(0.5) {
			w.line("maximum_level = \"%gdBSPL\"", 90+50*w.draw.Float64())
		}
		return
	}
	w.per("rated_load", w.decades(680, 1e4), w.impedance)
	w.per("load", w.decades(680, 1e5), w.impedance)
	w.per("current", w.decades(5e-5, 1e-3), 1/w.impedance)
	if w.often(0.5) {
		w.per("output_resistance", w.decades(1e3, 1e6), w.impedance)
	}
	if w.often(0.5) {
		w.per("minimum_voltage", w.draw.Float64(), 1)
	}
	if w.often(0.5) {
		w.line("[input.%q.supply_filter]", name)
		w.r("r")
		w.c("c")
	}
}

func (w *chainWriter) amplifier(name string, supply float64) {
	if w.often(0.25) {
		w.line("[amplifier.%q]\nclass = \"ideal\"", name)
		return
	}
	w.line("[amplifier.%q]\nclass = \"cmos rail-to-rail\"", name)
	w.per("gain_bandwidth", w.decades(1e5, 1e8), w.frequency)
	w.per("open_loop_gain", w.decades(1e3, 1e7), 1)
	w.per("slew_rate", w.decades(5e4, 5e7), w.frequency)
	w.per("swing_high", supply*0.4*w.draw.Float64(), 1)
	w.per("swing_low", supply*0.4*w.draw.Float64(), 1)
	w.per("swing_load", w.decades(1e3, 1e5), w.impedance)
	resistance := 0.
	if w.often(0.8) {
		resistance = w.decades(1, 3e3)
	}
	w.per("output_resistance", resistance, w.impedance)
	w.per("offset", 0.01*(w.draw.Float64()-0.5), 1)
	w.per("bias_current", 1e-7*(w.draw.Float64()-0.5), 1/w.impedance)
	// A rising rejection stands on a resistor of its own, which no impedance scales.
	w.per("supply_rejection", w.decades(1e2, 1e6), 1)
	w.per("supply_rejection_corner", w.decades(1, 1e5), w.frequency)
}

// stage writes a stage's keys and reports whether it used the bias.
func (w *chainWriter) stage(kind string, from []string, amplifier func() string) (bias bool) {
	switch kind {
	case "summer", "passive sum":
	case "select":
		w.line("from = [\"%s\"]\npick = %q", strings.Join(from, `", "`), from[w.draw.IntN(len(from))])
	default:
		w.line("from = %q", from[0])
	}
	needs := func(is bool) {
		if is && !bias {
			w.line("bias = \"half\"")
			bias = true
		}
	}
	amp := func() { w.line("amplifier = %q", amplifier()) }
	switch kind {
	case "inverting":
		amp()
		needs(true)
		w.r("r_in")
		w.maybe(w.c, "c_in")
		w.r("r_f")
		w.maybe(w.c, "c_f")
	case "summer":
		amp()
		needs(true)
		w.r("r_f")
		w.maybe(w.c, "c_f")
	case "non-inverting":
		amp()
		if w.often(0.7) {
			needs(true)
			w.maybe(w.c, "c_in")
			w.r("r_bias")
		}
		w.r("r_f")
		w.maybe(w.c, "c_f")
		w.r("r_g")
		w.maybe(w.c, "c_g")
		if w.often(0.5) {
			w.line("leg = \"bias\"")
			needs(true)
		}
	case "follower":
		amp()
		if w.often(0.7) {
			needs(true)
			w.maybe(w.c, "c_in")
			w.r("r_bias")
		}
	case "sallen-key low-pass":
		amp()
		w.r("r_1")
		w.r("r_2")
		w.c("c_1")
		w.c("c_2")
		if w.often(0.5) {
			needs(true)
			a := w.ohms()
			w.per("r_a", a, w.impedance)
			w.per("r_b", a*w.draw.Float64()+0.1, w.impedance)
		}
	case "sallen-key high-pass":
		amp()
		needs(true)
		w.c("c_1")
		w.c("c_2")
		w.r("r_1")
		w.r("r_2")
	case "multiple-feedback low-pass":
		amp()
		needs(true)
		w.r("r_1")
		w.r("r_2")
		w.r("r_3")
		w.c("c_1")
		w.c("c_2")
	case "rc low-pass":
		w.r("r")
		w.c("c")
	case "rc high-pass":
		w.r("r")
		w.c("c")
		if w.often(0.5) {
			w.line("to = \"bias\"")
			needs(true)
		}
	case "divider":
		w.r("r_top")
		w.r("r_bottom")
		w.maybe(w.c, "c_top")
		w.maybe(w.c, "c_bottom")
		if w.often(0.5) {
			w.line("to = \"bias\"")
			needs(true)
		}
	case "biased coupling":
		w.c("c")
		w.r("top")
		w.r("bottom")
	case "passive sum":
		w.maybe(w.r, "r_load")
	case "clamp":
		w.r("r")
		w.per("forward", 0.7*w.draw.Float64(), 1)
		toGround := w.often(0.7)
		w.line("to_ground = %v\nto_supply = %v", toGround, !toGround || w.often(0.5))
	case "transfer function":
		amp()
		needs(w.often(0.5))
		// Poles in the left half plane: a product of (s/ω + 1) and (s²/ω² + s/(ωQ) + 1).
		denominator := []float64{1}
		for range 1 + w.draw.IntN(3) {
			ω := 2 * math.Pi * w.decades(10, 1e5) * w.frequency
			if w.often(0.5) {
				denominator = product(denominator, []float64{1 / ω, 1})
			} else {
				denominator = product(denominator, []float64{1 / (ω * ω), 1 / (ω * w.decades(0.3, 5)), 1})
			}
		}
		numerator := []float64{w.decades(0.1, 10)}
		if w.often(0.3) {
			numerator = []float64{denominator[0] * w.draw.Float64(), numerator[0]}
			for len(numerator) < len(denominator) {
				numerator = append(numerator[:1], append([]float64{0}, numerator[1:]...)...)
			}
		}
		w.line("numerator = %s\ndenominator = %s", list(numerator), list(denominator))
	case "network":
		w.own(amplifier, &bias)
	}
	if kind == "summer" || kind == "passive sum" {
		for _, f := range from {
			w.line("[[stage.input]]\nfrom = %q", f)
			w.r("r")
			w.maybe(w.c, "c")
		}
	}
	return bias
}

// own writes a network of a chain of parts from in to out, some across it, and an amplifier or none.
func (w *chainWriter) own(amplifier func() string, bias *bool) {
	nodes := []string{"in", "a", "b", "out"}
	*bias = w.often(0.5)
	ends := []string{"ground", "supply"}
	var parts strings.Builder
	keep := w.text.String()
	w.text.Reset()
	part := func(a, b string) {
		w.line("[[stage.part]]\nbetween = [%q, %q]", a, b)
		if w.often(0.5) {
			w.r("r")
		} else {
			w.c("c")
		}
	}
	for i := range nodes[1:] {
		part(nodes[i], nodes[i+1])
	}
	w.line("[[stage.part]]\nbetween = [%q, \"ground\"]", "a")
	w.r("r")
	if *bias {
		w.line("[[stage.part]]\nbetween = [\"b\", \"bias\"]")
		w.r("r")
	} else {
		w.line("[[stage.part]]\nbetween = [\"b\", %q]", ends[w.draw.IntN(2)])
		w.r("r")
	}
	for range w.draw.IntN(3) {
		a, b := w.draw.IntN(4), w.draw.IntN(4)
		if a != b {
			part(nodes[a], nodes[b])
		}
	}
	if w.often(0.5) {
		w.line("[[stage.part]]\nbetween = [\"out\", \"m\"]")
		w.r("r")
		w.line("[[stage.part]]\nbetween = [\"m\", \"ground\"]")
		w.r("r")
		w.line("[[stage.amplifier]]\nuse = %q\nplus = \"b\"\nminus = \"m\"\noutput = \"out\"", amplifier())
	} else {
		w.line("[[stage.part]]\nbetween = [\"out\", \"ground\"]")
		w.r("r")
	}
	parts.WriteString(w.text.String())
	w.text.Reset()
	w.text.WriteString(keep)
	if *bias {
		w.line("bias = \"half\"")
	}
	w.text.WriteString(parts.String())
}

// product multiplies two polynomials, highest coefficient first.
func product(a, b []float64) []float64 {
	p := make([]float64, len(a)+len(b)-1)
	for i, x := range a {
		for j, y := range b {
			p[i+j] += x * y
		}
	}
	return p
}

func list(x []float64) string {
	words := make([]string, len(x))
	for i, v := range x {
		words[i] = strconv.FormatFloat(v, 'e', -1, 64)
	}
	return "[" + strings.Join(words, ", ") + "]"
}
