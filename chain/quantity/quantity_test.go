package quantity

import (
	"errors"
	"fmt"
	"math"
	"strconv"
	"strings"
	"testing"

	"midrail/chain/preferred"

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
		{Resistance, "47KJ", "tolerance"}, {Resistance, "100RF", "tolerance"}, {Resistance, "R47F", "tolerance"}, {Resistance, "6K8K", "letter K"},
		{Capacitance, "104K", "letter K"}, {Capacitance, "104M", "letter M"}, {Capacitance, "100nJ", "tolerance"}, {Capacitance, "4k7", "no unit of it"},
		{Resistance, "NaN", "number"}, {Resistance, "Inf", "number"}, {Resistance, "-1e999", "out of range"}, {Voltage, "2Vrms", "no unit of it"},
		{Resistance, "1e400", "out of range"}, {Resistance, "k", "does not begin with a number"}, {Resistance, strings.Repeat("1", 1<<16), "too long"},
		{Resistance, "1\xfck", ""}, {Capacitance, "2n2K", "tolerance"}, {Capacitance, "999", "power of ten"}, {Capacitance, "001", "two figures"},
		{Level, "1V", "Vrms"}, {Level, "20mV", "Vrms"}, {Level, "1e9dBV", "out of range"}, {Level, "1", "unit is missing"}, {Temperature, "25", "unit is missing"}, {Frequency, "NaN", "number"}, {Voltage, "1.2.3V", "number"},
	} {
		if v, err := Parse(c.kind, c.text); err == nil {
			t.Errorf("%q reads %v", c.text, v)
		} else if !strings.Contains(err.Error(), c.want) || strings.Contains(err.Error(), "\n") || len(err.Error()) > 300 {
			t.Errorf("%q: %v", c.text, err)
		}
	}
}

// What can be read, but may not have been meant.
func TestNotes(t *testing.T) {
	for _, c := range []struct {
		kind Kind
		text string
		si   float64
		note string
	}{
		{Capacitance, "100", 10e-12, `"10p" or "100p"`}, {Capacitance, "470", 47e-12, `"47p" or "470p"`}, {Capacitance, "2u2F", 2.2e-6, "farad"},
		{Resistance, "1m", 1e-3, "M is mega"}, {Resistance, "4.7m", 4.7e-3, "M is mega"}, {Resistance, "4m7", 4.7e-3, "M is mega"},
		{Capacitance, "104", 1e-7, ""}, {Capacitance, "479e-12", 479e-12, ""}, {Capacitance, "10m", 1e-2, ""}, {Resistance, "1mohm", 1e-3, ""}, {Resistance, "100", 100, ""},
		{Resistance, "1T", 1e12, ""}, {Resistance, "1M", 1e6, ""}, {Capacitance, "100nF", 1e-7, ""}, {Capacitance, "104F", 104, ""},
	} {
		v, err := Parse(c.kind, c.text)
		if err != nil {
			t.Error(err)
			continue
		}
		near(t, c.text, v.SI, c.si, read)
		if !strings.Contains(v.Note, c.note) || (v.Note == "") != (c.note == "") {
			t.Errorf("the note on %q is %q, want %q", c.text, v.Note, c.note)
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

// Every preferred value of IEC 60063 that a part comes in is typed, and read back as the same number.
func TestCodesReadBack(t *testing.T) {
	for kind, powers := range map[Kind][2]int{Resistance: {-2, 11}, Capacitance: {-14, 0}} {
		for power := powers[0]; power <= powers[1]; power++ {
			for _, series := range []preferred.Series{preferred.E24, preferred.E192} {
				for _, figures := range series.Decade() {
					want, err := strconv.ParseFloat(fmt.Sprintf("%de%d", figures, power-2), 64)
					if err != nil {
						t.Fatal(err)
					}
					code := FormatCode(kind, want)
					// The note is on milliohms, which nobody can type without.
					if v, err := Parse(kind, code); err != nil || v.SI != want || v.Note != "" && want >= 1 {
						t.Fatalf("%g is %q, which reads %+v, %v", want, code, v, err)
					}
				}
			}
		}
	}
}

// fourFigures is what is lost at most, of a number, by printing four figures of it.
const fourFigures = 0.5e-3

func TestFormatReadsBack(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		k := Kind(rapid.IntRange(int(Resistance), int(Angle)).Draw(t, "kind"))
		// As large and small as the prefixes from f to T go, in the figure that is printed.
		shown := math.Pow(10, rapid.Float64Range(-15, 14).Draw(t, "power"))
		if rapid.Bool().Draw(t, "negative") {
			shown = -shown
		}
		want, loss := shown, fourFigures*math.Abs(shown)
		switch k {
		case SoundLevel:
			shown = math.Remainder(shown, 200)
			want = Hearing * math.Pow(10, shown/20)
			loss = want * math.Expm1(fourFigures*math.Abs(shown)*math.Ln10/20) * 1.01
			loss += want * 1e-9 // a level near 0 dB is that of a number near 1
		case Temperature:
			want = math.Abs(math.Remainder(shown, 1000))
			loss = fourFigures*math.Abs(want-273.15) + 1e-9
		}
		text := Format(k, want)
		v, err := Parse(k, text)
		switch {
		case err != nil:
			t.Fatal(err)
		case !(math.Abs(v.SI-want) <= loss*(1+1e-9)):
			t.Fatalf("%g is %q, which reads %g", want, text, v.SI)
		}
	})
}

// longestError has room for the text twice, each byte written as \x12, and for the words.
const longestError = 2*4*longest + 200

func FuzzParse(f *testing.F) {
	for _, s := range []string{"4k7", "-42dBV/Pa", "1\xfck", "104", "4µ7", "0.5V/us", "1e-400", "−", "2.2 kΩ", "4K7J", "1e400", "NaN", "4,7k", "\n", "n33", "104K"} {
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
		} else if len(err.Error()) > longestError || strings.Contains(err.Error(), "\n") {
			t.Errorf("%q: %v", text, err)
		}
	})
}

// A semicolon in what was written stays with what is wrong.
func TestErrorsPartTheRemedy(t *testing.T) {
	_, err := Parse(Resistance, "100; k")
	fault, ok := errors.AsType[*Error](err)
	if !ok || fault.Text != `"100; k" is not a resistance: "; k" is no unit of it` || fault.Remedy != `write it as "4k7", "100R" or 4700` {
		t.Errorf("%#v", err)
	}
	for _, text := range []string{"1V", "20 mV"} {
		if _, err = Parse(Level, text); err == nil || !strings.HasSuffix(err.Error(), "; write it as \""+text+"rms\", \""+text+"p\" or \""+text+"pp\"") {
			t.Errorf("%q: %v", text, err)
		}
	}
}
