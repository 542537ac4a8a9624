package report

import (
	"fmt"
	"html"
	"html/template"
	"math"
	"strconv"
	"strings"
)

// Drawing. A figure is one set of axes with lines, bands, marks and rows of spans over it, drawn
// as SVG whose colours come from the page's style sheet by class, so that it follows the reader's
// light or dark setting and prints.

// axis is one axis of a figure.
type axis struct {
	label  string
	unit   string  // of the data, for read-outs
	lo, hi float64 // ends, in the unit of the data; lo < hi, and 0 < lo where log
	log    bool
	time   bool // ticks are clock times
}

// at returns where x lies along the axis, 0 at lo and 1 at hi; beyond them outside.
func (a axis) at(x float64) float64 {
	if a.log {
		return math.Log(x/a.lo) / math.Log(a.hi/a.lo)
	}
	return (x - a.lo) / (a.hi - a.lo)
}

// data returns the axis as the page's script reads it: its ends, how it is divided, and its unit.
func (a axis) data() string {
	kind := "even"
	switch {
	case a.log:
		kind = "log"
	case a.time:
		kind = "clock"
	}
	number := func(x float64) string { return strconv.FormatFloat(x, 'g', 8, 64) }
	return html.EscapeString(number(a.lo) + " " + number(a.hi) + " " + kind + " " + a.unit)
}

// tick is one line of the grid; without text it is a minor one.
type tick struct {
	at   float64
	text string
}

// ticks returns the axis's ticks for a drawn length and the least distance between texts.
func (a axis) ticks(length, apart float64) []tick {
	switch {
	case a.log:
		return a.decades(length, apart)
	case a.time:
		return a.every(length, apart, []float64{1, 2, 5, 10, 15, 30, 60, 120, 300, 600, 900, 1800, 3600, 7200, 14400, 43200})
	}
	return a.every(length, apart, nil)
}

// decades returns 10 20 50 100 … 1k 10k, as many of them with text as there is room for.
func (a axis) decades(length, apart float64) []tick {
	decade := length * math.Ln10 / math.Log(a.hi/a.lo)
	var list []tick
	for e := math.Floor(math.Log10(a.lo)); e <= math.Ceil(math.Log10(a.hi)); e++ {
		for _, m := range []float64{1, 2, 5} {
			x := m * math.Pow(10, e)
			if x < a.lo*(1-1e-9) || x > a.hi*(1+1e-9) {
				continue
			}
			t := tick{at: x}
			// The narrowest of the three steps is from 1 to 2 (and 5 to 10): log10(2) of a decade.
			if m == 1 || decade*math.Log10(2) >= apart {
				t.text = engineering(x)
			}
			list = append(list, t)
		}
	}
	return list
}

// every returns ticks at multiples of the smallest step that leaves room for the texts: one of
// steps (seconds), or 1, 2 or 5 times a power of ten.
func (a axis) every(length, apart float64, steps []float64) []tick {
	least := (a.hi - a.lo) * apart / length
	step := 0.0
	for _, s := range steps {
		if s >= least {
			step = s
			break
		}
	}
	if step == 0 || least <= 0.5 {
		e := math.Pow(10, math.Floor(math.Log10(least)))
		for _, m := range []float64{1, 2, 5, 10} {
			if m*e >= least*(1-1e-9) {
				step = m * e
				break
			}
		}
	}
	decimals := int(math.Max(0, math.Ceil(-math.Log10(step)-1e-9)))
	var list []tick
	for k := math.Ceil(a.lo/step - 1e-9); k*step <= a.hi+step*1e-9; k++ {
		t := tick{at: k * step, text: fixed(k*step, decimals)}
		if a.time {
			t.text = clockTo(k*step, decimals)
		}
		list = append(list, t)
	}
	return list
}

// engineering returns a frequency as an axis has it: 20, 500, 1k, 20k, 1M.
func engineering(x float64) string {
	switch {
	case x >= 1e6:
		return strconv.FormatFloat(x/1e6, 'g', 4, 64) + "M"
	case x >= 1e3:
		return strconv.FormatFloat(x/1e3, 'g', 4, 64) + "k"
	}
	return strconv.FormatFloat(x, 'g', 4, 64)
}

// curve is one line of a figure. Values of y that are NaN or infinite are gaps.
type curve struct {
	label string // beside the line, or in the key where there is no room; empty for none
	class string // of the style sheet
	x, y  []float64
}

// band shades a stretch of one axis over the whole of the other.
type band struct {
	label    string
	from, to float64
	upright  bool // a stretch of x; otherwise of y
}

// mark is an upright line at a value of x.
type mark struct {
	label string
	x     float64
	high  bool // its label is at the top
}

// row is a row of spans of x, above the curves.
type row struct {
	label string
	spans [][2]float64
}

// figure is a plot.
type figure struct {
	title, text string // what it shows; text is for those who do not see it
	x, y        axis
	bands       []band
	marks       []mark
	curves      []curve
	rows        []row
	image       *picture // under the curves
	scale       []string // levels of the ends of the image's colours
	low         bool     // drawn less high
	seeks       bool     // a click plays the sound from there
}

// Sizes, in the SVG's own unit: a pixel where it is shown at full size.
const (
	em      = 13.0 // height of the text
	letter  = 6.7  // width of a letter at that height, on the wide side
	rowStep = 17.0 // height of a row of spans, or of a line of the key
	left    = 56.0 // room for the ticks' texts and the label of y
	foot    = 44.0 // room for the ticks' texts and the label of x
)

// pen writes SVG.
type pen struct{ strings.Builder }

// put writes a piece of markup; the arguments are numbers or classes.
func (p *pen) put(format string, args ...any) { fmt.Fprintf(p, format, args...) }

// words writes a text, escaped.
func (p *pen) words(x, y float64, class, anchor, s string) {
	p.put(`<text x="%s" y="%s" class="%s" text-anchor="%s">`, px(x), px(y), class, anchor)
	p.WriteString(html.EscapeString(s) + "</text>\n")
}

// px returns a length to a tenth of a pixel.
func px(x float64) string { return trimmed(strconv.FormatFloat(x, 'f', 1, 64)) }

// draw returns the figure as SVG, at two sizes of which the style sheet shows the one that fits.
func (f figure) draw() template.HTML {
	wide, narrow := 300., 250.
	if f.low {
		wide, narrow = 140, 130
	}
	return f.held() + f.sized(760, wide, "wide") + f.sized(350, narrow, "narrow")
}

// sized returns the figure with a plot area of the given height, as an SVG of the given class.
func (f figure) sized(width, height float64, class string) template.HTML {
	beside := class == "wide"
	longest := 0
	for _, c := range f.curves {
		longest = max(longest, len([]rune(c.label)))
	}
	for _, r := range f.rows {
		longest = max(longest, len([]rune(r.label)))
	}
	right := 20.0
	if f.x.time {
		right = 24 // half of the last tick's text
	}
	if beside && longest > 0 {
		right = 20 + letter*float64(min(longest, 24))
	}
	top := 8 + rowStep*float64(len(f.rows))
	if !beside {
		top += rowStep * float64(len(f.rows)) // their labels are above them
	}
	across := width - left - right
	key := f.key(width, beside)
	total := top + height + foot + rowStep*float64(len(key))
	if f.image != nil {
		total += rowStep
	}

	p := &pen{}
	p.put(`<svg class="figure %s" viewBox="0 0 %s %s" role="img" data-area="%s %s %s %s" data-x="%s" data-y="%s"`, class, px(width), px(total),
		px(left), px(top), px(across), px(height), f.x.data(), f.y.data())
	if f.seeks {
		p.WriteString(` data-seeks=""`)
	}
	p.WriteString(">\n")
	p.WriteString("<title>" + html.EscapeString(f.title) + "</title>\n<desc>" + html.EscapeString(f.text) + "</desc>\n")
	f.grid(p, left, top, across, height)
	f.spans(p, left, across, beside, width)
	// A nested svg cuts off what runs beyond the plot area.
	p.put(`<svg x="%s" y="%s" width="%s" height="%s">`+"\n", px(left), px(top), px(across), px(height))
	if f.image != nil {
		f.image.use(p, across, height)
	}
	for _, c := range f.curves {
		p.put(`<path class="curve %s" data-name="%s" d="%s"/>`+"\n", c.class, html.EscapeString(c.label), f.path(c, across, height))
	}
	p.put("</svg>\n")
	f.notes(p, left, top, across, height)
	if beside {
		f.labels(p, left+across, top, height, across)
	}
	if f.image != nil {
		f.ramps(p, left, top+height+foot)
	}
	for i, line := range key {
		for _, k := range line {
			y := top + height + foot + rowStep*float64(i+1) - 6
			p.put(`<path class="curve %s" d="M%s %sh22"/>`+"\n", k.class, px(k.x), px(y-4))
			p.words(k.x+28, y, "t-"+k.class, "start", k.label)
		}
	}
	p.put("</svg>\n")
	return template.HTML(p.String())
}

// grid draws bands, ticks with their texts, and the labels of the axes.
func (f figure) grid(p *pen, left, top, across, height float64) {
	for _, b := range f.bands {
		if x, y, w, h, seen := f.box(b, left, top, across, height); seen {
			p.put(`<rect class="band" x="%s" y="%s" width="%s" height="%s"/>`+"\n", px(x), px(y), px(w), px(h))
		}
	}
	lastText := math.Inf(-1)
	for _, t := range f.x.ticks(across, 46) {
		x := left + across*f.x.at(t.at)
		p.put(`<path class="grid" d="M%s %sv%s"/>`+"\n", px(x), px(top), px(height))
		if t.text != "" && x-lastText > letter*float64(len(t.text))+6 {
			p.words(x, top+height+17, "tick", "middle", t.text)
			lastText = x
		}
	}
	for _, t := range f.y.ticks(height, 34) {
		y := top + height*(1-f.y.at(t.at))
		p.put(`<path class="grid" d="M%s %sh%s"/>`+"\n", px(left), px(y), px(across))
		p.words(left-6, y+4.5, "tick", "end", t.text)
	}
	p.put(`<rect class="frame" x="%s" y="%s" width="%s" height="%s"/>`+"\n", px(left), px(top), px(across), px(height))
	p.words(left+across/2, top+height+36, "axis", "middle", f.x.label)
	p.put(`<g transform="translate(13 %s) rotate(-90)">`, px(top+height/2))
	p.words(0, 0, "axis", "middle", f.y.label)
	p.put("</g>\n")
}

// box returns where a band lies in the plot area, and whether any of it is seen.
func (f figure) box(b band, left, top, across, height float64) (x, y, w, h float64, seen bool) {
	a := f.y
	if b.upright {
		a = f.x
	}
	from, to := a.at(math.Max(b.from, a.lo)), a.at(math.Min(b.to, a.hi))
	if b.upright {
		return left + across*from, top, across * (to - from), height, to > from
	}
	return left, top + height*(1-to), across, height * (to - from), to > from
}

// notes writes the labels of bands and marks over the curves, and draws the marks.
func (f figure) notes(p *pen, left, top, across, height float64) {
	for _, b := range f.bands {
		x, y, w, _, seen := f.box(b, left, top, across, height)
		if !seen || b.label == "" {
			continue
		}
		// A label that its stretch is too narrow for ends where the stretch does.
		if wide := letter*float64(len([]rune(b.label))) + 12; b.upright && wide > w {
			p.words(x+w-6, y+14, "note", "end", b.label)
		} else {
			p.words(x+6, y+14, "note", "start", b.label)
		}
	}
	for _, m := range f.marks {
		at := f.x.at(m.x)
		if at < 0 || at > 1 {
			continue
		}
		x, y := left+across*at, top+height-8
		if m.high {
			y = top + 30
		}
		p.put(`<path class="mark" d="M%s %sv%s"/>`+"\n", px(x), px(top), px(height))
		wide := letter*float64(len([]rune(m.label))) + 12
		if x-wide > left {
			p.words(x-6, y, "note", "end", m.label)
		} else {
			p.words(x+6, y, "note", "start", m.label)
		}
	}
}

// spans draws the rows of spans; those nearer than a pixel are drawn as one.
func (f figure) spans(p *pen, left, across float64, beside bool, width float64) {
	for i, r := range f.rows {
		y := 4 + rowStep*float64(i)
		if !beside {
			y = 4 + 2*rowStep*float64(i) + rowStep
			p.words(left, y-4, "note", "start", short(r.label, int((width-left)/letter)))
		} else {
			p.words(left+across+10, y+10, "note", "start", short(r.label, 24))
		}
		p.put(`<path class="track" d="M%s %sh%s"/>`+"\n", px(left), px(y+6), px(across))
		p.put(`<path class="span" d="`)
		from, to := math.Inf(1), math.Inf(-1)
		flush := func() {
			if from <= to {
				p.put("M%s %sh%sv10h-%sz", px(left+from), px(y+1), px(math.Max(to-from, 1)), px(math.Max(to-from, 1)))
			}
		}
		for _, s := range r.spans { // in order of their beginning
			a := across * math.Max(0, f.x.at(s[0]))
			b := across * math.Min(1, f.x.at(s[1]))
			if a > to+1 {
				flush()
				from, to = a, b
				continue
			}
			to = math.Max(to, b)
		}
		flush()
		p.put("\"/>\n")
	}
}

// short cuts s to n letters.
func short(s string, n int) string {
	r := []rune(s)
	if len(r) <= n {
		return s
	}
	return string(r[:n-1]) + "…"
}

// point is a place in the plot area, in pixels.
type point struct{ x, y float64 }

// path returns the curve in the plot area's own coordinates. Of the points that fall into one
// pixel's width it keeps the first, the lowest, the highest and the last, in their order, so that
// no peak is lost however long the curve is; those that lie on a line with others are left out.
func (f figure) path(c curve, across, height float64) string {
	var d strings.Builder
	var stroke []point // what is drawn without lifting the pen
	end := func() {
		for i, p := range thinned(stroke) {
			word := "L"
			if i == 0 {
				word = "M"
			}
			d.WriteString(word + px(p.x) + " " + px(p.y))
		}
		stroke = stroke[:0]
	}
	n := len(c.x)
	for i := 0; i < n; {
		if gap(c.y[i]) {
			end()
			i++
			continue
		}
		column := math.Floor(across * f.x.at(c.x[i]))
		low, high, last := i, i, i
		for last+1 < n && !gap(c.y[last+1]) && math.Floor(across*f.x.at(c.x[last+1])) == column {
			last++
			if c.y[last] < c.y[low] {
				low = last
			}
			if c.y[last] > c.y[high] {
				high = last
			}
		}
		before := -1
		for _, k := range []int{i, min(low, high), max(low, high), last} {
			if k != before {
				// Far beyond the plot area is as good as just beyond it.
				y := math.Min(math.Max(height*(1-f.y.at(c.y[k])), -height), 2*height)
				stroke = append(stroke, point{across * f.x.at(c.x[k]), y})
				before = k
			}
		}
		i = last + 1
	}
	end()
	return d.String()
}

// straight is how far, in pixels, a point may lie from the line that is drawn in its stead.
const straight = 0.1

// thinned returns the points, in order of x, without those that lie on a line between others: a line is drawn on for as
// long as one direction passes all of its points.
func thinned(list []point) []point {
	if len(list) < 3 {
		return list
	}
	kept := list[:1:1]
	from := list[0]
	low, high := math.Inf(-1), math.Inf(1) // slopes that pass all points since from
	for i := 1; i < len(list); i++ {
		p := list[i]
		dx := p.x - from.x
		if slope := (p.y - from.y) / dx; !(dx > 0) || slope < low || slope > high {
			if i > 1 {
				from = list[i-1]
				kept = append(kept, from)
				low, high = math.Inf(-1), math.Inf(1)
				dx = p.x - from.x
			}
		}
		if dx > 0 {
			low, high = math.Max(low, (p.y-from.y-straight)/dx), math.Min(high, (p.y-from.y+straight)/dx)
		} else {
			low, high = math.Inf(1), math.Inf(-1) // straight up or down: it ends here
		}
	}
	return append(kept, list[len(list)-1])
}

// gap reports whether a curve has no value there.
func gap(y float64) bool { return math.IsNaN(y) || math.IsInf(y, 0) }

// labels writes each curve's label beside its end, moved apart where they would touch, with a
// short line from the end to the label.
func (f figure) labels(p *pen, edge, top, height, across float64) {
	type label struct {
		curve
		end, y, x float64
	}
	var list []label
	for _, c := range f.curves {
		for i := len(c.y) - 1; i >= 0 && c.label != ""; i-- {
			if at := f.x.at(c.x[i]); !gap(c.y[i]) && at <= 1 {
				y := top + height*(1-math.Min(1, math.Max(0, f.y.at(c.y[i]))))
				list = append(list, label{c, y, y, edge - across*(1-at)})
				break
			}
		}
	}
	// Few and short: sort by insertion, then push down, then up from the bottom.
	for i := range list {
		for j := i; j > 0 && list[j].y < list[j-1].y; j-- {
			list[j], list[j-1] = list[j-1], list[j]
		}
	}
	const apart = em + 2
	for i := 1; i < len(list); i++ {
		list[i].y = math.Max(list[i].y, list[i-1].y+apart)
	}
	floor := top + height
	for i := len(list) - 1; i >= 0; i-- {
		list[i].y = math.Min(list[i].y, floor)
		floor = list[i].y - apart
	}
	for _, l := range list {
		p.put(`<path class="lead %s" d="M%s %sL%s %s"/>`+"\n", l.class, px(math.Min(l.x, edge)), px(l.end), px(edge+12), px(l.y))
		p.words(edge+15, l.y+4.5, "t-"+l.class, "start", short(l.label, 24))
	}
}

// entry is one line's place in the key.
type entry struct {
	label, class string
	x            float64
}

// key returns the key below the figure, in lines that fit the width; none where labels are beside.
func (f figure) key(width float64, beside bool) [][]entry {
	if beside {
		return nil
	}
	var lines [][]entry
	x := width
	for _, c := range f.curves {
		if c.label == "" {
			continue
		}
		name := short(c.label, int((width-60)/letter))
		wide := 28 + letter*float64(len([]rune(name))) + 14
		if x+wide > width {
			lines = append(lines, nil)
			x = 8
		}
		lines[len(lines)-1] = append(lines[len(lines)-1], entry{name, c.class, x})
		x += wide
	}
	return lines
}
