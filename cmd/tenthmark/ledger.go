package main

import (
	"context"
	"flag"
	"fmt"
	"io"
	"os"
	"strings"

	"tenthmark/session"
	"tenthmark/session/ledger"
)

// ledgerCommands are the sub-commands of `tenthmark ledger`.
var ledgerCommands = []struct {
	name, summary string
	run           func(ctx context.Context, args []string, out, complaints io.Writer) int
}{
	{"verify", "check every hash and signature, or one published folder", runLedgerVerify},
	{"show", "list who did what and when", runLedgerShow},
	{"export", "write all events as JSON Lines", runLedgerExport},
	{"backup", "write a verified copy", runLedgerBackup},
	{"restore-check", "try a backup as if it were restored", runLedgerRestoreCheck},
	{"compare", "prove that history only grew since a checkpoint", runLedgerCompare},
	{"key", "show the public key or newest checkpoint, or change the key", runLedgerKey},
}

// runLedger runs one sub-command on the ledger.
func runLedger(ctx context.Context, args []string, stdout, stderr io.Writer) int {
	if len(args) == 0 {
		ledgerUsage(stderr)
		return exitUsage
	}
	switch args[0] {
	case "help", "-h", "--help", "-help":
		ledgerUsage(stdout)
		return exitDone
	}
	for _, c := range ledgerCommands {
		if c.name == args[0] {
			return c.run(ctx, args[1:], stdout, stderr)
		}
	}
	fmt.Fprintf(stderr, "tenthmark: there is no sub-command \"ledger %s\". `tenthmark ledger help` lists them.\n", args[0])
	return exitUsage
}

func ledgerUsage(w io.Writer) {
	fmt.Fprint(w, "Use: tenthmark ledger COMMAND [FLAGS]\n\n")
	for _, c := range ledgerCommands {
		fmt.Fprintf(w, "  %-14s %s\n", c.name, c.summary)
	}
	fmt.Fprint(w, "\nThe ledger is the one that the configuration names (-c), a file (--ledger), or a running daemon's (--url).\n")
}

// ledgerFlags say which ledger is meant.
type ledgerFlags struct {
	*flag.FlagSet
	file, path, url, operator *string
}

func newLedgerFlags(name, what string, w io.Writer) ledgerFlags {
	f := newFlags("ledger "+name, what, w)
	return ledgerFlags{
		FlagSet:  f,
		file:     f.String("c", "config.toml", "configuration `file`"),
		path:     f.String("ledger", "", "the ledger's `file`, instead of the one in the configuration"),
		url:      f.String("url", "", "ask the running daemon at this `address`, such as http://127.0.0.1:8790"),
		operator: f.String("operator", "", "who asks the daemon, by `name`"),
	}
}

// config gives the configuration, reduced to the ledger's file when only that was named.
func (f ledgerFlags) config() (*config, error) {
	if *f.path == "" {
		return loadConfig(*f.file)
	}
	c := defaultConfig()
	c.Ledger.Path, c.Ledger.Key = *f.path, *f.path+".key"
	c.Publish.Folder = ""
	return c, nil
}

// remote gives the daemon to ask, nil when a file is meant.
func (f ledgerFlags) remote() *client {
	if *f.url == "" {
		return nil
	}
	return newClient(strings.TrimRight(*f.url, "/"), *f.operator)
}

// fileList is a flag that may be given several times.
type fileList []string

func (l *fileList) String() string { return strings.Join(*l, " ") }

// Set adds one.
func (l *fileList) Set(name string) error {
	*l = append(*l, name)
	return nil
}

// read gives the files' contents.
func (l fileList) read() ([][]byte, error) {
	var all [][]byte
	for _, name := range l {
		text, err := os.ReadFile(name)
		if err != nil {
			return nil, &session.Fault{Code: "file-unreadable", Message: "The file " + name + " cannot be read.", Hint: "Check its name.", Err: err}
		}
		all = append(all, text)
	}
	return all, nil
}

// publicKey reads the key that the caller brings along, "" when none was named.
func publicKey(file string) (string, error) {
	if file == "" {
		return "", nil
	}
	return ledger.ReadPublicKey(file)
}

// only refuses arguments that nobody asked for.
func only(f *flag.FlagSet, names ...string) error {
	if f.NArg() == len(names) {
		return nil
	}
	if len(names) == 0 {
		return fmt.Errorf("%s takes no further arguments", f.Name())
	}
	return fmt.Errorf("use: %s [FLAGS] %s", f.Name(), strings.Join(names, " "))
}

// misuse says what was wrong with a call.
func misuse(w io.Writer, err error) int {
	fmt.Fprintln(w, err)
	return exitUsage
}

// inUse adds where to ask when a daemon holds the ledger.
func inUse(c *config, err error) error {
	if session.FaultCode(err) != "ledger-in-use" {
		return err
	}
	return &session.Fault{
		Code: "ledger-in-use", Message: "The ledger " + c.Ledger.Path + " is in use, probably by the daemon.",
		Hint: "Ask the daemon: the same command with --url http://" + c.Bench.Listen + ". Or stop it first.", Err: err,
	}
}
