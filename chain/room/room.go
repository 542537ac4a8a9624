package room

import (
	"context"
	"math"
	"slices"

	"midrail/chain"
	"midrail/chain/circuit"
	"midrail/chain/noise"
	"midrail/chain/parts"
	"midrail/chain/render"
	"midrail/signals"
	"midrail/signals/tone"
)

// Stage is how far a stage's amplifier is taken, and how far it may go. Voltages are those of its output, as the
// linear chain asks, with the load that its swing is stated for.
type Stage struct {
	Name                string
	Lowest, Highest     float64 // V
	LimitLow, LimitHigh float64 // V
	Down, Up            float64 // dB left (+) or missing (−) to either side; +Inf where nothing is asked for
	// The level at which it first clips, as the RMS of a sine at each of the chain's inputs (V or Pa): of a sine at 1 kHz,
	// and, by its peaks, of this track.
	Sine, Track []float64
}

// Converter is what the converter is called among the stages.
const Converter = "converter"

// Heard is a run, and how far the linear chain would have taken the converter's input.
type Heard struct {
	*render.Result
	Lowest, Highest float64 // full scale, from the rest; [Heard.Write] keeps them
}

// Write takes a block of the run.
func (h *Heard) Write(b *render.Block) {
	for i, v := range b.Layers[render.Wanted] {
		v += b.Layers[render.FoldBack][i] + b.Layers[render.Interference][i]
		h.Lowest, h.Highest = math.Min(h.Lowest, v), math.Max(h.Highest, v)
	}
}

// converterRoom returns what is left below and above in dB.
func (h *Heard) converterRoom() (down, up float64) {
	return left(1+h.Rest, -h.Lowest), left(1-h.Rest, h.Highest)
}

// converter is the converter as a stage.
func (h *Heard) converter(n *circuit.Network) Stage {
	volts := func(x float64) float64 { return h.Span.Middle() + x*h.Span.Unit() }
	s := Stage{Name: Converter, Lowest: volts(h.Rest + h.Lowest), Highest: volts(h.Rest + h.Highest), LimitLow: h.Span.Low, LimitHigh: h.Span.High}
	s.Down, s.Up = h.converterRoom()
	nearer := math.Max(1-math.Abs(h.Rest), 0) * h.Span.Unit()
	into := n.At(1000).Into(n.Output)
	for i := range n.Inputs {
		full := n.Chain.Inputs[i].FullScale
		s.Sine = append(s.Sine, full*nearer/(abs(n.Inputs[i].Scale)*magnitude(into.Input(circuit.SoundInput(i)))))
		s.Track = append(s.Track, full*math.Pow(10, math.Min(s.Down, s.Up)/20))
	}
	return s
}

// Of tells the room of every stage that a run went through, and of the converter.
func Of(n *circuit.Network, r *Heard) []Stage {
	exact := n.At(1000)
	var stages []Stage
	for k, a := range n.Amplifiers {
		x := r.Amplifiers[k]
		if a.Virtual {
			continue
		}
		s := Stage{Name: a.Name}
		s.LimitLow, s.LimitHigh = a.Reach()
		s.Down, s.Up = left(x.Rest-x.LimitLow, x.Rest-x.Lowest), left(x.LimitHigh-x.Rest, x.Highest-x.Rest)
		rest := r.At.Volts[a.Out]
		s.Lowest, s.Highest = rest+(x.Lowest-x.Rest)*ratio(s.LimitLow-rest, x.LimitLow-x.Rest), rest+(x.Highest-x.Rest)*ratio(s.LimitHigh-rest, x.LimitHigh-x.Rest)
		nearer := math.Min(x.LimitHigh-x.Rest, x.Rest-x.LimitLow)
		for i := range n.Inputs {
			full := n.Chain.Inputs[i].FullScale
			// A full-scale sine at this input alone takes the output so far; its source goes a little further.
			swing := abs(n.Inputs[i].Scale) * magnitude(exact.FromInput(circuit.SoundInput(i))[a.Out])
			s.Sine = append(s.Sine, full*math.Max(nearer, 0)/swing)
			s.Track = append(s.Track, full*math.Pow(10, math.Min(s.Down, s.Up)/20))
		}
		stages = append(stages, s)
	}
	return append(stages, r.converter(n))
}

// ratio is how far the output goes for each volt of its source, into the load that its swing is stated for; 1 where it
// rests at the limit.
func ratio(output, source float64) float64 {
	if source == 0 || output == 0 {
		return 1
	}
	return output / source
}

// left is what a limit leaves of an excursion in dB.
func left(limit, excursion float64) float64 {
	if excursion <= 0 {
		return math.Inf(1)
	}
	return 20 * math.Log10(math.Max(limit, 0)/excursion)
}

// Suggestion is a change that would fit.
type Suggestion struct {
	Stage string
	Part  chain.Part
	Value float64
	Room  float64 // dB that a full run with it leaves at its tightest stage
	Fits  bool    // whether that run touched no limit and kept the margin
}

// Tightest returns the name of the amplifier that has the least room of a run, or [Converter] where that has less, the
// number of the stage that it is of, or that drives the converter, and its room in dB; "", −1 and +Inf where nothing is
// asked of any.
func Tightest(n *circuit.Network, r *Heard) (name string, stage int, room float64) {
	stage, room = -1, math.Inf(1)
	for i := range r.Amplifiers {
		if x := r.Amplifiers[i].Room(); !n.Amplifiers[i].Virtual && x < room {
			name, stage, room = n.Amplifiers[i].Name, n.Amplifiers[i].Stage, x
		}
	}
	if x := math.Min(r.converterRoom()); x < room {
		name, stage, room = Converter, stageIndex(n.Chain, n.Chain.Converter.From), x
	}
	return name, stage, room
}

// Suggest returns the value of the part that sets the gain of the tightest stage with which a full run leaves the margin
// in dB, verified by that run: the nearest preferred value to the present one that does. It reports false where no part
// sets a gain. run renders a track through a network.
func Suggest(n *circuit.Network, r *Heard, margin float64, run func(*circuit.Network) (*Heard, error)) (Suggestion, bool, error) {
	name, stage, left := Tightest(n, r)
	part, less, ok := gainPart(n.Chain, stage)
	if !ok {
		return Suggestion{}, false, nil
	}
	series := part.Preferred()
	s := Suggestion{Stage: name, Part: part, Value: part.Value}
	fits := func(value float64) (bool, error) {
		with, _ := n.With(part.Name, value)
		result, err := run(with)
		if err != nil {
			return false, err
		}
		_, _, s.Room = Tightest(with, result)
		s.Value, s.Fits = value, s.Room >= margin && result.Overloaded == 0
		return s.Fits, nil
	}
	quieter, louder := series.Down, series.Up
	if !less {
		quieter, louder = louder, quieter
	}
	// Gain goes nearly as the part: start where it says, then go on by single values.
	guess := math.Pow(10, (left-margin)/20)
	if !less {
		guess = 1 / guess
	}
	value := series.Nearest(part.Value * math.Max(1e-3, math.Min(guess, 1e3)))
	ok, err := fits(value)
	for tried := 0; err == nil && !ok && tried < tries; tried++ {
		value = quieter(value)
		ok, err = fits(value)
	}
	kept := s
	for tried := 0; err == nil && ok && tried < tries; tried++ {
		value = louder(value)
		if ok, err = fits(value); ok {
			kept = s
		}
	}
	return kept, true, err
}

// Centre is a bias that rests midway between what its stage can reach.
type Centre struct {
	Bias        string
	Now         float64 // V
	Wanted      float64 // V
	Top, Bottom chain.Part
	Divider     parts.Ratio // A at the top, B at the bottom
}

// Network returns the chain with the divider in it.
func (c *Centre) Network(n *circuit.Network) *circuit.Network {
	with, _ := n.With(c.Top.Name, c.Divider.A)
	with, _ = with.With(c.Bottom.Name, c.Divider.B)
	return with
}

// Centres returns, for each bias that a stage's tightest amplifier rides on off centre by more than a hundredth of its
// reach, the divider that would put it there.
func Centres(n *circuit.Network, r *Heard) []Centre {
	var list []Centre
	for i := range n.Chain.Biases {
		b := &n.Chain.Biases[i]
		var tightest *render.AmplifierRange
		for k := range n.Amplifiers {
			a := &n.Amplifiers[k]
			if a.Stage < 0 || n.Chain.Stages[a.Stage].Bias != b.Name {
				continue
			}
			if x := &r.Amplifiers[k]; tightest == nil || x.Room() < tightest.Room() {
				tightest = x
			}
		}
		if tightest == nil {
			continue
		}
		middle := (tightest.LimitLow + tightest.LimitHigh) / 2
		off := middle - tightest.Rest
		wanted := r.At.Volts[n.BiasNode(i)] + off
		if math.Abs(off) < 0.01*(tightest.LimitHigh-tightest.LimitLow) || !(wanted > 0 && wanted < n.Chain.Supply.Voltage) {
			continue
		}
		list = append(list, Centre{b.Name, r.At.Volts[n.BiasNode(i)], wanted, b.Top, b.Bottom, parts.Bias(wanted, n.Chain.Supply.Voltage, b.Top.Preferred(), 1)[0]})
	}
	return list
}

// Distortion is what a sine of a level comes out with.
type Distortion struct {
	Level float64 // dB against full scale at the input
	THDN  float64 // everything but the tone against the tone, RMS, 0 to 1 and more
}

// Sweep renders a tone at a tenth of the rate, but 997 Hz at most, at every input at levels from −60 dB to +12 dB of full
// scale, closer to each other where it last comes up through 1 %, and returns its THD+N over the converter's band, noise and
// rounding included, the softest first.
func Sweep(ctx context.Context, n *circuit.Network) ([]Distortion, error) {
	const steps, halvings = 24, 4 // of 3 dB; to 0.2 dB
	budget := noise.At(n)
	var list []Distortion
	for i := range steps + 1 {
		one, err := distortion(ctx, n, budget, -60+72*float64(i)/steps)
		if err != nil {
			return nil, err
		}
		list = append(list, one)
	}
	for range halvings {
		i := crossing(list)
		if i < 0 {
			break
		}
		one, err := distortion(ctx, n, budget, (list[i].Level+list[i+1].Level)/2)
		if err != nil {
			return nil, err
		}
		list = slices.Insert(list, i+1, one)
	}
	return list, nil
}

// distortion renders a tone at a level in dB of full scale.
func distortion(ctx context.Context, n *circuit.Network, budget *noise.Budget, level float64) (Distortion, error) {
	const seconds, settled = 0.5, 0.2
	rate := n.Chain.Converter.Rate
	hz := math.Min(997, rate/10)
	var heard []float64
	feeds := make([]render.Feed, len(n.Inputs))
	for i := range feeds {
		t := tone.Sine(48000, seconds, hz, level)
		feeds[i] = render.Feed{Sound: signals.Channels(t, 1)[0], Rate: t.Rate()}
	}
	_, err := render.Run(ctx, n, feeds, render.Options{Noise: budget}, func(b *render.Block) error {
		heard = append(heard, b.Heard...)
		return nil
	})
	if err != nil {
		return Distortion{}, err
	}
	return Distortion{level, thdn(heard[int(settled*rate):len(heard)-int(0.02*rate)], hz/rate)}, nil
}

// crossing returns the point after which THD+N last comes up through 1 %; −1 where it does not.
func crossing(sweep []Distortion) int {
	for i := len(sweep) - 2; i >= 0; i-- {
		if sweep[i].THDN < 0.01 && sweep[i+1].THDN >= 0.01 {
			return i
		}
	}
	return -1
}

// OnePercent returns the level at which THD+N last comes up through 1 %, between the sweep's points; NaN where it does not.
func OnePercent(sweep []Distortion) float64 {
	i := crossing(sweep)
	if i < 0 {
		return math.NaN()
	}
	a, b := sweep[i], sweep[i+1]
	return a.Level + (b.Level-a.Level)*math.Log(0.01/a.THDN)/math.Log(b.THDN/a.THDN)
}

// thdn takes out DC and the tone, cycles a sample, by correlation over whole periods as near as can be, and returns the
// rest against the tone.
func thdn(x []float64, cycles float64) float64 {
	x = x[:int(math.Floor(math.Floor(float64(len(x))*cycles)/cycles))]
	var mean, re, im float64
	count := float64(len(x))
	for i, v := range x {
		sin, cos := math.Sincos(2 * math.Pi * cycles * float64(i))
		mean, re, im = mean+v/count, re+2*v*cos/count, im+2*v*sin/count
	}
	rest := 0.
	for i, v := range x {
		sin, cos := math.Sincos(2 * math.Pi * cycles * float64(i))
		d := v - mean - re*cos - im*sin
		rest += d * d
	}
	return math.Sqrt(rest/count) / (math.Hypot(re, im) / math.Sqrt2)
}
