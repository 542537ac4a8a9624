package report

import (
	"encoding/json"
	"io"
)

// Run is the result of one chain on one track. Its JSON is report.json.
type Run struct {
	Tool      Tool      `json:"tool"`
	Chain     Chain     `json:"chain"`
	Track     Track     `json:"track"`
	Internal  Internal  `json:"internal"`
	Overload  Overload  `json:"overload"` // of the whole chain: time counted once however many stages overload at it
	Stages    []Stage   `json:"stages"`   // in the order of the chain
	Converter Converter `json:"converter"`
	Layers    []Layer   `json:"layers"` // in the order they are to be shown; rest aside
	// Events are the overloads in order of time: all, or the largest where there are too many to
	// keep (Overload.Events counts them all).
	Events       []Event       `json:"events"`
	Waveforms    []Waveform    `json:"waveforms"` // the overloads whose waveforms the page shows, the largest first
	Noise        Budget        `json:"noise"`     // at the converter's input, folding included
	Rest         Rest          `json:"rest"`
	Margins      []Margin      `json:"margins"` // of every amplifier's loop
	SupplyPaths  SupplyPaths   `json:"supply_paths"`
	Parts        []Part        `json:"parts"` // in the order of the chain file
	Listen       *Listen       `json:"listen,omitempty"`
	Limits       []Limit       `json:"limits"`
	Changes      []Change      `json:"changes"`                // for each number that is not as it should be, the one that helps most
	Findings     []Finding     `json:"findings"`               // the weightiest first
	Calibrations []Calibration `json:"calibrations,omitempty"` // of the inputs whose full scale was found in a recording
	Assumptions  []string      `json:"assumptions"`
	Answers      []Answer      `json:"answers"`
}

// Change is a change of one part that helps a number of the verdict.
type Change struct {
	About   string `json:"about"`         // which number: AboutOverload and so on
	Set     string `json:"set,omitempty"` // as run takes it with --set; empty: no one value does it
	Words   string `json:"words"`
	Was     Number `json:"was"`
	Becomes Number `json:"becomes"` // predicted
	Unit    string `json:"unit"`    // of the two
}

// The numbers that changes are about.
const (
	AboutOverload = "overload"
	AboutFoldBack = "fold-back"
	AboutNoise    = "noise"
	AboutSettling = "settling"
	AboutDroop    = "droop"
)

// Answer is what a command that needs no recording prints of the chain; its figures in full precision are that command's
// JSON.
type Answer struct {
	Title string   `json:"title"`
	Lines []string `json:"lines"`
}

// Calibration is how the full scale of an input was found: the reading of a meter is the tone's.
type Calibration struct {
	Input       string `json:"input"`
	Track       string `json:"track"` // the calibration recording, as the chain file names it
	FromS       Number `json:"from_s"`
	ToS         Number `json:"to_s"`
	FrequencyHz Number `json:"frequency_hz"`
	LevelDBFS   Number `json:"level_dbfs"`
	Residual    Number `json:"residual"`   // RMS of all but the tone and DC against the tone's, 0 to 1
	Reading     Number `json:"reading"`    // RMS, in Unit
	FullScale   Number `json:"full_scale"` // RMS of a full-scale sine, in Unit
	Unit        string `json:"unit"`       // "V" or "Pa"
}

// Tool names the program that made the result.
type Tool struct {
	Name    string `json:"name"`
	Version string `json:"version"`
}

// Chain names the chain file.
type Chain struct {
	File  string `json:"file"`
	Title string `json:"title"` // may be empty
}

// Track is the recording that was run through the chain.
type Track struct {
	File     string `json:"file"`
	RateHz   Number `json:"rate_hz"`
	Channels int    `json:"channels"`
	Seconds  Number `json:"seconds"`
	PeakDBFS Number `json:"peak_dbfs"`
	RMSDBFS  Number `json:"rms_dbfs"`
}

// Internal tells how finely the chain was stepped in time, and what that costs.
type Internal struct {
	RateHz Number `json:"rate_hz"`
	// LargestErrorDB is the largest difference, from 0 Hz to ToHz, between the response as stepped
	// and the exact response of the circuit.
	LargestErrorDB Number `json:"largest_error_db"`
	ToHz           Number `json:"to_hz"`
}

// Stage is what one stage did on the track. Voltages are at its output, DC included.
type Stage struct {
	Name       string   `json:"name"`
	Kind       string   `json:"kind"`
	RestV      Number   `json:"rest_v"`
	LowestV    Number   `json:"lowest_v"`
	HighestV   Number   `json:"highest_v"`
	LimitLowV  Number   `json:"limit_low_v"`  // not there for a stage without a limit of its own
	LimitHighV Number   `json:"limit_high_v"` // not there for a stage without a limit of its own
	RoomDB     Number   `json:"room_db"`      // left (+) or missing (−) between what the linear chain asks for and the nearer limit
	Overload   Overload `json:"overload"`
}

// Overload is the time spent at a limit.
type Overload struct {
	Seconds  Number `json:"seconds"`
	Fraction Number `json:"fraction"` // of the track's time, 0 to 1
	Events   int    `json:"events"`
	High     int    `json:"high"`  // events at the upper limit
	Low      int    `json:"low"`   // events at the lower limit
	Slew     int    `json:"slew"`  // events at the slew rate
	Worst    *Worst `json:"worst"` // nil: none
}

// Worst is the largest overload.
type Worst struct {
	AtS     Number `json:"at_s"`
	Seconds Number `json:"seconds"`
	OverDB  Number `json:"over_db"`
}

// Converter is what the converter took.
type Converter struct {
	RateHz    Number `json:"rate_hz"`
	Bits      int    `json:"bits"`
	LowV      Number `json:"low_v"`
	HighV     Number `json:"high_v"`
	Samples   int64  `json:"samples"`
	Saturated int64  `json:"saturated"` // samples at the first or the last code because the voltage was beyond it
	Rest      Number `json:"rest"`      // in full scale, −1 to 1
	PeakDBFS  Number `json:"peak_dbfs"`
	RMSDBFS   Number `json:"rms_dbfs"`
}

// Names of the layers, which sum (with the converter's rest) to what is heard.
const (
	Wanted       = "wanted"
	FoldBack     = "fold-back"
	Interference = "interference"
	Overloaded   = "overload"
	Noise        = "noise"
	Rounding     = "rounding"
	Heard        = "heard" // the sum; in the level plot and among the layers where the caller gives it
)

// Layer is one part of what is heard, at the converter.
type Layer struct {
	Name           string  `json:"name"`
	RMSDBFS        Number  `json:"rms_dbfs"`
	RMSDBFSA       Number  `json:"rms_dbfs_a"` // A-weighted
	Worst125msDBFS Number  `json:"worst_125ms_dbfs"`
	BelowWantedDB  Number  `json:"below_wanted_db"`
	Thirds         []Third `json:"thirds"`
}

// Third is the level in one third octave.
type Third struct {
	Hz   Number `json:"hz"` // nominal mid-band frequency
	DBFS Number `json:"dbfs"`
}

// Event is one overload.
type Event struct {
	Stage  string `json:"stage"`
	Kind   string `json:"kind"` // "high", "low", "slew", …
	FromS  Number `json:"from_s"`
	ToS    Number `json:"to_s"`
	OverDB Number `json:"over_db"` // how far beyond the limit the linear chain asks
}

// Waveform is an overload whose waveforms the page shows.
type Waveform struct {
	Stage  string `json:"stage"`
	Kind   string `json:"kind"`
	AtS    Number `json:"at_s"`
	OverDB Number `json:"over_db"`
}

// Budget is the noise of the chain, source by source.
type Budget struct {
	Total   NoiseTotal    `json:"total"`
	Sources []NoiseSource `json:"sources"` // the largest first
	Inputs  []NoiseInput  `json:"equivalent_input"`
}

// NoiseInput is the noise of the whole chain told as one input's.
type NoiseInput struct {
	Input string `json:"input"`
	Value Number `json:"value"`
	Unit  string `json:"unit"` // "dB SPL(A)" or "dBu(A)"
}

// NoiseTotal is all the noise.
type NoiseTotal struct {
	V          Number `json:"v"` // RMS
	DBFS       Number `json:"dbfs"`
	DBFSA      Number `json:"dbfs_a"` // A-weighted
	LSB        Number `json:"lsb"`    // RMS, in steps of the converter
	UsefulBits Number `json:"useful_bits"`
}

// NoiseSource is what one source adds.
type NoiseSource struct {
	Name  string `json:"name"`
	Kind  string `json:"kind"`
	V     Number `json:"v"`     // RMS
	Share Number `json:"share"` // of the total's power, 0 to 1
}

// Rest is the chain without sound.
type Rest struct {
	SupplyV    Number      `json:"supply_v"`
	SupplyA    Number      `json:"supply_a"` // what dividers, capsules and loads draw; the amplifiers' own current apart
	Nodes      []Node      `json:"nodes"`
	Capacitors []Capacitor `json:"capacitors"`
	Settling   Settling    `json:"settling"`
}

// Node is the voltage that a node rests at.
type Node struct {
	Name       string `json:"name"`
	Volts      Number `json:"volts"`
	LimitLowV  Number `json:"limit_low_v"`  // not there where no amplifier drives the node
	LimitHighV Number `json:"limit_high_v"` // not there where no amplifier drives the node
	Word       string `json:"word"`         // what is wrong; mostly empty
}

// Capacitor is what stands across a capacitor at rest.
type Capacitor struct {
	Part     string `json:"part"`
	Volts    Number `json:"volts"`
	Positive string `json:"positive"` // node of its positive side
	Negative string `json:"negative"`
}

// Margin is how far an amplifier's loop is from oscillating.
type Margin struct {
	Amplifier   string `json:"amplifier"`
	CrossoverHz Number `json:"crossover_hz"`
	PhaseDeg    Number `json:"phase_margin_deg"`
	GainDB      Number `json:"gain_margin_db"`
}

// SupplyPaths are the ways from the supply to the converter.
type SupplyPaths struct {
	Hz    []Number `json:"frequencies_hz"`
	Paths []Path   `json:"paths"` // the largest first, all together last
}

// Path is one way from the supply to the converter.
type Path struct {
	Name string   `json:"name"`
	DB   []Number `json:"gain_db"` // V at the converter a V of the supply, at each of the frequencies
}

// Settling is how long the converter's input takes to come to rest after power-up.
type Settling struct {
	ToPercentS Number `json:"to_1_percent_s"`
	ToLSBS     Number `json:"to_1_lsb_s"`
	UsableS    Number `json:"usable_s"` // from when on no limit is touched and 1 % of full scale finds room
}

// Units of parts.
const (
	Ohm   = "ohm"
	Farad = "farad"
	Piece = "" // an amplifier: it has no value
)

// Part is one component on the board.
type Part struct {
	Ref       string `json:"ref"`   // as in "R7"; may be empty
	Stage     string `json:"stage"` // or bias or input that it belongs to
	Role      string `json:"role"`  // in words
	Key       string `json:"key"`   // of the chain file
	Value     Number `json:"value"` // in Unit
	Unit      string `json:"unit"`
	Series    string `json:"series"`    // preferred series; of an amplifier, its class
	Tolerance Number `json:"tolerance"` // of the series, a fraction
}

// Listen is what there is to listen to on the page.
type Listen struct {
	Passages []Passage `json:"passages"` // of the track, in order; one after another in each player
	Players  []Player  `json:"players"`
}

// Passage is a stretch of the track.
type Passage struct {
	FromS Number `json:"from_s"`
	ToS   Number `json:"to_s"`
}

// Player is one sound on the page.
type Player struct {
	Name    string `json:"name"` // TrackSound, Heard or a layer
	File    string `json:"file"` // that holds all of it; empty for none beside the page
	RateHz  Number `json:"rate_hz"`
	Seconds Number `json:"seconds"`
	GainDB  Number `json:"gain_db"` // that was applied for listening
}

// TrackSound is the player of the track itself.
const TrackSound = "track"

// Limit is one of the owner's limits. Its unit goes with its name, as in the chain file:
// overload_time is a fraction; fold_back, interference and noise are dBFS; fold_back_below_wanted,
// room and droop are dB; settling is seconds.
type Limit struct {
	Name  string `json:"name"`
	Limit Number `json:"limit"`
	Value Number `json:"value"`
	Holds bool   `json:"holds"`
}

// Severities of a finding.
const (
	Stop    = "stop"
	Caution = "caution"
	Note    = "note"
)

// Finding is one thing that the owner should know, and what to change.
type Finding struct {
	Severity string `json:"severity"` // Stop, Caution or Note
	About    string `json:"about"`    // the stage, layer, input or limit that it is about
	Text     string `json:"text"`
}

// Pictures are what the plots of the page are drawn from. None of it is in the JSON. A plot
// without data is left out of the page. Values that are NaN or infinite are gaps in the line.
type Pictures struct {
	Responses []Response // from each input to the converter
	HalfRate  float64    // Hz, half the converter rate; drawn as a mark
	Kept      float64    // Hz, up to which the chain is meant to pass sound; 0: not told
	Spectra   []Spectrum
	Levels    []Level
	Spans     []Span  // overloads, in any order
	Duration  float64 // s, of the track
	Scopes    []Scope // one for each of Run.Waveforms
	Grams     []Gram
	Densities []Line        // noise at the converter's input, in V/√Hz
	Sounds    []PlayerSound // one for each of Run.Listen.Players
}

// Scope is the voltage of each stage around an overload.
type Scope struct {
	From, Step float64     // s
	Asked      [][]float64 // V, for each of Run.Stages: the linear chain's output
	Real       [][]float64 // V, for each of Run.Stages
}

// Gram is a spectrogram.
type Gram struct {
	Layer    string
	Duration float64     // s
	Top      float64     // Hz
	Level    [][]float64 // dBFS of each cell, columns in the order of time, each from 0 Hz up
}

// PlayerSound is the sound of a player.
type PlayerSound struct {
	Rate  float64 // Hz
	Codes []int16
}

// Response is the gain from one input to the converter.
type Response struct {
	Input     string
	Frequency []float64 // Hz, ascending, > 0
	Gain      []float64 // dB, one for each frequency: a full-scale sine in the track reads this many dBFS at the converter
}

// Spectrum is the spectrum of each layer at the converter.
type Spectrum struct {
	Per    string // what each level is in, said on the axis: "third octave", "hertz"
	Layers []Line
}

// Line is one layer's spectrum.
type Line struct {
	Layer     string
	Frequency []float64 // Hz, ascending, > 0
	Level     []float64 // dBFS per Spectrum.Per, one for each frequency
}

// Level is one layer's level along time.
type Level struct {
	Layer string
	Time  []float64 // s, ascending
	RMS   []float64 // dBFS, one for each time
	Peak  []float64 // dBFS, one for each time; nil: not drawn
}

// Span is a stretch of time in which a stage is overloaded.
type Span struct {
	Stage    string
	From, To float64 // s
}

// WriteJSON writes the run as one indented JSON object that ends with a newline. Lists that are
// nil are written as empty lists. It returns the error of w, or of encoding/json.
func WriteJSON(w io.Writer, run *Run) error {
	r := *run
	r.Stages = filled(r.Stages)
	r.Layers = filled(r.Layers)
	r.Events = filled(r.Events)
	r.Waveforms = filled(r.Waveforms)
	r.Noise.Sources = filled(r.Noise.Sources)
	r.Rest.Nodes = filled(r.Rest.Nodes)
	r.Parts = filled(r.Parts)
	r.Limits = filled(r.Limits)
	r.Changes = filled(r.Changes)
	r.Findings = filled(r.Findings)
	r.Assumptions = filled(r.Assumptions)
	for i := range r.Layers {
		r.Layers[i].Thirds = filled(r.Layers[i].Thirds)
	}
	e := json.NewEncoder(w)
	e.SetEscapeHTML(false)
	e.SetIndent("", "  ")
	return e.Encode(&r)
}

// filled returns a copy of list that is not nil.
func filled[T any](list []T) []T { return append([]T{}, list...) }
