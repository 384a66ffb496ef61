package main

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"strings"

	"tenthmark/acquire/virtual"
	"tenthmark/calc/decimal"
)

// runVirtual serves a virtual balance on a pseudo-terminal. What is typed moves the
// load: a number is the mass on the pan in g, t tares, p presses PRINT.
func runVirtual(ctx context.Context, args []string, io stdio) int {
	f := newFlags("virtual", "Serves a virtual balance on a pseudo-terminal and prints its path.\nType a mass in g to put it on the pan, t to tare, p to press PRINT.", io.err)
	opt := virtual.Options{}
	f.Uint64Var(&opt.Seed, "seed", 1, "of the noise")
	f.IntVar(&opt.Form, "form", 22, "characters of a line, 16 or 22")
	f.StringVar((*string)(&opt.Output), "output", string(virtual.Auto), "when it prints: auto, auto-stable, on-change, interval, request or request-at-any")
	f.StringVar(&opt.Serial, "serial", "0021600412", "serial number that it reports")
	f.Float64Var(&opt.Pace, "pace", 1, "how much faster than the clock its world runs")
	f.BoolVar(&opt.Dialect.Words, "words", false, "say High and Low instead of H and L")
	f.BoolVar(&opt.Dialect.Comma, "comma", false, "print a decimal comma")
	if code, done := parse(f, args); done {
		return code
	}
	balance, err := virtual.New(opt)
	if err != nil {
		return complain(io.err, err)
	}
	pty, err := virtual.OpenPTY()
	if err != nil {
		return complain(io.err, err)
	}
	fmt.Fprintf(io.out, "%s\n", pty.Path)
	go typed(balance, bufio.NewScanner(io.in), io)
	if err := balance.Serve(ctx, pty); err != nil && !errors.Is(err, context.Canceled) {
		return complain(io.err, err)
	}
	return exitDone
}

// typed does what is typed to the balance. It ends with the process, which nobody
// waits for while a terminal is read.
func typed(b *virtual.Balance, lines *bufio.Scanner, io stdio) {
	for lines.Scan() {
		switch text := strings.TrimSpace(lines.Text()); text {
		case "":
		case "t":
			b.PressTare()
		case "p":
			b.PressPrint()
		default:
			n, err := decimal.ParseTyped(text)
			if err != nil {
				fmt.Fprintf(io.err, "%v: type a mass in g, t or p.\n", err)
				continue
			}
			b.SetLoad(n.Float())
		}
	}
}
