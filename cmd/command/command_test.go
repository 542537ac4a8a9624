package command

import (
	"context"
	"io"
	"os"
	"strings"
	"testing"

	"github.com/rogpeppe/go-internal/testscript"
)

func TestMain(m *testing.M) {
	testscript.Main(m, map[string]func(){
		"midrail": func() { os.Exit(Exec(context.Background(), os.Args[1:], os.Stdin, os.Stdout, os.Stderr)) },
	})
}

// TestScripts runs the program as people do: testdata/*.txtar.
func TestScripts(t *testing.T) {
	testscript.Run(t, testscript.Params{Dir: "testdata"})
}

func TestExitStatus(t *testing.T) {
	for _, c := range []struct {
		args []string
		want int
	}{
		{[]string{"--version"}, Done},
		{[]string{"run", "--out", t.TempDir() + "/demo"}, Broken},
		{[]string{"run", "no such file"}, WrongInput},
		{[]string{"nonsense"}, WrongInput},
		{[]string{"run", "--nonsense"}, WrongInput},
	} {
		if got := Exec(context.Background(), c.args, strings.NewReader(""), io.Discard, io.Discard); got != c.want {
			t.Errorf("midrail %v: status %d, want %d", c.args, got, c.want)
		}
	}
	ctx, stop := context.WithCancel(context.Background())
	stop()
	dir := t.TempDir()
	if got := Exec(ctx, []string{"run", "--out", dir + "/demo"}, strings.NewReader(""), io.Discard, io.Discard); got != Failed {
		t.Errorf("interrupted: status %d, want %d", got, Failed)
	}
	if left, err := os.ReadDir(dir); err != nil || len(left) > 0 {
		t.Errorf("interrupted: %v left behind, %v", left, err)
	}
}
