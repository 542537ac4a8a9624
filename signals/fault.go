package signals

import "fmt"

// FormatError tells what is wrong with a recording, and where.
type FormatError struct {
	File        string
	At          string // where in it: `chunk "fmt " at byte 12`, "frame 7", "line 3"
	Text        string // what is wrong
	Remedy      string // what to do
	Unsupported bool   // well formed, but of a kind that is not read
}

// Error returns one line: file: place: text; remedy.
func (e *FormatError) Error() string {
	return fmt.Sprintf("%s: %s: %s; %s", e.File, e.At, e.Text, e.Remedy)
}

// What recordings there are.
const (
	LeastRate, MostRate = 4000., 768000. // Hz
	MostChannels        = 64
)
