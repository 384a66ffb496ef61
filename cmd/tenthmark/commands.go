package main

import (
	"context"
)

// commands lists the sub-commands in the order in which they are met.
func commands() []command {
	return []command{
		{"demo", "run a whole calibration on a virtual balance", runDemo},
		{"init", "make the ledger and its signing key", runInit},
		{"serve", "run the daemon", runServe},
		{"check", "check a configuration file", runCheck},
		{"devices", "list the serial lines of this computer", runDevices},
		{"listen", "show what a balance sends and how it is understood", runListen},
		{"virtual", "run a virtual balance on a pseudo-terminal", runVirtual},
		{"volume", "turn one weighing into one volume", runVolume},
		{"ledger", "verify, show, export and back up the ledger", func(ctx context.Context, args []string, io stdio) int {
			return runLedger(ctx, args, io.out, io.err)
		}},
		{"recompute", "build a run again from its raw bytes and compare", runRecompute},
		{"version", "show the version", runVersion},
	}
}
