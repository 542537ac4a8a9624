package command

import (
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"midrail/cmd/report"
)

// newGather is the command that joins the slices of a batch.
func newGather(s streams) *cobra.Command {
	var out string
	cmd := &cobra.Command{
		Use:   "gather FOLDER...",
		Short: "Join the slices of a batch into one summary",
		Long: `gather joins what midrail run --slice 1/8 … --slice 8/8 left in one folder or in several: it writes summary.csv,
summary.json and overview.html, the same as one run of all the tracks writes, into the first folder or that of --out.
It refuses slices of different chains or tracks, a slice twice, and a missing one. Its exit status is that of the one run.`,
		Example: "  midrail run front-end.toml corpus --out results --slice 3/8   # on each of eight machines\n  midrail gather results",
		Args: func(_ *cobra.Command, args []string) error {
			if len(args) == 0 {
				return usageError{fmt.Errorf("gather takes the folders of the slices")}
			}
			return nil
		},
		RunE: func(_ *cobra.Command, args []string) error {
			if out == "" {
				out = args[0]
			}
			return gather(s, out, args)
		},
	}
	cmd.Flags().StringVar(&out, "out", "", "`folder` of the summary (default: the first)")
	return cmd
}

func gather(s streams, out string, folders []string) error {
	wrong := func(format string, args ...any) error { return refusal{fmt.Errorf(format, args...)} }
	var whole *report.Batch
	var seen []string           // file of each slice, by its number; empty: missing
	home := map[string]string{} // folder that a track's folder is in
	first := ""
	for _, folder := range folders {
		files, err := filepath.Glob(filepath.Join(globText(folder), "slice-*-of-*.json"))
		if err != nil {
			return err
		}
		if len(files) == 0 {
			return wrong("%s: there is no slice in it; midrail run --slice writes slice-N-of-M.json", folder)
		}
		for _, file := range files {
			b, err := readBatch(file)
			if err != nil {
				return wrong("%s: %v; run the slice again", file, err)
			}
			share, err := parseSlice(b.Slice)
			switch {
			case err != nil || share.several == 0:
				return wrong("%s: it says it is slice %q; run the slice again", file, b.Slice)
			case whole == nil:
				whole, first, seen = &report.Batch{Tool: b.Tool, Chain: b.Chain, Of: b.Of}, file, make([]string, share.several)
			case b.Of != whole.Of || b.Tool != whole.Tool || b.Chain != whole.Chain:
				return wrong("%s: it is of another chain, other tracks, other options or another midrail than %s", file, first)
			case share.several != len(seen):
				return wrong("%s: it is one of %d slices, %s one of %d", file, share.several, first, len(seen))
			}
			if other := seen[share.number-1]; other != "" {
				return wrong("%s: slice %s is there already, in %s", file, b.Slice, other)
			}
			seen[share.number-1] = file
			for _, e := range b.Tracks {
				if other, there := home[e.Folder]; there {
					return wrong("%s: track %s is in %s too", file, e.Folder, other)
				}
				home[e.Folder] = folder
			}
			whole.Tracks = append(whole.Tracks, b.Tracks...)
		}
	}
	var missing []string
	for i, file := range seen {
		if file == "" {
			missing = append(missing, slice{i + 1, len(seen)}.String())
		}
	}
	if len(missing) > 0 {
		return wrong("missing: slice %s; run them first", strings.Join(missing, ", "))
	}
	err := writeBatch(whole, out, "summary", func(e *report.Entry) string {
		back, err := filepath.Rel(out, home[e.Folder])
		if err != nil {
			back = home[e.Folder]
		}
		return filepath.ToSlash(filepath.Join(back, e.Folder))
	})
	if err != nil {
		return err
	}
	faults, status := 0, Done
	for _, e := range whole.Tracks {
		switch e.Status {
		case report.Fault:
			faults++
			status = WrongInput
		case report.BrokenLimit:
			status = max(status, Broken)
		}
	}
	_, err = fmt.Fprintf(s.out, "gathered %d tracks of %d slices into %s, %d with a fault\n", len(whole.Tracks), len(seen), out, faults)
	if err == nil && status != Done {
		err = told{status}
	}
	return err
}

func readBatch(path string) (*report.Batch, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	return report.ReadBatch(f)
}

// globText returns a pattern that matches the text alone.
func globText(text string) string {
	var b strings.Builder
	for _, r := range text {
		if slices.Contains([]rune(`*?[\`), r) && r != os.PathSeparator {
			b.WriteByte('\\')
		}
		b.WriteRune(r)
	}
	return b.String()
}
