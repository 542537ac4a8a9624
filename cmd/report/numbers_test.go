package report

import (
	"encoding/json"
	"fmt"
	"html"
	"io"
	"math"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"testing"
)

// prefixes of units, as the page writes them.
var prefixes = map[string]float64{"": 1, "G": 1e9, "M": 1e6, "k": 1e3, "m": 1e-3, "µ": 1e-6, "n": 1e-9, "p": 1e-12}

var (
	clockText = regexp.MustCompile(`^(?:(\d+):)?(\d+):(\d\d\.\d)$`)
	unitText  = regexp.MustCompile(`^([+−±]?)([\d ]+)(\.\d+)? ?(%|°|LSB|dBFS|dB|[GMkmµnp]?(?:V|A|Hz|s|Ω|F)|)$`)
)

// read returns the figure that a text shows, in SI units, and by how much rounding may have moved it.
func read(t *testing.T, text string) (value, half float64) {
	t.Helper()
	if m := clockText.FindStringSubmatch(text); m != nil {
		for _, part := range m[1:] {
			x := 0.
			if part != "" {
				x, _ = strconv.ParseFloat(part, 64)
			}
			value = 60*value + x
		}
		return value, 0.05
	}
	m := unitText.FindStringSubmatch(text)
	if m == nil {
		t.Fatalf("%q is no figure", text)
	}
	value, err := strconv.ParseFloat(strings.ReplaceAll(m[2], " ", "")+m[3], 64)
	if err != nil {
		t.Fatalf("%q: %v", text, err)
	}
	scale := 1.
	switch unit := m[4]; unit {
	case "%":
		scale = 0.01
	case "LSB", "dBFS", "dB", "°", "":
	default:
		scale = prefixes[unit[:len(unit)-len(strings.TrimLeft(unit, "GMkmµnp"))]]
	}
	half = 0.5 * scale
	if m[3] != "" {
		half *= math.Pow10(1 - len(m[3]))
	} else if strings.HasSuffix(m[2], "0") || len(m[2]) > 3 { // a whole number may be rounded to its leading digits
		half = math.Max(half, value*scale*5e-5)
	}
	if m[1] == "−" {
		value = -value
	}
	return value * scale, half
}

// leaves returns every number of a JSON value by its place; null is nil.
func leaves(into map[string]any, path string, v any) map[string]any {
	switch v := v.(type) {
	case map[string]any:
		for k, x := range v {
			leaves(into, strings.TrimPrefix(path+"."+k, "."), x)
		}
	case []any:
		for i, x := range v {
			leaves(into, fmt.Sprintf("%s.%d", path, i), x)
		}
	case float64, nil:
		into[path] = v
	}
	return into
}

var (
	dataElement = regexp.MustCompile(`<data value="([^"]*)" data-at="([^"]*)">([^<]*)</data>`)
	notWords    = regexp.MustCompile(`(?s)<svg.*?</svg>|<style>.*?</style>|<script.*?</script>|<data .*?</data>|<figcaption>.*?</figcaption>|<[^>]*>`)
	numberText  = regexp.MustCompile(`−?\d[\d ]*(?:[.:]\d+)*`)
)

// Every figure on the page is the one of report.json at the place it names, to the last digit that is shown; every
// section shows all of its figures.
func TestPageShowsTheFiguresOfTheJSON(t *testing.T) {
	checkFigures(t, made(t, func(w io.Writer) error { return WriteHTML(w, example(), samplePictures()) }),
		made(t, func(w io.Writer) error { return WriteJSON(w, example()) }))
}

func checkFigures(t *testing.T, page, report []byte) {
	t.Helper()
	var tree any
	if err := json.Unmarshal(report, &tree); err != nil {
		t.Fatal(err)
	}
	numbers := leaves(map[string]any{}, "", tree)
	seen := map[string]bool{}
	for _, m := range dataElement.FindAllStringSubmatch(string(page), -1) {
		exact, place, text := m[1], html.UnescapeString(m[2]), html.UnescapeString(m[3])
		want, there := numbers[place]
		seen[place] = true
		switch {
		case !there:
			t.Errorf("report.json has nothing at %s", place)
		case want == nil:
			if exact != "" || text != absent {
				t.Errorf("%s is null, the page has %q", place, text)
			}
		default:
			got, err := strconv.ParseFloat(exact, 64)
			if err != nil || got != want.(float64) {
				t.Errorf("%s is %v, the page has %s", place, want, exact)
			}
			if shown, half := read(t, text); !(math.Abs(shown-got) <= half*(1+1e-9)+1e-12*math.Abs(got)) {
				t.Errorf("%s is %v, the page shows %s", place, want, text)
			}
		}
	}
	// What is told in words, in captions or not at all.
	aside := regexp.MustCompile(`^(overload\.|events\.|waveforms\.|stages\.\d+\.overload\.worst|layers\.\d+\.thirds\.\d+\.hz)`)
	for place, n := range numbers {
		if n != nil && !seen[place] && !aside.MatchString(place) {
			t.Errorf("%s is not on the page", place)
		}
	}
}

// Every number that the page's sentences tell is one of report.json's, in one of the forms that figures are shown in.
func TestWordsTellTheFiguresOfTheJSON(t *testing.T) {
	run := example()
	page := string(made(t, func(w io.Writer) error { return WriteHTML(w, run, samplePictures()) }))
	var tree any
	if err := json.Unmarshal(made(t, func(w io.Writer) error { return WriteJSON(w, run) }), &tree); err != nil {
		t.Fatal(err)
	}
	forms := map[string]bool{
		"125": true, "61260": true, "60063": true, "1": true, // 125 ms, IEC 61260, IEC 60063, to 1 % and 1 LSB
		count(int64(brokenLimits(run))): true, count(int64(len(run.Limits))): true, count(int64(len(run.Findings))): true, count(int64(len(run.Parts))): true,
	}
	for _, v := range leaves(map[string]any{}, "", tree) {
		x, is := v.(float64)
		if !is {
			continue
		}
		for _, say := range []func(Number) string{dbfs, decibels, volts, Amperes, hertz, seconds, clock, percent, errorDB, plusMinus} {
			for _, n := range numberText.FindAllString(say(Of(x)), -1) {
				forms[strings.TrimSpace(n)] = true
			}
		}
		forms[count(int64(x))] = true
	}
	for _, e := range run.Events {
		for _, n := range numberText.FindAllString(seconds(lengthOf(e)), -1) {
			forms[strings.TrimSpace(n)] = true
		}
	}
	for _, b := range purchase(run.Parts) {
		for _, n := range numberText.FindAllString(strconv.Itoa(b.Count)+" "+b.What, -1) {
			forms[strings.TrimSpace(n)] = true
		}
	}
	words := html.UnescapeString(notWords.ReplaceAllString(page, "\n"))
	all := texts(tree, nil)
	slices.SortFunc(all, func(a, b string) int { return len(b) - len(a) }) // one may hold another
	for _, s := range all {
		if strings.ContainsAny(s, "0123456789") {
			words = strings.ReplaceAll(words, s, "")
		}
	}
	found := 0
	for _, line := range strings.Split(words, "\n") {
		for _, n := range numberText.FindAllString(line, -1) {
			found++
			if !forms[strings.TrimSpace(n)] {
				t.Errorf("%q, in %q, is no figure of report.json", n, strings.TrimSpace(line))
			}
		}
	}
	if found < 20 {
		t.Errorf("only %d numbers were found in the page's words", found)
	}
}

func brokenLimits(run *Run) int {
	n := 0
	for _, l := range run.Limits {
		if !l.Holds {
			n++
		}
	}
	return n
}

// texts returns every text of a JSON value.
func texts(v any, list []string) []string {
	switch v := v.(type) {
	case map[string]any:
		for _, x := range v {
			list = texts(x, list)
		}
	case []any:
		for _, x := range v {
			list = texts(x, list)
		}
	case string:
		list = append(list, clean(v))
	}
	return list
}
