package command

import (
	"bytes"
	"context"
	"encoding/json"
	"html"
	"io"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"unicode/utf8"

	"midrail/cmd/report"
)

// chains are the chain files of the test data.
func chains(t *testing.T) []string {
	files, err := filepath.Glob("../../testdata/chains/*.toml")
	if err != nil || len(files) == 0 {
		t.Fatal("no chains", err)
	}
	return files
}

func answer(t *testing.T, args ...string) string {
	t.Helper()
	var out, wrong bytes.Buffer
	if status := Exec(context.Background(), args, strings.NewReader(""), &out, &wrong); status != Done {
		t.Fatalf("midrail %v: status %d, %s", args, status, wrong.String())
	}
	return out.String()
}

// Every answer reads at 80 columns, whatever the chain.
func TestAnswersFitEightyColumns(t *testing.T) {
	for _, file := range chains(t) {
		for _, command := range []string{"response", "rest", "noise", "ripple"} {
			for i, line := range strings.Split(answer(t, command, file), "\n") {
				if n := utf8.RuneCountInString(line); n > 80 {
					t.Errorf("%s %s, line %d: %d columns: %s", command, file, i+1, n, line)
				}
			}
		}
	}
}

// The page of a run holds every line that the commands print of its chain.
func TestPageHoldsTheAnswers(t *testing.T) {
	const file = "../../testdata/chains/brood-box.toml"
	track, folder := filepath.Join(t.TempDir(), "track.wav"), filepath.Join(t.TempDir(), "out")
	answer(t, "tracks", "tone", track, "--seconds", "0.2")
	var out, wrong bytes.Buffer
	if status := Exec(context.Background(), []string{"run", file, track, "--out", folder}, strings.NewReader(""), &out, &wrong); status != Done && status != Broken {
		t.Fatalf("status %d: %s", status, wrong.String())
	}
	data, err := os.ReadFile(filepath.Join(folder, "report.html"))
	if err != nil {
		t.Fatal(err)
	}
	page := html.UnescapeString(string(data))
	for _, command := range []string{"response", "rest", "noise", "ripple"} {
		if text := strings.TrimRight(answer(t, command, file), "\n"); !strings.Contains(page, text) {
			t.Errorf("%s: the page lacks\n%s", command, text)
		}
	}
}

// A stage of several amplifiers is told to overload when any of them does.
func TestStageOfSeveralAmplifiersOverloads(t *testing.T) {
	track, folder := filepath.Join(t.TempDir(), "track.wav"), filepath.Join(t.TempDir(), "out")
	answer(t, "tracks", "tone", track, "--seconds", "0.2", "--level", "0")
	var got report.Run
	text := answer(t, "run", "../../testdata/chains/state-variable.toml", track, "--set", "line.full_scale=3Vrms", "--no-html", "--json", "--out", folder)
	if err := json.Unmarshal([]byte(text), &got); err != nil {
		t.Fatal(err)
	}
	s := got.Stages[0]
	if room, _ := s.RoomDB.Value(); s.Overload.Events == 0 || s.Overload.High == 0 || s.Overload.Low == 0 || !(room < 0) {
		t.Errorf("room %v, overload %+v", s.RoomDB, s.Overload)
	}
}

// The keys of the answers as JSON: the least that a program may rely on.
func TestAnswersAsJSON(t *testing.T) {
	keys := map[string]map[string]string{
		"response": {"": "from at points corners peak poles margins", "points": "frequency_hz gain_db phase_deg", "corners": "kind frequency_hz",
			"peak": "frequency_hz gain_db", "poles": "re im frequency_hz q", "margins": "amplifier phase_margin_deg gain_margin_db"},
		"rest":   {"": "nodes settling", "nodes": "name volts limit_low_v limit_high_v", "settling": "to_1_percent_s to_1_lsb_s"},
		"noise":  {"": "total sources equivalent_input", "total": "v dbfs dbfs_a lsb useful_bits", "sources": "name kind v share", "equivalent_input": "input value unit"},
		"ripple": {"": "total paths", "total": "frequency_hz gain_v_per_v gain_db", "paths": "name gains"},
	}
	for command, want := range keys {
		var got map[string]json.RawMessage
		if err := json.Unmarshal([]byte(answer(t, command, "../../testdata/chains/brood-box.toml", "--json")), &got); err != nil {
			t.Fatalf("%s: %v", command, err)
		}
		for place, names := range want {
			list := []map[string]json.RawMessage{got}
			if place != "" {
				list = nil
				one := map[string]json.RawMessage{}
				if json.Unmarshal(got[place], &list) != nil && json.Unmarshal(got[place], &one) == nil {
					list = append(list, one)
				}
			}
			if len(list) == 0 {
				t.Errorf("%s: nothing at %q", command, place)
			}
			for _, object := range list {
				for _, name := range strings.Fields(names) {
					if _, there := object[name]; !there {
						t.Errorf("%s: %q has no %q", command, place, name)
					}
				}
			}
		}
	}
}

// The shares of the noise sum to 1 and fall.
func TestSharesSumToOne(t *testing.T) {
	for _, file := range chains(t) {
		var r struct {
			Sources []struct{ Share float64 }
		}
		if err := json.Unmarshal([]byte(answer(t, "noise", file, "--json")), &r); err != nil {
			t.Fatal(err)
		}
		sum := 0.
		for _, s := range r.Sources {
			sum += s.Share
		}
		const rounding = 1e-12
		if !(math.Abs(sum-1) <= rounding) || !slices.IsSortedFunc(r.Sources, func(a, b struct{ Share float64 }) int {
			switch {
			case a.Share > b.Share:
				return -1
			case a.Share < b.Share:
				return 1
			}
			return 0
		}) {
			t.Errorf("%s: shares sum to %.15g: %v", file, sum, r.Sources)
		}
	}
}

// An answer that cannot be written is the machine's failure.
func TestAnswersToldOfAFullDisk(t *testing.T) {
	for _, command := range []string{"response", "rest", "noise", "ripple"} {
		if got := Exec(context.Background(), []string{command, "../../testdata/chains/brood-box.toml"}, strings.NewReader(""), full{}, io.Discard); got != Failed {
			t.Errorf("%s: status %d, want %d", command, got, Failed)
		}
	}
}

// full is a disk without room.
type full struct{}

func (full) Write([]byte) (int, error) { return 0, io.ErrShortWrite }
