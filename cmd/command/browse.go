package command

import (
	"fmt"
	"os/exec"
	"runtime"
)

// openPage shows a page in the reader's browser, by the opener of the operating system.
func openPage(path string) error {
	name, args := "xdg-open", []string{path}
	switch runtime.GOOS {
	case "darwin":
		name = "open"
	case "windows":
		name, args = "rundll32", []string{"url.dll,FileProtocolHandler", path}
	}
	if err := exec.Command(name, args...).Run(); err != nil {
		return refusal{fmt.Errorf("cannot open the report: %w; open %s yourself", err, path)}
	}
	return nil
}
