// Package command is Midrail's command line: one file for each command.
package command

import (
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"runtime/debug"
	"syscall"

	"github.com/spf13/cobra"

	"midrail/chain"
	"midrail/signals"
)

// Exit statuses.
const (
	Done       = 0 // done, and every limit holds
	Broken     = 1 // done, but a limit in [limits] is broken
	WrongInput = 2 // the input is wrong: one line for each fault
	Failed     = 3 // the machine failed: disk full, interrupted, …
)

// streams are where a command reads and writes.
type streams struct {
	in       io.Reader
	out, err io.Writer
}

// Exec runs one command line, without the program's name, and returns the exit status. It keeps no state, so it
// can be called any number of times.
func Exec(ctx context.Context, args []string, in io.Reader, out, err io.Writer) int {
	s := streams{in, out, err}
	root := newRoot(s)
	root.SetArgs(args)
	return s.status(root.ExecuteContext(ctx))
}

func newRoot(s streams) *cobra.Command {
	root := &cobra.Command{
		Use:   "midrail",
		Short: "Hear what the converter will hear, before the board is ordered",
		Long: `Midrail runs real recordings through the audio front end that a chain file describes - microphone or line
input, single-supply amplifiers biased at mid-supply, anti-alias filter, converter - and tells what the
converter hears: as sound, split into wanted, fold-back, interference, overload, noise and rounding, and in
numbers: what clipped and when, what folded back, how much room is left.`,
		Example: `  midrail run                      the demo: a listener in a beehive
  midrail new my.toml              write a starter chain file
  midrail run my.toml song.wav     your chain, your recording`,
		Version:       version(),
		SilenceErrors: true,
		SilenceUsage:  true,
		Args:          cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			return cmd.Help()
		},
	}
	root.SetIn(s.in)
	root.SetOut(s.out)
	root.SetErr(s.err)
	root.SetFlagErrorFunc(func(_ *cobra.Command, err error) error { return usageError{err} })
	root.AddCommand(newRun(s), newResponse(s), newRest(s), newNoise(s), newRipple(s), newParts(s), newRoom(s), newCorner(s), newSpread(s), newTracks(s), newNew(s), newGather(s))
	return root
}

// usageError is a command line that makes no sense.
type usageError struct{ error }

// refusal is something that is not done for the user's sake.
type refusal struct{ error }

// interrupted is an interruption that tells what was being done.
type interrupted struct {
	at string
	error
}

func (i interrupted) Unwrap() error { return i.error }

// during tells, of an interruption, what was being done; other errors it leaves alone.
func during(err error, format string, args ...any) error {
	if !errors.Is(err, context.Canceled) {
		return err
	}
	return interrupted{fmt.Sprintf(format, args...), err}
}

// errBroken says that the work is done and a limit does not hold.
var errBroken = errors.New("a limit is broken")

// status prints what err says, and returns the exit status that goes with it.
func (s streams) status(err error) int {
	var faults chain.Faults
	var format *signals.FormatError
	var usage usageError
	var refused refusal
	var stopped interrupted
	var said told
	switch {
	case err == nil:
		return Done
	case errors.Is(err, errBroken):
		return Broken
	case errors.As(err, &said):
		return said.status
	case errors.As(err, &faults):
		fmt.Fprintln(s.err, faults)
		return WrongInput
	case errors.As(err, &format):
		fmt.Fprintln(s.err, format)
		return WrongInput
	case errors.As(err, &usage):
		fmt.Fprintf(s.err, "midrail: %v; see midrail --help\n", usage.error)
		return WrongInput
	case errors.As(err, &refused):
		fmt.Fprintf(s.err, "midrail: %v\n", refused.error)
		return WrongInput
	case errors.As(err, &stopped):
		fmt.Fprintf(s.err, "midrail: interrupted while %s; nothing was left behind\n", stopped.at)
		return Failed
	case errors.Is(err, context.Canceled):
		fmt.Fprintln(s.err, "midrail: interrupted; nothing was left behind")
		return Failed
	case errors.Is(err, fs.ErrNotExist), errors.Is(err, fs.ErrPermission), errors.Is(err, syscall.EISDIR):
		fmt.Fprintf(s.err, "midrail: %v\n", err)
		return WrongInput
	case isMachine(err):
		fmt.Fprintf(s.err, "midrail: %v\n", err)
		return Failed
	default: // what cobra says of the command line
		fmt.Fprintf(s.err, "midrail: %v\n", err)
		return WrongInput
	}
}

// isMachine tells an error of the operating system from one in what the user gave.
func isMachine(err error) bool {
	var errno syscall.Errno
	return errors.As(err, &errno) || errors.Is(err, io.ErrShortWrite)
}

// version returns the version that the go command stamped into the program.
func version() string {
	info, ok := debug.ReadBuildInfo()
	if !ok || info.Main.Version == "" {
		return "(unknown)"
	}
	return info.Main.Version
}
