package command

import (
	"bytes"
	"context"
	"encoding/binary"
	"io"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"sync/atomic"
	"testing"
	"time"
)

// The memory of a run does not grow with its track: ten minutes take no more than ten seconds do.
func TestMemoryOfALongTrack(t *testing.T) {
	const rate = 4000
	short, long := peakOf(t, rate, 10), peakOf(t, rate, 600)
	// One number kept for each sample, in or out, would be 19 MB; the rest is the garbage collector's leeway.
	const most = 10 << 20
	if long > short+most {
		t.Errorf("%d bytes in use for ten seconds, %d for ten minutes", short, long)
	}
}

// peakOf returns how much memory was in use, at the most, in a run on a silent track. The file has a hole for its sound.
func peakOf(t *testing.T, rate, seconds int) uint64 {
	t.Helper()
	dir := t.TempDir()
	var head bytes.Buffer
	size := uint32(2 * rate * seconds)
	head.WriteString("RIFF")
	binary.Write(&head, binary.LittleEndian, size+36)
	head.WriteString("WAVEfmt ")
	binary.Write(&head, binary.LittleEndian, struct {
		Size        uint32
		Tag, Wide   uint16
		Rate, Bytes uint32
		Align, Bits uint16
	}{16, 1, 1, uint32(rate), uint32(2 * rate), 2, 16})
	head.WriteString("data")
	binary.Write(&head, binary.LittleEndian, size)
	track, file := filepath.Join(dir, "track.wav"), filepath.Join(dir, "chain.toml")
	for path, data := range map[string][]byte{track: head.Bytes(), file: []byte("[supply]\nvoltage = 5\n[input.line]\nkind = \"line\"\nfull_scale = \"1Vrms\"\n[converter]\nfrom = \"line\"\nrate = 4000\nbits = 16\nlow = -2\nhigh = 2\n")} {
		if err := os.WriteFile(path, data, 0o666); err != nil {
			t.Fatal(err)
		}
	}
	if err := os.Truncate(track, int64(head.Len())+int64(size)); err != nil {
		t.Fatal(err)
	}
	runtime.GC()
	var peak atomic.Uint64
	done := make(chan struct{})
	go func() {
		for {
			var m runtime.MemStats
			runtime.ReadMemStats(&m)
			peak.Store(max(peak.Load(), m.HeapAlloc))
			select {
			case <-done:
				return
			case <-time.After(2 * time.Millisecond):
			}
		}
	}()
	var failure strings.Builder
	if status := Exec(context.Background(), []string{"run", file, track, "--out", filepath.Join(dir, "out")}, strings.NewReader(""), io.Discard, &failure); status != Done {
		t.Errorf("status %d: %s", status, failure.String())
	}
	close(done)
	return peak.Load()
}
