package chain

import (
	"fmt"
	"math"
	"sort"
	"strings"
	"unicode/utf8"

	"midrail/chain/amplifier"
	"midrail/chain/quantity"
)

const (
	// mostBytes is the largest chain file.
	mostBytes = 1 << 20
	// mostStages is the largest number of stages.
	mostStages = 200
	// mostFaults is how many faults are told at most.
	mostFaults = 100
)

// Read reads a chain file; name is what faults call it. Each of set is a "NAME.key=value" that changes a value before
// it is read. The error is of type [Faults]: all that is wrong, in the order of the file.
func Read(name string, data []byte, set []string) (*Chain, error) {
	if len(data) > mostBytes {
		return nil, Faults{{File: name, Text: "the file is larger than 1 MiB", Remedy: "a chain file has a few kilobytes; is this one?"}}
	}
	root, faults := parse(name, data)
	if faults != nil {
		return nil, faults
	}
	r := &reader{file: name}
	for _, one := range set {
		if f := root.set(one); f != nil {
			r.faults = append(r.faults, *f)
		}
	}
	c := &Chain{File: name}
	r.chain(root, c)
	if len(r.faults) == 0 {
		r.crossCheck(c)
	}
	if len(r.faults) > 0 {
		sort.SliceStable(r.faults, func(i, j int) bool { return r.faults[i].before(r.faults[j]) })
		if more := len(r.faults) - mostFaults; more > 0 {
			r.faults = append(r.faults[:mostFaults], Fault{File: name, Text: fmt.Sprintf("and %d more faults", more), Remedy: "mend these first"})
		}
		return nil, r.faults
	}
	c.Warnings = r.warnings
	return c, nil
}

func (f Fault) before(g Fault) bool {
	if f.Pos.Line != g.Pos.Line {
		return f.Pos.Line < g.Pos.Line
	}
	return f.Pos.Column < g.Pos.Column
}

func (r *reader) chain(root *node, c *Chain) {
	t := r.table(root, "the chain file")
	c.Title, c.Notes = t.text("title", May), t.text("notes", May)
	if s := t.sub("supply", Must); s != nil {
		c.Supply = r.supply(s)
	}
	c.Conditions = Conditions{Temperature: 298.15, NoiseFrom: 20}
	if s := t.sub("conditions", May); s != nil {
		c.Conditions.Temperature = s.si("temperature", May, quantity.Temperature, 200, 500, 298.15)
		c.Conditions.NoiseFrom = s.si("noise_from", May, quantity.Frequency, 1e-3, 1e5, 20)
		s.done()
	}
	for _, s := range t.subs("bias") {
		c.Biases = append(c.Biases, r.bias(s))
	}
	for _, s := range t.subs("amplifier") {
		c.Amplifiers = append(c.Amplifiers, r.amplifier(s))
	}
	for _, s := range t.subs("input") {
		c.Inputs = append(c.Inputs, r.input(s))
	}
	stages := t.list("stage")
	if len(stages) > mostStages {
		r.fault(stages[mostStages].node.pos, "", fmt.Sprintf("more than %d stages", mostStages), "split the chain")
		stages = stages[:mostStages]
	}
	for _, s := range stages {
		c.Stages = append(c.Stages, r.stage(s))
	}
	if s := t.sub("converter", Must); s != nil {
		c.Converter = r.converter(s, c.Supply.Voltage)
	}
	for _, s := range t.list("interferer") {
		c.Interferers = append(c.Interferers, r.interferer(s, c))
	}
	if s := t.sub("limits", May); s != nil {
		c.Limits = r.limits(s)
	}
	if len(c.Inputs) == 0 && !contains(names(root.entries), "input") {
		r.fault(Pos{1, 1}, "", "the chain has no input", "add [input.NAME]")
	}
	t.done()
}

func names(entries []*entry) []string {
	var list []string
	for _, e := range entries {
		list = append(list, e.key)
	}
	return list
}

// sub returns the table of a key, or nil.
func (t *table) sub(key string, need Need) *table {
	e := t.find(key, need)
	if e == nil {
		return nil
	}
	if e.shape != tableShape {
		t.wrong(e, fmt.Sprintf("%s must be a table, not %s", key, e.shape), "write it as ["+key+"]")
		return nil
	}
	return t.table(e.node, "["+key+"]")
}

// subs returns the named tables of a key, as [key.NAME].
func (t *table) subs(key string) []*table {
	s := t.sub(key, May)
	if s == nil {
		return nil
	}
	var list []*table
	for _, e := range s.node.entries {
		if e.shape != tableShape {
			t.fault(e.pos, e.origin, fmt.Sprintf("%s.%s must be a table, not %s", key, short(e.key), e.shape), "write it as ["+key+".NAME]")
			continue
		}
		t.nameIsGood(e.key, e.pos)
		e.node.pos = e.pos
		one := t.table(e.node, fmt.Sprintf("%s %q", key, short(e.key)))
		one.key = e.key
		list = append(list, one)
	}
	return list
}

// list returns the tables of a key, as [[key]].
func (t *table) list(key string) []*table {
	e := t.find(key, May)
	if e == nil {
		return nil
	}
	if e.shape != listShape {
		t.wrong(e, fmt.Sprintf("%s must be a list of tables, not %s", key, e.shape), "write each as [["+key+"]]")
		return nil
	}
	var list []*table
	for i, item := range e.items {
		if item.shape != tableShape {
			t.fault(item.pos, "", fmt.Sprintf("%s must be a list of tables", key), "write each as [["+key+"]]")
			continue
		}
		name := fmt.Sprintf("%s %d", key, i+1)
		if n := item.get("name"); n != nil && n.shape == textShape && key == "stage" {
			name = fmt.Sprintf("stage %q", short(n.text))
		}
		list = append(list, t.table(item, name))
	}
	return list
}

func (r *reader) nameIsGood(name string, pos Pos) {
	switch {
	case name == "":
		r.fault(pos, "", "a name is empty", "give it one")
	case utf8.RuneCountInString(name) > longestName:
		r.fault(pos, "", fmt.Sprintf("a name is longer than %d characters", longestName), "shorten it")
	case strings.ContainsAny(name, ".=\n\r\t"):
		r.fault(pos, "", fmt.Sprintf("the name %q has a point, an equals sign or a break in it", name), "take it out; --set needs it")
	case name == "supply" || name == "ground" || name == "converter":
		r.fault(pos, "", fmt.Sprintf("the name %q is taken", name), "choose another")
	}
}

func (r *reader) supply(t *table) Supply {
	s := Supply{Pos: t.node.pos, Voltage: t.si("voltage", Must, quantity.Voltage, 0.5, 60, 3.3)}
	t.done()
	return s
}

func (r *reader) bias(t *table) Bias {
	b := Bias{Name: t.key, Pos: t.node.pos}
	b.Top = t.required(t.key, "top", Ohm)
	b.Bottom = t.required(t.key, "bottom", Ohm)
	b.Bypass = t.part(t.key, "bypass", Farad, May)
	b.Buffer, _ = t.nameRef("buffer", May)
	t.done()
	return b
}

func (r *reader) amplifier(t *table) Amplifier {
	a := Amplifier{Name: t.key, Pos: t.node.pos}
	class := t.choice("class", Must, amplifier.Classes()...)
	a.Model, _ = amplifier.Class(class)
	m := &a.Model
	for _, k := range []struct {
		key       string
		kind      quantity.Kind
		low, high float64
		into      *float64
	}{
		{"gain_bandwidth", quantity.Frequency, 1e3, 1e10, &m.GainBandwidth},
		{"open_loop_gain", quantity.Ratio, 10, 1e9, &m.OpenLoopGain},
		{"slew_rate", quantity.SlewRate, 1e2, 1e11, &m.SlewRate},
		{"swing_high", quantity.Voltage, 0, 30, &m.SwingHigh},
		{"swing_low", quantity.Voltage, 0, 30, &m.SwingLow},
		{"swing_load", quantity.Resistance, 10, mostOhms, &m.SwingLoad},
		{"output_resistance", quantity.Resistance, 0, 1e5, &m.OutputResistance},
		{"current_source", quantity.Current, 1e-6, 10, &m.CurrentSource},
		{"current_sink", quantity.Current, 1e-6, 10, &m.CurrentSink},
		{"common_mode_high", quantity.Voltage, -30, 30, &m.CommonModeHigh},
		{"common_mode_low", quantity.Voltage, -30, 30, &m.CommonModeLow},
		{"offset", quantity.Voltage, -0.1, 0.1, &m.Offset},
		{"bias_current", quantity.Current, -1e-4, 1e-4, &m.BiasCurrent},
		{"noise_voltage", quantity.NoiseVoltage, 0, 1e-5, &m.NoiseVoltage},
		{"noise_voltage_corner", quantity.Frequency, 0, 1e6, &m.NoiseVoltageCorner},
		{"noise_current", quantity.NoiseCurrent, 0, 1e-8, &m.NoiseCurrent},
		{"noise_current_corner", quantity.Frequency, 0, 1e6, &m.NoiseCurrentCorner},
	} {
		if v, ok := t.quantity(k.key, May, k.kind, k.low, k.high); ok {
			*k.into = v.SI
		}
	}
	t.done()
	return a
}

func (r *reader) input(t *table) Input {
	in := Input{Name: t.key, Pos: t.node.pos, FullScale: 1, MaximumLevel: math.Inf(1)}
	in.Kind = InputKind(t.choice("kind", Must, string(Line), string(Electret), string(Microphone)))
	in.Channel = t.channel()
	if in.Kind == Line {
		v, ok := t.quantity("full_scale", Must, quantity.Level, 1e-6, 100)
		if ok {
			in.FullScale, in.FullScaleUnit = v.SI, v.Unit
		}
		in.SourceResistance = t.si("source_resistance", May, quantity.Resistance, 0, 1e9, 0)
		t.done()
		return in
	}
	if v, ok := t.quantity("full_scale", Must, quantity.SoundLevel, 1e-5, 1e4); ok {
		in.FullScale, in.FullScaleUnit = v.SI, v.Unit
	}
	in.Sensitivity = t.si("sensitivity", Must, quantity.Sensitivity, 1e-6, 10, 1)
	in.SelfNoise = t.selfNoise()
	if in.Kind == Microphone {
		in.OutputResistance = t.si("output_resistance", May, quantity.Resistance, 0, 1e9, 0)
		in.Rest = t.si("rest", May, quantity.Voltage, 0, 60, 0)
		in.MaximumLevel = t.si("maximum_level", May, quantity.SoundLevel, 1e-3, 1e5, math.Inf(1))
		t.done()
		return in
	}
	in.RatedLoad = t.si("rated_load", Must, quantity.Resistance, 10, 1e6, 1)
	in.Load = t.required(t.key, "load", Ohm)
	in.Current = t.si("current", Must, quantity.Current, 1e-6, 1e-2, 1)
	in.OutputResistance = t.si("output_resistance", May, quantity.Resistance, 10, 1e9, math.Inf(1))
	in.MinimumVoltage = t.si("minimum_voltage", May, quantity.Voltage, 0, 20, 0)
	if f := t.sub("supply_filter", May); f != nil {
		in.SupplyFilter = &SupplyFilter{R: f.required(t.key+".supply_filter", "r", Ohm), C: f.required(t.key+".supply_filter", "c", Farad)}
		f.done()
	}
	t.done()
	return in
}

// channel reads "mix" or a number from 1.
func (t *table) channel() int {
	e := t.node.get("channel")
	if e != nil && e.shape == textShape && e.text == "mix" {
		t.known = append(t.known, "channel")
		return 0
	}
	return t.integer("channel", May, 1, 64, 0)
}

// selfNoise reads self_noise, or snr against 94 dB SPL (1 Pa).
func (t *table) selfNoise() float64 {
	noise := t.si("self_noise", May, quantity.SoundLevel, 1e-7, 1e3, 0)
	e := t.node.get("snr")
	snr := t.si("snr", May, quantity.Decibels, 1, 150, 0)
	if e == nil || snr == 0 {
		return noise
	}
	if t.node.get("self_noise") != nil {
		t.wrong(e, t.name+" has both self_noise and snr", "keep one")
	}
	return quantity.Hearing * math.Pow(10, (94-snr)/20)
}

func (r *reader) stage(t *table) Stage {
	s := Stage{Pos: t.node.pos, Name: t.text("name", Must)}
	if e := t.node.get("name"); e != nil {
		r.nameIsGood(s.Name, e.node.pos)
	}
	var all []string
	for _, k := range Kinds() {
		all = append(all, k.Name)
	}
	e := t.find("kind", Must)
	if e == nil {
		s.Kind = &Kind{}
		return s
	}
	if s.Kind = kindNamed(e.text); s.Kind == nil || e.shape != textShape {
		t.wrong(e, fmt.Sprintf("%s: there is no stage kind %q", t.name, short(e.text)), suggest(e.text, all, "the kinds are "+strings.Join(all, ", ")))
		s.Kind = &Kind{}
		return s
	}
	k := s.Kind
	switch {
	case k.Legs:
		s.Legs = r.legs(t, s.Name)
		for _, l := range s.Legs {
			s.From = append(s.From, l.From)
		}
	case k.Pick:
		s.From, s.Pick = t.pick()
	default:
		from, _ := t.nameRef("from", Must)
		s.From = []string{from}
	}
	if k.Amplifier != No {
		s.Amplifier, _ = t.nameRef("amplifier", k.Amplifier)
	}
	if k.Bias != No {
		s.Bias, _ = t.nameRef("bias", k.Bias)
	}
	for _, key := range k.Parts {
		need := Must
		if key.Optional {
			need = May
		}
		if p := t.part(s.Name, key.Key, key.Unit, need); p != nil {
			s.Parts = append(s.Parts, *p)
		}
	}
	if k.Leg {
		s.Leg = t.choice("leg", May, "ground", "bias")
	}
	if k.To {
		s.To = t.choice("to", May, "ground", "bias")
	}
	t.done()
	r.stageIsWhole(t, &s)
	return s
}

// legs reads the [[stage.input]] of a stage.
func (r *reader) legs(t *table, stage string) []Leg {
	e := t.find("input", Must)
	if e == nil {
		return nil
	}
	if e.shape != listShape || len(e.items) == 0 {
		t.wrong(e, t.name+": input must be a list of tables", "write each as [[stage.input]]")
		return nil
	}
	var legs []Leg
	seen := map[string]bool{}
	for i, item := range e.items {
		if item.shape != tableShape {
			t.fault(item.pos, "", t.name+": input must be a list of tables", "write each as [[stage.input]]")
			continue
		}
		in := r.table(item, fmt.Sprintf("%s, input %d", t.name, i+1))
		from, pos := in.nameRef("from", Must)
		if seen[from] && from != "" {
			r.fault(pos, "", fmt.Sprintf("%s takes %q twice", t.name, short(from)), "take one leg out")
		}
		seen[from] = true
		owner := stage + "." + from
		legs = append(legs, Leg{From: from, R: in.required(owner, "r", Ohm), C: in.part(owner, "c", Farad, May)})
		in.done()
	}
	return legs
}

// pick reads from = […] and pick of a select.
func (t *table) pick() (from []string, pick string) {
	e := t.find("from", Must)
	pick, pos := t.nameRef("pick", Must)
	if e == nil {
		return nil, pick
	}
	if e.shape != listShape || len(e.items) == 0 {
		t.wrong(e, t.name+": from must be a list of names", `write it as from = ["one", "other"]`)
		return nil, pick
	}
	for _, item := range e.items {
		if item.shape != textShape {
			t.fault(item.pos, "", t.name+": from must be a list of names", "put each in quotes")
			continue
		}
		from = append(from, item.text)
	}
	if pick != "" && !contains(from, pick) {
		origin := t.node.get("pick").origin
		t.fault(pos, origin, fmt.Sprintf("%s picks %q, which is not in its from", t.name, short(pick)), suggest(pick, from, "pick one of its from"))
	}
	return from, pick
}

// stageIsWhole tells of parts that need each other.
func (r *reader) stageIsWhole(t *table, s *Stage) {
	has := func(key string) bool { _, ok := s.Part(key); return ok }
	missing := func(text, remedy string) { r.fault(s.Pos, "", t.name+" "+text, remedy) }
	if has("r_a") != has("r_b") {
		missing("has only one of r_a and r_b", "give both, or neither for a gain of 1")
	}
	for _, needs := range []struct {
		it   bool
		what string
	}{{has("r_a"), "r_a ends"}, {has("r_bias"), "r_bias ends"}, {s.Leg == "bias", "its leg ends"}, {s.To == "bias", "it ends"}} {
		if needs.it && s.Bias == "" && s.Kind.Bias == May {
			missing("has no bias, on which "+needs.what, "add bias")
		}
	}
	if has("c_in") && !has("r_bias") && s.Kind.Bias == May {
		missing("has a c_in but no r_bias, so its (+) input rests nowhere", "add r_bias, or take c_in out")
	}
}

func (r *reader) converter(t *table, supply float64) Converter {
	cv := Converter{Pos: t.node.pos}
	cv.From, _ = t.nameRef("from", Must)
	rate, clock, divide := t.node.get("rate"), t.node.get("clock"), t.node.get("divide")
	cv.Rate = t.si("rate", May, quantity.Frequency, 100, 10e6, 8000)
	hz := t.si("clock", May, quantity.Frequency, 100, 1e10, 8e6)
	by := t.si("divide", May, quantity.Ratio, 1, 1e9, 1000)
	switch {
	case rate != nil && (clock != nil || divide != nil):
		t.wrong(rate, "the converter has both a rate and a clock", "keep the rate, or clock and divide")
	case rate == nil && (clock == nil || divide == nil):
		r.fault(t.node.pos, "", "the converter has no rate", "add rate, or clock and divide")
	case rate == nil:
		if cv.Rate = hz / by; cv.Rate < 100 || cv.Rate > 10e6 {
			t.wrong(clock, fmt.Sprintf("clock/divide is %s, out of range, 100 Hz to 10 MHz", quantity.Format(quantity.Frequency, cv.Rate)), "check both")
			cv.Rate = 8000
		}
	}
	cv.Bits = t.integer("bits", Must, 1, 24, 10)
	cv.Low = t.si("low", May, quantity.Voltage, -60, 60, 0)
	if e := t.node.get("high"); e != nil && e.shape == textShape && e.text == "supply" {
		t.known = append(t.known, "high")
		cv.High, cv.HighIsSupply = supply, true
	} else {
		cv.High = t.si("high", Must, quantity.Voltage, -60, 60, cv.Low+1)
	}
	if span := cv.High - cv.Low; span < 1e-3 {
		r.fault(t.node.pos, "", "the converter's high is not above its low", "check both")
		cv.High = cv.Low + 1
	}
	cv.SwitchResistance = t.si("switch_resistance", May, quantity.Resistance, 0, 1e6, 0)
	cv.SamplingCapacitor = t.si("sampling_capacitor", May, quantity.Capacitance, 1e-15, 1e-6, 0)
	cv.Acquisition = t.si("acquisition", May, quantity.Time, 1e-10, 1, 0)
	cv.PinCapacitor = t.si("pin_capacitor", May, quantity.Capacitance, 1e-15, 1e-3, 0)
	cv.SharesWith, _ = t.nameRef("shares_with", May)
	if (cv.SamplingCapacitor > 0) != (cv.Acquisition > 0) {
		r.fault(t.node.pos, "", "sampling_capacitor and acquisition go together", "give both, or neither")
	}
	if cv.Acquisition*cv.Rate > 1 {
		t.wrong(t.node.get("acquisition"), "acquisition is longer than the time between two samples", "check it against the rate")
	}
	for _, key := range [...]string{"switch_resistance", "shares_with"} {
		if e := t.node.get(key); e != nil && cv.SamplingCapacitor == 0 {
			t.wrong(e, key+" does nothing without sampling_capacitor and acquisition", "add them, or take it out")
		}
	}
	cv.ENOB = t.si("enob", May, quantity.Ratio, 1, float64(cv.Bits), 0)
	cv.Jitter = t.si("jitter", May, quantity.Time, 0, 0.1/cv.Rate, 0)
	t.done()
	return cv
}

func (r *reader) interferer(t *table, c *Chain) Interferer {
	x := Interferer{Pos: t.node.pos}
	x.Into, _ = t.nameRef("into", Must)
	x.Shape = t.choice("shape", May, "sine", "square", "noise")
	least, need := 0.01, Must
	if x.Shape == "noise" {
		least, need = 0, May
		x.Bandwidth = t.si("bandwidth", Must, quantity.Frequency, 1, 1e6, 1000)
	}
	x.Frequency = t.si("frequency", need, quantity.Frequency, least, 1e6, 0)
	kind, low, high := quantity.Level, 1e-9, 60.
	if in := c.InputNamed(x.Into); in != nil && in.Kind != Line {
		kind, low, high = quantity.SoundLevel, 1e-7, 1e4
	}
	if v, ok := t.quantity("level", Must, kind, low, high); ok {
		// A square wave's RMS is its peak; a sine's is less.
		x.Level = v.Peak()
		if x.Shape == "noise" || x.Shape == "square" && v.Unit != "Vp" && v.Unit != "Vpp" {
			x.Level = v.SI
		}
	}
	t.done()
	return x
}

func (r *reader) limits(t *table) Limits {
	var l Limits
	one := func(key string, kind quantity.Kind, low, high float64) *float64 {
		if v, ok := t.quantity(key, May, kind, low, high); ok {
			return &v.SI
		}
		return nil
	}
	l.OverloadTime = one("overload_time", quantity.Ratio, 0, 1)
	l.FoldBack = one("fold_back", quantity.Decibels, -200, 20)
	l.FoldBackBelowWanted = one("fold_back_below_wanted", quantity.Decibels, 0, 200)
	l.Interference = one("interference", quantity.Decibels, -200, 20)
	l.Noise = one("noise", quantity.Decibels, -200, 20)
	l.Room = one("room", quantity.Decibels, -60, 100)
	l.Settling = one("settling", quantity.Time, 1e-6, 1e4)
	if d := t.sub("droop", May); d != nil {
		l.Droop = &Droop{At: d.si("at", Must, quantity.Frequency, 0.1, 1e6, 1000), Max: d.si("max", Must, quantity.Decibels, 0, 100, 1)}
		d.done()
	}
	t.done()
	return l
}
