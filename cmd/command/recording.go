package command

import (
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"sync"

	"github.com/spf13/cobra"

	"midrail/chain"
	"midrail/signals"
	"midrail/signals/column"
	"midrail/signals/flac"
	"midrail/signals/raw"
	"midrail/signals/tone"
	"midrail/signals/wav"
)

// recording is a track of the user's, or the demo's.
type recording struct {
	name string // as told to people
	path string // of its file; empty: none
	open func() (signals.Track, error)
	demo bool
}

func demoRecording() recording {
	return recording{name: "demo", open: func() (signals.Track, error) { return tone.Demo(), nil }, demo: true}
}

// stdin is what standard input is called: on the command line, and to people.
const stdin, stdinName = "-", "stdin"

// endings are those of the files that are taken from a folder.
var endings = []string{".wav", ".wave", ".bwf", ".rf64", ".flac"}

// reading is what the command line says of how recordings are read.
type reading struct {
	raw           string
	counts, volts string
	rate          float64
	bits, column  int
	repair        bool

	format *raw.Format // nil: files say themselves what they are
	spool  *os.File    // what came from standard input; nil: nothing
	notes  notes
}

// notes tells what there is to be said of recordings, once each however often they are read.
type notes struct {
	out  io.Writer
	lock sync.Mutex
	told map[string]bool
}

func (n *notes) tell(note string) {
	n.lock.Lock()
	defer n.lock.Unlock()
	if !n.told[note] {
		if n.told == nil {
			n.told = map[string]bool{}
		}
		n.told[note] = true
		fmt.Fprintln(n.out, "warning:", note)
	}
}

// recordingsHelp tells what recordings are, in every command that takes them.
const recordingsHelp = `

A TRACK is a WAV or FLAC file, a folder of such files, or "-", which is standard input. With --raw it holds samples without
a header. --counts and --volts name a file, or "-", with a column of text that is a recording, beside or in place of a TRACK.`

// add adds the flags and the help; what there is to be said of recordings goes to standard error.
func (r *reading) add(cmd *cobra.Command, s streams) {
	cmd.Long += recordingsHelp
	r.notes.out = s.err
	f := cmd.Flags()
	f.StringVar(&r.raw, "raw", "", "recordings are samples without a header: `SAMPLES,RATE,CHANNELS`, as s16le,16000,1")
	f.StringVar(&r.counts, "counts", "", "a `file` with a column of a converter's counts is a recording; needs --rate and --bits")
	f.StringVar(&r.volts, "volts", "", "a `file` with a column of volts at the chain's line input is a recording; needs --rate")
	f.Float64Var(&r.rate, "rate", 0, "rate of a column in `Hz`")
	f.IntVar(&r.bits, "bits", 0, "bits of the counts, 1 to 32")
	f.IntVar(&r.column, "column", 1, "which column it is, from 1")
	f.BoolVar(&r.repair, "repair", false, "replace samples that are no finite numbers by those before them")
}

// close removes what was kept of standard input.
func (r *reading) close() error {
	if r.spool == nil {
		return nil
	}
	err := r.spool.Close()
	if gone := os.Remove(r.spool.Name()); !errors.Is(gone, fs.ErrNotExist) {
		err = errors.Join(err, gone)
	}
	return err
}

// recordings are those of the paths, of folders the recordings in them, and of the column; the path "-" is in.
func (r *reading) recordings(ctx context.Context, c *chain.Chain, in io.Reader, paths []string) ([]recording, error) {
	form, err := r.check(c)
	if err != nil {
		return nil, err
	}
	var list []recording
	for _, path := range paths {
		files, err := r.filesOf(path)
		if err != nil {
			return nil, err
		}
		for _, file := range files {
			list = append(list, r.file(file))
		}
	}
	if file := r.counts + r.volts; file != "" {
		list = append(list, r.recording(file, func(name string, src io.ReadSeeker) (signals.Track, error) { return column.New(name, src, form) }))
	}
	piped := 0
	for _, one := range list {
		if one.path == stdin {
			piped++
		}
	}
	if piped > 1 {
		return nil, usageError{errors.New("standard input is one recording only")}
	}
	if piped == 1 && r.spool == nil {
		return list, r.keep(ctx, in)
	}
	return list, nil
}

// check makes sense of the flags.
func (r *reading) check(c *chain.Chain) (column.Form, error) {
	form := column.Form{Column: r.column, Rate: r.rate}
	if r.raw != "" {
		f, err := raw.Parse(r.raw)
		if err != nil {
			return form, usageError{fmt.Errorf("--raw %w", err)}
		}
		r.format = &f
	}
	if r.counts == "" && r.volts == "" {
		if r.rate != 0 || r.bits != 0 || r.column != 1 {
			return form, usageError{errors.New("--rate, --bits and --column are those of --counts or --volts; --raw has its own")}
		}
		return form, nil
	}
	switch {
	case r.counts != "" && r.volts != "":
		return form, usageError{errors.New("give either --counts or --volts")}
	case !(r.rate >= signals.LeastRate && r.rate <= signals.MostRate):
		return form, usageError{fmt.Errorf("a column needs its rate: --rate HZ, %g to %g", signals.LeastRate, signals.MostRate)}
	case r.column < 1:
		return form, usageError{errors.New("--column counts from 1")}
	case r.counts != "":
		if r.bits < 1 || r.bits > 32 {
			return form, usageError{errors.New("counts need their bits: --bits N, 1 to 32")}
		}
		form.Zero, form.Scale = column.Counts(r.bits)
	case r.bits != 0:
		return form, usageError{errors.New("volts have no bits: leave --bits out")}
	default:
		full := c.Inputs[0].FullScale
		for i := range c.Inputs {
			if in := &c.Inputs[i]; in.Kind != chain.Line || in.FullScale != full {
				return form, usageError{fmt.Errorf("--volts are those at line inputs of one full_scale; input %q is none of those", in.Name)}
			}
		}
		form.Scale = 1 / (full * math.Sqrt2)
	}
	return form, nil
}

// filesOf is the path itself or, of a folder, the recordings in it, in the order of their names; of raw samples every
// file whose name does not begin with a point. Folders in it are left alone.
func (r *reading) filesOf(path string) ([]string, error) {
	info, err := os.Stat(path)
	if path == stdin || err != nil || !info.IsDir() {
		return []string{path}, nil // what cannot be opened is told with the others
	}
	entries, err := os.ReadDir(path)
	if err != nil {
		return nil, err
	}
	var files []string
	for _, e := range entries {
		file := filepath.Join(path, e.Name())
		info, err := os.Stat(file)
		if strings.HasPrefix(e.Name(), ".") || err == nil && !info.Mode().IsRegular() {
			continue
		}
		if r.format != nil || slices.Contains(endings, strings.ToLower(filepath.Ext(file))) {
			files = append(files, file)
		}
	}
	if len(files) == 0 {
		return nil, refusal{fmt.Errorf("%s: there is no recording in it (%s)", path, strings.Join(endings, " "))}
	}
	return files, nil
}

// keep copies standard input into a file: a recording is read more than once.
func (r *reading) keep(ctx context.Context, in io.Reader) error {
	spool, err := os.CreateTemp("", "midrail-stdin-*")
	if err != nil {
		return err
	}
	r.spool = spool
	os.Remove(spool.Name()) // where an open file can be; else close does
	copied := make(chan error, 1)
	go func() {
		_, err := io.Copy(spool, in)
		copied <- err
	}()
	select {
	case err := <-copied:
		return err
	case <-ctx.Done():
		return ctx.Err()
	}
}

// orDemo is recordings, or the demo's track where there are none.
func (r *reading) orDemo(ctx context.Context, c *chain.Chain, in io.Reader, paths []string) ([]recording, error) {
	list, err := r.recordings(ctx, c, in, paths)
	if err == nil && len(list) == 0 {
		list = []recording{demoRecording()}
	}
	return list, err
}

// file is the recording in a file, whose first bytes tell what it is.
func (r *reading) file(path string) recording {
	return r.recording(path, func(name string, src io.ReadSeeker) (signals.Track, error) {
		if r.format != nil {
			return raw.New(name, src, *r.format)
		}
		var start [len(flac.Signature)]byte
		n, _ := io.ReadFull(src, start[:])
		if _, err := src.Seek(0, io.SeekStart); err != nil {
			return nil, err
		}
		if string(start[:n]) == flac.Signature {
			return flac.New(name, src)
		}
		return wav.New(name, src)
	})
}

// recording is that in a file, or in standard input, as read by some function.
func (r *reading) recording(path string, read func(name string, src io.ReadSeeker) (signals.Track, error)) recording {
	one := recording{name: path, path: path}
	if path == stdin {
		one.name = stdinName
	}
	one.open = func() (signals.Track, error) {
		var src io.ReadSeeker
		var closer io.Closer = io.NopCloser(nil)
		if path == stdin {
			info, err := r.spool.Stat()
			if err != nil {
				return nil, err
			}
			src = io.NewSectionReader(r.spool, 0, info.Size())
		} else {
			file, err := openRegular(path)
			if err != nil {
				return nil, err
			}
			src, closer = file, file
		}
		t, err := read(one.name, src)
		if err != nil {
			return nil, errors.Join(err, closer.Close())
		}
		return &openFile{signals.NewFinite(t, one.name, r.repair), one.name, closer, &r.notes}, nil
	}
	return one
}

// openRegular opens a file that can be read more than once. Of another, such as a named pipe, it does not wait for what
// may never come.
func openRegular(path string) (*os.File, error) {
	info, err := os.Stat(path)
	if err == nil && !info.Mode().IsRegular() && !info.IsDir() {
		return nil, refusal{fmt.Errorf("%s: a recording is read more than once, and this is no file that can be; give it as standard input, -", path)}
	}
	return os.Open(path)
}

// openFile is the track in an open file.
type openFile struct {
	*signals.Finite
	name  string
	file  io.Closer
	notes *notes
}

// Note returns what there is to be said of the file, which is known when it has been read, or "".
func (f *openFile) Note() string {
	if note := f.Finite.Note(); note != "" {
		return f.name + ": " + note
	}
	return ""
}

// Close tells it.
func (f *openFile) Close() error {
	if note := f.Note(); note != "" {
		f.notes.tell(note)
	}
	return errors.Join(f.Finite.Close(), f.file.Close())
}
