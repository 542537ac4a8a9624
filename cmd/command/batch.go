package command

import (
	"cmp"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"hash/fnv"
	"io"
	"os"
	"path/filepath"
	"runtime"
	"slices"
	"strconv"
	"strings"
	"sync"

	"midrail/chain/circuit"
	"midrail/cmd/report"
)

// slice is a share of a batch's tracks: the number-th of several, from 1; several is 0 where it is all of them.
type slice struct{ number, several int }

// parseSlice reads "3/8".
func parseSlice(text string) (slice, error) {
	if text == "" {
		return slice{}, nil
	}
	a, b, ok := strings.Cut(text, "/")
	number, err1 := strconv.Atoi(a)
	several, err2 := strconv.Atoi(b)
	if !ok || err1 != nil || err2 != nil || number < 1 || number > several {
		return slice{}, usageError{fmt.Errorf("--slice %q: want N/M with N from 1 to M, as 3/8", text)}
	}
	return slice{number, several}, nil
}

func (s slice) String() string {
	if s.several == 0 {
		return ""
	}
	return fmt.Sprintf("%d/%d", s.number, s.several)
}

// takes tells whether a folder's track is in the share, by its name alone: the hash FNV-1a of it modulo several.
func (s slice) takes(folder string) bool {
	if s.several == 0 {
		return true
	}
	h := fnv.New64a()
	io.WriteString(h, folder)
	return h.Sum64()%uint64(s.several) == uint64(s.number-1)
}

// file returns the name of the summary, without its ending.
func (s slice) file() string {
	if s.several == 0 {
		return "summary"
	}
	return fmt.Sprintf("slice-%d-of-%d", s.number, s.several)
}

// folderNames names a folder for each path, whatever the case of their letters: by the file's name; where several have
// that, with the names of the folders that it is in, as far up as tells them apart; and where that does not, with its ending
// and a number.
func folderNames(paths []string) []string {
	names := make([]string, len(paths))
	for up := 0; ; up++ {
		count := map[string]int{}
		for i, path := range paths {
			if up == 0 {
				names[i] = baseName(path)
			}
			count[strings.ToLower(names[i])]++
		}
		clash, longer := false, false
		for i, path := range paths {
			if count[strings.ToLower(names[i])] < 2 {
				continue
			}
			clash = true
			parts := strings.Split(filepath.ToSlash(filepath.Clean(path)), "/")
			if at := len(parts) - 2 - up; at >= 0 && parts[at] != "" {
				names[i] = baseName(parts[at]+".") + "-" + names[i]
				longer = true
			}
		}
		if !clash {
			return names
		}
		if !longer { // x.wav beside x.flac, or beside what another was renamed to
			taken := map[string]bool{}
			for i, path := range paths {
				if count[strings.ToLower(names[i])] > 1 {
					names[i] += "-" + strings.TrimPrefix(filepath.Ext(path), ".")
				}
				name := names[i]
				for number := 2; taken[strings.ToLower(name)]; number++ {
					name = fmt.Sprintf("%s-%d", names[i], number)
				}
				names[i] = name
				taken[strings.ToLower(name)] = true
			}
			return names
		}
	}
}

// batchKey tells a batch from any other: by its chain, what is changed for the run, how recordings are read, and the
// folders of all of its tracks, whatever the share.
func batchKey(text []byte, f *runFlags) string {
	h := sha256.New()
	r := &f.reading
	fmt.Fprintf(h, "%d %s\n%q %d\n", len(text), text, f.set, f.seed)
	fmt.Fprintf(h, "%q %q %q %g %d %d %t\n%q\n", r.raw, r.counts, r.volts, r.rate, r.bits, r.column, r.repair, f.folders)
	return hex.EncodeToString(h.Sum(nil)[:16])
}

// told is an error that has been printed already; its status remains.
type told struct{ status int }

func (t told) Error() string { return fmt.Sprintf("status %d", t.status) }

// lockedWriter lets several goroutines write lines.
type lockedWriter struct {
	lock *sync.Mutex
	w    io.Writer
}

func (l lockedWriter) Write(p []byte) (int, error) {
	l.lock.Lock()
	defer l.lock.Unlock()
	return l.w.Write(p)
}

// batch runs the jobs of a batch, several at once, into the folder top, and writes its summary and overview there. A track
// that has a fault does not stop the others.
func (s streams) batch(ctx context.Context, f *runFlags, n *circuit.Network, text []byte, top string, jobs []job) error {
	if _, err := os.Stat(filepath.Join(top, mark)); err == nil {
		return refusal{fmt.Errorf("%s: there is a single run's report; name another folder for several tracks with --out", top)}
	}
	var lock sync.Mutex
	s.out, s.err = lockedWriter{&lock, s.out}, lockedWriter{&lock, s.err}
	b := &report.Batch{
		Tool:  report.Tool{Name: "midrail", Version: version()},
		Chain: report.Chain{File: n.Chain.File, Title: n.Chain.Title},
		Of:    batchKey(text, f), Slice: f.share.String(),
	}
	entries, statuses := make([]report.Entry, len(jobs)), make([]int, len(jobs))
	next := make(chan int)
	var workers sync.WaitGroup
	for range min(f.jobs, len(jobs)) {
		workers.Go(func() {
			for i := range next {
				entries[i], statuses[i] = s.oneOf(ctx, f, n, jobs[i])
			}
		})
	}
	done := 0
	for i := range jobs {
		if ctx.Err() != nil {
			break
		}
		next <- i
		done++
	}
	close(next)
	workers.Wait()
	if err := ctx.Err(); err != nil {
		return interrupted{fmt.Sprintf("running track %d of %d; those that had ended are whole", done, len(jobs)), err}
	}
	b.Tracks = entries
	if err := writeBatch(b, top, f.share.file(), func(e *report.Entry) string { return e.Folder }); err != nil {
		return err
	}
	if f.open {
		if err := openPage(filepath.Join(top, overviewOf(f.share.file()))); err != nil {
			return err
		}
	}
	worst := Done
	for _, status := range statuses {
		worst = max(worst, status)
	}
	if worst != Done {
		return told{worst}
	}
	return nil
}

// oneOf runs one job of a batch and prints its line.
func (s streams) oneOf(ctx context.Context, f *runFlags, n *circuit.Network, j job) (report.Entry, int) {
	result, err := execute(ctx, s, f, n, j)
	if errors.Is(err, context.Canceled) {
		return report.Entry{}, Failed
	}
	if err != nil {
		e := report.Entry{Folder: j.label, Track: j.first().name, Status: report.Fault, Fault: strings.SplitN(err.Error(), "\n", 2)[0]}
		return e, s.status(err)
	}
	e := report.EntryOf(result.run, j.label)
	fmt.Fprintln(s.out, e.Line())
	if result.holds() {
		return e, Done
	}
	return e, Broken
}

func overviewOf(name string) string {
	if name == "summary" {
		return "overview.html"
	}
	return name + ".html"
}

// writeBatch writes a batch's summary under a name, and the overview, into a folder; each file appears whole.
func writeBatch(b *report.Batch, top, name string, where func(*report.Entry) string) error {
	slices.SortFunc(b.Tracks, func(x, y report.Entry) int { return cmp.Compare(x.Folder, y.Folder) })
	if err := os.MkdirAll(top, 0o777); err != nil {
		return err
	}
	return errors.Join(
		replaceFile(filepath.Join(top, name+".json"), b.WriteJSON),
		replaceFile(filepath.Join(top, name+".csv"), b.WriteCSV),
		replaceFile(filepath.Join(top, overviewOf(name)), func(w io.Writer) error { return report.WriteOverview(w, b, where) }),
	)
}

// defaultJobs is how many tracks of a batch are run at once where nothing is said.
func defaultJobs() int { return runtime.GOMAXPROCS(0) }
