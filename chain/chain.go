package chain

import (
	"slices"

	"midrail/chain/amplifier"
	"midrail/chain/preferred"
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
	Tolerance   Tolerance
	Limits      Limits
	Warnings    []Fault // what reads well but may not be meant, such as the capacitor code "100"; in the order of Faults
}

// Supply is the one supply that feeds the dividers and every amplifier.
type Supply struct {
	Voltage    float64 // V, 0.5 to 60; the amplifiers' supply, too
	Resistance float64 // Ω, 0 to 10k, between the supply and what it feeds but the amplifiers' own pins
	Noise      float64 // V/√Hz, 0 to 1e-3, white
	Pos        Pos
}

// Tolerance is how far a production run's parts lie from their values: half the width of an even spread, or three
// standard deviations of a normal one. Shares of 1, 0 to 0.5.
type Tolerance struct {
	Resistors, Capacitors, GainBandwidth, Supply float64
	Normal                                       bool
}

// Conditions are those the chain works in.
type Conditions struct {
	Temperature float64 // K, 223.15 to 473.15 (−50 to 200 °C); 298.15 where not given
	NoiseFrom   float64 // Hz, 0.001 to 1e5, the lowest frequency that noise is counted from; 20 where not given
}

// Part is one component on the board.
type Part struct {
	Name      string  // owner and key, as in "capsule amp.r_f"; what --set takes
	Key       string  // "r_f"
	Unit      Unit    // Ohm or Farad
	Value     float64 // ohms, 0.01 to 1e11, or farads, 1e-14 to 1
	Ref       string  // reference on the board, as in "R7"; empty: none
	Series    string  // preferred series, "E3" to "E192"; empty: the default
	Tolerance float64 // share of 1; 0: that of the [tolerance] table
	Pos       Pos
}

// Preferred returns the series that the part's values are taken from: its own, or the default of its kind.
func (p *Part) Preferred() preferred.Series {
	switch s, err := preferred.Parse(p.Series); {
	case err == nil:
		return s
	case p.Unit == Farad:
		return preferred.DefaultCapacitors
	}
	return preferred.DefaultResistors
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
	Buffer      string // name of the amplifier that follows the divider; empty: none
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
	Channel int // 1 to 64; 0 is the mean of all channels ("mix"), also where not given
	// FullScale is the RMS value that a full-scale sine (peaks at ±1.0) has at the input:
	// volts, 1e-6 to 100, for a line, pascals, 0 to 174 dB SPL, for a microphone. 0: it is to be calibrated.
	FullScale float64
	// FullScaleUnit is the unit that the owner wrote it in: "Vrms", "dBu", "dBV", "dBSPL", …
	FullScaleUnit string
	Calibrate     *Calibrate // what FullScale is found from; nil: it is given

	// line
	SourceResistance float64 // Ω, 0 to 1e9; 0 where not given

	// electret and microphone
	Sensitivity      float64 // V/Pa, 1e-6 to 10; at RatedLoad for an electret, at no load for a microphone
	OutputResistance float64 // Ω, to 1e9; microphone: 0 where not given; electret: 10 and more across the drain, +Inf where not given
	SelfNoise        float64 // Pa RMS, −40 to 120 dB SPL, A-weighted equivalent, also from snr; 0: not given

	// electret
	RatedLoad      float64 // Ω, 10 to 1e6
	Load           Part
	Current        float64       // A, 1e-6 to 0.01, drain current at rest
	MinimumVoltage float64       // V, 0 to 20, the drain does not go below it; 0 where not given
	SupplyFilter   *SupplyFilter // nil: none

	// microphone
	Rest         float64 // V, 0 to 60, what its output rests at; 0 where not given
	MaximumLevel float64 // Pa RMS, 40 to 194 dB SPL, of the largest sine it passes; +Inf: not given, and of the other kinds

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
	Leg       string   // non-inverting: "ground", also where not given, or "bias", where r_g ends; else empty
	To        string   // rc high-pass and divider: "ground", also where not given, or "bias"; else empty
	Pick      string   // select: the one of From that is passed on

	// clamp
	Forward            float64 // V, 0 to 2, at which a diode begins to conduct
	ToSupply, ToGround bool    // which diodes there are

	// transfer function, coefficients in s, highest first
	Numerator, Denominator []float64

	// network
	Branches []Branch
	Uses     []Use

	Pos Pos
}

// Branch is a part of a network stage, between two of its nodes.
type Branch struct {
	Part    Part
	Between [2]string
}

// Use is an amplifier of a network stage, at its nodes.
type Use struct {
	Amplifier           string // name of an entry in Chain.Amplifiers
	Plus, Minus, Output string
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
	Rate         float64 // Hz, 100 to 1e7; from clock and divide where those are given
	Bits         int     // 1 to 24
	Low, High    float64 // V, −60 to 60; its span is 1 mV and more; Low is 0 where not given
	HighIsSupply bool    // high = "supply": ratiometric

	SwitchResistance  float64 // Ω, 0 to 1e6; 0 where not given
	SamplingCapacitor float64 // F, 1e-15 to 1e-6; 0: none
	Acquisition       float64 // s, 1e-10 to a sample; 0: no SamplingCapacitor
	PinCapacitor      float64 // F, 1e-15 to 1e-3; 0: none
	SharesWith        string  // "": its own last sample; "ground"; or the name of a stage on the same multiplexer

	ENOB   float64 // effective bits, 1 to Bits; 0: not given
	Jitter float64 // s RMS, 0 to 0.001, of the sampling instant
	Pos    Pos
}

// Interferer is an unwanted signal that enters at an input or at the supply.
type Interferer struct {
	Into      string  // an input's name, or "supply"
	Frequency float64 // Hz, 0.01 to 1e7; 0 for noise from DC
	Shape     string  // "sine", also where not given, "square", "saw" or "noise"
	// Level is the peak for a sine or a square and the RMS for noise: volts at a line input or the
	// supply, pascals at a microphone.
	Level     float64
	Bandwidth float64 // Hz, 1 to 1e7, of noise: centred on Frequency, which is half of it or more, or from 0 where Frequency is 0
	Pos       Pos
}

// Limits are what the owner wants the run to hold; nil pointers are limits not set.
type Limits struct {
	OverloadTime        *float64 // share of the track's time, 0 to 1
	FoldBack            *float64 // dBFS, −200 to 20
	FoldBackBelowWanted *float64 // dB, 0 to 200
	Interference        *float64 // dBFS, −200 to 20
	Noise               *float64 // dBFS, −200 to 20
	Room                *float64 // dB, −60 to 100
	Droop               *Droop
	Settling            *float64 // s, 1e-6 to 1e4
}

// Droop limits the loss at a frequency, relative to the mid-band gain.
type Droop struct {
	At  float64 // Hz, 0.1 to 1e7
	Max float64 // dB, 0 to 100
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
