package chain

import (
	"slices"

	"midrail/chain/amplifier"
)

// Chain is one front end as its owner describes it in a chain file.
// Everything is in SI units: volts, amperes, ohms, farads, hertz, seconds, kelvin.
type Chain struct {
	File        string // name of the chain file, as given
	Title       string
	Notes       string
	Supply      Supply
	Conditions  Conditions
	Biases      []Bias
	Amplifiers  []Amplifier
	Inputs      []Input
	Stages      []Stage // in the order of the file
	Converter   Converter
	Interferers []Interferer
	Limits      Limits
	Warnings    []Fault // what reads well but is likely not meant, such as the capacitor code "100"
}

// Supply is the one supply that feeds the dividers and every amplifier.
type Supply struct {
	Voltage float64 // V, 0.5 to 60
	Pos     Pos
}

// Conditions are those the chain works in.
type Conditions struct {
	Temperature float64 // K
	NoiseFrom   float64 // Hz, the lowest frequency that noise is counted from
}

// Part is one component on the board.
type Part struct {
	Name   string  // owner and key, as in "capsule amp.r_f"; what --set takes
	Key    string  // "r_f"
	Unit   Unit    // Ohm or Farad
	Value  float64 // ohms or farads
	Ref    string  // reference on the board, as in "R7"; may be empty
	Series string  // preferred series, "E3" to "E192"; empty means the default
	Pos    Pos
}

// Unit tells what a part's value is in.
type Unit uint8

// The units of parts.
const (
	Ohm Unit = iota
	Farad
)

// Bias is a divider across the supply that makes the point the stages ride on.
type Bias struct {
	Name        string
	Top, Bottom Part
	Bypass      *Part  // nil: none
	Buffer      string // name of the amplifier class entry that follows the divider; empty: none
	Pos         Pos
}

// Amplifier is a named entry of the chain file: a class with the keys that the owner changed.
type Amplifier struct {
	Name  string
	Model amplifier.Model
	Pos   Pos
}

// InputKind tells the kinds of input apart.
type InputKind string

// The kinds of input.
const (
	Line       InputKind = "line"
	Electret   InputKind = "electret"
	Microphone InputKind = "microphone"
)

// Input is where sound enters.
type Input struct {
	Name    string
	Kind    InputKind
	Channel int // 1, 2, …; 0 is the mean of all channels ("mix")
	// FullScale is the RMS value that a full-scale sine (peaks at ±1.0) has at the input:
	// volts for a line, pascals for a microphone.
	FullScale float64
	// FullScaleUnit is the unit that the owner wrote it in: "Vrms", "dBu", "dBV", "dBSPL", …
	FullScaleUnit string

	// line
	SourceResistance float64 // Ω

	// electret and microphone
	Sensitivity      float64 // V/Pa at RatedLoad for an electret, at no load for a microphone
	OutputResistance float64 // Ω; electret: across the drain, +Inf if not given
	SelfNoise        float64 // Pa RMS, A-weighted equivalent; 0: not given

	// electret
	RatedLoad      float64 // Ω
	Load           Part
	Current        float64 // A, drain current at rest
	MinimumVoltage float64 // V, the drain does not go below it
	SupplyFilter   *SupplyFilter

	// microphone
	Rest         float64 // V, what its output rests at
	MaximumLevel float64 // Pa RMS of the largest sine it passes; +Inf: not given

	Pos Pos
}

// SupplyFilter is the series resistor and the capacitor to ground that feed a capsule's load.
type SupplyFilter struct{ R, C Part }

// Stage is one stage of the chain.
type Stage struct {
	Name      string
	Kind      *Kind
	From      []string // what drives it: inputs or stages; one, except for select and the legs of a summer
	Parts     []Part   // in the order of the kind's keys; optional parts that are absent are not there
	Legs      []Leg    // summer and passive sum
	Amplifier string   // name of an entry in Chain.Amplifiers; empty: none
	Bias      string   // name of an entry in Chain.Biases; empty: none
	Leg       string   // non-inverting: "ground" or "bias", where r_g ends
	To        string   // rc high-pass and divider: "ground" or "bias"
	Pick      string   // select: the one of From that is passed on
	Pos       Pos
}

// Part returns the stage's part with the given key, and whether it is there.
func (s *Stage) Part(key string) (Part, bool) {
	for _, p := range s.Parts {
		if p.Key == key {
			return p, true
		}
	}
	return Part{}, false
}

// Leg is one input of a summer or of a passive sum.
type Leg struct {
	From string
	R    Part
	C    *Part // nil: none
}

// Converter is the sampling converter at the end of the chain.
type Converter struct {
	From         string  // stage (or input) it samples
	Rate         float64 // Hz; from clock and divide where those are given
	Bits         int     // 1 to 24
	Low, High    float64 // V; its span
	HighIsSupply bool    // high = "supply": ratiometric

	SwitchResistance  float64 // Ω
	SamplingCapacitor float64 // F; 0: none
	Acquisition       float64 // s
	PinCapacitor      float64 // F
	SharesWith        string  // "": its own last sample; "ground"; or the name of a stage on the same multiplexer

	ENOB   float64 // effective bits; 0: not given
	Jitter float64 // s RMS, of the sampling instant
	Pos    Pos
}

// Interferer is an unwanted signal that enters at an input or at the supply.
type Interferer struct {
	Into      string  // an input's name, or "supply"
	Frequency float64 // Hz; 0 for noise from DC
	Shape     string  // "sine", "square" or "noise"
	// Level is the peak for a sine or a square and the RMS for noise: volts at a line input or the
	// supply, pascals at a microphone.
	Level     float64
	Bandwidth float64 // Hz, of noise: centred on Frequency, or from 0 where Frequency is 0
	Pos       Pos
}

// Limits are what the owner wants the run to hold; nil pointers are limits not set.
type Limits struct {
	OverloadTime        *float64 // share of the track's time, 0 to 1
	FoldBack            *float64 // dBFS
	FoldBackBelowWanted *float64 // dB
	Interference        *float64 // dBFS
	Noise               *float64 // dBFS
	Room                *float64 // dB
	Droop               *Droop
	Settling            *float64 // s
}

// Droop limits the loss at a frequency, relative to the mid-band gain.
type Droop struct {
	At  float64 // Hz
	Max float64 // dB
}

// StageNamed returns the stage of that name, or nil.
func (c *Chain) StageNamed(name string) *Stage {
	for i := range c.Stages {
		if c.Stages[i].Name == name {
			return &c.Stages[i]
		}
	}
	return nil
}

// InputNamed returns the input of that name, or nil.
func (c *Chain) InputNamed(name string) *Input {
	for i := range c.Inputs {
		if c.Inputs[i].Name == name {
			return &c.Inputs[i]
		}
	}
	return nil
}

// BiasNamed returns the bias of that name, or nil.
func (c *Chain) BiasNamed(name string) *Bias {
	for i := range c.Biases {
		if c.Biases[i].Name == name {
			return &c.Biases[i]
		}
	}
	return nil
}

// AmplifierNamed returns the amplifier of that name, or nil.
func (c *Chain) AmplifierNamed(name string) *Amplifier {
	for i := range c.Amplifiers {
		if c.Amplifiers[i].Name == name {
			return &c.Amplifiers[i]
		}
	}
	return nil
}

// Parts returns every component of the chain in the order of the file. One that a --set added comes with the table it
// was added to.
func (c *Chain) Parts() []Part {
	var parts []Part
	add := func(optional *Part) {
		if optional != nil {
			parts = append(parts, *optional)
		}
	}
	for i := range c.Biases {
		b := &c.Biases[i]
		parts = append(parts, b.Top, b.Bottom)
		add(b.Bypass)
	}
	for i := range c.Inputs {
		in := &c.Inputs[i]
		if in.Kind != Electret {
			continue
		}
		parts = append(parts, in.Load)
		if f := in.SupplyFilter; f != nil {
			parts = append(parts, f.R, f.C)
		}
	}
	for i := range c.Stages {
		s := &c.Stages[i]
		for _, l := range s.Legs {
			parts = append(parts, l.R)
			add(l.C)
		}
		parts = append(parts, s.Parts...)
	}
	slices.SortStableFunc(parts, func(a, b Part) int { return a.Pos.compare(b.Pos) })
	return parts
}
