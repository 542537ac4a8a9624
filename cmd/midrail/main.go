// Command midrail tells the designer of an audio front end what its converter will hear.
package main

import (
	"context"
	"os"
	"os/signal"
	"syscall"

	"midrail/cmd/command"
)

func main() {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	// A second signal ends the process at once.
	context.AfterFunc(ctx, stop)
	os.Exit(command.Exec(ctx, os.Args[1:], os.Stdin, os.Stdout, os.Stderr))
}
