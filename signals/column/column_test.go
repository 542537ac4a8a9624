package column

import (
	"errors"
	"io"
	"math"
	"runtime"
	"slices"
	"strings"
	"testing"

	"midrail/signals"
)

func read(text string, form Form) ([]float64, error) {
	f, err := New("x.csv", strings.NewReader(text), form)
	if err != nil {
		return nil, err
	}
	var all []float64
	block := make([]float64, 3)
	for {
		n, err := f.ReadFrames(block)
		all = append(all, block[:n]...)
		if err == io.EOF {
			return all, nil
		}
		if err != nil {
			return all, err
		}
	}
}

func TestFiles(t *testing.T) {
	for name, c := range map[string]struct {
		text   string
		column int
		want   []float64
	}{
		"plain":         {"1\n2\n3\n4\n", 1, []float64{1, 2, 3, 4}},
		"no last line":  {"1\n2", 1, []float64{1, 2}},
		"heading":       {"time,volts\n0,1.5\n1,-2e-3\n", 2, []float64{1.5, -2e-3}},
		"long heading":  {"a scope\n\nsettings,x,y\nt,v\n0,7\n", 2, []float64{7}},
		"remarks":       {"# 1;2\n5\n# more\n6\n", 1, []float64{5, 6}},
		"CRLF, spaces":  {" 1, 2\r\n 3, 4\r\n", 2, []float64{2, 4}},
		"semicolons":    {"t;v\n0,1;1,5\n0,2;2.5\n", 2, []float64{1.5, 2.5}},
		"tabs":          {"0\t7\n1\t8,5\n", 2, []float64{7, 8.5}},
		"marked":        {"\ufeff1\n2\n", 1, []float64{1, 2}},
		"; in heading":  {"a; b\nt,v\n1,2\n3,4\n", 2, []float64{2, 4}},
		"empty lines":   {"1;2,5\n\n3;4\n\n\n", 2, []float64{2.5, 4}},
		"quoted":        {"\"1\",\"2\"\n\"3\",\"4\"\n", 2, []float64{2, 4}},
		"other columns": {"x,1,y\nx,2\n", 2, []float64{1, 2}},
	} {
		got, err := read(c.text, Form{Column: c.column, Rate: 8000, Scale: 1})
		if err != nil || !slices.Equal(got, c.want) {
			t.Errorf("%s: %v, %v, want %v", name, got, err, c.want)
		}
	}
}

func TestCounts(t *testing.T) {
	zero, scale := Counts(10)
	got, err := read("0\n512\n768\n1023\n", Form{Column: 1, Rate: 8000, Zero: zero, Scale: scale})
	if want := []float64{-1, 0, 0.5, 511. / 512}; err != nil || !slices.Equal(got, want) {
		t.Errorf("%v, %v, want %v", got, err, want)
	}
}

func TestFaultsHaveTheirPlace(t *testing.T) {
	for text, want := range map[string]string{
		"":                                  "not one number",
		"# 1\n":                             "not one number",
		"a\nb\n":                            `line 1: "a" is no number`,
		"1,2\n3\n":                          "line 2: it has 1 columns, column 2 is wanted",
		"1,2\n3,four\n":                     `line 2: "four" is no number`,
		"1,2\n3," + strings.Repeat("z", 99): "…",
	} {
		_, err := read(text, Form{Column: 2, Rate: 8000, Scale: 1})
		if fault, ok := errors.AsType[*signals.FormatError](err); !ok || !strings.Contains(err.Error(), want) && !strings.HasPrefix(text, "a") || fault.Remedy == "" {
			t.Errorf("%q: %v", text, err)
		}
	}
	if _, err := read("a\nb\n", Form{Column: 1, Rate: 8000, Scale: 1}); err == nil || !strings.Contains(err.Error(), `line 1: "a" is no number`) {
		t.Errorf("a heading alone: %v", err)
	}
}

// endless is a file of one text over and over, of a given size. It notes how much memory is in use.
type endless struct {
	text     string
	at, left int
	most     uint64 // bytes
}

func (e *endless) Read(p []byte) (int, error) {
	var m runtime.MemStats
	runtime.ReadMemStats(&m)
	e.most = max(e.most, m.HeapAlloc)
	n := 0
	for n < len(p) && e.left > 0 {
		k := copy(p[n:min(len(p), n+e.left)], e.text[e.at:])
		n, e.left, e.at = n+k, e.left-k, (e.at+k)%len(e.text)
	}
	if n == 0 {
		return 0, io.EOF
	}
	return n, nil
}

// However large the file, and whatever it holds, a row is all that is in memory.
func TestMemory(t *testing.T) {
	const size, most = 64 << 20, 16 << 20 // bytes: of the file; in use, garbage included
	for name, c := range map[string]struct{ start, text, want string }{
		"a line":              {"", "1", "a row has more than"},
		"commas":              {"", ",", "a row has more than"},
		"quotations":          {"", "\"1\n" + strings.Repeat("\n", 1020) + "\"\n", ""},
		"a quote left open":   {"1\n\"", "a\n1\n", "behind byte 2: a row has more than"},
		"a heading for ever":  {"", "x\n", `line 1: "x" is no number`},
		"numbers":             {"", strings.Repeat("0", 127) + "\n", ""},
		"remarks without end": {"", "#\n", "a row has more than"},
	} {
		var before runtime.MemStats
		runtime.GC()
		runtime.ReadMemStats(&before)
		file := &endless{text: c.text, left: size}
		f, err := New("x.csv", io.MultiReader(strings.NewReader(c.start), file), Form{Column: 1, Rate: 8000, Scale: 1})
		block := make([]float64, 4096)
		for err == nil {
			_, err = f.ReadFrames(block)
		}
		if got := file.most - before.HeapAlloc; got > most {
			t.Errorf("%s: %d bytes in use", name, got)
		}
		if c.want == "" && err != io.EOF || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %v", name, err)
		}
	}
}

// FuzzNew reads whatever it is given: no more samples than lines could hold.
func FuzzNew(f *testing.F) {
	f.Add("t,v\n0,1.5\n", 2)
	f.Add("1;2,5\n", 2)
	f.Add("# x\n\"a\n\"\n7", 1)
	f.Add("1e999\nnan\n", 1)
	f.Fuzz(func(t *testing.T, text string, column int) {
		if column < 1 || len(text) > 1<<16 {
			return
		}
		got, err := read(text, Form{Column: column, Rate: 8000, Scale: 1})
		if len(got) > len(text) {
			t.Fatalf("%d samples from %d bytes", len(got), len(text))
		}
		if _, ok := errors.AsType[*signals.FormatError](err); err != nil && !ok {
			t.Fatalf("%v: no fault with its place", err)
		}
		for i, v := range got {
			if math.IsNaN(v) && !strings.Contains(strings.ToLower(text), "nan") {
				t.Fatalf("sample %d is no number", i)
			}
		}
	})
}
