package command

import (
	"cmp"
	"context"
	_ "embed"
	"errors"
	"fmt"
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
	set     []string
	slice   string
	share   slice
	jobs    int      // at once
	top     string   // folder of several tracks' folders; empty: there is one track
	folders []string // of all of several tracks, whatever the share
	tracks  []string // INPUT=FILE
	out     string
	json    bool
	seed    uint64
	times   bool
	noPage  bool
	open    bool
}

func newRun(s streams) *cobra.Command {
	var f runFlags
	cmd := &cobra.Command{
		Use:   "run [CHAIN [TRACK...]]",
		Short: "Run recordings through a chain and hear what the converter hears",
		Long: `run takes each recording through the chain and writes a folder with what the converter hears (heard.wav), the
layers that sum to it (wanted, fold-back, interference, overload, noise, rounding), report.html, report.json and parts.csv.
Without arguments it runs the demo. Several tracks, or the tracks of a folder, get a folder each within one, with
summary.csv, summary.json and overview.html beside them; a track with a fault does not stop the others. --slice runs a
share of them, for midrail gather to join.

A folder appears whole or not at all, and replaces one that midrail made before.

Exit status: 0 done, 1 a limit of the chain file is broken, 2 the input is wrong, 3 the machine failed; of several tracks
the worst.
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
	cmd.Flags().StringVar(&f.slice, "slice", "", "of several tracks, run one of `N/M` shares, for midrail gather to join")
	cmd.Flags().IntVar(&f.jobs, "jobs", defaultJobs(), "of several tracks, how many at once")
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
	n, text, err := s.openText(path, f.set)
	if err != nil {
		return err
	}
	c := n.Chain
	if f.share, err = parseSlice(f.slice); err != nil {
		return err
	}
	if f.jobs < 1 {
		return usageError{errors.New("--jobs is 1 or more")}
	}
	jobs, err := jobsOf(ctx, s, c, f, args)
	if err != nil {
		return err
	}
	if f.json && f.top != "" {
		return usageError{errors.New("--json takes one track")}
	}
	if f.open && f.noPage {
		return usageError{errors.New("--open needs the report that --no-html leaves out")}
	}
	if top := f.top; top != "" {
		return s.batch(ctx, f, n, text, top, jobs)
	}
	result, err := execute(ctx, s, f, n, jobs[0])
	if err != nil {
		return err
	}
	if f.json {
		err = report.WriteJSON(s.out, result.run)
	} else {
		err = s.tell(result)
	}
	if err == nil && f.open {
		err = openPage(filepath.Join(result.folder, "report.html"))
	}
	if err != nil {
		return err
	}
	if !result.holds() {
		return errBroken
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
	if len(jobs) == 1 && f.share.several == 0 {
		jobs[0].folder = cmp.Or(f.out, base+"-"+jobs[0].label)
		return jobs, nil
	}
	f.top = cmp.Or(f.out, base)
	var names []string
	for _, r := range recordings {
		names = append(names, r.name)
	}
	sorted := slices.Clone(names)
	slices.Sort(sorted)
	for i := 1; i < len(sorted); i++ {
		if sorted[i] == sorted[i-1] {
			return nil, usageError{fmt.Errorf("%s: given twice", sorted[i])}
		}
	}
	f.folders = folderNames(names)
	for i, name := range f.folders {
		jobs[i].label, jobs[i].folder = name, filepath.Join(f.top, name)
	}
	slices.Sort(f.folders)
	return slices.DeleteFunc(jobs, func(j job) bool { return !f.share.takes(j.label) }), nil
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
