// Package wav reads and writes WAV files in blocks of frames.
//
// Samples are in full scale: integer codes of b bits are divided by 2^(b−1), floating-point values are taken as they
// are. A file is never trusted: its chunks are walked with bounds first, and no more memory is used than a block takes.
package wav

import (
	"fmt"
)

// FormatError tells what is wrong with a file, and where.
type FormatError struct {
	File        string
	Chunk       string // "fmt ", "data", …; empty: the file as a whole
	Offset      int64  // byte at which the chunk, or the fault, begins
	Text        string // what is wrong
	Remedy      string // what to do
	Unsupported bool   // well formed, but of a kind that is not read
}

// Error returns one line: file: chunk at byte offset: text; remedy.
func (e *FormatError) Error() string {
	where := ""
	if e.Chunk != "" {
		where = fmt.Sprintf("chunk %q ", e.Chunk)
	}
	return fmt.Sprintf("%s: %sat byte %d: %s; %s", e.File, where, e.Offset, e.Text, e.Remedy)
}
