package main

import (
	"context"
	"errors"
	"flag"
	"fmt"
	"io"

	"tenthmark/session"
)

// newFlags makes a sub-command's flag set; help goes where the flag set prints.
func newFlags(name, what string, w io.Writer) *flag.FlagSet {
	f := flag.NewFlagSet("tenthmark "+name, flag.ContinueOnError)
	f.SetOutput(w)
	f.Usage = func() {
		fmt.Fprintf(w, "%s\n\nFlags:\n", what)
		f.PrintDefaults()
	}
	return f
}

// parse reads flags. done says that the command ends here, with the given code.
func parse(f *flag.FlagSet, args []string) (code int, done bool) {
	switch err := f.Parse(args); {
	case errors.Is(err, flag.ErrHelp):
		return exitDone, true
	case err != nil:
		return exitUsage, true
	}
	return exitDone, false
}

// complain prints an error for the person who called: message, then hint.
func complain(w io.Writer, err error) int {
	var fault *session.Fault
	if errors.As(err, &fault) {
		fmt.Fprintf(w, "tenthmark: %s\n    %s\n", fault.Message, fault.Hint)
		if fault.Err != nil {
			fmt.Fprintf(w, "    (%s: %v)\n", fault.Code, fault.Err)
		}
		return exitFailed
	}
	fmt.Fprintf(w, "tenthmark: %v\n", err)
	return exitFailed
}

func runCheck(_ context.Context, args []string, io stdio) int {
	f := newFlags("check", "Checks a configuration file: unknown keys, bad values, each with its line and a hint.", io.err)
	file := f.String("c", "config.toml", "configuration `file`")
	if code, done := parse(f, args); done {
		return code
	}
	c, err := loadConfig(*file)
	if err != nil {
		fmt.Fprintln(io.err, err)
		return exitFailed
	}
	fmt.Fprintf(io.out, "%s is in order: %d station(s), ledger %s, drop %s, page on %s.\n", *file, len(c.Stations), c.Ledger.Path, c.Publish.Folder, c.Bench.Listen)
	return exitDone
}

// errText gives the cause without the path that the message names already.
func errText(err error) string {
	var pathErr interface{ Unwrap() error }
	if errors.As(err, &pathErr) && pathErr.Unwrap() != nil {
		return pathErr.Unwrap().Error()
	}
	return err.Error()
}
