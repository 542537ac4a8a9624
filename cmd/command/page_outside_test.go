//go:build outside

package command

import (
	"context"
	_ "embed"
	"encoding/json"
	"fmt"
	"io"
	"math"
	"net/url"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/chromedp/cdproto/emulation"
	"github.com/chromedp/cdproto/network"
	"github.com/chromedp/chromedp"
	"github.com/chromedp/chromedp/kb"
)

// pageChecks are run in the browser: what they return are the faults found.
//
//go:embed testdata/page_checks.js
var pageChecks string

// sixStages is a chain of six, and of names that are trouble.
const sixStages = `
title = "Six & <b>more</b> \"stages\" <img src=x onerror=\"window.hacked=1\"> 前置放大器 усилитель"
[supply]
voltage = "5V"
[bias."half <i>"]
top = "22k"
bottom = "22k"
bypass = "10u"
[amplifier.one]
class = "cmos rail-to-rail"
[input.line]
kind = "line"
full_scale = "1Vrms"
[[stage]]
name = "a <script>hack()</script>"
kind = "inverting"
from = "line"
amplifier = "one"
bias = "half <i>"
c_in = "1u"
r_in = "10k"
r_f = "33k"
[[stage]]
name = "усилитель"
kind = "inverting"
from = "a <script>hack()</script>"
amplifier = "one"
bias = "half <i>"
r_in = "10k"
r_f = "10k"
[[stage]]
name = "前置"
kind = "follower"
from = "усилитель"
amplifier = "one"
[[stage]]
name = "low & slow"
kind = "rc low-pass"
from = "前置"
r = "1k"
c = "1n"
[[stage]]
name = "a name that goes on for much longer than any column would ever have room for"
kind = "follower"
from = "low & slow"
amplifier = "one"
[[stage]]
name = "filter"
kind = "sallen-key low-pass"
from = "a name that goes on for much longer than any column would ever have room for"
amplifier = "one"
r_1 = "6k8"
r_2 = "6k8"
c_1 = "2n2"
c_2 = "1n"
[converter]
from = "filter"
rate = 16000
bits = 12
low = 0
high = 5
`

// reports makes the reports that are looked at, each in a folder of its name.
func reports(t *testing.T) string {
	dir := t.TempDir()
	at := func(name string) string { return filepath.Join(dir, name) }
	if err := os.WriteFile(at("six.toml"), []byte(sixStages), 0o666); err != nil {
		t.Fatal(err)
	}
	plain := `[supply]
voltage = "5V"
[bias.half]
top = "22k"
bottom = "22k"
[amplifier.one]
class = "cmos rail-to-rail"
[input.line]
kind = "line"
full_scale = "1Vrms"
[[stage]]
name = "amp"
kind = "inverting"
from = "line"
amplifier = "one"
bias = "half"
c_in = "1u"
r_in = "10k"
r_f = "10k"
[converter]
from = "amp"
rate = 16000
bits = 12
low = 0
high = 5
`
	if err := os.WriteFile(at("plain.toml"), []byte(plain), 0o666); err != nil {
		t.Fatal(err)
	}
	hostile := "x <img src=x onerror=window.hacked=1> & “声” x.wav"
	for _, args := range [][]string{
		{"tracks", "pink", at("long.wav"), "--seconds", "60", "--level", "-12"},
		{"tracks", "tone", at("tone.wav"), "--seconds", "2", "--from", "440", "--level", "-20"},
		{"tracks", "silence", at("silence.wav"), "--seconds", "2"},
		{"tracks", "tone", at(hostile), "--seconds", "2", "--from", "440", "--level", "-3"},
		{"run", "--out", at("demo")},
		{"run", at("plain.toml"), at("tone.wav"), "--out", at("clean")},
		{"run", at("plain.toml"), at("tone.wav"), "--set", "half.bottom=100M", "--out", at("stuck")},
		{"run", at("plain.toml"), at("silence.wav"), "--out", at("silent")},
		{"run", at("six.toml"), at(hostile), "--out", at("six")},
		{"run", at("six.toml"), at("long.wav"), "--out", at("long")},
		{"run", at("plain.toml"), at("tone.wav"), at("silence.wav"), "--out", at("several")},
	} {
		var told strings.Builder
		if status := Exec(context.Background(), args, strings.NewReader(""), io.Discard, &told); status != Done && status != Broken {
			t.Fatalf("%q: status %d: %s", args, status, told.String())
		}
	}
	return dir
}

// browser starts the browser; what the page writes to the console and asks for is in its record.
type browser struct {
	ctx    context.Context
	mu     sync.Mutex
	asked  []string
	logged []string
}

func newBrowser(t *testing.T) *browser {
	t.Helper()
	options := append(chromedp.DefaultExecAllocatorOptions[:], chromedp.ExecPath("/usr/bin/chromium"), chromedp.NoSandbox, chromedp.DisableGPU,
		chromedp.Flag("disable-quic", true), chromedp.Flag("disable-component-update", true), chromedp.Flag("mute-audio", true))
	ctx, stop := context.WithTimeout(context.Background(), 5*time.Minute)
	t.Cleanup(stop)
	ctx, stopBrowser := chromedp.NewExecAllocator(ctx, options...)
	t.Cleanup(stopBrowser)
	ctx, stopTab := chromedp.NewContext(ctx)
	t.Cleanup(stopTab)
	b := &browser{ctx: ctx}
	if _, err := chromedp.Call(ctx, network.Enable, network.EnableParams{}); err != nil {
		t.Fatal(err)
	}
	err := chromedp.Listen(ctx, func(ev any) {
		if r, is := ev.(*network.EventRequestWillBeSent); is {
			b.mu.Lock()
			b.asked = append(b.asked, r.Request.URL)
			b.mu.Unlock()
		}
	})
	if err != nil {
		t.Fatal(err)
	}
	messages := chromedp.Console(ctx)
	go func() {
		for m, err := range messages {
			if err != nil {
				return
			}
			b.mu.Lock()
			b.logged = append(b.logged, m.String())
			b.mu.Unlock()
		}
	}()
	return b
}

func (b *browser) open(t *testing.T, path string) {
	t.Helper()
	b.mu.Lock()
	b.asked, b.logged = nil, nil
	b.mu.Unlock()
	page := (&url.URL{Scheme: "file", Path: path}).String()
	if err := chromedp.Do(b.ctx, chromedp.Navigate(page)); err != nil {
		t.Fatal(err)
	}
}

// quiet fails where the page has asked for anything but itself and its own data, or written to the console.
func (b *browser) quiet(t *testing.T, path string) {
	t.Helper()
	b.mu.Lock()
	defer b.mu.Unlock()
	page := (&url.URL{Scheme: "file", Path: path}).String()
	for _, a := range b.asked {
		if a != page && !strings.HasPrefix(a, "data:") {
			t.Errorf("%s asks for %s", path, a)
		}
	}
	if len(b.asked) == 0 {
		t.Error("no request was seen, not even that for the page")
	}
	for _, m := range b.logged {
		t.Errorf("%s: console: %s", path, m)
	}
}

func evaluate[T any](t *testing.T, b *browser, expression string) T {
	t.Helper()
	v, err := chromedp.Run(b.ctx, chromedp.Evaluate[T](expression, chromedp.EvalAwaitPromise))
	if err != nil {
		t.Fatalf("%s: %v", expression[:min(len(expression), 80)], err)
	}
	return v
}

// set sets the window's width and the reader's scheme of colours.
func (b *browser) set(t *testing.T, width int64, scheme string) {
	t.Helper()
	_, err := chromedp.Call(b.ctx, emulation.SetEmulatedMedia, emulation.SetEmulatedMediaParams{
		Features: []*emulation.MediaFeature{{Name: "prefers-color-scheme", Value: scheme}},
	})
	if err == nil {
		err = chromedp.Do(b.ctx, chromedp.EmulateViewport(width, 900))
	}
	if err != nil {
		t.Fatal(err)
	}
}

// TestPagesInABrowser opens reports in the browser, at three widths, in light and in dark. Contrast, labels, headings,
// target sizes and reflow are those of WCAG 2.2 AA: success criteria 1.4.3, 1.4.10, 1.4.11, 2.1.1, 2.4.6, 2.5.8, 4.1.2.
func TestPagesInABrowser(t *testing.T) {
	dir := reports(t)
	b := newBrowser(t)
	for _, name := range []string{"demo/report.html", "clean/report.html", "stuck/report.html", "silent/report.html", "six/report.html", "long/report.html", "several/overview.html"} {
		t.Run(name, func(t *testing.T) {
			path := filepath.Join(dir, name)
			if info, err := os.Stat(path); err != nil || info.Size() >= 6e6 {
				t.Fatalf("%v, or 6 MB and more", err)
			}
			for _, width := range []int64{360, 800, 1400} {
				for _, scheme := range []string{"light", "dark"} {
					b.set(t, width, scheme)
					b.open(t, path)
					for _, fault := range evaluate[[]string](t, b, "("+pageChecks+")()") {
						t.Errorf("%d %s: %s", width, scheme, fault)
					}
					b.quiet(t, path)
				}
			}
			if hacked := evaluate[bool](t, b, `"hacked" in window || document.querySelector("img") !== null`); hacked {
				t.Error("a name ran as script")
			}
			keyboard(t, b)
			if filepath.Base(name) == "report.html" {
				figures(t, b, filepath.Dir(path))
			}
		})
	}
	for _, name := range []string{"demo", "long"} {
		t.Run(name+" to listen to", func(t *testing.T) { players(t, b, filepath.Join(dir, name)) })
	}
	t.Run("sorting", func(t *testing.T) { sorting(t, b, filepath.Join(dir, "demo")) })
	t.Run("reading", func(t *testing.T) { readingOff(t, b, filepath.Join(dir, "demo")) })
	t.Run("printed", func(t *testing.T) { printed(t, b, filepath.Join(dir, "six")) })
	t.Run("without script", func(t *testing.T) { withoutScript(t, b, filepath.Join(dir, "demo")) })
}

// figures holds every figure that the page shows against the place in report.json that it names.
func figures(t *testing.T, b *browser, folder string) {
	t.Helper()
	data, err := os.ReadFile(filepath.Join(folder, "report.json"))
	if err != nil {
		t.Fatal(err)
	}
	var tree any
	if err := json.Unmarshal(data, &tree); err != nil {
		t.Fatal(err)
	}
	shown := evaluate[[][2]string](t, b, `[...document.querySelectorAll("data[data-at]")].map(d => [d.dataset.at, d.value])`)
	if len(shown) < 60 {
		t.Errorf("only %d figures are on the page", len(shown))
	}
	for _, s := range shown {
		at := tree
		for _, step := range strings.Split(s[0], ".") {
			switch v := at.(type) {
			case map[string]any:
				at = v[step]
			case []any:
				i, err := strconv.Atoi(step)
				if err != nil || i >= len(v) {
					t.Fatalf("%s: no such place", s[0])
				}
				at = v[i]
			}
		}
		want := ""
		if x, is := at.(float64); is {
			want = strconv.FormatFloat(x, 'g', -1, 64)
		}
		if s[1] != want {
			t.Errorf("%s is %q on the page, %q in report.json", s[0], s[1], want)
		}
	}
}

// keyboard presses Tab through the page and fails where something that can be used is not reached, or shows no focus.
func keyboard(t *testing.T, b *browser) {
	t.Helper()
	const usable = `a[href], button, audio, input, summary, [tabindex="0"]`
	count := evaluate[int](t, b, `(() => {
		document.activeElement.blur();
		window.reached = new Set();
		window.unseen = [];
		document.addEventListener("focusin", e => {
			window.reached.add(e.target);
			const s = getComputedStyle(e.target);
			if (e.target.tagName !== "AUDIO" && (s.outlineStyle === "none" || parseFloat(s.outlineWidth) < 2)) window.unseen.push(e.target.outerHTML.slice(0, 80));
		});
		window.wanted = [...document.querySelectorAll('`+usable+`')].filter(e => e.checkVisibility());
		return window.wanted.length;
	})()`)
	for range 3*count + 40 { // a player has several stops
		if err := chromedp.Do(b.ctx, chromedp.KeyEvent("\t")); err != nil {
			t.Fatal(err)
		}
		if evaluate[bool](t, b, `window.wanted.every(e => window.reached.has(e))`) {
			break
		}
	}
	for _, missed := range evaluate[[]string](t, b, `window.wanted.filter(e => !window.reached.has(e)).map(e => e.outerHTML.slice(0, 80))`) {
		t.Errorf("the keyboard does not reach %s", missed)
	}
	for _, unseen := range evaluate[[]string](t, b, `window.unseen`) {
		t.Errorf("no focus is seen on %s", unseen)
	}
}

// lengthTolerance is how far, in s, a player's length may lie from that of its sound: a sample at the lowest rate.
const lengthTolerance = 1e-3

// placeTolerance is how far apart, in s, two players may be after a swap: what passes between two looks.
const placeTolerance = 0.3

// players checks that every player loads, that overloads' marks seek, and that swapping keeps the place.
func players(t *testing.T, b *browser, folder string) {
	var run struct {
		Listen struct {
			Passages []struct {
				From float64 `json:"from_s"`
				To   float64 `json:"to_s"`
			}
			Players []struct {
				Name    string
				Seconds float64
			}
		}
	}
	data, err := os.ReadFile(filepath.Join(folder, "report.json"))
	if err == nil {
		err = json.Unmarshal(data, &run)
	}
	if err != nil || len(run.Listen.Players) < 3 {
		t.Fatalf("%d players, %v", len(run.Listen.Players), err)
	}
	b.open(t, filepath.Join(folder, "report.html"))
	held := 0.
	for _, p := range run.Listen.Passages {
		held += p.To - p.From
	}
	for i, p := range run.Listen.Players {
		got := evaluate[float64](t, b, fmt.Sprintf(`(async () => {
			const sound = document.querySelectorAll("audio")[%d];
			for (let i = 0; i < 200 && !(sound.readyState >= 1); i++) await new Promise(r => setTimeout(r, 25));
			return sound.error ? -1 : sound.duration;
		})()`, i))
		if !(math.Abs(got-p.Seconds) <= lengthTolerance) || !(math.Abs(got-held) <= 0.01) {
			t.Errorf("%s lasts %v s, want %v, and the passages %v", p.Name, got, p.Seconds, held)
		}
	}
	// The last mark: its overload is a quarter of a second ahead, or less where the passage begins there.
	if err := chromedp.Do(b.ctx, chromedp.Click(chromedp.CSS(".marks li:last-child a"))); err != nil {
		t.Fatal(err)
	}
	type place struct {
		At      []float64
		Playing []bool
		Mark    float64
	}
	look := func() place {
		return evaluate[place](t, b, `(() => {
			const sounds = [...document.querySelectorAll("audio")];
			const marks = document.querySelectorAll(".marks a");
			return { At: sounds.map(s => s.currentTime), Playing: sounds.map(s => !s.paused), Mark: Number(marks[marks.length - 1].dataset.seek) };
		})()`)
	}
	p := look()
	want, start := math.NaN(), 0.
	for _, passage := range run.Listen.Passages {
		if p.Mark >= passage.From && p.Mark < passage.To {
			want = start + p.Mark - passage.From
		}
		start += passage.To - passage.From
	}
	if d := want - p.At[1]; !(d >= -placeTolerance && d <= 0.25+placeTolerance) || !p.Playing[1] {
		t.Errorf("the mark at %v, %v in the players, leads to %v; playing: %v", p.Mark, want, p.At[1], p.Playing[1])
	}
	for _, to := range []int{0, 1} {
		if err := chromedp.Do(b.ctx, chromedp.Sleep(150*time.Millisecond), chromedp.KeyEvent("x")); err != nil {
			t.Fatal(err)
		}
		p := look()
		if !p.Playing[to] || p.Playing[1-to] || !(math.Abs(p.At[0]-p.At[1]) <= placeTolerance) {
			t.Errorf("after the key: at %v, playing %v; want %d to play at the same place", p.At[:2], p.Playing[:2], to)
		}
	}
	// Without the key's leave nothing happens; the button still swaps.
	if err := chromedp.Do(b.ctx, chromedp.Click(chromedp.CSS("#key")), chromedp.KeyEvent("x")); err != nil {
		t.Fatal(err)
	}
	if p := look(); !p.Playing[1] {
		t.Error("the key swaps though it is turned off")
	}
	if err := chromedp.Do(b.ctx, chromedp.Click(chromedp.CSS("#swap"))); err != nil {
		t.Fatal(err)
	}
	swapped := look().Playing[0]
	for range 40 { // a busy machine takes a while to follow a click
		if swapped {
			break
		}
		time.Sleep(50 * time.Millisecond)
		swapped = look().Playing[0]
	}
	if !swapped {
		t.Error("the button does not swap")
	}
	evaluate[bool](t, b, `document.querySelectorAll("audio").forEach(s => s.pause()) ?? true`)
}

// sorting sorts the layers by their level, both ways.
func sorting(t *testing.T, b *browser, folder string) {
	b.open(t, filepath.Join(folder, "report.html"))
	for _, way := range []string{"ascending", "descending"} {
		if err := chromedp.Do(b.ctx, chromedp.Click(chromedp.CSS("#residue thead th:nth-child(2) button"))); err != nil {
			t.Fatal(err)
		}
		order := evaluate[[]float64](t, b, `[...document.querySelectorAll("#residue table:first-of-type tbody tr td:nth-child(2) data")].slice(0, 6).map(d => Number(d.value))`)
		if got := evaluate[string](t, b, `document.querySelector("#residue thead th:nth-child(2)").getAttribute("aria-sort")`); got != way {
			t.Errorf("the heading says %q, want %q", got, way)
		}
		for i := 1; i < len(order); i++ {
			if (order[i] < order[i-1]) == (way == "ascending") && order[i] != order[i-1] {
				t.Errorf("%s: %v", way, order)
				break
			}
		}
	}
}

// readingOff reads a value off the response by the keyboard and by the pointer, and finds it in what the figure tells.
func readingOff(t *testing.T, b *browser, folder string) {
	b.open(t, filepath.Join(folder, "report.html"))
	told := func() string { return evaluate[string](t, b, `document.querySelector("#response output").textContent`) }
	if err := chromedp.Do(b.ctx, chromedp.Focus(chromedp.CSS("#response svg.wide")), chromedp.KeyEvent(kb.ArrowRight)); err != nil {
		t.Fatal(err)
	}
	first := told()
	if !strings.Contains(first, "Hz") || !strings.Contains(first, "brood ") || !strings.Contains(first, "dB") {
		t.Errorf("by the keyboard: %q", first)
	}
	evaluate[bool](t, b, `(() => { const s = document.querySelector("#response svg.wide"), r = s.getBoundingClientRect(); s.dispatchEvent(new PointerEvent("pointermove", { clientX: r.left + r.width / 3, clientY: r.top + 20 })); return true; })()`)
	if got := told(); got == first || !strings.Contains(got, "brood ") {
		t.Errorf("by the pointer: %q", got)
	}
	// A figure along time plays from where it is pressed, and says so once.
	evaluate[bool](t, b, `(() => { const s = document.querySelector("#overloads svg.wide[data-seeks]"); s.scrollIntoView(); const r = s.getBoundingClientRect(); s.dispatchEvent(new MouseEvent("click", { clientX: r.left + r.width / 2, clientY: r.top + r.height / 2 })); return true; })()`)
	if at := evaluate[float64](t, b, `document.querySelector("#player-heard audio").currentTime`); !(at > 5 && at < 16) {
		t.Errorf("pressed in its middle, the figure plays from %v s", at)
	}
	if n := evaluate[int](t, b, `document.querySelector("#overloads figcaption").textContent.split("to play from there").length - 1`); n != 1 {
		t.Errorf("the caption tells %d times that it plays", n)
	}
}

// printed prints the page and reads the result with an outside program.
func printed(t *testing.T, b *browser, folder string) {
	b.open(t, filepath.Join(folder, "report.html"))
	pdf, err := chromedp.Run(b.ctx, chromedp.PrintToPDF())
	if err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(t.TempDir(), "page.pdf")
	if err := os.WriteFile(path, pdf, 0o666); err != nil {
		t.Fatal(err)
	}
	text, err := exec.Command("pdftotext", path, "-").Output()
	if err != nil {
		t.Fatal(err)
	}
	for _, want := range []string{"Levels in third octaves", "mid-band", "Stages", "Converter", "Residue", "Overloads", "Response", "Noise", "Rest and supply", "Parts list", "Assumptions and cautions", "How it was computed", "усилитель", "slew"} {
		if !strings.Contains(string(text), want) {
			t.Errorf("%q is not printed", want)
		}
	}
	if strings.Contains(string(text), "Swap track") || strings.Contains(string(text), "arrow keys") {
		t.Error("what is of no use on paper is printed")
	}
}

// withoutScript opens the page in a browser that runs none.
func withoutScript(t *testing.T, b *browser, folder string) {
	disable := func(off bool) {
		if _, err := chromedp.Call(b.ctx, emulation.SetScriptExecutionDisabled, emulation.SetScriptExecutionDisabledParams{Value: off}); err != nil {
			t.Fatal(err)
		}
	}
	disable(true)
	defer disable(false)
	b.open(t, filepath.Join(folder, "report.html"))
	hidden := evaluate[[]string](t, b, `[...document.querySelectorAll("section, table, audio, figure")].filter(e => !e.closest("details:not([open])") && !(e.checkVisibility() && e.getBoundingClientRect().height > 0)).map(e => e.outerHTML.slice(0, 80))`)
	for _, h := range hidden {
		t.Errorf("not seen: %s", h)
	}
	if !evaluate[bool](t, b, `document.querySelector("th button") === null && document.querySelectorAll("audio[controls]").length > 2`) {
		t.Error("script ran, or there are no players")
	}
}
