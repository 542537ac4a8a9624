package chain

import (
	"fmt"
	"math"
	"sort"
	"strconv"
	"strings"

	"midrail/chain/preferred"
	"midrail/chain/quantity"
)

// reader gathers the faults of one file.
type reader struct {
	file     string
	faults   Faults
	warnings Faults
}

func (r *reader) fault(pos Pos, origin, text, remedy string) {
	file := r.file
	if origin != "" {
		file, pos = origin, Pos{}
	}
	r.faults = append(r.faults, Fault{File: file, Pos: pos, Text: text, Remedy: remedy})
}

// table reads the keys of one table. Each getter notes its key, so that what is left over is unknown.
type table struct {
	*reader
	node  *node
	name  string // as faults tell it: "[supply]", "stage \"filter\""
	key   string // the name of a [key.NAME]
	known []string
}

func (r *reader) table(n *node, name string) *table { return &table{reader: r, node: n, name: name} }

// find returns the entry of a key, or nil; where the key must be there its absence is a fault.
func (t *table) find(key string, need Need) *entry {
	t.known = append(t.known, key)
	e := t.node.get(key)
	if e == nil && need == Must {
		t.fault(t.node.pos, t.node.origin, fmt.Sprintf("%s has no %s", t.name, key), "add it")
	}
	return e
}

// wrong tells of a value that is not as it must be.
func (t *table) wrong(e *entry, text, remedy string) { t.fault(e.node.pos, e.origin, text, remedy) }

// done tells of keys that no getter asked for.
func (t *table) done() {
	for _, e := range t.node.entries {
		if !contains(t.known, e.key) {
			origin := e.origin
			if e.pos != (Pos{}) {
				origin = ""
			}
			t.fault(e.pos, origin, fmt.Sprintf("%s has no key %q", t.name, e.key), suggest(e.key, t.known, "take it out"))
		}
	}
}

func contains(list []string, s string) bool {
	for _, x := range list {
		if x == s {
			return true
		}
	}
	return false
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

// longestName is the longest name in runes.
const longestName = 100

// nameRef reads the name of something else.
func (t *table) nameRef(key string, need Need) (string, Pos) {
	e := t.find(key, need)
	if e == nil {
		return "", Pos{}
	}
	if e.shape != textShape || e.text == "" {
		t.wrong(e, fmt.Sprintf("%s must be a name, not %s", key, e.shape), "put it in quotes")
		return "", Pos{}
	}
	return e.text, e.node.pos
}

// choice reads one of several words; the first is what an absent key stands for.
func (t *table) choice(key string, need Need, words ...string) string {
	e := t.find(key, need)
	if e == nil {
		return words[0]
	}
	if e.shape != textShape || !contains(words, e.text) {
		t.wrong(e, fmt.Sprintf("%s must be %s", key, quoted(words)), suggest(e.text, words, "choose one"))
		return words[0]
	}
	return e.text
}

func quoted(words []string) string {
	q := make([]string, len(words))
	for i, w := range words {
		q[i] = strconv.Quote(w)
	}
	return strings.Join(q, " or ")
}

// quantity reads a value of the kind within low and high, both in SI and included.
func (t *table) quantity(key string, need Need, kind quantity.Kind, low, high float64) (quantity.Value, bool) {
	e := t.find(key, need)
	if e == nil {
		return quantity.Value{}, false
	}
	return t.value(key, e, kind, low, high)
}

// si is quantity for callers that want the number alone; absent is what an absent or faulty one stands for.
func (t *table) si(key string, need Need, kind quantity.Kind, low, high, absent float64) float64 {
	if v, ok := t.quantity(key, need, kind, low, high); ok {
		return v.SI
	}
	return absent
}

func (t *table) value(key string, e *entry, kind quantity.Kind, low, high float64) (quantity.Value, bool) {
	var v quantity.Value
	switch e.shape {
	case textShape:
		var err error
		if v, err = quantity.Parse(kind, e.text); err != nil {
			what, remedy, _ := strings.Cut(err.Error(), "; ")
			t.wrong(e, key+": "+what, remedy)
			return v, false
		}
		if v.Note != "" {
			t.warnings = append(t.warnings, Fault{File: t.file, Pos: e.node.pos, Text: key + ": " + v.Note})
		}
	case numberShape:
		x, err := parseNumber(e.text)
		if err != nil {
			t.wrong(e, fmt.Sprintf("%s: %s is no number that can be used", key, short(e.text)), "write a finite number")
			return v, false
		}
		if kind == quantity.Level || kind == quantity.SoundLevel || kind == quantity.Sensitivity || kind == quantity.Temperature {
			_, err := quantity.Parse(kind, e.text)
			what, remedy, _ := strings.Cut(err.Error(), "; ")
			t.wrong(e, key+": "+what, remedy)
			return v, false
		}
		v.SI = x
	default:
		t.wrong(e, fmt.Sprintf("%s must be a value, not %s", key, e.shape), "write a number or a text such as "+example(kind))
		return v, false
	}
	if !(v.SI >= low && v.SI <= high) {
		t.wrong(e, fmt.Sprintf("%s = %s is out of range, %s to %s", key, quantity.Format(kind, v.SI), quantity.Format(kind, low), quantity.Format(kind, high)), rangeRemedy(kind, e))
		return v, false
	}
	return v, true
}

func example(kind quantity.Kind) string {
	_, err := quantity.Parse(kind, "")
	_, remedy, _ := strings.Cut(err.Error(), "write it as ")
	return remedy
}

func rangeRemedy(kind quantity.Kind, e *entry) string {
	if kind == quantity.Capacitance && e.shape == numberShape {
		return fmt.Sprintf("a plain number is in farads; a capacitor's three-digit code is a text, %q", e.text)
	}
	return "check the unit and the power of ten"
}

func short(s string) string {
	if len(s) > 40 {
		return s[:40] + "…"
	}
	return s
}

// parseNumber reads a TOML number, whose digits may be parted by underscores.
func parseNumber(text string) (float64, error) {
	text = strings.ReplaceAll(text, "_", "")
	if n, err := strconv.ParseInt(text, 0, 64); err == nil {
		return float64(n), nil
	}
	x, err := strconv.ParseFloat(text, 64)
	if err == nil && (math.IsInf(x, 0) || math.IsNaN(x)) {
		err = strconv.ErrRange
	}
	return x, err
}

// integer reads a whole number within low and high, both included.
func (t *table) integer(key string, need Need, low, high, absent int) int {
	e := t.find(key, need)
	if e == nil {
		return absent
	}
	x, err := parseNumber(e.text)
	if e.shape != numberShape && (e.shape != textShape || e.origin == "") || err != nil || x != math.Trunc(x) {
		t.wrong(e, fmt.Sprintf("%s must be a whole number", key), fmt.Sprintf("write one from %d to %d", low, high))
		return absent
	}
	if x < float64(low) || x > float64(high) {
		t.wrong(e, fmt.Sprintf("%s = %g is out of range", key, x), fmt.Sprintf("write one from %d to %d", low, high))
		return absent
	}
	return int(x)
}

// Legal ranges of parts.
const (
	leastOhms, mostOhms     = 0.01, 1e11
	leastFarads, mostFarads = 1e-14, 1.0
)

// part reads a component: a value, or a table of value, ref and series. It returns nil where there is none.
func (t *table) part(owner, key string, unit Unit, need Need) *Part {
	e := t.find(key, need)
	if e == nil {
		return nil
	}
	p := &Part{Name: owner + "." + key, Key: key, Unit: unit, Pos: e.pos}
	kind, low, high := quantity.Resistance, leastOhms, mostOhms
	if unit == Farad {
		kind, low, high = quantity.Capacitance, leastFarads, mostFarads
	}
	if e.shape != tableShape {
		v, ok := t.value(key, e, kind, low, high)
		p.Value = v.SI
		if !ok {
			p.Value = 1
		}
		return p
	}
	in := t.table(e.node, key)
	in.node.pos = e.pos
	p.Value = 1
	if v := in.find("value", Must); v != nil {
		if x, ok := in.value(key, v, kind, low, high); ok {
			p.Value = x.SI
		}
	}
	p.Ref = in.text("ref", May)
	if s := in.find("series", May); s != nil {
		if _, err := preferred.Parse(s.text); err != nil || s.shape != textShape {
			in.wrong(s, fmt.Sprintf("%q is no series of preferred values", short(s.text)), "choose E3, E6, E12, E24, E48, E96 or E192")
		} else {
			p.Series = s.text
		}
	}
	in.done()
	return p
}

// required is part where the part must be there; a missing one is a fault, and stands as 1.
func (t *table) required(owner, key string, unit Unit) Part {
	if p := t.part(owner, key, unit, Must); p != nil {
		return *p
	}
	return Part{Name: owner + "." + key, Key: key, Unit: unit, Value: 1}
}

// suggest returns the remedy for a word that is none of known: the one it was likely meant to be, or else.
func suggest(word string, known []string, orElse string) string {
	best, distance := "", len([]rune(word))/3+1
	sorted := append([]string(nil), known...)
	sort.Strings(sorted)
	for _, k := range sorted {
		if len(word) > 4*longestName {
			break
		}
		if d := editDistance(strings.ToLower(word), strings.ToLower(k)); d <= distance && (best == "" || d < editDistance(strings.ToLower(word), strings.ToLower(best))) {
			best = k
		}
	}
	if best == "" {
		return orElse
	}
	return fmt.Sprintf("did you mean %q?", best)
}

// editDistance is the number of runes to put in, take out or change (Levenshtein 1965).
func editDistance(a, b string) int {
	x, y := []rune(a), []rune(b)
	row := make([]int, len(y)+1)
	for j := range row {
		row[j] = j
	}
	for i, r := range x {
		diagonal := row[0]
		row[0] = i + 1
		for j, s := range y {
			change := diagonal
			if r != s {
				change++
			}
			diagonal = row[j+1]
			row[j+1] = min(change, row[j]+1, row[j+1]+1)
		}
	}
	return row[len(y)]
}
