package chain

import (
	"fmt"
	"math"

	"midrail/chain/quantity"
	"midrail/signals/calibration"
)

// Calibrate tells how an input's full scale is found: a tone was recorded at it while a meter, a scope or a sound level
// calibrator told its level.
type Calibrate struct {
	Reading  float64 // RMS of the tone at the input: volts for a line, pascals for a microphone; the range is FullScale's
	Track    string  // the recording; a path that is not absolute goes from the chain file's folder
	From, To float64 // s, 0 to a day, of the stretch of the recording that counts; 0 and +Inf where not given
	Pos      Pos
	Tone     calibration.Tone // as found in the recording, in full scale; nothing before [Chain.SetFullScale]
}

// fullScaleRange returns what an input's full scale is written as, and its lowest and highest in SI.
func (in *Input) fullScaleRange() (kind quantity.Kind, low, high float64) {
	if in.Kind == Line {
		return quantity.Level, 1e-6, 100
	}
	return quantity.SoundLevel, pascals(0), pascals(174)
}

// SetFullScale sets the full scale of an input that is to be calibrated: its reading over the amplitude of the tone that
// was found in the recording. It returns [Faults] where that is out of range.
func (c *Chain) SetFullScale(in *Input, tone calibration.Tone) error {
	x := in.Calibrate.Reading / tone.Amplitude
	if kind, low, high := in.fullScaleRange(); !(x >= low && x <= high) {
		return Faults{{File: c.File, Pos: in.Calibrate.Pos,
			Text:   fmt.Sprintf("input %q, calibrate: the full scale is out of range, %s to %s: the tone is at %.2f dBFS", in.Name, quantity.Format(kind, low), quantity.Format(kind, high), 20*math.Log10(tone.Amplitude)),
			Remedy: "check the reading and its unit"}}
	}
	in.FullScale, in.Calibrate.Tone = x, tone
	return nil
}
