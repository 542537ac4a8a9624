// Package level measures how loud streams are.
//
// Units: levels in dBFS, of which a sine with peaks at ±1.0 has 0 (AES17): 20·log10(√2·RMS). The RMS excludes DC.
// Silence is −Inf.
package level

import "math"

// DBFS returns the level of an RMS value.
func DBFS(rms float64) float64 { return 20 * math.Log10(math.Sqrt2*rms) }

// Peak returns the level of a peak value: 20·log10|x|.
func Peak(x float64) float64 { return 20 * math.Log10(math.Abs(x)) }

// The poles of the A-weighting in Hz: IEC 61672-1:2013, annex E, from fr = 1000, fL = 10^1.5, fH = 10^3.9,
// fA = 10^2.45 and D² = ½.
const (
	pole1 = 20.598997057618316
	pole2 = 107.65264864304629
	pole3 = 737.8622307362901
	pole4 = 12194.217147998012
)

// AWeighting returns the A-weighting at f Hz in dB, 0 at 1 kHz:
//
//	A(f) = 20·log10( f4²·f⁴ / ((f²+f1²)·√(f²+f2²)·√(f²+f3²)·(f²+f4²)) ) − A(1000)
//
// IEC 61672-1:2013, equation (E.1).
func AWeighting(f float64) float64 {
	return 20 * math.Log10(aWeight(f)/aWeight(1000))
}

func aWeight(f float64) float64 {
	f2 := f * f
	return pole4 * pole4 * f2 * f2 / ((f2 + pole1*pole1) * math.Sqrt(f2+pole2*pole2) * math.Sqrt(f2+pole3*pole3) * (f2 + pole4*pole4))
}

// Band is a third octave.
type Band struct {
	Nominal           float64 // Hz, as it is named
	Low, Middle, High float64 // Hz, exact
}

// nominal frequencies of a decade of third octaves, from 1000 Hz on.
var nominal = [...]float64{1000, 1250, 1600, 2000, 2500, 3150, 4000, 5000, 6300, 8000}

// Thirds returns the third octaves of IEC 61260-1:2014 (base 10) from the one named 20 Hz to the last whose upper
// edge is not above the given frequency in Hz:  fm = 1000·10^(x/10), edges fm·10^(±1/20).
func Thirds(top float64) []Band {
	var bands []Band
	for x := -17; ; x++ {
		decade, index := x/10, x%10
		if index < 0 {
			decade, index = decade-1, index+10
		}
		middle := 1000 * math.Pow(10, float64(x)/10)
		b := Band{
			Nominal: nominal[index] * math.Pow(10, float64(decade)),
			Low:     middle * math.Pow(10, -1./20), Middle: middle, High: middle * math.Pow(10, 1./20),
		}
		if b.High > top*(1+1e-12) {
			return bands
		}
		bands = append(bands, b)
	}
}
