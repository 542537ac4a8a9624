package command

import (
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
)

// mark is the file by which Midrail knows a folder as its own.
const mark = ".midrail"

// folder is an output folder in the making: written beside its place and moved there whole.
type folder struct {
	path    string // where it will stand
	working string // where it is written
}

// newFolder starts an output folder at the path, which must not exist or be one of ours.
func newFolder(path string) (*folder, error) {
	path, err := filepath.Abs(path)
	if err != nil {
		return nil, err
	}
	if err := mayReplace(path); err != nil {
		return nil, err
	}
	if err := os.MkdirAll(filepath.Dir(path), 0o777); err != nil {
		return nil, err
	}
	working, err := os.MkdirTemp(filepath.Dir(path), "."+filepath.Base(path)+".part-*")
	if err != nil {
		return nil, err
	}
	f := &folder{path: path, working: working}
	if err := errors.Join(os.Chmod(working, 0o755), os.WriteFile(f.file(mark), []byte("This folder was made by midrail run, which may replace it.\n"), 0o666)); err != nil {
		return nil, errors.Join(err, f.discard())
	}
	return f, nil
}

func mayReplace(path string) error {
	info, err := os.Lstat(path)
	if errors.Is(err, fs.ErrNotExist) {
		return nil
	}
	if err != nil {
		return err
	}
	if info.IsDir() {
		if _, err := os.Lstat(filepath.Join(path, mark)); err == nil {
			return nil
		}
		if entries, err := os.ReadDir(path); err == nil && len(entries) == 0 {
			return nil
		}
	}
	return refusal{fmt.Errorf("%s: there already, and not a folder that midrail made; name another with --out, or move it away", path)}
}

// file returns the path of a file in the folder while it is being written.
func (f *folder) file(name string) string { return filepath.Join(f.working, name) }

// finish moves the folder to its place. With an earlier one it changes places, so that there is always one of the two,
// whole; where the system cannot do that, the earlier one is moved aside first and removed last.
func (f *folder) finish() error {
	if err := mayReplace(f.path); err != nil {
		return errors.Join(err, f.discard())
	}
	if exchange(f.working, f.path) == nil {
		return f.discard()
	}
	old := f.working + ".old"
	err := os.Rename(f.path, old)
	if err != nil && !errors.Is(err, fs.ErrNotExist) {
		return errors.Join(err, f.discard())
	}
	if err := os.Rename(f.working, f.path); err != nil {
		return errors.Join(err, os.Rename(old, f.path), f.discard())
	}
	return os.RemoveAll(old)
}

// needs refuses to begin where so many bytes do not fit.
func (f *folder) needs(bytes int64) error {
	free, known := freeSpace(f.working)
	if !known || bytes <= free {
		return nil
	}
	return refusal{fmt.Errorf("%s: the sound and the report take about %s, %s are free there; make room, or name another place with --out", f.path, size(bytes), size(free))}
}

// size tells a number of bytes.
func size(bytes int64) string {
	if bytes < 1e9 {
		return fmt.Sprintf("%.1f MB", float64(bytes)/1e6)
	}
	return fmt.Sprintf("%.1f GB", float64(bytes)/1e9)
}

// discard removes what was written.
func (f *folder) discard() error { return os.RemoveAll(f.working) }

// baseName returns a file's name without folder and ending, fit to name a folder with.
func baseName(path string) string {
	name := filepath.Base(path)
	name = strings.TrimSuffix(name, filepath.Ext(name))
	return strings.Map(func(r rune) rune {
		if r < ' ' || strings.ContainsRune(`<>:"/\|?*`, r) {
			return '-'
		}
		return r
	}, name)
}

// replaceFile writes a file beside its place and moves it there whole.
func replaceFile(path string, write func(io.Writer) error) error {
	f, err := os.CreateTemp(filepath.Dir(path), "."+filepath.Base(path)+".part-*")
	if err != nil {
		return err
	}
	err = errors.Join(write(f), f.Chmod(0o644), f.Close())
	if err == nil {
		err = os.Rename(f.Name(), path)
	}
	if err != nil {
		return errors.Join(err, os.Remove(f.Name()))
	}
	return nil
}
