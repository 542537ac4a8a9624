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
	"strconv"
	"strings"
	"testing"
)

// One recording, on a grid of 8 bits that every format holds exactly, in each flavour that sox writes, is heard as the
// same codes.
func TestSoxFlavoursAreHeardAlike(t *testing.T) {
	dir := t.TempDir()
	path := func(name string) string { return filepath.Join(dir, name) }
	sox := func(args ...string) []byte {
		t.Helper()
		c := exec.Command("sox", append([]string{"-D", "-V1"}, args...)...)
		var out, failure bytes.Buffer
		c.Dir, c.Stdout, c.Stderr = dir, &out, &failure
		if err := c.Run(); err != nil {
			t.Fatalf("sox %v: %v: %s", args, err, failure.String())
		}
		return out.Bytes()
	}
	write := func(name string, data []byte) {
		t.Helper()
		if err := os.WriteFile(path(name), data, 0o666); err != nil {
			t.Fatal(err)
		}
	}
	write("chain.toml", []byte(`[supply]
voltage = "5V"
[input.line]
kind = "line"
full_scale = "1Vrms"
[[stage]]
name = "filter"
kind = "rc low-pass"
from = "line"
r = "1k"
c = "10n"
[converter]
from = "filter"
rate = 9600
bits = 16
low = -2
high = 2
`))
	sox("-R", "-n", "-r", "16000", "-b", "8", "base.wav", "synth", "0.4", "sine", "300-7000", "synth", "0.4", "pinknoise", "mix", "gain", "-n", "-3")
	const rate = "16000"
	type flavour struct {
		args  []string // of sox, between the recording and the file
		file  string
		run   []string // of midrail, beside the file
		pipe  bool     // sox writes into a pipe, which is kept as the file
		stdin bool     // midrail reads the file from a pipe
	}
	wav := func(args ...string) []string { return append(args, "-t", "wav") }
	flavours := map[string]flavour{
		"8 bits":                 {args: wav("-b", "8"), file: "8.wav"},
		"16 bits":                {args: wav("-b", "16"), file: "16.wav"},
		"24 bits, extensible":    {args: wav("-b", "24"), file: "24.wav"},
		"32 bits, extensible":    {args: wav("-b", "32"), file: "32.wav"},
		"24 bits, plain":         {args: []string{"-b", "24", "-t", "wavpcm"}, file: "24p.wav"},
		"32 bits, plain":         {args: []string{"-b", "32", "-t", "wavpcm"}, file: "32p.wav"},
		"float":                  {args: wav("-e", "floating-point", "-b", "32"), file: "f32.wav"},
		"double":                 {args: wav("-e", "floating-point", "-b", "64"), file: "f64.wav"},
		"16 bits from a pipe":    {args: wav("-b", "16"), file: "p16.wav", pipe: true},
		"24 bits from a pipe":    {args: wav("-b", "24"), file: "p24.wav", pipe: true},
		"float through pipes":    {args: wav("-e", "floating-point", "-b", "32"), file: "pf32.wav", pipe: true, stdin: true},
		"FLAC of 8 bits":         {args: []string{"-b", "8", "-t", "flac"}, file: "8.flac"},
		"FLAC of 16 bits":        {args: []string{"-b", "16", "-t", "flac"}, file: "16.flac"},
		"FLAC of 24 bits":        {args: []string{"-b", "24", "-C", "8", "-t", "flac"}, file: "24.flac"},
		"FLAC, hardly packed":    {args: []string{"-b", "16", "-C", "0", "-t", "flac"}, file: "0.flac"},
		"FLAC through pipes":     {args: []string{"-b", "16", "-t", "flac"}, file: "p.flac", pipe: true, stdin: true},
		"8 channels, of bits 16": {args: wav("-b", "16"), file: "8ch.wav"},
		"FLAC of 2 channels":     {args: []string{"-b", "16", "-t", "flac"}, file: "2ch.flac"},
	}
	for name, bits := range map[string]string{"s8": "8", "u8": "8", "s16le": "16", "s16be": "16", "u16le": "16", "s24le": "24", "s24be": "24", "u24be": "24", "s32le": "32", "u32be": "32", "f32le": "32", "f32be": "32", "f64le": "64", "f64be": "64"} {
		encoding := map[byte]string{'s': "signed-integer", 'u': "unsigned-integer", 'f': "floating-point"}[name[0]]
		args := []string{"-e", encoding, "-b", bits, "-t", "raw"}
		if strings.HasSuffix(name, "be") {
			args = append(args, "-B")
		} else if bits != "8" {
			args = append(args, "-L")
		}
		flavours["raw "+name] = flavour{args: args, file: name + ".raw", run: []string{"--raw", name + "," + rate}}
	}
	var heard []byte
	run := func(name string, in io.Reader, args ...string) {
		t.Helper()
		out := path("out " + name)
		var failure bytes.Buffer
		if status := Exec(context.Background(), append([]string{"run", path("chain.toml"), "--no-html", "--out", out}, args...), in, io.Discard, &failure); status != Done {
			t.Errorf("%s: status %d: %s", name, status, failure.String())
			return
		}
		got, err := os.ReadFile(filepath.Join(out, "heard.wav"))
		if err != nil {
			t.Fatal(err)
		}
		if heard == nil {
			heard = got
		}
		if !bytes.Equal(got, heard) {
			t.Errorf("%s is heard otherwise", name)
		}
	}
	run("base", strings.NewReader(""), path("base.wav"))
	for name, f := range flavours {
		args := append([]string{"base.wav"}, f.args...)
		target, effect := f.file, []string(nil)
		if f.pipe {
			target = "-"
		}
		switch f.file {
		case "8ch.wav":
			effect = []string{"remix", "1", "1", "1", "1", "1", "1", "1", "1"}
		case "2ch.flac":
			effect = []string{"remix", "1", "1"}
		}
		out := sox(append(append(args, target), effect...)...)
		if f.pipe {
			write(f.file, out)
		}
		if f.stdin {
			run(name, bytes.NewReader(out), append(f.run, "-")...)
		} else {
			run(name, strings.NewReader(""), append(f.run, path(f.file))...)
		}
	}
	// As text: sox writes the time and the value; of it a column of counts and one of volts, of which full
	// scale, 1 V RMS, has √2 at its peaks.
	var counts, volts strings.Builder
	for _, line := range strings.Split(string(sox("base.wav", "-t", "dat", "-")), "\n") {
		fields := strings.Fields(line)
		if len(fields) != 2 || fields[0] == ";" {
			continue
		}
		x, err := strconv.ParseFloat(fields[1], 64)
		if err != nil {
			t.Fatal(err)
		}
		counts.WriteString(fields[0] + "," + strconv.FormatFloat(x*128+128, 'f', -1, 64) + "\n")
		volts.WriteString(fields[0] + ";" + strings.Replace(strconv.FormatFloat(x*math.Sqrt2, 'f', -1, 64), ".", ",", 1) + "\r\n")
	}
	write("counts.csv", []byte("time,count\n"+counts.String()))
	write("volts.csv", []byte("t/s;U/V\r\n"+volts.String()))
	none := strings.NewReader("")
	run("counts", none, "--counts", path("counts.csv"), "--rate", rate, "--bits", "8", "--column", "2")
	run("volts", none, "--volts", path("volts.csv"), "--rate", rate, "--column", "2")
}

// The tone that sox writes into one channel of a FLAC file is found at the level and the frequency that it was told.
func TestSoxToneCalibrates(t *testing.T) {
	dir := t.TempDir()
	c := exec.Command("sox", "-R", "-n", "-r", "44100", "-b", "16", "-c", "2", filepath.Join(dir, "tone.flac"), "synth", "3", "sine", "50", "sine", "1234.5", "gain", "-12.3")
	if text, err := c.CombinedOutput(); err != nil {
		t.Fatalf("%v: %s", err, text)
	}
	chain := filepath.Join(dir, "chain.toml")
	if err := os.WriteFile(chain, []byte(`[supply]
voltage = "5V"
[input.line]
kind = "line"
channel = 2
calibrate = { reading = "200mVrms", track = "tone.flac", from = "500ms" }
[converter]
from = "line"
rate = 16000
bits = 16
low = -2
high = 2
`), 0o666); err != nil {
		t.Fatal(err)
	}
	var out, failure bytes.Buffer
	status := Exec(context.Background(), []string{"run", chain, filepath.Join(dir, "tone.flac"), "--json", "--no-html", "--out", filepath.Join(dir, "out")}, strings.NewReader(""), &out, &failure)
	if status != Done {
		t.Fatalf("status %d: %s", status, failure.String())
	}
	var report struct {
		Calibrations []struct {
			From      float64 `json:"from_s"`
			To        float64 `json:"to_s"`
			Frequency float64 `json:"frequency_hz"`
			Level     float64 `json:"level_dbfs"`
			FullScale float64 `json:"full_scale"`
		} `json:"calibrations"`
	}
	if err := json.Unmarshal(out.Bytes(), &report); err != nil || len(report.Calibrations) != 1 {
		t.Fatalf("%v: %s", err, out.String())
	}
	const hz, dB = 0.01, 0.01 // what a calibration is asked to hold
	k := report.Calibrations[0]
	if !(math.Abs(k.Frequency-1234.5) <= hz) || !(math.Abs(k.Level+12.3) <= dB) || !(math.Abs(20*math.Log10(k.FullScale/0.2)-12.3) <= dB) || k.From != 0.5 || k.To != 3 {
		t.Errorf("%+v", k)
	}
}
