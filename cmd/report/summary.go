package report

import (
	"fmt"
	"io"
	"strings"

	"github.com/jedib0t/go-pretty/v6/table"
	"github.com/jedib0t/go-pretty/v6/text"
)

// Options are how a summary is set.
type Options struct {
	Color bool // whether bold and colours are marked, by ANSI X3.64 sequences; for a terminal only
	Width int  // columns, 40 or more; 0 means 80
}

// screen is the number of lines that the summary keeps within where it can: a terminal's.
const screen = 24

// Marks of ANSI X3.64 (ECMA-48, select graphic rendition).
const (
	plain  = "\x1b[0m"
	bold   = "\x1b[1m"
	red    = "\x1b[31m"
	yellow = "\x1b[33m"
	green  = "\x1b[32m"
)

// Summary writes the run as one terminal screen, in the order of the page: the verdict with the limits, as many of the
// changes that help and of the findings as there is room for (at least one finding), then stages and layers. It returns
// the error of w, and panics where the width is below 40 and not 0.
func Summary(w io.Writer, run *Run, o Options) error {
	if o.Width == 0 {
		o.Width = 80
	}
	if o.Width < 40 {
		panic("report: width below 40")
	}
	v := judge(run)
	subject := text.Snip(title(run)+", "+clean(run.Track.File)+", "+clock(run.Track.Seconds), o.Width, "…")

	mark := bold + red
	if v.Good {
		mark = bold + green
	}
	lines := []string{subject, o.marked(mark, text.Snip(v.Headline, o.Width, "…"))}
	if words := append(v.Overload, v.Settling...); len(words) > 0 {
		lines = append(lines, wrapped(strings.Join(words, " "), o.Width)...)
	}
	limits := o.limits(run)
	rest := append([]string{""}, o.stages(run)...)
	rest = append(append(rest, ""), o.layers(run)...)
	lines = append(lines, limits...)
	lines = append(lines, o.changes(run, screen-len(lines)-len(rest)-leastFindings)...)
	lines = append(lines, o.findings(run, screen-len(lines)-len(rest))...)
	lines = append(lines, rest...)
	_, err := io.WriteString(w, strings.Join(lines, "\n")+"\n")
	return err
}

// marked returns s between marks, or s alone where there is no colour.
func (o Options) marked(mark, s string) string {
	if !o.Color {
		return s
	}
	return mark + s + plain
}

// wrapped breaks s between words into lines of at most width.
func wrapped(s string, width int) []string {
	lines := strings.Split(text.WrapSoft(s, width), "\n")
	for i := range lines {
		lines[i] = strings.TrimRight(lines[i], " ")
	}
	return lines
}

// rows returns a table without any frame: names, then the given number of columns of figures, then
// text. The names give way where the table is wider than the summary. A nil head is none.
func (o Options) rows(head table.Row, body []table.Row, figures int) []string {
	t := table.NewWriter()
	style := table.StyleDefault
	style.Options = table.OptionsNoBordersAndSeparators
	style.Box.PaddingLeft, style.Box.PaddingRight = "", "  "
	style.Format.Header = text.FormatDefault
	t.SetStyle(style)
	for i, cell := range head {
		head[i] = o.marked(bold, fmt.Sprint(cell))
	}
	if head != nil {
		t.AppendHeader(head)
	}
	t.AppendRows(body)
	set := func(names int) []string {
		columns := []table.ColumnConfig{{Number: 1, WidthMax: names, WidthMaxEnforcer: func(s string, n int) string { return text.Snip(s, n, "…") }}}
		for i := range figures {
			columns = append(columns, table.ColumnConfig{Number: i + 2, Align: text.AlignRight, AlignHeader: text.AlignRight})
		}
		t.SetColumnConfigs(columns)
		lines := strings.Split(t.Render(), "\n")
		for i := range lines {
			lines[i] = strings.TrimRight(lines[i], " ")
		}
		return lines
	}
	names := 0
	if head != nil {
		names = text.StringWidthWithoutEscSequences(fmt.Sprint(head[0]))
	}
	for _, row := range body {
		names = max(names, text.StringWidthWithoutEscSequences(fmt.Sprint(row[0])))
	}
	lines := set(names)
	widest := 0
	for _, l := range lines {
		widest = max(widest, text.StringWidthWithoutEscSequences(l))
	}
	const shortest = 8 // columns, of a name that is still one
	if widest > o.Width && names > shortest {
		lines = set(max(shortest, names-(widest-o.Width)))
	}
	return lines
}

func (o Options) stages(run *Run) []string {
	var body []table.Row
	for _, s := range run.Stages {
		body = append(body, table.Row{clean(s.Name), bare(s.RestV, 2), span(s.LowestV, s.HighestV), span(s.LimitLowV, s.LimitHighV),
			bare(s.RoomDB, 1), overloadOf(s.Overload)})
	}
	return o.rows(table.Row{"stage", "rest, V", "swing, V", "limits, V", "room, dB", "overload"}, body, 4)
}

// span returns a range of voltage without its unit.
func span(low, high Number) string {
	if low == (Number{}) && high == (Number{}) {
		return absent
	}
	return bare(low, 2) + " to " + bare(high, 2)
}

// overloadOf returns how long and how often.
func overloadOf(v Overload) string {
	if v.Events == 0 {
		return "never"
	}
	return seconds(v.Seconds) + ", " + times(v.Events)
}

func (o Options) layers(run *Run) []string {
	var body []table.Row
	for _, l := range run.Layers {
		body = append(body, table.Row{clean(l.Name), bare(l.RMSDBFS, 1), bare(l.RMSDBFSA, 1), bare(l.Worst125msDBFS, 1), bare(l.BelowWantedDB, 1)})
	}
	return o.rows(table.Row{"layer", "RMS, dBFS", "A-weighted", "worst 125 ms", "below wanted, dB"}, body, 4)
}

func (o Options) limits(run *Run) []string {
	if len(run.Limits) == 0 {
		return nil
	}
	var body []table.Row
	for _, l := range run.Limits {
		state := o.marked(green, "holds")
		if !l.Holds {
			state = o.marked(bold+red, "broken")
		}
		body = append(body, table.Row{limitName(l), limitValue(l), limitBound(l), state})
	}
	return o.rows(nil, body, 2)
}

// leastFindings is how many lines are kept for the findings.
const leastFindings = 3

// changes returns a line for each of as many changes as there is room for.
func (o Options) changes(run *Run, room int) []string {
	var lines []string
	for _, c := range run.Changes[:max(0, min(len(run.Changes), room))] {
		line := fmt.Sprintf("helps %s: %s", clean(c.About), clean(c.Words))
		if c.Becomes.There() {
			line += ": " + changed(c.Becomes, c) + ofChange(c)
		}
		lines = append(lines, text.Snip(line, o.Width, "…"))
	}
	return lines
}

// findings returns the findings that fit in the given number of lines; at least one of them.
func (o Options) findings(run *Run, room int) []string {
	var lines []string
	for i, f := range run.Findings {
		more := wrapped(f.Severity+": "+about(f)+clean(f.Text), o.Width)
		last := 1 // the line that tells what is left out
		if i == len(run.Findings)-1 {
			last = 0
		}
		if i > 0 && len(lines)+len(more)+last > room {
			return append(lines, plural(len(run.Findings)-i, "more finding")+" in the report")
		}
		lines = append(lines, o.severity(f, more)...)
	}
	return lines
}

// about returns what a finding is about, as the start of a line; empty where it does not say.
func about(f Finding) string {
	if f.About == "" {
		return ""
	}
	return clean(f.About) + ": "
}

// severity marks the word that a finding begins with.
func (o Options) severity(f Finding, lines []string) []string {
	mark, marked := map[string]string{Stop: bold + red, Caution: bold + yellow}[f.Severity]
	if marked {
		lines[0] = o.marked(mark, f.Severity) + strings.TrimPrefix(lines[0], f.Severity)
	}
	return lines
}
