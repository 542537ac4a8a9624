package command

import (
	"go/parser"
	"go/token"
	"io/fs"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
)

// TestHouse holds the import rule: bilinear and signals import nothing of ours but themselves, chain imports both,
// nothing outside cmd imports cmd.
func TestHouse(t *testing.T) {
	may := map[string][]string{
		"bilinear": {"bilinear"},
		"signals":  {"signals"},
		"chain":    {"chain", "bilinear", "signals"},
		"cmd":      {"cmd", "chain", "bilinear", "signals"},
	}
	const root = "../.."
	seen := map[string]int{}
	err := filepath.WalkDir(root, func(path string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() || filepath.Ext(path) != ".go" {
			return err
		}
		relative, err := filepath.Rel(root, path)
		if err != nil {
			return err
		}
		room := strings.Split(filepath.ToSlash(relative), "/")[0]
		allowed, ok := may[room]
		if !ok {
			t.Errorf("%s: there is no room %q", relative, room)
			return nil
		}
		file, err := parser.ParseFile(token.NewFileSet(), path, nil, parser.ImportsOnly)
		if err != nil {
			return err
		}
		for _, imported := range file.Imports {
			name, err := strconv.Unquote(imported.Path.Value)
			if err != nil {
				return err
			}
			ours, found := strings.CutPrefix(name, "midrail/")
			if !found {
				continue
			}
			seen[room]++
			if !contains(allowed, strings.Split(ours, "/")[0]) {
				t.Errorf("%s imports %s", relative, name)
			}
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	for _, room := range []string{"chain", "cmd", "signals"} {
		if seen[room] == 0 {
			t.Errorf("no import of ours seen in %s", room)
		}
	}
}

func contains(list []string, s string) bool {
	for _, x := range list {
		if x == s {
			return true
		}
	}
	return false
}
