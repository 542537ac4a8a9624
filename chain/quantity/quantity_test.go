package quantity

import (
	"math"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

// read is how near a value reads to the number that it writes.
const read = 1e-15

func si(t *testing.T, k Kind, text string) float64 {
	t.Helper()
	v, err := Parse(k, text)
	if err != nil {
		t.Fatal(err)
	}
	return v.SI
}

func near(t *testing.T, text string, got, want, relative float64) {
	t.Helper()
	if !(math.Abs(got-want) <= relative*math.Abs(want)) {
		t.Errorf("%q reads %.17g, want %.17g", text, got, want)
	}
}

// Examples of IEC 60062:2016, letter codes.
func TestLetterCodesAreThoseOfIEC60062(t *testing.T) {
	for text, want := range map[string]float64{
		"R47": 0.47, "4R7": 4.7, "47R": 47, "470R": 470, "100R": 100, "4K7": 4700, "47K": 47000, "47K3": 47300, "470K": 470000, "4M7": 4.7e6,
		"1M": 1e6, "R10": 0.1, "1R0": 1, "2K21": 2210, "4k7": 4700,
	} {
		near(t, text, si(t, Resistance, text), want, read)
	}
	for text, want := range map[string]float64{
		"p1": 1e-13, "p33": 3.3e-13, "1p0": 1e-12, "3p3": 3.3e-12, "33p": 3.3e-11, "330p": 3.3e-10, "n33": 3.3e-10, "1n0": 1e-9, "2n2": 2.2e-9,
		"3n3": 3.3e-9, "33n": 3.3e-8, "330n": 3.3e-7, "u33": 3.3e-7, "1u0": 1e-6, "3u3": 3.3e-6, "33u": 3.3e-5, "3m3": 3.3e-3, "4µ7": 4.7e-6, "4μ7": 4.7e-6,
	} {
		near(t, text, si(t, Capacitance, text), want, read)
	}
}

func TestValuesAsPeopleWriteThem(t *testing.T) {
	for _, c := range []struct {
		kind Kind
		text string
		want float64
	}{
		{Resistance, "4.7k", 4700}, {Resistance, "2.2kohm", 2200}, {Resistance, "2.2kΩ", 2200}, {Resistance, "2.2 kΩ", 2200}, {Resistance, "4700", 4700}, {Resistance, "0.01R", 0.01},
		{Capacitance, "0.1uF", 1e-7}, {Capacitance, "100e-9", 1e-7}, {Capacitance, "104", 1e-7}, {Capacitance, "100nF", 1e-7},
		{Voltage, "3.3V", 3.3}, {Voltage, "20mV", 0.02}, {Voltage, "−5V", -5},
		{Frequency, "16kHz", 16000}, {Frequency, "1M", 1e6}, {Frequency, "9615.38", 9615.38},
		{SlewRate, "0.5V/us", 5e5}, {SlewRate, "0.5V/µs", 5e5}, {NoiseVoltage, "35nV/rtHz", 35e-9}, {NoiseVoltage, "35nV/√Hz", 35e-9}, {NoiseCurrent, "0.5pA/rtHz", 5e-13},
		{Ratio, "1%", 0.01}, {Ratio, "100dB", 1e5}, {Decibels, "40dB", 40}, {Decibels, "-60dBFS", -60}, {Time, "2us", 2e-6}, {Current, "0.3mA", 3e-4},
		{Temperature, "25C", 298.15}, {Temperature, "298K", 298}, {Angle, "60deg", 60}, {Angle, "60", 60},
		{Level, "2Vrms", 2}, {Level, "0.8Vpp", 0.4 / math.Sqrt2}, {Level, "0.4Vp", 0.4 / math.Sqrt2},
	} {
		near(t, c.text, si(t, c.kind, c.text), c.want, read)
	}
}

// 0 dB SPL is 20 µPa (IEC 61672-1); 0 dBu is 1 mW in 600 Ω; a sensitivity re 1 V/µbar is 20 dB less than re 1 V/Pa.
func TestLevels(t *testing.T) {
	for _, c := range []struct {
		kind Kind
		text string
		want float64
	}{
		{SoundLevel, "94dBSPL", 1.00237446725}, {SoundLevel, "93.9794000867dBSPL", 1}, {Level, "0dBu", 0.774596669241}, {Level, "+4dBu", 1.22765298798},
		{Level, "-10dBV", 0.316227766017}, {Sensitivity, "-42dBV/Pa", 7.94328234724e-3}, {Sensitivity, "8mV/Pa", 8e-3}, {Sensitivity, "-62dB/ubar", 7.94328234724e-3},
		{Sensitivity, "-38dBV/Pa", 12.5892541179e-3},
	} {
		near(t, c.text, si(t, c.kind, c.text), c.want, 5e-12) // the table has twelve figures
	}
	v, err := Parse(Level, "10mVpp")
	if err != nil || v.Unit != "Vpp" {
		t.Fatalf("%+v, %v", v, err)
	}
	near(t, "its peak", v.Peak(), 5e-3, read)
}

func TestWhatIsWrongIsTold(t *testing.T) {
	for _, c := range []struct {
		kind Kind
		text string
		want string
	}{
		{Resistance, "", "nothing is there"}, {Resistance, "4,7k", "decimal mark"}, {Resistance, "10nF", "no unit of it"}, {Resistance, "4K7J", "tolerance"},
		{Resistance, "1e400", "out of range"}, {Resistance, "k", "does not begin with a number"}, {Resistance, strings.Repeat("1", 1<<16), "too long"},
		{Resistance, "1\xfck", ""}, {Capacitance, "2n2K", "tolerance"}, {Capacitance, "999", "power of ten"}, {Capacitance, "001", "two figures"},
		{Level, "1V", "Vrms"}, {Level, "1", "unit is missing"}, {Temperature, "25", "unit is missing"}, {Frequency, "NaN", "number"}, {Voltage, "1.2.3V", "number"},
	} {
		if v, err := Parse(c.kind, c.text); err == nil {
			t.Errorf("%q reads %v", c.text, v)
		} else if !strings.Contains(err.Error(), c.want) || strings.Contains(err.Error(), "\n") || len(err.Error()) > 300 {
			t.Errorf("%q: %v", c.text, err)
		}
	}
	for kind, text := range map[Kind]string{Capacitance: "100", Resistance: "1m"} {
		if v, err := Parse(kind, text); err != nil || v.Note == "" {
			t.Errorf("%q reads without a word: %+v, %v", text, v, err)
		}
	}
}

func TestFormat(t *testing.T) {
	for _, c := range []struct {
		kind Kind
		si   float64
		want string
	}{
		{Resistance, 4700, "4.7 kΩ"}, {Capacitance, 1e-7, "100 nF"}, {Voltage, 3.3, "3.3 V"}, {Voltage, -0.02, "−20 mV"}, {Frequency, 16000, "16 kHz"},
		{SlewRate, 4e5, "0.4 V/µs"}, {NoiseVoltage, 40e-9, "40 nV/√Hz"}, {Resistance, 999.96, "1 kΩ"}, {Resistance, 0, "0 Ω"}, {Ratio, 0.01, "1 %"}, {SoundLevel, 1, "93.98 dB SPL"},
		{Temperature, 298.15, "25 °C"}, {Capacitance, 4.7e-6, "4.7 µF"}, {Decibels, -3.25, "−3.25 dB"}, {Angle, 45, "45°"},
	} {
		if got := Format(c.kind, c.si); got != c.want {
			t.Errorf("%g is %q, want %q", c.si, got, c.want)
		}
	}
}

func TestCodesReadBack(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		k := rapid.SampledFrom([]Kind{Resistance, Capacitance}).Draw(t, "kind")
		figures := rapid.IntRange(100, 999).Draw(t, "figures")
		low, high := -2, 9
		if k == Capacitance {
			low, high = -14, -3
		}
		want := float64(figures) * math.Pow(10, float64(rapid.IntRange(low, high).Draw(t, "power")-2))
		code := FormatCode(k, want)
		v, err := Parse(k, code)
		if err != nil || !(math.Abs(v.SI-want) <= 1e-12*want) || v.Note != "" && want >= 1 {
			t.Fatalf("%g is %q, which reads %+v, %v", want, code, v, err)
		}
	})
}

func FuzzParse(f *testing.F) {
	for _, s := range []string{"4k7", "-42dBV/Pa", "1\xfck", "104", "4µ7", "0.5V/us", "1e-400", "−", "2.2 kΩ"} {
		for k := Resistance; k <= Angle; k++ {
			f.Add(uint8(k), s)
		}
	}
	f.Fuzz(func(t *testing.T, kind uint8, text string) {
		k := Kind(kind) % (Angle + 1)
		v, err := Parse(k, text)
		if err == nil && (math.IsNaN(v.SI) || math.IsInf(v.SI, 0)) {
			t.Errorf("%q reads %v", text, v.SI)
		}
		if err == nil {
			Format(k, v.SI)
		}
	})
}
