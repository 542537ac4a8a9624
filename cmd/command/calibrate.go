package command

import (
	"errors"
	"fmt"
	"io/fs"
	"math"
	"path/filepath"
	"syscall"

	"midrail/chain"
	"midrail/chain/quantity"
	"midrail/cmd/report"
	"midrail/signals"
	"midrail/signals/calibration"
)

// calibrate finds the full scale of the inputs that have a calibration recording, and says on standard error what it
// found.
func (s streams) calibrate(c *chain.Chain) error {
	var faults chain.Faults
	for i := range c.Inputs {
		in := &c.Inputs[i]
		if in.Calibrate == nil {
			continue
		}
		tone, err := s.toneOf(c, in)
		if err == nil {
			err = c.SetFullScale(in, tone)
		}
		if more, ok := errors.AsType[chain.Faults](err); ok {
			faults = append(faults, more...)
			continue
		}
		if err != nil {
			return err
		}
		fmt.Fprintln(s.err, "calibrated:", calibrationWords(in))
	}
	if len(faults) > 0 {
		return faults
	}
	return nil
}

// toneOf finds the tone in an input's calibration recording.
func (s streams) toneOf(c *chain.Chain, in *chain.Input) (calibration.Tone, error) {
	k := in.Calibrate
	fault := func(text, remedy string) error {
		return chain.Faults{{File: c.File, Pos: k.Pos, Text: fmt.Sprintf("input %q, calibrate: %s", in.Name, text), Remedy: remedy}}
	}
	told := func(err error) error {
		if format, ok := errors.AsType[*signals.FormatError](err); ok {
			return fault(fmt.Sprintf("%s: %s: %s", format.File, format.At, format.Text), format.Remedy)
		}
		if errors.Is(err, fs.ErrNotExist) || errors.Is(err, fs.ErrPermission) || errors.Is(err, syscall.EISDIR) {
			return fault(err.Error(), "track goes from the chain file's folder")
		}
		return err
	}
	path := k.Track
	if !filepath.IsAbs(path) {
		path = filepath.Join(filepath.Dir(c.File), path)
	}
	t, err := (&reading{notes: notes{out: s.err}}).file(path).open()
	if err != nil {
		return calibration.Tone{}, told(err)
	}
	defer t.Close()
	if in.Channel > t.Channels() {
		return calibration.Tone{}, fault(fmt.Sprintf("the input takes channel %d, and %s has %d", in.Channel, path, t.Channels()), "change channel")
	}
	tone, err := calibration.Find(t, path, in.Channel, k.From, k.To)
	return tone, told(err)
}

// calibrationWords say what the full scale of a calibrated input was found from.
func calibrationWords(in *chain.Input) string {
	kind := quantity.SoundLevel
	if in.Kind == chain.Line {
		kind = quantity.Level
	}
	k, tone := in.Calibrate, in.Calibrate.Tone
	return fmt.Sprintf("input %q: %s, from %.4g s to %.4g s, has a tone of %.6g Hz at %.2f dBFS (all else but DC is %.2g %% of it); that is %s, so full scale is %s",
		in.Name, k.Track, tone.From, tone.To, tone.Frequency, 20*math.Log10(tone.Amplitude), 100*tone.Residual, quantity.Format(kind, k.Reading), quantity.Format(kind, in.FullScale))
}

// calibrationsOf returns the calibrated inputs for reports.
func calibrationsOf(c *chain.Chain) []report.Calibration {
	var list []report.Calibration
	for i := range c.Inputs {
		in := &c.Inputs[i]
		if in.Calibrate == nil {
			continue
		}
		unit := "Pa"
		if in.Kind == chain.Line {
			unit = "V"
		}
		k, tone, of := in.Calibrate, in.Calibrate.Tone, report.Of
		list = append(list, report.Calibration{
			Input: in.Name, Track: k.Track, FromS: of(tone.From), ToS: of(tone.To), FrequencyHz: of(tone.Frequency),
			LevelDBFS: of(20 * math.Log10(tone.Amplitude)), Residual: of(tone.Residual), Reading: of(k.Reading), FullScale: of(in.FullScale), Unit: unit,
		})
	}
	return list
}
