package command

import (
	"context"
	_ "embed"
	"errors"
	"fmt"
	"io"
	"path/filepath"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"midrail/chain"
	"midrail/cmd/report"
)

// demoName is the name of the embedded chain.
const demoName = "brood-box.toml"

//go:embed demo/brood-box.toml
var demoChain []byte

// runFlags are what the command line of run says.
type runFlags struct {
	reading
	set    []string
	tracks []string // INPUT=FILE
	out    string
	json   bool
	seed   uint64
	times  bool
	noPage bool
	open   bool
}

func newRun(s streams) *cobra.Command {
	var f runFlags
	cmd := &cobra.Command{
		Use:   "run [CHAIN [TRACK...]]",
		Short: "Run recordings through a chain and hear what the converter hears",
		Long: `run takes each recording through the chain and writes a folder with what the converter hears (heard.wav), the
layers that sum to it (wanted, fold-back, interference, overload, noise, rounding), report.html, report.json and parts.csv.
Without arguments it runs the demo. Several tracks get a folder each within one, and overview.html beside them.

Exit status: 0 done, 1 a limit of the chain file is broken, 2 the input is wrong, 3 the machine failed.
Caution: the layers can be loud; start with the volume low.`,
		Example: `  midrail run
  midrail run front-end.toml song.wav
  midrail run front-end.toml song.wav --set "mic amp.r_f=82k" --out louder
  midrail run mixer.toml --track voice=a.wav --track music=b.wav`,
		RunE: func(cmd *cobra.Command, args []string) error {
			return errors.Join(run(cmd.Context(), s, &f, args), f.reading.close())
		},
	}
	cmd.Flags().StringArrayVar(&f.set, "set", nil, `change a value for this run: "NAME.key=value"; repeatable`)
	cmd.Flags().StringArrayVar(&f.tracks, "track", nil, `feed one input: "INPUT=FILE"; repeatable`)
	cmd.Flags().StringVarP(&f.out, "out", "o", "", "output `folder` (default: named after chain and track, in this one)")
	cmd.Flags().BoolVar(&f.json, "json", false, "print the result as JSON and nothing else")
	cmd.Flags().Uint64Var(&f.seed, "seed", 1, "seed of all that is drawn by chance")
	cmd.Flags().BoolVar(&f.noPage, "no-html", false, "write no report.html")
	cmd.Flags().BoolVar(&f.open, "open", false, "open the report in the browser")
	cmd.Flags().BoolVar(&f.times, "times", false, "tell on standard error where the time went")
	f.reading.add(cmd, s)
	return cmd
}

func run(ctx context.Context, s streams, f *runFlags, args []string) error {
	path := ""
	if len(args) > 0 {
		path = args[0]
	}
	n, err := s.open(path, f.set)
	if err != nil {
		return err
	}
	c := n.Chain
	jobs, err := jobsOf(ctx, s, c, f, args)
	if err != nil {
		return err
	}
	if f.json && len(jobs) > 1 {
		return usageError{errors.New("--json takes one track")}
	}
	if f.open && f.noPage {
		return usageError{errors.New("--open needs the report that --no-html leaves out")}
	}
	broken := false
	var done []*finished
	for _, j := range jobs {
		result, err := execute(ctx, s, f, n, j)
		if err != nil {
			return err
		}
		done = append(done, result)
		broken = broken || !result.holds()
		if f.json {
			err = report.WriteJSON(s.out, result.run)
		} else {
			err = s.tell(result)
		}
		if err != nil {
			return err
		}
	}
	if !f.noPage {
		if err := present(done, f.open); err != nil {
			return err
		}
	}
	if broken {
		return errBroken
	}
	return nil
}

// present writes the overview of several tracks, and opens it, or the only report, where that is wanted.
func present(done []*finished, open bool) error {
	page := filepath.Join(done[0].folder, "report.html")
	if len(done) > 1 {
		var entries []report.Entry
		for _, d := range done {
			entries = append(entries, report.Entry{Run: d.run, Folder: filepath.Base(d.folder)})
		}
		page = filepath.Join(filepath.Dir(done[0].folder), "overview.html")
		if err := writeFile(page, func(w io.Writer) error { return report.WriteOverview(w, entries) }); err != nil {
			return err
		}
	}
	if open {
		return openPage(page)
	}
	return nil
}

// job is one run: a recording for each of the chain's inputs, and the folder it goes to.
type job struct {
	label  string
	tracks []recording // for each of the chain's inputs; open is nil for a silent one
	folder string
}

// jobOf is the job that feeds every input with one recording.
func jobOf(c *chain.Chain, r recording) job {
	return job{label: baseName(r.name), tracks: slices.Repeat([]recording{r}, len(c.Inputs))}
}

func jobsOf(ctx context.Context, s streams, c *chain.Chain, f *runFlags, args []string) ([]job, error) {
	base := baseName(c.File)
	if len(f.tracks) > 0 {
		if len(args) > 1 || f.counts+f.volts != "" {
			return nil, usageError{errors.New("give tracks either with --track or as arguments, not both")}
		}
		var paths []string
		j := job{tracks: make([]recording, len(c.Inputs))}
		var labels []string
		var into []int
		for _, t := range f.tracks {
			input, path, ok := strings.Cut(t, "=")
			i := inputIndex(c, input)
			if !ok || i < 0 {
				return nil, usageError{fmt.Errorf("--track %q: want INPUT=FILE, with an input of the chain: %s", t, strings.Join(inputNames(c), ", "))}
			}
			paths = append(paths, path)
			into = append(into, i)
		}
		list, err := f.recordings(ctx, c, s.in, paths)
		if err != nil {
			return nil, err
		}
		if len(list) != len(into) {
			return nil, usageError{errors.New("--track takes a file, not a folder")}
		}
		for k, one := range list {
			j.tracks[into[k]] = one
			labels = append(labels, baseName(one.name))
		}
		j.label = strings.Join(labels, "+")
		j.folder = f.out
		if j.folder == "" {
			j.folder = base + "-" + j.label
		}
		return []job{j}, nil
	}
	var paths []string
	if len(args) > 0 {
		paths = args[1:]
	}
	recordings, err := f.recordings(ctx, c, s.in, paths)
	if err != nil {
		return nil, err
	}
	if len(recordings) == 0 {
		if len(args) == 1 {
			return nil, usageError{fmt.Errorf("no track: midrail run %s RECORDING.wav", args[0])}
		}
		recordings = []recording{demoRecording()}
	}
	var jobs []job
	for _, r := range recordings {
		jobs = append(jobs, jobOf(c, r))
	}
	switch {
	case len(jobs) == 1 && f.out != "":
		jobs[0].folder = f.out
	case len(jobs) == 1:
		jobs[0].folder = base + "-" + jobs[0].label
	default:
		top := f.out
		if top == "" {
			top = base
		}
		for i := range jobs {
			jobs[i].folder = filepath.Join(top, jobs[i].label)
		}
	}
	return jobs, nil
}

func inputIndex(c *chain.Chain, name string) int {
	for i := range c.Inputs {
		if c.Inputs[i].Name == name {
			return i
		}
	}
	return -1
}

func inputNames(c *chain.Chain) []string {
	var names []string
	for i := range c.Inputs {
		names = append(names, c.Inputs[i].Name)
	}
	return names
}
