package report

import (
	"html/template"
	"io"
)

// Entry is one track of an overview.
type Entry struct {
	Run    *Run
	Folder string // of its report, beside the overview
}

// overview is what the overview's template is filled from.
type overview struct {
	Head        template.HTML
	Title, File string
	Tool        Tool
	Runs        []overviewRun
}

// overviewRun is one row of it.
type overviewRun struct {
	Run      *Run
	Link     template.URL
	Headline string
	FoldBack Number
}

// WriteOverview writes one self-contained page that links the reports of several tracks, of which there is one at the
// least. It returns the error of w.
func WriteOverview(w io.Writer, entries []Entry) error {
	o := overview{Title: title(entries[0].Run), File: entries[0].Run.Chain.File, Tool: entries[0].Run.Tool}
	for _, e := range entries {
		row := overviewRun{Run: e.Run, Link: href(e.Folder + "/report.html"), Headline: judge(e.Run).Headline}
		for _, l := range e.Run.Layers {
			if l.Name == FoldBack {
				row.FoldBack = l.RMSDBFS
			}
		}
		o.Runs = append(o.Runs, row)
	}
	return fill(w, "overview.html", func(head template.HTML) any { o.Head = head; return o })
}
