package report

import (
	"html/template"
	"io"
)

// overview is what the overview's template is filled from.
type overview struct {
	Head  template.HTML
	Title string
	Batch *Batch
	Rows  []overviewRow
}

// overviewRow is one row of it.
type overviewRow struct {
	Entry
	Link template.URL // empty: there is no report
}

// WriteOverview writes one self-contained page that links the reports of a batch; where tells the folder of an entry's
// report from the page's place. It returns the error of w.
func WriteOverview(w io.Writer, b *Batch, where func(e *Entry) string) error {
	o := overview{Title: title(&Run{Chain: b.Chain}), Batch: b}
	for i := range b.Tracks {
		row := overviewRow{Entry: b.Tracks[i]}
		if row.Status != Fault {
			row.Link = href(where(&b.Tracks[i]) + "/report.html")
		}
		o.Rows = append(o.Rows, row)
	}
	return fill(w, "overview.html", func(head template.HTML) any { o.Head = head; return o })
}
