// Evenshelf measures the loudness of whole libraries of recordings and brings each to the level and
// range its listeners need, offline, keeping the originals safe.
package main

import (
	"context"
	"os"
	"os/signal"
	"syscall"

	"evenshelf/command"
)

func main() {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	defer stop()
	os.Exit(command.Run(ctx, os.Args[1:], os.Stdout, os.Stderr))
}
