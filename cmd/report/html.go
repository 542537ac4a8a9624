package report

import (
	"bytes"
	"crypto/sha256"
	"embed"
	"encoding/base64"
	"encoding/binary"
	"fmt"
	"html"
	"html/template"
	"io"
	"net/url"
	"sort"
	"strconv"
	"strings"
)

// parts are the templates, the style sheet and the script of the page.
//
//go:embed page
var parts embed.FS

// page is what the templates are filled from.
type page struct {
	*Run
	Head     template.HTML // the policy, the style sheet and the script
	Title    string
	Verdict  verdict
	First    *Finding // the finding to put right first; nil where there is none
	Figures  figures
	Players  []player
	Marks    []soundMark
	Ticks    []string   // where on the players' time axis all overloads are, as "12.3%"
	Begins   []axisMark // of the passages on that axis, and the end of the last
	Loudest  []int      // of Events: those that the page lists
	Thirds   *thirds    // nil where no layer has them
	Purchase []bought
	CutShort bool // whether the players hold passages only
}

// player is one sound as the page has it.
type player struct {
	Player
	Source  template.HTMLAttr
	Caution bool
}

// soundMark is an overload that the players can be taken to.
type soundMark struct {
	Index int // of Run.Events
	Event
	At float64 // s, in the players
	X  string  // on their time axis, as "12.3%"
}

// axisMark is a time of the track on the players' axis.
type axisMark struct {
	X, Anchor string
	Time      Number // s
}

// thirds are the third-octave levels of all layers as one table.
type thirds struct {
	Layers []int // of Run.Layers
	Rows   []thirdRow
}

// thirdRow is one third octave.
type thirdRow struct {
	Hz     Number
	Levels []thirdCell // one for each of thirds.Layers
}

// thirdCell is one level and where it stands in the run.
type thirdCell struct {
	DBFS  Number
	Layer int
	Third int // of the layer's thirds; −1: it has none there
}

// WriteHTML writes the run as one self-contained page: it asks nothing of the network, runs no
// script but its own, and every name in it is escaped. Pictures may be nil: then there are neither
// plots nor players. It returns the error of w.
func WriteHTML(w io.Writer, run *Run, pictures *Pictures) error {
	p := page{
		Run: run, Title: title(run), Verdict: judge(run), First: first(run.Findings),
		Loudest: worstEvents(run.Events, mostEvents), Thirds: gather(run.Layers), Purchase: purchase(run.Parts),
	}
	var err error
	if pictures != nil {
		if p.Figures, err = draw(run, pictures); err != nil {
			return err
		}
		p.listen(pictures)
	}
	return fill(w, "page.html", func(head template.HTML) any { p.Head = head; return p })
}

// fill writes the named template, filled with what data returns for the head that the page needs.
func fill(w io.Writer, name string, data func(head template.HTML) any) error {
	style, err := parts.ReadFile("page/style.css")
	if err != nil {
		return err
	}
	script, err := parts.ReadFile("page/script.js")
	if err != nil {
		return err
	}
	t, err := template.New(name).Funcs(template.FuncMap{
		"clean": clean, "dbfs": dbfs, "db": decibels, "signed": signed, "errorDB": errorDB, "volts": volts, "amperes": Amperes, "degrees": Degrees, "digits": Plain,
		"hertz": hertz, "seconds": seconds, "clock": clock, "percent": percent, "scaled": scaled, "count": count, "lsb": lsb,
		"times": times, "plural": plural, "limitName": limitName, "limitValue": limitValue, "limitWord": limitWord, "limitFigure": limitFigure,
		"lengthOf": lengthOf, "partValue": partValue, "plusMinus": plusMinus, "slug": slug,
		"fig": fig, "changed": changed, "ofChange": ofChange, "whole": whole, "between": between, "href": href,
	}).ParseFS(parts, "page/*.html")
	if err != nil {
		return err
	}
	var b bytes.Buffer
	if err := t.Execute(&b, data(head(string(style), string(script)))); err != nil {
		return err
	}
	_, err = w.Write(b.Bytes())
	return err
}

// head returns the style sheet and the script, and a policy that allows them, what the page holds
// itself, and nothing else (Content Security Policy Level 3, W3C: a hash source names the text that
// may be used).
func head(style, script string) template.HTML {
	hash := func(text string) string {
		sum := sha256.Sum256([]byte(text))
		return "'sha256-" + base64.StdEncoding.EncodeToString(sum[:]) + "'"
	}
	policy := "default-src 'none'; style-src " + hash(style) + "; script-src " + hash(script) + "; img-src data:; media-src data:; base-uri 'none'; form-action 'none'"
	return template.HTML(`<meta http-equiv="Content-Security-Policy" content="` + policy + "\">\n<style>" + style + "</style>\n<script type=\"module\">" + script + "</script>")
}

// at returns the place of a figure in report.json: "stages.0.rest_v".
func at(path ...any) string {
	s := make([]string, len(path))
	for i, p := range path {
		s[i] = fmt.Sprint(p)
	}
	return strings.Join(s, ".")
}

// fig returns a figure with its text, its exact value, and its place in report.json.
func fig(text string, n Number, path ...any) template.HTML {
	return template.HTML(`<data value="` + n.Exact() + `" data-at="` + html.EscapeString(at(path...)) + `">` + html.EscapeString(text) + "</data>")
}

// whole returns a whole number, an int or an int64, as fig does.
func whole(n any, path ...any) template.HTML {
	x, is := n.(int64)
	if !is {
		x = int64(n.(int))
	}
	return fig(count(x), Of(float64(x)), path...)
}

// between returns a range of voltage, low and high being at path with those ends.
func between(low, high Number, lowKey, highKey string, path ...any) template.HTML {
	if low == (Number{}) && high == (Number{}) {
		return absent
	}
	return fig(bare(low, 2), low, append(append([]any{}, path...), lowKey)...) + " to " + fig(volts(high), high, append(append([]any{}, path...), highKey)...)
}

// href returns a file beside the page as a link's target.
func href(file string) template.URL { return template.URL((&url.URL{Path: "./" + file}).String()) }

// title returns the chain's title, or the name of its file where it has none.
func title(run *Run) string {
	if run.Chain.Title != "" {
		return clean(run.Chain.Title)
	}
	return clean(run.Chain.File)
}

// first returns the first finding that stops, or else the first caution; nil where there is none.
func first(findings []Finding) *Finding {
	for _, severity := range []string{Stop, Caution} {
		for i := range findings {
			if findings[i].Severity == severity {
				return &findings[i]
			}
		}
	}
	return nil
}

// loudGain is the gain in dB from which on a player comes with a caution of its own.
const loudGain = 12

// listen puts the players together, and the marks of the overloads that they hold.
func (p *page) listen(pictures *Pictures) {
	l := p.Run.Listen
	if l == nil {
		return
	}
	for i, sound := range pictures.Sounds {
		if i >= len(l.Players) {
			break
		}
		gain, _ := l.Players[i].GainDB.Value()
		p.Players = append(p.Players, player{l.Players[i], template.HTMLAttr(`src="data:audio/wav;base64,` + base64.StdEncoding.EncodeToString(waveFile(sound)) + `"`), gain >= loudGain})
	}
	held := 0.
	for _, passage := range l.Passages {
		held += passage.ToS.value - passage.FromS.value
	}
	p.CutShort = held < p.Track.Seconds.value-1e-3
	for _, i := range p.Loudest {
		if at, there := l.place(p.Events[i].FromS); there && len(p.Marks) < mostMarks {
			p.Marks = append(p.Marks, soundMark{i, p.Events[i], at, share(at, held)})
		}
	}
	for _, e := range p.Events {
		// Ticks closer than a thousandth of the axis are one.
		if at, there := l.place(e.FromS); there {
			if x := share(at, held); len(p.Ticks) == 0 || p.Ticks[len(p.Ticks)-1] != x {
				p.Ticks = append(p.Ticks, x)
			}
		}
	}
	at := 0.
	for i, passage := range l.Passages {
		anchor := "middle"
		if i == 0 {
			anchor = "start"
		}
		p.Begins = append(p.Begins, axisMark{share(at, held), anchor, passage.FromS})
		at += passage.ToS.value - passage.FromS.value
		if i == len(l.Passages)-1 {
			p.Begins = append(p.Begins, axisMark{share(at, held), "end", passage.ToS})
		}
	}
	sort.Slice(p.Marks, func(i, j int) bool { return p.Marks[i].At < p.Marks[j].At })
}

// share returns a part of a whole as SVG takes it.
func share(part, whole float64) string { return strconv.FormatFloat(100*part/whole, 'f', 1, 64) + "%" }

// mostMarks is how many overloads the players have marks for.
const mostMarks = 12

// place returns where a time on the track lies in the players.
func (l *Listen) place(t Number) (at float64, there bool) {
	x, known := t.Value()
	if !known {
		return 0, false
	}
	for _, p := range l.Passages {
		if x >= p.FromS.value && x < p.ToS.value {
			return at + x - p.FromS.value, true
		}
		at += p.ToS.value - p.FromS.value
	}
	return 0, false
}

// waveFile returns a sound as a WAV file of 16 bits and one channel.
func waveFile(s PlayerSound) []byte {
	const header = 44
	size := 2 * len(s.Codes)
	b := make([]byte, 0, header+size)
	order := binary.LittleEndian
	b = append(b, "RIFF"...)
	b = order.AppendUint32(b, uint32(header-8+size))
	b = append(b, "WAVEfmt "...)
	b = order.AppendUint32(b, 16)
	b = order.AppendUint16(b, 1) // integers
	b = order.AppendUint16(b, 1) // channel
	rate := uint32(s.Rate + 0.5)
	b = order.AppendUint32(b, rate)
	b = order.AppendUint32(b, 2*rate)
	b = order.AppendUint16(b, 2)
	b = order.AppendUint16(b, 16)
	b = append(b, "data"...)
	b = order.AppendUint32(b, uint32(size))
	for _, c := range s.Codes {
		b = order.AppendUint16(b, uint16(c))
	}
	return b
}

// gather puts the third octaves of all layers side by side; nil where there are none.
func gather(layers []Layer) *thirds {
	var t thirds
	at := map[float64]int{}
	for i, l := range layers {
		if len(l.Thirds) == 0 {
			continue
		}
		t.Layers = append(t.Layers, i)
		for _, third := range l.Thirds {
			hz, there := third.Hz.Value()
			if _, known := at[hz]; there && !known {
				at[hz] = len(t.Rows)
				t.Rows = append(t.Rows, thirdRow{Hz: third.Hz})
			}
		}
	}
	if len(t.Rows) == 0 {
		return nil
	}
	sort.Slice(t.Rows, func(i, j int) bool { return t.Rows[i].Hz.value < t.Rows[j].Hz.value })
	for i := range t.Rows {
		for _, l := range t.Layers {
			cell := thirdCell{Layer: l, Third: -1}
			for k, third := range layers[l].Thirds {
				if third.Hz == t.Rows[i].Hz {
					cell.DBFS, cell.Third = third.DBFS, k
				}
			}
			t.Rows[i].Levels = append(t.Rows[i].Levels, cell)
		}
	}
	return &t
}
