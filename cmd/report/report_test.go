package report

import (
	"bytes"
	"encoding/json"
	"flag"
	"io"
	"math"
	"os"
	"path/filepath"
	"reflect"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"github.com/jedib0t/go-pretty/v6/text"
)

var update = flag.Bool("update", false, "write the golden files anew")

// The columns of the summary follow the width that the reader's locale gives to ambiguous letters
// such as "–" (Unicode Standard Annex 11); the golden files are for the narrow one.
func TestMain(m *testing.M) {
	text.OverrideRuneWidthEastAsianWidth(false)
	os.Exit(m.Run())
}

// example returns a made-up result: two stages, one of them overloading, two limits broken.
func example() *Run {
	n := Of
	thirds := func(top float64) []Third {
		var list []Third
		for i, hz := range []float64{125, 250, 500, 1000, 2000} {
			list = append(list, Third{n(hz), n(top - 3*float64(i))})
		}
		return list
	}
	worst := &Worst{AtS: n(3.2125), Seconds: n(0.00437), OverDB: n(6.2)}
	return &Run{
		Tool:     Tool{"midrail", "0.1.0"},
		Chain:    Chain{"front.toml", "Brood-box listener, revision B"},
		Track:    Track{"brood.wav", n(44100), 1, n(42), n(-0.3), n(-18.2)},
		Internal: Internal{n(1536000), n(0.0042), n(22050)},
		Overload: Overload{n(1.84), n(1.84 / 42), 214, 180, 30, 4, worst},
		Stages: []Stage{
			{"capsule amp", "inverting", n(0.897), n(0.0213), n(1.8), n(0.02), n(1.8), n(-6.2),
				Overload{n(1.84), n(1.84 / 42), 214, 180, 30, 4, worst}},
			{"filter", "sallen-key low-pass", n(0.8972), n(0.024), n(1.79), n(0.02), n(1.8), n(0.4), Overload{Seconds: n(0), Fraction: n(0)}},
			{"pin filter", "rc low-pass", n(0.8972), n(0.024), n(1.79), Number{}, Number{}, Number{}, Overload{Seconds: n(0), Fraction: n(0)}},
		},
		Converter: Converter{n(8000), 10, n(0), n(1.8), 336000, 12, n(-0.0031), n(-0.1), n(-17.4)},
		Layers: []Layer{
			{Wanted, n(-17.5), n(-20.1), n(-6.6), Number{}, thirds(-20)},
			{FoldBack, n(-54.3), n(-55.9), n(-41.2), n(36.8), thirds(-60)},
			{Interference, Of(math.Inf(-1)), Of(math.Inf(-1)), Of(math.Inf(-1)), Number{}, nil},
			{Overloaded, n(-38.6), n(-40.3), n(-19.9), n(21.1), thirds(-45)},
			{Noise, n(-66.1), n(-68.4), n(-65.8), n(48.6), thirds(-72)},
			{Rounding, n(-61.9), n(-64.0), n(-61.7), n(44.4), thirds(-70)},
		},
		Events: []Event{
			{"capsule amp", "high", n(3.2125), n(3.21687), n(6.2)},
			{"capsule amp", "low", n(12.5), n(12.5012), n(2.1)},
			{"capsule amp", "slew", n(12.6), n(12.60004), Number{}},
		},
		Waveforms: []Waveform{{"capsule amp", "high", n(3.2125), n(6.2)}},
		Noise: Budget{NoiseTotal{n(0.00031), n(-66.1), n(-68.4), n(0.176), n(9.8)}, []NoiseSource{
			{"capsule amp.r_in", "thermal", n(0.0003), n(0.94)}, {"capsule amp", "amplifier voltage", n(0.00008), n(0.06)},
		}, []NoiseInput{{"brood", n(34.2), "dB SPL(A)"}}},
		Rest: Rest{n(3.3), n(0.000316), []Node{
			{"supply", n(3.3), Number{}, Number{}, ""}, {"half", n(0.9), Number{}, Number{}, ""}, {"capsule amp", n(0.897), n(0.02), n(1.8), "its inputs rest outside their common-mode range"},
		}, []Capacitor{{"half.bypass", n(0.9), "half", "ground"}}, Settling{n(0.84), n(1.9), n(0.51)}},
		Margins:     []Margin{{"capsule amp", n(848e3), n(75.4), Number{}}},
		SupplyPaths: SupplyPaths{[]Number{n(100), n(1000)}, []Path{{"half.top", []Number{n(-31.1), n(-51.2)}}, {"all together", []Number{n(-30.9), n(-50.8)}}}},
		Parts: []Part{
			{"R1", "half", "divider, upper resistor", "top", n(150e3), Ohm, "E24", n(0.05)},
			{"", "half", "bypass capacitor", "bypass", n(10e-6), Farad, "E12", n(0.1)},
			{"R6", "capsule amp", "feedback resistor", "r_f", n(150e3), Ohm, "E24", n(0.05)},
			{"", "capsule amp", "amplifier quad", "amplifier", Number{}, Piece, "bipolar single-supply", Number{}},
		},
		Listen: &Listen{[]Passage{{n(2), n(4)}, {n(12), n(13)}}, []Player{
			{TrackSound, "track.wav", n(11025), n(3), n(-1.5)}, {Heard, "heard.wav", n(8000), n(3), n(0)}, {FoldBack, "fold-back.wav", n(8000), n(3), n(24.5)},
		}},
		Limits: []Limit{
			{"overload_time", n(0), n(1.84 / 42), false},
			{"fold_back_below_wanted", n(40), n(36.8), false},
			{"droop", n(1), n(0.72), true},
		},
		Changes: []Change{
			{About: AboutOverload, Set: "amp.r_f=33k", Words: "amp.r_f (R2) = 33k in place of 47k", Was: Of(-2.5), Becomes: Of(0.57), Unit: "dB of room"},
			{About: AboutNoise, Words: "a converter of <two> more bits", Was: Of(-61.3), Becomes: Of(-70.2), Unit: "dBFS"},
			{About: AboutSettling, Set: "half.bypass=4u7", Words: "half.bypass = 4u7 in place of 10u", Was: Of(0.9), Becomes: Of(0.45), Unit: "s"},
		},
		Findings: []Finding{
			{Stop, "capsule amp", "asks for 6.2 dB more than its output can swing; r_f = 56k fits"},
			{Caution, FoldBack, "a corner of 2.7 kHz would leave 41 dB below wanted"},
			{Note, "quad", "the figures of its class are typical: check the datasheet's worst case"},
		},
		Assumptions: []string{"25 °C, noise counted from 20 Hz", "the figures of bipolar single-supply are from memory"},
		Answers:     []Answer{{"Supply ripple", []string{"by way of  50 Hz", "half.top    74.3"}}},
	}
}

// samplePictures returns plots to go with example.
func samplePictures() *Pictures {
	p := &Pictures{HalfRate: 4000, Kept: 3000, Duration: 42, Spectra: []Spectrum{{Per: "third octave"}}}
	r := Response{Input: "brood"}
	for f := 10.0; f <= 100e3; f *= math.Pow(10, 1.0/50) {
		r.Frequency = append(r.Frequency, f)
		u := f / 2700
		r.Gain = append(r.Gain, 6-10*math.Log10(1+u*u*u*u)-10*math.Log10(1+400/(f*f)))
	}
	p.Responses = []Response{r}
	for k, l := range example().Layers {
		line := Line{Layer: l.Name}
		level := Level{Layer: l.Name}
		base, there := l.RMSDBFS.Value()
		if !there {
			base = math.NaN()
		}
		for f := 25.0; f < 4000; f *= math.Pow(10, 0.1) {
			line.Frequency = append(line.Frequency, f)
			line.Level = append(line.Level, base-10-8*math.Sin(float64(k)+math.Log(f)))
		}
		for i := 0; i < 336; i++ {
			x := float64(i) / 8
			y := base + 6*math.Sin(x*float64(k+1)/3) + 2*math.Sin(x*7)
			level.Time = append(level.Time, x)
			level.RMS = append(level.RMS, y)
			if l.Name == Wanted {
				level.Peak = append(level.Peak, y+9)
			}
		}
		p.Spectra[0].Layers = append(p.Spectra[0].Layers, line)
		p.Levels = append(p.Levels, level)
	}
	p.Densities = []Line{{"at the converter", r.Frequency, make([]float64, len(r.Frequency))}}
	for i, f := range r.Frequency {
		p.Densities[0].Level[i] = 1e-6 / math.Hypot(1, f/2700)
	}
	scope := Scope{From: 3.2025, Step: 0.0005}
	for k := range 3 {
		var asked, real []float64
		for i := range 41 {
			x := 0.9 + float64(k+1)*0.5*math.Sin(float64(i)/4)
			asked, real = append(asked, x), append(real, math.Max(0.02, math.Min(1.8, x)))
		}
		scope.Asked, scope.Real = append(scope.Asked, asked), append(scope.Real, real)
	}
	p.Scopes = []Scope{scope}
	gram := Gram{Layer: Heard, Duration: 42, Top: 4000}
	for i := range 20 {
		column := make([]float64, 9)
		for k := range column {
			column[k] = -20 - float64((i*k)%50)
		}
		gram.Level = append(gram.Level, column)
	}
	p.Grams = []Gram{gram}
	for _, player := range example().Listen.Players {
		rate, _ := player.RateHz.Value()
		p.Sounds = append(p.Sounds, PlayerSound{Rate: rate, Codes: make([]int16, 12)})
	}
	p.Spans = []Span{{"capsule amp", 3.2125, 3.6}, {"capsule amp", 12.5, 12.51}, {"capsule amp", 30, 31.2}}
	return p
}

// golden compares what was made with the golden file of the given name, or writes it anew.
func golden(t *testing.T, name string, got []byte) {
	t.Helper()
	file := filepath.Join("testdata", name)
	if *update {
		if err := os.WriteFile(file, got, 0o644); err != nil {
			t.Fatal(err)
		}
	}
	want, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	if bytes.Equal(got, want) {
		return
	}
	a, b := strings.Split(string(got), "\n"), strings.Split(string(want), "\n")
	for i := 0; i < min(len(a), len(b)); i++ {
		if a[i] != b[i] {
			t.Fatalf("%s line %d (make it anew with -update):\n got %s\nwant %s", file, i+1, a[i], b[i])
		}
	}
	t.Fatalf("%s: got %d lines, want %d (make it anew with -update)", file, len(a), len(b))
}

// made returns what a writer makes, and fails the test where it cannot.
func made(t *testing.T, write func(io.Writer) error) []byte {
	t.Helper()
	var b bytes.Buffer
	if err := write(&b); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

func TestGoldenFiles(t *testing.T) {
	run, pictures := example(), samplePictures()
	golden(t, "report.json", made(t, func(w io.Writer) error { return WriteJSON(w, run) }))
	golden(t, "summary.txt", made(t, func(w io.Writer) error { return Summary(w, run, Options{}) }))
	golden(t, "summary-color.txt", made(t, func(w io.Writer) error { return Summary(w, run, Options{Color: true}) }))
	golden(t, "report.html", made(t, func(w io.Writer) error { return WriteHTML(w, run, pictures) }))
}

// A result read back is the result written, and writing leaves the caller's run alone.
func TestJSONReadsBack(t *testing.T) {
	run := example()
	text := made(t, func(w io.Writer) error { return WriteJSON(w, run) })
	if !reflect.DeepEqual(run, example()) {
		t.Fatal("WriteJSON changed the run")
	}
	var back Run
	d := json.NewDecoder(bytes.NewReader(text))
	d.DisallowUnknownFields()
	if err := d.Decode(&back); err != nil {
		t.Fatal(err)
	}
	for i := range run.Layers { // an empty list stands for nil
		run.Layers[i].Thirds = filled(run.Layers[i].Thirds)
	}
	if !reflect.DeepEqual(&back, run) {
		t.Errorf("read back:\n%+v\nwritten:\n%+v", back, *run)
	}
	if !bytes.HasSuffix(text, []byte("}\n")) || bytes.HasSuffix(text, []byte("\n\n")) {
		t.Error("does not end with one newline")
	}
}

// What is not there is null, lists are never null, and no figure loses a digit.
func TestJSONNull(t *testing.T) {
	text := made(t, func(w io.Writer) error {
		return WriteJSON(w, &Run{Stages: []Stage{{Name: "a", RestV: Of(1.0 / 3), LowestV: Of(0)}}, Layers: []Layer{{Name: Wanted}}})
	})
	var tree map[string]any
	if err := json.Unmarshal(text, &tree); err != nil {
		t.Fatal(err)
	}
	for _, list := range []string{"stages", "layers", "events", "limits", "changes", "findings", "assumptions"} {
		if _, ok := tree[list].([]any); !ok {
			t.Errorf("%s is %v, want a list", list, tree[list])
		}
	}
	layer := tree["layers"].([]any)[0].(map[string]any)
	if _, ok := layer["thirds"].([]any); !ok {
		t.Errorf("thirds is %v, want a list", layer["thirds"])
	}
	stage := tree["stages"].([]any)[0].(map[string]any)
	for key, want := range map[string]any{"rest_v": 1.0 / 3, "lowest_v": 0.0, "highest_v": nil, "room_db": nil} {
		if got, there := stage[key]; !there || got != want {
			t.Errorf("%s is %v, want %v", key, got, want)
		}
	}
	if worst := stage["overload"].(map[string]any)["worst"]; worst != nil {
		t.Errorf("worst is %v, want null", worst)
	}
}

func TestNumber(t *testing.T) {
	for x, want := range map[float64]string{
		math.Inf(1): "null", math.Inf(-1): "null", 0: "0", -42.3: "-42.3", 0.1: "0.1", 1536000: "1536000",
	} {
		if got, err := json.Marshal(Of(x)); err != nil || string(got) != want {
			t.Errorf("%v: %s, %v; want %s", x, got, err, want)
		}
	}
	if Of(math.NaN()) != (Number{}) {
		t.Error("NaN is there")
	}
	n := Of(3)
	if err := json.Unmarshal([]byte(" null "), &n); err != nil || n != (Number{}) {
		t.Errorf("null: %v, %v", n, err)
	}
	if err := json.Unmarshal([]byte(`"3"`), &n); err == nil {
		t.Error("a string was taken for a figure")
	}
}

// The keys are those of the published form of report.json; a key that changes breaks its readers.
func TestJSONKeys(t *testing.T) {
	keys := map[string]string{
		"":                       "tool chain track internal overload stages converter layers events waveforms noise rest margins supply_paths parts listen limits changes findings assumptions answers",
		"waveforms":              "stage kind at_s over_db",
		"answers":                "title lines",
		"noise":                  "total sources equivalent_input",
		"noise.equivalent_input": "input value unit",
		"margins":                "amplifier crossover_hz phase_margin_deg gain_margin_db",
		"supply_paths":           "frequencies_hz paths",
		"supply_paths.paths":     "name gain_db",
		"rest.capacitors":        "part volts positive negative",
		"noise.total":            "v dbfs dbfs_a lsb useful_bits",
		"noise.sources":          "name kind v share",
		"rest":                   "supply_v supply_a nodes capacitors settling",
		"rest.nodes":             "name volts limit_low_v limit_high_v word",
		"rest.settling":          "to_1_percent_s to_1_lsb_s usable_s",
		"parts":                  "ref stage role key value unit series tolerance",
		"listen":                 "passages players",
		"listen.passages":        "from_s to_s",
		"listen.players":         "name file rate_hz seconds gain_db",
		"tool":                   "name version",
		"chain":                  "file title",
		"track":                  "file rate_hz channels seconds peak_dbfs rms_dbfs",
		"internal":               "rate_hz largest_error_db to_hz",
		"stages":                 "name kind rest_v lowest_v highest_v limit_low_v limit_high_v room_db overload",
		"stages.overload":        "seconds fraction events high low slew worst",
		"overload":               "seconds fraction events high low slew worst",
		"overload.worst":         "at_s seconds over_db",
		"converter":              "rate_hz bits low_v high_v samples saturated rest peak_dbfs rms_dbfs",
		"layers":                 "name rms_dbfs rms_dbfs_a worst_125ms_dbfs below_wanted_db thirds",
		"layers.thirds":          "hz dbfs",
		"events":                 "stage kind from_s to_s over_db",
		"limits":                 "name limit value holds",
		"changes":                "about set words was becomes unit",
		"findings":               "severity about text",
	}
	var tree any
	if err := json.Unmarshal(made(t, func(w io.Writer) error { return WriteJSON(w, example()) }), &tree); err != nil {
		t.Fatal(err)
	}
	for path, want := range keys {
		at := tree
		for _, step := range strings.FieldsFunc(path, func(r rune) bool { return r == '.' }) {
			at = at.(map[string]any)[step]
			if list, ok := at.([]any); ok {
				at = list[0]
			}
		}
		got := at.(map[string]any)
		if len(got) != len(strings.Fields(want)) {
			t.Errorf("%s has %d keys, want %s", path, len(got), want)
		}
		for _, key := range strings.Fields(want) {
			if _, ok := got[key]; !ok {
				t.Errorf("%s lacks %s", path, key)
			}
		}
	}
}

// hostile sets every text of a run and its pictures, at any depth, to the same one.
func hostile(v reflect.Value, name string) {
	switch v.Kind() {
	case reflect.Pointer:
		if !v.IsNil() {
			hostile(v.Elem(), name)
		}
	case reflect.Struct:
		for i := range v.NumField() {
			if v.Type().Field(i).IsExported() {
				hostile(v.Field(i), name)
			}
		}
	case reflect.Slice:
		for i := range v.Len() {
			hostile(v.Index(i), name)
		}
	case reflect.String:
		v.SetString(name)
	}
}

// Whatever the names hold, the page has the elements that it has for plain names, and no others.
func TestPageEscapes(t *testing.T) {
	tags := regexp.MustCompile(`</?[a-zA-Z!][a-zA-Z0-9]*`)
	page := func(name string) (string, []string) {
		run, pictures := example(), samplePictures()
		hostile(reflect.ValueOf(run), name)
		hostile(reflect.ValueOf(pictures), name)
		text := string(made(t, func(w io.Writer) error { return WriteHTML(w, run, pictures) }))
		return text, tags.FindAllString(text, -1)
	}
	for _, name := range []string{
		`<script>alert(1)</script>`, `"&'`, `--></style></title><script>`, `<img src=x onerror=alert(1)>`, "a\x1b[31mb\u202ec\x00",
		"\"><svg onload=alert(1)>", "javascript:alert(1)",
	} {
		text, got := page(name)
		_, want := page(strings.Repeat("x", len([]rune(name))))
		if !reflect.DeepEqual(got, want) {
			t.Errorf("%q: the page has other elements", name)
		}
		if strings.ContainsAny(text, "\x1b\u202e\x00") {
			t.Errorf("%q: a control character reached the page", name)
		}
	}
	if text, _ := page(`"&`); !strings.Contains(text, `&#34;&amp;`) {
		t.Error(`"& is not on the page, escaped`)
	}
}

// The page asks nothing of the network and runs no script.
func TestPageSelfContained(t *testing.T) {
	text := string(made(t, func(w io.Writer) error { return WriteHTML(w, example(), samplePictures()) }))
	if n := strings.Count(text, "<script"); n != 1 {
		t.Errorf("%d scripts, want ours alone", n)
	}
	for _, m := range regexp.MustCompile(`(?:src|href)="([^#][^"]{0,40})`).FindAllStringSubmatch(text, -1) {
		if !strings.HasPrefix(m[1], "data:audio/wav;base64,") && !strings.HasPrefix(m[1], "data:image/png;base64,") && !strings.HasPrefix(m[1], "./") && m[1] != "parts.csv" {
			t.Errorf("the page refers to %s", m[1])
		}
	}
	for _, word := range []string{"http:", "https:", "url(", "@import", "<link", " style=", "fetch(", "XMLHttp", "import("} {
		if strings.Contains(text, word) {
			t.Errorf("the page has %q", word)
		}
	}
	if strings.Contains(text, "ZgotmplZ") || strings.Contains(text, "<no value>") {
		t.Error("a template failed in place")
	}
	for _, want := range []string{`<html lang="en">`, "default-src 'none'", "<main>", "<header>", "<footer>", "<h1>"} {
		if strings.Count(text, want) != 1 {
			t.Errorf("the page has %s %d times, want once", want, strings.Count(text, want))
		}
	}
	if a, b := strings.Count(text, "<table>"), strings.Count(text, "<caption"); a != b {
		t.Errorf("%d tables, %d captions", a, b)
	}
	if a, b := strings.Count(text, `<svg class="figure`), len(regexp.MustCompile(`role="img"[^>]*>\n<title>`).FindAllString(text, -1)); a != b {
		t.Errorf("%d figures, %d with a title", a, b)
	}
	ids := map[string]bool{}
	for _, m := range regexp.MustCompile(` id="([^"]*)"`).FindAllStringSubmatch(text, -1) {
		if ids[m[1]] {
			t.Errorf("id %s is there twice", m[1])
		}
		ids[m[1]] = true
	}
	for _, m := range regexp.MustCompile(`(?:href="#|aria-labelledby=")([^"]*)"`).FindAllStringSubmatch(text, -1) {
		if !ids[m[1]] {
			t.Errorf("nothing has the id %s", m[1])
		}
	}
}

// A run with nothing in it is still a page and a summary.
func TestNothingThere(t *testing.T) {
	for _, p := range []*Pictures{nil, {}, {Responses: []Response{{Input: "a"}}, Levels: []Level{{Layer: Wanted, Time: []float64{0}, RMS: []float64{math.Inf(-1)}}}}} {
		text := string(made(t, func(w io.Writer) error { return WriteHTML(w, &Run{}, p) }))
		if strings.Contains(text, "NaN") || strings.Contains(text, "Inf") {
			t.Error("a figure that is not there reached the page")
		}
	}
	text := string(made(t, func(w io.Writer) error { return Summary(w, &Run{}, Options{}) }))
	if !strings.Contains(text, "nothing overloads") {
		t.Errorf("summary of nothing: %s", text)
	}
}

// No line of the summary is wider than the terminal, whatever the names hold, and nothing in it can
// command the terminal; with short names it is one screen.
func TestSummaryFits(t *testing.T) {
	for _, width := range []int{80, 100, 120} {
		for _, name := range []string{"", "mic", "a name that is far too long for any column of a table, and goes on", "a\x1b[2Jb\r\nc", "шаговый усилитель 前置放大器"} {
			for _, color := range []bool{false, true} {
				run := example()
				if name != "" {
					for i := range run.Stages {
						run.Stages[i].Name = name
					}
					run.Chain.Title, run.Track.File = name, name
				}
				got := string(made(t, func(w io.Writer) error { return Summary(w, run, Options{Color: color, Width: width}) }))
				if !color && strings.ContainsAny(got, "\x1b\r") {
					t.Errorf("%q: a control character reached the terminal", name)
				}
				lines := strings.Split(strings.TrimSuffix(got, "\n"), "\n")
				if len(name) < 12 && len(lines) > screen {
					t.Errorf("%q at %d: %d lines", name, width, len(lines))
				}
				for _, l := range lines {
					if n := text.StringWidthWithoutEscSequences(l); n > width {
						t.Errorf("%q at %d: a line of %d columns: %s", name, width, n, l)
					}
				}
			}
		}
	}
}

func TestFigures(t *testing.T) {
	for _, c := range []struct{ got, want string }{
		{dbfs(Of(-42.31)), "−42.3 dBFS"}, {dbfs(Of(-0.04)), "0.0 dBFS"}, {dbfs(Number{}), "–"},
		{volts(Of(1.8443)), "1.84 V"}, {volts(Of(-0.0204)), "−20.4 mV"}, {volts(Of(0)), "0.00 V"}, {volts(Of(0.09996)), "0.10 V"},
		{volts(Of(12e-6)), "12 µV"}, {hertz(Of(44100)), "44.1 kHz"}, {hertz(Of(9615.38)), "9.6154 kHz"}, {hertz(Of(1536000)), "1.536 MHz"},
		{hertz(Of(50)), "50 Hz"}, {seconds(Of(1.84)), "1.84 s"}, {seconds(Of(0.00437)), "4.37 ms"}, {seconds(Of(0.9999)), "1.00 s"},
		{seconds(Of(0)), "0 s"}, {seconds(Of(125)), "125.0 s"}, {clock(Of(3.2125)), "0:03.2"}, {clock(Of(59.96)), "1:00.0"},
		{clock(Of(3723.25)), "1:02:03.3"}, {percent(Of(0.0438)), "4.38 %"}, {percent(Of(0)), "0 %"}, {percent(Of(1)), "100 %"},
		{times(0), "never"}, {times(1), "once"}, {times(214), "214 times"}, {times(12345), "12 345 times"}, {count(1344000), "1 344 000"},
		{errorDB(Of(0.00421)), "0.0042 dB"}, {significant(9.996, 3), "10.0"}, {partValue(Part{Value: Of(4700), Unit: Ohm}), "4.7 kΩ"},
		{partValue(Part{Value: Of(100e-9), Unit: Farad}), "100 nF"}, {partValue(Part{Value: Of(4.7e-3), Unit: Farad}), "4700 µF"}, {partValue(Part{}), "–"},
		{plusMinus(Of(0.05)), "±5 %"}, {signed(Of(3.21)), "+3.2 dB"}, {signed(Of(-0.5)), "−0.5 dB"}, {signed(Of(0)), "0.0 dB"},
		{engineering(20000), "20k"}, {engineering(50), "50"}, {engineering(1e6), "1M"},
	} {
		if c.got != c.want {
			t.Errorf("got %s, want %s", c.got, c.want)
		}
	}
}

func TestVerdict(t *testing.T) {
	clean := func() *Run {
		r := example()
		r.Overload, r.Converter.Saturated, r.Findings = Overload{}, 0, nil
		for i := range r.Limits {
			r.Limits[i].Holds = true
		}
		return r
	}
	for want, change := range map[string]func(*Run){
		"Holds: nothing overloads, no limit is broken": func(r *Run) {},
		"Holds: nothing overloads":                     func(r *Run) { r.Limits = nil },
		"It overloads, within the limits":              func(r *Run) { r.Overload.Events = 1 },
		"It overloads":                                 func(r *Run) { r.Converter.Saturated, r.Limits = 1, nil },
		"Does not hold: 1 of 3 limits broken":          func(r *Run) { r.Limits[2].Holds = false },
		"Does not hold: 1 finding to put right first":  func(r *Run) { r.Findings = []Finding{{Severity: Stop}} },
		"Does not hold: 1 of 1 limit broken":           func(r *Run) { r.Limits = []Limit{{Name: "room"}} },
	} {
		run := clean()
		change(run)
		if got := judge(run); got.Headline != want || got.Good != strings.HasPrefix(want, "Holds") {
			t.Errorf("got %q (good: %v), want %q", got.Headline, got.Good, want)
		}
	}
}

func TestWorstEvents(t *testing.T) {
	e := func(from, to, over float64) Event { return Event{"a", "high", Of(from), Of(to), Of(over)} }
	list := []Event{e(1, 2, 3), e(3, 3.5, math.NaN()), e(5, 8, 3), e(9, 9.1, 7)}
	got := worstEvents(list, 3)
	if want := []int{3, 2, 0}; !reflect.DeepEqual(got, want) {
		t.Errorf("got %v, want %v", got, want)
	}
}

// A peak of one point in a million is still in the drawing, and the drawing stays small.
func TestPathKeepsPeaks(t *testing.T) {
	const n = 1_000_000
	x, y := make([]float64, n), make([]float64, n)
	for i := range x {
		x[i] = float64(i)
	}
	y[123_456], y[777_777] = 1, -1
	f := figure{x: axis{lo: 0, hi: n}, y: axis{lo: -1, hi: 1}}
	d := f.path(curve{x: x, y: y}, 600, 200)
	if !strings.Contains(d, " 0L") || !strings.Contains(d, " 200L") {
		t.Error("a peak is lost")
	}
	if len(d) > 600*4*12 {
		t.Errorf("%d bytes", len(d))
	}
	if d := f.path(curve{x: []float64{0, 1, 2}, y: []float64{0, math.NaN(), 0}}, 2, 2); strings.Count(d, "M") != 2 {
		t.Errorf("no gap: %s", d)
	}
}

func TestTicks(t *testing.T) {
	texts := func(a axis, length, apart float64) string {
		var s []string
		for _, k := range a.ticks(length, apart) {
			if k.text != "" {
				s = append(s, k.text)
			}
		}
		return strings.Join(s, " ")
	}
	for _, c := range []struct{ got, want string }{
		{texts(axis{lo: 10, hi: 20e3, log: true}, 700, 40), "10 20 50 100 200 500 1k 2k 5k 10k 20k"},
		{texts(axis{lo: 10, hi: 100e3, log: true}, 250, 40), "10 100 1k 10k 100k"},
		{texts(axis{lo: -60, hi: 0}, 300, 34), "−60 −50 −40 −30 −20 −10 0"},
		{texts(axis{lo: 0, hi: 42, time: true}, 600, 46), "0:00 0:05 0:10 0:15 0:20 0:25 0:30 0:35 0:40"},
		{texts(axis{lo: 0, hi: 1, time: true}, 250, 46), "0:00.0 0:00.2 0:00.4 0:00.6 0:00.8 0:01.0"},
		{texts(axis{lo: 0, hi: 1200, time: true}, 250, 46), "0:00 5:00 10:00 15:00 20:00"},
	} {
		if c.got != c.want {
			t.Errorf("got %s, want %s", c.got, c.want)
		}
	}
}

// Text against paper reaches 4.5:1 in light and in dark (WCAG 2.2, 1.4.3: contrast, minimum; relative
// luminance by its definition).
func TestContrast(t *testing.T) {
	style, err := parts.ReadFile("page/style.css")
	if err != nil {
		t.Fatal(err)
	}
	const least = 4.5
	roots := regexp.MustCompile(`(?s):root \{(.*?)\}`).FindAllStringSubmatch(string(style), -1)
	if len(roots) != 2 {
		t.Fatalf("%d palettes, want light and dark", len(roots))
	}
	for _, root := range roots {
		colors := map[string]float64{}
		for _, m := range regexp.MustCompile(`--([a-z0-9-]+): #([0-9a-f]{6})`).FindAllStringSubmatch(root[1], -1) {
			colors[m[1]] = luminance(t, m[2])
		}
		for _, name := range []string{"ink", "faint", "good", "bad", "warn", "link", "line-0", "line-1", "line-2", "line-3", "line-4", "line-5", "line-6"} {
			text, there := colors[name]
			if !there {
				t.Fatalf("no colour %s", name)
			}
			a, b := max(text, colors["paper"]), min(text, colors["paper"])
			if ratio := (a + 0.05) / (b + 0.05); !(ratio >= least) {
				t.Errorf("%s on paper: %.2f:1", name, ratio)
			}
		}
		a, b := max(colors["ink"], colors["shade"]), min(colors["ink"], colors["shade"])
		if ratio := (a + 0.05) / (b + 0.05); !(ratio >= least) {
			t.Errorf("ink on shade: %.2f:1", ratio)
		}
	}
}

// luminance returns the relative luminance of a colour (WCAG 2.2).
func luminance(t *testing.T, hex string) float64 {
	t.Helper()
	v, err := strconv.ParseUint(hex, 16, 32)
	if err != nil {
		t.Fatal(err)
	}
	part := func(shift uint) float64 {
		c := float64(v>>shift&255) / 255
		if c <= 0.04045 {
			return c / 12.92
		}
		return math.Pow((c+0.055)/1.055, 2.4)
	}
	return 0.2126*part(16) + 0.7152*part(8) + 0.0722*part(0)
}

// What is left out of a line lies on what is drawn, within the tolerance.
func TestThinnedLinesStay(t *testing.T) {
	var list []point
	for i := range 2000 {
		x := float64(i) / 3
		list = append(list, point{x, 100 + 60*math.Sin(x/20) + 8*math.Sin(x*x/5000)})
	}
	kept := thinned(list)
	if len(kept) > len(list)/2 || kept[0] != list[0] || kept[len(kept)-1] != list[len(list)-1] {
		t.Fatalf("%d of %d points are left", len(kept), len(list))
	}
	k := 0
	for _, p := range list {
		for kept[k+1].x < p.x {
			k++
		}
		a, b := kept[k], kept[k+1]
		if y := a.y + (b.y-a.y)*(p.x-a.x)/(b.x-a.x); !(math.Abs(y-p.y) <= straight*(1+1e-9)) {
			t.Errorf("at %v the line is %v off", p.x, y-p.y)
		}
	}
}
