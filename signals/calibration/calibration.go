// Package calibration finds the tone in a calibration recording, and tells whether it is clean enough to stand for the
// reading of a meter.
//
// Symbols and units: in each block of a quarter of a second the sine a·cos(ωt) + b·sin(ωt) + c is fitted by least squares
// in all four of a, b, c and ω (IEEE Std 1057, four-parameter fit). The tone's amplitude is the root of the mean of
// a² + b², in full scale; c, the DC, is left out. What the fit leaves is the residual: distortion, hum and noise.
package calibration

import (
	"errors"
	"fmt"
	"io"
	"math"

	"gonum.org/v1/gonum/dsp/fourier"
	"gonum.org/v1/gonum/mat"

	"midrail/signals"
)

// What a clean tone is. The figures are common practice, no source.
const (
	// MostResidual is the largest residual, RMS against the tone's. At 1 % a peak that a scope shows is off by no more
	// than 0.09 dB.
	MostResidual = 0.01
	// MostUnsteady is how far the levels of the blocks may lie apart, in dB.
	MostUnsteady = 0.1
	// LeastLevel is the lowest level, in dBFS.
	LeastLevel = -60.
	// LeastFrequency is the lowest frequency, in Hz; MostFrequency the highest, as a share of the rate.
	LeastFrequency, MostFrequency = 20., 0.45
	// MostSeconds is how much of a recording is looked at.
	MostSeconds = 10.
)

const (
	// blockSeconds is the length of a block.
	blockSeconds = 0.25
	// held is the largest magnitude that is not taken for the end of a converter's range: that of 16 bits.
	held = 1 - 1./(1<<15)
	// steps is how often a fit is refined, at the most, and settled the step of ω·length at which it ends.
	steps, settled = 20, 1e-9
)

// Tone is a clean tone.
type Tone struct {
	Frequency float64 // Hz
	Amplitude float64 // of its peaks, full scale
	Residual  float64 // RMS of everything else but DC against the tone's, up to MostResidual
	From, To  float64 // s, the stretch of the recording that was looked at
}

// Find looks for the tone in a channel of a track, or in the mean of all ([signals.Mix]), between two times in s; to may
// be +Inf. Of what lies between them it takes whole blocks, up to MostSeconds. Name is what faults call the track.
//
// The error is a *[signals.FormatError] where there is no clean tone, or that of the track. Find panics where the track
// has no such channel, and where from is negative.
func Find(t signals.Track, name string, channel int, from, to float64) (Tone, error) {
	if !(from >= 0) {
		panic("calibration: a time before the track")
	}
	s := signals.Channels(t, channel)[0]
	block := make([]float64, int(math.Round(blockSeconds*t.Rate())))
	fault := func(text, remedy string) error {
		return &signals.FormatError{File: name, At: fmt.Sprintf("calibration from %.4g s", from), Text: text, Remedy: remedy}
	}
	if err := skip(s, block, int64(math.Round(from*t.Rate()))); err != nil {
		return Tone{}, unlessEnd(err, fault("the recording ends before that", "give an earlier from"))
	}
	blocks := int(math.Min(to-from, MostSeconds)/blockSeconds + 1e-9)
	tone := Tone{From: from}
	var power, residual, frequency float64
	least, most := math.Inf(1), 0.
	n := 0
	for ; n < blocks; n++ {
		if got, err := s.Read(block); got < len(block) {
			if !errors.Is(err, io.EOF) {
				return Tone{}, err
			}
			break
		}
		peak := 0.
		for _, x := range block {
			peak = math.Max(peak, math.Abs(x))
		}
		if peak >= held && peak <= 1 {
			return Tone{}, fault("it reaches full scale, where it may have been clipped", "record it softer")
		}
		f := fit(block, strongest(block))
		power += f.amplitude * f.amplitude
		residual += f.residual
		frequency += f.omega / (2 * math.Pi) * t.Rate()
		least, most = math.Min(least, f.amplitude), math.Max(most, f.amplitude)
	}
	if n == 0 {
		return Tone{}, fault(fmt.Sprintf("less than %g s of it", blockSeconds), "give it more of the recording by from and to")
	}
	tone.To = from + float64(n)*blockSeconds
	tone.Frequency, tone.Amplitude = frequency/float64(n), math.Sqrt(power/float64(n))
	tone.Residual = math.Sqrt(residual / (power / 2))
	switch level := 20 * math.Log10(tone.Amplitude); {
	case !(level >= LeastLevel):
		return Tone{}, fault(fmt.Sprintf("there is no tone of %g dBFS or more", LeastLevel), "record it louder")
	case !(tone.Residual <= MostResidual):
		return Tone{}, fault(fmt.Sprintf("the loudest tone, %.5g Hz at %.2f dBFS, is not clean: all else but DC is %.2g %% of it, at most %g %% may be", tone.Frequency, level, 100*tone.Residual, 100*MostResidual),
			"record a sine alone, or part it off by from and to")
	case !(20*math.Log10(most/least) <= MostUnsteady):
		return Tone{}, fault(fmt.Sprintf("the tone is not steady: its level moves by %.2g dB, at most %g dB may be", 20*math.Log10(most/least), MostUnsteady), "part the steady stretch off by from and to")
	case !(tone.Frequency >= LeastFrequency && tone.Frequency <= MostFrequency*t.Rate()):
		return Tone{}, fault(fmt.Sprintf("the tone has %.5g Hz, %g to %g Hz are measured at this rate", tone.Frequency, LeastFrequency, MostFrequency*t.Rate()), "record one of about 1 kHz")
	}
	return tone, nil
}

// unlessEnd returns err or, at the end of a stream, atEnd.
func unlessEnd(err, atEnd error) error {
	if errors.Is(err, io.EOF) {
		return atEnd
	}
	return err
}

// skip reads samples and forgets them.
func skip(s signals.Stream, block []float64, samples int64) error {
	for samples > 0 {
		n, err := s.Read(block[:min(samples, int64(len(block)))])
		if err != nil {
			return err
		}
		samples -= int64(n)
	}
	return nil
}

// strongest returns the angular frequency, per sample, of the strongest line in a block: the peak of its spectrum under a
// Hann window, between bins by a parabola through the logarithms.
func strongest(x []float64) float64 {
	length := 1
	for length < 2*len(x) {
		length *= 2
	}
	mean := 0.
	for _, v := range x {
		mean += v
	}
	mean /= float64(len(x))
	padded := make([]float64, length)
	for i, v := range x {
		padded[i] = (v - mean) * (0.5 - 0.5*math.Cos(2*math.Pi*float64(i)/float64(len(x))))
	}
	bins := fourier.NewFFT(length).Coefficients(nil, padded)
	power := func(k int) float64 { return real(bins[k])*real(bins[k]) + imag(bins[k])*imag(bins[k]) }
	peak := 1
	for k := 1; k < len(bins)-1; k++ {
		if power(k) > power(peak) {
			peak = k
		}
	}
	below, at, above := math.Log(power(peak-1)), math.Log(power(peak)), math.Log(power(peak+1))
	off := (below - above) / (2 * (below - 2*at + above))
	if !(math.Abs(off) <= 1) { // silence, or a line of one bin
		off = 0
	}
	return 2 * math.Pi * (float64(peak) + off) / float64(length)
}

// fitted is a sine fitted to a block.
type fitted struct {
	omega, amplitude float64 // per sample; full scale
	residual         float64 // mean square of what it leaves
}

// fit fits a sine to a block, beginning at an angular frequency.
func fit(x []float64, omega float64) fitted {
	middle, length := float64(len(x)-1)/2, float64(len(x))
	f := fitted{omega: omega}
	var a, b float64
	for range steps {
		var sums [4][5]float64 // the products of the columns a, b, c, the step of ω·length, and the block
		square := 0.
		for i, v := range x {
			t := float64(i) - middle
			sin, cos := math.Sincos(f.omega * t)
			row := [5]float64{cos, sin, 1, t / length * (b*cos - a*sin), v}
			for j := range sums {
				for k := j; k < len(row); k++ {
					sums[j][k] += float64(row[j] * row[k])
				}
			}
			square += float64(v * v)
		}
		normal, right := mat.NewSymDense(4, nil), mat.NewVecDense(4, nil)
		for j := range sums {
			for k := j; k < 4; k++ {
				normal.SetSym(j, k, sums[j][k])
			}
			right.SetVec(j, sums[j][4])
		}
		columns := 4
		if a == 0 && b == 0 {
			columns = 3 // ω waits for a and b
		}
		var c mat.Cholesky
		var solved mat.VecDense
		if !c.Factorize(normal.SliceSym(0, columns)) || c.SolveVecTo(&solved, right.SliceVec(0, columns)) != nil {
			return f
		}
		a, b = solved.AtVec(0), solved.AtVec(1)
		f.amplitude = math.Hypot(a, b)
		f.residual = math.Max(square-mat.Dot(&solved, right.SliceVec(0, columns)), 0) / length
		if columns == 3 {
			continue
		}
		step := solved.AtVec(3)
		f.omega += step / length
		if math.Abs(step) < settled {
			break
		}
	}
	return f
}
