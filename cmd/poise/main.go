// Command poise checks differential front ends written in the Poise language: see `poise help`.
package main

import (
	"context"
	"io"
	"os"
	"os/signal"
	"syscall"
)

func main() {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	code := run(ctx, os.Args[1:], streams{in: os.Stdin, out: os.Stdout, err: os.Stderr, terminal: isTerminal(os.Stdout), errTerminal: isTerminal(os.Stderr), noColor: os.Getenv("NO_COLOR") != ""})
	stop()
	os.Exit(code)
}

// streams are what the command reads and writes.
type streams struct {
	in          io.Reader
	out, err    io.Writer
	terminal    bool // out is one
	errTerminal bool // err is one
	noColor     bool
}

// isTerminal reports whether a file is a character device.
func isTerminal(f *os.File) bool {
	info, err := f.Stat()
	return err == nil && info.Mode()&os.ModeCharDevice != 0
}
