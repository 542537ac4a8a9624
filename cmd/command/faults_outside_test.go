//go:build outside

package command

import (
	"bytes"
	"crypto/sha256"
	"errors"
	"fmt"
	"io/fs"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"
)

// build builds the program.
func build(t *testing.T) string {
	t.Helper()
	program := filepath.Join(t.TempDir(), "midrail")
	if out, err := exec.Command("go", "build", "-o", program, "midrail/cmd/midrail").CombinedOutput(); err != nil {
		t.Fatalf("%v: %s", err, out)
	}
	return program
}

// contents hashes a folder's files, their names included; "" where there is no folder.
func contents(t *testing.T, folder string) string {
	t.Helper()
	h := sha256.New()
	err := filepath.WalkDir(folder, func(path string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		data, err := os.ReadFile(path)
		if err != nil {
			return err
		}
		name, err := filepath.Rel(folder, path)
		fmt.Fprintf(h, "%s %d\n%s", name, len(data), data)
		return err
	})
	if errors.Is(err, fs.ErrNotExist) {
		return ""
	}
	if err != nil {
		t.Fatal(err)
	}
	return fmt.Sprintf("%x", h.Sum(nil))
}

// Runs that are killed or ended at any moment leave the earlier output whole, or have put the whole new one in its place.
// After SIGTERM nothing else is left; after SIGKILL a folder whose name begins with a point and says that it is a part.
func TestKilledRunsLeaveAWholeFolder(t *testing.T) {
	const moments = 50
	program, dir := build(t), t.TempDir()
	track, chain, out := filepath.Join(dir, "t.wav"), filepath.Join("demo", demoName), filepath.Join(dir, "out")
	command := func(gain string) *exec.Cmd {
		return exec.Command(program, "run", chain, track, "--out", out, "--set", "capsule amp.r_f="+gain)
	}
	if text, err := exec.Command(program, "tracks", "pink", track, "--seconds", "5", "--level", "-30").CombinedOutput(); err != nil {
		t.Fatalf("%v: %s", err, text)
	}
	whole := map[string]string{}
	var longest time.Duration
	for _, gain := range []string{"220k", "330k"} {
		begun := time.Now()
		if text, err := command(gain).CombinedOutput(); err != nil && !strings.Contains(err.Error(), "exit status 1") {
			t.Fatalf("%v: %s", err, text)
		}
		longest = max(longest, time.Since(begun))
		whole[contents(t, out)] = gain
	}
	if len(whole) != 2 {
		t.Fatal("two gains make the same files")
	}
	draw := rand.New(rand.NewPCG(50, 50))
	replaced, cut := 0, 0
	for i := range moments {
		before := whole[contents(t, out)]
		gain := "220k"
		if before == gain {
			gain = "330k"
		}
		run := command(gain)
		if err := run.Start(); err != nil {
			t.Fatal(err)
		}
		time.Sleep(time.Duration(draw.Float64() * float64(longest) * 1.2))
		signal := syscall.SIGKILL
		if i%2 == 0 {
			signal = syscall.SIGTERM
		}
		run.Process.Signal(signal)
		run.Wait()
		after, known := whole[contents(t, out)]
		if !known {
			t.Fatalf("moment %d, %v: the folder is neither the old one nor the new one", i, signal)
		}
		if after == gain {
			replaced++
		} else {
			cut++
		}
		entries, err := os.ReadDir(dir)
		if err != nil {
			t.Fatal(err)
		}
		for _, e := range entries {
			switch name := e.Name(); {
			case name == "t.wav" || name == "out":
			case signal == syscall.SIGKILL && strings.HasPrefix(name, ".out.part-"):
				os.RemoveAll(filepath.Join(dir, name))
			default:
				t.Errorf("moment %d, %v: %s is left", i, signal, name)
			}
		}
	}
	if replaced == 0 || cut == 0 {
		t.Errorf("%d runs were cut, %d had ended: the moments prove little", cut, replaced)
	}
}

// On a disk that is too small a run is refused before it starts; on one that fills up meanwhile it fails plainly. Neither
// leaves anything.
func TestFullDisk(t *testing.T) {
	program, dir := build(t), t.TempDir()
	track := filepath.Join(dir, "t.wav")
	if text, err := exec.Command(program, "tracks", "pink", track, "--seconds", "20", "--level", "-30").CombinedOutput(); err != nil {
		t.Fatalf("%v: %s", err, text)
	}
	disk := filepath.Join(dir, "disk")
	if err := os.Mkdir(disk, 0o777); err != nil {
		t.Fatal(err)
	}
	mount := func(size string) {
		t.Helper()
		if err := syscall.Mount("tmpfs", disk, "tmpfs", 0, "size="+size); err != nil {
			t.Fatalf("mounting a small disk, for which one must be root: %v", err)
		}
	}
	unmount := func() {
		if err := syscall.Unmount(disk, 0); err != nil {
			t.Error(err)
		}
	}
	run := func() (status int, said string) {
		var stderr bytes.Buffer
		c := exec.Command(program, "run", filepath.Join("demo", demoName), track, "--out", filepath.Join(disk, "out"), "--no-html")
		c.Stderr = &stderr
		c.Run()
		return c.ProcessState.ExitCode(), stderr.String()
	}
	empty := func() {
		t.Helper()
		entries, err := os.ReadDir(disk)
		if err != nil {
			t.Fatal(err)
		}
		for _, e := range entries {
			if e.Name() != "ballast" {
				t.Errorf("%s is left", e.Name())
			}
		}
	}

	mount("1m")
	status, said := run()
	if status != WrongInput || !strings.Contains(said, "are free there; make room, or name another place with --out") {
		t.Errorf("too small: status %d, %q", status, said)
	}
	empty()
	unmount()

	mount("8m")
	defer unmount()
	// Another program fills the disk once the run has begun.
	filled := make(chan error, 1)
	go func() {
		for {
			if parts, _ := filepath.Glob(filepath.Join(disk, ".out.part-*", "heard.wav")); len(parts) > 0 {
				break
			}
			time.Sleep(time.Millisecond)
		}
		f, err := os.Create(filepath.Join(disk, "ballast"))
		for err == nil {
			_, err = f.Write(make([]byte, 4096))
		}
		filled <- errors.Join(f.Close())
	}()
	status, said = run()
	<-filled
	if status != Failed || !strings.Contains(said, "no space left on device") {
		t.Errorf("filled: status %d, %q", status, said)
	}
	empty()
}

// Where nothing can be written, that is said in one line.
func TestReadOnlyPlace(t *testing.T) {
	program := build(t)
	c := exec.Command(program, "run", "--out", "/proc/midrail")
	var stderr bytes.Buffer
	c.Stderr = &stderr
	c.Run()
	if status := c.ProcessState.ExitCode(); status != WrongInput || strings.Count(stderr.String(), "\n") != 1 {
		t.Errorf("status %d, %q", status, stderr.String())
	}
}
