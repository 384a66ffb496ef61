// Command tenthmark sits behind an analytical balance while a burette is calibrated
// by weighing water. This package holds the sub-commands, the configuration and the
// wiring of the house; no rule of the trade lives here.
package main

import (
	"context"
	"fmt"
	"io"
	"os"
	"os/signal"
	"syscall"
)

// Exit codes of every sub-command.
const (
	exitDone   = 0
	exitFailed = 1 // the work failed
	exitUsage  = 2 // the call was wrong
)

// stdio is where a sub-command reads and writes.
type stdio struct {
	in       io.Reader
	out, err io.Writer
}

// command is one sub-command.
type command struct {
	name, summary string
	run           func(ctx context.Context, args []string, io stdio) int
}

func main() { os.Exit(tenthmark(os.Args[1:], stdio{os.Stdin, os.Stdout, os.Stderr})) }

// tenthmark runs one sub-command. The first SIGINT or SIGTERM asks it to end in
// order, a second one ends it at once.
func tenthmark(args []string, io stdio) int {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	defer stop()
	context.AfterFunc(ctx, stop)
	if len(args) == 0 {
		usage(io.err)
		return exitUsage
	}
	switch args[0] {
	case "help", "-h", "--help", "-help":
		usage(io.out)
		return exitDone
	}
	for _, c := range commands() {
		if c.name == args[0] {
			return c.run(ctx, args[1:], io)
		}
	}
	fmt.Fprintf(io.err, "tenthmark: there is no sub-command %q. `tenthmark help` lists them.\n", args[0])
	return exitUsage
}

func usage(w io.Writer) {
	fmt.Fprint(w, "tenthmark takes weights off a balance while a burette is calibrated.\n\nUse: tenthmark COMMAND [FLAGS]\n\n")
	for _, c := range commands() {
		fmt.Fprintf(w, "  %-10s %s\n", c.name, c.summary)
	}
	fmt.Fprint(w, "\n`tenthmark COMMAND -h` shows a command's flags.\n")
}
