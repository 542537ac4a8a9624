package residue

import (
	"fmt"
	"math"
	"strings"

	"midrail/chain/circuit"
	"midrail/chain/quantity"
	"midrail/chain/render"
	"midrail/chain/response"
	"midrail/chain/room"
)

// Severity ranks findings.
type Severity string

// The severities.
const (
	Stop    Severity = "stop"    // do not order this board
	Caution Severity = "caution" // look at it
	Note    Severity = "note"    // good to know
)

// Finding is something that a colleague would say of the run.
type Finding struct {
	Severity Severity
	About    string // stage, layer or part of the chain
	Text     string
}

const (
	// closeFold is how near to the wanted layer fold-back may come before it is cautioned of, in dB.
	closeFold = 40
	// unproven is how much the chain must take off at half the track's rate, against its loudest, for what the track
	// does not hold to be of no account, in dB.
	unproven = 60
	// offCentre is the difference of the two rooms of an amplifier that is worth a word, in dB.
	offCentre = 3
)

// Findings returns what there is to say of a run of a network whose amplifiers' loops have the given margins, the gravest
// first.
func Findings(n *circuit.Network, r *render.Result, res *Residue, margins []response.Margin) []Finding {
	f := &finder{n: n, r: r, res: res}
	f.resting()
	f.loops(margins)
	f.overloads()
	f.foldBack()
	f.unseen()
	f.noise()
	var sorted []Finding
	for _, s := range [...]Severity{Stop, Caution, Note} {
		for _, one := range f.list {
			if one.Severity == s {
				sorted = append(sorted, one)
			}
		}
	}
	return sorted
}

type finder struct {
	n    *circuit.Network
	r    *render.Result
	res  *Residue
	list []Finding
}

func (f *finder) say(s Severity, about, format string, args ...any) {
	f.list = append(f.list, Finding{s, about, fmt.Sprintf(format, args...)})
}

// loops tells of amplifiers that are near to oscillating.
func (f *finder) loops(margins []response.Margin) {
	for _, m := range margins {
		if m.Phase < response.Wary {
			f.say(Caution, m.Amplifier, "the loop of %s has %.0f° of phase margin left: it rings, and may oscillate; a capacitor on its output wants a resistor in between", m.Amplifier, m.Phase)
		}
	}
}

// resting tells of amplifiers that rest on a limit or whose inputs rest outside their range.
func (f *finder) resting() {
	for k, a := range f.n.Amplifiers {
		if a.Virtual {
			continue
		}
		v := func(node int) float64 { return f.r.At.Volts[node] }
		e := f.r.At.Sources[k]
		switch {
		case e >= a.High:
			f.say(Stop, a.Name, "%s rests on its upper limit, %s: without a signal it is already stuck", a.Name, volts(v(a.Out)))
		case e <= a.Low:
			f.say(Stop, a.Name, "%s rests on its lower limit, %s: without a signal it is already stuck", a.Name, volts(v(a.Out)))
		}
		low, high := a.Model.CommonModeLow, f.n.Chain.Supply.Voltage-a.Model.CommonModeHigh
		if p := v(a.Plus); p < low || p > high {
			f.say(Stop, a.Name, "the inputs of %s rest at %s, outside the %s to %s in which they work", a.Name, volts(p), volts(low), volts(high))
		}
	}
}

// overloads tells of every limit that was passed, with the value that would fit.
func (f *finder) overloads() {
	for _, o := range f.r.Overloads {
		times := fmt.Sprintf("%s, first at %s", count(o.Events), clock(o.First))
		worst := ""
		if o.Worst.Over > 0.05 {
			worst = fmt.Sprintf(", worst %.1f dB over", o.Worst.Over)
		}
		switch o.Kind {
		case render.UpperLimit, render.LowerLimit:
			side := "upper"
			if o.Kind == render.LowerLimit {
				side = "lower"
			}
			f.say(Stop, o.Owner, "%s runs into its %s limit %s%s%s", o.Owner, side, times, worst, f.fit(o.Owner))
		case render.Slew:
			f.say(Stop, o.Owner, "%s cannot follow: it slews %s%s; a faster amplifier or less swing would do", o.Owner, times, worst)
		case render.CutOff:
			f.say(Stop, o.Owner, "the capsule %s runs out of drain current %s%s: sound this loud needs a capsule with more current or less sensitivity", o.Owner, times, worst)
		case render.Saturated:
			f.say(Stop, o.Owner, "the capsule %s runs down to its lowest drain voltage %s: a smaller load would give it room", o.Owner, times)
		case render.Clamped:
			f.say(Caution, o.Owner, "the clamp %s conducts %s: what it cuts off is in overload", o.Owner, times)
		case render.TooLoud:
			f.say(Stop, o.Owner, "the microphone %s is given more than its maximum level %s%s", o.Owner, times, worst)
		case render.CommonMode:
			f.say(Caution, o.Owner, "an input of %s leaves the range in which it works %s; this is watched, not simulated: real amplifiers may stick or turn over there", o.Owner, times)
		case render.OutputCurrent:
			f.say(Caution, o.Owner, "%s is asked for more current than its output gives %s%s; this is watched, not simulated", o.Owner, times, worst)
		case render.ConverterRange:
			f.say(Stop, o.Owner, "the converter's span is left %s%s", times, worst)
		}
	}
	for k, a := range f.n.Amplifiers {
		f.centre(k, a)
	}
}

// fit returns the words for the part that would make the owner's excursions fit, said once for each owner.
func (f *finder) fit(owner string) string {
	for k, a := range f.n.Amplifiers {
		if a.Name != owner {
			continue
		}
		if e := f.r.At.Sources[k]; e >= a.High || e <= a.Low {
			return "" // less gain does not free what rests on its limit
		}
		part, value, _, ok := room.Fit(f.n, f.r, k)
		if !ok {
			return ""
		}
		name := part.Key
		if !strings.HasPrefix(part.Name, owner+".") {
			name = part.Name
		}
		if part.Ref != "" {
			name += " (" + part.Ref + ")"
		}
		return fmt.Sprintf("; %s = %s would just fit", name, quantity.FormatCode(quantity.Resistance, value))
	}
	return ""
}

// centre tells where an amplifier that has less than 6 dB left does not rest midway between its limits.
func (f *finder) centre(k int, a circuit.Amplifier) {
	x := f.r.Amplifiers[k]
	up, down := x.LimitHigh-x.Rest, x.Rest-x.LimitLow
	if up <= 0 || down <= 0 || x.Room() > 6 {
		return
	}
	if d := 20 * math.Log10(up/down); math.Abs(d) >= offCentre {
		side := "upper"
		if d > 0 {
			side = "lower"
		}
		f.say(Caution, a.Name, "%s rests at %s, %.1f dB nearer to its %s limit; midway is %s", a.Name, volts(x.Rest), math.Abs(d), side, volts((x.LimitHigh+x.LimitLow)/2))
	}
}

func (f *finder) foldBack() {
	fold, wanted := f.res.Layers[render.FoldBack], f.res.Layers[render.Wanted]
	if math.IsInf(fold.RMS, -1) || math.IsInf(wanted.RMS, -1) {
		return
	}
	below := wanted.RMS - fold.RMS
	s := Note
	if below < closeFold {
		s = Caution
	}
	f.say(s, "fold-back", "what lies above half the rate folds back %.1f dB below the wanted sound (%s, A-weighted %s); a higher rate, a lower corner or a higher order brings it down",
		below, dBFS(fold.RMS), dBFS(fold.A))
}

// unseen tells where the track cannot show what the chain would fold.
func (f *finder) unseen() {
	half := f.n.Chain.Converter.Rate / 2
	top := f.r.Plan.To
	if top <= half {
		f.say(Caution, "fold-back", "the track holds nothing above half its own rate, %s, so it cannot show what folds back above %s; interferers can stand in",
			quantity.Format(quantity.Frequency, top), quantity.Format(quantity.Frequency, half))
		return
	}
	for i := range f.n.Inputs {
		in := circuit.SoundInput(i)
		gain := func(at float64) float64 { return circuit.Gain(f.n.At(at).Into(f.n.Output).Input(in)) }
		peak := math.Inf(-1)
		for x := range 61 {
			peak = math.Max(peak, gain(20*math.Pow(10, float64(x)/20)))
		}
		if loss := peak - gain(top); loss < unproven {
			f.say(Note, "fold-back", "at half the track's rate, %s, the chain takes off no more than %.0f dB of %s: sound above it, which the track does not hold, may fold back too",
				quantity.Format(quantity.Frequency, top), loss, f.n.Chain.Inputs[i].Name)
		}
	}
}

func (f *finder) noise() {
	if f.r.Overloaded > 0 && !math.IsInf(f.res.Layers[render.Noise].RMS, -1) {
		f.say(Note, "noise", "while an amplifier is overloaded the noise drawn here is too high: the stage does not amplify then")
	}
}

// clock prints a time as 0:03.2.
func clock(s float64) string {
	tenths := int64(math.Floor(s*10 + 1e-6))
	return fmt.Sprintf("%d:%02d.%d", tenths/600, tenths/10%60, tenths%10)
}

func count(n int64) string {
	if n == 1 {
		return "once"
	}
	return fmt.Sprintf("%d times", n)
}

func volts(v float64) string { return quantity.Format(quantity.Voltage, v) }

func dBFS(x float64) string { return strings.Replace(fmt.Sprintf("%.1f dBFS", x), "-", "−", 1) }

// Limit is one of the owner's limits held against the run.
type Limit struct {
	Name         string
	Limit, Value float64 // Value is NaN where the run cannot tell
	Holds        bool
}

// Limits holds the chain's limits against a run; settling is the time in s that the chain takes to 1 % of its rest.
func Limits(n *circuit.Network, r *render.Result, res *Residue, settling float64) []Limit {
	l := &n.Chain.Limits
	var list []Limit
	most := func(name string, limit *float64, value float64) {
		if limit != nil {
			list = append(list, Limit{name, *limit, value, value <= *limit})
		}
	}
	least := func(name string, limit *float64, value float64) {
		if limit != nil {
			list = append(list, Limit{name, *limit, value, value >= *limit})
		}
	}
	most("overload_time", l.OverloadTime, r.Overloaded/r.Seconds)
	most("fold_back", l.FoldBack, res.Layers[render.FoldBack].RMS)
	below := res.BelowWanted(render.FoldBack)
	if math.IsInf(res.Layers[render.FoldBack].RMS, -1) {
		below = math.Inf(1)
	}
	least("fold_back_below_wanted", l.FoldBackBelowWanted, below)
	most("interference", l.Interference, res.Layers[render.Interference].RMS)
	most("noise", l.Noise, res.Layers[render.Noise].RMS)
	nearest := math.Inf(1)
	for _, a := range r.Amplifiers {
		nearest = math.Min(nearest, a.Room())
	}
	least("room", l.Room, nearest)
	if d := l.Droop; d != nil {
		most("droop", &d.Max, Droop(n, d.At))
	}
	most("settling", l.Settling, settling)
	return list
}

// Droop returns the largest loss at f of any input against its mid-band gain in dB. Mid-band is where the gain is
// largest between 20 Hz and f.
func Droop(n *circuit.Network, f float64) float64 {
	worst := math.Inf(-1)
	for i := range n.Inputs {
		in := circuit.SoundInput(i)
		gain := func(at float64) float64 { return circuit.Gain(n.At(at).Into(n.Output).Input(in)) }
		mid := math.Inf(-1)
		for x := range 61 {
			mid = math.Max(mid, gain(20*math.Pow(f/20, float64(x)/60)))
		}
		worst = math.Max(worst, mid-gain(f))
	}
	return worst
}
