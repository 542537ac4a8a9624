package quantity

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"unicode/utf8"
)

// tolerances are the letters that IEC 60062 gives tolerances, symmetric and not.
const tolerances = "ELPWBCDFGHJKMNQSTZ"

// parseCode reads a letter code of IEC 60062, in which the multiplier stands for the decimal point ("4k7", "R47",
// "2u2"), or for a capacitor the three digits of its marking ("104": 10·10⁴ pF). It reports false where the text is
// neither; why is not empty where it is one that cannot be taken.
func parseCode(k Kind, t string) (v Value, ok bool, why string) {
	whole, tail := leadingDigits(t)
	if k == Capacitance && len(whole) == 3 {
		switch {
		case tail == "":
			return parseMarking(t)
		case tail != "F" && isTolerance(tail): // "104K"; "104F" is farads
			return Value{}, false, hasTolerance(tail)
		}
	}
	letter, after := firstRune(tail)
	fraction, rest := leadingDigits(after)
	exponent, known := codeLetter(k, letter)
	if !known || whole == "" && fraction == "" {
		return Value{}, false, ""
	}
	switch {
	case rest == "":
	case k == Capacitance && rest == "F": // a farad, or 1 %: the same value
		if fraction == "" {
			return Value{}, false, "" // "100nF" is a number with a unit
		}
		v.Note = fmt.Sprintf("F in %q is read as farad; a tolerance has its own key", t)
	case isTolerance(rest):
		return Value{}, false, hasTolerance(rest)
	case k == Resistance && fraction != "" && (rest == "ohm" || rest == "ohms" || rest == "Ω" || rest == "\u2126"): // 4k7ohm
	default:
		return Value{}, false, ""
	}
	number := "0" + whole
	if fraction != "" {
		number += "." + fraction
	}
	v.SI = scaled(number, exponent)
	if k == Resistance && letter == "m" {
		v.Note = milliohms(t)
	}
	return v, true, ""
}

func isTolerance(s string) bool { return len(s) == 1 && strings.Contains(tolerances, s) }

func hasTolerance(letter string) string {
	return fmt.Sprintf("the letter %s at its end is a tolerance, which has its own key", letter)
}

// milliohms is the note on a resistance that ends in m.
func milliohms(t string) string { return fmt.Sprintf("%q is milliohms; M is mega", t) }

// leadingDigits parts the digits at the beginning from the rest.
func leadingDigits(s string) (digits, rest string) {
	i := 0
	for i < len(s) && isDigit(s[i]) {
		i++
	}
	return s[:i], s[i:]
}

// parseMarking reads the three digits on a capacitor: two figures and the power of ten, in picofarads.
func parseMarking(t string) (v Value, ok bool, why string) {
	figures, _ := strconv.Atoi(t[:2])
	power := int(t[2] - '0')
	if figures < 10 {
		return Value{}, false, "a three-digit code begins with two figures"
	}
	if power > 7 {
		return Value{}, false, "a three-digit code ends in a power of ten from 0 to 7"
	}
	v = Value{SI: scaled(t[:2], power-12)}
	if power == 0 {
		v.Note = fmt.Sprintf("%q is read as a three-digit code, %s; write %q or %q to say which", t, Format(Capacitance, v.SI), FormatCode(Capacitance, v.SI), t+"p")
	}
	return v, true, ""
}

// codeLetter returns the power of ten of a letter in a code of the kind.
func codeLetter(k Kind, letter string) (exponent int, ok bool) {
	if k == Resistance {
		switch letter {
		case "R", "Ω", "\u2126": // omega and the ohm sign
			return 0, true
		case "m", "k", "K", "M", "G", "T":
			return prefixOf(letter)
		}
		return 0, false
	}
	switch letter {
	case "p", "n", "u", "µ", "μ", "m":
		return prefixOf(letter)
	case "F":
		return 0, true
	}
	return 0, false
}

func firstRune(s string) (first, rest string) {
	_, n := utf8.DecodeRuneInString(s)
	return s[:n], s[n:]
}

// Format prints a value in SI as the trade writes it, with up to four significant digits: "4.7 kΩ", "100 nF",
// "3.3 V", "16 kHz", "0.4 V/µs", "40 nV/√Hz". [Parse] reads it back. It panics for a kind that there is not.
func Format(k Kind, si float64) string {
	unit := ""
	switch k {
	case Resistance:
		unit = "Ω"
	case Capacitance:
		unit = "F"
	case Voltage:
		unit = "V"
	case Level:
		unit = "V RMS"
	case SoundLevel:
		return minus(digits(20*math.Log10(si/Hearing))) + " dB SPL"
	case Sensitivity:
		unit = "V/Pa"
	case Frequency:
		unit = "Hz"
	case Time:
		unit = "s"
	case Current:
		unit = "A"
	case SlewRate:
		return minus(digits(si*1e-6)) + " V/µs"
	case NoiseVoltage:
		unit = "V/√Hz"
	case NoiseCurrent:
		unit = "A/√Hz"
	case Ratio:
		return minus(digits(si*100)) + " %"
	case Decibels:
		return minus(digits(si)) + " dB"
	case Angle:
		return minus(digits(si)) + "°"
	case Temperature:
		return minus(digits(si-273.15)) + " °C"
	default:
		panic("quantity: no such kind")
	}
	number, prefix := engineering(si)
	return minus(number) + " " + prefix + unit
}

func minus(s string) string { return strings.Replace(s, "-", "−", 1) }

// digits prints x with up to four significant digits.
func digits(x float64) string {
	return strconv.FormatFloat(x, 'f', decimals(x), 64)
}

// decimals returns how many decimals show x to four significant digits at most, without zeros at the end.
func decimals(x float64) int {
	if x == 0 || math.IsInf(x, 0) || math.IsNaN(x) {
		return 0
	}
	rounded, _ := strconv.ParseFloat(strconv.FormatFloat(x, 'e', 3, 64), 64)
	s := strconv.FormatFloat(rounded, 'f', -1, 64)
	if i := strings.IndexByte(s, '.'); i >= 0 {
		return len(s) - i - 1
	}
	return 0
}

// engineering returns x as a number from 1 to 1000 and the prefix it goes with.
func engineering(x float64) (number, prefix string) {
	prefixes := [...]string{"f", "p", "n", "µ", "m", "", "k", "M", "G", "T"}
	if x == 0 || math.IsInf(x, 0) || math.IsNaN(x) {
		return digits(x), ""
	}
	// Rounding to four digits may carry into the next power of a thousand.
	text := strconv.FormatFloat(math.Abs(x), 'e', 3, 64)
	exponent, _ := strconv.Atoi(text[strings.IndexByte(text, 'e')+1:])
	i := min(max(floorDiv(exponent, 3)+5, 0), len(prefixes)-1)
	return digits(scaled(strconv.FormatFloat(x, 'e', -1, 64), -3*(i-5))), prefixes[i]
}

func floorDiv(a, b int) int {
	q := a / b
	if a%b < 0 {
		q--
	}
	return q
}

// FormatCode prints a resistance or capacitance as people type it in a chain file, "4k7", "180k", "100n", with as many
// figures as it has up to four; it panics for other kinds.
func FormatCode(k Kind, si float64) string {
	number, prefix := engineering(si)
	switch {
	case k == Capacitance && prefix == "f": // which no capacitor is marked in
		number, prefix = digits(si*1e12), "p"
	case k == Resistance && prefix == "":
		prefix = "R"
	case k == Resistance, k == Capacitance && prefix != "":
		prefix = strings.Replace(prefix, "µ", "u", 1)
	case k == Capacitance:
		prefix = "F"
	default:
		panic("quantity: only parts have codes")
	}
	if whole, fraction, ok := strings.Cut(number, "."); ok {
		return whole + prefix + fraction
	}
	return number + prefix
}
