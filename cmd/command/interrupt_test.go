package command

import (
	"bytes"
	"context"
	"io"
	"os"
	"path/filepath"
	"strings"
	"sync/atomic"
	"testing"
)

// countdown is a context that is cancelled when it has been asked so many times whether it is.
type countdown struct {
	context.Context
	stop context.CancelFunc
	left atomic.Int64
}

func newCountdown(asked int64) *countdown {
	c := &countdown{}
	c.Context, c.stop = context.WithCancel(context.Background())
	c.left.Store(asked)
	return c
}

func (c *countdown) ask() {
	if c.left.Add(-1) < 0 {
		c.stop()
	}
}

func (c *countdown) Err() error {
	c.ask()
	return c.Context.Err()
}

func (c *countdown) Done() <-chan struct{} {
	c.ask()
	return c.Context.Done()
}

// An interruption, however far a command is, leaves no file, whole or half, and is told with what was being done.
func TestInterruptionsLeaveNothing(t *testing.T) {
	dir := t.TempDir()
	track := filepath.Join(dir, "t.wav")
	if status := Exec(context.Background(), []string{"tracks", "pink", track, "--seconds", "0.5", "--level", "-20"}, strings.NewReader(""), io.Discard, os.Stderr); status != Done {
		t.Fatal("no track")
	}
	demo := filepath.Join("demo", demoName)
	for _, c := range []struct {
		args  []string
		file  string
		stops map[int64]string // after so many times asked: what is told
	}{
		{[]string{"room", demo, track, "--svg"}, "x.svg", map[int64]string{0: "running " + track + ", 1 of 1"}},
		{[]string{"corner", demo, track, "--write"}, "x.toml", map[int64]string{0: "reading " + track + ", 1 of 1", 5: "reading", 20: "judging candidates"}},
		{[]string{"spread", demo, track, "--boards", "200", "--svg"}, "x.svg", map[int64]string{0: "running " + track + ", 1 of 1, before the boards", 100: "of 200 being done"}},
		{[]string{"parts", "filter", "--corner", "3k", "--order", "6", "--most"}, "5", map[int64]string{0: "0 of 3 sections", 2: "2 of 3 sections"}},
	} {
		for asked, want := range c.stops {
			out := t.TempDir()
			last := filepath.Join(out, c.file)
			if c.args[0] == "parts" {
				last = c.file
			}
			var said, printed bytes.Buffer
			status := Exec(newCountdown(asked), append(append([]string(nil), c.args...), last), strings.NewReader(""), &printed, &said)
			if status != Failed || !strings.Contains(said.String(), "interrupted while ") || !strings.Contains(said.String(), want) || !strings.Contains(said.String(), "nothing was left behind") {
				t.Errorf("%v, asked %d times: status %d, %q, want %q", c.args, asked, status, said.String(), want)
			}
			if printed.Len() > 0 {
				t.Errorf("%v, asked %d times: printed %q", c.args, asked, printed.String())
			}
			if left, err := os.ReadDir(out); err != nil || len(left) > 0 {
				t.Errorf("%v, asked %d times: %v left behind, %v", c.args, asked, left, err)
			}
		}
	}
}
