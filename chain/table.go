package chain

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"midrail/chain/preferred"
	"midrail/chain/quantity"
)

// reader gathers the faults of one file, and the names that it gives and uses.
type reader struct {
	file       string
	faults     Faults
	warnings   Faults
	names      []given
	references []reference
	unsure     bool // a use of a name could not be read: what seems unused may be used
	unnamed    bool // a stage's name could not be read: a stage that seems not to be there may be
	twice      bool // a name is that of two things
}

func (r *reader) fault(at place, text, remedy string) {
	r.faults = append(r.faults, r.told(at, text, remedy))
}

// told makes a fault, or a warning, of what was written at a place.
func (r *reader) told(at place, text, remedy string) Fault {
	f := Fault{File: r.file, Pos: at.pos, Text: text, Remedy: remedy}
	if at.set != "" {
		f.File, f.Pos = at.set, Pos{}
	}
	return f
}

// table reads the keys of one table. Each getter notes its key, so that what is left over is unknown.
type table struct {
	*reader
	*node
	name  string // as faults tell it: "[supply]", `stage "filter"`
	about string // how the thing that it describes is connected; mostly ""
	known []string
}

func (r *reader) table(n *node, name string) *table { return &table{reader: r, node: n, name: name} }

// find returns the entry of a key, or nil; where the key must be there its absence is a fault.
func (t *table) find(key string, need Need) *entry {
	t.known = append(t.known, key)
	e := t.get(key)
	if e == nil && need == Must {
		remedy := "add it"
		if t.about != "" {
			remedy += ": " + t.about
		}
		t.fault(t.node.at, fmt.Sprintf("%s has no %s", t.name, key), remedy)
	}
	return e
}

func (t *table) has(key string) bool { return t.get(key) != nil }

// wrong tells of a value that is not as it must be.
func (t *table) wrong(e *entry, text, remedy string) { t.fault(e.node.at, text, remedy) }

// done tells of keys that no getter asked for.
func (t *table) done() {
	for _, e := range t.entries {
		if !slices.Contains(t.known, e.key) {
			t.fault(e.keyAt, fmt.Sprintf("%s takes no %q", t.name, short(e.key)), suggest(e.key, t.known, "the keys are "+strings.Join(t.known, ", ")))
		}
	}
}

// text reads a text.
func (t *table) text(key string, need Need) string {
	e := t.find(key, need)
	if e == nil {
		return ""
	}
	if e.shape != textShape {
		t.wrong(e, fmt.Sprintf("%s must be a text, not %s", key, e.shape), "put it in quotes")
		return ""
	}
	return e.text
}

// choice reads one of several words. It reports false, and returns absent, where the key is absent or wrong.
func (t *table) choice(key string, need Need, absent string, words ...string) (string, bool) {
	e := t.find(key, need)
	if e == nil {
		return absent, false
	}
	if e.shape != textShape || !slices.Contains(words, e.text) {
		t.wrong(e, fmt.Sprintf("%s must be one of %s", key, quoted(words)), suggest(e.text, words, "choose one"))
		return absent, false
	}
	return e.text, true
}

func quoted(words []string) string {
	q := make([]string, len(words))
	for i, w := range words {
		q[i] = strconv.Quote(w)
	}
	return strings.Join(q, ", ")
}

// quantity reads a value of the kind within low and high, both in SI and included. It reports false where the key is
// absent or wrong.
func (t *table) quantity(key string, need Need, kind quantity.Kind, low, high float64) (quantity.Value, bool) {
	e := t.find(key, need)
	if e == nil {
		return quantity.Value{}, false
	}
	return t.value(key, e, kind, low, high)
}

// si is quantity for callers that want the number alone; absent is what an absent or wrong one stands for.
func (t *table) si(key string, need Need, kind quantity.Kind, low, high, absent float64) float64 {
	if v, ok := t.quantity(key, need, kind, low, high); ok {
		return v.SI
	}
	return absent
}

func (t *table) value(key string, e *entry, kind quantity.Kind, low, high float64) (v quantity.Value, ok bool) {
	written := strconv.Quote(short(e.text))
	switch e.shape {
	case textShape:
		var err error
		if v, err = quantity.Parse(kind, e.text); err != nil {
			fault, _ := errors.AsType[*quantity.Error](err)
			t.wrong(e, key+": "+fault.Text, fault.Remedy)
			return v, false
		}
		if v.Note != "" {
			text, remedy, _ := strings.Cut(v.Note, "; ")
			t.warnings = append(t.warnings, t.told(e.node.at, key+": "+text, remedy))
		}
	case numberShape:
		written = short(e.text)
		x, err := parseNumber(e.text)
		if err != nil {
			t.wrong(e, fmt.Sprintf("%s = %s is no finite number", key, written), "write one that is")
			return v, false
		}
		// With an exponent it is no code: 104 is not the capacitor "104".
		if v, err = quantity.Parse(kind, strconv.FormatFloat(x, 'e', -1, 64)); err != nil {
			fault, _ := errors.AsType[*quantity.Error](err)
			t.wrong(e, fmt.Sprintf("%s = %s has no unit", key, written), fault.Remedy)
			return v, false
		}
	default:
		t.wrong(e, fmt.Sprintf("%s must be a value, not %s", key, e.shape), "write a number, or a text such as \"3.3V\" or \"4k7\"")
		return v, false
	}
	if !(v.SI >= low && v.SI <= high) {
		remedy := "check the unit and the power of ten"
		if kind == quantity.Capacitance && e.shape == numberShape {
			remedy = fmt.Sprintf("a plain number is in farads; a capacitor's three-digit code is a text, %q", e.text)
		}
		t.wrong(e, fmt.Sprintf("%s = %s is out of range, %s to %s", key, written, bound(kind, low, high), bound(kind, high, high)), remedy)
		return v, false
	}
	return v, true
}

// bound prints an end of a range that goes up to high.
func bound(kind quantity.Kind, x, high float64) string {
	if kind == quantity.Ratio && high > 1 {
		return strconv.FormatFloat(x, 'g', -1, 64) // a gain, which nobody writes in percent
	}
	return quantity.Format(kind, x)
}

// short cuts what someone wrote to a length that goes into a line.
func short(s string) string {
	const most = 40
	if r := []rune(s); len(r) > most {
		return string(r[:most]) + "…"
	}
	return s
}

// parseNumber reads a TOML number, whose digits may be parted by underscores.
func parseNumber(text string) (float64, error) {
	if n, err := strconv.ParseInt(text, 0, 64); err == nil {
		return float64(n), nil
	}
	x, err := strconv.ParseFloat(strings.ReplaceAll(text, "_", ""), 64)
	if err == nil && (math.IsInf(x, 0) || math.IsNaN(x)) {
		err = strconv.ErrRange
	}
	return x, err
}

// number reads a number that has no unit, within low and high, both included. One that a --set gives is a text.
func (t *table) number(key string, need Need, low, high, absent float64) float64 {
	e := t.find(key, need)
	if e == nil {
		return absent
	}
	x, err := parseNumber(e.text)
	if e.shape != numberShape && (e.shape != textShape || e.node.at.set == "") || err != nil || !(x >= low && x <= high) {
		t.wrong(e, fmt.Sprintf("%s must be a number from %g to %g", key, low, high), "write it without quotes and unit")
		return absent
	}
	return x
}

// integer is number for whole ones.
func (t *table) integer(key string, need Need, low, high, absent int) int {
	x := t.number(key, need, float64(low), float64(high), float64(absent))
	if x != math.Trunc(x) {
		t.wrong(t.get(key), fmt.Sprintf("%s must be a whole number", key), fmt.Sprintf("write one from %d to %d", low, high))
		return absent
	}
	return int(x)
}

// Legal ranges of parts, in ohms and farads.
const (
	leastOhms, mostOhms     = 0.01, 1e11
	leastFarads, mostFarads = 1e-14, 1.0
)

// part reads a component: a value, or a table of value, ref and series. It returns nil where there is none; the value
// of a wrong one is 1.
func (t *table) part(owner, key string, unit Unit, need Need) *Part {
	e := t.find(key, need)
	if e == nil {
		return nil
	}
	p := &Part{Name: owner + "." + key, Key: key, Unit: unit, Value: 1, Pos: e.keyAt.pos}
	kind, low, high := quantity.Resistance, leastOhms, mostOhms
	if unit == Farad {
		kind, low, high = quantity.Capacitance, leastFarads, mostFarads
	}
	read := func(e *entry) {
		if v, ok := t.value(key, e, kind, low, high); ok {
			p.Value = v.SI
		}
	}
	if e.shape != tableShape {
		read(e)
		return p
	}
	in := t.table(e.node, key)
	if v := in.find("value", Must); v != nil {
		read(v)
	}
	p.Ref = in.text("ref", May)
	p.Tolerance = in.si("tolerance", May, quantity.Ratio, leastTolerance, mostTolerance, 0)
	if s := in.find("series", May); s != nil {
		p.Series = s.text
		if _, err := preferred.Parse(s.text); err != nil || s.shape != textShape {
			in.wrong(s, fmt.Sprintf("series: %q is no series of preferred values", short(s.text)), "choose E3, E6, E12, E24, E48, E96 or E192")
		}
	}
	in.done()
	return p
}

// required is part where the part must be there.
func (t *table) required(owner, key string, unit Unit) Part {
	if p := t.part(owner, key, unit, Must); p != nil {
		return *p
	}
	return Part{}
}

// longestGuess is the longest word, in runes, for which suggest looks for a near one.
const longestGuess = 40

// suggest returns the remedy for a word that is none of known: the one it was likely meant to be, or else.
func suggest(word string, known []string, orElse string) string {
	length := len([]rune(word))
	if length > longestGuess {
		return orElse
	}
	best, least := "", max(1, length/3)+1
	for _, k := range slices.Sorted(slices.Values(known)) {
		if len([]rune(k)) > longestGuess {
			continue
		}
		if d := editDistance(strings.ToLower(word), strings.ToLower(k)); d < least {
			best, least = k, d
		}
	}
	if best == "" {
		return orElse
	}
	return fmt.Sprintf("did you mean %q?", best)
}

// editDistance is the least number of runes to put in, take out or change, and of neighbours to swap, that makes one
// text the other, where nothing is edited twice (Damerau 1964, Levenshtein 1966).
func editDistance(a, b string) int {
	x, y := []rune(a), []rune(b)
	d := make([][]int, len(x)+1) // of the first i runes of x and the first j of y
	for i := range d {
		d[i] = make([]int, len(y)+1)
		d[i][0] = i
	}
	for j := range d[0] {
		d[0][j] = j
	}
	for i := 1; i <= len(x); i++ {
		for j := 1; j <= len(y); j++ {
			change := 1
			if x[i-1] == y[j-1] {
				change = 0
			}
			d[i][j] = min(d[i-1][j-1]+change, d[i-1][j]+1, d[i][j-1]+1)
			if i > 1 && j > 1 && x[i-1] == y[j-2] && x[i-2] == y[j-1] {
				d[i][j] = min(d[i][j], d[i-2][j-2]+1)
			}
		}
	}
	return d[len(x)][len(y)]
}
