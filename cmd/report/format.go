package report

import (
	"fmt"
	"math"
	"sort"
	"strconv"
	"strings"
	"unicode"
)

const absent = "–" // what people read where a figure is not there

// clean returns text on one line without anything that a terminal or a page could take as a
// command: what does not print becomes U+FFFD, but for the joiners that some scripts are written with.
func clean(text string) string {
	const nonJoiner, joiner = '\u200c', '\u200d'
	return strings.Map(func(r rune) rune {
		if unicode.IsPrint(r) || r == nonJoiner || r == joiner {
			return r
		}
		if unicode.IsSpace(r) {
			return ' '
		}
		return unicode.ReplacementChar
	}, text)
}

// fixed returns x with the given number of decimals and a true minus sign, never "−0".
func fixed(x float64, decimals int) string {
	s := strconv.FormatFloat(math.Abs(x), 'f', decimals, 64)
	if x < 0 && strings.Trim(s, "0.") != "" {
		return "−" + s
	}
	return s
}

// significant returns x to the given number of significant digits, without an exponent.
func significant(x float64, digits int) string {
	if x == 0 {
		return "0"
	}
	// The exponent of the rounded figure, so that 9.996 to three digits is 10.0.
	e := strconv.FormatFloat(math.Abs(x), 'e', digits-1, 64)
	exponent, err := strconv.Atoi(e[strings.IndexByte(e, 'e')+1:])
	if err != nil {
		return absent
	}
	rounded, err := strconv.ParseFloat(e, 64)
	if err != nil {
		return absent
	}
	return fixed(math.Copysign(rounded, x), max(0, digits-1-exponent))
}

// trimmed drops the zeros at the end of a decimal fraction.
func trimmed(s string) string {
	if !strings.Contains(s, ".") {
		return s
	}
	return strings.TrimRight(strings.TrimRight(s, "0"), ".")
}

// people returns n by f, or the mark of absence.
func people(n Number, f func(float64) string) string {
	x, there := n.Value()
	if !there {
		return absent
	}
	return f(x)
}

func dbfs(n Number) string {
	return people(n, func(x float64) string { return fixed(x, 1) + " dBFS" })
}

func decibels(n Number) string {
	return people(n, func(x float64) string { return fixed(x, 1) + " dB" })
}

// bare returns n with the given number of decimals and no unit, for columns that have it above.
func bare(n Number, decimals int) string {
	return people(n, func(x float64) string { return fixed(x, decimals) })
}

// signed returns a change in decibels, with its sign.
func signed(n Number) string {
	return people(n, func(x float64) string {
		if s := fixed(x, 1); x < 0 || s == "0.0" {
			return s + " dB"
		}
		return "+" + fixed(x, 1) + " dB"
	})
}

// lsb returns a length in steps of the converter.
func lsb(n Number) string {
	return people(n, func(x float64) string { return trimmed(significant(x, 3)) + " LSB" })
}

// slug returns a name as an identifier: letters, digits and hyphens.
func slug(name string) string {
	return strings.Map(func(r rune) rune {
		if r < unicode.MaxASCII && (unicode.IsLetter(r) || unicode.IsDigit(r)) {
			return r
		}
		return '-'
	}, name)
}

// errorDB returns a difference that may be far below a tenth of a decibel.
func errorDB(n Number) string {
	return people(n, func(x float64) string { return significant(x, 2) + " dB" })
}

func volts(n Number) string {
	return people(n, func(x float64) string {
		switch a := math.Abs(x); {
		case a >= 0.09995 || a == 0:
			return fixed(x, 2) + " V"
		case a >= 0.9995e-3:
			return significant(x*1e3, 3) + " mV"
		default:
			return significant(x*1e6, 2) + " µV"
		}
	})
}

func hertz(n Number) string {
	return people(n, func(x float64) string {
		switch a := math.Abs(x); {
		case a >= 1e6:
			return trimmed(significant(x/1e6, 5)) + " MHz"
		case a >= 1e3:
			return trimmed(significant(x/1e3, 5)) + " kHz"
		default:
			return trimmed(significant(x, 5)) + " Hz"
		}
	})
}

// seconds returns a length of time.
func seconds(n Number) string {
	return people(n, func(x float64) string {
		switch a := math.Abs(x); {
		case a == 0:
			return "0 s"
		case a < 0.9995e-3:
			return significant(x*1e6, 3) + " µs"
		case a < 0.9995:
			return significant(x*1e3, 3) + " ms"
		case a < 99.95:
			return significant(x, 3) + " s"
		default:
			return significant(x, 4) + " s"
		}
	})
}

// clock returns a time on the track: 0:03.2, 1:02:03.2.
func clock(n Number) string {
	return people(n, func(x float64) string { return clockTo(x, 1) })
}

// clockTo returns the time x ≥ 0 with the given number of decimals of a second, rounded.
func clockTo(x float64, decimals int) string {
	unit := math.Pow10(decimals)
	total := int64(math.Round(math.Max(x, 0) * unit))
	whole, part := total/int64(unit), total%int64(unit)
	s := fmt.Sprintf("%d:%02d", whole/60, whole%60)
	if whole >= 3600 {
		s = fmt.Sprintf("%d:%02d:%02d", whole/3600, whole/60%60, whole%60)
	}
	if decimals > 0 {
		s += fmt.Sprintf(".%0*d", decimals, part)
	}
	return s
}

// percent returns a fraction as a percentage.
func percent(n Number) string {
	return people(n, func(x float64) string { return trimmed(significant(x*100, 3)) + " %" })
}

// scaled returns a figure in full scale, −1 to 1.
func scaled(n Number) string {
	return people(n, func(x float64) string { return fixed(x, 4) })
}

// count returns n with its digits in threes from five digits on.
func count(n int64) string {
	s := strconv.FormatInt(n, 10)
	if len(s) < 5 {
		return s
	}
	for i := len(s) - 3; i > 0 && s[i-1] != '-'; i -= 3 {
		s = s[:i] + " " + s[i:]
	}
	return s
}

// times returns how often: "never", "once", "214 times".
func times(n int) string {
	switch n {
	case 0:
		return "never"
	case 1:
		return "once"
	}
	return count(int64(n)) + " times"
}

// limitForm is how a limit of the chain file is told.
type limitForm struct {
	words string // its name, in words
	bound string // "at most" or "at least"
	say   func(Number) string
}

// formOf returns how the limit of the given name is told.
func formOf(name string) limitForm {
	switch name {
	case "overload_time":
		return limitForm{"overload time", "at most", percent}
	case "fold_back":
		return limitForm{FoldBack, "at most", dbfs}
	case "fold_back_below_wanted":
		return limitForm{"fold-back below wanted", "at least", decibels}
	case "interference":
		return limitForm{Interference, "at most", dbfs}
	case "noise":
		return limitForm{Noise, "at most", dbfs}
	case "room":
		return limitForm{"room", "at least", decibels}
	case "droop":
		return limitForm{"droop", "at most", decibels}
	case "settling":
		return limitForm{"settling", "at most", seconds}
	}
	return limitForm{strings.ReplaceAll(clean(name), "_", " "), "limit", func(n Number) string {
		return people(n, func(x float64) string { return trimmed(significant(x, 4)) })
	}}
}

func limitName(l Limit) string  { return formOf(l.Name).words }
func limitValue(l Limit) string { return formOf(l.Name).say(l.Value) }

// limitWord returns which way a limit bounds, limitFigure what it is, and limitBound both.
func limitWord(l Limit) string   { return formOf(l.Name).bound }
func limitFigure(l Limit) string { return formOf(l.Name).say(l.Limit) }
func limitBound(l Limit) string  { return limitWord(l) + " " + limitFigure(l) }

// ofChange returns what of a change's unit follows its figures.
func ofChange(c Change) string {
	switch c.Unit {
	case "s", "dBFS":
		return ""
	}
	return strings.TrimPrefix(clean(c.Unit), "dB")
}

// changed returns a figure of a change with its unit, of which [ofChange] may follow.
func changed(n Number, c Change) string {
	switch c.Unit {
	case "s":
		return seconds(n)
	case "dBFS":
		return dbfs(n)
	}
	return decibels(n)
}

// verdict is the answer in words.
type verdict struct {
	Good     bool
	Headline string
	Limits   []string // sentences about the limits that are broken
	Overload []string // sentences about overload, or the room left
	Layers   []string // sentences about fold-back and noise
	Settling []string // a sentence about how long it takes after power-up
}

// judge puts the run in words; every figure in them is one of the run's.
func judge(run *Run) verdict {
	var v verdict
	var broken []string
	for _, l := range run.Limits {
		if !l.Holds {
			broken = append(broken, fmt.Sprintf("%s is %s (%s)", limitName(l), limitValue(l), limitBound(l)))
		}
	}
	stops := 0
	for _, f := range run.Findings {
		if f.Severity == Stop {
			stops++
		}
	}
	overloads := run.Overload.Events > 0 || run.Converter.Saturated > 0
	switch {
	case len(broken) > 0:
		v.Headline = fmt.Sprintf("Does not hold: %d of %s broken", len(broken), plural(len(run.Limits), "limit"))
	case stops > 0:
		v.Headline = "Does not hold: " + plural(stops, "finding") + " to put right first"
	case overloads:
		v.Headline = "It overloads"
		if len(run.Limits) > 0 {
			v.Headline += ", within the limits"
		}
	default:
		v.Good = true
		v.Headline = "Holds: nothing overloads"
		if len(run.Limits) > 0 {
			v.Headline += ", no limit is broken"
		}
	}
	if len(broken) > 0 {
		v.Limits = append(v.Limits, sentence("%s.", strings.Join(broken, "; ")))
	}
	if run.Overload.Events > 0 {
		v.Overload = append(v.Overload, sentence("overloads %s for %s (%s of the track)%s.", times(run.Overload.Events),
			seconds(run.Overload.Seconds), percent(run.Overload.Fraction), worstOf(run)))
	} else if name, room, there := leastRoom(run); there {
		v.Overload = append(v.Overload, sentence("the least room is %s, at %s.", decibels(room), name))
	}
	if run.Converter.Saturated > 0 {
		v.Overload = append(v.Overload, sentence("%s of %s samples saturate the converter.",
			count(run.Converter.Saturated), count(run.Converter.Samples)))
	}
	for _, l := range run.Layers {
		if l.Name == FoldBack || l.Name == Noise {
			v.Layers = append(v.Layers, sentence("%s", layerWords(l)))
		}
	}
	if _, there := run.Rest.Settling.ToPercentS.Value(); there {
		v.Settling = append(v.Settling, sentence("settles to 1 %% in %s.", seconds(run.Rest.Settling.ToPercentS)))
	}
	return v
}

// sentence formats as fmt.Sprintf does and makes the first letter a capital.
func sentence(format string, args ...any) string {
	r := []rune(fmt.Sprintf(format, args...))
	r[0] = unicode.ToUpper(r[0])
	return string(r)
}

// plural returns "1 limit", "3 limits".
func plural(n int, one string) string {
	if n == 1 {
		return "1 " + one
	}
	return count(int64(n)) + " " + one + "s"
}

// worstOf names the stage of the worst overload, its size and its time; empty where it is not told.
func worstOf(run *Run) string {
	w := run.Overload.Worst
	if w == nil {
		return ""
	}
	s := "; the worst "
	for _, stage := range run.Stages {
		if o := stage.Overload.Worst; o != nil && *o == *w {
			s += "at " + short(clean(stage.Name), 24) + ", "
			break
		}
	}
	if w.OverDB.There() {
		s += decibels(w.OverDB) + " over, "
	}
	return s + "at " + clock(w.AtS)
}

// leastRoom returns the stage that has the least room left.
func leastRoom(run *Run) (name string, room Number, there bool) {
	least := math.Inf(1)
	for _, s := range run.Stages {
		if x, ok := s.RoomDB.Value(); ok && x < least {
			least, name, room, there = x, short(clean(s.Name), 24), s.RoomDB, true
		}
	}
	return name, room, there
}

// layerWords tells how loud a layer is.
func layerWords(l Layer) string {
	if _, there := l.RMSDBFS.Value(); !there {
		return "no " + clean(l.Name) + "."
	}
	s := clean(l.Name) + " is " + dbfs(l.RMSDBFS)
	if _, there := l.BelowWantedDB.Value(); there {
		s += ", " + decibels(l.BelowWantedDB) + " below wanted"
	}
	return s + "."
}

// mostEvents is how many overloads the page lists: what fits on a printed page.
const mostEvents = 25

// worstEvents returns where at most n events stand in the list, the farthest over first, then the longest, then the
// earliest.
func worstEvents(events []Event, n int) []int {
	order := make([]int, len(events))
	for i := range order {
		order[i] = i
	}
	sort.SliceStable(order, func(i, j int) bool {
		x, y := events[order[i]], events[order[j]]
		a, aThere := x.OverDB.Value()
		b, bThere := y.OverDB.Value()
		if aThere != bThere {
			return aThere
		}
		if a != b {
			return a > b
		}
		return lengthOf(x).value > lengthOf(y).value
	})
	return order[:min(n, len(order))]
}

// lengthOf returns how long an event is, in seconds; not there where its ends are not.
func lengthOf(e Event) Number {
	from, a := e.FromS.Value()
	to, b := e.ToS.Value()
	if !a || !b {
		return Number{}
	}
	return Of(to - from)
}
