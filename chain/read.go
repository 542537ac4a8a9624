package chain

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"midrail/chain/amplifier"
	"midrail/chain/quantity"
)

const (
	// mostBytes is the size of the largest chain file.
	mostBytes = 1 << 20
	// mostOf is how many there may be of each: inputs, stages, biases, amplifiers, interferers, inputs of a stage.
	// The circuit is solved as a whole, in time that grows with the cube of its size.
	mostOf = 200
	// mostFaults is how many faults are told at most.
	mostFaults = 100
)

// Read reads a chain file; name is what faults call it. Each of set is a "NAME.key=value" that gives a value before
// the file is read, where NAME is that of an input, a stage, a bias or an amplifier, or one of the file's single
// tables such as "supply"; "mix.voice.r=10k" is the leg of mix that comes from voice. A part keeps its ref and series.
//
// The chain is sound: every name is that of something, every stage leads from an input to the converter, and every
// value is within its range. The error is of type [Faults], all that is wrong in the order of the file, up to a
// hundred; those of a set come first. Of what is not TOML only the first fault is told.
func Read(name string, data []byte, set []string) (*Chain, error) {
	if len(data) > mostBytes {
		return nil, Faults{{File: name, Pos: Pos{1, 1}, Text: fmt.Sprintf("the file has more than %d bytes", mostBytes), Remedy: "is this a chain file?"}}
	}
	root, fault := parse(name, data)
	if fault != nil {
		return nil, Faults{*fault}
	}
	r := &reader{file: name}
	for _, one := range set {
		if fault := root.set(one); fault != nil {
			r.faults = append(r.faults, *fault)
		}
	}
	c := r.chain(root)
	r.checkNames(c)
	r.faults.sort()
	r.warnings.sort()
	if more := len(r.faults) - mostFaults; more > 0 {
		last := r.faults[mostFaults-1]
		r.faults = append(r.faults[:mostFaults], Fault{File: last.File, Pos: last.Pos, Text: fmt.Sprintf("and %d more faults from here on", more), Remedy: "mend the others first"})
	}
	if len(r.faults) > 0 {
		return nil, r.faults
	}
	c.Warnings = r.warnings
	return c, nil
}

func (r *reader) chain(root *node) *Chain {
	c := &Chain{File: r.file, Conditions: Conditions{Temperature: 298.15, NoiseFrom: 20}}
	t := r.table(root, "the chain file")
	c.Title, c.Notes = t.text("title", May), t.text("notes", May)
	var ripples []Interferer
	if s := t.sub("supply", Must); s != nil {
		c.Supply = Supply{Pos: s.node.at.pos, Voltage: s.si("voltage", Must, quantity.Voltage, 0.5, 60, 0)}
		c.Supply.Resistance = s.si("resistance", May, quantity.Resistance, 0, 1e4, 0)
		c.Supply.Noise = s.si("noise", May, quantity.NoiseVoltage, 0, 1e-3, 0)
		for _, ripple := range s.list("ripple", May) {
			ripple.name = "[supply], " + ripple.name
			ripples = append(ripples, ripple.ripple())
		}
		s.done()
	}
	if s := t.sub("conditions", May); s != nil {
		c.Conditions.Temperature = s.si("temperature", May, quantity.Temperature, 223.15, 473.15, c.Conditions.Temperature)
		c.Conditions.NoiseFrom = s.si("noise_from", May, quantity.Frequency, 1e-3, 1e5, c.Conditions.NoiseFrom)
		s.done()
	}
	c.Tolerance = Tolerance{Resistors: 0.01, Capacitors: 0.1, GainBandwidth: 0.3, Supply: 0.05}
	if s := t.sub("tolerance", May); s != nil {
		s.tolerances(&c.Tolerance)
	}
	t.each("bias", func(name string, s *table) { c.Biases = append(c.Biases, s.bias(name)) })
	t.each("amplifier", func(name string, s *table) { c.Amplifiers = append(c.Amplifiers, s.amplifier(name, c.Supply.Voltage)) })
	t.each("input", func(name string, s *table) { c.Inputs = append(c.Inputs, s.input(name)) })
	for _, s := range t.list("stage", May) {
		if stage, ok := s.stage(); ok {
			c.Stages = append(c.Stages, stage)
		}
	}
	if s := t.sub("converter", Must); s != nil {
		c.Converter = s.converter(c.Supply.Voltage)
	} else {
		r.unsure = true
	}
	for _, s := range t.list("interferer", May) {
		c.Interferers = append(c.Interferers, s.interferer(c))
	}
	c.Interferers = append(c.Interferers, ripples...)
	if s := t.sub("limits", May); s != nil {
		c.Limits = s.limits()
	}
	if !t.has("input") {
		t.fault(root.at, "the chain file has no input", "add [input.NAME]")
	}
	t.done()
	return c
}

// mostTolerance is the largest tolerance, and leastTolerance the smallest but none.
const leastTolerance, mostTolerance = 1e-6, 0.5

// tolerances reads the [tolerance] table into the defaults, which are common practice, no source.
func (t *table) tolerances(x *Tolerance) {
	x.Resistors = t.si("resistors", May, quantity.Ratio, 0, mostTolerance, x.Resistors)
	x.Capacitors = t.si("capacitors", May, quantity.Ratio, 0, mostTolerance, x.Capacitors)
	x.GainBandwidth = t.si("gain_bandwidth", May, quantity.Ratio, 0, mostTolerance, x.GainBandwidth)
	x.Supply = t.si("supply", May, quantity.Ratio, 0, mostTolerance, x.Supply)
	distribution, _ := t.choice("distribution", May, "uniform", "uniform", "normal")
	x.Normal = distribution == "normal"
	t.done()
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

// each reads the named tables [key.NAME].
func (t *table) each(key string, read func(name string, s *table)) {
	s := t.sub(key, May)
	if s == nil {
		t.unsure = t.unsure || t.has(key)
		return
	}
	for i, e := range s.entries {
		if i == mostOf {
			t.tooMany(key, e.keyAt)
			return
		}
		if e.shape != tableShape {
			t.fault(e.keyAt, fmt.Sprintf("%s.%s must be a table, not %s", key, short(e.key), e.shape), "write it as ["+key+".NAME]")
			t.unsure = true
			continue
		}
		t.give(e.key, key, e.keyAt)
		read(e.key, t.table(e.node, fmt.Sprintf("%s %q", key, short(e.key))))
	}
}

// list returns the tables [[key]].
func (t *table) list(key string, need Need) []*table {
	e := t.find(key, need)
	if e == nil {
		return nil
	}
	if e.shape != listShape {
		t.wrong(e, fmt.Sprintf("%s must be a list of tables, not %s", key, e.shape), "write each as [["+key+"]]")
		t.unsure = true
		return nil
	}
	var list []*table
	for i, item := range e.items {
		if i == mostOf {
			t.tooMany(key, item.at)
			break
		}
		if item.shape != tableShape {
			t.fault(item.at, fmt.Sprintf("%s must be a list of tables, not of %s", key, item.shape), "write each as [["+key+"]]")
			t.unsure = true
			continue
		}
		list = append(list, t.table(item, fmt.Sprintf("%s %d", key, i+1)))
	}
	return list
}

func (t *table) tooMany(what string, at place) {
	t.fault(at, fmt.Sprintf("there is more than %d of %s", mostOf, what), "split the chain")
	t.unsure = true
}

func (t *table) bias(name string) Bias {
	b := Bias{Name: name, Pos: t.node.at.pos}
	b.Top = t.required(name, "top", Ohm)
	b.Bottom = t.required(name, "bottom", Ohm)
	b.Bypass = t.part(name, "bypass", Farad, May)
	b.Buffer = t.refer("buffer", May, nil, anAmplifier)
	t.done()
	return b
}

func (t *table) amplifier(name string, supply float64) Amplifier {
	a := Amplifier{Name: name, Pos: t.node.at.pos}
	class, ok := t.choice("class", Must, "", amplifier.Classes()...)
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
		{"phase_margin", quantity.Angle, 5, 90, &m.PhaseMargin},
		{"supply_rejection", quantity.Ratio, 1, 1e8, &m.SupplyRejection},
		{"supply_rejection_corner", quantity.Frequency, 0.1, 1e8, &m.SupplyRejectionCorner},
	} {
		if v, ok := t.quantity(k.key, May, k.kind, k.low, k.high); ok {
			*k.into = v.SI
		}
	}
	t.done()
	if low, high := m.SwingLow, supply-m.SwingHigh; ok && supply > 0 && low >= high {
		t.fault(t.node.at, fmt.Sprintf("%s has no room to swing: on the supply of %s it reaches from %s to %s", t.name,
			quantity.Format(quantity.Voltage, supply), quantity.Format(quantity.Voltage, low), quantity.Format(quantity.Voltage, high)),
			"take another class, or give swing_high and swing_low")
	}
	return a
}

// pascals returns the pressure of a sound level in dB SPL.
func pascals(db float64) float64 { return quantity.Hearing * math.Pow(10, db/20) }

func (t *table) input(name string) Input {
	in := Input{Name: name, Pos: t.node.at.pos}
	kind, ok := t.choice("kind", Must, "", string(Line), string(Electret), string(Microphone))
	if !ok {
		return in // what its keys may be is not known
	}
	in.Kind = InputKind(kind)
	in.Channel = t.channel()
	in.OutputResistance, in.MaximumLevel = math.Inf(1), math.Inf(1)
	t.fullScale(&in)
	if in.Kind != Line {
		in.Sensitivity = t.si("sensitivity", Must, quantity.Sensitivity, 1e-6, 10, 0)
		in.SelfNoise = t.selfNoise()
	}
	switch in.Kind {
	case Line:
		in.SourceResistance = t.si("source_resistance", May, quantity.Resistance, 0, 1e9, 0)
	case Microphone:
		in.OutputResistance = t.si("output_resistance", May, quantity.Resistance, 0, 1e9, 0)
		in.Rest = t.si("rest", May, quantity.Voltage, 0, 60, 0)
		in.MaximumLevel = t.si("maximum_level", May, quantity.SoundLevel, pascals(40), pascals(194), in.MaximumLevel)
	case Electret:
		in.RatedLoad = t.si("rated_load", Must, quantity.Resistance, 10, 1e6, 0)
		in.Load = t.required(name, "load", Ohm)
		in.Current = t.si("current", Must, quantity.Current, 1e-6, 1e-2, 0)
		in.OutputResistance = t.si("output_resistance", May, quantity.Resistance, 10, 1e9, in.OutputResistance)
		in.MinimumVoltage = t.si("minimum_voltage", May, quantity.Voltage, 0, 20, 0)
		if f := t.sub("supply_filter", May); f != nil {
			f.name = t.name + ", supply_filter"
			in.SupplyFilter = &SupplyFilter{R: f.required(name+".supply_filter", "r", Ohm), C: f.required(name+".supply_filter", "c", Farad)}
			f.done()
		}
	}
	t.done()
	return in
}

// fullScale reads full_scale, or calibrate in its place.
func (t *table) fullScale(in *Input) {
	level, low, high := in.fullScaleRange()
	need := Must
	if t.has("calibrate") {
		need = May
	}
	if v, ok := t.quantity("full_scale", need, level, low, high); ok {
		in.FullScale, in.FullScaleUnit = v.SI, v.Unit
	}
	s := t.sub("calibrate", May)
	if s == nil {
		return
	}
	if e := t.get("full_scale"); e != nil {
		t.fault(e.keyAt, t.name+" has both full_scale and calibrate", "keep one")
	}
	s.name = t.name + ", calibrate"
	c := &Calibrate{Track: s.text("track", Must), To: math.Inf(1), Pos: s.node.at.pos}
	if e := s.get("track"); e != nil && e.shape == textShape && (e.text == "" || e.text == "-") {
		s.wrong(e, fmt.Sprintf("track is %q, no file", e.text), "name the calibration recording, from the chain file's folder")
	}
	if v, ok := s.quantity("reading", Must, level, low, high); ok {
		c.Reading, in.FullScaleUnit = v.SI, v.Unit
	}
	c.From = s.si("from", May, quantity.Time, 0, mostTrackSeconds, 0)
	c.To = s.si("to", May, quantity.Time, 0, mostTrackSeconds, c.To)
	if c.To <= c.From {
		s.wrong(s.get("to"), "to is not after from", "give a later one")
	}
	s.done()
	in.Calibrate = c
}

// mostTrackSeconds is the latest time in a recording that can be named: that of a day.
const mostTrackSeconds = 86400

// channel reads "mix", which is 0 and what an absent one stands for, or a number from 1.
func (t *table) channel() int {
	if e := t.get("channel"); e != nil && e.shape == textShape && e.node.at.set == "" && e.text != "mix" {
		t.find("channel", May)
		t.wrong(e, fmt.Sprintf("channel: %q is no channel", short(e.text)), `write 1, 2, … without quotes, or "mix"`)
		return 0
	}
	if e := t.get("channel"); e != nil && e.text == "mix" {
		t.find("channel", May)
		return 0
	}
	return t.integer("channel", May, 1, 64, 0)
}

// selfNoise reads self_noise, or snr, which is against a sound of 94 dB SPL.
func (t *table) selfNoise() float64 {
	noise := t.si("self_noise", May, quantity.SoundLevel, pascals(-40), pascals(120), 0)
	snr, ok := t.quantity("snr", May, quantity.Decibels, 1, 130)
	if t.has("self_noise") && t.has("snr") {
		t.fault(t.get("snr").keyAt, t.name+" has both self_noise and snr", "keep one")
	}
	if ok {
		return pascals(94 - snr.SI)
	}
	return noise
}

// stage reads a stage. It reports false where what its keys may be is not known.
func (t *table) stage() (s Stage, ok bool) {
	s = Stage{Pos: t.node.at.pos, Name: t.text("name", Must)}
	if e := t.get("name"); s.Name != "" {
		t.name = fmt.Sprintf("stage %q", short(s.Name))
		t.give(s.Name, aStage, e.node.at)
	} else if t.unsure, t.unnamed = true, true; e != nil && e.shape == textShape {
		t.wrong(e, "the name is empty", "give it one")
	}
	var all []string
	for _, k := range Kinds() {
		all = append(all, k.Name)
	}
	kind, ok := t.choice("kind", Must, "", all...)
	if !ok {
		t.unsure = true
		return s, false
	}
	s.Kind = KindNamed(kind)
	k := s.Kind
	t.about = fmt.Sprintf("%s is %s", k.Name, k.Connection)
	switch {
	case k.Legs:
		s.Legs = t.legs(s.Name)
		for _, l := range s.Legs {
			s.From = append(s.From, l.From)
		}
	case k.Pick:
		s.From, s.Pick = t.pick()
	default:
		s.From = []string{t.refer("from", Must, nil, anInput, aStage)}
	}
	if k.Amplifier != No {
		s.Amplifier = t.refer("amplifier", k.Amplifier, nil, anAmplifier)
	}
	if k.Bias != No {
		s.Bias = t.refer("bias", k.Bias, nil, aBias)
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
	if k.Diodes {
		t.diodes(&s)
	}
	if k.Polynomials {
		t.polynomials(&s)
	}
	if k.Own {
		t.own(&s)
	}
	if k.Leg {
		s.Leg, _ = t.choice("leg", May, "ground", "ground", "bias")
	}
	if k.To {
		s.To, _ = t.choice("to", May, "ground", "ground", "bias")
	}
	t.done()
	t.partsGoTogether(&s)
	return s, true
}

// diodes reads what a clamp has beside its resistor.
func (t *table) diodes(s *Stage) {
	s.Forward = t.si("forward", Must, quantity.Voltage, 0, 2, 0)
	s.ToSupply, s.ToGround = t.flag("to_supply"), t.flag("to_ground")
	if !s.ToSupply && !s.ToGround {
		t.fault(t.node.at, t.name+" has no diode", "add to_supply = true or to_ground = true")
	}
}

// flag reads true or false; an absent one is false.
func (t *table) flag(key string) bool {
	e := t.find(key, May)
	if e == nil {
		return false
	}
	if e.text != "true" && e.text != "false" || e.shape == listShape || e.shape == tableShape {
		t.wrong(e, key+" must be true or false", "write one of them without quotes")
	}
	return e.text == "true"
}

// highestOrder is the highest order of a transfer function.
const highestOrder = 12

// polynomials reads a transfer function.
func (t *table) polynomials(s *Stage) {
	s.Numerator, s.Denominator = t.coefficients("numerator"), t.coefficients("denominator")
	if s.Numerator == nil || s.Denominator == nil {
		return
	}
	if len(s.Numerator) > len(s.Denominator) {
		t.wrong(t.get("numerator"), "the numerator is of a higher order than the denominator: no amplifier does that", "raise the denominator's order")
	}
	if s.Denominator[len(s.Denominator)-1] == 0 {
		t.wrong(t.get("denominator"), "the denominator has a root at 0: the stage has no rest point", "end it in a number other than 0")
	}
}

// coefficients reads a list of numbers, of which the first is not 0.
func (t *table) coefficients(key string) []float64 {
	e := t.find(key, Must)
	if e == nil {
		return nil
	}
	if e.shape != listShape || len(e.items) == 0 || len(e.items) > highestOrder+1 {
		t.wrong(e, fmt.Sprintf("%s must be a list of 1 to %d numbers", key, highestOrder+1), "write the coefficients of s, highest first")
		return nil
	}
	var list []float64
	for _, item := range e.items {
		x, err := parseNumber(item.text)
		if item.shape != numberShape || err != nil || math.Abs(x) > 1e100 {
			t.fault(item.at, fmt.Sprintf("%s has an entry that is no number", key), "write the coefficients of s, highest first")
			return nil
		}
		list = append(list, x)
	}
	if list[0] == 0 {
		t.wrong(e, fmt.Sprintf("the first coefficient of the %s is 0", key), "leave it out")
		return nil
	}
	return list
}

// own reads the parts and amplifiers of a network.
func (t *table) own(s *Stage) {
	count := map[Unit]int{}
	letters := map[Unit]string{Ohm: "r", Farad: "c"}
	for _, p := range t.list("part", Must) {
		p.name = t.name + ", " + p.name
		if p.has("r") == p.has("c") {
			t.fault(p.node.at, p.name+" must have either r or c", "give one of them")
		}
		unit := Ohm
		if p.has("c") {
			unit = Farad
		}
		part := p.part(s.Name, letters[unit], unit, May)
		between := p.nodes()
		p.done()
		if part == nil {
			continue
		}
		count[unit]++
		part.Key = fmt.Sprintf("%s_%d", letters[unit], count[unit])
		part.Name = s.Name + "." + part.Key
		s.Branches = append(s.Branches, Branch{*part, between})
	}
	for _, a := range t.list("amplifier", May) {
		a.name = t.name + ", " + a.name
		u := Use{Amplifier: a.refer("use", Must, nil, anAmplifier), Plus: a.text("plus", Must), Minus: a.text("minus", Must), Output: a.text("output", Must)}
		if slices.Contains([]string{"in", "supply", "ground", "bias"}, u.Output) {
			t.wrong(a.get("output"), a.name+" drives "+u.Output+", which has its own voltage", "let it drive out or a node of your own")
		}
		a.done()
		s.Uses = append(s.Uses, u)
	}
	touched := func(node string) bool {
		for _, b := range s.Branches {
			if b.Between[0] == node || b.Between[1] == node {
				return true
			}
		}
		for _, u := range s.Uses {
			if u.Plus == node || u.Minus == node || u.Output == node {
				return true
			}
		}
		return false
	}
	for _, node := range [...]string{"in", "out"} {
		if !touched(node) {
			t.fault(t.node.at, fmt.Sprintf("%s has nothing at its node %q", t.name, node), "connect a part to it")
		}
	}
	if touched("bias") && !t.has("bias") {
		t.fault(t.node.at, t.name+" uses the node \"bias\" and has no bias", "add bias")
	}
	if t.has("bias") && !touched("bias") {
		t.fault(t.get("bias").keyAt, t.name+" has a bias on which nothing ends", "take it out")
	}
}

// nodes reads between = [NODE, NODE].
func (t *table) nodes() (between [2]string) {
	e := t.find("between", Must)
	if e == nil {
		return between
	}
	if e.shape != listShape || len(e.items) != 2 || e.items[0].shape != textShape || e.items[1].shape != textShape || e.items[0].text == e.items[1].text || e.items[0].text == "" || e.items[1].text == "" {
		t.wrong(e, "between must be two nodes", `write it as between = ["in", "out"]`)
		return between
	}
	return [2]string{e.items[0].text, e.items[1].text}
}

// legs reads the [[stage.input]] of a stage.
func (t *table) legs(stage string) []Leg {
	tables := t.list("input", Must)
	if e := t.get("input"); e != nil && e.shape == listShape && len(e.items) == 0 {
		t.wrong(e, t.name+" has no input", "add [[stage.input]]")
		t.unsure = true
	}
	var legs []Leg
	seen := map[string]bool{}
	for _, in := range tables {
		in.name = t.name + ", " + in.name
		from := in.refer("from", Must, nil, anInput, aStage)
		if from != "" && seen[from] {
			in.wrong(in.get("from"), fmt.Sprintf("%s takes %q twice", t.name, short(from)), "take one leg out")
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
	p := t.find("pick", Must)
	if e == nil {
		t.unsure = true
		return nil, ""
	}
	if e.shape != listShape || len(e.items) == 0 {
		t.wrong(e, "from must be a list of names", `write it as from = ["one", "other"]`)
		t.unsure = true
		return nil, ""
	}
	for i, item := range e.items {
		if i == mostOf {
			t.tooMany("from", item.at)
			break
		}
		if item.shape != textShape {
			t.fault(item.at, fmt.Sprintf("from must be a list of names, not of %s", item.shape), "put each in quotes")
			t.unsure = true
			continue
		}
		if slices.Contains(from, item.text) {
			t.fault(item.at, fmt.Sprintf("%s takes %q twice", t.name, short(item.text)), "take one out")
		}
		from = append(from, item.text)
		t.references = append(t.references, reference{at: item.at, who: t.name, key: "from", name: item.text, things: []string{anInput, aStage}})
	}
	if p != nil && (p.shape != textShape || !slices.Contains(from, p.text)) {
		t.wrong(p, fmt.Sprintf("%s picks what is not in its from", t.name), suggest(p.text, from, "pick one of "+short(strings.Join(from, ", "))))
		return from, ""
	}
	if p != nil {
		pick = p.text
	}
	return from, pick
}

// partsGoTogether tells of parts of a stage that need each other, and of a bias that nothing ends on.
func (t *table) partsGoTogether(s *Stage) {
	k := s.Kind
	for _, pair := range [...][2]string{{"r_a", "r_b"}, {"r_b", "r_a"}} {
		if t.has(pair[0]) && !t.has(pair[1]) && slices.Contains(t.known, pair[1]) {
			t.fault(t.get(pair[0]).keyAt, fmt.Sprintf("%s has %s without %s", t.name, pair[0], pair[1]), "give both, or neither for a gain of 1")
		}
	}
	if k.Bias != May || k.Own || k.Polynomials {
		return
	}
	var could []string // what may end on the bias
	ends := false
	for _, p := range k.Parts {
		if p.Key == "r_bias" || p.Key == "r_a" {
			could = append(could, p.Key)
			ends = t.endsOnBias(p.Key, t.has(p.Key)) || ends
		}
	}
	if k.Leg {
		could = append(could, `leg = "bias"`)
		ends = t.endsOnBias("leg", s.Leg == "bias") || ends
	}
	if k.To {
		could = append(could, `to = "bias"`)
		ends = t.endsOnBias("to", s.To == "bias") || ends
	}
	if t.has("bias") && !ends {
		t.fault(t.get("bias").keyAt, fmt.Sprintf("%s has a bias on which nothing ends", t.name), "take it out, or add "+strings.Join(could, " or "))
	}
	if t.has("c_in") && !t.has("r_bias") && slices.Contains(could, "r_bias") {
		t.fault(t.get("c_in").keyAt, fmt.Sprintf("%s has c_in without r_bias, so that its (+) input rests nowhere", t.name), "add r_bias and a bias, or take c_in out")
	}
}

// endsOnBias tells of a key that needs a bias where there is none, and returns does.
func (t *table) endsOnBias(key string, does bool) bool {
	if does && !t.has("bias") {
		t.fault(t.get(key).keyAt, fmt.Sprintf("%s has no bias for its %s to end on", t.name, key), "add bias")
	}
	return does
}

// Legal range of the converter's rate, in Hz.
const leastRate, mostRate = 100, 10e6

func (t *table) converter(supply float64) Converter {
	cv := Converter{Pos: t.node.at.pos}
	cv.From = t.refer("from", Must, nil, anInput, aStage)
	cv.Rate = t.rate()
	cv.Bits = t.integer("bits", Must, 1, 24, 24)
	t.span(&cv, supply)

	cv.SwitchResistance = t.si("switch_resistance", May, quantity.Resistance, 0, 1e6, 0)
	cv.SamplingCapacitor = t.si("sampling_capacitor", May, quantity.Capacitance, 1e-15, 1e-6, 0)
	cv.Acquisition = t.si("acquisition", May, quantity.Time, 1e-10, 1, 0)
	cv.PinCapacitor = t.si("pin_capacitor", May, quantity.Capacitance, 1e-15, 1e-3, 0)
	cv.SharesWith = t.refer("shares_with", May, []string{"ground"}, aStage)
	for _, key := range [...]string{"switch_resistance", "acquisition", "shares_with"} {
		if t.has(key) && !t.has("sampling_capacitor") {
			t.fault(t.get(key).keyAt, key+" does nothing without sampling_capacitor", "add it, or take this out")
		}
	}
	if t.has("sampling_capacitor") && !t.has("acquisition") {
		t.fault(t.get("sampling_capacitor").keyAt, "sampling_capacitor needs to know how long it charges", "add acquisition")
	}
	if cv.Rate > 0 && cv.Acquisition*cv.Rate > 1 {
		t.wrong(t.get("acquisition"), fmt.Sprintf("acquisition takes longer than a sample, %s", quantity.Format(quantity.Time, 1/cv.Rate)), "check it against the rate")
	}
	cv.ENOB = t.number("enob", May, 1, float64(cv.Bits), 0)
	cv.Jitter = t.si("jitter", May, quantity.Time, 0, 1e-3, 0)
	t.done()
	return cv
}

// rate reads the converter's rate, or clock and divide; 0 where it is wrong.
func (t *table) rate() float64 {
	rate := t.si("rate", May, quantity.Frequency, leastRate, mostRate, 0)
	clock := t.si("clock", May, quantity.Frequency, leastRate, 1e10, 0)
	divide := t.integer("divide", May, 1, 1e9, 0)
	if t.has("rate") {
		for _, key := range [...]string{"clock", "divide"} {
			if t.has(key) {
				t.fault(t.get(key).keyAt, fmt.Sprintf("%s has both rate and %s", t.name, key), "keep rate, or clock and divide")
			}
		}
		return rate
	}
	if !t.has("clock") || !t.has("divide") {
		t.fault(t.node.at, t.name+" has no rate", "add rate, or clock and divide")
		return 0
	}
	if clock == 0 || divide == 0 {
		return 0
	}
	rate = clock / float64(divide)
	if !(rate >= leastRate && rate <= mostRate) {
		t.wrong(t.get("divide"), fmt.Sprintf("clock by divide makes a rate of %s, out of range, %s to %s", quantity.Format(quantity.Frequency, rate),
			quantity.Format(quantity.Frequency, leastRate), quantity.Format(quantity.Frequency, mostRate)), "check both")
		return 0
	}
	return rate
}

// span reads the converter's low and high.
func (t *table) span(cv *Converter, supply float64) {
	// leastSpan keeps a 24-bit step well above the smallest difference between voltages of some volts.
	const leastSpan = 1e-3
	low, lowOK := t.quantity("low", May, quantity.Voltage, -60, 60)
	cv.Low = low.SI
	e := t.get("high")
	if e != nil && e.shape == textShape && e.text == "supply" {
		t.find("high", Must)
		cv.High, cv.HighIsSupply = supply, true
	} else {
		high, ok := t.quantity("high", Must, quantity.Voltage, -60, 60)
		if !ok {
			return
		}
		cv.High = high.SI
	}
	if (lowOK || !t.has("low")) && (!cv.HighIsSupply || supply > 0) && cv.High-cv.Low < leastSpan {
		t.wrong(e, fmt.Sprintf("the converter's span is too small: low is %s and high %s", quantity.Format(quantity.Voltage, cv.Low), quantity.Format(quantity.Voltage, cv.High)),
			"high is above low by "+quantity.Format(quantity.Voltage, leastSpan)+" or more")
	}
}

// ripple reads a ripple of the supply, which is an interferer into it.
func (t *table) ripple() Interferer {
	x := Interferer{Pos: t.node.at.pos, Into: "supply"}
	x.Frequency = t.si("frequency", Must, quantity.Frequency, 0.01, 1e7, 0)
	x.Shape, _ = t.choice("shape", May, "sine", "sine", "square", "saw")
	if v, ok := t.quantity("level", Must, quantity.Level, 1e-9, 60); ok {
		x.Level = peakOf(v, x.Shape)
	}
	t.done()
	return x
}

// peakOf returns the peak of a wave of the shape at a level. What is written as a peak is one whatever the shape; the RMS
// of a square is its peak, that of a saw its peak by √3.
func peakOf(v quantity.Value, shape string) float64 {
	if v.Unit != "Vp" && v.Unit != "Vpp" {
		switch shape {
		case "square":
			return v.SI
		case "saw":
			return v.SI * math.Sqrt(3)
		}
	}
	return v.Peak()
}

func (t *table) interferer(c *Chain) Interferer {
	x := Interferer{Pos: t.node.at.pos}
	x.Into = t.refer("into", Must, []string{"supply"}, anInput)
	x.Shape, _ = t.choice("shape", May, "sine", "sine", "square", "noise")
	noise := x.Shape == "noise"
	if noise {
		x.Frequency = t.si("frequency", May, quantity.Frequency, 0, 1e7, 0)
		x.Bandwidth = t.si("bandwidth", Must, quantity.Frequency, 1, 1e7, 0)
		if x.Frequency > 0 && x.Bandwidth > 2*x.Frequency {
			t.wrong(t.get("bandwidth"), "the noise goes below 0 Hz: bandwidth is more than twice its frequency, on which it is centred", "leave frequency out for noise from 0 Hz on")
		}
	} else {
		x.Frequency = t.si("frequency", Must, quantity.Frequency, 0.01, 1e7, 0)
	}
	kind, low, high := quantity.Level, 1e-9, 60.
	if in := c.InputNamed(x.Into); in != nil && in.Kind != Line {
		kind, low, high = quantity.SoundLevel, pascals(-40), pascals(174)
	} else if x.Into != "supply" && (in == nil || in.Kind == "") {
		t.find("level", Must) // what it is in is not known
		t.done()
		return x
	}
	if v, ok := t.quantity("level", Must, kind, low, high); ok {
		peak := v.Unit == "Vp" || v.Unit == "Vpp"
		switch {
		case noise && peak:
			t.wrong(t.get("level"), "noise has no peak", `give its level as RMS, as in "2mVrms"`)
		case noise:
			x.Level = v.SI
		default:
			x.Level = peakOf(v, x.Shape)
		}
	}
	t.done()
	return x
}

func (t *table) limits() Limits {
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
	if d := t.sub("droop", May); d != nil {
		d.name = "[limits], droop"
		l.Droop = &Droop{At: d.si("at", Must, quantity.Frequency, 0.1, 1e7, 0), Max: d.si("max", Must, quantity.Decibels, 0, 100, 0)}
		d.done()
	}
	l.Settling = one("settling", quantity.Time, 1e-6, 1e4)
	t.done()
	return l
}
