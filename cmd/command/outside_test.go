//go:build outside

package command

import (
	"bytes"
	"context"
	"encoding/json"
	"io"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"midrail/signals"
	"midrail/signals/wav"
)

// speech is a recording that Debian's alsa-utils carries: 48 kHz, 16 bits, mono.
const speech = "/usr/share/sounds/alsa/Front_Center.wav"

func samples(t *testing.T, path string) []float64 {
	t.Helper()
	f, err := wav.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	x, err := signals.ReadAll(signals.Channels(f, 1)[0])
	if err != nil {
		t.Fatal(err)
	}
	return x
}

// Real speech through the demo's chain: the layers sum to what is heard within the rounding of 32-bit float, sox reads
// every file without a word, and finds the level that the report tells.
func TestSpeechThroughTheChain(t *testing.T) {
	dir := t.TempDir()
	out := filepath.Join(dir, "out")
	var stderr bytes.Buffer
	if status := Exec(context.Background(), []string{"run", "demo/" + demoName, speech, "--out", out}, strings.NewReader(""), io.Discard, &stderr); status != Done && status != Broken {
		t.Fatalf("status %d: %s", status, stderr.String())
	}
	var report struct {
		Converter struct {
			Rest float64 `json:"rest"`
		}
		Layers []struct {
			Name    string   `json:"name"`
			RMSDBFS *float64 `json:"rms_dbfs"`
		}
	}
	data, err := os.ReadFile(filepath.Join(out, "report.json"))
	if err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(data, &report); err != nil {
		t.Fatal(err)
	}
	heard := samples(t, filepath.Join(out, "heard.wav"))
	sum := make([]float64, len(heard))
	largest := make([]float64, len(heard))
	for i := range sum {
		sum[i] = report.Converter.Rest
	}
	for _, l := range report.Layers {
		path := filepath.Join(out, l.Name+".wav")
		x := samples(t, path)
		if len(x) != len(heard) {
			t.Fatalf("%s has %d samples, heard %d", l.Name, len(x), len(heard))
		}
		for i, v := range x {
			sum[i] += v
			largest[i] = math.Max(largest[i], math.Abs(v))
		}
		soxReads(t, path)
	}
	soxReads(t, filepath.Join(out, "heard.wav"))
	for i := range heard {
		// Six layers, each rounded to 24 bits.
		if d := math.Abs(sum[i] - heard[i]); !(d <= 6*math.Exp2(-24)*math.Max(largest[i], math.Exp2(-24))) {
			t.Fatalf("sample %d: the layers sum to %.9g, heard is %.9g", i, sum[i], heard[i])
		}
	}
	// sox's RMS of the wanted layer, which counts DC, of which there is none.
	text, err := exec.Command("sox", filepath.Join(out, "wanted.wav"), "-n", "stats").CombinedOutput()
	if err != nil {
		t.Fatal(err)
	}
	var rms string
	for _, line := range strings.Split(string(text), "\n") {
		if f := strings.Fields(line); len(f) == 4 && f[0] == "RMS" && f[1] == "lev" {
			rms = f[3]
		}
	}
	var db float64
	if err := json.Unmarshal([]byte(rms), &db); err != nil {
		t.Fatalf("sox said %s", text)
	}
	// sox tells dB of the RMS itself, to two decimals; dBFS is 3.01 dB more.
	if want := *report.Layers[0].RMSDBFS - 10*math.Log10(2); !(math.Abs(db-want) <= 0.011) {
		t.Errorf("sox finds %.2f dB, the report %.2f dB", db, want)
	}
}

func soxReads(t *testing.T, path string) {
	t.Helper()
	text, err := exec.Command("sox", "-V2", path, "-n").CombinedOutput()
	if err != nil || len(text) > 0 {
		t.Errorf("sox %s: %v: %s", path, err, text)
	}
}

// Every kind of test recording is one that sox reads.
func TestSoxReadsTracks(t *testing.T) {
	for _, kind := range []string{"tone", "sweep", "burst", "white", "pink", "silence", "demo"} {
		path := filepath.Join(t.TempDir(), kind+".wav")
		if status := Exec(context.Background(), []string{"tracks", kind, path, "--seconds", "0.5"}, strings.NewReader(""), io.Discard, os.Stderr); status != Done {
			t.Fatalf("tracks %s: status %d", kind, status)
		}
		soxReads(t, path)
	}
}
