package command

import (
	"errors"
	"fmt"
	"io/fs"
	"os"

	"github.com/spf13/cobra"

	"midrail/chain"
)

func newNew(s streams) *cobra.Command {
	return &cobra.Command{
		Use:   "new FILE",
		Short: "Write a commented starter chain file",
		Long: `new writes a chain file to start from: a line input on one 5 V supply, every table explained. It does not
overwrite a file.`,
		Example: "  midrail new front-end.toml",
		Args:    exactly(1),
		RunE: func(_ *cobra.Command, args []string) error {
			write := func(f *os.File) error { _, err := f.WriteString(chain.Starter()); return err }
			if err := writeNew(args[0], write); err != nil {
				return err
			}
			fmt.Fprintf(s.out, "wrote %s; next: midrail run %[1]s RECORDING.wav\n", args[0])
			return nil
		},
	}
}

// exactly is cobra.ExactArgs with an error that is told as one of usage.
func exactly(n int) cobra.PositionalArgs {
	return func(cmd *cobra.Command, args []string) error {
		if err := cobra.ExactArgs(n)(cmd, args); err != nil {
			return usageError{fmt.Errorf("%s: %w", cmd.CommandPath(), err)}
		}
		return nil
	}
}

// withChain takes a chain and any number of tracks.
func withChain(cmd *cobra.Command, args []string) error {
	if err := cobra.MinimumNArgs(1)(cmd, args); err != nil {
		return usageError{fmt.Errorf("%s: %w", cmd.CommandPath(), err)}
	}
	return nil
}

// writeNew writes a file that must not exist yet. Where writing fails, nothing is left.
func writeNew(path string, write func(*os.File) error) error {
	f, err := os.OpenFile(path, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o666)
	if errors.Is(err, fs.ErrExist) {
		return refusal{fmt.Errorf("%s: there already; name another file, or move it away", path)}
	}
	if err != nil {
		return err
	}
	if err := errors.Join(write(f), f.Close()); err != nil {
		return errors.Join(err, os.Remove(path))
	}
	return nil
}
