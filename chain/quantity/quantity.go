package quantity

import (
	"fmt"
	"math"
	"strconv"
	"strings"
)

// Kind tells what a value is of.
type Kind uint8

// The kinds, with the SI unit each is read to.
const (
	Resistance   Kind = iota // Ω
	Capacitance              // F
	Voltage                  // V
	Level                    // V RMS of a sine: Vrms, Vp, Vpp, dBV, dBu
	SoundLevel               // Pa RMS: dBSPL
	Sensitivity              // V/Pa
	Frequency                // Hz
	Time                     // s
	Current                  // A
	SlewRate                 // V/s
	NoiseVoltage             // V/√Hz
	NoiseCurrent             // A/√Hz
	Ratio                    // 1: percent, or dB of an amplitude
	Decibels                 // dB
	Temperature              // K
	Angle                    // degrees
)

// Value is a value read.
type Value struct {
	SI   float64
	Unit string // as written, in one spelling: "Vrms", "Vp", "Vpp", "dBV", "dBu", "dBSPL", "V", …; "" where none was
	Note string // what may not have been meant; mostly ""
}

// Peak returns, of a [Level], the peak of a sine of that level: half of "10mVpp", all of "0.4Vp", √2 of "2Vrms".
func (v Value) Peak() float64 { return v.SI * math.Sqrt2 }

// Reference levels.
const (
	// DBu is 0 dBu in V: 1 mW in 600 Ω, √0.6 V (IEC 60268 rounds it to 0.775 V).
	DBu = 0.7745966692414834
	// Hearing is 0 dB of sound pressure level in Pa (IEC 61672-1, ISO 1683).
	Hearing = 20e-6
	// Microbar is 1 µbar in Pa.
	Microbar = 0.1
)

// unit is one way to write a kind's unit. A logarithmic one is ref·10^(x/20).
type unit struct {
	name     string   // as Value.Unit gives it
	spelled  []string // as people write it, longest first where one ends another
	factor   float64
	decibels bool
	prefixes bool // whether n, µ, m, k, M, … may stand before it
}

// kindOf has each kind's name, the units it takes, and whether it takes none.
type kindOf struct {
	name  string
	units []unit
	bare  bool   // a plain number is in the SI unit
	like  string // how to write it
	code  bool   // letter codes of IEC 60062
}

func kindTable(k Kind) kindOf {
	volt := func(name string, factor float64, spelled ...string) unit {
		return unit{name: name, spelled: spelled, factor: factor, prefixes: true}
	}
	hertz := []string{"/rtHz", "/√Hz", "/sqrtHz"}
	per := func(base string, ends []string) []string {
		var all []string
		for _, e := range ends {
			all = append(all, base+e)
		}
		return all
	}
	switch k {
	case Resistance:
		return kindOf{"a resistance", []unit{{name: "Ω", spelled: []string{"ohms", "ohm", "Ω", "\u2126"}, factor: 1, prefixes: true}, {name: "Ω", spelled: []string{"R"}, factor: 1}}, true, `"4k7", "100R" or 4700`, true}
	case Capacitance:
		return kindOf{"a capacitance", []unit{{name: "F", spelled: []string{"F"}, factor: 1, prefixes: true}}, true, `"100n", "2u2" or 100e-9`, true}
	case Voltage:
		return kindOf{"a voltage", []unit{volt("V", 1, "V")}, true, `"3.3V", "20mV" or 3.3`, false}
	case Level:
		return kindOf{"a signal level", []unit{
			volt("Vrms", 1, "Vrms", "VRMS", "V RMS"), volt("Vpp", 1/(2*math.Sqrt2), "Vpp"), volt("Vp", 1/math.Sqrt2, "Vp"),
			{name: "dBV", spelled: []string{"dBV"}, factor: 1, decibels: true}, {name: "dBu", spelled: []string{"dBu"}, factor: DBu, decibels: true},
		}, false, `"2Vrms", "0.8Vpp", "0.4Vp", "-10dBV" or "+4dBu"`, false}
	case SoundLevel:
		return kindOf{"a sound level", []unit{{name: "dBSPL", spelled: []string{"dBSPL", "dB SPL"}, factor: Hearing, decibels: true}}, false, `"104dBSPL"`, false}
	case Sensitivity:
		return kindOf{"a sensitivity", []unit{
			{name: "dBV/Pa", spelled: []string{"dBV/Pa"}, factor: 1, decibels: true},
			{name: "dB/µbar", spelled: []string{"dB/ubar", "dB/µbar", "dB/μbar"}, factor: 1 / Microbar, decibels: true},
			volt("V/Pa", 1, "V/Pa"),
		}, false, `"-42dBV/Pa", "8mV/Pa" or "-62dB/ubar"`, false}
	case Frequency:
		return kindOf{"a frequency", []unit{volt("Hz", 1, "Hz")}, true, `"16kHz", "1M" or 9615.38`, false}
	case Time:
		return kindOf{"a time", []unit{volt("s", 1, "s")}, true, `"2us" or 0.25`, false}
	case Current:
		return kindOf{"a current", []unit{volt("A", 1, "A")}, true, `"0.3mA" or 0.0003`, false}
	case SlewRate:
		return kindOf{"a slew rate", []unit{volt("V/µs", 1e6, "V/us", "V/µs", "V/μs"), volt("V/ms", 1e3, "V/ms"), volt("V/s", 1, "V/s")}, true, `"0.5V/us" or 0.5e6`, false}
	case NoiseVoltage:
		return kindOf{"a noise density", []unit{volt("V/√Hz", 1, per("V", hertz)...)}, true, `"35nV/rtHz" or 35e-9`, false}
	case NoiseCurrent:
		return kindOf{"a noise current density", []unit{volt("A/√Hz", 1, per("A", hertz)...)}, true, `"0.5pA/rtHz" or 0.5e-12`, false}
	case Ratio:
		return kindOf{"a ratio", []unit{{name: "%", spelled: []string{"%"}, factor: 0.01}, {name: "dB", spelled: []string{"dB"}, factor: 1, decibels: true}}, true, `"1%", "100dB" or 0.01`, false}
	case Decibels:
		return kindOf{"a level in decibels", []unit{{name: "dBFS", spelled: []string{"dBFS"}, factor: 1}, {name: "dB", spelled: []string{"dB"}, factor: 1}}, true, `"40dB" or 40`, false}
	case Temperature:
		return kindOf{"a temperature", []unit{{name: "°C", spelled: []string{"°C", "C"}, factor: 1}, {name: "K", spelled: []string{"K"}, factor: 1}}, false, `"25C" or "298K"`, false}
	case Angle:
		return kindOf{"an angle", []unit{{name: "°", spelled: []string{"°", "deg"}, factor: 1}}, true, `"60deg" or 60`, false}
	}
	panic("quantity: no such kind")
}

// longest is the length in bytes of the longest text that is read.
const longest = 64

// Error says what is wrong with a text that is no value of its kind. Both are of one line without a position.
type Error struct {
	Text   string // what is wrong
	Remedy string // how to write it
}

// Error returns what is wrong, "; ", how to write it.
func (e *Error) Error() string { return e.Text + "; " + e.Remedy }

// Parse reads a value of the kind as people write it; blanks around it and before the unit do not matter. The value is
// finite; whether it is in range is the caller's to tell. The error is an *[Error]. Parse panics for a kind that there
// is not.
func Parse(k Kind, text string) (Value, error) {
	kind := kindTable(k)
	wrong := func(why string) (Value, error) {
		if len(text) > longest {
			text = text[:longest] + "…"
		}
		return Value{}, &Error{fmt.Sprintf("%q is not %s: %s", text, kind.name, why), "write it as " + kind.like}
	}
	t := strings.TrimSpace(text)
	switch {
	case t == "":
		return wrong("nothing is there")
	case len(t) > longest:
		return wrong("too long")
	case strings.ContainsRune(t, ','):
		return wrong("the decimal mark is a point, not a comma")
	}
	number, rest := splitNumber(t)
	if kind.code {
		if v, ok, why := parseCode(k, t); ok || why != "" {
			if why != "" {
				return wrong(why)
			}
			return v, nil
		}
	}
	if number == "" {
		return wrong("it does not begin with a number")
	}
	x, err := strconv.ParseFloat(number, 64)
	if err != nil || math.IsInf(x, 0) {
		return wrong("the number is out of range")
	}
	v := Value{SI: x}
	rest = strings.TrimSpace(rest)
	if rest == "" {
		if !kind.bare {
			return wrong("the unit is missing")
		}
		return v, nil
	}
	for _, u := range kind.units {
		for _, s := range u.spelled {
			prefix, ok := strings.CutSuffix(rest, s)
			if !ok {
				continue
			}
			exponent, ok := prefixOf(strings.TrimSpace(prefix))
			if prefix != "" && (!ok || !u.prefixes) {
				continue
			}
			return u.value(k, number, x, exponent)
		}
	}
	// A prefix alone, "16k", where the unit may be left out and takes one.
	if exponent, ok := prefixOf(rest); ok && kind.bare && kind.units[0].prefixes {
		v.SI = scaled(number, exponent)
		if k == Resistance && rest == "m" {
			v.Note = milliohms(t)
		}
		return v, nil
	}
	if plain, ok := strings.CutSuffix(rest, "V"); ok && k == Level {
		if _, ok := prefixOf(strings.TrimSpace(plain)); ok {
			kind.like = fmt.Sprintf("%q, %q or %q", t+"rms", t+"p", t+"pp")
			return wrong("plain volts may be RMS, peak or peak to peak")
		}
	}
	return wrong(fmt.Sprintf("%q is no unit of it", rest))
}

// value brings a number in the unit to SI.
func (u unit) value(k Kind, number string, x float64, exponent int) (Value, error) {
	v := Value{Unit: u.name}
	switch {
	case k == Temperature && u.name == "°C":
		v.SI = x + 273.15
	case u.decibels:
		v.SI = u.factor * math.Pow(10, x/20)
	default:
		v.SI = scaled(number, exponent) * u.factor
	}
	if math.IsInf(v.SI, 0) {
		return Value{}, &Error{fmt.Sprintf("%s%s is out of range", number, u.name), "check the number"}
	}
	return v, nil
}

// scaled returns number·10^exponent, rounded once.
func scaled(number string, exponent int) float64 {
	mantissa, old, found := strings.Cut(strings.ToLower(number), "e")
	if found {
		if e, err := strconv.Atoi(old); err == nil {
			exponent += e
		}
	}
	x, _ := strconv.ParseFloat(mantissa+"e"+strconv.Itoa(exponent), 64)
	return x
}

// prefixOf returns the power of ten of an SI prefix; "" is 0.
func prefixOf(s string) (exponent int, ok bool) {
	switch s {
	case "":
		return 0, true
	case "f":
		return -15, true
	case "p":
		return -12, true
	case "n":
		return -9, true
	case "u", "µ", "μ":
		return -6, true
	case "m":
		return -3, true
	case "k", "K":
		return 3, true
	case "M":
		return 6, true
	case "G":
		return 9, true
	case "T":
		return 12, true
	}
	return 0, false
}

// splitNumber parts a leading decimal number, with sign and exponent, from the rest.
func splitNumber(t string) (number, rest string) {
	i := 0
	if i < len(t) && (t[i] == '+' || t[i] == '-') {
		i++
	} else if m, ok := strings.CutPrefix(t, "−"); ok { // the typographic minus
		number, rest := splitNumber("-" + m)
		return number, rest
	}
	digits := 0
	for i < len(t) && (isDigit(t[i]) || t[i] == '.') {
		if isDigit(t[i]) {
			digits++
		}
		i++
	}
	if digits == 0 || strings.Count(t[:i], ".") > 1 {
		return "", t
	}
	if j := i + 1; i < len(t) && (t[i] == 'e' || t[i] == 'E') {
		if j < len(t) && (t[j] == '+' || t[j] == '-') {
			j++
		}
		k := j
		for k < len(t) && isDigit(t[k]) {
			k++
		}
		if k > j {
			i = k
		}
	}
	return t[:i], t[i:]
}

func isDigit(b byte) bool { return '0' <= b && b <= '9' }
