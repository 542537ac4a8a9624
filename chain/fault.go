package chain

import (
	"cmp"
	"fmt"
	"slices"
	"strings"
)

// Pos is a place in the chain file. The zero Pos is no place.
type Pos struct{ Line, Column int } // both from 1; Column counts runes

func (p Pos) compare(q Pos) int {
	return cmp.Or(cmp.Compare(p.Line, q.Line), cmp.Compare(p.Column, q.Column))
}

// Fault is one thing wrong with what the owner wrote, and what to do about it.
type Fault struct {
	File   string // the chain file, or the --set that is wrong
	Pos    Pos    // none for a --set
	Text   string // what is wrong
	Remedy string // what to do
}

// Error returns the fault as one line, file:line:column: text; remedy.
func (f Fault) Error() string {
	var b strings.Builder
	b.WriteString(f.File)
	if f.Pos.Line > 0 {
		fmt.Fprintf(&b, ":%d:%d", f.Pos.Line, f.Pos.Column)
	}
	b.WriteString(": " + f.Text)
	if f.Remedy != "" {
		b.WriteString("; " + f.Remedy)
	}
	return b.String()
}

// Faults are all the faults found: those of a --set, then the file's in its order.
type Faults []Fault

// Error returns the faults, one to a line.
func (f Faults) Error() string {
	lines := make([]string, len(f))
	for i, one := range f {
		lines[i] = one.Error()
	}
	return strings.Join(lines, "\n")
}

func (f Faults) sort() {
	slices.SortStableFunc(f, func(a, b Fault) int { return a.Pos.compare(b.Pos) })
}
