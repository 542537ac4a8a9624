package report

import (
	"fmt"
	"io"
	"math"
	"strings"

	"github.com/jedib0t/go-pretty/v6/table"
)

// DB prints a figure in decibels.
func DB(n Number) string { return decibels(n) }

// DBFS prints a level.
func DBFS(n Number) string { return dbfs(n) }

// Hz prints a frequency.
func Hz(n Number) string { return people(n, func(x float64) string { return prefixed(x, "Hz") }) }

// Volts prints a voltage, with a prefix.
func Volts(n Number) string { return people(n, func(x float64) string { return prefixed(x, "V") }) }

// Amperes prints a current, with a prefix.
func Amperes(n Number) string { return people(n, func(x float64) string { return prefixed(x, "A") }) }

// Seconds prints a length of time, with a prefix.
func Seconds(n Number) string { return people(n, func(x float64) string { return prefixed(x, "s") }) }

// Degrees prints an angle.
func Degrees(n Number) string { return people(n, func(x float64) string { return fixed(x, 1) + "°" }) }

// Percent prints a share of 1.
func Percent(n Number) string { return percent(n) }

// Plain prints a figure to a number of significant digits.
func Plain(n Number, digits int) string {
	return people(n, func(x float64) string { return trimmed(significant(x, digits)) })
}

// prefixed prints x to four significant digits with the SI prefix that leaves one to three figures before the point.
func prefixed(x float64, unit string) string {
	prefixes := [...]string{"p", "n", "µ", "m", "", "k", "M", "G"}
	i := 4
	if x != 0 {
		i = min(max(int(math.Floor(math.Log10(math.Abs(x)*(1+5e-5))/3))+4, 0), len(prefixes)-1)
	}
	return trimmed(significant(x/math.Pow(1000, float64(i-4)), 4)) + " " + prefixes[i] + unit
}

// Text writes figures for people, in lines of at most 80 columns. The first error of the writer stays.
type Text struct {
	w   io.Writer
	err error
}

// NewText returns a Text on w.
func NewText(w io.Writer) *Text { return &Text{w: w} }

// Err returns the first error of the writer.
func (t *Text) Err() error { return t.err }

// Line writes a line; what does not print in its arguments is made harmless.
func (t *Text) Line(format string, args ...any) {
	if t.err == nil {
		_, t.err = fmt.Fprintln(t.w, strings.TrimRight(clean(fmt.Sprintf(format, args...)), " "))
	}
}

// Words writes a text broken into lines of at most 80 columns.
func (t *Text) Words(format string, args ...any) {
	for _, line := range wrapped(clean(fmt.Sprintf(format, args...)), 80) {
		t.Line("%s", line)
	}
}

// Pair writes a name and what goes with it.
func (t *Text) Pair(name, value string) { t.Line("%-18s  %s", name, value) }

// Table writes rows below a heading, the first column to the left, the others to the right.
func (t *Text) Table(head []string, rows [][]string) {
	if len(rows) == 0 {
		return
	}
	row := func(cells []string) table.Row {
		r := make(table.Row, len(cells))
		for i, c := range cells {
			r[i] = clean(c)
		}
		return r
	}
	body := make([]table.Row, len(rows))
	for i, cells := range rows {
		body[i] = row(cells)
	}
	for _, line := range (Options{Width: 80}).rows(row(head), body, len(head)-1) {
		t.Line("%s", line)
	}
}

// ResponseSVG draws a response into a file of its own, with half the converter's rate marked.
func ResponseSVG(w io.Writer, r Response, halfRate float64) error {
	return responseFigure(&Pictures{Responses: []Response{r}, HalfRate: halfRate}).file(w)
}

// Plot is a drawing of curves over one axis.
type Plot struct {
	Title, X, Y string
	Log         bool // whether x goes by ratios
	Curves      []PlotCurve
}

// PlotCurve is one curve of a plot. Values that are NaN or infinite are gaps.
type PlotCurve struct {
	Label string
	X, Y  []float64
}

// PlotSVG draws a plot into a file of its own; y shows no more than the given span below its highest value.
func PlotSVG(w io.Writer, p Plot, span float64) error {
	f := figure{title: p.Title, x: axis{label: p.X, log: p.Log}, y: axis{label: p.Y}}
	var ends, levels reach
	for i, c := range p.Curves {
		f.line(curve{clean(c.Label), class(i), c.X, c.Y}, &levels)
		ends.of(c.X)
	}
	f.x.lo, f.x.hi = ends.within(ends.lo, ends.hi)
	f.y.lo, f.y.hi = levels.rounded(span, span/10)
	f.text = f.words()
	return f.file(w)
}

// file writes the figure as an SVG file with its style in it.
func (f figure) file(w io.Writer) error {
	style, err := parts.ReadFile("page/style.css")
	if err != nil {
		return err
	}
	svg := string(f.sized(760, 300, "wide"))
	svg = strings.Replace(svg, "<svg ", `<svg xmlns="http://www.w3.org/2000/svg" width="760" `, 1)
	svg = strings.Replace(svg, "<title>", "<style>"+string(style)+"svg { background: var(--paper); }</style>\n<title>", 1)
	_, err = io.WriteString(w, svg)
	return err
}
